"""The flute's shape as a list of numbers that can be fitted, and how its resonances move with each of them.

Conventions: a shape is the vector [length, bore, wall, head correction, hole places …, hole sizes …, air],
in mm but for the last: how far all resonances stand above those at the tube's temperature, in cents (warm
breath, moist air). Places are from the sound hole, the hole nearest the mouth first. Resonances are in
cents above 1 Hz, shape (fingerings, count); NaN where a fingering has fewer.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from fluteprobe.flute.tube import Tube, input_admittance, resonances

Reals = npt.NDArray[np.float64]
Complexes = npt.NDArray[np.complex128]

LENGTH, BORE, WALL, HEAD, FIRST_PLACE = 0, 1, 2, 3, 4

_LEAST_MM = 0.3
_LEAST_GAP_MM = 0.5
_PITCH_STEP = 1e-4  # of a frequency
_LARGEST_STEP = 0.02  # of a frequency, in one step towards a resonance
_STEP_MM = 0.02
_STEP_OPEN = 0.01


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """What is not fitted: the air's temperature in °C, and how the bore widens and narrows, if it does.

    `profile` pairs places in mm from the sound hole with the bore there as a share of the fitted bore.
    """

    temperature_c: float
    profile: tuple[tuple[float, float], ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Shape:
    """What is believed of a flute's shape: the likeliest values and their covariance.

    `values` has shape (2 holes + 5,), `covariance` the same twice.
    """

    values: Reals
    covariance: Reals
    setting: Setting

    @property
    def holes(self) -> int:
        """How many finger holes there are."""
        return (len(self.values) - FIRST_PLACE - 1) // 2

    @property
    def tube(self) -> Tube:
        """The tube of the likeliest values."""
        return tube_of(self.values, self.setting)


def tube_of(values: Reals, setting: Setting) -> Tube:
    """Return the tube of a shape; what no tube can have (tiny holes, holes that cross) is cut off."""
    holes = (len(values) - FIRST_PLACE - 1) // 2
    order = np.arange(holes + 1)
    places = np.append(values[FIRST_PLACE : FIRST_PLACE + holes], values[LENGTH]) - _LEAST_GAP_MM * order
    places = np.maximum.accumulate(np.maximum(places, _LEAST_MM)) + _LEAST_GAP_MM * order
    sizes = np.maximum(values[FIRST_PLACE + holes : -1], _LEAST_MM)
    bore, wall, head = np.maximum(values[[BORE, WALL, HEAD]], _LEAST_MM)
    return Tube(
        bore_mm=float(bore),
        length_mm=float(places[-1]),
        wall_mm=float(wall),
        holes_mm=tuple((float(place), float(size)) for place, size in zip(places[:-1], sizes, strict=True)),
        head_correction_mm=float(head),
        temperature_c=setting.temperature_c,
        profile_mm=tuple((place, float(share * bore)) for place, share in setting.profile),
    )


def pitches(tube: Tube, openness: Reals, count: int) -> Reals:
    """Return the resonances of a tube in cents above 1 Hz, shape (fingerings, count)."""
    return np.asarray(1200.0 * np.log2(resonances(tube, openness, count).frequency_hz))


def followed(tube: Tube, openness: Reals, near_cents: Reals, rounds: int = 4) -> Reals:
    """Return the resonances of a tube that lie next to known pitches; NaN stays NaN.

    Near a resonance the impedance is a straight line through zero a little off the real axis of frequency, so
    that Newton's step, its real part taken, leads to the lowest magnitude.
    """
    known = np.isfinite(near_cents)
    frequency = np.where(known, 2.0 ** (near_cents / 1200.0), 100.0)
    for _ in range(rounds):
        impedance, slope = _line(tube, openness, frequency)
        step = np.clip(-(impedance / slope).real / frequency, -_LARGEST_STEP, _LARGEST_STEP)
        frequency = frequency * (1.0 + step)
    return np.asarray(np.where(known, 1200.0 * np.log2(frequency), np.nan))


def slopes(values: Reals, setting: Setting, openness: Reals, at_cents: Reals) -> Reals:
    """Return how resonances move with the shape, cents per mm (air: cents per cent).

    The shape is (fingerings, count, numbers in the shape); `at_cents` are the resonances of that shape.
    """
    known = np.isfinite(at_cents)
    frequency = np.where(known, 2.0 ** (at_cents / 1200.0), 100.0)
    impedance, slope = _line(tube_of(values, setting), openness, frequency)
    moved = np.ones((*at_cents.shape, len(values)))
    for k in range(len(values) - 1):
        changed = values.copy()
        changed[k] += _STEP_MM
        there = 1.0 / input_admittance(tube_of(changed, setting), openness, frequency)
        moved[..., k] = -((there - impedance) / slope).real / _STEP_MM
    moved[..., :-1] *= (1200.0 / np.log(2.0) / frequency)[..., None]
    return np.asarray(np.where(known[..., None], moved, np.nan))


def opening_slopes(tube: Tube, openness: Reals, at_cents: Reals) -> Reals:
    """Return how resonances move as partly open holes are uncovered further, in cents per unit of openness.

    The shape is (fingerings, count, holes); holes that no fingering opens partly are passed over, with 0.
    """
    known = np.isfinite(at_cents)
    frequency = np.where(known, 2.0 ** (at_cents / 1200.0), 100.0)
    impedance, slope = _line(tube, openness, frequency)
    moved = np.zeros((*at_cents.shape, openness.shape[1]))
    for hole in np.flatnonzero(((openness > 0.0) & (openness < 1.0)).any(axis=0)):
        step = np.where(openness[:, hole] > 0.5, -_STEP_OPEN, _STEP_OPEN)
        changed = openness.copy()
        changed[:, hole] += step
        there = 1.0 / input_admittance(tube, changed, frequency)
        moved[..., hole] = -((there - impedance) / slope).real / step[:, None]
    moved *= (1200.0 / np.log(2.0) / frequency)[..., None]
    return np.asarray(np.where(known[..., None], moved, np.nan))


def _line(tube: Tube, openness: Reals, frequency_hz: Reals) -> tuple[Complexes, Complexes]:
    """Return impedance and its slope per Hz, both complex, at each fingering's own frequencies."""
    count = frequency_hz.shape[1]
    both = np.concatenate([frequency_hz, frequency_hz * (1.0 + _PITCH_STEP)], axis=1)
    impedance = 1.0 / input_admittance(tube, openness, both)
    slope = (impedance[:, count:] - impedance[:, :count]) / (frequency_hz * _PITCH_STEP)
    return impedance[:, :count], slope
