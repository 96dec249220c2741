"""Simulated masts whose wind above the top sensor is known.

Stability makes the profiles, by functions other than those of the library on stable nights
(Beljaars and Holtslag 1991, Journal of Applied Meteorology 30: 327; from memory), so that the
method under test is not asked about its own formula. Sun, season and large-scale wind are drawn.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter
from scipy.special import ndtr

from windkit.study.hub_profile import Kinds, ProfileData

__all__ = ["Case", "make_case"]

MASTS = (
    (40.0, 60.0, 80.0),
    (30.0, 45.0, 60.0),
    (20.0, 40.0, 60.0, 80.0),
    (30.0, 50.0, 70.0, 100.0),
    (50.0, 80.0, 100.0),
    (40.0, 50.0, 60.0),
)
HOURS_OF_YEAR = 8760


@dataclass(frozen=True)
class Case:
    """One mast for a year of hours, and the truth at the hub [m/s]."""

    data: ProfileData
    hub_height: float
    hub_speed: np.ndarray


def psi(zeta: np.ndarray) -> np.ndarray:
    """Departure from the logarithm: Beljaars and Holtslag 1991 stable, Paulson 1970 unstable."""
    stable, unstable = np.maximum(zeta, 0.0), np.minimum(zeta, 0.0)
    a, b, c, d = 1.0, 0.667, 5.0, 0.35
    x = (1 - 16 * unstable) ** 0.25
    return np.where(
        zeta > 0,
        -(a * stable + b * (stable - c / d) * np.exp(-d * stable) + b * c / d),
        2 * np.log((1 + x) / 2) + np.log((1 + x**2) / 2) - 2 * np.arctan(x) + np.pi / 2,
    )


def make_case(seed: int, *, scatter: float = 0.02, sensor_error: float = 0.0) -> Case:
    """Draw a mast, its ground, its weather and a hub 1.15 to 1.5 times as high.

    Parameters
    ----------
    seed : int
        Of everything drawn.
    scatter : float
        Random part of each hourly mean, height by height [1].
    sensor_error : float
        Standard deviation of each sensor's own steady error [1].
    """
    rng = np.random.default_rng(seed)
    z = np.array(MASTS[rng.integers(len(MASTS))])
    hub = z[-1] * rng.uniform(1.15, 1.5)
    roughness = 10 ** rng.uniform(-2, -0.3)
    n = HOURS_OF_YEAR
    hour, day = np.arange(n) % 24, np.arange(n) // 24
    month = (day // 30.42).astype(int) % 12 + 1
    sun = np.sin(2 * np.pi * (hour - 9) / 24)
    summer = -np.cos(2 * np.pi * (day - 15) / 365)
    heat = rng.uniform(0.3, 1.5) * (sun * (1 + 0.5 * summer) - 0.15 + rng.normal(0, 0.35, n))
    keep = np.exp(-1 / 24)
    slow = lfilter([np.sqrt(1 - keep**2)], [1, -keep], rng.normal(size=n))
    aloft = np.maximum(rng.uniform(7, 12) * np.sqrt(-np.log1p(-ndtr(slow))), 0.3)
    drag = np.interp(np.log(roughness), np.log([0.01, 0.5]), [30.0, 20.0])
    friction = aloft / drag
    flux = 0.08 * np.where(heat > 0, heat, 0.35 * heat)  # nights cool less than days heat
    inverse_length = np.clip(
        -0.4 * 9.81 / 288 * flux / np.maximum(friction, 0.08) ** 3, -0.05, 0.03
    )
    heights = np.append(z, hub)
    zeta = heights * inverse_length[:, None]
    profile = np.log(heights / roughness) - psi(zeta) + psi(roughness * inverse_length[:, None])
    speed = np.maximum(friction[:, None] / 0.4 * profile, 0.0)
    truth = speed[:, -1]
    seen = speed[:, :-1] * (1 + scatter * rng.normal(size=(n, z.size)))
    seen = np.maximum(seen * (1 + sensor_error * rng.normal(size=z.size)), 0.0)
    kinds = Kinds(rng.integers(0, 12, n), hour.astype(np.intp), month.astype(np.intp), 12)
    names = [f"speed_{height:g}" for height in z]
    return Case(ProfileData(seen, z, names, kinds, None, []), float(hub), truth)
