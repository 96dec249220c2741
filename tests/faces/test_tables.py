"""Tables: what a reader sees, and what cannot break out of a cell."""

from __future__ import annotations

from types import SimpleNamespace as Row

import numpy as np
import pandas as pd
import pytest

from windkit.faces.tables import Table, exceedance_table_view, results_table, value_text


def _row(label="x", value=1.0, unit="m/s", basis="measured", **more):
    return Row(label=label, value=value, unit=unit, basis=basis, **more)


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (7.126, "m/s", "7.13"),
        (45123.6, "MWh/year", "45\u202f124"),
        (1.2249, "kg/m3", "1.225"),
        (12345, "1", "12\u202f345"),
        ((6.9, 7.345), "m/s", "6.90 to 7.34"),
        ([6.9, 7.345], "m/s", "6.90 to 7.34"),
        ("variance ratio", "", "variance ratio"),
        (float("nan"), "m/s", "–"),
        (None, "m/s", "–"),
        (True, "1", "yes"),
        (np.float64(2.5), "m/s", "2.50"),
        (np.int64(3), "1", "3"),
    ],
)
def test_rounding_by_unit(value, unit, text):
    assert value_text(value, unit) == text


def test_a_fraction_is_a_percentage_only_when_its_row_says_so():
    plain, percent = results_table(
        [_row(value=0.9634, unit="1"), _row(value=0.9634, unit="1", as_percent=True)]
    ).cells
    assert plain[1:3] == ["0.963", "–"]
    assert percent[1:3] == ["96.3", "%"]


def test_a_percentage_of_a_speed_is_refused():
    with pytest.raises(ValueError, match=r"only a fraction .* this has unit 'm/s'"):
        results_table([_row(as_percent=True)])


def test_text_cannot_break_out_of_a_cell():
    html = results_table([_row(label="<script>x</script>", basis='"&<b>')]).to_html()
    assert "<script>" not in html
    assert "&lt;script&gt;x&lt;/script&gt;" in html
    assert "&quot;&amp;&lt;b&gt;" in html
    html = Table(pd.DataFrame({"<i>": ["<u>"]}), caption="<h1>").to_html()
    assert not any(tag in html for tag in ("<i>", "<u>", "<h1>"))


def test_numbers_stand_right_and_missing_values_are_a_dash():
    table = Table(pd.DataFrame({"mean": [7.25, np.nan], "name": ["a", None]}))
    assert table.cells == [["7.25", "a"], ["–", "–"]]
    html = table.to_html()
    assert '<td class="num">7.25</td>' in html
    assert "<td>a</td>" in html


def test_an_index_that_says_something_is_a_column():
    frame = pd.DataFrame({"mean": [7.0]}, index=pd.Index(["speed_80_a"], name="channel"))
    assert repr(Table(frame)).splitlines()[0].split() == ["channel", "mean"]
    assert Table(frame.reset_index(drop=True)).cells == [["7.00"]]


def test_formats_by_unit_text_and_function():
    frame = pd.DataFrame({"energy": [1234.5], "share": [0.034], "other": [2.0]})
    formats = {"energy": "MWh", "share": ".1%", "other": lambda value: f"<{value}>"}
    assert Table(frame, formats=formats).cells == [["1\u202f234", "3.4\u00a0%", "<2.0>"]]


def test_shares_and_signs_by_format():
    frame = pd.DataFrame({"change": [0.0, -1e-12, 0.0074, -0.00002], "lag": [-0.001, 0, 1, -2.5]})
    cells = Table(frame, formats={"change": "+.2%", "lag": "+.2f"}).cells
    assert [row[0] for row in cells] == [
        "0.00\u00a0%", "0.00\u00a0%", "+0.74\u00a0%", "−0.0020\u00a0%",
    ]  # fmt: skip
    assert [row[1] for row in cells] == ["0.00", "0.00", "+1.00", "−2.50"]


def test_names_of_the_study_file_are_words_in_some_columns():
    frame = pd.DataFrame(
        {"group": ["plant_performance"], "of": ["wind_speed"], "channel": ["speed_80"]}
    )
    assert Table(frame).cells == [["plant performance", "wind speed", "speed_80"]]


def test_truth_years_and_times():
    times = pd.to_datetime(["2009-11-01", "2010-02-01"], utc=True)
    frame = pd.DataFrame({"chosen": [True, False], "year": [2004, 2005], "date": times})
    assert Table(frame).cells == [["yes", "2004", "2009-11-01"], ["no", "2005", "2010-02-01"]]
    later = frame.assign(date=times + pd.Timedelta("9h"))
    assert Table(later).cells[0][2] == "2009-11-01 09:00"


def test_sentences_in_a_table_have_its_style():
    row = _row(label="Its 80% range", basis="intervals out of 61,344")
    assert results_table([row]).cells[0][::3] == [
        "Its 80\u00a0% range", "intervals out of 61\u202f344",
    ]  # fmt: skip
    frame = pd.DataFrame({"reason": ["drifts by -9.9% a year"], "missing": ["-999, --"]})
    assert Table(frame).cells == [["drifts by −9.9\u00a0% a year", "-999, --"]]


def test_long_texts_are_whole_and_get_room_beside_many_numbers():
    text = "a reason that is far longer than any column of numbers " * 4
    html = Table([{"reason": text, **{f"n{i}": i for i in range(9)}}]).to_html()
    assert text.strip() in html
    assert '<td class="line">' in html
    assert '<table class="site-table many">' in html


def test_a_format_for_a_column_that_is_not_there_is_refused():
    with pytest.raises(ValueError, match=r"formats names \['enrgy'\]"):
        Table(pd.DataFrame({"energy": [1.0]}), formats={"enrgy": "MWh"})


def test_exceedance_view_names_levels_and_periods():
    by_name = pd.DataFrame({"P50": [45000.0, 45000.0], "P90": [39000.4, 41000.0]}, index=[1, 10])
    table = exceedance_table_view(by_name)
    assert table.cells[0] == ["1 year", "45\u202f000", "39\u202f000"]
    assert table.cells[1][0] == "10 years"
    by_number = by_name.set_axis([0.5, 0.9], axis=1)
    assert exceedance_table_view(by_number).to_html() == table.to_html()


def test_repr_lines_up_without_html():
    text = repr(results_table([_row(value=7.1), _row(label="longer", value=12.0)], caption="All"))
    lines = text.splitlines()
    assert lines[0] == "All"
    assert lines[2].index("7.10") == lines[3].index("12.00") + 1


def test_an_empty_table_is_only_its_head():
    assert Table(pd.DataFrame({"a": []})).cells == []
    assert "<tbody>" in Table(pd.DataFrame({"a": []})).to_html()
