"""What the cells of a table say: texts or numbers, and which of them are missing."""

from __future__ import annotations

import unicodedata
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from steelyard.datasets.arrays import Bools, Floats, Integers

__all__ = ["coded_texts", "not_a_number", "numbers", "texts"]


def coded_texts(series: Any) -> tuple[Integers, list[str]]:
    """Cells as positions in a list of texts, which may hold a text twice; -1 for a missing value.

    The texts are without surrounding spaces and in Unicode's composed form, so that two spellings that look
    the same on a page are the same label. Their last is the empty text, so that -1 finds it. A large table has
    few distinct labels, and each is looked at once.
    """
    codes, found = pd.factorize(series)
    tidied = [unicodedata.normalize("NFC", str(value)).strip() for value in found]
    return codes, [*tidied, ""]


def texts(series: Any) -> NDArray[np.str_]:
    """Cells as tidied texts; a missing value is the empty text."""
    codes, words = coded_texts(series)
    return np.array(words, dtype=np.str_)[codes]


def numbers(series: Any) -> Floats:
    """Texts or numbers as floats; what is no number, dates among them, becomes nan."""
    if series.dtype.kind in "Mm":
        return np.full(len(series), np.nan)
    return np.asarray(pd.to_numeric(series, errors="coerce"), dtype=np.float64)


def not_a_number(series: Any, values: Floats) -> Bools:
    """Which cells are filled with something that is no finite number; nan and None stand for a gap.

    `values` are the `numbers` of the cells.
    """
    bad = ~np.isfinite(values)
    bad[bad] = ~np.isin(np.char.lower(texts(series[bad])), ("", "nan", "none"))
    return bad
