"""The review panel without a page: values are set and buttons clicked by code.

What the ledger must hold is written out by hand; how a panel freezes is judged on a notebook that
a kernel ran.
"""

from __future__ import annotations

import datetime as dt
import re
import threading

import nbformat
import numpy as np
import pandas as pd
import pytest
from nbclient import NotebookClient
from nbformat import v4

from windkit.faces.chapter import render_chapter
from windkit.faces.figures_review import span_picture
from windkit.faces.panels import ReviewPanel
from windkit.study.folder import open_study
from windkit.study.ledger import LEDGER_COLUMNS, read_ledger
from windkit.study.measured import examine_record, load_record
from windkit.study.record import Record

HEADER = ",".join(LEDGER_COLUMNS)


def plain(widget) -> str:
    """What an HTML control says, without style and markup."""
    text = re.sub(r"<style>.*?</style>", "", widget.value, flags=re.S)
    return " ".join(re.sub(r"<[^>]+>", " ", text).split())


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """A small study whose mast has an absurd speed, a stuck vane and marks worth a look."""
    from tests.small_study import make_small_study

    folder = make_small_study(tmp_path_factory.mktemp("panel") / "study")
    file = folder / "data" / "mast.csv"
    table = pd.read_csv(file)
    table["Speed60"] = table["Speed60"].where(table.index != 400, 88.0)
    table["Speed60"] = table["Speed60"].where(~table.index.isin([900, 1200]), 31.0)
    table["Direction58"] = table["Direction58"].where(~table.index.isin(range(600, 700)), 123.0)
    table.to_csv(file, index=False)
    return folder


@pytest.fixture(scope="module")
def record(folder) -> Record:
    return load_record(open_study(folder))


@pytest.fixture
def panel(record, tmp_path) -> ReviewPanel:
    return ReviewPanel(
        record, tmp_path / "ledger.csv", who="E. Marsh", today=lambda: dt.date(2026, 11, 30)
    )


def rules(panel: ReviewPanel) -> list[str]:
    return [value for _, value in panel.check.options if value]


def choose(panel: ReviewPanel, rule: str) -> int:
    """Walk through one check only; the number of its spans."""
    panel.check.value = rule
    return int((panel._spans["rule"] == rule).sum())


def several(panel: ReviewPanel) -> str:
    """A check with more spans than one."""
    return next(rule for rule in rules(panel) if (panel._spans["rule"] == rule).sum() > 2)


def test_the_first_state_shows_a_span_and_what_is_left(panel):
    count = len(panel._spans)
    assert {"range", "stuck"} <= set(rules(panel))
    waiting = int((panel._spans["state"] == "waiting").sum())
    assert 0 < waiting < count
    assert plain(panel.counter).startswith(f"{waiting} of {count} spans left to decide")
    assert "masked by their check" in plain(panel.counter)
    assert f"1 of {count}" in plain(panel.facts)
    assert str(panel.span["reason"]) in plain(panel.facts)
    assert bytes(panel.picture.value).startswith(b"\x89PNG")
    assert panel.undo.disabled
    assert panel.decided.empty
    assert repr(panel) == f"ReviewPanel: {waiting} of {count} spans left to decide"


def test_a_decision_is_a_row_of_the_file_at_once(panel, tmp_path):
    choose(panel, "range")
    span = panel.span
    assert span["state"] == "masked"
    panel.reason.value = " a spike, logger   restarted "
    panel.accept.click()
    lines = (tmp_path / "ledger.csv").read_text().splitlines()
    start, stop = (f"{span[name]:%Y-%m-%dT%H:%M:%SZ}" for name in ("from", "to"))
    assert lines == [
        HEADER,
        f'speed_60,{start},{stop},1,range,"a spike, logger restarted",{span["threshold"]:.6g},'
        "accepted,E. Marsh,2026-11-30",
    ]
    assert "to be left out: written to ledger.csv" in plain(panel.message)
    assert panel.reason.value == ""
    pd.testing.assert_frame_equal(panel.decided, read_ledger(tmp_path / "ledger.csv"))


def test_a_rejected_span_keeps_its_values_when_the_record_is_built_again(panel, folder, tmp_path):
    choose(panel, "stuck")
    assert panel.span["believed"] == 0
    panel.reason.value = "a steady wind, seen on the neighbour too"
    panel.reject.click()
    assert panel.decided["decision"].tolist() == ["rejected"]
    study = open_study(folder)
    (folder / "ledger.csv").write_bytes((tmp_path / "ledger.csv").read_bytes())
    try:
        again = load_record(study)
    finally:
        (folder / "ledger.csv").write_text(HEADER + "\n")
    row = panel.decided.iloc[0]
    inside = slice(row["from"], row["to"] - again.interval)
    assert again.masked.loc[inside, row["channel"]].notna().all()


def test_a_decision_moves_on_to_what_is_open(panel):
    count = choose(panel, several(panel))
    total = len(panel._spans)
    waiting = int((panel._spans["state"] == "waiting").sum())
    assert panel.span["state"] == "waiting"
    first = panel._at
    panel.reason.value = "seen"
    panel.accept.click()
    assert panel._at == first + 1
    assert plain(panel.counter).startswith(f"{waiting - 1} of {total} spans left")
    panel.back.click()
    assert panel._at == first
    assert "decided: left out" in plain(panel.facts)
    panel.back.click()  # round to the last of this check
    assert panel._at == first + count - 1
    panel.onward.click()
    assert panel._at == first


def test_the_last_decision_on_a_span_counts(panel):
    choose(panel, "range")
    at = panel._at
    for button in (panel.accept, panel.reject):
        panel._at = at
        panel.reason.value = "looked at it twice"
        button.click()
    assert panel.decided["decision"].tolist() == ["accepted", "rejected"]
    assert panel._spans["decision"].iloc[at] == "rejected"


def test_a_decision_on_all_of_a_check_says_bulk(panel, tmp_path):
    rule = several(panel)
    count = choose(panel, rule)
    panel.reason.value = "looked at the first"
    panel.accept.click()
    assert panel.accept_check.description == f"Accept all {count - 1} left of {rule}"
    panel.reason.value = "all alike"
    panel.accept_check.click()
    ledger = read_ledger(tmp_path / "ledger.csv")
    assert (ledger["rule"] == rule).all()
    assert ledger["reason"].tolist() == ["looked at the first"] + [
        f"bulk, {count - 1} spans of {rule} at once: all alike"
    ] * (count - 1)
    assert panel.accept_check.disabled
    panel.undo.click()  # the whole of it
    assert len(panel.decided) == len(read_ledger(tmp_path / "ledger.csv")) == 1
    assert f"The last {count - 1} decisions were taken out" in plain(panel.message)


def test_undo_leads_back_to_the_span_and_leaves_the_rest(panel, record, tmp_path):
    panel.reason.value = "first"
    panel.accept.click()
    before = (tmp_path / "ledger.csv").read_bytes()
    at = panel._at
    panel.reason.value = "second"
    panel.reject.click()
    choose(panel, rules(panel)[-1])
    panel.undo.click()
    assert (panel._at, panel.check.value) == (at, "")
    assert (tmp_path / "ledger.csv").read_bytes() == before
    panel.undo.click()
    assert panel.undo.disabled
    assert (tmp_path / "ledger.csv").read_text() == HEADER + "\n"


@pytest.mark.parametrize(
    ("who", "reason", "words"),
    [
        ("", "why", "Write your name first"),
        ("  ", "why", "Write your name first"),
        ("E. Marsh", " ", "Write a reason first"),
        ("automatic", "why", "write the name of a person"),
    ],
)
@pytest.mark.parametrize("button", ["accept", "reject", "accept_check"])
def test_what_is_missing_is_said_and_nothing_written(panel, tmp_path, who, reason, words, button):
    choose(panel, several(panel))
    panel.who.value, panel.reason.value = who, reason
    getattr(panel, button).click()
    assert words in plain(panel.message)
    assert not (tmp_path / "ledger.csv").exists()
    assert panel.reason.value == reason


def test_a_file_that_cannot_be_written_is_said_in_the_panel(record, tmp_path):
    panel = ReviewPanel(record, tmp_path / "gone" / "ledger.csv", who="E. Marsh")
    panel.reason.value = "why"
    panel.accept.click()
    assert "Nothing was written: " in plain(panel.message)
    assert panel.decided.empty
    assert panel.reason.value == "why"


def test_another_hand_in_the_file_is_kept_and_undo_refuses(panel, tmp_path):
    panel.reason.value = "first"
    panel.accept.click()
    file = tmp_path / "ledger.csv"
    other = "speed_40,2022-03-01T00:00:00Z,2022-03-02T00:00:00Z,24,manual,<b>,,accepted,O. Quill,\n"
    file.write_text(file.read_text() + other)
    panel.undo.click()
    assert "Nothing was undone: ledger.csv: it does not end with" in plain(panel.message)
    panel.reason.value = "second"
    panel.accept.click()
    assert read_ledger(file)["who"].tolist() == ["E. Marsh", "O. Quill", "E. Marsh"]


def test_a_panel_opened_later_knows_what_was_decided(panel, record, tmp_path):
    panel.reason.value = "first"
    panel.accept.click()
    later = ReviewPanel(record, tmp_path / "ledger.csv")
    assert plain(later.counter) == plain(panel.counter)
    assert later.span.name == panel.span.name
    assert later.decided.empty  # nothing by this one
    assert later.undo.disabled


def test_without_spans_it_says_so(record, tmp_path):
    from dataclasses import replace

    panel = ReviewPanel(replace(record, spans=record.spans.iloc[:0]), tmp_path / "ledger.csv")
    assert plain(panel.counter) == "The checks found nothing to look at."
    assert panel.widget.children == (panel.counter,)
    assert repr(panel) == "ReviewPanel: 0 of 0 spans left to decide"


def test_events_on_two_threads_take_turns(panel, monkeypatch):
    # A lab sends the choice of a check and the click after it to two threads of the kernel.
    inside, most = [], []

    def slow(record, span):
        inside.append(1)
        most.append(len(inside))
        threading.Event().wait(0.05)
        inside.pop()
        return b"\x89PNG"

    monkeypatch.setattr("windkit.faces.panels.span_picture", slow)
    threads = [threading.Thread(target=panel.onward.click) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert max(most) == 1
    assert panel._at == 4 % len(panel._spans)


def test_the_picture_of_a_span_is_the_same_twice_and_every_kind_is_drawn(panel, record):
    for rule in rules(panel):
        choose(panel, rule)
        assert panel.picture.value == span_picture(record, panel.span)
    everywhere = {**panel.span.to_dict(), "channel": "*", "rule": "clock_step"}
    assert span_picture(record, everywhere).startswith(b"\x89PNG")
    outside = panel.span.to_dict()
    outside["from"], outside["to"] = (record.raw.index[0] - np.timedelta64(d, "D") for d in (9, 8))
    assert span_picture(record, outside).startswith(b"\x89PNG")


def _executed(folder, name):
    source = (
        "from windkit.faces.panels import ReviewPanel\n"
        "from windkit.study.folder import open_study\n"
        "from windkit.study.measured import load_record\n"
        'study = open_study(".")\n'
        "panel = ReviewPanel(load_record(study), study.ledger)\n"
        "panel"
    )
    kernel = {"name": "python3", "display_name": "Python 3", "language": "python"}
    cells = [v4.new_markdown_cell("# Review"), v4.new_code_cell(source)]
    notebook = v4.new_notebook(cells=cells, metadata={"kernelspec": kernel})
    resources = {"metadata": {"path": str(folder)}}
    NotebookClient(notebook, shutdown_kernel="immediate", resources=resources).execute()
    nbformat.write(notebook, folder / name)
    return render_chapter(folder / name, 1, study_folder=folder).html


def test_a_run_without_a_page_freezes_into_the_report_the_same_twice(folder, record):
    html = _executed(folder, "review.ipynb")
    assert re.search(r"<b>\d+ of \d+ spans left to decide</b>", html)
    assert html.count('<img src="data:image/png;base64,') == 1
    assert html.count('<table class="site-table') == 1
    assert "ReviewPanel" not in html.split("</details>")[1]
    assert html == _executed(folder, "again.ipynb")


def test_text_table_and_panel_give_one_number(folder):
    study = open_study(folder)
    record = load_record(study)
    found = examine_record(study, record)
    number = len(found.suspects)
    assert found.outcome.said["suspects"].startswith(f"{number:,} spans wait for a decision")
    assert repr(ReviewPanel(record, study.ledger)).startswith(f"ReviewPanel: {number} of ")
