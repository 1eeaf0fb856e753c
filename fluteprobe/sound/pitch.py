"""The pitch of one steady tone, at the statistical limit, with an honest uncertainty.

Conventions: frequencies in Hz; drift, vibrato and uncertainty in cents; a phase track is that of the
fundamental, in radians, against a steady oscillation at the track's `frequency_hz`.

A tone is a sum of partials at whole multiples of one frequency in coloured noise. Each partial's phase,
divided by its order, tells the fundamental's; weighted by order² × amplitude² / (noise near it) they make
the maximum-likelihood phase (Quinn & Thomson, IEEE Trans. Signal Process. 39, 1991; Christensen & Jakobsson,
Multi-Pitch Estimation, 2009, ch. 2), and the slope of a line through the phases is the frequency (Tretter,
IEEE Trans. Inf. Theory 31, 832 (1985)), whose variance reaches the Cramér-Rao bound 24 σ² / (N³ Σ k² A_k²).
Where the phases leave the line by more than their noise, the tone moves: the fewest slow terms that the
noise cannot explain are added (Schwarz's criterion), and the pitch is the mean over time of that curve.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.partials import (
    OVERLAP_CORRELATION,
    Samples,
    Tracks,
    demodulate,
    noise_powers,
    orders_below_nyquist,
    standing,
)

Floats = NDArray[np.float64]

CENTS = 1200.0 / np.log(2.0)

GUIDES = 4
_ROUNDS = 2
_ASTRAY = 0.5  # rad²: phases that scatter as much do not know how often they have turned
_NEXT_TO_NOTHING = 1e4  # rad²: the variance by which they count
_POINT_S = 0.02
_FASTEST_WANDER_HZ = 12.0
_MOST_TERMS = 160
_CAUTION = 5.0
_VIBRATO_HZ = (2.5, 9.0)
_LEAST_VIBRATO_CENTS = 3.0
_VIBRATO_SHARE = 0.5
_FINER = 8
_DRIFT_RATIO = 20.0
_FEWEST_WAVES, _MOST_WAVES = 3, 24
_MEMORIES = np.geomspace(0.005, 1.0, 20)


@dataclass(frozen=True, slots=True, kw_only=True)
class Vibrato:
    """A regular swing of pitch: its rate, and its extent from the middle to either side."""

    rate_hz: float
    extent_cents: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PhaseTrack:
    """The fundamental's phase along a tone, (frames,) at `time_s`; `noise_rad` is one frame's noise."""

    frequency_hz: float
    time_s: Floats
    phase_rad: Floats
    noise_rad: float

    @property
    def hop_s(self) -> float:
        """Seconds from one frame to the next."""
        return float(self.time_s[1] - self.time_s[0])


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Pitch:
    """The mean pitch of a tone over its span, how it moves, and how sure the mean is (k = 1).

    `deviation_cents` is the smoothed pitch against the mean at `time_s` (points,); None of the movement is
    in it where the phases lie on a line. `noise_cents` is the uncertainty from noise alone; `curve` is the
    smoothed phase.
    """

    frequency_hz: float
    uncertainty_cents: float
    noise_cents: float
    drift_cents: float
    vibrato: Vibrato | None
    wander_cents: float
    time_s: Floats
    deviation_cents: Floats
    curve: "PhaseCurve"


def refine(samples: Samples, rate_hz: int, frequency_hz: float) -> float:
    """Refine a pitch known within about half a semitone from the phase of the strongest low partial."""
    return refined(
        demodulate(samples, rate_hz, frequency_hz, orders_below_nyquist(rate_hz, frequency_hz, GUIDES))
    )


def refined(guide: Tracks) -> float:
    """Return the mean frequency that the phase of the strongest low partial tells."""
    phase = guide_phase(guide)
    return guide.frequency_hz + float(phase[-1] - phase[0]) / ((len(phase) - 1) * 2.0 * np.pi * guide.hop_s)


def phase_track(tracks: Tracks) -> PhaseTrack:
    """Combine the phases of all partials into the fundamental's, each weighted by its own noise."""
    phase = guide_phase(tracks)
    tracks, noise = _with_something_to_say(tracks)
    for _ in range(_ROUNDS):
        errors = _phase_errors(tracks, phase)
        scatter = np.mean(errors**2, axis=0)
        weights = tracks.orders**2 / np.where(scatter > _ASTRAY, _NEXT_TO_NOTHING, noise)
        phase = phase + (errors / tracks.orders) @ weights / weights.sum()
    noise = _noise_variances(tracks, phase)
    return PhaseTrack(
        frequency_hz=tracks.frequency_hz,
        time_s=tracks.time_s,
        phase_rad=phase,
        noise_rad=float(1.0 / np.sqrt(np.sum(tracks.orders**2 / noise))),
    )


def guide_phase(tracks: Tracks) -> Floats:
    """Unwrap the phase of the strongest low partial, divided by its order, shape (frames,)."""
    low = np.flatnonzero(tracks.orders <= GUIDES)
    strongest = low[np.argmax(np.mean(np.abs(tracks.phasors[:, low]) ** 2, axis=0))]
    phasors = tracks.phasors[:, strongest]
    steps = np.angle(phasors[1:] * phasors[:-1].conj()) / tracks.orders[strongest]
    return np.concatenate([[0.0], np.cumsum(steps)])


def _with_something_to_say(tracks: Tracks) -> tuple[Tracks, Floats]:
    """Return the partials that stand out of their own noise, or else the best, and their noise variances."""
    noise = _own_noise_variances(tracks)
    telling = noise <= max(_ASTRAY / 2.0, float(noise.min()))
    return replace(tracks, orders=tracks.orders[telling], phasors=tracks.phasors[:, telling]), noise[telling]


def _phase_errors(tracks: Tracks, phase: Floats) -> Floats:
    """Return each partial's phase against order × `phase`, shape (frames, orders)."""
    still = standing(tracks, phase).phasors
    return np.asarray(np.angle(still * still.mean(axis=0).conj()))


def _own_noise_variances(tracks: Tracks) -> Floats:
    """Return the phase-noise variance of each partial from how rough its loudness is, rad² (orders,).

    Noise is as strong along a phasor as across it, so that no phase has to be known.
    """
    level = np.abs(tracks.phasors)
    rough = level[2:-2] - 0.5 * (level[:-4] + level[4:])
    noise = np.mean(rough**2, axis=0) / 1.5
    return np.asarray(noise / np.maximum(np.mean(level**2, axis=0) - 2.0 * noise, 1e-30) + 1e-14)


def _noise_variances(tracks: Tracks, phase: Floats) -> Floats:
    """Return the phase-noise variance of each partial, rad² (orders,): half the noise over the power."""
    noise = noise_powers(standing(tracks, _smoothed(phase)))
    power = np.mean(np.abs(tracks.phasors) ** 2, axis=0)
    return np.asarray(0.5 * noise / np.maximum(power - noise, 1e-3 * power + 1e-30) + 1e-14)


def _smoothed(phase: Floats) -> Floats:
    """Smooth by the parabola-preserving mean of five, -3 12 17 12 -3 over 35 (Savitzky & Golay 1964)."""
    padded = np.concatenate([2 * phase[0] - phase[2:0:-1], phase, 2 * phase[-1] - phase[-2:-4:-1]])
    return np.convolve(padded, np.array([-3.0, 12.0, 17.0, 12.0, -3.0]) / 35.0, mode="valid")


def measure_pitch(track: PhaseTrack) -> Pitch:
    """Return the mean pitch over the track and how it moves: see the module's head for the method."""
    points = _thinned(track)
    curve = _fit(points, len(track.time_s) * track.hop_s)
    deviation = CENTS * curve.slope(points.time_s) / (2.0 * np.pi * track.frequency_hz)
    mean_hz = track.frequency_hz + curve.mean_rad_per_s / (2.0 * np.pi)
    deviation = deviation - CENTS * np.log(mean_hz / track.frequency_hz)
    mean_hz *= float(np.exp(-0.5 * np.mean((deviation / CENTS) ** 2)))
    noise_cents = CENTS * curve.mean_noise_rad_per_s / (2.0 * np.pi * mean_hz)
    moving = curve.terms > 1
    trend, vibrato, rest = _movement(points.time_s, deviation, curve.span_s)
    slow = rest + trend * (points.time_s - points.time_s.mean())
    mean_wanders_cents = _uncertainty_of_mean(slow, curve.terms - 2) if moving else 0.0
    return Pitch(
        frequency_hz=mean_hz,
        uncertainty_cents=float(np.hypot(noise_cents, mean_wanders_cents)),
        noise_cents=noise_cents,
        drift_cents=trend * curve.span_s if moving else 0.0,
        vibrato=vibrato,
        wander_cents=float(np.std(rest)),
        time_s=points.time_s,
        deviation_cents=deviation,
        curve=curve,
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Points:
    """Phases averaged over `group_s` of frames that are `frame_s` long, and the noise of each average."""

    time_s: Floats
    phase_rad: Floats
    noise_rad: float
    group_s: float
    frame_s: float


def _thinned(track: PhaseTrack) -> _Points:
    """Average the track over about 20 ms; the noise is that of slow changes, the overlap counted."""
    group = max(round(_POINT_S / track.hop_s), 1)
    whole = len(track.phase_rad) // group * group
    spare = (len(track.phase_rad) - whole) // 2
    kept = slice(spare, spare + whole)
    variance = track.noise_rad**2 / group * (1.0 + 2.0 * OVERLAP_CORRELATION)
    return _Points(
        time_s=track.time_s[kept].reshape(-1, group).mean(axis=1),
        phase_rad=track.phase_rad[kept].reshape(-1, group).mean(axis=1),
        noise_rad=float(np.sqrt(variance)),
        group_s=group * track.hop_s,
        frame_s=2.0 * track.hop_s,
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PhaseCurve:
    """The phase as a line, a parabola and cosines over a span; `terms` counts them beside the constant."""

    start_s: float
    span_s: float
    weights: Floats
    mean_rad_per_s: float
    mean_noise_rad_per_s: float

    @property
    def terms(self) -> int:
        """How many terms there are beside the constant; 1 is a straight line, a tone that does not move."""
        return len(self.weights) - 1

    def phase(self, time_s: Floats) -> Floats:
        """Return the phase in radians at the given times, shape (points,)."""
        return np.asarray(_basis((time_s - self.start_s) / self.span_s, self.terms) @ self.weights)

    def slope(self, time_s: Floats) -> Floats:
        """Return the phase's slope in rad/s at the given times, shape (points,)."""
        slopes = _basis_slopes((time_s - self.start_s) / self.span_s, self.terms)
        return np.asarray(slopes @ self.weights) / self.span_s


def _fit(points: _Points, span_s: float) -> PhaseCurve:
    """Fit a line, a parabola, then cosines of ever shorter period, as many as the noise cannot explain.

    The number of terms is the one that minimises Schwarz's criterion, n ln(RSS / n) + terms ln n (Ann.
    Statist. 6, 461 (1978)), with the noise's own variance as the least that RSS / n may claim.
    """
    count = len(points.time_s)
    start_s = float(points.time_s.mean()) - 0.5 * span_s
    most = max(int(min(_MOST_TERMS, 2.0 * _FASTEST_WANDER_HZ * span_s, 0.5 * count - 1)), 1)
    seen = _basis((points.time_s - start_s) / span_s, most) * _smear(points, span_s, most)
    q, r = np.linalg.qr(seen)
    along = q.T @ points.phase_rad
    left = np.maximum(points.phase_rad @ points.phase_rad - np.cumsum(along**2), 0.0)
    used = _enough_terms(left, count, points.noise_rad) + 1
    unmix = np.linalg.inv(r[:used, :used])
    ends = _basis(np.array([0.0, 1.0]), used - 1)
    pull = (ends[1] - ends[0]) @ unmix / span_s
    noise = max(points.noise_rad**2, left[used - 1] / max(count - used, 1))
    return PhaseCurve(
        start_s=start_s,
        span_s=span_s,
        weights=unmix @ along[:used],
        mean_rad_per_s=float(pull @ along[:used]),
        mean_noise_rad_per_s=float(np.sqrt(noise) * np.linalg.norm(pull)),
    )


def _basis(x: Floats, terms: int) -> Floats:
    """Return constant, line, parabola and cosines at x from 0 to 1, shape (points, terms + 1)."""
    waves = np.outer(x, np.pi * np.arange(-2, max(terms, 2) - 1))
    np.cos(waves[:, 3:], out=waves[:, 3:])
    waves[:, 0], waves[:, 1], waves[:, 2] = 1.0, x - 0.5, (x - 0.5) ** 2
    return waves[:, : terms + 1]


def _basis_slopes(x: Floats, terms: int) -> Floats:
    """Return the slopes of `_basis` in x."""
    x, order = x[:, None], np.pi * np.arange(1, terms - 1)
    waves = -order * np.sin(order * x)
    return np.concatenate([np.zeros_like(x), np.ones_like(x), 2.0 * (x - 0.5), waves], axis=1)[:, : terms + 1]


def _smear(points: _Points, span_s: float, terms: int) -> Floats:
    """Return what averaging leaves of each term: over a group evenly, over a frame by a Hann window."""
    cycles = 0.5 * np.arange(1, terms - 1) / span_s
    over_frame = cycles * points.frame_s
    hann = np.sinc(over_frame) / (1.0 - over_frame**2)
    return np.concatenate([np.ones(3), np.sinc(cycles * points.group_s) * hann])[: terms + 1]


def _enough_terms(left: Floats, points: int, noise_rad: float) -> int:
    """Return how many terms beside the constant minimise the criterion; at least the line."""
    variance = np.maximum(left / points, noise_rad**2)
    criterion = points * np.log(variance) + np.arange(len(left)) * (_CAUTION + np.log(points))
    return int(1 + np.argmin(criterion[1:]))


def _movement(time_s: Floats, deviation: Floats, span_s: float) -> tuple[float, Vibrato | None, Floats]:
    """Part the pitch curve into a straight drift (cents/s), a vibrato, and the rest."""
    centred = time_s - time_s.mean()
    swing = _vibrato_rate(centred, deviation, span_s)
    waves = [centred] if swing is None else [centred, np.cos(swing * centred), np.sin(swing * centred)]
    design = np.stack([np.ones_like(centred), *waves], axis=1)
    weights = np.linalg.lstsq(design, deviation, rcond=None)[0]
    rest = deviation - design @ weights
    if swing is None:
        return float(weights[1]), None, rest
    extent = float(np.hypot(weights[2], weights[3]))
    share = extent**2 / 2.0 / (extent**2 / 2.0 + float(np.var(rest)) + 1e-12)
    if extent < _LEAST_VIBRATO_CENTS or share < _VIBRATO_SHARE:
        return _movement_without_vibrato(centred, deviation)
    return float(weights[1]), Vibrato(rate_hz=float(swing / (2 * np.pi)), extent_cents=extent), rest


def _movement_without_vibrato(centred: Floats, deviation: Floats) -> tuple[float, None, Floats]:
    trend = float(centred @ deviation / max(float(centred @ centred), 1e-12))
    return trend, None, deviation - deviation.mean() - trend * centred


def _vibrato_rate(centred: Floats, deviation: Floats, span_s: float) -> float | None:
    """Return the angular rate (rad/s) of the strongest swing in the vibrato range, if two cycles fit."""
    if span_s < 2.0 / _VIBRATO_HZ[1] or np.std(deviation) < 1.0:
        return None
    _, _, level = _movement_without_vibrato(centred, deviation)
    taper = np.cos(np.pi * centred / (span_s + 1e-9)) ** 2
    power = np.abs(np.fft.rfft(taper * level, _FINER * len(level)))
    step = 1.0 / (_FINER * len(level) * (centred[1] - centred[0]))
    first, last = (int(np.ceil(edge / step)) for edge in (max(_VIBRATO_HZ[0], 2.0 / span_s), _VIBRATO_HZ[1]))
    if first >= last:
        return None
    best = first + int(np.argmax(power[first:last]))
    shift = 0.0
    if first < best < last - 1:
        lower, middle, upper = power[best - 1 : best + 2]
        shift = 0.5 * float((lower - upper) / min(lower - 2.0 * middle + upper, -1e-12))
    return 2.0 * np.pi * (best + shift) * float(step)


def _uncertainty_of_mean(slow: Floats, waves: int) -> float:
    """Return the standard uncertainty of the mean of a series whose values hang together in time.

    The type A evaluation of JCGM 100:2008 (4.2), the correlation taken into account (4.2.7). The series
    (points,) is taken as one that forgets exponentially (Uhlenbeck & Ornstein, Phys. Rev. 36, 823, 1930): its
    spectrum falls as 1 / (1 + (2π f τ)²) from S, and the mean over T has the variance S/T (1 - τ/T (1 -
    exp(-T/τ))). Its cosine terms, chi-square distributed about that spectrum, say how likely every memory τ
    is, from next to nothing to the length of the series, and how large S then is; the variance is the average
    over τ. So a wander too slow to have shown all of itself makes the mean as unsure as it is.
    """
    points = len(slow)
    order = np.arange(1, min(max(waves, _FEWEST_WAVES), _MOST_WAVES, points - 1) + 1)
    cosines = np.cos(np.pi * order[:, None] * (np.arange(points) + 0.5) / points)
    strength = (cosines @ slow) ** 2 * 2.0 / points
    if len(strength) > 1 and strength[0] > _DRIFT_RATIO * strength[1:_FEWEST_WAVES].mean():
        strength, order = strength[1:], order[1:]  # a drift from start to end is no wander
    rise = 1.0 + (np.pi * order * _MEMORIES[:, None]) ** 2
    scale = np.maximum(rise @ strength, 1e-30)
    log_chance = 0.5 * np.log(rise).sum(axis=1) - 0.5 * len(order) * np.log(scale)
    chance = np.exp(log_chance - log_chance.max())
    left = 1.0 - _MEMORIES * (1.0 - np.exp(-1.0 / _MEMORIES))
    variance = scale / max(len(order) - 2, 1) / points * left
    return float(np.sqrt(chance @ variance / chance.sum()))
