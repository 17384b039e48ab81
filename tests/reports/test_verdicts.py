"""What each footing says: who leads by the score that fits it, who ties, who is impossible."""

import math

import pandas as pd
import pytest

from steelyard.reports import FootingSheet, ReportFacts, build_document
from steelyard.reports.answers import alone_sentence, answers
from steelyard.reports.comparing import compare
from steelyard.reports.frames import read_tables
from steelyard.reports.pooling import pool_scores
from steelyard.reports.verdicts import impossible_overall, verdict_sentences
from steelyard.reports.wording import label_list


@pytest.fixture
def read(facts):
    """Tables -> comparisons and pooled scores."""

    def look(tables, by=facts):
        run = read_tables(tables)
        pooled = pool_scores(run.scores)
        return compare(run, pooled, by), pooled

    return look


def on_footing(tables, footing, score, values):
    """Only these scores, one fold of ten dyads each; no criteria."""
    rows = [
        (footing, name, "dyads", 0, 0, score, "lower", value, 10, int(math.isinf(value)))
        for name, value in values.items()
    ]
    scores = pd.DataFrame(rows, columns=list(tables["scores"].columns))
    return tables | {"scores": scores, "criteria": tables["criteria"].iloc[:0]}


def test_disagreement_names_the_pairs_that_swap(three_tables, read):
    (counts, amounts), pooled = read(three_tables)
    # Margins by hand: AIC 110 - 100; log score 2.5 - 2.
    assert verdict_sentences(counts, pooled) == (
        "AIC and the log score on held-out dyads order 1 of 3 pairs differently.",
        "AIC puts Alder first, 10.0 below the next; "
        "the log score puts Birch first, 0.500 nats per dyad below the next.",
        "By the Brier score of the link, Alder, Birch and Cedar lead there.",
        "By the RMSE, Alder, Birch and Cedar lead there.",
        "On held-out dyads, Alder falls behind Birch.",
        "Cedar gave no chance to 1 of the 12 held-out dyads, so its log score is infinite.",
    )
    assert verdict_sentences(amounts, pooled) == (
        "Only Cedar stands on this footing; there is nothing to rank.",
    )


def test_agreement_is_stated(three_tables, read):
    scores = three_tables["scores"]
    scores.loc[(scores.candidate == "Alder") & (scores.score == "log_score"), "value"] = 0.5
    (counts, _), _ = read(three_tables)
    assert verdict_sentences(counts, ())[:2] == (
        "AIC and the log score on held-out dyads rank all 3 candidates alike.",
        "Both put Alder first.",
    )


def test_a_tie_is_no_swap(three_tables, read):
    scores = three_tables["scores"]
    scores.loc[(scores.candidate != "Alder") & (scores.score == "log_score"), "value"] = math.inf
    (counts, _), _ = read(three_tables)
    assert verdict_sentences(counts, ())[0] == (
        "AIC and the log score on held-out dyads put no pair in opposite order (1 of 3 tie)."
    )


def test_a_candidate_that_lacks_folds_is_not_ranked_out_of_sample(three_tables, read):
    scores = three_tables["scores"]
    three_tables["scores"] = scores[~((scores.candidate == "Birch") & (scores.fold == 1))]
    (counts, _), _ = read(three_tables)
    sentences = verdict_sentences(counts, ())
    assert sentences[0] == "AIC and the log score on held-out dyads rank both candidates alike."
    assert sentences[-1] == "Not ranked out of sample: Birch (1 of 2 folds)."


def test_a_candidate_without_aic_is_not_ranked_in_sample(three_tables, read):
    criteria = three_tables["criteria"]
    three_tables["criteria"] = criteria[criteria.candidate != "Birch"]
    three_tables["candidates"].loc[1, "converged"] = False
    (counts, _), _ = read(three_tables)
    assert "Not ranked in sample: Birch (fit not certified)." in verdict_sentences(counts, ())


def test_without_scores_aic_stands_unchecked(three_tables, read):
    three_tables["scores"] = three_tables["scores"].iloc[:0]
    (counts, _), _ = read(three_tables)
    assert verdict_sentences(counts, ()) == (
        "AIC puts Alder first, 10.0 below the next.",
        "Nothing was scored out of sample on this footing, so AIC stands unchecked.",
    )


def test_parts_are_ranked_out_of_sample_only(three_tables, read):
    tables = on_footing(three_tables, "links · x", "log_score", {"Alder": 0.5, "Birch": 0.4})
    (links,), pooled = read(tables)
    assert verdict_sentences(links, pooled) == (
        "The log score puts Birch first, 0.100 nats per dyad below the next.",
        "Out of sample only: the parts of a joint law are not maximised one by one, so they have no "
        "information criteria.",
    )
    (answer,) = answers((links,), pooled)
    assert (answer.in_sample, answer.out_of_sample.text) == (None, "Birch")
    assert answer.agreement == "out of sample only"


def test_expected_flows_are_ranked_by_rmse(three_tables, read):
    tables = on_footing(three_tables, "expected flows · x", "rmse", {"Alder": 30.0, "Birch": 40.0})
    (flows,), pooled = read(tables)
    first, last = verdict_sentences(flows, pooled)
    assert first == "The RMSE puts Alder first, 10.0 below the next."
    assert last.startswith("Out of sample only: an expected flow is scored without a law")


def test_ties_read_as_ties_and_name_the_part_that_is_shared(three_tables, read):
    values = {"Alder": 1.0, "Birch": 1.0 + 1e-15, "Cedar": 2.0}
    tables = on_footing(three_tables, "counts given links · x", "log_score", values)
    tables["candidates"][["links", "weights"]] = [
        ["logit", "geometric"], ["density", "geometric"], ["density", "lognormal"],
    ]  # fmt: skip
    (given,), pooled = read(tables)
    assert [standing.rank for standing in given.held_out()] == [1, 3]
    assert "Alder and Birch share the weights law, so they score alike." in verdict_sentences(given, pooled)
    assert answers((given,), pooled)[0].out_of_sample.text == "Alder and Birch (same weights law)"
    tables["candidates"]["weights"] = ["geometric", "lognormal", "lognormal"]
    assert "Alder and Birch score alike." in verdict_sentences(read(tables)[0][0], pooled)


def test_an_impossible_leader_is_told_in_the_opening(three_tables, read):
    scores = three_tables["scores"]
    chosen = (scores.candidate == "Alder") & (scores.score == "log_score") & (scores.fold == 1)
    scores.loc[chosen, ["value", "n_impossible"]] = [math.inf, 2]
    (counts, amounts), pooled = read(three_tables)
    told = (
        "Alder leads by AIC but gave no chance to 2 of the 12 held-out dyads, so its log score is infinite."
    )
    assert answers((counts, amounts), pooled)[0].remarks[0] == told
    assert told in verdict_sentences(counts, pooled)
    assert impossible_overall((counts, amounts)) == (
        "Alder gave no chance to 2 of the 12 held-out dyads, so its log score is infinite.",
        "Cedar gave no chance to 1 of the 12 held-out dyads, so its log score is infinite.",
    )


def test_footings_stand_in_reading_order_unknown_ones_last(three_tables, read, facts):
    other = three_tables["scores"].assign(footing="cells · x")
    three_tables["scores"] = pd.concat([other, three_tables["scores"]], ignore_index=True)
    turned = ReportFacts(facts.title, footings=facts.footings[::-1])
    assert [c.sheet.title for c in read(three_tables, turned)[0]] == [
        "Whole flows (links and weights), as amounts",
        "Whole flows (links and weights), as counts",
        "cells · x",
    ]
    assert ReportFacts("").footing("") == FootingSheet("", "No likelihood footing (mean only)", "")


def test_single_candidates_share_one_line_and_draw_nothing(three_tables, read, facts):
    comparisons, pooled = read(three_tables)
    assert alone_sentence(comparisons) == (
        "Only Cedar stands on \N{LEFT DOUBLE QUOTATION MARK}Whole flows, as amounts\N{RIGHT DOUBLE QUOTATION MARK}; "
        "there is nothing to rank."
    )
    assert [answer.title for answer in answers(comparisons, pooled)] == [comparisons[0].sheet.title]
    document = build_document(three_tables, facts)
    assert document.sections[1].drawings == ()
    assert [key for key, _ in document.answers] == [document.sections[0].key]


@pytest.mark.parametrize(
    ("labels", "text"),
    [
        (["Logit, lognormal"], "Logit, lognormal"),
        (["Logit, lognormal", "Poisson"], "Logit, lognormal and Poisson"),
        (["A, b", "C, d", "E"], "A, b; C, d; and E"),
        (["A", "B", "C"], "A, B and C"),
        (["Hill and Dale", "Poisson"], "Hill and Dale; Poisson"),
    ],
)
def test_labels_in_a_list_keep_apart(labels, text):
    assert label_list(labels) == text
