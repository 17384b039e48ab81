"""Files that appear whole or not at all, and tidy tables as bytes that depend on nothing but the table."""

import csv
import io
import os
import uuid
from numbers import Integral, Real
from pathlib import Path

import numpy as np
import pandas as pd

__all__ = ["csv_bytes", "write_atomically"]


def write_atomically(path: Path, content: bytes) -> Path:
    """Write a file through a temporary one in the same folder, so that no reader ever sees half of it.

    Parameters
    ----------
    path : the file; missing folders are made
    content : all of it

    Returns
    -------
    Path, the file written

    Raises
    ------
    OSError : the folder cannot be written to; the temporary file is gone and an older `path` stands untouched
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    # Not tempfile: it makes files that only their owner may read, and the mode would survive the replacement.
    temporary = path.with_name(f".{path.name}.{uuid.uuid4().hex}.tmp")
    try:
        with temporary.open("xb") as stream:
            stream.write(content)
            stream.flush()
            os.fsync(stream.fileno())
        temporary.replace(path)
    finally:
        temporary.unlink(missing_ok=True)
    return path


def csv_bytes(frame: pd.DataFrame) -> bytes:
    """Write a tidy table as CSV: 12 significant digits, missing as empty, line feeds, UTF-8, no index."""
    stream = io.StringIO(newline="")
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow([str(name) for name in frame.columns])
    columns = [[_field(value) for value in frame[name].tolist()] for name in frame.columns]
    writer.writerows(zip(*columns, strict=True))
    return stream.getvalue().encode("utf-8")


def _field(value: object) -> str:
    """One value; booleans as true and false, whole numbers with all digits."""
    if value is None or value is pd.NA or value is pd.NaT:
        return ""
    if isinstance(value, bool | np.bool_):
        return "true" if value else "false"
    if isinstance(value, Integral):
        return str(int(value))
    if isinstance(value, Real):
        number = float(value)
        return "" if np.isnan(number) else f"{number:.12g}"
    return str(value)
