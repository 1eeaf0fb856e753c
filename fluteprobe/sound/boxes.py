"""What the boxes of an MP4 file (M4A, MOV, 3GP too) announce, looked at before a decoder believes it.

Conventions: sizes and offsets in bytes. Names and fields are those of ISO/IEC 14496-12: a box is a 32-bit
size, a four-letter name, and for size 1 a 64-bit size; a file is a row of boxes. `stsz`, `stz2` and `trun`
announce how many pieces of sound or picture (samples, there) follow, `elst` how many edits. Other files have
no such boxes and pass.
"""

import os
import re
from collections.abc import Iterator
from typing import BinaryIO

_STARTS = (b"ftyp", b"moov", b"mdat", b"wide", b"free", b"skip", b"pnot")
_UNREAD = (b"mdat", b"free", b"skip", b"wide", b"uuid")
_MOST_EDITS = 1000
_MOST_INDEX_BYTES = 2**26
_COUNTS = re.compile(rb"(?:(?:stsz|stz2).{8}|trun.{4})(.{4})", re.DOTALL)
_EDITS = re.compile(rb"elst.{4}(.{4})", re.DOTALL)


def announces_too_much(descriptor: int) -> bool:
    """Return whether an MP4 file announces more pieces than it has bytes, or more edits than a person makes.

    A decoder makes a list of all pieces that are announced, 24 bytes for each, before it reads the first.
    """
    with os.fdopen(descriptor, "rb", closefd=False) as file:
        size = os.fstat(descriptor).st_size
        pieces = 0
        for name, start, stop in _boxes(file, size):
            if name in _UNREAD:
                continue
            if stop - start > _MOST_INDEX_BYTES:
                return True
            file.seek(start)
            content = file.read(stop - start)
            pieces += _sum(_COUNTS, content)
            if pieces > size or _sum(_EDITS, content) > _MOST_EDITS or b"cmov" in content:
                return True
    return False


def is_unfinished(descriptor: int) -> bool:
    """Return whether an MP4 file lacks its index, which recorders write last."""
    with os.fdopen(descriptor, "rb", closefd=False) as file:
        names = [name for name, _, _ in _boxes(file, os.fstat(descriptor).st_size)]
    return b"mdat" in names and b"moov" not in names


def _boxes(file: BinaryIO, size: int) -> Iterator[tuple[bytes, int, int]]:
    """Yield (name, start, stop) of the boxes in a row, as far as they make sense; stop is within the file."""
    start = 0
    while start < size:
        file.seek(start)
        head = file.read(16)
        if len(head) < 8 or (start == 0 and head[4:8] not in _STARTS):
            return
        length = _number(head[:4])
        if length == 1:
            length = _number(head[8:16])
        stop = size if length == 0 else start + length
        yield head[4:8], start, min(stop, size)
        if stop < start + 8:
            return
        start = stop


def _sum(counts: re.Pattern[bytes], content: bytes) -> int:
    return sum(_number(count) for count in counts.findall(content))


def _number(field: bytes) -> int:
    return int.from_bytes(field, "big")
