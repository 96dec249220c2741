"""What ships with the package beside the code: template workbooks and the demo study.

In a checkout they lie at the top of the repository; in a built package, under ``_shipped``.
"""

from __future__ import annotations

import shutil
from pathlib import Path

import windkit
from windkit.study.errors import StudyError
from windkit.study.folder import LEDGER_FILE
from windkit.study.ledger import empty_ledger, write_ledger
from windkit.study.settings import SETTINGS_FILE
from windkit.study.steps import STEPS

__all__ = ["make_study", "shipped_folder"]

_PACKAGE = Path(windkit.__file__).parent


def shipped_folder(name: str) -> Path:
    """Folder ``workbooks`` or ``data_demo``, wherever this installation has it."""
    for root in (_PACKAGE / "_shipped", _PACKAGE.parent):
        if (root / name).is_dir():
            return root / name
    raise StudyError.of(
        met=f"this installation has no {name}",
        rule="workbooks and demo data come with the checkout",
        remedy="install the package from its checkout again",
    )


def make_study(folder: str | Path, *, demo: bool = False) -> Path:
    """Lay out a new study folder.

    Parameters
    ----------
    folder : str or Path
        Folder to make; it must not exist or be empty.
    demo : bool
        Fill it with the demo study instead of a template to adapt.

    Returns
    -------
    Path
        The folder.

    Raises
    ------
    StudyError
        If there is something in the way.
    """
    target = Path(folder).resolve()
    if target.exists() and (not target.is_dir() or any(target.iterdir())):
        raise StudyError.of(
            met=f"'{folder}' is there already and not empty",
            rule="a new study never overwrites anything",
            remedy="choose another folder, or remove this one first",
        )
    part = target.with_name(f"{target.name}.part")
    if part.exists():
        raise StudyError.of(
            met=f"'{part.name}' stands beside '{folder}', where the new study is put together",
            rule="a new study never overwrites anything",
            remedy="remove or rename it first; a run that was cut off may have left it",
        )
    try:
        _lay_out(part, demo=demo)
        if target.exists():
            target.rmdir()
        part.rename(target)
    finally:
        shutil.rmtree(part, ignore_errors=True)
    return target


def _lay_out(part: Path, *, demo: bool) -> None:
    (part / "workbooks").mkdir(parents=True)
    (part / "data").mkdir()
    if demo:
        source = shipped_folder("data_demo")
        shutil.copytree(source / "data", part / "data", dirs_exist_ok=True)
        for name in (SETTINGS_FILE, LEDGER_FILE):
            shutil.copyfile(source / name, part / name)
    else:
        shutil.copyfile(_PACKAGE / "study" / "study_template.toml", part / SETTINGS_FILE)
        write_ledger(empty_ledger(), part / LEDGER_FILE)
    for step in STEPS:
        name = f"{step.workbook}.ipynb"
        text = (shipped_folder("workbooks") / name).read_text(encoding="utf-8")
        (part / "workbooks" / name).write_text(_point_at_study(text), encoding="utf-8")


def _point_at_study(notebook_text: str) -> str:
    # The templates stand on the demo study, so that they run where they lie; a study's copy
    # stands on the folder above it. The text is JSON, so the quotes are escaped in it.
    return notebook_text.replace('study_folder = \\"../data_demo\\"', 'study_folder = \\"..\\"')
