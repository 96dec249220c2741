"""Figures of the way from the campaign to the long term.

Every function takes plain arrays or frames, draws on `ax` (or a new figure) and returns it.
Nothing is computed here that the numbers of the study depend on. The measured wind stands in
`windkit.faces.figures_measured`; workbooks take both from `windkit.faces.figures`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from numbers import Integral
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import ArrayLike

from windkit.faces.look import (
    ACCENT,
    BAD,
    GRID,
    INK,
    LINE_STYLES,
    MAIN,
    MUTED,
    SERIES,
    density_colours,
    dress,
    in_house_style,
    legend_below,
    level_room,
    new_axes,
    nothing_to_draw,
    number_text,
)

if TYPE_CHECKING:
    import pandas as pd

__all__ = [
    "method_comparison",
    "scatter_fit",
    "yearly_means",
]

#: Years that are named below the axis at most.
_YEARS_NAMED = 10
#: Points above which a scatter is drawn as a density, because single dots would hide it.
_DENSITY_FROM = 3000


@in_house_style
def scatter_fit(
    reference_speed: ArrayLike,
    site_speed: ArrayLike,
    lines: Mapping[str, tuple[ArrayLike, ArrayLike]] | None = None,
    *,
    ax: Axes | None = None,
    title: str = "Concurrent hours, site against reference",
) -> Axes:
    """Concurrent speeds and the relations fitted to them.

    Parameters
    ----------
    reference_speed, site_speed : array_like
        Speeds of the same hours [m/s]; a pair with a NaN is left out.
    lines : mapping of name to (x, y), optional
        Fitted relations, each as points of a line [m/s].
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    x = np.asarray(reference_speed, dtype=float).ravel()
    y = np.asarray(site_speed, dtype=float).ravel()
    there = np.isfinite(x) & np.isfinite(y)
    x, y = x[there], y[there]
    top = 1.05 * float(max(x.max(initial=1.0), y.max(initial=1.0)))
    ax = new_axes(ax, width=4.9, height=4.5)
    dress(ax, title=title, x="Reference wind speed [m/s]", y="Site wind speed [m/s]", grid="both")
    if x.size > _DENSITY_FROM:
        ax.hexbin(
            x, y, gridsize=45, extent=(0, top, 0, top), mincnt=1, bins="log", linewidths=0.1,
            cmap=density_colours(),
        )  # fmt: skip
    else:
        ax.plot(x, y, ".", color=MAIN, markersize=4.5, alpha=0.4, markeredgewidth=0)
    for position, (name, (line_x, line_y)) in enumerate((lines or {}).items()):
        colour = (ACCENT, BAD, INK, SERIES[4])[position % 4]
        ax.plot(
            np.asarray(line_x), np.asarray(line_y), color=colour, label=name,
            linestyle=LINE_STYLES[position % len(LINE_STYLES)],
        )  # fmt: skip
    ax.plot([0, top], [0, top], color=MUTED, linewidth=0.8, label="equal speeds", zorder=1.5)
    ax.set_xlim(0.0, top)
    ax.set_ylim(0.0, top)
    ax.set_aspect("equal")
    ax.legend(loc="upper left", title=f"{number_text(x.size)} hours", alignment="left")
    return ax


@in_house_style
def yearly_means(
    years: ArrayLike,
    means: ArrayLike,
    *,
    campaign_years: Sequence[float] | None = None,
    long_term_mean: float | None = None,
    ax: Axes | None = None,
    title: str = "Yearly mean wind speed of the reference",
) -> Axes:
    """Yearly means of the long record, with the campaign and the long-term mean.

    Parameters
    ----------
    years : array_like of int
        Calendar years.
    means : array_like
        Mean speeds [m/s].
    campaign_years : two floats, optional
        When the site was measured, shaded exactly: the year with its elapsed part, so 2022.83 is
        the end of October 2022. A whole number of type int means that calendar year, all of it.
    long_term_mean : float, optional
        Mean over the whole record [m/s].
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    shown = np.asarray(years, dtype=float)
    ax = new_axes(ax, height=3.0)
    dress(ax, title=title, x="Year", y="Mean wind speed [m/s]")
    if shown.size == 0:
        return nothing_to_draw(ax, "no whole calendar year in the record")
    if campaign_years is not None:
        first, last = min(campaign_years), max(campaign_years)
        ax.axvspan(
            float(first), float(last) + isinstance(last, Integral), color=GRID, zorder=0,
            linewidth=0, label="measured at the site",
        )  # fmt: skip
    if long_term_mean is not None:
        ax.axhline(
            long_term_mean,
            color=ACCENT,
            linestyle=LINE_STYLES[1],
            linewidth=1.3,
            label=f"mean of the record, {long_term_mean:.2f} m/s",
        )
    # A calendar year reaches from its number to the next; its mean stands in the middle.
    ax.plot(shown + 0.5, means, color=MAIN, marker="o", markersize=4.5, label="yearly mean")
    every = max(1, int(np.ceil((shown.max() - shown.min() + 1) / _YEARS_NAMED)))
    named = np.arange(shown.max(), shown.min() - 1, -every)[::-1]
    ax.set_xticks(named + 0.5, [f"{year:.0f}" for year in named])
    ax.set_xticks(np.arange(shown.min(), shown.max() + 2), minor=True)
    ax.tick_params(axis="x", which="major", length=0)
    ax.tick_params(axis="x", which="minor", length=3.5, color=MUTED)
    ax.set_xlim(shown.min() - 0.2, shown.max() + 1.2)
    level_room(ax)
    legend_below(ax, 3)
    return ax


@in_house_style
def method_comparison(
    methods: pd.DataFrame,
    *,
    label: str = "Long-term mean wind speed [m/s]",
    chosen: str | None = None,
    ax: Axes | None = None,
    title: str = "What each method would have said",
) -> Axes:
    """Answers of several methods with their intervals.

    Parameters
    ----------
    methods : DataFrame
        Columns `method`, `mean`, `low` and `high`, all but the first in the unit of `label`.
    label : str
        Quantity and unit.
    chosen : str, optional
        The method the study stands on, set out from the others.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    names = [str(name) for name in methods["method"]]
    ax = new_axes(ax, height=1.2 + 0.34 * len(names))
    dress(ax, title=title, x=label, grid="x")
    for position, (mean, low, high) in enumerate(
        methods[["mean", "low", "high"]].to_numpy(dtype=float)
    ):
        colour = MAIN if chosen is None or names[position] == chosen else MUTED
        ax.plot([low, high], [position, position], color=colour, linewidth=2.4)
        ax.plot([mean], [position], "o", color=colour, markersize=6.5)
        ax.annotate(
            f"{mean:.2f}",
            (mean, position),
            xytext=(0, 6),
            textcoords="offset points",
            ha="center",
            fontsize=8,
            color=INK,
        )
    ax.set_yticks(range(len(names)), names)
    for text in ax.get_yticklabels():
        text.set_fontweight("bold" if text.get_text() == chosen else "normal")
    ax.set_ylim(len(names) - 0.5, -0.7)
    ax.spines["left"].set_visible(False)
    ax.tick_params(axis="y", length=0)
    return ax
