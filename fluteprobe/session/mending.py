"""What is no TOML in a flute.toml: said in plain words, a fault a line, and mended so that the rest is read.

Conventions: lines count from 1, in the file as it is. Where what was meant is plain (a decimal comma, curly
quotes, a unit after a number) the mended text is read on, so that all other faults are told in the same run;
nothing mended is ever used for measuring, for the faults make the file unfit.
"""

import re
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from fluteprobe.session.cures import told_of, without_remark
from fluteprobe.session.keys import KEYS, home_of
from fluteprobe.session.words import shown

MOST_FAULTS = 20

_LONGEST_LINE, _MOST_LINES = 2000, 1000
_TOO_MANY_LINES = (0, f"has over {_MOST_LINES} lines: is it another file?")
_HEADER = re.compile(r"\s*\[{1,2}([^\[\]#=,]+)\]{1,2}\s*(#.*)?")

Line = tuple[int, str]
Fault = tuple[int, str]


@dataclass(frozen=True, slots=True, kw_only=True)
class Toml:
    """What a flute.toml says: its tables, the line of each table and key, and what is no TOML in it.

    `faults` pairs a line's number, 0 for the whole file, with what is wrong there; `excused` are the keys in
    such lines: they are not missing.
    """

    tables: dict[str, Any]
    lines: dict[tuple[str, ...], int]
    faults: tuple[Fault, ...]
    excused: frozenset[str]


def read_toml(text: str) -> Toml:
    """Return what a flute.toml says, with the faults of its syntax, one more than `MOST_FAULTS` at most."""
    lines = list(enumerate(text.split("\n"), start=1))
    faults: list[Fault] = []
    if len(lines) > _MOST_LINES:
        return Toml(tables={}, lines={}, faults=(_TOO_MANY_LINES,), excused=frozenset(_ALL_KEYS))
    lines = _without_endless(lines, faults)
    tables: dict[str, Any] | None = None
    excused: set[str] = set()
    while tables is None and len(faults) <= MOST_FAULTS:
        try:
            tables = tomllib.loads("\n".join(line for _, line in lines))
        except RecursionError:
            faults.append((0, "is nested too deeply: is it another file?"))
            break
        except ValueError as error:
            lines, fault = _mended(lines, str(error), faults)
            faults += [fault] if fault not in faults else []
            excused |= _keys_named(fault[1])
    return Toml(
        tables=tables or {},
        lines=lines_of_keys(lines),
        faults=tuple(faults),
        excused=frozenset(excused) if tables is not None else frozenset(_ALL_KEYS),
    )


def lines_of_keys(lines: Sequence[Line]) -> dict[tuple[str, ...], int]:
    """Return the line of every table and key, by a scan that is good enough for a file of this kind."""
    found: dict[tuple[str, ...], int] = {}
    table: tuple[str, ...] = ()
    for number, line in lines:
        header, key = _HEADER.fullmatch(line), _key_of(line)
        if header:
            table = _parts(header[1])
            found.setdefault(table, number)
        elif key:
            found.setdefault((*table, *_parts(key)), number)
    return found


# --- one fault -----------------------------------------------------------------------------------------


def _without_endless(lines: list[Line], faults: list[Fault]) -> list[Line]:
    """Take out lines that no person writes, which would take the TOML reader long."""
    for number, line in lines:
        if len(line) > _LONGEST_LINE and len(faults) < MOST_FAULTS:
            faults.append(
                (number, f"found {shown(line)}, expected less than {_LONGEST_LINE} letters in a line")
            )
    return [(number, line) for number, line in lines if len(line) <= _LONGEST_LINE]


def _mended(lines: list[Line], message: str, told: Sequence[Fault]) -> tuple[list[Line], Fault]:
    """Return the lines with the one that the TOML reader stopped at mended, and what is wrong with it.

    What was told of before, and did not mend, is left out.
    """
    first, last = _statement(lines, message)
    number, line = lines[first][0], lines[first][1].strip(" \t")
    if re.search(r"overwrite|twice|mutate|redefine|already|Duplicate", message):
        return _once(lines, first, last)
    whole = " ".join(text.strip() for _, text in lines[first : last + 1])
    what, expected, mended = told_of(line if first == last else whole)
    fault = (number, f"{what}, expected {expected}")
    mends = mended not in {"", line} and fault not in told
    kept = [(number, part) for part in mended.split("\n")] if mends else []
    return [*lines[:first], *kept, *lines[last + 1 :]], fault


def _statement(lines: Sequence[Line], message: str) -> tuple[int, int]:
    """Return the first and last index of the statement that the TOML reader stopped in."""
    match = re.search(r"\(at line ([0-9]+)", message)
    filled = [k for k, (_, line) in enumerate(lines) if line.strip(" \t")]
    at = min(int(match[1]) - 1, filled[-1]) if match else filled[-1]
    tripled = [k for k, (_, line) in enumerate(lines) if (line.count('"""') + line.count("'''")) % 2]
    if len(tripled) % 2 and not match:
        return tripled[-1], tripled[-1]
    while at not in filled:
        at -= 1
    starts = [k for k in range(at + 1) if _starts(lines[k][1])]
    before = next((k for k in reversed(starts) if k < at), at)
    if _is_open(lines[before:at]):
        return (before, at - 1) if at in starts else (before, at)
    first = last = at
    while last < at or (_is_open(lines[first : last + 1]) and last + 1 < len(lines)):
        if last >= at and (_starts(lines[last + 1][1]) or not lines[last + 1][1].strip()):
            break
        last += 1
    return first, last


def _starts(line: str) -> bool:
    """Whether a line starts a table or a key."""
    return bool(_HEADER.fullmatch(line)) or _key_of(line) is not None


def _is_open(lines: Sequence[Line]) -> bool:
    """Whether a value goes on in the next line: more brackets were opened than closed."""
    value = "".join(without_remark(line) for _, line in lines).partition("=")[2]
    return value.lstrip().startswith("[") and value.count("[") > value.count("]")


def _once(lines: list[Line], first: int, last: int) -> tuple[list[Line], Fault]:
    """Take out a key that stands there twice; bring the keys of a table that does under the first."""
    number, line = lines[first][0], lines[first][1].strip(" \t")
    header = _HEADER.fullmatch(line)
    rest = [*lines[:first], *lines[last + 1 :]]
    name = _parts(header[1] if header else _key_of(line) or line)
    table: tuple[str, ...] = () if header else _table_at(lines, first)
    before = lines_of_keys(lines[:first]).get((*table, *name))
    where = "" if before is None else f"; it stands on line {before} already"
    if header and before is not None:
        end = next((k for k in range(first, len(rest)) if _HEADER.fullmatch(rest[k][1])), len(rest))
        home = next(k for k, (here, _) in enumerate(rest) if here == before)
        rest = [*rest[: home + 1], *rest[first:end], *rest[home + 1 : first], *rest[end:]]
    return rest, (number, f"found {shown(line)}, expected each key and each [table] once{where}")


def _table_at(lines: Sequence[Line], index: int) -> tuple[str, ...]:
    headers = (_HEADER.fullmatch(line) for _, line in reversed(lines[:index]))
    return next((_parts(header[1]) for header in headers if header), ())


# --- scanning ------------------------------------------------------------------------------------------

_ALL_KEYS = tuple(key for table in KEYS.values() for key in table)


def _keys_named(text: str) -> set[str]:
    """Return the known keys that a line speaks of."""
    return {word for word in re.findall(r"[A-Za-z0-9_]+", text) if home_of(word)}


def _key_of(line: str) -> str | None:
    """Return what stands before the first = of a line that starts a key, or None."""
    key, equals, _ = line.partition("=")
    key = key.strip()
    return key if equals and key and not set(key) & set("#[],{}") else None


def _parts(key: str) -> tuple[str, ...]:
    return tuple(part.strip().strip("\"'") for part in key.split("."))
