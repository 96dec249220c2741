"""The review panel under a person's hand: a real lab, a real page, the demo study.

Run with ``SITESTUDY_BROWSER=1 pytest tests/browser``. Needs playwright and a Chromium, neither of
which the project asks for; SITESTUDY_SCREENSHOTS names a folder to keep pictures of the page in.
"""

from __future__ import annotations

import os
import secrets
import shutil
import socket
import subprocess
import sys
import time
import urllib.request
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import nbformat
import pandas as pd
import pytest
from nbformat import v4

from windkit.faces.look import number_text
from windkit.study.folder import open_study
from windkit.study.ledger import read_ledger
from windkit.study.measured import load_record
from windkit.study.review import spans_to_review
from windkit.study.shipped import make_study

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("chrome")
pytestmark = [
    pytest.mark.browser,
    pytest.mark.skipif(
        os.environ.get("SITESTUDY_BROWSER") != "1", reason="set SITESTUDY_BROWSER=1 to run it"
    ),
    pytest.mark.skipif(CHROMIUM is None, reason="there is no Chromium"),
]
FLAGS = [
    "--no-sandbox",
    "--disable-gpu",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
]
LONGEST_MS = 60_000
CELL = """\
import datetime as dt

from windkit.faces.panels import ReviewPanel
from windkit.study.folder import open_study
from windkit.study.measured import load_record

study = open_study(".")
panel = ReviewPanel(load_record(study), study.ledger, today=lambda: dt.date(2026, 11, 30))
panel"""


@pytest.fixture
def demo(tmp_path: Path) -> Path:
    """A demo study with a notebook that shows the panel."""
    folder = tmp_path / "demo"
    make_study(folder, demo=True)
    kernel = {"name": "python3", "display_name": "Python 3", "language": "python"}
    notebook = v4.new_notebook(cells=[v4.new_code_cell(CELL)], metadata={"kernelspec": kernel})
    nbformat.write(notebook, folder / "review.ipynb")
    return folder


@pytest.fixture
def page(demo: Path, tmp_path: Path) -> Iterator[Any]:
    """The notebook open in a lab of its own, its kernel idle."""
    api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    home, token = tmp_path / "home", secrets.token_hex(16)
    quiet = home / "settings/@jupyterlab/apputils-extension/notification.jupyterlab-settings"
    quiet.parent.mkdir(parents=True)
    quiet.write_text('{"fetchNews": "false", "checkForUpdates": false}')
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    own = {f"JUPYTER_{kind}_DIR": str(home / kind) for kind in ("CONFIG", "DATA", "RUNTIME")}
    own |= {
        "JUPYTER_TOKEN": token,
        "JUPYTERLAB_SETTINGS_DIR": str(home / "settings"),
        "JUPYTERLAB_WORKSPACES_DIR": str(home / "workspaces"),
    }
    arguments = ["--no-browser", "--ip=127.0.0.1", f"--port={port}", "--ServerApp.port_retries=0"]
    arguments += [f"--ServerApp.root_dir={demo}"]
    arguments += ["--allow-root"] * (hasattr(os, "geteuid") and os.geteuid() == 0)
    with (home / "log").open("w") as log:
        lab = subprocess.Popen(
            [sys.executable, "-m", "jupyterlab", *arguments], env=os.environ | own, stderr=log
        )
    try:
        _wait_for(f"http://127.0.0.1:{port}/api/status?token={token}", lab, home / "log")
        with api.sync_playwright() as player:
            browser = player.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
            page = browser.new_page(viewport={"width": 1280, "height": 1100})
            page.goto(f"http://127.0.0.1:{port}/lab/tree/review.ipynb?token={token}&reset")
            # The notebook's own sign of idleness comes too early: Run would be lost.
            page.get_by_text("| Idle").first.wait_for(timeout=LONGEST_MS)
            yield page
            browser.close()
    finally:
        lab.terminate()
        lab.wait(15)


def _wait_for(address: str, lab: subprocess.Popen[bytes], log: Path) -> None:
    end = time.monotonic() + 60
    while True:
        try:
            urllib.request.urlopen(address, timeout=2)
            return
        except OSError:
            if lab.poll() is not None or time.monotonic() > end:
                pytest.fail(f"the lab did not come up: {log.read_text()[-2000:]}")
            time.sleep(0.1)


def _keep(page: Any, name: str) -> None:
    if folder := os.environ.get("SITESTUDY_SCREENSHOTS"):
        page.wait_for_timeout(500)
        page.screenshot(path=Path(folder) / f"{name}.png")


def test_a_person_decides_and_the_ledger_has_it(page: Any, demo: Path) -> None:
    from playwright.sync_api import expect

    before = read_ledger(demo / "ledger.csv")
    spans = spans_to_review(load_record(open_study(demo)))
    icing = int((spans["rule"] == "icing").sum())
    assert icing > 2
    page.get_by_role("menuitem", name="Run", exact=True).click()
    page.get_by_role("menuitem", name="Run All Cells", exact=True).click()
    picture = page.locator(".jupyter-widgets img.widget-image").first
    picture.wait_for(timeout=LONGEST_MS)
    panel = page.locator(".jp-OutputArea .widget-vbox").first
    assert picture.evaluate("image => image.naturalWidth") > 600
    _keep(page, "1_first")

    def says(words: str) -> None:
        expect(panel.get_by_text(words).first).to_be_visible(timeout=20_000)

    accept = panel.get_by_role("button", name="Accept: leave out")
    accept.click()
    says("Write your name first")
    _keep(page, "2_no_name")
    panel.get_by_label("Name").fill("E. Marsh")
    accept.click()
    says("Write a reason first")
    assert len(read_ledger(demo / "ledger.csv")) == len(before)

    panel.get_by_label("Check").select_option(label=f"icing ({icing})")
    says(f"icing, 1 of {icing}")
    shown = picture.get_attribute("src")
    panel.get_by_label("Reason").fill("rime on both cups, camera")
    accept.click()
    says("written to ledger.csv")
    says(f"icing, 2 of {icing}")
    expect(picture).not_to_have_attribute("src", shown)
    _keep(page, "3_accepted")
    row = read_ledger(demo / "ledger.csv").iloc[len(before)]
    assert (row["rule"], row["decision"], row["who"]) == ("icing", "accepted", "E. Marsh")
    assert (row["reason"], row["when"]) == ("rime on both cups, camera", "2026-11-30")

    panel.get_by_label("Reason").fill("one storm, seen on all sensors")
    panel.get_by_role("button", name=f"Accept all {icing - 1} left of icing").click()
    says(f"{icing - 1} spans of icing are to be left out")
    _keep(page, "4_bulk")
    rows = read_ledger(demo / "ledger.csv").iloc[len(before) + 1 :]
    assert len(rows) == icing - 1
    assert rows["reason"].str.startswith(f"bulk, {icing - 1} spans").all()

    panel.get_by_role("button", name="Undo last").click()
    says(f"{icing - 1} decisions were taken out")
    panel.get_by_role("button", name="Undo last").click()
    says("The last decision was taken out")
    pd.testing.assert_frame_equal(read_ledger(demo / "ledger.csv"), before)
    _keep(page, "5_undone")

    panel.get_by_label("Check").select_option(index=0)
    panel.get_by_role("button", name="Next ›").click()
    says(f"{spans['rule'].iloc[1]}, 2 of {number_text(len(spans))}")
    errors = ".jp-RenderedText[data-mime-type*=error], .jp-RenderedText[data-mime-type*=stderr]"
    assert page.locator(errors).count() == 0
    page.set_viewport_size({"width": 700, "height": 1100})
    _keep(page, "6_narrow")
