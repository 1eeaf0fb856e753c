"""Which fingerings are recorded, in which order.

Whether an order is easy on the fingers is checked against the best there is, found by trying all (Held &
Karp, J. SIAM 10, 196 (1962)). Which fingerings are worth it is common practice, no source.
"""

from collections.abc import Sequence
from itertools import groupby, pairwise

import pytest

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.plan import EDITIONS, PlannedTake, fingers_moved, take_plan
from fluteprobe.session import parse_take_name

HOLES = range(1, 11)
MOST_TO_TRY = 10  # fingerings of which every order is tried

all_plans = pytest.mark.parametrize("edition", EDITIONS)
all_holes = pytest.mark.parametrize("holes", HOLES)


def groups(plan: Sequence[PlannedTake]) -> list[list[Fingering]]:
    return [
        [take.fingering for take in takes] for _, takes in groupby(plan, key=lambda t: (t.group, t.breath))
    ]


def moves(order: Sequence[Fingering]) -> int:
    return sum(fingers_moved(one, other) for one, other in pairwise(order))


def fewest_moves(fingerings: Sequence[Fingering]) -> int:
    """Return the fewest finger moves of any order that begins with the first fingering."""
    reached = {(frozenset([0]), 0): 0}
    for _ in fingerings[1:]:
        further: dict[tuple[frozenset[int], int], int] = {}
        for (seen, last), cost in reached.items():
            for k in set(range(len(fingerings))) - seen:
                key, total = (seen | {k}, k), cost + fingers_moved(fingerings[last], fingerings[k])
                further[key] = min(total, further.get(key, total))
        reached = further
    return min(reached.values())


# Any flute, any edition --------------------------------------------------------------------------------


@all_plans
@all_holes
def test_every_take_is_there_once_and_its_name_reads_back(holes: int, edition: str) -> None:
    plan = take_plan(holes, edition)
    assert len({take.stem for take in plan}) == len(plan)
    for take in plan:
        assert take.fingering.holes == holes
        assert parse_take_name(f"{take.stem}.wav") == (take.fingering, take.breath, take.number)


@all_plans
@all_holes
def test_the_ladder_comes_first_from_the_lowest_note(holes: int, edition: str) -> None:
    first = groups(take_plan(holes, edition))[0]
    assert (first[0], first[-1]) == (ladder(holes)[0], ladder(holes)[-1])
    assert [fingering for fingering in ladder(holes) if fingering in first] == first


@all_plans
@all_holes
def test_a_group_stays_together(holes: int, edition: str) -> None:
    titles = [title for title, _ in groupby(take_plan(holes, edition), key=lambda t: (t.group, t.breath))]
    assert len(titles) == len(set(titles))


@all_plans
@all_holes
def test_every_take_has_a_reason_and_says_what_it_rests_on(holes: int, edition: str) -> None:
    for take in take_plan(holes, edition):
        assert take.why.endswith(".")
        assert take.basis == "common practice, no source" or "Fletcher" in take.basis or "Wolfe" in take.basis


@pytest.mark.parametrize(("edition", "spare"), [("short", 0), ("standard", 0), ("full", 1)])
@all_holes
def test_no_order_within_a_group_moves_fewer_fingers(holes: int, edition: str, spare: int) -> None:
    """Always on to the nearest is the best there is, in the full edition within one finger of it."""
    for order in groups(take_plan(holes, edition)):
        if len(order) <= MOST_TO_TRY:
            assert moves(order) <= fewest_moves(order) + spare, order


@all_holes
def test_cross_fingerings_stay_near_the_least_that_any_order_needs(holes: int) -> None:
    """Each step moves a finger, and going to another open hole over closed ones moves a second one."""
    for order in groups(take_plan(holes, "full")):
        open_over_closed = {fingering.states.rfind("ox") for fingering in order}
        if -1 not in open_over_closed:
            assert moves(order) <= (len(order) - 1) + (len(open_over_closed) - 1) + 4, order


@all_holes
def test_each_edition_holds_the_smaller_one(holes: int) -> None:
    short, standard, full = ({take.stem for take in take_plan(holes, edition)} for edition in EDITIONS)
    assert short <= standard <= full


# Editions ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("holes", range(3, 11))
def test_the_short_edition_has_fifteen_takes(holes: int) -> None:
    assert len(take_plan(holes, "short")) == 15


def test_the_short_edition_of_six_holes() -> None:
    assert [take.stem for take in take_plan(6, "short")] == [
        "xxxxxx", "xxxxxo", "xxxxoo", "xxxooo", "xxoooo", "xooooo", "oooooo",
        "xxxxxx-over", "xxxxxo-over", "xxxxoo-over",
        "vxxxxx-over", "hxxxxx-over", "oxxxxx-over", "oxxxxo-over", "oxxxoo-over",
    ]  # fmt: skip


def test_the_standard_edition_of_six_holes() -> None:
    plan = take_plan(6)
    assert len(plan) == 32
    assert [[str(f) for f in group] for group in groups(plan)[1:]] == [
        ["xxxxxx", "xxxxxo", "xxxxoo", "xxxooo", "xxoooo", "xooooo"],
        ["vxxxxx", "hxxxxx", "oxxxxx"],
        ["vxxxxo", "vxxxoo"],
        ["oxxxxo", "oxxxoo", "oxxooo", "oxoooo"],
        ["xxxxox", "xxxoxx", "xxxoxo", "xxoxxo", "xxoxoo", "xoxxoo", "xoxooo", "oxxooo", "oxoooo"],
        ["xxxxxx"],
    ]


def test_a_long_ladder_is_thinned_in_the_short_edition_only() -> None:
    short, standard = groups(take_plan(10, "short"))[0], groups(take_plan(10, "standard"))[0]
    assert [f.states.count("o") for f in short] == [0, 2, 4, 6, 8, 10]
    assert len(standard) == 11


def test_the_full_edition_has_every_open_hole_over_closed_ones() -> None:
    """One open hole over a run of closed ones: 5 + 4 + 3 + 2 + 1 on six holes, each blown both ways."""
    plan = take_plan(6, "full")
    for breath in ("normal", "over"):
        blown = {str(take.fingering) for take in plan if take.breath == breath}
        crossed = {"x" * a + "o" + "x" * b + "o" * (5 - a - b) for a in range(5) for b in range(1, 6 - a)}
        assert len(crossed) == 15
        assert crossed <= blown
    assert {str(take.fingering) for take in plan if take.breath == "soft"} == {"xxxxxx", "oooooo"}
    assert len(plan) == 81


def test_one_hole() -> None:
    assert [take.stem for take in take_plan(1)] == ["x", "o", "x-over", "v-over", "h-over", "o-over", "x-2"]


def test_what_is_refused() -> None:
    with pytest.raises(ValueError, match=r"^a flute has 1 to 10 holes, not 11$"):
        take_plan(11)
    with pytest.raises(ValueError, match=r"^a flute has 1 to 10 holes, not 0$"):
        take_plan(0)
    with pytest.raises(ValueError, match=r"^an edition is one of short, standard, full, not 'long'$"):
        take_plan(6, "long")
