"""What may stand in a file that is read offline, and what is refused."""

from __future__ import annotations

import pytest

from windkit.faces.offline import (
    CONTENT_POLICY,
    check_document,
    check_fragment,
    machine_path,
    without_folder,
)

# Ways a page fetches or runs something: HTML Living Standard, elements and attributes that take
# a URL; CSS Values 4, url() and src(); CSS Images 4, image-set().
REFUSED = [
    "<script>1</script>",
    '<script src="a.js"></script>',
    '<img src="https://example.org/a.png">',
    '<img src="//example.org/a.png">',
    '<img src="a.png">',
    '<img src="data:text/html;base64,AAAA">',
    '<img srcset="https://example.org/a.png 2x">',
    '<img src=data:image/png;base64,AAAA onerror="x()">',
    '<link rel="stylesheet" href="a.css">',
    '<iframe src="a.html"></iframe>',
    '<object data="a.pdf"></object>',
    '<embed src="a.pdf">',
    '<video src="a.mp4"></video>',
    '<audio src="a.mp3"></audio>',
    '<form action="https://example.org"></form>',
    '<input type="image" src="https://example.org/a.png">',
    '<base href="https://example.org/">',
    '<meta http-equiv="refresh" content="0;url=https://example.org">',
    '<a href="javascript:x()">x</a>',
    '<a href="file:///x">x</a>',
    '<a href="https://example.org" ping="https://example.org/ping">x</a>',
    "<style>@import 'https://example.org/a.css';</style>",
    "<style>p { background: url(https://example.org/a.png) }</style>",
    "<style>p { background: u\\72l(https://example.org/a.png) }</style>",
    '<style>p { background: image-set("https://example.org/a.png" 1x) }</style>',
    "<p style=\"background: url('https://example.org/a.png')\">x</p>",
    '<svg><image href="https://example.org/a.png"></image></svg>',
    '<svg><use href="https://example.org/a.svg#x"></use></svg>',
    '<svg><rect fill="url(https://example.org/a.svg#x)"></rect></svg>',
    '<math><mi xlink:href="https://example.org">x</mi></math>',
    "<noscript>x</noscript>",
    "<!-- a comment -->",
    "<div><p>never closed",
    "</div>",
    "<template><p>x</p></template>",
]

FINE = [
    "<p>m/s &lt; 3 &amp; more</p>",
    '<img src="data:image/png;base64,AAAA" alt="x">',
    '<a href="https://example.org" rel="noreferrer">a source</a>',
    '<a href="#c1">a chapter</a>',
    "<ul><li>one<li>two</ul>",
    "<style>td { color: #333 }</style><table><tr><td>1<td>2</table>",
    '<svg><defs><rect id="a"/></defs><use href="#a"/><rect fill="url(#a)"/></svg>',
    "<details><summary>x</summary><pre>y</pre></details>",
    "<math><mfrac><mi>a</mi><mi>b</mi></mfrac></math>",
]


@pytest.mark.parametrize("html", REFUSED)
def test_what_fetches_runs_or_stays_open_is_refused(html):
    assert check_fragment(html)


@pytest.mark.parametrize("html", FINE)
def test_what_stands_on_its_own_is_let_through(html):
    assert check_fragment(html) == ""


def test_a_whole_page_may_carry_its_own_policy_and_no_other():
    page = (
        '<!DOCTYPE html><html><head><meta http-equiv="Content-Security-Policy" content="{}">'
        "</head><body></body></html>"
    )
    check_document(page.format(CONTENT_POLICY.replace("'", "&#x27;")))
    with pytest.raises(ValueError, match=r"would not stand on its own.*steers the browser"):
        check_document(page.format("default-src *"))


@pytest.mark.parametrize(
    "text",
    [
        "read /home/somebody/study/mast.csv",
        "'/tmp/x.csv'",
        "in (/Users/somebody)",
        r"C:\Users\somebody\x.csv",
        r"'C:\\Users\\somebody'",
    ],
)
def test_paths_of_a_machine_are_found(text):
    assert machine_path(text)


@pytest.mark.parametrize(
    "text",
    ["7 m/s and/or 8 m/s", "data/mast.csv", "https://example.org/home/page", "1/2", "</tmp>",
     "data:image/png;base64,AA+/tmp/xx", r"P:\alpha"],
)  # fmt: skip
def test_what_only_looks_like_a_path_is_left_alone(text):
    assert machine_path(text) == ""


def test_paths_inside_the_study_are_written_relative_to_it(tmp_path):
    text = f"read {tmp_path}/data/mast.csv in '{tmp_path}' not {tmp_path}-other"
    assert without_folder(text, tmp_path) == (f"read data/mast.csv in '.' not {tmp_path}-other")
    assert without_folder(text, None) == text
