"""A duct flute that is blown: the modes of the tube model, driven by a jet, and a microphone before it.

Nothing is added at chosen frequencies. The air column is its modes (frequency, width and strength from
`fluteprobe.flute.tube`); the jet crosses the sound hole in a finite time, is carried in and out by the
column's own flow, and drives it through a saturating curve; the jet's turbulence pushes every mode.
Registers, breaks between them and the bumps in the breath noise follow.

Equations (Verge, Hirschberg & Caussé, JASA 101, 2914 (1997); Auvray, Fabre et al., JASA 131, 1574 (2012)):
jet speed      U = √(2p/ρ)
deflection     η(t) = (h/U) exp(0.4 W/h) v(t − W/(0.5 U)), v the flow's velocity in the sound hole
drive          Δp = ρ δ b U/W · d/dt tanh((η − y0)/b), δ = (4/π)√(2hW), b = 2h/5
losses         Δp = −½ρ (v/0.6)² sign(v), the flow separating at the edge
turbulence     Δp = ρU²/2 · share · noise, first-order low-pass at 0.3 U/W
W length of the sound hole from flue to edge, h height of the flue, y0 how far the edge is off the jet's
middle. The deflection passes two first-order low-passes at 0.2 U/W, where a jet's growth ends.

Units are in the names; the random numbers come from the seeds, so the same call gives the same samples.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import pi
from typing import Any

import numba
import numpy as np
import numpy.typing as npt

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.tube import Resonances, Tube, outflows, resonances
from fluteprobe.flute.tuning import speed_of_sound_m_per_s

Reals = npt.NDArray[np.float64]
Complexes = npt.NDArray[np.complex128]
Curve = Sequence[tuple[float, float]]

INNER_RATE_HZ = 88_200
MODES = 12
HIGHEST_MODE_HZ = 6000.0
KEEP_EVERY = 8  # of the inner samples, for the truth

_DENSITY = 1.2
_CONVECTION = 0.5
_GROWTH = 0.4
_SEPARATION = 0.6
_FASTEST = 0.2  # f W / U from which the jet no longer follows: its growth ends there
_STROUHAL_NORMAL = 0.08  # f W / U where a tone speaks well: a quarter period's delay


@dataclass(frozen=True, slots=True, kw_only=True)
class FluteBuild:
    """A flute to be blown: its tube and its voicing.

    `window_mm` is from the flue to the edge, `window_width_mm` across it, `flue_mm` the flue's height, `aim`
    the edge's distance from the jet's middle in jet half-widths, `hiss` the turbulence's share of ρU²/2.
    """

    tube: Tube
    window_mm: float
    window_width_mm: float
    flue_mm: float
    aim: float = 0.3
    hiss: float = 0.006


@dataclass(frozen=True, slots=True, kw_only=True)
class Microphone:
    """Where, in what room and how it is heard.

    Distances in m from the sound hole and from the foot; `room_pa` is the room noise's rms, `full_scale_pa`
    the pressure of sample value 1, `rate_hz` the recording's.
    """

    head_m: float = 0.45
    foot_m: float = 0.60
    room_pa: float = 1e-3
    full_scale_pa: float = 4.0
    rate_hz: int = 44_100


@dataclass(frozen=True, slots=True, kw_only=True)
class SimulatedTone:
    """What truly sounded: the steady part, its mean frequency, and the mode that carried it (1 the lowest).

    `purity` is the share of the flow's power that stands at whole multiples of the frequency.
    """

    start_s: float
    end_s: float
    frequency_hz: float
    register: int
    purity: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Simulated:
    """A simulated recording, its truth (empty where nothing spoke) and the resonances that made it."""

    samples: npt.NDArray[np.float32]
    rate_hz: int
    truth: tuple[SimulatedTone, ...]
    modes: Resonances

    @property
    def spoke(self) -> bool:
        """Whether any tone sounded."""
        return bool(self.truth)


def steady(pressure_pa: float, duration_s: float, attack_s: float = 0.05, silence_s: float = 0.2) -> Curve:
    """Return a breath curve: silence, attack, steady pressure, release, silence."""
    return steps([(pressure_pa, duration_s - 2.0 * silence_s)], attack_s, silence_s)


def steps(blows: Sequence[tuple[float, float]], attack_s: float = 0.05, silence_s: float = 0.2) -> Curve:
    """Return a breath curve through several (pressure in Pa, duration in s).

    A pressure follows the one before it within 20 ms, in the same breath. A pressure of 0 is a pause: what
    comes after it is tongued anew.
    """
    curve, now, before = [(0.0, 0.0), (silence_s, 0.0)], silence_s, 0.0
    for pressure, duration in blows:
        change_s = attack_s if before == 0.0 else 0.02
        curve += [(now + change_s, pressure), (now + duration, pressure)]
        now, before = now + duration, pressure
    return [*curve, (now + 0.06, 0.0), (now + silence_s, 0.0)]


def speaking_pressure_pa(
    build: FluteBuild, fingering: Fingering | Sequence[float], register: int = 1
) -> float:
    """Return the pressure at which that register speaks most readily: a quarter period's delay of the jet."""
    openness = fingering.openness if isinstance(fingering, Fingering) else fingering
    frequency = float(resonances(build.tube, np.array([openness]), register).frequency_hz[0, -1])
    speed = frequency * build.window_mm / 1000.0 / _STROUHAL_NORMAL
    return 0.5 * _DENSITY * speed**2


def blow(
    build: FluteBuild,
    fingering: Fingering | Sequence[float],
    curve: Curve,
    *,
    seed: int,
    microphone: Microphone | None = None,
) -> Simulated:
    """Blow a flute and record it.

    Parameters
    ----------
    build
        The flute.
    fingering
        A fingering (nominal openness of half-holed and vented), or each hole's openness.
    curve
        Breath pressure: (time in s, Pa) breakpoints; the last one ends the recording.
    seed
        For breath, turbulence and room.
    microphone
        Where it is heard; the default is half a metre away in a quiet room.
    """
    openness = np.array(
        fingering.openness if isinstance(fingering, Fingering) else fingering, dtype=np.float64
    )
    microphone = microphone or Microphone()
    random = np.random.default_rng(seed)
    modes = _modes(build.tube, openness)
    pressure = _breath(curve, random)
    blown = _blown(build, openness, modes, pressure, random)
    heard = _heard(build, blown, microphone)
    heard += microphone.room_pa * _room(len(heard), random)
    samples = _resampled(heard, microphone.rate_hz) / microphone.full_scale_pa
    return Simulated(
        samples=samples.astype(np.float32),
        rate_hz=microphone.rate_hz,
        truth=_truth(build, blown, curve),
        modes=modes,
    )


# --- the column --------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class _Blown:
    """What went on in the flute: at the inner rate, but for `states`, which keeps every KEEP_EVERYth.

    `flows` are into the sound hole and out of each opening, in m³/s, whose places are `places_mm`; `noise_pa`
    is the turbulence; `states` are the modes', shape (modes, kept).
    """

    jet_m_per_s: Reals
    noise_pa: Reals
    flows: Reals
    places_mm: tuple[float, ...]
    states: Complexes


def mode_poles(modes: Resonances) -> Complexes:
    """Return each mode's pole in rad/s; its real part is −π times the width."""
    decay = pi * modes.width_hz
    return np.asarray(-decay + 1j * np.sqrt((2.0 * pi * modes.frequency_hz) ** 2 - decay**2))


def _modes(tube: Tube, openness: Reals) -> Resonances:
    found = resonances(tube, openness[None, :], MODES)
    use = np.nan_to_num(found.frequency_hz[0], nan=np.inf) < HIGHEST_MODE_HZ
    return Resonances(
        frequency_hz=found.frequency_hz[0, use],
        width_hz=found.width_hz[0, use],
        strength=found.strength[0, use],
    )


def _pushes(modes: Resonances, poles: Complexes, impedance: float) -> Complexes:
    """Return what a pressure held for one inner sample adds to each mode's state.

    A mode's admittance is jω a/(ω0² − ω² + jω 2π width) with a = strength 2π width / impedance; this is its
    residue at the pole.
    """
    residue = modes.strength * 2.0 * pi * modes.width_hz / impedance * poles / (2j * poles.imag)
    return np.asarray(residue * np.expm1(poles / INNER_RATE_HZ) / poles)


def _blown(
    build: FluteBuild, openness: Reals, modes: Resonances, pressure_pa: Reals, random: np.random.Generator
) -> _Blown:
    tube = build.tube
    speed = speed_of_sound_m_per_s(tube.temperature_c)
    poles = mode_poles(modes)
    pushes = _pushes(modes, poles, _DENSITY * speed / (pi * tube.radius_m**2))
    uncovered = np.append(openness > 0.0, True)
    weights = outflows(tube, openness, modes.frequency_hz).real[uncovered]
    jet = np.sqrt(2.0 * pressure_pa / _DENSITY)
    noise = _turbulence(jet, build, random)
    lengths = np.array([build.window_mm, build.window_width_mm, build.flue_mm]) / 1000.0
    flows, states = _time_loop(
        np.array([np.exp(poles / INNER_RATE_HZ), pushes]),
        np.vstack([np.ones(len(poles)), weights]),
        np.array([jet, noise]),
        lengths,
        build.aim,
    )
    places = np.array([*(place for place, _ in tube.holes_mm), tube.length_mm])[uncovered]
    return _Blown(
        jet_m_per_s=jet, noise_pa=noise, flows=flows, places_mm=(0.0, *places.tolist()), states=states
    )


def _turbulence(jet_m_per_s: Reals, build: FluteBuild, random: np.random.Generator) -> Reals:
    """Return the turbulence's pressure in Pa: unit noise, low-passed at 0.3 U/W, times its share of ρU²/2."""
    corner = 0.3 * np.maximum(jet_m_per_s, 1.0) / (build.window_mm / 1000.0)
    keep = np.exp(-2.0 * pi * corner / INNER_RATE_HZ)
    unit = _low_passed(random.standard_normal(len(jet_m_per_s)), keep)
    return build.hiss * 0.5 * _DENSITY * jet_m_per_s**2 * unit


@numba.njit(cache=False)
def _low_passed(white: Reals, keep: Reals) -> Reals:
    out = np.empty_like(white)
    state = 0.0
    for i in range(len(white)):
        state = keep[i] * state + np.sqrt(1.0 - keep[i] ** 2) * white[i]
        out[i] = state
    return out


@numba.njit(cache=False)
def _time_loop(modes: Complexes, weights: Reals, breath: Reals, lengths: Reals, aim: float) -> Any:
    """Step modes and jet at INNER_RATE_HZ; return the flows and every KEEP_EVERYth state of the modes.

    `modes` holds each mode's turn per step and push per Pa, `weights` each opening's flow per unit flow of a
    mode (modes along the rows), `breath` jet speed and noise, `lengths` window, its width and flue in m.
    """
    turns, pushes = modes[0], modes[1]
    jet, noise = breath[0], breath[1]
    window, width, flue = lengths
    half = 0.4 * flue
    growth = np.exp(_GROWTH * window / flue)
    drive = _DENSITY * (4.0 / np.pi) * np.sqrt(2.0 * flue * window) * half / window * INNER_RATE_HZ
    state = np.zeros(len(turns), dtype=np.complex128)
    past = np.zeros(4096)
    flows = np.zeros((len(weights), len(jet)))
    kept = np.zeros((len(turns), (len(jet) + KEEP_EVERY - 1) // KEEP_EVERY), dtype=np.complex128)
    before = np.tanh(-aim)
    velocity, once, twice = 0.0, 0.0, 0.0
    for i in range(len(jet)):
        speed = max(jet[i], 2.0)
        back = min(window / (_CONVECTION * speed) * INNER_RATE_HZ, 4094.0)
        whole = int(back)
        share = back - whole
        late = (1.0 - share) * past[(i - whole) % 4096] + share * past[(i - whole - 1) % 4096]
        keep = np.exp(-2.0 * np.pi * _FASTEST * speed / window / INNER_RATE_HZ)
        once = keep * once + (1.0 - keep) * late
        twice = keep * twice + (1.0 - keep) * once
        bent = np.tanh(flue / speed * growth * twice / half - aim)
        push = drive * jet[i] * (bent - before) + noise[i]
        push -= 0.5 * _DENSITY * velocity * abs(velocity) / _SEPARATION**2
        before = bent
        total = 0.0
        for n in range(len(turns)):
            state[n] = turns[n] * state[n] + pushes[n] * push
            flow = 2.0 * state[n].real
            total += flow
            for k in range(len(weights)):
                flows[k, i] += weights[k, n] * flow
        velocity = total / (window * width)
        past[(i + 1) % 4096] = velocity
        if i % KEEP_EVERY == 0:
            kept[:, i // KEEP_EVERY] = state
    return flows, kept


# --- the player and the room -------------------------------------------------------------------------


def _breath(curve: Curve, random: np.random.Generator) -> Reals:
    """Return the breath pressure at the inner rate: the curve's, wandering slowly by about three per cent."""
    times, values = zip(*curve, strict=True)
    count = round(times[-1] * INNER_RATE_HZ)
    now = np.arange(count) / INNER_RATE_HZ
    return np.asarray(np.interp(now, times, values) * (1.0 + 0.03 * _wander(count, 0.5, random)))


def _wander(count: int, seconds: float, random: np.random.Generator) -> Reals:
    """Return a smooth random curve of unit rms whose values forget each other within about `seconds`."""
    knots = int(count / INNER_RATE_HZ / (0.35 * seconds)) + 6
    values = np.convolve(random.standard_normal(knots + 2), [0.5, 0.7, 0.5], mode="valid")
    places = np.linspace(0.0, knots - 3.001, count) + 1.0
    left = places.astype(int)
    t = places - left
    a, b, c, d = (values[np.clip(left + k, 0, knots - 1)] for k in (-1, 0, 1, 2))
    return np.asarray(b + 0.5 * t * (c - a + t * (2 * a - 5 * b + 4 * c - d + t * (3 * (b - c) + d - a))))


def _heard(build: FluteBuild, blown: _Blown, microphone: Microphone) -> Reals:
    """Return the pressure at the microphone in Pa: openings as small sources in the open, and the hiss."""
    heard = _late(_hiss_heard(build, blown.noise_pa, microphone), microphone.head_m)
    for index, (place, flow) in enumerate(zip(blown.places_mm, blown.flows, strict=True)):
        along = place / build.tube.length_mm
        distance = microphone.head_m + along * (microphone.foot_m - microphone.head_m)
        outward = flow if index else -flow
        heard += _late(_DENSITY / (4.0 * pi * distance) * _slope(outward), distance)
    return heard


def _hiss_heard(build: FluteBuild, noise_pa: Reals, microphone: Microphone) -> Reals:
    """Return the turbulence's own sound: the force on the edge as a compact dipole, F'/(4π r c)."""
    area = build.window_mm * build.window_width_mm * 1e-6
    return _slope(noise_pa) * area / (4.0 * pi * microphone.head_m * 343.0)


def _slope(values: Reals) -> Reals:
    return np.diff(values, prepend=values[:1]) * INNER_RATE_HZ


def _late(values: Reals, distance_m: float) -> Reals:
    lag = round(distance_m / 343.0 * INNER_RATE_HZ)
    return np.concatenate([np.zeros(lag), values[: len(values) - lag]])


def _room(count: int, random: np.random.Generator) -> Reals:
    """Return room noise of unit rms: power falling as 1/f above 40 Hz."""
    spectrum = np.fft.rfft(random.standard_normal(count))
    frequency = np.fft.rfftfreq(count, 1.0 / INNER_RATE_HZ)
    shaped = np.fft.irfft(spectrum / np.sqrt(np.maximum(frequency, 40.0)), count)
    return np.asarray(shaped / np.std(shaped))


def _resampled(values: Reals, rate_hz: int) -> Reals:
    """Return values at another rate, by cutting the spectrum (the recording begins and ends in silence)."""
    count = round(len(values) * rate_hz / INNER_RATE_HZ)
    return np.asarray(np.fft.irfft(np.fft.rfft(values)[: count // 2 + 1], count) * count / len(values))


# --- the truth ---------------------------------------------------------------------------------------

_FRAME = 110  # kept samples: 10 ms
_KEPT_RATE_HZ = INNER_RATE_HZ / KEEP_EVERY
_SHORTEST_S = 0.25
_LOUD = 0.02  # flow velocity in the sound hole over the jet's: far above what turbulence alone stirs
_PRESENT = 0.2  # of the strongest mode: the lowest mode above it carries the tone
_MANY = 100  # more than there are modes
_EVEN_DB = 2.0
_EVEN_CENTS = 12.0


def _truth(build: FluteBuild, blown: _Blown, curve: Curve) -> tuple[SimulatedTone, ...]:
    """Return the tones in the modes' states, each within one stretch of steady pressure."""
    size = _frames(np.abs(blown.states))
    jet = _frames(blown.jet_m_per_s[None, ::KEEP_EVERY])[0]
    strongest = size.max(axis=0)
    area = build.window_mm * build.window_width_mm * 1e-6
    loud = 2.0 * strongest / area > _LOUD * np.maximum(jet, 5.0)
    register = _settled(1 + np.argmax(size > _PRESENT * strongest, axis=0))
    stretch = _stretches(curve, len(jet))
    label = np.where(loud & (stretch > 0), _MANY * stretch + register, 0)
    tones = (_tone(blown.states, key % _MANY, a, b) for key, a, b in _runs(label) if key)
    return tuple(tone for tone in tones if tone is not None)


def _settled(labels: npt.NDArray[np.int64]) -> npt.NDArray[np.int64]:
    """Return the labels' running median over 110 ms: a mode that flares up for a moment is no new tone."""
    half = 5
    padded = np.pad(labels, half, mode="edge")
    around = np.lib.stride_tricks.sliding_window_view(padded, 2 * half + 1)
    return np.asarray(np.median(around, axis=1), dtype=np.int64)


def _stretches(curve: Curve, frames: int) -> npt.NDArray[np.int64]:
    """Return, for each frame, the number from 1 of the stretch of steady pressure it lies in, or 0."""
    middle = (np.arange(frames) + 0.5) * _FRAME / _KEPT_RATE_HZ
    numbers = np.zeros(frames, dtype=np.int64)
    for number, ((start, before), (end, after)) in enumerate(pairwise(curve), start=1):
        if before == after > 0.0:
            numbers[(middle > start) & (middle < end)] = number
    return numbers


def _frames(values: Reals) -> Reals:
    whole = values.shape[1] // _FRAME
    return np.asarray(values[:, : whole * _FRAME].reshape(len(values), whole, _FRAME).mean(axis=2))


def _runs(labels: npt.NDArray[np.int64]) -> list[tuple[int, int, int]]:
    """Return (label, first, after last) of each run of equal labels."""
    edges = [0, *(np.flatnonzero(np.diff(labels)) + 1), len(labels)]
    return [(int(labels[a]), int(a), int(b)) for a, b in pairwise(edges)]


def _tone(states: Complexes, register: int, first: int, last: int) -> SimulatedTone | None:
    """Return the tone in frames first to last without its attack and release, or None if it is too short."""
    even = _even(states[register - 1, first * _FRAME : last * _FRAME])
    if len(even) < _SHORTEST_S * _KEPT_RATE_HZ / _FRAME:
        return None
    a, b = (first + int(even[0])) * _FRAME, (first + int(even[-1]) + 1) * _FRAME
    frequency = _mean_frequency(states[register - 1, a:b])
    return SimulatedTone(
        start_s=a / _KEPT_RATE_HZ,
        end_s=b / _KEPT_RATE_HZ,
        frequency_hz=frequency,
        register=register,
        purity=_purity(states[:, a:b].sum(axis=0).real, frequency),
    )


def _even(state: Complexes) -> npt.NDArray[np.int64]:
    """Return the frames in which a mode's level and frequency are near their medians."""
    size = _frames(np.abs(state)[None, :])[0]
    turn = np.angle(state[1:] * np.conj(state[:-1]))
    pace = np.pad(_frames(np.append(turn, turn[-1])[None, :])[0], 2, mode="edge")
    pace = np.convolve(pace, np.full(5, 0.2), mode="valid")
    level_db = 20.0 * np.log10(size / np.median(size))
    cents = 1200.0 * np.log2(np.maximum(pace / np.median(pace), 1e-3))
    return np.flatnonzero((np.abs(level_db) < _EVEN_DB) & (np.abs(cents) < _EVEN_CENTS))


def _mean_frequency(state: Complexes) -> float:
    """Return the mean frequency in Hz: turns of the mode's own phase over time, ends averaged over 20 ms."""
    phase = np.unwrap(np.angle(state))
    end = min(2 * _FRAME, len(phase) // 4)
    ramp = (phase[-1] - phase[0]) / (len(phase) - 1)
    rest = phase - ramp * np.arange(len(phase))
    turn = ramp + (rest[-end:].mean() - rest[:end].mean()) / (len(phase) - end)
    return float(turn * _KEPT_RATE_HZ / (2.0 * pi))


def _purity(flow: Reals, frequency_hz: float) -> float:
    power = np.abs(np.fft.rfft(flow * np.hanning(len(flow)))) ** 2
    axis = np.fft.rfftfreq(len(flow), 1.0 / _KEPT_RATE_HZ)
    near = np.abs(axis / frequency_hz - np.round(axis / frequency_hz)) < 0.06
    return float(power[near & (axis > 0.5 * frequency_hz)].sum() / power.sum())
