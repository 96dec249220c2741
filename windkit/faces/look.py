"""The house look: colours, type and axes, in one place.

Here are the colours every figure and the report draw from, matplotlib's settings for them, and
the two or three moves that dress an axes. Not here: what is drawn, which stands in
`windkit.faces.figures`.

The colours are told apart in grey print and by colour-blind readers: neighbours in `SERIES`
differ in lightness, and no figure tells lines apart by colour alone.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import wraps
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

from cycler import cycler

from windkit.faces.wording import number_text

# matplotlib itself is loaded where it is used: tables need the colours without its weight.
if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.colors import LinearSegmentedColormap
    from matplotlib.figure import Figure
    from matplotlib.ticker import FuncFormatter

__all__ = [
    "ACCENT",
    "BAD",
    "DPI",
    "FAINT",
    "GRID",
    "INK",
    "LINE_STYLES",
    "MAIN",
    "MUTED",
    "PAGE_WIDTH",
    "PALE",
    "SERIES",
    "SETTINGS",
    "class_colours",
    "density_colours",
    "dress",
    "in_house_style",
    "legend_below",
    "level_room",
    "line_style",
    "new_axes",
    "nothing_to_draw",
    "number_text",
    "percent_axis",
    "recovery_colours",
    "save_png",
    "sequential",
    "thousands_axis",
    "use",
]

#: Text and the lines that carry the message.
INK = "#20272e"
#: Captions, ticks, secondary lines.
MUTED = "#5f6b75"
#: Fill for what is there for comparison only.
FAINT = "#c9d1d6"
#: Grid lines and table rules.
GRID = "#e3e7ea"
#: Background of boxes and shaded periods.
PALE = "#f3f5f2"
#: The site, the study's own answer.
MAIN = "#17506b"
#: What is held against it: the reference, a limit, a fit.
ACCENT = "#c46a1b"
#: A loss, a shortfall, missing data.
BAD = "#a12d3e"

#: Order in which several series take their colours.
SERIES = (MAIN, ACCENT, "#7fb3b0", BAD, "#a8973b", MUTED)
#: Order in which the same series take their dashes, so that grey print still tells them apart.
LINE_STYLES: tuple[Any, ...] = ("-", (0, (6, 2)), (0, (1.5, 1.5)), (0, (6, 2, 1.5, 2)), "-", "--")

#: Dots per inch of a figure on a screen or in the report.
DPI = 110
#: Widest figure [inch]. It fits between the margins of an A4 page, so no figure is shrunk in
#: print and its letters stay as large as the text around it.
PAGE_WIDTH = 5.75

#: From the palest to the darkest step of a quantity that only grows.
_SEQUENCE = ("#f1f3ee", "#c9d9d3", "#8fb9b6", "#4d8a96", "#17506b", "#0c2b3d")

#: matplotlib settings of a house figure.
SETTINGS: dict[str, Any] = {
    "figure.dpi": DPI,
    "savefig.dpi": DPI,
    "figure.facecolor": "white",
    "savefig.facecolor": "white",
    "figure.constrained_layout.use": True,
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],  # comes with matplotlib, so every machine has it
    "font.size": 9.0,
    "text.color": INK,
    "axes.titlesize": 10.0,
    "axes.titleweight": "bold",
    "axes.titlelocation": "left",
    "axes.titlepad": 9.0,
    "axes.labelsize": 9.0,
    "axes.labelcolor": INK,
    "axes.edgecolor": MUTED,
    "axes.linewidth": 0.8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.axisbelow": True,
    "axes.prop_cycle": cycler(color=SERIES),
    "grid.color": GRID,
    "grid.linewidth": 0.8,
    "xtick.color": MUTED,
    "ytick.color": MUTED,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "xtick.labelsize": 8.5,
    "ytick.labelsize": 8.5,
    "xtick.direction": "out",
    "ytick.direction": "out",
    "legend.frameon": True,  # a white ground without an edge: guide lines stop at the words
    "legend.facecolor": "white",
    "legend.edgecolor": "none",
    "legend.framealpha": 0.92,
    "legend.fontsize": 8.5,
    "lines.linewidth": 1.8,
    "lines.solid_capstyle": "butt",
    "svg.hashsalt": "house",
}

_Drawing = TypeVar("_Drawing", bound=Callable[..., Any])


def use() -> None:
    """Give every later figure of this session the house look."""
    import matplotlib as mpl

    mpl.rcParams.update(SETTINGS)  # type: ignore[arg-type,unused-ignore]


def in_house_style(draw: _Drawing) -> _Drawing:
    """Let a drawing function work under the house settings and leave the session's alone."""

    @wraps(draw)
    def drawn(*args: Any, **kwargs: Any) -> Any:
        import matplotlib as mpl

        # Not rc_context: a notebook's backend switches itself to interactive at the first figure,
        # which that would undo, and every later figure would stay unseen.
        session: Any = mpl.rcParams
        before = {name: session[name] for name in SETTINGS}
        session.update(SETTINGS)
        try:
            return draw(*args, **kwargs)
        finally:
            session.update(before)

    return drawn  # type: ignore[return-value]


def new_axes(ax: Axes | None, *, width: float = PAGE_WIDTH, height: float = 3.2) -> Axes:
    """The axes given, or those of a new figure of that size [inch]."""
    import matplotlib.pyplot as plt

    if ax is not None:
        return ax
    return plt.subplots(figsize=(width, height))[1]


def dress(ax: Axes, *, title: str = "", x: str = "", y: str = "", grid: str | None = "y") -> Axes:
    """Put title, axis labels with units, and the quiet grid on an axes."""
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        ax.spines[side].set_color(MUTED)
    ax.tick_params(colors=MUTED, labelcolor=INK)
    ax.set_axisbelow(True)
    ax.grid(visible=False)
    if grid == "both":
        ax.grid(visible=True)
    elif grid in ("x", "y"):
        ax.grid(visible=True, axis=grid)  # type: ignore[arg-type]
    if title:
        ax.set_title(title)
    if x:
        ax.set_xlabel(x)
    if y:
        ax.set_ylabel(y)
    return ax


def nothing_to_draw(ax: Axes, said: str) -> Axes:
    """Say on an empty axes why it is empty, so that a chapter keeps its place for the figure."""
    ax.set_xticks([])
    ax.set_yticks([])
    ax.text(0.5, 0.5, said, transform=ax.transAxes, ha="center", va="center", color=MUTED)
    return ax


def sequential() -> LinearSegmentedColormap:
    """Colour map from pale to dark for a quantity that only grows."""
    from matplotlib.colors import LinearSegmentedColormap

    return LinearSegmentedColormap.from_list("house", _SEQUENCE)


def recovery_colours() -> LinearSegmentedColormap:
    """Colour map of a share that ought to be whole: what is missing stands out."""
    from matplotlib.colors import LinearSegmentedColormap

    stops = [(0.0, ACCENT), (0.5, "#e6bd94"), (0.85, "#f3ead9"), (0.9, "#e3ece8"), (1.0, "#9cc4c0")]
    return LinearSegmentedColormap.from_list("recovery", stops)


def class_colours(count: int) -> list[str]:
    """Colours of `count` classes in rising order, pale to dark."""
    from matplotlib.colors import to_hex

    colours = sequential()
    steps = [0.12 + 0.88 * i / max(count - 1, 1) for i in range(count)]
    return [to_hex(colours(step)) for step in steps]


def density_colours() -> LinearSegmentedColormap:
    """Colour map of many points in one place, pale enough below for lines drawn over it."""
    from matplotlib.colors import LinearSegmentedColormap

    return LinearSegmentedColormap.from_list("density", ["#dfe8e5", "#8fb9b6", MAIN])


def line_style(position: int) -> dict[str, Any]:
    """Colour and dashes of one of several series."""
    return {
        "color": SERIES[position % len(SERIES)],
        "linestyle": LINE_STYLES[position % len(LINE_STYLES)],
    }


def percent_axis(decimals: int | None = None) -> FuncFormatter:
    """Ticks that show a fraction as a percentage."""
    from matplotlib.ticker import FuncFormatter

    if decimals is None:
        return FuncFormatter(lambda share, _position: f"{100 * share:.4g} %")
    return FuncFormatter(lambda share, _position: f"{100 * share:.{decimals}f} %")


def thousands_axis(decimals: int = 0) -> FuncFormatter:
    """Ticks with narrow spaces between thousands."""
    from matplotlib.ticker import FuncFormatter

    return FuncFormatter(lambda value, _position: number_text(float(value), decimals))


def legend_below(ax: Axes, columns: int, handles: Sequence[Artist] | None = None) -> None:
    """Legend below the axes where the figure has room for one, so that it never hides a line."""
    figure = ax.get_figure()
    shown, names = ax.get_legend_handles_labels()
    if handles is not None:
        shown, names = list(handles), [str(handle.get_label()) for handle in handles]
    if figure is not None and len(figure.axes) <= 2 and ax is figure.axes[0]:
        # As many side by side as the width of the figure has room for.
        room = int(
            12 * float(figure.bbox.width / figure.dpi) / (max(map(len, names), default=0) + 6)
        )
        side_by_side = max(1, min(columns, 3, room))
        figure.legend(shown, names, loc="outside lower center", ncols=side_by_side)
    else:
        ax.legend(shown, names, loc="best")


def level_room(ax: Axes) -> None:
    """Room above and below the lines, so that small changes do not look like large ones."""
    low, high = ax.get_ylim()
    middle = (low + high) / 2
    reach = max(1.15 * (high - low) / 2, 0.15 * middle)
    ax.set_ylim(max(0.0, middle - reach), middle + reach)


def save_png(figure: Figure | Axes, path: Path | str) -> Path:
    """Write a figure as PNG; the same figure gives the same bytes.

    Parameters
    ----------
    figure : Figure or Axes
        What to write; an axes stands for its figure.
    path : Path or str
        File to write.

    Returns
    -------
    Path
        The file.
    """
    from matplotlib.figure import Figure

    whole = figure if isinstance(figure, Figure) else figure.get_figure(root=True)
    if whole is None:
        raise ValueError("these axes were taken out of their figure; draw them again")
    target = Path(path)
    whole.savefig(target, format="png", dpi=DPI, metadata={"Software": None})
    return target
