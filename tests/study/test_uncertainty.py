"""The spread of the answer, against published and hand-worked combinations."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hand_made import save_long_term, save_measured, save_yield

from tests.small_study import edit
from windkit.study.folder import open_study
from windkit.study.uncertainty import Uncertainty, assess_uncertainty


def assessed(
    folder,
    stated: list[tuple[str, str, float, str]] = (),
    *,
    long_term: float = 0.0,
    yearly: float = 0.0,
    p50: float = 100.0,
    sensitivity: float = 1.0,
    way_up: float = 0.0,
    reason: str = "",
) -> Uncertainty:
    """The last step on hand-made figures; stated causes are (group, of, value, varies)."""
    file = folder / "study.toml"
    text = file.read_text().split("[[uncertainties]]")[0]
    for number, (group, of, value, varies) in enumerate(stated):
        text += f'[[uncertainties]]\ngroup = "{group}"\nname = "cause {number}"\nof = "{of}"\n'
        text += f'standard_uncertainty = {value}\nvaries = "{varies}"\nbasis = "by hand"\n'
        text += f'reason_over_computed = "{reason}"\n' if reason else ""
    file.write_text(text)
    save_measured(folder)
    save_long_term(folder, standard_uncertainty=long_term, yearly_variability=yearly)
    save_yield(folder, p50=p50, sensitivity=sensitivity, way_up=way_up)
    return assess_uncertainty(open_study(folder))


def test_one_ten_and_twenty_years(small):
    # id UNC-5: 8 % static and 6 % a year give 10.0, 8.2219 and 8.1117 % for 1, 10 and 20 years,
    # and P90/P50 0.871845, 0.894632, 0.896044.
    found = assessed(small, long_term=0.08, yearly=0.06)
    assert found.levels["years"].tolist() == [1, 10, 20]
    assert found.levels["standard_uncertainty"].tolist() == pytest.approx(
        [0.100, 0.082219, 0.081117], abs=1e-6
    )
    assert found.levels["P90"].tolist() == pytest.approx([87.1845, 89.4632, 89.6044], abs=1e-3)
    assert found.levels["P50"].tolist() == [100.0] * 3


def test_levels_of_a_normal_distribution(small):
    # id UNC-4: P50 100, 10 %: P75, P90, P95, P99 = 93.2551, 87.1845, 83.5515, 76.7365.
    found = assessed(small, long_term=0.08, yearly=0.06)
    one_year = found.level_table.loc[1]
    assert one_year.tolist() == pytest.approx([100, 93.2551, 87.1845, 83.5515, 76.7365], abs=1e-4)
    assert found.outcome.number("exceedance.1.P99_mwh_per_year") == pytest.approx(76.7365, abs=1e-4)


def test_a_published_table_of_causes(small):
    # id UNC-1: Jain 2011, table 8-8: wind causes of 5, 3, 3 and 2 % count 1.5 times, energy causes
    # of 0.3, 0.6, 1.7 and 1.0 % once; root-sum-square 10.5 %. Here 3 % is the long-term step's.
    wind = [
        ("measurement", 0.05),
        ("horizontal_extrapolation", 0.03),
        ("vertical_extrapolation", 0.02),
    ]
    energy = [0.003, 0.006, 0.017, 0.010]
    found = assessed(
        small,
        [(group, "wind_speed", value, "static") for group, value in wind]
        + [("plant_performance", "energy", value, "static") for value in energy],
        long_term=0.03,
        sensitivity=1.5,
    )
    assert found.outcome.number("uncertainty.static") == pytest.approx(0.105, abs=5e-4)
    assert found.outcome.number("uncertainty.yearly") == 0.0
    in_energy = found.parts.set_index("name")["energy_standard_uncertainty"]
    assert in_energy["cause 0"] == pytest.approx(0.075)
    assert in_energy["cause 5"] == 0.017


def test_the_parts_add_up_to_the_ten_year_variance(small):
    # By hand: static 0.04^2 + (1.8 x 0.02)^2 = 0.002896; a tenth of (1.8 x 0.06)^2 = 0.0011664.
    found = assessed(
        small,
        [("plant_performance", "energy", 0.04, "static")],
        long_term=0.02,
        yearly=0.06,
        sensitivity=1.8,
    )
    total = 0.002896 + 0.0011664
    shares = found.parts.set_index("name")["share_of_ten_year_variance"]
    assert shares.sum() == pytest.approx(1.0)
    assert shares["cause 0"] == pytest.approx(0.0016 / total)
    assert shares["windiness of one year"] == pytest.approx(0.0011664 / total)
    assert found.totals["mean of ten years"] == pytest.approx(np.sqrt(total))
    assert found.totals["one year"] == pytest.approx(np.sqrt(0.002896 + 0.011664))


def test_what_halving_a_cause_is_worth_by_hand(small):
    found = assessed(
        small, [("plant_performance", "energy", 0.04, "static")], long_term=0.03, yearly=0.0
    )
    gain = found.narrowing.set_index("halved")["gain_mwh_per_year"]
    # Spread 5 %; halving the 4 leaves root(0.02^2 + 0.03^2), halving the 3 root(0.04^2 + 0.015^2).
    assert gain["cause 0"] == pytest.approx(128.155 * (0.05 - np.sqrt(0.0013)), abs=1e-4)
    assert gain["long-term correction"] == pytest.approx(
        128.155 * (0.05 - np.sqrt(0.001825)), abs=1e-4
    )
    assert found.narrowing["halved"].iloc[0] == "cause 0"
    assert "cause 0" in found.outcome.said["narrowing"]


def test_a_stated_yearly_variability_takes_the_place_of_the_computed_one(small):
    found = assessed(
        small, [("yearly_variability", "energy", 0.05, "yearly")], long_term=0.03, yearly=0.06
    )
    assert found.outcome.number("uncertainty.yearly") == pytest.approx(0.05)
    assert "windiness of one year" not in found.parts["name"].tolist()


@pytest.mark.parametrize("of", ["wind_speed", "energy"])
@pytest.mark.parametrize("varies", ["static", "yearly"])
@pytest.mark.parametrize("value", [0.0, 0.01, 0.2])
def test_one_more_cause_never_lowers_the_spread(small, of, varies, value):
    known = [("measurement", "wind_speed", 0.02, "static")]
    before = assessed(small, known, long_term=0.03, yearly=0.06, sensitivity=1.7)
    more = [*known, ("plant_performance", of, value, varies)]
    after = assessed(small, more, long_term=0.03, yearly=0.06, sensitivity=1.7)
    # A static cause acts on every period, a yearly one least on the longest.
    for years in (1, 10, 20):
        assert after.spread[years] >= before.spread[years] - 1e-15
    assert (after.levels["P90"] <= before.levels["P90"] + 1e-12).all()
    assert (after.levels["P50"] == before.levels["P50"]).all()


def test_longer_periods_and_lower_probabilities_are_in_order(small):
    found = assessed(small, long_term=0.05, yearly=0.06, sensitivity=1.5)
    levels = found.level_table
    assert (np.diff(levels.to_numpy(), axis=1) < 0).all()
    assert (np.diff(levels.drop(columns="P50").to_numpy(), axis=0) > 0).all()


def test_no_uncertainty_at_all_leaves_p50(small):
    found = assessed(small)
    assert (found.level_table == 100.0).all().all()
    assert (found.parts["share_of_ten_year_variance"] == 0.0).all()
    json.dumps([row.value for row in found.outcome.rows], allow_nan=False)


def test_a_stronger_response_to_wind_widens_what_comes_from_wind_only(small):
    stated = [("plant_performance", "energy", 0.04, "static")]
    low = assessed(small, stated, long_term=0.03, sensitivity=1.2).parts.set_index("name")
    high = assessed(small, stated, long_term=0.03, sensitivity=2.4).parts.set_index("name")
    column = "energy_standard_uncertainty"
    assert high.loc["long-term correction", column] == pytest.approx(
        2 * low.loc["long-term correction", column]
    )
    assert high.loc["cause 0", column] == low.loc["cause 0", column]


def test_a_changed_cause_is_a_stale_answer(finished):
    before = assess_uncertainty(open_study(finished)).levels
    edit(finished / "study.toml", "standard_uncertainty = 0.04", "standard_uncertainty = 0.05")
    after = assess_uncertainty(open_study(finished)).levels
    assert (after["P90"] < before["P90"]).all()


def wind_parts(found: Uncertainty) -> dict[str, float]:
    """Standard uncertainty of wind by name, for the way up."""
    up = found.parts[found.parts["group"] == "vertical_extrapolation"]
    return dict(zip(up["name"], up["standard_uncertainty"], strict=True))


def test_the_way_up_is_computed_and_enters_once(small):
    # By hand: 1.5 x 0.02 of the way up and 1.5 x 0.03 of the correction make 5.41 % of energy.
    found = assessed(small, long_term=0.03, sensitivity=1.5, way_up=0.02)
    assert wind_parts(found) == {"from the mast to the hub": 0.02}
    assert found.outcome.number("uncertainty.static") == pytest.approx(1.5 * np.hypot(0.02, 0.03))


def test_of_a_stated_and_a_computed_way_up_the_larger_is_used(small, tmp_path):
    stated = [("vertical_extrapolation", "wind_speed", 0.01, "static")]
    found = assessed(small, stated, way_up=0.02)
    assert wind_parts(found) == {"from the mast to the hub": 0.02}
    assert "computes 2.00% of wind speed, stated are 1.00%" in found.parts["basis"].iloc[2]
    assert wind_parts(assessed(small, stated, way_up=0.005)) == {"cause 0": 0.01}
    # A figure in energy is compared as wind: 1.5 % of energy are 1 % of wind at 1.5.
    stated = [("vertical_extrapolation", "energy", 0.015, "static")]
    assert wind_parts(assessed(small, stated, way_up=0.02, sensitivity=1.5)) == {
        "from the mast to the hub": 0.02
    }


def test_a_reason_lets_the_stated_way_up_stand(small):
    stated = [("vertical_extrapolation", "wind_speed", 0.01, "static")]
    found = assessed(small, stated, way_up=0.02, reason="a lidar stood beside the mast")
    assert wind_parts(found) == {"cause 0": 0.01}
    basis = found.parts.set_index("name").loc["cause 0", "basis"]
    assert "used all the same: a lidar stood beside the mast" in basis


def test_the_interval_at_the_hub_is_that_of_the_wind_above_the_mast(small):
    # id UNC-2: 80 % lie within 1.28155 standard deviations; the mean is 8 m/s. Places of the
    # turbines and causes of energy have no part in it.
    stated = [
        ("measurement", "wind_speed", 0.02, "static"),
        ("horizontal_extrapolation", "wind_speed", 0.05, "static"),
        ("plant_performance", "energy", 0.05, "static"),
    ]
    found = assessed(small, stated, long_term=0.03, yearly=0.06, way_up=0.01).outcome
    own = np.sqrt(0.02**2 + 0.03**2 + 0.01**2)
    assert found.number("hub.standard_uncertainty") == pytest.approx(own)
    low, high = found.value("hub.interval_80_m_s")
    assert (low, high) == pytest.approx(
        (8 * (1 - 1.28155 * own), 8 * (1 + 1.28155 * own)), rel=1e-5
    )
