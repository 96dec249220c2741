"""A station section in the making: what is known, and what has to be asked.

Here is the draft that `drafting` (from a data file) and `station_description` (from an open
station description) fill, and its text for `study.toml`. An open question is written as a value
that is refused until a person answers it.
"""

from __future__ import annotations

import datetime as dt
import json
from dataclasses import dataclass, field

__all__ = ["OPEN", "StationDraft", "draft_text", "joined_drafts"]

#: Stands where only a person can say; no key of a station takes it.
OPEN = "?"
#: What only the file tells, whatever its description says.
_LAYOUT = (
    "files",
    "encoding",
    "delimiter",
    "decimal",
    "skip_rows",
    "skip_rows_after_header",
    "time_column",
    "time_format",
    "missing",
)


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
    headers : list of str
        Headers of the file, drafted or not; none if no file was looked at.
    """

    station: dict[str, object] = field(default_factory=dict)
    channels: list[dict[str, object]] = field(default_factory=list)
    remarks: dict[str, str] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)
    headers: list[str] = field(default_factory=list)

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
    lines = [f"# {_printable(note)}" for note in draft.notes] + [title]
    lines += [_line(key, value, draft.remarks.get(key)) for key, value in draft.station.items()]
    for number, channel in enumerate(draft.channels):
        lines += ["", f"[[{section}.channels]]"]
        lines += [
            _line(key, value, draft.remarks.get(f"{number}.{key}"))
            for key, value in channel.items()
        ]
    return "\n".join(lines) + "\n"


def joined_drafts(file: StationDraft, description: StationDraft) -> StationDraft:
    """One draft from a data file and from the description of its station.

    Parameters
    ----------
    file : StationDraft
        Knows how the file is written: delimiter, header, stamps, headers.
    description : StationDraft
        Knows what was measured: quantities, heights, booms, calibrations, clock.

    Returns
    -------
    StationDraft
        The file's layout with the description's channels; columns that the description leaves
        out follow as the file's header suggests them. What either leaves open stays open, unless
        the other answers it.
    """
    joined = StationDraft(headers=list(file.headers))
    for key in [*file.station, *description.station]:
        own, told = file.station.get(key, OPEN), description.station.get(key, OPEN)
        layout = key in _LAYOUT or told == OPEN
        joined.station[key] = own if layout else told
        remark = (file if layout else description).remarks.get(key)
        if remark and (joined.station[key] == OPEN or layout):
            joined.remarks[key] = remark
        if key == "interval_min" and OPEN not in (own, told) and own != told:
            joined.remarks[key] = f"as described; the commonest step in the file is {own}"
    here = [c for c in description.channels if c["column"] in file.headers]
    described = {channel["column"] for channel in description.channels}
    more = [c for c in file.channels if c["column"] not in described]
    for draft, channels in ((description, here), (file, more)):
        for channel in channels:
            names = {str(each["name"]) for each in joined.channels}
            number, old = len(joined.channels), draft.channels.index(channel)
            name = str(channel["name"])
            while name in names:
                name += "_2"
            joined.channels.append({**channel, "name": name})
            for key in channel:
                if f"{old}.{key}" in draft.remarks:
                    joined.remarks[f"{number}.{key}"] = draft.remarks[f"{old}.{key}"]
    joined.notes = [note for note in description.notes if note not in file.notes]
    joined.notes += [
        f"column '{each['column']}' is described and does not stand in the file: not drafted"
        for each in description.channels
        if each not in here
    ]
    if more:
        joined.notes.append(
            "not described, drafted from the header alone: "
            + ", ".join(f"'{each['column']}'" for each in more)
        )
    names = {str(channel["name"]) for channel in joined.channels}
    for key in ("main_wind_speed", "main_wind_direction"):
        for draft in (description, file):
            if draft.station.get(key) in names:
                joined.station[key] = draft.station[key]
                break
        else:
            if key in joined.station:
                joined.station[key] = OPEN
    return joined


def _line(key: str, value: object, remark: str | None) -> str:
    text = f"{key} = {_toml(value)}"
    if value == OPEN:
        return f"{text}  # ASK: {_printable(remark or 'only a person can say')}"
    return f"{text}  # {_printable(remark)}" if remark else text


def _printable(text: str) -> str:
    """A text that fits into a comment: headers of files may hold line ends and worse."""
    return "".join(sign if sign.isprintable() else " " for sign in text)


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
