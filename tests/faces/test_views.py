"""Views: the study's decisions and sentences as a workbook shows them."""

from __future__ import annotations

from types import SimpleNamespace

import pandas as pd
import pytest

from windkit.faces import views
from windkit.faces.handover import _cover, _departure_sentences, _statements
from windkit.study.folder import open_study
from windkit.study.shipped import make_study


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return make_study(tmp_path_factory.mktemp("views") / "demo", demo=True)


def test_sentences_have_the_style_of_the_tables():
    said = views.Said("60,651 rows, 98.4% kept")
    assert repr(said) == said._repr_markdown_() == "60\u202f651 rows, 98.4\u00a0% kept"


def test_settings_say_where_a_value_comes_from_and_are_never_cut(folder):
    study = open_study(folder, {"turbine.hub_height_m": 120.0})
    rows = {name: rest for name, *rest in views.settings(study, ["turbine", "measured"]).cells}
    assert rows["turbine.hub_height_m"] == ["120", "parameters"]
    assert rows["turbine.rotor_diameter_m"][1] == "study.toml"
    assert rows["turbine.curve_source"][0] == study.settings.turbine.curve_source
    assert rows["measured.fill_gaps"][0] in ("yes", "no")


def test_a_listing_is_whole_and_says_names_as_words(folder):
    study = open_study(folder)
    table = views.listing(study, "uncertainties")
    shown = " ".join(cell for row in table.cells for cell in row)
    assert "…" not in shown
    assert "horizontal extrapolation" in shown
    assert "_" not in shown


def test_every_reference_is_described(folder):
    study = open_study(folder)
    table = views.references(study)
    described = {line[0]: line[1:] for line in table.cells}
    assert list(described) == [each.name for each in study.settings.references]
    for each in study.settings.references:
        kind, height, interval, stamp, offset, north, elevation, files = described[each.name]
        assert kind == each.kind
        assert float(height) == each.channel(each.main_wind_speed).height_m
        assert float(interval) == each.interval_min
        assert stamp == f"{each.stamp} of interval"
        assert float(offset) == each.utc_offset_h
        assert north.startswith(each.direction_reference or "–")
        assert elevation == ("–" if each.elevation_m is None else f"{each.elevation_m:g}")
        assert files == ", ".join(each.files)


def test_the_levels_on_the_cover_say_what_p90_keeps_of_p50():
    levels = pd.DataFrame(
        {
            "years": [1, 10],
            "standard_uncertainty": 0.1,
            "P50": [20000.0] * 2,
            "P90": [16000.0, 17e3],
        }
    )
    table = views.exceedance_view(SimpleNamespace(tables={"levels": levels}))
    assert [line[-1] for line in table.cells] == ["80.0\u00a0%", "85.0\u00a0%"]
    assert table.cells[0][:3] == ["1 year", "20\u202f000", "16\u202f000"]
    assert "P90/P50" in table.to_html()


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (True, "yes"),
        (None, "–"),
        ([], "none"),
        (["a", 1.5], "a, 1.5"),
        (120.0, "120"),
        (1234567.0, "1234567"),
    ],
)
def test_values_of_the_study_file(value, text):
    assert views.setting_text(value) == text


def test_the_cover_shows_what_was_run_instead_of_the_study_file(folder):
    study = open_study(folder)
    artifacts = {"measure": SimpleNamespace(warnings=["8,000 values are low by -3%."])}
    plain = _cover(study, artifacts, {})
    assert plain.facts["Turbines"].endswith("hub at 100 m")
    assert plain.facts["Mast"].startswith("Quernstow mast, 46.0000° N, 6.5000° W, 412 m")
    assert plain.mind == ["8\u202f000 values are low by −3\u00a0%."]
    departures = {"yield": {"turbine.hub_height_m": 120}}
    departed = _cover(study, artifacts, departures)
    assert departed.facts["Turbines"].endswith("hub at 120 m")
    assert departed.mind[0] == _departure_sentences(departures)[0]
    assert departed.mind[0] == (
        "Step yield was run with turbine.hub_height_m = 120 instead of the value in study.toml."
    )


def test_the_cover_and_the_statements_say_what_the_study_states_and_what_it_does_not(folder):
    study = open_study(folder)
    identity = study.settings.study
    facts = _cover(study, {}, {}).facts
    assert facts["Verifier"] == identity.verifier != ""
    assert facts["Data until"] == "2023-12-31"
    assert facts["Approver"] == "not stated"
    stated = _statements(study)
    assert stated.independence == identity.independence != ""
    assert stated.standards is None
    assert stated.deviations is not None
    assert stated.deviations[0][3] == ""
    none = open_study(folder, {"study.standards_followed": [], "study.deviations": []})
    assert _statements(none).standards == _statements(none).deviations == []
