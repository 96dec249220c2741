"""What a check is worth, held against means worked out by hand on the speed of a pair."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from station_examples import channel, reading_of, settings

from windkit.study.check_worth import worth_of_checks
from windkit.study.checks import CheckSettings
from windkit.study.record import build_record

SETTINGS = settings(
    channels=[
        channel("speed_80", "Spd80", "wind_speed", "m/s", 80.0),
        channel("speed_80_b", "Spd80b", "wind_speed", "m/s", 80.0),
        channel("direction_78", "Dir78", "wind_from_direction", "deg", 78.0),
        channel("temperature_5", "T5", "air_temperature", "degC", 5.0),
    ]
)


def test_the_base_is_the_studys_own_speed_and_the_shadow_row_leaves_the_average_out():
    rng = np.random.default_rng(2)
    count = 2000
    first = np.round(8 + rng.normal(0, 1, count), 2)
    second = first + 0.5
    second[700] = 400.0  # what the range check masks, on the second cup only
    columns = {
        "speed_80": first,
        "speed_80_b": second,
        "direction_78": np.round(rng.uniform(0, 359.9, count), 1),
        "temperature_5": np.round(rng.normal(280, 2, count), 1),
    }
    record = build_record(reading_of(columns, SETTINGS), CheckSettings(masking_rules=["range"]))
    one = record.spans.iloc[:1].assign(channel="speed_80", rule="shadow")
    object.__setattr__(record, "spans", pd.concat([record.spans, one], ignore_index=True))

    def speed_of(changed, averaged):
        cups = changed.frame[["speed_80", "speed_80_b"] if averaged else ["speed_80"]]
        return cups.mean(axis=1).to_numpy()

    table = worth_of_checks(record, lambda v: 1000.0 * v, pair="speed_80_b", speed_of=speed_of)
    table = table.set_index("rule")
    base = first + 0.25
    base[700] = first[700]
    assert table.loc["all rules", "mean_speed"] == pytest.approx(base.mean())
    assert table.loc["all rules", "mean_power_kw"] == pytest.approx(base.mean())  # 1 kW per m/s
    assert table.loc["range", "count"] == 1
    assert table.loc["range", "mean_speed"] == pytest.approx((first + second).mean() / 2)
    assert table.loc["shadow", "acts"] == "averages"
    assert table.loc["shadow", "mean_speed"] == pytest.approx(first.mean())
    assert table.loc["shadow", "speed_change"] == pytest.approx(first.mean() / base.mean() - 1)
