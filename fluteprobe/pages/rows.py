"""A row of upright flutes: notes on a staff, their names, fingerings, deviations to scale and the numbers.

Conventions: lengths in millimetres, deviations in cents. A row starts right of the gutter, in which its lines
are named. One rule is one note; the fingerings under it are alternatives, best first. A row holds one
register or a part of one; upper registers that fit into one row share it, the higher to the right.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import ceil

from fluteprobe.pages.contents import Section, cents_text, spoke_text, uncertainty_text
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
    INK,
    LABEL,
    LONG_WORD,
    MINUS,
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
from fluteprobe.pages.staff import CLEF_WIDTH, Staff, draw_staff, staff_of
from fluteprobe.survey import Entry

NARROWEST_COLUMN_MM = 13.2
WIDEST_COLUMN_MM = 22.0
LABEL_GAP_MM = 2.5  # between the gutter's words and the row
PART_GAP_MM = 7.0  # between two registers in one row

_HEADING_MM = 8.5
_STAFF_GAP_MM = 1.6
_NAME_MM = 8.6
_WORD_MM = 5.4
_SHARE_MM = 7.0
_GAP_MM = 4.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Look:
    """How large a register is drawn: flutes, deviation scale, staff and note names; and with which numbers.

    `detailed` is with uncertainty, estimate and takes in print, and with names for the lines in the gutter.
    """

    flute: FluteSize
    scale: Scale
    space_mm: float
    heading: Type
    note: Type
    word: Type
    narrowest_mm: float
    detailed: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """One fingering on the page; `leads` where it is the first of its note in its row."""

    entry: Entry
    note: str
    leads: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """A register, or a part of one, within a row. `headed` where the register's name stands over it."""

    section: Section
    columns: tuple[Column, ...]
    headed: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Row:
    """One or more parts side by side."""

    parts: tuple[Part, ...]
    column_mm: float
    holes: int
    look: Look
    reference_label: str | None

    @property
    def columns(self) -> tuple[Column, ...]:
        """All columns from left to right."""
        return tuple(column for part in self.parts for column in part.columns)

    @property
    def foretold(self) -> bool:
        """Whether nothing in this row was played."""
        return any(part.section.foretold for part in self.parts)

    @property
    def staff(self) -> Staff:
        """The row's notes as they are written."""
        return staff_of([column.note for column in self.columns if column.leads])

    @property
    def staff_mm(self) -> float:
        """The height of the staff with the white under it."""
        return self.staff.height_mm(self.look.space_mm) + _STAFF_GAP_MM

    @property
    def heading_mm(self) -> float:
        """The height of the registers' names."""
        return _HEADING_MM if any(part.headed for part in self.parts) else 0.0

    @property
    def height_mm(self) -> float:
        """The row's height with the white under it."""
        if not self.columns:
            return _HEADING_MM + _GAP_MM
        flutes = _NAME_MM + self.look.flute.height_mm(self.holes) + _WORD_MM + self.look.scale.height_mm
        return self.heading_mm + self.staff_mm + flutes + _number_lines(self)[-1][1] + 2.0 + _GAP_MM

    def left_mm(self, part: int, start_mm: float) -> float:
        """Return where a part begins, in a row that begins at `start_mm`."""
        before = sum(len(p.columns) for p in self.parts[:part])
        return start_mm + before * self.column_mm + part * PART_GAP_MM

    def middles_mm(self, start_mm: float) -> list[float]:
        """Return the middle of every column."""
        return [
            self.left_mm(k, start_mm) + (i + 0.5) * self.column_mm
            for k, part in enumerate(self.parts)
            for i in range(len(part.columns))
        ]


def rows_of(
    sections: Sequence[Section], look: Look, holes: int, room_mm: float, reference_label: str | None
) -> list[Row]:
    """Return registers as rows of about equal length that fit the room; one without notes is a heading.

    Registers that fit into one row together share it, from the lowest at the left.
    """
    rising = sorted(sections, key=lambda section: section.register)
    whole = [Part(section=s, columns=_columns(s), headed=True) for s in rising]
    if len(whole) > 1 and _fit_together(whole, look, room_mm):
        lines = [tuple(whole)]
    else:
        most = max(1, int(room_mm / look.narrowest_mm))
        lines = [(part,) for section in sections for part in _parts(section, most)]
    return [
        Row(
            parts=parts, column_mm=_column_mm(parts, room_mm), holes=holes, look=look,
            reference_label=reference_label,
        )
        for parts in lines
    ]  # fmt: skip


def draw_row(row: Row, page: Page, top_mm: float) -> None:
    """Draw a row from its top down."""
    _draw_headings(page, row, top_mm)
    if not row.columns:
        return
    top_mm += row.heading_mm
    _draw_staff(page, row, top_mm)
    top_mm += row.staff_mm
    _draw_note_rules(page, row, top_mm)
    flute_top = top_mm + _NAME_MM
    word_line = flute_top + row.look.flute.height_mm(row.holes) + 3.2
    middle = word_line - 3.2 + _WORD_MM + 0.5 * row.look.scale.height_mm
    numbers_top = middle + 0.5 * row.look.scale.height_mm
    for k, part in enumerate(row.parts):
        left = row.left_mm(k, page.left_mm)
        draw_scale(page, left, left + len(part.columns) * row.column_mm, middle, row.look.scale)
    _draw_gutter(page, row, middle, numbers_top)
    for column, x in zip(row.columns, row.middles_mm(page.left_mm), strict=True):
        entry = column.entry
        _draw_name(page, column, replace(row.look.note, italic=row.foretold), (x, top_mm + 6.4))
        draw_flute(page, x, flute_top, row.look.flute, entry.fingering, outlined=row.foretold)
        page.text(x, word_line, str(entry.fingering), row.look.word, align="center", colour=QUIET)
        draw_deviation(page, (x, middle), row.look.scale, entry.cents, entry.uncertainty_cents)
        _draw_numbers(page, row, entry, (x, numbers_top))


def word_voice(holes: int) -> Type:
    """Return the type that a fingering of so many holes is spelt in."""
    return WORD if holes <= 8 else LONG_WORD


# --- how notes are shared out over rows -----------------------------------------------------------------


def _columns(section: Section) -> tuple[Column, ...]:
    return tuple(
        Column(entry=entry, note=group.note, leads=k == 0)
        for group in section.groups
        for k, entry in enumerate(group.entries)
    )


def _fit_together(parts: Sequence[Part], look: Look, room_mm: float) -> bool:
    """Whether registers have room side by side, and their names over them."""
    column_mm = _column_mm(parts, room_mm)
    row = Row(parts=tuple(parts), column_mm=column_mm, holes=1, look=look, reference_label=None)
    lefts = _heading_lefts(row, 0.0, room_mm)
    ends = [
        left + width_mm(part.section.title, look.heading) + 4.0
        for left, part in zip(lefts, parts, strict=True)
    ]
    clear = all(end <= left for end, left in zip(ends[:-1], lefts[1:], strict=True))
    return column_mm >= look.narrowest_mm and clear and all(part.columns for part in parts)


def _column_mm(parts: Sequence[Part], room_mm: float) -> float:
    columns = sum(len(part.columns) for part in parts)
    return min(WIDEST_COLUMN_MM, (room_mm - PART_GAP_MM * (len(parts) - 1)) / max(1, columns))


def _parts(section: Section, most: int) -> list[Part]:
    """Return a register in as few parts as can be, of at most so many columns each and about even."""
    count = len(section.entries)
    even = ceil(count / max(1, ceil(count / most)))
    tries = [_filled(section, length) for length in range(even, most + 1)]
    parts = min(tries, key=len) if count else [()]
    return [Part(section=section, columns=columns, headed=k == 0) for k, columns in enumerate(parts)]


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


# --- what stands in a row ---------------------------------------------------------------------------------


def _heading_lefts(row: Row, start_mm: float, end_mm: float) -> list[float]:
    """Return where each part's name begins: over its first column, or so that it ends with the page."""
    return [
        min(row.left_mm(k, start_mm), end_mm - width_mm(part.section.title, row.look.heading))
        for k, part in enumerate(row.parts)
    ]


def _draw_headings(page: Page, row: Row, top: float) -> None:
    lefts = _heading_lefts(row, page.left_mm, page.right_mm)
    for part, left, end in zip(row.parts, lefts, [*lefts[1:], page.right_mm + 4.0], strict=True):
        if not part.headed:
            continue
        page.text(left, top + 4.6, part.section.title, row.look.heading)
        after = left + width_mm(part.section.title, row.look.heading) + 4.0
        if after + width_mm(part.section.remark, LABEL) + 4.0 <= end:
            page.text(after, top + 4.6, part.section.remark, LABEL, colour=QUIET)


def _draw_staff(page: Page, row: Row, top: float) -> None:
    leads = [x for column, x in zip(row.columns, row.middles_mm(page.left_mm), strict=True) if column.leads]
    last = len(row.parts) - 1
    right = row.left_mm(last, page.left_mm) + len(row.parts[last].columns) * row.column_mm
    left = page.left_mm - (CLEF_WIDTH + 0.4) * row.look.space_mm
    draw_staff(page, row.staff, (left, top, right), row.look.space_mm, leads)


def _draw_note_rules(page: Page, row: Row, top: float) -> None:
    for k, part in enumerate(row.parts):
        starts = [i for i, column in enumerate(part.columns) if column.leads]
        for start, end in zip(starts, [*starts[1:], len(part.columns)], strict=True):
            left, right = (row.left_mm(k, page.left_mm) + i * row.column_mm for i in (start, end))
            page.line((left + 1.2, top), (right - 1.2, top), colour=QUIET)


def _draw_name(page: Page, column: Column, voice: Type, at_mm: tuple[float, float]) -> None:
    if column.leads:
        draw_note(page, at_mm, column.note, voice)
    else:
        page.text(*at_mm, "or", OR, align="center", colour=QUIET)


def _draw_gutter(page: Page, row: Row, middle: float, numbers_top: float) -> None:
    scale = row.look.scale
    reach = 0.5 * scale.height_mm
    words = [(f"±{scale.tolerance_cents:g}", middle + 0.9)]
    if row.look.detailed:
        words += [
            (f"sharp  +{scale.limit_cents:g}", middle - reach + 2.6),
            (f"flat  {MINUS}{scale.limit_cents:g}", middle + reach - 0.6),
        ]
    words += [(label, numbers_top + depth) for label, depth in _number_lines(row)]
    for label, y in words:
        page.text(page.left_mm - LABEL_GAP_MM, y, label, LABEL, align="right", colour=QUIET)


def _number_lines(row: Row) -> list[tuple[str, float]]:
    """Return the lines of numbers under a scale: label, and depth of its baseline."""
    if not row.look.detailed:
        sure = all(column.entry.reliability >= 1.0 for column in row.columns)
        return [("cents", 4.8)] if sure else [("cents", 4.8), ("takes", 8.5)]
    lines = [("cents", 4.8), ("uncertain", 8.5)]
    if row.reference_label:
        lines.append((row.reference_label, 12.2))
    return [*lines, ("speaks" if row.foretold else "takes", lines[-1][1] + 3.9)]


def _draw_numbers(page: Page, row: Row, entry: Entry, at_mm: tuple[float, float]) -> None:
    x, top = at_mm
    depths = {label: top + depth for label, depth in _number_lines(row)}
    tolerance = row.look.scale.tolerance_cents
    voice, colour = (NUMBER_BOLD, ACCENT) if abs(entry.cents) > tolerance else (NUMBER, INK)
    page.text(x, depths["cents"], cents_text(entry.cents, tolerance), voice, align="center", colour=colour)
    if row.look.detailed:
        doubt = uncertainty_text(entry.uncertainty_cents)
        page.text(x, depths["uncertain"], doubt, SMALL, align="center", colour=QUIET)
    if row.look.detailed and row.reference_label:
        carried = cents_text(entry.cents_at_reference)
        page.text(x, depths[row.reference_label], carried, LABEL, align="center", colour=QUIET)
    if row.look.detailed or entry.reliability < 1.0:
        _draw_takes(page, entry, (x, depths["speaks" if row.foretold else "takes"]))


def _draw_takes(page: Page, entry: Entry, at_mm: tuple[float, float]) -> None:
    """Write in how many takes the fingering spoke, with a bar and in ink only where it did not in all."""
    x, y = at_mm
    always = entry.reliability >= 1.0
    page.text(x, y, spoke_text(entry), SMALL, align="center", colour=QUIET if always else INK)
    if not always:
        draw_share(page, (x, y + 1.4), _SHARE_MM, entry.reliability)
