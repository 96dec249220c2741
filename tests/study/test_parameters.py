"""A parameters cell holds known names only, wherever a misspelt one turns up."""

from __future__ import annotations

import json
import os

import pytest

from tests.small_study import WORKBOOKS
from windkit.study.errors import StudyError
from windkit.study.parameters import PARAMETERS, open_workbook, parameters_of_cell
from windkit.study.settings import Settings


@pytest.mark.parametrize("workbook", PARAMETERS)
def test_the_template_shows_each_parameter_once(workbook):
    notebook = json.loads((WORKBOOKS / f"{workbook}.ipynb").read_text(encoding="utf-8"))
    cells = [c for c in notebook["cells"] if "parameters" in c["metadata"].get("tags", [])]
    values = parameters_of_cell(workbook, "".join(cells[0]["source"]))
    assert list(values) == list(PARAMETERS[workbook])
    departing = [name for name, value in values.items() if value is not None]
    assert departing == ["study_folder"]


@pytest.mark.parametrize(
    "key",
    sorted({p.overrides for table in PARAMETERS.values() for p in table.values() if p.overrides}),
)
def test_each_parameter_stands_for_a_key_there_is(key):
    section, name = key.split(".")
    assert name in Settings.model_fields[section].annotation.model_fields


def test_a_kernels_names_become_the_study(small):
    study = open_workbook(
        "4_energy_yield",
        {
            "study_folder": str(small),
            "hub_height_m": 100.0,
            "_height": 3,
            "os": os,
            "In": [],
            "__name__": "__main__",
        },
    )
    assert study.folder == small
    assert study.overrides == {"turbine.hub_height_m": 100.0}


def test_none_leaves_the_decision_to_the_file(small):
    study = open_workbook("4_energy_yield", {"study_folder": str(small), "hub_height_m": None})
    assert study.overrides == {}
    assert study.settings.turbine.hub_height_m == 90.0


@pytest.mark.parametrize("value", [100.0, None, "100", [1], {1}, True])
def test_a_misspelt_name_in_the_kernel_is_refused(small, value):
    with pytest.raises(
        StudyError,
        match=r"4_energy_yield\.ipynb: unknown parameter hub_hight_m\..*study_folder, hub_height_m"
        r".*Did you mean hub_height_m\?",
    ):
        open_workbook("4_energy_yield", {"study_folder": str(small), "hub_hight_m": value})


@pytest.mark.parametrize("value", ["tall", -5, float("nan"), float("inf"), True, {120.0}, 1j])
def test_a_value_that_cannot_be_is_refused(small, value):
    with pytest.raises(StudyError, match=r"parameters over study\.toml: turbine\.hub_height_m: is"):
        open_workbook("4_energy_yield", {"study_folder": str(small), "hub_height_m": value})


def test_a_kernel_in_which_the_cell_was_not_run_is_refused():
    with pytest.raises(StudyError, match=r"the parameter study_folder is not set.*Run the"):
        open_workbook("5_uncertainty", {})


def test_an_unknown_workbook_is_refused():
    with pytest.raises(StudyError, match="There is no workbook '6_more'"):
        open_workbook("6_more", {})


def test_a_cell_gives_its_names_and_values():
    source = 'study_folder = ".."  # here\nmean_wind_speed_m_s = -1.5\nhub_height_m = None\n'
    assert parameters_of_cell("1_site_screening", source) == {
        "study_folder": "..",
        "mean_wind_speed_m_s": -1.5,
        "hub_height_m": None,
    }


@pytest.mark.parametrize(
    "line",
    ["hub_height_m = 60 * 2", "hub_height_m = study_folder", "import os", "hub_height_m += 1",
     "a = b = 1", "hub_height_m = ", "print(1)"],
)  # fmt: skip
def test_a_cell_that_computes_is_refused(line):
    with pytest.raises(StudyError, match=r"4_energy_yield\.ipynb, parameters cell: .*written-out"):
        parameters_of_cell("4_energy_yield", f'study_folder = ".."\n{line}\n')


def test_a_misspelt_name_in_the_cell_is_refused():
    with pytest.raises(StudyError, match=r"unknown parameters hub_hight_m, methid.*Did you mean"):
        parameters_of_cell("4_energy_yield", "methid = 1\nhub_hight_m = 2\n")
