"""Thresholds of the data checks: names, defaults and where each comes from.

Every number a check compares with stands here and can be set in the `[checks]` table of
`study.toml`. MEA-7 to MEA-9 are the range, relational and trend tests of Bailey et al. 1997, Wind
Resource Assessment Handbook, NREL/SR-440-22223. A default without a printed source is marked
'common practice'.
"""

from __future__ import annotations

from pydantic import BaseModel, ConfigDict, Field, field_validator

__all__ = ["MASKING_RULES", "RULES", "CheckSettings"]

#: Every check by the name its spans carry, in the order they run.
RULES = (
    "range",
    "range_mark",
    "order",
    "gust",
    "pair",
    "heights",
    "vane_pair",
    "step",
    "stuck",
    "repeated_block",
    "spike",
    "missing_code",
    "icing",
    "shadow",
    "drift",
    "north",
    "calibration_twice",
    "unit_change",
    "clock_step",
)
#: Checks whose spans are left out of the record unless a person rejects them. The others only
#: list suspects: a person decides.
MASKING_RULES = ("range", "order", "stuck", "spike", "icing", "unit_change")


def _of(default: float, source: str, *, gt: float | None = 0.0) -> float:
    """A threshold with its default and where it comes from."""
    value: float = Field(default=default, gt=gt, description=source)
    return value


class CheckSettings(BaseModel):
    """The `[checks]` table: what each check compares with, and which checks mask."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, allow_inf_nan=False)

    masking_rules: list[str] = Field(
        default_factory=lambda: list(MASKING_RULES),
        description="checks whose spans are masked without being asked",
    )

    # range: what cannot be
    highest_mean_speed_m_s: float = _of(50.0, "ten-minute mean; IEC 61400-1, class I reference")
    highest_gust_m_s: float = _of(70.0, "3 s gust; IEC 61400-1, 1.4 times the class I reference")
    highest_speed_sd_m_s: float = _of(15.0, "spread within an interval; common practice")
    lowest_temperature_k: float = _of(183.95, "-89.2 degC, lowest on record (WMO archive)")
    highest_temperature_k: float = _of(329.85, "56.7 degC, highest on record (WMO archive)")
    lowest_pressure_pa: float = _of(50_000.0, "about 5 500 m above the sea; common practice")
    highest_pressure_pa: float = _of(109_000.0, "highest at the sea on record (WMO archive)")
    highest_relative_humidity: float = _of(1.05, "sensors overshoot in fog; common practice")

    # range_mark: what is worth a look
    mark_mean_speed_m_s: float = _of(25.0, "Bailey et al. 1997, range: mean speed")
    mark_gust_m_s: float = _of(30.0, "Bailey et al. 1997, range: highest gust")
    mark_speed_sd_m_s: float = _of(3.0, "Bailey et al. 1997, range: spread of speed")
    mark_direction_sd_low_deg: float = _of(
        3.0, "Bailey et al. 1997, range: least spread of direction"
    )
    mark_direction_sd_high_deg: float = _of(
        75.0, "Bailey et al. 1997, range: largest spread of direction"
    )
    mark_pressure_low_pa: float = _of(
        94_000.0, "Bailey et al. 1997, range: at the sea; scaled with the elevation"
    )
    mark_pressure_high_pa: float = _of(
        106_000.0, "Bailey et al. 1997, range: at the sea; scaled with the elevation"
    )

    # order, gust, pair, heights, vane_pair: how channels go together
    highest_gust_factor: float = _of(2.5, "Bailey et al. 1997, relation: gust over mean")
    gust_mean_speed_m_s: float = _of(4.0, "gusts are judged at means above; common practice")
    pair_difference_m_s: float = _of(0.5, "Bailey et al. 1997, relation: redundant sensors, mean")
    pair_height_m: float = _of(2.0, "sensors this close in height are a pair; common practice")
    height_difference_m_s_per_m: float = _of(
        2.0 / 15.0, "Bailey et al. 1997, relation: 2 m/s at 40/25 m, 4 at 40/10 m"
    )
    vane_difference_deg: float = _of(20.0, "Bailey et al. 1997, relation: vanes at two heights")
    vane_moves_above_m_s: float = _of(4.0, "directions are compared above; common practice")
    learned_spreads: float = _of(6.0, "robust spreads of the site's own data; common practice")
    shortest_relation_min: float = _of(30.0, "shortest span of a relation; common practice")

    # step, spike
    step_speed_m_s_per_h: float = _of(5.0, "Bailey et al. 1997, trend: speed in 1 h")
    step_temperature_k_per_h: float = _of(5.0, "Bailey et al. 1997, trend: temperature in 1 h")
    step_pressure_pa_per_3h: float = _of(1_000.0, "Bailey et al. 1997, trend: pressure in 3 h")
    front_turn_deg: float = _of(30.0, "turn of the wind that marks a front; common practice")
    spike_spreads: float = _of(8.0, "robust spreads of value against neighbours; common practice")

    # stuck, repeated_block, missing_code: values that come again
    shortest_stuck_min: float = _of(120.0, "shortest run of one value listed; common practice")
    stuck_false_alarms: float = _of(0.01, "expected by chance per channel; common practice")
    code_count: float = _of(10.0, "a code stands at least so often; common practice")
    code_excess: float = _of(8.0, "and so many times as often as values near it; common practice")

    # icing
    icing_below_k: float = _of(274.15, "1 degC; common practice")
    icing_humidity: float = _of(0.9, "humidity that supports icing; common practice")
    icing_shortest_min: float = _of(60.0, "shortest sign; common practice")
    icing_calm_min: float = _of(720.0, "all still and cold for longer is ice; common practice")
    icing_low_share: float = _of(0.15, "a cup reads lower than the others by; common practice")

    # shadow, drift, north, clock
    shadow_deficit: float = _of(0.02, "pair ratio leaves its level by; common practice")
    shadow_half_width_deg: float = _of(20.0, "behind the mast, without a pair; IEC 61400-12-1 use")
    shadow_boom_tolerance_deg: float = _of(20.0, "found against boom's back; common practice")
    drift_change: float = _of(0.01, "change of level worth a look; about 0.1 m/s at 10 m/s")
    north_change_deg: float = _of(5.0, "steady difference within sensor uncertainty up to here")
    clock_lag_h: float = _of(0.75, "lag of a window against the rest; common practice")
    clock_window_days: float = _of(15.0, "length of a window; common practice in flux networks")

    @field_validator("masking_rules")
    @classmethod
    def _known(cls, names: list[str]) -> list[str]:
        unknown = [name for name in names if name not in RULES]
        if unknown:
            raise ValueError(f"there is no check '{unknown[0]}'; the checks are {', '.join(RULES)}")
        return names
