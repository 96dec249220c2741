"""What ships with the package beside the code, and new studies made of it.

Template workbooks and the demo study lie at the top of the repository in a checkout; in a built
package, under ``_shipped``. Here a new study folder is laid out; what a client's file holds is
found out in `drafting` and `station_description`.
"""

from __future__ import annotations

import re
import shutil
from pathlib import Path

import windkit
from windkit.study.drafting import draft_from_file
from windkit.study.errors import StudyError
from windkit.study.folder import LEDGER_FILE
from windkit.study.ledger import empty_ledger, write_ledger
from windkit.study.settings import SETTINGS_FILE
from windkit.study.station_description import draft_from_description, station_names
from windkit.study.station_draft import StationDraft, draft_text, joined_drafts
from windkit.study.steps import STEPS

__all__ = ["make_study", "shipped_folder"]

#: Endings of files that a draft looks at beside a station description.
_TEXTS = (".csv", ".txt", ".dat", ".tsv", ".asc", ".gz", ".zip")
#: Endings of files that can be read and not drafted from.
_TYPED = (".xlsx", ".xlsm", ".parquet", ".pq", ".nc", ".nc4", ".cdf")
#: The mast's tables in the template, up to the heading behind them.
_MAST = re.compile(r"^\[mast\]\n.*?(?=^# --- )", re.MULTILINE | re.DOTALL)
_KEY = re.compile(r"^(?:# )?(\w+) = ")

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


def make_study(
    folder: str | Path, *, demo: bool = False, from_file: str | Path | None = None
) -> Path:
    """Lay out a new study folder.

    Parameters
    ----------
    folder : str or Path
        Folder to make; it must not exist or be empty.
    demo : bool
        Fill it with the demo study instead of a template to adapt.
    from_file : str or Path, optional
        A mast's data file, or a station description (IEA Wind Task 43 data model, ``.json``). The
        mast's section is drafted from it, and from the one of the other kind that lies beside it
        and fits it; the data file is copied into ``data/``. The description is not copied: it may
        hold the keys of a logger.

    Returns
    -------
    Path
        The folder.

    Raises
    ------
    StudyError
        If there is something in the way, or nothing can be drafted from the file.
    """
    if demo and from_file is not None:
        raise StudyError.of(
            met="both the demo study and a file to draft from are asked for",
            rule="a new study is one or the other",
            remedy="leave out --demo or --from",
        )
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
    drafted = None if from_file is None else _draft(Path(from_file))
    try:
        _lay_out(part, demo=demo)
        if drafted is not None:
            _fill_in(part, *drafted)
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


def _draft(path: Path) -> tuple[StationDraft, Path | None]:
    """The mast's draft, and the data file to copy."""
    if not path.is_file():
        raise StudyError.of(
            file=str(path),
            met="there is no such file",
            rule="a draft is made from a data file or from a station description",
            remedy="correct the path",
        )
    if path.suffix.lower() == ".json":
        return _draft_described(path)
    if path.suffix.lower() in _TYPED:
        raise StudyError.of(
            file=path.name,
            met=f"a {path.suffix} file is not looked at",
            rule="a draft is made from a text file, plain or packed, or from a description",
            remedy="export some days of it as CSV and draft from those; then write the whole "
            "file's name in files",
        )
    draft = draft_from_file(path)
    own = path.name.split(".")[0]
    beside = sorted(path.parent.glob("*.json"), key=lambda each: (each.stem != own, each.name))
    fitting = [
        (found, each)
        for each in beside
        for found in _described(each)
        if _shares_columns(draft, found)
    ]
    if fitting and (len(fitting) == 1 or fitting[0][1].stem == own != fitting[1][1].stem):
        found, description = fitting[0]
        draft = joined_drafts(draft, found)
        draft.notes.insert(0, f"drafted from {path.name} and its description {description.name}")
    elif fitting:
        names = ", ".join(dict.fromkeys(each.name for _, each in fitting))
        draft.notes.append(
            f"{len(fitting)} stations are described beside the file that have its columns "
            f"({names}); none is used: leave one beside it and draft again"
        )
    return draft, path


def _draft_described(path: Path) -> tuple[StationDraft, Path | None]:
    """The same from a description, with the data file beside it if exactly one fits."""
    described = _described(path)
    if len(described) != 1:
        described = [draft_from_description(path)]  # says what is wrong, or which stations
    fitting = []
    for each in sorted(path.parent.iterdir()):
        if each.suffix.lower() not in _TEXTS:
            continue
        try:
            draft = draft_from_file(each)
        except StudyError:
            continue
        if _shares_columns(draft, described[0]):
            fitting.append((draft, each))
    if len(fitting) == 1:
        draft, data = fitting[0]
        draft = joined_drafts(draft, described[0])
        draft.notes.insert(0, f"drafted from {data.name} and its description {path.name}")
        return draft, data
    draft = described[0]
    draft.notes.insert(0, f"drafted from the description {path.name}, without a data file")
    if fitting:
        names = ", ".join(each.name for _, each in fitting)
        draft.notes.append(f"several files beside it have such columns, none is copied: {names}")
    return draft, None


def _described(path: Path) -> list[StationDraft]:
    """Drafts of all stations of a description; none if the file is something else."""
    try:
        return [draft_from_description(path, station=name) for name in station_names(path)]
    except StudyError:
        return []


def _shares_columns(file: StationDraft, description: StationDraft) -> bool:
    return any(channel["column"] in file.headers for channel in description.channels)


def _fill_in(part: Path, draft: StationDraft, data: Path | None) -> None:
    """Put the draft in place of the template's mast, and the data file into ``data/``."""
    if data is not None:
        shutil.copyfile(data, part / "data" / data.name)
    settings = part / SETTINGS_FILE
    template = settings.read_text(encoding="utf-8")
    old = _MAST.search(template)
    assert old is not None, "the template has a table [mast]"
    # Keys that the draft does not need stay as comments, for what else can be said.
    lines = old[0].split("\n\n[[mast.channels]]")[0].splitlines()[1:]
    keys = [(line, _KEY.match(line)) for line in lines]
    known = {*draft.station, "main_wind_speed", "main_wind_direction", "REQUIRED"}
    spare = [line for line, key in keys if key and key[1] not in known]
    text = draft_text(draft).replace("\n\n[[", "\n" + "\n".join(spare) + "\n\n[[", 1)
    filled = template[: old.start()] + text + "\n" + template[old.end() :]
    settings.write_text(filled, encoding="utf-8")


def _point_at_study(notebook_text: str) -> str:
    # The templates stand on the demo study, so that they run where they lie; a study's copy
    # stands on the folder above it. The text is JSON, so the quotes are escaped in it.
    return notebook_text.replace('study_folder = \\"../data_demo\\"', 'study_folder = \\"..\\"')
