"""CSV in: every cell is read as text, so that a label such as NA stays a label."""

from __future__ import annotations

import csv
import io
from pathlib import Path
from typing import Any

import pandas as pd

from steelyard.datasets.errors import DataError
from steelyard.datasets.flows import FlowNetwork
from steelyard.datasets.provenance import Provenance
from steelyard.datasets.tables import Columns, network_from_frames

__all__ = ["read_network", "read_table"]


def read_table(path: Path | str, /) -> Any:
    """A CSV file (comma-separated, UTF-8, first row the column names) as a table of texts.

    Cells are kept as they stand, spaces included; column names lose the spaces around them. Rows without a
    filled cell are left out, and so are columns without a name when no cell in them is filled. The index is such
    that row k of the file, counted as a spreadsheet does, has index k - 2.

    Raises
    ------
    DataError : the file is missing, unreadable, not UTF-8, empty, ragged, or repeats a column name
    """
    text = _text(Path(path))
    header, blank, n_records = _shape(Path(path), text)
    # header=None: pandas would rename a repeated column, which hides the repetition.
    frame = pd.read_csv(
        io.StringIO(text, newline=""),
        dtype=str,
        keep_default_na=False,
        na_filter=False,
        header=None,
        skip_blank_lines=False,
        low_memory=False,
    )
    assert len(frame) == n_records  # the csv module, which checked the shape, saw the same rows
    frame = frame.iloc[1:].set_axis(pd.RangeIndex(n_records - 1)).drop(index=blank)
    if frame.empty:
        raise DataError(f"{path}: the file has a header row but no data rows")
    named = [k for k, name in enumerate(header) if name or (frame[k] != "").any()]
    _check_header(path, [(k + 1, header[k]) for k in named])
    return frame[named].set_axis([header[k] for k in named], axis="columns")


def _shape(path: Path, text: str) -> tuple[list[str], list[int], int]:
    """Column names, index of the rows without a filled cell, and the number of rows, header included.

    pandas fills short rows in silence, so the length of every row is checked here.
    """
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    blank: list[int] = []
    index = -1
    try:
        header = [name.strip() for name in next(reader)]
        if not any(header):
            raise DataError(f"{path}, row 1: expected the column names; got an empty row")
        if len(header) == 1 and (other := next((c for c in ";\t|" if c in header[0]), None)):
            raise DataError(
                f"{path}, row 1: expected cells between commas; got {other!r}; save the file as CSV"
            )
        for index, row in enumerate(reader):
            if len(row) == len(header) and row[0].strip():
                continue
            if len(row) <= len(header) and not any(cell.strip() for cell in row):
                blank.append(index)
            elif len(row) != len(header):
                raise DataError(
                    f"{path}, row {index + 2}: expected {len(header)} cells, as many as the header has; got "
                    f"{len(row)}; put quotes around cells that hold a comma"
                )
    except csv.Error as error:
        raise DataError(
            f"{path}, line {reader.line_num}: not a comma-separated table: {error}; check the quotes there"
        ) from error
    return header, blank, index + 2


def _check_header(path: Path | str, header: list[tuple[int, str]]) -> None:
    names = [name for _, name in header]
    nameless = [str(number) for number, name in header if not name]
    if nameless:
        raise DataError(
            f"{path}, row 1: every column must have a name; column {', '.join(nameless)} has none"
        )
    repeated = sorted({name for name in names if names.count(name) > 1})
    if repeated:
        raise DataError(f"{path}, row 1: column names must differ; repeated: {', '.join(repeated)}")


def _text(path: Path) -> str:
    try:
        text = path.read_bytes().decode("utf-8-sig")
    except FileNotFoundError:
        raise DataError(
            f"{path}: there is no such file; check the path, which starts at the study file"
        ) from None
    except UnicodeDecodeError as error:
        raise DataError(f"{path}: not UTF-8 text at byte {error.start}; save the file as UTF-8") from error
    except OSError as error:
        raise DataError(f"{path}: cannot be read: {error.strerror or error}; give a CSV file") from error
    if not text.strip():
        raise DataError(f"{path}: the file is empty; expected a header row and at least one row")
    return text


def read_network(
    flows: Path | str,
    nodes: Path | str | None = None,
    dyads: Path | str | None = None,
    *,
    columns: Columns | None = None,
    directed: bool = True,
    unit: float = 1.0,
    period: str | None = None,
    provenance: Provenance | None = None,
) -> FlowNetwork:
    """A network from CSV files; the rules are those of `network_from_frames`, the messages name the files."""
    tables = [None if path is None else read_table(path) for path in (flows, nodes, dyads)]
    names = tuple("" if path is None else Path(path).name for path in (flows, nodes, dyads))
    return network_from_frames(
        *tables,
        columns=columns,
        directed=directed,
        unit=unit,
        period=period,
        provenance=provenance or Provenance(source=", ".join(n for n in names if n)),
        names=(names[0], names[1], names[2]),
    )
