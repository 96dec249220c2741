"""The demo study's data are what the generator says, and its truth holds against other sums."""

import gzip
import hashlib
import importlib
import json
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from windkit.kernels.air import moist_air_density
from windkit.kernels.curve import PowerCurve, betz_check, mean_power_table, power_at
from windkit.study.ledger import LEDGER_COLUMNS, read_ledger
from windkit.study.reading import read_station
from windkit.study.settings import parse_settings, read_settings

DEMO = Path(__file__).parents[2] / "data_demo"
TRUTH = json.loads((DEMO / "truth.json").read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def generator():
    sys.path.insert(0, str(DEMO))
    try:
        yield importlib.import_module("make_demo")
    finally:
        sys.path.remove(str(DEMO))


@pytest.fixture(scope="module")
def weather(generator):
    return generator.make_weather()


@pytest.fixture(scope="module")
def settings():
    return parse_settings(read_settings(DEMO / "study.toml"))


@pytest.fixture(scope="module")
def mast(settings):
    return read_station(settings.mast, DEMO).frame


@pytest.fixture(scope="module")
def references(settings):
    return {each.name: read_station(each, DEMO).frame for each in settings.references}


@pytest.fixture(scope="module")
def curve():
    table = pd.read_csv(DEMO / "data" / "curve.csv")
    return PowerCurve(table["wind_speed_m_s"], table["power_kw"] * 1000.0)


def during(frame, channel, word):
    """Rows of one blemish of the truth."""
    row = next(b for b in TRUTH["blemishes"] if b["channel"] == channel and word in b["what"])
    stamps = frame.index.tz_convert("UTC").tz_localize(None)
    return frame[(stamps >= row["from_utc"]) & (stamps < row["to_utc"])]


# --- remaking ----------------------------------------------------------------------------------


def test_the_generator_remakes_the_committed_text_and_truth(generator, weather):
    texts = generator.make_texts(weather)
    for name, text in texts.items():
        committed = (DEMO / "data" / name).read_bytes()
        committed = gzip.decompress(committed) if name.endswith(".gz") else committed
        assert text == committed, f"{name} is not what make_demo.py makes; run it again"
        assert hashlib.sha256(committed).hexdigest() == TRUTH["sha256_of_text"][name]
    assert json.loads(json.dumps(generator.make_truth(weather, texts))) == TRUTH


def test_packed_files_carry_no_time_and_stay_small():
    files = list((DEMO / "data").iterdir())
    for file in files:
        if file.suffix == ".gz":
            assert file.read_bytes()[4:8] == b"\0\0\0\0"
        assert file.stat().st_size < 3_000_000
    assert sum(file.stat().st_size for file in files) < 5_500_000


# --- truth against other sums ------------------------------------------------------------------


def test_curve_follows_its_closed_form_below_the_knee(curve):
    # By hand: 0.455 (1 - (2.55/8)^4) of the stream through 107 m; the knee takes less than 0.1 %.
    stream = 0.5 * 1.225 * np.pi * 53.5**2 * np.array([4.0, 6.0, 8.0]) ** 3
    coefficient = 0.455 * (1 - (2.55 / np.array([4.0, 6.0, 8.0])) ** 4)
    np.testing.assert_allclose(power_at(curve, [4.0, 6.0, 8.0]), coefficient * stream, rtol=4e-3)
    assert curve.rated_power == 2.9e6
    peak = betz_check(curve, 107.0)
    assert 0.44 < peak.power_coefficient < 0.46


def test_thrust_and_power_coefficients_agree_with_momentum():
    # PWR-1: no rotor gives more than 16/27 nor, by momentum theory, less thrust than its power.
    table = pd.read_csv(DEMO / "data" / "curve.csv")
    stream = 0.5 * 1.225 * np.pi * 53.5**2 * table["wind_speed_m_s"] ** 3 / 1000
    assert (table["power_kw"] / stream < table["thrust_coefficient"]).all()
    assert table["thrust_coefficient"].between(0.0, 8 / 9).all()


def test_true_energy_against_the_library_and_against_a_table(curve, generator, weather):
    # Two codes that share nothing: the generator's sum, and the kernels over the same hidden wind.
    density = generator.hub_air_density(weather)
    hub = weather.speed_at(100.0)
    stated = TRUTH["energy"]["gross_mwh_per_year"]["T2"]
    thinner = np.exp(9.80665 * 3.0 / (287.05 * 281.0))  # T2 stands 3 m below the mast
    summed = power_at(curve, hub, density * thinner).mean() * 8760 / 1e6
    assert summed == pytest.approx(stated, rel=1e-5)
    # A histogram at the mean density loses the link of density and speed: well under a percent.
    edges = np.arange(0.0, 40.01, 0.25)
    share = np.histogram(hub, edges)[0] / hub.size
    tabled = mean_power_table(curve, edges, share, air_density=density.mean()) * 8760 / 1e6
    assert tabled == pytest.approx(stated, rel=5e-3)
    site = sum(TRUTH["energy"]["gross_mwh_per_year"].values())
    assert site == pytest.approx(TRUTH["energy"]["site_gross_mwh_per_year"], abs=0.3)


def test_true_density_against_the_standard_formula(generator, weather):
    # AIR-3, AIR-4: the IEC 61400-12-1 moist-air formula; it and Magnus' formula agree to 1.5e-3.
    temperature = weather.temperature - 0.0065 * 24.0
    pressure = (
        100
        * weather.pressure
        * np.exp(-9.80665 * 92.0 / (287.05 * (weather.temperature + 0.0065 * 22)))
    )
    standard = moist_air_density(temperature, pressure, weather.relative_humidity / 100)
    assert generator.hub_air_density(weather).mean() == pytest.approx(standard.mean(), abs=1.5e-3)
    assert TRUTH["long_term"]["hub_air_density_kg_m3"] == pytest.approx(standard.mean(), abs=1.5e-3)


def test_truth_of_the_wind(weather):
    long_term, campaign = TRUTH["long_term"], TRUTH["campaign"]
    years = long_term["yearly_mean_speed_80_m_m_s"]
    assert len(years) == 20
    days = [366 if int(year) % 4 == 0 else 365 for year in years]
    weighted = np.average(list(years.values()), weights=days)
    assert weighted == pytest.approx(long_term["mean_speed_80_m_m_s"], abs=1e-3)
    assert 0.03 < long_term["yearly_variability"] < 0.07
    assert 1.03 < campaign["ratio_to_long_term"] < 1.08
    carried = long_term["mean_speed_80_m_m_s"] * (100 / 80) ** long_term["shear_exponent_of_means"]
    assert carried == pytest.approx(long_term["mean_speed_hub_m_s"], rel=1e-4)


# --- the study reads it ------------------------------------------------------------------------


def test_every_channel_lies_in_the_range_of_its_declared_unit(settings, mast, references):
    # Plausible ranges at a mid-latitude site, common practice; a wrong unit leaves all of them.
    ranges = {
        "wind_speed": (0.0, 60.0),
        "wind_from_direction": (0.0, 360.0),
        "air_temperature": (250.0, 312.0),
        "air_pressure": (90_000.0, 106_000.0),
        "relative_humidity": (0.15, 1.0),
    }
    stations = [(settings.mast, mast)]
    stations += [(settings.reference(name), frame) for name, frame in references.items()]
    for station, frame in stations:
        for channel in station.channels:
            values = frame[channel.name].dropna()
            lowest, highest = ranges[channel.quantity]
            outside = ((values < lowest) | (values > highest)).sum()
            spikes = {"speed_80_b": 1, "speed_80_b_max": 1}.get(channel.name, 0)
            assert outside == spikes, f"{station.name}, {channel.name}"


def test_times_of_the_records(mast, references):
    # 14 months on the logger's clock, which is an hour before UTC; ends become starts.
    assert mast.index[0] == pd.Timestamp("2022-10-31 23:00", tz="UTC")
    assert mast.index[-1] == pd.Timestamp("2023-12-31 22:50", tz="UTC")
    outage = round(115.5 * 6)  # 4 days 19.5 hours of ten-minute intervals
    assert len(mast) == 426 * 144 - outage
    for frame in references.values():
        assert frame.index[0] == pd.Timestamp("2004-01-01 00:00", tz="UTC")
        assert frame.index[-1] == pd.Timestamp("2023-12-31 23:00", tz="UTC")
    assert len(references["Grid node M12"]) == 175_320  # 20 years with five leap days
    assert 0.99 < len(references["Port Ambrel"]) / 175_320 < 0.998


def test_references_follow_the_mast_as_far_as_intended(mast, references):
    free = mast["speed_80_a"].where((mast["speed_80_a"] > 0.3) & (mast["speed_80_a"] < 40))
    hourly = free.resample("h").mean()
    station = hourly.corr(references["Port Ambrel"]["speed_10"])
    grid = hourly.corr(references["Grid node M12"]["speed_100"])
    assert 0.75 < station < 0.81
    assert 0.85 < grid < 0.89
    # No clock error is laid in: the hour itself correlates best.
    for lag in (-1, 1):
        assert hourly.corr(references["Grid node M12"]["speed_100"].shift(lag)) < grid


def test_station_has_its_calms_its_tens_and_its_break(references, weather):
    station = references["Port Ambrel"]
    calm = station["speed_10"] == 0.0
    assert 0.01 < calm.mean() < 0.05
    assert (station["direction_10"] % 10 == 0).all()
    truth = pd.Series(weather.speed, weather.time.tz_localize("UTC")).resample("h").mean()
    yearly = (
        station["speed_10"].groupby(station.index.year).mean()
        / truth.groupby(truth.index.year).mean()
    )
    assert yearly.loc[2012:].mean() / yearly.loc[:2010].mean() == pytest.approx(0.95, abs=0.02)


def test_mast_blemishes_are_where_the_truth_says(mast):
    ice = during(mast, "speed_80_a", "ice")
    assert ice["speed_80_a"].dropna().eq(0.27).all()
    assert ice["speed_80_a_sd"].dropna().eq(0.0).all()
    assert ice["temperature_76"].max() < 273.15
    for word in ("stuck vane, sd", "ice"):
        vane = during(mast, "direction_58", word)["direction_58"].dropna()
        assert len(vane) > 280
        assert vane.eq(vane.iloc[0]).all()
    assert during(mast, "speed_80_b", "spike")["speed_80_b"].tolist() == [75.3]
    assert during(mast, "temperature_76", "plug")["temperature_76"].isna().all()
    assert during(mast, "*", "outage").empty


def test_the_60_m_cup_drifts_and_the_shadows_show(mast):
    pair = (mast["speed_60"] / mast["speed_80_b"]).where(mast["speed_80_b"].between(5, 30))
    free = pair.where(mast["direction_78"].between(190, 270))
    assert free["2023-12"].mean() / free["2022-12"].mean() == pytest.approx(0.965, abs=0.012)
    ratio = (mast["speed_80_a"] / mast["speed_80_b"]).where(mast["speed_80_b"].between(5, 30))
    behind_mast = {
        "a": mast["direction_78"].between(130, 143),
        "b": mast["direction_78"].between(310, 323),
    }
    assert ratio[behind_mast["a"]].median() < 0.92
    assert ratio[behind_mast["b"]].median() > 1.08


def test_constant_calibration_errors_can_be_seen_against_the_truth(mast, weather):
    truth = pd.DataFrame(
        {height: weather.speed_at(height) for height in (80.0, 40.0)},
        index=weather.time.tz_localize("UTC"),
    ).reindex(mast.index)
    free = mast["direction_78"].between(200, 260) & mast["speed_80_a"].between(6, 30)
    for channel, height in (("speed_80_a", 80.0), ("speed_80_b", 80.0), ("speed_40", 40.0)):
        error = mast.loc[free, channel].mean() / truth.loc[free, height].mean() - 1
        laid_in = TRUTH["instruments"]["calibration_error"][channel]
        assert error == pytest.approx(laid_in, abs=1e-3)


def test_ledger_names_channels_and_counts_values(settings, mast):
    ledger = read_ledger(DEMO / "ledger.csv")
    assert tuple(ledger.columns) == LEDGER_COLUMNS
    channels = {channel.name for channel in settings.mast.channels}
    assert set(ledger["channel"]) <= channels
    for row in ledger.to_dict("records"):
        inside = (mast.index >= row["from"]) & (mast.index < row["to"])
        assert mast.loc[inside, row["channel"]].notna().sum() == row["count"]
    assert (ledger["decision"] == "accepted").all()


def test_stated_losses_and_layout_are_those_of_the_truth(settings):
    kept = np.prod([1 - loss.loss for loss in settings.losses])
    energy = TRUTH["energy"]
    net = energy["site_net_mwh_per_year_if_losses_are_as_stated"]
    assert net / energy["site_gross_mwh_per_year"] == pytest.approx(kept, rel=1e-5)
    assert set(energy["gross_mwh_per_year"]) == {place.name for place in settings.layout}
