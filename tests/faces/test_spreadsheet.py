"""The spreadsheet: the numbers that went in, text that stays text, the same bytes twice."""

from __future__ import annotations

import datetime as dt
import zipfile
from types import SimpleNamespace as Row

import numpy as np
import openpyxl
import pandas as pd
import pytest

from windkit.faces import spreadsheet
from windkit.faces.spreadsheet import CONTENTS, RESULTS, write_tables


def _tables():
    monthly = pd.DataFrame(
        {"wind_speed": [7.123, np.nan], "count": [4320, 4464], "note": ["=1+1", None]},
        index=pd.Index(["May", "June"], name="month"),
    )
    monthly.attrs = {
        "caption": "Monthly means",
        "basis": "measured",
        "units": {"wind_speed": "m/s"},
    }
    times = pd.date_range("2023-07-01 01:00", periods=2, freq="h", tz="Etc/GMT-2")
    return {"Monthly": monthly, "Series": pd.DataFrame({"time": times, "energy": [1.5, 2.5]})}


FIGURES = [
    Row(label="Net P50", value=45123.4, unit="MWh/year", basis="yield"),
    Row(label="80 % interval", value=(6.9, 7.3), unit="m/s", basis="@blocks"),
    Row(label="Recovery", value=0.98, unit="1", basis="of 61,344", as_percent=True),
]


@pytest.fixture(scope="module")
def book(tmp_path_factory):
    path = tmp_path_factory.mktemp("book") / "tables.xlsx"
    said = ["Step yield was so."]
    return openpyxl.load_workbook(
        write_tables(path, _tables(), FIGURES, title="Invented Ridge", departures=said)
    )


def _rows(sheet):
    return [list(row) for row in sheet.iter_rows(values_only=True)]


def test_first_sheet_is_a_list_of_the_others(book):
    assert book.sheetnames == [CONTENTS, RESULTS, "Monthly", "Series"]
    assert _rows(book[CONTENTS]) == [
        ["Sheet", "Content", "Rows", "Columns", "Basis"],
        [RESULTS, "Figures of merit with unit and basis", 3, 5, None],
        ["Monthly", "Monthly means", 2, 3, "measured"],
        ["Series", "Series", 2, 2, None],
    ]
    assert book[CONTENTS].freeze_panes == "A2"
    assert book[CONTENTS]["A3"].hyperlink.target == "#'Monthly'!A1"


def test_results_stand_with_unit_and_basis_below_the_departures(book):
    rows = _rows(book[RESULTS])
    assert rows[0][0] == "Invented Ridge"
    assert [row[0] for row in rows[2:4]] == ["Departures from study.toml", "Step yield was so."]
    assert rows[5:] == [
        ["Result", "Value", "to", "Unit", "Basis"],
        ["Net P50", 45123.4, None, "MWh/year", "yield"],
        ["80\u00a0% interval", 6.9, 7.3, "m/s", "@blocks"],
        ["Recovery", 0.98, None, "–", "of 61\u202f344"],
    ]
    assert book[RESULTS].freeze_panes == "A7"
    assert book[RESULTS]["B9"].number_format == "0.0 %"
    assert book[RESULTS]["A4"].fill.fgColor.rgb.lower() == "00fbe9d7"


def test_an_empty_table_is_left_out_and_the_contents_say_so(tmp_path):
    empty = pd.DataFrame({"file": pd.Series(dtype=str)})
    book = openpyxl.load_workbook(write_tables(tmp_path / "t.xlsx", {"measure.set_aside": empty}))
    assert book.sheetnames == [CONTENTS]
    assert _rows(book[CONTENTS])[1][:3] == [None, "measure: set aside (empty, left out)", 0]


def test_times_and_numbers_written_as_text_are_times_and_numbers(tmp_path):
    frame = pd.DataFrame(
        {
            "from": ["2023-01-16 21:00", "2023-01-17 00:10"],
            "when": ["", "2024-01-22"],
            "threshold": ["274.15", "-0.5"],
            "serial": ["007", "012"],
            "odd": ["2023-02-30", "2023-03-01"],
            "mixed": ["1", "one"],
        }
    )
    sheet = openpyxl.load_workbook(write_tables(tmp_path / "t.xlsx", {"t": frame}))["t"]
    assert _rows(sheet)[1:] == [
        [dt.datetime(2023, 1, 16, 21), None, 274.15, "007", "2023-02-30", "1"],
        [
            dt.datetime(2023, 1, 17, 0, 10), dt.datetime(2024, 1, 22), -0.5, "012",
            "2023-03-01", "one",
        ],
    ]  # fmt: skip
    assert sheet["A2"].number_format == "yyyy-mm-dd hh:mm"
    assert sheet["B3"].number_format == "yyyy-mm-dd"


def test_a_table_keeps_its_numbers_index_and_units(book):
    assert _rows(book["Monthly"]) == [
        ["month", "wind speed [m/s]", "count", "note"],
        ["May", 7.123, 4320, "=1+1"],
        ["June", None, 4464, None],
    ]
    assert book["Monthly"].freeze_panes == "A2"
    assert book["Monthly"]["B2"].number_format == "#,##0.00"


def test_times_are_utc_and_the_head_says_so(book):
    # 01:00 two hours east of Greenwich is 23:00 UTC on the day before.
    rows = _rows(book["Series"])
    assert rows[0] == ["time (UTC)", "energy"]
    assert rows[1] == [dt.datetime(2023, 6, 30, 23, 0), 1.5]


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1 a", "@x", '=HYPERLINK("https://example.org")'])
def test_text_is_never_a_formula(text, tmp_path):
    frame = pd.DataFrame({text: [text]})
    path = write_tables(tmp_path / "t.xlsx", {text: frame}, {text: text})
    for sheet in openpyxl.load_workbook(path):
        for row in sheet.iter_rows():
            assert all(cell.data_type != "f" for cell in row)
    with zipfile.ZipFile(path) as parts:
        for name in parts.namelist():
            assert b"<f>" not in parts.read(name)
            assert b"<f " not in parts.read(name)
        assert b'quotePrefix="1"' in parts.read("xl/styles.xml")


def test_a_second_run_gives_the_same_bytes(tmp_path):
    one = write_tables(tmp_path / "a.xlsx", _tables(), FIGURES).read_bytes()
    later = Row(now=lambda tz=None: dt.datetime(2040, 1, 1, tzinfo=tz))
    with pytest.MonkeyPatch.context() as patch:
        clock = Row(datetime=later, timezone=dt.timezone)
        patch.setattr("openpyxl.writer.excel.datetime", clock)
        two = write_tables(tmp_path / "b.xlsx", _tables(), FIGURES).read_bytes()
    assert one == two
    with zipfile.ZipFile(tmp_path / "b.xlsx") as parts:
        core = parts.read("docProps/core.xml").decode()
    assert "2040" not in core
    assert core.count("2000-01-01T00:00:00Z") == 2
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.xlsx", "b.xlsx"]


def test_results_as_in_the_result_file(tmp_path):
    results = {
        "hub": {"mean_speed_m_s": 7.5, "weibull_k": 2.1},
        "long_term.interval_80_m_s": [6.9, 7.3],
        "exceedance": {"1": {"P90_mwh_per_year": 39000.0}},
        "explained": {"value": 0.9, "unit": "1", "basis": "measured"},
    }
    path = write_tables(tmp_path / "t.xlsx", {}, results)
    rows = _rows(openpyxl.load_workbook(path)[RESULTS])
    assert rows[1:6] == [
        ["hub.mean_speed_m_s", 7.5, None, "m/s", None],
        ["hub.weibull_k", 2.1, None, "–", None],
        ["long_term.interval_80_m_s", 6.9, 7.3, "m/s", None],
        ["exceedance.1.P90_mwh_per_year", 39000, None, "MWh/year", None],
        ["explained", 0.9, None, "–", "measured"],
    ]


def test_names_of_sheets_are_allowed_and_never_twice(tmp_path):
    long = "a name that is rather longer than a sheet allows"
    frame = pd.DataFrame({"a": [1]})
    tables = dict.fromkeys([long, long + " again", "a/b:c", "contents", "A/B:C"], frame)
    names = openpyxl.load_workbook(write_tables(tmp_path / "t.xlsx", tables)).sheetnames
    assert len(names) == 6
    assert len({name.lower() for name in names}) == 6
    assert all(len(name) <= 31 and not set(name) & set("[]:*?/\\") for name in names)


def test_what_a_cell_cannot_hold(tmp_path):
    odd = pd.DataFrame({"a": [np.inf, -np.inf, np.nan], "b": [True, False, True]})
    rows = _rows(openpyxl.load_workbook(write_tables(tmp_path / "t.xlsx", {"odd": odd}))["odd"])
    assert rows[1:] == [["infinite", True], ["-infinite", False], [None, True]]


@pytest.mark.parametrize(
    ("text", "words"), [("a\x00b", "control characters"), ("a" * 40_000, "a cell holds 32767")]
)
def test_a_text_that_does_not_fit_is_refused_and_nothing_written(text, words, tmp_path):
    with pytest.raises(ValueError, match=f"table 'notes', row 3, note: .*{words}"):
        write_tables(tmp_path / "t.xlsx", {"notes": pd.DataFrame({"note": ["fine", text]})})
    assert list(tmp_path.iterdir()) == []


def test_a_table_longer_than_a_sheet_is_refused(tmp_path, monkeypatch):
    monkeypatch.setattr(spreadsheet, "MOST_ROWS", 3)
    with pytest.raises(ValueError, match="table 'long' has 3 rows, a sheet holds 2"):
        write_tables(tmp_path / "t.xlsx", {"long": pd.DataFrame({"a": [1, 2, 3]})})


def test_no_head_of_a_column_is_empty(tmp_path):
    sectors = pd.DataFrame({"share": [0.25, 0.75]}, index=pd.Index([0.0, 180.0]))
    tables = {"yield.frequency": sectors, "other": sectors, "named": sectors.rename_axis("sector")}
    book = openpyxl.load_workbook(write_tables(tmp_path / "t.xlsx", tables))
    assert _rows(book["yield.frequency"])[0] == ["sector", "share"]
    assert _rows(book["other"])[0] == ["row", "share"]
    assert _rows(book["named"])[0] == ["sector", "share"]
