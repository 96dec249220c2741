"""Figures of a suspected span: what the channel did there, and what stands around it.

Which values are shown is in `windkit.study.review`, the buttons below the figure in
`windkit.faces.panels`.
"""

from __future__ import annotations

import io
from collections.abc import Hashable, Mapping
from typing import TYPE_CHECKING, Any

import pandas as pd

from windkit.faces.look import ACCENT, BAD, DPI, MUTED, dress, in_house_style, line_style
from windkit.study.ledger import ALL
from windkit.study.record import Record
from windkit.study.review import span_window
from windkit.study.stations import ChannelSettings

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = ["span_picture"]

_LABELS = {
    "wind_speed": "Wind speed [m/s]",
    "wind_speed_of_gust": "Wind speed [m/s]",
    "wind_from_direction": "Wind direction, from [°]",
    "air_temperature": "Temperature [K]",
    "air_pressure": "Pressure [Pa]",
    "relative_humidity": "Relative humidity [1]",
    "dew_point_temperature": "Dew point [K]",
    "air_density": "Air density [kg/m³]",
}
#: Up to so many values a span's own are marked one by one.
_MARKED_SINGLY = 80


@in_house_style
def span_picture(record: Record, span: Mapping[Hashable, Any] | pd.Series) -> bytes:
    """A span and what stands around it, drawn as PNG; the same span gives the same bytes.

    Parameters
    ----------
    record : Record
        The checked record.
    span : Series or mapping
        A row of `windkit.study.review.spans_to_review`.
    """
    from matplotlib.dates import AutoDateLocator, ConciseDateFormatter
    from matplotlib.figure import Figure

    window = span_window(record, span)
    shown = [record.settings.channel(str(name)) for name in window.columns]
    alike = [channel for channel in shown if _label(channel) == _label(shown[0])]
    other = [channel for channel in shown if channel not in alike]
    figure = Figure(figsize=(8.8, 4.1 if other else 3.1))
    rows = figure.subplots(
        1 + bool(other), 1, sharex=True, squeeze=False, height_ratios=[2.4, 1][: 1 + bool(other)]
    )[:, 0]
    daily = len(window) > 1 and window.index[1] - window.index[0] > record.interval
    for ax, channels in zip(rows, [alike, other], strict=False):
        label = _label(channels[0])
        # A low strip has room for the unit alone; its channel stands above it.
        dress(ax, y=label if ax is rows[0] else label[label.index("[") :])
        ax.axvspan(span["from"], span["to"], color=ACCENT, alpha=0.13, linewidth=0)
        # The span's own channel is drawn last, over the others.
        for position in reversed(range(len(channels))):
            _draw_channel(ax, window, channels[position], position, own=ax is rows[0])
        ax.yaxis.set_label_coords(-0.065, 0.5)
    _mark_span(rows[0], window, span)
    means = ", daily means" if daily else ""
    where = "all channels" if span["channel"] == ALL else str(span["channel"])
    rows[0].set_title(f"{where}: {span['rule']}{means}")
    handles, names = rows[0].get_legend_handles_labels()
    order = range(len(names) - 2, -1, -1)  # the marks stand last
    rows[0].legend(
        [handles[at] for at in (*order, len(names) - 1)],
        [names[at] for at in (*order, len(names) - 1)],
        loc="lower right",
        bbox_to_anchor=(1.0, 1.0),
        ncols=len(names),
        borderaxespad=0.2,
    )
    locator = AutoDateLocator(tz="UTC")
    rows[-1].xaxis.set_major_locator(locator)
    rows[-1].xaxis.set_major_formatter(ConciseDateFormatter(locator, tz="UTC"))
    rows[-1].set_xlabel("Time (UTC)")
    rows[-1].margins(x=0.01)
    picture = io.BytesIO()
    figure.savefig(picture, format="png", dpi=DPI, metadata={"Software": None})
    return picture.getvalue()


def _draw_channel(
    ax: Axes, window: pd.DataFrame, channel: ChannelSettings, position: int, *, own: bool
) -> None:
    style = line_style(position) if own else {"color": MUTED, "linestyle": "-"}
    if channel.is_direction:  # no line: it would run across the page at each turn through north
        style |= {"linestyle": "none", "marker": ".", "markersize": 3.0}
        ax.set_ylim(0, 360)
        ax.set_yticks([0, 90, 180, 270, 360])
    width = 1.5 if own and position == 0 else 1.0
    ax.plot(window.index, window[channel.name], label=channel.name, linewidth=width, **style)
    if not own:
        ax.set_title(channel.name, fontsize=8.5, fontweight="normal", color=MUTED, pad=3.0)


def _mark_span(ax: Axes, window: pd.DataFrame, span: Mapping[Hashable, Any] | pd.Series) -> None:
    inside = window.iloc[:, 0][(window.index >= span["from"]) & (window.index < span["to"])]
    few = inside.notna().sum() <= _MARKED_SINGLY
    ax.plot(
        inside.index,
        inside,
        color=BAD,
        linewidth=2.2,
        linestyle="none" if few else "-",
        marker="o" if few else None,
        markersize=3.6,
        label="suspected",
    )


def _label(channel: ChannelSettings) -> str:
    label = _LABELS[channel.quantity]
    if channel.statistic != "sd":
        return label
    name, unit = label.rsplit(" ", 1)
    return f"Spread of {name.removesuffix(', from').lower()} {unit}"
