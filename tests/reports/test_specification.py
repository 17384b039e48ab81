"""Tests of specification in a report: side by side, pairs, reasons, and nothing where there are none."""

import math

import pandas as pd

from steelyard.reports import ReportFacts
from steelyard.reports.document import build_document
from steelyard.reports.frames import SpecificationRow
from steelyard.reports.markdown_report import render_markdown_report
from steelyard.reports.page import render_page
from steelyard.reports.specification import specification_tables
from steelyard.reports.tables import Table

NAN = math.nan
DASH, MINUS = "\N{EN DASH}", "\N{MINUS SIGN}"
ROWS = (
    ("Alder", "overdispersion", "variance (1 + a) m; independent dyads", 2.4116, 0.00794, "a = 5.57"),
    ("Alder", "park", "variance proportional to the mean; robust", 5.1, 1e-9, "lambda = 1.4"),
    ("Birch; wild", "park", "variance proportional to the law's own; robust", -1.0, 0.317, "lambda = 0.9"),
    (
        "Birch; wild",
        "reset",
        "square of the fitted index",
        NAN,
        NAN,
        "not computed: the mean holds no covariates",
    ),
    (
        "Alder",
        "likelihood_ratio",
        "Cedar; the candidate in the other",
        6.0,
        0.0498,
        "reference chi-square(2)",
    ),
    ("Alder", "likelihood_ratio", "Dogwood", NAN, NAN, "not computed: a log-likelihood is not finite"),
    ("Alder", "vuong", "Birch; wild; raw; independent dyads", -7.2, 6e-13, "favours the other"),
    ("Alder", "vuong", "Birch; wild; AIC-corrected; independent dyads", -7.1, 1e-12, "favours the other"),
    (
        "Alder",
        "vuong",
        "Birch; wild; raw; node-clustered",
        NAN,
        NAN,
        "not computed: the variance is not positive; x",
    ),
    ("Birch; wild", "vuong", "Cedar", NAN, NAN, "not computed: the fit of the other is not certified"),
    ("Alder", "rival_zeros", "Birch; wild; robust", 2.0, 0.0455, "coefficient 1"),
    ("Alder", "rival_zeros", "Birch; wild; node-clustered", 1.5, 0.134, "coefficient 1"),
    ("Birch; wild", "rival_zeros", "Alder", NAN, NAN, "not computed: a parameter for each node"),
)


def tables() -> dict[str, Table]:
    rows = [SpecificationRow(*row) for row in ROWS]
    return {table.name: table for table in specification_tables([], rows)}


def texts(table: Table) -> tuple[tuple[str, ...], ...]:
    return table.grid().texts


def test_no_tests_make_no_tables(empty_tables: dict[str, pd.DataFrame]) -> None:
    assert specification_tables([], []) == ()
    page = render_page(build_document(empty_tables, ReportFacts("t", (), (), (), ())))
    assert "Specification tests" not in page


def test_tests_of_one_candidate_stand_side_by_side() -> None:
    table = tables()["tests-of-one"]
    assert [column.title for column in table.columns] == ["Test, against", "Error", "Alder", "Birch; wild"]
    assert texts(table) == (
        ("overdispersion: variance (1 + a) m", "independent dyads", "2.41 (0.008)", DASH),
        ("Park: variance proportional to the mean", "robust", "5.10 (<0.001)", DASH),
        ("Park: variance proportional to the law's own", "robust", DASH, f"{MINUS}1.00 (0.317)"),
    )
    assert "RESET not computed (1 row; Birch; wild): the mean holds no covariates." in table.notes


def test_nested_pairs_keep_rows_without_a_statistic() -> None:
    assert texts(tables()["tests-nested"]) == (
        ("Alder", "Cedar; the candidate in the other", "6.000", "0.050", "chi-square(2)"),
        ("Alder", "Dogwood", DASH, DASH, "not computed: a log-likelihood is not finite"),
    )


def test_vuong_versions_stand_in_columns_even_with_semicolons_in_labels() -> None:
    table = tables()["tests-vuong"]
    statistics = (f"{MINUS}7.20 (<0.001)", f"{MINUS}7.10 (<0.001)", DASH, DASH, DASH, DASH)
    assert texts(table) == (("Alder", "Birch; wild", *statistics),)
    assert any("no test for zero inflation" in note for note in table.notes)
    assert any("the fit of the other is not certified" in note for note in table.notes)


def test_rival_means_form_a_square() -> None:
    table = tables()["tests-rivals"]
    assert texts(table) == (("Alder", "1.50 (0.134)"),)
    assert any("a parameter for each node" in note for note in table.notes)


def test_markdown_and_page_have_the_section(three_tables: dict[str, pd.DataFrame]) -> None:
    columns = ["candidate", "test", "against", "statistic", "p_value", "note"]
    document = build_document(
        {**three_tables, "tests": pd.DataFrame(ROWS, columns=columns)}, ReportFacts("t", (), (), (), ())
    )
    text, page = render_markdown_report(document), render_page(document)
    assert "## Specification tests" in text
    assert "2.41 (0.008)" in text
    assert '<section id="tests"' in page
    assert '<a href="#tests">' in page
    for word in ("reject", "passed", "significant"):
        assert word not in text.partition("## Specification tests")[2].lower()
