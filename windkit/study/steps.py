"""The six steps of a study, in order: their workbooks and what each stands on.

A table and its look-ups, nothing else. The order here is the order of the workbooks, of the
table of contents and of the report.
"""

from __future__ import annotations

from dataclasses import dataclass

from windkit.study.errors import StudyError
from windkit.study.folder import Study

__all__ = ["STEPS", "Step", "files_of", "step_named", "step_of_workbook"]


@dataclass(frozen=True)
class Step:
    """One step.

    Attributes
    ----------
    name : str
        Short name, also the folder of its artifact under ``results/``.
    workbook : str
        Stem of its workbook.
    title : str
        Heading in the report.
    sections : tuple of str
        Tables of `study.toml` it reads, or single keys of them as ``table.key``.
    needs : tuple of str
        Steps whose artifacts it builds upon.
    """

    name: str
    workbook: str
    title: str
    sections: tuple[str, ...]
    needs: tuple[str, ...] = ()


STEPS: tuple[Step, ...] = (
    Step("screen", "1_site_screening", "Site screening", ("site", "screening", "turbine")),
    Step(
        "measure",
        "2_measured_data",
        "Measured data",
        (
            "site",
            "mast",
            "references",
            "checks",
            "measured",
            "turbine.curve_file",
            "turbine.curve_air_density_kg_m3",
            "turbine.cut_out_m_s",
        ),
    ),
    Step(
        "long_term",
        "3_measure_correlate_predict",
        "Measure, correlate, predict",
        ("mast", "references", "long_term"),
        ("measure",),
    ),
    Step(
        "yield",
        "4_energy_yield",
        "Energy yield",
        ("site", "profile", "turbine", "layout", "losses"),
        ("measure", "long_term"),
    ),
    Step(
        "uncertainty",
        "5_uncertainty",
        "Uncertainty",
        ("losses", "uncertainties"),
        ("long_term", "yield"),
    ),
    Step(
        "conditions",
        "6_site_conditions",
        "Site conditions",
        ("site", "turbine", "layout", "conditions"),
        ("measure", "long_term", "yield"),
    ),
)


def step_named(name: str) -> Step:
    """The step of that short name; an unknown one is refused with the names there are."""
    for step in STEPS:
        if step.name == name:
            return step
    raise StudyError.of(
        met=f"there is no step '{name}'",
        rule=f"the steps are {', '.join(step.name for step in STEPS)}",
        remedy="write one of these names",
    )


def step_of_workbook(workbook: str) -> Step:
    """The step of a workbook's stem, such as ``1_site_screening``."""
    for step in STEPS:
        if step.workbook == workbook:
            return step
    raise StudyError.of(
        met=f"there is no workbook '{workbook}'",
        rule=f"the workbooks are {', '.join(step.workbook for step in STEPS)}",
        remedy="write one of these names, without the file ending",
    )


def files_of(study: Study, step: Step) -> dict[str, str]:
    """The files a step reads: name as written in the settings, and the key it stands under."""
    settings, files = study.settings, {}
    if {"turbine", "turbine.curve_file"} & set(step.sections):
        files[settings.turbine.curve_file] = "turbine.curve_file"
    if step.name == "measure":
        files |= dict.fromkeys(settings.mast.files, "mast.files")
    if "references" in step.sections:
        for reference in settings.references:
            files |= dict.fromkeys(reference.files, f"references ({reference.name}).files")
    return files
