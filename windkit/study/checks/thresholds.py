"""Thresholds of the data checks: names, defaults and where each comes from.

Every number a check compares with stands here and can be set in the `[checks]` table of
`study.toml`. A default without a printed source is marked 'common practice'.
"""

from __future__ import annotations

from pydantic import BaseModel, ConfigDict, Field

__all__ = ["MASKING_RULES", "CheckSettings"]

#: Checks whose spans are left out of the record unless a person rejects them. The others only
#: list suspects: a person decides.
MASKING_RULES = ("range", "stuck")


class CheckSettings(BaseModel):
    """The `[checks]` table: what each check compares with, and which checks mask."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, allow_inf_nan=False)

    masking_rules: list[str] = Field(
        default_factory=lambda: list(MASKING_RULES),
        description="checks whose spans are masked without being asked",
    )

    # range: what cannot be
    highest_mean_speed_m_s: float = Field(
        default=50.0,
        gt=0,
        description="ten-minute mean; IEC 61400-1, reference speed of class I (50-year extreme)",
    )
    highest_gust_m_s: float = Field(
        default=70.0,
        gt=0,
        description="3 s gust; IEC 61400-1, 1.4 times the reference speed of class I",
    )
    highest_speed_sd_m_s: float = Field(
        default=15.0, gt=0, description="spread within an interval; common practice"
    )
    lowest_temperature_k: float = Field(
        default=183.95, description="-89.2 degC, lowest on record (WMO extremes archive)"
    )
    highest_temperature_k: float = Field(
        default=329.85, description="56.7 degC, highest on record (WMO extremes archive)"
    )
    lowest_pressure_pa: float = Field(
        default=50_000.0, description="about 5 500 m above the sea; common practice"
    )
    highest_pressure_pa: float = Field(
        default=109_000.0, description="highest at the sea on record, rounded (WMO archive)"
    )
    highest_relative_humidity: float = Field(
        default=1.05, description="sensors overshoot in fog; common practice"
    )

    # stuck: runs of one value
    shortest_stuck_min: float = Field(
        default=120.0, gt=0, description="shortest run of one value that is listed; common practice"
    )
    stuck_false_alarms: float = Field(
        default=0.01,
        gt=0,
        le=1,
        description="runs per channel and record that sound data may be expected to bring; sets "
        "how long a run must be where values are coarse",
    )
