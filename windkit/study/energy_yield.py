"""Step 4, energy yield: from the long-term series to gross, losses and net P50 per turbine.

Energy comes from the long-term series hour by hour through the power curve, never from a mean
speed. Density acts on the speed (pitch-regulated machines). The profile is the mast's own.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.air import moist_air_density, pressure_at_height, standard_atmosphere
from windkit.kernels.curve import PowerCurve, power_at
from windkit.kernels.energy import HOURS_PER_YEAR, annual_energy, speed_to_energy_sensitivity
from windkit.kernels.frequency import FrequencyTable, frequency_table
from windkit.kernels.losses import combine_losses, combine_losses_by_group
from windkit.kernels.profile import power_law
from windkit.kernels.weibull import fit_weibull
from windkit.study.artifacts import Outcome, Row, load_artifact
from windkit.study.folder import Study
from windkit.study.settings import Settings
from windkit.study.turbine import WATT_HOURS_PER_MWH, read_curve

__all__ = ["EnergyYield", "compute_yield"]

#: Hub heights above this multiple of the mast's main height rest on a long extrapolation:
#: the mast is then lower than two thirds of the hub (MEASNET site guideline; common practice).
_HIGHEST_HUB_TO_MAST_RATIO = 1.5
#: Difference of ground level to the mast that a reviewer should hear of [m], our choice.
_ELEVATION_WORTH_A_WORD = 150.0


@dataclass(frozen=True)
class EnergyYield:
    """What the yield step found.

    Attributes
    ----------
    curve : PowerCurve
        The machine's curve.
    hub_speed : ndarray
        Long-term hourly speed at hub height at the mast [m/s].
    turbines : DataFrame
        One row a turbine: speed factor, mean speed, density, gross and net energy.
    losses : DataFrame
        One row a loss: group, name, loss, basis, energy it takes [MWh/year].
    staircase : DataFrame
        Gross, then what is left after each loss [MWh/year].
    frequency : FrequencyTable
        Of the hub speed, without direction.
    outcome : Outcome
        Figures of merit, tables, what was found and warnings.
    """

    curve: PowerCurve
    hub_speed: NDArray[np.float64]
    turbines: pd.DataFrame
    losses: pd.DataFrame
    staircase: pd.DataFrame
    frequency: FrequencyTable
    outcome: Outcome


def compute_yield(study: Study) -> EnergyYield:
    """Gross, losses and net of the layout, from the artifacts of the steps before.

    Returns
    -------
    EnergyYield
    """
    settings, turbine = study.settings, study.settings.turbine
    measured, long_term = load_artifact(study, "measure"), load_artifact(study, "long_term")
    curve = read_curve(study)
    record = measured.tables["record"]
    mast_height = measured.number("measured.height_m")
    exponent = measured.number("measured.shear_exponent")
    series = long_term.tables["series"]["wind_speed"].to_numpy()
    hub_speed = np.asarray(power_law(series, mast_height, turbine.hub_height_m, exponent))
    hub_speed = hub_speed[np.isfinite(hub_speed)]
    density, density_basis = _hub_density(settings, record)
    averaging = _averaging_effect(curve, measured, settings, density)

    places = settings.layout
    factors = np.array([place.speed_factor for place in places])
    densities = density * _density_relative_to_mast(settings)

    def mean_power(scale: float) -> NDArray[np.float64]:
        return np.array(
            [
                np.mean(power_at(curve, hub_speed * (factor * scale), air_density))
                for factor, air_density in zip(factors, densities, strict=True)
            ]
        )

    gross = annual_energy(mean_power(1.0)) * averaging / WATT_HOURS_PER_MWH
    sensitivity = float(speed_to_energy_sensitivity(lambda scale: mean_power(scale).sum()))
    total = combine_losses([loss.loss for loss in settings.losses])
    net = gross * float(total.efficiency)
    weibull = fit_weibull(hub_speed)
    rated = turbine.rated_power_kw * 1e3 * len(places) * HOURS_PER_YEAR / WATT_HOURS_PER_MWH

    turbines = pd.DataFrame(
        {
            "turbine": [place.name for place in places],
            "easting_m": [place.easting_m for place in places],
            "northing_m": [place.northing_m for place in places],
            "elevation_m": [place.elevation_m for place in places],
            "speed_factor": factors,
            "hub_mean_speed_m_s": factors * hub_speed.mean(),
            "air_density_kg_m3": densities,
            "gross_mwh_per_year": gross,
            "net_mwh_per_year": net,
            "net_capacity_factor": net / (rated / len(places)),
            "basis": [place.basis for place in places],
        }
    )
    losses = _loss_table(settings, float(gross.sum()))
    gross_sum, net_sum = float(gross.sum()), float(net.sum())
    warnings = _warnings(settings, mast_height)
    rows = [
        Row(
            "hub.mean_speed_m_s", "Long-term mean wind speed at hub height", hub_speed.mean(),
            "m/s", f"long-term series from {mast_height:g} m to {turbine.hub_height_m:g} m by the "
            f"power law, exponent {exponent:.3f} measured at the mast",
        ),
        Row(
            "hub.weibull_A_m_s", "Weibull scale A at hub height", weibull.weibull_scale, "m/s",
            "maximum likelihood, calms as a point mass; for description, not for energy",
        ),
        Row(
            "hub.weibull_k", "Weibull shape k at hub height", weibull.weibull_shape, "1",
            "same fit",
        ),
        Row(
            "hub.air_density_kg_m3", "Air density at hub height", density, "kg/m3", density_basis,
        ),
        Row(
            "energy.averaging_effect", "Energy of ten-minute means over that of hourly means",
            averaging, "1", "the measured record through the curve at both steps; applied, since "
            "the curve is one of ten-minute means and the long-term series is hourly",
        ),
        Row(
            "energy.gross_mwh_per_year", "Gross energy", gross_sum, "MWh/year",
            f"sum of {len(places)} turbines, series through the curve, {HOURS_PER_YEAR:g} hours",
        ),
        Row(
            "energy.total_loss", "All losses together", float(total.loss), "1",
            "product of what each loss leaves", as_percent=True,
        ),
        Row(
            "energy.net_p50_mwh_per_year", "Net energy, P50", net_sum, "MWh/year",
            "gross energy times what all losses leave",
        ),
        Row(
            "energy.capacity_factor", "Net capacity factor", net_sum / rated, "1",
            f"of {len(places)} × {turbine.rated_power_kw:g} kW", as_percent=True,
        ),
        Row(
            "energy.sensitivity", "Energy change for a change of wind speed", sensitivity, "1",
            "per cent of energy for one per cent of speed, central difference on this series",
        ),
    ]  # fmt: skip
    largest = max(settings.losses, key=lambda loss: loss.loss, default=None)
    said = {
        "hub": f"At hub height the long-term mean is {hub_speed.mean():.2f} m/s and the air weighs "
        f"{density:.3f} kg/m³. On this series one per cent of wind speed is worth "
        f"{sensitivity:.2f} per cent of energy.",
        "turbines": f"The {len(places)} turbines would make {gross_sum:,.0f} MWh a year before "
        f"losses; the best of them, {turbines['turbine'][gross.argmax()]}, makes "
        f"{gross.max() / gross.min() - 1:.1%} more than the poorest.",
        "losses": f"All losses together take {float(total.loss):.1%}"
        + (f"; the largest is {largest.name} with {largest.loss:.1%}" if largest else "")
        + f". What is left is a net P50 of {net_sum:,.0f} MWh a year, a capacity factor of "
        f"{net_sum / rated:.1%}.",
    }
    return EnergyYield(
        curve=curve,
        hub_speed=hub_speed,
        turbines=turbines,
        losses=losses,
        staircase=_staircase(settings, gross_sum),
        frequency=frequency_table(hub_speed, np.full_like(hub_speed, np.nan)),
        outcome=Outcome("yield", rows, {"turbines": turbines, "losses": losses}, said, warnings),
    )


def _hub_density(settings: Settings, record: pd.DataFrame) -> tuple[float, str]:
    """Mean air density at the mast and hub height [kg/m3], and how it came about."""
    hub = settings.turbine.hub_height_m
    found = {
        quantity: next(
            (
                channel
                for channel in settings.mast.channels
                if channel.quantity == quantity and channel.statistic == "mean"
            ),
            None,
        )
        for quantity in ("air_temperature", "air_pressure", "relative_humidity")
    }
    temperature, pressure, humidity = found.values()
    if temperature is None or pressure is None:
        standard = float(standard_atmosphere(settings.site.elevation_m + hub)[2])
        return standard, "standard atmosphere (ISO 2533): temperature or pressure is not measured"
    assert isinstance(record.index, pd.DatetimeIndex)
    kelvin = record[temperature.name].to_numpy()
    pascal = pressure_at_height(record[pressure.name].to_numpy(), kelvin, hub - pressure.height_m)
    wet = record[humidity.name].to_numpy() if humidity is not None else np.zeros_like(kelvin)
    density = moist_air_density(kelvin, pascal, wet)
    # Months first, so that a gap in winter does not make the year's air thin.
    monthly = pd.Series(density, index=record.index).groupby(record.index.month).mean()
    told = (
        "temperature, pressure and humidity" if humidity is not None else "temperature and pressure"
    )
    return float(monthly.mean()), (
        f"IEC 61400-12-1 from measured {told}, pressure carried to {hub:g} m; mean of "
        f"{monthly.notna().sum()} calendar months"
    )


def _density_relative_to_mast(settings: Settings) -> NDArray[np.float64]:
    """Air density at each turbine over that at the mast, by the standard atmosphere [1]."""
    hub = settings.turbine.hub_height_m
    at_mast = float(standard_atmosphere(settings.site.elevation_m + hub)[2])
    elevations = np.array([place.elevation_m for place in settings.layout])
    return np.asarray(standard_atmosphere(elevations + hub)[2]) / at_mast


def _averaging_effect(
    curve: PowerCurve,
    measured: Outcome,
    settings: Settings,
    air_density: float,
) -> float:
    """Energy of the record's own interval over that of its hourly means [1]."""
    main = measured.tables["main"]["wind_speed"]
    scaled = power_law(
        main,
        measured.number("measured.height_m"),
        settings.turbine.hub_height_m,
        measured.number("measured.shear_exponent"),
    )
    assert isinstance(main.index, pd.DatetimeIndex)
    fine = pd.Series(np.asarray(scaled), index=main.index)
    hours = fine.resample("1h")
    whole = hours.count() == round(60 / settings.mast.interval_min)
    hourly = hours.mean()[whole].to_numpy()
    inside = whole.reindex(main.index.floor("1h")).to_numpy(dtype=bool)
    if not inside.any():
        return 1.0
    return float(
        np.mean(power_at(curve, fine.to_numpy()[inside], air_density))
        / np.mean(power_at(curve, hourly, air_density))
    )


def _loss_table(settings: Settings, gross: float) -> pd.DataFrame:
    """Each loss and the energy it takes from what those before it left [MWh/year]."""
    left, rows = gross, []
    for loss in settings.losses:
        rows.append((loss.group, loss.name, loss.loss, loss.varies, left * loss.loss, loss.basis))
        left -= left * loss.loss
    by_group = combine_losses_by_group(
        [loss.group for loss in settings.losses], [loss.loss for loss in settings.losses]
    )
    for group, combined in by_group.items():
        if not any(loss.group == group for loss in settings.losses):
            rows.append(
                (group, "not considered", float(combined.loss), "static", 0.0, "none stated")
            )
    return pd.DataFrame(
        rows, columns=["group", "name", "loss", "varies", "energy_mwh_per_year", "basis"]
    )


def _staircase(settings: Settings, gross: float) -> pd.DataFrame:
    """Gross energy, then what is left after each loss that takes something [MWh/year]."""
    steps, left = [("Gross", gross)], gross
    for loss in settings.losses:
        left *= 1 - loss.loss
        if loss.loss > 0:
            steps.append((loss.name, left))
    return pd.DataFrame(steps, columns=["step", "energy_mwh_per_year"])


def _warnings(settings: Settings, mast_height: float) -> list[str]:
    warnings = []
    ratio = settings.turbine.hub_height_m / mast_height
    if ratio > _HIGHEST_HUB_TO_MAST_RATIO:
        warnings.append(
            f"The hub is {ratio:.2f} times as high as the mast's main sensor; above "
            f"{_HIGHEST_HUB_TO_MAST_RATIO:g} the mast is lower than two thirds of the hub, and the "
            "profile between them is not measured."
        )
    assumed = [loss for loss in settings.losses if loss.basis.startswith("assumed")]
    if assumed:
        warnings.append(
            f"{len(assumed)} of {len(settings.losses)} losses are assumed, not computed or agreed; "
            "their basis stands in the table of losses."
        )
    for place in settings.layout:
        above = place.elevation_m - settings.site.elevation_m
        if abs(above) > _ELEVATION_WORTH_A_WORD:
            warnings.append(
                f"{place.name} stands {abs(above):.0f} m {'above' if above > 0 else 'below'} the "
                "mast: one mast speaks for such a place only with a flow model behind it."
            )
    return warnings
