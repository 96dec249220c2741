"""Step 5, uncertainty: from P50 to the levels that are exceeded with a stated probability.

What makes the spread is listed one cause a row, in wind speed and in energy, with the local
sensitivity between them; only what is drawn anew each year shrinks with the years.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from windkit.kernels.exceedance import (
    combine_in_quadrature,
    exceedance_level,
    exceedance_table,
    total_uncertainty,
    wind_to_energy,
)
from windkit.study.artifacts import Outcome, Row, load_artifact
from windkit.study.folder import Study
from windkit.study.settings import UNCERTAINTY_GROUPS, UncertaintySettings

__all__ = ["PROBABILITIES", "YEARS", "Uncertainty", "assess_uncertainty"]

YEARS = (1, 10, 20)
PROBABILITIES = (0.5, 0.75, 0.9, 0.95, 0.99)

#: Period and level that "what would narrow it" is stated for: the ten-year P90 of lenders.
_HEADLINE_YEARS = 10
_HEADLINE_PROBABILITY = 0.9


@dataclass(frozen=True)
class Uncertainty:
    """What the last step found.

    Attributes
    ----------
    p50 : float
        Net energy [MWh/year].
    parts : DataFrame
        One row a cause: group, name, of, varies, standard uncertainty of its own quantity and of
        energy, share of the ten-year variance, basis.
    narrowing : DataFrame
        Ten-year P90 if one cause were halved [MWh/year].
    levels : DataFrame
        One row a period: years, standard uncertainty, P50 to P99 [MWh/year].
    totals : dict of str to float
        Standard uncertainty of energy by what it is of: one year, ten years [1].
    outcome : Outcome
        Figures of merit, tables and what was found.
    """

    p50: float
    parts: pd.DataFrame
    narrowing: pd.DataFrame
    levels: pd.DataFrame
    totals: dict[str, float]
    outcome: Outcome

    @property
    def spread(self) -> dict[float, float]:
        """Standard uncertainty of the mean of so many years [1]."""
        return dict(zip(self.levels["years"], self.levels["standard_uncertainty"], strict=True))

    @property
    def level_table(self) -> pd.DataFrame:
        """Levels alone, by years [MWh/year]."""
        return self.levels.set_index("years").drop(columns="standard_uncertainty")


def assess_uncertainty(study: Study) -> Uncertainty:
    """Combine the stated and the computed uncertainties into P50 to P99.

    Returns
    -------
    Uncertainty
    """
    long_term, energy = load_artifact(study, "long_term"), load_artifact(study, "yield")
    p50 = energy.number("energy.net_p50_mwh_per_year")
    sensitivity = energy.number("energy.sensitivity")
    parts = _parts(study, long_term, energy, sensitivity)
    static, yearly = _spread(parts, "static"), _spread(parts, "yearly")
    table = exceedance_table(p50, static, yearly, years=YEARS, probabilities=PROBABILITIES)
    names = [f"P{round(100 * probability)}" for probability in PROBABILITIES]
    levels = pd.DataFrame(table.level, columns=names)
    levels.insert(0, "years", list(YEARS))
    levels.insert(1, "standard_uncertainty", table.standard_uncertainty)
    rows = [
        Row(
            f"exceedance.{years}.{name}_mwh_per_year",
            f"{name}, mean of {years} year{'s' if years > 1 else ''}",
            float(table.level[index, names.index(name)]),
            "MWh/year",
            f"normal distribution, standard uncertainty {table.standard_uncertainty[index]:.1%}",
        )
        for index, years in enumerate(YEARS)
        for name in names
    ]
    rows += [
        Row(
            "uncertainty.static", "Standard uncertainty that is the same every year", static, "1",
            "of energy; quadrature of the static causes, taken as independent", as_percent=True,
        ),
        Row(
            "uncertainty.yearly", "Standard uncertainty that is drawn anew each year", yearly, "1",
            "of energy in any one year; quadrature of the yearly causes", as_percent=True,
        ),
    ]  # fmt: skip
    rows += _hub_interval(energy, parts)
    rows += [
        Row(
            f"uncertainty.total_{years}_year{'s' if years > 1 else ''}",
            f"Standard uncertainty of the mean of {years} year{'s' if years > 1 else ''}",
            float(table.standard_uncertainty[index]), "1",
            "of energy; static and yearly causes in quadrature", as_percent=True,
        )
        for index, years in enumerate(YEARS)
    ]  # fmt: skip
    narrowing = _narrowing(p50, parts)
    p90 = {
        years: float(table.level[index, names.index("P90")]) for index, years in enumerate(YEARS)
    }
    leading = parts.sort_values("share_of_ten_year_variance", ascending=False).iloc[0]
    said = {
        "parts": f"The largest part of the ten-year spread is {leading['name']}, with "
        f"{leading['share_of_ten_year_variance']:.0%} of the variance. The static causes come to "
        f"{static:.1%} of energy and those of one year to {yearly:.1%}; in quadrature that is "
        f"{table.standard_uncertainty[0]:.1%} for one year.",
        "levels": f"P50 is {p50:,.0f} MWh a year. P90 is {p90[1]:,.0f} MWh for a single year, "
        f"{p90[10]:,.0f} for the mean of ten and {p90[20]:,.0f} for the mean of twenty.",
        "narrowing": f"Halving the uncertainty of {narrowing['halved'][0]} would raise the "
        f"ten-year P90 by {narrowing['gain_mwh_per_year'][0]:,.0f} MWh a year; no other single "
        "cause is worth as much.",
    }
    return Uncertainty(
        p50=p50,
        parts=parts,
        narrowing=narrowing,
        levels=levels,
        totals={
            "static causes together": static,
            "one year": float(table.standard_uncertainty[0]),
            "mean of ten years": float(table.standard_uncertainty[YEARS.index(_HEADLINE_YEARS)]),
        },
        outcome=Outcome(
            "uncertainty",
            rows,
            {"levels": levels, "parts": parts, "narrowing": narrowing},
            said,
            _not_considered(parts),
        ),
    )


def _parts(study: Study, long_term: Outcome, energy: Outcome, sensitivity: float) -> pd.DataFrame:
    """Every cause as a row, wind and energy side by side."""
    causes = [
        (
            "historical_wind_resource", "long-term correction", "wind_speed", "static",
            long_term.number("long_term.standard_uncertainty"), "computed in step 3",
        ),
        *_period_for_climate(long_term),
    ]  # fmt: skip
    stated = study.settings.uncertainties
    if not any(cause.group == "yearly_variability" for cause in stated):
        causes.append(
            (
                "yearly_variability", "windiness of one year", "wind_speed", "yearly",
                long_term.number("long_term.yearly_variability"), "computed in step 3",
            )
        )  # fmt: skip
    computed = energy.number("hub.extrapolation_standard_uncertainty")
    by_hand = [cause for cause in stated if cause.group == "vertical_extrapolation"]
    kept, basis = _way_up(by_hand, computed, sensitivity)
    if not kept:
        causes.append(
            ("vertical_extrapolation", "from the mast to the hub", "wind_speed", "static",
             computed, basis)
        )  # fmt: skip
    causes += [
        (
            cause.group, cause.name, cause.of, cause.varies, cause.standard_uncertainty,
            f"{cause.basis}; {basis}" if cause in by_hand else cause.basis,
        )
        for cause in stated
        if cause not in by_hand or kept
    ]  # fmt: skip
    parts = pd.DataFrame(
        causes, columns=["group", "name", "of", "varies", "standard_uncertainty", "basis"]
    )
    of_wind = parts["of"] == "wind_speed"
    own = parts["standard_uncertainty"].to_numpy(dtype=float)
    in_energy = np.where(of_wind, wind_to_energy(own, sensitivity), own)
    weight = np.where(parts["varies"] == "yearly", 1 / _HEADLINE_YEARS, 1.0)
    variance = in_energy**2 * weight
    parts.insert(5, "energy_standard_uncertainty", in_energy)
    total = variance.sum()
    parts.insert(6, "share_of_ten_year_variance", variance / total if total > 0 else variance)
    return parts


def _way_up(
    stated: list[UncertaintySettings], computed: float, sensitivity: float
) -> tuple[bool, str]:
    """Whether the stated rows of the way up stand, or the computed one does; never both."""
    if not stated:
        return False, "computed in step 4"
    together = float(
        combine_in_quadrature(
            np.array(
                [
                    cause.standard_uncertainty
                    / (1.0 if cause.of == "wind_speed" or sensitivity == 0 else sensitivity)
                    for cause in stated
                ]
            )
        )
    )
    told = f"step 4 computes {computed:.2%} of wind speed, stated are {together:.2%}"
    reason = "; ".join(c.reason_over_computed for c in stated if c.reason_over_computed)
    if together >= computed:
        return True, f"{told}, the larger is used"
    if reason:
        return True, f"{told}, used all the same: {reason}"
    return False, f"{told}, the larger is used"


def _hub_interval(energy: Outcome, parts: pd.DataFrame) -> list[Row]:
    """How sure the long-term mean at the hub is: all static causes of wind above the mast."""
    of_mast = (
        (parts["of"] == "wind_speed")
        & (parts["varies"] == "static")
        & (parts["group"] != "horizontal_extrapolation")
    )
    own = float(
        combine_in_quadrature(parts.loc[of_mast, "standard_uncertainty"].to_numpy(dtype=float))
    )
    mean = energy.number("hub.mean_speed_m_s")
    return [
        Row(
            "hub.standard_uncertainty", "Standard uncertainty of the mean speed at the hub", own,
            "1", "quadrature of measurement, long-term correction and the way up",
            as_percent=True,
        ),
        Row(
            "hub.interval_80_m_s", "80 % interval of the mean speed at the hub",
            [float(exceedance_level(mean, own, p)) for p in (0.9, 0.1)], "m/s",
            "normal, from the same causes; at the mast, without the turbines' own places",
        ),
    ]  # fmt: skip


def _period_for_climate(long_term: Outcome) -> list[tuple[str, str, str, str, float, str]]:
    """How well the references' years stand for the years to come, if step 3 could tell."""
    key = "long_term.representativeness"
    if all(row.key != key for row in long_term.rows):
        return []
    return [
        (
            "historical_wind_resource",
            "reference years for the climate",
            "wind_speed",
            "static",
            long_term.number(key),
            "computed in step 3, persistence included",
        )
    ]


def _spread(parts: pd.DataFrame, varies: str) -> float:
    chosen = parts.loc[parts["varies"] == varies, "energy_standard_uncertainty"]
    return float(combine_in_quadrature(chosen.to_numpy(dtype=float))) if len(chosen) else 0.0


def _not_considered(parts: pd.DataFrame) -> list[str]:
    """A warning for the groups of the open draft that no cause stands for."""
    there = set(parts.loc[parts["standard_uncertainty"].astype(float) > 0, "group"])
    missing = [group.replace("_", " ") for group in UNCERTAINTY_GROUPS if group not in there]
    if not missing:
        return []
    return [
        f"No uncertainty is stated for {', '.join(missing)}: the spread is narrower than it would "
        "be with them."
    ]


def _narrowing(p50: float, parts: pd.DataFrame) -> pd.DataFrame:
    """What the headline level would gain if one cause were halved."""

    def headline(table: pd.DataFrame) -> float:
        spread = total_uncertainty(
            _spread(table, "static"), _spread(table, "yearly"), _HEADLINE_YEARS
        )
        return float(exceedance_level(p50, spread, _HEADLINE_PROBABILITY))

    today = headline(parts)
    rows = []
    for index in parts.index:
        halved = parts.copy()
        halved.loc[index, "energy_standard_uncertainty"] /= 2
        rows.append((parts.loc[index, "name"], headline(halved), headline(halved) - today))
    table = pd.DataFrame(rows, columns=["halved", "p90_mwh_per_year", "gain_mwh_per_year"])
    return table.sort_values("gain_mwh_per_year", ascending=False, ignore_index=True)
