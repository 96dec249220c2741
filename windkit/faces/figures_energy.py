"""Figures of energy: the turbine, from gross to net, and how sure the answer is.

Every function takes plain arrays, draws on `ax` (or a new figure) and returns it. Nothing is
computed here that the numbers of the study depend on. The wind stands in
`windkit.faces.figures_measured`; workbooks take both from `windkit.faces.figures`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.patches import Patch
from matplotlib.ticker import MaxNLocator
from numpy.typing import ArrayLike

from windkit.faces.look import (
    ACCENT,
    BAD,
    FAINT,
    INK,
    LINE_STYLES,
    MAIN,
    MUTED,
    SERIES,
    dress,
    in_house_style,
    legend_below,
    new_axes,
    number_text,
    percent_axis,
    thousands_axis,
)
from windkit.faces.wording import as_printed, percent_number
from windkit.kernels.exceedance import exceedance_level

__all__ = [
    "exceedance_curves",
    "loss_staircase",
    "power_curve",
    "tornado",
    "uncertainty_bars",
]

#: Probabilities of exceedance that are marked on the curves [1].
_MARKED = (0.5, 0.75, 0.9, 0.95, 0.99)
#: Curves of long periods all but coincide: a wide pale one shows beside a thin one on top of it.
_APART: tuple[dict[str, Any], ...] = (
    {"linewidth": 1.8, "linestyle": "-"},
    {"linewidth": 4.5, "linestyle": "-", "alpha": 0.45},
    {"linewidth": 1.4, "linestyle": LINE_STYLES[1]},
)
#: Tells the second colour apart in grey print.
_HATCHED: dict[str, Any] = {"hatch": "////", "edgecolor": "white", "linewidth": 0}


@in_house_style
def power_curve(
    curve_speed: ArrayLike,
    curve_power_kw: ArrayLike,
    ceiling_power_kw: ArrayLike | None = None,
    *,
    ax: Axes | None = None,
    title: str = "Power curve",
) -> Axes:
    """Power curve of the turbine under the Betz limit of its rotor.

    Parameters
    ----------
    curve_speed : array_like
        Speeds of the curve [m/s].
    curve_power_kw : array_like
        Electrical power there [kW].
    ceiling_power_kw : array_like, optional
        Power the Betz limit allows the rotor at the same speeds [kW].
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    speed = np.asarray(curve_speed, dtype=float)
    power = np.asarray(curve_power_kw, dtype=float)
    ax = new_axes(ax)
    dress(ax, title=title, x="Wind speed at hub height [m/s]", y="Power [kW]")
    top = 1.15 * float(np.nanmax(power))
    if ceiling_power_kw is not None:
        ceiling = np.asarray(ceiling_power_kw, dtype=float)
        ax.fill_between(
            speed,
            ceiling,
            max(top, float(np.nanmax(ceiling))),
            color=FAINT,
            alpha=0.35,
            linewidth=0,
        )
        ax.plot(
            speed,
            ceiling,
            color=ACCENT,
            linestyle=LINE_STYLES[1],
            linewidth=1.4,
            label="Betz limit of the rotor, 16/27 of the stream",
        )
    ax.plot(speed, power, color=MAIN, marker="o", markersize=3, label="curve as given")
    ax.set_ylim(0.0, top)
    ax.set_xlim(0.0, float(speed.max()) + 1.0)
    ax.yaxis.set_major_formatter(thousands_axis())
    ax.legend(loc="lower right", bbox_to_anchor=(1.0, 0.08))
    return ax


@in_house_style
def loss_staircase(
    labels: Sequence[str],
    values: ArrayLike,
    *,
    unit: str = "GWh/year",
    net_label: str = "Net",
    ax: Axes | None = None,
    title: str = "From gross to net energy",
) -> Axes:
    """Energy that is left after each loss, and net as the last bar.

    Parameters
    ----------
    labels : sequence of str
        Gross, then the losses in the order they are taken, shape (n,).
    values : array_like
        Gross energy, then what is left after each loss, in `unit`, shape (n,); the last one is
        net and gets a bar of its own.
    unit : str
        Unit of the energy.
    net_label : str
        Name of the last bar.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.

    Raises
    ------
    ValueError
        If labels and values differ in number, energy grows on the way, or net is negative.
    """
    left = np.asarray(values, dtype=float)
    if len(labels) != left.size or left.size == 0:
        raise ValueError(
            f"a staircase of {left.size} values needs as many labels, not {len(labels)}"
        )
    if np.any(np.diff(left) > 1e-9 * abs(left[0])) or left[-1] < 0:
        raise ValueError(
            "energy must fall from gross to net and stay above zero; give what is left after "
            "each loss, not the loss"
        )
    gross, net, last = float(left[0]), float(left[-1]), left.size
    ax = new_axes(ax, height=1.1 + 0.27 * (last + 1))
    dress(ax, title=title, x=f"Energy [{unit}]", grid="x")
    decimals = _energy_decimals(gross)
    for row, value in ((0, gross), (last, net)):
        ax.barh(row, value, height=0.62, color=MAIN)
        _beside(ax, number_text(value, decimals), value, row, bold=True)
    for row in range(1, last):
        lost = float(left[row - 1] - left[row])
        ax.barh(row, lost, left=left[row], height=0.62, color=BAD)
        share = lost / left[row - 1] if left[row - 1] else 0.0
        said = f"−{number_text(lost, decimals)} ({percent_number(share)} %)"
        _beside(ax, said, float(left[row - 1]), row)
    for row, value in enumerate(left):
        # The thread from one step to the next.
        ax.plot([value, value], [row + 0.31, row + 0.69], color=MUTED, linewidth=0.7)
    ax.set_yticks(range(last + 1), [*(str(label) for label in labels), net_label])
    ax.invert_yaxis()
    ax.tick_params(axis="y", length=0)
    # The axis starts at zero, so that a loss is seen for what it is.
    ax.set_xlim(0.0, 1.22 * gross)
    ax.xaxis.set_major_formatter(thousands_axis())
    return ax


@in_house_style
def uncertainty_bars(
    labels: Sequence[str],
    standard_uncertainty: ArrayLike,
    varies: Sequence[str],
    *,
    total: Mapping[str, float] | None = None,
    ax: Axes | None = None,
    title: str = "What makes the spread",
) -> Axes:
    """Standard uncertainties of energy, those that average out over years set apart.

    Parameters
    ----------
    labels : sequence of str
        What each comes from.
    standard_uncertainty : array_like
        In energy, as a fraction of it [1].
    varies : sequence of str
        "static" or "yearly" for each.
    total : mapping of name to float, optional
        Totals to show below, such as that of one year and of ten [1].
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.

    Raises
    ------
    ValueError
        If the three differ in number or a word is neither "static" nor "yearly".
    """
    sizes = np.asarray(standard_uncertainty, dtype=float)
    if not len(labels) == sizes.size == len(varies):
        raise ValueError(
            f"labels ({len(labels)}), standard_uncertainty ({sizes.size}) and varies "
            f"({len(varies)}) must be of one length"
        )
    if strange := set(varies) - {"static", "yearly"}:
        raise ValueError(f"an uncertainty varies 'static' or 'yearly', not {sorted(strange)}")
    colours = {"static": MAIN, "yearly": ACCENT}
    order = [
        index
        for kind in ("static", "yearly")
        for index in sorted(
            (i for i, word in enumerate(varies) if word == kind), key=lambda i: -sizes[i]
        )
    ]
    names = [str(labels[index]) for index in order] + list(total or {})
    values = [float(sizes[index]) for index in order] + list((total or {}).values())
    fills = [colours[varies[index]] for index in order] + [INK] * len(total or {})
    ax = new_axes(ax, height=1.3 + 0.235 * len(names))
    dress(ax, title=title, x="Standard uncertainty in energy", grid="x")
    rows = np.arange(len(names), dtype=float)
    rows[len(order) :] += 0.5
    bars = ax.barh(rows, values, height=0.6, color=fills)
    for index, bar in zip(order, bars, strict=False):
        if varies[index] == "yearly":
            bar.set_hatch("////")
            bar.set_edgecolor("white")
            bar.set_linewidth(0)
    for row, value in zip(rows, values, strict=True):
        _beside(ax, f"{percent_number(value)} %", value, row)
    ax.set_yticks(rows, names)
    ax.invert_yaxis()
    ax.tick_params(axis="y", length=0)
    ax.set_xlim(0.0, 1.14 * max(values))
    ax.xaxis.set_major_formatter(percent_axis())
    handles = [
        Patch(facecolor=MAIN, label="the same every year"),
        Patch(facecolor=ACCENT, **_HATCHED, label="drawn anew each year"),
    ]
    legend_below(ax, 2, handles)
    return ax


@in_house_style
def exceedance_curves(
    p50: float,
    standard_uncertainty: Mapping[float, float],
    *,
    unit: str = "MWh/year",
    ax: Axes | None = None,
    title: str = "Energy and the probability of exceeding it",
) -> Axes:
    """Probability that the mean of some years exceeds an energy, P50 to P99 marked.

    Parameters
    ----------
    p50 : float
        Central estimate, in `unit`.
    standard_uncertainty : mapping of years to float
        Standard uncertainty of the mean of so many years, as a fraction of `p50` [1].
    unit : str
        Unit of the energy.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    chance = np.concatenate([[0.002, 0.005], np.linspace(0.01, 0.99, 197), [0.995, 0.998]])
    ax = new_axes(ax, height=3.9)
    dress(ax, title=title, x=f"Mean energy [{unit}]", y="Probability of exceeding it", grid="x")
    for level in _MARKED:
        ax.axhline(level, color=FAINT, linewidth=0.7, zorder=0.5)
        ax.annotate(
            f"P{100 * level:g}",
            (1.0, level),
            xycoords=("axes fraction", "data"),
            xytext=(4, 4 if level == max(_MARKED) else 0),  # P99 and P95 all but touch
            textcoords="offset points",
            va="center",
            fontsize=8,
            color=INK,
        )
    for position, (years, spread) in enumerate(standard_uncertainty.items()):
        colour = (MAIN, ACCENT, INK, *SERIES[2:])[position % 7]
        name = "1 year" if years == 1 else f"{years:g} years"
        p90 = float(exceedance_level(p50, spread, 0.9))
        ax.plot(
            exceedance_level(p50, spread, chance),
            chance,
            color=colour,
            label=f"{name}: P90 {number_text(p90, _energy_decimals(p50))}",
            **_APART[position % len(_APART)],
        )
        ax.plot(
            exceedance_level(p50, spread, np.asarray(_MARKED)),
            _MARKED,
            "o",
            color=colour,
            markersize=4,
            markeredgecolor="white",
            markeredgewidth=0.6,
        )
    ax.set_ylim(0.0, 1.0)
    ax.set_yticks(np.linspace(0.0, 1.0, 6))
    ax.yaxis.set_major_formatter(percent_axis())
    ax.xaxis.set_major_formatter(thousands_axis(_energy_decimals(p50)))
    ax.xaxis.set_major_locator(MaxNLocator(6))
    ax.set_xlabel(f"Mean energy [{unit}], P50 {number_text(p50, _energy_decimals(p50))}")
    legend_below(ax, 3)
    return ax


@in_house_style
def tornado(
    labels: Sequence[str],
    low: ArrayLike,
    high: ArrayLike,
    base: float,
    *,
    unit: str = "MWh/year",
    ax: Axes | None = None,
    title: str = "What drives the answer",
) -> Axes:
    """How far the answer moves when one input moves at a time, the widest on top.

    Parameters
    ----------
    labels : sequence of str
        Inputs with the step each was moved by.
    low, high : array_like
        Answer with the input at its lower and its upper value, in `unit`.
    base : float
        Answer of the study, in `unit`.
    unit : str
        Unit of the answer.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    down = np.asarray(low, dtype=float)
    up = np.asarray(high, dtype=float)
    order = np.argsort(-np.abs(up - down), kind="stable")
    ax = new_axes(ax, height=1.5 + 0.34 * len(labels))
    dress(ax, title=title, x=f"Answer [{unit}]", grid="x")
    decimals = _energy_decimals(base)
    for row, index in enumerate(order):
        for value, colour, hatch in ((down[index], ACCENT, "////"), (up[index], MAIN, "")):
            ax.barh(
                row, value - base, left=base, height=0.6, color=colour, hatch=hatch,
                edgecolor="white", linewidth=0,
            )  # fmt: skip
            ax.annotate(
                number_text(float(value), decimals),
                (value, row),
                xytext=(4 if value >= base else -4, 0),
                textcoords="offset points",
                ha="left" if value >= base else "right",
                va="center",
                fontsize=8,
            )
    ax.axvline(base, color=INK, linewidth=1.0)
    ax.set_yticks(range(len(order)), [as_printed(str(labels[index])) for index in order])
    ax.invert_yaxis()
    ax.tick_params(axis="y", length=0)
    ax.spines["left"].set_visible(False)
    reach = 1.35 * float(np.abs(np.concatenate([up - base, down - base])).max())
    ax.set_xlim(base - reach, base + reach)
    ax.xaxis.set_major_formatter(thousands_axis(decimals))
    ax.xaxis.set_major_locator(MaxNLocator(6))
    handles = [
        Patch(facecolor=ACCENT, **_HATCHED, label="input at its lower value"),
        Patch(facecolor=MAIN, label="input at its upper value"),
    ]
    legend_below(ax, 2, handles)
    return ax


def _beside(ax: Axes, text: str, value: float, row: float, *, bold: bool = False) -> None:
    ax.annotate(
        text,
        (value, row),
        xytext=(5, 0),
        textcoords="offset points",
        va="center",
        fontsize=8.5,
        fontweight="bold" if bold else "normal",
    )


def _energy_decimals(value: float) -> int:
    return 0 if abs(value) >= 1000 else 1 if abs(value) >= 100 else 2
