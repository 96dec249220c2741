"""Panels as they stood at the end of a run; made with the real library, without a browser."""

from __future__ import annotations

import re

import ipywidgets as widgets
import pytest
from ipywidgets.embed import dependency_state

from windkit.faces.frozen import frozen_outputs, hidden_errors


def _texts(widget):
    """What is left of a panel, as plain words."""
    state = dependency_state([widget], drop_defaults=False)
    outputs = frozen_outputs(widget.model_id, state)
    html = [output["data"].get("text/html", "") for output in outputs]
    return [" ".join(re.sub(r"<[^>]+>", " ", text).split()) for text in html]


@pytest.mark.parametrize(
    ("panel", "texts"),
    [
        (lambda: widgets.FloatSlider(7.5, description="Hub"), ["Hub 7.5"]),
        (lambda: widgets.Checkbox(True, description="Calms"), ["Calms yes"]),
        (lambda: widgets.Dropdown(options=["a", "b"], value="b"), ["b"]),
        (lambda: widgets.SelectMultiple(options=["a", "b", "c"], value=["a", "c"]), ["a, c"]),
        (lambda: widgets.Dropdown(options=["a"], value=None, description="Pick"), ["Pick –"]),
        (
            lambda: widgets.IntRangeSlider(value=(40, 80), description="Heights"),
            ["Heights 40 to 80"],
        ),
        (lambda: widgets.Text("", description="Why"), ["Why –"]),
        (lambda: widgets.Text("<script>", description="Why"), ["Why &lt;script&gt;"]),
        (lambda: widgets.Label("a < b"), ["a &lt; b"]),
        (lambda: widgets.HTML("<b>bold</b>"), ["bold"]),
        (lambda: widgets.Button(description="Go"), []),
        (lambda: widgets.VBox([widgets.IntText(3), widgets.Label("x")]), ["3", "x"]),
        (
            lambda: widgets.Tab([widgets.Label("x"), widgets.Label("y")], titles=["One", "Two"]),
            ["One", "x", "Two", "y"],
        ),
        (
            lambda: widgets.HBox([widgets.HTML("60%"), widgets.IntProgress(6), widgets.HTML("1s")]),
            [],
        ),
    ],
)
def test_a_control_becomes_its_name_and_value(panel, texts):
    assert _texts(panel()) == texts


def _output_area(*outputs):
    return {"a": {"model_name": "OutputModel", "state": {"outputs": list(outputs)}}}


def test_an_output_area_becomes_what_was_shown_in_it():
    shown = {"output_type": "stream", "name": "stdout", "text": "7.1 m/s"}
    assert frozen_outputs("a", _output_area(shown)) == [shown]


def test_an_error_inside_a_panel_is_found():
    state = _output_area({"output_type": "error", "ename": "KeyError", "evalue": "'x'"})
    assert hidden_errors(state) == ["KeyError: 'x'"]


def test_a_panel_without_its_state_is_refused():
    with pytest.raises(ValueError, match="whose state was not kept; run the workbook from the"):
        frozen_outputs("a", {})


def test_a_panel_nobody_knows_is_refused():
    state = {"a": {"model_name": "GlobeModel", "state": {}}}
    with pytest.raises(ValueError, match="of the kind Globe, which cannot be shown"):
        frozen_outputs("a", state)
