"""Wording: one style for numbers, shares, units and headings, wherever they were written."""

from __future__ import annotations

import math

import pytest

from windkit.faces.wording import as_printed, column_heading, percent_text, split_unit


@pytest.mark.parametrize(
    ("written", "printed"),
    [
        ("60,651 rows of 1,234,567", "60\u202f651 rows of 1\u202f234\u202f567"),
        ("P90 is 41,714 MWh, 43,860 for ten.", "P90 is 41\u202f714 MWh, 43\u202f860 for ten."),
        ("heights 40, 60 and 80 m", "heights 40, 60 and 80 m"),
        ("40,60,800 and a,123 and 12,34", "40,60,800 and a,123 and 12,34"),
        ("98.2% of 80 % and ±12%", "98.2\u00a0% of 80\u00a0% and ±12\u00a0%"),
        ("time_format %Y-%m-%d 5%x", "time_format %Y-%m-%d 5%x"),
        ("drifts by -9.9 % (-0.3)", "drifts by −9.9\u00a0% (−0.3)"),
        ("from 2004-01-01 by the north-west, speed_80-2", None),
        ("changes by -0.00%", "changes by 0.00\u00a0%"),
        ("-0.05 and -0 and -0.0", "−0.05 and 0 and 0.0"),
    ],
)
def test_sentences_take_the_style_of_the_tables(written, printed):
    assert as_printed(written) == (printed or written)
    assert as_printed(as_printed(written)) == (printed or written)


@pytest.mark.parametrize(
    ("share", "decimals", "signed", "text"),
    [
        (0.982, 1, False, "98.2"),
        (-0.0, 2, True, "0.00"),
        (-1e-17, 2, True, "0.00"),
        (0.0005, 1, False, "0.050"),
        (0.000464, 1, False, "0.046"),
        (-0.000035, 2, True, "−0.0035"),
        (0.0074, 2, True, "+0.74"),
        (0.0046, 0, False, "0.46"),
        (123.45, 1, False, "12\u202f345.0"),
    ],
)
def test_a_small_share_is_not_nothing_and_nothing_has_no_sign(share, decimals, signed, text):
    assert percent_text(share, decimals, signed=signed) == f"{text}\u00a0%"


def test_no_share_is_a_dash():
    assert percent_text(math.nan) == "–"


@pytest.mark.parametrize(
    ("column", "heading"),
    [
        ("p90_mwh_per_year", "P90 [MWh/year]"),
        ("P50_mwh_per_year", "P50 [MWh/year]"),
        ("mean_speed_m_s", "mean speed [m/s]"),
        ("air_density_kg_m3", "air density [kg/m³]"),
        (("wind_speed_m_s", "mean"), "wind speed [m/s] mean"),
        ("step90", "step90"),
        ("weibull_k", "weibull k"),
    ],
)
def test_headings_are_words_with_their_unit(column, heading):
    assert column_heading(column) == heading


def test_a_given_unit_outranks_the_name():
    assert column_heading("wind_speed", "m/s") == "wind speed [m/s]"
    assert column_heading("share", "1") == "share"
    assert split_unit("hub_height_m") == ("hub_height", "m")
