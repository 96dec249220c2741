"""The one error a study raises for something a person can put right.

Here is the class and the helper that joins its five parts into one paragraph. What is checked,
and where, stands with the module that reads the file or the setting.
"""

from __future__ import annotations

from pathlib import Path

__all__ = ["StudyError", "explain"]


class StudyError(ValueError):
    """Something in a study's files or settings that a person must put right.

    The text is one paragraph for the analyst: where (file, and line or key), what was met,
    the rule it breaks and what to write or do instead. Use `StudyError.of` to join the parts.
    """

    @classmethod
    def of(
        cls,
        *,
        file: str | Path | None = None,
        line: int | None = None,
        key: str | None = None,
        met: str,
        rule: str,
        remedy: str,
    ) -> StudyError:
        """Build the error from its parts; the paragraph is that of `explain`."""
        return cls(explain(file=file, line=line, key=key, met=met, rule=rule, remedy=remedy))


def explain(
    *,
    file: str | Path | None = None,
    line: int | None = None,
    key: str | None = None,
    met: str,
    rule: str,
    remedy: str,
) -> str:
    """One paragraph: where, what was met, the rule, the remedy.

    Parameters
    ----------
    file : str or Path, optional
        File as the analyst knows it, relative to the study folder.
    line : int, optional
        Line in that file, the first line being 1.
    key : str, optional
        Key of the settings, dotted, such as ``mast.channels[2].unit``.
    met : str
        What was found there.
    rule : str
        What has to hold.
    remedy : str
        What to write or do instead.

    Returns
    -------
    str
        ``file, line 12, key: met. Rule. Remedy.`` as three sentences.

    Examples
    --------
    >>> explain(file="mast.csv", line=3, met='speed is "x"', rule="speeds are numbers",
    ...         remedy='add "x" to missing')
    'mast.csv, line 3: speed is "x". Speeds are numbers. Add "x" to missing.'
    """
    places = [str(file)] if file is not None else []
    if line is not None:
        places.append(f"line {line}")
    if key is not None:
        places.append(key)
    where = ", ".join(places)
    told = " ".join(_sentence(part) for part in (rule, remedy))
    # What was met keeps its own spelling: it often starts with a column name.
    return f"{where}: {_closed(met)} {told}" if where else f"{_sentence(met)} {told}"


def _closed(text: str) -> str:
    text = text.strip()
    return text if text.endswith((".", "?", "!")) else text + "."


def _sentence(text: str) -> str:
    text = _closed(text)
    return text[:1].upper() + text[1:]
