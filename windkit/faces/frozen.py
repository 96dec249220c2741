"""Panels as they stood at the end of a run, without the script that made them move.

A control becomes its name and the value it had, an output area what was shown in it. A panel
whose state was not kept, or a control nobody knows how to show, is refused with words: an empty
place in a report is worse than no report.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from html import escape
from typing import Any

__all__ = ["PANEL_STATE", "PANEL_VIEW", "frozen_outputs", "hidden_errors", "panel_state"]

#: Where a notebook keeps the state of its panels, and how an output points into it.
PANEL_STATE = "application/vnd.jupyter.widget-state+json"
PANEL_VIEW = "application/vnd.jupyter.widget-view+json"

#: Controls that say nothing once they stand still.
_SILENT = {"ButtonModel", "PlayModel", "FileUploadModel", "ControllerModel", "ValidModel"}
_PROGRESS = {"FloatProgressModel", "IntProgressModel"}
_MARKED_UP = {"HTMLModel", "HTMLMathModel"}

Output = dict[str, Any]


def panel_state(metadata: Mapping[str, Any]) -> Mapping[str, Any]:
    """State of all panels of a notebook by model, from its metadata."""
    state = metadata.get("widgets", {}).get(PANEL_STATE, {}).get("state", {})
    return dict(state)


def hidden_errors(state: Mapping[str, Any]) -> list[str]:
    """Errors that were raised inside output areas, where a run does not stop for them."""
    return [
        f"{output.get('ename', 'error')}: {output.get('evalue', '')}"
        for model in state.values()
        for output in model.get("state", {}).get("outputs", ())
        if output.get("output_type") == "error"
    ]


def frozen_outputs(model_id: str, state: Mapping[str, Any]) -> list[Output]:
    """What a panel showed at the end of the run, as ordinary outputs.

    Parameters
    ----------
    model_id : str
        The model an output points to.
    state : mapping
        See `panel_state`.

    Returns
    -------
    list of dict
        Outputs in the order they stood in.

    Raises
    ------
    ValueError
        If the state of a model is not there, or its kind cannot be shown standing still.
    """
    return list(_frozen(model_id.removeprefix("IPY_MODEL_"), state))


def _frozen(model_id: str, state: Mapping[str, Any]) -> Iterator[Output]:
    if model_id not in state:
        raise ValueError(
            "shows a panel whose state was not kept; run the workbook from the command, not from "
            "an open page"
        )
    kind, values = state[model_id]["model_name"], state[model_id]["state"]
    children = [child.removeprefix("IPY_MODEL_") for child in values.get("children", ())]
    if kind == "OutputModel":
        for output in values.get("outputs", ()):
            view = output.get("data", {}).get(PANEL_VIEW)
            if view is None:
                yield dict(output)
            else:
                yield from _frozen(view["model_id"], state)
    elif any(state.get(child, {}).get("model_name") in _PROGRESS for child in children):
        return  # a progress bar with its texts: how long it took is of no use to a reader
    elif "children" in values:
        titles = values.get("titles") or values.get("_titles") or ()
        named = titles.values() if isinstance(titles, Mapping) else titles
        names = [*named, *[""] * len(children)]
        for name, child in zip(names, children, strict=False):
            if name:
                yield _shown(f'<p class="panel-title">{escape(str(name))}</p>')
            yield from _frozen(child, state)
    elif kind == "ImageModel":
        yield _picture(state[model_id])
    elif kind in _MARKED_UP:
        yield _shown(f"<div>{values.get('value') or ''}</div>")
    elif kind == "LabelModel":
        yield _shown(f"<p>{escape(str(values.get('value') or ''))}</p>")
    elif kind not in _SILENT | _PROGRESS:
        yield _shown(_control(kind, values))


def _control(kind: str, values: Mapping[str, Any]) -> str:
    if "_options_labels" in values:
        options, chosen = values["_options_labels"], values.get("index")
        if isinstance(chosen, int):
            chosen = [chosen]
        joined = " to " if "Range" in kind else ", "
        text = joined.join(str(options[index]) for index in chosen or ()) or "–"
    elif "value" in values:
        text = _value_text(values["value"])
    else:
        raise ValueError(
            f"shows a panel of the kind {kind.removesuffix('Model')}, which cannot be shown "
            f"standing still; show its result as a figure or a table as well"
        )
    name = escape(str(values.get("description") or ""))
    label = f'<span class="panel-name">{name}</span> ' if name else ""
    return f'<p class="panel-control">{label}<b>{escape(text)}</b></p>'


def _value_text(value: Any) -> str:
    if value is None or value == "":
        return "–"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.6g}"
    if isinstance(value, Mapping) and {"year", "month", "date"} <= set(value):
        # Months count from nought in the state of a date picker.
        return f"{value['year']:04d}-{value['month'] + 1:02d}-{value['date']:02d}"
    if isinstance(value, list | tuple):
        joined = " to " if len(value) == 2 else ", "
        return joined.join(_value_text(part) for part in value)
    return str(value)


def _picture(model: Mapping[str, Any]) -> Output:
    for buffer in model.get("buffers", ()):
        if list(buffer.get("path", ())) == ["value"] and buffer.get("encoding") == "base64":
            kind = model["state"].get("format") or "png"
            return {
                "output_type": "display_data",
                "data": {f"image/{kind}": buffer["data"]},
                "metadata": {},
            }
    raise ValueError("shows a picture whose bytes were not kept; show it as a figure instead")


def _shown(html: str) -> Output:
    return {"output_type": "display_data", "data": {"text/html": html}, "metadata": {}}
