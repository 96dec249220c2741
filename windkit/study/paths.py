"""Paths written in a study's settings, kept inside the study folder."""

from __future__ import annotations

from pathlib import Path, PureWindowsPath

from windkit.study.errors import StudyError

__all__ = ["file_in_study"]


def file_in_study(folder: Path, written: str, *, key: str) -> Path:
    """Resolve a path of the settings, or refuse it when it leaves the study or is no file.

    Parameters
    ----------
    folder : Path
        The study folder.
    written : str
        The path as written in the settings.
    key : str
        Key it stands under, for the message.

    Returns
    -------
    Path
        The file, its links followed.

    Raises
    ------
    StudyError
        If the path is absolute, climbs out with ``..`` or through a link, or names no file.
    """

    def refuse(met: str, remedy: str) -> StudyError:
        return StudyError.of(
            file=written, key=key, met=met, rule="files lie inside the study folder", remedy=remedy
        )

    copy = "copy it into the study, for instance into data/, and write the path from there"
    windows = PureWindowsPath(written)
    if Path(written).is_absolute() or windows.is_absolute() or windows.drive or windows.root:
        raise refuse("the path is absolute", copy)
    if ".." in Path(written).parts or ".." in windows.parts:
        raise refuse("the path climbs out with ..", copy)
    home = folder.resolve()
    try:
        target = (home / written).resolve()
    except (OSError, RuntimeError, ValueError) as error:  # a loop of links, a NUL in the name
        raise refuse(f"the path cannot be followed ({error})", copy) from error
    if not target.is_relative_to(home):
        raise refuse("the path is a link that leaves the study", copy)
    if not target.is_file():
        what = "a folder, not a file" if target.is_dir() else "not there"
        near = target.parent if target.parent.is_dir() and target != home else home
        there = ", ".join(sorted(entry.name for entry in near.iterdir())[:12])
        place = near.relative_to(home).as_posix()
        raise refuse(
            f"it is {what}", f"correct the name; in '{place}' there are: {there or 'no files'}"
        )
    return target
