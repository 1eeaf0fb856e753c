"""What a fitted tube tells a maker: end corrections, the pressure maximum, what a change of a hole does.

Conventions: lengths in mm from the sound hole; pitches and their changes in cents; uncertainties are
standard (k = 1) and follow from the fit's covariance. All are estimates from a model.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import hypot

import numpy as np

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.shape import (
    BORE,
    FIRST_PLACE,
    HEAD,
    LENGTH,
    Reals,
    Shape,
    followed,
    pitches,
    slopes,
    tube_of,
)
from fluteprobe.flute.tube import FOOT_CORRECTION, Tube, hole_pressures, openness_of

CHANGE_MM = 0.1

_DRAWS = 8
_SEED = 7
_PROBES = 13
_PROBE_MM = 0.02
_PROBE_CLEAR_MM = 0.01
_FORMULA_SHARE = 0.05  # how exact the formulas for holes are: common practice, no source


@dataclass(frozen=True, slots=True, kw_only=True)
class Measure:
    """A number with its standard uncertainty."""

    value: float
    uncertainty: float


@dataclass(frozen=True, slots=True, kw_only=True)
class TubeWords:
    """The fitted tube in a maker's words.

    `bore_mm` is that at the sound hole. `effective_length_mm` is half a wavelength of a plain tube: length
    and both end corrections together. `pressure_maximum_mm` is where the all-closed first register's
    pressure swings most, `top_hole_mm` where the top hole is; `stretch_cents` is how far the second
    resonance of that fingering lies from the octave.
    """

    effective_length_mm: Measure
    length_mm: Measure
    bore_mm: Measure
    head_correction_mm: Measure
    foot_correction_mm: Measure
    pressure_maximum_mm: Measure
    top_hole_mm: Measure
    maximum_below_top_hole_mm: Measure
    stretch_cents: Measure


@dataclass(frozen=True, slots=True, kw_only=True)
class Sensitivity:
    """How a note moves, in cents, if a hole is made wider or moved towards the foot by `CHANGE_MM`.

    Holes are numbered from 1, the one nearest the mouth.
    """

    hole: int
    fingering: Fingering
    register: int
    wider_cents: Measure
    lower_cents: Measure


def tube_words(shape: Shape) -> TubeWords:
    """Return what the fit says of the whole tube."""
    draws = _drawn(shape)
    tubes = [tube_of(each, shape.setting) for each in draws]
    foot = 1000.0 * FOOT_CORRECTION * np.array([tube.radius_at_m(tube.length_mm) for tube in tubes])
    closed = np.zeros((1, shape.holes))
    middle = pitches(shape.tube, closed, 2)
    heard = np.array([followed(tube, closed, middle)[0] for tube in tubes])
    largest = np.array([
        pressure_maximum_mm(tube, float(2.0 ** (first / 1200.0)))
        for tube, (first, _) in zip(tubes, heard, strict=True)
    ])  # fmt: skip
    top = draws[:, FIRST_PLACE]
    return TubeWords(
        effective_length_mm=_measure(draws[:, LENGTH] + draws[:, HEAD] + foot),
        length_mm=_measure(draws[:, LENGTH]),
        bore_mm=_measure(draws[:, BORE]),
        head_correction_mm=_measure(draws[:, HEAD]),
        foot_correction_mm=_measure(foot),
        pressure_maximum_mm=_measure(largest),
        top_hole_mm=_measure(top),
        maximum_below_top_hole_mm=_measure(largest - top),
        stretch_cents=_measure(heard[:, 1] - heard[:, 0] - 1200.0),
    )


def sensitivities(
    shape: Shape, fingerings: Sequence[Fingering], registers: int = 2
) -> tuple[Sensitivity, ...]:
    """Return how the notes of fingerings move with each hole, for a change of 0.1 mm."""
    if not fingerings:
        return ()
    openness = openness_of(fingerings)
    middle = pitches(shape.tube, openness, registers)
    moved = []
    for values in _drawn(shape):
        at = followed(tube_of(values, shape.setting), openness, middle)
        moved.append(CHANGE_MM * slopes(values, shape.setting, openness, at))
    changes = np.array(moved)
    return tuple(
        Sensitivity(
            hole=hole + 1,
            fingering=fingering,
            register=register,
            wider_cents=_change(changes[:, row, register - 1, FIRST_PLACE + shape.holes + hole]),
            lower_cents=_change(changes[:, row, register - 1, FIRST_PLACE + hole]),
        )
        for hole in range(shape.holes)
        for row, fingering in enumerate(fingerings)
        for register in range(1, registers + 1)
        if np.isfinite(middle[row, register - 1])
    )


def pressure_maximum_mm(tube: Tube, frequency_hz: float) -> float:
    """Return where the pressure swings most with all holes closed, in mm from the sound hole.

    It is looked for between a fifth and four fifths of the length, with probe holes so small that they change
    nothing, and refined by a parabola.
    """
    places = np.linspace(0.2, 0.8, _PROBES) * tube.length_mm
    taken = np.array([place for place, _ in tube.holes_mm])
    free = np.abs(places[:, None] - taken[None, :]).min(axis=1, initial=np.inf) > _PROBE_CLEAR_MM
    holes = sorted([*tube.holes_mm, *((float(place), _PROBE_MM) for place in places[free])])
    probed = replace(tube, holes_mm=tuple(holes))
    swing = np.abs(hole_pressures(probed, np.zeros(len(holes)), frequency_hz))[:, 0]
    at = np.array([place for place, _ in holes])
    top = int(np.clip(np.argmax(swing), 2, len(at) - 3))
    near = slice(top - 2, top + 3)
    curve = np.polynomial.Polynomial.fit(at[near], swing[near], 2).convert().coef
    return float(np.clip(-curve[1] / (2.0 * curve[2]), at[top - 2], at[top + 2]))


def _drawn(shape: Shape) -> Reals:
    """Return shapes drawn from what is believed of this one, in pairs about the middle; always the same."""
    steps = np.random.default_rng(_SEED).standard_normal((_DRAWS // 2, len(shape.values)))
    scale, turn = np.linalg.eigh(shape.covariance)
    off = steps * np.sqrt(np.maximum(scale, 0.0)) @ turn.T
    return np.concatenate([shape.values + off, shape.values - off])


def _measure(draws: Reals) -> Measure:
    return Measure(value=float(np.mean(draws)), uncertainty=float(np.std(draws, ddof=1)))


def _change(draws: Reals) -> Measure:
    """Return a change with the fit's uncertainty and that of the hole's formulas."""
    fit = _measure(draws)
    return Measure(value=fit.value, uncertainty=hypot(fit.uncertainty, _FORMULA_SHARE * fit.value))
