"""The parameters cell of a workbook: which names it may hold, and what they do.

Each workbook has one cell tagged ``parameters``. It says which study is meant, and it may set a
few decisions away from `study.toml` for this workbook only; ``None`` means "as study.toml says".
A name that is not in the table here is refused wherever it turns up: in the cell itself, in a
value handed in from outside, or in the running kernel.
"""

from __future__ import annotations

import ast
import difflib
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from windkit.study.errors import StudyError
from windkit.study.folder import Study, open_study
from windkit.study.steps import step_of_workbook

__all__ = [
    "PARAMETERS",
    "Parameter",
    "open_workbook",
    "overrides_of",
    "parameters_of_cell",
    "refuse_unknown",
]


@dataclass(frozen=True)
class Parameter:
    """One parameter: the key of `study.toml` it sets, and what it is."""

    overrides: str | None
    meaning: str


_FOLDER = Parameter(None, "the study folder, seen from the workbook")

#: Parameters of each workbook by name. All but the folder stand for one key of study.toml.
PARAMETERS: dict[str, dict[str, Parameter]] = {
    "1_site_screening": {
        "study_folder": _FOLDER,
        "mean_wind_speed_m_s": Parameter(
            "screening.mean_wind_speed_m_s", "rough mean wind speed [m/s]"
        ),
        "shear_exponent": Parameter("screening.shear_exponent", "power-law exponent [1]"),
        "hub_height_m": Parameter("turbine.hub_height_m", "hub height above ground [m]"),
    },
    "2_measured_data": {
        "study_folder": _FOLDER,
        "main_wind_speed": Parameter("mast.main_wind_speed", "channel the study stands on"),
        "main_pair": Parameter("measured.main_pair", "second cup, averaged with it by direction"),
        "fill_gaps": Parameter("measured.fill_gaps", "fill gaps from the other sensors"),
    },
    "3_measure_correlate_predict": {
        "study_folder": _FOLDER,
        "method": Parameter(
            "long_term.method", "blend, ratio, linear_regression or variance_ratio"
        ),
        "reference": Parameter("long_term.reference", "name of the reference"),
        "by_sector": Parameter("long_term.by_sector", "fit by direction sector"),
    },
    "4_energy_yield": {
        "study_folder": _FOLDER,
        "hub_height_m": Parameter("turbine.hub_height_m", "hub height above ground [m]"),
        "profile_method": Parameter(
            "profile.method", "how speed is carried up: by_class, single, log_law or diabatic"
        ),
    },
    "5_uncertainty": {"study_folder": _FOLDER},
    "6_site_conditions": {
        "study_folder": _FOLDER,
        "exposure": Parameter("conditions.exposure", "surroundings, for gusts and short means"),
        "maxima": Parameter("conditions.maxima", "auto, years or storms"),
        "fit": Parameter("conditions.fit", "how extreme winds are fitted"),
    },
}

_KERNEL_NAMES = {"In", "Out", "exit", "quit", "get_ipython", "open"}
_PLAIN = (str, bytes, int, float, complex, list, tuple, dict, set, frozenset, type(None))


def open_workbook(workbook: str, names: Mapping[str, Any]) -> Study:
    """Open the study a workbook means, with its parameters checked and applied.

    Parameters
    ----------
    workbook : str
        Stem of the workbook, such as ``1_site_screening``.
    names : mapping
        The kernel's variables, ``globals()``. Every plain value among them (text, number, list,
        ``None``) must be a parameter of this workbook, so that a misspelt one cannot pass
        unseen; names starting with an underscore are the analyst's own.

    Returns
    -------
    Study

    Raises
    ------
    StudyError
        If a name is unknown or missing, or a value breaks its rule.
    """
    step_of_workbook(workbook)  # a name that is no workbook is refused
    given = {
        name: value
        for name, value in names.items()
        if isinstance(value, _PLAIN) and not name.startswith("_") and name not in _KERNEL_NAMES
    }
    refuse_unknown(workbook, given)
    if "study_folder" not in given:
        raise StudyError.of(
            file=f"{workbook}.ipynb",
            met="the parameter study_folder is not set",
            rule="the parameters cell says which study is meant",
            remedy="run the parameters cell first, with study_folder = '..' in a study's copy",
        )
    return open_study(str(given["study_folder"]), overrides_of(workbook, given))


def overrides_of(workbook: str, values: Mapping[str, Any]) -> dict[str, Any]:
    """Departures from `study.toml` that the values of a parameters cell ask for, by key."""
    found = {}
    for name, value in values.items():
        key = PARAMETERS[workbook][name].overrides
        if key is not None and value is not None:
            found[key] = value
    return dict(sorted(found.items()))


def refuse_unknown(workbook: str, names: Mapping[str, Any]) -> None:
    """Refuse names that are no parameters of that workbook, with the nearest that is."""
    known = PARAMETERS[workbook]
    unknown = sorted(set(names) - set(known))
    if not unknown:
        return
    near = difflib.get_close_matches(unknown[0], known, n=1)
    raise StudyError.of(
        file=f"{workbook}.ipynb",
        met=f"unknown parameter{'s' if len(unknown) > 1 else ''} {', '.join(unknown)}",
        rule=f"the parameters of this workbook are {', '.join(known)}",
        remedy=(f"did you mean {near[0]}? " if near else "")
        + "A variable of your own starts with an underscore",
    )


def parameters_of_cell(workbook: str, source: str) -> dict[str, Any]:
    """The names and values that a parameters cell sets.

    Parameters
    ----------
    workbook : str
        Stem of the workbook, for the message.
    source : str
        The cell's source: plain assignments of text, numbers, true or false, None or lists.

    Raises
    ------
    StudyError
        If a line does something else, or a name is unknown.
    """
    values: dict[str, Any] = {}
    try:
        for line in ast.parse(source).body:
            if not (
                isinstance(line, ast.Assign)
                and len(line.targets) == 1
                and isinstance(line.targets[0], ast.Name)
            ):
                raise SyntaxError(
                    f"'{ast.unparse(line)}' is no plain assignment", ("", line.lineno, 0, "")
                )
            values[line.targets[0].id] = ast.literal_eval(line.value)
    except (SyntaxError, ValueError) as error:
        raise StudyError.of(
            file=f"{workbook}.ipynb",
            key="parameters cell",
            met=str(error),
            rule="each line gives one name a written-out value: text, number, True, list, None",
            remedy="write the value itself; what has to be computed belongs in a later cell",
        ) from None
    refuse_unknown(workbook, values)
    return values
