"""The handover: report, tables, results and executed workbooks, put in place in one move.

Nothing is computed here; figures come from the artifacts, chapters from the executed workbooks.
The same study gives the same bytes: no clock, no random ids, no paths of the machine.
"""

from __future__ import annotations

import shutil
from dataclasses import dataclass
from html import escape
from pathlib import Path
from typing import Any

from windkit.faces.report import Cover, versions_in_use, write_report
from windkit.faces.spreadsheet import write_tables
from windkit.faces.tables import results_table
from windkit.faces.views import exceedance_view
from windkit.study.artifacts import Artifact, Outcome, swap_folder
from windkit.study.errors import StudyError
from windkit.study.folder import Study
from windkit.study.results import collect_results, results_text
from windkit.study.running import executed_workbooks

__all__ = ["Handover", "build_handover"]

#: What the summary page shows, out of all figures of merit.
_SUMMARY_KEYS = {
    "measured.mean_speed_m_s",
    "measured.recovery",
    "long_term.mean_speed_m_s",
    "long_term.interval_80_m_s",
    "hub.mean_speed_m_s",
    "hub.interval_80_m_s",
    "hub.air_density_kg_m3",
    "energy.gross_mwh_per_year",
    "energy.total_loss",
    "energy.net_p50_mwh_per_year",
    "energy.capacity_factor",
    "energy.sensitivity",
    "uncertainty.static",
    "uncertainty.yearly",
    "conditions.v50_m_s",
    "conditions.turbulence_class",
    "conditions.verdict.outside",
    "conditions.verdict.not_assessed",
}
_SUMMARY_SENTENCES = (
    ("long_term", "correction"),
    ("yield", "losses"),
    ("uncertainty", "levels"),
    ("uncertainty", "narrowing"),
    ("conditions", "verdict"),
)

#: Tables of the artifacts that are too long for a spreadsheet; they stay in results/ as Parquet.
_LEFT_OUT = {
    ("measure", "record"),
    ("long_term", "series"),
    ("yield", "hub_series"),
    ("yield", "air_temperature"),
}


@dataclass(frozen=True)
class Handover:
    """What was written.

    Attributes
    ----------
    folder, report : Path
        The handover folder and the report in it.
    results : dict
        Content of `results.json`.
    """

    folder: Path
    report: Path
    results: dict[str, Any]


def build_handover(study: Study) -> Handover:
    """Write ``handover/`` from the artifacts and the executed workbooks, whole or not at all.

    Parameters
    ----------
    study : Study
        The study, all of its steps up to date.

    Returns
    -------
    Handover

    Raises
    ------
    StudyError
        If a step is stale or a workbook has not been run.
    """
    results, artifacts = collect_results(study)
    workbooks = executed_workbooks(study)
    part = study.folder / "handover.part"
    shutil.rmtree(part, ignore_errors=True)
    (part / "workbooks").mkdir(parents=True)
    for file in workbooks:
        shutil.copyfile(file, part / "workbooks" / file.name)
    (part / "results.json").write_text(results_text(results), encoding="utf-8")
    write_tables(part / "tables.xlsx", _tables(artifacts), results)
    try:
        write_report(
            part / "report.html",
            cover=_cover(study),
            notebooks=workbooks,
            headline=exceedance_view(artifacts["uncertainty"]),
            summary_html=_summary(artifacts),
            inputs=_inputs(artifacts),
            versions=versions_in_use(),
            study_folder=study.folder,
        )
    except ValueError as error:
        raise StudyError.of(
            met=f"the report was not written: {error}",
            rule="a report stands on its own and shows nothing of the machine it was made on",
            remedy="mend that cell in the study's workbook and run again",
        ) from None
    swap_folder(part, study.handover)
    return Handover(study.handover, study.handover / "report.html", results)


def _cover(study: Study) -> Cover:
    settings, identity = study.settings, study.settings.study
    site, turbine = settings.site, settings.turbine
    facts = {
        "Country": site.country,
        "Mast": f"{settings.mast.name}, {site.latitude_deg:.4f}° N, {site.longitude_deg:.4f}° E, "
        f"{site.elevation_m:g} m above the sea",
        "Turbines": f"{len(settings.layout)} × {turbine.name}, hub at {turbine.hub_height_m:g} m",
    }
    return Cover(
        title=identity.title,
        site=site.name,
        client=identity.client,
        analyst=identity.analyst,
        revision=identity.revision,
        issue_date=identity.issue_date,
        reason_for_revision=identity.reason_for_revision,
        facts={name: text for name, text in facts.items() if text},
    )


def _summary(artifacts: dict[str, Outcome]) -> str:
    """The figures a reader looks for first, what was found, and every warning."""
    rows = [
        row for artifact in artifacts.values() for row in artifact.rows if row.key in _SUMMARY_KEYS
    ]
    found = "".join(
        f"<p>{escape(artifacts[step].said[subject])}</p>" for step, subject in _SUMMARY_SENTENCES
    )
    warnings = [warning for artifact in artifacts.values() for warning in artifact.warnings]
    mind = "".join(f"<li>{escape(warning)}</li>" for warning in warnings)
    table = results_table(rows, caption="Figures of merit")._repr_html_()
    return found + table + (f"<h3>What a reviewer should mind</h3><ul>{mind}</ul>" if mind else "")


def _inputs(artifacts: dict[str, Outcome]) -> dict[str, str]:
    """SHA-256 of every file and section the steps were made from."""
    hashes: dict[str, str] = {}
    for artifact in artifacts.values():
        assert isinstance(artifact, Artifact)
        hashes |= {
            name: digest
            for name, digest in artifact.made_from.items()
            if not name.startswith("results/") and name != "windkit"
        }
    return dict(sorted(hashes.items()))


def _tables(artifacts: dict[str, Outcome]) -> dict[str, Any]:
    return {
        f"{step}.{name}": table
        for step, artifact in artifacts.items()
        for name, table in artifact.tables.items()
        if (step, name) not in _LEFT_OUT
    }
