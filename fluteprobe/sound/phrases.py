"""What sounds in a long recording, from pause to pause: the pass that a long recording is cut by.

Conventions: times in seconds from the start of the recording, levels in dB against a full-scale square wave,
every 10 ms. A pause lasts 0.3 s at least: so much is asked of the room's own noise when a take is measured. A
phrase is what sounds between two pauses: one tone or several, or the breath alone.

The recording is passed over once for its level. Only where that stands out of the room is it listened to,
some seconds at a time, on all cores; memory does not grow with the recording's length.
"""

from collections import deque
from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import Executor, Future
from dataclasses import dataclass, replace
from itertools import islice, starmap

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.recording import Recording, Samples
from fluteprobe.sound.tone import Tone, read_tones

Floats = NDArray[np.float32]
Progress = Callable[[int, int], None]

STEP_S = 0.01
PAUSE_S = 0.3

_BLOCK_S = 20.0
_LOWEST_DB = -90.0
_ROOM_SHARE = 0.1
_ROOM_AROUND_S = 30
_ABOVE_ROOM_DB = 8.0
_SHORTEST_S = 0.1
_LONGEST_SLICE_S = 10.0
_MARGIN_S = 0.4
_ROOM_KEPT_S = 0.5
_SHORTEST_TONE_S = 0.3
_PASSING_SHARE = 0.3  # of the longest tone beside it
_FALLEN_DB = 15.0  # under the tones to either side: the flute has stopped
_NO_TONE_S = 1.0
_ONE_FINGERING_CENTS = (
    550.0  # nearer than this no two registers of a fingering stand: the third and second are
)
_BREATH_S = 0.6
_BREATH_DB = 10.0
_BREATH_SHARE = 0.85
_UNEVEN_DB = 2.0  # from one tenth of a second to the next: breath 0.8, words 2.4 and more
_EDGE_STEPS = 5
_WAITING = 4


@dataclass(frozen=True, slots=True, kw_only=True)
class Loudness:
    """The level along a recording and the room's own, both (steps,), a step every 10 ms."""

    level_db: Floats
    room_db: Floats

    @property
    def sounds(self) -> NDArray[np.bool_]:
        """Where something stands out of the room, (steps,)."""
        return self.level_db > self.room_db + _ABOVE_ROOM_DB


@dataclass(frozen=True, slots=True, kw_only=True)
class Phrase:
    """What sounds between two pauses; `tones` is empty where it is the breath or anything else.

    `start_s` to `end_s` is the sound; `cut_start_s` to `cut_end_s` has the room's pause on both sides as
    well, as far as there is one.
    """

    start_s: float
    end_s: float
    cut_start_s: float
    cut_end_s: float
    tones: tuple[Tone, ...]
    is_breath: bool
    level_db: float


def find_phrases(
    recording: Recording, pool: Executor | None = None, on_piece: Progress | None = None
) -> tuple[Phrase, ...]:
    """Return everything that sounds in a recording, in order; `on_piece` is told how many pieces are done.

    Raises
    ------
    RecordingError
        If the file cannot be read.
    """
    loudness = measure_loudness(recording)
    pieces = list(_pieces(loudness))
    found: list[Phrase] = []
    heard = _all_heard(recording, pieces, loudness, pool)
    for done, ((first, last), tones) in enumerate(zip(pieces, heard, strict=True), start=1):
        groups = _groups(tones, loudness)
        if groups:
            found += _phrases(groups, (first, last), loudness)
        else:
            found.append(_other(first, last, loudness))
        if on_piece:
            on_piece(done, len(pieces))
    return _with_pauses(found, loudness)


def measure_loudness(recording: Recording) -> Loudness:
    """Pass over a recording and return its level and the room's.

    The room's is the lowest within half a minute to either side of what a tenth of each second stays under: a
    player pauses more often than that.
    """
    step = max(round(STEP_S * recording.rate_hz), 1)
    blocks = (block for _, block in recording.blocks(step * round(_BLOCK_S / STEP_S)))
    power = np.concatenate([_step_powers(block, step) for block in blocks])
    smooth = np.convolve(np.pad(power, 1, mode="edge"), np.ones(3) / 3.0, mode="valid")
    level = np.maximum(10.0 * np.log10(smooth + 1e-20), _LOWEST_DB).astype(np.float32)
    return Loudness(level_db=level, room_db=_room(level))


def _step_powers(block: Samples, step: int) -> Floats:
    """Return the variance of each step, without what is slower: wind, a hand on the microphone."""
    whole = block[: len(block) // step * step].reshape(-1, step)
    powers = np.var(whole, axis=1) if len(whole) else np.var(block, keepdims=True)
    return np.asarray(powers, dtype=np.float32)


def _room(level: Floats) -> Floats:
    """Return the room's level at every step."""
    second = round(1.0 / STEP_S)
    rows = np.pad(level, (0, -len(level) % second), mode="edge").reshape(-1, second)
    place = int(_ROOM_SHARE * second)
    quiet = np.pad(np.partition(rows, place, axis=1)[:, place], _ROOM_AROUND_S, mode="edge")
    lowest = np.lib.stride_tricks.sliding_window_view(quiet, 2 * _ROOM_AROUND_S + 1).min(axis=1)
    return np.asarray(np.repeat(lowest, second)[: len(level)])


# --- pieces ------------------------------------------------------------------------------------------


def _pieces(loudness: Loudness) -> Iterator[tuple[int, int]]:
    """Yield (first, last) step, last excluded, of what sounds without a pause."""
    edges = np.flatnonzero(np.diff(loudness.sounds, prepend=False, append=False))
    joined: list[list[int]] = []
    for first, last in edges.reshape(-1, 2).tolist():
        if joined and first - joined[-1][1] < PAUSE_S / STEP_S:
            joined[-1][1] = last
        else:
            joined.append([first, last])
    yield from ((first, last) for first, last in joined if last - first >= _SHORTEST_S / STEP_S)


def _slices(piece: tuple[int, int], loudness: Loudness) -> Iterator[tuple[int, int]]:
    """Yield a piece in slices of some seconds, each cut where it is quietest in its latter half."""
    first, last = piece
    most = round(_LONGEST_SLICE_S / STEP_S)
    while last - first > most:
        cut = first + most // 2 + int(np.argmin(loudness.level_db[first + most // 2 : first + most]))
        yield first, cut
        first = cut
    yield first, last


def _all_heard(
    recording: Recording, pieces: Sequence[tuple[int, int]], loudness: Loudness, pool: Executor | None
) -> Iterator[list[Tone]]:
    """Yield the tones of each piece."""
    slices = [list(_slices(piece, loudness)) for piece in pieces]
    flat = [each for group in slices for each in group]
    read = (_read(recording, flat, k) for k in range(len(flat)))
    heard = starmap(_heard, read) if pool is None else _heard_beside(read, pool)
    for group in slices:
        yield [tone for tones in islice(heard, len(group)) for tone in tones]


def _heard_beside(read: Iterable[tuple[Recording, float]], pool: Executor) -> Iterator[tuple[Tone, ...]]:
    """Yield the tones of each slice, heard in a pool, with few slices in memory at a time."""
    waiting: deque[Future[tuple[Tone, ...]]] = deque()
    for part, start_s in read:
        waiting.append(pool.submit(_heard, part, start_s))
        if len(waiting) > _WAITING:
            yield waiting.popleft().result()
    yield from (each.result() for each in waiting)


def _read(recording: Recording, slices: Sequence[tuple[int, int]], k: int) -> tuple[Recording, float]:
    """Return a slice as a recording of its own, with a little of the pauses around it, and its start."""
    before = slices[k - 1][1] if k else 0
    after = slices[k + 1][0] if k + 1 < len(slices) else recording.duration_s / STEP_S
    first, last = (edge * STEP_S for edge in slices[k])
    first -= min(_MARGIN_S, 0.5 * (first - before * STEP_S))
    last += min(_MARGIN_S, 0.5 * max(after * STEP_S - last, 0.0))
    start, stop = (min(round(edge * recording.rate_hz), recording.frames) for edge in (first, last))
    samples = recording.read(start, stop)
    return replace(recording, frames=len(samples), _kept=samples), start / recording.rate_hz


def _heard(part: Recording, start_s: float) -> tuple[Tone, ...]:
    """Return the tones of a slice that last, timed in the whole recording."""
    heard = (tone for tone in read_tones(part) if tone.kind != "breath only")
    return tuple(_later(tone, start_s) for tone in heard if _lasts(tone))


def _later(tone: Tone, start_s: float) -> Tone:
    return replace(tone, start_s=tone.start_s + start_s, end_s=tone.end_s + start_s)


def _lasts(tone: Tone) -> bool:
    return tone.end_s - tone.start_s >= _SHORTEST_TONE_S


# --- phrases -----------------------------------------------------------------------------------------


def _groups(tones: Iterable[Tone], loudness: Loudness) -> list[list[Tone]]:
    """Part tones where the flute stopped between them, or where no one fingering could hold both.

    What is far shorter than the tone beside it is left out: a word, or a moment on the way.
    """
    groups: list[list[Tone]] = []
    for tone in tones:
        if groups and not _is_parted(groups[-1][-1], tone, loudness):
            groups[-1].append(tone)
        else:
            groups.append([tone])
    return [_without_passing(group) for group in groups]


def _is_parted(before: Tone, after: Tone, loudness: Loudness) -> bool:
    gap_s = after.start_s - before.end_s
    if gap_s > _NO_TONE_S:
        return True
    between = _levels(loudness, before.end_s, after.start_s)
    under = min(_tone_level(before, loudness), _tone_level(after, loudness)) - _FALLEN_DB
    if np.count_nonzero(between < under) * STEP_S >= PAUSE_S:
        return True
    cents = 1200.0 * abs(np.log2((after.frequency_hz or 1.0) / (before.frequency_hz or 1.0)))
    long = min(before.end_s - before.start_s, after.end_s - after.start_s) > 2.0 * _SHORTEST_TONE_S
    return bool(long and 50.0 < cents < _ONE_FINGERING_CENTS)


def _without_passing(group: list[Tone]) -> list[Tone]:
    longest = max(tone.end_s - tone.start_s for tone in group)
    return [tone for tone in group if tone.end_s - tone.start_s >= _PASSING_SHARE * longest]


def _phrases(groups: Sequence[Sequence[Tone]], piece: tuple[int, int], loudness: Loudness) -> list[Phrase]:
    """Return groups of tones as phrases, each with the sound before its first and after its last tone."""
    starts = [round(group[0].start_s / STEP_S) for group in groups]
    ends = [round(group[-1].end_s / STEP_S) for group in groups]
    earliest, latest = [min(piece[0], *starts), *ends[:-1]], [*starts[1:], max(piece[1], *ends)]
    levels = [max(_tone_level(tone, loudness) for tone in group) for group in groups]
    rises = [
        _risen(loudness, after, start, level) if after < start else start
        for after, start, level in zip(earliest, starts, levels, strict=True)
    ]
    falls = [
        _fallen(loudness, end, before, level) if end < before else end
        for end, before, level in zip(ends, latest, levels, strict=True)
    ]
    return [
        Phrase(
            start_s=first * STEP_S, end_s=last * STEP_S, cut_start_s=first * STEP_S, cut_end_s=last * STEP_S,
            tones=tuple(group), is_breath=False, level_db=level,
        )
        for group, first, last, level in zip(groups, rises, falls, levels, strict=True)
    ]  # fmt: skip


def _risen(loudness: Loudness, after: int, start: int, level: float) -> int:
    """Return where a sound that has reached `level` by step `start` began, not before step `after`."""
    quiet = np.flatnonzero(_is_quiet(loudness, after, start, level))
    return after + int(quiet[-1]) + 1 if len(quiet) else after


def _fallen(loudness: Loudness, end: int, before: int, level: float) -> int:
    """Return where a sound that had `level` until step `end` has died away, at the latest at `before`."""
    quiet = np.flatnonzero(_is_quiet(loudness, end, before, level))
    return end + int(quiet[0]) if len(quiet) else before


def _is_quiet(loudness: Loudness, first: int, last: int, level: float) -> NDArray[np.bool_]:
    """Return where nothing sounds; where all does, the quietest step and whatever is far under the tone."""
    between = loudness.level_db[first:last]
    quiet = ~loudness.sounds[first:last]
    if np.any(quiet):
        return quiet
    return between <= max(float(between.min()), level - 2.0 * _FALLEN_DB)


def _other(first: int, last: int, loudness: Loudness) -> Phrase:
    """Return a piece without tones: breath that no tone came of, or a voice, a cough, a door."""
    start_s, end_s = first * STEP_S, last * STEP_S
    return Phrase(
        start_s=start_s, end_s=end_s, cut_start_s=start_s, cut_end_s=end_s, tones=(),
        is_breath=_is_even(loudness.level_db[first:last]),
        level_db=float(np.median(loudness.level_db[first:last])),
    )  # fmt: skip


def _is_even(level: Floats) -> bool:
    """Whether a sound goes on evenly, as breath does; words and steps come and go, in a long echo too."""
    loud = level > np.quantile(level, 0.9) - _BREATH_DB
    within = np.flatnonzero(loud)
    core = slice(int(within[0]), int(within[-1]) + 1)
    if len(level[core]) * STEP_S < _BREATH_S or np.mean(loud[core]) < _BREATH_SHARE:
        return False
    inside = level[core][_EDGE_STEPS:-_EDGE_STEPS]
    tenths = inside[: len(inside) // 10 * 10].reshape(-1, 10).mean(axis=1)
    return bool(np.std(np.diff(tenths)) < _UNEVEN_DB)


def _with_pauses(found: Sequence[Phrase], loudness: Loudness) -> tuple[Phrase, ...]:
    """Let every phrase be cut with half a second of the room on both sides, where nothing else sounds."""
    total = len(loudness.level_db) * STEP_S
    ends = [0.0, *(phrase.end_s for phrase in found)]
    starts = [*(phrase.start_s for phrase in found[1:]), total]
    return tuple(
        replace(
            phrase,
            cut_start_s=max(phrase.start_s - _ROOM_KEPT_S, min(before, phrase.start_s), 0.0),
            cut_end_s=min(phrase.end_s + _ROOM_KEPT_S, max(after, phrase.end_s), total),
        )
        for phrase, before, after in zip(found, ends, starts, strict=False)
    )


def _levels(loudness: Loudness, start_s: float, end_s: float) -> Floats:
    return loudness.level_db[round(start_s / STEP_S) : max(round(end_s / STEP_S), 0)]


def _tone_level(tone: Tone, loudness: Loudness) -> float:
    return float(np.median(_levels(loudness, tone.start_s, max(tone.end_s, tone.start_s + STEP_S))))
