"""A station section in the making: what is known, and what has to be asked.

Here is the draft that `drafting` (from a data file) and `station_description` (from an open
station description) fill, and its text for `study.toml`. An open question is written as a value
that is refused until a person answers it.
"""

from __future__ import annotations

import datetime as dt
import json
from dataclasses import dataclass, field

__all__ = ["OPEN", "StationDraft", "draft_text"]

#: Stands where only a person can say; no key of a station takes it.
OPEN = "?"


@dataclass
class StationDraft:
    """Values of a station section, with remarks and open questions.

    Attributes
    ----------
    station : dict
        Keys of the section; `OPEN` where a person has to answer.
    channels : list of dict
        The same for each channel.
    remarks : dict of str to str
        By key (channels: ``number.key``): where a value comes from, or what to ask.
    notes : list of str
        What else was met.
    """

    station: dict[str, object] = field(default_factory=dict)
    channels: list[dict[str, object]] = field(default_factory=list)
    remarks: dict[str, str] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)

    @property
    def questions(self) -> list[str]:
        """Keys that a person has to answer, in the order they stand."""
        own = [key for key, value in self.station.items() if value == OPEN]
        more = [
            f"channels {number + 1} {key}"
            for number, channel in enumerate(self.channels)
            for key, value in channel.items()
            if value == OPEN
        ]
        return own + more


def draft_text(draft: StationDraft, *, section: str = "mast") -> str:
    """The draft as TOML for `study.toml`, its open questions marked.

    Parameters
    ----------
    draft : StationDraft
        What is known.
    section : str
        ``mast``, or ``references`` for one of several.

    Returns
    -------
    str
        TOML. Each `OPEN` value carries a comment that begins with ``ASK``.
    """
    title = f"[[{section}]]" if section == "references" else f"[{section}]"
    lines = [f"# {note}" for note in draft.notes] + [title]
    lines += [_line(key, value, draft.remarks.get(key)) for key, value in draft.station.items()]
    for number, channel in enumerate(draft.channels):
        lines += ["", f"[[{section}.channels]]"]
        lines += [
            _line(key, value, draft.remarks.get(f"{number}.{key}"))
            for key, value in channel.items()
        ]
    return "\n".join(lines) + "\n"


def _line(key: str, value: object, remark: str | None) -> str:
    text = f"{key} = {_toml(value)}"
    if value == OPEN:
        return f"{text}  # ASK: {remark or 'only a person can say'}"
    return f"{text}  # {remark}" if remark else text


def _toml(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, dt.datetime):
        return value.isoformat()
    if isinstance(value, int | float):
        return repr(value)
    if isinstance(value, list):
        return "[" + ", ".join(_toml(item) for item in value) + "]"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{k} = {_toml(v)}" for k, v in value.items()) + " }"
    # JSON escapes are TOML escapes; DEL is the one that JSON lets through.
    return json.dumps(str(value), ensure_ascii=False).replace("\x7f", "\\u007f")
