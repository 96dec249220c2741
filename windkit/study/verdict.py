"""The verdict table: each figure of the site against each class and the machine's own limits.

Four words only: inside, near the limit, outside, not assessed. The limits are those of
`kernels.design_classes` and what `study.toml` says the maker declares. No verdict here
lets a machine be built: a certified design assessment by its maker and a licensed engineer decides.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.constants import STANDARD_AIR_DENSITY
from windkit.kernels.design_classes import (
    GUST_RATIO,
    MEAN_SPEED_RATIO,
    ONE_YEAR_RATIO,
    REFERENCE_SPEED,
    REFERENCE_TURBULENCE,
    SMALL_MEAN_SPEED,
    SMALL_REFERENCE_SPEED,
    SMALL_SWEPT_AREA,
    normal_turbulence,
    small_turbine_turbulence,
)
from windkit.kernels.stream import swept_area
from windkit.study.settings import TurbineSettings

__all__ = [
    "AIR",
    "CAUTION",
    "EVERY_CLASS",
    "FIFTY_YEAR_WIND",
    "INSIDE",
    "MACHINE",
    "NEAR",
    "NOT_ASSESSED",
    "OUTSIDE",
    "TURBULENCE",
    "UNKNOWN",
    "WIND",
    "SiteFigures",
    "about_the_machine",
    "verdict_matrix",
    "verdict_table",
]

Array = NDArray[np.float64]

INSIDE, NEAR, OUTSIDE, NOT_ASSESSED = "inside", "near the limit", "outside", "not assessed"
CAUTION = (
    "These words compare figures with limits. Whether this machine may stand here is decided by a "
    "certified design assessment of its maker and by licensed engineers, who look at loads too."
)

#: Shear exponents a site may have [1]: IEC 61400-1, assessment of site conditions (from memory).
_SHEAR = (0.0, 0.2)
#: Air temperatures of normal operation and of survival [degC]: IEC 61400-1, standard conditions
#: (from memory).
_NORMAL_TEMPERATURE, _EXTREME_TEMPERATURE = (-10.0, 40.0), (-20.0, 50.0)
#: Conditions of the standards that no figure of this study speaks of.
_NEVER_ASSESSED = (
    "flow inclination",
    "turbulence structure, lateral and vertical",
    "extreme turbulence over fifty years",
    "extreme change of direction and shear",
    "ice loads, lightning, earthquakes, salt and dust",
)
#: Share of a limit within which an inside figure is called near it [1], our choice.
_NEAR_SHARE = 0.01
#: What a limit that nobody here has held against the printed standard carries as its note.
_UNVERIFIED = "limit not verified against the standard's text"
FIFTY_YEAR_WIND = "ten-minute wind of 50 years, windiest turbine"
_SHEAR_EXPONENT, _LOWEST_TEMPERATURE = "shear exponent", "lowest temperature"
MACHINE, EVERY_CLASS = "the machine", "every class"
#: Groups of the table, in its order.
WIND, TURBULENCE, AIR, UNKNOWN = "wind", "turbulence", "profile and air", "without data"


@dataclass(frozen=True)
class SiteFigures:
    """What the verdict is about, each None where it could not be found.

    Attributes
    ----------
    mean_speed : float
        Highest yearly mean at any turbine's hub [m/s].
    v50, v50_standard_error, v1, gust_50 : float or None
        Extreme winds at the windiest turbine [m/s].
    speed, ambient, effective : ndarray or None
        Bin centres [m/s], representative ambient turbulence, and effective turbulence with wakes
        at the most disturbed turbine [1].
    shear_exponent, air_density : float
        [1], [kg/m3].
    lowest_temperature_c, highest_temperature_c : float or None
        [degC].
    why_not : dict of str to str
        Reason by figure for what is not assessed.
    """

    mean_speed: float
    v50: float | None
    v50_standard_error: float | None
    v1: float | None
    gust_50: float | None
    speed: Array | None
    ambient: Array | None
    effective: Array | None
    shear_exponent: float
    air_density: float
    lowest_temperature_c: float | None
    highest_temperature_c: float | None
    why_not: dict[str, str]


def verdict_table(figures: SiteFigures, turbine: TurbineSettings) -> pd.DataFrame:
    """Every comparison as a row.

    Returns
    -------
    DataFrame
        Columns group, condition, against, site, limit, margin, unit, verdict, note. The margin is
        what is left up to the limit, negative beyond it; NaN where there is none.
    """
    groups = {
        WIND: _speeds(figures, turbine),
        TURBULENCE: _turbulence(figures, turbine),
        AIR: _standing(figures, turbine),
        UNKNOWN: [
            (name, EVERY_CLASS, np.nan, np.nan, "", NOT_ASSESSED, "no data in this study")
            for name in _NEVER_ASSESSED
        ],
    }
    columns = ["condition", "against", "site", "limit", "unit", "verdict", "note"]
    tables = [pd.DataFrame(rows, columns=columns) for rows in groups.values()]
    for table, group in zip(tables, groups, strict=True):
        table.insert(0, "group", group)
    table = pd.concat(tables, ignore_index=True)
    left = table["limit"] - table["site"]
    left = left.where(table["condition"] != _LOWEST_TEMPERATURE, -left)
    # The shear exponent has a lower limit too.
    shear = table["condition"] == _SHEAR_EXPONENT
    left = left.where(~shear, np.minimum(left, table["site"] - _SHEAR[0]))
    table.insert(list(table.columns).index("limit") + 1, "margin", left)
    return table


def about_the_machine(table: pd.DataFrame) -> pd.DataFrame:
    """Each condition once: against the machine, or what all classes share; the ones counted."""
    return table[table["against"].isin([MACHINE, EVERY_CLASS])].reset_index(drop=True)


def verdict_matrix(table: pd.DataFrame, group: str) -> pd.DataFrame:
    """One group as words: a row for each condition, a column for each class and the machine.

    Parameters
    ----------
    table : DataFrame
        From `verdict_table`.
    group : str
        One of its groups.
    """
    part = table[table["group"] == group]
    places = list(dict.fromkeys(part["against"]))
    rows = []
    for condition in dict.fromkeys(part["condition"]):
        own = part[part["condition"] == condition].set_index("against")
        # The figure that was held against the machine, where there is one.
        known = own.loc[::-1, "site"].dropna()
        row = {
            "Condition": condition,
            "Site": float(known.iloc[0]) if len(known) else np.nan,
            "Unit": own["unit"].iloc[0],
        }
        rows.append(row | {place: own["verdict"].get(place, "–") for place in places})
    return pd.DataFrame(rows)


def _is_small(turbine: TurbineSettings) -> bool:
    return float(swept_area(turbine.rotor_diameter_m)) <= SMALL_SWEPT_AREA


def _class_limits(turbine: TurbineSettings) -> dict[str, tuple[float, float]]:
    """Yearly mean and reference speed [m/s] by class."""
    if _is_small(turbine):
        return {f"class {n}": (SMALL_MEAN_SPEED[n], v) for n, v in SMALL_REFERENCE_SPEED.items()}
    return {f"class {n}": (MEAN_SPEED_RATIO * v, v) for n, v in REFERENCE_SPEED.items()}


def _machine_limits(turbine: TurbineSettings) -> tuple[float | None, float | None]:
    """Yearly mean and reference speed the maker declares, by class or by figure [m/s]."""
    mean, reference = turbine.design_mean_speed_m_s, turbine.design_reference_speed_m_s
    of_class = _class_limits(turbine).get(f"class {turbine.design_class}")
    if of_class is not None:
        mean = of_class[0] if mean is None else mean
        reference = of_class[1] if reference is None else reference
    return mean, reference


Line = tuple[str, str, float, float, str, str, str]


def _held(
    condition: str,
    against: str,
    site: float | None,
    limit: float | None,
    unit: str,
    why_not: str,
    *,
    error: float = 0.0,
) -> Line:
    """One comparison with an upper limit."""
    value = np.nan if site is None else float(site)
    bound = np.nan if limit is None else float(limit)
    if site is None or limit is None:
        note = why_not if site is None else "not declared in [turbine]"
        return condition, against, value, bound, unit, NOT_ASSESSED, note
    word, note = _word(bound - value, bound, error)
    return condition, against, value, bound, unit, word, note


def _word(margin: float, limit: float, error: float = 0.0) -> tuple[str, str]:
    """Verdict and note; beyond the limit is outside, however little."""
    note = ""
    if abs(margin) < error:
        note = "within one standard error of the limit"
    elif abs(margin) < _NEAR_SHARE * abs(limit):
        note = f"within {_NEAR_SHARE:.0%} of the limit"
    if margin < 0:
        return OUTSIDE, note
    return (NEAR if note else INSIDE), note


def _speeds(figures: SiteFigures, turbine: TurbineSettings) -> list[Line]:
    limits: dict[str, tuple[float | None, float | None]] = dict(_class_limits(turbine))
    limits[MACHINE] = _machine_limits(turbine)
    why = figures.why_not.get("extremes", "")
    error = figures.v50_standard_error or 0.0
    rows = []
    conditions = (
        ("yearly mean speed at the windiest hub", figures.mean_speed, 0, 1.0, 0.0),
        (FIFTY_YEAR_WIND, figures.v50, 1, 1.0, error),
        (
            "3 s gust of 50 years, windiest turbine",
            figures.gust_50,
            1,
            GUST_RATIO,
            error * GUST_RATIO,
        ),
        ("ten-minute wind of one year, windiest turbine", figures.v1, 1, ONE_YEAR_RATIO, 0.0),
    )
    for name, site, place, ratio, doubt in conditions:
        for against, pair in limits.items():
            limit = pair[place]
            bound = None if limit is None else ratio * limit
            rows.append(_held(name, against, site, bound, "m/s", why, error=doubt))
    return rows


def _turbulence(figures: SiteFigures, turbine: TurbineSettings) -> list[Line]:
    """Where the site's line comes nearest to, or passes, the class's."""
    why = figures.why_not.get("turbulence", "")
    declared: float | None = turbine.design_turbulence
    if declared is None and turbine.turbulence_class is not None:
        declared = REFERENCE_TURBULENCE[turbine.turbulence_class]
    lines: dict[str, float | None]
    if _is_small(turbine):
        lines = {"small turbines": None}
    else:
        lines = {f"class {name}": value for name, value in REFERENCE_TURBULENCE.items()}
    rows = []
    for name, site in (
        ("turbulence, ambient, 90 % value", figures.ambient),
        ("turbulence with wakes, 90 % value", figures.effective),
    ):
        reason = why if name.startswith("turbulence, ambient") else figures.why_not.get("wakes", "")
        for against, reference in {**lines, MACHINE: declared}.items():
            if against == MACHINE and reference is None and not _is_small(turbine):
                rows.append(_held(name, against, _worst(site), None, "1", reason))
                continue
            if figures.speed is None or site is None or not np.isfinite(site).any():
                rows.append(_held(name, against, None, 0.0, "1", reason or why))
                continue
            V = figures.speed
            line = (
                small_turbine_turbulence(V)
                if reference is None
                else normal_turbulence(V, reference)
            ) / V
            at = int(np.nanargmax(site - line))
            condition, _, value, bound, unit, verdict, near = _held(
                name, against, float(site[at]), float(line[at]), "1", ""
            )
            note = "; ".join(filter(None, [f"nearest at {V[at]:.0f} m/s", near]))
            rows.append((condition, against, value, bound, unit, verdict, note))
    return rows


def _worst(site: Array | None) -> float | None:
    return None if site is None or not np.isfinite(site).any() else float(np.nanmax(site))


def _standing(figures: SiteFigures, turbine: TurbineSettings) -> list[Line]:
    """Shear, air and temperature: the same for every class."""
    low, high = _SHEAR
    exponent = figures.shear_exponent
    word, near = _word(min(high - exponent, exponent - low), high)
    between = f"between {low:g} and {high:g}; {_UNVERIFIED}"
    rows: list[Line] = [
        (
            _SHEAR_EXPONENT, EVERY_CLASS, exponent, high, "1", word,
            "; ".join(filter(None, [near, between])),
        ),
        _held(
            "mean air density", EVERY_CLASS, figures.air_density, STANDARD_AIR_DENSITY,
            "kg/m3", "",
        ),
    ]  # fmt: skip
    why = figures.why_not.get("temperature", "")
    for name, site, normal, extreme, declared, sign in (
        (_LOWEST_TEMPERATURE, figures.lowest_temperature_c, _NORMAL_TEMPERATURE[0],
         _EXTREME_TEMPERATURE[0], turbine.lowest_temperature_c, 1),
        ("highest temperature", figures.highest_temperature_c, _NORMAL_TEMPERATURE[1],
         _EXTREME_TEMPERATURE[1], turbine.highest_temperature_c, -1),
    ):  # fmt: skip
        for against, limit, note in (
            ("normal range of the standard", normal, _UNVERIFIED),
            ("extreme range of the standard", extreme, _UNVERIFIED),
            (MACHINE, declared, ""),
        ):
            if site is None or limit is None:
                reason = why if site is None else "not declared in [turbine]"
                rows.append(
                    (name, against, np.nan if site is None else site,
                     np.nan if limit is None else limit, "degC", NOT_ASSESSED, reason)
                )  # fmt: skip
                continue
            word, near = _word(sign * (site - limit), limit)
            told = "; ".join(filter(None, [near, note]))
            rows.append((name, against, site, limit, "degC", word, told))
    return rows
