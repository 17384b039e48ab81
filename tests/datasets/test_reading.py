"""CSV files: labels stay texts, rows keep their numbers, and what is wrong is said with its place."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from steelyard.datasets import Columns, DataError, FlowNetwork, read_network, read_table

HEADER = "origin,destination,flow\n"


@pytest.fixture
def write(tmp_path: Path) -> Any:
    def writer(text: str | bytes, name: str = "flows.csv") -> Path:
        path = tmp_path / name
        path.write_bytes(text if isinstance(text, bytes) else text.encode("utf-8"))
        return path

    return writer


def problem(path: Path, **options: Any) -> str:
    with pytest.raises(DataError) as caught:
        read_network(path, **options)
    assert len(caught.value.problems) == 1
    return caught.value.problems[0]


def test_every_cell_is_text_as_it_stands(write: Any) -> None:
    path = write('a,b\nNA, x \nnan,"1,5"\nNone,007\n1.0,\n"say ""no""",null\n')
    table = read_table(path)
    assert table["a"].tolist() == ["NA", "nan", "None", "1.0", 'say "no"']
    assert table["b"].tolist() == [" x ", "1,5", "007", "", "null"]


CELLS = st.text(st.characters(codec="utf-8", exclude_characters="\ufeff"), max_size=6)


@settings(deadline=None, max_examples=40)
@given(st.lists(st.tuples(CELLS, CELLS, CELLS), min_size=1, max_size=6))
def test_what_the_csv_module_writes_is_read_back(
    tmp_path_factory: pytest.TempPathFactory, rows: list[tuple[str, str, str]]
) -> None:
    path = tmp_path_factory.mktemp("csv") / "table.csv"
    with path.open("w", encoding="utf-8", newline="") as file:
        csv.writer(file).writerows([("x", "y", "z"), *rows])
    filled = [row for row in rows if any(cell.strip() for cell in row)]
    if not filled:
        with pytest.raises(DataError, match="no data rows"):
            read_table(path)
        return
    assert [tuple(row) for row in read_table(path).itertuples(index=False)] == filled


@pytest.mark.parametrize("kind", [Path, str])
def test_a_network_is_read_from_three_files(write: Any, kind: Any) -> None:
    network = read_network(
        kind(write(HEADER + "NA,B,1.5\nB,C,2\n")),
        kind(write("node,size\nC,3\nB,2\nNA,1\nZ,\n", "nodes.csv")),
        kind(write("origin,destination,road\nNA,B,10\n", "dyads.csv")),
        unit=0.5,
    )
    assert isinstance(network, FlowNetwork)
    assert network.labels == ("C", "B", "NA", "Z")
    assert network.total == 3.5
    assert network.matrix("road")[2, 1] == 10.0
    assert network.provenance.source == "flows.csv, nodes.csv, dyads.csv"


def test_a_byte_order_mark_windows_line_ends_and_spaces_in_the_header_are_harmless(write: Any) -> None:
    path = write(b"\xef\xbb\xbf origin , destination,flow\r\nA,B,1\r\nB,C,2\r\n")
    assert read_network(path).total == 3.0
    assert read_network(write(b'\xef\xbb\xbf"origin","destination","flow"\r\nA,B,1\r\nB,C,2')).total == 3.0


def test_quoted_commas_and_line_breaks_stay_in_their_cell(write: Any) -> None:
    path = write(HEADER + '"Ayr, New",B,1\nB,"Two\nLines",2\n')
    assert read_network(path).labels == ("Ayr, New", "B", "Two\nLines")


def test_blank_lines_are_skipped_and_rows_keep_the_numbers_of_the_file(write: Any) -> None:
    path = write(HEADER + "A,B,1\n\n,,\n  \nB,C,2\nC,A,-3\n\n")
    assert len(read_table(path)) == 3
    assert problem(path) == "flows.csv, row 7, column 'flow': a flow must be >= 0; got '-3'"


def test_trailing_commas_of_a_spreadsheet_are_harmless_while_empty(write: Any) -> None:
    assert read_table(write("a,b,,\n1,2,,\n3,4,,\n")).columns.tolist() == ["a", "b"]
    with pytest.raises(DataError, match="row 1: every column must have a name; column 4 has none"):
        read_table(write("a,b,,\n1,2,,\n3,4,,x\n"))


def test_a_missing_file_and_a_directory(tmp_path: Path) -> None:
    assert "there is no such file" in problem(tmp_path / "flows.csv")
    assert "cannot be read: Is a directory" in problem(tmp_path)


@pytest.mark.parametrize(
    ("content", "what"),
    [
        ("", "the file is empty; expected a header row"),
        ("\n \n", "the file is empty; expected a header row"),
        (b"\xef\xbb\xbf", "the file is empty; expected a header row"),
        (HEADER, "has a header row but no data rows"),
        (HEADER + "\n,,\n", "has a header row but no data rows"),
        ("\n" + HEADER + "A,B,1\n", "row 1: expected the column names; got an empty row"),
        (HEADER + "A,B,1\n\nB,C\n", "row 4: expected 3 cells, as many as the header has; got 2"),
        (HEADER + "A,B,1\nB,C,1,000\n", "row 3: expected 3 cells, as many as the header has; got 4"),
        (HEADER + "A,B,1\n,,,\n", "row 3: expected 3 cells, as many as the header has; got 4"),
        ("origin,flow,destination,flow\nA,1,B,2\n", "row 1: column names must differ; repeated: flow"),
        ("flow,origin,destination, flow \n1,A,B,2\n", "row 1: column names must differ; repeated: flow"),
        ("origin;destination;flow\nA;B;1\n", "row 1: expected cells between commas; got ';'"),
        ("origin\tdestination\tflow\nA\tB\t1\n", r"row 1: expected cells between commas; got '\t'"),
        (HEADER + 'A,"B,1\nB,C,2\n', "line 3: not a comma-separated table: unexpected end of data"),
        (HEADER + 'A,"B"x,1\n', "line 2: not a comma-separated table: ',' expected after '\"'"),
        (HEADER.encode() + b"A,S\xe3o,1\n", "not UTF-8 text at byte 27; save the file as UTF-8"),
        (HEADER.encode("utf-16"), "not UTF-8 text at byte 0"),
    ],
)
def test_a_broken_file_is_named_with_the_place(write: Any, content: str | bytes, what: str) -> None:
    path = write(content)
    found = problem(path)
    assert found.startswith(str(path))
    assert what in found


def test_the_byte_of_a_broken_letter_is_counted_from_the_start_of_a_large_file(write: Any) -> None:
    before = HEADER.encode() + b"A,B,1\n" * 100_000
    assert f"at byte {len(before) + 1};" in problem(write(before + b"S\xe3o,B,1\n"))


def test_messages_name_the_file_that_is_wrong(write: Any) -> None:
    path = write(HEADER + "A,B,1\nB,C,2\n")
    places = write("node,size\nA,1\nB,2\n\nA,3\n", "places.csv")
    with pytest.raises(DataError) as caught:
        read_network(path, places)
    assert caught.value.problems == (
        "places.csv, row 5, column 'node': each place must be listed once; got 'A'",
        "flows.csv, row 3, column 'destination': the place must be listed in places.csv; got 'C'",
    )


def test_periods_and_directions_are_passed_on(write: Any) -> None:
    path = write("year,origin,destination,flow\n2030,A,B,1\n2031,A,B,2\n2031,B,A,3\n2031,B,C,4\n")
    network = read_network(path, columns=Columns(period="year"), period="2031", directed=False)
    assert (network.n_links, network.total, network.period) == (2, 9.0, "2031")
    assert "choose one with period" in problem(path, columns=Columns(period="year"))
