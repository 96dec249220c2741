"""results.json: every figure of a study, rounded, whole, and the same on a second run."""

from __future__ import annotations

import json

import pytest

from tests.small_study import edit, run_steps
from windkit.study.errors import StudyError
from windkit.study.folder import open_study
from windkit.study.results import Results, collect_results, results_text
from windkit.study.steps import STEPS


def test_the_figures_of_all_steps_stand_in_their_places(finished_once):
    results, artifacts = collect_results(open_study(finished_once))
    assert list(artifacts) == [step.name for step in STEPS]
    for artifact in artifacts.values():
        for row in artifact.rows:
            place = results
            for part in row.key.split("."):
                place = place[part]
            is_text = isinstance(row.value, str)
            assert place == (row.value if is_text else pytest.approx(row.value, rel=1e-5))
    assert results["study"]["site"] == "Cairn Hollow"
    assert results["study"]["issue_date"] == "2026-11-30"
    assert set(results["made_from"]) == set(artifacts)


def test_the_keys_a_reader_relies_on_are_there(finished_once):
    results, _ = collect_results(open_study(finished_once))
    for years in ("1", "10", "20"):
        assert set(results["exceedance"][years]) == {
            f"{level}_mwh_per_year" for level in ("P50", "P75", "P90", "P95", "P99")
        }
    assert results["results_schema_version"] == 1
    assert results["measured"]["mean_speed_m_s"] > 0
    low, high = results["long_term"]["interval_80_m_s"]
    assert low < results["long_term"]["mean_speed_m_s"] < high
    assert results["energy"]["net_p50_mwh_per_year"] == pytest.approx(
        results["exceedance"]["1"]["P50_mwh_per_year"]
    )
    assert results["energy"]["net_p50_mwh_per_year"] < results["energy"]["gross_mwh_per_year"]
    assert Results.model_validate(results).results_schema_version == 1


def test_figures_have_six_digits(finished_once):
    results, artifacts = collect_results(open_study(finished_once))
    value = artifacts["yield"].number("energy.gross_mwh_per_year")
    assert results["energy"]["gross_mwh_per_year"] == float(f"{value:.6g}")
    assert results["energy"]["gross_mwh_per_year"] != value


def test_the_text_is_the_same_after_a_second_run(finished):
    first = results_text(collect_results(open_study(finished))[0])
    run_steps(finished)
    assert results_text(collect_results(open_study(finished))[0]) == first
    assert json.loads(first)["energy"]["capacity_factor"] > 0
    assert str(finished) not in first


def test_a_departure_from_the_file_is_shown(finished):
    assert collect_results(open_study(finished))[0]["departures"] == {}
    before = collect_results(open_study(finished))[0]["energy"]["net_p50_mwh_per_year"]
    run_steps(
        finished,
        "yield",
        "uncertainty",
        "conditions",
        overrides={"yield": {"turbine.hub_height_m": 110.0}},
    )
    results, _ = collect_results(open_study(finished))
    assert results["departures"] == {"yield": {"turbine.hub_height_m": 110.0}}
    assert results["energy"]["net_p50_mwh_per_year"] > before


def test_stale_figures_are_not_collected(finished):
    edit(finished / "study.toml", "loss = 0.08", "loss = 0.07")
    with pytest.raises(StudyError, match=r"results/yield: since it was made.*\[losses\]"):
        collect_results(open_study(finished))
    run_steps(finished, "yield")
    with pytest.raises(StudyError, match=r"results/uncertainty: since it was made"):
        collect_results(open_study(finished))


def test_a_missing_step_is_named(small):
    run_steps(small, "screen", "measure")
    with pytest.raises(StudyError, match=r"results/long_term: step 'long_term' has left no"):
        collect_results(open_study(small))
