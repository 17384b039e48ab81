"""Figures: equal bytes, legible labels, inert text."""

import itertools
import math
import re
import xml.etree.ElementTree as ElementTree

import matplotlib
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg

from steelyard.reports import build_document
from steelyard.reports.canvas import FigureFormat, arrange, blank_figure, drawing_style
from steelyard.reports.comparing import Entry
from steelyard.reports.dots import DotPanel, draw_dots, scale_limits
from steelyard.reports.frames import ScoreRow
from steelyard.reports.inline_svg import inline_svg
from steelyard.reports.palette import OBSERVED, family_mark
from steelyard.reports.pooling import pool_scores
from steelyard.reports.wording import short_labels


def drawings_of(tables, facts):
    return {
        drawing.name.partition("-whole")[0]: drawing
        for section in build_document(tables, facts).sections
        for drawing in section.drawings
        if "-counts" in drawing.name
    }


@pytest.fixture(scope="module")
def drawn(base_tables, base_facts):
    """The drawings of the three candidates; read them only."""
    return drawings_of(base_tables, base_facts)


def pooled(*values, better="lower"):
    rows = [
        ScoreRow("f", f"c{i}", "dyads", 0, 0, "log_score", better, value, 5, 0)
        for i, value in enumerate(values)
    ]
    return list(pool_scores(rows))


def words(drawing):
    root = ElementTree.fromstring(drawing.content(FigureFormat.SVG))
    return {"".join(node.itertext()) for node in root.iter("{http://www.w3.org/2000/svg}text")}


def test_what_is_drawn(drawn):
    drawings = drawn
    assert list(drawings) == ["ranks", "scores"]
    assert (
        drawings["ranks"].finding == "AIC and the log score on held-out dyads order 1 of 3 pairs differently"
    )
    assert drawings["scores"].finding == (
        "Birch has the lowest log score; Alder, Birch and Cedar have the lowest Brier score of the link and "
        "RMSE; 1 of 3 met impossible observations"
    )
    assert {"Alder  1", "2  Alder", "1  Birch", "3  Cedar (∞)"} <= words(drawings["ranks"])
    assert "∞  1 impossible" in words(drawings["scores"])


@pytest.mark.parametrize("kind", FigureFormat)
def test_equal_drawings_give_equal_bytes_under_any_user_style(three_tables, facts, kind):
    first = drawings_of(three_tables, facts)["ranks"].content(kind)
    with matplotlib.rc_context(
        {"font.size": 30, "lines.linewidth": 9, "svg.hashsalt": None, "text.color": "red"}
    ):
        second = drawings_of(three_tables, facts)["ranks"].content(kind)
    assert first == second


def test_the_users_style_is_left_alone(three_tables, facts):
    before = dict(matplotlib.rcParams)
    drawings_of(three_tables, facts)
    assert dict(matplotlib.rcParams) == before


def test_files_carry_no_date_and_no_version(drawn):
    drawing = drawn["scores"]
    assert b"date" not in drawing.content(FigureFormat.SVG).lower()
    assert b"CreationDate" not in drawing.content(FigureFormat.PDF)
    assert matplotlib.__version__.encode() not in drawing.content(FigureFormat.SVG)


def test_labels_are_text_not_markup(three_tables, facts):
    hostile = '<script>$x$&"'
    for frame in three_tables.values():
        frame["candidate"] = frame["candidate"].replace("Alder", hostile)
    drawing = drawings_of(three_tables, facts)["scores"]
    assert hostile in words(drawing)
    assert "<script" not in inline_svg(drawing)


def test_a_label_that_the_font_lacks_is_kept(three_tables, facts):
    for frame in three_tables.values():
        frame["candidate"] = frame["candidate"].replace("Alder", "港")
    assert "2  港" in words(drawings_of(three_tables, facts)["ranks"])


@pytest.mark.parametrize("number", [2, 12, 40])
def test_labels_do_not_overlap_and_stay_on_the_page(many_tables, facts, number):
    for drawing in drawings_of(many_tables(number), facts).values():
        figure = drawing.figure
        FigureCanvasAgg(figure).draw()
        for axes in figure.axes:
            labels = [text for text in axes.get_yticklabels() if text.get_text()]
            boxes = sorted((text.get_window_extent() for text in labels), key=lambda box: box.y0)
            assert all(low.y1 <= high.y0 + 1 for low, high in itertools.pairwise(boxes))
            assert all(box.x0 >= 0 and box.x1 <= figure.bbox.x1 for box in boxes)
            assert all(text.get_fontsize() >= 8 for text in labels)


def test_a_note_beyond_the_rule_stays_on_the_page():
    rows = [
        ScoreRow("f", f"A candidate with a long label {c}", "dyads", 0, 0, "log_score", "lower", value, 9, n)
        for c, value, n in (("a", 1.0, 0), ("b", 1.2, 0), ("c", math.inf, 1234))
    ]
    nan = math.nan
    panel = DotPanel(
        "log score",
        tuple(
            (Entry(s.candidate, "mixed", "", "", "", nan, None, nan, nan, nan, None, s), s)
            for s in pool_scores(rows)
        ),
    )
    with drawing_style():
        figure = blank_figure(3.0)
        axes = figure.subplots()
        draw_dots(axes, panel, show_names=True, ticks=5)
        arrange(figure, [[axes]], top=0.5, bottom=0.3)
        FigureCanvasAgg(figure).draw()
    boxes = [note.get_window_extent() for note in axes.texts]
    assert boxes
    assert all(box.x0 >= 0 and box.x1 <= figure.bbox.x1 for box in boxes)


def test_black_is_kept_for_the_observed_network(drawn):
    for drawing in drawn.values():
        for use in ("fill", "stroke"):
            assert f"{use}: {OBSERVED}".encode() not in drawing.content(FigureFormat.SVG)


def test_families_differ_in_hue_and_in_marker():
    marks = [family_mark(name) for name in ("econometric", "maximum-entropy", "mixed")]
    assert len({mark.colour for mark in marks}) == len({mark.marker for mark in marks}) == 3


def test_one_far_candidate_leaves_the_scale_to_the_rest():
    low, high = scale_limits(pooled(1.0, 1.1, 1.2, 1.3, 50.0))
    assert low < 1.0
    assert 1.3 < high < 1.5


def test_more_than_half_of_the_candidates_stay_on_the_scale():
    assert scale_limits(pooled(1.0, 1.1, 50.0, 60.0))[1] > 60
    assert scale_limits(pooled(1.0, 1.1, 1.2, 50.0, 60.0))[1] < 2


def test_near_ties_at_the_top_do_not_push_out_what_the_folds_of_the_best_cover():
    rows = [
        ScoreRow("f", f"c{index}", "dyads", 0, fold, "log_score", "lower", value + 0.03 * fold, 5, 0)
        for index, value in enumerate((0.4578, 0.4585, 0.4585, 0.4585, 0.6, 126.0))
        for fold in (0, 1)
    ]
    low, high = scale_limits(list(pool_scores(rows)))
    assert low < 0.4578
    assert 0.63 < high < 1


def test_equal_values_have_a_scale():
    low, high = scale_limits(pooled(0.0, 0.0))
    assert low < 0 < high


def test_the_worse_side_is_below_where_higher_is_better():
    low, high = scale_limits(pooled(0.9, 0.89, 0.88, 0.87, 0.01, better="higher"))
    assert low > 0.8
    assert high > 0.9


def test_ids_in_the_page_are_the_drawings_own(drawn):
    ids = [set(re.findall(r'\bid="([^"]*)"', inline_svg(drawing))) for drawing in drawn.values()]
    assert all(ids)
    assert not ids[0] & ids[1]


def test_colours_in_the_page_are_style_variables(drawn):
    svg = inline_svg(drawn["scores"])
    assert "var(--econometric, #0072b2)" in svg
    assert "var(--ink, #2a2b2e)" in svg
    styles = re.findall(r'style="([^"]*)"', svg)
    assert not [style for style in styles if re.search(r"(fill|stroke): ?#", style)]


def test_long_labels_are_cut_only_where_they_stay_different():
    assert short_labels(["a" * 10, "b"], 5) == {"a" * 10: "aa…aa", "b": "b"}
    twins = ["aaXaa" * 2, "aaYaa" * 2]
    assert short_labels(twins, 5) == {label: label for label in twins}
