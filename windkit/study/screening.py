"""Step 1, site screening: from a rough wind figure to a range of energy, before measuring.

Speed is carried to the hub by an exponent, or by the log law over the ground's roughness where
`study.toml` names a roughness class or a kind of terrain; both are for screening only. The answer
is a range, since a first look can be wrong by half; what drives it is worked out one assumption at
a time, so that the next euro goes where it narrows the answer most.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from windkit.kernels.air import standard_atmosphere
from windkit.kernels.curve import PowerCurve, betz_check, mean_power_weibull
from windkit.kernels.energy import HOURS_PER_YEAR, annual_energy
from windkit.kernels.exceedance import exceedance_level
from windkit.kernels.profile import log_law, power_law
from windkit.kernels.roughness import ROUGHNESS_CLASSES, change_roughness, coriolis_parameter
from windkit.kernels.stream import BETZ_LIMIT, stream_power, swept_area, wind_power_density
from windkit.kernels.weibull import weibull_energy_pattern_factor, weibull_mean
from windkit.study.artifacts import Outcome, Row
from windkit.study.errors import StudyError
from windkit.study.folder import Study
from windkit.study.settings import Settings
from windkit.study.turbine import WATT_HOURS_PER_MWH, read_curve

__all__ = ["Screening", "screen"]

#: What is tried one at a time, as half a range each: our choice of plausible ranges for a site
#: without measurements; the speed's own range is the study's stated uncertainty.
_TRIED_SHAPE = 0.2
_TRIED_EXPONENT = 0.05
_TRIED_DENSITY = 0.03
#: The same for a roughness length, as a factor: about half a class of the wind atlas.
_TRIED_ROUGHNESS = 2.0


@dataclass(frozen=True)
class Screening:
    """What screening found; `outcome` is what is written.

    Attributes
    ----------
    curve : PowerCurve
        The machine's curve.
    hub_mean_speed, weibull_scale, weibull_shape, air_density : float
        At hub height [m/s], [m/s], [1], [kg/m3].
    drivers : DataFrame
        Columns assumption, low, high: energy per turbine [MWh/year] at both ends of its range.
    power_table : DataFrame
        The curve and the Betz ceiling of its rotor [kW] by wind speed [m/s].
    outcome : Outcome
        Figures of merit, tables and what was found.
    """

    curve: PowerCurve
    hub_mean_speed: float
    weibull_scale: float
    weibull_shape: float
    air_density: float
    drivers: pd.DataFrame
    power_table: pd.DataFrame
    outcome: Outcome


def screen(study: Study) -> Screening:
    """Energy of one turbine from the rough wind figure in `study.toml`.

    Returns
    -------
    Screening
    """
    rough, turbine, site = study.settings.screening, study.settings.turbine, study.settings.site
    curve = read_curve(study)
    shape, hub = rough.weibull_k, turbine.hub_height_m
    density = float(standard_atmosphere(site.elevation_m + hub)[2])

    def energy(
        speed: float = rough.mean_wind_speed_m_s,
        weibull_shape: float = shape,
        exponent: float = rough.shear_exponent,
        roughness_factor: float = 1.0,
        air_density: float = density,
    ) -> float:
        hub_speed, _ = _at_hub(study.settings, speed, exponent, roughness_factor)
        scale = hub_speed / float(weibull_mean(1.0, weibull_shape))
        watts = mean_power_weibull(curve, scale, weibull_shape, air_density=air_density)
        return float(annual_energy(watts)) / WATT_HOURS_PER_MWH

    hub_speed, way_up = _at_hub(
        study.settings, rough.mean_wind_speed_m_s, rough.shear_exponent, 1.0
    )
    scale = hub_speed / float(weibull_mean(1.0, shape))
    p50 = energy()
    speed_range = rough.standard_uncertainty * rough.mean_wind_speed_m_s
    speed_low, speed_high = (
        float(exceedance_level(rough.mean_wind_speed_m_s, rough.standard_uncertainty, p))
        for p in (0.9, 0.1)
    )
    drivers = pd.DataFrame(
        [
            (
                f"mean wind speed ± {rough.standard_uncertainty:.0%}",
                energy(speed=rough.mean_wind_speed_m_s - speed_range),
                energy(speed=rough.mean_wind_speed_m_s + speed_range),
            ),
            (
                f"shear exponent ± {_TRIED_EXPONENT:g}",
                energy(exponent=rough.shear_exponent - _TRIED_EXPONENT),
                energy(exponent=rough.shear_exponent + _TRIED_EXPONENT),
            )
            if rough.roughness_length_m is None
            else (
                "roughness length halved or doubled",
                energy(roughness_factor=1 / _TRIED_ROUGHNESS),
                energy(roughness_factor=_TRIED_ROUGHNESS),
            ),
            (
                f"Weibull shape ± {_TRIED_SHAPE:g}",
                energy(weibull_shape=shape - _TRIED_SHAPE),
                energy(weibull_shape=shape + _TRIED_SHAPE),
            ),
            (
                f"air density ± {_TRIED_DENSITY:.0%}",
                energy(air_density=density * (1 - _TRIED_DENSITY)),
                energy(air_density=density * (1 + _TRIED_DENSITY)),
            ),
        ],
        columns=["assumption", "low_mwh_per_year", "high_mwh_per_year"],
    )
    stream = float(
        wind_power_density(hub_speed, density) * weibull_energy_pattern_factor(scale, shape)
    )
    share = (
        p50
        * WATT_HOURS_PER_MWH
        / (stream * float(swept_area(turbine.rotor_diameter_m)) * HOURS_PER_YEAR)
    )
    rated_mwh = turbine.rated_power_kw * 1e3 * HOURS_PER_YEAR / WATT_HOURS_PER_MWH
    peak = betz_check(curve, turbine.rotor_diameter_m)
    low_80, high_80 = energy(speed=speed_low), energy(speed=speed_high)
    rows = [
        Row(
            "screening.hub_mean_speed_m_s", "Mean wind speed at hub height", hub_speed, "m/s",
            f"{rough.mean_wind_speed_m_s:g} m/s at {rough.height_m:g} m ({rough.basis}), {way_up}",
        ),
        Row(
            "screening.air_density_kg_m3", "Air density at hub height", density, "kg/m3",
            "standard atmosphere (ISO 2533) at the hub's elevation",
        ),
        Row(
            "screening.stream_power_w_m2", "Mean power in the stream", stream, "W/m2",
            f"half density times mean cube, Weibull shape {shape:g}",
        ),
        Row(
            "screening.highest_power_coefficient", "Highest power coefficient of the curve",
            peak.power_coefficient, "1",
            f"at {peak.wind_speed:g} m/s; the ceiling is 16/27 = {BETZ_LIMIT:.3f} (Betz 1920)",
        ),
        Row(
            "screening.share_of_stream", "Share of the stream turned into energy", share, "1",
            "gross energy over power in the stream through the rotor, all year", as_percent=True,
        ),
        Row(
            "screening.gross_mwh_per_year", "Gross energy of one turbine", p50, "MWh/year",
            "power curve over the Weibull distribution, exact integral; before any loss",
        ),
        Row(
            "screening.gross_range_80_mwh_per_year", "its 80 % range from the wind alone",
            [low_80, high_80], "MWh/year",
            f"mean wind speed ± 1.28 × {rough.standard_uncertainty:.0%}",
        ),
        Row(
            "screening.capacity_factor", "Gross capacity factor", p50 / rated_mwh, "1",
            f"of {turbine.rated_power_kw:g} kW over {HOURS_PER_YEAR:g} hours", as_percent=True,
        ),
    ]  # fmt: skip
    swing = (drivers["high_mwh_per_year"] - drivers["low_mwh_per_year"]).abs()
    leading = drivers["assumption"].iloc[int(swing.to_numpy().argmax())]
    said = {
        "stream": f"The wind carries {stream:,.0f} W through each square metre at hub height. No "
        f"rotor can take more than {BETZ_LIMIT:.1%} of it; this one would turn {share:.1%} into "
        f"energy over the year, since a rated machine lets most of a strong wind pass.",
        "curve": f"The curve is at its best at {peak.wind_speed:g} m/s, where it takes "
        f"{peak.power_coefficient:.3f} of the stream: {peak.betz_share:.0%} of the Betz limit.",
        "energy": f"One turbine would make {p50:,.0f} MWh a year before losses, a capacity factor "
        f"of {p50 / rated_mwh:.0%}; from the wind alone the 80 % range is {low_80:,.0f} to "
        f"{high_80:,.0f} MWh. This is a first look and no basis for a loan.",
        "drivers": f"What moves the answer most is the {leading}: {swing.max():,.0f} MWh a year "
        "from one end of its range to the other.",
    }
    speeds = np.asarray(curve.wind_speed)
    table = pd.DataFrame(
        {
            "wind_speed_m_s": speeds,
            "power_kw": np.asarray(curve.power) / 1e3,
            "ceiling_kw": BETZ_LIMIT
            * stream_power(speeds, curve.air_density, turbine.rotor_diameter_m)
            / 1e3,
        }
    )
    return Screening(
        curve=curve,
        hub_mean_speed=hub_speed,
        weibull_scale=scale,
        weibull_shape=shape,
        air_density=density,
        drivers=drivers,
        power_table=table,
        outcome=Outcome("screen", rows, {"drivers": drivers, "power_curve": table}, said),
    )


def _at_hub(
    settings: Settings, speed: float, exponent: float, roughness_factor: float
) -> tuple[float, str]:
    """Speed at hub height [m/s] and how it was carried there; for screening only."""
    rough, hub = settings.screening, settings.turbine.hub_height_m
    if rough.roughness_length_m is None:
        carried = power_law(speed, rough.height_m, hub, exponent)
        return float(carried), f"carried up by the power law with exponent {exponent:.3f}"
    site = rough.roughness_length_m * roughness_factor
    if rough.height_m <= site or hub <= site:
        raise StudyError.of(
            key="screening.height_m",
            met=f"it is {rough.height_m:g} m over a roughness length of {site:g} m",
            rule="the log law starts above the roughness length",
            remedy="give the height of the rough figure in metres above ground",
        )
    if rough.figure_roughness_class is None:
        carried = log_law(speed, rough.height_m, hub, site)
        return float(carried), (
            f"carried up by the log law over a roughness of {site:g} m, for screening only"
        )
    source = ROUGHNESS_CLASSES[rough.figure_roughness_class]
    try:
        coriolis = coriolis_parameter(settings.site.latitude_deg)
    except ValueError as error:
        raise StudyError.of(
            key="site.latitude_deg",
            met=str(error),
            rule="the drag law stands on the turning of the earth",
            remedy="leave figure_roughness_class out, and say in basis what that leaves open",
        ) from None
    carried = change_roughness(speed, rough.height_m, source, hub, site, coriolis)
    return float(carried), (
        f"moved from a roughness of {source:g} m to one of {site:g} m by the geostrophic drag law "
        "and carried up by the log law, for screening only"
    )
