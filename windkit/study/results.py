"""`results.json`: every figure of merit of a study in one file, by a versioned schema.

The schema is the pydantic model here; it holds what any study must have, and lets a study have
more. Figures are rounded to six significant digits, so that the last bits of a machine's
arithmetic do not make two equal studies differ.
"""

from __future__ import annotations

import json
from typing import Any

from pydantic import BaseModel, ConfigDict, Field, create_model

import windkit
from windkit.study.artifacts import Outcome, load_artifact
from windkit.study.folder import Study
from windkit.study.steps import STEPS
from windkit.study.uncertainty import PROBABILITIES, YEARS

__all__ = ["RESULTS_SCHEMA_VERSION", "Results", "collect_results", "results_text"]

RESULTS_SCHEMA_VERSION = 1
_SIGNIFICANT_DIGITS = 6


class _Part(BaseModel):
    model_config = ConfigDict(extra="allow")


class _Measured(_Part):
    mean_speed_m_s: float = Field(gt=0)
    recovery: float = Field(ge=0, le=1)


class _LongTerm(_Part):
    mean_speed_m_s: float = Field(gt=0)
    interval_80_m_s: tuple[float, float]


class _Hub(_Part):
    mean_speed_m_s: float = Field(gt=0)
    weibull_A_m_s: float = Field(gt=0)  # noqa: N815 - the trade writes A
    weibull_k: float = Field(gt=0)
    air_density_kg_m3: float = Field(gt=0)


class _Energy(_Part):
    gross_mwh_per_year: float = Field(ge=0)
    net_p50_mwh_per_year: float = Field(ge=0)
    capacity_factor: float = Field(ge=0, le=1)


_Levels: type[BaseModel] = create_model(
    "_Levels",
    **{f"P{round(100 * p)}_mwh_per_year": (float, ...) for p in PROBABILITIES},  # type: ignore[call-overload]
)


class _Conditions(_Part):
    turbulence_class: str | None = None
    v50_m_s: float | None = Field(default=None, gt=0)
    verdict: dict[str, int]


class Results(_Part):
    """What `results.json` holds at least."""

    results_schema_version: int
    software_version: str
    study: dict[str, Any]
    departures: dict[str, dict[str, Any]]
    measured: _Measured
    long_term: _LongTerm
    hub: _Hub
    energy: _Energy
    exceedance: dict[str, _Levels]  # type: ignore[valid-type]
    conditions: _Conditions
    made_from: dict[str, dict[str, str]]


def collect_results(study: Study) -> tuple[dict[str, Any], dict[str, Outcome]]:
    """Gather the figures of all steps, refusing stale ones.

    Returns
    -------
    results : dict
        What is written to `results.json`, checked against the schema.
    artifacts : dict
        The artifacts by step, in order.
    """
    artifacts = {step.name: load_artifact(study, step.name) for step in STEPS}
    identity = study.settings.study.model_dump(mode="json")
    results: dict[str, Any] = {
        "results_schema_version": RESULTS_SCHEMA_VERSION,
        "software_version": windkit.__version__,
        "study": {**identity, "site": study.settings.site.name},
        # A parameter set in a workbook outranks study.toml; a reader must see that it did.
        "departures": {name: a.overrides for name, a in artifacts.items() if a.overrides},
    }
    for artifact in artifacts.values():
        for row in artifact.rows:
            *parents, last = row.key.split(".")
            place = results
            for parent in parents:
                place = place.setdefault(parent, {})
            place[last] = _rounded(row.value)
    results["made_from"] = {name: artifact.made_from for name, artifact in artifacts.items()}
    checked = Results.model_validate(results)
    assert set(checked.exceedance) == {str(years) for years in YEARS}
    return results, dict(artifacts)


def results_text(results: dict[str, Any]) -> str:
    """The bytes of `results.json` as text."""
    return json.dumps(results, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def _rounded(value: Any) -> Any:
    if isinstance(value, float):
        return float(f"{value:.{_SIGNIFICANT_DIGITS}g}")
    if isinstance(value, list):
        return [_rounded(item) for item in value]
    return value
