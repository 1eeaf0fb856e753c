"""What is the flute's, what the player's, and how a flute drifts; the truth is known by construction.

The least squares themselves are checked against numpy and scipy in test_compare_statistics.py.
"""

from typing import Any

import numpy as np
import pytest
from classes import KEYS, flute

from fluteprobe.compare import compare
from fluteprobe.compare.values import Parts
from fluteprobe.survey import Survey

ROWS = len(KEYS)
OWN = [4.0, -7.0, 2.0, 11.0, -3.0, 0.0, 6.0, -20.0, -8.0, -15.0]


def played(name: str, player: str | None, own: list[float], adds: float, seed: int, **more: Any) -> Survey:
    """Return a sitting: what the flute gives, what the player adds to it, and 1 cent of chance."""
    chances = np.random.default_rng(seed)
    return flute(name, [value + adds + chances.normal() for value in own], player=player, **more)


def parts_of(*surveys: Survey) -> Parts:
    parts = compare(surveys).parts
    assert parts is not None
    return parts


# --- flute and player --------------------------------------------------------------------------------


def test_two_players_on_one_flute_are_parted() -> None:
    parts = parts_of(played("Wren", "Ada", OWN, 6.0, 1), played("Wren", "Bela", OWN, -6.0, 2))
    # Ten notes of 1 cent each: half the difference of two means is known to 1 / √20 = 0.22 cent.
    assert {p.player: p.cents for p in parts.players} == pytest.approx({"Ada": 6.0, "Bela": -6.0}, abs=0.9)
    assert [p.uncertainty_cents for p in parts.players] == pytest.approx([0.22] * 2, rel=0.5)
    assert {p.verdict for p in parts.players} == {"different"}
    assert [p.cents for p in parts.flutes] == pytest.approx(OWN, abs=2.5)  # 3.5 times 1 / √2
    assert {rest.verdict for rest in parts.rests} == {None}
    assert parts.unseparated[0] == (
        "Ada, Bela: one sitting each, so the player's part holds what that day added"
    )


def test_a_note_that_one_player_plays_otherwise_is_found() -> None:
    apart = [value + (25.0 if k == 4 else 0.0) for k, value in enumerate(OWN)]
    parts = parts_of(played("Wren", "Ada", OWN, 0.0, 1), played("Wren", "Bela", apart, 0.0, 2))
    assert {rest.row for rest in parts.rests if rest.verdict} == {4}
    assert {rest.player: rest.cents for rest in parts.rests if rest.row == 4} == pytest.approx(
        {"Ada": -12.5, "Bela": 12.5}, abs=3.0
    )


def test_days_that_differ_make_a_player_s_part_less_sure() -> None:
    days = (("Ada", 9.0), ("Bela", -4.0), ("Ada", 1.0), ("Bela", -8.0))
    surveys = [
        played("Wren", player, OWN, adds, k, date=f"2026-01-0{k}") for k, (player, adds) in enumerate(days, 1)
    ]
    parts = parts_of(*surveys)
    ada, _ = parts.players
    assert ada.cents == pytest.approx(5.5, abs=0.9)
    # Two days each, 4 √2 and 2 √2 cents apart (s.d.): half the difference of two means is known to 2.2 cents.
    assert ada.uncertainty_cents == pytest.approx(2.2, abs=0.5)
    assert not any("one sitting" in text for text in parts.unseparated)


def test_a_flute_that_both_play_joins_players_of_other_flutes() -> None:
    flat = [value - 30.0 for value in OWN]
    parts = parts_of(
        played("Wren", "Ada", OWN, 5.0, 1), played("Wren", "Bela", OWN, -1.0, 2),
        played("Coot", "Bela", flat, -1.0, 3), played("Coot", "Cleo", flat, -4.0, 4),
    )  # fmt: skip
    cents = {part.player: part.cents for part in parts.players}
    assert cents["Ada"] - cents["Bela"] == pytest.approx(6.0, abs=1.6)
    assert cents["Bela"] - cents["Cleo"] == pytest.approx(3.0, abs=1.6)
    assert sum(cents.values()) == pytest.approx(0.0, abs=1e-9)
    assert len({part.group for part in parts.players}) == 1


def test_what_cannot_be_told_apart_is_said() -> None:
    parts = parts_of(
        played("Wren", "Ada", OWN, 5.0, 1), played("Wren", "Bela", OWN, -1.0, 2),
        played("Coot", "Dov", OWN, 0.0, 3, serial="2"), played("Rail", None, OWN, 0.0, 4),
    )  # fmt: skip
    assert [part.player for part in parts.players] == ["Ada", "Bela"]
    assert parts.unseparated == (
        "Dov shares no flute with another player: the player's part and the flute's are one",
        "Ada, Bela: one sitting each, so the player's part holds what that day added",
        "air temperatures that are not given are part of the players' parts",
        "no player is named, so left out: Rail",
    )


def test_groups_that_no_flute_joins_are_told() -> None:
    parts = parts_of(
        played("Wren", "Ada", OWN, 5.0, 1), played("Wren", "Bela", OWN, -1.0, 2),
        played("Coot", "Cleo", OWN, 5.0, 3), played("Coot", "Dov", OWN, -1.0, 4),
    )  # fmt: skip
    assert "no flute joins these groups of players, so they cannot be compared: Ada, Bela; Cleo, Dov" in (
        parts.unseparated
    )


@pytest.mark.parametrize("players", [(None, None), ("Ada", "Ada"), ("Ada", None)])
def test_one_player_has_no_part(players: tuple[str | None, str | None]) -> None:
    surveys = [played("Wren", player, OWN, 0.0, k) for k, player in enumerate(players)]
    assert compare(surveys, names=["a", "b"]).parts is None


# --- drift -------------------------------------------------------------------------------------------

DATES = ("2024-01-10", "2024-07-02", "2025-01-20", "2025-06-30", "2026-01-12", "2026-07-05")
YEARS = (0.0, 0.476, 1.029, 1.470, 2.007, 2.483)  # counted by hand: days over 365.25


def sittings(a_year: float, note_a_year: float = 0.0, dates: tuple[str, ...] = DATES) -> list[Survey]:
    """Return a flute over its dates: as a whole, and its fourth note beyond that, so many cents a year."""
    found = []
    for seed, (date, years) in enumerate(zip(dates, YEARS, strict=False), start=50):
        now = [value + years * (a_year + (note_a_year if k == 3 else 0.0)) for k, value in enumerate(OWN)]
        found.append(played("Wren", None, now, 0.0, seed, date=date))
    return found


def test_a_flute_that_drifts_is_found_with_its_slope() -> None:
    (drift,) = compare(sittings(5.0)).drifts
    assert drift.cents_per_year == pytest.approx(5.0, abs=4.0 * drift.uncertainty_cents_per_year)
    assert drift.uncertainty_cents_per_year < 0.5
    assert drift.verdict == "different"
    assert drift.days == pytest.approx([round(365.25 * t) for t in YEARS], abs=1)
    assert {note.verdict for note in drift.notes} == {None}


def test_one_note_that_drifts_alone_is_found() -> None:
    comparison = compare(sittings(0.0, 12.0))
    (drift,) = comparison.drifts
    (found,) = (note for note in drift.notes if note.verdict)
    assert comparison.rows[found.row].by == KEYS[3][0]
    assert found.cents_per_year == pytest.approx(12.0, abs=3.0)


def test_a_flute_that_keeps_its_pitch_has_no_drift() -> None:
    (drift,) = compare(sittings(0.0)).drifts
    assert drift.verdict is None


def test_players_who_take_turns_are_no_drift() -> None:
    surveys = [
        played("Wren", player, OWN, adds, 70 + k, date=date)
        for k, (player, adds, date) in enumerate(
            zip(("Ada", "Bela") * 3, (9.0, -9.0) * 3, DATES, strict=True)
        )
    ]
    (drift,) = compare(surveys).drifts
    assert drift.cents_per_year == pytest.approx(0.0, abs=4.0 * drift.uncertainty_cents_per_year)
    assert drift.uncertainty_cents_per_year < 0.6
    assert drift.verdict is None


def test_two_dates_show_no_drift() -> None:
    assert compare(sittings(5.0, dates=DATES[:2])).drifts == ()
    undated = [flute("Wren", OWN, date=date) for date in ("spring", "summer", "autumn")]
    assert compare(undated).drifts == ()
