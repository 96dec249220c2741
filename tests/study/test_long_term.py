"""The long-term step on records whose long term is known."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from tests.small_study import edit, make_small_study, run_steps
from windkit.study.errors import StudyError
from windkit.study.folder import open_study
from windkit.study.long_term import LongTerm, correct_to_long_term

REFERENCE, MAST = "data/far_skerry.csv", "data/mast.csv"


def table(folder: Path, name: str) -> pd.DataFrame:
    return pd.read_csv(folder / name, index_col="time", parse_dates=True)


def write(folder: Path, name: str, frame: pd.DataFrame) -> None:
    frame.to_csv(folder / name, date_format="%Y-%m-%d %H:%M", index_label="time")


def corrected(folder: Path, **overrides: object) -> LongTerm:
    run_steps(folder, "measure")
    chosen = {f"long_term.{name}": value for name, value in overrides.items()}
    return correct_to_long_term(open_study(folder, chosen))


@pytest.fixture(scope="module")
def exact_once(tmp_path_factory):
    folder = make_small_study(tmp_path_factory.mktemp("exact") / "study", scatter=0.0)
    return folder, corrected(folder)


@pytest.fixture
def exact(tmp_path):
    """A study whose mast is 1.1 times its reference, its vane 12 degrees on."""
    return make_small_study(tmp_path / "study", scatter=0.0)


def test_a_site_that_is_a_multiple_comes_back_as_that_multiple_by_all_methods(exact_once):
    folder, found = exact_once
    expected = 1.1 * table(folder, REFERENCE)["Speed10"].mean()
    assert len(found.methods) >= 6
    assert found.methods["long_term_mean_speed_m_s"].tolist() == pytest.approx(
        [expected] * len(found.methods), rel=1e-9
    )
    assert found.methods["concurrent_mean_error"].tolist() == pytest.approx(
        [0.0] * len(found.methods), abs=1e-9
    )
    assert found.outcome.number("long_term.mean_speed_m_s") == pytest.approx(expected, rel=1e-9)
    assert found.outcome.number("long_term.correlation") == pytest.approx(1.0)


def test_pairs_are_the_hours_both_have(exact_once):
    found = exact_once[1]
    assert len(found.concurrent) == 120 * 24
    ratio = found.concurrent["site"] / found.concurrent["reference"]
    assert ratio.to_numpy() == pytest.approx(1.1)


def test_the_series_follows_the_reference_hour_by_hour(exact_once):
    folder, found = exact_once
    reference = table(folder, REFERENCE).tz_localize("UTC")
    assert (found.series.index == reference.index).all()
    np.testing.assert_allclose(found.series["wind_speed"], 1.1 * reference["Speed10"], rtol=1e-9)
    turn = (found.series["wind_direction"] - reference["Direction10"]) % 360
    moving = reference["Speed10"] >= 0.5
    assert turn[moving].to_numpy() == pytest.approx(12.0, abs=0.05)
    assert turn[~moving].isna().all()  # a calm has no direction


def test_the_year_table_is_the_mean_of_each_calendar_year(exact_once):
    folder, found = exact_once
    reference = table(folder, REFERENCE)["Speed10"]
    by_hand = reference.groupby(reference.index.year).mean()
    assert found.years["year"].tolist() == [2021, 2022, 2023]
    assert found.years["hours"].tolist() == [8760, 8760, 8760]
    assert found.years["reference_mean_speed_m_s"].tolist() == pytest.approx(by_hand.tolist())
    assert found.years["site_mean_speed_m_s"].tolist() == pytest.approx((1.1 * by_hand).tolist())


@pytest.mark.parametrize(
    ("first", "last", "begins", "hours"),
    [
        ("2021-01-01", "2023-12-31 23:00", "2021-01-01 00:00", 26_280),  # three, none of them leap
        ("2021-01-01 20:00", "2023-12-31 23:00", "2021-01-01 20:00", 26_260),  # a few hours short
        ("2021-01-04", "2023-12-31 23:00", "2022-01-01 00:00", 17_520),  # three days short
        ("2021-01-01", "2023-06-30 23:00", "2021-07-01 00:00", 17_520),  # back from the end
        ("2022-02-01", "2022-08-31 23:00", "2022-02-01 00:00", 5_088),  # less than one: all of it
    ],
)
def test_the_long_term_is_whole_years_back_from_the_end(exact, first, last, begins, hours):
    write(exact, REFERENCE, table(exact, REFERENCE)[first:last])
    series = corrected(exact).series
    assert str(series.index[0])[:16] == begins
    assert len(series) == hours


def test_years_with_a_leap_day_are_whole_too(exact):
    reference = table(exact, REFERENCE)
    moved = reference.copy()
    moved.index = moved.index + pd.DateOffset(years=3)  # 2024-01-01 on: 2024 is a leap year
    both = pd.concat([reference, moved[~moved.index.duplicated()]])
    write(exact, REFERENCE, both[:"2024-12-31 23:00"].asfreq("h").dropna())
    assert str(corrected(exact).series.index[0])[:16] == "2021-01-01 00:00"


def test_an_hour_on_another_clock_is_the_same_hour(exact_once, exact):
    mast = table(exact, MAST)
    mast.index = mast.index + pd.Timedelta(hours=6)  # stamps at the end, five hours east
    write(exact, MAST, mast)
    edit(
        exact / "study.toml",
        'utc_offset_h = 0.0\ninterval_min = 60\nstamp = "start"\ncalm_below_m_s = 0.5\n'
        'direction_reference = "true"\nmain_wind_speed = "speed_60"',
        'utc_offset_h = 5.0\ninterval_min = 60\nstamp = "end"\ncalm_below_m_s = 0.5\n'
        'direction_reference = "true"\nmain_wind_speed = "speed_60"',
    )
    pd.testing.assert_frame_equal(corrected(exact).series, exact_once[1].series)


def test_the_sampling_part_is_the_published_closed_form(finished_once):
    # Taylor et al. 2004 (id MCP-1): s sqrt(r2/N_reference + (1 - r2)/N_site).
    found = correct_to_long_term(open_study(finished_once, {"long_term.yearly_variability": 0.06}))
    site = table(finished_once, MAST)["Speed60"]
    reference = table(finished_once, REFERENCE)["Speed10"].reindex(site.index)
    r2 = np.corrcoef(site, reference)[0, 1] ** 2
    expected = 0.06 * np.sqrt(r2 / (26_280 / 8766) + (1 - r2) / (2880 / 8766))
    assert found.parts["standard_uncertainty"].iloc[0] == pytest.approx(expected, rel=1e-3)
    assert found.outcome.number("long_term.yearly_variability") == 0.06


def test_the_total_is_the_quadrature_of_the_parts_and_the_interval_is_normal(finished_once):
    found = correct_to_long_term(open_study(finished_once))
    total = float(np.sqrt((found.parts["standard_uncertainty"] ** 2).sum()))
    assert found.outcome.number("long_term.standard_uncertainty") == pytest.approx(total)
    mean = found.outcome.number("long_term.mean_speed_m_s")
    low, high = found.outcome.value("long_term.interval_80_m_s")
    assert [low, high] == pytest.approx(  # id UNC-2: 1.28155 for 10 and 90 %
        [mean * (1 - 1.28155 * total), mean * (1 + 1.28155 * total)], rel=1e-5
    )


def test_a_short_campaign_is_told_and_costs_certainty(finished_once, exact_once):
    found = correct_to_long_term(open_study(finished_once))
    assert any("4 of 12 calendar months" in warning for warning in found.outcome.warnings)
    season = found.parts.set_index("part").loc["season", "standard_uncertainty"]
    assert season > exact_once[1].parts.set_index("part").loc["season", "standard_uncertainty"]
    assert exact_once[1].parts.set_index("part").loc["season", "standard_uncertainty"] < 1e-9


def test_a_short_reference_falls_back_to_the_published_variability(exact_once):
    # Raftery et al. 1999 (id MCP-3): 6 %, where fewer than five whole years show their own.
    assert exact_once[1].outcome.number("long_term.yearly_variability") == 0.06
    assert any("3.0 years" in warning for warning in exact_once[1].outcome.warnings)


def test_a_long_reference_shows_its_own_variability(exact):
    # Seven years, each the year 2021 times its own factor; the site is 1.1 times that.
    base = table(exact, REFERENCE)[:"2021-12-31 23:00"]
    factors = {2017: 1.06, 2018: 0.97, 2019: 1.0, 2021: 0.93, 2022: 1.0, 2023: 1.02}
    parts = []
    for year, factor in factors.items():
        part = base.copy()
        part.index = part.index + pd.DateOffset(years=year - 2021)
        part["Speed10"] = part["Speed10"] * factor
        parts.append(part)
    reference = pd.concat(parts)
    write(exact, REFERENCE, reference)
    during = reference["2022-03-01":"2022-06-28"]
    mast = table(exact, MAST)
    mast["Speed60"] = 1.1 * during["Speed10"].to_numpy()
    mast["Speed40"] = 0.9 * mast["Speed60"]
    write(exact, MAST, mast)
    values = np.array(list(factors.values()))
    found = corrected(exact)
    assert found.outcome.number("long_term.yearly_variability") == pytest.approx(
        values.std(ddof=1) / values.mean(), rel=1e-6
    )
    assert found.years["year"].tolist() == list(factors)


def test_the_method_is_chosen_beforehand_and_changes_the_answer(finished_once):
    means = {}
    for method in ("ratio", "linear_regression", "variance_ratio"):
        found = correct_to_long_term(
            open_study(finished_once, {"long_term.method": method, "long_term.by_sector": False})
        )
        assert found.chosen == f"{method.replace('_', ' ')}, all directions"
        row = found.methods[found.methods["chosen"]]
        assert row["method"].tolist() == [found.chosen]
        means[method] = found.outcome.number("long_term.mean_speed_m_s")
        assert means[method] == pytest.approx(row["long_term_mean_speed_m_s"].iloc[0])
    assert len(set(means.values())) == 3


def test_the_three_lines_by_hand(finished_once):
    site = table(finished_once, MAST)["Speed60"]
    reference = table(finished_once, REFERENCE)["Speed10"]
    x = reference.reindex(site.index)
    slope, intercept = np.polyfit(x, site, 1)
    lines = {
        "ratio, all directions": reference * site.mean() / x.mean(),
        "variance ratio, all directions": (
            site.mean() + site.std() / x.std() * (reference - x.mean())
        ).clip(lower=0),
        "linear regression, all directions": slope * reference + intercept,
    }
    methods = correct_to_long_term(open_study(finished_once)).methods.set_index("method")
    for label, line in lines.items():
        # The regression is drawn with its scatter; its mean wanders by scatter over root of n.
        tolerance = 0.02 if label.startswith("linear") else 1e-9
        assert methods.loc[label, "long_term_mean_speed_m_s"] == pytest.approx(
            line.mean(), abs=tolerance
        )


def test_no_overlap_is_refused_with_both_spans(small):
    reference = table(small, REFERENCE)
    write(small, REFERENCE, reference["2022-07-01":])
    with pytest.raises(
        StudyError,
        match=r"(?i)reference 'Far Skerry' and the mast share 0 hours; the mast covers 2022-03-01 "
        r"to 2022-06-28, the reference 2022-07-01 to 2023-12-31.*at least 720 concurrent hours"
        r".*Check utc_offset_h",
    ):
        corrected(small)


def test_too_little_overlap_is_refused(small):
    write(small, REFERENCE, table(small, REFERENCE)["2022-06-01":])
    with pytest.raises(StudyError, match="share 672 hours"):
        corrected(small)


def test_the_step_waits_for_the_one_before_it(small):
    with pytest.raises(StudyError, match=r"step 'measure' has left no artifact yet.*Each step"):
        correct_to_long_term(open_study(small))


def test_the_blends_parts_are_its_uncertainty_and_a_short_campaign_costs_more(small):
    # UNC-6: independent parts add in quadrature; what is claimed is what its parts make.
    edit(small / "study.toml", 'method = "variance_ratio"', 'method = "blend"')
    run_steps(small, "screen", "measure")
    long = correct_to_long_term(open_study(small))
    total = long.outcome.number("long_term.standard_uncertainty")
    assert np.sqrt((long.parts["standard_uncertainty"] ** 2).sum()) == pytest.approx(total)
    assert long.parts["share"].sum() == pytest.approx(1.0)
    low, high = long.outcome.value("long_term.interval_80_m_s")
    assert low < long.outcome.number("long_term.mean_speed_m_s") < high

    mast = small / "data" / "mast.csv"
    lines = mast.read_text().splitlines()
    mast.write_text("\n".join(lines[: 1 + 40 * 24]) + "\n")  # forty days of the same record
    run_steps(small, "measure")
    short = correct_to_long_term(open_study(small))
    assert short.outcome.number("long_term.standard_uncertainty") > total
    assert "short campaign" in set(short.parts["part"])
    assert any("no basis for financing" in warning for warning in short.outcome.warnings)
