"""A power curve is read as written, and one that cannot be is refused with its line."""

from __future__ import annotations

import numpy as np
import pytest

from tests.small_study import CURVE, edit
from windkit.study.errors import StudyError
from windkit.study.folder import open_study
from windkit.study.turbine import read_curve


def test_a_curve_is_read_as_written(small):
    curve = read_curve(open_study(small))
    assert curve.wind_speed.tolist() == [3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 25]
    assert curve.power[:3].tolist() == [40e3, 100e3, 200e3]
    assert (curve.cut_in, curve.cut_out, curve.air_density) == (3.0, 25.0, 1.225)


def test_looks_of_the_file_do_not_matter(small):
    plain = read_curve(open_study(small))
    rows = [line.split(",") for line in CURVE.splitlines()[2:]]
    text = "\ufeff power_kw , note,wind_speed_m_s\r\n\r\n"
    text += "".join(f'{power}, "as sold",{speed} # ok\r\n' for speed, power in rows)
    (small / "data" / "curve.csv").write_bytes(text.encode())
    other = read_curve(open_study(small))
    np.testing.assert_array_equal(other.power, plain.power)
    np.testing.assert_array_equal(other.wind_speed, plain.wind_speed)


def refused(small, old: str, new: str, file: str = "data/curve.csv") -> str:
    edit(small / file, old, new)
    with pytest.raises(StudyError) as caught:
        read_curve(open_study(small))
    return str(caught.value)


def test_speeds_that_do_not_rise_are_refused(small):
    told = refused(small, "5,200\n6,350\n", "6,350\n5,200\n")
    assert told.startswith("data/curve.csv: wind_speed of a power curve must increase, but 6 is")
    assert "followed by 5 m/s" in told


def test_a_speed_that_stands_twice_is_refused(small):
    assert "5 is followed by 5 m/s" in refused(small, "6,350\n", "5,350\n")


def test_negative_power_is_refused(small):
    told = refused(small, "3,40\n", "3,-4\n")
    assert "power must not be negative, got -4000 W at 3 m/s" in told
    assert "enter it as an electrical loss" in told


def test_a_curve_above_the_betz_limit_is_refused(small):
    # Stream at 5 m/s through 90 m: 0.5 x 1.225 x pi x 45^2 x 5^3 = 487 073 W; 16/27 of it 288 636.
    read_curve(open_study(small))
    edit(small / "data" / "curve.csv", "5,200\n", "5,288.6\n")
    read_curve(open_study(small))
    told = refused(small, "5,288.6\n", "5,288.7\n")
    assert "gives 288.7 kW at 5 m/s, a power coefficient of 0.593" in told
    assert "16/27" in told


def test_a_top_that_is_not_the_rating_is_refused(small):
    edit(small / "study.toml", "rated_power_kw = 2000.0", "rated_power_kw = 2038.0")
    read_curve(open_study(small))
    told = refused(small, "rated_power_kw = 2038.0", "rated_power_kw = 2050.0", "study.toml")
    assert told.startswith(
        "data/curve.csv: its highest power is 2000 kW, but turbine.rated_power_kw is 2050."
    )


def test_power_in_watts_is_refused(small):
    watts = "".join(f"{line}000\n" for line in CURVE.splitlines()[2:])
    (small / "data" / "curve.csv").write_text("wind_speed_m_s,power_kw\n" + watts)
    with pytest.raises(
        StudyError, match=r"highest power is 2e\+06 kW.*power in the curve is in kW"
    ):
        read_curve(open_study(small))


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("5,200\n", "5,two hundred\n", "data/curve.csv, line 5: power_kw is 'two hundred'."),
        ("5,200\n", "5,\n", "data/curve.csv, line 5: power_kw is ''."),
        ("5,200\n", "5,200,5\n", "data/curve.csv, line 5: 3 fields where the header has 2."),
        ("5,200\n", "5\n", "data/curve.csv, line 5: 1 fields where the header has 2."),
        ("wind_speed_m_s,", "wind_speed_m_s;", "data/curve.csv, line 2: no column wind_speed"),
        ("power_kw\n", "power\n", "data/curve.csv, line 2: no column power_kw among wind"),
        ("5,200\n", "5,inf\n", "data/curve.csv: point 3 of the power curve is not a number"),
        ("25,2000\n", "20,2000\n", "data/curve.csv: cut_in 3 and cut_out 25 m/s must lie in this"),
    ],
)  # fmt: skip
def test_a_damaged_file_is_refused_with_its_line(small, old, new, told):
    assert refused(small, old, new).startswith(told)


@pytest.mark.parametrize("content", [b"", b"\n\n", b"# nothing\n"])
def test_an_empty_file_is_refused(small, content):
    (small / "data" / "curve.csv").write_bytes(content)
    with pytest.raises(StudyError, match="no column wind_speed_m_s among nothing"):
        read_curve(open_study(small))


def test_a_workbook_in_place_of_a_text_is_refused(small):
    (small / "data" / "curve.csv").write_bytes(b"PK\x03\x04\xff\xfe")
    with pytest.raises(StudyError, match=r"byte 4 is not UTF-8 text.*Save it again as CSV"):
        read_curve(open_study(small))
