"""Every way of writing one value."""

import math

import numpy as np
import pytest

from steelyard.reports import CellKind, Column, Missing, ReportError, Table

CASES = [
    (None, CellKind.TEXT, 0, "\N{EN DASH}"),
    (math.nan, CellKind.DECIMAL, 2, "\N{EN DASH}"),
    (np.float64("nan"), CellKind.SHARE, 1, "\N{EN DASH}"),
    (Missing("mean only"), CellKind.DECIMAL, 2, "mean only"),
    ("two\nlines  of text", CellKind.TEXT, 0, "two lines of text"),
    (1234567, CellKind.INTEGER, 0, "1,234,567"),
    (np.int64(-1234), CellKind.INTEGER, 0, "\N{MINUS SIGN}1,234"),
    (5.0, CellKind.INTEGER, 0, "5"),
    (12345.678, CellKind.DECIMAL, 1, "12,345.7"),
    (-0.004, CellKind.DECIMAL, 2, "0.00"),
    (-2.5, CellKind.DECIMAL, 3, "\N{MINUS SIGN}2.500"),
    (3e18, CellKind.DECIMAL, 1, "3.00e18"),
    (math.inf, CellKind.DECIMAL, 1, "∞"),
    (-math.inf, CellKind.SIGNIFICANT, 3, "\N{MINUS SIGN}∞"),
    (0, CellKind.SIGNIFICANT, 3, "0"),
    (0.012345, CellKind.SIGNIFICANT, 3, "0.0123"),
    (9.996, CellKind.SIGNIFICANT, 3, "10.0"),
    (123456.7, CellKind.SIGNIFICANT, 3, "123,457"),
    (52, CellKind.SIGNIFICANT, 4, "52"),
    (2.5e-9, CellKind.SIGNIFICANT, 3, "2.50e\N{MINUS SIGN}9"),
    (0.0123, CellKind.P_VALUE, 3, "0.012"),
    (0.0004, CellKind.P_VALUE, 3, "<0.001"),
    (0.0, CellKind.P_VALUE, 3, "<0.001"),
    (0.99999, CellKind.P_VALUE, 3, ">0.999"),
    (1.0, CellKind.P_VALUE, 3, "1.000"),
    (0.5616, CellKind.SHARE, 1, "56.2 %"),
    (0.0, CellKind.SHARE, 1, "0.0 %"),
    (0.0001, CellKind.SHARE, 1, "<0.1 %"),
    (0.99999, CellKind.SHARE, 1, ">99.9 %"),
    (True, CellKind.YES_NO, 0, "yes"),
    (np.bool_(False), CellKind.YES_NO, 0, "no"),
]


@pytest.mark.parametrize(("value", "kind", "digits", "text"), CASES)
def test_value_is_written_as_its_kind_says(value, kind, digits, text):
    table = Table("t", "", (Column("c", "C", kind, digits),), ((value,),))
    assert table.grid().texts == ((text,),)


@pytest.mark.parametrize(
    ("value", "kind"),
    [
        ("12", CellKind.DECIMAL),
        (True, CellKind.INTEGER),
        (1.5, CellKind.INTEGER),
        (1, CellKind.YES_NO),
        (3.2, CellKind.TEXT),
        (1.2, CellKind.P_VALUE),
        (-0.1, CellKind.SHARE),
    ],
)
def test_value_of_another_kind_is_refused(value, kind):
    table = Table("t", "", (Column("c", "C", kind, 1),), ((value,),))
    with pytest.raises(ReportError, match="table cell: got"):
        table.grid()
