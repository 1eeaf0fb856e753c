"""One long recording becomes takes: heard from pause to pause, aligned with the order, then cut.

Conventions: times in seconds from the start of the long recording. A sound is what stands between two
pauses. A cutting is a proposal: nothing is written by it; the same recording, order and session give the
same one. The takes are numbered on from those that the session has.

A take that is less than 95 % sure to be that one is told as unsure; under 80 % it is doubtful, and somebody
has to look. A cutting has faults where what was heard and the order cannot be brought together; nothing can
be written from it then.
"""

from collections.abc import Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from math import log2
from pathlib import Path
from typing import Any, Literal

from fluteprobe.files import add_files, make_folder, read_whole, sweep_passing
from fluteprobe.flute.alignment import Alignment, Heard, Placed, Wanted, align
from fluteprobe.flute.fingering import Breath, Fingering
from fluteprobe.flute.plan import EDITIONS, take_plan
from fluteprobe.flute.tuning import nearest_note
from fluteprobe.session import TAKES_FOLDER, Session, SessionError, printable
from fluteprobe.session.files import is_inside
from fluteprobe.session.names import TakeName, UnfitNameError, example, read_take_name
from fluteprobe.session.words import shown
from fluteprobe.sound.cut import part_format, part_of
from fluteprobe.sound.phrases import Phrase, Progress, find_phrases
from fluteprobe.sound.recording import Recording
from fluteprobe.version import __version__

SPLIT_SCHEMA = "fluteprobe/split/1"
SURE = 0.95
DOUBTFUL = 0.8

_LARGEST_ORDER_BYTES = 100_000
_SHORT_S, _BRIEF_S = 0.45, 0.8
_QUIET_DB, _FAINT_DB = 15.0, 25.0  # under the middle one of all sounds that hold tones
_GLIDING_CENTS, _SWINGING_CENTS = 40.0, 80.0
_STRAY, _PERHAPS_STRAY, _LIKELY_STRAY = 0.03, 0.15, 0.5
_LEAST_PAUSE_S = 0.3
_LONGEST_TAKE_S = 120.0
_MOST_OPEN, _OPEN_SHARE = 2, 0.25

What = Literal["take", "again", "not a take", "voice or noise"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Order:
    """The takes in the order in which they were played, and what that order is called."""

    name: str
    takes: tuple[Wanted, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Sound:
    """What stands between two pauses, and the take that it is.

    `cut_start_s` to `cut_end_s` is what is written: the sound with the room's pauses. `file` is the take's
    file name, None for what is no take. `frequency_hz` is of the tone that counts, None for breath and noise.
    `expected_hz` is what the take was expected to sound, `others` the next likely answers.
    """

    start_s: float
    end_s: float
    cut_start_s: float
    cut_end_s: float
    what: What
    file: str | None
    fingering: Fingering | None
    breath: Breath | None
    number: int | None
    frequency_hz: float | None
    note: str | None
    cents: float | None
    register: int | None
    expected_hz: float | None
    probability: float
    others: tuple[tuple[str | None, float], ...]
    remark: str

    @property
    def is_doubtful(self) -> bool:
        """Whether it is a take, and so unsure which that somebody has to look."""
        return self.file is not None and self.probability < DOUBTFUL


@dataclass(frozen=True, slots=True, kw_only=True)
class Cutting:
    """How a long recording is to be cut: every sound in turn, what was not heard, and why it cannot be."""

    recording: Path
    duration_s: float
    order: str
    sounds: tuple[Sound, ...]
    missing: tuple[str, ...]
    cautions: tuple[str, ...]
    faults: tuple[str, ...]

    @property
    def takes(self) -> tuple[Sound, ...]:
        """The sounds that are takes."""
        return tuple(sound for sound in self.sounds if sound.file is not None)

    @property
    def doubtful(self) -> tuple[Sound, ...]:
        """The takes that somebody has to look at."""
        return tuple(sound for sound in self.sounds if sound.is_doubtful)


# --- the order ---------------------------------------------------------------------------------------


def sheet_order(holes: int, edition: str) -> Order:
    """Return the order of a take sheet."""
    takes = (Wanted(fingering=take.fingering, breath=take.breath) for take in take_plan(holes, edition))
    return Order(name=f"the {edition} take sheet", takes=tuple(takes))


def read_order(path: Path, holes: int) -> Order:
    """Return the order that a text file gives: takes by their names, one a line or several; `#` is a remark.

    Raises
    ------
    SessionError
        If it cannot be read or holds what is no take; it tells all faults at once.
    """
    name = printable(str(path))
    try:
        text = read_whole(path, _LARGEST_ORDER_BYTES).decode("utf-8-sig")
    except UnicodeDecodeError:
        raise SessionError(
            f"{name} is no plain text (UTF-8): write one take a line, as oxxxxx-over"
        ) from None
    except OSError as error:
        raise SessionError(f"{name} cannot be read: {error.strerror or error}") from None
    takes, faults = [], []
    for number, word in _words(text):
        try:
            take = read_take_name(word, holes)
            takes.append(Wanted(fingering=take.fingering, breath=take.breath))
        except UnfitNameError:
            usual = f"{example(holes)}-over"
            faults.append(f"{name} line {number}: found {shown(word)}, expected a take's name, as {usual}")
    if not takes and not faults:
        faults.append(f"{name} names no take: write one a line, as {example(holes)}-over")
    if faults:
        raise SessionError(*faults)
    return Order(name=name, takes=tuple(takes))


def _words(text: str) -> Iterator[tuple[int, str]]:
    for number, line in enumerate(text.splitlines(), start=1):
        for word in line.partition("#")[0].replace(",", " ").replace(";", " ").split():
            yield number, word


# --- hearing -----------------------------------------------------------------------------------------


def cutting_of(
    recording: Recording,
    session: Session,
    order: Order,
    pool: Executor | None = None,
    on_piece: Progress | None = None,
) -> Cutting:
    """Listen to a long recording and say which take every sound in it is.

    Raises
    ------
    RecordingError
        If the recording cannot be read.
    """
    phrases = find_phrases(recording, pool, on_piece)
    cutting = _cut(recording, session, order, phrases)
    if not cutting.faults or order.name not in {_edition_name(edition) for edition in EDITIONS}:
        return cutting
    return replace(cutting, faults=(*cutting.faults, *_better(recording, session, order, phrases)))


def _edition_name(edition: str) -> str:
    return f"the {edition} take sheet"


def _better(recording: Recording, session: Session, order: Order, phrases: Sequence[Phrase]) -> Iterator[str]:
    """Say which other edition of the take sheet fits without a doubt, where one does."""
    for edition in EDITIONS:
        other = sheet_order(session.flute.holes, edition)
        cutting = None if other == order else _cut(recording, session, other, phrases)
        if cutting is not None and not cutting.faults and not cutting.doubtful:
            yield f"{other.name} fits: give --edition {edition}"
            return


def _cut(recording: Recording, session: Session, order: Order, phrases: Sequence[Phrase]) -> Cutting:
    """Align what was heard with an order."""
    usual_db = _usual_level(phrases)
    known = [k for k, phrase in enumerate(phrases) if phrase.tones or phrase.is_breath]
    heard = [_heard(phrases[k], usual_db) for k in known]
    alignment = align(heard, order.takes)
    places = dict(zip(known, alignment.placed, strict=True))
    namer = _Namer(session, part_format(recording).suffix)
    sounds = tuple(_sound(phrase, places.get(k), alignment, order, namer) for k, phrase in enumerate(phrases))
    sounds = tuple(_with_note(sound, session.sitting.a4_hz) for sound in sounds)
    return Cutting(
        recording=recording.path,
        duration_s=recording.duration_s,
        order=order.name,
        sounds=sounds,
        missing=tuple(_numbered(order, take) for take in alignment.missing),
        cautions=recording.cautions,
        faults=tuple(_faults(sounds, heard, order)),
    )


def _usual_level(phrases: Sequence[Phrase]) -> float:
    levels = sorted(phrase.level_db for phrase in phrases if phrase.tones)
    return levels[len(levels) // 2] if levels else 0.0


def _heard(phrase: Phrase, usual_db: float) -> Heard:
    """Return a phrase as the alignment knows it: its pitches, and how likely it is no take by its sound."""
    tones = [tone for tone in phrase.tones if tone.frequency_hz is not None and tone.kind != "edge tone"]
    if not tones:
        return Heard(pitch_cents=None, stray=_STRAY)
    longest = max(tones, key=lambda tone: tone.end_s - tone.start_s)
    highest = max(tone.frequency_hz or 0.0 for tone in tones)
    return Heard(
        pitch_cents=1200.0 * log2(longest.frequency_hz or 1.0),
        highest_cents=1200.0 * log2(highest),
        stray=_stray(phrase, usual_db),
    )


def _stray(phrase: Phrase, usual_db: float) -> float:
    """Return how likely a sound with tones is no take: a spoken vowel, a squeak, something far off."""
    held_s = sum(tone.end_s - tone.start_s for tone in phrase.tones)
    restless = any(
        abs(tone.drift_cents or 0.0) > _GLIDING_CENTS
        or (tone.vibrato is not None and tone.vibrato.extent_cents > _SWINGING_CENTS)
        for tone in phrase.tones
    )
    if held_s < _SHORT_S or phrase.level_db < usual_db - _FAINT_DB:
        return _LIKELY_STRAY
    if held_s < _BRIEF_S or restless or phrase.level_db < usual_db - _QUIET_DB:
        return _PERHAPS_STRAY
    return _STRAY


# --- names -------------------------------------------------------------------------------------------


class _Namer:
    """Gives takes the next free number of their fingering and breath."""

    def __init__(self, session: Session, suffix: str) -> None:
        self.suffix = suffix
        self.given: dict[tuple[Fingering, Breath], int] = {}
        for take in session.takes:
            key = take.fingering, take.breath
            self.given[key] = max(self.given.get(key, 0), take.number)

    def next(self, fingering: Fingering, breath: Breath) -> tuple[int, str]:
        number = self.given.get((fingering, breath), 0) + 1
        self.given[fingering, breath] = number
        stem = TakeName(fingering=fingering, breath=breath, number=number).stem
        return number, f"{stem}{self.suffix}"


def _numbered(order: Order, take: int) -> str:
    """Return a take's name, numbered where the order has the same one before."""
    wanted = order.takes[take]
    number = order.takes[: take + 1].count(wanted)
    return TakeName(fingering=wanted.fingering, breath=wanted.breath, number=number).stem


def _stem(take: Wanted) -> str:
    return TakeName(fingering=take.fingering, breath=take.breath, number=None).stem


def _sound(phrase: Phrase, place: Placed | None, alignment: Alignment, order: Order, namer: _Namer) -> Sound:
    """Return a phrase as what it was found to be."""
    sound = Sound(
        start_s=phrase.start_s, end_s=phrase.end_s,
        cut_start_s=phrase.cut_start_s,
        cut_end_s=min(phrase.cut_end_s, phrase.cut_start_s + _LONGEST_TAKE_S),
        what="voice or noise", file=None, fingering=None, breath=None, number=None,
        frequency_hz=_frequency(phrase, "normal"), note=None, cents=None, register=None, expected_hz=None,
        probability=1.0, others=(), remark="",
    )  # fmt: skip
    if place is None:
        return sound
    others = tuple((None if k is None else _stem(order.takes[k]), chance) for k, chance in place.others)
    sound = replace(sound, probability=place.probability, others=others)
    if place.take is None:
        words = "breath, no take" if sound.frequency_hz is None else "not in the order"
        return replace(sound, what="not a take", remark=words)
    take = order.takes[place.take]
    breath = _breath(place, take, alignment)
    number, file = namer.next(take.fingering, breath)
    sound = replace(
        sound,
        what="again" if place.part == "again" else "take",
        file=file,
        fingering=take.fingering,
        breath=breath,
        number=number,
        frequency_hz=_frequency(phrase, take.breath),
        register=place.register,
        expected_hz=float(2.0 ** (alignment.expected_cents[place.take, 0] / 1200.0)),
    )
    return replace(sound, remark=", ".join(_remarks(sound, place, take)))


def _breath(place: Placed, take: Wanted, alignment: Alignment) -> Breath:
    """Return how a take was blown: as asked, but one played once more may be overblown then."""
    first = next(each for each in alignment.placed if each.take == place.take)
    overblown = place.part == "again" and (place.register or 0) > 1 and first.register == 1
    return "over" if overblown and take.breath != "over" else take.breath


def _frequency(phrase: Phrase, breath: Breath) -> float | None:
    """Return the frequency of the tone that counts: the longest, of overblown takes the highest."""
    tones = [tone for tone in phrase.tones if tone.kind != "edge tone"]
    if not tones:
        return None
    if breath == "over":
        return max(tone.frequency_hz or 0.0 for tone in tones)
    return max(tones, key=lambda tone: tone.end_s - tone.start_s).frequency_hz


def _remarks(sound: Sound, place: Placed, take: Wanted) -> Iterator[str]:
    """Say what is worth a second look about a take."""
    if place.part == "again":
        yield "once more"
    if sound.frequency_hz is None:
        yield "no tone spoke"
    elif place.register is None:
        yield "not at an expected pitch"
    elif take.breath == "over" and place.register == 1:
        yield "stayed low"
    elif take.breath != "over" and place.register > 1:
        yield "overblown"
    if sound.probability < SURE:
        yield _doubt(sound)
    if sound.end_s > sound.cut_end_s:
        yield "its first two minutes"
    elif min(sound.start_s - sound.cut_start_s, sound.cut_end_s - sound.end_s) < _LEAST_PAUSE_S:
        yield "short pause"


def _doubt(sound: Sound) -> str:
    """Name the next likely answer."""
    other, chance = sound.others[0] if sound.others else (None, 0.0)
    return f"unsure: or {other or 'no take'} ({100.0 * chance:.0f} %)"


def _with_note(sound: Sound, a4_hz: float) -> Sound:
    if sound.frequency_hz is None:
        return sound
    note, cents = nearest_note(sound.frequency_hz, a4_hz)
    return replace(sound, note=str(note), cents=cents)


# --- what cannot be brought together -------------------------------------------------------------------


def _faults(sounds: Sequence[Sound], heard: Sequence[Heard], order: Order) -> Iterator[str]:
    """Say why what was heard cannot be brought together with the order."""
    clear = sum(1 for each in heard if not each.is_breath and each.stray < _LIKELY_STRAY)
    takes = [sound for sound in sounds if sound.file is not None]
    spoken = sum(1 for sound in takes if sound.frequency_hz is not None)
    if not clear:
        yield "no steady tone was heard: is it the right recording?"
    elif clear - spoken > max(_MOST_OPEN, _OPEN_SHARE * clear):
        yield (
            f"{clear} tones were heard, and only {spoken} of them fit {order.name} "
            f"({len(order.takes)} takes): say in which order it was played, with --edition or --order"
        )


# --- writing -----------------------------------------------------------------------------------------


def write_takes(cutting: Cutting, recording: Recording, session: Session) -> tuple[Path, ...]:
    """Write every take of a cutting into the session's takes/, all of them or none, over no file.

    Raises
    ------
    ValueError
        If the cutting has faults.
    RecordingError
        If the recording cannot be read.
    SessionError
        If takes/ is a link that leads out of the session folder.
    OSError
        If a file cannot be written, or is there already.
    """
    if cutting.faults:
        raise ValueError("a cutting with faults cannot be written")
    folder = session.folder / TAKES_FOLDER
    if not is_inside(folder, session.folder):
        raise SessionError(f"{printable(str(folder))} leads out of the session folder: make it a folder")
    make_folder(folder)
    sweep_passing(folder)
    places = [(folder / (sound.file or ""), sound) for sound in cutting.takes]
    end_s = recording.duration_s
    add_files(
        (path, part_of(recording, sound.cut_start_s, min(sound.cut_end_s, end_s))) for path, sound in places
    )
    return tuple(path for path, _ in places)


def split_json(cutting: Cutting, session: Session, written: Sequence[Path] = ()) -> dict[str, Any]:
    """Return a cutting as JSON values by the schema split-1."""
    return {
        "schema": SPLIT_SCHEMA,
        "version": __version__,
        "recording": printable(str(cutting.recording)),
        "duration_s": round(cutting.duration_s, 3),
        "flute": {"name": session.flute.name, "holes": session.flute.holes},
        "order": cutting.order,
        "sounds": [_sound_json(sound) for sound in cutting.sounds],
        "missing": list(cutting.missing),
        "cautions": list(cutting.cautions),
        "faults": list(cutting.faults),
        "written": [printable(str(path)) for path in written],
    }


def _sound_json(sound: Sound) -> Mapping[str, Any]:
    return {
        "start_s": round(sound.start_s, 3),
        "end_s": round(sound.end_s, 3),
        "cut_start_s": round(sound.cut_start_s, 3),
        "cut_end_s": round(sound.cut_end_s, 3),
        "what": sound.what,
        "file": sound.file,
        "fingering": None if sound.fingering is None else str(sound.fingering),
        "breath": sound.breath,
        "number": sound.number,
        "frequency_hz": _rounded(sound.frequency_hz, 2),
        "note": sound.note,
        "cents": _rounded(sound.cents, 1),
        "register": sound.register,
        "expected_hz": _rounded(sound.expected_hz, 1),
        "probability": round(sound.probability, 4),
        "others": [{"take": take, "probability": round(chance, 4)} for take, chance in sound.others],
        "remark": sound.remark,
    }


def _rounded(value: float | None, digits: int) -> float | None:
    return None if value is None else round(value, digits)
