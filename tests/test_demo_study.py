"""The demo study, run whole by the command, against the truth its generator knows."""

from __future__ import annotations

import gzip
import json
import shutil
from pathlib import Path

import openpyxl
import pandas as pd
import pytest
from scipy.stats import norm

from windkit.faces.command import main
from windkit.study.results import Results

ROOT = Path(__file__).parent.parent
TRUTH = json.loads((ROOT / "data_demo" / "truth.json").read_text())


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("demo") / "study"
    assert main(["new", str(folder), "--demo"]) == 0
    assert main(["run", str(folder), "--quiet"]) == 0
    return folder


@pytest.fixture(scope="module")
def results(study: Path) -> dict:
    return json.loads((study / "handover" / "results.json").read_text())


def test_results_keep_the_schema(results: dict) -> None:
    Results.model_validate(results)
    for years in ("1", "10", "20"):
        levels = [results["exceedance"][years][f"P{p}_mwh_per_year"] for p in (50, 75, 90, 95, 99)]
        assert levels == sorted(levels, reverse=True)
    assert results["departures"] == {}


def test_long_term_mean_holds_the_truth(results: dict) -> None:
    # Truth of the generator, not of the code under test: data_demo/truth.json.
    truth = TRUTH["long_term"]["mean_speed_80_m_m_s"]
    low, high = results["long_term"]["interval_95_m_s"]
    assert low < truth < high
    # The correction must be worth having: nearer than the campaign alone.
    campaign = results["measured"]["mean_speed_m_s"]
    assert abs(results["long_term"]["mean_speed_m_s"] - truth) < abs(campaign - truth)


def test_energy_holds_the_truth_within_the_stated_uncertainty(results: dict) -> None:
    truth = TRUTH["energy"]["site_net_mwh_per_year_if_losses_are_as_stated"]
    p50 = results["energy"]["net_p50_mwh_per_year"]
    # The truth is that of the twenty years the reference covers, so only what is the same every
    # year counts; 80 % of a normal distribution lie within 1.28 standard uncertainties.
    static = results["uncertainty"]["static"]
    assert abs(truth / p50 - 1) < norm.ppf(0.9) * static
    assert abs(truth / p50 - 1) < 0.05


def test_hub_figures_lie_near_the_truth(results: dict) -> None:
    truth = TRUTH["long_term"]
    assert results["hub"]["mean_speed_m_s"] == pytest.approx(truth["mean_speed_hub_m_s"], rel=0.04)
    # The stated interval of the mean at the hub holds what the generator knows.
    low, high = results["hub"]["interval_80_m_s"]
    assert low < truth["mean_speed_hub_m_s"] < high
    assert results["hub"]["shear_exponent"] == pytest.approx(
        truth["shear_exponent_of_means"], abs=0.02
    )
    # One year of twenty is measured: its air may differ by about half a per cent.
    assert results["hub"]["air_density_kg_m3"] == pytest.approx(
        truth["hub_air_density_kg_m3"], rel=0.006
    )
    assert results["measured"]["shear_exponent"] == pytest.approx(
        truth["shear_exponent_of_means"], abs=0.015
    )


def test_handover_is_whole(study: Path) -> None:
    handover = study / "handover"
    assert sorted(p.name for p in handover.iterdir()) == [
        "report.html",
        "results.json",
        "tables.xlsx",
        "workbooks",
    ]
    assert len(list((handover / "workbooks").glob("*.ipynb"))) == 6
    page = (handover / "report.html").read_text()
    assert page.count("data:image/png") >= 20
    assert "<script" not in page
    assert "Traceback" not in page
    book = openpyxl.load_workbook(handover / "tables.xlsx")
    assert len(book.sheetnames) > 10
    assert not list(study.rglob("*.part*"))


def test_conditions_and_the_verdict_are_in_results_and_report(study: Path, results: dict) -> None:
    conditions = results["conditions"]
    # Nothing outside says what an invented site's extremes are; their order is that of physics.
    assert 15 < conditions["v1_m_s"] < conditions["v50_m_s"] < conditions["gust_50_m_s"] < 70
    assert conditions["v50_standard_error_m_s"] < 0.15 * conditions["v50_m_s"]
    # The generator draws an intensity of 0.135 - 0.25 (shear - 0.18) at 80 m, before scatter.
    by_speed = pd.read_parquet(
        study / "results" / "conditions" / "turbulence_in_speed_bins.parquet"
    )
    at_ten = by_speed.set_index("wind_speed_m_s")["mean"][10.0]
    assert at_ten == pytest.approx(0.145, abs=0.02)
    assert conditions["lowest_temperature_c"] < 0 < conditions["highest_temperature_c"]
    verdict = conditions["verdict"]
    # Ten with a figure, five that no study has data for; the words share them out.
    assert sum(verdict.values()) == 15
    page = (study / "handover" / "report.html").read_text()
    assert "Verdict: wind" in page
    assert "Verdict: turbulence" in page
    assert "certified design assessment" in page
    for word in ("inside", "outside", "not assessed"):
        assert f">{word}<" in page


def test_the_top_sensor_left_out_is_in_the_report(study: Path, results: dict) -> None:
    errors = pd.read_parquet(study / "results" / "yield" / "left_out.parquet")
    assert set(errors["by"]) == {"all", "hour", "season", "sector"}
    # The generator's cups have calibration errors of +0.7, -0.8 and -0.2 % at 60, 40 and 80 m, and
    # the one at 60 m drifts down from August: predicting 80 m from the two below is over by about
    # 0.00704 + 0.00245 + ln(80/60)/ln(60/40) x (0.00704 + 0.00833) = 2.0 %, less the drift's part.
    whole = errors.set_index("by").loc["all", "error"]
    assert whole == pytest.approx(0.020, abs=0.006)
    assert results["hub"]["extrapolation_standard_uncertainty"] > 0.013
    parts = pd.read_parquet(study / "results" / "uncertainty" / "parts.parquet")
    assert (parts["group"] == "vertical_extrapolation").sum() == 1


def test_every_row_is_kept_or_listed(study: Path) -> None:
    table = pd.read_parquet(study / "results" / "measure" / "rows.parquet")
    rows = table.set_index("rows")["count"]
    with gzip.open(study / "data" / "mast.csv.gz", "rt") as stream:
        lines = sum(1 for _ in stream) - 1  # less the header
    aside = rows[rows.index.str.startswith("set aside")].sum()
    assert rows["read from the files"] == lines == rows["kept"] + aside
    counts = pd.read_parquet(study / "results" / "measure" / "counts.parquet")
    parts = counts[["absent", "no_value", "masked", "kept"]].sum(axis=1)
    assert (parts == counts["expected"]).all()
    page = (study / "handover" / "report.html").read_text()
    assert "Rows of the files, reconciled" in page


def test_second_run_gives_the_same_bytes(study: Path, tmp_path: Path) -> None:
    before = {
        name: (study / "handover" / name).read_bytes()
        for name in ("results.json", "report.html", "tables.xlsx")
    }
    again = tmp_path / "again"
    shutil.copytree(study, again, ignore=shutil.ignore_patterns("results", "handover"))
    assert main(["run", str(again), "--quiet"]) == 0
    for name, content in before.items():
        assert (again / "handover" / name).read_bytes() == content, name
    # Panels carry random ids in a running kernel; what is handed over must not.
    for file in sorted((study / "handover" / "workbooks").glob("*.ipynb")):
        assert file.read_bytes() == (again / "handover" / "workbooks" / file.name).read_bytes()


def test_another_hub_height_moves_energy_the_right_way(study: Path, results: dict) -> None:
    # The second parameter set: a taller tower, from the yield step on.
    other = study.parent / "taller"
    shutil.copytree(study, other)
    assert (
        main(
            [
                "run", str(other), "--quiet", "--from", "yield",
                "--set", "4_energy_yield.hub_height_m=120",
            ]
        )
        == 0
    )  # fmt: skip
    taller = json.loads((other / "handover" / "results.json").read_text())
    assert taller["departures"] == {"yield": {"turbine.hub_height_m": 120}}
    exponent = results["hub"]["shear_exponent"]
    # Power law by hand; the exponent of the means moves a little with height.
    assert taller["hub"]["mean_speed_m_s"] / results["hub"]["mean_speed_m_s"] == pytest.approx(
        (120 / 100) ** exponent, rel=2e-3
    )
    assert taller["energy"]["net_p50_mwh_per_year"] > results["energy"]["net_p50_mwh_per_year"]
    # What lies before the yield step has not moved.
    assert taller["long_term"] == results["long_term"]
