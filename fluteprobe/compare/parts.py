"""One flute, several sittings: what is the flute's and what the player's, and how it drifts over its dates.

Conventions: those of `values`; parts and levels in cents. The model is additive: a pitch is the instrument's
own in that row, plus what the player adds to the whole flute, plus a rest. It is fitted by weighted least
squares (see `statistics.steady_two_way`), with the players of each group adding up to zero: only differences
between players who share an instrument can be told.
"""

from collections.abc import Iterator, Sequence
from datetime import date

import numpy as np

from fluteprobe.compare.pairs import verdicts_of
from fluteprobe.compare.statistics import (
    FALSE_SHARE,
    Reals,
    TwoWay,
    Wholes,
    line_through,
    steady_two_way,
)
from fluteprobe.compare.table import Table
from fluteprobe.compare.values import (
    Drift,
    Flute,
    FlutesPart,
    NoteDrift,
    Parts,
    PlayersPart,
    Rest,
    Verdict,
)
from fluteprobe.session import printable

FEWEST_DATES = 3
DAYS_A_YEAR = 365.25


def parts_of(table: Table, flutes: Sequence[Flute]) -> Parts | None:
    """Return what is the flutes' and what the players'; None where no two players played one flute."""
    named = [k for k, flute in enumerate(flutes) if _player(flute)]
    played_by: dict[int, set[str]] = {}
    for k in named:
        played_by.setdefault(flutes[k].kin, set()).add(_player(flutes[k]))
    if not any(len(players) > 1 for players in played_by.values()):
        return None
    rows, columns = np.nonzero(np.isfinite(table.pitch[:, named]))
    if not len(rows):
        return None
    sitting = np.array(named)[columns]
    blocks, block = np.unique(np.stack([rows, [flutes[k].kin for k in sitting]]), axis=1, return_inverse=True)
    players, player = np.unique([_player(flutes[k]) for k in sitting], return_inverse=True)
    fit = steady_two_way(table.cents[rows, sitting], table.uncertainty[rows, sitting], block.ravel(), player)
    return Parts(
        players=tuple(_players_parts(fit, [str(name) for name in players])),
        flutes=tuple(
            FlutesPart(kin=int(kin), row=int(row), cents=float(value), uncertainty_cents=float(doubt))
            for row, kin, value, doubt in zip(*blocks, fit.block, fit.block_uncertainty, strict=True)
        ),
        rests=tuple(_rests(fit, rows, sitting)),
        unseparated=tuple(_unseparated(flutes, named, fit, [str(name) for name in players])),
    )


def drifts_of(table: Table, flutes: Sequence[Flute]) -> tuple[Drift, ...]:
    """Return the drift of every instrument that was measured on FEWEST_DATES dates or more."""
    found = []
    for kin in sorted({flute.kin for flute in flutes}):
        dated = [(day, k) for k, f in enumerate(flutes) if f.kin == kin and (day := _day(f)) is not None]
        if len({day for day, _ in dated}) >= FEWEST_DATES:
            found.append(_drift(table, kin, sorted(dated)))
    return tuple(drift for drift in found if drift is not None)


# --- players -----------------------------------------------------------------------------------------


def _player(flute: Flute) -> str:
    return " ".join(printable(flute.sitting.player or "").split())


def _players_parts(fit: TwoWay, players: Sequence[str]) -> Iterator[PlayersPart]:
    alone = np.bincount(fit.group)[fit.group] == 1
    doubts = np.where(alone, np.inf, np.maximum(fit.column_uncertainty, 1e-3))
    _, verdicts = verdicts_of(fit.column, doubts)
    for k, player in enumerate(players):
        if not alone[k]:
            yield PlayersPart(
                player=player,
                group=int(fit.group[k]),
                cents=float(fit.column[k]),
                uncertainty_cents=float(fit.column_uncertainty[k]),
                verdict=verdicts[k],
            )


def _rests(fit: TwoWay, rows: Wholes, sitting: Wholes) -> Iterator[Rest]:
    told = fit.rest_uncertainty > 1e-6  # what nobody else played fits by itself
    _, verdicts = verdicts_of(fit.rest[told], fit.rest_uncertainty[told])
    for k, verdict in zip(np.flatnonzero(told), verdicts, strict=True):
        yield Rest(
            flute=int(sitting[k]),
            row=int(rows[k]),
            cents=float(fit.rest[k]),
            uncertainty_cents=float(fit.rest_uncertainty[k]),
            verdict=verdict,
        )


def _unseparated(
    flutes: Sequence[Flute], named: Sequence[int], fit: TwoWay, players: Sequence[str]
) -> Iterator[str]:
    """Say in sentences what the measurements cannot tell apart."""
    alone = [players[k] for k in range(len(players)) if (fit.group == fit.group[k]).sum() == 1]
    for player in alone:
        yield f"{player} shares no flute with another player: the player's part and the flute's are one"
    groups = [
        [players[int(k)] for k in np.flatnonzero(fit.group == g)] for g in range(int(fit.group.max()) + 1)
    ]
    if sum(len(group) > 1 for group in groups) > 1:
        told = "; ".join(", ".join(group) for group in groups if len(group) > 1)
        yield f"no flute joins these groups of players, so they cannot be compared: {told}"
    sittings = {player: sum(_player(flutes[k]) == player for k in named) for player in players}
    once = [player for player, count in sittings.items() if count == 1 and player not in alone]
    if once:
        yield (
            f"{', '.join(once)}: one sitting each, so the player's part holds what that day added"
            if len(once) > 1
            else f"{once[0]}: one sitting, so the player's part holds what that day added"
        )
    if any(flutes[k].shift_cents is None for k in named):
        yield "air temperatures that are not given are part of the players' parts"
    unnamed = [flute.label for k, flute in enumerate(flutes) if k not in named]
    if unnamed:
        yield f"no player is named, so left out: {', '.join(unnamed)}"


# --- drift -------------------------------------------------------------------------------------------


def _day(flute: Flute) -> int | None:
    """Return a sitting's date as a day's number, None where it is none that can be read."""
    try:
        return date.fromisoformat((flute.sitting.date or "").strip()[:10]).toordinal()
    except ValueError:
        return None


def _drift(table: Table, kin: int, dated: Sequence[tuple[int, int]]) -> Drift | None:
    sittings = [k for _, k in dated]
    days = np.array([day - dated[0][0] for day, _ in dated], dtype=np.float64)
    pitch, doubt = table.cents[:, sittings], table.uncertainty[:, sittings]
    shared = np.isfinite(pitch).sum(axis=1) >= 2
    rows, columns = np.nonzero(np.isfinite(pitch) & shared[:, None])
    if len(np.unique(columns)) < len(sittings):
        return None
    block = np.unique(rows, return_inverse=True)[1]
    fit = steady_two_way(pitch[rows, columns], doubt[rows, columns], block, columns)
    if fit.group.max() > 0:
        return None
    years = days / DAYS_A_YEAR
    line = line_through(years, fit.column, np.maximum(fit.column_uncertainty, 1e-3))
    return Drift(
        kin=kin,
        flutes=tuple(sittings),
        days=tuple(int(day) for day in days),
        levels_cents=tuple(float(level) for level in fit.column),
        level_uncertainties_cents=tuple(float(u) for u in fit.column_uncertainty),
        cents_per_year=line.slope,
        uncertainty_cents_per_year=line.uncertainty,
        verdict=_sure(line.probability),
        notes=tuple(_note_drifts(pitch - fit.column, doubt, years)),
    )


def _sure(probability: float) -> Verdict | None:
    """Return whether a slope is real: one that chance gives once in a hundred, or likely: once in twenty."""
    return "different" if probability <= FALSE_SHARE else "likely" if probability <= 0.05 else None


def _note_drifts(rests: Reals, doubt: Reals, years: Reals) -> Iterator[NoteDrift]:
    """Return the drift of every row once the whole flute's ups and downs are taken off."""
    lines = []
    for row in range(len(rests)):
        known = np.isfinite(rests[row])
        if len(np.unique(years[known])) >= FEWEST_DATES:
            lines.append((row, line_through(years[known], rests[row][known], doubt[row][known])))
    if not lines:
        return
    slopes = np.array([line.slope for _, line in lines])
    doubts = np.array([line.uncertainty for _, line in lines])
    _, verdicts = verdicts_of(slopes, doubts)
    for (row, line), verdict in zip(lines, verdicts, strict=True):
        yield NoteDrift(
            row=row,
            cents_per_year=line.slope,
            uncertainty_cents_per_year=line.uncertainty,
            verdict=verdict,
        )
