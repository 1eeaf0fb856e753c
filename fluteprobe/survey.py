"""The measured flute: hears every take, decides every register, sums up every fingering.

Conventions: pitches are in cents above 1 Hz inside; notes are spelt in ASCII with a sharp where one is needed
("C#5"); deviations are positive where the flute is sharp; `uncertainty_cents` is standard (k = 1).
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from math import log2, sqrt
from pathlib import Path

from fluteprobe.flute.bumps import Bump
from fluteprobe.flute.fingering import Breath, Fingering
from fluteprobe.flute.register import (
    REGISTERS,
    Dimensions,
    Register,
    RegisterCall,
    Sounding,
    register_alone,
    registers_of,
)
from fluteprobe.flute.suspicion import called_without_name, doubted_names
from fluteprobe.flute.tuning import A4_HZ, nearest_note, temperature_shift_cents
from fluteprobe.hearing import MapTakes, hear_recording, hear_takes
from fluteprobe.kept import Kept
from fluteprobe.session import FluteFacts, Problem, Session, Sitting, Take, read_session
from fluteprobe.sound.recording import RecordingError
from fluteprobe.sound.tone import Tone

# The breath that a register is blown with, the usual one first: of those above the first, and of the first.
_USUAL: tuple[tuple[Breath, ...], ...] = (("over", "normal", "soft"), ("normal", "soft", "over"))
_NO_CALL = RegisterCall(register=None, probability=dict.fromkeys(REGISTERS, 1.0 / 3.0))

Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """One tone, read against the tuning and the flute.

    `note` and `cents` are the nearest equal-tempered note and the deviation from it as played;
    `cents_at_reference` is the same carried to the reference temperature, which is an estimate.
    """

    take: str
    fingering: Fingering | None
    breath: Breath | None
    tone: Tone
    note: str | None
    cents: float | None
    cents_at_reference: float | None
    call: RegisterCall


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry:
    """What one fingering gives in one register, over all its takes."""

    fingering: Fingering
    register: Register
    frequency_hz: float
    uncertainty_cents: float
    note: str
    cents: float
    cents_at_reference: float | None
    stretch_cents: float | None
    takes: tuple[str, ...]
    tones: int
    reliability: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Survey:
    """The measured flute."""

    flute: FluteFacts
    sitting: Sitting
    readings: tuple[Reading, ...]
    entries: tuple[Entry, ...]
    problems: tuple[Problem, ...]


def hear(path: Path | str, *, a4_hz: float = A4_HZ, name: str | None = None) -> tuple[Reading, ...]:
    """Return the tones of one recording, read against a tuning; nothing is known of the flute.

    Raises
    ------
    RecordingError
        If the file cannot be used; the message says what is wrong and what to do.
    """
    tones = hear_recording(Path(path))
    sitting = Sitting(a4_hz=a4_hz)
    return tuple(_reading(name or str(path), None, tone, sitting, _call_alone(tone)) for tone in tones)


def measure(
    folder: Path | str,
    *,
    on_take: Progress | None = None,
    map_takes: MapTakes | None = None,
    kept: Kept | None = None,
) -> Survey:
    """Return the survey of a session folder.

    Parameters
    ----------
    map_takes
        Hears the takes elsewhere than on this machine's cores: see `fluteprobe.cluster`.
    kept
        Where to find what was heard before, and to keep what is heard now: see `fluteprobe.kept`.

    Raises
    ------
    SessionError
        If the folder is no session; takes that cannot be used are problems of the survey instead.
    """
    return survey_of(read_session(Path(folder)), on_take=on_take, map_takes=map_takes, kept=kept)


def survey_of(
    session: Session,
    *,
    on_take: Progress | None = None,
    map_takes: MapTakes | None = None,
    kept: Kept | None = None,
) -> Survey:
    """Hear every take of a session, decide every register and sum up every fingering."""
    heard: list[tuple[Take, Tone]] = []
    problems = list(session.problems)
    for done, (take, result) in enumerate(hear_takes(session.takes, map_takes=map_takes, kept=kept), start=1):
        if isinstance(result, RecordingError):
            problems.append(Problem(take=take.name, message=str(result)))
        else:
            heard += [(take, tone) for tone in result]
        if on_take:
            on_take(done, len(session.takes))
    calls = _calls(session, heard)
    doubts = _doubts(session, heard)
    readings = tuple(
        _doubted(_reading(take.name, take, tone, session.sitting, call), doubts.get(take.name))
        for (take, tone), call in zip(heard, calls, strict=True)
    )
    return Survey(
        flute=session.flute,
        sitting=session.sitting,
        readings=readings,
        entries=summed_up(readings, session.takes, session.sitting),
        problems=tuple(problems),
    )


def _reading(name: str, take: Take | None, tone: Tone, sitting: Sitting, call: RegisterCall) -> Reading:
    note, cents = (
        (None, None) if tone.frequency_hz is None else nearest_note(tone.frequency_hz, sitting.a4_hz)
    )
    shift = _reference_shift_cents(sitting)
    if call.caution is not None:
        tone = replace(tone, cautions=(*tone.cautions, call.caution))
    return Reading(
        take=name,
        fingering=take.fingering if take else None,
        breath=take.breath if take else None,
        tone=tone,
        note=None if note is None else str(note),
        cents=cents,
        cents_at_reference=None if cents is None or shift is None else cents + shift,
        call=call,
    )


def _reference_shift_cents(sitting: Sitting) -> float | None:
    """Return what carries a pitch from the air's temperature to the reference; None unless both are known."""
    if sitting.air_temperature_c is None or sitting.reference_temperature_c is None:
        return None
    return temperature_shift_cents(sitting.air_temperature_c, sitting.reference_temperature_c)


def _calls(session: Session, heard: Sequence[tuple[Take, Tone]]) -> list[RegisterCall]:
    """Decide the register of every tone that sounds; breath alone has none."""
    sounding = [i for i, (_, tone) in enumerate(heard) if tone.frequency_hz is not None]
    soundings = [_sounding(*heard[i]) for i in sounding]
    decided = registers_of(session.flute.holes, soundings, _dimensions(session))
    calls = dict(zip(sounding, decided, strict=True))
    return [calls.get(i, _NO_CALL) for i in range(len(heard))]


def _doubts(session: Session, heard: Sequence[tuple[Take, Tone]]) -> Mapping[str, str]:
    """Return what makes the name of a take doubtful, by take."""
    clean = [_sounding(take, tone) for take, tone in heard if tone.kind == "tone"]
    return doubted_names(session.flute.holes, clean, _dimensions(session))


def _doubted(reading: Reading, doubt: str | None) -> Reading:
    """Add the doubt about a take's name; a register that rests on the name is undecided."""
    if doubt is None or reading.tone.frequency_hz is None:
        return reading
    tone = replace(reading.tone, cautions=(*reading.tone.cautions, doubt))
    return replace(reading, tone=tone, call=called_without_name(reading.call, _bumps(tone)))


def _dimensions(session: Session) -> Dimensions | None:
    """Return the dimensions where flute.toml gives bore, wall and holes; air unknown is taken as 20 °C."""
    flute, air_c = session.flute, session.sitting.air_temperature_c
    if flute.bore_at_head_mm is None or flute.wall_mm is None or flute.holes_mm is None:
        return None
    return Dimensions(
        bore_mm=flute.bore_at_head_mm,
        wall_mm=flute.wall_mm,
        holes_mm=flute.holes_mm,
        profile_mm=flute.bore_profile_mm or (),
        temperature_c=20.0 if air_c is None else air_c,
    )


def _call_alone(tone: Tone) -> RegisterCall:
    return _NO_CALL if tone.frequency_hz is None else register_alone(_bumps(tone))


def _sounding(take: Take, tone: Tone) -> Sounding:
    return Sounding(
        take=take.name,
        fingering=take.fingering,
        breath=take.breath,
        pitch_cents=_pitch_cents(tone),
        bumps=_bumps(tone),
    )


def _bumps(tone: Tone) -> tuple[Bump, ...]:
    """Return the breath resonances as ratios to the tone's own frequency, with their prominence."""
    own = tone.frequency_hz or 1.0
    return tuple((bump.frequency_hz / own, bump.prominence_db) for bump in tone.breath_resonances)


def _pitch_cents(tone: Tone) -> float:
    assert tone.frequency_hz is not None  # noqa: S101  (callers ask for sounding tones only)
    return 1200.0 * log2(tone.frequency_hz)


# --- entries -----------------------------------------------------------------------------------------


def summed_up(readings: Sequence[Reading], takes: Sequence[Take], sitting: Sitting) -> tuple[Entry, ...]:
    """Return one entry for every fingering and register that was decided, low to high."""
    groups: dict[tuple[Fingering, Register], dict[Breath | None, list[Reading]]] = {}
    for reading in readings:
        if (
            reading.fingering is not None
            and reading.call.register is not None
            and reading.tone.kind == "tone"
        ):
            breaths = groups.setdefault((reading.fingering, reading.call.register), {})
            breaths.setdefault(reading.breath, []).append(reading)
    scatter = _scatter_of_breaths_cents(list(groups.values()))
    blown = [_as_it_is_blown(register, breaths) for (_, register), breaths in groups.items()]
    entries = [_entry(group, takes, sitting, scatter[group[0].breath]) for group in blown]
    first = {entry.fingering: entry for entry in entries if entry.register == 1}
    return tuple(
        sorted((_stretched(entry, first) for entry in entries), key=lambda entry: entry.frequency_hz)
    )


def _as_it_is_blown(register: Register, breaths: Mapping[Breath | None, list[Reading]]) -> Sequence[Reading]:
    """Return the tones of a register as it is usually blown: normally for the first, hard for those above.

    Breath bends a tone: one that was overblown and stayed in the first register is far sharp of what the
    fingering plays there. It counts where the fingering gave that register in no other way.
    """
    usual = _USUAL[register == 1]
    return breaths[min(breaths, key=lambda breath: usual.index(breath or "normal"))]


def _entry(group: Sequence[Reading], takes: Sequence[Take], sitting: Sitting, scatter_cents: float) -> Entry:
    """Sum up the tones of one fingering in one register."""
    fingering, register = group[0].fingering, group[0].call.register
    assert fingering is not None  # noqa: S101  (grouped by both)
    assert register is not None  # noqa: S101
    mean_cents, uncertainty = _mean(group, scatter_cents)
    frequency_hz = float(2.0 ** (mean_cents / 1200.0))
    note, cents = nearest_note(frequency_hz, sitting.a4_hz)
    shift = _reference_shift_cents(sitting)
    gave = {reading.take for reading in group}
    breaths = {reading.breath for reading in group}
    tried = {take.name for take in takes if take.fingering == fingering and take.breath in breaths}
    return Entry(
        fingering=fingering,
        register=register,
        frequency_hz=frequency_hz,
        uncertainty_cents=uncertainty,
        note=str(note),
        cents=cents,
        cents_at_reference=None if shift is None else cents + shift,
        stretch_cents=None,
        takes=tuple(dict.fromkeys(reading.take for reading in group)),
        tones=len(group),
        reliability=len(gave & tried) / len(tried) if tried else 1.0,
    )


def _stretched(entry: Entry, first: Mapping[Fingering, Entry]) -> Entry:
    """Add the stretch: how far a second-register tone is from the octave over the same fingering's first."""
    if entry.register != 2 or entry.fingering not in first:
        return entry
    octaves = log2(entry.frequency_hz / first[entry.fingering].frequency_hz)
    return replace(entry, stretch_cents=1200.0 * (octaves - 1.0))


def _mean(group: Sequence[Reading], scatter_cents: float) -> tuple[float, float]:
    """Return the weighted mean pitch of some tones and its standard uncertainty, both in cents.

    Each tone counts by the inverse of its own variance plus that between takes (DerSimonian & Laird, Control.
    Clin. Trials 7, 177 (1986)); where these tones scatter more than that, by the ratio (Birge, Phys. Rev. 40,
    207 (1932)).
    """
    pitches = [_pitch_cents(reading.tone) for reading in group]
    weights = [1.0 / (_own_variance(reading) + scatter_cents**2) for reading in group]
    total = sum(weights)
    mean = sum(w * p for w, p in zip(weights, pitches, strict=True)) / total
    spread = sum(w * (p - mean) ** 2 for w, p in zip(weights, pitches, strict=True))
    ratio = max(1.0, spread / (len(group) - 1)) if len(group) > 1 else 1.0
    return mean, sqrt(ratio / total)


def _own_variance(reading: Reading) -> float:
    return max(reading.tone.uncertainty_cents or 0.0, 1e-3) ** 2


def _scatter_of_breaths_cents(
    groups: Sequence[Mapping[Breath | None, Sequence[Reading]]],
) -> dict[Breath | None, float]:
    """Return the scatter between takes by breath; a breath of which nothing was repeated has that of all.

    Hard blowing scatters more, and says nothing of how well a normal breath repeats.
    """
    of_all = _pooled_scatter_cents([group for breaths in groups for group in breaths.values()])
    scatter: dict[Breath | None, float] = {}
    for breath in {breath for breaths in groups for breath in breaths}:
        mine = [breaths[breath] for breaths in groups if breath in breaths]
        repeated = any(len(group) > 1 for group in mine)
        scatter[breath] = _pooled_scatter_cents(mine) if repeated else of_all
    return scatter


def _pooled_scatter_cents(groups: Sequence[Sequence[Reading]]) -> float:
    """Return the scatter between takes beyond the tones' own uncertainty, pooled over what was repeated."""
    squares, freedom, own = 0.0, 0, 0.0
    for group in groups:
        if len(group) < 2:
            continue
        pitches = [_pitch_cents(reading.tone) for reading in group]
        mean = sum(pitches) / len(pitches)
        squares += sum((pitch - mean) ** 2 for pitch in pitches)
        freedom += len(group) - 1
        own += (len(group) - 1) * sum(_own_variance(reading) for reading in group) / len(group)
    return sqrt(max(squares - own, 0.0) / freedom) if freedom else 0.0
