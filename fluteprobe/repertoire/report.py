"""What can be played, and a keyboard's tuning, as JSON values.

Conventions: those of the schemas plays-1 and tuning-1 in `fluteprobe/schema/`. Numbers are rounded to what
can be meant: cents to 0.01, frequencies to 0.0001 Hz, shares to 0.0001. Notes are spelt in ASCII with
sharps; `F4+50` is half a semitone above F4.
"""

import json
from collections.abc import Iterable, Mapping, Sequence
from importlib.resources import files
from typing import Any, Literal, cast

from fluteprobe.flute.scales import tonic_name
from fluteprobe.flute.tuning import Note
from fluteprobe.repertoire.keyboard import Address, Key
from fluteprobe.repertoire.scales import ScaleFit
from fluteprobe.repertoire.sounds import Match, Sound, Standard, Way
from fluteprobe.repertoire.tunes import TuneFit, short_notes
from fluteprobe.score.tune import Tune, TuneNote
from fluteprobe.version import __version__

PLAYS_SCHEMA = "fluteprobe/plays/1"
TUNING_SCHEMA = "fluteprobe/tuning/1"


def plays_json(
    tolerance_cents: float, best_a4: bool, flutes: Iterable[Mapping[str, Any]], problems: Iterable[str]
) -> dict[str, Any]:
    """Return everything that was asked of some flutes, by the schema plays-1."""
    return {
        "schema": PLAYS_SCHEMA,
        "version": __version__,
        "tolerance_cents": tolerance_cents,
        "best_a4": best_a4,
        "flutes": list(flutes),
        "problems": list(problems),
    }


def flute_json(
    name: str,
    source: str,
    standard: Standard,
    scales: Iterable[ScaleFit],
    tune: Mapping[str, Any] | None,
) -> dict[str, Any]:
    """Return what one flute plays."""
    return {
        "name": name,
        "source": source,
        "a4_hz": _rounded(standard.a4_hz, 4),
        "scales": [_scale_json(fit) for fit in scales],
        "tune": tune,
    }


def tune_json(tune: Tune, fits: Sequence[TuneFit]) -> dict[str, Any]:
    """Return the tune; the first fit in full, the others without their notes."""
    return {
        "title": tune.title,
        "part": tune.part,
        "notes": len(tune.notes),
        "cautions": list(tune.cautions),
        "transpositions": [_fit_json(fit) for fit in fits],
        "fingerings": [_match_json(match) for match in fits[0].matches] if fits else [],
        "short": [_short_json(note, fits[0].semitones) for note in short_notes(tune, fits[0])]
        if fits
        else [],
    }


def tuning_json(name: str, keys: Iterable[Key], address: Address, a4_hz: float) -> dict[str, Any]:
    """Return a keyboard's tuning by the schema tuning-1."""
    return {
        "schema": TUNING_SCHEMA,
        "version": __version__,
        "flute": name,
        "a4_hz": _rounded(a4_hz, 4),
        "device": address.device,
        "program": address.program,
        "bank": address.bank,
        "keys": [
            {
                "key": key.note.midi,
                "note": str(key.note),
                "cents": _rounded(key.cents, 2),
                **_sound_json(key.sound),
                "others": [_sound_json(sound) for sound in key.others],
            }
            for key in keys
        ],
    }


def schema(name: Literal["plays-1", "tuning-1"]) -> dict[str, Any]:
    """Return a published JSON Schema (draft 2020-12)."""
    text = files("fluteprobe").joinpath("schema", f"{name}.schema.json").read_text(encoding="utf-8")
    return cast(dict[str, Any], json.loads(text))


def note_name(semitones: float) -> str:
    """Return a pitch as the nearest note, with what is left in cents if that is a cent or more: `F4+50`."""
    note = Note(round(semitones))
    cents = round(100.0 * (semitones - note.midi))
    return f"{note}{cents:+d}" if cents else str(note)


def _scale_json(fit: ScaleFit) -> dict[str, Any]:
    return {
        "scale": fit.scale.name,
        "steps": list(fit.scale.steps),
        "tonic": tonic_name(fit.tonic),
        "a4_hz": _rounded(fit.a4_hz, 4),
        "grade": fit.grade,
        "octaves": [
            {"from": note_name(fit.notes[place].target_semitones), "grade": grade}
            for place, grade in fit.octaves
        ],
        "unbroken": [note_name(match.target_semitones) for match in fit.notes[slice(*fit.run)]],
        "missing": [note_name(match.target_semitones) for match in fit.missing],
        "notes": [_match_json(match) for match in fit.notes],
    }


def _fit_json(fit: TuneFit) -> dict[str, Any]:
    return {
        "semitones": fit.semitones,
        "a4_hz": _rounded(fit.a4_hz, 4),
        "surely": _rounded(fit.surely, 4),
        "perhaps": _rounded(fit.perhaps, 4),
        "expected": _rounded(fit.expected, 4),
        "off_cents": None if fit.off_cents is None else _rounded(fit.off_cents, 2),
        "moves": None if fit.moves is None else _rounded(fit.moves, 2),
        "short": fit.short,
    }


def _short_json(note: TuneNote, semitones: int) -> dict[str, Any]:
    return {
        "bar": note.bar,
        "beat": _rounded(note.beat, 3),
        "start_quarters": _rounded(note.start_quarters, 4),
        "written": note_name(note.pitch_semitones),
        "sounds": note_name(note.pitch_semitones + semitones),
    }


def _match_json(match: Match) -> dict[str, Any]:
    return {
        "note": note_name(match.target_semitones),
        "semitones": _rounded(match.target_semitones, 4),
        "grade": match.grade,
        "ways": [_way_json(way) for way in match.ways],
        "nearest": None if match.nearest is None else _way_json(match.nearest),
    }


def _way_json(way: Way) -> dict[str, Any]:
    return {
        **_sound_json(way.sound),
        "cents": _rounded(way.deviation_cents, 2),
        "in_tolerance": _rounded(way.in_tolerance, 4),
        "grade": way.grade,
    }


def _sound_json(sound: Sound) -> dict[str, Any]:
    return {
        "fingering": str(sound.fingering),
        "register": sound.register,
        "frequency_hz": _rounded(sound.frequency_hz, 4),
        "uncertainty_cents": _rounded(sound.uncertainty_cents, 3),
        "reliability": _rounded(sound.reliability, 4),
        "register_probability": _rounded(sound.register_probability, 4),
    }


def _rounded(value: float, digits: int) -> float:
    return round(float(value), digits) + 0.0
