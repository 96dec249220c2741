"""The demo study, run whole by the command, against the truth its generator knows."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import openpyxl
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
    assert len(list((handover / "workbooks").glob("*.ipynb"))) == 5
    page = (handover / "report.html").read_text()
    assert page.count("data:image/png") >= 15
    assert "<script" not in page
    assert "Traceback" not in page
    book = openpyxl.load_workbook(handover / "tables.xlsx")
    assert len(book.sheetnames) > 10
    assert not list(study.rglob("*.part*"))


def test_every_row_is_kept_or_listed(study: Path) -> None:
    book = openpyxl.load_workbook(study / "handover" / "tables.xlsx")
    page = (study / "handover" / "report.html").read_text()
    assert "Rows of the files, reconciled" in page
    assert book is not None


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
    exponent = results["measured"]["shear_exponent"]
    # Power law by hand.
    assert taller["hub"]["mean_speed_m_s"] / results["hub"]["mean_speed_m_s"] == pytest.approx(
        (120 / 100) ** exponent, rel=1e-4
    )
    assert taller["energy"]["net_p50_mwh_per_year"] > results["energy"]["net_p50_mwh_per_year"]
    # What lies before the yield step has not moved.
    assert taller["long_term"] == results["long_term"]
