"""One executed workbook as a chapter of the report.

Here: the cells in their order, code folded away, outputs as they are, notes in a box; what
cannot be shown honestly is refused with the name of the workbook and the cell. Not here: the
markdown itself (`windkit.faces.narrative`), panels (`windkit.faces.frozen`), and the pages
around the chapters (`windkit.faces.report`).
"""

from __future__ import annotations

import base64
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from html import escape
from pathlib import Path
from typing import Any

from windkit.faces.frozen import PANEL_VIEW, frozen_outputs, hidden_errors, panel_state
from windkit.faces.narrative import NarrativePass, markdown_html, math_html, picture_address
from windkit.faces.offline import check_fragment, machine_path, without_folder
from windkit.faces.tables import TABLE_STYLE

__all__ = ["NOTES_TAG", "NOTES_TEMPLATE", "Chapter", "render_chapter"]

#: Tag of the cells an analyst writes notes in, and the text such a cell starts with.
NOTES_TAG = "analyst-notes"
NOTES_TEMPLATE = "*Analyst's notes: write here.*"

#: How a workbook tells its analyst where a step went; the reader of a report has no such folder.
_WORKBOOK_ONLY = "Written to results/"
#: What the picture inside a panel is called where the cell does not say, by the panel's name.
_PANEL_CAPTIONS = {"ReviewPanel": "Suspected span, as the panel shows it"}
#: A text control nobody wrote in, as it stands in a frozen panel.
_EMPTY_CONTROL = re.compile(r'<p class="panel-control">(?:<span [^>]*>[^<]*</span> )?<b>–</b></p>')

_PICTURES = ("image/png", "image/jpeg", "image/svg+xml")
#: How an object that has nothing to show shows itself.
_BARE_OBJECT = re.compile(
    r"\[?<(?:[\w.]+ object|Axes|Figure|AxesSubplot|WindroseAxes|matplotlib\.|[\w.]+ at 0x)[^\n]*"
    r"(?:\n[^\n]*at 0x[^\n]*)*|Text\(.*\)|\(?<Axes.*",
    re.S,
)
_ADDRESS = re.compile(r"\b0x[0-9a-f]{6,16}\b")
_KERNEL_FILE = re.compile(r"\S*ipykernel_\d+\S*?\.py(?::\d+)?")
_INSTALLED = re.compile(r"[^\s\"']*[/\\](?:site|dist)-packages[/\\]")
_STYLER_NAME = re.compile(r"\bT_[0-9a-f]{5}(?![0-9A-Za-z])")


@dataclass(frozen=True)
class Chapter:
    """A workbook as it stands in the report.

    Attributes
    ----------
    name : str
        Name links lead to.
    title : str
        Its heading.
    html : str
        What follows the heading.
    sections : sequence of (level, name, html)
        Headings below it, level 2 being the highest.
    """

    name: str
    title: str
    html: str
    sections: Sequence[tuple[int, str, str]]


def render_chapter(
    notebook: Path | str,
    number: int,
    *,
    study_folder: Path | str | None = None,
    chapters: Mapping[str, str] | None = None,
) -> Chapter:
    """Render an executed workbook.

    Parameters
    ----------
    notebook : Path or str
        The workbook, as a headless run left it.
    number : int
        Number of the chapter, from 1.
    study_folder : Path or str, optional
        Paths inside it are shown relative to it; pictures may lie anywhere inside it.
    chapters : mapping of file name to str, optional
        Names of the chapters, for links between workbooks.

    Raises
    ------
    ValueError
        With workbook and cell, if a cell was not run or ended in an error, a panel or an
        equation cannot be shown, an output would reach outside the file, or a path of the
        machine is left in it.
    """
    return _Chapter(Path(notebook), number, study_folder, chapters or {}).render()


class _Chapter:
    def __init__(
        self, path: Path, number: int, folder: Path | str | None, chapters: Mapping[str, str]
    ) -> None:
        import nbformat

        self._path = path
        self._number = number
        self._folder = folder
        self._cell = 0
        self._figures = 0
        self._styled: dict[str, str] = {}
        self._attachments: Mapping[str, Any] = {}
        self._narrative = NarrativePass(f"c{number}", self._picture, chapters)
        self._notebook = nbformat.read(str(path), as_version=4)
        self._panels = panel_state(self._notebook.metadata)

    def render(self) -> Chapter:
        if errors := hidden_errors(self._panels):
            raise ValueError(
                f"{self._path.name}: an error was hidden in a panel, {errors[0]}; mend the "
                f"workbook and run it again"
            )
        counted = 0
        parts: list[str] = []
        for position, cell in enumerate(self._notebook.cells, start=1):
            self._cell = position
            try:
                if cell.cell_type == "code":
                    counted = self._check_count(cell, counted)
                    parts.append(self._code(cell))
                elif cell.cell_type == "markdown":
                    parts.append(self._written(cell))
            except ValueError as error:
                raise ValueError(f"{self._path.name}, cell {self._cell}: {error}") from error
        title = self._narrative.title or self._path.stem.replace("_", " ").strip()
        return Chapter(
            f"c{self._number}",
            title,
            "\n".join(part for part in parts if part),
            tuple(self._narrative.sections),
        )

    def _check_count(self, cell: Any, counted: int) -> int:
        if not cell.source.strip():
            return counted
        count = cell.execution_count
        if count is None:
            raise ValueError("was never run; run the whole workbook from the command")
        if count <= counted:
            raise ValueError(
                f"was run as number {count} after number {counted}; run the whole workbook from "
                f"the command, from top to bottom"
            )
        return int(count)

    def _written(self, cell: Any) -> str:
        self._attachments = cell.get("attachments", {})
        text = cell.source
        if NOTES_TAG not in cell.metadata.get("tags", ()):
            return self._markdown(text)
        lines = text.replace("’", "'").splitlines()
        kept = [
            own
            for own, plain in zip(text.splitlines(), lines, strict=True)
            if plain.strip() != NOTES_TEMPLATE
        ]
        if not any(line.strip() and not line.startswith("#") for line in kept):
            return ""
        notes = self._markdown("\n".join(kept).strip())
        return f'<aside class="notes"><p class="notes-name">Analyst\'s notes</p>\n{notes}\n</aside>'

    def _markdown(self, text: str) -> str:
        return self._checked(markdown_html(self._portable(text), self._narrative))

    def _code(self, cell: Any) -> str:
        source = self._portable(cell.source.strip("\n"))
        shown = [html for output in _merged(cell.outputs) for html in self._output(output, cell)]
        code = ""
        if source.strip():
            first = source.lstrip().splitlines()[0]
            said = f": {first.lstrip('# ')}" if first.startswith("#") else ""
            tags = cell.metadata.get("tags", ())
            name = "Settings" if {"parameters", "injected-parameters"} & set(tags) else "Code"
            code = (
                f'<details class="code"><summary>{name}, cell {self._cell}{escape(said)}</summary>'
                f"\n<pre><code>{escape(source)}</code></pre></details>"
            )
        outputs = "\n".join(html for html in shown if html)
        return code + (f'\n<div class="output">\n{outputs}\n</div>' if outputs else "")

    def _output(self, output: Mapping[str, Any], cell: Any, *, caption: str = "") -> Iterator[str]:
        kind = output["output_type"]
        if kind == "error":
            raise ValueError(
                f"ended in {output.get('ename')}: {output.get('evalue')}; mend the workbook and "
                f"run it again"
            )
        if kind == "stream":
            yield self._stream(output)
            return
        data = output.get("data", {})
        if PANEL_VIEW in data:
            panel = _text(data.get("text/plain", "")).partition(":")[0]
            said = cell.metadata.get("caption") or _PANEL_CAPTIONS.get(panel, "")
            for frozen in _merged(frozen_outputs(data[PANEL_VIEW]["model_id"], self._panels)):
                html = _text(frozen.get("data", {}).get("text/html", ""))
                if not _EMPTY_CONTROL.fullmatch(html):
                    yield from self._output(frozen, cell, caption=said)
            return
        if _text(data.get("text/plain", "")).startswith(_WORKBOOK_ONLY):
            return
        own = output.get("metadata", {}).get("caption")
        yield self._bundle(data, str(own or caption or cell.metadata.get("caption", "")))

    def _bundle(self, data: Mapping[str, Any], caption: str) -> str:
        if "text/html" in data:
            return self._html(_text(data["text/html"]))
        for kind in _PICTURES:
            if kind in data:
                return self._figure(kind, _text(data[kind]), caption)
        if "text/markdown" in data:
            return self._markdown(_text(data["text/markdown"]))
        if "text/latex" in data:
            latex = _text(data["text/latex"]).strip().strip("$").strip()
            return self._checked(math_html(latex.removeprefix("\\displaystyle"), block=True))
        if scripts := [kind for kind in data if "javascript" in kind or kind.startswith("appl")]:
            raise ValueError(
                f"shows something that moves ({scripts[0]}) and cannot stand in a report; show it "
                f"as a figure or a table as well"
            )
        text = _text(data.get("text/plain", ""))
        if _BARE_OBJECT.fullmatch(text.strip()):
            return ""
        return self._plain(text)

    def _stream(self, output: Mapping[str, Any]) -> str:
        text = _text(output.get("text", ""))
        if not text.strip() or text.startswith(_WORKBOOK_ONLY):
            return ""
        if output.get("name") != "stderr":
            return self._plain(text)
        return f'<div class="warning"><p>Warning</p>\n{self._plain(text)}\n</div>'

    def _plain(self, text: str) -> str:
        from nbconvert.filters import strip_ansi

        lines = [line.rsplit("\r", 1)[-1] for line in strip_ansi(text).rstrip().split("\n")]
        joined = self._portable("\n".join(line.rstrip() for line in lines))
        return f"<pre>{escape(joined)}</pre>" if joined else ""

    def _html(self, html: str) -> str:
        html = html.replace(TABLE_STYLE, "")  # the report carries it once
        html = re.sub(r"<!--.*?-->", "", html, flags=re.S)
        # A styled table draws its name at random; here it is the n-th of its chapter.
        html = _STYLER_NAME.sub(
            lambda found: self._styled.setdefault(
                found[0], f"table-c{self._number}-{len(self._styled) + 1}"
            ),
            html,
        )
        return self._checked(self._portable(html).strip())

    def _figure(self, kind: str, data: str, caption: str) -> str:
        self._figures += 1
        if kind == "image/svg+xml":
            # As a picture it can neither run nor fetch anything, whatever is in it.
            data = base64.b64encode(self._portable(data).encode()).decode("ascii")
        name = f"Figure {self._number}.{self._figures}"
        said = f"{name}. {caption}" if caption else name
        image = f'<img src="data:{kind};base64,{"".join(data.split())}" alt="{escape(said)}">'
        return self._checked(f"<figure>{image}<figcaption>{escape(said)}</figcaption></figure>")

    def _picture(self, name: str) -> str:
        def read(file: str) -> bytes:
            inside = Path(self._folder or self._path.parent).resolve()
            target = (self._path.parent / file).resolve()
            if not target.is_relative_to(inside):
                raise ValueError(f"the picture {file!r} lies outside the study folder")
            if not target.is_file():
                raise ValueError(f"the picture {file!r} is not there")
            return target.read_bytes()

        return picture_address(name, self._attachments, read)

    def _portable(self, text: str) -> str:
        """The text without anything of the machine it was made on."""
        text = _KERNEL_FILE.sub("this cell", without_folder(text, self._folder))
        text = _ADDRESS.sub("0x…", _INSTALLED.sub("", text))
        if path := machine_path(text):
            raise ValueError(
                f"shows the path {path!r} of the machine it ran on; write paths relative to the "
                f"study folder"
            )
        return text

    def _checked(self, html: str) -> str:
        if problem := check_fragment(html):
            raise ValueError(f"cannot go into a report that stands on its own: {problem}")
        return html


def _text(value: Any) -> str:
    return "".join(value) if isinstance(value, list) else str(value)


def _merged(outputs: Sequence[Mapping[str, Any]]) -> list[dict[str, Any]]:
    """Outputs with what was printed in several goes put together."""
    merged: list[dict[str, Any]] = []
    for output in outputs:
        last = merged[-1] if merged else {}
        alike = output["output_type"] == "stream" == last.get("output_type")
        if alike and output.get("name") == last.get("name"):
            last["text"] = _text(last["text"]) + _text(output["text"])
        else:
            merged.append(dict(output))
    return merged
