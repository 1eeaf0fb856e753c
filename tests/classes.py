"""Surveys by construction for the tests of comparisons: pitches and uncertainties are given, not measured.

A pitch is in cents above the equal-tempered note of its fingering in SCALE. Everything here is made up.
"""

from collections.abc import Mapping, Sequence
from math import log2
from typing import Any

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.register import Register
from fluteprobe.flute.tuning import A4_HZ, Note, nearest_note
from fluteprobe.session import FluteFacts, Sitting
from fluteprobe.survey import Entry, Survey

Key = tuple[str, Register]

SCALE: Mapping[Key, int] = {
    **{(str(word), 1): midi for word, midi in zip(ladder(6), (67, 69, 71, 72, 74, 76, 78), strict=True)},
    ("oxxxxx", 2): 80,
    ("xxxxxo", 2): 81,
    ("xxxxoo", 2): 83,
}
KEYS = tuple(SCALE)


def entry(key: Key, frequency_hz: float, uncertainty: float, *, tones: int = 2, share: float = 1.0) -> Entry:
    """Return an entry that sounds at a frequency."""
    states, register = key
    note, cents = nearest_note(frequency_hz, A4_HZ)
    return Entry(
        fingering=Fingering(states),
        register=register,
        frequency_hz=frequency_hz,
        uncertainty_cents=uncertainty,
        note=str(note),
        cents=cents,
        cents_at_reference=None,
        stretch_cents=None,
        takes=tuple(f"takes/{states}-{k + 1}.wav" for k in range(tones)),
        tones=tones,
        reliability=share,
    )


def flute(
    name: str,
    cents: Mapping[Key, float] | Sequence[float],
    uncertainty: float | Sequence[float] = 1.0,
    *,
    scale: Mapping[Any, int] = SCALE,
    serial: str | None = None,
    **sitting: Any,
) -> Survey:
    """Return a flute that is so many cents off at the keys of a scale; cents in its order, or by key."""
    off = cents if isinstance(cents, Mapping) else dict(zip(scale, cents, strict=False))
    doubts = [uncertainty] * len(off) if isinstance(uncertainty, float) else list(uncertainty)
    entries = [
        entry(key, Note(scale[key]).frequency_hz() * 2.0 ** (value / 1200.0), doubt)
        for (key, value), doubt in zip(off.items(), doubts, strict=True)
    ]
    holes = len(next(iter(scale))[0])
    return Survey(
        flute=FluteFacts(name=name, holes=holes, serial=serial),
        sitting=Sitting(**sitting),
        readings=(),
        entries=tuple(sorted(entries, key=lambda each: each.frequency_hz)),
        problems=(),
    )


def cents_above(low_hz: float, high_hz: float) -> float:
    """Return an interval in cents, by the cent's definition."""
    return 1200.0 * log2(high_hz / low_hz)
