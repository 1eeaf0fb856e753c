"""The printed fingering chart of one flute: every fingering, its note, how far off and how sure.

It reads like a page of music. A register is a row of upright flutes from low to high, with its notes on a
staff above; one rule over several flutes is one note, with its alternatives after it, best first. Below each
flute its deviation stands on a scale (up is sharp, the band is the tolerance) and under that its numbers.
Upper registers come first and are drawn larger. A card for the flute's case has the same rows, with one
fingering for each note.

Conventions: lengths in millimetres of the page as it is drawn on (see `Page`), deviations in cents. Drawings
shrink together until all fits on as few pages as it can; type never does.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from math import ceil, isfinite
from pathlib import Path

from matplotlib.figure import Figure

from fluteprobe.flute.fingering import STATES
from fluteprobe.forecast.values import Prediction
from fluteprobe.pages.contents import Aside, Contents, chart_contents
from fluteprobe.pages.glyphs import FluteSize, Scale
from fluteprobe.pages.key import draw_key, key_of
from fluteprobe.pages.paper import (
    ACCENT,
    CARDS,
    HEADING,
    LABEL,
    NOTE,
    NOTE_SMALL,
    PNG_DOTS_PER_INCH,
    QUIET,
    SMALL,
    SUBTITLE,
    TITLE_SIZES_PT,
    Page,
    Type,
    gutter_mm,
    house_style,
    margin_mm,
    paper_size_mm,
    save_pages,
    shortened,
    width_mm,
    wrapped,
)
from fluteprobe.pages.rows import (
    LABEL_GAP_MM,
    NARROWEST_COLUMN_MM,
    Look,
    Row,
    draw_row,
    rows_of,
    word_voice,
)
from fluteprobe.survey import Entry, Survey

LEAST_SCALE = 2.5  # the deviation scale reaches at least this many tolerances
WIDEST_SCALE_CENTS = 60.0  # no deviation from the nearest note is beyond 50
SIZES = 20  # tried between roomy and tight
MOST_ASIDE_LINES = 12
LARGE_PRINT = 1.3  # how much larger everything is, to be read from a music stand
CARD_PRINT = 0.875  # and on a card: the smallest type there, 8 points, becomes 7

_LINE_MM = 3.6
_FOOT_MM = 4.0
_TITLE_LINE_MM = 8.0
_SUBTITLE_LINE_MM = 5.0
_WIDEST_GAP_MM = 8.0
_NARROWEST_CARD_COLUMN_MM = 9.5
_CARD_TITLES_PT = (20.0, 17.0, 14.0)
_CARD_NOTE = Type(size_pt=14.0)
_CARD_HEADING = Type(size_pt=12.0, italic=True)
_CARD_SUBTITLE = Type(size_pt=9.0, italic=True)


@dataclass(frozen=True, slots=True, kw_only=True)
class Edition:
    """What the chart is printed on, how large, and how far off still counts as tuned."""

    paper: str
    magnified: float
    tolerance_cents: float

    @property
    def is_card(self) -> bool:
        """Whether this is a card: the best fingering of each note, and little else."""
        return self.paper.lower() in CARDS

    @property
    def across_mm(self) -> float:
        """The width of the drawings."""
        width_mm, _ = self._inner_mm()
        return width_mm - gutter_mm(self.paper)

    @property
    def down_mm(self) -> float:
        """The height between the margins, without the foot."""
        _, height_mm = self._inner_mm()
        return height_mm - _FOOT_MM

    def page(self) -> Page:
        """Return an empty page."""
        return Page(self.paper, magnified=self.magnified)

    def _inner_mm(self) -> tuple[float, float]:
        width, height = paper_size_mm(self.paper)
        margins = 2.0 * margin_mm(self.paper)
        return (width - margins) / self.magnified, (height - margins) / self.magnified


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """A part of the page that is kept together: its height, and how it is drawn from a given top."""

    height_mm: float
    draw: Callable[[Page, float], None]


Book = list[list[Block]]


def write_chart(  # noqa: PLR0913 - what a maker may choose about the page
    survey: Survey,
    target: Path,
    *,
    paper: str = "a4",
    large: bool = False,
    tolerance_cents: float = 10.0,
    dots_per_inch: float = PNG_DOTS_PER_INCH,
    foretold: Sequence[Prediction] = (),
) -> tuple[Path, ...]:
    """Write a flute's chart as PDF, PNG or SVG, by the target's suffix, and return the files written.

    What is `foretold` stands in a row of its own, as outlines, under what was played. A chart that needs a
    second page gets it: in the same PDF, or as a further picture with `-2` in its name.

    Raises
    ------
    ValueError
        If the paper or the suffix is not known, the tolerance is not above 0, or a card is to be large.
    """
    edition = edition_of(paper, large=large, tolerance_cents=tolerance_cents)
    contents = chart_contents(survey, tolerance_cents, best_only=edition.is_card, foretold=foretold)
    title = f"{contents.title}: fingering chart"
    figures = _figures(contents, edition)
    return save_pages(figures, target, title=title, author=contents.maker, dots_per_inch=dots_per_inch)


def chart_figures(
    survey: Survey,
    *,
    paper: str = "a4",
    large: bool = False,
    tolerance_cents: float = 10.0,
    foretold: Sequence[Prediction] = (),
) -> list[Figure]:
    """Return the pages of a flute's chart as figures.

    Raises
    ------
    ValueError
        If the paper is not known, the tolerance is not above 0, or a card is to be large.
    """
    edition = edition_of(paper, large=large, tolerance_cents=tolerance_cents)
    contents = chart_contents(survey, tolerance_cents, best_only=edition.is_card, foretold=foretold)
    return _figures(contents, edition)


def edition_of(paper: str, *, large: bool, tolerance_cents: float) -> Edition:
    """Return what a chart is printed on and how large.

    Raises
    ------
    ValueError
        If the paper is not known, or a card is to be large.
    """
    paper_size_mm(paper)
    card = paper.lower() in CARDS
    if card and large:
        raise ValueError(f"large print needs a larger paper than {paper}")
    magnified = CARD_PRINT if card else LARGE_PRINT if large else 1.0
    return Edition(paper=paper, magnified=magnified, tolerance_cents=tolerance_cents)


def scale_limit_cents(entries: Sequence[Entry], tolerance_cents: float) -> float:
    """Return how far the deviation scale reaches: whole tens that hold each deviation and its uncertainty."""
    reaches = [abs(entry.cents) + entry.uncertainty_cents for entry in entries]
    widest = max((reach for reach in reaches if isfinite(reach)), default=0.0)
    return max(LEAST_SCALE * tolerance_cents, 10.0 * ceil(min(widest, WIDEST_SCALE_CENTS) / 10.0))


def _figures(contents: Contents, edition: Edition) -> list[Figure]:
    with house_style():
        book = _fitted(contents, edition)
        return [_draw_page(contents, edition, book, k) for k in range(len(book))]


def _fitted(contents: Contents, edition: Edition) -> Book:
    """Return the blocks page by page: as few pages as can be, and on those as roomy as can be.

    What was played is kept together on the first page, if it can be, where something foretold follows.
    """
    books: list[Book] = []
    for step in range(SIZES + 1):
        book, fits = _book(contents, edition, 1.0 - step / SIZES)
        if fits or step == SIZES:
            books.append(book)
        if fits and len(book) == 1:
            break
    together = any(section.foretold for section in contents.sections)
    return min(books, key=lambda book: (len(book), -len(book[0]) if together else 0))


def _book(contents: Contents, edition: Edition, roomy: float) -> tuple[Book, bool]:
    """Return the blocks page by page, and whether each of them fits its page."""
    book: Book = [[]]
    left = edition.down_mm - _header(contents, edition, first=True).height_mm
    fits = True
    for block in _blocks(contents, edition, roomy):
        if book[-1] and block.height_mm > left:
            book.append([])
            left = edition.down_mm - _header(contents, edition, first=False).height_mm
        book[-1].append(block)
        left -= block.height_mm
        fits = fits and left >= 0.0
    return book, fits


def _blocks(contents: Contents, edition: Edition, roomy: float) -> list[Block]:
    entries = [entry for section in contents.sections for entry in section.entries]
    limit = scale_limit_cents(entries, edition.tolerance_cents)
    shown = [section for section in contents.sections if section.groups or not edition.is_card]
    played, foretold = ([s for s in shown if s.foretold == later] for later in (False, True))
    upper, first = ([s for s in played if (s.register > 1) == above] for above in (True, False))
    rows: list[Row] = []
    for sections, label in (
        (upper, contents.reference_label),
        (first, contents.reference_label),
        (foretold, None),
    ):
        look = _look(edition, contents.holes, limit, upper=sections is upper, roomy=roomy)
        rows += rows_of(sections, look, contents.holes, edition.across_mm, label)
    blocks = [Block(height_mm=row.height_mm, draw=partial(draw_row, row)) for row in rows]
    return [*blocks, _closing(contents, edition)]


def _look(edition: Edition, holes: int, limit_cents: float, *, upper: bool, roomy: float) -> Look:
    """Return the look of the upper registers or of the first, from 0 (tight) to 1 (roomy)."""

    def between(tight: float, wide: float) -> float:
        return tight + roomy * (wide - tight)

    card = edition.is_card
    hole = between(1.9 if card else 2.7 if upper else 2.4, 5.6 if upper else 4.0)
    height = between(7.0 if card else 12.0 if upper else 9.0, 28.0 if upper else 20.0)
    word = SMALL if card else word_voice(holes)
    narrowest = _NARROWEST_CARD_COLUMN_MM if card else NARROWEST_COLUMN_MM
    return Look(
        flute=FluteSize(hole_mm=hole, pitch_mm=between(1.22, 1.36) * hole, hands_apart_mm=0.4 * hole),
        scale=Scale(height_mm=height, limit_cents=limit_cents, tolerance_cents=edition.tolerance_cents),
        space_mm=between(1.3 if upper and not card else 1.15, 1.75 if upper else 1.5),
        heading=_CARD_HEADING if card else HEADING,
        note=_CARD_NOTE if card else NOTE if upper else NOTE_SMALL,
        word=word,
        narrowest_mm=max(narrowest, width_mm("x" * holes, word) + 0.9),
        detailed=not card,
    )


def _draw_page(contents: Contents, edition: Edition, book: Book, number: int) -> Figure:
    page = edition.page()
    header = _header(contents, edition, first=number == 0)
    header.draw(page, page.margin_mm)
    blocks, last = book[number], number == len(book) - 1
    top, bottom = page.margin_mm + header.height_mm, page.bottom_mm - _FOOT_MM
    spare = bottom - top - sum(block.height_mm for block in blocks)
    for block in blocks[:-1] if last else blocks:
        block.draw(page, top)
        top += block.height_mm + min(_WIDEST_GAP_MM, spare / len(blocks))
    if last:
        blocks[-1].draw(page, bottom - blocks[-1].height_mm)
    _draw_foot(page, number + 1, len(book))
    return page.figure


def _draw_foot(page: Page, number: int, pages: int) -> None:
    page.text(page.left_mm, page.bottom_mm, "measured and drawn with fluteprobe", LABEL, colour=QUIET)
    if pages > 1:
        words = f"page {number} of {pages}"
        page.text(page.right_mm, page.bottom_mm, words, LABEL, align="right", colour=QUIET)


# --- the header --------------------------------------------------------------------------------------------


def _header(contents: Contents, edition: Edition, *, first: bool) -> Block:
    if edition.is_card:
        return Block(height_mm=17.0, draw=partial(_draw_card_header, contents))
    if not first:
        return Block(height_mm=13.0, draw=partial(_draw_running_header, contents))
    lines, voice = _title_lines(contents.title, edition.across_mm)
    height = 26.0 + _TITLE_LINE_MM * (len(lines) - 1)
    if not _fit_beside(contents, edition.across_mm):
        height += _SUBTITLE_LINE_MM
    return Block(height_mm=height, draw=partial(_draw_header, contents, lines, voice))


def _title_lines(title: str, room_mm: float) -> tuple[list[str], Type]:
    """Return a name as one line as large as fits, or as two lines of the smallest size."""
    voices = [Type(size_pt=size) for size in TITLE_SIZES_PT]
    fitting = next((voice for voice in voices if width_mm(title, voice) <= room_mm), None)
    if fitting:
        return [title], fitting
    first, *rest = wrapped(title.split(), voices[-1], room_mm)
    return [first, *([shortened(" ".join(rest), voices[-1], room_mm)] if rest else [])], voices[-1]


def _fit_beside(contents: Contents, room_mm: float) -> bool:
    """Whether the subtitle and the summary fit on one line."""
    return width_mm(contents.subtitle, SUBTITLE) + width_mm(contents.summary, SUBTITLE) + 5.0 <= room_mm


def _draw_header(contents: Contents, lines: Sequence[str], voice: Type, page: Page, top: float) -> None:
    left, room = page.left_mm, page.right_mm - page.left_mm
    for k, line in enumerate(lines):
        page.text(left, top + 9.0 + _TITLE_LINE_MM * k, line, voice)
    y = top + 15.8 + _TITLE_LINE_MM * (len(lines) - 1)
    page.text(left, y, shortened(contents.subtitle, SUBTITLE, room), SUBTITLE, colour=QUIET)
    if _fit_beside(contents, room):
        page.text(page.right_mm, y, contents.summary, SUBTITLE, align="right", colour=QUIET)
    else:
        y += _SUBTITLE_LINE_MM
        page.text(left, y, contents.summary, SUBTITLE, colour=QUIET)
    page.line((left, y + 3.4), (left + 14.0, y + 3.4), colour=ACCENT, pt=1.6)


def _draw_running_header(contents: Contents, page: Page, top: float) -> None:
    words = shortened(contents.title, SUBTITLE, page.right_mm - page.left_mm)
    page.text(page.left_mm, top + 3.5, words, SUBTITLE, colour=QUIET)
    page.line((page.left_mm, top + 6.0), (page.left_mm + 14.0, top + 6.0), colour=ACCENT, pt=1.6)


def _draw_card_header(contents: Contents, page: Page, top: float) -> None:
    """Write the name, and beside it what kind of flute it is as far as there is room."""
    left, room = page.margin_mm, page.right_mm - page.margin_mm
    voices = [Type(size_pt=size) for size in _CARD_TITLES_PT]
    voice = next((v for v in voices if width_mm(contents.title, v) <= room), voices[-1])
    title = shortened(contents.title, voice, room)
    page.text(left, top + 6.0, title, voice)
    page.line((left, top + 11.6), (left + 10.0, top + 11.6), colour=ACCENT, pt=1.4)
    words = shortened(contents.subtitle, _CARD_SUBTITLE, room - 12.0)
    page.text(page.right_mm, top + 12.4, words, _CARD_SUBTITLE, align="right", colour=QUIET)


# --- what closes the chart: lists, key and conditions ------------------------------------------------------


def _closing(contents: Contents, edition: Edition) -> Block:
    blocks = [_listed(aside, edition) for aside in contents.asides]
    blocks.append(_key(contents, edition))
    blocks.append(_listed(Aside(label="conditions", items=contents.conditions), edition))
    return Block(height_mm=sum(block.height_mm for block in blocks), draw=partial(_draw_stacked, blocks))


def _draw_stacked(blocks: Sequence[Block], page: Page, top: float) -> None:
    for block in blocks:
        block.draw(page, top)
        top += block.height_mm


def _listed(aside: Aside, edition: Edition) -> Block:
    lines = wrapped(aside.items, SMALL, edition.across_mm, between="  ·  ")
    most = 1 if edition.is_card else MOST_ASIDE_LINES
    if len(lines) > most:
        lines = [*lines[: most - 1], "… and more, in the measurements"] if most > 1 else lines[:1]
    label = "" if edition.is_card else aside.label
    return Block(height_mm=_LINE_MM * len(lines) + 1.2, draw=partial(_draw_list, label, lines))


def _draw_list(label: str, lines: Sequence[str], page: Page, top: float) -> None:
    page.text(page.left_mm - LABEL_GAP_MM, top + 3.2, label, LABEL, align="right", colour=QUIET)
    for k, line in enumerate(lines):
        page.text(page.left_mm, top + 3.2 + _LINE_MM * k, line, SMALL)


def _key(contents: Contents, edition: Edition) -> Block:
    used = {state for s in contents.sections for entry in s.entries for state in str(entry.fingering)}
    states = used if edition.is_card else STATES
    key = key_of(states, edition.tolerance_cents, edition.across_mm, brief=edition.is_card)
    return Block(height_mm=key.height_mm, draw=partial(draw_key, key))
