"""One number to one text: the only place where a report formats a value."""

import math
from dataclasses import dataclass
from enum import Enum
from numbers import Integral, Real

import numpy as np

from steelyard.reports.errors import ReportError

__all__ = ["Cell", "CellKind", "Estimate", "Missing", "format_cell", "is_missing"]

NO_VALUE = "\N{EN DASH}"
_MINUS = "\N{MINUS SIGN}"
_LARGE = 1e15
_SMALL = 1e-4


class CellKind(Enum):
    """How the values of a column are written."""

    TEXT = "text"
    INTEGER = "whole number with thousands separators"
    SIGNIFICANT = "number with so many significant digits, whole numbers (int) with all of them"
    DECIMAL = "number with so many decimals"
    P_VALUE = "probability with so many decimals, never written as zero"
    SHARE = "fraction written in per cent with so many decimals"
    ESTIMATE = "an estimate above its standard error, with so many significant digits"
    YES_NO = "yes or no"


@dataclass(frozen=True)
class Missing:
    """A value that is not there for a reason worth reading."""

    reason: str


@dataclass(frozen=True)
class Estimate:
    """An estimate with one standard error, written below it in parentheses."""

    value: float
    standard_error: float


Cell = str | int | float | bool | Estimate | Missing | None


def is_missing(value: object) -> bool:
    """Whether a cell holds no value: None, NaN or a `Missing` with its reason."""
    if isinstance(value, Estimate):
        return math.isnan(value.value)
    return value is None or isinstance(value, Missing) or (isinstance(value, float) and math.isnan(value))


def format_cell(value: Cell, kind: CellKind, digits: int) -> str:
    """Write one value as text.

    Parameters
    ----------
    value : None and NaN become an en dash, a `Missing` its reason, infinities the sign for infinity
    kind : how to write it
    digits : decimals (DECIMAL, P_VALUE, SHARE) or significant digits (SIGNIFICANT, ESTIMATE)

    Raises
    ------
    ReportError : the value does not fit the kind, as text in a number column or a share outside [0, 1]
    """
    if isinstance(value, Missing):
        return value.reason
    if value is None or is_missing(value):
        return NO_VALUE
    if kind is CellKind.TEXT:
        return _text(value)
    if kind is CellKind.YES_NO:
        return _yes_no(value)
    if kind is CellKind.ESTIMATE:
        return _estimate(value, digits)
    number = _number(value, kind)
    if math.isinf(number):
        return "∞" if number > 0 else f"{_MINUS}∞"
    if kind is CellKind.SIGNIFICANT and _is_whole(value):
        kind = CellKind.INTEGER
    return _format_number(number, kind, digits).replace("-", _MINUS)


def _is_whole(value: object) -> bool:
    return isinstance(value, Integral)


def _text(value: object) -> str:
    if not isinstance(value, str):
        raise _misfit(value, CellKind.TEXT)
    return " ".join(value.split())


def _yes_no(value: object) -> str:
    if not isinstance(value, bool | np.bool_):
        raise _misfit(value, CellKind.YES_NO)
    return "yes" if value else "no"


def _estimate(value: object, digits: int) -> str:
    """Two lines; where there is one line only, the break reads as a space."""
    if not isinstance(value, Estimate):
        raise _misfit(value, CellKind.ESTIMATE)
    above = format_cell(value.value, CellKind.SIGNIFICANT, digits)
    below = format_cell(value.standard_error, CellKind.SIGNIFICANT, max(digits - 1, 1))
    return f"{above}\n({below})"


def _number(value: object, kind: CellKind) -> float:
    if isinstance(value, bool | np.bool_) or not isinstance(value, Real):
        raise _misfit(value, kind)
    number = float(value)
    if kind is CellKind.INTEGER and math.isfinite(number) and not number.is_integer():
        raise _misfit(value, kind)
    if kind in (CellKind.P_VALUE, CellKind.SHARE) and not 0 <= number <= 1:
        raise _misfit(value, kind)
    return number


def _format_number(number: float, kind: CellKind, digits: int) -> str:
    match kind:
        case CellKind.INTEGER:
            return f"{number:,.0f}"
        case CellKind.DECIMAL:
            return _decimal(number, digits)
        case CellKind.SIGNIFICANT:
            return _significant(number, digits)
        case CellKind.P_VALUE:
            return _bounded(max(number, math.ulp(0.0)), 1.0, digits)
        case _:
            return f"{_bounded(100 * number, 100.0, digits)} %"


def _decimal(number: float, digits: int) -> str:
    """Fixed decimals; no negative zero; powers of ten from 10^15 on, where decimals would be invented."""
    if abs(number) >= _LARGE:
        return _power(number, max(digits, 3))
    text = f"{number:,.{digits}f}"
    return text.lstrip("-") if float(text.replace(",", "")) == 0 else text


def _significant(number: float, digits: int) -> str:
    """Significant digits; digits before the decimal point are never rounded away."""
    if number == 0:
        return "0"
    if abs(number) >= _LARGE or abs(number) < _SMALL:
        return _power(number, digits)
    exponent = int(f"{number:.{digits - 1}e}".partition("e")[2])
    return f"{number:,.{max(digits - 1 - exponent, 0)}f}"


def _power(number: float, digits: int) -> str:
    mantissa, _, exponent = f"{number:.{digits - 1}e}".partition("e")
    return f"{mantissa}e{int(exponent)}"


def _bounded(number: float, top: float, digits: int) -> str:
    """Fixed decimals, but a value strictly inside (0, top) is never written as 0 or as the top."""
    step = 10.0**-digits
    text = f"{number:.{digits}f}"
    if number > 0 and float(text) == 0:
        return f"<{step:.{digits}f}"
    if number < top and float(text) == top:
        return f">{top - step:.{digits}f}"
    return text


def _misfit(value: object, kind: CellKind) -> ReportError:
    return ReportError("table cell", repr(value), kind.value, "change the column's kind or the value")
