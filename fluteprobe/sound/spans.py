"""Where the tones are: a recording's frames become spans, one for each steady tone, or the breath alone.

Conventions: `start` and `stop` are sample numbers at the recording's `rate_hz`, stop excluded. A frame is
about 46 ms long and overlaps the next by half; frame m is centred at sample `m * hop`. Levels are in dB
against a full-scale sine. Coarse pitch stands on a grid of 20 cents from 90 to 3400 Hz; -1 is no pitch.

How it works: what stands out of a frame's own noise floor, in dB, is gathered by combs of harmonics that
count the multiples of a pitch and discount what stands halfway between them (a harmonic sum with
penalties, after Hermes, JASA 83, 257 (1988), and Camacho & Harris, JASA 124, 1638 (2008)). The best path
through the frames follows pitch that moves at a player's pace, and pays for every leap and every change to
and from silence (Viterbi, IEEE Trans. Inf. Theory 13, 260 (1967)). Spans are its stretches without a leap.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.hum import nearest_hum_hz
from fluteprobe.sound.quantile import median, quantile
from fluteprobe.sound.recording import Recording
from fluteprobe.sound.thinning import thinned

Floats = NDArray[np.float32]

FRAME_S = 0.046
LOWEST_HZ = 90.0
HIGHEST_HZ = 3400.0
SHORTEST_TONE_S = 0.14

_STEP_CENTS = 20.0
_COMB_ORDERS = 8
_COMB_FALL = 0.8
_COMB_LIMIT_HZ = 9000.0
_ENOUGH_HZ = 20000.0  # of sample rate: higher ones are thinned by averaging
_BAND_EDGES_HZ = (350.0, 750.0, 1500.0, 3000.0, 5000.0)
_FLOOR_SHARE = 0.3
_CLEARANCE_DB = 12.0
_MOST_DB = 50.0
_UNIT_DB = 80.0
_RUMBLE_HZ = 75.0
_UNPITCHED_SCORE = 0.3
_LEAP_COST = 0.8
_REACH = 3
_BLOCK_FRAMES = 2048
_AT_ONCE = 64
_BACKGROUND_DB = 32.0
_HUM_DB = 15.0
_HUM_SHARE = 0.012
_BREATH_DB = 6.0
_FAINT_DB = 15.0
_NO_PITCH = -1


@dataclass(frozen=True, slots=True, kw_only=True)
class Span:
    """One steady stretch: its sample range, coarse pitch (None where only breath sounds) and level."""

    start: int
    stop: int
    frequency_hz: float | None
    level_db: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Frames:
    """What is kept of every frame: its level and its coarse pitch as a grid index."""

    rate_hz: int
    hop: int
    samples: int
    level_db: Floats
    path: NDArray[np.int16]


def find_spans(recording: Recording) -> tuple[Span, ...]:
    """Find the steady tones of a recording, in order; where there is none, the breath alone.

    Edges are as coarse as half a frame (23 ms): the measurement of the tone itself refines them. Where no
    tone is found, frames of twice the length are asked, which hear a low tone deeper in the noise.
    """
    frames = _analyse(recording, FRAME_S)
    return _tones(frames) or _tones(_analyse(recording, 2.0 * FRAME_S)) or _breath(frames)


def _tones(frames: "_Frames") -> tuple[Span, ...]:
    """Return the tones of analysed frames, without what is too short or only the room's."""
    stretches = _joined(frames, _stretches(_without_faint(frames.path, frames.level_db)))
    spans = [_span(frames, first, last) for first, last in stretches]
    shortest = SHORTEST_TONE_S * frames.rate_hz
    return tuple(_foreground([span for span in spans if span.stop - span.start >= shortest]))


def frame_length(rate_hz: int, seconds: float = FRAME_S) -> int:
    """Return the frame's length in samples: the power of two nearest to the time."""
    return int(2 ** round(np.log2(seconds * rate_hz)))


def _analyse(recording: Recording, frame_s: float) -> _Frames:
    """Pass over the recording once, block by block, and keep two numbers a frame."""
    step = max(int(recording.rate_hz / _ENOUGH_HZ), 1)
    length = frame_length(recording.rate_hz // step, frame_s)
    hop = length // 2
    combs = _combs(recording.rate_hz // step, length)
    score = np.zeros(combs.matrix.shape[1] + 1, np.float32)
    levels, paths = [], []
    for block in _whole_frames(recording, length * step):
        level, salience = _heard(thinned(block, step).reshape(-1, hop), combs)
        levels.append(level)
        path, score = _best_path(salience, score)
        paths.append(path)
    power = np.concatenate(levels) * (32.0 / 3.0 / length**2)
    return _Frames(
        rate_hz=recording.rate_hz,
        hop=hop * step,
        samples=recording.frames,
        level_db=(10.0 * np.log10(power + 1e-20)).astype(np.float32),
        path=np.concatenate(paths),
    )


def _whole_frames(recording: Recording, length: int) -> Iterator[Floats]:
    """Yield runs of samples that hold whole frames; zeros before the first and after the last sample."""
    hop = length // 2
    carry = np.zeros(hop, np.float32)
    for _, block in recording.blocks(_BLOCK_FRAMES * hop):
        carry = np.concatenate([carry, block])
        whole = len(carry) // hop * hop
        if whole > hop:
            yield carry[:whole]
            carry = carry[whole - hop :]
    yield np.concatenate([carry, np.zeros(length - len(carry), np.float32)])


def _heard(rows: Floats, combs: "_Combs") -> tuple[Floats, Floats]:
    """Return the power (frames,) and the salience (frames, grid) of half-overlapping frames, two rows each.

    A few frames at a time, so that what is in between stays in the processor's own memory.
    """
    parts = [rows[first : first + _AT_ONCE + 1] for first in range(0, len(rows) - 1, _AT_ONCE)]
    spectra = [_power_spectra(part, combs) for part in parts]
    power = np.concatenate([part.sum(axis=1) for part in spectra])
    return power, np.concatenate([_salience(part, combs) for part in spectra])


def _power_spectra(rows: Floats, combs: "_Combs") -> Floats:
    """Return the power spectra of Hann-windowed frames of two rows each, at the combs' bins."""
    frames = np.concatenate([rows[:-1], rows[1:]], axis=1) * combs.window
    spectra = np.fft.rfft(frames, axis=1)[:, combs.first : combs.last]
    return np.square(spectra.real) + np.square(spectra.imag)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Combs:
    """Combs over spectrum bins first to last, shape (bins, grid), and how band floors become bin floors.

    `window` is the frame's, shape (length,).
    """

    window: Floats
    first: int
    last: int
    bands: tuple[tuple[int, int], ...]
    spread: Floats
    matrix: Floats


@lru_cache(maxsize=8)
def _combs(rate_hz: int, length: int) -> _Combs:
    """Build the combs: a tooth one main lobe wide at every multiple, half as deep a gap between them."""
    last = min(length // 2 + 1, int(_COMB_LIMIT_HZ * length / rate_hz))
    first = int(np.ceil(_RUMBLE_HZ * length / rate_hz))
    bins = np.arange(first, last, dtype=np.float64)
    pitch = _grid_hz(rate_hz) * length / rate_hz
    matrix = np.zeros((len(bins), len(pitch)))
    for order in range(1, _COMB_ORDERS + 1):
        _add_teeth(matrix, first, order * pitch, order**-_COMB_FALL)
        _add_teeth(matrix, first, (order - 0.5) * pitch, -0.5 * order**-_COMB_FALL)
    edges = [first, *(round(edge * length / rate_hz) for edge in _BAND_EDGES_HZ), last]
    bands = tuple((low, min(high, last)) for low, high in pairwise(edges) if low + 4 <= min(high, last))
    middles = [0.5 * (low + high) for low, high in bands]
    spread = np.stack([np.interp(bins, middles, row) for row in np.eye(len(bands))])
    return _Combs(
        window=np.hanning(length + 1)[:-1].astype(np.float32),
        first=first,
        last=last,
        bands=bands,
        spread=spread.astype(np.float32),
        matrix=matrix.astype(np.float32),
    )


def _add_teeth(matrix: NDArray[np.float64], first: int, centres: NDArray[np.float64], weight: float) -> None:
    """Add raised-cosine teeth around each centre, two bins to either side and wider by a grid step."""
    centres = centres[centres < first + len(matrix) + 1]
    reach = 2.0 + centres * (_STEP_CENTS / 1731.0)
    offsets = np.arange(-int(reach.max()) - 1, int(reach.max()) + 2)
    bins = np.round(centres).astype(np.intp) + offsets[:, None]
    distance = np.abs(bins - centres) / reach
    inside = (distance < 1.0) & (bins >= first) & (bins < first + len(matrix))
    columns = np.broadcast_to(np.arange(len(centres)), bins.shape)[inside]
    tooth = (1.0 + np.cos(np.pi * distance[inside])) * (weight / reach[columns])
    matrix[bins[inside] - first, columns] += tooth  # no bin twice for one centre


def _grid_hz(rate_hz: int) -> NDArray[np.float64]:
    highest = min(HIGHEST_HZ, 0.45 * rate_hz)
    steps = int(1200.0 * np.log2(highest / LOWEST_HZ) / _STEP_CENTS) + 1
    return np.asarray(LOWEST_HZ * 2.0 ** (np.arange(steps, dtype=np.float64) * _STEP_CENTS / 1200.0))


def _salience(spectra: Floats, combs: _Combs) -> Floats:
    """Return how far each comb's teeth stand out of the noise floor, in 80 dB, shape (frames, grid)."""
    level = np.log(spectra + 1e-20) * np.float32(10.0 / np.log(10.0))
    lows = [_low_level(level[:, low - combs.first : high - combs.first]) for low, high in combs.bands]
    level -= np.stack(lows, axis=1) @ combs.spread + _CLEARANCE_DB
    return np.asarray(np.clip(level, 0.0, _MOST_DB) @ combs.matrix) * np.float32(1.0 / _UNIT_DB)


def _low_level(level: Floats) -> Floats:
    """Return the value that 30 % of each row stays under: low enough to miss the partials."""
    place = int(_FLOOR_SHARE * level.shape[1])
    return np.asarray(np.partition(level, place, axis=1)[:, place])


def _best_path(salience: Floats, score: Floats) -> tuple[NDArray[np.int16], Floats]:
    """Return the best path (grid index or -1) through a block of frames, and the score it leaves behind.

    `score` (grid + 1,) is what the block before left; its last element is the unpitched state.
    """
    frames, grid = salience.shape
    history = np.empty((frames + 1, grid + 1), np.float32)
    history[0] = score - score.max()
    padded = np.full(grid + 2 * _REACH, -1e9, np.float32)
    for m in range(frames):
        before, after = history[m], history[m + 1]
        padded[_REACH:-_REACH] = before[:-1]
        leap = before.max() - _LEAP_COST
        two = np.maximum(padded[:-1], padded[1:])
        four = np.maximum(two[:-2], two[2:])
        np.maximum(np.maximum(four[:-3], four[3:]), leap, out=after[:-1])
        after[:-1] += salience[m]
        after[-1] = max(before[-1], leap) + _UNPITCHED_SCORE
        if m % 256 == 0:
            after -= after.max()
    return _traced_back(history), history[-1]


def _traced_back(history: Floats) -> NDArray[np.int16]:
    """Follow the best final state back; where it came from is worked out anew, one frame at a time."""
    grid = history.shape[1] - 1
    path = np.empty(len(history) - 1, np.int16)
    state = int(history[-1].argmax())
    for m in range(len(path) - 1, -1, -1):
        path[m] = state if state < grid else _NO_PITCH
        before = history[m]
        low, high = (
            (max(state - _REACH, 0), min(state + _REACH + 1, grid)) if state < grid else (grid, grid + 1)
        )
        best = low + int(before[low:high].argmax())
        leap = int(before.argmax())
        state = best if before[best] >= before[leap] - _LEAP_COST else leap
    return path


def _stretches(path: NDArray[np.int16]) -> list[tuple[int, int]]:
    """Return (first, last) frame of every stretch of pitch without a leap."""
    pitched = path >= 0
    leap = np.abs(np.diff(path.astype(np.int32))) > _REACH
    starts = np.flatnonzero(pitched & np.concatenate([[True], leap | ~pitched[:-1]]))
    ends = np.flatnonzero(pitched & np.concatenate([leap | ~pitched[1:], [True]]))
    return list(zip(starts.tolist(), ends.tolist(), strict=True))


def _without_faint(path: NDArray[np.int16], level_db: Floats) -> NDArray[np.int16]:
    """Take pitch from frames far under the loud part of their own stretch: a hum that leads up to a tone."""
    kept = path.copy()
    for first, last in _stretches(path):
        level = level_db[first : last + 1]
        kept[first : last + 1][level < quantile(level, 0.8) - _FAINT_DB] = _NO_PITCH
    return kept


def _joined(frames: _Frames, stretches: list[tuple[int, int]]) -> list[tuple[int, int]]:
    """Join stretches of one pitch that a click or a cough of up to two frames cuts apart."""
    joined: list[tuple[int, int]] = []
    for first, last in stretches:
        if joined:
            before_first, before_last = joined[-1]
            same = abs(int(frames.path[first]) - int(frames.path[before_last])) <= _REACH
            if same and first - before_last <= 3:
                joined[-1] = (before_first, last)
                continue
        joined.append((first, last))
    return joined


def _span(frames: _Frames, first: int, last: int) -> Span:
    """Return a stretch of frames as a span: from the first frame's centre to the last frame's centre."""
    grid = _grid_hz(frames.rate_hz)
    pitched = frames.path[first : last + 1]
    return Span(
        start=max(first * frames.hop - frames.hop // 2, 0),
        stop=min(last * frames.hop + frames.hop // 2, frames.samples),
        frequency_hz=float(grid[int(median(pitched[pitched >= 0]))]),
        level_db=median(frames.level_db[first : last + 1]),
    )


def _foreground(spans: list[Span]) -> list[Span]:
    """Leave out what the room adds: sounds far under the loudest tone, and mains hum somewhat under it."""
    if not spans:
        return []
    loudest = max(span.level_db for span in spans)
    return [
        span for span in spans if span.level_db > loudest - (_HUM_DB if _is_hum(span) else _BACKGROUND_DB)
    ]


def _is_hum(span: Span) -> bool:
    if span.frequency_hz is None:
        return False
    return any(abs(span.frequency_hz / hum - 1.0) < _HUM_SHARE for hum in nearest_hum_hz(span.frequency_hz))


def _breath(frames: _Frames) -> tuple[Span, ...]:
    """Return the stretch where breath stands above the room's own noise, or else the whole recording."""
    quiet, loud = quantile(frames.level_db, 0.05), quantile(frames.level_db, 0.9)
    whole = Span(start=0, stop=frames.samples, frequency_hz=None, level_db=loud)
    if loud - quiet < 2 * _BREATH_DB:
        return (whole,)
    blown = np.flatnonzero(frames.level_db > loud - _BREATH_DB)
    start, stop = int(blown[0]) * frames.hop, min((int(blown[-1]) + 1) * frames.hop, frames.samples)
    return (replace(whole, start=start, stop=stop),)
