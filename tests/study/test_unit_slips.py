"""A unit that is declared wrongly is named with the one it looks like."""

from __future__ import annotations

import numpy as np
import pytest

from tests.small_study import edit, run_steps
from windkit.faces.command import main
from windkit.study.errors import StudyError
from windkit.study.folder import open_study
from windkit.study.running import check_inputs

TEMPERATURE = 'column = "Temperature5"\nquantity = "air_temperature"\nheight_m = 5.0\nunit = '
PRESSURE = 'column = "Pressure5"\nquantity = "air_pressure"\nheight_m = 5.0\nunit = '


def rewritten(folder, column: int, change) -> None:
    """One column of the mast's file with every value changed."""
    file = folder / "data" / "mast.csv"
    lines = file.read_text().splitlines()
    out = [lines[0]]
    for line in lines[1:]:
        fields = line.split(",")
        fields[column] = f"{change(float(fields[column])):.2f}"
        out.append(",".join(fields))
    file.write_text("\n".join(out) + "\n")


def test_hectopascal_declared_as_pascal(small):
    edit(small / "study.toml", f'{PRESSURE}"hPa"', f'{PRESSURE}"Pa"')
    with pytest.raises(StudyError) as caught:
        check_inputs(open_study(small))
    told = str(caught.value)
    assert "channels (pressure_5).unit" in told
    assert "it is 'Pa'" in told
    assert "above 97" in told  # half of the values lie above 97x
    assert 'write unit = "hPa"' in told


def test_pascal_declared_as_hectopascal(small):
    rewritten(small, 5, lambda value: value * 100)
    with pytest.raises(StudyError, match='write unit = "Pa"'):
        check_inputs(open_study(small))


def test_fahrenheit_declared_as_celsius(small):
    # 8 to 24 degC are 46 to 75 degF; nowhere is half of all time above 36 degC.
    rewritten(small, 4, lambda value: value * 1.8 + 32)
    with pytest.raises(StudyError) as caught:
        check_inputs(open_study(small))
    assert "channels (temperature_5).unit" in str(caught.value)
    assert 'write unit = "degF"' in str(caught.value)
    edit(small / "study.toml", f'{TEMPERATURE}"degC"', f'{TEMPERATURE}"degF"')
    check_inputs(open_study(small))


def test_kelvin_declared_as_celsius(small):
    rewritten(small, 4, lambda value: value + 273.15)
    with pytest.raises(StudyError, match='write unit = "K"'):
        check_inputs(open_study(small))


def test_the_step_itself_refuses_too(small):
    edit(small / "study.toml", f'{PRESSURE}"hPa"', f'{PRESSURE}"Pa"')
    with pytest.raises(StudyError, match="values look like hPa"):
        run_steps(small, "measure")


def test_the_command_says_it_before_anything_runs(small, capsys):
    edit(small / "study.toml", f'{PRESSURE}"hPa"', f'{PRESSURE}"Pa"')
    assert main(["run", str(small), "--quiet"]) != 0
    assert 'write unit = "hPa"' in capsys.readouterr().err
    assert not (small / "results").exists()


@pytest.mark.parametrize("shift", [-45.0, 0.0, 14.0])
def test_cold_and_warm_places_are_no_slip(small, shift):
    rewritten(small, 4, lambda value: value + shift)
    check_inputs(open_study(small))


def test_a_few_odd_values_are_left_to_the_checks(small):
    rng = np.random.default_rng(3)
    rewritten(small, 5, lambda value: 9.75 if rng.random() < 0.2 else value)
    check_inputs(open_study(small))
