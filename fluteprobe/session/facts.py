"""flute.toml: the facts about the flute and the sitting, read with every fault told at once, and written.

Conventions: lengths are in mm, temperatures in °C, `None` is "not given".
"""

import json
from collections.abc import Iterator, Mapping
from dataclasses import asdict, dataclass
from difflib import get_close_matches
from typing import Any

from fluteprobe.flute.fingering import MAX_HOLES
from fluteprobe.session.files import FACTS_FILE, TAKES_FOLDER
from fluteprobe.session.keys import KEYS, UnfitError, home_of, nearest_key
from fluteprobe.session.mending import MOST_FAULTS, Toml, read_toml
from fluteprobe.session.words import SessionError, natural, printable, shown, shown_value


@dataclass(frozen=True, slots=True, kw_only=True)
class FluteFacts:
    """The [flute] table of flute.toml.

    `holes_mm` pairs each hole's distance from the sound hole with its diameter, top hole first; `length_mm`
    is from the sound hole to the foot. `tolerance_mm` is the standard uncertainty of all these dimensions.

    `bore_profile_mm` pairs distances from the sound hole with the bore's diameter there, straight in between
    and even beyond both ends; two diameters at one distance are a step. Where it is given it is the bore, and
    `bore_mm` only one of its diameters, which may be left out.
    """

    name: str
    holes: int
    maker: str | None = None
    serial: str | None = None
    key: str | None = None
    wood: str | None = None
    bore_mm: float | None = None
    bore_profile_mm: tuple[tuple[float, float], ...] | None = None
    wall_mm: float | None = None
    holes_mm: tuple[tuple[float, float], ...] | None = None
    length_mm: float | None = None
    tolerance_mm: float | None = None

    @property
    def bore_at_head_mm(self) -> float | None:
        """The bore's diameter at the sound hole: the first of its profile, or that of an even bore."""
        return self.bore_profile_mm[0][1] if self.bore_profile_mm else self.bore_mm


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


def read_facts(text: str, file: str, folder_name: str) -> tuple[FluteFacts, Sitting]:
    """Return both tables of flute.toml.

    Raises
    ------
    SessionError
        With every fault in it, in the order of lines, under the file's name.
    """
    toml = read_toml(text)
    place = _Place(file=file, lines=toml.lines)
    faults = [f"{file} line {line}: {fault}" if line else f"{file} {fault}" for line, fault in toml.faults]
    faults += _stray_faults(toml.tables, place)
    values = {
        table: _read_table(table, toml.tables.get(table, {}), place, faults)
        for table in KEYS
        if isinstance(toml.tables.get(table, {}), dict)
    }
    faults += _hole_faults(toml, values.get("flute", {}), place)
    if faults:
        faults.sort(key=lambda fault: natural(fault.removeprefix(file).partition(":")[0]))
        raise SessionError(*_first(faults, file))
    flute = {"name": printable(folder_name).strip() or "flute", **values["flute"]}
    return FluteFacts(**flute), Sitting(**values["session"])


def facts_faults(flute: FluteFacts, sitting: Sitting) -> tuple[str, ...]:
    """Return what read_facts would find wrong with facts that are not in a file yet."""
    place = _Place(file=FACTS_FILE, lines={})
    given = {"flute": _given(flute), "session": _given(sitting)}
    faults: list[str] = []
    values = {table: _read_table(table, given[table], place, faults) for table in KEYS}
    return (*faults, *_pair_faults(values["flute"], place), *_bore_faults(values["flute"], place))


def _given(values: FluteFacts | Sitting) -> dict[str, Any]:
    return {key: value for key, value in asdict(values).items() if value is not None}


def facts_text(flute: FluteFacts, sitting: Sitting) -> str:
    """Return a commented flute.toml; what is not known stands there as a comment to fill in."""
    example = "o" + "x" * (flute.holes - 1)
    return "\n".join(
        [
            f"# One flute, one sitting. Put recordings into {TAKES_FOLDER}/, each named by its fingering,",
            "# the hole nearest the mouth first: x closed, o open, h half-holed, v vented (barely cracked).",
            f"#   {TAKES_FOLDER}/{example}.wav          blown normally",
            f"#   {TAKES_FOLDER}/{example}-over-2.wav   overblown, second recording (or -soft)",
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
    for key, known in KEYS[table].items():
        value = getattr(values, key)
        if value is not None:
            yield f"{key} = {_toml(value)}"
        else:
            yield f"# {key} = {known.example}"


def _toml(value: str | float | tuple[Any, ...]) -> str:
    """Return a value as TOML: a JSON text, number or list of numbers is TOML as well."""
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")


# --- faults --------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class _Place:
    """Where in which file a fault is: the file's name and the line of every key."""

    file: str
    lines: Mapping[tuple[str, ...], int]

    def __call__(self, *key: str) -> str:
        """Return the place of a key, or of the table it is in."""
        line = self.lines.get(key) or self.lines.get(key[:1])
        return f"{self.file} line {line}" if line else self.file


def _first(faults: list[str], file: str) -> list[str]:
    """Return the first faults where there are very many."""
    if len(faults) <= MOST_FAULTS:
        return faults
    return [*faults[:MOST_FAULTS], f"{file}: has more faults: correct these first, or is it another file?"]


def _read_table(table: str, found: Mapping[str, Any], place: _Place, faults: list[str]) -> dict[str, Any]:
    """Return the values of one table that were given, and add what is wrong with it to the faults."""
    values = {}
    for key, value in found.items():
        if key not in KEYS[table]:
            faults.append(f"{place(table, key)}: key {_shown_key(key)}: {_unknown_key(table, key)}")
            continue
        try:
            values[key] = KEYS[table][key].read(value)
        except UnfitError as error:
            faults.append(f"{place(table, key)}: key {key}: found {shown_value(value)}, expected {error}")
    return {key: value for key, value in values.items() if value is not None}


def _unknown_key(table: str, key: str) -> str:
    home, near = home_of(key), nearest_key(table, key)
    if home:
        return f"not known in [{table}]; it belongs under [{home}]"
    if near:
        return f"not known in [{table}]; did you mean {near}?"
    for other in KEYS:
        elsewhere = nearest_key(other, key)
        if elsewhere:
            return f"not known in [{table}]; did you mean {elsewhere}, under [{other}]?"
    return f"not known in [{table}]; known are {', '.join(KEYS[table])}"


def _stray_faults(tables: Mapping[str, Any], place: _Place) -> Iterator[str]:
    """Tell what stands outside the two tables."""
    for name, value in tables.items():
        if name in KEYS:
            if not isinstance(value, dict):
                yield f"{place(name)}: key {name}: found {shown_value(value)}, expected a line [{name}]"
        elif isinstance(value, dict):
            near = get_close_matches(name.lower()[:40], KEYS, n=1)
            cure = f"did you mean [{near[0]}]?" if near else "known are [flute] and [session]"
            yield f"{place(name)}: table [{_shown_key(name)}]: not known; {cure}"
        else:
            yield f"{place(name)}: key {_shown_key(name)}: stands outside a table; {_table_for(name)}"


def _table_for(key: str) -> str:
    """Say where a key belongs that stands outside the tables."""
    if home_of(key):
        return f"put it under [{home_of(key)}]"
    for table in KEYS:
        near = nearest_key(table, key)
        if near:
            return f"did you mean {near}, under [{table}]?"
    return "known are [flute] and [session], and their keys"


def _hole_faults(toml: Toml, flute: Mapping[str, Any], place: _Place) -> Iterator[str]:
    """Tell whether the number of holes is missing, and what does not go with it."""
    given = toml.tables.get("flute", {})
    meant = any(nearest_key("flute", key[-1]) == "holes" for key in toml.lines) or "holes" in toml.excused
    if isinstance(given, dict) and "holes" not in given and not meant:
        yield f"{place('flute')}: key holes: missing in [flute], expected holes = 1 to {MAX_HOLES}"
    yield from _pair_faults(flute, place)
    yield from _bore_faults(flute, place)


def _pair_faults(flute: Mapping[str, Any], place: _Place) -> Iterator[str]:
    """Tell whether there are more or fewer pairs than holes, or the flute ends above a hole."""
    pairs = flute.get("holes_mm")
    if pairs is not None and "holes" in flute and len(pairs) != flute["holes"]:
        found = "1 pair" if len(pairs) == 1 else f"{len(pairs)} pairs"
        expected = f"expected {flute['holes']}, one for each hole"
        yield f"{place('flute', 'holes_mm')}: key holes_mm: found {found}, {expected}"
    if pairs and flute.get("length_mm", pairs[-1][0] + 1.0) <= pairs[-1][0]:
        yield (
            f"{place('flute', 'length_mm')}: key length_mm: found {flute['length_mm']:g}, expected more than "
            f"{pairs[-1][0]:g}, where the lowest hole is: from the sound hole to the foot"
        )


def _bore_faults(flute: Mapping[str, Any], place: _Place) -> Iterator[str]:
    """Tell whether the bore's profile goes on beyond the foot, or the bore is none of its diameters."""
    profile = flute.get("bore_profile_mm")
    if profile is None:
        return
    end, length = profile[-1][0], flute.get("length_mm", profile[-1][0])
    if end > length:
        yield (
            f"{place('flute', 'bore_profile_mm')}: key bore_profile_mm: found a distance of {end:g}, "
            f"expected at most {length:g}, where the foot is (length_mm)"
        )
    sizes = [size for _, size in profile]
    least, most = min(sizes), max(sizes)
    if not least <= flute.get("bore_mm", least) <= most:
        yield (
            f"{place('flute', 'bore_mm')}: key bore_mm: found {flute['bore_mm']:g}, expected {least:g} to "
            f"{most:g}, as bore_profile_mm has it; with that key bore_mm may be left out"
        )


def _shown_key(key: str) -> str:
    return shown(key) or '""'
