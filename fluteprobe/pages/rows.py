"""One register's row of flutes: note names, fingerings, deviations to scale and the numbers under them.

Conventions: lengths in millimetres, deviations in cents. A row starts right of the gutter, in which its lines
are named. One rule is one note; the fingerings under it are alternatives, best first.
"""

from dataclasses import dataclass
from math import ceil

from fluteprobe.pages.contents import SPEAKS_WELL, Section, cents_text, share_text, uncertainty_text
from fluteprobe.pages.glyphs import (
    FluteSize,
    Scale,
    draw_deviation,
    draw_flute,
    draw_note,
    draw_scale,
    draw_share,
)
from fluteprobe.pages.paper import (
    ACCENT,
    HEADING,
    INK,
    LABEL,
    LEFT_MM,
    LONG_WORD,
    MINUS,
    NOTE,
    NOTE_SMALL,
    NUMBER,
    NUMBER_BOLD,
    OR,
    QUIET,
    SMALL,
    WORD,
    Page,
    Type,
    width_mm,
)
from fluteprobe.survey import Entry

NARROWEST_COLUMN_MM = 13.2
WIDEST_COLUMN_MM = 22.0
LABEL_GAP_MM = 2.5  # between the gutter's words and the row

_HEADING_MM = 9.5
_NAME_MM = 8.6
_WORD_MM = 5.4
_SHARE_MM = 7.0
_GAP_MM = 4.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Look:
    """How large a register is drawn: flutes, deviation scale and note names."""

    flute: FluteSize
    scale: Scale
    note: Type


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """One fingering on the page; `leads` where it is the first of its note in its row."""

    entry: Entry
    note: str
    leads: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Row:
    """A register, or a part of one, as a row. `headed` where the register's name stands over it."""

    section: Section
    columns: tuple[Column, ...]
    column_mm: float
    holes: int
    look: Look
    reference_label: str | None
    headed: bool

    @property
    def height_mm(self) -> float:
        """The row's height with the white under it."""
        if not self.columns:
            return _HEADING_MM + _GAP_MM
        flutes = _NAME_MM + self.look.flute.height_mm(self.holes) + _WORD_MM + self.look.scale.height_mm
        numbers = _number_lines(self)[-1][1] + 2.0
        return (_HEADING_MM if self.headed else 0.0) + flutes + numbers + _GAP_MM


def look_for(upper: bool, roomy: float, limit_cents: float, tolerance_cents: float) -> Look:
    """Return the look of an upper register or of the first, from 0 (tight) to 1 (roomy)."""

    def between(tight: float, wide: float) -> float:
        return tight + roomy * (wide - tight)

    hole = between(2.5, 5.4) if upper else between(2.4, 4.4)
    height = between(11.0, 28.0) if upper else between(10.0, 22.0)
    flute = FluteSize(hole_mm=hole, pitch_mm=between(1.22, 1.36) * hole, hands_apart_mm=0.4 * hole)
    scale = Scale(height_mm=height, limit_cents=limit_cents, tolerance_cents=tolerance_cents)
    return Look(flute=flute, scale=scale, note=NOTE if upper else NOTE_SMALL)


def rows_of(
    section: Section, look: Look, holes: int, room_mm: float, reference_label: str | None
) -> list[Row]:
    """Return a register as rows of about equal length that fit the room; without notes it is a heading."""
    least = max(NARROWEST_COLUMN_MM, width_mm("x" * holes, _word_voice(holes)) + 0.9)
    parts = _shared_out(section, int(room_mm / least)) or [()]
    column = min(WIDEST_COLUMN_MM, room_mm / max(1, *(len(part) for part in parts)))
    return [
        Row(
            section=section, columns=part, column_mm=column, holes=holes, look=look,
            reference_label=reference_label, headed=k == 0,
        )
        for k, part in enumerate(parts)
    ]  # fmt: skip


def draw_row(row: Row, page: Page, top_mm: float) -> None:
    """Draw a row from its top down."""
    if row.headed:
        _draw_heading(page, row.section, top_mm)
        top_mm += _HEADING_MM
    if not row.columns:
        return
    flute_top = top_mm + _NAME_MM
    word_line = flute_top + row.look.flute.height_mm(row.holes) + 3.2
    middle = word_line - 3.2 + _WORD_MM + 0.5 * row.look.scale.height_mm
    numbers_top = middle + 0.5 * row.look.scale.height_mm
    draw_scale(page, LEFT_MM, LEFT_MM + row.column_mm * len(row.columns), middle, row.look.scale)
    _draw_gutter(page, row, middle, numbers_top)
    _draw_note_rules(page, row, top_mm)
    for k, column in enumerate(row.columns):
        x = LEFT_MM + (k + 0.5) * row.column_mm
        entry = column.entry
        _draw_name(page, column, row.look.note, (x, top_mm + 6.4))
        draw_flute(page, x, flute_top, row.look.flute, entry.fingering)
        page.text(x, word_line, str(entry.fingering), _word_voice(row.holes), align="center", colour=QUIET)
        draw_deviation(page, (x, middle), row.look.scale, entry.cents, entry.uncertainty_cents)
        _draw_numbers(page, row, entry, (x, numbers_top))


def _word_voice(holes: int) -> Type:
    return WORD if holes <= 8 else LONG_WORD


def _shared_out(section: Section, most: int) -> list[tuple[Column, ...]]:
    """Return the columns in as few rows as can be, each of at most so many, and on those about even."""
    count = len(section.entries)
    even = ceil(count / max(1, ceil(count / most)))
    tries = [_filled(section, length) for length in range(even, most + 1)]
    return min(tries, key=len)


def _filled(section: Section, length: int) -> list[tuple[Column, ...]]:
    """Return the columns in rows of at most that length, one note's alternatives together where they fit."""
    filled: list[list[Column]] = [[]]
    for group in section.groups:
        if len(filled[-1]) + len(group.entries) > length:
            filled.append([])
        for k, entry in enumerate(group.entries):
            if len(filled[-1]) == length:
                filled.append([])
            filled[-1].append(Column(entry=entry, note=group.note, leads=k == 0 or not filled[-1]))
    return [tuple(columns) for columns in filled if columns]


def _draw_heading(page: Page, section: Section, top: float) -> None:
    page.text(LEFT_MM, top + 5.0, section.title, HEADING)
    after = LEFT_MM + width_mm(section.title, HEADING) + 4.0
    page.text(after, top + 5.0, section.remark, LABEL, colour=QUIET)


def _draw_note_rules(page: Page, row: Row, top: float) -> None:
    starts = [k for k, column in enumerate(row.columns) if column.leads]
    for start, end in zip(starts, [*starts[1:], len(row.columns)], strict=True):
        left, right = (LEFT_MM + k * row.column_mm for k in (start, end))
        page.line((left + 1.2, top), (right - 1.2, top), colour=QUIET)


def _draw_name(page: Page, column: Column, voice: Type, at_mm: tuple[float, float]) -> None:
    if column.leads:
        draw_note(page, at_mm, column.note, voice)
    else:
        page.text(*at_mm, "or", OR, align="center", colour=QUIET)


def _draw_gutter(page: Page, row: Row, middle: float, numbers_top: float) -> None:
    scale = row.look.scale
    reach = 0.5 * scale.height_mm
    words = [
        (f"sharp  +{scale.limit_cents:g}", middle - reach + 2.6),
        (f"±{scale.tolerance_cents:g}", middle + 0.9),
        (f"flat  {MINUS}{scale.limit_cents:g}", middle + reach - 0.6),
        *((label, numbers_top + depth) for label, depth in _number_lines(row)),
    ]
    for label, y in words:
        page.text(LEFT_MM - LABEL_GAP_MM, y, label, LABEL, align="right", colour=QUIET)


def _number_lines(row: Row) -> list[tuple[str, float]]:
    """Return the lines of numbers under a scale: label, and depth of its baseline."""
    lines = [("cents", 4.8), ("uncertain", 8.5)]
    if row.reference_label:
        lines.append((row.reference_label, 12.2))
    return [*lines, ("speaks, takes", lines[-1][1] + 4.2)]


def _draw_numbers(page: Page, row: Row, entry: Entry, at_mm: tuple[float, float]) -> None:
    x, top = at_mm
    depths = [depth for _, depth in _number_lines(row)]
    off = abs(entry.cents) > row.look.scale.tolerance_cents
    voice, colour = (NUMBER_BOLD, ACCENT) if off else (NUMBER, INK)
    page.text(x, top + depths[0], cents_text(entry.cents), voice, align="center", colour=colour)
    page.text(
        x, top + depths[1], uncertainty_text(entry.uncertainty_cents), SMALL, align="center", colour=QUIET
    )
    if row.reference_label:
        page.text(
            x, top + depths[2], cents_text(entry.cents_at_reference), LABEL, align="center", colour=QUIET
        )
    sure = f"{share_text(entry.reliability)}  {len(entry.takes)}"
    colour = INK if entry.reliability < SPEAKS_WELL else QUIET
    page.text(x, top + depths[-1], sure, SMALL, align="center", colour=colour)
    draw_share(page, (x, top + depths[-1] + 1.4), _SHARE_MM, entry.reliability)
