"""What a comparison's page says in words: the flutes as wholes, what stands out, who plays what, the best A4.

Conventions: those of `contents`; text is cleaned for printing and broken to the room given, in millimetres.
Flutes are named by their numbers (from 1) where there are many, by their labels where there are few.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from fluteprobe.compare.values import Comparison, Drift, Pair, Parts, Row
from fluteprobe.pages.contents import cents_text, note_text, uncertainty_text
from fluteprobe.pages.paper import SMALL, clean, wrapped

MOST_LINES = 4  # of one finding; the rest is in comparison.json
NAMED_UP_TO = 6


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """A label and what there is to say, in lines."""

    label: str
    lines: tuple[str, ...]


def findings_of(comparison: Comparison, room_mm: float) -> tuple[Finding, ...]:
    """Return what there is to say of a comparison, most telling first."""
    found = (
        ("as wholes", _wholes(comparison)),
        ("moved alone", _moved(comparison)),
        ("stands out", _standing_out(comparison)),
        ("best A4", _best_a4(comparison)),
        ("all play", [", ".join(_everywhere(comparison)) or "no note in common"]),
        ("upper notes", _upper(comparison)),
        ("the player's part", _players(comparison.parts)),
        ("drift", [text for drift in comparison.drifts for text in _drift(drift, comparison)]),
        ("not separable", [] if comparison.parts is None else list(comparison.parts.unseparated)),
        ("caution", list(comparison.cautions)),
    )
    return tuple(Finding(label=label, lines=tuple(_lines(texts, room_mm))) for label, texts in found if texts)


def flute_name(comparison: Comparison, flute: int) -> str:
    """Return how a flute is called in a sentence."""
    if len(comparison.flutes) <= NAMED_UP_TO:
        return clean(comparison.flutes[flute].label)
    return str(flute + 1)


def row_name(comparison: Comparison, row: Row) -> str:
    """Return how a row is called: its note, and by fingering the fingering too."""
    note = note_text(row.note)
    return f"{note} {row.by}" if comparison.by == "fingering" else note


def _lines(texts: Sequence[str], room_mm: float) -> list[str]:
    words = [word for k, text in enumerate(texts) for word in _words(text, last=k == len(texts) - 1)]
    lines = wrapped(words, SMALL, room_mm)
    if len(lines) <= MOST_LINES:
        return lines
    return [*lines[: MOST_LINES - 1], "… and more, in comparison.json"]


def _words(text: str, *, last: bool) -> list[str]:
    return clean(text if last else f"{text}  ·").split()


def _wholes(comparison: Comparison) -> list[str]:
    if len(comparison.pairs) > 1:
        return _many_wholes(comparison)
    return [_whole(comparison, pair) for pair in comparison.pairs if pair.offset_cents is not None]


def _whole(comparison: Comparison, pair: Pair) -> str:
    cents, doubt = pair.offset_cents or 0.0, pair.offset_uncertainty_cents
    one, other = (flute_name(comparison, k) for k in pair.flutes)
    size = f"{abs(cents):.1f} {uncertainty_text(doubt)} cents"
    if pair.offset_verdict is None:
        return f"{one} and {other} are the same within the uncertainty ({size})"
    side = "sharper" if cents > 0.0 else "flatter"
    ending = ", which the air may explain: its temperature is not given"
    return f"{one} is {size} {side} than {other}{ending if pair.offset_verdict == 'air' else ''}"


def _many_wholes(comparison: Comparison) -> list[str]:
    """Count the pairs that differ as wholes, and the notes that differ."""
    verdicts = [d.verdict for pair in comparison.pairs for d in pair.differences]
    apart = sum(pair.offset_verdict in {"different", "likely"} for pair in comparison.pairs)
    if not verdicts:
        return []
    return [
        f"{apart} of {len(comparison.pairs)} pairs differ as wholes",
        f"{verdicts.count('different')} of {len(verdicts)} notes compared in pairs differ for real, "
        f"{verdicts.count('likely')} more are likely to",
    ]


def _moved(comparison: Comparison) -> list[str]:
    """Name the notes of two flutes of one build that differ beyond the whole."""
    if len(comparison.pairs) != 1 or comparison.by != "fingering":
        return []
    found = [d for d in comparison.pairs[0].differences if d.alone_verdict]
    if not found:
        return ["no note beyond the flutes as wholes"] if comparison.pairs[0].differences else []
    found.sort(key=lambda d: -abs(d.alone_cents or 0.0))
    side = -1.0 if comparison.is_one_instrument else 1.0  # from before to after
    return [
        f"{row_name(comparison, comparison.rows[d.row])} {cents_text(side * (d.alone_cents or 0.0))} "
        f"{uncertainty_text(d.alone_uncertainty_cents)}{' (likely)' if d.alone_verdict == 'likely' else ''}"
        for d in found
    ]


def _standing_out(comparison: Comparison) -> list[str]:
    cells = [(row, cell) for row in comparison.rows for cell in row.played if cell.stands_out]
    cells.sort(key=lambda pair: -abs(pair[1].off_cents or 0.0))
    return [
        f"{row_name(comparison, row)}: {flute_name(comparison, cell.flute)} {cents_text(cell.off_cents)}"
        for row, cell in cells
    ]


def _best_a4(comparison: Comparison) -> list[str]:
    group = comparison.group
    if group is None:
        return []
    return [
        f"{group.a4_hz:.2f} ± {max(group.uncertainty_hz, 0.01):.2f} Hz suits all shared notes best; "
        f"at it they are {group.remaining_cents:.0f} cents off (rms)"
    ]


def _everywhere(comparison: Comparison) -> list[str]:
    flutes = len(comparison.flutes)
    return [note_text(reach.note) for reach in comparison.notes if len(reach.flutes) == flutes]


def _upper(comparison: Comparison) -> list[str]:
    """Say of every note that some play in an upper register alone who plays it; all is said in a word."""
    flutes = len(comparison.flutes)
    told = []
    for reach in comparison.notes:
        if min(reach.registers) > 1:
            who = [flute_name(comparison, k) for k in reach.flutes]
            words = (
                "all"
                if len(who) == flutes
                else ", ".join(who)
                if len(who) <= 4
                else f"{len(who)} of {flutes}"
            )
            told.append(f"{note_text(reach.note)} ({words})")
    return told


def _players(parts: Parts | None) -> list[str]:
    if parts is None:
        return []
    return [
        f"{clean(part.player)} {cents_text(part.cents)} {uncertainty_text(part.uncertainty_cents)}"
        f"{' (real)' if part.verdict == 'different' else ' (likely)' if part.verdict else ''}"
        for part in parts.players
    ]


def _drift(drift: Drift, comparison: Comparison) -> Iterator[str]:
    name = next(flute.facts.name for flute in comparison.flutes if flute.kin == drift.kin)
    word = {"different": "real", "likely": "likely"}.get(drift.verdict or "", "within the uncertainty")
    yield (
        f"{clean(name)}: {drift.cents_per_year:+.1f} ± {drift.uncertainty_cents_per_year:.1f} cents a year "
        f"over {drift.days[-1]} days ({word})"
    ).replace("-", "−")
    for note in drift.notes:
        if note.verdict:
            slope = f"{note.cents_per_year:+.1f} ± {note.uncertainty_cents_per_year:.1f}".replace("-", "−")
            yield f"{row_name(comparison, comparison.rows[note.row])} {slope} a year beyond that"
