"""The acoustic model as a witness: a tube of known bore and holes, fitted to the ladder, tells each register.

Conventions: pitches in cents above 1 Hz (1200 log2 of the frequency); dimensions in mm. The dimensions in
flute.toml give bore, wall and holes. What they leave open, the sounding length and how much the sound hole
lengthens it, is fitted to the first-register notes of the ladder (least squares, Gauss-Newton). Where the
tube then misses the ladder by more than a player's breath bends a note, the dimensions are not believed and
the model is silent.

The model stands on the ladder's own pitches, so that it replaces the ladder's word and is not added to it.
"""

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace
from math import exp, hypot, log2

import numpy as np

from fluteprobe.flute.evidence import REGISTERS, Clue, Register
from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.tube import FOOT_CORRECTION, Tube, resonances
from fluteprobe.flute.tuning import speed_of_sound_m_per_s

FEWEST_RUNGS = 3

_ROUNDS = 2
_STEP_MM = 1.0
_HEAD_BORES = 1.9
_HEAD_SPREAD_BORES = 0.6
_RUNG_CENTS = 15.0
_MOST_MISFIT_CENTS = 45.0
# How far a tone lies from its resonance (the breath bends it), and what the model leaves out, by register.
_SPREAD_CENTS: Mapping[Register, float] = {1: 30.0, 2: 45.0, 3: 65.0}
_LOOSE_CENTS = 110.0  # more for half-holed and vented fingerings, whose opening is not known
_STRAY = 1e-5


@dataclass(frozen=True, slots=True, kw_only=True)
class Dimensions:
    """What flute.toml tells of a flute's bore: mm, holes as (distance from the sound hole, diameter).

    `bore_mm` is the bore at the sound hole, and everywhere but where `profile_mm` tells more (see `Tube`).
    """

    bore_mm: float
    wall_mm: float
    holes_mm: tuple[tuple[float, float], ...]
    profile_mm: tuple[tuple[float, float], ...] = ()
    temperature_c: float = 20.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Model:
    """A fitted tube, by how much it misses the ladder (root mean square in cents), and what it resonates at.

    `resonances_hz` holds the lowest three resonances of each fingering that was asked for, NaN where fewer.
    """

    tube: Tube
    misfit_cents: float
    resonances_hz: Mapping[Fingering, Sequence[float]]


def fitted_model(
    dimensions: Dimensions, rungs: Mapping[int, float], fingerings: Collection[Fingering]
) -> Model | None:
    """Fit length and head correction to the ladder notes (cents, by open holes); None where that fails."""
    rung_list = sorted(rungs)
    if len(rung_list) < FEWEST_RUNGS:
        return None
    steps = [ladder(len(dimensions.holes_mm))[k] for k in rung_list]
    heard = np.array([rungs[k] for k in rung_list])
    try:
        tube = _first_guess(dimensions, rung_list[0], rungs)
        for _ in range(_ROUNDS):
            tube = _nearer(tube, steps, heard)
        misfit = float(np.sqrt(np.mean((_first_register(tube, steps) - heard) ** 2)))
    except ValueError:
        return None
    if not misfit < _MOST_MISFIT_CENTS:
        return None
    asked = list(fingerings)
    resonant = resonances(tube, asked, len(REGISTERS)).frequency_hz.tolist()
    return Model(tube=tube, misfit_cents=misfit, resonances_hz=dict(zip(asked, resonant, strict=True)))


def model_clue(model: Model, fingering: Fingering, pitch_cents: float) -> Clue:
    """Weigh a pitch against the resonances that the fitted tube has for its fingering."""
    resonant = model.resonances_hz[fingering]
    loose = _LOOSE_CENTS if set(fingering.states) & {"h", "v"} else 0.0
    likelihood = {}
    for register, frequency_hz in zip(REGISTERS, resonant, strict=True):
        spread = hypot(_SPREAD_CENTS[register], model.misfit_cents, loose)
        away = (pitch_cents - 1200.0 * log2(frequency_hz)) / spread if frequency_hz > 0.0 else 10.0
        likelihood[register] = _STRAY + exp(-0.5 * away**2) / (2.506628 * spread)
    told = ", ".join(f"{frequency_hz:.0f}" for frequency_hz in resonant)
    detail = (
        f"the tube of the given dimensions resonates at {told} Hz with {fingering}; "
        f"this tone is at {2.0 ** (pitch_cents / 1200.0):.0f} Hz"
    )
    return Clue(source="acoustic model", likelihood=likelihood, detail=detail)


def _first_guess(dimensions: Dimensions, lowest: int, rungs: Mapping[int, float]) -> Tube:
    """Return a tube whose length follows from the lowest rung, as if it were all closed."""
    head = _HEAD_BORES * dimensions.bore_mm
    half_wave = 500.0 * speed_of_sound_m_per_s(dimensions.temperature_c) / 2.0 ** (rungs[lowest] / 1200.0)
    last_hole = dimensions.holes_mm[-1][0]
    length = half_wave - head - FOOT_CORRECTION * dimensions.bore_mm / 2.0
    return Tube(
        bore_mm=dimensions.bore_mm,
        wall_mm=dimensions.wall_mm,
        holes_mm=dimensions.holes_mm,
        length_mm=max(length, last_hole + dimensions.bore_mm),
        head_correction_mm=head,
        temperature_c=dimensions.temperature_c,
        profile_mm=dimensions.profile_mm,
    )


def _nearer(tube: Tube, fingerings: list[Fingering], heard: np.ndarray) -> Tube:
    """Take one Gauss-Newton step in length and head correction, the latter held near its usual size."""
    now = _first_register(tube, fingerings)
    longer = _first_register(replace(tube, length_mm=tube.length_mm + _STEP_MM), fingerings)
    deeper = _first_register(replace(tube, head_correction_mm=tube.head_correction_mm + _STEP_MM), fingerings)
    slopes = np.stack([longer - now, deeper - now], axis=1) / _STEP_MM / _RUNG_CENTS
    held = 1.0 / (_HEAD_SPREAD_BORES * tube.bore_mm)
    usual = (_HEAD_BORES * tube.bore_mm - tube.head_correction_mm) * held
    design = np.vstack([slopes, [0.0, held]])
    step = np.linalg.lstsq(design, np.append((heard - now) / _RUNG_CENTS, usual), rcond=None)[0]
    head = max(tube.head_correction_mm + float(step[1]), 0.0)
    return replace(tube, length_mm=tube.length_mm + float(step[0]), head_correction_mm=head)


def _first_register(tube: Tube, fingerings: list[Fingering]) -> np.ndarray:
    return np.asarray(1200.0 * np.log2(resonances(tube, fingerings, 1).frequency_hz[:, 0]))
