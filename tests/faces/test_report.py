"""The report of a small study: whole, offline, the same twice; refused when it is not honest."""

from __future__ import annotations

import base64
import datetime as dt
import re
from html.parser import HTMLParser
from types import SimpleNamespace

import nbformat
import pandas as pd
import pytest
from nbformat import v4

from windkit.faces import views
from windkit.faces.chapter import NOTES_TEMPLATE, render_chapter
from windkit.faces.frozen import PANEL_STATE, PANEL_VIEW
from windkit.faces.report import STATUS, Cover, Statements, versions_in_use, write_report
from windkit.faces.tables import Table, exceedance_table_view

# The smallest PNG: one pixel.
PIXEL = (
    "iVBORw0KGgoAAAANSUhEUgAAAAEAAAABCAYAAAAfFcSJAAAADUlEQVR42mNkYPhfDwAChwGA60e6kgAAAABJRU5ErkJg"
    "gg=="
)
COVER = Cover(
    "Wind & energy, Invented Ridge",
    "Invented Ridge",
    "A client <b>",
    "An analyst",
    2,
    dt.date(2026, 11, 30),
    "second mast added",
)


def _code(source, *outputs, count=1, tags=(), **metadata):
    return v4.new_code_cell(
        source,
        execution_count=count,
        outputs=list(outputs),
        metadata={"tags": list(tags), **metadata},
    )


def _shown(**data):
    return v4.new_output(
        "display_data", {kind.replace("_", "/"): text for kind, text in data.items()}
    )


def _printed(text, name="stdout"):
    return v4.new_output("stream", name=name, text=text)


def _notes(text):
    return v4.new_markdown_cell(text, metadata={"tags": ["analyst-notes"]})


def _notebook(path, *cells, **metadata):
    kernel = {"name": "python3", "display_name": "Python", "language": "python"}
    nbformat.write(
        v4.new_notebook(cells=list(cells), metadata={"kernelspec": kernel, **metadata}), path
    )
    return path


def _study(folder):
    """Two workbooks with all a report has to show."""
    folder.mkdir(parents=True, exist_ok=True)
    frame = pd.DataFrame({"channel": ["<a>"], "recovery": [0.97]})
    one = _notebook(
        folder / "1_site_screening.ipynb",
        v4.new_markdown_cell("# Site screening\n\n## Answer\n\nSee [next](2_measured_data.ipynb)."),
        _code("hub_height = 100.0  # [m]", tags=["parameters"]),
        _code(f"load('{folder}/data/mast.csv')", _printed("12 rows "), _printed("read\n"), count=2),
        v4.new_markdown_cell("The ceiling is $C_P \\le 16/27$."),
        _code("figure()", _shown(image_png=PIXEL, text_plain="<Figure>"), count=3, caption="Curve"),
        _code("frame", _shown(text_html=frame.to_html(), text_plain="x"), count=4),
        _notes(NOTES_TEMPLATE),
    )
    two = _notebook(
        folder / "2_measured_data.ipynb",
        v4.new_markdown_cell("# Measured data\n\n## Answer"),
        _code(
            "1",
            _printed("/x/ipykernel_12/34.py:5: UserWarning: thin sector\n", "stderr"),
            _printed(" \n", "stderr"),
            _shown(text_html=Table(frame)._repr_html_()),
            _shown(text_plain="<matplotlib.lines.Line2D at 0x7f0123456789>"),
        ),
        _notes("The sensor was changed in **March**."),
    )
    return [one, two]


def _write(folder, name="report.html", **more):
    files = _study(folder)
    levels = pd.DataFrame({"P50": [45000.0], "P90": [39000.0]}, index=[1])
    return write_report(
        folder / name,
        cover=COVER,
        notebooks=files,
        headline=exceedance_table_view(levels),
        summary_html="<h2>Results</h2>",
        inputs={"study.toml": "ab" * 32},
        versions={"numpy": "9.9"},
        study_folder=folder,
        **more,
    )


@pytest.fixture(scope="module")
def html(tmp_path_factory):
    return _write(tmp_path_factory.mktemp("study")).read_text(encoding="utf-8")


class _Fetches(HTMLParser):
    """Every address a browser would ask for by itself, by a second reading of the page."""

    def __init__(self):
        super().__init__()
        self.addresses, self.tags = [], set()

    def handle_starttag(self, tag, attrs):
        self.tags.add(tag)
        for name, value in attrs:
            if name in ("src", "srcset", "data", "poster", "action") or (
                name == "href" and tag != "a"
            ):
                self.addresses.append(value)


def test_nothing_is_fetched_and_nothing_runs(html):
    page = _Fetches()
    page.feed(html)
    assert page.addresses
    assert all(address.startswith("data:image/png;base64,") for address in page.addresses)
    assert not {"script", "link", "iframe", "object", "embed", "base", "form"} & page.tags
    assert not re.search(r"\bon\w+\s*=\s*[\"']", html)
    assert not re.search(r"@import|url\(", html)
    assert "Content-Security-Policy" in html


def test_cover_says_what_it_is(html):
    cover = html[html.index('class="cover"') : html.index('class="summary"')]
    for text in (
        "Wind &amp; energy, Invented Ridge",
        "A client &lt;b&gt;",
        "An analyst",
        "2, second mast added",
        "2026-11-30",
        STATUS,
        "45\u202f000",
        "39\u202f000",
    ):
        assert text in cover


def test_contents_lead_to_every_chapter_and_section(html):
    targets = re.findall(r'href="#([\w-]+)"', html)
    assert {"c1", "c2", "c1-1", "c2-1", "appendix", "summary"} <= set(targets)
    names = re.findall(r'id="([\w-]+)"', html)
    assert len(names) == len(set(names))
    assert set(targets) <= set(names)


def test_each_workbook_is_a_chapter(html):
    assert re.findall(r"<h2>(?:<span[^>]*>\w</span>)?([^<]+)</h2>", html) == [
        "Results", "Contents", "Site screening", "Measured data", "Statements, inputs and versions",
    ]  # fmt: skip


def test_figures_are_numbered_and_said_in_words(html):
    assert 'alt="Figure 1.1. Curve"' in html
    assert "<figcaption>Figure 1.1. Curve</figcaption>" in html
    assert f"data:image/png;base64,{PIXEL}" in html
    assert base64.b64decode(PIXEL).startswith(b"\x89PNG")


def test_code_is_folded_and_paths_are_those_of_the_study(html, tmp_path):
    assert "<details" in html
    assert not re.search(r"<details[^>]*open", html)
    assert "load(&#x27;data/mast.csv&#x27;)" in html
    assert "<summary>Settings, cell 2" in html


def test_what_was_printed_in_several_goes_is_one(html):
    assert "<pre>12 rows read</pre>" in html


def test_warnings_are_shown_without_the_file_of_the_kernel(html):
    assert html.count('class="warning"') == 1
    assert "this cell: UserWarning: thin sector" in html


def test_bare_objects_are_left_out(html):
    assert "Line2D" not in html


def test_notes_are_boxed_and_left_out_while_they_are_the_template(html):
    assert html.count('<aside class="notes">') == 1
    assert "changed in <strong>March</strong>" in html
    assert "write here" not in html


def test_the_style_of_tables_stands_there_once(html):
    assert html.count("<style>") == 1


def test_appendix_names_inputs_versions_and_limits(html):
    appendix = html[html.index('id="appendix"') :]
    for text in ("ab" * 32, "study.toml", "9.9", "not a guarantee", "licensed practice"):
        assert text in appendix


def _stated(page):
    part = page[page.index('id="statements"') :]
    return dict(re.findall(r"<h4>([^<]*)</h4>(.*?)(?=<h4>|<h3>|</section>)", part, re.S))


def test_what_nobody_stated_is_said_to_be_not_stated(html):
    said = _stated(html)
    for heading in ("Independence", "Standards followed", "Deviations"):
        assert said[heading].strip() == "<p>not stated</p>"
    assert "were not verified" in said["Inputs not verified"]
    assert "not a guarantee" in said["Limits of use"]
    assert "All times are UTC" in said["Time"]
    assert "P50 is not corrected for the bias" in said["Bias"]


def test_statements_stand_in_the_appendix_as_they_were_written(tmp_path):
    stated = Statements("No share in <it>.", ["A standard, edition 2"], [("r", "w", "", "C. Gill")])
    said = _stated(_write(tmp_path, statements=stated).read_text(encoding="utf-8"))
    assert "No share in &lt;it&gt;." in said["Independence"]
    assert "<li>A standard, edition 2</li>" in said["Standards followed"]
    cells = [re.sub("<[^>]*>", "", cell) for cell in re.findall("<td.*?</td>", said["Deviations"])]
    assert cells == ["r", "w", "not stated", "C. Gill"]
    none = _stated(_write(tmp_path, statements=Statements("", [], [])).read_text(encoding="utf-8"))
    assert none["Standards followed"].strip() == none["Deviations"].strip() == "<p>none</p>"


def test_the_same_study_elsewhere_gives_the_same_bytes(tmp_path):
    one, two = _write(tmp_path / "here"), _write(tmp_path / "there" / "deeper")
    assert one.read_bytes() == two.read_bytes()
    assert not list(tmp_path.rglob("*.part"))


def test_random_names_of_styled_tables_do_not_reach_the_report(tmp_path):
    pages = []
    for _ in range(2):
        table = pd.DataFrame({"a": [1.0]}).style.highlight_max().to_html()
        book = _notebook(tmp_path / "a.ipynb", _code("s", _shown(text_html=table)))
        pages.append(render_chapter(book, 1).html)
    assert pages[0] == pages[1]
    assert 'id="table-c1-1' in pages[0]


ERROR = v4.new_output("error", ename="KeyError", evalue="'a'")
PANEL = v4.new_output("display_data", {PANEL_VIEW: {"model_id": "q"}})
FETCH = '<img src="https://example.org/a.png">'

REFUSALS = {
    "error": (
        [v4.new_markdown_cell("x"), _code("x", ERROR)],
        r"a\.ipynb, cell 2: ended in KeyError: 'a'",
    ),
    "never run": ([_code("x = 1", count=None)], r"a\.ipynb, cell 1: was never run"),
    "out of order": (
        [_code("x", count=5), _code("y", count=2)],
        "cell 2: was run as number 2 after number 5",
    ),
    "script": (
        [_code("x", _shown(text_html="<script>1</script>"))],
        r"cell 1: .*<script> has no place",
    ),
    "fetch": ([_code("x", _shown(text_html=FETCH))], "asks for something outside"),
    "moving": ([_code("x", _shown(application_javascript="1"))], "shows something that moves"),
    "path": (
        [_code("x", _printed("read /home/somebody/mast.csv"))],
        r"cell 1: shows the path '/home/somebody/mast\.csv'",
    ),
    "path in code": ([_code("open('/tmp/mast.csv')")], r"cell 1: shows the path '/tmp/mast\.csv'"),
    "equation": ([v4.new_markdown_cell("$\\nosuch$")], r"cell 1: the equation .* uses \\nosuch"),
    "picture": (
        [v4.new_markdown_cell("![x](../x.png)")],
        r"cell 1: the picture '\.\./x\.png' lies outside",
    ),
    "open tag": ([v4.new_markdown_cell("<div>\n\nx")], r"cell 1: .*<div> is never closed"),
    "panel": ([_code("x", PANEL)], "cell 1: shows a panel whose state was not kept"),
}


@pytest.mark.parametrize("name", REFUSALS)
def test_what_cannot_be_shown_honestly_is_refused_and_nothing_written(name, tmp_path):
    cells, words = REFUSALS[name]
    book = _notebook(tmp_path / "a.ipynb", *cells)
    target = tmp_path / "report.html"
    target.write_text("the issue before")
    with pytest.raises(ValueError, match=words):
        write_report(target, cover=COVER, notebooks=[book])
    assert target.read_text() == "the issue before"
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.ipynb", "report.html"]


def test_an_error_hidden_in_a_panel_is_refused(tmp_path):
    error = {"output_type": "error", "ename": "ValueError", "evalue": "no"}
    state = {"q": {"model_name": "OutputModel", "state": {"outputs": [error]}}}
    book = _notebook(tmp_path / "a.ipynb", _code("x"), widgets={PANEL_STATE: {"state": state}})
    with pytest.raises(ValueError, match="an error was hidden in a panel, ValueError: no"):
        render_chapter(book, 1)


def test_a_panel_is_shown_as_it_stood(tmp_path):
    state = {
        "q": {"model_name": "VBoxModel", "state": {"children": ["IPY_MODEL_s", "IPY_MODEL_o"]}},
        "s": {"model_name": "FloatSliderModel", "state": {"value": 7.5, "description": "Hub"}},
        "o": {"model_name": "OutputModel", "state": {"outputs": [
            {"output_type": "display_data", "data": {"image/png": PIXEL}, "metadata": {}}]}},
    }  # fmt: skip
    view = v4.new_output(
        "display_data", {"application/vnd.jupyter.widget-view+json": {"model_id": "q"}}
    )
    panels = {"application/vnd.jupyter.widget-state+json": {"state": state}}
    book = _notebook(tmp_path / "a.ipynb", _code("x", view), widgets=panels)
    html = render_chapter(book, 3).html
    assert "<b>7.5</b>" in html
    assert "Figure 3.1" in html


def test_a_panel_leaves_out_what_nobody_wrote_and_names_its_picture(tmp_path):
    children = ["IPY_MODEL_n", "IPY_MODEL_r", "IPY_MODEL_p"]
    buffer = {"path": ["value"], "encoding": "base64", "data": PIXEL}
    state = {
        "q": {"model_name": "VBoxModel", "state": {"children": children}},
        "n": {"model_name": "TextModel", "state": {"value": "E. Marsh", "description": "Name"}},
        "r": {"model_name": "TextModel", "state": {"value": "", "description": "Reason"}},
        "p": {"model_name": "ImageModel", "state": {"format": "png"}, "buffers": [buffer]},
    }
    view = v4.new_output(
        "display_data",
        {
            "application/vnd.jupyter.widget-view+json": {"model_id": "q"},
            "text/plain": "ReviewPanel: 1 of 1 spans left to decide",
        },
    )
    panels = {"application/vnd.jupyter.widget-state+json": {"state": state}}
    plain = _notebook(tmp_path / "a.ipynb", _code("x", view), widgets=panels)
    html = render_chapter(plain, 3).html
    assert "E. Marsh" in html
    assert "Reason" not in html
    assert "Figure 3.1. Suspected span, as the panel shows it" in html
    named = _notebook(tmp_path / "b.ipynb", _code("x", view, caption="Own"), widgets=panels)
    assert "Figure 3.1. Own" in render_chapter(named, 3).html


def test_where_a_step_was_written_is_for_the_workbook_only(tmp_path):
    outcome = SimpleNamespace(step="measure", tables={"record": None})
    said = views.written(outcome)
    shown = _shown(text_markdown=said._repr_markdown_(), text_plain=repr(said))
    other = _shown(text_markdown="Two rows were set aside.", text_plain="Two rows")
    book = _notebook(
        tmp_path / "a.ipynb", _code("x", shown, other, _printed("Written to results/x.\n"))
    )
    html = render_chapter(book, 1).html
    assert "results/" not in html
    assert "Two rows were set aside." in html


def test_a_summary_that_fetches_is_refused(tmp_path):
    with pytest.raises(ValueError, match="the summary would not stand on its own"):
        write_report(
            tmp_path / "r.html", cover=COVER, notebooks=[], summary_html="<script></script>"
        )


def test_a_cover_text_cannot_break_out_of_the_page_style(tmp_path):
    cover = {
        "title": 'a" } </style><script>x</script> \\', "site": "", "client": "", "analyst": "",
        "revision": 0, "issue_date": "2026-11-30",
    }  # fmt: skip
    page = write_report(tmp_path / "r.html", cover=cover, notebooks=[]).read_text()
    assert "<script" not in page
    assert page.count("</style>") == 1
    assert "<dt>Client</dt>" not in page


def test_versions_name_python_and_the_libraries_behind_the_numbers():
    found = versions_in_use()
    assert {"Python", "numpy", "scipy", "pandas", "matplotlib", "windrose"} <= set(found)


def test_what_a_reviewer_should_mind_stands_on_the_cover(tmp_path):
    cover = Cover(**{**COVER.__dict__, "mind": ["Step yield was run with a < b.", "Second."]})
    page = write_report(
        tmp_path / "r.html", cover=cover, notebooks=_study(tmp_path), study_folder=tmp_path
    ).read_text()
    front = page[page.index('<header class="cover">') : page.index("</header>")]
    assert "<h2>What a reviewer should mind</h2>" in front
    assert "<li>Step yield was run with a &lt; b.</li>\n<li>Second.</li>" in front
    assert "reviewer should mind" not in _write(tmp_path).read_text()


def test_no_margin_of_the_first_page_is_left_to_the_browser(html):
    first = re.search(r"@page :first \{(.*?\} )\}", html, re.S)[1]
    assert first.count('content: ""') == 6
    assert "none" not in first
