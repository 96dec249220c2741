"""What the measured data say, against figures worked out by hand on records made for it."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from tests.small_study import edit
from windkit.study.errors import StudyError
from windkit.study.folder import open_study
from windkit.study.measured import Measured, examine_record, load_record
from windkit.study.measured_words import warnings_of
from windkit.study.running import check_inputs
from windkit.study.stations import ChannelSettings

#: Off, so that a record made for one figure is not judged for its looks.
NO_CHECKS = "[checks]\nmasking_rules = []\n\n[turbine]"


def with_mast(folder: Path, speed: np.ndarray, start: str = "2022-01-01", **columns) -> None:
    """Put an hourly record of that speed in the place of the mast's."""
    rng = np.random.default_rng(1)
    count = len(speed)
    frame = pd.DataFrame(
        {
            "Speed60": speed,
            "Speed40": speed * 0.9,
            "Direction58": np.round(rng.uniform(0, 359.9, count), 1),
            "Temperature5": np.round(10 + rng.normal(0, 2, count), 2),
            "Pressure5": np.round(980 + rng.normal(0, 3, count), 1),
            **columns,
        },
        index=pd.date_range(start, periods=count, freq="h", name="time"),
    )
    frame.to_csv(folder / "data" / "mast.csv", date_format="%Y-%m-%d %H:%M")
    edit(folder / "study.toml", "[turbine]", NO_CHECKS)


def measured(folder: Path) -> Measured:
    study = open_study(folder)
    return examine_record(study, load_record(study))


def around(mean: float, count: int, seed: int = 3) -> np.ndarray:
    """Values of that exact mean, none like its neighbour."""
    noise = np.random.default_rng(seed).uniform(-1.5, 1.5, count)
    return mean + noise - noise.mean()


def test_months_weigh_the_same_whatever_their_length(small):
    # January 31 days at 4 m/s, February 28 days at 6: plain (31 x 4 + 28 x 6)/59 = 4.9492 m/s,
    # mean of the two months 5 m/s.
    with_mast(small, np.concatenate([around(4.0, 31 * 24), around(6.0, 28 * 24)]))
    found = measured(small)
    assert found.outcome.number("measured.mean_speed_m_s") == pytest.approx(292 / 59, rel=1e-9)
    assert found.outcome.number("measured.mean_of_months_m_s") == pytest.approx(5.0, rel=1e-9)
    assert found.monthly["speed_60"].tolist() == pytest.approx([4.0, 6.0])
    assert found.outcome.number("measured.years") == pytest.approx(59 / 365.25)
    assert any("2 of 12 calendar months" in warning for warning in found.outcome.warnings)


def test_the_exponent_is_that_of_the_means_at_both_heights(small):
    # 40 m over 60 m is 0.9: alpha = ln(1/0.9)/ln(60/40) = 0.25986.
    with_mast(small, around(6.0, 2000))
    found = measured(small)
    expected = np.log(1 / 0.9) / np.log(1.5)
    assert found.outcome.number("measured.shear_exponent") == pytest.approx(expected, rel=1e-9)
    assert found.heights["height_m"].tolist() == [60.0, 40.0]


def test_the_profile_stands_on_hours_that_all_heights_share(small):
    speed = around(6.0, 1000)
    speed[:500] += 4.0
    low = speed * 0.9
    low[:500] = np.nan  # the lower cup missed the windy half
    with_mast(small, speed, Speed40=low)
    found = measured(small)
    assert found.heights["count"].tolist() == [500, 500]
    ratio = found.heights["mean_speed_m_s"].iloc[1] / found.heights["mean_speed_m_s"].iloc[0]
    assert ratio == pytest.approx(0.9, rel=1e-9)


def test_one_height_alone_is_an_assumption_with_a_warning(small):
    text = (small / "study.toml").read_text()
    start = text.index('[[mast.channels]]\nname = "speed_40"')
    stop = text.index('[[mast.channels]]\nname = "direction_58"')
    (small / "study.toml").write_text(text[:start] + text[stop:])
    found = measured(small)
    assert found.outcome.number("measured.shear_exponent") == pytest.approx(1 / 7)
    assert any("measured at 60 m only" in warning for warning in found.outcome.warnings)


def test_a_calm_is_below_the_threshold_and_counts_in_every_total(small):
    speed = around(6.0, 1000)
    speed[100:130] = np.linspace(0.1, 0.4, 30)
    speed[200:210] = 0.5  # at the threshold: not below it
    with_mast(small, speed)
    found = measured(small)
    assert found.outcome.number("measured.calm_share") == pytest.approx(0.030)
    assert found.frequency.share.sum() + found.frequency.undirected.sum() == pytest.approx(1.0)
    assert np.isnan(found.main_direction[100:130]).all()
    assert np.isfinite(found.main_direction[200:210]).all()
    assert found.outcome.number("measured.mean_speed_m_s") == pytest.approx(speed.mean())


def test_recovery_is_values_over_intervals_and_warns_below_ninety_per_cent(small):
    speed = around(6.0, 1000)
    speed[300:412] = np.nan
    with_mast(small, speed)
    found = measured(small)
    assert found.outcome.number("measured.recovery") == pytest.approx(0.888)
    assert any("Recovery of speed_60 is 88.8%" in warning for warning in found.outcome.warnings)


def test_every_row_is_kept_or_listed(small):
    speed = around(6.0, 1000)
    with_mast(small, speed)
    file = small / "data" / "mast.csv"
    lines = file.read_text().splitlines()
    lines.insert(10, lines[9])  # one stamp twice
    del lines[500:520]  # twenty hours without a row
    file.write_text("\n".join(lines) + "\n")
    edit(
        small / "study.toml",
        'main_wind_speed = "speed_60"',
        'repeated_stamps = "keep_first"\nmain_wind_speed = "speed_60"',
    )
    counts = measured(small).rows_table.set_index("rows")["count"]
    assert counts["read from the files"] == 981
    assert counts["kept"] == 980
    assert counts["set aside: stamp stands twice, first row kept"] == 1
    assert counts["intervals between first and last without a row"] == 20


def test_turbulence_is_spread_over_mean_by_whole_metres_per_second(small):
    # Spread 8 % and 12 % of the mean in turn: mean 0.10, standard deviation 0.02 with n - 1,
    # representative 0.10 + 1.28 x 0.02 (IEC 61400-1, the 90 % value).
    speed = np.tile(np.array([4.8, 5.3, 5.2, 4.6]), 250)
    spread = speed * np.tile(np.repeat([0.08, 0.12], 4), 125)
    with_mast(small, speed, Sd60=spread)
    edit(
        small / "study.toml",
        '[[mast.channels]]\nname = "speed_40"',
        '[[mast.channels]]\nname = "sd_60"\ncolumn = "Sd60"\nquantity = "wind_speed"\n'
        'statistic = "sd"\nheight_m = 60.0\nunit = "m/s"\n\n'
        '[[mast.channels]]\nname = "speed_40"',
    )
    table = measured(small).turbulence
    assert table["wind_speed_m_s"].tolist() == [5.0]
    assert table["count"].tolist() == [1000]
    assert table["mean"].iloc[0] == pytest.approx(0.10, abs=1e-9)
    sd = 0.02 * np.sqrt(1000 / 999)
    assert table["representative"].iloc[0] == pytest.approx(0.10 + 1.28 * sd, rel=1e-6)


def test_a_persons_decision_is_applied_and_counted(small):
    before = measured(small)
    with (small / "ledger.csv").open("a") as stream:
        stream.write(
            "speed_60,2022-03-10T00:00:00Z,2022-03-12T00:00:00Z,48,manual,ice,,accepted,A. R.,\n"
        )
    after = measured(small)
    expected = before.outcome.number("measured.recovery") - 48 / 2880
    assert after.outcome.number("measured.recovery") == pytest.approx(expected)
    assert "1 of them decided by people" in after.outcome.said["spans"]


def test_the_weibull_fit_finds_the_figures_it_was_drawn_with(small):
    speed = 7.0 * np.random.default_rng(8).weibull(2.2, 8000) + 0.0
    with_mast(small, np.maximum(speed, 0.51), start="2021-06-01")
    found = measured(small).outcome
    # Standard errors of maximum likelihood: about 0.78 k/sqrt(n) and 1.05 A/(k sqrt(n)).
    assert found.number("measured.weibull_k") == pytest.approx(2.2, abs=4 * 0.78 * 2.2 / 8000**0.5)
    assert found.number("measured.weibull_A_m_s") == pytest.approx(
        7.0, abs=4 * 1.05 * 7 / (2.2 * 8000**0.5)
    )


@pytest.mark.parametrize("station", ["mast", "references"])
@pytest.mark.parametrize(
    ("minutes", "words"),
    [
        ("1440", "interval_min is 1440; stations with intervals above 60 minutes are not supp"),
        ("25", "interval_min is 25; an hourly mean needs a whole number of intervals"),
    ],
)
def test_intervals_that_the_workbooks_cannot_pair_are_refused_at_load(
    small, station, minutes, words
):
    file = small / "study.toml"
    head, mark, tail = file.read_text().partition(f"[{station}]")
    tail = tail.replace("interval_min = 60", f"interval_min = {minutes}", 1)
    file.write_text(head + mark + tail)
    with pytest.raises(StudyError) as met:
        check_inputs(open_study(small))
    said = " ".join(str(met.value).replace(". ", "; ").split())
    assert station in said
    assert words.lower() in said.lower()


def test_the_worth_table_stands_on_the_studys_own_speed(small):
    found = measured(small)
    base = found.worth.set_index("rule").loc["all rules"]
    assert base["mean_speed"] == pytest.approx(found.outcome.number("measured.mean_speed_m_s"))


def test_a_count_that_the_record_does_not_bear_out_is_told(small):
    with (small / "ledger.csv").open("a") as stream:
        for count in ("50", "0"):  # 0 stands for unknown
            stream.write(
                "speed_60,2022-03-10T00:00:00Z,2022-03-12T00:00:00Z,"
                f"{count},manual,ice,,accepted,A. R.,\n"
            )
    said = measured(small).outcome.said["spans"]
    assert said.endswith("speed_60 from 2022-03-10 (50 written, 48 counted).")


def test_warnings_of_north_and_months_say_what_follows():
    months = pd.Series(np.full(12, 8.0), index=range(1, 13))
    north = pd.DataFrame({"vane": ["d"], "against": ["P"], "difference_deg": [-10.3]})
    main = ChannelSettings(
        name="s", column="S", quantity="wind_speed", statistic="mean", height_m=80.0, unit="m/s"
    )
    clock = pd.DataFrame(columns=["reference", "median_lag_hours"])
    said = warnings_of(months, 8.2, 8.0, 1.0, main, north, clock)
    assert said[0].endswith("pairs hours, so the months' weights do not enter the energy.")
    assert said[1].endswith("not itself used for the energy, but for sectors and the rose.")
