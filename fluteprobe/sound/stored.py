"""Tones from stored values: what a JSON text says of a tone becomes a Tone again, every value checked.

Conventions: the fields are those of `Tone`, by the same names and in the same units; see `fields.py` for what
is refused.
"""

from typing import Any, get_args

from fluteprobe.fields import (
    above_zero,
    between,
    each,
    field,
    field_if_there,
    not_below_zero,
    number,
    one_of,
    text,
    unless_null,
    whole,
)
from fluteprobe.sound.tone import BreathResonance, Kind, Partial, Tone, Vibrato

_kind = one_of(get_args(Kind))
_share = between(0.0, 1.0)
_order = whole(1)
_perhaps_number = unless_null(number)
_perhaps_above_zero = unless_null(above_zero)
_perhaps_not_below_zero = unless_null(not_below_zero)


def tone_from(values: Any) -> Tone:
    """Return the tone in a JSON object; fields added by others are passed over.

    Raises
    ------
    UnfitError
        If a field is missing or not as it should be.
    """
    return Tone(
        start_s=field(values, "start_s", not_below_zero),
        end_s=field(values, "end_s", not_below_zero),
        kind=field(values, "kind", _kind),
        frequency_hz=field(values, "frequency_hz", _perhaps_above_zero),
        uncertainty_cents=field(values, "uncertainty_cents", _perhaps_not_below_zero),
        partials=field(values, "partials", _partials),
        harmonic_to_noise_db=field(values, "harmonic_to_noise_db", _perhaps_number),
        breath_resonances=field(values, "breath_resonances", _resonances),
        drift_cents=field(values, "drift_cents", _perhaps_number),
        vibrato=field(values, "vibrato", _perhaps_vibrato),
        attack_ms=field(values, "attack_ms", _perhaps_not_below_zero),
        cautions=field(values, "cautions", _texts),
    )


def _partial(values: Any) -> Partial:
    return Partial(
        order=field(values, "order", _order),
        frequency_hz=field(values, "frequency_hz", above_zero),
        level_db=field(values, "level_db", number),
    )


def _resonance(values: Any) -> BreathResonance:
    return BreathResonance(
        frequency_hz=field(values, "frequency_hz", above_zero),
        width_hz=field(values, "width_hz", not_below_zero),
        prominence_db=field(values, "prominence_db", number),
        chance=field_if_there(values, "chance", _share, 0.0),
    )


def _vibrato(values: Any) -> Vibrato:
    return Vibrato(
        rate_hz=field(values, "rate_hz", not_below_zero),
        extent_cents=field(values, "extent_cents", not_below_zero),
    )


_partials = each(_partial)
_resonances = each(_resonance)
_perhaps_vibrato = unless_null(_vibrato)
_texts = each(text)
