"""What a step leaves behind: its figures of merit, its tables, and what they were made from.

An artifact is a folder ``results/<step>/`` with ``artifact.json`` and one Parquet file a table.
It names the hashes of everything it was made from; `load_artifact` compares them with what the
study holds now and refuses to build upon an artifact whose inputs have changed.
"""

from __future__ import annotations

import json
import shutil
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

import windkit
from windkit.study.errors import StudyError
from windkit.study.folder import Study, digest_of_bytes, digest_of_file, open_study
from windkit.study.settings import SETTINGS_FILE
from windkit.study.steps import STEPS, Step, files_of, step_named

__all__ = [
    "Artifact",
    "Outcome",
    "Row",
    "first_stale_step",
    "load_artifact",
    "save_artifact",
    "swap_folder",
]

_ARTIFACT_FILE = "artifact.json"

Value = float | int | str | list[float]


@dataclass(frozen=True)
class Row:
    """One figure of merit.

    Attributes
    ----------
    key : str
        Its place in ``results.json``, dotted, with the unit at the end.
    label : str
        What a person reads.
    value : float, int, str or list of float
        The value; a list of two is an interval.
    unit : str
        Unit, ``"1"`` for a plain fraction or count.
    basis : str
        How it came about: measured, computed from what, assumed by whom.
    as_percent : bool
        Whether a person reads the fraction as a percentage.
    """

    key: str
    label: str
    value: Value
    unit: str
    basis: str
    as_percent: bool = False


@dataclass(frozen=True)
class Outcome:
    """What a step computed, before it is written.

    Attributes
    ----------
    step : str
        Short name of the step.
    rows : list of Row
        Figures of merit.
    tables : dict of str to DataFrame
        Tables by name.
    said : dict of str to str
        What was found, one sentence or two a subject, with the numbers in it.
    warnings : list of str
        What a reviewer should know, in sentences.
    """

    step: str
    rows: list[Row]
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)
    said: dict[str, str] = field(default_factory=dict)
    warnings: list[str] = field(default_factory=list)

    def value(self, key: str) -> Any:
        """The value of the row with that key."""
        for row in self.rows:
            if row.key == key:
                return row.value
        raise KeyError(
            f"step '{self.step}' has no figure '{key}': {[row.key for row in self.rows]}"
        )

    def number(self, key: str) -> float:
        """The value of that row as a float."""
        return float(self.value(key))


@dataclass(frozen=True)
class Artifact(Outcome):
    """An outcome as it stands on disk, with what it was made from."""

    made_from: dict[str, str] = field(default_factory=dict)
    overrides: dict[str, Any] = field(default_factory=dict)


def save_artifact(study: Study, outcome: Outcome) -> Path:
    """Write an outcome under ``results/<step>/``, whole or not at all.

    Parameters
    ----------
    study : Study
        The study, with the overrides that were used.
    outcome : Outcome
        What the step computed.

    Returns
    -------
    Path
        Folder of the artifact.
    """
    step = step_named(outcome.step)
    target = study.results / step.name
    part = study.results / f"{step.name}.part"
    shutil.rmtree(part, ignore_errors=True)
    part.mkdir(parents=True)
    try:
        tables = {}
        for name, table in outcome.tables.items():
            table.to_parquet(part / f"{name}.parquet")
            tables[name] = digest_of_file(part / f"{name}.parquet")
        content = {
            "step": step.name,
            "overrides": study.overrides,
            "made_from": _made_from(study, step),
            "rows": [asdict(row) for row in outcome.rows],
            "said": outcome.said,
            "warnings": outcome.warnings,
            "tables": tables,
        }
        text = json.dumps(content, indent=1, ensure_ascii=False, default=_plain, allow_nan=False)
        (part / _ARTIFACT_FILE).write_text(text + "\n", encoding="utf-8")
        swap_folder(part, target)
    finally:
        shutil.rmtree(part, ignore_errors=True)
    return target


def load_artifact(study: Study, name: str) -> Artifact:
    """Read a step's artifact, refusing one whose inputs have changed since.

    Raises
    ------
    StudyError
        If the step or one it builds upon was not run yet, inputs of either changed, or a table
        of it was altered.
    """
    step = step_named(name)
    for earlier in STEPS:
        if earlier.name in _ancestors(step):
            _refuse_stale(study, earlier, _read(study, earlier))
    content = _read(study, step)
    _refuse_stale(study, step, content)
    folder = study.results / step.name
    tables = {}
    for table, digest in content["tables"].items():
        file = folder / f"{table}.parquet"
        if not file.is_file() or digest_of_file(file) != digest:
            raise StudyError.of(
                file=f"results/{step.name}/{table}.parquet",
                met="its content is not what the step wrote",
                rule="artifacts are written by their step only",
                remedy=f"run `sitestudy run {study.folder.name} --from {step.name}`",
            )
        tables[table] = pd.read_parquet(file)
    return Artifact(
        step=step.name,
        rows=[Row(**row) for row in content["rows"]],
        tables=tables,
        said=content["said"],
        warnings=content["warnings"],
        made_from=content["made_from"],
        overrides=content["overrides"],
    )


def first_stale_step(study: Study) -> str | None:
    """The first step without an artifact that stands on today's inputs, or None."""
    for step in STEPS:
        try:
            _refuse_stale(study, step, _read(study, step))
        except StudyError:
            return step.name
    return None


def _read(study: Study, step: Step) -> dict[str, Any]:
    file = study.results / step.name / _ARTIFACT_FILE
    if not file.is_file():
        raise StudyError.of(
            file=f"results/{step.name}",
            met=f"step '{step.name}' has left no artifact yet",
            rule="each step stands on those before it",
            remedy=f"run {step.workbook} first, or `sitestudy run {study.folder.name}`",
        )
    try:
        content = json.loads(file.read_text(encoding="utf-8"))
    except ValueError:
        content = None
    parts = {"overrides", "made_from", "rows", "said", "warnings", "tables"}
    if not (isinstance(content, dict) and content.keys() >= parts):
        raise StudyError.of(
            file=f"results/{step.name}/{_ARTIFACT_FILE}",
            met="its content is not what the step wrote",
            rule="artifacts are written by their step only",
            remedy=f"run `sitestudy run {study.folder.name} --from {step.name}`",
        )
    return content


def _ancestors(step: Step) -> set[str]:
    """All steps that a step builds upon, near and far."""
    found = set(step.needs)
    for need in step.needs:
        found |= _ancestors(step_named(need))
    return found


def _refuse_stale(study: Study, step: Step, content: Mapping[str, Any]) -> None:
    # The artifact's own departures from study.toml are part of it: they are laid over today's
    # file before the comparison, so only what really changed is named.
    seen = open_study(study.folder, content["overrides"])
    now, then = _made_from(seen, step), content["made_from"]
    changed = [name for name in sorted(now.keys() | then.keys()) if now.get(name) != then.get(name)]
    if changed:
        raise StudyError.of(
            file=f"results/{step.name}",
            met=f"since it was made these inputs changed: {', '.join(changed)}",
            rule="a result is not built upon once its inputs have changed",
            remedy=f"run `sitestudy run {study.folder.name} --from {step.name}`",
        )


def _made_from(study: Study, step: Step) -> dict[str, str]:
    hashes = {"windkit": windkit.__version__}
    for section in step.sections:
        hashes[f"{SETTINGS_FILE} [{section}]"] = study.section_digest(section)
    for name, key in files_of(study, step).items():
        hashes[name] = digest_of_file(study.path(name, key=key))
    if step.name == "measure":
        hashes[study.ledger.name] = (
            digest_of_file(study.ledger) if study.ledger.is_file() else "no file"
        )
    for need in step.needs:
        file = study.results / need / _ARTIFACT_FILE
        hashes[f"results/{need}"] = (
            digest_of_bytes(file.read_bytes()) if file.is_file() else "no file"
        )
    return hashes


def swap_folder(part: Path, target: Path) -> None:
    """Put a finished folder in the place of the old one; the old one goes last."""
    old = target.with_name(f"{target.name}.old")
    shutil.rmtree(old, ignore_errors=True)
    if target.exists():
        target.rename(old)
    part.rename(target)
    shutil.rmtree(old, ignore_errors=True)


def _plain(value: Any) -> Any:
    if isinstance(value, np.generic):
        return value.item()
    if isinstance(value, np.ndarray):
        return value.tolist()
    raise TypeError(f"{type(value).__name__} has no place in an artifact")
