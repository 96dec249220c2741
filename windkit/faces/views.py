"""What a workbook shows of a study besides figures: settings, sentences, warnings, files.

The glue between an outcome of the study floor and the tables of `windkit.faces.tables`; nothing
is computed here.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from windkit.faces.tables import (
    WORDED,
    Table,
    exceedance_table_view,
    results_table,
    value_text,
)
from windkit.faces.wording import MISSING, as_printed, percent_text, unit_text
from windkit.study.artifacts import Outcome
from windkit.study.folder import Study
from windkit.study.verdict import TURBULENCE, verdict_matrix

__all__ = [
    "Said",
    "exceedance_text",
    "exceedance_view",
    "listing",
    "method_scores",
    "reference_trial",
    "references",
    "results",
    "say",
    "setting_text",
    "settings",
    "verdict",
    "warnings",
    "written",
]

#: Groups held against no more than these are shown as rows.
_FEW_COLUMNS = ("every class", "normal range", "extreme range", "the machine")


class Said:
    """Sentences that show as text in a workbook and in the report, numbers as in the tables."""

    def __init__(self, *sentences: str) -> None:
        self.sentences = tuple(as_printed(sentence) for sentence in sentences)

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
    """P50 to P99 by period and what P90 keeps of P50, as the cover shows them."""
    levels = outcome.tables["levels"].set_index("years").drop(columns="standard_uncertainty")
    plain, names = exceedance_table_view(levels), [str(name) for name in levels.columns]
    rows: list[dict[str, Any]] = [
        {"Mean of": line[0], **dict(zip(names, values, strict=True)), "P90/P50": share}
        for line, values, share in zip(
            plain.cells, levels.to_numpy().tolist(), levels["P90"] / levels["P50"], strict=True
        )
    ]
    formats: dict[str, Any] = dict.fromkeys(names, "MWh/year")
    return Table(rows, caption=plain.caption, formats=formats | {"P90/P50": percent_text})


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
            # A parameter may come from the workbook's cell or from the command line.
            origin = "parameters" if path in study.overrides else "study.toml"
            rows.append({"Decision": path, "Value": setting_text(value), "Set in": origin})
    return Table(rows, caption="Decisions this workbook stands on", quiet=["Set in"])


def listing(study: Study, path: str) -> Table:
    """A list of tables of `study.toml`, one row an entry: keys that no entry sets are left out."""
    section, _, key = path.partition(".")
    entries = study.section(section)[key] if key else study.section(section)
    used = [
        name for name in entries[0] if any(entry[name] not in (None, "", []) for entry in entries)
    ]
    rows = [{name: entry[name] for name in used} for entry in entries]
    # Numbers stand as they were written: this quotes the file.
    formats = {name: setting_text for name in used if name not in WORDED}
    return Table(rows, caption=f"[[{path}]] of study.toml", formats=formats, quiet=["basis"])


def references(study: Study) -> Table:
    """Every reference as `study.toml` describes it: what it is, on what clock, from which files."""
    rows = []
    for reference in study.settings.references:
        north = setting_text(reference.direction_reference)
        if reference.declination_deg is not None:
            north = f"{north}, declination {setting_text(reference.declination_deg)}°"
        main = reference.channel(reference.main_wind_speed)
        rows.append(
            {
                "Reference": reference.name,
                "Kind": reference.kind,
                "Height of the main speed [m]": setting_text(main.height_m),
                "Interval [min]": setting_text(reference.interval_min),
                "Stamp marks": f"{reference.stamp} of interval",
                "Ahead of UTC [h]": setting_text(reference.utc_offset_h),
                "North of its directions": north,
                "Elevation [m]": setting_text(reference.elevation_m),
                "Files": setting_text(reference.files),
            }
        )
    # Names and paths stand as they were written.
    formats = dict.fromkeys(rows[0], str)
    return Table(rows, caption="References as study.toml describes them", formats=formats)


def _is_list_of_tables(value: Any) -> bool:
    return isinstance(value, list) and bool(value) and isinstance(value[0], Mapping)


def setting_text(value: Any) -> str:
    """A value of `study.toml` as a person reads it, never shortened."""
    if value is None:
        return MISSING
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, list):
        return ", ".join(setting_text(part) for part in value) or "none"
    return f"{value:.10g}" if isinstance(value, float) else str(value)


def reference_trial(outcome: Outcome) -> Table:
    """The references on trial, one column each: what they rest on, the verdict and its reason."""
    trial = outcome.tables["references"].set_index("reference")
    rows = []
    for key, label, write in _TRIAL_LINES:
        if key in trial.columns:
            texts = {str(name): write(trial.loc[name, key]) for name in trial.index}
            rows.append({"": label, **texts})
    return Table(rows, caption="References on trial, best first")


def method_scores(outcome: Outcome) -> Table:
    """The score table of all methods, best first, as fractions a person reads as per cent."""
    scores = outcome.tables["scores"].drop(columns="keeps_spread")
    shares = [name for name in scores.columns if name.endswith("_error") or name.startswith("from")]
    return Table(
        scores,
        caption="Methods on held-out blocks, best first",
        formats=dict.fromkeys(shares, ".1%") | {"score": ".3f"},
    )


def _share(value: Any) -> str:
    return percent_text(float(value))


def _figure(value: Any) -> str:
    return MISSING if value != value else f"{value:.2f}"


_TRIAL_LINES: tuple[tuple[str, str, Any], ...] = (
    ("verdict", "verdict", str),
    ("reason", "reason", str),
    ("overlap_days", "overlap [days]", lambda value: f"{value:.0f}"),
    ("recovery", "recovery in the overlap", _share),
    ("seasons_covered", "seasons covered", lambda value: f"{value:.0f}"),
    ("correlation_hourly", "correlation, hourly", _figure),
    ("correlation_daily", "correlation, daily", _figure),
    ("correlation_weekly", "correlation, weekly", _figure),
    ("correlation_monthly", "correlation, monthly", _figure),
    ("lag_steps", "lag [steps]", lambda value: f"{value:.0f}"),
    ("trend_per_decade", "trend in ten years", _share),
    (
        "trend_significant",
        "trend significant (Mann-Kendall)",
        lambda value: "yes" if value else "no",
    ),
    ("snht_ratio", "SNHT over critical value", _figure),
    ("pettitt_ratio", "Pettitt over critical value", _figure),
    ("cusum_ratio", "CUSUM over critical value", _figure),
    ("break_count", "breaks charged to it", lambda value: f"{value:.0f}"),
    ("homogeneous_from", "homogeneous from", lambda value: f"{value:%Y-%m-%d}"),
    ("long_term_over_campaign", "long term over campaign", lambda value: f"{value:.4f}"),
    ("weight", "weight in the blend", _share),
)
