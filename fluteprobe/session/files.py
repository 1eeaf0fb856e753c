"""Text files that people write in a session folder: read whole, in whatever encoding they were saved.

Conventions: nothing outside the session folder is read, links followed, and nothing beyond a given size. A
file is UTF-8 or UTF-16 where it says so or reads as such, and else Windows-1252, which older editors and
spreadsheets still save. Lines end in a newline alone.
"""

import codecs
import re
from collections import Counter
from collections.abc import Hashable, Sequence
from pathlib import Path

from fluteprobe.session.words import plain_reason

FACTS_FILE = "flute.toml"
LIST_FILE = "takes.csv"
TAKES_FOLDER = "takes"

_BYTE_ORDER_MARKS = {
    codecs.BOM_UTF8: "utf-8-sig",
    codecs.BOM_UTF16_LE: "utf-16",
    codecs.BOM_UTF16_BE: "utf-16",
}
_OTHER_KINDS = {
    b"{\\rtf": "is a word processor's file (RTF)",
    b"PK\x03\x04": "is a word processor's or spreadsheet's file",
    b"\xd0\xcf\x11\xe0": "is a word processor's or spreadsheet's file",
    b"%PDF": "is a PDF",
    b"<!DOC": "is a web page",
    b"<html": "is a web page",
}
_NO_TEXT = re.compile(
    "[\x00-\x08\x0e-\x1a\x1c-\x1f]"
)  # ESC apart: it may stand in a text, and is told with its line
_BLOCK_BYTES, _END_BYTES, _MOST_COMPARED = 1 << 20, 1 << 14, 10


class UnfitFileError(ValueError):
    """A file that cannot be used; its text goes on after the file's name."""


def is_inside(path: Path, folder: Path) -> bool:
    """Whether a path, links followed, stays in the folder."""
    try:
        return path.resolve().is_relative_to(folder.resolve())
    except (OSError, RuntimeError, ValueError):
        return False


def read_text(path: Path, folder: Path, largest_bytes: int, kind: str) -> str:
    """Return a text file of a session folder; `kind` says as what to save it where it is something else.

    Raises
    ------
    UnfitFileError
        If it leads out of the folder, cannot be read, is too long or no text.
    """
    if not is_inside(path, folder):
        raise UnfitFileError("is a link that leads out of the folder: put the file itself there")
    try:
        if not path.is_file():
            raise UnfitFileError("is no file that can be read")
        with path.open("rb") as file:
            content = file.read(largest_bytes + 1)
    except OSError as error:
        raise UnfitFileError(f"cannot be read: {plain_reason(error)}") from None
    for start, what in _OTHER_KINDS.items():
        if content.startswith(start):
            raise UnfitFileError(f"{what}: save it as {kind}")
    if len(content) > largest_bytes:
        raise UnfitFileError("is far too long: is it another file?")
    try:
        text = _decoded(content)
    except UnicodeDecodeError:
        raise UnfitFileError(f"has letters in a spelling that is not known: save it as {kind}") from None
    if _NO_TEXT.search(text):
        raise UnfitFileError(f"is no text: save it as {kind}")
    return text.replace("\r\n", "\n").replace("\r", "\n")


def require_recording(path: Path, folder: Path) -> None:
    """Raise an UnfitFileError unless a path, in a folder that is known to be inside, is a file inside."""
    if path.is_symlink() and not is_inside(path, folder):
        raise UnfitFileError("is a link that leads out of the session folder: put the recording itself there")
    if not path.is_file():
        raise UnfitFileError("is no ordinary file: put the recording itself there")


def first_copies(files: Sequence[tuple[Hashable, Path]]) -> list[int | None]:
    """Return for each file the first one of the same kind that holds the same, byte for byte, None for none.

    Files are read only where several of a kind have the same size; empty ones, and those that cannot be read,
    are no copies.
    """
    keys = [(kind, _size(path)) for kind, path in files]
    several = {key for key, times in Counter(keys).items() if times > 1 and key[1]}
    firsts: dict[tuple[Hashable, int], list[int]] = {}
    copies: list[int | None] = []
    for k, (key, (_, path)) in enumerate(zip(keys, files, strict=True)):
        alike = firsts.setdefault((key, _ends(path)), []) if key in several else []
        same = next((first for first in alike[:_MOST_COMPARED] if _is_same(files[first][1], path)), None)
        alike += [k] if same is None else []
        copies.append(same)
    return copies


def _size(path: Path) -> int:
    try:
        return path.stat().st_size
    except OSError:
        return 0


def _ends(path: Path) -> int:
    """Return a hash of the beginning and the end of a file, which tells most apart."""
    try:
        with path.open("rb") as file:
            beginning = file.read(_END_BYTES)
            file.seek(max(0, _size(path) - _END_BYTES))
            return hash((beginning, file.read(_END_BYTES)))
    except OSError:
        return 0


def _is_same(one: Path, other: Path) -> bool:
    try:
        with one.open("rb") as first, other.open("rb") as second:
            while block := first.read(_BLOCK_BYTES):
                if block != second.read(_BLOCK_BYTES):
                    return False
    except OSError:
        return False
    return True


def _decoded(content: bytes) -> str:
    """Return a file's text, by its byte order mark, its zeros, or as UTF-8, and else as Windows-1252."""
    for mark, encoding in _BYTE_ORDER_MARKS.items():
        if content.startswith(mark):
            return content.decode(encoding)
    if len(content) > 1 and not any(content[1:200:2]):
        return content.decode("utf-16-le")
    if len(content) > 1 and not any(content[0:200:2]):
        return content.decode("utf-16-be")
    try:
        return content.decode("utf-8")
    except UnicodeDecodeError:
        return content.decode("cp1252")
