"""Roughness of the ground: published classes, and the geostrophic drag law over them.

The classes turn what a visitor sees into a roughness length. The drag law says what the same
large-scale wind does over another roughness, in neutral air. Profiles over one roughness are in
`profile`, stability is in `stability`; changes of roughness close to a site need a flow model.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse, refuse_negative, refuse_not_positive
from windkit.kernels.constants import VON_KARMAN_CONSTANT
from windkit.kernels.profile import friction_velocity, log_law

__all__ = [
    "ROUGHNESS_CLASSES",
    "TERRAIN_ROUGHNESS",
    "change_roughness",
    "coriolis_parameter",
    "geostrophic_friction_velocity",
    "geostrophic_wind",
]

#: Roughness length [m] by kind of terrain, Davenport et al. 2000 (12th Conference on Applied
#: Climatology), as in WMO-No. 8; "chaotic" is printed as 2 m or more.
TERRAIN_ROUGHNESS: Mapping[str, float] = MappingProxyType(
    {
        "sea": 0.0002,
        "smooth": 0.005,
        "open": 0.03,
        "roughly open": 0.10,
        "rough": 0.25,
        "very rough": 0.5,
        "closed": 1.0,
        "chaotic": 2.0,
    }
)

#: Roughness length [m] by roughness class: whole classes 0 to 3 from Troen and Petersen 1989,
#: European Wind Atlas; half classes and 4 as wind-energy teaching texts print them. There is no
#: formula between them that fits all pairs, so none is offered.
ROUGHNESS_CLASSES: Mapping[float, float] = MappingProxyType(
    {
        0.0: 0.0002,
        0.5: 0.0024,
        1.0: 0.03,
        1.5: 0.055,
        2.0: 0.10,
        2.5: 0.2,
        3.0: 0.40,
        3.5: 0.8,
        4.0: 1.6,
    }
)

#: Turning rate of the earth [rad/s] against the stars.
_EARTH_ROTATION = 7.292_115e-5
#: Constants A and B of the drag law in neutral air [1], Troen and Petersen 1989, ch. 8.
_DRAG_A, _DRAG_B = 1.8, 4.5
#: The drag law has no meaning nearer to the equator than this [deg]; common practice.
_LEAST_LATITUDE = 5.0


def coriolis_parameter(latitude: ArrayLike) -> NDArray[np.float64]:
    """Coriolis parameter at a latitude, its size without sign.

    Parameters
    ----------
    latitude : array_like
        Latitude [deg], north positive.

    Returns
    -------
    float or ndarray
        f = 2 Omega |sin(latitude)| [1/s].

    Raises
    ------
    ValueError
        If a latitude is beyond 90 degrees, or within 5 degrees of the equator.
    """
    phi = floats(latitude)
    refuse(np.abs(phi) > 90.0, phi, "latitude must be between -90 and 90 [deg]", "check the order")
    refuse(
        np.abs(phi) < _LEAST_LATITUDE,
        phi,
        f"latitude must be at least {_LEAST_LATITUDE:g} degrees from the equator",
        "there is no geostrophic balance there; do not use the drag law",
    )
    return 2.0 * _EARTH_ROTATION * np.abs(np.sin(np.radians(phi)))


def geostrophic_wind(
    friction_velocity: ArrayLike,
    roughness_length: ArrayLike,
    coriolis: ArrayLike,
) -> NDArray[np.float64]:
    """Large-scale wind above the boundary layer that belongs to a friction velocity.

    Parameters
    ----------
    friction_velocity : array_like
        Friction velocity [m/s].
    roughness_length : array_like
        Roughness length [m].
    coriolis : array_like
        Coriolis parameter [1/s], see `coriolis_parameter`; all three broadcast.

    Returns
    -------
    float or ndarray
        Geostrophic wind speed [m/s]; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a friction velocity is negative, or a roughness length or parameter not positive.

    References
    ----------
    .. [1] I. Troen and E. L. Petersen 1989, European Wind Atlas, ch. 8: A = 1.8, B = 4.5.
    """
    u = refuse_negative("friction_velocity", friction_velocity, "m/s", "mask such values")
    z0 = refuse_not_positive("roughness_length", roughness_length, "m", "water has 0.0002 m")
    f = refuse_not_positive("coriolis", coriolis, "1/s", "see coriolis_parameter")
    moving = u > 0.0
    # Without wind the logarithm has no argument, and the answer is zero.
    q = np.log(np.where(moving, u, 1.0) / (f * z0)) - _DRAG_A
    return (u / VON_KARMAN_CONSTANT) * np.sqrt(q**2 + _DRAG_B**2)


def geostrophic_friction_velocity(
    geostrophic_speed: ArrayLike,
    roughness_length: ArrayLike,
    coriolis: ArrayLike,
) -> NDArray[np.float64]:
    """Friction velocity that a large-scale wind makes over a roughness; undoes `geostrophic_wind`.

    Parameters
    ----------
    geostrophic_speed : array_like
        Geostrophic wind speed [m/s].
    roughness_length : array_like
        Roughness length [m].
    coriolis : array_like
        Coriolis parameter [1/s]; all three broadcast.

    Returns
    -------
    float or ndarray
        Friction velocity [m/s]; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a speed is negative, or a roughness length or parameter not positive.

    References
    ----------
    .. [1] I. Troen and E. L. Petersen 1989, European Wind Atlas, ch. 8.
    """
    G = refuse_negative("geostrophic_speed", geostrophic_speed, "m/s", "mask such values")
    z0 = refuse_not_positive("roughness_length", roughness_length, "m", "water has 0.0002 m")
    f = refuse_not_positive("coriolis", coriolis, "1/s", "see coriolis_parameter")
    moving = G > 0.0
    log_G = np.log(np.where(moving, G, 1.0))
    # Newton in logarithms: the slope is within 1 +- 1/(2 B), so a dozen steps reach rounding.
    log_u = log_G + np.log(0.04)
    for _ in range(12):
        q = log_u - np.log(f * z0) - _DRAG_A
        size = q**2 + _DRAG_B**2
        excess = log_u - np.log(VON_KARMAN_CONSTANT) + 0.5 * np.log(size) - log_G
        log_u = log_u - excess / (1.0 + q / size)
    return np.where(np.isnan(G), np.nan, np.where(moving, np.exp(log_u), 0.0))[()]


def change_roughness(
    wind_speed: ArrayLike,
    height: ArrayLike,
    roughness_length: ArrayLike,
    target_height: ArrayLike,
    target_roughness_length: ArrayLike,
    coriolis: ArrayLike,
) -> NDArray[np.float64]:
    """Wind speed over another roughness under the same large-scale wind, in neutral air.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s] at `height` over `roughness_length`.
    height, roughness_length : array_like
        [m], of the measurement.
    target_height, target_roughness_length : array_like
        [m], of the result.
    coriolis : array_like
        Coriolis parameter [1/s]; all broadcast.

    Returns
    -------
    float or ndarray
        Wind speed [m/s]; NaN in gives NaN out.

    Raises
    ------
    ValueError
        As `profile.log_law` and `geostrophic_wind`.

    Notes
    -----
    Both places are taken as uniform far upwind. Near a change of roughness, below about a tenth
    of the distance to it, the new profile is not complete (common practice).
    """
    u = friction_velocity(wind_speed, height, roughness_length)
    G = geostrophic_wind(u, roughness_length, coriolis)
    u_target = geostrophic_friction_velocity(G, target_roughness_length, coriolis)
    # The log law from the height where the speed is one friction velocity over kappa.
    e_folding = np.e * floats(target_roughness_length)
    reference = u_target / VON_KARMAN_CONSTANT
    return log_law(reference, e_folding, target_height, target_roughness_length)
