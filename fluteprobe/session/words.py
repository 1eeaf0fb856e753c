"""Words for people: what is wrong and where, text made safe to show, reasons in plain words.

Conventions: a message is one line, says what is wrong and what to do, and holds no control character. Text
from files goes through `printable` before it is shown, and is cut where it is long.
"""

import errno
import json
import re
from dataclasses import dataclass
from typing import Any

UNSAFE = re.compile("[\x00-\x1f\x7f-\x9f\u061c\u200e\u200f\u2028-\u202e\u2066-\u2069\ufeff\ud800-\udfff]")

_LONGEST_SHOWN = 60
_PLAIN_REASONS = {
    errno.EACCES: "there is no permission",
    errno.EPERM: "there is no permission",
    errno.ENOSPC: "the disk is full",
    errno.EROFS: "the disk is read-only",
    errno.ENAMETOOLONG: "the name is too long",
    errno.ENOTDIR: "a part of its path is a file",
    errno.ELOOP: "its links lead round in a circle",
    errno.EIO: "the disk does not answer",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """Something that could not be used: which take (or file), what is wrong and what to do."""

    take: str
    message: str


class SessionError(ValueError):
    """A session folder that cannot be used. `faults` holds a line for people for each reason."""

    def __init__(self, *faults: str) -> None:
        super().__init__("\n".join(faults))
        self.faults = faults


def printable(text: str) -> str:
    r"""Return text with control characters, direction marks and undecodable bytes written out (`\x1b`)."""
    return UNSAFE.sub(lambda found: found[0].encode("unicode_escape").decode("ascii"), text)


def shown(text: str) -> str:
    """Return text safe to show and not too long."""
    text = printable(text)
    return text if len(text) <= _LONGEST_SHOWN else text[: _LONGEST_SHOWN - 1] + "…"


def shown_value(value: Any) -> str:
    """Return a value from flute.toml as one would write it there, on one line and not too long."""
    if isinstance(value, dict):
        return "a table"
    return shown(json.dumps(value, ensure_ascii=False, default=str))


def plain_reason(error: Exception) -> str:
    """Return the operating system's reason in plain words."""
    number = error.errno if isinstance(error, OSError) else None
    return _PLAIN_REASONS.get(number or 0) or printable(getattr(error, "strerror", None) or str(error))


def natural(text: str) -> list[tuple[int, str]]:
    """Return a sorting key that puts 2 before 10."""
    parts = re.split(r"([0-9]+)", text)
    return [(int(part[:300]), "") if part.isdecimal() else (0, part) for part in parts]
