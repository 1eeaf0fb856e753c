"""Comparisons of flutes whose truth is known by construction; a source is named where there is one."""

from collections.abc import Sequence
from dataclasses import replace
from math import hypot, log2
from typing import Any

import numpy as np
import pytest
from classes import KEYS, SCALE, cents_above, entry, flute
from numpy.typing import NDArray

from fluteprobe.compare import compare
from fluteprobe.compare.pairs import PAIRS_UP_TO
from fluteprobe.compare.statistics import SURE
from fluteprobe.compare.values import Comparison
from fluteprobe.flute.tuning import temperature_shift_cents
from fluteprobe.survey import Survey

Reals = NDArray[np.float64]
ROWS = len(KEYS)


def in_order(comparison: Comparison) -> list[tuple[str, int]]:
    return [(row.by, row.register or 0) for row in comparison.rows]


def two(cents: Sequence[float], other: Sequence[float]) -> Comparison:
    return compare([flute("Wren", cents), flute("Coot", other)])


# --- rows --------------------------------------------------------------------------------------------


def test_flutes_of_one_build_are_compared_by_fingering_low_to_high() -> None:
    comparison = two([0.0] * ROWS, [5.0] * ROWS)
    assert comparison.by == "fingering"
    assert in_order(comparison) == list(KEYS)
    assert [row.note for row in comparison.rows][:3] == ["G4", "A4", "B4"]


def test_flutes_with_other_holes_are_compared_by_note() -> None:
    five = {("xxxxx", 1): 69, ("xxxxo", 1): 72, ("oxxxx", 2): 81}
    comparison = compare([flute("Wren", [0.0] * ROWS), flute("Coot", [3.0] * 3, scale=five)])
    assert comparison.by == "note"
    by = {row.by: row for row in comparison.rows}
    assert [row.by for row in comparison.rows if len(row.played) == 2] == ["A4", "C5", "A5"]
    assert [str(cell.fingering) for cell in by["A4"].played] == ["xxxxxo", "xxxxx"]
    assert by["A5"].register == 2
    assert by["C5"].spread_cents == pytest.approx(3.0)


def test_flutes_in_other_keys_are_compared_by_note() -> None:
    up = {key: midi + 2 for key, midi in SCALE.items()}
    comparison = compare([flute("Wren", [0.0] * ROWS), flute("Coot", [0.0] * ROWS, scale=up)])
    assert comparison.by == "note"
    assert "the flutes are of different builds, so they are compared by sounding note" in comparison.cautions


def test_rows_are_named_at_the_a4_that_is_told_unless_the_group_leans_together() -> None:
    """Flutes 53 cents apart lean nowhere, so that 18 flat of E4 is E4; all 45 flat are still one note."""
    apart = compare([flute("Wren", [-18.0] * ROWS), flute("Coot", [35.0] * ROWS)], by="note")
    assert {abs(cell.cents) <= 50.0 for row in apart.rows for cell in row.played} == {True}
    together = compare([flute("Wren", [-45.0] * ROWS), flute("Coot", [-52.0] * ROWS)], by="note")
    assert all(len(row.played) == 2 for row in together.rows)


def test_how_rows_are_made_can_be_chosen() -> None:
    surveys = [flute("Wren", [0.0] * ROWS), flute("Coot", [0.0] * ROWS)]
    assert compare(surveys, by="note").by == "note"
    up = {key: midi + 2 for key, midi in SCALE.items()}
    shifted = [surveys[0], flute("Coot", [0.0] * ROWS, scale=up)]
    rows = compare(shifted, by="fingering").rows
    assert [row.spread_cents for row in rows] == pytest.approx([200.0] * ROWS)


def test_of_several_fingerings_for_a_note_the_best_that_speaks_is_compared() -> None:
    fingerings = (("xxxxox", 30.0, 1.0), ("xxxoxx", 1.0, 0.5), ("xxxxxo", 8.0, 1.0))
    entries = tuple(
        entry((word, 1), 440.0 * 2.0 ** (cents / 1200.0), 1.0, share=share)
        for word, cents, share in fingerings
    )
    survey = replace(flute("Wren", {}), entries=entries)
    comparison = compare([survey, flute("Coot", [0.0] * ROWS)], by="note")
    (row,) = (row for row in comparison.rows if row.by == "A4")
    assert str(row.played[0].fingering) == "xxxxxo"


def test_a_group_that_is_half_a_semitone_flat_is_not_split_between_notes() -> None:
    surveys = [
        flute(name, [-50.0 + off] * ROWS) for name, off in (("Wren", -4.0), ("Coot", 0.0), ("Rail", 4.0))
    ]
    comparison = compare(surveys, by="note")
    assert len(comparison.rows) == ROWS
    assert [row.spread_cents for row in comparison.rows] == pytest.approx([8.0] * ROWS)


def test_a_flute_that_gave_nothing_stays_as_an_empty_column() -> None:
    silent = flute("Rail", {})
    comparison = compare([flute("Wren", [0.0] * ROWS), silent])
    assert [row.cells[1] for row in comparison.rows] == [None] * ROWS
    assert comparison.pairs == ()
    assert comparison.group is None
    assert "no fingering of Rail gave a note of known register" in comparison.cautions


def test_two_silent_flutes_compare_as_nothing() -> None:
    comparison = compare([flute("Wren", {}), flute("Rail", {}, player="Ada")])
    assert (comparison.rows, comparison.pairs, comparison.notes) == ((), (), ())


def test_one_flute_is_no_comparison() -> None:
    with pytest.raises(ValueError, match=r"^a comparison takes two flutes or more, not 1$"):
        compare([flute("Wren", [0.0] * ROWS)])


# --- labels ------------------------------------------------------------------------------------------


def test_flutes_of_one_name_are_told_apart() -> None:
    zeros = [0.0] * ROWS
    surveys = [
        flute("Wren", zeros, serial="1"), flute("Wren", zeros, serial="2", player="Ada"),
        flute("Wren", zeros, serial="2", player="Bela"), flute("Coot", zeros), flute("Coot", zeros),
    ]  # fmt: skip
    comparison = compare(surveys, names=["a", "b", "c", "before", "after"])
    assert [f.label for f in comparison.flutes] == [
        "Wren, no. 1", "Wren, no. 2, Ada", "Wren, no. 2, Bela", "Coot, before", "Coot, after"
    ]  # fmt: skip
    assert [f.kin for f in comparison.flutes] == [0, 1, 1, 2, 2]


def test_labels_differ_whatever_is_known() -> None:
    surveys = [flute("Wren", [0.0] * ROWS) for _ in range(3)]
    assert len({f.label for f in compare(surveys, names=["x", "x", "x"]).flutes}) == 3


# --- differences -------------------------------------------------------------------------------------


def test_a_difference_is_one_only_over_three_combined_uncertainties() -> None:
    over, under = SURE * hypot(1.0, 1.0) + 0.01, SURE * hypot(1.0, 1.0) - 0.01
    moved = [over, under, -over, -under, *[0.0] * (ROWS - 4)]
    (pair,) = two(moved, [0.0] * ROWS).pairs
    assert [d.verdict is not None for d in pair.differences] == [
        True,
        False,
        True,
        False,
        *[False] * (ROWS - 4),
    ]
    assert [d.uncertainty_cents for d in pair.differences] == pytest.approx([hypot(1.0, 1.0)] * ROWS)


def test_one_just_over_three_among_many_is_only_likely() -> None:
    surveys = [flute(f"Flute {k}", [0.0] * ROWS, serial=str(k)) for k in range(12)]
    surveys[0] = flute("Flute 0", [4.3, *[0.0] * (ROWS - 1)], serial="0")
    verdicts = {d.verdict for pair in compare(surveys).pairs for d in pair.differences if d.row == 0}
    assert verdicts == {"likely", None}


def test_the_whole_offset_is_kept_apart_from_the_notes_that_moved() -> None:
    after = [12.0, 12.0, 32.0, 37.0, *[12.0] * (ROWS - 4)]
    before = flute("Wren", [0.0] * ROWS, air_temperature_c=20.0)
    (pair,) = compare([before, flute("Coot", after, air_temperature_c=20.0)]).pairs
    assert pair.offset_cents == pytest.approx(-12.0)
    assert pair.offset_verdict == "different"
    assert [d.alone_verdict for d in pair.differences] == [
        None,
        None,
        *["different"] * 2,
        *[None] * (ROWS - 4),
    ]
    assert [d.alone_cents for d in pair.differences][2:4] == pytest.approx([-20.0, -25.0])


def test_a_note_less_the_offset_has_the_uncertainty_of_its_equation() -> None:
    # JCGM 100:2008, eq. 13, as a matrix product: the offset is the weighted mean of the notes themselves.
    doubts = [0.6, 1.0, 1.4, 0.8, 2.0, 1.2, 0.7, 1.0, 1.1, 0.9]
    comparison = compare([flute("Wren", [0.0] * ROWS, doubts), flute("Coot", [0.0] * ROWS, doubts)])
    variance = 2.0 * np.square(doubts)
    shares = (1.0 / variance) / (1.0 / variance).sum()
    sensitivity = np.eye(ROWS) - shares[None, :]
    expected = np.sqrt(np.diag(sensitivity @ np.diag(variance) @ sensitivity.T))
    assert [d.alone_uncertainty_cents for d in comparison.pairs[0].differences] == pytest.approx(
        list(expected)
    )


def test_one_flute_s_notes_that_scatter_more_than_they_tell_widen_the_uncertainty() -> None:
    chances = np.random.default_rng(3)
    again = list(chances.normal(0.0, 6.0, ROWS))
    same, other = (
        compare([flute("Wren", [0.0] * ROWS), flute(name, again)]).pairs[0] for name in ("Wren", "Coot")
    )
    assert other.widened == 1.0
    assert same.widened > 2.0
    assert sum(d.verdict is not None for d in same.differences) < sum(
        d.verdict is not None for d in other.differences
    )


def test_one_flute_as_a_whole_sharper_widens_nothing() -> None:
    doubts = [0.5, 2.0, 3.0, 0.7, 1.0, 2.5, 0.6, 1.5, 0.8, 3.0]
    (pair,) = compare([flute("Wren", [0.0] * ROWS, doubts), flute("Wren", [30.0] * ROWS, doubts)]).pairs
    assert pair.widened == 1.0


def test_beats_are_the_difference_of_the_frequencies() -> None:
    comparison = two([0.0] * ROWS, [10.0] * ROWS)
    row = [row.by for row in comparison.rows].index("xxxxxo")  # A4
    beats = comparison.pairs[0].differences[row].beats
    assert beats.rate_hz == pytest.approx(440.0 * (2.0 ** (10.0 / 1200.0) - 1.0))  # 2.549 Hz
    # A cent at 440 Hz is 0.2542 Hz, by its definition; two tones have one each.
    assert beats.uncertainty_hz == pytest.approx(hypot(0.2542, 0.2557), rel=1e-3)
    assert comparison.rows[row].fastest == replace(beats, flutes=(0, 1))


# --- twelve flutes -----------------------------------------------------------------------------------


def class_of_twelve(seed: int) -> tuple[list[Survey], Reals]:
    """Return twelve flutes as measured, and their true pitches (rows, flutes): half of them are copies.

    The copies differ in nothing; the others are 12 cents off at some notes, or sharp as wholes by 8.
    """
    chances = np.random.default_rng(seed)
    truth = np.zeros((ROWS, 12))
    for k in range(6, 12):
        truth[chances.choice(ROWS, 3, replace=False), k] += chances.choice([-12.0, 12.0], 3)
    truth[:, 10:] += 8.0
    doubts = chances.uniform(0.6, 1.4, truth.shape)
    heard = truth + chances.normal(0.0, doubts)
    surveys = [flute(f"Flute {k}", list(heard[:, k]), list(doubts[:, k]), serial=str(k)) for k in range(12)]
    return surveys, truth


def test_a_class_of_twelve() -> None:
    called_null = sure_null = null = sure = missed = 0
    for seed in range(4):
        surveys, truth = class_of_twelve(seed)
        comparison = compare(surveys)
        assert comparison.compared == 66 * ROWS
        for pair in comparison.pairs:
            a, b = pair.flutes
            for d in pair.differences:
                true = truth[d.row, a] - truth[d.row, b]
                if abs(d.cents) > SURE * d.uncertainty_cents:
                    missed += d.verdict is None
                if true == 0.0:
                    null += 1
                    called_null += d.verdict is not None
                    sure_null += d.verdict == "different"
                sure += d.verdict == "different"
    assert missed == 0  # every difference larger than three combined standard uncertainties is called
    assert null > 1000
    assert called_null / null < 0.01
    assert sure_null / sure < 0.01


def test_true_differences_are_found() -> None:
    # Of true differences over six uncertainties chance hides one in 740 (normal, beyond three).
    surveys, truth = class_of_twelve(11)
    found = [
        d.verdict is not None
        for pair in compare(surveys).pairs
        for d in pair.differences
        if abs(truth[d.row, pair.flutes[0]] - truth[d.row, pair.flutes[1]]) > 6.0 * d.uncertainty_cents
    ]
    assert len(found) > 100
    assert np.mean(found) > 0.99


def test_more_flutes_than_anybody_reads_in_pairs_have_none() -> None:
    surveys = [flute(f"Flute {k}", [0.0] * ROWS) for k in range(PAIRS_UP_TO + 1)]
    comparison = compare(surveys)
    assert comparison.pairs == ()
    assert (
        f"over {PAIRS_UP_TO} flutes are not compared in pairs, but each with the middle of all"
        in comparison.cautions
    )


# --- the group ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("a4_hz", [415.0, 428.6, 438.2, 440.0, 442.3, 452.0])
def test_the_best_a4_is_that_of_the_flutes(a4_hz: float) -> None:
    chances = np.random.default_rng(int(10 * a4_hz))
    whole = cents_above(440.0, a4_hz)
    surveys = [flute(f"Flute {k}", list(whole + chances.normal(0.0, 4.0, ROWS))) for k in range(12)]
    group = compare(surveys).group
    assert group is not None
    semitones = round(12.0 * log2(a4_hz / group.a4_hz))  # the same scale, named a semitone off
    assert group.a4_hz * 2.0 ** (semitones / 12.0) == pytest.approx(a4_hz, abs=0.2)
    assert group.remaining_cents == pytest.approx(4.1, abs=0.7)


def test_the_told_uncertainty_of_the_best_a4_holds() -> None:
    # 95 % of the errors within 2 u, by Monte-Carlo; of 50 draws that is known to 3 %.
    chances = np.random.default_rng(5)
    errors = []
    for _ in range(50):
        surveys = [flute(f"Flute {k}", list(chances.normal(0.0, 4.0, ROWS)), 0.5) for k in range(4)]
        group = compare(surveys, by="note").group
        assert group is not None
        errors.append(abs(group.a4_hz - 440.0) < 2.0 * group.uncertainty_hz)
    assert np.mean(errors) == pytest.approx(0.954, abs=0.08)


def test_one_very_sure_flute_does_not_speak_for_all() -> None:
    surveys = [flute(f"Flute {k}", [10.0] * ROWS, 1.0) for k in range(4)]
    surveys.append(flute("Sure", [-10.0] * ROWS, 0.01))
    group = compare(surveys).group
    assert group is not None
    assert cents_above(440.0, group.a4_hz) == pytest.approx(6.0, abs=0.5)  # the plain mean of five


def test_what_stands_out_in_a_batch_is_marked() -> None:
    chances = np.random.default_rng(4)
    surveys = [flute(f"Flute {k}", list(chances.normal(0.0, 3.0, ROWS))) for k in range(10)]
    surveys.append(flute("Odd", [0.0, 0.0, 25.0, *[0.0] * (ROWS - 3)]))
    comparison = compare(surveys)
    out = [(row.by, cell.flute) for row in comparison.rows for cell in row.played if cell.stands_out]
    assert out == [("xxxxoo", 10)]
    assert all(row.scatter_cents == pytest.approx(3.0, abs=2.5) for row in comparison.rows)


def test_who_plays_a_note_is_told_with_its_register() -> None:
    some = dict.fromkeys(KEYS[:8], 0.0)
    comparison = compare([flute("Wren", [0.0] * ROWS), flute("Coot", some)])
    reach = {each.note: each for each in comparison.notes}
    assert reach["G4"].flutes == (0, 1)
    assert (reach["B5"].flutes, reach["B5"].registers) == ((0,), (2,))
    assert reach["A5"].registers == (2,)


# --- air and A4 --------------------------------------------------------------------------------------


def at_temperature(name: str, air_c: float, *, told: bool) -> Survey:
    """Return a flute that is tuned at 20 °C, as it sounds in other air."""
    off = [temperature_shift_cents(20.0, air_c)] * ROWS
    return flute(name, off, air_temperature_c=air_c if told else None)


def test_one_flute_in_cold_and_warm_air_is_the_same_flute() -> None:
    comparison = compare([at_temperature("Wren", c, told=True) for c in (17.0, 26.0)])
    (pair,) = comparison.pairs
    assert comparison.temperature_c == 20.0
    assert pair.offset_cents == pytest.approx(0.0, abs=1e-6)
    assert {d.verdict for d in pair.differences} == {None}
    assert [cell.cents for cell in comparison.rows[0].played] == pytest.approx([0.0, 0.0], abs=1e-6)
    # Its uncertainty holds a tenth of what was carried, some 27 cents.
    assert pair.offset_uncertainty_cents == pytest.approx(2.7, abs=0.2)


def test_without_temperatures_it_is_warned_and_the_air_named() -> None:
    comparison = compare([at_temperature("Wren", c, told=False) for c in (17.0, 26.0)], names=["a", "b"])
    assert comparison.temperature_c is None
    assert comparison.pairs[0].offset_verdict == "air"
    assert {d.verdict for d in comparison.pairs[0].differences} == {"air"}
    assert comparison.cautions[0] == (
        "no air temperature is given for Wren, a, Wren, b: a degree moves a whole flute by about 3 cents, so "
        "trust single notes beside one another more than flutes as wholes"
    )


def test_a_note_that_moved_is_real_in_unknown_air_too() -> None:
    (pair,) = two([0.0] * ROWS, [12.0, 12.0, 32.0, *[12.0] * (ROWS - 3)]).pairs
    assert [d.verdict for d in pair.differences] == ["air", "air", "different", *["air"] * (ROWS - 3)]


def test_an_offset_beyond_any_air_is_real_without_temperatures_too() -> None:
    (pair,) = compare([flute("Wren", [0.0] * ROWS), flute("Coot", [95.0] * ROWS)], by="fingering").pairs
    assert pair.offset_verdict == "different"


def test_pitches_meet_where_the_flutes_say_else_at_their_own_air_else_at_twenty() -> None:
    zeros = [0.0] * ROWS

    def meets(*sittings: dict[str, Any]) -> float | None:
        return compare([flute(f"F{k}", zeros, **s) for k, s in enumerate(sittings)]).temperature_c

    assert (
        meets({"air_temperature_c": 25.0, "reference_temperature_c": 22.0}, {"air_temperature_c": 18.0})
        == 22.0
    )
    assert meets({"air_temperature_c": 25.0}, {"air_temperature_c": 25.0}) == 25.0
    assert meets({"air_temperature_c": 25.0}, {"air_temperature_c": 18.0}) == 20.0
    assert meets({}, {"reference_temperature_c": 22.0}) is None


def test_flutes_of_several_a4_meet_at_the_most_common() -> None:
    surveys = [flute(f"F{k}", [0.0] * ROWS, a4_hz=hz) for k, hz in enumerate((442.0, 440.0, 442.0))]
    comparison = compare(surveys)
    assert comparison.a4_hz == 442.0
    assert "the flutes were measured against A4 = 440, 442 Hz; here all are at one" in comparison.cautions
    assert comparison.rows[0].played[0].cents == pytest.approx(cents_above(442.0, 440.0))
    assert compare(surveys, a4_hz=440.0).rows[0].played[0].cents == pytest.approx(0.0, abs=1e-9)


def test_takes_that_were_not_repeated_are_warned_of() -> None:
    once = flute("Wren", {})
    once = replace(once, entries=(entry(KEYS[0], 392.0, 1.0, tones=1),))
    comparison = compare([once, flute("Coot", [0.0] * ROWS)])
    assert any(text.startswith("no take was repeated for Wren: ") for text in comparison.cautions)
