"""Screening against integrals worked out by other means, and a published energy figure."""

from __future__ import annotations

import itertools
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy import integrate, stats
from scipy.special import gamma

from tests.small_study import CURVE, edit
from windkit.study.errors import StudyError
from windkit.study.folder import open_study
from windkit.study.screening import screen

IEA_15 = Path(__file__).parents[1] / "data" / "iea15mw_v1_0_rotor.csv"
POINTS = np.array([line.split(",") for line in CURVE.splitlines()[2:]], dtype=float)


def standard_density(elevation: float) -> float:
    """ISO 2533:1975, troposphere, from geometric height; its own constants."""
    height = 6_356_766.0 * elevation / (6_356_766.0 + elevation)
    temperature = 288.15 - 0.0065 * height
    pressure = 101_325.0 * (temperature / 288.15) ** (9.80665 / (0.0065 * 287.05287))
    return pressure / (287.05287 * temperature)


def energy_by_quadrature(mean_speed: float, shape: float, density: float) -> float:
    """MWh of the small study's turbine: adaptive quadrature of power times probability."""
    factor = (density / 1.225) ** (1 / 3)
    wind = stats.weibull_min(shape, scale=mean_speed / gamma(1 + 1 / shape))

    def power(speed: float) -> float:
        return float(np.interp(speed * factor, POINTS[:, 0], POINTS[:, 1], left=0.0))

    kinks = np.unique(np.clip(POINTS[:, 0] / factor, 0.0, 25.0))
    total = sum(
        integrate.quad(lambda v: power(v) * wind.pdf(v), low, high, epsabs=1e-10)[0]
        for low, high in itertools.pairwise(kinks)
    )
    return 8.760 * total


def test_energy_is_the_integral_of_curve_times_probability(small):
    found = screen(open_study(small)).outcome
    hub = 6.5 * (90 / 50) ** 0.15
    density = standard_density(300 + 90)
    assert found.number("screening.hub_mean_speed_m_s") == pytest.approx(hub, rel=1e-12)
    assert found.number("screening.air_density_kg_m3") == pytest.approx(density, rel=1e-6)
    expected = energy_by_quadrature(hub, 2.0, density)
    assert found.number("screening.gross_mwh_per_year") == pytest.approx(expected, rel=1e-8)
    assert found.number("screening.capacity_factor") == pytest.approx(
        expected / (2.0 * 8760), rel=1e-8
    )


def test_the_range_is_the_energy_at_both_ends_of_the_wind(small):
    # 80 % of a normal distribution lie within 1.28155 standard deviations (id UNC-2).
    hub, density = 6.5 * (90 / 50) ** 0.15, standard_density(390)
    expected = [
        energy_by_quadrature(hub * (1 + z * 0.12), 2.0, density) for z in (-1.28155, 1.28155)
    ]
    found = screen(open_study(small)).outcome.value("screening.gross_range_80_mwh_per_year")
    assert found == pytest.approx(expected, rel=1e-5)


def test_drivers_are_the_energy_with_one_assumption_moved(small):
    drivers = screen(open_study(small)).drivers.set_index("assumption")
    density = standard_density(390)
    hub = 6.5 * (90 / 50) ** 0.15
    for name, ends in {
        "mean wind speed ± 12%": [
            energy_by_quadrature(hub * (1 - 0.12), 2.0, density),
            energy_by_quadrature(hub * (1 + 0.12), 2.0, density),
        ],
        "shear exponent ± 0.05": [
            energy_by_quadrature(6.5 * (90 / 50) ** 0.10, 2.0, density),
            energy_by_quadrature(6.5 * (90 / 50) ** 0.20, 2.0, density),
        ],
        "Weibull shape ± 0.2": [
            energy_by_quadrature(hub, 1.8, density),
            energy_by_quadrature(hub, 2.2, density),
        ],
        "air density ± 3%": [
            energy_by_quadrature(hub, 2.0, 0.97 * density),
            energy_by_quadrature(hub, 2.0, 1.03 * density),
        ],
    }.items():
        assert drivers.loc[name].tolist() == pytest.approx(ends, rel=1e-8), name
    assert len(drivers) == 4


def test_the_stream_is_half_density_times_mean_cube(small):
    found = screen(open_study(small)).outcome
    scale = 6.5 * (90 / 50) ** 0.15 / gamma(1.5)
    expected = 0.5 * standard_density(390) * scale**3 * gamma(1 + 3 / 2)
    assert found.number("screening.stream_power_w_m2") == pytest.approx(expected, rel=1e-6)
    through_rotor = expected * np.pi * 45**2 * 8760 / 1e6
    assert found.number("screening.share_of_stream") == pytest.approx(
        found.number("screening.gross_mwh_per_year") / through_rotor, rel=1e-6
    )
    assert found.number("screening.share_of_stream") < 16 / 27


def test_the_best_power_coefficient_by_hand(small):
    # 560 kW at 7 m/s: 560e3 / (0.5 x 1.225 x pi x 45^2 x 7^3) = 0.41900, the highest point.
    found = screen(open_study(small))
    peak = found.outcome.number("screening.highest_power_coefficient")
    assert peak == pytest.approx(0.41900, abs=5e-6)
    assert (found.power_table["power_kw"] <= found.power_table["ceiling_kw"]).all()


@pytest.mark.parametrize(("mean_speed", "energy_gwh"), [(7.0, 49.551), (8.5, 66.088), (10, 78.330)])
def test_an_open_reference_turbine_makes_its_energy(small, mean_speed, energy_gwh):
    # id TUR-2: the IEA 15 MW table, linear interpolation, Rayleigh, 3 to 25 m/s, 8760 h, worked
    # out apart from this library. Hub at sea level, so that the density is the curve's.
    table = pd.read_csv(IEA_15)
    pd.DataFrame(
        {"wind_speed_m_s": table["wind_speed_ms"], "power_kw": 1000 * table["power_MW"]}
    ).to_csv(small / "data" / "curve.csv", index=False)
    for old, new in {
        "longitude_deg = -6.5\nelevation_m = 300.0": "longitude_deg = -6.5\nelevation_m = -150.0",
        "mean_wind_speed_m_s = 6.5\nheight_m = 50.0": f"mean_wind_speed_m_s = {mean_speed}\n"
        "height_m = 150.0",
        "hub_height_m = 90.0": "hub_height_m = 150.0",
        "rotor_diameter_m = 90.0": "rotor_diameter_m = 240.0",
        "rated_power_kw = 2000.0": "rated_power_kw = 15000.0",
    }.items():
        edit(small / "study.toml", old, new)
    found = screen(open_study(small)).outcome
    assert found.number("screening.air_density_kg_m3") == pytest.approx(1.225, rel=1e-7)
    assert found.number("screening.gross_mwh_per_year") == pytest.approx(
        1000 * energy_gwh, rel=2e-4
    )


def test_a_parameter_changes_the_answer(small):
    plain = screen(open_study(small)).outcome.number("screening.gross_mwh_per_year")
    windy = open_study(small, {"screening.mean_wind_speed_m_s": 7.0})
    assert screen(windy).outcome.number("screening.gross_mwh_per_year") > plain


def test_more_doubt_about_the_wind_widens_the_range_only(small):
    widths = []
    for doubt in (0.05, 0.12, 0.3, 0.5):
        study = open_study(small, {"screening.standard_uncertainty": doubt})
        found = screen(study).outcome
        low, high = found.value("screening.gross_range_80_mwh_per_year")
        assert 0 <= low < found.number("screening.gross_mwh_per_year") < high
        widths.append(high - low)
    assert widths == sorted(widths)


def grounded(small, lines: str, *, hub: float, height: float, latitude: float = 46.0):
    """The small study's screening over a kind of ground instead of with an exponent."""
    file = small / "study.toml"
    edit(file, "shear_exponent = 0.15", lines)
    edit(file, "height_m = 50.0\nweibull", f"height_m = {height}\nweibull")
    edit(file, "hub_height_m = 90.0", f"hub_height_m = {hub}")
    edit(file, "latitude_deg = 46.0", f"latitude_deg = {latitude}")
    return open_study(small)


@pytest.mark.parametrize(
    ("lines", "ratio"),
    # id SHR-3: U80/U10 of the log law over 0.0002, 0.03, 0.1 and 0.4 m (id SHR-2: classes 0 to 3).
    [
        ("roughness_class = 0.0", 1.19219),
        ("roughness_class = 1.0", 1.35796),
        ('terrain = "roughly open"', 1.45154),
        ("roughness_class = 3.0", 1.64601),
    ],
)
def test_the_ground_in_place_of_an_exponent(small, lines, ratio):
    found = screen(grounded(small, lines, hub=80.0, height=10.0))
    assert found.hub_mean_speed / 6.5 == pytest.approx(ratio, abs=1e-5)
    assert "log law over a roughness" in found.outcome.rows[0].basis
    assert "roughness length halved or doubled" in found.drivers["assumption"].tolist()


def test_the_drag_law_moves_a_figure_from_sea_to_land(small):
    # id SHR-6b: under one geostrophic wind of 10 m/s at f = 1.2e-4 1/s (latitude 55.37 deg),
    # 7.16417 m/s at 10 m over 0.0002 m go with 7.55571 m/s at 100 m over 0.03 m.
    latitude = float(np.degrees(np.arcsin(1.2e-4 / (2 * 7.292_115e-5))))
    lines = "roughness_class = 1.0\nfigure_roughness_class = 0.0"
    study = grounded(small, lines, hub=100.0, height=10.0, latitude=latitude)
    found = screen(study)
    # The law is close to proportional: 6.5 m/s in place of 7.16417.
    assert found.hub_mean_speed == pytest.approx(6.5 * 7.55571 / 7.16417, rel=5e-3)
    exact = open_study(small, {"screening.mean_wind_speed_m_s": 7.16417})
    assert screen(exact).hub_mean_speed == pytest.approx(7.55571, abs=1e-4)
    assert "for screening only" in found.outcome.rows[0].basis


@pytest.mark.parametrize(
    ("lines", "latitude", "told"),
    [
        ("shear_exponent = 0.2\nroughness_class = 1.0", 46.0, "stand side by side"),
        ("roughness_class = 1.3", 46.0, "it must be one of 0, 0.5"),
        ('terrain = "forest"', 46.0, "it must be one of sea"),
        ("figure_roughness_class = 1.0", 46.0, "write roughness_class or terrain"),
        ("roughness_class = 1.0\nfigure_roughness_class = 0.0", 2.0, "5 degrees from the equator"),
    ],
)
def test_a_ground_that_cannot_be_is_refused(small, lines, latitude, told):
    with pytest.raises(StudyError) as caught:
        screen(grounded(small, lines, hub=80.0, height=10.0, latitude=latitude))
    assert told in str(caught.value)
