"""Optional tables of `study.toml` for the way up to the hub and for the site's conditions.

`[profile]` says how speed is carried from the mast to the hub, `[conditions]` how extreme winds
are taken from the long-term record. Both may be left out; the defaults stand here and nowhere
else. The rest of `study.toml` is in `settings`.
"""

from __future__ import annotations

from typing import Literal

from pydantic import BaseModel, ConfigDict, Field

from windkit.kernels.gusts import AVERAGING_FACTORS

__all__ = ["ConditionsSettings", "Exposure", "ProfileMethod", "ProfileSettings"]

ProfileMethod = Literal["by_class", "single", "log_law", "diabatic"]
Exposure = Literal["in-land", "off-land", "off-sea", "at-sea"]
assert set(Exposure.__args__) == set(AVERAGING_FACTORS)  # type: ignore[attr-defined]


class _Section(BaseModel):
    """A table of the file: unknown keys and texts in place of numbers are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, allow_inf_nan=False)


class ProfileSettings(_Section):
    """How speed is carried from the mast to the hub.

    ``by_class``: power law, an exponent for each sector, hour and month. ``single``: power law,
    one exponent. ``log_law``: logarithmic law of neutral air, a roughness for each sector.
    ``diabatic``: logarithmic law corrected for stability, from two thermometers.
    """

    method: ProfileMethod = "by_class"
    displacement_height_m: float = Field(default=0.0, ge=0, le=50)
    min_count: int = Field(default=100, ge=10)
    # Both are kept empty unless an analyst departs from the rule; what is written is printed.
    reason_to_trust_left_out_error: str = ""
    accept_falling_profile: bool = False


class ConditionsSettings(_Section):
    """How extreme winds are found."""

    exposure: Exposure = "in-land"
    maxima: Literal["auto", "years", "storms"] = "auto"
    storms_per_year: float = Field(default=10.0, ge=2, le=60)
    # Between storms: two to four days in the mid-latitudes (common practice).
    storm_separation_h: float = Field(default=72.0, ge=12, le=240)
    fit: Literal["moments", "l_moments", "maximum_likelihood", "best_linear"] = "best_linear"
