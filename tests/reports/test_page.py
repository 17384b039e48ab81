"""The folder of reports: whole, equal from run to run, inert, readable by a parser and a browser."""

import base64
import hashlib
import re
import shutil
import subprocess
from html.parser import HTMLParser

import pandas as pd
import pytest

import steelyard.reports
from steelyard.reports import ReportError, ReportFacts, ReportFormat, build_document, write_reports
from steelyard.reports.markdown_report import render_markdown_report
from steelyard.reports.page import render_page

ALL = frozenset(ReportFormat)
VOID = {"meta", "link", "br", "img", "hr", "input"}
CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")


class Outline(HTMLParser):
    """Checks that tags nest; gathers headings, ids, links to ids and requests to elsewhere."""

    def __init__(self):
        super().__init__()
        self.stack, self.headings, self.ids, self.targets, self.requests = [], [], [], [], []
        self.scripts = self.rows = 0

    def handle_starttag(self, tag, attrs):
        given = dict(attrs)
        assert len(given) == len(attrs), f"an attribute stands twice in {tag}"
        if tag not in VOID:
            self.stack.append(tag)
        self.headings += [int(tag[1])] if re.fullmatch("h[1-6]", tag) else []
        self.ids += [given["id"]] if "id" in given else []
        self.scripts += tag == "script"
        self.rows += tag == "tr"
        self.targets += [value for name, value in attrs if name.startswith("aria-labelledby")]
        for name in ("src", "href", "srcset", "data", "action", "xlink:href"):
            value = given.get(name)
            if value and value.startswith("#"):
                self.targets.append(value[1:])
            elif value:
                self.requests.append(value)

    def handle_startendtag(self, tag, attrs):
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self.stack.pop()

    def handle_endtag(self, tag):
        assert self.stack, f"</{tag}> closes nothing"
        assert self.stack.pop() == tag


def outline_of(page):
    outline = Outline()
    outline.feed(page)
    outline.close()
    assert outline.stack == []
    return outline


def page_of(tables, facts):
    return render_page(build_document(tables, facts))


def test_two_runs_are_byte_identical_and_report_what_they_wrote(tmp_path, written, three_tables, facts):
    paths = write_reports(tmp_path, three_tables, facts, ALL)
    again = {path.relative_to(tmp_path).as_posix(): path.read_bytes() for path in paths}
    first = {p.relative_to(written).as_posix(): p.read_bytes() for p in written.rglob("*") if p.is_file()}
    assert again == first
    assert {"report.html", "report.md", "tables/scores.csv", "tables/outcomes.csv"} <= again.keys()
    key = "whole-flows-as-counts-dyads"
    assert {f"figures/ranks-{key}.{ending}" for ending in ("svg", "pdf", "png")} <= again.keys()


def test_only_what_is_asked_for(tmp_path, three_tables, facts):
    write_reports(tmp_path, three_tables, facts, frozenset({ReportFormat.CSV}))
    assert [path.name for path in tmp_path.iterdir()] == ["tables"]


def test_what_an_earlier_run_left_is_removed_and_nothing_else(tmp_path, three_tables, facts):
    write_reports(tmp_path, three_tables, facts, ALL)
    own = [tmp_path / "figures" / "scores-mine.txt", tmp_path / "figures" / "sketch.svg"]
    own += [tmp_path / "tables" / "mine.csv", tmp_path / "tables" / "scores.tex", tmp_path / "ranks-a.svg"]
    for path in own:
        path.write_text("mine", encoding="utf-8")
    assert list((tmp_path / "figures").glob("scores-*.pdf"))
    fewer = {name: frame for name, frame in three_tables.items() if name not in ("scores", "outcomes")}
    paths = write_reports(tmp_path, fewer, facts, ALL)
    left = {path for path in tmp_path.rglob("*") if path.is_file()}
    assert left == {*paths, *own}


def test_csv_alone_leaves_figures_that_a_page_shows(tmp_path, written, three_tables, facts):
    shutil.copytree(written, tmp_path / "run")
    write_reports(tmp_path / "run", three_tables, facts, frozenset({ReportFormat.CSV}))
    assert len(list((tmp_path / "run" / "figures").iterdir())) == 6


def test_tables_it_does_not_know_become_csv(tmp_path, empty_tables, facts):
    tables = empty_tables | {"later_table": empty_tables["scores"]}
    write_reports(tmp_path, tables, facts, frozenset({ReportFormat.CSV}))
    assert (tmp_path / "tables" / "later_table.csv").exists()


def test_a_table_name_cannot_leave_the_folder(tmp_path, empty_tables, facts):
    with pytest.raises(ReportError, match=r"table name: got '\.\./x'"):
        write_reports(tmp_path, {"../x": empty_tables["scores"]}, facts, ALL)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("number", [0, 1, 2, 12])
def test_page_is_well_formed_for_any_number_of_candidates(many_tables, facts, number):
    outline = outline_of(page_of(many_tables(number), facts))
    assert outline.headings[0] == 1
    assert outline.headings.count(1) == 1
    assert all(
        later - earlier <= 1 for earlier, later in zip(outline.headings, outline.headings[1:], strict=False)
    )
    assert len(set(outline.ids)) == len(outline.ids)
    assert set(outline.targets) <= set(outline.ids)


def test_page_without_scores_shows_the_in_sample_half(three_tables, facts):
    three_tables["scores"] = three_tables["scores"].iloc[:0]
    document = build_document(three_tables, facts)
    outline_of(render_page(document))
    counts = document.sections[0]
    assert counts.drawings == ()
    assert [column.name for column in counts.ranking.columns][-1] == "aic_rank"


def test_every_scheme_has_its_own_section(three_tables, facts):
    nodes = three_tables["scores"].assign(scheme="nodes")
    three_tables["scores"] = pd.concat([three_tables["scores"], nodes], ignore_index=True)
    document = build_document(three_tables, facts)
    assert [section.held_out for section in document.sections] == [
        "held-out dyads",
        "dyads of held-out nodes",
    ] * 2
    outline = outline_of(render_page(document))
    assert len(set(outline.ids)) == len(outline.ids)


def test_page_asks_for_nothing(written):
    page = (written / "report.html").read_text(encoding="utf-8")
    assert set(outline_of(page).requests) == {"data:,"}
    assert not re.search(r"@import|url\(\s*['\"]?(?!#)", page)
    assert "https://doi.org/10.1/x" in page


def test_policy_admits_the_pages_own_script_only(written):
    page = (written / "report.html").read_text(encoding="utf-8")
    (script,) = re.findall(r"<script>(.*?)</script>", page, flags=re.DOTALL)
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    assert f"default-src 'none'; style-src 'unsafe-inline'; script-src 'sha256-{digest}'" in page


def test_hostile_words_are_inert_everywhere(three_tables):
    hostile = "<script>alert(1)</script><img src=x> | \"'& `x` [y](z)"
    for frame in three_tables.values():
        frame["candidate"] = frame["candidate"].replace("Alder", hostile)
    pair = ((hostile, hostile),)
    facts = ReportFacts(hostile, pair, (), pair, (hostile,))
    document = build_document(three_tables, facts)
    outline = outline_of(render_page(document))
    assert outline.scripts == 1
    assert set(outline.requests) == {"data:,"}


def test_hostile_words_are_inert_in_markdown(three_tables, facts):
    for frame in three_tables.values():
        frame["candidate"] = frame["candidate"].replace("Alder", "<b>|`x`")
    text = render_markdown_report(build_document(three_tables, facts))
    assert "<b>" not in text
    assert r"| &lt;b&gt;\|\`x\` | econometric |" in text


def test_formats_show_the_same_numbers(written):
    markdown = (written / "report.md").read_text(encoding="utf-8")
    page = (written / "report.html").read_text(encoding="utf-8")
    row = (
        "Alder",
        "econometric",
        "covariates",
        "3",
        "100.0",
        "0.0",
        "1",
        "2.5000",
        "2.0000",
        "3.5000",
        "0",
        "2",
    )
    assert f"| {' | '.join(row)} |" in markdown
    cells = re.findall(r"<t[hd] (?:scope=\"row\" )?class=\"[^\"]*\" data-order=\"-?\d+\">([^<]*)<", page)
    assert any(tuple(cells[start : start + len(row)]) == row for start in range(len(cells)))


def test_markdown_links_figures_that_exist(written):
    linked = re.findall(r"\]\((figures/[^)]*)\)", (written / "report.md").read_text(encoding="utf-8"))
    assert len(linked) == 2
    assert all((written / name).exists() for name in linked)


def test_each_footing_has_its_own_section_and_no_table_mixes_them(three_tables, facts):
    document = build_document(three_tables, facts)
    assert [section.key for section in document.sections] == [
        "whole-flows-as-counts-dyads",
        "whole-flows-as-amounts-dyads",
    ]
    assert [[row[0] for row in section.ranking.rows] for section in document.sections] == [
        ["Alder", "Birch", "Cedar"],
        ["Cedar"],
    ]
    titles = {column.title.lower() for column in document.candidates.columns}
    assert not titles & {"aic", "log-likelihood", "log likelihood"}


def test_footings_that_a_file_name_cannot_tell_apart_keep_their_figures(three_tables, facts):
    for frame in three_tables.values():
        if "footing" in frame:
            frame["footing"] = frame["footing"].replace(
                {"amounts · unit 1 · dyads 5f1c2a90": "whole flows, as counts"}
            )
    keys = [section.key for section in build_document(three_tables, facts).sections]
    assert keys == ["whole-flows-as-counts-dyads", "whole-flows-as-counts-dyads-2"]


def test_node_parameters_are_counted_and_folded_away(written):
    page = (written / "report.html").read_text(encoding="utf-8")
    assert '<details class="nodes">\n<summary>2 node parameters, 1 of them at the boundary</summary>' in page


def test_public_names_are_sorted_and_there():
    assert steelyard.reports.__all__ == sorted(steelyard.reports.__all__)
    assert all(hasattr(steelyard.reports, name) for name in steelyard.reports.__all__)


@pytest.mark.slow
@pytest.mark.skipif(CHROMIUM is None, reason="needs chromium")
def test_headings_sort_in_a_browser(tmp_path, three_tables, facts):
    page = page_of(three_tables, facts)
    # The test's own script needs its own permission; the page's stays as it is.
    probe = (
        "const head = document.querySelector('table[data-probe] thead th:nth-child(8) button');"
        "head.click(); document.title = head.parentNode.getAttribute('aria-sort') + ':' + "
        "Array.from(document.querySelectorAll('table[data-probe] tbody th'), th => th.textContent).join();"
    )
    page = re.sub(r"script-src '[^']*'", "script-src 'unsafe-inline'", page)
    ranking = build_document(three_tables, facts).sections[0].ranking.name
    start = page.index("<table>", page.index(f'id="{ranking}"'))
    page = page[:start] + "<table data-probe>" + page[start + len("<table>") :]
    page = page.replace("</body>", f"<script>{probe}</script></body>")
    path = tmp_path / "page.html"
    path.write_text(page, encoding="utf-8")
    flags = "--headless --no-sandbox --disable-gpu --no-first-run --disable-background-networking"
    command = [CHROMIUM, *flags.split(), "--disable-component-update", "--disable-sync"]
    command += [f"--user-data-dir={tmp_path / 'profile'}", "--dump-dom", path.as_uri()]
    shown = subprocess.run(command, capture_output=True, text=True, timeout=90, check=True).stdout
    assert "<title>ascending:Birch,Alder,Cedar</title>" in shown
