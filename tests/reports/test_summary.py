"""Rankings, swaps and the sentences about them."""

import math

import pytest

from steelyard.reports import ReportError, terminal_summary
from steelyard.reports.comparing import compare
from steelyard.reports.frames import read_tables
from steelyard.reports.pooling import pool_scores
from steelyard.reports.readings import warning_table
from steelyard.reports.summary import caution_sentences, compared_sentences, verdict_sentences


def comparisons_of(tables):
    run = read_tables(tables)
    return compare(run, pool_scores(run.scores))


def verdicts(tables):
    return [verdict_sentences(comparison) for comparison in comparisons_of(tables)]


def test_disagreement_names_the_pairs_that_swap(three_tables):
    counts, amounts = verdicts(three_tables)
    assert counts == (
        "AIC and the log score on held-out dyads order 1 of 3 pairs differently.",
        "AIC puts Alder first, the log score Birch.",
        "On held-out dyads, Alder falls behind Birch.",
    )
    assert amounts == ("Only one candidate stands on this footing, so there is nothing to rank.",)


def test_agreement_is_stated(three_tables):
    scores = three_tables["scores"]
    scores.loc[(scores.candidate == "Alder") & (scores.score == "log_score"), "value"] = 0.5
    assert verdicts(three_tables)[0] == (
        "AIC and the log score on held-out dyads rank all 3 candidates alike.",
        "Both put Alder first.",
    )


def test_a_tie_is_no_swap(three_tables):
    scores = three_tables["scores"]
    scores.loc[(scores.candidate != "Alder") & (scores.score == "log_score"), "value"] = math.inf
    assert verdicts(three_tables)[0][0] == (
        "AIC and the log score on held-out dyads put no pair in opposite order (1 of 3 tie)."
    )


def test_a_candidate_that_lacks_folds_is_not_ranked_out_of_sample(three_tables):
    scores = three_tables["scores"]
    three_tables["scores"] = scores[~((scores.candidate == "Birch") & (scores.fold == 1))]
    sentences = verdicts(three_tables)[0]
    assert sentences[0] == "AIC and the log score on held-out dyads rank both candidates alike."
    assert sentences[-1] == "Not ranked out of sample: Birch (1 of 2 folds)."


def test_without_scores_aic_stands_unchecked(three_tables):
    three_tables["scores"] = three_tables["scores"].iloc[:0]
    assert verdicts(three_tables)[0] == (
        "Nothing was scored out of sample on this footing, so AIC stands unchecked.",
    )


def test_each_footing_has_its_own_candidates(three_tables):
    found = {c.footing.split()[0]: [e.candidate for e in c.entries] for c in comparisons_of(three_tables)}
    assert found == {"counts": ["Alder", "Birch", "Cedar"], "amounts": ["Cedar"]}


def test_mean_only_candidates_stand_on_no_footing(three_tables):
    scores = three_tables["scores"]
    scores.loc[scores.footing.str.startswith("amounts"), ["footing", "score"]] = [None, "rmse"]
    three_tables["criteria"] = three_tables["criteria"].iloc[:3]
    assert verdicts(three_tables)[1] == (
        "No candidate has a log score here; means are compared by the other scores only.",
    )


def test_what_was_compared(three_tables, empty_tables):
    rows = read_tables(three_tables).candidates
    assert compared_sentences(rows) == (
        "3 candidates (1 econometric and 2 maximum-entropy) on 4 nodes, 12 dyads and 6 links "
        "(density 50.0 %).",
    )
    assert compared_sentences(read_tables(empty_tables).candidates) == ("No candidate was compared.",)


def test_other_dyads_are_named_as_such(three_tables):
    three_tables["candidates"].loc[2, "n_dyads"] = 10
    assert compared_sentences(read_tables(three_tables).candidates) == (
        "3 candidates (1 econometric and 2 maximum-entropy), not all on the same dyads: "
        "2 candidates on 4 nodes, 12 dyads and 6 links (density 50.0 %) and "
        "1 candidate on 4 nodes, 10 dyads and 6 links (density 60.0 %).",
    )


def test_warnings_carry_counts_and_reasons(three_tables):
    three_tables["candidates"].loc[0, ["converged", "message"]] = [False, "residual 1e-3"]
    run = read_tables(three_tables)
    table = warning_table(run.candidates, run.outcomes, pool_scores(run.scores))
    assert table.rows == (
        ("Alder", "fit not certified", "all dyads", "1 fit", "residual 1e-3"),
        ("Birch", "not applicable", "dyads of held-out nodes", "1 of 1 fold", "cannot score unseen nodes"),
        (
            "Cedar",
            "impossible observations",
            "held-out dyads, counts · unit 1 · dyads 5f1c2a90",
            "1 of 12 dyads",
            "given no probability, so its log score is infinite",
        ),
    )


def test_cautions_follow_from_what_is_there(three_tables, empty_tables):
    said = " ".join(caution_sentences(read_tables(three_tables), comparisons_of(three_tables)))
    for part in ("not a cause", "not the real network", "no test of a forecast", "no standard errors"):
        assert part in said
    assert "Scores on different footings (2 here)" in said
    assert "Here: 1 node parameter of Birch." in said
    few = caution_sentences(read_tables(empty_tables), ())
    assert len(few) == 2


def test_terminal_summary_puts_the_rankings_first(three_tables, facts):
    assert terminal_summary(three_tables, facts) == (
        "Freight between island ports\n"
        "counts · unit 1 · dyads 5f1c2a90\n"
        "  by AIC, in sample: 1 Alder (+0.0), 2 Birch (+10.0), 3 Cedar (+20.0)\n"
        "  by log score, held-out dyads: 1 Birch (2.0000), 2 Alder (2.5000), 3 Cedar (∞)\n"
        "  AIC and the log score on held-out dyads order 1 of 3 pairs differently.\n"
        "amounts · unit 1 · dyads 5f1c2a90\n"
        "  by AIC, in sample: 1 Cedar (+0.0)\n"
        "  by log score, held-out dyads: 1 Cedar (5.0000)\n"
        "3 candidates (1 econometric and 2 maximum-entropy) on 4 nodes, 12 dyads and 6 links (density\n"
        "      50.0 %).\n"
        "2 warnings, see the report: Birch and Cedar.\n"
    )


def test_a_lacking_column_is_named(three_tables):
    three_tables["scores"] = three_tables["scores"].drop(columns=["footing"])
    with pytest.raises(ReportError, match=r"table 'scores'.*expected also \['footing'\]"):
        read_tables(three_tables)


def test_a_fraction_in_a_column_of_whole_numbers_is_refused(three_tables):
    three_tables["scores"]["fold"] = 0.5
    with pytest.raises(ReportError, match="table 'scores', column 'fold'"):
        read_tables(three_tables)
