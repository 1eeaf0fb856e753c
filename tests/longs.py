"""Long recordings made for tests: which take each sound is, is known by construction.

Pitches in cents above 1 Hz. They are those of a flute drawn at random by `builds.py`, as the tube model has
them, with a finger's luck on half holes; nothing in the program was tuned to these flutes.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from builds import random_build
from make_long import in_one_go, spoken
from numpy.typing import NDArray
from tones import make_tone

from fluteprobe.flute.alignment import Heard, Wanted
from fluteprobe.flute.fingering import Breath, Fingering
from fluteprobe.flute.plan import take_plan
from fluteprobe.flute.tube import resonances

Floats = NDArray[np.float64]

Mishap = Literal["skips", "repeats", "fails", "strays"]

_LUCK = {"x": (0.0, 0.0), "o": (1.0, 1.0), "h": (0.3, 0.6), "v": (0.04, 0.12)}
_SPEAKS: dict[Breath, tuple[float, ...]] = {
    "soft": (1.0, 0.0, 0.0),
    "normal": (0.98, 0.02, 0.0),
    "over": (0.05, 0.87, 0.08),
}
_SCATTER_CENTS = 8.0
_FADE_S = 0.03


@dataclass(frozen=True, slots=True, kw_only=True)
class Sitting:
    """What was wanted, what was heard, and for every sound the take that it is, None for none."""

    order: tuple[Wanted, ...]
    heard: tuple[Heard, ...]
    truth: tuple[int | None, ...]


def wanted(holes: int, edition: str = "standard") -> tuple[Wanted, ...]:
    return tuple(Wanted(fingering=take.fingering, breath=take.breath) for take in take_plan(holes, edition))


def words(*names: str) -> tuple[Wanted, ...]:
    """Return takes from `oxxxxx` and `oxxxxx-over`."""
    parts = [name.partition("-") for name in names]
    return tuple(Wanted(fingering=Fingering(word), breath=breath or "normal") for word, _, breath in parts)  # type: ignore[arg-type]


def holes_of(seed: int) -> int:
    return len(random_build(seed).tube.holes_mm)


def pitches(seed: int, order: Sequence[Wanted]) -> Floats:
    """Return the pitches of some takes in registers 1 to 3, shape (takes, 3); NaN where there is none."""
    random = np.random.default_rng([seed, 7])
    openness = [[random.uniform(*_LUCK[state]) for state in take.fingering.states] for take in order]
    return np.asarray(
        1200.0 * np.log2(resonances(random_build(seed).tube, np.array(openness), 3).frequency_hz)
    )


def tone(cents: float, stray: float = 0.03) -> Heard:
    return Heard(pitch_cents=cents, highest_cents=cents, stray=stray)


def played(seed: int, mishaps: Mapping[Mishap, int], edition: str = "standard") -> Sitting:
    """Return a sitting in which so many takes were left out, repeated or failed, and so many strays."""
    skips, repeats, fails = (mishaps.get(what, 0) for what in ("skips", "repeats", "fails"))
    random = np.random.default_rng([seed, 8])
    order = wanted(holes_of(seed), edition)
    known = pitches(seed, order)
    gone, again, silent = np.split(
        random.permutation(len(order))[: skips + repeats + fails], [skips, skips + repeats]
    )
    before = random.integers(0, len(order), mishaps.get("strays", 0)).tolist()
    heard: list[Heard] = []
    truth: list[int | None] = []
    for k, take in enumerate(order):
        for _ in range(before.count(k)):
            heard.append(tone(float(random.uniform(*1200.0 * np.log2([120.0, 2500.0])))))
            truth.append(None)
        for _ in range(0 if k in gone else 2 if k in again else 1):
            heard.append(Heard(pitch_cents=None) if k in silent else _spoken(known[k], take.breath, random))
            truth.append(k)
    return Sitting(order=order, heard=tuple(heard), truth=tuple(truth))


def _spoken(known: Floats, breath: Breath, random: np.random.Generator) -> Heard:
    register = int(random.choice(3, p=_SPEAKS[breath]))
    while np.isnan(known[register]):
        register -= 1
    return tone(float(known[register] + random.normal(0.0, _SCATTER_CENTS)))


def sounded(cents: float, seconds: float, rate_hz: int, random: np.random.Generator) -> Floats:
    """Return a tone of that pitch at a third of full scale, faded at both ends."""
    made = make_tone(2.0 ** (cents / 1200.0), seconds, "plain", 30.0, random, rate_hz=rate_hz)
    fade = np.minimum(1.0, np.arange(len(made.samples)) / (_FADE_S * rate_hz))
    return np.asarray(0.2 * made.samples * fade * fade[::-1])


def evening(seed: int, plan: Sequence[int | str], rate_hz: int = 16_000, edition: str = "short") -> Floats:
    """Return a recording of what `plan` names: takes of the sheet by number, "word", "breath", "A5"."""
    random = np.random.default_rng([seed, 9])
    order = wanted(holes_of(seed), edition)
    known = pitches(seed, order)
    sounds: list[Floats] = []
    for each in plan:
        if each == "word":
            sounds.append(spoken(0.8, rate_hz, random))
        elif each == "breath":
            sounds.append(0.03 * random.standard_normal(rate_hz))
        else:
            cents = 1200.0 * np.log2(880.0) if isinstance(each, str) else _asked(known, order, each)
            sounds.append(sounded(cents, 0.9, rate_hz, random))
    return in_one_go(sounds, rate_hz, random, pauses_s=(0.7, 1.2))


def _asked(known: Floats, order: Sequence[Wanted], take: int) -> float:
    return float(known[take, int(order[take].breath == "over")])
