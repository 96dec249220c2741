"""The report: one HTML file that opens offline, on a screen and on paper.

Cover, headline levels, contents, one chapter for each executed workbook, an appendix of inputs
and versions. The same study gives the same bytes: nothing here reads a clock, and dates come
from the study. Chapters are rendered in `windkit.faces.chapter`; what may stand in the file is
decided in `windkit.faces.offline`.
"""

from __future__ import annotations

import datetime as dt
import os
import platform
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from html import escape
from importlib import metadata, resources
from pathlib import Path
from typing import Any

from windkit.faces.chapter import Chapter, render_chapter
from windkit.faces.offline import CONTENT_POLICY, check_document, check_fragment, machine_path
from windkit.faces.tables import TABLE_STYLE, Table

__all__ = [
    "LIMITS",
    "NOT_STATED",
    "STATUS",
    "Cover",
    "Statements",
    "versions_in_use",
    "write_report",
]

#: What the cover says about the answer.
STATUS = "Estimate, not a guarantee"

#: What the report is not.
LIMITS = (
    "The figures are estimates from measurements, models and stated assumptions, with the "
    "uncertainty given beside them. They are not a guarantee of energy or income.",
    "The report replaces neither structural design nor permits, grid studies or noise and "
    "ecological assessments; local codes and licensed practice decide there. Work at height on "
    "masts and turbines and electrical work belong to trained people.",
)

#: What stands where the study says nothing.
NOT_STATED = "not stated"

#: What is said of every study, by its heading.
_SAID_OF_ALL = (
    (
        "Inputs not verified",
        "Figures of the client and of the turbine's maker are used as given: layout, power curve, "
        "declared limits, losses and uncertainties whose basis names one of them. They were not "
        "verified.",
    ),
    ("Time", "All times are UTC."),
    (
        "Bias",
        "P50 is not corrected for the bias that published reviews found: realised energy several "
        "per cent below pre-construction P50.",
    ),
)

#: Libraries whose version can move a number or a picture.
_LIBRARIES = (
    "sitestudy-workbooks",
    "numpy",
    "scipy",
    "pandas",
    "pyarrow",
    "matplotlib",
    "windrose",
    "nbconvert",
)


@dataclass(frozen=True)
class Cover:
    """What stands on the cover.

    Attributes
    ----------
    title, site, client, analyst : str
        Of the study; an empty client or analyst is left out.
    revision : int or str
        Number of this issue.
    issue_date : date or str
        From the study, never the clock.
    reason_for_revision : str
        Why it was issued.
    status : str
        What the answer is and is not.
    facts : mapping of str to str
        More lines, such as coordinates or the turbine.
    mind : sequence of str
        What a reviewer should mind: departures and warnings, a sentence each.
    """

    title: str
    site: str
    client: str
    analyst: str
    revision: int | str
    issue_date: dt.date | str
    reason_for_revision: str = ""
    status: str = STATUS
    facts: Mapping[str, str] = field(default_factory=dict)
    mind: Sequence[str] = ()


@dataclass(frozen=True)
class Statements:
    """What author and firm state; None and an empty text print as not stated.

    Attributes
    ----------
    independence : str
        What ties them to the project, or that nothing does.
    standards : sequence of str, optional
        Standards followed; an empty one states that there are none.
    deviations : sequence of (rule, what, effect, accepted by), optional
        Departures from them; an empty one states that there are none.
    """

    independence: str = ""
    standards: Sequence[str] | None = None
    deviations: Sequence[tuple[str, str, str, str]] | None = None


def write_report(
    path: Path | str,
    *,
    cover: Cover | Mapping[str, Any],
    notebooks: Sequence[Path | str],
    headline: Table | None = None,
    summary_html: str = "",
    inputs: Mapping[str, str] | None = None,
    versions: Mapping[str, str] | None = None,
    statements: Statements | None = None,
    study_folder: Path | str | None = None,
) -> Path:
    """Write the report of a study as one file.

    Parameters
    ----------
    path : Path or str
        File to write; an older one is replaced only by a whole new one.
    cover : Cover or mapping
        What stands on the cover.
    notebooks : sequence of Path
        Executed workbooks in their order, a chapter each.
    headline : Table, optional
        The table of levels that stands on the cover.
    summary_html : str
        What follows on a page of its own, such as the table of results.
    inputs : mapping of file name to str, optional
        SHA-256 of each input file, by its name in the study folder.
    versions : mapping of name to str, optional
        Versions the study ran with, see `versions_in_use`.
    statements : Statements, optional
        What stands under that heading in the appendix.
    study_folder : Path or str, optional
        Paths inside it are shown relative to it.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    ValueError
        If a workbook was not run whole, or something in it cannot stand in a file that is read
        offline; the message names workbook and cell. Nothing is written then.
    """
    front = cover if isinstance(cover, Cover) else Cover(**cover)
    files = [Path(notebook) for notebook in notebooks]
    names = {file.name: f"c{number}" for number, file in enumerate(files, start=1)}
    chapters = [
        render_chapter(file, number, study_folder=study_folder, chapters=names)
        for number, file in enumerate(files, start=1)
    ]
    summary = summary_html.replace(TABLE_STYLE, "")
    if problem := check_fragment(summary):
        raise ValueError(f"the summary would not stand on its own: {problem}")
    appendix = _appendix(statements or Statements(), inputs or {}, versions or {})
    page = _page(front, chapters, headline, summary, appendix)
    if found := machine_path(page):
        raise ValueError(
            f"the report shows the path {found!r} of the machine it ran on; write paths relative "
            f"to the study folder"
        )
    check_document(page)
    return _replace(Path(path), page.encode("utf-8"))


def versions_in_use() -> dict[str, str]:
    """Versions of Python and of the libraries whose version can move a number or a picture."""
    found = {"Python": platform.python_version()}
    for name in _LIBRARIES:
        try:
            found[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            found[name] = "not installed as a package"
    return found


def _page(
    cover: Cover,
    chapters: Sequence[Chapter],
    headline: Table | None,
    summary: str,
    appendix: str,
) -> str:
    style = resources.files("windkit.faces").joinpath("report.css").read_text(encoding="utf-8")
    table_style = TABLE_STYLE.removeprefix("<style>").removesuffix("</style>")
    parts = [
        "<!DOCTYPE html>",
        '<html lang="en">',
        "<head>",
        '<meta charset="utf-8">',
        f'<meta http-equiv="Content-Security-Policy" content="{escape(CONTENT_POLICY)}">',
        '<meta name="viewport" content="width=device-width, initial-scale=1">',
        f"<title>{escape(cover.title)}</title>",
        f"<style>\n{style}{table_style}{_captions(cover, chapters)}</style>",
        "</head>",
        "<body>",
        _cover(cover, headline),
        f'<section class="summary" id="summary">\n{summary}\n</section>' if summary else "",
        _contents(chapters, bool(summary)),
        *(_chapter(number, chapter) for number, chapter in enumerate(chapters, start=1)),
        appendix,
        "</body>",
        "</html>",
    ]
    return "\n".join(part for part in parts if part) + "\n"


def _cover(cover: Cover, headline: Table | None) -> str:
    revision = str(cover.revision)
    if cover.reason_for_revision:
        revision += f", {cover.reason_for_revision}"
    lines = {
        "Client": cover.client,
        "Analyst": cover.analyst,
        "Revision": revision,
        "Issued": _date_text(cover.issue_date),
        **cover.facts,
    }
    listed = "\n".join(
        f"<dt>{escape(name)}</dt><dd>{escape(str(text))}</dd>"
        for name, text in lines.items()
        if str(text).strip()
    )
    levels = f'\n<div class="headline">\n{headline.to_html()}\n</div>' if headline else ""
    mind = "".join(f"<li>{escape(sentence)}</li>\n" for sentence in cover.mind)
    if mind:
        heading = "<h2>What a reviewer should mind</h2>"
        mind = f'\n<section class="mind">\n{heading}\n<ul>\n{mind}</ul>\n</section>'
    return (
        f'<header class="cover">\n<h1>{escape(cover.title)}</h1>\n'
        f'<p class="site">{escape(cover.site)}</p>\n'
        f'<p class="status">{escape(cover.status)}</p>\n<dl>\n{listed}\n</dl>'
        f"{levels}{mind}\n</header>"
    )


def _contents(chapters: Sequence[Chapter], has_summary: bool) -> str:
    def line(name: str, number: str, title: str, below: str = "") -> str:
        return f'<li><a href="#{name}"><span class="number">{number}</span>{title}</a>{below}</li>'

    lines = [line("summary", "", "Results")] if has_summary else []
    for number, chapter in enumerate(chapters, start=1):
        below = "".join(
            f'<li><a href="#{name}">{title}</a></li>'
            for level, name, title in chapter.sections
            if level == 2
        )
        below = f"<ol>{below}</ol>" if below else ""
        lines.append(line(chapter.name, str(number), escape(chapter.title), below))
    lines.append(line("appendix", "A", "Statements, inputs and versions"))
    joined = "\n".join(lines)
    return f'<nav class="contents">\n<h2>Contents</h2>\n<ol>\n{joined}\n</ol>\n</nav>'


def _chapter(number: int, chapter: Chapter) -> str:
    return (
        f'<section class="chapter" id="{chapter.name}">\n'
        f'<h2><span class="number">{number}</span>{escape(chapter.title)}</h2>\n'
        f"{chapter.html}\n</section>"
    )


def _statements(stated: Statements) -> list[str]:
    """The statements a lender looks for, each under its heading."""

    def listed(texts: Sequence[str] | None) -> str:
        if not texts:
            return f"<p>{NOT_STATED if texts is None else 'none'}</p>"
        return "<ul>" + "".join(f"<li>{escape(text)}</li>" for text in texts) + "</ul>"

    deviations = listed(None if stated.deviations is None else ())
    if stated.deviations:
        heads = ("Rule", "What differs", "Effect", "Accepted by")
        rows = [
            dict(zip(heads, (text or NOT_STATED for text in deviation), strict=True))
            for deviation in stated.deviations
        ]
        deviations = Table(rows, formats=dict.fromkeys(heads, str)).to_html()
    unverified, *others = [
        f"<h4>{heading}</h4><p>{escape(text)}</p>" for heading, text in _SAID_OF_ALL
    ]
    return [
        '<h3 id="statements">Statements</h3>',
        f"<h4>Independence</h4><p>{escape(stated.independence or NOT_STATED)}</p>",
        f"<h4>Standards followed</h4>{listed(stated.standards)}",
        f"<h4>Deviations</h4>{deviations}",
        unverified,
        "<h4>Limits of use</h4>",
        *(f'<p class="limits">{escape(text)}</p>' for text in LIMITS),
        *others,
    ]


def _appendix(stated: Statements, inputs: Mapping[str, str], versions: Mapping[str, str]) -> str:
    parts = _statements(stated)
    if inputs:
        parts += [
            "<h3>Input files</h3>",
            "<p>SHA-256 of every file the figures were made from, by its name in the study "
            "folder.</p>",
            _two_columns("File", "SHA-256", inputs, "digest"),
        ]
    if versions:
        parts += ["<h3>Versions</h3>", _two_columns("Library", "Version", versions, "")]
    joined = "\n".join(parts)
    return (
        '<section class="chapter" id="appendix">\n<h2><span class="number">A</span>'
        f"Statements, inputs and versions</h2>\n{joined}\n</section>"
    )


def _two_columns(left: str, right: str, lines: Mapping[str, str], kind: str) -> str:
    rows = "\n".join(
        f'<tr><td>{escape(name)}</td><td class="{kind}">{escape(str(text))}</td></tr>'
        for name, text in lines.items()
    )
    return (
        f'<table class="site-table">\n<thead><tr><th scope="col">{left}</th>'
        f'<th scope="col">{right}</th></tr></thead>\n<tbody>\n{rows}\n</tbody>\n</table>'
    )


def _captions(cover: Cover, chapters: Sequence[Chapter]) -> str:
    """Running captions on paper: the study at the left, the chapter at the right."""
    small = "font-size: 8pt; color: #5f6b75;"
    foot = f"Revision {cover.revision}, {_date_text(cover.issue_date)}. {cover.status}."
    named = [(chapter.name, chapter.title) for chapter in chapters]
    lines = [
        f"@page {{ @top-left {{ content: {_css_text(cover.title)}; {small} }}",
        f"  @bottom-left {{ content: {_css_text(foot)}; {small} }}",
        f'  @bottom-right {{ content: counter(page) " / " counter(pages); {small} }} }}',
    ]
    for name, title in [*named, ("appendix", "Statements, inputs and versions")]:
        lines.append(f"@page {name} {{ @top-right {{ content: {_css_text(title)}; {small} }} }}")
        lines.append(f"#{name} {{ page: {name}; }}")
    return "\n".join(lines) + "\n"


def _css_text(text: str) -> str:
    # A quote, a backslash or a bracket could end the text early; paper does not need them.
    plain = " ".join(text.replace('"', "”").replace("\\", "/").split())
    plain = plain.replace("<", "‹").replace(">", "›")
    short = plain if len(plain) <= 70 else plain[:69].rstrip() + "…"
    return f'"{short}"'


def _date_text(date: dt.date | str) -> str:
    return date.isoformat() if isinstance(date, dt.date) else str(date)


def _replace(path: Path, content: bytes) -> Path:
    """Write a file whole or not at all."""
    part = path.with_name(path.name + ".part")
    try:
        part.write_bytes(content)
        os.replace(part, path)
    finally:
        part.unlink(missing_ok=True)
    return path
