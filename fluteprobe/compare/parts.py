"""One flute, several sittings: what is the flute's and what the player's, and how it drifts over its dates.

Conventions: those of `values`; parts and levels in cents. A pitch is taken as a sum: what the flute gives in
that row, plus the level of the sitting, plus a rest; and a sitting's level as what the flute gives, plus what
the player adds, plus what that day added. Both are fitted by weighted least squares, one after the other (see
`statistics`). Levels add up to zero over the sittings of a flute, and players over those who can be compared:
only differences between players who share an instrument can be told.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np

from fluteprobe.compare.pairs import verdicts_of
from fluteprobe.compare.statistics import (
    FALSE_SHARE,
    Line,
    Reals,
    TwoWay,
    Wholes,
    birge_ratio,
    combined,
    line_through,
    steady_two_way,
    two_way,
    weighted_mean,
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
LIKELY_SHARE = 0.05  # a slope that chance gives once in twenty is called likely


@dataclass(frozen=True, slots=True, kw_only=True)
class _Levels:
    """The sittings with one flute, (sittings,), and its shared rows, (rows,).

    `own` is a level's uncertainty where the rows are known, `fit.column_uncertainty` that of the level as
    it was fitted; `rest` and `rest_uncertainty` have shape (rows, sittings), NaN where a row was not played.
    """

    sittings: tuple[int, ...]
    rows: Wholes
    fit: TwoWay
    own: Reals
    rest: Reals
    rest_uncertainty: Reals


def parts_of(table: Table, flutes: Sequence[Flute]) -> Parts | None:
    """Return what is the flutes' and what the players'; None where no two players played one flute."""
    named = [k for k, flute in enumerate(flutes) if _player(flute)]
    levels = [found for kin in _kins(flutes, named) if (found := _levels_of(table, kin)) is not None]
    if not any(len({_player(flutes[k]) for k in each.sittings}) > 1 for each in levels):
        return None
    sitting = [k for each in levels for k in each.sittings]
    block = np.concatenate([1000 * k + each.fit.group for k, each in enumerate(levels)])
    players, player = np.unique([_player(flutes[k]) for k in sitting], return_inverse=True)
    fit = two_way(
        np.concatenate([each.fit.column for each in levels]),
        np.concatenate([each.own for each in levels]),
        np.unique(block, return_inverse=True)[1],
        player,
    )
    names = [str(name) for name in players]
    return Parts(
        players=tuple(_players_parts(fit, names)),
        flutes=tuple(_flutes_parts(levels, flutes, fit)),
        rests=tuple(_rests(levels, flutes)),
        unseparated=tuple(_unseparated(flutes, named, fit, names)),
    )


def drifts_of(table: Table, flutes: Sequence[Flute]) -> tuple[Drift, ...]:
    """Return the drift of every instrument that was measured on FEWEST_DATES dates or more."""
    dated = [k for k, flute in enumerate(flutes) if _day(flute) is not None]
    found = (_drift(table, flutes, kin) for kin in _kins(flutes, dated))
    return tuple(drift for drift in found if drift is not None)


# --- sittings with one flute -------------------------------------------------------------------------


def _kins(flutes: Sequence[Flute], among: Sequence[int]) -> list[list[int]]:
    """Return the sittings with each instrument that has several."""
    kin: dict[int, list[int]] = {}
    for k in among:
        kin.setdefault(flutes[k].kin, []).append(k)
    return [sittings for sittings in kin.values() if len(sittings) > 1]


def _levels_of(table: Table, sittings: Sequence[int]) -> _Levels | None:
    """Return the sittings of a flute that share rows, fitted; None where none do."""
    known = np.isfinite(table.pitch[:, sittings])
    known &= (known.sum(axis=1) >= 2)[:, None]
    kept = [k for k, column in zip(sittings, known.T, strict=True) if column.any()]
    if len(kept) < 2:
        return None
    rows = np.flatnonzero(known.any(axis=1))
    pitch, doubt = table.cents[rows][:, kept], table.uncertainty[rows][:, kept]
    block, column = np.nonzero(np.isfinite(pitch))
    fit = steady_two_way(pitch[block, column], doubt[block, column], block, column)
    rest, rest_uncertainty = np.full(pitch.shape, np.nan), np.full(pitch.shape, np.nan)
    rest[block, column], rest_uncertainty[block, column] = fit.rest, fit.rest_uncertainty
    weights = np.nansum(1.0 / np.maximum(doubt, 1e-3) ** 2, axis=0)
    return _Levels(
        sittings=tuple(kept),
        rows=rows,
        fit=fit,
        own=fit.ratio / np.sqrt(weights),
        rest=rest,
        rest_uncertainty=rest_uncertainty,
    )


# --- players -----------------------------------------------------------------------------------------


def _player(flute: Flute) -> str:
    return " ".join(printable(flute.sitting.player or "").split())


def _alone(fit: TwoWay) -> list[bool]:
    """Return which players can be compared with nobody."""
    return [bool((fit.group == group).sum() == 1) for group in fit.group]


def _players_parts(fit: TwoWay, players: Sequence[str]) -> Iterator[PlayersPart]:
    told = [k for k, alone in enumerate(_alone(fit)) if not alone]
    _, verdicts = verdicts_of(fit.column[told], np.maximum(fit.column_uncertainty[told], 1e-3))
    for k, verdict in zip(told, verdicts, strict=True):
        yield PlayersPart(
            player=players[k],
            group=int(fit.group[k]),
            cents=float(fit.column[k]),
            uncertainty_cents=float(fit.column_uncertainty[k]),
            verdict=verdict,
        )


def _flutes_parts(levels: Sequence[_Levels], flutes: Sequence[Flute], fit: TwoWay) -> Iterator[FlutesPart]:
    """Return what each flute gives in each row with the players' parts taken off its sittings' levels."""
    place = 0
    for each in levels:
        whole, doubt = float(fit.block[place]), float(fit.block_uncertainty[place])
        place += int(each.fit.group.max()) + 1
        if each.fit.group.any():
            continue  # its sittings do not hang together
        own = combined(each.fit.block_uncertainty, doubt)
        for row, cents, uncertainty in zip(each.rows, each.fit.block + whole, own, strict=True):
            yield FlutesPart(
                kin=flutes[each.sittings[0]].kin,
                row=int(row),
                cents=float(cents),
                uncertainty_cents=float(uncertainty),
            )


def _rests(levels: Sequence[_Levels], flutes: Sequence[Flute]) -> Iterator[Rest]:
    """Return what each player does with single notes of a flute that others play too."""
    found = [rest for each in levels for rest in _rests_on(each, flutes)]
    cents = np.array([rest.cents for rest in found])
    doubts = np.array([rest.uncertainty_cents for rest in found])
    _, verdicts = verdicts_of(cents, doubts)
    for rest, verdict in zip(found, verdicts, strict=True):
        yield Rest(
            player=rest.player,
            kin=rest.kin,
            row=rest.row,
            cents=rest.cents,
            uncertainty_cents=rest.uncertainty_cents,
            verdict=verdict,
        )


def _rests_on(levels: _Levels, flutes: Sequence[Flute]) -> Iterator[Rest]:
    """Sum up the rests of a player's sittings, row by row; what differs from sitting to sitting is unsure."""
    players = [_player(flutes[k]) for k in levels.sittings]
    if len(set(players)) < 2:
        return
    for player in dict.fromkeys(players):
        mine = [k for k, other in enumerate(players) if other == player]
        for row, rest, doubt in zip(
            levels.rows, levels.rest[:, mine], levels.rest_uncertainty[:, mine], strict=True
        ):
            told = doubt > 1e-3  # nothing is left of what nobody else played; NaN was not played
            if told.any():
                mean, uncertainty = weighted_mean(rest[told], doubt[told])
                ratio = birge_ratio(rest[told] - mean, doubt[told], int(told.sum()) - 1)
                yield Rest(
                    player=player,
                    kin=flutes[levels.sittings[0]].kin,
                    row=int(row),
                    cents=mean,
                    uncertainty_cents=ratio * uncertainty,
                    verdict=None,
                )


def _unseparated(
    flutes: Sequence[Flute], named: Sequence[int], fit: TwoWay, players: Sequence[str]
) -> Iterator[str]:
    """Say in sentences what the measurements cannot tell apart."""
    lonely = {player for player, alone in zip(players, _alone(fit), strict=True) if alone}
    lonely |= {_player(flutes[k]) for k in named} - set(players)
    for player in sorted(lonely):
        yield f"{player} shares no flute with another player: the player's part and the flute's are one"
    groups = [
        [name for name, mine in zip(players, fit.group, strict=True) if mine == g] for g in set(fit.group)
    ]
    joined = [", ".join(group) for group in groups if len(group) > 1]
    if len(joined) > 1:
        yield f"no flute joins these groups of players, so they cannot be compared: {'; '.join(joined)}"
    sittings = [_player(flutes[k]) for k in named]
    once = [player for player in players if sittings.count(player) == 1 and player not in lonely]
    if once:
        each = "one sitting each" if len(once) > 1 else "one sitting"
        yield f"{', '.join(once)}: {each}, so the player's part holds what that day added"
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


def _drift(table: Table, flutes: Sequence[Flute], kin: Sequence[int]) -> Drift | None:
    """Return one instrument's drift; every player's own level is taken off where several played it."""
    ordered = sorted(kin, key=lambda k: _day(flutes[k]) or 0)
    levels = _levels_of(table, ordered)
    if levels is None or levels.fit.group.any():
        return None
    days = np.array([_day(flutes[k]) or 0 for k in levels.sittings], dtype=np.float64)
    years = (days - days[0]) / DAYS_A_YEAR
    player = np.unique([_player(flutes[k]) for k in levels.sittings], return_inverse=True)[1]
    line = _line(years, levels.fit.column, levels.own, player)
    if line is None:
        return None
    return Drift(
        kin=flutes[levels.sittings[0]].kin,
        flutes=levels.sittings,
        days=tuple(int(day - days[0]) for day in days),
        levels_cents=tuple(float(level) for level in levels.fit.column),
        level_uncertainties_cents=tuple(float(u) for u in levels.fit.column_uncertainty),
        cents_per_year=line.slope,
        uncertainty_cents_per_year=line.uncertainty,
        verdict=_sure(line.probability),
        notes=tuple(_note_drifts(levels, table, years, player)),
    )


def _line(years: Reals, values: Reals, doubts: Reals, player: Wholes) -> Line | None:
    """Return a line through values at FEWEST_DATES dates or more, None where the dates are too few."""
    enough = len(np.unique(years)) >= FEWEST_DATES
    return line_through(years, values, doubts, player) if enough else None


def _sure(probability: float) -> Verdict | None:
    if probability <= FALSE_SHARE:
        return "different"
    return "likely" if probability <= LIKELY_SHARE else None


def _note_drifts(levels: _Levels, table: Table, years: Reals, player: Wholes) -> Iterator[NoteDrift]:
    """Return the drift of every row once the whole flute's ups and downs are taken off."""
    lines = []
    for row, rests in zip(levels.rows, levels.rest, strict=True):
        known = np.isfinite(rests)
        doubts = table.uncertainty[row, np.array(levels.sittings)[known]]
        line = _line(years[known], rests[known], doubts, player[known])
        if line is not None:
            lines.append((row, line))
    slopes = np.array([line.slope for _, line in lines])
    doubts = np.array([line.uncertainty for _, line in lines])
    _, verdicts = verdicts_of(slopes, doubts)
    for (row, line), verdict in zip(lines, verdicts, strict=True):
        yield NoteDrift(
            row=int(row),
            cents_per_year=line.slope,
            uncertainty_cents_per_year=line.uncertainty,
            verdict=verdict,
        )
