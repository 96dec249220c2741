"""Equations, headings, links and pictures of a written text."""

from __future__ import annotations

import re

import pytest

from windkit.faces.narrative import NarrativePass, markdown_html, math_html, picture_address


def _narrative(chapters=None):
    return NarrativePass(
        "c1", lambda name: picture_address(name, {}, lambda _: b"x"), chapters or {}
    )


def _html(text, **more):
    return markdown_html(text, _narrative(**more))


def test_equations_become_mathml():
    html = _html("power $P = \\frac{1}{2} \\rho A v^3$ and\n\n$$C_P \\le \\frac{16}{27}$$")
    assert html.count("<math") == 2
    assert 'display="block"' in html
    assert "<mfrac><mrow><mn>16</mn></mrow><mrow><mn>27</mn></mrow></mfrac>" in html
    assert "$" not in re.sub(r'alttext="[^"]*"', "", html)
    assert "http" not in html


def test_underscores_and_stars_in_equations_are_not_markdown():
    html = _html("$a_1 * b_2 * c_3$ and $a_1 * b_2 * c_3$")
    assert "<em>" not in html
    assert html.count("<msub>") == 6


@pytest.mark.parametrize(
    "text", ["from $5 to $7 a head", "`$x$`", "```\n$x$ and $$y$$\n```", r"\$x\$", "a$b$c"]
)
def test_money_and_code_keep_their_dollars(text):
    html = _html(text)
    assert "<math" not in html
    assert "$" in html


def test_a_named_environment_is_set_whole():
    html = _html("\\begin{align}\na &= b \\\\\nc &= d\n\\end{align}")
    assert html.count("<math") == 1
    assert "<mtable" in html


@pytest.mark.parametrize(
    ("latex", "words"),
    [
        ("\\frac{a", "braces"),
        ("\\nosuch x", r"\\nosuch, which is unknown"),
        ("a^", "cannot be set"),
    ],
)
def test_an_equation_that_cannot_be_set_is_refused(latex, words):
    with pytest.raises(ValueError, match=words):
        math_html(latex, block=True)


def test_headings_go_one_level_down_and_the_first_is_the_title():
    narrative = _narrative()
    html = markdown_html("# 2 Measured *data*\n\n## Recovery of $U$\n\n### Rose", narrative)
    assert narrative.title == "Measured data"
    assert "<h1" not in html
    assert '<h3 id="c1-1">Recovery of <math' in html
    assert '<h4 id="c1-2">Rose</h4>' in html
    assert [(level, name) for level, name, _ in narrative.sections] == [(2, "c1-1"), (3, "c1-2")]
    assert "¶" not in html
    assert "182" not in html


def test_links_lead_to_chapters_or_the_world_or_nowhere():
    html = _html(
        "[a](4_energy_yield.ipynb) [b](https://example.org/x) [c](results/x.csv) [d](javascript:x)",
        chapters={"4_energy_yield.ipynb": "c4"},
    )
    assert 'href="#c4"' in html
    assert 'href="https://example.org/x"' in html
    assert html.count("<a ") == 2
    assert " c d" in html


def test_pictures_are_put_inside():
    assert 'src="data:image/png;base64,eA=="' in _html("![map](map.png)")
    assert 'src="data:image/png;base64,eA=="' in _html('text <img src="map.png" width="20"> text')
    with pytest.raises(ValueError, match="lies outside the study"):
        _html("![map](https://example.org/map.png)")
    with pytest.raises(ValueError, match="did not come with its cell"):
        _html("![map](attachment:map.png)")


def test_an_attached_picture_is_put_inside():
    address = picture_address("attachment:a.png", {"a.png": {"image/png": "QUJD\n"}}, lambda _: b"")
    assert address == "data:image/png;base64,QUJD"


def test_a_text_that_holds_the_mark_of_equations_is_refused():
    with pytest.raises(ValueError, match="which marks equations"):
        _html("xEQUATIONx0x and $x$")
