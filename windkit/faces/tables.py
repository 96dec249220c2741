"""Tables as a person reads them, in a workbook and in the report.

Here: rounding by unit, thin spaces between thousands, numbers to the right, text escaped. Not
here: where the values come from; a table computes nothing.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Callable, Mapping, Sequence
from html import escape
from numbers import Integral, Real
from typing import TYPE_CHECKING, Any

from windkit.faces.look import ACCENT, GRID, INK, MUTED
from windkit.faces.wording import (
    BEFORE_PERCENT,
    DECIMALS_BY_UNIT,
    MISSING,
    THOUSANDS,
    as_printed,
    column_heading,
    number_text,
    percent_number,
    percent_text,
    unit_text,
)

if TYPE_CHECKING:
    import pandas as pd

__all__ = [
    "TABLE_STYLE",
    "WORDED",
    "Table",
    "exceedance_table_view",
    "results_table",
    "value_text",
]

#: Style that travels with a table; the report carries it once and leaves it out of the tables.
TABLE_STYLE = f"""<style>
.site-table {{ border-collapse: collapse; margin: 0.6em 0 1.1em; font-size: 0.93em;
  font-variant-numeric: tabular-nums lining-nums; color: {INK}; background: white; }}
.site-table caption {{ caption-side: top; text-align: left; padding: 0 0 0.4em; font-weight: 600; }}
.site-table th, .site-table td {{ padding: 0.28em 0.9em 0.28em 0.25em; vertical-align: top;
  border: 0; border-bottom: 1px solid {GRID}; text-align: left; background: white; }}
.site-table .num {{ text-align: right; white-space: nowrap; }}
.site-table .stamp, .site-table .stamp span {{ white-space: nowrap; }}
.site-table .some {{ min-width: 7em; }} .site-table .line {{ min-width: 14em; }}
.site-table thead th {{ border-bottom: 1.5px solid {INK}; font-weight: 600;
  vertical-align: bottom; }}
.site-table thead th.num {{ white-space: normal; max-width: 7em; }}
.site-table tbody th {{ font-weight: 500; }}
.site-table.many {{ font-size: 0.86em; }} .site-table.many .stamp {{ white-space: normal; }}
.site-table.many :is(th, td) {{ padding-right: 0.6em; }}
.site-table .quiet {{ color: {MUTED}; }}
.site-table tbody tr:last-child > * {{ border-bottom: 1.5px solid {INK}; }}
.site-table .mark {{ color: {ACCENT}; font-weight: 600; }}
</style>"""

Format = str | Callable[[Any], str]

#: A date, or a date and time: never broken over two lines.
_STAMP = re.compile(r"\d{4}-\d\d-\d\d( \d\d:\d\d)?")

#: A format specification that writes a fraction as a percentage.
_SHARE = re.compile(r"(\+?)\.(\d)%")

#: Columns whose cells hold names of the study file; a reader sees them as words.
WORDED = {"group", "of", "varies"}
#: Columns of whole numbers that count nothing.
_UNGROUPED = {"year"}
#: From so many columns on a table is set closer.
_MANY_COLUMNS = 8
#: Texts longer than so many characters get room for a few words or for a line.
_SOME_WORDS, _A_LINE = 14, 32


class Table:
    """A table that shows itself in a workbook and goes into the report as it is.

    Parameters
    ----------
    rows : DataFrame, or sequence of mappings
        The table; an index that only counts rows is left out, any other is the first column.
    caption : str
        Sentence above the table.
    formats : mapping of column name to str or callable, optional
        How to write a column: a format specification such as ``".2f"``, a unit of
        `DECIMALS_BY_UNIT`, or a function of the value. Other numbers are written with as many
        decimals as the largest of their column deserves.
    quiet : sequence of column names
        Columns to set back, such as the basis of a value.

    Examples
    --------
    >>> Table([{"month": "May", "energy": 12345.6}], formats={"energy": "MWh"})
    month  energy
    May    12 346
    """

    def __init__(
        self,
        rows: pd.DataFrame | Sequence[Mapping[str, Any]],
        *,
        caption: str = "",
        formats: Mapping[str, Format] | None = None,
        quiet: Sequence[str] = (),
    ) -> None:
        import pandas as pd

        frame = rows if isinstance(rows, pd.DataFrame) else pd.DataFrame(list(rows))
        if not _only_counts(frame.index):
            names = [str(name) if name is not None else "" for name in frame.index.names]
            # reset_index would refuse an index named like a column; such a table is ambiguous.
            frame = frame.reset_index(names=names)
        unknown = set(formats or {}) - {str(column) for column in frame.columns}
        if unknown:
            raise ValueError(
                f"formats names {sorted(unknown)}, but the columns are "
                f"{[str(column) for column in frame.columns]}"
            )
        self.caption = as_printed(caption)
        self._columns = [column_heading(column) for column in frame.columns]
        self._quiet = {column_heading(column) for column in quiet}
        self._texts: list[list[str]] = []
        self._numeric: list[bool] = []
        for position, column in enumerate(frame.columns):
            values = list(frame.iloc[:, position])
            write = (formats or {}).get(str(column))
            self._texts.append(_column_texts(str(column), values, write))
            self._numeric.append(_all_numbers(values))

    @property
    def cells(self) -> list[list[str]]:
        """The texts of the cells, row by row."""
        return [list(row) for row in zip(*self._texts, strict=True)]

    def to_html(self, *, with_style: bool = False) -> str:
        """The table as HTML, every text escaped.

        Parameters
        ----------
        with_style : bool
            Whether `TABLE_STYLE` goes in front.
        """
        kinds = [
            " ".join(
                kind
                for kind, wanted in (
                    ("num", numeric),
                    ("quiet", heading in self._quiet),
                    (_room(texts), not numeric and _room(texts)),
                )
                if wanted
            )
            for heading, numeric, texts in zip(
                self._columns, self._numeric, self._texts, strict=True
            )
        ]
        head = "".join(_cell("th", *pair) for pair in zip(self._columns, kinds, strict=True))
        body = "\n".join(
            "<tr>" + "".join(_cell("td", *pair) for pair in zip(row, kinds, strict=True)) + "</tr>"
            for row in self.cells
        )
        caption = f"<caption>{escape(self.caption)}</caption>\n" if self.caption else ""
        close = " many" if len(self._columns) >= _MANY_COLUMNS else ""
        return (
            (TABLE_STYLE + "\n" if with_style else "")
            + f'<table class="site-table{close}">\n{caption}<thead><tr>{head}</tr></thead>\n'
            + f"<tbody>\n{body}\n</tbody>\n</table>"
        )

    def _repr_html_(self) -> str:
        return self.to_html(with_style=True)

    def __repr__(self) -> str:
        rows = [self._columns, *self.cells]
        widths = [max(len(row[i]) for row in rows) for i in range(len(self._columns))]
        lines = [
            "  ".join(
                text.rjust(width) if numeric else text.ljust(width)
                for text, width, numeric in zip(row, widths, self._numeric, strict=True)
            ).rstrip()
            for row in rows
        ]
        return "\n".join([self.caption] * bool(self.caption) + lines)


def results_table(rows: Sequence[Any], *, caption: str = "") -> Table:
    """Figures of merit with unit and basis, rounded as their unit deserves.

    Parameters
    ----------
    rows : sequence of objects
        Each with `label`, `value` (number, text, or two numbers that bound an interval),
        `unit` and `basis`; a fraction (unit "1") is shown as a percentage if its attribute
        `as_percent` is true.
    caption : str
        Sentence above the table.

    Returns
    -------
    Table
        Columns Result, Value, Unit and Basis.
    """
    lines = []
    for row in rows:
        as_percent = bool(getattr(row, "as_percent", False))
        lines.append(
            {
                "Result": as_printed(row.label),
                "Value": value_text(row.value, row.unit, as_percent=as_percent),
                "Unit": "%" if as_percent else unit_text(row.unit),
                "Basis": as_printed(row.basis),
            }
        )
    table = Table(lines, caption=caption, quiet=["Basis"])
    if lines:
        table._numeric[1] = True  # the values are texts by now, and still numbers to a reader
    return table


def exceedance_table_view(
    levels: pd.DataFrame, *, unit: str = "MWh/year", caption: str = ""
) -> Table:
    """Energy levels P50 to P99 for the periods of a study.

    Parameters
    ----------
    levels : DataFrame
        One row a period, its length [years] in the index, one column a level; a column may be
        named by its level (``"P90"``) or by its probability (``0.9``).
    unit : str
        Unit of the levels.
    caption : str
        Sentence above the table; a plain one stands if it is left out.

    Returns
    -------
    Table
        Columns "Mean of", P50, P75 and so on.
    """
    lines = []
    for period, values in zip(levels.index, levels.to_numpy().tolist(), strict=True):
        line = {"Mean of": _period_text(period)}
        for column, value in zip(levels.columns, values, strict=True):
            line[_level_name(column)] = value
        lines.append(line)
    said = caption or f"Net energy exceeded with the stated probability [{unit}]"
    return Table(lines, caption=said, formats={_level_name(c): unit for c in levels.columns})


def value_text(value: Any, unit: str = "", *, as_percent: bool = False) -> str:
    """One value as a person reads it.

    Parameters
    ----------
    value : number, str, bool, None, or a pair of numbers
        A pair is written as an interval.
    unit : str
        Decides the decimals, see `DECIMALS_BY_UNIT`.
    as_percent : bool
        Whether a fraction is written as a percentage, without the sign.

    Raises
    ------
    ValueError
        If a percentage is asked of something that has a unit.
    """
    if as_percent and unit not in ("1", ""):
        raise ValueError(
            f"only a fraction (unit '1') can be shown as a percentage, this has unit '{unit}'"
        )
    if isinstance(value, list | tuple):
        return " to ".join(value_text(part, unit, as_percent=as_percent) for part in value)
    if value is None:
        return MISSING
    if isinstance(value, bool) or type(value).__name__ in ("bool_", "bool"):
        return "yes" if value else "no"
    if isinstance(value, Integral) and not as_percent:
        return number_text(int(value))
    if isinstance(value, Real):
        number = float(value)
        if as_percent:
            return percent_number(number, DECIMALS_BY_UNIT["%"])
        return number_text(number, DECIMALS_BY_UNIT.get(unit, _decimals([number])))
    return str(value)


def _only_counts(index: pd.Index) -> bool:
    import pandas as pd

    return isinstance(index, pd.RangeIndex) and index.name is None


def _is_missing(value: Any) -> bool:
    if value is None:
        return True
    try:
        return bool(value != value)
    except (TypeError, ValueError):
        return type(value).__name__ == "NAType"


def _is_number(value: Any) -> bool:
    return isinstance(value, Real) and not isinstance(value, bool)


def _all_numbers(values: Sequence[Any]) -> bool:
    there = [value for value in values if not _is_missing(value)]
    return bool(there) and all(_is_number(value) for value in there)


def _decimals(values: Sequence[float]) -> int:
    """Decimals that give the largest value four significant digits."""
    sizes = [abs(value) for value in values if value == value and abs(value) != float("inf")]
    largest = max(sizes, default=0.0)
    if largest == 0.0:
        return 0
    return next((d for bound, d in ((1000, 0), (100, 1), (1, 2), (0.1, 3)) if largest >= bound), 4)


def _column_texts(name: str, values: Sequence[Any], write: Format | None) -> list[str]:
    numbers = [float(value) for value in values if _is_number(value) and not _is_missing(value)]
    whole = all(isinstance(value, Integral) for value in values if not _is_missing(value))
    decimals = 0 if whole else _decimals(numbers)
    stamps = [value for value in values if isinstance(value, dt.datetime) and value == value]
    days = all(stamp.time() == dt.time() for stamp in stamps)

    def text(value: Any) -> str:
        if _is_missing(value):
            return MISSING
        if callable(write):
            return write(value)
        if write is not None and write in DECIMALS_BY_UNIT:
            return value_text(float(value) if _is_number(value) else value, write)
        if write is not None:
            return _formatted(value, write)
        if _is_number(value):
            return str(value) if whole and name in _UNGROUPED else number_text(value, decimals)
        if isinstance(value, dt.datetime):
            return format(value, "%Y-%m-%d" if days else "%Y-%m-%d %H:%M")
        shown = value_text(value)
        if name in WORDED:
            return shown.replace("_", " ")
        return as_printed(shown) if _is_prose(shown) else shown

    return [text(value) for value in values]


def _formatted(value: Any, write: str) -> str:
    """A value by its format specification, in the style of all other numbers."""
    if share := _SHARE.fullmatch(write):
        return percent_text(float(value), int(share[2]), signed=bool(share[1]))
    text = format(value, write)
    if not _is_number(value):
        return text
    if not any(digit in text for digit in "123456789"):
        text = text.lstrip("+-")  # nothing has no sign
    return text.replace(",", THOUSANDS).replace("-", "−").replace("%", f"{BEFORE_PERCENT}%")


def _is_prose(text: str) -> bool:
    return " " in text and any(letter.isalpha() for letter in text)


def _room(texts: Sequence[str]) -> str:
    """How much room a column of texts asks for, so that numbers beside it do not starve it."""
    longest = max((len(text) for text in texts if " " in text), default=0)
    if any(_STAMP.fullmatch(text) for text in texts):
        return ""
    return "line" if longest > _A_LINE else "some" if longest > _SOME_WORDS else ""


def _cell(tag: str, text: str, kind: str) -> str:
    shown = escape(text)
    if tag == "td" and _STAMP.fullmatch(text):
        kind = f"{kind} stamp".strip()
        # A close table may set the time below the date, but never breaks either.
        shown = " ".join(f"<span>{part}</span>" for part in text.split())
    kinds = f' class="{kind}"' if kind else ""
    scope = ' scope="col"' if tag == "th" else ""
    return f"<{tag}{scope}{kinds}>{shown}</{tag}>"


def _period_text(period: Any) -> str:
    if not _is_number(period):
        return str(period)
    return "1 year" if period == 1 else f"{float(period):g} years"


def _level_name(column: Any) -> str:
    if _is_number(column):
        return f"P{100 * float(column):g}"
    return str(column)
