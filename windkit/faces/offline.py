"""Whether HTML stands on its own: no script, no request to anywhere, nothing of the machine.

Here: the check of a piece of HTML before it goes into the report and of the whole report before
it is written, and the search for paths of the machine the study ran on. Not here: rendering.

The check lets through what is known to be harmless and refuses everything else. The report also
tells the browser to refuse requests (`CONTENT_POLICY`), so what a reader opens is held twice.
"""

from __future__ import annotations

import re
from html.parser import HTMLParser
from pathlib import Path

__all__ = [
    "CONTENT_POLICY",
    "check_document",
    "check_fragment",
    "machine_path",
    "without_folder",
]

#: What the browser is told: pictures and style from the file itself, nothing else.
CONTENT_POLICY = (
    "default-src 'none'; img-src data:; style-src 'unsafe-inline'; base-uri 'none'; "
    "form-action 'none'"
)


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


_TEXT_TAGS = _words(
    "a abbr aside b blockquote br caption cite code col colgroup dd del details dfn div dl dt "
    "em figcaption figure footer h1 h2 h3 h4 h5 h6 header hr i img input ins kbd li main mark "
    "nav ol p pre q s samp section small span strong style sub summary sup table tbody td "
    "tfoot th thead time tr tt u ul var wbr"
)
_PICTURE_TAGS = _words(
    "circle clippath defs desc ellipse g line lineargradient path polygon polyline rect stop "
    "svg symbol text title tspan use"
)
_MATH_TAGS = _words(
    "math menclose mfrac mi mlabeledtr mmultiscripts mn mo mover mpadded mphantom mprescripts "
    "mroot mrow ms mspace msqrt mstyle msub msubsup msup mtable mtd mtext mtr munder "
    "munderover none"
)
_FRAGMENT_TAGS = _TEXT_TAGS | _PICTURE_TAGS | _MATH_TAGS
_DOCUMENT_TAGS = _FRAGMENT_TAGS | {"html", "head", "body", "meta"}
_VOID_TAGS = _words("br col hr img input meta wbr")
#: Tags a browser closes by itself, and so do writers of HTML.
_OPTIONAL_END = _words("p li dt dd td th tr tbody thead tfoot colgroup")

_ADDRESS_ATTRIBUTES = _words(
    "action archive background classid code codebase data dynsrc formaction href imagesrcset "
    "longdesc lowsrc manifest ping poster profile src srcdoc srcset usemap xlink:href"
)
_PICTURE_DATA = re.compile(r"data:image/(?:png|jpeg|gif|webp|svg\+xml);base64,[A-Za-z0-9+/=\s]+$")
_LINK = re.compile(r"(?:https?://|mailto:|#)", re.I)

#: Style that could fetch something or run something; a backslash could hide either.
_CSS_REFUSED = re.compile(
    r"@import|image-set\s*\(|\bsrc\s*\(|expression\s*\(|behavior\s*:|-moz-binding|\\", re.I
)
_CSS_URL = re.compile(r"url\s*\(\s*[\"']?\s*(?!data:image/|#)", re.I)

_MACHINE_PATH = re.compile(
    r"(?<![\w.:/~-])/(?:app|builds?|home|media|mnt|opt|private|root|runner|srv|tmp|usr|Users|var|"
    r"work|workspace|Volumes|Library)/[\w.+/-]+"
    r"|(?<!\w)[A-Za-z]:\\{1,2}(?:Users|Documents|Program|ProgramData|Temp|Windows)\b[^\s\"'<>]*"
)
_DATA_ADDRESS = re.compile(r"data:image/[a-z+]+;base64,[A-Za-z0-9+/=\s]*")


class _Reader(HTMLParser):
    """Goes through HTML and keeps the first thing that is wrong."""

    def __init__(self, tags: frozenset[str], *, whole: bool) -> None:
        super().__init__(convert_charrefs=True)
        self.problem = ""
        self._tags = tags
        self._whole = whole
        self._open: list[str] = []

    def read(self, html: str) -> str:
        self.feed(html)
        self.close()
        if left := [tag for tag in self._open if tag not in _OPTIONAL_END]:
            self._met(f"<{left[-1]}> is never closed")
        return self.problem

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        if tag not in self._tags:
            self._met(f"<{tag}> has no place in a file that stands on its own")
        values = {name: value or "" for name, value in attrs}
        if tag == "input" and values.get("type") != "checkbox":
            self._met("a form field cannot be filled in a report")
        if tag == "meta" and "http-equiv" in values:
            policy = values.get("content"), values["http-equiv"].lower()
            if policy != (CONTENT_POLICY, "content-security-policy"):
                self._met(f"<meta http-equiv={values['http-equiv']!r}> steers the browser")
        for name, value in values.items():
            self._read_attribute(tag, name, value)
        if tag not in _VOID_TAGS:
            self._open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)
        # Only a foreign tag closes itself; a browser takes <div/> for an opening one.
        if tag in _PICTURE_TAGS | _MATH_TAGS and self._open:
            self._open.pop()

    def handle_endtag(self, tag: str) -> None:
        if tag in _VOID_TAGS:
            return
        while self._open and self._open[-1] != tag and self._open[-1] in _OPTIONAL_END:
            self._open.pop()
        if self._open and self._open[-1] == tag:
            self._open.pop()
        elif tag != "p":
            self._met(f"</{tag}> closes what was never opened")

    def handle_data(self, data: str) -> None:
        if self._open and self._open[-1] == "style":
            self._read_style(data)

    def handle_comment(self, data: str) -> None:
        self._met("a comment could hide what follows it")

    def handle_decl(self, decl: str) -> None:
        if not (self._whole and decl.lower() == "doctype html"):
            self._met(f"<!{decl[:20]}> has no place here")

    def unknown_decl(self, data: str) -> None:
        self._met("an unknown declaration has no place here")

    def handle_pi(self, data: str) -> None:
        self._met("a processing instruction has no place here")

    def _read_attribute(self, tag: str, name: str, value: str) -> None:
        if name.startswith("on"):
            self._met(f"{name} on <{tag}> is a script")
        elif name == "style":
            self._read_style(value)
        elif name in _ADDRESS_ATTRIBUTES:
            inside = value.startswith("#") and tag in ("a", "use")
            link = tag == "a" and name == "href" and _LINK.match(value)
            picture = tag == "img" and name == "src" and _PICTURE_DATA.match(value)
            if not (inside or link or picture):
                self._met(f"{name}={value[:60]!r} on <{tag}> asks for something outside the file")
        elif "url(" in value.lower().replace(" ", "") and _CSS_URL.search(value):
            self._met(f"{name}={value[:60]!r} on <{tag}> asks for something outside the file")

    def _read_style(self, css: str) -> None:
        if found := _CSS_REFUSED.search(css) or _CSS_URL.search(css):
            self._met(f"style asks for something outside the file: {css[found.start() :][:60]!r}")

    def _met(self, problem: str) -> None:
        self.problem = self.problem or problem


def check_fragment(html: str) -> str:
    """What keeps a piece of HTML out of the report; empty when nothing does.

    Parameters
    ----------
    html : str
        A piece of a page, with every tag closed that it opens.
    """
    return _Reader(_FRAGMENT_TAGS, whole=False).read(html)


def check_document(html: str) -> None:
    """Refuse a page that does not stand on its own.

    Parameters
    ----------
    html : str
        The whole page.

    Raises
    ------
    ValueError
        With the first thing that asks for something outside, runs, or is never closed.
    """
    if problem := _Reader(_DOCUMENT_TAGS, whole=True).read(html):
        raise ValueError(f"the report would not stand on its own: {problem}")


def machine_path(text: str) -> str:
    """The first absolute path of a machine in a text, or an empty text.

    Parameters
    ----------
    text : str
        Text or HTML; pictures inside it are passed over.
    """
    found = _MACHINE_PATH.search(_DATA_ADDRESS.sub("", text))
    return found[0] if found else ""


def without_folder(text: str, folder: Path | str | None) -> str:
    """The text with paths inside a folder written relative to it.

    Parameters
    ----------
    text : str
        Text or HTML.
    folder : Path or str, optional
        The study folder; nothing is changed if left out.
    """
    if folder is None:
        return text
    spelled = {str(folder), str(Path(folder).absolute()), str(Path(folder).resolve())}
    for absolute in sorted((s for s in spelled if Path(s).is_absolute()), key=len, reverse=True):
        for spelling in {absolute, absolute.replace("\\", "\\\\")}:
            text = re.sub(re.escape(spelling) + r"[/\\]+(?=\w)", "", text)
            text = re.sub(re.escape(spelling) + r"(?![\w.-])", ".", text)
    return text
