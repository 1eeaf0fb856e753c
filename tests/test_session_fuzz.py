"""Hostile session folders: whatever flute.toml and takes.csv hold, people get short, harmless lines, soon.

Content is drawn as bytes, as text and as damaged good files. What must hold: no traceback (a SessionError or
problems), nothing outside the session, no control characters, a bounded number of lines.
"""

import time
import tracemalloc
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from sessions import is_harmless

from fluteprobe.session import (
    FluteFacts,
    Session,
    SessionError,
    Sitting,
    create_session,
    facts_text,
    read_session,
)

QUIET = settings(max_examples=120, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
MOST_LINES, LONGEST_LINE = 60, 500
LONGEST_S, MOST_BYTES = 6.0, 60_000_000  # memory is traced, which makes it several times as slow

GOOD = facts_text(FluteFacts(name="Heron", holes=2, holes_mm=((105.0, 9.0), (127.0, 9.5))), Sitting())
TOML_PIECES = [
    "[flute]", "[session]", "[[flute]]", "[flute", "holes", "=", "name", "6", '"', "'", '"""', "'''", "“",
    "\r", "\t", " ", "#", ",", ".", "[", "]", "{", "}", "holes_mm", "[[1,2],", "440,0", "22 °C", "\x1b[2J",
    "\u202e", "\ufeff", "\u00a0", "１", "nan", "inf", "1e400", "0x", "1979-05-27", "\\",
    "\\u0000", "a.b.c", "９" * 50, "\n", "\n",
]  # fmt: skip
CSV_PIECES = [
    "file", "fingering", "breath", "number", ",", ",", ";", "\t", "\n", "\n", '"', "xx", "ox", "over", "ovr",
    "../", "/", "\\", "C:", "~/", "away.wav", "in.wav", "out", "takes", ".", "..", "\x1b[31m", "\u202e",
    "=1+1", "2",    "\ufeff", "sep=;", "０", "х",
]  # fmt: skip


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a session folder with two takes, beside a recording that is none of its business."""
    place = tmp_path_factory.mktemp("hostile")
    (place / "away.wav").write_bytes(b"away")
    folder = place / "heron"
    create_session(folder, FluteFacts(name="Heron", holes=2))
    for name in ("xx.wav", "in.wav"):
        (folder / "takes" / name).write_bytes(name.encode())
    (folder / "takes" / "out").symlink_to(place)
    return folder


def told(folder: Path) -> list[str]:
    """Return what is told of a session; whatever was read lies inside it."""
    session: Session | None = None
    lines: list[str] = []
    try:
        session = read_session(folder)
    except SessionError as error:
        lines = list(error.faults)
    if session is not None:
        lines = [f"{problem.take}: {problem.message}" for problem in session.problems]
        home = folder.resolve()
        assert all(take.path.resolve().is_relative_to(home) for take in session.takes)
        assert is_harmless("".join(take.name for take in session.takes) + session.flute.name)
    assert all(is_harmless(line) and len(line) < LONGEST_LINE for line in lines)
    assert len(lines) <= MOST_LINES
    return lines


def damaged(text: str) -> st.SearchStrategy[str]:
    """Draw a text with a piece of it replaced by a few other letters."""
    return st.tuples(st.integers(0, len(text)), st.integers(0, 30), st.text(max_size=6)).map(
        lambda cut: text[: cut[0]] + cut[2] + text[cut[0] + cut[1] :]
    )


@QUIET
@given(st.binary(max_size=200) | st.binary(max_size=80).map(lambda more: GOOD.encode() + more))
def test_any_bytes_in_a_flute_toml_are_told_in_short_harmless_lines(folder: Path, content: bytes) -> None:
    (folder / "flute.toml").write_bytes(content)
    told(folder)


@QUIET
@given(
    st.lists(st.sampled_from(TOML_PIECES), max_size=40).map("".join) | damaged(GOOD) | st.text(max_size=100)
)
def test_any_text_in_a_flute_toml_is_told_in_short_harmless_lines(folder: Path, text: str) -> None:
    (folder / "flute.toml").write_text(text, encoding="utf-8", errors="replace")
    told(folder)


@QUIET
@given(
    st.binary(max_size=200)
    | st.lists(st.sampled_from(CSV_PIECES), max_size=60).map(lambda words: "".join(words).encode())
    | st.lists(st.sampled_from(CSV_PIECES), max_size=60).map(
        lambda words: ("file,fingering,breath,number\n" + "".join(words)).encode()
    )
    | st.text(max_size=100).map(lambda text: text.encode("utf-8", "replace"))
)
def test_any_takes_csv_is_told_in_short_harmless_lines(folder: Path, content: bytes) -> None:
    (folder / "flute.toml").write_text("[flute]\nholes = 2\n")
    (folder / "takes.csv").write_bytes(content)
    told(folder)
    (folder / "takes.csv").unlink()


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("flute.toml", b"a" * 90_000),
        ("flute.toml", b"[" * 1900 + b"\n" + b"[" * 1900),
        ("flute.toml", (b"x = " + b"[" * 900 + b"\n") * 90),
        ("flute.toml", b"[flute]\n" + b"a" * 1900 + b" = " + b"\n=" * 40_000),
        ("flute.toml", b"[flute]\n" + b".".join([b"a"] * 900) + b" = 1\n" + b" " * 1900 + b"= 2\n" * 9000),
        ("flute.toml", b"[flute]\nname = '''" + b"\nholes = 6" * 9000),
        ("flute.toml", b"\n".join(b"[a%d]" % k for k in range(12_000))),
        ("flute.toml", b"[flute]\n" + b"\n".join(b"k%d = %d" % (k, k) for k in range(8000))),
        ("flute.toml", b"[flute]\nholes_mm = [" + b"\n  [1, 2]," * 9000),
        ("flute.toml", b"[flute]\n" + b"holes = 6\n" * 9000),
        ("flute.toml", b"[flute]\nholes = 1\n" * 5000),
        ("flute.toml", b"#" * 3_000_000),
        ("takes.csv", b"file,fingering\n" + b"in.wav,ox\n" * 1990),
        ("takes.csv", b"file,fingering,breath\n" + b"/".join([b"a"] * 200) + b",zz,zzzzz\n" * 1900),
        ("takes.csv", b"file,fingering\n" + b'"' * 400_000),
        ("takes.csv", b"file,fingering\n" + b"a" * 400_000),
        ("takes.csv", b",".join([b"file"] * 90_000)),
        ("takes.csv", b"file,fingering\n" + b"," * 400_000),
        ("takes.csv", b"file,fingering\n" * 100_000),
    ],
)  # fmt: skip
def test_what_is_made_to_take_long_or_much_memory_does_not(folder: Path, name: str, content: bytes) -> None:
    (folder / "flute.toml").write_text("[flute]\nholes = 2\n")
    (folder / name).write_bytes(content)
    tracemalloc.start()
    began = time.perf_counter()
    lines = told(folder)
    took, most = time.perf_counter() - began, tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    (folder / "takes.csv").unlink(missing_ok=True)
    assert lines
    assert took < LONGEST_S
    assert most < MOST_BYTES
