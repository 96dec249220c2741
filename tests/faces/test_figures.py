"""Figures: what they draw is what they were given, with units, in the same bytes each time."""

from __future__ import annotations

import itertools

import matplotlib as mpl

mpl.use("Agg")

import matplotlib.pyplot as plt
import numpy as np
import pandas as pd
import pytest

from windkit.faces import figures, look


@pytest.fixture(autouse=True)
def _close_all():
    yield
    plt.close("all")


YEARS = np.arange(2004, 2024)
HOURS = pd.DataFrame({"a": np.linspace(6, 7, 24)}, index=range(24))
MONTHS = pd.DataFrame({"a": np.linspace(6, 7, 12)}, index=range(1, 13))
METHODS = pd.DataFrame(
    {"method": ["x", "y"], "mean": [7, 7.1], "low": [6.8, 7], "high": [7.2, 7.2]}
)
RECOVERY = pd.DataFrame(
    {"a": [0.9999, np.nan], "b": [1.0, 0.0]}, index=pd.period_range("2022-11", periods=2, freq="M")
)

SEASONS = pd.DataFrame(
    {"Dec-Feb": np.linspace(0.1, 0.2, 24), "Jun-Aug": np.linspace(0.3, 0.1, 24)}, index=range(24)
)
LEVELS = pd.DataFrame(
    {
        "return_period_years": [2.0, 10.0, 50.0],
        "level_m_s": [25.0, 29.0, 32.0],
        "low_m_s": [24.0, 28.0, 30.0],
        "high_m_s": [26.0, 30.0, 34.0],
    }
)
ERRORS = pd.DataFrame(
    {
        "by": ["all", "hour", "hour", "season", "sector"],
        "group": ["all", "00", "12", "Jun-Aug", "90°"],
        "error": [0.01, 0.02, -0.01, 0.015, 0.005],
    }
)

FIT = {"f": ([0, 9], [0, 9])}

DRAWINGS = {
    "power_curve": lambda ax: figures.power_curve(
        [3, 12, 25], [50, 3000, 3000], [90, 5e3, 5e4], ax=ax
    ),
    "speed_distribution": lambda ax: figures.speed_distribution(
        [0, 0.5, 1.5], [0.1, 0.9], 1, 2, ax=ax
    ),
    "recovery_map": lambda ax: figures.recovery_map(RECOVERY, ax=ax),
    "profile": lambda ax: figures.profile([40, 80], [6.4, 7.2], 0.17, 100, ax=ax),
    "turbulence_in_speed_bins": lambda ax: figures.turbulence_in_speed_bins(
        [4, 5], [0.1, 0.1], [0.2, 0.2], ax=ax
    ),
    "pair_ratio_by_direction": lambda ax: figures.pair_ratio_by_direction(
        [0, 90, 180, 270], [1, 0.9, 1, 1.1], boom_bearings={"a": 315}, ax=ax
    ),
    "scatter_fit": lambda ax: figures.scatter_fit([4, 5, np.nan], [4, 5, 6], FIT, ax=ax),
    "yearly_means": lambda ax: figures.yearly_means(
        YEARS, np.full(20, 7.0), campaign_years=(2022, 2023), long_term_mean=7.0, ax=ax
    ),
    "method_comparison": lambda ax: figures.method_comparison(METHODS, chosen="y", ax=ax),
    "loss_staircase": lambda ax: figures.loss_staircase(["Gross", "Wake"], [50, 45], ax=ax),
    "uncertainty_bars": lambda ax: figures.uncertainty_bars(
        ["a", "b"], [0.02, 0.06], ["static", "yearly"], total={"all": 0.063}, ax=ax
    ),
    "exceedance_curves": lambda ax: figures.exceedance_curves(45000, {1: 0.09, 10: 0.07}, ax=ax),
    "tornado": lambda ax: figures.tornado(["a", "b"], [40, 44], [50, 46], 45, ax=ax),
    "exponent_by_hour": lambda ax: figures.exponent_by_hour(SEASONS, ax=ax),
    "density_by_month": lambda ax: figures.density_by_month(
        [1, 6, 7], [1.21, 1.17, 1.16], [1.24, np.nan, 1.19], mean=1.18, ax=ax
    ),
    "turbulence_against_classes": lambda ax: figures.turbulence_against_classes(
        [8, 10, 15],
        [0.2, 0.19, 0.18],
        {"class A": [0.22, 0.21, 0.18]},
        mean=[0.1, 0.1, 0.1],
        effective=[np.nan, np.nan, np.nan],
        judged=(9, 25),
        ax=ax,
    ),
    "return_levels": lambda ax: figures.return_levels(
        [1.0, 2.0, 20.0],
        [22.0, 25.0, 31.0],
        LEVELS,
        limits={"class II": 42.5, "the machine": 42.5, "class III": 37.5},
        ax=ax,
    ),
}


@pytest.mark.parametrize("name", DRAWINGS)
def test_draws_on_the_given_axes_and_returns_them(name):
    ax = plt.subplots()[1]
    assert DRAWINGS[name](ax) is ax
    assert ax.get_title(loc="left") or ax.get_title()
    assert ax.get_xlabel() or name == "method_comparison"


@pytest.mark.parametrize("name", DRAWINGS)
def test_same_input_same_bytes(name, tmp_path):
    once, twice = (
        figures.save_png(DRAWINGS[name](None), tmp_path / f"{i}.png").read_bytes() for i in range(2)
    )
    assert once == twice
    assert len(once) < 150_000


def test_the_session_keeps_its_own_settings():
    before = mpl.rcParams["font.size"]
    mpl.rcParams["font.size"] = 13.0
    DRAWINGS["power_curve"](None)
    assert mpl.rcParams["font.size"] == 13.0
    mpl.rcParams["font.size"] = before


def test_every_axis_with_a_dimension_names_its_unit():
    for name in set(DRAWINGS) - {"recovery_map", "method_comparison", "yearly_means"}:
        ax = DRAWINGS[name](None)
        labels = f"{ax.get_xlabel()} {ax.get_ylabel()}"
        shares = "uncertainty" in labels.lower()
        assert "[" in labels or shares, f"{name}: {labels!r}"


def test_power_curve_shows_the_curve_as_given():
    lines = DRAWINGS["power_curve"](None).get_lines()
    assert lines[-1].get_xydata().tolist() == [[3, 50], [12, 3000], [25, 3000]]


def test_distribution_is_drawn_per_metre_a_second():
    # 0.1 of the time in half a metre a second is 0.2 of it per m/s.
    heights = [bar.get_height() for bar in DRAWINGS["speed_distribution"](None).patches]
    assert heights == pytest.approx([0.2, 0.9])


def test_almost_all_is_not_all_in_the_coverage():
    texts = [text.get_text() for text in DRAWINGS["recovery_map"](None).texts]
    assert texts == ["99", "–", "100", "0"]


def test_rose_counts_what_has_a_direction_and_prints_the_total():
    speed = np.array([5.0, 5.0, 5.0, 5.0, 0.1, np.nan, 6.0])
    direction = np.array([0.0, 360.0, 725.0, -90.0, 10.0, 50.0, np.nan])
    ax = figures.wind_rose(
        speed, direction, sector_count=4, calm_share=1 / 6, undirected_share=1 / 6
    )
    # Sectors from north by east: 0, 360 and 725 degrees are north, -90 is west.
    assert ax._info["table"].sum(axis=0).tolist() == [3, 0, 0, 1]
    said = " ".join(text.get_text() for text in ax.texts)
    assert "6 records" in said
    assert "calm 16.7 %" in said
    assert "no direction 16.7 %" in said


def test_rose_rings_are_shares_of_the_whole():
    speed = np.full(100, 5.0)
    ax = figures.wind_rose(speed, np.full(100, 90.0), count=200)
    rings = dict(
        zip(ax.get_yticks(), (text.get_text() for text in ax.get_yticklabels()), strict=True)
    )
    # 80 of 200 records are 40 % of the whole, whatever has no direction.
    assert rings[80.0] == "40 %"


def test_rose_takes_the_place_of_plain_axes():
    whole, pair = plt.subplots(1, 2)
    ax = figures.wind_rose([5.0, 6.0], [10.0, 20.0], ax=pair[0])
    assert ax.name == "windrose"
    assert len(whole.axes) == 2
    assert figures.wind_rose([5.0], [10.0], ax=ax) is ax


def test_rose_without_a_direction_says_so_on_plain_axes():
    # A mast without a vane: every direction is missing, and the chapter goes on.
    for place in (None, plt.subplots(1, 2)[1][0], figures.wind_rose([5.0], [10.0])):
        ax = figures.wind_rose([5.0, 0.1], [np.nan, 10.0], ax=place)
        assert ax.name == "rectilinear"
        said = [text.get_text() for text in ax.texts]
        assert said == ["no record has both a direction and a speed\nabove 0.5 m/s"]
    with pytest.raises(ValueError, match="2 speeds and 1 directions"):
        figures.wind_rose([5.0, 6.0], [10.0])


def test_exceedance_marks_stand_on_the_printed_levels():
    # id UNC-2: the normal quantile of 90 % is 1.28155.
    marks = DRAWINGS["exceedance_curves"](None).get_lines()
    p90 = [
        x for line in marks for x, y in line.get_xydata() if y == 0.9 and len(line.get_xdata()) == 5
    ]
    assert p90 == pytest.approx(
        [45000 * (1 - 1.28155 * 0.09), 45000 * (1 - 1.28155 * 0.07)], rel=1e-6
    )


def test_staircase_ends_in_net_and_never_climbs():
    ax = DRAWINGS["loss_staircase"](None)
    assert [text.get_text() for text in ax.get_yticklabels()] == ["Gross", "Wake", "Net"]
    assert sorted(bar.get_width() for bar in ax.patches) == [5, 45, 50]
    with pytest.raises(ValueError, match="must fall from gross to net"):
        figures.loss_staircase(["Gross", "Wake"], [45, 50])
    with pytest.raises(ValueError, match="2 values needs as many labels, not 1"):
        figures.loss_staircase(["Gross"], [50, 45])


def test_an_unknown_kind_of_uncertainty_is_refused():
    with pytest.raises(ValueError, match=r"'static' or 'yearly', not \['monthly'\]"):
        figures.uncertainty_bars(["a"], [0.1], ["monthly"])


def test_tornado_puts_the_widest_on_top():
    ax = figures.tornado(["narrow", "wide"], [44, 40], [46, 50], 45)
    assert [text.get_text() for text in ax.get_yticklabels()] == ["wide", "narrow"]
    assert ax.yaxis_inverted()


def test_hours_and_months_stand_side_by_side():
    day, year = figures.diurnal_and_monthly(HOURS, MONTHS, hours_in="local time, UTC+1")
    assert day.get_xlabel() == "Hour, local time, UTC+1"
    assert year.get_lines()[0].get_ydata().tolist() == MONTHS["a"].tolist()


def test_house_settings_can_be_taken_for_a_session():
    with mpl.rc_context():
        figures.use()
        assert mpl.rcParams["figure.dpi"] == look.DPI


def test_a_figure_without_data_says_why_it_is_empty() -> None:
    ratio = figures.pair_ratio_by_direction([], [])
    turbulence = figures.turbulence_in_speed_bins([], [], [])
    assert ratio.texts[0].get_text() == "one sensor only at this height"
    assert "no standard deviation" in turbulence.texts[0].get_text()


def test_maxima_of_a_gumbel_law_are_a_straight_line_on_paper():
    # id EXT-5: the reduced variate -ln(-ln(1 - 1/T)) of T = 2, 10, 50 is 0.366513, 2.250367,
    # 3.901939.
    lines = DRAWINGS["return_levels"](None).get_lines()
    line = next(each for each in lines if each.get_label() == "fit")
    assert line.get_xdata() == pytest.approx([0.366513, 2.250367, 3.901939], abs=1e-6)
    assert line.get_ydata().tolist() == [25.0, 29.0, 32.0]
    points = next(each for each in lines if each.get_label() == "maxima by rank")
    # The lowest of all maxima has no return period above one year and no place on the paper.
    assert points.get_ydata().tolist() == [25.0, 31.0]


def test_limits_that_are_alike_share_a_line_and_their_names():
    ax = DRAWINGS["return_levels"](None)
    assert [text.get_text() for text in ax.texts] == ["class II, the machine", "class III"]


def test_errors_of_a_height_left_out_stand_in_three_panels():
    hour, season, sector = figures.errors_of_height_left_out(ERRORS)
    assert [bar.get_height() for bar in hour.patches] == [0.02, -0.01]
    assert [bar.get_height() for bar in season.patches] == [0.015]
    assert [bar.get_height() for bar in sector.patches] == [0.005]
    assert hour.get_ylim()[0] < -0.01
    given = plt.subplots(1, 3)[1]
    assert figures.errors_of_height_left_out(ERRORS, ax=given)[0] is given[0]


def test_conditions_without_data_say_so() -> None:
    empty = pd.DataFrame(columns=["by", "group", "error"])
    assert figures.errors_of_height_left_out(empty)[0].texts[0].get_text() == (
        "fewer than three heights"
    )
    assert figures.turbulence_against_classes([], [], {}).texts[0].get_text() == (
        "turbulence is not assessed"
    )
    assert figures.return_levels([], [], LEVELS.iloc[:0]).texts[0].get_text() == (
        "extreme winds are not assessed"
    )
    level = figures.exponent_by_hour(pd.DataFrame({"Dec-Feb": [np.nan] * 24}))
    assert level.texts[0].get_text() == "mast and hub are at one height"


def test_the_campaign_is_shaded_exactly() -> None:
    def shaded(campaign: tuple[float, float]) -> tuple[float, float]:
        ax = figures.yearly_means(YEARS, np.full(20, 7.0), campaign_years=campaign)
        box = ax.patches[0].get_extents().transformed(ax.transData.inverted())
        return box.x0, box.x1

    assert shaded((2022.83, 2023.99)) == pytest.approx((2022.83, 2023.99))
    # Two whole numbers are two calendar years, the second to its end.
    assert shaded((2022, 2023)) == pytest.approx((2022, 2024))


def test_a_yearly_mean_stands_in_the_middle_of_its_year() -> None:
    ax = DRAWINGS["yearly_means"](None)
    assert ax.get_lines()[-1].get_xdata().tolist() == (YEARS + 0.5).tolist()
    ticks = {
        text.get_text(): at for text, at in zip(ax.get_xticklabels(), ax.get_xticks(), strict=True)
    }
    assert ticks["2023"] == 2023.5
    assert len(ticks) <= 10


def test_labels_of_many_months_do_not_touch() -> None:
    months = [f"{year}-{month:02d}" for year in (2022, 2023) for month in range(1, 13)]
    ax = figures.recovery_map(pd.DataFrame({"a": np.ones(24)}, index=months))
    figure = ax.get_figure()
    figure.draw_without_rendering()
    boxes = [text.get_window_extent() for text in ax.get_xticklabels()]
    assert all(left.x1 <= right.x0 for left, right in itertools.pairwise(boxes))
    assert ax.get_xticklabels()[10].get_text() == "Nov 22"


def test_bars_of_a_distribution_say_what_they_are() -> None:
    def names(**more: str) -> list[str]:
        ax = figures.speed_distribution([0, 0.5, 1.5], [0.1, 0.9], **more)
        return [text.get_text() for text in ax.get_legend().get_texts()]

    assert names() == ["record"]
    assert names(label="campaign") == ["campaign"]


@pytest.mark.parametrize("name", ["exceedance_curves", "profile"])
def test_a_legend_over_lines_stands_outside(name: str) -> None:
    ax = DRAWINGS[name](None)
    assert ax.get_legend() is None
    assert ax.get_figure().legends


@pytest.mark.parametrize("name", DRAWINGS)
def test_no_figure_is_wider_than_the_page(name: str) -> None:
    width = DRAWINGS[name](None).get_figure().get_figwidth()
    # 210 mm of paper less the margins; the report prints a figure at its own size (ISO 216: A4).
    assert width <= look.PAGE_WIDTH <= (210 - 17 - 18) / 25.4
