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

from fluteprobe.sound.decoding import NO_SOUND_FOUND, PROTECTED

_STARTS = (b"ftyp", b"moov", b"mdat", b"wide", b"free", b"skip", b"pnot")
_UNREAD = (b"mdat", b"free", b"skip", b"wide", b"uuid")
_FEW_PIECES = 2**20  # old kinds of sound count single samples, of which a byte holds a few
_MOST_EDITS = 1000
_MOST_INDEX_BYTES = 2**26
_COUNTS = re.compile(rb"(?:(?:stsz|stz2).{8}|trun.{4})(.{4})", re.DOTALL)
_EDITS = re.compile(rb"elst.{4}(.{4})", re.DOTALL)


def fault_of(descriptor: int) -> str | None:
    """Return, in words, why an MP4 file had better not be given to a decoder; None where it may be.

    A decoder lists all pieces that are announced, 24 bytes for each, before it reads the first; so there may
    be no more pieces than the file has bytes, and no more edits than a person makes.
    """
    with os.fdopen(descriptor, "rb", closefd=False) as file:
        pieces, size = 0, os.fstat(descriptor).st_size
        for name, start, stop in _boxes(file, size):
            if name in _UNREAD:
                continue
            file.seek(start)
            content = file.read(min(stop - start, _MOST_INDEX_BYTES + 1))
            pieces += _sum(_COUNTS, content)
            few = max(size, min(8 * size, _FEW_PIECES))
            if pieces > few or _sum(_EDITS, content) > _MOST_EDITS or len(content) > _MOST_INDEX_BYTES:
                return NO_SOUND_FOUND
            if b"cmov" in content:  # a compressed index, which could hold anything; unused for twenty years
                return NO_SOUND_FOUND
            if b"schm" in content:
                return PROTECTED
    return None


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
