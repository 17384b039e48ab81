"""One table in every renderer, as whole strings."""

import math

import pytest

from steelyard.reports import (
    CellKind,
    Column,
    Missing,
    ReportError,
    Table,
    render_html,
    render_markdown,
    render_text,
)

COLUMNS = (
    Column("candidate", "Candidate", CellKind.TEXT),
    Column("aic", "AIC", CellKind.DECIMAL, 1),
    Column("p", "p", CellKind.P_VALUE, 3),
    Column("ok", "Converged", CellKind.YES_NO),
)
TABLE = Table(
    "small",
    "Two | candidates",
    COLUMNS,
    (("A|B <i>", 1234.56, 0.0001, True), ("港 & *c*", math.inf, Missing("no test"), False)),
    ("Smaller is better.", "1. not a list"),
)

TEXT = """\
Two | candidates

Candidate      AIC        p  Converged
---------  -------  -------  ---------
A|B <i>    1,234.6   <0.001  yes
港 & *c*         ∞  no test  no
Smaller is better.
1. not a list
"""

MARKDOWN = r"""**Two \| candidates**

| Candidate | AIC | p | Converged |
| :--- | ---: | ---: | :--- |
| A\|B &lt;i&gt; | 1,234.6 | &lt;0.001 | yes |
| 港 &amp; \*c\* | ∞ | no test | no |

Smaller is better.

1\. not a list
"""

HTML = """\
<div class="table" id="small">
<div class="scroll" role="region" aria-labelledby="small-caption" tabindex="0">
<table>
<caption><span id="small-caption">Two | candidates</span></caption>
<thead>
<tr>
<th scope="col" class="left">Candidate</th>
<th scope="col" class="right">AIC</th>
<th scope="col" class="right">p</th>
<th scope="col" class="left">Converged</th>
</tr>
</thead>
<tbody>
<tr>
<th scope="row" class="left" data-order="0">A|B &lt;i&gt;</th>
<td class="right" data-order="0">1,234.6</td>
<td class="right" data-order="0">&lt;0.001</td>
<td class="left" data-order="1">yes</td>
</tr>
<tr>
<th scope="row" class="left" data-order="1">港 &amp; *c*</th>
<td class="right" data-order="1">∞</td>
<td class="right missing" data-order="-1">no test</td>
<td class="left" data-order="0">no</td>
</tr>
</tbody>
</table>
</div>
<p class="note">Smaller is better.</p>
<p class="note">1. not a list</p>
</div>
"""


def test_text():
    assert render_text(TABLE) == TEXT


def test_markdown():
    assert render_markdown(TABLE) == MARKDOWN


def test_html():
    assert str(render_html(TABLE)) == HTML


def test_table_without_rows_still_shows_its_heading():
    table = Table("none", "None", COLUMNS, ())
    assert render_text(table) == "None\n\nCandidate  AIC  p  Converged\n---------  ---  -  ---------\n"


@pytest.mark.parametrize("quote", ['"', "'"])
def test_quotes_cannot_leave_an_attribute(quote):
    table = Table(f"x{quote} onclick={quote}", "c", COLUMNS[:1], ((quote,),))
    assert f"x{quote} onclick" not in str(render_html(table))


def test_equal_values_share_a_place_and_text_sorts_without_case():
    table = Table("t", "", COLUMNS[:2], (("b", 2), ("A", 1.0), ("a", 2.0), ("c", None)))
    assert table.grid().orders == ((1, 1), (0, 0), (0, 1), (2, -1))


def test_ragged_row_is_refused():
    with pytest.raises(ReportError, match="row 1: got 1 cells, expected 2"):
        Table("t", "", COLUMNS[:2], (("a", 1), ("b",)))


def test_columns_of_one_name_are_refused():
    with pytest.raises(ReportError, match="different names"):
        Table("t", "", (COLUMNS[0], COLUMNS[0]), ())
