"""The printed fingering chart of one flute: every fingering, its note, how far off and how sure.

It reads like a page of music. A register is a row of upright flutes from low to high; one rule over them is
one note, with its alternatives after it, best first. Below each flute its deviation stands on a scale (up is
sharp, the band is the tolerance) and under that its numbers. Upper registers come first and are drawn larger.

Conventions: lengths in millimetres, deviations in cents. Drawings shrink together until all fits on as few
pages as it can; type never does.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from math import ceil, isfinite
from pathlib import Path

from matplotlib.figure import Figure

from fluteprobe.pages.contents import Aside, Contents, chart_contents
from fluteprobe.pages.glyphs import Scale, draw_deviation, draw_hole, draw_scale
from fluteprobe.pages.paper import (
    ACCENT,
    HAIRLINE,
    LABEL,
    LEFT_MM,
    MARGIN_MM,
    QUIET,
    SMALL,
    SUBTITLE,
    TITLE_SIZES_PT,
    Page,
    Type,
    house_style,
    paper_size_mm,
    save_pages,
    shortened,
    width_mm,
    wrapped,
)
from fluteprobe.pages.rows import LABEL_GAP_MM, Row, draw_row, look_for, rows_of
from fluteprobe.survey import Entry, Survey

LEAST_SCALE = 2.5  # the deviation scale reaches at least this many tolerances
WIDEST_SCALE_CENTS = 60.0  # no deviation from the nearest note is beyond 50
SIZES = 20  # tried between roomy and tight
MOST_ASIDE_LINES = 12

_LINE_MM = 3.6
_FOOT_MM = 4.0
_TITLE_LINE_MM = 8.0
_WIDEST_GAP_MM = 8.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """A part of the page that is kept together: its height, and how it is drawn from a given top."""

    height_mm: float
    draw: Callable[[Page, float], None]


Book = list[list[Block]]


def write_chart(survey: Survey, target: Path, *, paper: str = "a4", tolerance_cents: float = 10.0) -> None:
    """Write a flute's chart as PDF, PNG or SVG, by the target's suffix.

    A chart that needs a second page gets it: in the same PDF, or as a further picture with `-2` in its name.

    Raises
    ------
    ValueError
        If the paper or the suffix is not known, or the tolerance is not above 0.
    """
    contents = chart_contents(survey, tolerance_cents)
    figures = _figures(contents, paper, tolerance_cents)
    save_pages(figures, target, title=f"{contents.title}: fingering chart", author=contents.maker)


def chart_figures(survey: Survey, *, paper: str = "a4", tolerance_cents: float = 10.0) -> list[Figure]:
    """Return the pages of a flute's chart as figures.

    Raises
    ------
    ValueError
        If the paper is not known or the tolerance is not above 0.
    """
    return _figures(chart_contents(survey, tolerance_cents), paper, tolerance_cents)


def scale_limit_cents(entries: Sequence[Entry], tolerance_cents: float) -> float:
    """Return how far the deviation scale reaches: whole tens that hold each deviation and its uncertainty."""
    reaches = [abs(entry.cents) + entry.uncertainty_cents for entry in entries]
    widest = max((reach for reach in reaches if isfinite(reach)), default=0.0)
    return max(LEAST_SCALE * tolerance_cents, 10.0 * ceil(min(widest, WIDEST_SCALE_CENTS) / 10.0))


def _figures(contents: Contents, paper: str, tolerance_cents: float) -> list[Figure]:
    with house_style():
        book = _fitted(contents, paper, tolerance_cents)
        return [_draw_page(contents, paper, book, k) for k in range(len(book))]


def _fitted(contents: Contents, paper: str, tolerance_cents: float) -> Book:
    """Return the blocks page by page: as few pages as can be, and on those as roomy as can be."""
    books = []
    for step in range(SIZES + 1):
        books.append(_book(contents, paper, tolerance_cents, 1.0 - step / SIZES))
        if len(books[-1]) == 1:
            break
    return min(books, key=len)


def _book(contents: Contents, paper: str, tolerance_cents: float, roomy: float) -> Book:
    width, height = paper_size_mm(paper)
    across, room = width - MARGIN_MM - LEFT_MM, height - 2.0 * MARGIN_MM - _FOOT_MM
    blocks = _blocks(contents, across, tolerance_cents, roomy)
    book: Book = [[]]
    left = room - _header(contents, first=True, room_mm=across).height_mm
    for block in blocks:
        if book[-1] and block.height_mm > left:
            book.append([])
            left = room - _header(contents, first=False, room_mm=across).height_mm
        book[-1].append(block)
        left -= block.height_mm
    return book


def _blocks(contents: Contents, room_mm: float, tolerance_cents: float, roomy: float) -> list[Block]:
    entries = [entry for section in contents.sections for entry in section.entries]
    limit = scale_limit_cents(entries, tolerance_cents)
    rows: list[Row] = []
    for section in contents.sections:
        look = look_for(section.register > 1, roomy, limit, tolerance_cents)
        rows += rows_of(section, look, contents.holes, room_mm, contents.reference_label)
    blocks = [Block(height_mm=row.height_mm, draw=partial(draw_row, row)) for row in rows]
    return [*blocks, _closing(contents, room_mm, tolerance_cents)]


def _draw_page(contents: Contents, paper: str, book: Book, number: int) -> Figure:
    page = Page(paper)
    header = _header(contents, first=number == 0, room_mm=page.right_mm - LEFT_MM)
    header.draw(page, MARGIN_MM)
    blocks, last = book[number], number == len(book) - 1
    top, bottom = MARGIN_MM + header.height_mm, page.bottom_mm - _FOOT_MM
    spare = bottom - top - sum(block.height_mm for block in blocks)
    for block in blocks[:-1] if last else blocks:
        block.draw(page, top)
        top += block.height_mm + min(_WIDEST_GAP_MM, spare / len(blocks))
    if last:
        blocks[-1].draw(page, bottom - blocks[-1].height_mm)
    _draw_foot(page, number + 1, len(book))
    return page.figure


def _draw_foot(page: Page, number: int, pages: int) -> None:
    page.text(LEFT_MM, page.bottom_mm, "measured and drawn with fluteprobe", LABEL, colour=QUIET)
    if pages > 1:
        words = f"page {number} of {pages}"
        page.text(page.right_mm, page.bottom_mm, words, LABEL, align="right", colour=QUIET)


# --- the header --------------------------------------------------------------------------------------------


def _header(contents: Contents, *, first: bool, room_mm: float) -> Block:
    if not first:
        return Block(height_mm=13.0, draw=partial(_draw_running_header, contents))
    lines, voice = _title_lines(contents.title, room_mm)
    height = 26.0 + _TITLE_LINE_MM * (len(lines) - 1)
    return Block(height_mm=height, draw=partial(_draw_header, contents, lines, voice))


def _title_lines(title: str, room_mm: float) -> tuple[list[str], Type]:
    """Return a name as one line as large as fits, or as two lines of the smallest size."""
    voices = [Type(size_pt=size) for size in TITLE_SIZES_PT]
    fitting = next((voice for voice in voices if width_mm(title, voice) <= room_mm), None)
    if fitting:
        return [title], fitting
    first, *rest = wrapped(title.split(), voices[-1], room_mm)
    return [first, *([shortened(" ".join(rest), voices[-1], room_mm)] if rest else [])], voices[-1]


def _draw_header(contents: Contents, lines: Sequence[str], voice: Type, page: Page, top: float) -> None:
    for k, line in enumerate(lines):
        page.text(LEFT_MM, top + 9.0 + _TITLE_LINE_MM * k, line, voice)
    y = top + 15.8 + _TITLE_LINE_MM * (len(lines) - 1)
    beside = page.right_mm - LEFT_MM - width_mm(contents.summary, SUBTITLE) - 5.0
    page.text(LEFT_MM, y, shortened(contents.subtitle, SUBTITLE, beside), SUBTITLE, colour=QUIET)
    page.text(page.right_mm, y, contents.summary, SUBTITLE, align="right", colour=QUIET)
    page.line((LEFT_MM, y + 3.4), (LEFT_MM + 14.0, y + 3.4), colour=ACCENT, pt=1.6)


def _draw_running_header(contents: Contents, page: Page, top: float) -> None:
    words = shortened(contents.title, SUBTITLE, page.right_mm - LEFT_MM)
    page.text(LEFT_MM, top + 3.5, words, SUBTITLE, colour=QUIET)
    page.line((LEFT_MM, top + 6.0), (LEFT_MM + 14.0, top + 6.0), colour=ACCENT, pt=1.6)


# --- what closes the chart: lists, key and conditions ------------------------------------------------------


def _closing(contents: Contents, room_mm: float, tolerance_cents: float) -> Block:
    key = Block(height_mm=16.5, draw=partial(_draw_key, tolerance_cents))
    lists = [_listed(aside, room_mm) for aside in contents.asides]
    conditions = _listed(Aside(label="conditions", items=contents.conditions), room_mm)
    blocks = [*lists, key, conditions]
    return Block(height_mm=sum(block.height_mm for block in blocks), draw=partial(_draw_stacked, blocks))


def _draw_stacked(blocks: Sequence[Block], page: Page, top: float) -> None:
    for block in blocks:
        block.draw(page, top)
        top += block.height_mm


def _listed(aside: Aside, room_mm: float) -> Block:
    lines = wrapped(aside.items, SMALL, room_mm, between="  ·  ")
    if len(lines) > MOST_ASIDE_LINES:
        lines = [*lines[: MOST_ASIDE_LINES - 1], "… and more, in the measurements"]
    return Block(height_mm=_LINE_MM * len(lines) + 1.2, draw=partial(_draw_list, aside.label, lines))


def _draw_list(label: str, lines: Sequence[str], page: Page, top: float) -> None:
    page.text(LEFT_MM - LABEL_GAP_MM, top + 3.2, label, LABEL, align="right", colour=QUIET)
    for k, line in enumerate(lines):
        page.text(LEFT_MM, top + 3.2 + _LINE_MM * k, line, SMALL)


def _draw_key(tolerance_cents: float, page: Page, top: float) -> None:
    page.line((LEFT_MM, top + 1.5), (page.right_mm, top + 1.5), colour=HAIRLINE)
    page.text(LEFT_MM - LABEL_GAP_MM, top + 6.3, "key", LABEL, align="right", colour=QUIET)
    _draw_hole_key(page, LEFT_MM, top + 5.3)
    _draw_deviation_key(page, LEFT_MM, top + 11.3, tolerance_cents)
    page.line((LEFT_MM, top + 15.2), (page.right_mm, top + 15.2), colour=HAIRLINE)


def _draw_hole_key(page: Page, x: float, y: float) -> None:
    for state, word in (("x", "closed"), ("o", "open"), ("h", "half-holed"), ("v", "vented, barely cracked")):
        draw_hole(page, x + 1.9, y, 3.4, state)
        x = _key_words(page, x + 6.0, y, f"{state}  {word}")
    _key_words(page, x, y, "the mouth end is up")


def _draw_deviation_key(page: Page, x: float, y: float, tolerance_cents: float) -> None:
    scale = Scale(height_mm=5.0, limit_cents=3.0 * tolerance_cents, tolerance_cents=tolerance_cents)
    within, off, wide = 0.0, 2.2 * tolerance_cents, 1.1 * tolerance_cents
    marks = (
        (within, 0.0, f"within {tolerance_cents:g} cents"),
        (off, 0.0, "sharper"),
        (-off, 0.0, "flatter"),
        (within, wide, "its uncertainty (standard, k = 1)"),
    )
    for cents, uncertainty, words in marks:
        draw_scale(page, x, x + 3.8, y, scale)
        draw_deviation(page, (x + 1.9, y), scale, cents, uncertainty)
        x = _key_words(page, x + 6.0, y, words)
    page.text(x, y + 1.0, "or", LABEL, colour=QUIET)
    _key_words(page, x + 4.5, y, "for the same note, best first")


def _key_words(page: Page, x: float, y: float, words: str) -> float:
    """Write beside a symbol whose middle is at y, and return where the next symbol starts."""
    page.text(x, y + 1.0, words, SMALL)
    return x + width_mm(words, SMALL) + 5.0
