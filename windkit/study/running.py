"""Running a study: its workbooks in order, headless, each whole or not at all.

Before the first cell runs, the settings, every file they name and every parameters cell are
checked, so that a fault in the last step is not found after minutes of work. Executed workbooks
go to ``results/executed``; the copies in ``workbooks/``, which hold the analyst's notes, are
never written to.
"""

from __future__ import annotations

import copy
import json
import math
import os
import re
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

import nbformat
import pandas as pd

from windkit.study.artifacts import first_stale_step, load_artifact
from windkit.study.errors import StudyError
from windkit.study.folder import Study, open_study
from windkit.study.ledger import masked_by, read_ledger, refuse_rows_outside
from windkit.study.long_term_lines import refuse_thin_overlap
from windkit.study.parameters import (
    PARAMETERS,
    open_workbook,
    overrides_of,
    parameters_of_cell,
    refuse_unknown,
)
from windkit.study.reading import read_station
from windkit.study.stations import StationSettings
from windkit.study.steps import STEPS, Step, step_named
from windkit.study.turbine import read_curve
from windkit.study.unit_slips import refuse_unit_slips

__all__ = ["EXECUTED", "check_inputs", "executed_workbooks", "run_study"]

#: Folder of the executed workbooks, under results/.
EXECUTED = "executed"
PARAMETERS_TAG = "parameters"

#: Longest time one cell may take [s]; a kernel that died would otherwise hang the run.
_CELL_TIMEOUT = 900

_MINUTES_PER_HOUR = 60.0

#: How a running kernel names the parts of a panel.
_MODEL_ID = re.compile(r"[0-9a-f]{32}")

Progress = Callable[[str, int, int], None]
Parameters = Mapping[str, Mapping[str, Any]]


def check_inputs(study: Study) -> None:
    """Read every file the study names, so that a fault shows before anything runs.

    Raises
    ------
    StudyError
        At the first fault met.
    """
    read_curve(study)
    settings = study.settings
    places = {f"references ({each.name})": each for each in settings.references}
    for place, station in {"mast": settings.mast, **places}.items():
        _refuse_other_intervals(station, place)
        for name in station.files:
            study.path(name, key=f"{place}.files")
    mast = read_station(settings.mast, study.folder)
    ledger = read_ledger(study.ledger)
    masked_by(mast.frame.iloc[:0], ledger)  # its channels, before its spans
    assert isinstance(mast.frame.index, pd.DatetimeIndex)
    refuse_rows_outside(mast.frame.index, mast.interval, ledger)
    refuse_unit_slips(mast)
    for station in settings.references:
        reading = read_station(station, study.folder)
        refuse_unit_slips(reading)
        if settings.long_term.reference in (None, station.name):
            refuse_thin_overlap(
                mast.frame[settings.mast.main_wind_speed],
                reading.frame[station.main_wind_speed],
                station.name,
            )


def run_study(
    folder: str | Path,
    *,
    from_step: str | None = None,
    parameters: Parameters | None = None,
    progress: Progress | None = None,
) -> Study:
    """Execute a study's workbooks in order.

    Parameters
    ----------
    folder : str or Path
        The study folder.
    from_step : str, optional
        First step to run; those before it must stand on today's inputs.
    parameters : mapping, optional
        Values for the parameters cells, by workbook stem and name.
    progress : callable, optional
        Called as ``progress(workbook, cells done, cells in all)``.

    Returns
    -------
    Study
        The study as it was opened.

    Raises
    ------
    StudyError
        If an input, a parameter or a cell is at fault; steps that were finished keep their
        artifacts, the others keep those they had.
    """
    study = open_study(folder)
    given = parameters or {}
    steps = STEPS[STEPS.index(step_named(from_step)) :] if from_step else STEPS
    for workbook, values in given.items():
        if workbook not in PARAMETERS:
            raise StudyError.of(
                met=f"there is no workbook '{workbook}'",
                rule=f"the workbooks are {', '.join(PARAMETERS)}",
                remedy="write one of these names before the point",
            )
        refuse_unknown(workbook, values)
        if workbook not in {step.workbook for step in steps}:
            raise StudyError.of(
                met=f"a parameter of {workbook} is set, but the run begins at '{steps[0].name}'",
                rule="a parameter is set for a workbook that runs",
                remedy="leave it out, or begin at an earlier step",
            )
    notebooks = {step.name: _read_workbook(study, step) for step in steps}
    for step in steps:
        _check_parameters(study, step, notebooks[step.name], given.get(step.workbook, {}))
    _refuse_stale_before(study, steps[0])
    _refuse_other_parameters(study, STEPS[: STEPS.index(steps[0])])
    check_inputs(study)
    for step in steps:
        _execute(study, step, notebooks[step.name], given.get(step.workbook, {}), progress)
        load_artifact(study, step.name)  # a workbook that did not write its artifact is a fault
    return study


def executed_workbooks(study: Study) -> list[Path]:
    """The executed workbooks in order; a missing one is refused."""
    files = [study.results / EXECUTED / f"{step.workbook}.ipynb" for step in STEPS]
    for file in files:
        if not file.is_file():
            raise StudyError.of(
                file=f"results/{EXECUTED}/{file.name}",
                met="this workbook has not been run",
                rule="a handover holds all workbooks, executed",
                remedy=f"run `sitestudy run {study.folder.name}`",
            )
    return files


def _refuse_other_intervals(station: StationSettings, place: str) -> None:
    """The workbooks pair hours: an hour holds a whole number of intervals."""
    minutes = station.interval_min
    key = f"{place}.interval_min"
    if minutes > _MINUTES_PER_HOUR:
        raise StudyError.of(
            key=key,
            met=f"interval_min is {minutes:g}",
            rule="stations with intervals above 60 minutes are not supported by the workbooks",
            remedy="get hourly values (windkit.correct_long_term takes daily ones from a script)",
        )
    per_hour = round(_MINUTES_PER_HOUR / minutes)
    if not math.isclose(per_hour * minutes, _MINUTES_PER_HOUR, rel_tol=1e-9):
        raise StudyError.of(
            key=key,
            met=f"interval_min is {minutes:g}",
            rule="an hourly mean needs a whole number of intervals in an hour",
            remedy="get the record in intervals that divide an hour, such as 10 or 60 minutes",
        )


def _refuse_stale_before(study: Study, first: Step) -> None:
    stale = first_stale_step(study)
    if stale is not None and STEPS.index(step_named(stale)) < STEPS.index(first):
        raise StudyError.of(
            file=f"results/{stale}",
            met=f"the run was to begin at '{first.name}', but '{stale}' before it is not fresh",
            rule="each step stands on those before it",
            remedy=f"run `sitestudy run {study.folder.name} --from {stale}`",
        )


def _refuse_other_parameters(study: Study, before: Sequence[Step]) -> None:
    """Refuse to build upon a step that was run with parameters its workbook does not hold now."""
    for step in before:
        asked = overrides_of(step.workbook, _parameters_of(step, _read_workbook(study, step)))
        made_with = load_artifact(study, step.name).overrides
        if made_with != asked:
            raise StudyError.of(
                file=f"results/{step.name}",
                met=f"it was made with {_listed(made_with)}, but its workbook now asks for "
                f"{_listed(asked)}",
                rule="a value set for one run is not carried into the next unseen",
                remedy=f"run `sitestudy run {study.folder.name} --from {step.name}`, with the "
                "same --set if it is meant",
            )


def _listed(overrides: Mapping[str, Any]) -> str:
    return ", ".join(f"{key} = {value!r}" for key, value in overrides.items()) or "study.toml alone"


def _parameters_of(step: Step, notebook: nbformat.NotebookNode) -> dict[str, Any]:
    cell = next(c for c in notebook.cells if PARAMETERS_TAG in c.metadata.get("tags", []))
    return parameters_of_cell(step.workbook, cell.source)


def _read_workbook(study: Study, step: Step) -> nbformat.NotebookNode:
    name = f"workbooks/{step.workbook}.ipynb"
    file = study.folder / name
    if not file.is_file():
        raise StudyError.of(
            file=name,
            met="the workbook is not there",
            rule="a study holds its own copy of each workbook",
            remedy="copy it from the templates, or make a new study with `sitestudy new DIR`",
        )
    try:
        notebook = nbformat.read(file, as_version=4)
    except Exception as error:
        raise StudyError.of(
            file=name,
            met=f"it is not a readable notebook ({type(error).__name__})",
            rule="workbooks are Jupyter notebooks, format 4",
            remedy="restore it from your own copy or from the template",
        ) from None
    cells = [c for c in notebook.cells if PARAMETERS_TAG in c.metadata.get("tags", [])]
    if len(cells) != 1:
        raise StudyError.of(
            file=name,
            met=f"{len(cells)} cells are tagged '{PARAMETERS_TAG}'",
            rule="a workbook has exactly one parameters cell",
            remedy="tag one cell in the property inspector of JupyterLab",
        )
    return notebook


def _check_parameters(
    study: Study, step: Step, notebook: nbformat.NotebookNode, given: Mapping[str, Any]
) -> None:
    """Open the study as the workbook will, so that a wrong value shows before anything runs."""
    values = {**_parameters_of(step, notebook), **given}
    file, named = f"workbooks/{step.workbook}.ipynb", values.get("study_folder")
    if named is None or (study.folder / "workbooks" / str(named)).resolve() != study.folder:
        raise StudyError.of(
            file=file,
            key="study_folder",
            met=f"it is {named!r}, which is not the study this workbook lies in",
            rule="the workbooks of a study stand on that study",
            remedy='write study_folder = ".." in its parameters cell',
        )
    try:
        open_workbook(step.workbook, {**values, "study_folder": str(study.folder)})
    except StudyError as error:
        raise StudyError(f"{file}, {error}") from None


def _execute(
    study: Study,
    step: Step,
    notebook: nbformat.NotebookNode,
    values: Mapping[str, Any],
    progress: Progress | None,
) -> None:
    # Heavy and only needed to run: nbclient pulls in the kernel machinery.
    from nbclient import NotebookClient
    from nbclient.exceptions import CellExecutionError, CellTimeoutError, DeadKernelError
    from traitlets.config import Config

    notebook = copy.deepcopy(notebook)
    _inject(notebook, values)
    total = len(notebook.cells)

    def report(cell: Any, cell_index: int) -> None:
        if progress is not None:
            progress(step.workbook, cell_index + 1, total)

    client = NotebookClient(
        notebook,
        kernel_name="python3",
        timeout=_CELL_TIMEOUT,
        record_timing=False,
        shutdown_kernel="immediate",
        resources={"metadata": {"path": str(study.folder / "workbooks")}},
        on_cell_complete=report,
        config=Config({"KernelManager": {"transport_encryption": "auto"}}),
    )
    try:
        client.execute()
    except CellExecutionError as error:
        if error.ename == StudyError.__name__:
            raise StudyError(error.evalue) from None
        kept = _write(study.results / EXECUTED / f"{step.workbook}.failed.ipynb", notebook)
        raise StudyError.of(
            file=f"workbooks/{step.workbook}.ipynb",
            met=f"a cell ended with {error.ename}: {error.evalue}",
            rule="a workbook runs from top to bottom in a fresh kernel",
            remedy=f"the run so far is kept in results/{EXECUTED}/{kept.name}; mend the cell in "
            f"`sitestudy lab {study.folder.name}`",
        ) from None
    except (CellTimeoutError, DeadKernelError) as error:
        raise StudyError.of(
            file=f"workbooks/{step.workbook}.ipynb",
            met=f"the kernel gave no answer ({type(error).__name__})",
            rule=f"a cell ends within {_CELL_TIMEOUT} s",
            remedy="see whether memory ran out, and run the workbook by hand",
        ) from None
    _write(study.results / EXECUTED / f"{step.workbook}.ipynb", notebook)
    (study.results / EXECUTED / f"{step.workbook}.failed.ipynb").unlink(missing_ok=True)


def _inject(notebook: nbformat.NotebookNode, values: Mapping[str, Any]) -> None:
    if not values:
        return
    place = next(
        index
        for index, cell in enumerate(notebook.cells)
        if PARAMETERS_TAG in cell.metadata.get("tags", [])
    )
    lines = ["# set for this run"] + [f"{name} = {value!r}" for name, value in values.items()]
    cell = nbformat.v4.new_code_cell("\n".join(lines), metadata={"tags": ["injected-parameters"]})
    cell["id"] = "injected-parameters"  # a random id would make two equal runs differ
    notebook.cells.insert(place + 1, cell)


def _with_settled_ids(notebook: nbformat.NotebookNode) -> str:
    """The notebook as text, the random ids of its panels replaced by numbers.

    Numbers go along the references from what is shown, so that they do not depend on the ids.
    """
    widgets = notebook.metadata.get("widgets", {})
    models = {name: json.dumps(m) for w in widgets.values() for name, m in w["state"].items()}
    text = nbformat.writes(notebook)
    found: dict[str, None] = {}

    def follow(inside: str) -> None:
        for name in _MODEL_ID.findall(inside):
            if name in models and name not in found:
                found[name] = None
                follow(models[name])

    follow(json.dumps([cell.get("outputs", []) for cell in notebook.cells]))
    for number, name in enumerate([*found, *sorted(set(models) - set(found))]):
        text = text.replace(name, f"panel-{number:04d}")
    settled = nbformat.reads(text, as_version=4)
    for widget in settled.metadata.get("widgets", {}).values():
        widget["state"] = dict(sorted(widget["state"].items()))
    return str(nbformat.writes(settled)) + "\n"


def _write(file: Path, notebook: nbformat.NotebookNode) -> Path:
    file.parent.mkdir(parents=True, exist_ok=True)
    part = file.with_suffix(".part")
    part.write_text(_with_settled_ids(notebook), encoding="utf-8")
    os.replace(part, file)
    return file
