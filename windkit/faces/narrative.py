"""Written text of a workbook as HTML: markdown, equations, headings, pictures beside it.

Here: equations to MathML, markdown through nbconvert's filter, and the pass that gives headings
their place in the report and puts pictures inside. Not here: cells and outputs, which stand in
`windkit.faces.chapter`.
"""

from __future__ import annotations

import base64
import mimetypes
import re
from collections.abc import Callable, Mapping
from html import escape, unescape
from html.parser import HTMLParser
from typing import Any
from urllib.parse import unquote

__all__ = ["NarrativePass", "markdown_html", "math_html", "picture_address", "without_equations"]

#: Mark of an equation that is set aside while the text goes through markdown: plain letters,
#: because the filter rewrites every other sign in a heading.
_MARK = "xEQUATIONx"
_MARKED = re.compile(f"{_MARK}(\\d+)x")

_CODE = re.compile(
    r"(?ms)^(?P<fence>`{3,}|~{3,}).*?^(?P=fence)[`~]*\s*?$"
    r"|(?P<tick>`+)(?!`).+?(?<!`)(?P=tick)(?!`)"
)
_EQUATION = re.compile(
    r"(?s)(?<!\\)\$\$(?P<block>.+?)(?<!\\)\$\$"
    r"|(?P<named>\\begin\{(?P<name>(?:equation|align|gather|aligned|split)\*?)\}.+?\\end\{(?P=name)\})"
    # A dollar with a space inside, or one before a digit, is money.
    r"|(?<![\\$\w])\$(?![\s$])(?P<inline>[^$\n]*?[^\s\\$])\$(?![\d$])"
)  # fmt: skip
_ATTACHED = "attached:"
_HEADINGS = ("h1", "h2", "h3", "h4", "h5", "h6")


def math_html(latex: str, *, block: bool) -> str:
    """An equation as MathML.

    Parameters
    ----------
    latex : str
        Without its dollars.
    block : bool
        Whether it stands on a line of its own.

    Raises
    ------
    ValueError
        If a command is unknown or the equation does not close.
    """
    from latex2mathml.converter import convert

    source = latex.strip()
    if source.count("{") - source.count(r"\{") != source.count("}") - source.count(r"\}"):
        raise ValueError(f"the braces of the equation {source[:60]!r} do not match")
    try:
        shown = convert(source, display="block" if block else "inline")
    except Exception as error:  # the converter raises its own kinds and IndexError alike
        raise ValueError(f"the equation {source[:60]!r} cannot be set: {error!r}") from error
    if unknown := re.search(r"<m[io]>(\\[A-Za-z]+)</m[io]>", shown):
        raise ValueError(f"the equation {source[:60]!r} uses {unknown[1]}, which is unknown here")
    shown = shown.replace(' xmlns="http://www.w3.org/1998/Math/MathML"', "")
    return shown.replace("<math", f'<math alttext="{escape(source)}"', 1)


def without_equations(text: str) -> tuple[str, list[str]]:
    """The text with a mark for each equation, and the equations as MathML.

    Code keeps its dollars. An equation of a named environment is taken whole.
    """
    if _MARK in text:
        raise ValueError(f"the text holds {_MARK!r}, which marks equations; write it otherwise")
    kept: list[str] = []

    def keep(found: re.Match[str]) -> str:
        inline = found["inline"]
        latex = inline or found["block"] or found["named"]
        if found["named"] and found["name"].rstrip("*") == "equation":
            latex = re.sub(r"\\(?:begin|end)\{equation\*?\}", "", latex)
        kept.append(math_html(latex, block=inline is None))
        return f"{_MARK}{len(kept) - 1}x"

    parts, end = [], 0
    for code in _CODE.finditer(text):
        parts += [_EQUATION.sub(keep, text[end : code.start()]), code[0]]
        end = code.end()
    parts.append(_EQUATION.sub(keep, text[end:]))
    return "".join(parts), kept


def markdown_html(text: str, rewrite: NarrativePass) -> str:
    """Markdown as HTML, with equations set and the pass made over it."""
    from nbconvert.filters import markdown2html

    # The filter wants attached pictures for itself and has none; the pass puts them in.
    marked, equations = without_equations(text.replace("](attachment:", f"]({_ATTACHED}"))
    html = re.sub(r"<!--.*?-->", "", markdown2html(marked), flags=re.S)
    html = rewrite.over(html, equations)
    return _MARKED.sub(lambda mark: equations[int(mark[1])], html)


class NarrativePass(HTMLParser):
    """Goes over the HTML of a text and writes it out as the report needs it.

    Headings go one level down and get names of their own, the first one of the top level is
    taken out as the title of the chapter; pictures are put inside; links to other workbooks
    lead to their chapters, links to files are left as words.

    Parameters
    ----------
    prefix : str
        Beginning of the names of headings, one to a chapter.
    picture : callable
        Gives the data address of a picture by the address it has in the text.
    chapters : mapping of file name to str
        Name of the chapter of each workbook.
    """

    def __init__(
        self, prefix: str, picture: Callable[[str], str], chapters: Mapping[str, str]
    ) -> None:
        super().__init__(convert_charrefs=False)
        self.title = ""
        self.sections: list[tuple[int, str, str]] = []
        self._prefix = prefix
        self._picture = picture
        self._chapters = chapters
        self._equations: list[str] = []
        self._parts: list[str] = []
        self._heading: list[str] | None = None
        self._skipping = False
        self._links: list[bool] = []

    def over(self, html: str, equations: list[str]) -> str:
        """The HTML as it goes into the report."""
        self._parts, self._heading, self._links = [], None, []
        self._equations = equations
        self.reset()
        self.feed(html)
        self.close()
        return "".join(self._parts)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        values = {name: value or "" for name, value in attrs}
        if tag in _HEADINGS:
            self._heading = []
            return
        if tag == "a" and "anchor-link" in values.get("class", ""):
            self._skipping = True
            return
        if tag == "a":
            address = self._address(values.get("href", ""))
            self._links.append(bool(address))
            if address:
                self._write(f'<a href="{escape(address)}" rel="noreferrer">')
            return
        if tag == "img":
            values["src"] = self._picture(values.get("src", ""))
            self._write("<img" + "".join(f' {k}="{escape(v)}"' for k, v in values.items()) + ">")
            return
        self._write(self.get_starttag_text() or "")

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)

    def handle_endtag(self, tag: str) -> None:
        if tag in _HEADINGS and self._heading is not None:
            self._close_heading(_HEADINGS.index(tag) + 1)
        elif tag == "a" and self._skipping:
            self._skipping = False
        elif tag == "a":
            if self._links and self._links.pop():
                self._write("</a>")
        else:
            self._write(f"</{tag}>")

    def handle_data(self, data: str) -> None:
        self._write(data)

    def handle_entityref(self, name: str) -> None:
        self._write(f"&{name};")

    def handle_charref(self, name: str) -> None:
        self._write(f"&#{name};")

    def handle_decl(self, decl: str) -> None:
        self._write(f"<!{decl}>")  # the check refuses it, with words

    def _write(self, text: str) -> None:
        if not self._skipping:
            (self._parts if self._heading is None else self._heading).append(text)

    def _close_heading(self, level: int) -> None:
        inner = "".join(self._heading or ())
        self._heading = None
        shown = _MARKED.sub(lambda mark: self._equations[int(mark[1])], inner)
        if level == 1 and not self.title:
            self.title = re.sub(r"^\s*\d+[.):]?\s+", "", unescape(re.sub(r"<[^>]+>", "", shown)))
            return
        name = f"{self._prefix}-{len(self.sections) + 1}"
        self.sections.append((max(level, 2), name, re.sub(r"</?a\b[^>]*>", "", shown)))
        tag = f"h{min(max(level, 2) + 1, 6)}"
        self._parts.append(f'<{tag} id="{name}">{inner}</{tag}>')

    def _address(self, address: str) -> str:
        """Where a link leads in the report; empty when it leads nowhere a reader could go."""
        if re.match(r"(?:https?://|mailto:)", address, re.I):
            return address
        file = address.split("#")[0].rsplit("/", 1)[-1]
        return f"#{self._chapters[file]}" if file in self._chapters else ""


def picture_address(name: str, attachments: Mapping[str, Any], read: Callable[[str], bytes]) -> str:
    """The data address of a picture in a text.

    Parameters
    ----------
    name : str
        Its address: ``data:``, ``attachment:`` or a file.
    attachments : mapping
        Pictures that came with the cell.
    read : callable
        Reads a file by its name.
    """
    if name.startswith("data:"):
        return name
    if name.startswith(("attachment:", _ATTACHED)):
        file = unquote(name.split(":", 1)[1])
        bundle = attachments.get(file)
        if not bundle:
            raise ValueError(f"the picture {file!r} did not come with its cell; paste it again")
        kind, data = next(iter(bundle.items()))
        return f"data:{kind};base64,{''.join(str(data).split())}"
    if re.match(r"[a-z][a-z0-9+.-]+:|//", name, re.I):
        raise ValueError(
            f"the picture {name!r} lies outside the study; save it beside the workbook"
        )
    kind = mimetypes.guess_type(name)[0] or "image/png"
    return f"data:{kind};base64,{base64.b64encode(read(name)).decode('ascii')}"
