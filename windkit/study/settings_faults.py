"""What is said about a `study.toml` that breaks a rule.

Here a fault that the validation or the TOML parser found becomes key, value met, rule and remedy,
with what people often mean by such a value. The rules themselves are in `settings` and `stations`.
"""

from __future__ import annotations

import difflib
import itertools
import json
import re
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

from windkit.study.errors import StudyError
from windkit.study.station_draft import OPEN

__all__ = ["explain_fault", "fault_key", "refuse_patterns", "toml_remedy"]

#: Keys that hold a fraction, which many write in per cent.
_FRACTIONS = ("loss", "standard_uncertainty", "samples_per_hour_share")
#: Units as the endings of keys spell them, longest first.
_KEY_UNITS = {
    "_kg_m3": "kg/m3",
    "_m_s": "m/s",
    "_deg": "degrees",
    "_min": "minutes",
    "_kw": "kW",
    "_h": "hours",
    "_m": "metres",
}
#: Signs of a pattern of file names.
_PATTERN_SIGNS = re.compile(r"[*?\[]")
_MOST_FILES = 20
_DECIMAL_COMMA = re.compile(r"=\s*([-+]?\d+),(\d+)\s*(?:#.*)?$")


def explain_fault(fault: Any, keys_beside: Callable[[Any], Sequence[str]]) -> str:
    """One validation fault as key, value met, rule, remedy.

    Parameters
    ----------
    fault : dict
        As pydantic gives it.
    keys_beside : callable
        Gives the keys that the table of an unknown key may have, from the place of the fault.
    """
    key = fault_key(fault)
    rule, kind = fault["msg"].removeprefix("Value error, "), fault["type"]
    rule = rule.replace("Input should", "it must", 1)
    if kind == "missing":
        return (
            f"{key}: not given; the key is required and never guessed; add a line for it, or take "
            "the mark # REQUIRED off the template's"
        )
    if kind == "extra_forbidden":
        near = difflib.get_close_matches(str(fault["loc"][-1]), keys_beside(fault["loc"]), n=1)
        remedy = f"write {near[0]} if that is meant" if near else "mend or remove it"
        return f"{key}: unknown key; only keys of the template are read; {remedy}"
    met = fault["input"]
    if not key or (kind == "value_error" and isinstance(met, dict)):
        return f"{key}: {rule}" if key else rule  # about a table as a whole; says what to do
    shown = json.dumps(met, default=str, ensure_ascii=False)
    shown = shown if len(shown) <= 80 else shown[:77] + "..."
    remedy = _remedy(key, met, kind)
    told = f"{key}: is {shown}; {rule[0].lower() + rule[1:]}"
    return f"{told}; {remedy}" if remedy else told


def fault_key(fault: Any) -> str:
    """Where a validation fault stands, in the way keys are written in messages."""
    return ".".join(
        f"[{part + 1}]" if isinstance(part, int) else str(part) for part in fault["loc"]
    ).replace(".[", "[")


def toml_remedy(text: str, told: str) -> str:
    """What to do about a line that is no TOML."""
    place = re.search(r"line (\d+)", told)
    line = text.split("\n")[int(place[1]) - 1] if place else ""
    comma = _DECIMAL_COMMA.search(line)
    if comma:
        return f"write {comma[1]}.{comma[2]}: a decimal point, not a comma"
    return "mend that line; a key may stand only once in its table"


def refuse_patterns(values: Mapping[str, Any], file: Path) -> None:
    """Refuse patterns among the names of files, and list the files that match."""
    references = values.get("references")
    tables = [("mast", values.get("mast"))]
    tables += [(f"references[{n + 1}]", table) for n, table in enumerate(_as_list(references))]
    for name, table in tables:
        for written in _as_list(table.get("files") if isinstance(table, Mapping) else None):
            if not isinstance(written, str) or written == OPEN or ".." in written:
                continue
            if not _PATTERN_SIGNS.search(written):
                continue
            try:
                if (file.parent / written).is_file():
                    continue
                found = itertools.islice(file.parent.glob(written), _MOST_FILES)
                names = [f.relative_to(file.parent).as_posix() for f in found if f.is_file()]
            except (ValueError, NotImplementedError, OSError):  # no pattern, or an absolute one
                continue
            listing = ", ".join(json.dumps(each, ensure_ascii=False) for each in sorted(names))
            raise StudyError.of(
                file=file.name,
                key=f"{name}.files",
                met=f"'{written}' is a pattern",
                rule="patterns are not read: a study names each file it stands on",
                remedy=f"list the files that match, in the order of time: files = [{listing}]"
                if names
                else "no file matches it; write the names of the files",
            )


def _remedy(key: str, met: Any, kind: str) -> str:
    """What to write instead, where the rule alone does not say it."""
    is_number = isinstance(met, int | float) and not isinstance(met, bool)
    if kind in {"float_type", "int_type"} and isinstance(met, str):
        text = met.strip().replace(",", ".")
        if re.fullmatch(r"[-+]?\d+(\.\d+)?", text):
            point = ", with a decimal point" if "," in met else ""
            return f"write {text} without quotation marks{point}"
        return "write a number without quotation marks and unit"
    if kind == "string_type" and is_number:
        return f'write it between quotation marks: "{met}"'
    if kind == "bool_type":
        return "write true or false, without quotation marks"
    name = key.rpartition(".")[2]
    if is_number and kind.startswith(("less_than", "greater_than")):
        if name in _FRACTIONS and 1 <= met <= 100:
            return f"it is a fraction: {met:g} % is written {met / 100:g}"
        for ending, unit in _KEY_UNITS.items():
            if name.endswith(ending):
                return f"the key's unit is {unit}, as its ending says"
    return ""


def _as_list(value: Any) -> list[Any]:
    return value if isinstance(value, list) else []
