"""How readily a register speaks: the order of common practice, and learning from takes."""

import numpy as np
import pytest
from foretelling import SIX_HOLES

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.speak import Try, chances, learnt, signs_of, with_own_takes
from fluteprobe.flute.tube import resonances

WORDS = [Fingering(word) for word in ("oxxxxx", "vxxxxx", "xxxxxx", "xxooxx", "oooooo")]
ROW = {fingering: i for i, fingering in enumerate(WORDS)}
RESONANT = resonances(SIX_HOLES, WORDS, 3)


def told(tries: tuple[Try, ...] = (), measured: tuple[tuple[Fingering, int], ...] = ()) -> dict[str, float]:
    wanted = [(fingering, 2) for fingering in WORDS]
    return dict(zip(map(str, WORDS), chances(RESONANT, ROW, wanted, tries, measured), strict=True))


def tried(word: str, *registers: int) -> Try:
    return Try(fingering=Fingering(word), registers=frozenset(registers))


def test_a_leaking_top_hole_helps_and_all_open_hardly_speaks() -> None:
    """Common practice, no source."""
    chance = told()
    assert min(chance["oxxxxx"], chance["vxxxxx"]) > chance["xxxxxx"] > chance["oooooo"]
    assert chance["oxxxxx"] > 0.9
    assert chance["oooooo"] < 0.1


def test_takes_that_did_not_speak_lower_their_own_chance_most() -> None:
    before, after = told(), told((tried("xxxxxx", 1), tried("xxxxxx")))
    assert after["xxxxxx"] < before["xxxxxx"] - 0.3
    assert all(after[word] <= before[word] + 1e-9 for word in before)
    assert before["oxxxxx"] - after["oxxxxx"] < 0.1


def test_takes_that_spoke_raise_the_others() -> None:
    before, after = told(), told((tried("xxooxx", 2), tried("oooooo", 2)))
    assert after["xxxxxx"] > before["xxxxxx"]


def test_what_was_measured_is_told_without_its_own_takes() -> None:
    closed = Fingering("xxxxxx")
    assert told((tried("xxxxxx", 1),), ((closed, 2),))["xxxxxx"] == pytest.approx(told()["xxxxxx"])


@pytest.mark.parametrize(
    ("registers", "of_second", "of_third"),
    [((), True, True), ((1,), True, True), ((2,), True, True), ((1, 2), True, True), ((3,), False, True)],
)
def test_a_take_that_went_past_a_register_tells_nothing_of_it(
    registers: tuple[int, ...], of_second: bool, of_third: bool
) -> None:
    take = tried("xxxxxx", *registers)
    assert (take.tells_of(2), take.tells_of(3)) == (of_second, of_third)


def test_learning_is_the_most_probable_weights() -> None:
    """At the maximum the slope of the log posterior vanishes: the data's pull is the belief's."""
    random = np.random.default_rng(5)
    signs = np.column_stack([np.ones(40), random.normal(-0.5, 0.7, 40), random.uniform(0.0, 4.0, 40)])
    spoke = random.random(40) < 0.5
    habit = learnt(signs, spoke.tolist())
    chance = 1.0 / (1.0 + np.exp(-signs @ habit.weights))
    believed = learnt(np.empty((0, 3)), [])
    pull = signs.T @ (spoke - chance)
    back = np.linalg.solve(believed.covariance, habit.weights - believed.weights)
    assert pull == pytest.approx(back, abs=1e-3)
    assert (np.diag(habit.covariance) < np.diag(believed.covariance)).all()


def test_a_resonance_that_is_not_there_will_not_speak() -> None:
    signs = signs_of(RESONANT, 3)
    missing = RESONANT.frequency_hz.copy()
    missing[0, 2] = np.nan
    lost = signs_of(type(RESONANT)(frequency_hz=missing, width_hz=RESONANT.width_hz, strength=missing), 3)
    assert np.isfinite(lost).all()
    assert learnt(np.empty((0, 3)), []).chance(lost)[0] < 0.01
    assert np.isfinite(signs).all()


def test_own_takes_weigh_as_in_a_beta_belief() -> None:
    assert with_own_takes(0.6, 0, 0) == pytest.approx(0.6)
    assert with_own_takes(0.6, 0, 3) == pytest.approx(0.3)
    assert with_own_takes(0.6, 3, 3) == pytest.approx(0.8)
