"""CSV in: every cell is read as text, so that a label such as NA stays a label."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pandas as pd

from steelyard.datasets.errors import DataError
from steelyard.datasets.flows import FlowNetwork
from steelyard.datasets.provenance import Provenance
from steelyard.datasets.tables import Columns, network_from_frames

__all__ = ["read_network", "read_table"]


def read_table(path: Path, /) -> Any:
    """A CSV file (comma-separated, UTF-8, first row the column names) as a table of texts.

    Raises
    ------
    DataError : the file is missing, unreadable, not UTF-8, empty, ragged, or repeats a column name
    """
    try:
        # header=None keeps pandas from renaming a repeated column, which would hide the repetition.
        frame = pd.read_csv(
            path,
            dtype=str,
            keep_default_na=False,
            na_filter=False,
            encoding="utf-8-sig",
            header=None,
            skip_blank_lines=False,  # so that row numbers in messages are those of the file
        )
    except FileNotFoundError:
        raise DataError(
            f"{path}: there is no such file; check the path, which starts at the study file"
        ) from None
    except UnicodeDecodeError as error:
        raise DataError(f"{path}: not UTF-8 text at byte {error.start}; save the file as UTF-8") from error
    except pd.errors.EmptyDataError:
        raise DataError(f"{path}: the file is empty; expected a header row and at least one row") from None
    except pd.errors.ParserError as error:
        raise DataError(f"{path}: not a comma-separated table: {' '.join(str(error).split())}") from error
    except OSError as error:
        raise DataError(f"{path}: cannot be read: {error.strerror or error}") from error
    header = [str(name).strip() for name in frame.iloc[0]]
    repeated = sorted({name for name in header if header.count(name) > 1})
    if repeated:
        raise DataError(f"{path}, row 1: column names must differ; repeated: {', '.join(repeated)}")
    frame = frame.iloc[1:].fillna("")
    frame.index = frame.index - 1
    frame.columns = header
    frame = frame[(frame != "").any(axis=1)]
    if frame.empty:
        raise DataError(f"{path}: the file has a header row but no data rows")
    return frame


def read_network(
    flows: Path,
    nodes: Path | None = None,
    dyads: Path | None = None,
    *,
    columns: Columns | None = None,
    directed: bool = True,
    unit: float = 1.0,
    period: str | None = None,
    provenance: Provenance | None = None,
) -> FlowNetwork:
    """A network from CSV files; the rules are those of `network_from_frames`, the messages name the files."""
    tables = [None if path is None else read_table(path) for path in (flows, nodes, dyads)]
    names = tuple("" if path is None else path.name for path in (flows, nodes, dyads))
    return network_from_frames(
        *tables,
        columns=columns,
        directed=directed,
        unit=unit,
        period=period,
        provenance=provenance or Provenance(source=", ".join(n for n in names if n)),
        names=(names[0], names[1], names[2]),
    )
