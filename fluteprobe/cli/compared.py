"""What people see of a comparison in a terminal: the table, then what there is to say, in sentences.

Conventions: those of `screen`: at most 80 columns, cents with a sign, ± the standard uncertainty. Flutes are
numbered from 1, as given. `different` and `likely` are the verdicts of `fluteprobe.compare.values`; nothing
is said where a difference is within the uncertainty.
"""

from collections.abc import Iterable, Iterator
from textwrap import wrap

from fluteprobe.cli.columns import aligned
from fluteprobe.cli.screen import WIDTH
from fluteprobe.compare.values import (
    Comparison,
    Difference,
    Drift,
    Flute,
    Pair,
    Parts,
    Row,
    Verdict,
)

MOST_COLUMNS = 6  # flutes whose numbers fit beside one another
MOST_LISTED = 10
MOST_NAMED = 40

Line = list[str]


def told(comparison: Comparison) -> str:
    """Return a comparison as text: what is compared, the table, and the findings."""
    blocks = [_heading(comparison), _table(comparison), *_findings(comparison)]
    return "\n\n".join("\n".join(block) for block in blocks if block)


# --- heading and table -------------------------------------------------------------------------------


def _heading(comparison: Comparison) -> list[str]:
    matched = "fingering" if comparison.by == "fingering" else "sounding note"
    parts = [f"{len(comparison.flutes)} flutes by {matched}", f"A4 = {comparison.a4_hz:g} Hz"]
    if comparison.is_carried:
        parts.append(f"carried to {comparison.temperature_c:g} °C, an estimate")
    elif comparison.temperature_c is not None:
        parts.append(f"air {comparison.temperature_c:g} °C")
    facts = [[f"{k}", flute.label, *_facts(flute)] for k, flute in enumerate(comparison.flutes, start=1)]
    lines = [line[:WIDTH].rstrip() for line in aligned(facts, numbers={0})]
    if len(lines) > MOST_NAMED + 1:
        lines = [*lines[:MOST_NAMED], f"… and {len(lines) - MOST_NAMED} more, in the order they were given"]
    return [" · ".join(parts), "", *lines]


def _facts(flute: Flute) -> list[str]:
    air = flute.sitting.air_temperature_c
    return [
        f"{flute.facts.holes} hole{'s' if flute.facts.holes > 1 else ''}",
        "air not given" if air is None else f"air {round(air, 1):g} °C",
        flute.sitting.date or "",
    ]


def _table(comparison: Comparison) -> Line:
    if not comparison.rows:
        return ["No flute gave a note of known register."]
    first = ["fingering", "register", "note"] if comparison.by == "fingering" else ["note", "register"]
    flutes = len(comparison.flutes)
    columns = _two if flutes == 2 else _few if flutes <= MOST_COLUMNS else _many
    titles, lines = columns(comparison)
    named = [_named(comparison, row) for row in comparison.rows]
    table = [[*first, *titles], *([*name, *line] for name, line in zip(named, lines, strict=True))]
    words = {"fingering", "note", ""}
    return [
        *aligned(table, numbers={k for k, title in enumerate(table[0]) if title not in words}),
        "",
        *_explained(comparison),
    ]


def _named(comparison: Comparison, row: Row) -> list[str]:
    register = "–" if row.register is None else str(row.register)
    if comparison.by == "fingering":
        return [row.by, register, _note(row.note)]
    return [_note(row.note), register]


def _two(comparison: Comparison) -> tuple[Line, list[Line]]:
    """Return the columns of two flutes: both, their difference, what of it is the note's, and the beats.

    A note's own part is told of fingerings alone: different builds have no offset that means anything. One
    instrument has moved from the first sitting to the second; two differ by the first less the second.
    """
    differences = {d.row: d for pair in comparison.pairs for d in pair.differences}
    same_build = comparison.by == "fingering"
    side = -1.0 if comparison.is_one_instrument else 1.0
    lines = []
    for k, row in enumerate(comparison.rows):
        one = ["–" if cell is None else _signed(cell.cents) for cell in row.cells]
        lines.append([*one, *_apart(differences.get(k), side, same_build=same_build)])
    apart = "moved" if comparison.is_one_instrument else "1 − 2"
    return ["1", "2", apart, "", "note alone" if same_build else "", "", "beats"], lines


def _apart(difference: Difference | None, side: float, *, same_build: bool) -> Line:
    if difference is None:
        return [""] * 5
    alone = ["", ""]
    if same_build and difference.alone_cents is not None:
        uncertainty = difference.alone_uncertainty_cents
        alone = [_off(side * difference.alone_cents, uncertainty), _mark(difference.alone_verdict)]
    whole = _off(side * difference.cents, difference.uncertainty_cents)
    return [whole, _mark(difference.verdict), *alone, f"{difference.beats.rate_hz:.1f}"]


def _mark(verdict: Verdict | None) -> str:
    return {"different": "*", "likely": "(*)", "air": "air"}.get(verdict or "", "")


def _few(comparison: Comparison) -> tuple[Line, list[Line]]:
    """Return the columns of a few flutes: each of them, their spread and, where there is room, the beats."""
    titles = [str(k) for k in range(1, len(comparison.flutes) + 1)]
    lines = []
    for row in comparison.rows:
        cells = ["–" if cell is None else _signed(cell.cents) for cell in row.cells]
        spread = "" if row.spread_cents is None else f"{row.spread_cents:.1f}"
        beats = "" if row.fastest is None else f"{row.fastest.rate_hz:.1f}"
        lines.append([*cells, spread, *([beats] if len(cells) < MOST_COLUMNS else [])])
    return [*titles, "spread", *(["beats"] if len(titles) < MOST_COLUMNS else [])], lines


def _many(comparison: Comparison) -> tuple[Line, list[Line]]:
    """Return the columns of many flutes: who is lowest and highest, and what the group gives."""
    lines = []
    for row in comparison.rows:
        scatter = "" if row.scatter_cents is None else f"{row.scatter_cents:.1f}"
        played = f"{len(row.played)} of {len(row.cells)}"
        lines.append([*_ends(row), played, _signed(row.middle_cents), scatter])
    return ["lowest", "highest", "played", "middle", "scatter"], lines


def _ends(row: Row) -> list[str]:
    low, high = (pick(row.played, key=lambda cell: cell.cents) for pick in (min, max))
    return [f"{_signed(cell.cents)} ({cell.flute + 1})" for cell in (low, high)]


def _explained(comparison: Comparison) -> list[str]:
    words = ["cents: off the note in equal temperament, above 0 is sharp"]
    if len(comparison.flutes) == 2:
        words += ["± standard uncertainty", "*: different, (*): likely"]
        if comparison.by == "fingering":
            words += ["note alone: the difference less that of the flutes as wholes"]
    elif len(comparison.flutes) <= MOST_COLUMNS:
        words += ["spread: highest minus lowest"]
    else:
        words += ["lowest, highest: and whose it is", "middle: median", "scatter: robust standard deviation"]
    if len(comparison.flutes) < MOST_COLUMNS:
        words += ["beats: a second, between the two farthest apart"]
    return wrap("; ".join(words), WIDTH)


# --- findings ----------------------------------------------------------------------------------------


def _findings(comparison: Comparison) -> Iterator[list[str]]:
    yield _pairs(comparison)
    yield _standing_out(comparison)
    yield _notes(comparison)
    yield _group_pitch(comparison)
    if comparison.parts:
        yield _parts(comparison.parts, comparison)
    for drift in comparison.drifts:
        yield _drift(drift, comparison)


def _pairs(comparison: Comparison) -> list[str]:
    """Say how flutes differ as wholes, and how many notes differ."""
    lines: list[str] = []
    for pair in comparison.pairs:
        if len(comparison.pairs) == 1 or pair.offset_verdict:
            lines += _offset(pair)
    hidden = len(lines) - MOST_LISTED
    if hidden > 1:
        lines = [*lines[:MOST_LISTED], f"… and {hidden} more pairs, in comparison.json"]
    return [*lines, *_counted(comparison)]


def _offset(pair: Pair) -> list[str]:
    if pair.offset_cents is None:
        return []
    one, other = (k + 1 for k in pair.flutes)
    size = f"{abs(pair.offset_cents):.1f} ± {max(pair.offset_uncertainty_cents or 0.0, 0.1):.1f} cents"
    words = {
        None: f"As wholes {one} and {other} are the same within the uncertainty ({size})",
        "air": f"{_sharper(pair)} by {size}, which the air may explain: its temperature is not given",
    }
    return _indented(words.get(pair.offset_verdict, f"{_sharper(pair)} by {size}: {pair.offset_verdict}"))


def _sharper(pair: Pair) -> str:
    one, other = (k + 1 for k in pair.flutes)
    return f"As a whole {one} is {'sharper' if (pair.offset_cents or 0.0) > 0.0 else 'flatter'} than {other}"


def _counted(comparison: Comparison) -> list[str]:
    """Say how many differences were looked at, how many are real, and how many chance alone would give."""
    found = [d.verdict for pair in comparison.pairs for d in pair.differences]
    if not found:
        return []
    airy = f"{found.count('air')} that the air may explain, " if "air" in found else ""
    text = (
        f"{len(found)} notes compared: {found.count('different')} different, {found.count('likely')} likely, "
        f"{airy}{found.count(None)} within the uncertainty. Called are differences over three combined "
        "standard uncertainties; of those called different at most 1 in 100 is chance."
    )
    return wrap(text, WIDTH)


def _standing_out(comparison: Comparison) -> list[str]:
    lines = []
    for row in comparison.rows:
        for cell in row.played:
            if cell.stands_out and cell.off_cents is not None:
                name = f"{row.by}{f' ({row.register})' if comparison.by == 'fingering' else ''}"
                lines.append(f"{_note(name)}: {cell.flute + 1} is {_signed(cell.off_cents)} from the middle")
    return ["Stands out from the others:", *_shortened(f"  {line}" for line in lines)] if lines else []


def _notes(comparison: Comparison) -> list[str]:
    """Say which notes every flute plays, and how far up each one goes."""
    flutes = len(comparison.flutes)
    everywhere = [_note(reach.note) for reach in comparison.notes if len(reach.flutes) == flutes]
    lines = _indented(f"Every flute plays: {', '.join(everywhere) or 'no note in common'}")
    upper: list[str] = []
    for k in range(flutes):
        mine = [r for r in comparison.notes if k in r.flutes and r.registers[r.flutes.index(k)] > 1]
        names = ", ".join(_note(reach.note) for reach in mine) or "none"
        upper += _indented(f"  {k + 1}  {names}")
    return [*lines, "Notes of the upper registers alone:", *_shortened(upper)]


def _group_pitch(comparison: Comparison) -> list[str]:
    group = comparison.group
    if group is None:
        return []
    text = (
        f"A4 = {group.a4_hz:.2f} ± {max(group.uncertainty_hz, 0.01):.2f} Hz suits all shared notes best; "
        f"at it they are off by {group.remaining_cents:.1f} cents (rms)"
    )
    return wrap(text, WIDTH)


def _parts(parts: Parts, comparison: Comparison) -> list[str]:
    """Say what each player adds, where a player treats one note apart, and what cannot be told."""
    lines = ["What the player adds to a flute as a whole, against the mean of the players:"]
    lines += [
        f"  {part.player}: {_off(part.cents, part.uncertainty_cents)} {part.verdict or ''}".rstrip()
        for part in parts.players
    ]
    rests = [
        f"  {rest.player}: {_note(comparison.rows[rest.row].by)} "
        f"{_off(rest.cents, rest.uncertainty_cents)} {rest.verdict}"
        for rest in parts.rests
        if rest.verdict
    ]
    if rests:
        lines += ["Single notes that a player plays otherwise:", *_shortened(rests)]
    for text in parts.unseparated:
        lines += _indented(f"Cannot be told apart: {text}")
    return lines


def _drift(drift: Drift, comparison: Comparison) -> list[str]:
    name = next(flute.facts.name for flute in comparison.flutes if flute.kin == drift.kin)
    slope = _off(drift.cents_per_year, drift.uncertainty_cents_per_year)
    verdict = drift.verdict or "(no drift that these dates can show)"
    lines = [f"{name}, {len(drift.days)} sittings in {drift.days[-1]} days: {slope} cents a year {verdict}"]
    lines += _shortened(
        f"  {_note(comparison.rows[note.row].by)} beyond that: "
        f"{_off(note.cents_per_year, note.uncertainty_cents_per_year)} a year {note.verdict}"
        for note in drift.notes
        if note.verdict
    )
    return lines


# --- helpers -----------------------------------------------------------------------------------------


def _indented(text: str) -> list[str]:
    return wrap(text, WIDTH, subsequent_indent="     ", break_on_hyphens=False)


def _shortened(lines: Iterable[str]) -> list[str]:
    """Return lines, only as many as people read; the rest is in the files."""
    lines = list(lines)
    if len(lines) <= MOST_LISTED + 1:
        return lines
    return [*lines[:MOST_LISTED], f"  … and {len(lines) - MOST_LISTED} more, in comparison.json"]


def _note(note: str) -> str:
    return note.replace("#", "♯")


def _off(cents: float, uncertainty_cents: float | None) -> str:
    """Return a number of cents with its uncertainty, which is never told as less than 0.1."""
    return f"{_signed(cents)} ± {max(uncertainty_cents or 0.0, 0.1):.1f}"


def _signed(cents: float) -> str:
    return f"{round(cents, 1) + 0.0:+.1f}".replace("-", "−")
