"""A line of a flute.toml that is no TOML: what is wrong with it in plain words, and how it was likely meant.

Conventions: a cure is what is expected, for people, and the line as it was likely meant, empty where that is
not plain. Several cures may follow one another: a line with one fault mended may have another.
"""

import json
import re
import tomllib
from difflib import get_close_matches

from fluteprobe.session.keys import KEYS, home_of, nearest_key, number_in
from fluteprobe.session.words import UNSAFE, shown

_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_CURLY = str.maketrans({**dict.fromkeys("“”„‟«»″", '"'), **dict.fromkeys("‘’‚‛′`´", "'")})
_ODD_SPACES = re.compile("[\u00a0\u1680\u2000-\u200b\u202f\u205f\u2060\u3000]")
_FULL_WIDTH = re.compile("[\uff01-\uff5e]")
_NOTHINGS = frozenset({"", "none", "null", "nil", "-", "?", "n/a", "unknown", "..."})
_REMARK_SIGNS = ("//", ";", "--", "/*", "%", "'", "*", "<!--", "REM ", "rem ")

Cure = tuple[str, str]


def told_of(line: str) -> tuple[str, str, str]:
    """Return what was found, what is expected and the line as it was likely meant."""
    for look in (_bad_letters, _remark, _table, _colon, _no_equals, _bad_key):
        cure = look(line)
        if cure:
            return (f"found {shown(line)}", *cure)
    key, _, value = (part.strip() for part in line.partition("="))
    for look_at in (_nothing, _several, _array, _number_alone, _quotes, _unquoted_text):
        cure = look_at(key, without_remark(value).strip())
        if cure:
            known = home_of(key) is not None
            what = f"key {key}: found {shown(value) or 'nothing'}" if known else f"found {shown(line)}"
            return (what, *cure)
    return f"found {shown(line) or 'nothing'}", 'key = "text" or key = number', ""


def is_toml(text: str) -> bool:
    """Whether a text is TOML by itself."""
    try:
        tomllib.loads(text)
    except (ValueError, RecursionError):
        return False
    return True


def without_remark(value: str) -> str:
    """Return a value without the remark after it, unless the # may be inside quotes."""
    before, _, after = value.partition("#")
    return value if set(after) & set("\"'") and set(before) & set("\"'“”") else before


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
    parts = re.split(r"(?:[,;]\s*|(?<=[\"'0-9])\s+)(?=[A-Za-z_]+\s*=)", value)
    return ("one key in a line", "\n".join([f"{key} = {parts[0]}", *parts[1:]])) if len(parts) > 1 else None


def _array(key: str, value: str) -> Cure | None:
    """Tell pairs of numbers whose brackets or commas are wrong."""
    if key not in {"holes_mm", "bore_profile_mm"} and not value.startswith("["):
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
    if straight != value and not is_toml(f"x = {value}"):
        return f"straight quotes: {shown(json.dumps(clean, ensure_ascii=False))}", mended
    if value[:1] not in {'"', "'"} and value[-1:] not in {'"', "'"}:
        return None
    if value[:1] != value[-1:] or len(value) == 1:
        end = value.rstrip(";,. ")
        if end != value and is_toml(f"x = {end}"):
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
