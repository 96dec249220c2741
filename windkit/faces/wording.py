"""Numbers, shares, units and names as a person reads them, in one way everywhere.

Here: narrow spaces between thousands, a real minus sign, a space before the per cent sign, the
sign of a unit, the heading of a column; and `as_printed`, which brings sentences written
elsewhere to the same style. Not here: tables (`windkit.faces.tables`) and figures.
"""

from __future__ import annotations

import math
import re
from typing import Any

__all__ = [
    "BEFORE_PERCENT",
    "DECIMALS_BY_UNIT",
    "MISSING",
    "THOUSANDS",
    "as_printed",
    "column_heading",
    "number_text",
    "percent_number",
    "percent_text",
    "split_unit",
    "unit_text",
]

#: What stands where there is no value.
MISSING = "–"
#: Between thousands: a narrow space that no line breaks at.
THOUSANDS = "\u202f"
#: Between a number and its per cent sign: a space that no line breaks at.
BEFORE_PERCENT = "\u00a0"

#: Decimals a reader is shown, by unit; any other unit gets four significant digits.
DECIMALS_BY_UNIT: dict[str, int] = {
    "m/s": 2,
    "kg/m3": 3,
    "1": 3,
    "%": 1,
    "m": 1,
    "m2": 0,
    "deg": 0,
    "K": 1,
    "degC": 1,
    "Pa": 0,
    "hPa": 1,
    "W": 0,
    "kW": 0,
    "MW": 2,
    "W/m2": 0,
    "kWh": 0,
    "MWh": 0,
    "MWh/year": 0,
    "GWh": 2,
    "GWh/year": 2,
    "h": 0,
    "h/year": 0,
    "months": 1,
    "years": 1,
}

_UNIT_SIGNS = {
    "1": MISSING,
    "kg/m3": "kg/m³",
    "W/m2": "W/m²",
    "m2": "m²",
    "m3": "m³",
    "deg": "°",
    "degC": "°C",
}

#: How a name says its unit, a longer ending before a shorter one.
_UNIT_BY_ENDING: dict[str, str] = {
    "_mwh_per_year": "MWh/year",
    "_mwh": "MWh",
    "_kg_m3": "kg/m3",
    "_w_m2": "W/m2",
    "_m_s": "m/s",
    "_deg": "deg",
    "_hpa": "hPa",
    "_kw": "kW",
    "_pa": "Pa",
    "_k": "K",
    "_c": "degC",
    "_h": "h",
    "_m": "m",
}
#: The shape k of a Weibull distribution is no temperature.
_NO_UNIT = "weibull_k"

#: Below it a percentage is the rounding of arithmetic, not a share.
_NOTHING = 1e-9

_LEVEL = re.compile(r"\bp(\d\d)\b")
_GROUPED = re.compile(r"(?<![\w.,])\d{1,3}(?:,\d{3})+(?![\d]|,\d)")
_PERCENT = re.compile(r"(?<=\d)[ \u00a0\u202f]?%(?![\w%])")
_MINUS = re.compile(r"(?<![^\s(±])-(?=\.?\d)")
_MINUS_ZERO = re.compile(r"−(?=0(?:\.0+)?(?![\d.]*\d))")


def number_text(value: float, decimals: int = 0) -> str:
    """A number as a person reads it: narrow spaces between thousands, a real minus sign.

    NaN is an en dash; what rounds to zero has no sign.
    """
    if value != value:
        return MISSING
    text = f"{value:,.{decimals}f}".replace(",", THOUSANDS)
    # -0.0 and what rounds to it are zero to a reader.
    return text.lstrip("-") if float(f"{value:.{decimals}f}") == 0 else text.replace("-", "−")


def percent_number(share: float, decimals: int = 1, *, signed: bool = False) -> str:
    """A fraction as a percentage, without the sign for per cent.

    A share that is there but too small for its decimals is written with two significant digits,
    so that it does not read as nothing.
    """
    value = 100 * share
    if value != value:
        return MISSING
    if _NOTHING <= abs(value) < 10.0**-decimals:
        decimals = 1 - math.floor(math.log10(abs(value)))
    text = number_text(value, decimals)
    above = signed and value > 0 and float(f"{value:.{decimals}f}") != 0
    return f"+{text}" if above else text


def percent_text(share: float, decimals: int = 1, *, signed: bool = False) -> str:
    """A fraction as a percentage with its sign, ``98.2 %``; NaN is an en dash."""
    text = percent_number(share, decimals, signed=signed)
    return text if text == MISSING else f"{text}{BEFORE_PERCENT}%"


def as_printed(text: str) -> str:
    """A sentence with its numbers in the style of the tables.

    ``12,345`` gets a narrow space, ``98.2%`` a space, ``-0.3`` a real minus sign; a negative
    zero loses its sign. Dates, names and decimals stay as they are.
    """
    text = _GROUPED.sub(lambda found: found[0].replace(",", THOUSANDS), text)
    text = _MINUS.sub("−", _PERCENT.sub(f"{BEFORE_PERCENT}%", text))
    return _MINUS_ZERO.sub("", text)


def unit_text(unit: str) -> str:
    """A unit as print sets it: ``kg/m3`` becomes kg/m³, a plain ratio a dash."""
    return _UNIT_SIGNS.get(unit, unit)


def split_unit(name: str) -> tuple[str, str]:
    """A name without the unit at its end, and that unit; no unit is an empty text."""
    lower = name.lower()
    if not lower.endswith(_NO_UNIT):
        for ending, unit in _UNIT_BY_ENDING.items():
            if lower.endswith(ending):
                return name[: -len(ending)], unit
    return name, ""


def column_heading(column: Any, unit: str = "") -> str:
    """What stands above a column: its name in words and its unit in brackets.

    Parameters
    ----------
    column : str or tuple of str
        Name of the column, or of its levels.
    unit : str
        Unit, if the name does not end in it.
    """
    if isinstance(column, tuple):
        return " ".join(column_heading(part, unit) for part in column if str(part))
    name, own = split_unit(str(column))
    words = _LEVEL.sub(r"P\1", name.replace("_", " "))
    shown = unit or own
    return f"{words} [{unit_text(shown)}]" if shown not in ("", "1") else words
