"""Names that are doubted: on flutes whose pitches are the resonances of a tube, some takes are named wrongly.

Truth is by construction: each pitch is a resonance of the acoustic model (fluteprobe/flute/tube.py) of a
flute of random build, bent by a breath of 15 cents; the breath shows the resonances below. What simulated
recordings give is in tests/bench/bench_quality.py.
"""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from functools import cache
from math import log2

import numpy as np
import pytest
from builds import random_build, usual_takes

from fluteprobe.flute.evidence import Evidence, RegisterCall
from fluteprobe.flute.fingering import Breath, Fingering, ladder
from fluteprobe.flute.register import Dimensions, Sounding
from fluteprobe.flute.suspicion import called_without_name, doubted_names
from fluteprobe.flute.tube import resonances

SEEDS = range(300, 308)
BENT_CENTS = 15.0


@cache
def flute(seed: int) -> tuple[Sounding, ...]:
    """Return the usual takes of a flute of random build: every tone at a resonance, bent by the breath."""
    build = random_build(seed)
    plans = usual_takes(build, seed)
    fingerings = list(dict.fromkeys(plan.fingering for plan in plans))
    found = resonances(build.tube, fingerings, 3).frequency_hz
    at = dict(zip(fingerings, found.tolist(), strict=True))
    rng = np.random.default_rng(seed)
    return tuple(
        sounding(plan.name, plan.fingering, at[plan.fingering], aim, float(rng.normal(0.0, BENT_CENTS)))
        for plan in plans
        for aim in plan.aims
    )


def sounding(
    take: str, fingering: Fingering, resonant: Sequence[float], register: int, bent: float
) -> Sounding:
    own = resonant[register - 1]
    return Sounding(
        take=take,
        fingering=fingering,
        breath="over" if "over" in take else "normal",
        pitch_cents=1200.0 * log2(own) + bent,
        bumps=tuple((hz / own, 12.0 if hz < own else 8.0) for hz in resonant[:register]),
    )


def renamed(soundings: Sequence[Sounding], names: Mapping[str, str]) -> list[Sounding]:
    """Return the tones with some takes played with the fingering of others, as mixed-up files are."""
    fingerings = {sounding.take: sounding.fingering for sounding in soundings}
    return [replace(s, fingering=fingerings[names.get(s.take, s.take)]) for s in soundings]


def holes(soundings: Sequence[Sounding]) -> int:
    return soundings[0].fingering.holes


@pytest.mark.parametrize("seed", SEEDS)
def test_right_names_are_not_doubted(seed: int) -> None:
    assert doubted_names(holes(flute(seed)), flute(seed)) == {}


def test_swaps_of_two_rungs_are_told_as_swaps() -> None:
    """Any two notes of the ladder that are not next to each other, on every flute: nine in ten are told."""
    told = tried = 0
    for seed in SEEDS:
        rungs = [str(rung) for rung in ladder(holes(flute(seed)))]
        for one, other in ((rungs[0], rungs[2]), (rungs[1], rungs[4]), (rungs[3], rungs[-1])):
            doubted = doubted_names(holes(flute(seed)), renamed(flute(seed), {one: other, other: one}))
            assert set(doubted) <= {one, other}
            told += set(doubted) == {one, other} and "names swapped" in doubted[one]
            tried += 1
    assert tried == 3 * len(SEEDS)
    assert told >= 0.9 * tried


def test_a_swap_in_words() -> None:
    soundings = flute(SEEDS[0])
    low, high = (str(ladder(holes(soundings))[k]) for k in (1, 4))
    doubted = doubted_names(holes(soundings), renamed(soundings, {low: high, high: low}))
    assert doubted == {
        low: f"names swapped (it sounds like {low}, and {high} like {high}): look at both names",
        high: f"names swapped (it sounds like {high}, and {low} like {low}): look at both names",
    }


def test_one_wrong_name_is_told_with_what_it_sounds_like() -> None:
    """A second take of the all-closed note that was played with half of the holes open."""
    told = 0
    for seed in SEEDS:
        soundings = flute(seed)
        rungs = ladder(holes(soundings))
        played = next(s for s in soundings if s.take == str(rungs[3]))
        again = replace(
            played, take=f"{rungs[0]}-2", fingering=rungs[0], pitch_cents=played.pitch_cents + 9.0
        )
        doubted = doubted_names(holes(soundings), [*soundings, again])
        assert set(doubted) <= {again.take}
        hz = 2.0 ** (again.pitch_cents / 1200.0)
        for words in doubted.values():
            assert words.startswith(f"sounds like {rungs[3]} ")
            assert f"({hz:.0f} Hz; the first register of {rungs[0]} is expected at " in words
            assert words.endswith(" Hz): look at its name")
        told += bool(doubted)
    assert told >= 0.9 * len(SEEDS)


def test_dimensions_let_a_cross_fingering_be_doubted() -> None:
    """By the ladder a cross-fingering may be nearly anywhere; the tube knows its place."""
    told = 0
    for seed in SEEDS[:4]:
        tube = random_build(seed).tube
        dimensions = Dimensions(
            bore_mm=tube.bore_mm,
            wall_mm=tube.wall_mm,
            holes_mm=tube.holes_mm,
            temperature_c=tube.temperature_c,
        )
        assert doubted_names(holes(flute(seed)), flute(seed), dimensions) == {}
        closed, crossed = "x" * holes(flute(seed)), "xo" + "x" * (holes(flute(seed)) - 2)
        mixed = renamed(flute(seed), {closed: crossed, crossed: closed})
        told += set(doubted_names(holes(flute(seed)), mixed, dimensions)) == {closed, crossed}
    assert told >= 2


BLOWN: tuple[tuple[str, Breath, float], ...] = (
    ("", "normal", 0.0),
    ("-soft", "soft", -70.0),
    ("-over", "over", 1180.0),
)


def test_soft_breath_and_odd_scales_are_not_doubted() -> None:
    """Steps from 30 to 400 cents, soft takes 70 cents flat, every rung thrice."""
    rungs = ladder(6)
    pitches = 7800.0 + np.cumsum([0.0, 30.0, 400.0, 90.0, 350.0, 40.0, 260.0])
    soundings = [
        Sounding(take=f"{rung}{end}", fingering=rung, breath=breath, pitch_cents=float(pitch) + bent)
        for rung, pitch in zip(rungs, pitches, strict=True)
        for end, breath, bent in BLOWN
    ]  # fmt: skip
    assert doubted_names(6, soundings) == {}


def test_a_cross_fingering_a_half_hole_and_a_leak_may_be_where_they_like() -> None:
    rungs = ladder(6)
    soundings = [
        Sounding(take=str(rung), fingering=rung, breath="normal", pitch_cents=7800.0 + 190.0 * k)
        for k, rung in enumerate(rungs)
    ]
    for word, cents in (
        ("oxxxxx", 9050.0), ("xoxxxx", 8600.0), ("xxoxxo", 8300.0), ("hxxxxx", 9020.0), ("vxxxxx", 9000.0),
        ("xxxxxh", 7900.0), ("oxoxox", 9900.0),
    ):  # fmt: skip
        one = Sounding(take=word, fingering=Fingering(word), breath="normal", pitch_cents=cents)
        assert doubted_names(6, [*soundings, one]) == {}, word


def test_a_few_takes_prove_nothing() -> None:
    closed, opened = (Fingering(word) for word in ("xxxxxx", "oooooo"))
    assert doubted_names(6, []) == {}
    one = Sounding(take="a", fingering=closed, breath="normal", pitch_cents=9000.0)
    assert doubted_names(6, [one]) == {}
    other = Sounding(take="b", fingering=opened, breath="normal", pitch_cents=8000.0)
    assert doubted_names(6, [one, other]) == {}


CALL = RegisterCall(
    register=1,
    probability={1: 0.99, 2: 0.005, 3: 0.005},
    evidence=(Evidence(source="ladder", favours=1, log_odds=5.0, detail="a reason"),),
)


def test_a_register_that_rests_on_the_name_is_undecided() -> None:
    call = called_without_name(CALL, ())
    assert call.register is None
    assert call.evidence == CALL.evidence
    assert max(call.probability.values()) < 0.9
    assert sum(call.probability.values()) == pytest.approx(1.0)


def test_a_register_that_the_breath_alone_tells_stays() -> None:
    clear = ((1.0, 12.0), (2.0, 8.0))
    assert called_without_name(CALL, clear) is CALL
    undecided = replace(CALL, register=None)
    assert called_without_name(undecided, ()) is undecided
