"""Session folders for tests: files put into them, and what is told about them."""

import os
from pathlib import Path
from unicodedata import category

import pytest

from fluteprobe.session import SessionError, read_session


def put(folder: Path, *names: str) -> None:
    """Put files into takes/, each with bytes of its own."""
    for name in names:
        (folder / "takes" / name).write_bytes(name.encode("utf-8", "surrogateescape"))


def is_harmless(text: str) -> bool:
    """Whether text has neither control characters nor what UTF-8 cannot hold."""
    return not any(category(letter) in {"Cc", "Cs", "Zl", "Zp"} for letter in text)


def faults(folder: Path, text: str | bytes) -> list[str]:
    """Return what is told about a flute.toml, without the folder's name."""
    content = text if isinstance(text, bytes) else text.encode()
    (folder / "flute.toml").write_bytes(content)
    with pytest.raises(SessionError) as caught:
        read_session(folder)
    assert str(caught.value) == "\n".join(caught.value.faults)
    return [fault.removeprefix(f"{folder}{os.sep}") for fault in caught.value.faults]


def fault(folder: Path, text: str | bytes) -> str:
    """Return the only thing that is told about a flute.toml."""
    (only,) = faults(folder, text)
    return only


def problems(folder: Path) -> list[tuple[str, str]]:
    """Return the problems of a session, as pairs of what and why."""
    return [(problem.take, problem.message) for problem in read_session(folder).problems]


def takes(folder: Path) -> list[tuple[str, str, str, int]]:
    """Return the takes of a session: name, fingering, breath and number."""
    return [(t.name, str(t.fingering), t.breath, t.number) for t in read_session(folder).takes]
