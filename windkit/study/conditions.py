"""Step 6, site conditions: what the machine will have to bear, against what it is designed for.

Turbulence and temperature come from the mast, extreme winds from the long-term series at the hub,
air from the yield step. The verdict is words in a table, see `verdict`. Loads are not computed,
and nothing here is a design assessment.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from windkit.study.artifacts import Outcome, Row, load_artifact
from windkit.study.extreme_winds import ExtremeWinds, extreme_winds, no_extremes
from windkit.study.folder import Study
from windkit.study.settings import TurbinePosition
from windkit.study.site_air import SiteAir, site_air
from windkit.study.site_turbulence import (
    LEAST_IN_BIN,
    NO_TURBULENCE,
    STRONG_WIND,
    SiteTurbulence,
    site_turbulence,
)
from windkit.study.verdict import (
    CAUTION,
    FIFTY_YEAR_WIND,
    INSIDE,
    MACHINE,
    NEAR,
    NOT_ASSESSED,
    OUTSIDE,
    TURBULENCE,
    SiteFigures,
    about_the_machine,
    verdict_table,
)

__all__ = ["Conditions", "assess_conditions"]


@dataclass(frozen=True)
class Conditions:
    """What the last step found.

    Attributes
    ----------
    turbulence : SiteTurbulence
        With empty tables where it is not assessed.
    extremes : ExtremeWinds
        The same.
    air : SiteAir
        Temperature and icing.
    air_monthly : DataFrame
        From the yield step.
    verdict : DataFrame
        Every comparison, see `verdict.verdict_table`.
    outcome : Outcome
    """

    turbulence: SiteTurbulence
    extremes: ExtremeWinds
    air: SiteAir
    air_monthly: pd.DataFrame
    verdict: pd.DataFrame
    outcome: Outcome

    @property
    def speed_limits(self) -> dict[str, float]:
        """Fifty-year winds the classes and the machine are designed for [m/s], by name."""
        rows = self.verdict[self.verdict["condition"] == FIFTY_YEAR_WIND].dropna(subset="limit")
        return dict(zip(rows["against"], rows["limit"].astype(float), strict=True))


def assess_conditions(study: Study) -> Conditions:
    """Hold the site against the design classes and the machine's declared limits.

    Returns
    -------
    Conditions
    """
    settings = study.settings
    measured, energy = load_artifact(study, "measure"), load_artifact(study, "yield")
    record = measured.tables["record"]
    hub_series = energy.tables["hub_series"]
    rated_speed = energy.number("hub.rated_speed_m_s")
    why_not: dict[str, str] = {}
    found = site_turbulence(
        settings, record, str(measured.value("measured.channel")), rated_speed=rated_speed
    )
    turbulence = None if isinstance(found, str) else found
    if isinstance(found, str):
        why_not["turbulence"] = why_not["wakes"] = found
    elif not found.by_speed["effective"].notna().any():
        why_not["wakes"] = "no neighbour within ten rotor diameters"
    drawn = extreme_winds(
        hub_series["wind_speed"],
        settings.conditions,
        weibull_shape=energy.number("hub.weibull_k"),
        turbulence=turbulence.strong if turbulence else None,
    )
    extremes = None if isinstance(drawn, str) else drawn
    if isinstance(drawn, str):
        why_not["extremes"] = drawn
    air = site_air(
        settings,
        record,
        energy.tables["air_temperature"]["temperature"],
        hub_height=energy.number("hub.height_m"),
    )
    if air.lowest_c is None:
        why_not["temperature"] = air.why_not
    windiest = max(settings.layout, key=lambda place: place.speed_factor)
    factor = windiest.speed_factor
    figures = _figures(energy, turbulence, extremes, air, factor, why_not)
    table = verdict_table(figures, settings.turbine)
    rows = _rows(turbulence, extremes, air, table, windiest)
    tables = {
        "verdict": table,
        "temperature": air.table,
        "temperature_frequency": air.frequency,
    }
    if turbulence is not None:
        tables |= {
            "turbulence_in_speed_bins": turbulence.by_speed,
            "turbulence_in_sectors": turbulence.by_sector,
        }
    if extremes is not None:
        tables |= {
            "extreme_maxima": extremes.maxima,
            "extreme_fits": extremes.fits,
            "extreme_levels": extremes.levels,
        }
    warnings = list(extremes.warnings) if extremes else list(filter(None, [why_not["extremes"]]))
    warnings += [*air.warnings, *_warnings(table)]
    return Conditions(
        turbulence=turbulence or NO_TURBULENCE,
        extremes=extremes or no_extremes(),
        air=air,
        air_monthly=energy.tables["air_monthly"],
        verdict=table,
        outcome=Outcome(
            "conditions",
            rows,
            tables,
            _said(turbulence, extremes, air, table, why_not, windiest),
            warnings,
        ),
    )


def _figures(
    energy: Outcome,
    turbulence: SiteTurbulence | None,
    extremes: ExtremeWinds | None,
    air: SiteAir,
    factor: float,
    why_not: dict[str, str],
) -> SiteFigures:
    judged = None
    if turbulence is not None:
        inside = turbulence.by_speed["wind_speed_m_s"].between(*turbulence.judged)
        judged = turbulence.by_speed[inside]
        if judged.empty:
            judged = None
            why_not["turbulence"] = "no speed bin with enough intervals in the range judged"
    return SiteFigures(
        mean_speed=factor * energy.number("hub.mean_speed_m_s"),
        v50=factor * extremes.v50 if extremes else None,
        v50_standard_error=factor * extremes.v50_standard_error if extremes else None,
        v1=factor * extremes.v1 if extremes else None,
        gust_50=factor * extremes.gust_50 if extremes else None,
        speed=judged["wind_speed_m_s"].to_numpy() if judged is not None else None,
        ambient=judged["representative"].to_numpy() if judged is not None else None,
        effective=judged["effective"].to_numpy() if judged is not None else None,
        shear_exponent=energy.number("hub.shear_exponent"),
        air_density=energy.number("hub.air_density_kg_m3"),
        lowest_temperature_c=air.lowest_c,
        highest_temperature_c=air.highest_c,
        why_not=why_not,
    )


def _rows(
    turbulence: SiteTurbulence | None,
    extremes: ExtremeWinds | None,
    air: SiteAir,
    table: pd.DataFrame,
    windiest: TurbinePosition,
) -> list[Row]:
    rows: list[Row] = []
    factor = windiest.speed_factor
    if extremes is not None:
        rows += [
            Row("conditions.v50_m_s", "Ten-minute wind of 50 years at the hub, mast's place",
                extremes.v50, "m/s", extremes.basis),
            Row("conditions.v50_windiest_m_s",
                f"Ten-minute wind of 50 years at the hub, windiest turbine ({windiest.name})",
                factor * extremes.v50, "m/s",
                f"that of the mast's place times {factor:g}; the verdict uses it"),
            Row("conditions.v50_standard_error_m_s", "its standard error",
                extremes.v50_standard_error, "m/s", "scatter of the maxima only"),
            Row("conditions.v1_m_s", "Ten-minute wind of one year at the hub, mast's place",
                extremes.v1, "m/s", "same fit, the level passed once a year on average"),
            Row("conditions.gust_50_m_s", "3 s gust of 50 years at the hub, mast's place",
                extremes.gust_50, "m/s", extremes.gust_basis),
            Row("conditions.v50_from_weibull_m_s", "50-year wind from the Weibull tail",
                extremes.from_weibull, "m/s", "Bergström 1992, a check and no design value"),
            Row("conditions.highest_speed_factor", "Speed factor of the windiest turbine", factor,
                "1", "study.toml; the verdict multiplies winds with it"),
        ]  # fmt: skip
    if turbulence is not None:
        near_15 = turbulence.by_speed[turbulence.by_speed["wind_speed_m_s"] == 15.0]
        if len(near_15):
            rows.append(
                Row("conditions.turbulence_15", "90 % turbulence intensity at 15 m/s",
                    float(near_15["representative"].iloc[0]), "1",
                    f"mean plus 1.28 spreads of {int(near_15['count'].iloc[0])} intervals, at the "
                    "mast, no trend removed", as_percent=True)
            )  # fmt: skip
        rows.append(
            Row("conditions.turbulence_class", "Mildest class above the ambient turbulence",
                turbulence.mildest or "none", "",
                f"IEC 61400-1, bins from {turbulence.bins_judged[0]:.0f} to "
                f"{turbulence.bins_judged[1]:.0f} m/s with {LEAST_IN_BIN} intervals or more")
        )  # fmt: skip
    rows += air.rows
    machine = about_the_machine(table)
    for word, key in (
        (INSIDE, "inside"),
        (NEAR, "near_limit"),
        (OUTSIDE, "outside"),
        (NOT_ASSESSED, "not_assessed"),
    ):
        rows.append(
            Row(f"conditions.verdict.{key}", f"Conditions {word}, against the machine's own limits",
                int((machine["verdict"] == word).sum()), "1",
                f"of {len(machine)} in the table of conditions; a certified design assessment "
                "decides")
        )  # fmt: skip
    return rows


def _said(
    turbulence: SiteTurbulence | None,
    extremes: ExtremeWinds | None,
    air: SiteAir,
    table: pd.DataFrame,
    why_not: dict[str, str],
    windiest: TurbinePosition,
) -> dict[str, str]:
    said = {
        "turbulence": _sentence(why_not.get("turbulence", "")),
        "extremes": _sentence(why_not.get("extremes", "")),
        "air": air.said,
    }
    if turbulence is not None:
        name, distance = turbulence.nearest_neighbour
        said["turbulence"] = (
            _range_judged(turbulence)
            + (
                f"stay below the line of class {turbulence.mildest}."
                if turbulence.mildest
                else "are not below the line of any class."
            )
            + f" In the wind of {STRONG_WIND:g} m/s and more the mean intensity is "
            + (f"{turbulence.strong:.1%}." if turbulence.strong else "not known.")
            + (
                f" {name} has its nearest neighbour at {distance:.1f} rotor diameters, and its "
                "wakes are in the effective line."
                if np.isfinite(distance)
                else ""
            )
        )
    if extremes is not None:
        fits = extremes.fits["fifty_year_m_s"]
        said["extremes"] = (
            f"At the mast's place the ten-minute wind of 50 years is {extremes.v50:.1f} m/s with "
            f"a standard error of {extremes.v50_standard_error:.1f}; the fits lie between "
            f"{fits.min():.1f} and {fits.max():.1f}, and the Weibull tail says "
            f"{extremes.from_weibull:.1f}. The 3 s gust is {extremes.gust_50:.1f} m/s. At the "
            f"windiest turbine, {windiest.name}, the wind of 50 years is "
            f"{windiest.speed_factor * extremes.v50:.1f} m/s, and the verdict uses that."
        )
    said["verdict"] = f"{_counted(table)} {CAUTION}"
    return said


def _range_judged(turbulence: SiteTurbulence) -> str:
    first, last = turbulence.bins_judged
    to = turbulence.judged[1]
    if not np.isfinite(first):
        return "No speed bin has enough intervals to be judged; the 90 % values "
    return (
        f"From {first:.0f} to {last:.0f} m/s"
        + (
            f", the last bin with {LEAST_IN_BIN} intervals (nothing is known from there to "
            f"{to:.0f} m/s),"
            if last < to
            else ""
        )
        + " the 90 % values "
    )


def _counted(table: pd.DataFrame) -> str:
    """How many conditions of each verdict, and which pass the line of a class."""
    machine = about_the_machine(table)
    told = [f"Of the {len(machine)} conditions in the table of conditions"]
    for word in (INSIDE, NEAR, OUTSIDE, NOT_ASSESSED):
        names = machine.loc[machine["verdict"] == word, "condition"].tolist()
        text = f"{len(names)} {'is' if len(names) == 1 else 'are'} {word}"
        told.append(f"{text} ({', '.join(names)})" if names and word != INSIDE else text)
    others = table[(table["against"] != MACHINE) & (table["verdict"] == OUTSIDE)]
    others = others[
        ~others["condition"].isin(machine.loc[machine["against"] != MACHINE, "condition"])
    ]
    passed = [
        f"{condition} ({', '.join(part['against'])})"
        for condition, part in others.groupby("condition", sort=False)
    ]
    return f"{told[0]}, {'; '.join(told[1:])}. " + (
        f"Outside against a class: {'; '.join(passed)}." if passed else "None is outside a class."
    )


def _warnings(table: pd.DataFrame) -> list[str]:
    """A warning for each limit of the machine that is passed, one for all not assessed."""
    machine = about_the_machine(table)
    warnings = []
    for row in machine[machine["verdict"] == OUTSIDE].itertuples():
        site, limit = (_amount(value, row.unit, row.group) for value in (row.site, row.limit))
        note = f" ({row.note!s})" if row.note else ""
        warnings.append(
            f"Outside: {row.condition!s} is {site}, and the limit of {row.against!s} is "
            f"{limit}{note}."
        )
    unknown = machine.loc[machine["verdict"] == NOT_ASSESSED, "condition"].tolist()
    if unknown:
        warnings.append(
            f"{len(unknown)} of {len(machine)} conditions are not assessed: {'; '.join(unknown)}."
        )
    return warnings


def _amount(value: object, unit: object, group: object) -> str:
    number = float(str(value))
    if unit == "1":
        return f"{number:.1%}" if group == TURBULENCE else f"{number:.3f}"
    if unit == "degC":
        return f"{number:.1f} °C"
    return f"{number:.3f} kg/m³" if unit == "kg/m3" else f"{number:.1f} m/s"


def _sentence(text: str) -> str:
    text = text.strip().rstrip(".")
    return text[:1].upper() + text[1:] + "." if text else ""
