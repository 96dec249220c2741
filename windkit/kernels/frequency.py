"""Frequency tables of wind speed by direction sector, calms counted.

The table is how a long series goes on to energy: shares of time by sector and speed bin, and
beside the sectors the hours that have no direction. The first sector is centred on north, the
first bin is half a width so that the others are centred on whole numbers. Power curves and fits
are elsewhere; directions as angles are in `circular`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse, refuse_negative

__all__ = ["FrequencyTable", "frequency_table", "sector_index", "speed_bin_edges"]

#: Shares must add to one within rounding of very many small numbers [1].
_SUM_TOLERANCE = 1e-9


@dataclass(frozen=True, slots=True, eq=False)
class FrequencyTable:
    """Shares of time by sector and speed bin; with the undirected hours they sum to one.

    Attributes
    ----------
    share : ndarray
        Share of time [1], shape (sector_count, bins).
    undirected : ndarray
        Share of time without a direction [1], shape (bins,): calms, and hours without a vane.
    speed_edges : ndarray
        Bin edges [m/s], shape (bins + 1,); a bin holds its lower edge and not its upper.
    sector_centres : ndarray
        Centres of the sectors [deg, from], the first at 0.
    count : int
        Records with a known speed that the table stands on.
    calm_share : float
        Share of time at or below the calm threshold [1]; it is part of `undirected`.
    """

    share: NDArray[np.float64]
    undirected: NDArray[np.float64]
    speed_edges: NDArray[np.float64]
    sector_centres: NDArray[np.float64]
    count: int
    calm_share: float = 0.0

    def __post_init__(self) -> None:
        bins, sectors = self.speed_edges.size - 1, self.sector_centres.size
        if self.share.shape != (sectors, bins) or self.undirected.shape != (bins,):
            raise ValueError(
                f"share must be (sectors, bins) = {(sectors, bins)} and undirected ({bins},), got "
                f"{self.share.shape} and {self.undirected.shape}; build the table from a series"
            )
        if not np.all(np.diff(self.speed_edges) > 0.0) or self.speed_edges[0] < 0.0:
            raise ValueError(
                f"speed_edges must increase from zero or above, got {self.speed_edges.tolist()}; "
                f"see speed_bin_edges"
            )
        refuse(self.share < 0.0, self.share, "share must not be negative [1]", "count again")
        refuse(self.undirected < 0.0, self.undirected, "undirected must not be negative", "as is")
        total = float(self.share.sum() + self.undirected.sum())
        # The comparison is turned round so that NaN is refused too.
        if not abs(total - 1.0) <= _SUM_TOLERANCE:
            raise ValueError(
                f"share and undirected must sum to one, got {total:.9g}; divide counts by all "
                f"records, calms and hours without a direction included"
            )

    @property
    def speed_share(self) -> NDArray[np.float64]:
        """Share of time by speed bin over all directions [1], calms included; sums to one."""
        return self.share.sum(axis=0) + self.undirected

    @property
    def sector_share(self) -> NDArray[np.float64]:
        """Share of time by sector [1]; sums to one less the undirected share."""
        return self.share.sum(axis=1)

    @property
    def mean_speed(self) -> float:
        """Mean wind speed [m/s], speeds spread evenly inside each bin."""
        low, high = self.speed_edges[:-1], self.speed_edges[1:]
        return float(self.speed_share @ (0.5 * (low + high)))

    @property
    def mean_cube(self) -> float:
        """Mean cubed wind speed [m3/s3], speeds spread evenly inside each bin."""
        low, high = self.speed_edges[:-1], self.speed_edges[1:]
        return float(self.speed_share @ (0.25 * (high + low) * (high**2 + low**2)))


def sector_index(wind_direction: ArrayLike, sector_count: int) -> NDArray[np.intp]:
    """Number of the sector each direction falls into, the first centred on north.

    Parameters
    ----------
    wind_direction : array_like
        Directions [deg, from], 0 to 360; 360 is north again.
    sector_count : int
        Number of equal sectors.

    Returns
    -------
    ndarray of int
        0 to sector_count - 1, same shape; -1 where the direction is NaN. A direction on an edge
        belongs to the sector clockwise of it.

    Raises
    ------
    ValueError
        If a direction is outside 0 to 360 or there is no sector.
    """
    if sector_count < 1:
        raise ValueError(f"sector_count must be at least 1, got {sector_count}; 12 is usual")
    directions = floats(wind_direction)
    refuse(
        (directions < 0.0) | (directions > 360.0),
        directions,
        "wind_direction must be between 0 and 360 [deg]",
        "mask missing-value codes, or add 360 to negative angles",
    )
    known = ~np.isnan(directions)
    width = 360.0 / sector_count
    number = np.floor(np.where(known, directions, 0.0) / width + 0.5).astype(np.intp)
    return np.where(known, number % sector_count, -1)


def speed_bin_edges(max_speed: float, bin_width: float = 1.0) -> NDArray[np.float64]:
    """Edges of speed bins centred on multiples of the width, the first a half bin from zero.

    Parameters
    ----------
    max_speed : float
        Speed [m/s] the last bin must hold.
    bin_width : float
        Bin width [m/s].

    Returns
    -------
    ndarray
        0, w/2, 3w/2 and so on [m/s]; the last edge is above `max_speed`.

    Raises
    ------
    ValueError
        If the width is not positive, or the speed negative or unknown.
    """
    if not bin_width > 0.0:
        raise ValueError(f"bin_width must be positive [m/s], got {bin_width:g}; 1 is usual")
    if not (np.isfinite(max_speed) and max_speed >= 0.0):
        raise ValueError(f"max_speed must be zero or more [m/s], got {max_speed:g}; mask the data")
    last = int(np.floor(max_speed / bin_width + 0.5))
    edges = np.concatenate([[0.0], (np.arange(last + 1) + 0.5) * bin_width])
    # Division may round a speed on an edge down into the bin that does not hold it.
    return edges if edges[-1] > max_speed else np.append(edges, (last + 1.5) * bin_width)


def frequency_table(
    wind_speed: ArrayLike,
    wind_direction: ArrayLike,
    *,
    sector_count: int = 12,
    bin_width: float = 1.0,
    calm_threshold: float = 0.0,
    weight: ArrayLike | None = None,
) -> FrequencyTable:
    """Count a series into sectors and speed bins, every hour with a speed in its place.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s], one dimension; a record without a speed is left out.
    wind_direction : array_like
        Directions [deg, from], same length; NaN where there is none.
    sector_count : int
        Number of sectors, the first centred on north.
    bin_width : float
        Width of the speed bins [m/s].
    calm_threshold : float
        Speed [m/s] at or below which a record is a calm and its direction means nothing.
    weight : array_like, optional
        Weight of each record [1], such as hours or a correction for season; equal if left out.

    Returns
    -------
    FrequencyTable
        Shares that sum to one together with the undirected hours.

    Raises
    ------
    ValueError
        If lengths differ, a speed or weight is negative, a direction is outside 0 to 360, or no
        speed is known.

    Notes
    -----
    Twelve sectors of 30 degrees and bins of 1 m/s are the defaults of the trade. Calms stay in
    the bin of their recorded speed: a cup that reads zero stands for anything up to its start
    speed.
    """
    speed = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values before the count")
    direction = floats(wind_direction)
    mass = np.ones_like(speed) if weight is None else floats(weight)
    if speed.ndim != 1 or direction.shape != speed.shape or mass.shape != speed.shape:
        raise ValueError(
            f"wind_speed, wind_direction and weight must be series of one length, got "
            f"{speed.shape}, {direction.shape} and {mass.shape}; join them on time first"
        )
    known = ~np.isnan(speed)
    speed, direction, mass = speed[known], direction[known], mass[known]
    refuse(~(mass >= 0.0), mass, "weight must be zero or more [1]", "leave the record out instead")
    if not mass.sum() > 0.0:
        raise ValueError(
            f"a frequency table needs at least one known wind_speed with weight, got "
            f"{speed.size} known of {known.size}; check the period and the exclusions"
        )
    calm = speed <= calm_threshold
    sector = np.where(calm, -1, sector_index(direction, sector_count))
    edges = speed_bin_edges(float(speed.max()), bin_width)
    bins = edges.size - 1
    column = np.searchsorted(edges, speed, side="right") - 1
    # One row more than sectors, for what has no direction.
    flat = np.bincount((sector + 1) * bins + column, mass, minlength=(sector_count + 1) * bins)
    shares = flat.reshape(sector_count + 1, bins) / mass.sum()
    return FrequencyTable(
        share=shares[1:],
        undirected=shares[0],
        speed_edges=edges,
        sector_centres=np.linspace(0.0, 360.0, sector_count, endpoint=False),
        count=int(speed.size),
        calm_share=float(mass[calm].sum() / mass.sum()),
    )
