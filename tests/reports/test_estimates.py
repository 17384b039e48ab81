"""Coefficients: side by side under one kind of standard error, and apart under all kinds."""

import pandas as pd

from steelyard.reports import CellKind, Column, Estimate, Table, build_document, render_markdown, render_text
from steelyard.reports.coefficients import candidate_estimates
from steelyard.reports.frames import read_tables
from steelyard.reports.side_by_side import side_by_side_tables

COLUMNS = ["candidate", "part", "term", "estimate", "se_kind", "se", "z", "p_value", "lower", "upper", "note"]
MINUS = "\N{MINUS SIGN}"
NONE = "\N{EN DASH}"


def rows_of(*rows):
    """(candidate, part, term, estimate, se_kind, se, note) to typed rows."""
    frame = pd.DataFrame([(*row[:6], 0.0, 0.5, 0.0, 0.0, row[6]) for row in rows], columns=COLUMNS)
    return read_tables({"estimates": frame}).estimates


def test_terms_in_rows_candidates_in_columns_parts_apart():
    rows = rows_of(
        ("A", "links", "distance", -1.5, "model", 0.5, ""),
        ("A", "links", "distance", -1.5, "node_clustered", 0.75, "repaired"),
        ("A", "weights", "distance", -2.0, "model", 0.125, ""),
        ("B", "links", "size", 1.0, "robust", 0.25, ""),
        ("B", "links", "node:Quay (out)", 9.0, "robust", 0.25, ""),
        ("C", "dispersion", "alpha", 3.0, "model", 1.0, ""),
        ("C", "joint", "distance", -1.0, "model", 1.0, ""),
    )
    links, weights, joint = side_by_side_tables((), rows)
    assert links.grid().titles == ("Term", "A", "B")
    assert links.grid().texts == (
        ("distance", f"{MINUS}1.500\n(0.750)", NONE),
        ("size", NONE, "1.000\n(0.250)"),
    )
    assert links.notes == (
        "In parentheses: standard error, node clustered for A; robust for B.",
        "Repaired (A).",
    )
    assert [row[0] for row in weights.rows] == ["distance"]
    assert [row[0] for row in joint.rows] == ["distance", "alpha"]


def test_a_dispersion_stands_with_the_law_it_belongs_to():
    rows = rows_of(
        ("Hurdle", "weights", "distance", -2.0, "model", 0.125, ""),
        ("Hurdle", "dispersion", "alpha", 1.5, "model", 0.25, ""),
        ("Joint", "joint", "distance", -1.0, "model", 1.0, ""),
        ("Joint", "dispersion", "alpha", 3.0, "model", 1.0, ""),
    )
    weights, joint = side_by_side_tables((), rows)
    assert weights.grid().titles == ("Term", "Hurdle")
    assert [row[0] for row in weights.rows] == ["distance", "alpha"]
    assert joint.grid().titles == ("Term", "Joint")
    assert [row[0] for row in joint.rows] == ["distance", "alpha"]


def test_a_note_on_every_row_is_said_once():
    rows = rows_of(
        ("A", "joint", "distance", -2.0, "model", 0.125, "variance repaired"),
        ("A", "joint", "size", 1.5, "model", 0.25, "variance repaired"),
    )
    (found,) = candidate_estimates((), rows)
    assert "note" not in [column.name for column in found.coefficients.columns]
    assert found.coefficients.notes[0] == "All rows: variance repaired."


def test_candidates_that_share_a_part_share_a_column():
    rows = rows_of(
        ("A", "weights", "distance", -1.5, "model", 0.5, ""),
        ("B", "weights", "distance", -1.5 - 1e-13, "model", 0.5, ""),
        ("C", "weights", "distance", -1.5, "model", 0.6, ""),
    )
    (weights,) = side_by_side_tables((), rows)
    assert weights.grid().titles == ("Term", "A · B", "C")


def test_a_note_is_shown_and_its_column_may_be_lacking(three_tables, facts):
    plain = read_tables(three_tables).estimates
    assert {row.note for row in plain} == {""}
    three_tables["estimates"]["note"] = ["", "variance repaired", "", "all its dyads are fixed"]
    alder, birch = candidate_estimates((), read_tables(three_tables).estimates)
    assert alder.coefficients.columns[-1].name == "note"
    assert alder.coefficients.rows[0][-1] == "variance repaired"
    assert [row[-1] for row in birch.nodes.rows] == ["", "all its dyads are fixed"]
    assert build_document(three_tables, facts).side_by_side[0].notes[0] == (
        "In parentheses: standard error, robust."
    )


def test_standard_errors_of_all_kinds_stand_side_by_side(three_tables):
    (alder, _) = candidate_estimates((), read_tables(three_tables).estimates)
    assert alder.coefficients.grid().texts == (
        ("distance", "joint", f"{MINUS}1.250", "0.250", "<0.001", "0.500", "0.012"),
    )


def test_an_estimate_is_one_line_where_there_is_one_line_only():
    columns = (Column("term", "Term", CellKind.TEXT), Column("a", "A", CellKind.ESTIMATE, 4))
    table = Table("t", "T", columns, (("x", Estimate(-1.5, 0.25)), ("y", Estimate(2.0, float("nan")))))
    assert f"| x | {MINUS}1.500 (0.250) |" in render_markdown(table)
    assert f"{MINUS}1.500 (0.250)" in render_text(table)
    assert table.grid().texts[1] == ("y", f"2.000\n({NONE})")
    assert [order[1] for order in table.grid().orders] == [0, 1]
