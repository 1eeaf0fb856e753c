"""The folder on disk: flute.toml and takes/ become a Session, and back.

Conventions: paths of takes are relative to the session folder, with forward slashes. A take's name is
`FINGERING[-BREATH][-NUMBER].EXT`: `oxxxxx.wav`, `oxxxxx-over.wav`, `oxxxxx-over-2.wav`; upper and lower case
are the same, and no breath is `normal`. Hidden files, folders and what is plainly no sound (notes, pictures)
are passed over. Lengths are in mm, temperatures in °C; `None` is "not given".

Nothing outside the session folder is read, and no text from a file reaches a message with control
characters in it.
"""

import errno
import json
import os
import re
import shlex
import tomllib
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date, datetime
from difflib import get_close_matches
from itertools import pairwise
from pathlib import Path
from types import MappingProxyType
from typing import Any, cast

from fluteprobe.flute.fingering import BREATHS, MAX_HOLES, STATES, Breath, Fingering
from fluteprobe.flute.tuning import A4_RANGE_HZ

FACTS_FILE = "flute.toml"
TAKES_FOLDER = "takes"
TEMPERATURE_RANGE_C = (-20.0, 50.0)

_LARGEST_FACTS_BYTES = 1_000_000
_LONGEST_SHOWN = 60
_UNSAFE = re.compile("[\x00-\x1f\x7f-\x9f\u061c\u200e\u200f\u2028-\u202e\u2066-\u2069\ufeff\ud800-\udfff]")
_TAKE_NAME = re.compile(
    rf"(?P<states>[{STATES}]+)(-(?P<breath>{'|'.join(BREATHS)}))?(-(?P<number>[0-9]{{1,4}}))?", re.ASCII
)
_NO_SOUND = frozenset({
    ".txt", ".md", ".rtf", ".odt", ".doc", ".docx", ".pdf", ".html", ".xml", ".json", ".toml", ".csv", ".ods",
    ".xlsx", ".png", ".jpg", ".jpeg", ".gif", ".heic", ".svg", ".ini", ".db", ".log", ".bak", ".tmp", ".py",
    ".zip",
})  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """Something that could not be used: which take (or file), what is wrong and what to do."""

    take: str
    message: str


@dataclass(frozen=True, slots=True, kw_only=True)
class FluteFacts:
    """The [flute] table of flute.toml.

    `holes_mm` pairs each hole's distance from the sound hole with its diameter, top hole first; `length_mm`
    is from the sound hole to the foot. `tolerance_mm` is the standard uncertainty of all these dimensions.
    """

    name: str
    holes: int
    maker: str | None = None
    serial: str | None = None
    key: str | None = None
    wood: str | None = None
    bore_mm: float | None = None
    wall_mm: float | None = None
    holes_mm: tuple[tuple[float, float], ...] | None = None
    length_mm: float | None = None
    tolerance_mm: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Sitting:
    """The [session] table of flute.toml: the conditions of one sitting."""

    a4_hz: float = 440.0
    air_temperature_c: float | None = None
    reference_temperature_c: float | None = None
    date: str | None = None
    player: str | None = None
    place: str | None = None
    microphone: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Take:
    """One recording of one fingering."""

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


class SessionError(ValueError):
    """A session folder that cannot be used. `faults` holds a line for people for each reason."""

    def __init__(self, *faults: str) -> None:
        super().__init__("\n".join(faults))
        self.faults = faults


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
    text = _facts_text(folder, facts)
    flute, sitting = _read_facts(text, printable(str(facts)), folder.resolve().name)
    takes, problems = _find_takes(folder, flute.holes)
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
    text = facts_text(flute, sitting or Sitting())
    _read_facts(text, FACTS_FILE, flute.name)
    try:
        (folder / TAKES_FOLDER).mkdir(parents=True, exist_ok=True)
        with facts.open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except FileExistsError as error:
        raise SessionError(f"{printable(str(error.filename))} is a file, where a folder is needed") from None
    except (OSError, ValueError) as error:
        raise SessionError(f"{printable(str(folder))} cannot be made: {_reason(error)}") from None
    return facts


def require_new(folder: Path) -> None:
    """Raise a SessionError if a folder holds a flute.toml already."""
    facts = folder / FACTS_FILE
    if os.path.lexists(facts):
        raise SessionError(f"{printable(str(facts))} exists already: edit it, or choose another folder")


def parse_take_name(name: str) -> tuple[Fingering, Breath, int]:
    """Return fingering, breath and number from a take's file name, `oxxxxx-over-2.wav`.

    Raises
    ------
    ValueError
        If the name is no fingering; the message proposes the nearest valid name where there is one.
    """
    match = _TAKE_NAME.fullmatch(_stem(name).lower())
    if match is None:
        raise ValueError(f"the name is no fingering: {_cure(name)}")
    number = int(match["number"] or 1)
    if not number:
        raise ValueError("takes are numbered from 1: rename it")
    return Fingering(match["states"]), cast(Breath, match["breath"] or "normal"), number


def printable(text: str) -> str:
    r"""Return text with control characters, direction marks and undecodable bytes written out (`\x1b`)."""
    return _UNSAFE.sub(lambda found: found[0].encode("unicode_escape").decode("ascii"), text)


# --- folder and file ---------------------------------------------------------------------------------


def _require_folder(folder: Path) -> None:
    """Raise a SessionError, with the likeliest cure, unless there is a folder with a flute.toml."""
    name = printable(str(folder))
    begin = f"`fluteprobe begin {shlex.quote(name)}`"
    try:
        if (folder / FACTS_FILE).is_file():
            return
        if not folder.exists():
            raise SessionError(f"{name}: no such folder; {_near_folder(folder)}make one with {begin}")
        if not folder.is_dir():
            raise SessionError(f"{name} is a file: give the session folder, the one that holds {FACTS_FILE}")
        if os.path.lexists(folder / FACTS_FILE):
            raise SessionError(f"{printable(str(folder / FACTS_FILE))} is no file that can be read")
        if (folder.resolve().parent / FACTS_FILE).is_file():
            parent = printable(str(folder.parent if folder.name not in {"", ".."} else folder / ".."))
            raise SessionError(f"{name} has no {FACTS_FILE}, but the folder above it has: give {parent}")
        raise SessionError(f"{name} has no {FACTS_FILE}: write one with {begin}")
    except OSError as error:
        raise SessionError(f"{name} cannot be read: {_reason(error)}") from None
    except ValueError as error:
        if isinstance(error, SessionError):
            raise
        raise SessionError(f"{name} is no name that a folder can have") from None


def _near_folder(folder: Path) -> str:
    """Return a guess at the session that was meant, or nothing."""
    try:
        beside = [other.name for other in folder.parent.iterdir() if (other / FACTS_FILE).is_file()]
    except OSError:
        return ""
    near = get_close_matches(folder.name, beside, n=1)
    return f"did you mean {printable(str(folder.with_name(near[0])))}? If not, " if near else ""


def _facts_text(folder: Path, facts: Path) -> str:
    """Return what flute.toml says, as text."""
    name = printable(str(facts))
    if not _is_inside(facts, folder):
        raise SessionError(f"{name} is a link that leads out of the folder: put the file itself there")
    try:
        with facts.open("rb") as file:
            content = file.read(_LARGEST_FACTS_BYTES + 1)
    except OSError as error:
        raise SessionError(f"{name} cannot be read: {_reason(error)}") from None
    if len(content) > _LARGEST_FACTS_BYTES:
        raise SessionError(f"{name} is far too long: is it another file?")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise SessionError(f"{name} is no UTF-8 text: save it as plain text in UTF-8") from None
    if not text.strip():
        raise SessionError(f"{name} is empty: write at least [flute] and, under it, holes = 6")
    return text.replace("\r\n", "\n")


def _is_inside(path: Path, folder: Path) -> bool:
    """Whether a path, links followed, stays in the folder."""
    try:
        return path.resolve().is_relative_to(folder.resolve())
    except (OSError, RuntimeError):
        return False


def _reason(error: Exception) -> str:
    """Return the operating system's reason in plain words."""
    plain = {
        errno.EACCES: "there is no permission",
        errno.EPERM: "there is no permission",
        errno.ENOSPC: "the disk is full",
        errno.EROFS: "the disk is read-only",
        errno.ENAMETOOLONG: "the name is too long",
        errno.ENOTDIR: "a part of its path is a file",
    }
    number = error.errno if isinstance(error, OSError) else None
    return plain.get(number or 0) or printable(getattr(error, "strerror", None) or str(error))


# --- flute.toml --------------------------------------------------------------------------------------


class _UnfitError(ValueError):
    """A value that a key does not take; its text says what was expected."""


Reader = Callable[[Any], Any]


def _text(value: Any) -> str | None:
    if isinstance(value, str) and not _UNSAFE.search(value):
        return value.strip() or None
    raise _UnfitError('text in "quotes", on one line')


def _text_or_number(value: Any) -> str | None:
    return str(value) if isinstance(value, int) and not isinstance(value, bool) else _text(value)


def _date(value: Any) -> str | None:
    if isinstance(value, datetime):
        return value.isoformat(sep=" ")
    return value.isoformat() if isinstance(value, date) else _text(value)


def _number(low: float, high: float, unit: str) -> Reader:
    def read(value: Any) -> float:
        if isinstance(value, int | float) and not isinstance(value, bool) and low <= value <= high:
            return float(value)
        raise _UnfitError(f"a number from {low:g} to {high:g} ({unit})")

    return read


def _whole_number(low: int, high: int) -> Reader:
    def read(value: Any) -> int:
        if isinstance(value, int) and not isinstance(value, bool) and low <= value <= high:
            return value
        raise _UnfitError(f"a whole number from {low} to {high}")

    return read


_DISTANCE_MM, _DIAMETER_MM, _LENGTH_MM = (1.0, 3000.0), (0.1, 50.0), (20.0, 4000.0)


def _hole_pairs(value: Any) -> tuple[tuple[float, float], ...]:
    expected = "[[distance from the sound hole, diameter], …] in mm, top hole first"
    distance, diameter = _number(*_DISTANCE_MM, "mm"), _number(*_DIAMETER_MM, "mm")
    try:
        pairs = tuple((distance(far), diameter(wide)) for far, wide in value)
    except (TypeError, ValueError):
        raise _UnfitError(expected) from None
    if any(later[0] <= earlier[0] for earlier, later in pairwise(pairs)):
        raise _UnfitError(f"{expected}, each farther than the one before")
    return pairs


_KEYS: Mapping[str, Mapping[str, Reader]] = MappingProxyType(
    {
        "flute": {
            "name": _text,
            "holes": _whole_number(1, MAX_HOLES),
            "maker": _text,
            "serial": _text_or_number,
            "key": _text,
            "wood": _text,
            "bore_mm": _number(2.0, 100.0, "mm"),
            "wall_mm": _number(0.2, 50.0, "mm"),
            "holes_mm": _hole_pairs,
            "length_mm": _number(*_LENGTH_MM, "mm"),
            "tolerance_mm": _number(0.01, 20.0, "mm"),
        },
        "session": {
            "a4_hz": _number(*A4_RANGE_HZ, "Hz"),
            "air_temperature_c": _number(*TEMPERATURE_RANGE_C, "°C"),
            "reference_temperature_c": _number(*TEMPERATURE_RANGE_C, "°C"),
            "date": _date,
            "player": _text,
            "place": _text,
            "microphone": _text,
        },
    }
)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Place:
    """Where in which file a fault is: the file's name and the line of every key."""

    file: str
    lines: Mapping[tuple[str, ...], int]

    def __call__(self, *key: str) -> str:
        """Return the place of a key, or of the table it is in."""
        line = self.lines.get(key) or self.lines.get(key[:1])
        return f"{self.file} line {line}" if line else self.file


def _read_facts(text: str, file: str, folder_name: str) -> tuple[FluteFacts, Sitting]:
    """Return both tables of flute.toml, or raise a SessionError with every fault in it."""
    try:
        tables = tomllib.loads(text)
    except (ValueError, RecursionError) as error:
        raise SessionError(_syntax_fault(text, file, str(error))) from None
    place = _Place(file=file, lines=_lines_of_keys(text))
    faults = list(_stray_faults(tables, place))
    values = {
        table: _read_table(table, tables.get(table, {}), place, faults)
        for table in _KEYS
        if isinstance(tables.get(table, {}), dict)
    }
    faults += _hole_faults(tables, values.get("flute", {}), place)
    if faults:
        raise SessionError(*sorted(faults, key=_natural))
    flute = {"name": printable(folder_name) or "flute", **values["flute"]}
    return FluteFacts(**flute), Sitting(**values["session"])


def _read_table(table: str, found: Mapping[str, Any], place: _Place, faults: list[str]) -> dict[str, Any]:
    """Return the values of one table that were given, and add what is wrong with it to the faults."""
    values = {}
    for key, value in found.items():
        if key not in _KEYS[table]:
            faults.append(f"{place(table, key)}: key {_shown_key(key)}: {_unknown_key(table, key)}")
            continue
        try:
            values[key] = _KEYS[table][key](value)
        except _UnfitError as error:
            unquoted = ", without quotes" if isinstance(value, str) and "number" in str(error) else ""
            faults.append(
                f"{place(table, key)}: key {key}: found {_shown(value)}, expected {error}{unquoted}"
            )
    return {key: value for key, value in values.items() if value is not None}


def _unknown_key(table: str, key: str) -> str:
    near = get_close_matches(key.lower(), _KEYS[table], n=1)
    if near:
        return f"not known in [{table}]; did you mean {near[0]}?"
    home = next((other for other in _KEYS if key in _KEYS[other]), None)
    if home:
        return f"not known in [{table}]; it belongs under [{home}]"
    return f"not known in [{table}]; known are {', '.join(_KEYS[table])}"


def _stray_faults(tables: Mapping[str, Any], place: _Place) -> Iterator[str]:
    """Tell what stands outside the two tables."""
    for name, value in tables.items():
        if name in _KEYS:
            if not isinstance(value, dict):
                yield f"{place(name)}: key {name}: found {_shown(value)}, expected a line [{name}]"
        elif isinstance(value, dict):
            near = get_close_matches(name.lower(), _KEYS, n=1)
            cure = f"did you mean [{near[0]}]?" if near else "known are [flute] and [session]"
            yield f"{place(name)}: table [{_shown_key(name)}]: not known; {cure}"
        else:
            home = next((table for table in _KEYS if name in _KEYS[table]), "flute")
            yield f"{place(name)}: key {_shown_key(name)}: stands outside a table; put it under [{home}]"


def _hole_faults(tables: Mapping[str, Any], flute: Mapping[str, Any], place: _Place) -> Iterator[str]:
    """Tell whether the number of holes is missing or not that of holes_mm, or the flute ends above a hole."""
    given = tables.get("flute", {})
    if isinstance(given, dict) and "holes" not in given:
        yield f"{place('flute')}: key holes: missing in [flute], expected holes = 1 to {MAX_HOLES}"
    pairs = flute.get("holes_mm")
    if pairs is not None and "holes" in flute and len(pairs) != flute["holes"]:
        yield (
            f"{place('flute', 'holes_mm')}: key holes_mm: found {len(pairs)} pairs, "
            f"expected {flute['holes']}, one for each hole"
        )
    if pairs and flute.get("length_mm", pairs[-1][0] + 1.0) <= pairs[-1][0]:
        yield (
            f"{place('flute', 'length_mm')}: key length_mm: found {flute['length_mm']:g}, expected more than "
            f"{pairs[-1][0]:g}, where the lowest hole is: from the sound hole to the foot"
        )


def _syntax_fault(text: str, file: str, message: str) -> str:
    """Turn the TOML reader's message into a place, what stands there and what to write instead."""
    match = re.search(r"\(at (?:line (\d+)|end of document)", message)
    lines = text.rstrip().split("\n")
    number = min(int(match[1]), len(lines)) if match and match[1] else len(lines)
    line = lines[number - 1].strip()
    if re.search(r"overwrite|twice|Duplicate", message):
        expected = "each key and each [table] once"
    elif re.search(r"[“”„‘’«»]", line):
        expected = 'straight quotes: "text"'
    elif re.search(r"=\s*[+-]?\d+,\d", line):
        expected = "a point in numbers: 440.0"
    elif re.fullmatch(r"[\w-]+\s*=\s*[^\W\d][^\"'=]*", line):
        expected = 'quotes around text: key = "text"'
    else:
        expected = 'key = "text" or key = number'
    return f"{file} line {number}: found {_cut(printable(line)) or 'nothing'}, expected {expected}"


def _lines_of_keys(text: str) -> dict[tuple[str, ...], int]:
    """Return the line of every table and key, by a scan that is good enough for a file of this kind."""
    lines: dict[tuple[str, ...], int] = {}
    table: tuple[str, ...] = ()
    for number, line in enumerate(text.split("\n"), start=1):
        header = re.match(r"\s*\[{1,2}([^\[\]]+)\]{1,2}\s*(#.*)?$", line)
        key = re.match(r"\s*([^=#\[\],{}]+?)\s*=", line)
        if header:
            table = _key_parts(header[1])
            lines.setdefault(table, number)
        elif key:
            lines.setdefault((*table, *_key_parts(key[1])), number)
    return lines


def _key_parts(key: str) -> tuple[str, ...]:
    return tuple(part.strip().strip("\"'") for part in key.split("."))


def _shown(value: Any) -> str:
    """Return a value from flute.toml as one would write it there, on one line and not too long."""
    if isinstance(value, dict):
        return "a table"
    text = json.dumps(value, ensure_ascii=False, default=str)
    return _cut(printable(text))


def _shown_key(key: str) -> str:
    return _cut(printable(key)) or '""'


def _cut(text: str) -> str:
    return text if len(text) <= _LONGEST_SHOWN else text[: _LONGEST_SHOWN - 1] + "…"


# --- takes -------------------------------------------------------------------------------------------


def _find_takes(folder: Path, holes: int) -> tuple[tuple[Take, ...], tuple[Problem, ...]]:
    """Return the takes in the order of their fingering, breath and number, and what is no take."""
    try:
        names = _candidates(folder)
    except OSError as error:
        return (), (Problem(take=TAKES_FOLDER, message=f"cannot be read: {_reason(error)}"),)
    except _UnfitError as error:
        return (), (Problem(take=TAKES_FOLDER, message=str(error)),)
    takes, problems = [], []
    for name in names:
        try:
            takes.append(_take(folder, name, holes, names))
        except ValueError as error:
            problems.append(Problem(take=f"{TAKES_FOLDER}/{printable(name)}", message=str(error)))
    if not names:
        example = f"{TAKES_FOLDER}/{_example(holes)}.wav"
        problems.append(
            Problem(take=TAKES_FOLDER, message=f"no recordings yet: put them there, as {example}")
        )
    return tuple(sorted(takes, key=_take_order)), tuple(problems)


def _candidates(folder: Path) -> list[str]:
    """Return the names of the files in takes/ that may be takes, in natural order."""
    takes = folder / TAKES_FOLDER
    if takes.is_symlink() and not _is_inside(takes, folder):
        raise _UnfitError("is a link that leads out of the session folder: make it a folder")
    if takes.exists() and not takes.is_dir():
        raise _UnfitError("is a file: make it a folder and put the recordings there")
    found = os.listdir(takes) if takes.is_dir() else []  # noqa: PTH208  (names, also those that are no text)
    return sorted((name for name in found if not _is_passed_over(takes / name)), key=_natural)


def _is_passed_over(path: Path) -> bool:
    """Whether a file is hidden, a folder, or plainly no sound."""
    hidden = path.name.startswith(".") or path.name.endswith("~") or path.name.lower() == "thumbs.db"
    return hidden or path.suffix.lower() in _NO_SOUND or (path.is_dir() and not path.is_symlink())


def _take(folder: Path, name: str, holes: int, names: Sequence[str]) -> Take:
    """Return the take that a file is, or raise a ValueError that says why it is none and the cure."""
    path = folder / TAKES_FOLDER / name
    fingering, breath, number = _named(name, holes, names)
    if not _is_inside(path, folder):
        raise ValueError("is a link that leads out of the session folder: put the recording itself there")
    if not path.is_file():
        raise ValueError("is no ordinary file: put the recording itself there")
    twin = next(other for other in names if _stem(other).lower() == _stem(name).lower())
    if twin != name:
        free = _free_name(
            f"{fingering}{'' if breath == 'normal' else '-' + breath}", Path(name).suffix, names
        )
        raise ValueError(f"is the same take as {twin}: remove one, or rename it to {free}")
    return Take(name=f"{TAKES_FOLDER}/{name}", path=path, fingering=fingering, breath=breath, number=number)


def _named(name: str, holes: int, names: Sequence[str]) -> tuple[Fingering, Breath, int]:
    """Return what a take's name says, for a flute with so many holes."""
    match = _TAKE_NAME.fullmatch(_stem(name).lower())
    if match is None:
        raise ValueError(f"the name is no fingering: {_cure(name, holes, names)}")
    if len(match["states"]) != holes:
        raise ValueError(
            f"the name has {_counted(len(match['states']))} where the flute has {holes}: "
            f"rename it, or correct holes in {FACTS_FILE}"
        )
    return parse_take_name(name)


def _cure(name: str, holes: int | None = None, names: Sequence[str] = ()) -> str:
    """Say how to name a take: the nearest valid name where one can be guessed."""
    near = _nearest_stem(_stem(name), holes)
    if near:
        return f"rename it to {_free_name(near, Path(name).suffix, names)}"
    example = _example(holes or 6)
    return f"rename it to its fingering, as {example}.wav or {example}-over-2.wav"


def _nearest_stem(stem: str, holes: int | None) -> str | None:
    """Read a name as a person would (`Oxxxxx_overblown (2)`) and return it as it should be, or None."""
    words = [word for word in re.split(r"[^0-9a-z×]+", stem.lower()) if word]
    states = (words[0] if words else "").translate(str.maketrans("0×", "ox"))
    if set(states) - set(STATES) or not (len(states) == holes or (holes is None and states)):
        return None
    near = [get_close_matches(word, BREATHS, n=1) for word in words[1:]]
    breath = next((found[0] for found in near if found and found[0] != "normal"), None)
    number = next((int(word) for word in words[1:] if re.fullmatch(r"[0-9]{1,4}", word)), 1)
    return f"{states}{f'-{breath}' if breath else ''}{f'-{number}' if number > 1 else ''}"


def _free_name(stem: str, suffix: str, names: Sequence[str]) -> str:
    """Return a take's name with that stem, numbered on if it is taken."""
    taken = {_stem(name).lower() for name in names}
    base = re.sub(r"-[0-9]+$", "", stem)
    numbered = (f"{base}-{number}" for number in range(2, len(names) + 3))
    free = stem if stem not in taken else next(other for other in numbered if other not in taken)
    return printable(f"{free}{suffix.lower()}")


def _stem(name: str) -> str:
    return Path(name).stem


def _example(holes: int) -> str:
    return "o" + "x" * (holes - 1)


def _counted(holes: int) -> str:
    return "1 hole" if holes == 1 else f"{holes} holes"


def _take_order(take: Take) -> tuple[str, int, int, str]:
    return str(take.fingering), BREATHS.index(take.breath), take.number, take.name


def _natural(text: str) -> list[tuple[int, str]]:
    """Return a sorting key that puts 2 before 10."""
    return [(int(part), "") if part.isdecimal() else (0, part) for part in re.split(r"([0-9]+)", text)]


# --- writing -----------------------------------------------------------------------------------------

_EXAMPLES: Mapping[str, str] = MappingProxyType(
    {
        "maker": '"who made it"',
        "serial": '"12"',
        "key": '"A minor"',
        "wood": '"cherry"',
        "bore_mm": "19.0            # inner diameter of the sounding tube",
        "wall_mm": "4.0             # thickness of the wall at the holes",
        "holes_mm": "[[105.0, 9.0], [127.0, 9.5]]   # distance from the sound hole, diameter; top first",
        "length_mm": "385.0         # from the sound hole to the foot",
        "tolerance_mm": "0.5        # how exact these dimensions are",
        "air_temperature_c": "22.0",
        "reference_temperature_c": "20.0   # pitches are carried to it, as an estimate",
        "date": "2026-01-31",
        "player": '"who played"',
        "place": '"a carpeted room"',
        "microphone": '"phone, at arm\'s length"',
    }
)


def facts_text(flute: FluteFacts, sitting: Sitting) -> str:
    """Return a commented flute.toml; what is not known stands there as a comment to fill in."""
    return "\n".join(
        [
            f"# One flute, one sitting. Put recordings into {TAKES_FOLDER}/, each named by its fingering,",
            "# the hole nearest the mouth first: x closed, o open, h half-holed, v vented (barely cracked).",
            f"#   {TAKES_FOLDER}/{_example(flute.holes)}.wav          blown normally",
            f"#   {TAKES_FOLDER}/{_example(flute.holes)}-over-2.wav   overblown, second recording (or -soft)",
            "# Then: fluteprobe chart, with the name of this folder.",
            "",
            "[flute]",
            *_table_lines("flute", flute),
            "",
            "[session]",
            *_table_lines("session", sitting),
            "",
        ]
    )


def _table_lines(table: str, values: FluteFacts | Sitting) -> Iterator[str]:
    for key in _KEYS[table]:
        value = getattr(values, key)
        if value is not None:
            yield f"{key} = {_toml(value)}"
        else:
            yield f"# {key} = {_EXAMPLES[key]}"


def _toml(value: str | float | tuple[Any, ...]) -> str:
    """Return a value as TOML: a JSON text, number or list of numbers is TOML as well."""
    return json.dumps(value, ensure_ascii=False)
