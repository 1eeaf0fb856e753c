"""What is no TOML in a flute.toml: said in plain words, a fault a line, and mended so that the rest is read.

Conventions: lines count from 1, in the file as it is. Where what was meant is plain (a decimal comma, curly
quotes, a unit after a number) the mended text is read on, so that all other faults are told in the same run;
nothing mended is ever used for measuring, for the faults make the file unfit.
"""

import json
import re
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from typing import Any

from fluteprobe.session.keys import KEYS, home_of, nearest_key, number_in
from fluteprobe.session.words import UNSAFE, shown

MOST_FAULTS = 20

_LONGEST_LINE = 2000
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_HEADER = re.compile(r"\s*\[{1,2}([^\[\]#=,]+)\]{1,2}\s*(#.*)?")
_CURLY = str.maketrans({**dict.fromkeys("“”„‟«»″", '"'), **dict.fromkeys("‘’‚‛′`´", "'")})
_ODD_SPACES = re.compile("[\u00a0\u1680\u2000-\u200b\u202f\u205f\u2060\u3000]")
_FULL_WIDTH = re.compile("[\uff01-\uff5e]")
_NOTHINGS = frozenset({"", "none", "null", "nil", "-", "?", "n/a", "unknown", "..."})
_REMARK_SIGNS = ("//", ";", "--", "/*", "%", "'", "*", "<!--", "REM ", "rem ")

Line = tuple[int, str]
Fault = tuple[int, str]
Cure = tuple[str, str]


@dataclass(frozen=True, slots=True, kw_only=True)
class Toml:
    """What a flute.toml says: its tables, the line of each table and key, and what is no TOML in it.

    `faults` pairs a line's number with what is wrong there; `excused` are the keys in such lines:
    they are not missing.
    """

    tables: dict[str, Any]
    lines: dict[tuple[str, ...], int]
    faults: tuple[Fault, ...]
    excused: frozenset[str]


def read_toml(text: str) -> Toml:
    """Return what a flute.toml says, with the faults of its syntax, one more than `MOST_FAULTS` at most."""
    lines = list(enumerate(text.split("\n"), start=1))
    faults: list[Fault] = []
    lines = _without_endless(lines, faults)
    tables: dict[str, Any] | None = None
    excused: set[str] = set()
    while tables is None and len(faults) <= MOST_FAULTS:
        try:
            tables = tomllib.loads("\n".join(line for _, line in lines))
        except RecursionError:
            faults.append((1, "is nested too deeply: is it another file?"))
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
    what, expected, mended = _told(line if first == last else whole)
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
    value = "".join(_without_remark(line) for _, line in lines).partition("=")[2]
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


def _told(line: str) -> tuple[str, str, str]:
    """Return what was found, what is expected and the line as it was likely meant."""
    for look in (_bad_letters, _remark, _table, _colon, _no_equals, _bad_key):
        cure = look(line)
        if cure:
            return (f"found {shown(line)}", *cure)
    key, _, value = (part.strip() for part in line.partition("="))
    for look_at in (_nothing, _several, _array, _number_alone, _quotes, _unquoted_text):
        cure = look_at(key, _without_remark(value).strip())
        if cure:
            known = home_of(key) is not None
            what = f"key {key}: found {shown(value) or 'nothing'}" if known else f"found {shown(line)}"
            return (what, *cure)
    return f"found {shown(line) or 'nothing'}", 'key = "text" or key = number', ""


# --- whole lines ---------------------------------------------------------------------------------------


def _bad_letters(line: str) -> Cure | None:
    if _ODD_SPACES.search(line):
        return "plain spaces: another kind of space stands there", _ODD_SPACES.sub(" ", line)
    unsafe = UNSAFE.findall(line.replace("\t", ""))
    if unsafe:
        return f"it without {shown(unsafe[0])}", UNSAFE.sub("", line)
    if _FULL_WIDTH.search(line):
        narrow = _FULL_WIDTH.sub(lambda wide: chr(ord(wide[0]) - 0xFEE0), line)
        return f"plain letters and signs: {shown(narrow)}", narrow
    return None


def _remark(line: str) -> Cure | None:
    sign = next((sign for sign in _REMARK_SIGNS if line.startswith(sign)), None)
    return ("# before a remark", "#") if sign else None


def _table(line: str) -> Cure | None:
    """Tell a line that was meant as [flute] or [session]."""
    bare = line.partition("=")[0].partition("#")[0].strip()
    word = re.split(r"[\]\s)}>:]", bare.lstrip("[({<= "), maxsplit=1)[0].strip(" :'\"*")
    near = get_close_matches(word.lower()[:40], KEYS, n=1, cutoff=0.75)
    if not near or ("=" in line and not line.startswith("[")):
        return None
    rest = line.partition("]")[2].strip() if line.startswith("[") else ""
    return f"[{near[0]}] on a line of its own", f"[{near[0]}]" + (f"\n{rest}" if "=" in rest else "")


def _colon(line: str) -> Cure | None:
    key, colon, value = line.partition(":")
    if not colon or "=" in key or not _meant(key):
        return None
    return "= instead of :", f"{_meant(key)} = {value.strip()}"


def _no_equals(line: str) -> Cure | None:
    if "=" in line:
        return None
    words = line.split(maxsplit=1)
    if len(words) == 2 and _meant(words[0]):
        return f"{_meant(words[0])} = and its value", f"{_meant(words[0])} = {words[1]}"
    return 'key = "text" or key = number; or # before a remark', ""


def _bad_key(line: str) -> Cure | None:
    key, _, value = line.partition("=")
    key = key.strip()
    if _BARE_KEY.fullmatch(key) or (key[:1] in {'"', "'"} and key[-1:] == key[:1] and len(key) > 1):
        return None
    near = _meant(key)
    if near:
        return f"{near} before =", f"{near} = {value.strip()}"
    return "one word before =, such as name or holes", ""


def _meant(key: str) -> str | None:
    """Return the key that was likely meant, of either table."""
    word = key.strip(" \t\"'*-.•")
    return next((near for near in (nearest_key(table, word) for table in KEYS) if near), None)


# --- values --------------------------------------------------------------------------------------------


def _nothing(key: str, value: str) -> Cure | None:
    if value[:1] in {"=", ">"}:
        return "= once", f"{key} = {value.lstrip('=> ')}"
    return ("a value after =, or # before the line", "") if value.lower() in _NOTHINGS else None


def _several(key: str, value: str) -> Cure | None:
    parts = re.split(r"[,;]\s*(?=[A-Za-z_]+\s*=)", value)
    return ("one key in a line", "\n".join([f"{key} = {parts[0]}", *parts[1:]])) if len(parts) > 1 else None


def _array(key: str, value: str) -> Cure | None:
    """Tell pairs of numbers whose brackets or commas are wrong."""
    if key != "holes_mm" and not value.startswith("["):
        return None
    numbers = re.findall(r"[0-9]{1,9}(?:\.[0-9]{1,9})?", value)
    pairs = [f"[{far}, {wide}]" for far, wide in zip(numbers[::2], numbers[1::2], strict=False)]
    mended = f"{key} = [{', '.join(pairs)}]" if len(numbers) % 2 == 0 and "[" in value else ""
    if value.count("[") > value.count("]"):
        return "as many ] as [, and commas between: [[105.0, 9.0], [127.0, 9.5]]", mended
    if value.count("[") < value.count("]"):
        return "as many [ as ], and commas between: [[105.0, 9.0], [127.0, 9.5]]", mended
    return "numbers in brackets with commas between: [[105.0, 9.0], [127.0, 9.5]]", mended


def _quotes(key: str, value: str) -> Cure | None:
    """Tell curly, missing and surplus quotes, and a backslash between them."""
    straight = value.translate(_CURLY)
    inner = straight.strip("\"'").strip()
    clean = inner.replace('"', "'").replace("\\", "/")
    mended = f"{key} = {json.dumps(clean, ensure_ascii=False)}"
    if straight != value and not _is_toml(f"x = {value}"):
        return f"straight quotes: {shown(json.dumps(clean, ensure_ascii=False))}", mended
    if value[:1] not in {'"', "'"} and value[-1:] not in {'"', "'"}:
        return None
    if value[:1] != value[-1:] or len(value) == 1:
        end = value.rstrip(";,. ")
        if end != value and _is_toml(f"x = {end}"):
            return f"nothing after the value: {shown(end)}", f"{key} = {end}"
        return f"quotes on both sides: {shown(json.dumps(clean, ensure_ascii=False))}", mended
    if "\\" in value:
        return f"no \\ in text: {shown(json.dumps(clean, ensure_ascii=False))}", mended
    return f"quotes around the text alone: {shown(json.dumps(clean, ensure_ascii=False))}", mended


def _number_alone(key: str, value: str) -> Cure | None:
    """Tell a number with a comma, a unit, or something else at its side."""
    home = home_of(key)
    number = number_in(value.translate(_CURLY).strip(";, \"'") if home else value.rstrip(";, "))
    if number is None or (home and not KEYS[home][key].is_number):
        return None
    mended = f"{key} = {number}"
    if re.search(r"[0-9],[0-9]", value):
        return f"a point in numbers: {number}", mended
    return f"the number alone: {number}", mended


def _unquoted_text(key: str, value: str) -> Cure | None:
    home = home_of(key)
    if home and KEYS[home][key].is_number:
        return f"a number, such as {KEYS[home][key].example.split()[0]}", ""
    text = json.dumps(value.rstrip(";,").strip(), ensure_ascii=False)
    return f"quotes around text: {shown(text)}", f"{key} = {text}"


# --- scanning ------------------------------------------------------------------------------------------

_ALL_KEYS = tuple(key for table in KEYS.values() for key in table)


def _keys_named(text: str) -> set[str]:
    """Return the known keys that a line speaks of."""
    return {word for word in re.findall(r"[A-Za-z0-9_]+", text) if home_of(word)}


def _is_toml(text: str) -> bool:
    try:
        tomllib.loads(text)
    except (ValueError, RecursionError):
        return False
    return True


def _key_of(line: str) -> str | None:
    """Return what stands before the first = of a line that starts a key, or None."""
    key, equals, _ = line.partition("=")
    key = key.strip()
    return key if equals and key and not set(key) & set("#[],{}") else None


def _parts(key: str) -> tuple[str, ...]:
    return tuple(part.strip().strip("\"'") for part in key.split("."))


def _without_remark(value: str) -> str:
    """Return a value without the remark after it, unless the # may be inside quotes."""
    before, _, after = value.partition("#")
    return value if set(after) & set("\"'") and set(before) & set("\"'“”") else before
