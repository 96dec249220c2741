"""What a workbook shows of a study besides figures: settings, sentences, warnings, files.

The glue between an outcome of the study floor and the tables of `windkit.faces.tables`; nothing
is computed here.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from windkit.faces.tables import (
    Table,
    exceedance_table_view,
    results_table,
    unit_text,
    value_text,
)
from windkit.study.artifacts import Outcome
from windkit.study.folder import Study
from windkit.study.verdict import TURBULENCE, verdict_matrix

__all__ = [
    "Said",
    "exceedance_text",
    "exceedance_view",
    "listing",
    "results",
    "say",
    "settings",
    "verdict",
    "warnings",
    "written",
]

_LONGEST_VALUE = 60
#: Groups held against no more than these are shown as rows.
_FEW_COLUMNS = ("every class", "normal range", "extreme range", "the machine")


class Said:
    """Sentences that show as text in a workbook and in the report."""

    def __init__(self, *sentences: str) -> None:
        self.sentences = sentences

    def __repr__(self) -> str:
        return "\n".join(self.sentences)

    def _repr_markdown_(self) -> str:
        return "\n\n".join(self.sentences)


def say(outcome: Outcome, subject: str) -> Said:
    """What was found about one subject of an outcome."""
    return Said(outcome.said[subject])


def warnings(outcome: Outcome) -> Said:
    """The outcome's warnings, or that there are none."""
    if not outcome.warnings:
        return Said("No warnings from this step.")
    return Said(*(f"**Mind:** {warning}" for warning in outcome.warnings))


def results(outcome: Outcome, *, without: str = "") -> Table:
    """The outcome's figures of merit with unit and basis; `without` leaves out a key's branch."""
    rows = [row for row in outcome.rows if not without or not row.key.startswith(without)]
    return results_table(rows, caption="Results of this step")


def exceedance_view(outcome: Outcome) -> Table:
    """P50 to P99 by period, as the cover shows them."""
    levels = outcome.tables["levels"].set_index("years").drop(columns="standard_uncertainty")
    return exceedance_table_view(levels)


def exceedance_text(results: Mapping[str, Any]) -> str:
    """P50 to P99 by period as plain text, from the content of `results.json`."""
    names = [
        key.removesuffix("_mwh_per_year") for key in next(iter(results["exceedance"].values()))
    ]
    lines = ["Net energy exceeded with the stated probability [MWh/year]"]
    lines.append(f"{'mean of':<10}" + "".join(f"{name:>10}" for name in names))
    for years, levels in results["exceedance"].items():
        unit = "year" if years == "1" else "years"
        figures = "".join(f"{value_text(level, 'MWh'):>10}" for level in levels.values())
        lines.append(f"{years + ' ' + unit:<10}" + figures)
    return "\n".join(lines)


def written(outcome: Outcome) -> Said:
    """Where the artifact was written, as seen from the study folder."""
    files = ", ".join(f"{name}.parquet" for name in outcome.tables)
    return Said(f"Written to results/{outcome.step}/: artifact.json, {files}.")


def verdict(outcome: Outcome, group: str) -> Table:
    """One group of the verdict: words by class where there are classes, else rows with limits."""
    table = outcome.tables["verdict"]
    caption = f"Verdict: {group}"
    part = table[table["group"] == group].drop(columns="group")
    if part["against"].nunique() > len(_FEW_COLUMNS):
        shown = verdict_matrix(table, group)
        shown["Site"] = _with_units(shown["Site"], shown["Unit"], group)
        return Table(shown.drop(columns="Unit"), caption=caption)
    if part["limit"].isna().all():
        return Table(part[["condition", "verdict", "note"]], caption=caption, quiet=["note"])
    part = part.assign(
        site=_with_units(part["site"], part["unit"], group),
        limit=_with_units(part["limit"], part["unit"], group),
    )
    return Table(part.drop(columns="unit"), caption=caption, quiet=["note"])


def _with_units(values: Iterable[Any], units: Iterable[str], group: str) -> list[str]:
    """Each value as a person reads it, turbulence in per cent."""
    texts = []
    for value, unit in zip(values, units, strict=True):
        percent = unit == "1" and group == TURBULENCE
        text = value_text(value, unit, as_percent=percent)
        sign = "%" if percent else "" if unit == "1" else unit_text(unit)
        texts.append(f"{text} {sign}".strip())
    return texts


def settings(study: Study, sections: Sequence[str]) -> Table:
    """The decisions this workbook stands on: key, value, and where the value was set.

    Keys that are not set are left out; lists of tables are shown by `listing`.
    """
    rows = []
    for section in sections:
        for key, value in study.section(section).items():
            if value in (None, "") or _is_list_of_tables(value):
                continue
            path = f"{section}.{key}"
            origin = "parameters cell" if path in study.overrides else "study.toml"
            rows.append({"Decision": path, "Value": _short(value), "Set in": origin})
    return Table(rows, caption="Decisions this workbook stands on", quiet=["Set in"])


def listing(study: Study, path: str) -> Table:
    """A list of tables of `study.toml`, one row an entry: keys that no entry sets are left out."""
    section, _, key = path.partition(".")
    entries = study.section(section)[key] if key else study.section(section)
    used = [name for name in entries[0] if any(entry[name] not in (None, []) for entry in entries)]
    rows = [{name: _short(entry[name]) for name in used} for entry in entries]
    return Table(rows, caption=f"[[{path}]] of study.toml", quiet=["basis"])


def _is_list_of_tables(value: Any) -> bool:
    return isinstance(value, list) and bool(value) and isinstance(value[0], Mapping)


def _short(value: Any) -> str:
    if value is None:
        return "–"
    if isinstance(value, list):
        value = ", ".join(map(str, value)) or "none"
    text = f"{value:g}" if isinstance(value, float) else str(value)
    return text if len(text) <= _LONGEST_VALUE else text[: _LONGEST_VALUE - 1] + "…"
