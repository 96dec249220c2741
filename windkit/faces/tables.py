"""Tables as a person reads them, in a workbook and in the report.

Here: rounding by unit, thin spaces between thousands, numbers to the right, text escaped. Not
here: where the values come from; a table computes nothing.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from html import escape
from numbers import Integral, Real
from typing import TYPE_CHECKING, Any

from windkit.faces.look import ACCENT, GRID, INK, MUTED, number_text

if TYPE_CHECKING:
    import pandas as pd

__all__ = [
    "DECIMALS_BY_UNIT",
    "MISSING",
    "TABLE_STYLE",
    "Table",
    "exceedance_table_view",
    "results_table",
    "unit_text",
    "value_text",
]

#: What stands where there is no value.
MISSING = "–"

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

#: Style that travels with a table; the report carries it once and leaves it out of the tables.
TABLE_STYLE = f"""<style>
.site-table {{ border-collapse: collapse; margin: 0.6em 0 1.1em; font-size: 0.93em;
  font-variant-numeric: tabular-nums lining-nums; color: {INK}; background: white; }}
.site-table caption {{ caption-side: top; text-align: left; padding: 0 0 0.4em; font-weight: 600; }}
.site-table th, .site-table td {{ padding: 0.28em 0.9em 0.28em 0.25em; vertical-align: top;
  border: 0; border-bottom: 1px solid {GRID}; text-align: left; background: white; }}
.site-table thead th {{ border-bottom: 1.5px solid {INK}; font-weight: 600;
  vertical-align: bottom; }}
.site-table tbody th {{ font-weight: 500; }}
.site-table .num {{ text-align: right; white-space: nowrap; }}
.site-table .quiet {{ color: {MUTED}; }}
.site-table tbody tr:last-child > * {{ border-bottom: 1.5px solid {INK}; }}
.site-table .mark {{ color: {ACCENT}; font-weight: 600; }}
</style>"""

Format = str | Callable[[Any], str]

#: How a column's name says its unit, longest ending first.
_UNIT_BY_ENDING: dict[str, str] = {
    "_mwh_per_year": "MWh/year",
    "_kg_m3": "kg/m³",
    "_m_s": "m/s",
    "_kw": "kW",
    "_deg": "°",
    "_hpa": "hPa",
    "_c": "°C",
    "_m": "m",
}


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
        self.caption = caption
        self._columns = [_heading(column) for column in frame.columns]
        self._quiet = {_heading(column) for column in quiet}
        self._texts: list[list[str]] = []
        self._numeric: list[bool] = []
        for position, column in enumerate(frame.columns):
            values = list(frame.iloc[:, position])
            write = (formats or {}).get(str(column))
            self._texts.append(_column_texts(values, write))
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
                for kind, wanted in (("num", numeric), ("quiet", heading in self._quiet))
                if wanted
            )
            for heading, numeric in zip(self._columns, self._numeric, strict=True)
        ]
        head = "".join(_cell("th", *pair) for pair in zip(self._columns, kinds, strict=True))
        body = "\n".join(
            "<tr>" + "".join(_cell("td", *pair) for pair in zip(row, kinds, strict=True)) + "</tr>"
            for row in self.cells
        )
        caption = f"<caption>{escape(self.caption)}</caption>\n" if self.caption else ""
        return (
            (TABLE_STYLE + "\n" if with_style else "")
            + f'<table class="site-table">\n{caption}<thead><tr>{head}</tr></thead>\n'
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
                "Result": row.label,
                "Value": value_text(row.value, row.unit, as_percent=as_percent),
                "Unit": "%" if as_percent else unit_text(row.unit),
                "Basis": row.basis,
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
        number = float(value) * (100 if as_percent else 1)
        shown = "%" if as_percent else unit
        return number_text(number, DECIMALS_BY_UNIT.get(shown, _decimals([number])))
    return str(value)


def unit_text(unit: str) -> str:
    """A unit as print sets it: ``kg/m3`` becomes kg/m³, a plain ratio a dash."""
    return _UNIT_SIGNS.get(unit, unit)


def _only_counts(index: pd.Index) -> bool:
    import pandas as pd

    return isinstance(index, pd.RangeIndex) and index.name is None


def _heading(column: Any) -> str:
    if isinstance(column, tuple):
        return " ".join(_heading(part) for part in column if str(part))
    name = str(column)
    for ending, unit in _UNIT_BY_ENDING.items():
        if name.endswith(ending):
            return f"{name.removesuffix(ending).replace('_', ' ')} [{unit}]"
    return name.replace("_", " ")


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


def _column_texts(values: Sequence[Any], write: Format | None) -> list[str]:
    numbers = [float(value) for value in values if _is_number(value) and not _is_missing(value)]
    whole = all(isinstance(value, Integral) for value in values if not _is_missing(value))
    decimals = 0 if whole else _decimals(numbers)

    def text(value: Any) -> str:
        if _is_missing(value):
            return MISSING
        if callable(write):
            return write(value)
        if write is not None and write in DECIMALS_BY_UNIT:
            return value_text(float(value) if _is_number(value) else value, write)
        if write is not None:
            return format(value, write).replace(",", "\u202f")
        if _is_number(value):
            return number_text(float(value), decimals)
        return value_text(value)

    return [text(value) for value in values]


def _cell(tag: str, text: str, kind: str) -> str:
    kinds = f' class="{kind}"' if kind else ""
    scope = ' scope="col"' if tag == "th" else ""
    return f"<{tag}{scope}{kinds}>{escape(text)}</{tag}>"


def _period_text(period: Any) -> str:
    if not _is_number(period):
        return str(period)
    return "1 year" if period == 1 else f"{float(period):g} years"


def _level_name(column: Any) -> str:
    if _is_number(column):
        return f"P{100 * float(column):g}"
    return str(column)
