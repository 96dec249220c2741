"""What was found on the way up to the hub, in sentences with the numbers in them.

Nothing is computed here; the numbers come from `hub`.
"""

from __future__ import annotations

import numpy as np

from windkit.study.hub import HubWind

__all__ = ["said_of_left_out", "said_of_profile"]


def said_of_profile(wind: HubWind, exponent: float) -> str:
    """By which law the series is carried up, and how the exponent swings over the day."""
    text = (
        f"The series is carried up by the {wind.method}; over all hours that is an exponent of "
        f"{exponent:.3f}."
    )
    by_hour = wind.exponent_by_hour.mean(axis=1).to_numpy(dtype=float)
    if np.isfinite(by_hour).any() and np.ptp(by_hour) > 1e-9:
        low, high = int(np.argmin(by_hour)), int(np.argmax(by_hour))
        text += (
            f" It is lowest at {low:02d} h sun time ({by_hour[low]:.3f}) and highest at "
            f"{high:02d} h ({by_hour[high]:.3f})."
        )
    if len(wind.methods) > 1:
        means = wind.methods["hub_mean_speed_m_s"]
        text += f" The laws compared put the hub mean between {means.min():.2f} and "
        text += f"{means.max():.2f} m/s."
    return " ".join([text, *wind.notes])


def said_of_left_out(wind: HubWind) -> str:
    """By how much the top sensor is missed, and what that says of the way up."""
    test = wind.left_out
    if test is None:
        return (
            "With fewer than three heights the mast cannot test its own profile; the uncertainty "
            f"of the way up is a rule of thumb, {wind.standard_uncertainty:.1%} of wind speed."
        )
    text = (
        f"Predicted from the sensors below, the one at {test.heights[1]:g} m is missed by "
        f"{test.mean_error:+.2%} in the mean and by {test.typical_error:.2%} in a typical hour of "
        f"a season, which makes {test.scaled:.2%} at the hub. "
    )
    if test.is_steady:
        text += (
            "The miss is nearly the same at all hours and seasons, which speaks of a sensor's "
            "calibration more than of the weather. "
        )
    return text + (f"The study uses {wind.standard_uncertainty:.2%} of wind speed for the way up.")
