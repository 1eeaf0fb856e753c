"""The folder on disk: flute.toml, takes.csv and takes/ become a Session, and back."""

import os
import shlex
from collections.abc import Container, Iterator, Sequence
from dataclasses import dataclass, field
from difflib import get_close_matches
from pathlib import Path, PurePosixPath

from fluteprobe.flute.fingering import BREATHS, Breath, Fingering
from fluteprobe.session.facts import FluteFacts, Sitting, facts_faults, facts_text, read_facts
from fluteprobe.session.files import (
    FACTS_FILE,
    LIST_FILE,
    TAKES_FOLDER,
    UnfitFileError,
    first_copies,
    is_inside,
    read_text,
    require_recording,
)
from fluteprobe.session.listing import read_listing
from fluteprobe.session.names import (
    TakeName,
    UnfitNameError,
    example,
    free_name,
    read_take_name,
    same_name,
    split_ending,
    stems_of,
    words_of,
)
from fluteprobe.session.words import Problem, SessionError, natural, plain_reason, printable

_LARGEST_FACTS_BYTES = 100_000
_NOT_OURS = frozenset({"thumbs.db", "icon\r"})  # what file managers leave behind
_NO_SOUND = frozenset({
    ".txt", ".md", ".rtf", ".odt", ".doc", ".docx", ".pdf", ".html", ".xml", ".json", ".toml", ".csv", ".ods",
    ".xlsx", ".png", ".jpg", ".jpeg", ".gif", ".heic", ".svg", ".ini", ".db", ".log", ".bak", ".tmp", ".py",
    ".zip",
})  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class Take:
    """One recording of one fingering. `name` is its path in the session folder, with forward slashes."""

    name: str
    path: Path
    fingering: Fingering
    breath: Breath
    number: int = 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Session:
    """One flute, one sitting: the facts, the conditions, the takes, and what could not be used."""

    folder: Path
    flute: FluteFacts
    sitting: Sitting
    takes: tuple[Take, ...]
    problems: tuple[Problem, ...] = field(default=())


def read_session(folder: Path | str) -> Session:
    """Return the session in a folder; takes that cannot be used become its problems.

    Raises
    ------
    SessionError
        If the folder or its flute.toml cannot be used; it tells all faults at once.
    """
    folder = Path(folder)
    facts = folder / FACTS_FILE
    _require_folder(folder)
    name = printable(str(facts))
    try:
        text = read_text(facts, folder, _LARGEST_FACTS_BYTES, "plain text (UTF-8)")
    except UnfitFileError as error:
        raise SessionError(f"{name} {error}") from None
    if not text.strip():
        raise SessionError(f"{name} is empty: write at least [flute] and, under it, holes = 6")
    flute, sitting = read_facts(text, name, folder.resolve().name)
    takes, problems = _find_takes(folder, flute)
    return Session(folder=folder, flute=flute, sitting=sitting, takes=takes, problems=problems)


def create_session(folder: Path | str, flute: FluteFacts, sitting: Sitting | None = None) -> Path:
    """Make a session folder with a commented flute.toml and an empty takes/, and return flute.toml's path.

    An existing folder is completed; nothing in it is overwritten.

    Raises
    ------
    SessionError
        If there is a flute.toml already, a value is out of range or the folder cannot be written.
    """
    folder = Path(folder)
    require_new(folder)
    facts = folder / FACTS_FILE
    faults = facts_faults(flute, sitting or Sitting())
    if faults:
        raise SessionError(*faults)
    text = facts_text(flute, sitting or Sitting())
    try:
        (folder / TAKES_FOLDER).mkdir(parents=True, exist_ok=True)
        _write_new(facts, text)
    except FileExistsError as error:
        raise SessionError(f"{printable(str(error.filename))} is a file, where a folder is needed") from None
    except (OSError, ValueError) as error:
        raise SessionError(f"{printable(str(folder))} cannot be made: {plain_reason(error)}") from None
    return facts


def _write_new(path: Path, text: str) -> None:
    """Write a file that is not there yet, whole or not at all."""
    with path.open("x", encoding="utf-8", newline="\n") as file:
        try:
            file.write(text)
            file.flush()
        except OSError:
            path.unlink()
            raise


def require_new(folder: Path) -> None:
    """Raise a SessionError if a folder holds a flute.toml already."""
    facts = folder / FACTS_FILE
    if os.path.lexists(facts):
        raise SessionError(f"{printable(str(facts))} exists already: edit it, or choose another folder")


# --- the folder ----------------------------------------------------------------------------------------


def _require_folder(folder: Path) -> None:
    """Raise a SessionError, with the likeliest cure, unless there is a folder with a flute.toml."""
    name = printable(str(folder))
    try:
        if not (folder / FACTS_FILE).is_file():
            raise SessionError(_what_is_missing(folder, name))
    except OSError as error:
        raise SessionError(f"{name} cannot be read: {plain_reason(error)}") from None
    except ValueError as error:
        if isinstance(error, SessionError):
            raise
        raise SessionError(f"{name} is no name that a folder can have") from None


def _what_is_missing(folder: Path, name: str) -> str:
    """Say why a folder is no session, and the likeliest cure."""
    begin = f"`fluteprobe begin {shlex.quote(name)}`"
    if not folder.exists():
        return f"{name}: no such folder; {_near_folder(folder)}make one with {begin}"
    if not folder.is_dir():
        return f"{name} is a file: give the session folder, the one that holds {FACTS_FILE}"
    if os.path.lexists(folder / FACTS_FILE):
        return f"{printable(str(folder / FACTS_FILE))} is no file that can be read"
    if (folder.resolve().parent / FACTS_FILE).is_file():
        parent = printable(str(folder.parent if folder.name not in {"", ".."} else folder / ".."))
        return f"{name} has no {FACTS_FILE}, but the folder above it has: give {parent}"
    likely = sorted(other for other in os.listdir(folder) if _is_meant_for_facts(other))  # noqa: PTH208
    if likely:
        return f"{name} has no {FACTS_FILE}, but {printable(likely[0])}: rename it to {FACTS_FILE}"
    return f"{name} has no {FACTS_FILE}: write one with {begin}"


def _is_meant_for_facts(name: str) -> bool:
    """Whether an editor may have made this of the name flute.toml."""
    return same_name(name) in {FACTS_FILE, "flute.txt", "flute", "flute.tml", "flute.rtf"} or same_name(
        name
    ).startswith(f"{FACTS_FILE}.")


def _near_folder(folder: Path) -> str:
    """Return a guess at the session that was meant, or nothing."""
    try:
        beside = [other.name for other in folder.parent.iterdir() if (other / FACTS_FILE).is_file()]
    except OSError:
        return ""
    near = get_close_matches(folder.name, beside, n=1)
    return f"did you mean {printable(str(folder.with_name(near[0])))}? If not, " if near else ""


# --- takes ---------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class _Found:
    """A recording whose fingering is known; `rank` says whose number counts first where two want the same."""

    name: str
    says: TakeName
    rank: int


def _find_takes(folder: Path, flute: FluteFacts) -> tuple[tuple[Take, ...], tuple[Problem, ...]]:
    """Return the takes in the order of their fingering, breath and number, and what is no take."""
    try:
        rows, in_list = read_listing(folder, flute.holes)
    except OSError as error:
        return (), (Problem(take=LIST_FILE, message=f"cannot be looked for: {plain_reason(error)}"),)
    names, problems = _candidates(folder)
    problems = [*in_list, *problems]
    found = [
        _Found(name=str(row.file), says=row.take, rank=0 if row.take.number else 2)
        for row in rows
        if row.take
    ]
    listed = {str(row.file) for row in rows}
    unlisted = [name for name in names if f"{TAKES_FOLDER}/{name}" not in listed]
    found += _named_takes(folder, flute, unlisted, problems)
    found = _without_copies(folder, found, problems)
    problems += _elsewhere(folder, flute, listed, bool(names or rows or problems))
    return _numbered(folder, found), tuple(problems)


def _candidates(folder: Path) -> tuple[list[str], list[Problem]]:
    """Return the names of the files in takes/ that may be takes, in natural order, and what is wrong."""
    takes, wrong = folder / TAKES_FOLDER, None
    names: list[str] = []
    if takes.is_symlink() and not is_inside(takes, folder):
        wrong = "is a link that leads out of the session folder: make it a folder"
    elif takes.exists() and not takes.is_dir():
        wrong = "is a file: make it a folder and put the recordings there"
    elif takes.is_dir():
        try:
            names = os.listdir(takes)  # noqa: PTH208  (names, also those that are no text)
        except OSError as error:
            wrong = f"cannot be read: {plain_reason(error)}"
    found = sorted((name for name in names if not _is_passed_over(takes / name)), key=_name_order)
    return found, [Problem(take=TAKES_FOLDER, message=wrong)] if wrong else []


def _is_passed_over(path: Path) -> bool:
    """Whether a file is hidden, a folder, or plainly no sound."""
    hidden = path.name.startswith(".") or path.name.endswith("~") or path.name.lower() in _NOT_OURS
    return hidden or path.suffix.lower() in _NO_SOUND or (path.is_dir() and not path.is_symlink())


def _name_order(name: str) -> tuple[list[tuple[int, str]], str]:
    """Return a sorting key that is the same on every file system, and puts 2 before 10."""
    return natural(same_name(name)), name


def _named_takes(
    folder: Path, flute: FluteFacts, names: Sequence[str], problems: list[Problem]
) -> Iterator[_Found]:
    """Return what the names of files say; those that say no fingering, or one twice, go to the problems."""
    known = words_of(flute.name) | words_of(folder.resolve().name)
    taken = stems_of(names)
    first_of: dict[str, str] = {}
    for name in names:
        stem = split_ending(name)[0]
        try:
            says = read_take_name(name, flute.holes, taken, known)
            require_recording(folder / TAKES_FOLDER / name, folder)
            _require_one_format(name, first_of.setdefault(same_name(stem), name), says, taken)
        except (UnfitNameError, UnfitFileError) as error:
            problems.append(Problem(take=f"{TAKES_FOLDER}/{printable(name)}", message=str(error)))
            continue
        rank = 0 if same_name(stem) == says.stem else 1 if says.number else 2
        yield _Found(name=f"{TAKES_FOLDER}/{name}", says=says, rank=rank)


def _require_one_format(name: str, first: str, says: TakeName, taken: Container[str]) -> None:
    """Raise an UnfitFileError for a take that is there already under another ending."""
    ending = split_ending(name)[1]
    if same_name(ending) != same_name(split_ending(first)[1]):
        free = free_name(says, ending, taken)
        raise UnfitFileError(f"is the same take as {printable(first)}: remove one, or rename it to {free}")


def _without_copies(folder: Path, found: Sequence[_Found], problems: list[Problem]) -> list[_Found]:
    """Return the takes without those that are another of the same fingering, byte for byte."""
    ordered = sorted(found, key=lambda each: each.rank)
    firsts = first_copies([(_kind(each), folder / each.name) for each in ordered])
    for each, first in zip(ordered, firsts, strict=True):
        if first is not None:
            message = (
                f"is a copy of {printable(ordered[first].name)}, the same recording: remove one of the two"
            )
            problems.append(Problem(take=printable(each.name), message=message))
    return [each for each, first in zip(ordered, firsts, strict=True) if first is None]


def _kind(found: _Found) -> tuple[Fingering, Breath]:
    return found.says.fingering, found.says.breath


def _numbered(folder: Path, found: Sequence[_Found]) -> tuple[Take, ...]:
    """Return the takes; those of one fingering and breath are numbered apart, if they can as they say."""
    taken: set[tuple[Fingering, Breath, int]] = set()
    last: dict[tuple[Fingering, Breath, int], int] = {}
    takes = []
    for each in sorted(found, key=lambda each: (each.rank, _name_order(each.name))):
        fingering, breath = _kind(each)
        wanted = (fingering, breath, each.says.number or 1)
        number = last.get(wanted, wanted[2])
        while (fingering, breath, number) in taken:
            number += 1
        last[wanted] = number
        taken.add((fingering, breath, number))
        path = folder / PurePosixPath(each.name)
        takes.append(Take(name=each.name, path=path, fingering=fingering, breath=breath, number=number))
    return tuple(sorted(takes, key=_take_order))


def _take_order(take: Take) -> tuple[str, int, int, str]:
    return str(take.fingering), BREATHS.index(take.breath), take.number, take.name


def _elsewhere(folder: Path, flute: FluteFacts, listed: set[str], has_takes: bool) -> Iterator[Problem]:
    """Tell recordings and a list that lie where they are not read, and a session without recordings."""
    names = sorted(os.listdir(folder), key=_name_order)  # noqa: PTH208
    strays = [name for name in names if name not in listed and _is_stray(folder, name, flute.holes)]
    for name in strays:
        yield Problem(take=printable(name), message=f"lies beside {FACTS_FILE}: move it into {TAKES_FOLDER}")
    misplaced = folder / TAKES_FOLDER / LIST_FILE
    if misplaced.is_file() and not any(same_name(name) == LIST_FILE for name in names):
        message = f"is not read there: move it beside {FACTS_FILE}"
        yield Problem(take=f"{TAKES_FOLDER}/{LIST_FILE}", message=message)
    if not has_takes and not strays:
        yield Problem(take=TAKES_FOLDER, message=_no_takes(folder, flute, names))


def _is_stray(folder: Path, name: str, holes: int) -> bool:
    """Whether a file beside flute.toml is a take by its name and by its ending."""
    if not split_ending(name)[1] or _is_passed_over(folder / name):
        return False
    try:
        read_take_name(name, holes)
    except UnfitNameError:
        return False
    return (folder / name).is_file()


def _no_takes(folder: Path, flute: FluteFacts, names: Sequence[str]) -> str:
    """Say where recordings go, and where they may be instead."""
    usual = f"{TAKES_FOLDER}/{example(flute.holes)}.wav"
    near = [name for name in get_close_matches(TAKES_FOLDER, names, n=1) if (folder / name).is_dir()]
    others = [name for name in names if same_name(name) == TAKES_FOLDER and name != TAKES_FOLDER] or near
    if TAKES_FOLDER not in names and others:
        return f"no such folder, but {printable(others[0])}: rename it to {TAKES_FOLDER}"
    takes = folder / TAKES_FOLDER
    if takes.is_dir() and any(path.is_dir() and not path.name.startswith(".") for path in takes.iterdir()):
        return f"no recordings yet, only folders: put the recordings themselves there, as {usual}"
    return f"no recordings yet: put them there, as {usual}"
