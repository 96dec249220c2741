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

from windkit.faces.report import NOT_STATED, Cover, Statements, versions_in_use, write_report
from windkit.faces.spreadsheet import write_tables
from windkit.faces.tables import results_table
from windkit.faces.views import exceedance_view, setting_text
from windkit.faces.wording import as_printed, number_text
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
    "conditions.v50_windiest_m_s",
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
    ("measure", "main"),
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
    write_tables(
        part / "tables.xlsx",
        _tables(artifacts),
        [row for artifact in artifacts.values() for row in artifact.rows],
        title=study.settings.study.title,
        departures=_departure_sentences(results["departures"]),
    )
    try:
        write_report(
            part / "report.html",
            cover=_cover(study, artifacts, results["departures"]),
            notebooks=workbooks,
            headline=exceedance_view(artifacts["uncertainty"]),
            summary_html=_summary(artifacts),
            inputs=_inputs(artifacts),
            versions=versions_in_use(),
            statements=_statements(study),
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


def _cover(
    study: Study, artifacts: dict[str, Outcome], departures: dict[str, dict[str, Any]]
) -> Cover:
    settings, identity = study.settings, study.settings.study
    site, turbine = settings.site, settings.turbine
    # The energy on the cover is that of the hub height it was computed for.
    hub_height = departures.get("yield", {}).get("turbine.hub_height_m", turbine.hub_height_m)
    warnings = [warning for artifact in artifacts.values() for warning in artifact.warnings]
    stated = {
        "Verifier": identity.verifier,
        "Approver": identity.approver,
        "Contract": identity.contract,
        "Confidentiality": identity.confidentiality,
        "Coordinate system": identity.coordinate_system,
        "Data until": identity.data_date.isoformat() if identity.data_date else "",
    }
    facts = {name: text or NOT_STATED for name, text in stated.items()} | {
        "Country": site.country,
        "Mast": f"{settings.mast.name}, {_angle(site.latitude_deg, 'N', 'S')}, "
        f"{_angle(site.longitude_deg, 'E', 'W')}, {number_text(site.elevation_m)} m above the sea",
        "Turbines": f"{len(settings.layout)} × {turbine.name}, hub at {hub_height:g} m",
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
        mind=[as_printed(said) for said in [*_departure_sentences(departures), *warnings]],
    )


def _statements(study: Study) -> Statements:
    """What the study states; a key that is left out states nothing."""
    identity = study.settings.study
    written = identity.model_fields_set
    deviations = [
        (each.rule, each.what, each.effect, each.accepted_by) for each in identity.deviations
    ]
    return Statements(
        independence=identity.independence,
        standards=identity.standards_followed if "standards_followed" in written else None,
        deviations=deviations if "deviations" in written else None,
    )


def _angle(degrees: float, positive: str, negative: str) -> str:
    """A coordinate with the letter of its half of the globe instead of a sign."""
    return f"{abs(degrees):.4f}° {positive if degrees >= 0 else negative}"


def _departure_sentences(departures: dict[str, dict[str, Any]]) -> list[str]:
    """What was run with other values than `study.toml` holds."""
    return [
        f"Step {step} was run with {key} = {setting_text(value)} instead of the value in "
        f"study.toml."
        for step, values in departures.items()
        for key, value in values.items()
    ]


def _summary(artifacts: dict[str, Outcome]) -> str:
    """The figures a reader looks for first, and what was found."""
    rows = [
        row for artifact in artifacts.values() for row in artifact.rows if row.key in _SUMMARY_KEYS
    ]
    found = "".join(
        f"<p>{escape(as_printed(artifacts[step].said[subject]))}</p>"
        for step, subject in _SUMMARY_SENTENCES
    )
    table = results_table(rows, caption="Figures of merit")._repr_html_()
    return f"<h2>Results</h2>{found}{table}"


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
