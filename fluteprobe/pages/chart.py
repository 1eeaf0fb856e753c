"""The printed fingering chart of one flute: every fingering, its note, how far off and how sure.

It reads like a page of music. A register is a row of upright flutes from low to high; one rule over them is
one note, with its alternatives after it, best first. Below each flute its deviation stands on a scale (up is
sharp, the band is the tolerance) and under that its numbers. Upper registers come first and are drawn larger.

Conventions: lengths in millimetres, deviations in cents. Sizes shrink together until all fits on as few pages
as it can; type never does.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import ceil
from pathlib import Path

from matplotlib.figure import Figure

from fluteprobe.pages.contents import (
    SPEAKS_WELL,
    Aside,
    Contents,
    Section,
    cents_text,
    chart_contents,
    share_text,
    uncertainty_text,
)
from fluteprobe.pages.glyphs import (
    FluteSize,
    Scale,
    draw_deviation,
    draw_flute,
    draw_hole,
    draw_scale,
    draw_share,
)
from fluteprobe.pages.paper import (
    ACCENT,
    BODY,
    HAIRLINE,
    HEADING,
    INK,
    LABEL,
    MARGIN_MM,
    NOTE,
    NOTE_SMALL,
    NUMBER,
    NUMBER_BOLD,
    QUIET,
    SMALL,
    SUBTITLE,
    TITLE,
    WORD,
    Page,
    Type,
    house_style,
    paper_size_mm,
    save_pages,
    shortened,
    width_mm,
    wrapped,
)
from fluteprobe.survey import Entry, Survey

GUTTER_MM = 17.0  # where the rows are named, left of the flutes
WIDEST_COLUMN_MM = 21.0
LEAST_SCALE = 2.5  # the deviation scale reaches at least this many tolerances
WIDEST_SCALE_CENTS = 60.0
STEPS = 20  # sizes tried between roomy and tight

_FEET_MM = 4.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Look:
    """How large one register is drawn."""

    flute: FluteSize
    scale: Scale
    note: Type


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """One fingering on the page; `leads` where it is the first of its note."""

    entry: Entry
    note: str
    leads: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """A part of the page that is kept together: its height, and how it is drawn from a given top."""

    height_mm: float
    draw: Callable[[Page, float], None]


def write_chart(survey: Survey, target: Path, *, paper: str = "a4", tolerance_cents: float = 10.0) -> None:
    """Write a flute's chart as PDF, PNG or SVG, by the target's suffix.

    A chart that needs a second page gets it: in the same PDF, or as a further picture whose name ends in `-2`.

    Raises
    ------
    ValueError
        If the paper or the suffix is not known, or the tolerance is not above 0.
    """
    contents = chart_contents(survey, tolerance_cents)
    figures = _drawn(contents, paper, tolerance_cents)
    author = survey.flute.maker
    save_pages(figures, target, title=f"{contents.title}: fingering chart", author=author)


def chart_figures(survey: Survey, *, paper: str = "a4", tolerance_cents: float = 10.0) -> list[Figure]:
    """Return the pages of a flute's chart as figures.

    Raises
    ------
    ValueError
        If the paper is not known or the tolerance is not above 0.
    """
    return _drawn(chart_contents(survey, tolerance_cents), paper, tolerance_cents)


def scale_limit_cents(entries: Sequence[Entry], tolerance_cents: float) -> float:
    """Return how far the deviation scale reaches: whole tens that hold every deviation with its uncertainty."""
    widest = max((abs(entry.cents) + entry.uncertainty_cents for entry in entries), default=0.0)
    return max(LEAST_SCALE * tolerance_cents, 10.0 * ceil(min(widest, WIDEST_SCALE_CENTS) / 10.0))


def _drawn(contents: Contents, paper: str, tolerance_cents: float) -> list[Figure]:
    with house_style():
        book = _fitted(contents, paper, tolerance_cents)
        return [_draw_page(contents, paper, k, book) for k in range(len(book))]


# --- fitting ---------------------------------------------------------------------------------------------


def _fitted(contents: Contents, paper: str, tolerance_cents: float) -> list[list[Block]]:
    """Return the blocks page by page: as few pages as can be, and on those the roomiest look."""
    books = []
    for step in range(STEPS + 1):
        books.append(_book(contents, paper, tolerance_cents, roomy=1.0 - step / STEPS))
        if len(books[-1]) == 1:
            break
    fewest = min(len(book) for book in books)
    return next(book for book in books if len(book) == fewest)


def _book(contents: Contents, paper: str, tolerance_cents: float, *, roomy: float) -> list[list[Block]]:
    width, height = paper_size_mm(paper)
    limit = scale_limit_cents([e for s in contents.sections for e in s.entries], tolerance_cents)
    blocks = [
        block
        for section in contents.sections
        for block in _section_blocks(contents, section, _look(section, roomy, limit, tolerance_cents), width)
    ]
    blocks += _closing_blocks(contents, tolerance_cents, width - 2.0 * MARGIN_MM - GUTTER_MM)
    pages: list[list[Block]] = [[]]
    room = height - 2.0 * MARGIN_MM - _header(contents, first=True).height_mm - _FEET_MM
    for block in blocks:
        if pages[-1] and block.height_mm > room:
            pages.append([])
            room = height - 2.0 * MARGIN_MM - _header(contents, first=False).height_mm - _FEET_MM
        pages[-1].append(block)
        room -= block.height_mm
    return pages


def _look(section: Section, roomy: float, limit_cents: float, tolerance_cents: float) -> Look:
    upper = section.register > 1

    def between(tight: float, wide: float) -> float:
        return tight + roomy * (wide - tight)

    hole = between(2.7, 4.8 if upper else 3.8)
    flute = FluteSize(hole_mm=hole, pitch_mm=between(1.28, 1.42) * hole, hands_apart_mm=0.45 * hole)
    scale = Scale(
        height_mm=between(13.0, 29.0 if upper else 22.0),
        limit_cents=limit_cents,
        tolerance_cents=tolerance_cents,
    )
    return Look(flute=flute, scale=scale, note=NOTE if upper else NOTE_SMALL)


def _rows(section: Section, most: int) -> list[list[Column]]:
    """Return the section's columns in rows of about equal length, one note's alternatives together."""
    rows = ceil(len(section.entries) / most)
    even = ceil(len(section.entries) / max(rows, 1))
    filled: list[list[Column]] = [[]]
    for group in section.groups:
        if filled[-1] and len(filled[-1]) + len(group.entries) > even:
            filled.append([])
        for k, entry in enumerate(group.entries):
            if len(filled[-1]) == most:
                filled.append([])
            filled[-1].append(Column(entry=entry, note=group.note, leads=k == 0 or not filled[-1]))
    return [row for row in filled if row]


def _least_column_mm(holes: int) -> float:
    return max(13.2, width_mm("x" * holes, WORD) + 2.0)


# --- blocks ----------------------------------------------------------------------------------------------


def _header(contents: Contents, *, first: bool) -> Block:
    if not first:
        return Block(height_mm=12.0, draw=lambda page, top: _draw_running_header(page, top, contents))
    return Block(height_mm=28.0, draw=lambda page, top: _draw_header(page, top, contents))


def _section_blocks(contents: Contents, section: Section, look: Look, width: float) -> list[Block]:
    room = width - 2.0 * MARGIN_MM - GUTTER_MM
    rows = _rows(section, int(room / _least_column_mm(contents.holes)))
    if not rows:
        return [Block(height_mm=14.0, draw=lambda page, top: _draw_heading(page, top, section))]
    column = min(WIDEST_COLUMN_MM, room / max(len(row) for row in rows))
    return [
        _row_block(contents, section, row, look, column, heading=k == 0)
        for k, row in enumerate(rows)
    ]  # fmt: skip


def _row_block(
    contents: Contents,
    section: Section,
    row: Sequence[Column],
    look: Look,
    column_mm: float,
    *,
    heading: bool,
) -> Block:
    above = 9.0 if heading else 0.0
    flute = look.flute.height_mm(contents.holes)
    numbers = 17.5 + (3.8 if contents.reference_label else 0.0)
    height = above + 8.5 + flute + 5.5 + look.scale.height_mm + numbers + 4.0

    def draw(page: Page, top: float) -> None:
        if heading:
            _draw_heading(page, top, section)
        _draw_row(page, top + above, contents, row, look, column_mm)

    return Block(height_mm=height, draw=draw)


def _closing_blocks(contents: Contents, tolerance_cents: float, room: float) -> list[Block]:
    asides = [_aside_block(aside, room) for aside in contents.asides]
    key = Block(height_mm=19.0, draw=lambda page, top: _draw_key(page, top, tolerance_cents))
    lines = _condition_lines(contents, room)
    depth = max((len(value) for _, value in lines), default=0)
    conditions = Block(
        height_mm=8.0 + 3.6 * depth, draw=lambda page, top: _draw_conditions(page, top, lines, room)
    )
    together = [*asides, key, conditions]
    return [_stacked(together)]


def _stacked(blocks: Sequence[Block]) -> Block:
    def draw(page: Page, top: float) -> None:
        for block in blocks:
            block.draw(page, top)
            top += block.height_mm

    return Block(height_mm=sum(block.height_mm for block in blocks), draw=draw)


def _aside_block(aside: Aside, room: float) -> Block:
    lines = wrapped(aside.items, SMALL, room, between="  ·  ")

    def draw(page: Page, top: float) -> None:
        page.text(MARGIN_MM + GUTTER_MM - 2.5, top + 3.4, aside.label, LABEL, align="right", colour=QUIET)
        for k, line in enumerate(lines):
            page.text(MARGIN_MM + GUTTER_MM, top + 3.4 + 3.6 * k, line, SMALL)

    return Block(height_mm=3.6 * len(lines) + 1.4, draw=draw)


# --- drawing ---------------------------------------------------------------------------------------------


def _draw_page(contents: Contents, paper: str, number: int, book: Sequence[Sequence[Block]]) -> Figure:
    page = Page(paper)
    header = _header(contents, first=number == 0)
    header.draw(page, MARGIN_MM)
    blocks = book[number]
    spare = (
        page.bottom_mm - MARGIN_MM - _FEET_MM - header.height_mm - sum(block.height_mm for block in blocks)
    )
    last = number == len(book) - 1
    gap = min(7.0, spare / max(1, len(blocks)))
    top = MARGIN_MM + header.height_mm
    for block in blocks[:-1] if last else blocks:
        block.draw(page, top)
        top += block.height_mm + gap
    if last:
        blocks[-1].draw(page, page.bottom_mm - _FEET_MM - blocks[-1].height_mm)
    if len(book) > 1:
        page.text(
            page.right_mm,
            page.bottom_mm,
            f"page {number + 1} of {len(book)}",
            LABEL,
            align="right",
            colour=QUIET,
        )
    page.text(
        MARGIN_MM + GUTTER_MM, page.bottom_mm, "measured and drawn with fluteprobe", LABEL, colour=QUIET
    )
    return page.figure


def _draw_header(page: Page, top: float, contents: Contents) -> None:
    left, room = MARGIN_MM + GUTTER_MM, page.right_mm - MARGIN_MM - GUTTER_MM
    sizes = (TITLE.size_pt, 26.0, 22.0, 19.0, 16.0)
    voice = next(
        (v for v in (Type(size_pt=s) for s in sizes) if width_mm(contents.title, v) <= room),
        Type(size_pt=sizes[-1]),
    )
    page.text(left, top + 10.0, shortened(contents.title, voice, room), voice)
    summary = width_mm(contents.summary, SUBTITLE)
    page.text(
        left, top + 17.0, shortened(contents.subtitle, SUBTITLE, room - summary - 5.0), SUBTITLE, colour=QUIET
    )
    page.text(page.right_mm, top + 17.0, contents.summary, SUBTITLE, align="right", colour=QUIET)
    page.line((left, top + 20.5), (left + 14.0, top + 20.5), colour=ACCENT, pt=1.6)


def _draw_running_header(page: Page, top: float, contents: Contents) -> None:
    left = MARGIN_MM + GUTTER_MM
    page.text(
        left, top + 4.0, shortened(contents.title, SUBTITLE, page.right_mm - left), SUBTITLE, colour=QUIET
    )
    page.line((left, top + 6.5), (left + 14.0, top + 6.5), colour=ACCENT, pt=1.6)


def _draw_heading(page: Page, top: float, section: Section) -> None:
    left = MARGIN_MM + GUTTER_MM
    page.text(left, top + 5.0, section.title, HEADING)
    page.text(left + width_mm(section.title, HEADING) + 4.0, top + 5.0, section.remark, LABEL, colour=QUIET)


def _draw_row(
    page: Page, top: float, contents: Contents, row: Sequence[Column], look: Look, column_mm: float
) -> None:
    left = MARGIN_MM + GUTTER_MM
    flute_top = top + 8.5
    word_line = flute_top + look.flute.height_mm(contents.holes) + 3.2
    middle = word_line + 2.3 + 0.5 * look.scale.height_mm
    numbers_top = middle + 0.5 * look.scale.height_mm
    draw_scale(page, left, left + column_mm * len(row), middle, look.scale)
    _draw_scale_labels(page, middle, look.scale)
    _draw_number_labels(page, numbers_top, contents)
    _draw_note_rules(page, top, row, column_mm)
    for k, column in enumerate(row):
        x = left + (k + 0.5) * column_mm
        _draw_name(page, x, top + 6.3, column, look)
        draw_flute(page, x, flute_top, look.flute, column.entry.fingering)
        page.text(x, word_line, str(column.entry.fingering), WORD, align="center", colour=QUIET)
        draw_deviation(page, x, middle, look.scale, column.entry.cents, column.entry.uncertainty_cents)
        _draw_numbers(page, x, numbers_top, contents, column.entry, look.scale.tolerance_cents)


def _draw_note_rules(page: Page, top: float, row: Sequence[Column], column_mm: float) -> None:
    """Draw one rule over each note's columns."""
    starts = [k for k, column in enumerate(row) if column.leads]
    for start, end in zip(starts, [*starts[1:], len(row)], strict=True):
        left = MARGIN_MM + GUTTER_MM
        page.line((left + start * column_mm + 1.2, top), (left + end * column_mm - 1.2, top), colour=QUIET)


def _draw_name(page: Page, x: float, y: float, column: Column, look: Look) -> None:
    if column.leads:
        page.text(x, y, column.note, look.note, align="center")
    else:
        page.text(x, y, "or", SUBTITLE, align="center", colour=QUIET)


def _draw_scale_labels(page: Page, middle: float, scale: Scale) -> None:
    right, reach = MARGIN_MM + GUTTER_MM - 2.5, 0.5 * scale.height_mm
    page.text(
        right, middle - reach + 2.6, f"sharp  +{scale.limit_cents:g}", LABEL, align="right", colour=QUIET
    )
    page.text(right, middle + 1.0, f"±{scale.tolerance_cents:g}", LABEL, align="right", colour=QUIET)
    page.text(
        right, middle + reach - 0.8, f"flat  −{scale.limit_cents:g}", LABEL, align="right", colour=QUIET
    )


def _draw_number_labels(page: Page, top: float, contents: Contents) -> None:
    right = MARGIN_MM + GUTTER_MM - 2.5
    for label, y in _number_lines(contents, top):
        page.text(right, y, label, LABEL, align="right", colour=QUIET)


def _number_lines(contents: Contents, top: float) -> list[tuple[str, float]]:
    """Return the rows of numbers under a scale: label and baseline."""
    lines = [("cents", top + 4.4), ("uncertain", top + 8.1)]
    if contents.reference_label:
        lines.append((contents.reference_label, lines[-1][1] + 3.8))
    lines.append(("speaks", lines[-1][1] + 4.2))
    lines.append(("takes", lines[-1][1] + 5.0))
    return lines


def _draw_numbers(
    page: Page, x: float, top: float, contents: Contents, entry: Entry, tolerance_cents: float
) -> None:
    ys = [y for _, y in _number_lines(contents, top)]
    off = abs(entry.cents) > tolerance_cents
    page.text(
        x,
        ys[0],
        cents_text(entry.cents),
        NUMBER_BOLD if off else NUMBER,
        align="center",
        colour=ACCENT if off else INK,
    )
    page.text(x, ys[1], uncertainty_text(entry.uncertainty_cents), SMALL, align="center", colour=QUIET)
    if contents.reference_label:
        page.text(x, ys[2], cents_text(entry.cents_at_reference), LABEL, align="center", colour=QUIET)
    page.text(
        x,
        ys[-2],
        share_text(entry.reliability),
        SMALL,
        align="center",
        colour=INK if entry.reliability < SPEAKS_WELL else QUIET,
    )
    draw_share(page, x, ys[-2] + 1.3, 7.0, entry.reliability)
    page.text(x, ys[-1], str(len(entry.takes)), SMALL, align="center", colour=QUIET)


def _draw_key(page: Page, top: float, tolerance_cents: float) -> None:
    left = MARGIN_MM + GUTTER_MM
    page.line((left, top + 1.5), (page.right_mm, top + 1.5), colour=HAIRLINE)
    page.text(left - 2.5, top + 7.0, "key", LABEL, align="right", colour=QUIET)
    _draw_hole_key(page, left, top + 6.0)
    _draw_deviation_key(page, left, top + 12.5, tolerance_cents)


def _draw_hole_key(page: Page, x: float, y: float) -> None:
    for state, word in (("x", "closed"), ("o", "open"), ("h", "half-holed"), ("v", "vented, barely cracked")):
        draw_hole(page, x + 1.9, y, 3.4, state)
        x = _key_words(page, x + 6.0, y, f"{state}  {word}")
    _key_words(page, x, y, "flutes stand mouth end up")


def _draw_deviation_key(page: Page, x: float, y: float, tolerance_cents: float) -> None:
    scale = Scale(height_mm=5.0, limit_cents=3.0 * tolerance_cents, tolerance_cents=tolerance_cents)
    in_tune, sharp = 0.0, 2.2 * tolerance_cents
    marks = ((in_tune, "within the band"), (sharp, "sharp of it"), (-sharp, "flat of it"))
    for cents, words in marks:
        draw_scale(page, x, x + 3.8, y, scale)
        draw_deviation(page, x + 1.9, y, scale, cents, 0.0)
        x = _key_words(page, x + 6.0, y, words)
    draw_scale(page, x, x + 3.8, y, scale)
    draw_deviation(page, x + 1.9, y, scale, 0.0, 1.1 * tolerance_cents)
    x = _key_words(page, x + 6.0, y, "uncertainty (standard, k = 1)")
    page.text(x, y + 0.95, "or", LABEL, colour=QUIET)
    _key_words(page, x + 5.0, y, "the same note again, best first")


def _key_words(page: Page, x: float, y: float, words: str) -> float:
    """Write beside a symbol whose middle is at y, and return where the next symbol starts."""
    page.text(x, y + 0.95, words, SMALL)
    return x + width_mm(words, SMALL) + 5.5


def _condition_lines(contents: Contents, room: float) -> list[tuple[str, list[str]]]:
    cell = room / max(len(contents.conditions), 1) - 3.0
    lines = []
    for label, value in contents.conditions:
        parts = wrapped(value.split(), BODY, cell)
        lines.append(
            (label, parts if len(parts) <= 3 else [*parts[:2], shortened(parts[2] + " …", BODY, cell)])
        )
    return lines


def _draw_conditions(page: Page, top: float, lines: Sequence[tuple[str, Sequence[str]]], room: float) -> None:
    left = MARGIN_MM + GUTTER_MM
    cell = room / max(len(lines), 1)
    for k, (label, parts) in enumerate(lines):
        page.text(left + k * cell, top + 3.6, label, LABEL, colour=QUIET)
        for j, part in enumerate(parts):
            page.text(left + k * cell, top + 7.4 + 3.6 * j, part, BODY)
