"""Figures of the way up to the hub and of the site's conditions.

Every function takes plain arrays or frames, draws on `ax` (or a new figure) and returns it. Nothing
is computed here that the numbers of the study depend on. Wind at the mast is in
`windkit.faces.figures_measured`, energy in `windkit.faces.figures_energy`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import FixedLocator, FuncFormatter, MaxNLocator
from numpy.typing import ArrayLike

from windkit.faces.look import (
    ACCENT,
    BAD,
    FAINT,
    INK,
    LINE_STYLES,
    MAIN,
    MUTED,
    PAGE_WIDTH,
    PALE,
    dress,
    in_house_style,
    legend_below,
    line_style,
    new_axes,
    nothing_to_draw,
    percent_axis,
)

if TYPE_CHECKING:
    import pandas as pd

__all__ = [
    "density_by_month",
    "errors_of_height_left_out",
    "exponent_by_hour",
    "return_levels",
    "turbulence_against_classes",
]

_MONTHS = "JFMAMJJASOND"
_PERIODS = (1.1, 2.0, 5.0, 10.0, 20.0, 50.0, 100.0)


@in_house_style
def exponent_by_hour(
    exponent: pd.DataFrame, *, ax: Axes | None = None, title: str = "Shear from the mast to the hub"
) -> Axes:
    """Shear exponent by hour of the day, one line a season.

    Parameters
    ----------
    exponent : DataFrame
        Index the hour 0 to 23, a column for each season [1].
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    ax = new_axes(ax)
    dress(ax, title=title, x="Hour of the day, sun time [h]", y="Shear exponent")
    if not exponent.notna().to_numpy().any():
        return nothing_to_draw(ax, "mast and hub are at one height")
    for position, season in enumerate(exponent.columns):
        ax.plot(exponent.index, exponent[season], label=str(season), **line_style(position))
    values = exponent.to_numpy(dtype=float)
    # From zero, so that a small swing does not look like a large one.
    ax.set_ylim(min(0.0, 1.1 * float(np.nanmin(values))), 1.15 * float(np.nanmax(values)) + 0.02)
    ax.set_xlim(-0.5, 23.5)
    ax.set_xticks(range(0, 25, 6))
    legend_below(ax, len(exponent.columns))
    return ax


@in_house_style
def errors_of_height_left_out(
    errors: pd.DataFrame,
    *,
    ax: Sequence[Axes] | None = None,
    title: str = "The top sensor, predicted from those below",
) -> Sequence[Axes]:
    """Error of the predicted top sensor by hour, season and sector, side by side.

    Parameters
    ----------
    errors : DataFrame
        Columns by (hour, season, sector or all), group and error [1].
    ax : three Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    import matplotlib.pyplot as plt

    trio = (
        plt.subplots(1, 3, figsize=(PAGE_WIDTH, 2.9), sharey=True, width_ratios=(3, 1.6, 2.4))[1]
        if ax is None
        else ax
    )
    dress(trio[0], title=title, x="Hour, sun time [h]", y="Error of mean speed")
    dress(trio[1], x="Season")
    dress(trio[2], x="Wind from sector")
    if errors.empty:
        nothing_to_draw(trio[0], "fewer than three heights")
        return trio
    whole = errors.loc[errors["by"] == "all", "error"]
    for panel, by in zip(trio, ("hour", "season", "sector"), strict=True):
        part = errors[errors["by"] == by]
        at = np.arange(len(part))
        panel.bar(at, part["error"], width=0.75, color=MAIN, alpha=0.9)
        panel.axhline(0.0, color=INK, linewidth=0.8)
        if len(whole):
            panel.axhline(
                float(whole.iloc[0]), color=ACCENT, linestyle=LINE_STYLES[1], linewidth=1.3,
                label="all intervals",
            )  # fmt: skip
        names = [str(name) for name in part["group"]]
        every = max(1, int(np.ceil(len(names) / (8 if by == "hour" else 6))))
        panel.set_xticks(at[::every], names[::every])
        if by != "hour":
            panel.tick_params(axis="x", rotation=45)
    trio[0].yaxis.set_major_formatter(percent_axis())
    reach = 1.2 * max(float(errors["error"].abs().max()), 0.005)
    low = -reach if float(errors["error"].min()) < 0 else -0.25 * reach
    high = reach if float(errors["error"].max()) > 0 else 0.25 * reach
    trio[0].set_ylim(low, high)
    trio[0].legend(loc="lower right")
    return trio


@in_house_style
def density_by_month(
    month: ArrayLike,
    air_density: ArrayLike,
    reference_density: ArrayLike | None = None,
    *,
    mean: float | None = None,
    reference_name: str = "reference",
    ax: Axes | None = None,
    title: str = "Air density at hub height by month",
) -> Axes:
    """Air density by calendar month, and the reference's beside it.

    Parameters
    ----------
    month : array_like
        1 to 12.
    air_density : array_like
        [kg/m3].
    reference_density : array_like, optional
        From the reference in the same hours, carried to the hub [kg/m3].
    mean : float, optional
        The study's mean [kg/m3].
    reference_name : str
        What the reference is called.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    ax = new_axes(ax)
    dress(ax, title=title, x="Month", y="Air density [kg/m³]")
    months = np.asarray(month, dtype=float)
    ax.plot(months, air_density, color=MAIN, marker="o", markersize=4, label="hub, above the mast")
    if reference_density is not None:
        other = np.asarray(reference_density, dtype=float)
        if np.isfinite(other).any():
            ax.plot(
                months, other, color=ACCENT, marker="s", markersize=3.5, linestyle=LINE_STYLES[1],
                label=f"{reference_name}, carried to the hub",
            )  # fmt: skip
    if mean is not None:
        ax.axhline(mean, color=MUTED, linewidth=0.9, label=f"mean of months {mean:.3f} kg/m³")
    ax.set_xticks(range(1, 13), list(_MONTHS))
    ax.set_xlim(0.5, 12.5)
    ax.yaxis.set_major_locator(MaxNLocator(6))
    legend_below(ax, 3)
    return ax


@in_house_style
def turbulence_against_classes(
    speed: ArrayLike,
    representative: ArrayLike,
    classes: Mapping[str, ArrayLike],
    *,
    mean: ArrayLike | None = None,
    effective: ArrayLike | None = None,
    judged: tuple[float, float] | None = None,
    ax: Axes | None = None,
    title: str = "Turbulence against the design classes",
) -> Axes:
    """Turbulence intensity of the site under, or over, the normal turbulence lines.

    Parameters
    ----------
    speed : array_like
        Bin centres [m/s].
    representative : array_like
        90 % value in each bin [1].
    classes : mapping of name to array_like
        The normal turbulence line of each class at the same speeds [1].
    mean, effective : array_like, optional
        Mean intensity, and effective intensity with wakes [1].
    judged : tuple of float, optional
        Speeds between which the verdict is made [m/s].
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    V = np.asarray(speed, dtype=float)
    ax = new_axes(ax, height=3.8)
    dress(ax, title=title, x="Wind speed [m/s]", y="Turbulence intensity")
    if V.size == 0:
        return nothing_to_draw(ax, "turbulence is not assessed")
    if judged is not None:
        ax.axvspan(judged[0], min(judged[1], float(V.max()) + 0.5), color=PALE, zorder=0)
        ax.annotate(
            "judged here", (judged[0], 0.0), xytext=(4, 4), textcoords="offset points",
            fontsize=8, color=MUTED,
        )  # fmt: skip
    for name, line in classes.items():
        heights = np.asarray(line, dtype=float)
        ax.plot(V, heights, color=MUTED, linewidth=0.9, zorder=1)
        ax.annotate(
            name, (V[-1], heights[-1]), xytext=(4, 0), textcoords="offset points", va="center",
            fontsize=8, color=MUTED,
        )  # fmt: skip
    for values, colour, style, label in (
        (effective, BAD, LINE_STYLES[2], "90 % value with wakes, m = 10"),
        (representative, MAIN, LINE_STYLES[0], "90 % value"),
        (mean, ACCENT, LINE_STYLES[1], "mean"),
    ):
        if values is not None and np.isfinite(np.asarray(values, dtype=float)).any():
            ax.plot(
                V, np.asarray(values, dtype=float), color=colour, linestyle=style, marker="o",
                markersize=3, label=label,
            )  # fmt: skip
    ax.set_ylim(
        0.0, min(0.5, 1.08 * float(np.nanmax(np.asarray(representative, dtype=float)) * 1.4))
    )
    ax.set_xlim(0.0, float(V.max()) + 3.0)
    ax.yaxis.set_major_formatter(percent_axis())
    ax.xaxis.set_major_locator(MaxNLocator(integer=True))
    legend_below(ax, 3)
    return ax


@in_house_style
def return_levels(
    maxima_period: ArrayLike,
    maxima_speed: ArrayLike,
    levels: pd.DataFrame,
    *,
    limits: Mapping[str, float] | None = None,
    fit: str = "fit",
    ax: Axes | None = None,
    title: str = "Extreme ten-minute wind at the hub",
) -> Axes:
    """Maxima on Gumbel paper, the fitted line with its 80 % band, and limits beside it.

    Parameters
    ----------
    maxima_period : array_like
        Return period of each maximum's rank [years].
    maxima_speed : array_like
        The maxima [m/s].
    levels : DataFrame
        Columns return_period_years, level_m_s, low_m_s and high_m_s.
    limits : mapping of name to float, optional
        Speeds to hold the fifty-year wind against [m/s].
    fit : str
        What the line is.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """

    def paper(period: ArrayLike) -> np.ndarray:
        # Reduced variate: a Gumbel distribution is a straight line on it.
        return -np.log(-np.log1p(-1.0 / np.asarray(period, dtype=float)))

    ax = new_axes(ax, height=3.8)
    dress(ax, title=title, x="Return period [years]", y="Ten-minute wind speed [m/s]", grid="both")
    if levels.empty:
        return nothing_to_draw(ax, "extreme winds are not assessed")
    x = paper(levels["return_period_years"])
    ax.fill_between(
        x, levels["low_m_s"], levels["high_m_s"], color=FAINT, alpha=0.6, linewidth=0,
        label="80 % of the fit's own scatter",
    )  # fmt: skip
    ax.plot(x, levels["level_m_s"], color=MAIN, label=fit)
    periods = np.asarray(maxima_period, dtype=float)
    shown = periods > 1.0 + 1e-6
    ax.plot(
        paper(periods[shown]), np.asarray(maxima_speed, dtype=float)[shown], "o", color=INK,
        markersize=3.5, label="maxima by rank",
    )  # fmt: skip
    together: dict[float, str] = {}
    for name, speed in (limits or {}).items():
        together[speed] = f"{together[speed]}, {name}" if speed in together else name
    for position, (speed, name) in enumerate(together.items()):
        ax.axhline(speed, color=ACCENT, linestyle=LINE_STYLES[(position + 1) % 4], linewidth=1.1)
        ax.annotate(
            name, (1.0, speed), xycoords=("axes fraction", "data"), xytext=(-4, 3),
            textcoords="offset points", ha="right", fontsize=8, color=ACCENT,
        )  # fmt: skip
    ax.axvline(float(paper(50.0)), color=MUTED, linewidth=0.8, linestyle=LINE_STYLES[2])
    ax.xaxis.set_major_locator(FixedLocator(list(paper(np.array(_PERIODS)))))
    names = {round(float(paper(p)), 6): f"{p:g}" for p in _PERIODS}
    ax.xaxis.set_major_formatter(
        FuncFormatter(lambda value, _position: names.get(round(value, 6), ""))
    )
    lowest = min(1.05, float(periods[shown].min())) if shown.any() else 1.05
    ax.set_xlim(float(paper(lowest)) - 0.15, float(paper(120.0)))
    legend_below(ax, 3)
    return ax
