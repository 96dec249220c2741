"""The wind rose: drawn by the windrose library, counted by the study.

The library draws the petals of the records that have a direction. How many records there are in
all, and how many of them are calm or without a direction, comes from the study's frequency
table, and the rings show shares of that total.
"""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.patches import Patch
from matplotlib.patheffects import withStroke
from numpy.typing import ArrayLike

from windkit.faces.look import (
    FAINT,
    GRID,
    INK,
    MUTED,
    class_colours,
    in_house_style,
    nothing_to_draw,
    number_text,
)
from windkit.faces.wording import percent_number

__all__ = [
    "ROSE_STEPS",
    "wind_rose",
]

#: Lower edges of the speed classes of a rose [m/s]; the last class is open.
ROSE_STEPS = (0.0, 4.0, 7.0, 10.0, 13.0)


@in_house_style
def wind_rose(
    wind_speed: ArrayLike,
    wind_direction: ArrayLike,
    *,
    calm_threshold: float = 0.5,
    sector_count: int = 12,
    count: int | None = None,
    calm_share: float | None = None,
    undirected_share: float | None = None,
    ax: Axes | None = None,
    title: str = "Wind rose",
) -> Axes:
    """Share of all records by direction and speed, drawn with windrose.

    Parameters
    ----------
    wind_speed : array_like
        Speeds [m/s], shape (n,); NaN is no record.
    wind_direction : array_like
        Directions [deg], shape (n,), any turn; NaN where there is none.
    calm_threshold : float
        A speed at or below it is a calm [m/s] and has no direction.
    sector_count : int
        Sectors, the first centred on north.
    count : int, optional
        Records in the total, as the study's frequency table counts them; the speeds that are
        there if left out.
    calm_share, undirected_share : float, optional
        Shares of calms and of moving air without a direction [1], printed below the rose.
    ax : Axes, optional
        Where to draw; a plain axes gives its place to a rose.
    title : str
        Heading.

    Raises
    ------
    ValueError
        If speeds and directions differ in length.

    Notes
    -----
    Where no record has a direction, as on a mast without a vane, the axes stays plain and says
    so. The rings show the share of `count`, so the petals and what is printed below add up to one.
    """
    from windrose import WindroseAxes

    speed = np.asarray(wind_speed, dtype=float).ravel()
    direction = np.asarray(wind_direction, dtype=float).ravel()
    if speed.shape != direction.shape:
        raise ValueError(
            f"a rose needs a direction for each speed; there are {speed.size} speeds and "
            f"{direction.size} directions"
        )
    drawn = np.isfinite(speed) & np.isfinite(direction) & (speed > calm_threshold)
    if not drawn.any():
        ax = _plain_axes(ax)
        ax.set_title(title)
        why = f"no record has both a direction and a speed\nabove {calm_threshold:g} m/s"
        return nothing_to_draw(ax, why)
    total = int(np.isfinite(speed).sum()) if count is None else int(count)
    ax = _rose_axes(ax)
    assert isinstance(ax, WindroseAxes)
    # The library counts NaN in the total and drops directions outside one turn, so it is given
    # neither. It gets counts, not shares: only the study knows what the whole is.
    ax.bar(
        np.mod(direction[drawn], 360.0),
        speed[drawn],
        bins=list(ROSE_STEPS),
        nsector=sector_count,
        colors=class_colours(len(ROSE_STEPS)),
        edgecolor="white",
        linewidth=0.5,
        opening=0.86,
    )
    _dress_rose(ax, total, calm_threshold)
    said = [f"{number_text(total)} records"]
    if calm_share is not None:
        said.append(f"calm {percent_number(calm_share)} %")
    if undirected_share is not None:
        said.append(f"no direction {percent_number(undirected_share)} %")
    # Centred on the rose: a title at the left of a round figure looks adrift.
    ax.set_title(title, loc="center", pad=16)
    ax.text(0.5, -0.13, ", ".join(said), transform=ax.transAxes, ha="center", va="top", color=MUTED)
    return ax


def _plain_axes(ax: Axes | None) -> Axes:
    """Square axes for words, since round ones would ring them."""
    import matplotlib.pyplot as plt
    import windrose

    if ax is None:
        return plt.subplots(figsize=(5.2, 4.0))[1]
    whole, place = ax.get_figure(), ax.get_subplotspec()
    if not isinstance(ax, windrose.WindroseAxes) or whole is None or place is None:
        return ax
    ax.remove()
    return whole.add_subplot(place)


def _rose_axes(ax: Axes | None) -> Axes:
    import matplotlib.pyplot as plt
    import windrose

    if isinstance(ax, windrose.WindroseAxes):
        return ax
    if ax is None:
        figure = plt.figure(figsize=(5.2, 4.0))
        return figure.add_subplot(projection="windrose")
    whole, place = ax.get_figure(), ax.get_subplotspec()
    if whole is None or place is None:
        raise ValueError("a rose needs round axes: make them with projection='windrose'")
    ax.remove()
    return whole.add_subplot(place, projection="windrose")


def _dress_rose(ax: Any, total: int, calm_threshold: float) -> None:
    highest = float(ax._info["table"].sum(axis=0).max())
    step = _nice_step(highest / total / 4)
    rings = step * np.arange(1, int(np.ceil(highest / total / step)) + 1)
    ax.set_rmax(rings[-1] * total)
    ax.set_rgrids(
        rings * total,
        [f"{100 * ring:g} %" for ring in rings],
        angle=ax.radii_angle,
        fontsize=8,
        color=INK,
    )
    for label in ax.get_yticklabels():
        # Petals may reach below the words.
        label.set_path_effects([withStroke(linewidth=2.5, foreground="white")])
    ax.set_xticks(np.radians(np.arange(0, 360, 45)), ["E", "NE", "N", "NW", "W", "SW", "S", "SE"])
    ax.set_axisbelow(True)
    ax.xaxis.grid(visible=True, color=GRID)
    ax.yaxis.grid(visible=True, color=FAINT, linewidth=0.7)
    ax.spines["polar"].set_color(FAINT)
    edges = [calm_threshold, *ROSE_STEPS[1:]]
    names = [f"{low:g} to {high:g}" for low, high in itertools.pairwise(edges)]
    names.append(f"above {edges[-1]:g}")
    handles = [
        Patch(facecolor=colour, edgecolor=FAINT, label=name)
        for colour, name in zip(class_colours(len(names)), names, strict=True)
    ]
    # windrose replaces Axes.legend; the plain one takes handles.
    Axes.legend(
        ax,
        handles=handles[::-1],
        title="m/s",
        loc="center left",
        bbox_to_anchor=(1.12, 0.5),
        alignment="left",
    )


def _nice_step(raw: float) -> float:
    size = 10.0 ** np.floor(np.log10(raw))
    return float(size * next(step for step in (1, 2, 2.5, 5, 10) if step * size >= raw - 1e-12))
