"""All flutes at once: what each note is over the group, who plays it, and the A4 that suits all best.

Conventions: those of `values`. Means are weighted by inverse variances, the variance between flutes included
(Paule & Mandel 1982), so that one very sure flute does not speak for all; medians, scatter and what
stands out are robust (see `statistics`).
"""

from collections.abc import Sequence
from math import isfinite, log, sqrt

import numpy as np

from fluteprobe.compare.pairs import beats_between
from fluteprobe.compare.statistics import (
    Flags,
    Reals,
    between_variance,
    middle_and_scatter,
    standing_out,
    weighted_mean,
)
from fluteprobe.compare.table import Found, Table, midi_of
from fluteprobe.compare.values import Cell, GroupPitch, Reach, Row
from fluteprobe.flute.register import Register
from fluteprobe.flute.tuning import Note

FEWEST_FOR_MIDDLE = 3


def rows_of(table: Table) -> tuple[Row, ...]:
    """Return every row with its cells and what the group gives in it."""
    middle, scatter = middle_and_scatter(table.cents)
    out = standing_out(table.cents, table.uncertainty)
    return tuple(
        _row(table, k, (float(middle[k]), float(scatter[k])), out[k]) for k in range(len(table.keys))
    )


def group_pitch(table: Table) -> GroupPitch | None:
    """Return the A4 that brings all shared notes nearest to equal temperament, by weighted least squares.

    The table is by note, with each flute's best fingering. Shared is what two flutes or more play; None where
    nothing is.
    """
    shared = np.isfinite(table.pitch).sum(axis=1) >= 2
    off, doubt = table.cents[shared], table.uncertainty[shared]
    known = np.isfinite(off)
    if not known.any():
        return None
    off, doubt = off[known], np.maximum(doubt[known], 1e-3)
    between = between_variance(off, doubt)
    weights = 1.0 / (doubt**2 + between)
    best = float(weights @ off / weights.sum())
    uncertainty = float(1.0 / np.sqrt(weights.sum()))
    a4_hz = 2.0 ** ((table.a4_pitch + best) / 1200.0)
    return GroupPitch(
        a4_hz=a4_hz,
        uncertainty_hz=a4_hz * log(2.0) / 1200.0 * uncertainty,
        remaining_cents=sqrt(float(weights @ (off - best) ** 2 / weights.sum())),
        cells=len(off),
    )


def reach_of(found: Sequence[Sequence[Found]], a4_pitch: float, leaning: float) -> tuple[Reach, ...]:
    """Return every note that any flute plays, low to high, with who plays it and in which register.

    Of several registers in which a flute plays a note, the lowest counts.
    """
    notes: dict[int, dict[int, Register]] = {}
    for flute, entries in enumerate(found):
        for each in entries:
            players = notes.setdefault(midi_of(each.pitch - a4_pitch, leaning), {})
            players[flute] = min(players.get(flute, 3), each.entry.register)
    return tuple(
        Reach(note=str(Note(midi)), midi=midi, flutes=tuple(players), registers=tuple(players.values()))
        for midi, players in sorted(notes.items())
    )


def _row(table: Table, row: int, robust: tuple[float, float], out: Flags) -> Row:
    cents, doubt = table.cents[row], table.uncertainty[row]
    played = np.flatnonzero(np.isfinite(cents))
    mean, uncertainty = _group_mean(cents[played], doubt[played])
    low, high = (int(played[pick(cents[played])]) for pick in (np.argmin, np.argmax))
    several = len(played) >= 2
    off = cents - robust[0] if len(played) >= FEWEST_FOR_MIDDLE else None
    cells = _cells(table, row, off, out)
    registers = {cell.register for cell in cells if cell is not None}
    return Row(
        by=table.keys[row][0],
        register=registers.pop() if len(registers) == 1 else None,
        note=str(Note(table.midi[row])),
        cells=cells,
        mean_cents=mean,
        mean_uncertainty_cents=uncertainty,
        middle_cents=robust[0],
        scatter_cents=robust[1] if isfinite(robust[1]) else None,
        spread_cents=float(cents[high] - cents[low]) if several else None,
        fastest=beats_between(table, row, (low, high)) if several else None,
    )


def _group_mean(cents: Reals, doubt: Reals) -> tuple[float, float]:
    between = between_variance(cents, doubt)
    return weighted_mean(cents, np.sqrt(doubt**2 + between))


def _cells(table: Table, row: int, off: Reals | None, out: Flags) -> tuple[Cell | None, ...]:
    return tuple(
        None
        if found is None
        else Cell(
            flute=k,
            fingering=found.entry.fingering,
            register=found.entry.register,
            frequency_hz=float(2.0 ** (found.pitch / 1200.0)),
            as_played_hz=found.entry.frequency_hz,
            cents=float(table.cents[row, k]),
            uncertainty_cents=found.entry.uncertainty_cents,
            reliability=found.entry.reliability,
            tones=found.entry.tones,
            off_cents=None if off is None else float(off[k]),
            stands_out=bool(out[k]),
        )
        for k, found in enumerate(table.found[row])
    )
