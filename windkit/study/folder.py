"""A study is a folder: opening it, its paths, and the hashes of what it holds.

Here is the `Study` object that every step takes. What the settings mean is in `settings`; what
the steps leave behind is in `artifacts`.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from pydantic import BaseModel

from windkit.study.errors import StudyError
from windkit.study.paths import file_in_study
from windkit.study.settings import (
    SETTINGS_FILE,
    Settings,
    parse_settings,
    read_settings,
    with_overrides,
)

__all__ = ["LEDGER_FILE", "Study", "digest_of_bytes", "digest_of_file", "open_study"]

LEDGER_FILE = "ledger.csv"


@dataclass(frozen=True)
class Study:
    """One study, its decisions read and checked.

    Attributes
    ----------
    folder : Path
        The study folder, resolved.
    settings : Settings
        `study.toml` with `overrides` applied.
    overrides : dict
        Departures from `study.toml` that a workbook's parameters ask for, by ``section.key``.
    """

    folder: Path
    settings: Settings
    overrides: dict[str, Any] = field(default_factory=dict)

    def path(self, name: str, *, key: str) -> Path:
        """The file `name` of `study.toml`, which must exist inside the folder.

        Parameters
        ----------
        name : str
            Path as written in the settings, relative to the folder.
        key : str
            Where it was written, for the message.

        Raises
        ------
        StudyError
            If the path leaves the folder or there is no such file.
        """
        return file_in_study(self.folder, name, key=key)

    def section(self, name: str) -> Any:
        """The values of one table of the settings, or of its one key, as plain JSON values."""
        table, _, key = name.partition(".")
        value = getattr(self.settings, table)
        if key:
            return value.model_dump(mode="json")[key]
        if isinstance(value, BaseModel):
            return value.model_dump(mode="json")
        return [item.model_dump(mode="json") for item in value]

    def section_digest(self, name: str) -> str:
        """SHA-256 of one table's values; the order of keys and comments do not count."""
        text = json.dumps(self.section(name), sort_keys=True, ensure_ascii=False)
        return digest_of_bytes(text.encode())

    @property
    def results(self) -> Path:
        return self.folder / "results"

    @property
    def handover(self) -> Path:
        return self.folder / "handover"

    @property
    def ledger(self) -> Path:
        return self.folder / LEDGER_FILE


def open_study(folder: str | Path, overrides: Mapping[str, Any] | None = None) -> Study:
    """Open a study folder and validate its settings as a whole.

    Parameters
    ----------
    folder : str or Path
        The study folder.
    overrides : mapping, optional
        Values that replace those of `study.toml`, by ``section.key``.

    Returns
    -------
    Study

    Raises
    ------
    StudyError
        If there is no such folder or file, or a value breaks its rule; every fault is named.
    """
    root = Path(folder).resolve()
    if not root.is_dir():
        raise StudyError.of(
            met=f"there is no folder '{folder}'",
            rule=f"a study is a folder with a {SETTINGS_FILE} in it",
            remedy="name the study's folder, or make one with `sitestudy new DIR`",
        )
    chosen = dict(overrides or {})
    values = read_settings(root / SETTINGS_FILE)
    settings = parse_settings(values)
    if chosen:  # apart from the file, so that a fault is looked for where it was written
        place = f"parameters over {SETTINGS_FILE}"
        settings = parse_settings(with_overrides(values, chosen), file=place)
    return Study(folder=root, settings=settings, overrides=chosen)


def digest_of_bytes(content: bytes) -> str:
    """SHA-256 of the bytes, in hexadecimal."""
    return hashlib.sha256(content).hexdigest()


def digest_of_file(file: Path) -> str:
    """SHA-256 of a file's bytes, in hexadecimal."""
    with file.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()
