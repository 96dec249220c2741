"""The text of a file: out of its wrapper, in UTF-8, split into header and body.

Here a file is opened and looked over for what no text should hold. Plain text stays on
disk and is looked over in passing; packed or recoded text is held in memory. The columns are the
business of `text_files`.
"""

from __future__ import annotations

import codecs
import csv
import gzip
import hashlib
import io
import zipfile
import zlib
from collections.abc import Callable, Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

import numpy as np

from windkit.study.errors import StudyError
from windkit.study.stations import StationSettings

__all__ = ["LARGEST_TEXT", "Look", "TextSource", "open_text", "refuse_too_large", "split_fields"]

#: Largest text, unpacked, that is read at once [bytes]; 20 years of 24 ten-minute channels take
#: about 0.4e9. Common practice for a laptop: the columns then need about as much memory again.
LARGEST_TEXT = 1_200_000_000
_PIECE = 1 << 20
#: A header block is looked for in the first bytes only.
_HEAD = 1 << 18


@dataclass(frozen=True)
class Look:
    """What one pass over a text gives: hash of the file, first NUL byte, count of delimiters."""

    sha256: str
    nul_at: int
    delimiters: int


@dataclass(frozen=True)
class TextSource:
    """One text, ready to be split into rows.

    Attributes
    ----------
    file : str
        Path as written in the settings.
    path : Path
        The file on disk.
    held : bytes or None
        The text in UTF-8, where it had to be unpacked or recoded; None if it stands on disk.
    start : int
        Offset of the first byte behind the header.
    header : str
        The line with the column names.
    header_line, first_line : int
        Line of the header, and of the first row.
    header_delimiters : int
        How often the delimiter stands up to the first row.
    looked : Future
        What one pass over the whole file gives; it runs beside the parsing.
    notes : tuple of str
        What was met that changes no value.
    """

    file: str
    path: Path
    held: bytes | None
    start: int
    header: str
    header_line: int
    first_line: int
    header_delimiters: int
    looked: Future[Look]
    notes: tuple[str, ...]

    @property
    def delimiters(self) -> int:
        """How often the delimiter stands behind the header."""
        return self.looked.result().delimiters - self.header_delimiters

    @property
    def sha256(self) -> str:
        """Hash of the file as sent."""
        return self.looked.result().sha256

    def refuse_damage(self) -> None:
        """Refuse a text with NUL bytes, wherever they stand."""
        at = self.looked.result().nul_at
        if at < 0:
            return
        before = self.path.read_bytes() if self.held is None else self.held
        raise StudyError.of(
            file=self.file,
            line=before.count(b"\n", 0, at) + 1,
            met="there is a NUL byte",
            rule="a text file has none; a logger or a disk that lost power leaves them",
            remedy="ask for the file again; if that is all there is, delete the damaged lines "
            "from a copy and say so in the study's notes",
        )

    @cached_property
    def body(self) -> bytes:
        """The rows as bytes, read from disk if need be."""
        data = self.path.read_bytes() if self.held is None else self.held
        return data[self.start :]

    def rows(self, settings: StationSettings) -> Iterator[tuple[int, list[str]]]:
        """Line and fields of each row that is not blank; slow, exact.

        Raises
        ------
        StudyError
            If a line is not UTF-8 or cannot be split.
        """
        try:
            text = self.body.decode("utf-8")
        except UnicodeDecodeError as error:
            line = self.first_line + self.body[: error.start].count(b"\n")
            raise not_decoded(self.file, line, "utf-8", error) from error
        sign = " " if settings.delimiter == "whitespace" else settings.delimiter
        reader = csv.reader(io.StringIO(text, newline=""), delimiter=sign)
        before = 0
        try:
            for fields in reader:
                line, before = self.first_line + before, reader.line_num
                if fields and (len(fields) > 1 or fields[0].strip()):
                    yield line, fields
        except csv.Error as error:
            raise StudyError.of(
                file=self.file,
                line=self.first_line + before,
                met=f"the line cannot be split into fields ({error})",
                rule="quotation marks come in pairs",
                remedy="correct the line in a copy of the file",
            ) from error


def open_text(path: Path, written: str, settings: StationSettings) -> TextSource:
    """Open a text file, look it over and find its header.

    Parameters
    ----------
    path, written : Path, str
        The file (``.gz`` and ``.zip`` are unpacked), and its name for messages.
    settings : StationSettings
        Encoding, delimiter, and where the header stands.

    Raises
    ------
    StudyError
        If the wrapper is damaged, the text too large, empty, in another encoding, or holds NUL
        bytes, or the header line is not there.
    """
    refuse_too_large(path, written)
    packed = path.suffix.lower() in {".gz", ".zip"}
    recoded = settings.encoding.lower().replace("_", "-") not in {"utf-8", "utf8", "ascii"}
    sign = settings.delimiter.encode("utf-8")
    if not packed and not recoded and settings.delimiter != "whitespace":
        with path.open("rb") as stream:
            head = stream.read(_HEAD)
        if b"\n" in head and not head.isspace():
            return _split(head, None, _beside(_look_over, path, sign), path, written, settings)
    data = _unpacked(path, written)
    if recoded:
        data = _recoded(data, written, settings.encoding)
    if b"\n" not in data:
        data = data.replace(b"\r", b"\n")  # lines of very old systems end in CR alone
    if settings.delimiter == "whitespace":
        data = b"\n".join(b" ".join(line.split()) for line in data.splitlines())
        sign = b" "
    return _split(data, data, _beside(_look_at, path, data, sign), path, written, settings)


def _beside(work: Callable[..., Look], *given: object) -> Future[Look]:
    """Run something in a thread of its own while this one goes on."""
    pool = ThreadPoolExecutor(max_workers=1)
    future = pool.submit(work, *given)
    pool.shutdown(wait=False)
    return future


def _look_over(path: Path, sign: bytes) -> Look:
    digest = hashlib.sha256()
    nul_at, delimiters, place = -1, 0, 0
    buffer = bytearray(_PIECE)
    counted = np.frombuffer(buffer, dtype=np.uint8)
    with path.open("rb", buffering=0) as stream:
        while count := stream.readinto(buffer):
            digest.update(memoryview(buffer)[:count])
            # As an array because counting a frequent byte in a bytes object is ten times slower.
            delimiters += int(np.count_nonzero(counted[:count] == sign[0]))
            if nul_at < 0:
                nul = buffer.find(0, 0, count)
                nul_at = place + nul if nul >= 0 else -1
            place += count
    return Look(digest.hexdigest(), nul_at, delimiters)


def _look_at(path: Path, data: bytes, sign: bytes) -> Look:
    return Look(hashlib.sha256(path.read_bytes()).hexdigest(), data.find(b"\0"), data.count(sign))


def _unpacked(path: Path, written: str) -> bytes:
    try:
        if path.suffix.lower() == ".gz":
            with gzip.open(path) as stream:
                data = stream.read(LARGEST_TEXT + 1)
        elif path.suffix.lower() == ".zip":
            data = _only_member(path, written)
        else:
            with path.open("rb") as plain:
                data = plain.read()
    except (OSError, EOFError, zlib.error, zipfile.BadZipFile, RuntimeError) as error:
        raise StudyError.of(
            file=written,
            met=f"the file cannot be unpacked ({error})",
            rule="a packed file is whole and without a password",
            remedy="ask for the file again, or unpack it and name the text file",
        ) from error
    if len(data) > LARGEST_TEXT:
        raise _too_large(written)
    return data


def refuse_too_large(path: Path, written: str) -> None:
    """Refuse a file that is larger than `LARGEST_TEXT` as it lies on disk."""
    if path.stat().st_size > LARGEST_TEXT:
        raise _too_large(written)


def _too_large(written: str) -> StudyError:
    return StudyError.of(
        file=written,
        met=f"the text is larger than {LARGEST_TEXT / 1e9:.1f} GB",
        rule="a file is read at once",
        remedy="split it by year and list the parts in files, or convert it to Parquet",
    )


def _only_member(path: Path, written: str) -> bytes:
    with zipfile.ZipFile(path) as archive:
        members = [info for info in archive.infolist() if not info.is_dir()]
        if len(members) != 1:
            names = ", ".join(info.filename for info in members[:5]) or "nothing"
            raise StudyError.of(
                file=written,
                met=f"the archive holds {len(members)} files: {names}",
                rule="a zip holds one text file",
                remedy="unpack it and list the wanted files in files",
            )
        with archive.open(members[0]) as stream:
            return stream.read(LARGEST_TEXT + 1)


def _split(
    data: bytes,
    held: bytes | None,
    looked: Future[Look],
    path: Path,
    written: str,
    settings: StationSettings,
) -> TextSource:
    """Refuse what is no text, and find header and first row; `data` holds at least the head."""
    if data.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        raise StudyError.of(
            file=written,
            met="the file starts with a UTF-16 byte-order mark",
            rule=f"the text is {settings.encoding}, as declared",
            remedy='write encoding = "utf-16", or save the file as UTF-8',
        )
    notes = []
    start = 0
    if data.startswith(codecs.BOM_UTF8):
        start = len(codecs.BOM_UTF8)
        notes.append(f"{written} starts with a byte-order mark; it is read as UTF-8")
    if data[start:].isspace() or len(data) == start:
        raise StudyError.of(
            file=written,
            met="the file is empty",
            rule="a file has a header line and rows",
            remedy="ask for the file again, or take it out of files",
        )
    for skipped in range(settings.skip_rows):
        end = data.find(b"\n", start)
        if end < 0:
            raise StudyError.of(
                file=written,
                met=f"the file has {skipped + 1} lines",
                rule=f"the header stands after skip_rows = {settings.skip_rows} lines",
                remedy="correct skip_rows",
            )
        start = end + 1
    end = _line_end(data, start)
    header_line = settings.skip_rows + 1
    try:
        header = data[start:end].decode("utf-8").rstrip("\r")
    except UnicodeDecodeError as error:
        raise not_decoded(written, header_line, "utf-8", error) from error
    for _ in range(settings.skip_rows_after_header):
        end = _line_end(data, end + 1)
    start = min(end + 1, len(data))
    sign = b" " if settings.delimiter == "whitespace" else settings.delimiter.encode("utf-8")
    return TextSource(
        file=written,
        path=path,
        held=held,
        start=start,
        header=header,
        header_line=header_line,
        first_line=header_line + settings.skip_rows_after_header + 1,
        header_delimiters=data.count(sign, 0, start),
        looked=looked,
        notes=tuple(notes),
    )


def _line_end(data: bytes, start: int) -> int:
    end = data.find(b"\n", start)
    return len(data) if end < 0 else end


def _recoded(data: bytes, written: str, encoding: str) -> bytes:
    try:
        return data.decode(encoding).lstrip("\ufeff").encode("utf-8")
    except LookupError as error:
        raise StudyError.of(
            file=written,
            met=f'encoding is "{encoding}"',
            rule="it is the name of a text encoding",
            remedy='write "utf-8", "cp1252", "latin-1" or "utf-16"',
        ) from error
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise not_decoded(written, line, encoding, error) from error


def not_decoded(written: str, line: int, encoding: str, error: UnicodeDecodeError) -> StudyError:
    """The error for a byte that the declared encoding has not got."""
    byte = error.object[error.start]
    return StudyError.of(
        file=written,
        line=line,
        met=f"byte 0x{byte:02x} is not {encoding} text",
        rule="the text is in the declared encoding",
        remedy='write encoding = "cp1252" for a file from a Windows machine, or save it as UTF-8',
    )


def split_fields(line: str, settings: StationSettings) -> list[str]:
    """The fields of one line, their blanks cut off."""
    if settings.delimiter == "whitespace":
        return line.split()
    fields = next(csv.reader([line], delimiter=settings.delimiter), [])
    return [name.strip() for name in fields]
