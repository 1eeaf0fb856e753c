"""The upper notes before they are played: a Survey becomes a Forecast.

Conventions: as in `values`.

A tube is fitted to everything heard, tones and breath resonances, and foretells every fingering that can
matter (flute/fit.py, flute/joint.py). What was measured in a higher register is foretold too, without the
tones that gave it, so that forecast and measurement can be compared. A flute that the model cannot fit gets
no forecast.
"""

from collections.abc import Collection, Sequence

import numpy as np

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.fit import Fit, fitted
from fluteprobe.flute.joint import Flags, Heard, Joint
from fluteprobe.flute.plan import take_plan
from fluteprobe.flute.proportions import believed_shape, without_dimensions
from fluteprobe.flute.sensitivity import sensitivities, tube_words
from fluteprobe.flute.shape import Shape
from fluteprobe.flute.speak import Try, chances
from fluteprobe.flute.tuning import nearest_note
from fluteprobe.forecast.choice import in_order, with_ranks
from fluteprobe.forecast.heard import heard_of, known_dimensions, known_rungs, tries_of
from fluteprobe.forecast.values import Basis, Disagreement, FitWords, Forecast, Prediction
from fluteprobe.survey import Survey

__all__ = ["Disagreement", "FitWords", "Forecast", "Prediction", "forecast"]

Wanted = tuple[Fingering, int]

UPPER_REGISTERS = (2, 3)

_WIDEST_CENTS = 75.0  # a forecast less sure than this names no note
_FAR_CENTS, _FAR_SURPRISE = 60.0, 4.5
_MOST_MISFIT_CENTS, _MOST_STRANGE = 40.0, 3.0
_NEAREST_HOLES_MM = 5.0  # fingers need more
_PIN_MM = 1.0
_MENTIONED_SURPRISE, _MENTIONED = 3.0, 5
_NEARLY_ALL = 0.8  # of what is known of a pitch

_TAKES = "no tube sounds like these takes: see whether their names are right, those below first"
_DIMENSIONS = (
    "a tube of the dimensions in flute.toml does not sound like these takes, but one of others does: "
    "measure again, from the sound hole"
)


def forecast(survey: Survey) -> Forecast:
    """Foretell the second and third registers of a measured flute."""
    heard, known = heard_of(survey), known_dimensions(survey)
    rungs = known_rungs(survey.flute.holes, heard)
    if not rungs:
        return _none(survey, "no tone whose register is known: record the ladder first, from all closed up")
    fit = _fit(believed_shape(survey.flute.holes, rungs, known), heard)
    disagreements = () if fit is None else _disagreements(fit)
    if fit is None or _is_unfit(fit, disagreements):
        plain = believed_shape(survey.flute.holes, rungs, without_dimensions(known))
        to_blame = known.has_dimensions and _fits(_fit(plain, heard))
        return _none(survey, _DIMENSIONS if to_blame else _TAKES, disagreements)
    return Forecast(
        flute=survey.flute,
        sitting=survey.sitting,
        predictions=in_order(with_ranks(_predictions(survey, fit), survey)),
        fit=FitWords(
            misfit_cents=fit.misfit_cents,
            tones=sum(each.is_tone for each in fit.heard),
            breath_resonances=sum(not each.is_tone for each in fit.heard),
            tube=tube_words(fit.shape),
        ),
        sensitivities=sensitivities(fit.shape, _played(survey)),
        disagreements=disagreements,
    )


def _none(survey: Survey, reason: str, disagreements: Sequence[Disagreement] = ()) -> Forecast:
    return Forecast(
        flute=survey.flute,
        sitting=survey.sitting,
        predictions=(),
        fit=None,
        disagreements=tuple(disagreements),
        reason=reason,
    )


# --- whether the model fits --------------------------------------------------------------------------


def _disagreements(fit: Fit) -> tuple[Disagreement, ...]:
    """Return the tones that all others do not foretell, worst first."""
    told = [
        Disagreement(
            take=each.take,
            fingering=each.fingering,
            register=each.sounding,
            deviation_cents=float(deviation),
            surprise=float(surprise),
        )
        for each, deviation, surprise in zip(fit.heard, fit.deviation_cents, fit.surprise, strict=True)
        if each.is_tone and abs(surprise) > _MENTIONED_SURPRISE
    ]
    return tuple(sorted(told, key=lambda each: -abs(each.surprise))[:_MENTIONED])


def _is_unfit(fit: Fit, disagreements: Sequence[Disagreement]) -> bool:
    """Whether the tube is no account of the flute."""
    far = any(
        abs(each.deviation_cents) > _FAR_CENTS and abs(each.surprise) > _FAR_SURPRISE
        for each in disagreements
    )
    places = np.array([0.0, *(place for place, _ in fit.shape.tube.holes_mm)])
    near = bool(np.diff(places).min() < _NEAREST_HOLES_MM)
    within = fit.misfit_cents < _MOST_MISFIT_CENTS and fit.strangeness < _MOST_STRANGE
    return far or near or not within


def _fits(fit: Fit | None) -> bool:
    return fit is not None and not _is_unfit(fit, _disagreements(fit))


def _fit(believed: Shape, heard: Sequence[Heard]) -> Fit | None:
    """Return the fitted tube; None for dimensions to which no formula applies, before or after the fit."""
    sizes = [size for _, size in believed.tube.holes_mm]
    if min(sizes) < _PIN_MM or max(sizes) > believed.tube.bore_mm:
        return None
    try:
        with np.errstate(all="ignore"):
            fit = fitted(believed, heard)
    except (ValueError, np.linalg.LinAlgError):  # far from any flute: no such tube, or no such covariance
        return None
    return fit if np.isfinite(fit.shape.values).all() else None


# --- predictions -------------------------------------------------------------------------------------


def _predictions(survey: Survey, fit: Fit) -> list[Prediction]:
    """Return every fingering that can matter in both upper registers, without a rank."""
    planned = [take.fingering for take in take_plan(survey.flute.holes, "full")]
    tries = tries_of(survey.readings)
    joint = fit.joint([*planned, *(each.fingering for each in tries)])
    wanted = [
        (fingering, register)
        for fingering in joint.fingerings
        for register in UPPER_REGISTERS
        if np.isfinite(joint.pitch[joint.row[fingering], register - 1])
    ]
    measured = {(entry.fingering, int(entry.register)): entry.frequency_hz for entry in survey.entries}
    speaks = chances(joint.resonances, joint.row, wanted, tries, measured)
    told = _told(joint, wanted, measured)
    return [
        _prediction(
            each, survey.sitting.a4_hz, *words, speaks=chance, tries=tries, measured_hz=measured.get(each)
        )
        for each, words, chance in zip(wanted, told, speaks, strict=True)
        if words[1] < _WIDEST_CENTS
    ]


def _prediction(  # noqa: PLR0913  (one for each part of it)
    wanted: Wanted,
    a4_hz: float,
    pitch_cents: float,
    uncertainty_cents: float,
    basis: Basis,
    *,
    speaks: float,
    tries: Sequence[Try],
    measured_hz: float | None,
) -> Prediction:
    frequency_hz = float(2.0 ** (pitch_cents / 1200.0))
    note, cents = nearest_note(frequency_hz, a4_hz)
    return Prediction(
        fingering=wanted[0],
        register=wanted[1],
        frequency_hz=frequency_hz,
        uncertainty_cents=uncertainty_cents,
        note=str(note),
        cents=cents,
        basis=basis,
        likely_to_speak=speaks,
        tried=sum(each.fingering == wanted[0] for each in tries),
        measured_hz=measured_hz,
    )


def _told(
    joint: Joint, wanted: Sequence[Wanted], measured: Collection[Wanted]
) -> list[tuple[float, float, Basis]]:
    """Return pitch in cents, its uncertainty, what it rests on; what was measured is told without itself."""
    everything = np.ones(len(joint.heard), dtype=bool)
    pitch, spread = joint.foretold(joint.asked(wanted))
    found = []
    for i, each in enumerate(wanted):
        keep = everything
        if each in measured:
            keep = np.array([(heard.fingering, heard.sounding) != each for heard in joint.heard])
            pitch[i : i + 1], spread[i : i + 1] = joint.foretold(joint.asked([each]), keep)
        found.append((float(pitch[i]), float(spread[i]), _basis(joint, each, float(spread[i]), keep)))
    return found


def _basis(joint: Joint, wanted: Wanted, spread: float, keep: Flags) -> Basis:
    """Return what a forecast rests on: how much less sure it were without that resonance's own bumps."""
    bumps = np.array([
        not heard.is_tone and (heard.fingering, heard.resonance) == wanted for heard in joint.heard
    ])  # fmt: skip
    if not (bumps & keep).any():
        return "fitted tube"
    _, without = joint.foretold(joint.asked([wanted]), keep & ~bumps)
    share = 1.0 - (spread / float(without[0])) ** 2
    return "breath resonance" if share > _NEARLY_ALL else "both"


def _played(survey: Survey) -> list[Fingering]:
    """Return the fingerings that were played in some register, low to high."""
    return list(dict.fromkeys(entry.fingering for entry in survey.entries))
