"""Rankings, swaps and the sentences about them."""

import pytest

from steelyard.reports import ReportError, terminal_summary
from steelyard.reports.comparing import compare
from steelyard.reports.frames import read_tables
from steelyard.reports.pooling import pool_scores
from steelyard.reports.summary import caution_sentences, compared_sentences, outcome_sentence
from steelyard.reports.warnings_table import warning_table


@pytest.fixture
def comparisons_of(facts):
    def read(tables):
        run = read_tables(tables)
        return compare(run, pool_scores(run.scores), facts)

    return read


def test_each_footing_has_its_own_candidates(three_tables, comparisons_of):
    found = {c.footing.split()[0]: [e.candidate for e in c.entries] for c in comparisons_of(three_tables)}
    assert found == {"counts": ["Alder", "Birch", "Cedar"], "amounts": ["Cedar"]}


def test_what_was_compared(three_tables, empty_tables):
    rows = read_tables(three_tables).candidates
    assert compared_sentences(rows) == (
        "3 candidates (1 econometric and 2 maximum-entropy) on 4 nodes, 12 dyads and 6 links "
        "(density 50.0 %).",
    )
    assert compared_sentences(read_tables(empty_tables).candidates) == ("No candidate was compared.",)


def test_a_candidate_without_a_fit_is_named(three_tables):
    three_tables["candidates"] = three_tables["candidates"].iloc[[0, 2]]
    run = read_tables(three_tables)
    assert compared_sentences(run.candidates, run.outcomes)[1:] == ("Not fitted to all dyads: Birch.",)


def test_other_dyads_are_named_as_such(three_tables):
    three_tables["candidates"].loc[2, "n_dyads"] = 10
    assert compared_sentences(read_tables(three_tables).candidates) == (
        "3 candidates (1 econometric and 2 maximum-entropy), not all on the same dyads: "
        "2 candidates on 4 nodes, 12 dyads and 6 links (density 50.0 %) and "
        "1 candidate on 4 nodes, 10 dyads and 6 links (density 60.0 %).",
    )


def test_warnings_carry_counts_and_reasons(three_tables, facts):
    three_tables["candidates"].loc[0, ["converged", "message"]] = [False, "residual 1e-3"]
    run = read_tables(three_tables)
    table = warning_table(run.candidates, run.outcomes, pool_scores(run.scores), facts)
    assert table.rows == (
        ("Alder", "fit not certified", "all dyads", "1 fit", "residual 1e-3"),
        ("Birch", "not applicable", "dyads of held-out nodes", "1 of 1 fold", "cannot score unseen nodes"),
        (
            "Cedar",
            "impossible observations",
            "held-out dyads; Whole flows (links and weights), as counts",
            "1 of 12 dyads",
            "given no probability, so its log score is infinite",
        ),
    )


def test_cautions_follow_from_what_is_there(three_tables, empty_tables, comparisons_of):
    said = " ".join(caution_sentences(read_tables(three_tables), comparisons_of(three_tables)))
    for part in (
        "not a cause",
        "not the real network",
        "no test of a forecast",
        "no standard errors",
        "carries a test yet",
    ):
        assert part in said
    assert "Scores on different footings (2 here)" in said
    assert "Here: 1 node parameter of Birch." in said
    few = caution_sentences(read_tables(empty_tables), ())
    assert len(few) == 3


def test_terminal_summary_puts_the_verdict_first(three_tables, facts):
    assert terminal_summary(three_tables, facts) == (
        "Freight between island ports\n"
        "whole flows, as counts: in sample (AIC) Alder; out of sample (log score) Birch; they disagree on 1\n"
        "  of 3 pairs\n"
        "Cedar gave no chance to 1 of the 12 held-out dyads, so its log score is infinite.\n"
        "Only Cedar stands on “Whole flows, as amounts”; there is nothing to rank.\n"
        "3 candidates (1 econometric and 2 maximum-entropy) on 4 nodes, 12 dyads and 6 links (density 50.0\n"
        "  %).\n"
        "1 of 2 fits and folds scored; 1 not applicable. 2 warnings in the report."
    )


def test_a_run_without_rows_has_a_summary(empty_tables, facts):
    assert terminal_summary(empty_tables, facts).endswith("No candidate was compared.\nNo warning.")


def test_fits_to_all_dyads_are_no_folds(three_tables, facts):
    three_tables["outcomes"].loc[0] = ["Alder", "full", 0, 0, "failed", "no maximum"]
    run = read_tables(three_tables)
    assert outcome_sentence(run.outcomes) == "0 of 2 fits and folds scored; 1 failed; 1 not applicable."
    rows = warning_table(run.candidates, run.outcomes, (), facts).rows
    assert rows[0] == ("Alder", "failed", "all dyads", "1 of 1 fit", "no maximum")


def test_a_lacking_column_is_named(three_tables):
    three_tables["scores"] = three_tables["scores"].drop(columns=["footing"])
    with pytest.raises(ReportError, match=r"table 'scores'.*expected also \['footing'\]"):
        read_tables(three_tables)


def test_a_fraction_in_a_column_of_whole_numbers_is_refused(three_tables):
    three_tables["scores"]["fold"] = 0.5
    with pytest.raises(ReportError, match="table 'scores', column 'fold'"):
        read_tables(three_tables)
