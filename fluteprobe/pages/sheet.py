"""The take sheet: what to record on a flute, in which order, with each take's file name and a box to tick.

It reads down two columns. A take is a line: its box, its number, the flute with the mouth end at the left,
and its file's name; so the finger that moves from one take to the next shows as a step in a column of holes.
Directions for recording stand over the list, a key under it.

Conventions: lengths in millimetres from the page's top left corner. What does not fit goes on to further
pages; nothing shrinks.
"""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from functools import partial
from itertools import groupby
from math import ceil
from pathlib import Path as File

from matplotlib.figure import Figure
from matplotlib.path import Path

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.plan import PlannedTake, take_plan
from fluteprobe.pages.frame import Head, draw_head
from fluteprobe.pages.glyphs import FluteSize, draw_hole, hole_depth_mm
from fluteprobe.pages.paper import (
    FIRM_PT,
    HAIRLINE,
    INK,
    LABEL,
    MARGIN_MM,
    QUIET,
    SMALL,
    WHITE,
    WOOD,
    Page,
    Type,
    clean,
    house_style,
    paper_size_mm,
    save_pages,
    shortened,
    width_mm,
    wrapped,
)
from fluteprobe.session import Session, Take

MINUTES_A_TAKE = 0.75  # common practice, no source: two seconds of sound, and the naming of its file

GROUP = Type(size_pt=11.5, italic=True)
FILE_NAME = Type(size_pt=10.0)
LONG_FILE_NAME = Type(size_pt=8.5)
LONG_FROM_HOLES = 8
LABEL_BOLD = Type(size_pt=8.0, bold=True)

_BETWEEN_MM = 9.0  # the two columns
_TAKE_MM = 6.5
_LINE_MM = 3.5
_HEADING_MM = 7.6  # with the white over it, down to the first line of the reason
_TITLE_LINE_MM = 4.6
_BOX_MM = 3.2
_FLUTE_FROM_MM = 12.0  # from the column's left edge
_HEAD_MM = 5.0
_WIDEST_HOLE_MM = 3.0
_PITCH = 1.66  # of the hole's diameter: room for the mark beside a cracked hole
_KEY_MM = 12.0

_DIRECTIONS = (
    (
        "Place",
        "A quiet room, without fan or hum. The microphone an arm's length from the sound hole, out of the "
        "breath.",
    ),
    (
        "Level",
        "Try the loudest note first: its peaks stay under −6 dB, nothing is clipped. Then touch neither "
        "level nor distance. Noise reduction and automatic level are off.",
    ),
    (
        "Breath",
        "A second of silence, two seconds of one tone, as steady as you can blow it and without vibrato, a "
        "second of silence.",
    ),
    (
        "Overblown",
        "Where the name says “over”, blow harder until the next register speaks. What will not speak is "
        "worth its file too.",
    ),
    (
        "Files",
        "One take a file, named as below, into the folder “takes”; .flac or .mp3 will do as well. Once "
        "more? End the name in -2.",
    ),
    (
        "Warmth",
        "Play the flute warm before the first take. Note the temperature of the air at the start and at the "
        "end.",
    ),
    (
        "Hearing",
        "The upper registers are loud at the ear. Take breaks, keep others away, wear ear protection; local "
        "rules on noise exposure come first.",
    ),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Line:
    """A part of a column that is not broken: its height, and how it is drawn from its top left corner.

    `leads` where it may not stand last in a column, for what it announces follows.
    """

    height_mm: float
    draw: Callable[[Page, float, float], None]
    leads: bool = False


def write_sheet(
    session: Session,
    target: File,
    *,
    edition: str = "standard",
    paper: str = "a4",
    plan: Sequence[PlannedTake] | None = None,
) -> tuple[File, ...]:
    """Write a session's take sheet as PDF, PNG or SVG, by the target's suffix, and return the files written.

    Takes that the session has already are ticked. A `plan` of its own stands in the place of an edition's.

    Raises
    ------
    ValueError
        If the edition, the paper or the suffix is not known.
    """
    pages = sheet_figures(session, edition=edition, paper=paper, plan=plan)
    title = f"{_name(session)}: take sheet"
    return save_pages(pages, target, title=title, author=clean(session.flute.maker or "") or None)


def sheet_figures(
    session: Session,
    *,
    edition: str = "standard",
    paper: str = "a4",
    plan: Sequence[PlannedTake] | None = None,
) -> list[Figure]:
    """Return the pages of a session's take sheet as figures.

    Raises
    ------
    ValueError
        If the edition or the paper is not known.
    """
    takes = take_plan(session.flute.holes, edition) if plan is None else plan
    with house_style():
        return _figures(session, takes, f"{edition} edition" if plan is None else "what to try next", paper)


def recorded(plan: Sequence[PlannedTake], takes: Iterable[Take]) -> tuple[bool, ...]:
    """Return for every planned take whether it is there: as many of its fingering and breath as it counts."""
    counts: dict[tuple[Fingering, str], int] = {}
    for take in takes:
        key = (take.fingering, take.breath)
        counts[key] = counts.get(key, 0) + 1
    return tuple(counts.get((planned.fingering, planned.breath), 0) >= planned.number for planned in plan)


def minutes(plan: Sequence[PlannedTake]) -> int:
    """Return about how long a plan takes to record, in whole five minutes."""
    return 5 * ceil(MINUTES_A_TAKE * len(plan) / 5.0)


# --- pages -------------------------------------------------------------------------------------------


def _figures(session: Session, plan: Sequence[PlannedTake], which: str, paper: str) -> list[Figure]:
    width, height = paper_size_mm(paper)
    column = 0.5 * (width - 2.0 * MARGIN_MM - _BETWEEN_MM)
    opening = [_directions(column), _blanks(session, width - 2.0 * MARGIN_MM)]
    head, top = _head(session, plan, which), draw_head(Page(paper), Head(title="", kind="", facts=""))
    room = height - MARGIN_MM - _KEY_MM - top
    rooms = [room - _height_mm(opening), room]
    columns = _levelled(_columns(_lines(session, plan, column), rooms), rooms)
    pages = []
    for number, first in enumerate(range(0, len(columns), 2)):
        page = Page(paper)
        free = _draw_down(page, [] if number else opening, MARGIN_MM, draw_head(page, head))
        for k, lines in enumerate(columns[first : first + 2]):
            _draw_down(page, lines, MARGIN_MM + k * (column + _BETWEEN_MM), free)
        _draw_foot(page, number + 1, ceil(len(columns) / 2))
        pages.append(page.figure)
    return pages


def _head(session: Session, plan: Sequence[PlannedTake], which: str) -> Head:
    done = sum(recorded(plan, session.takes))
    there = f", {done} recorded" if done else ""
    holes = session.flute.holes
    return Head(
        title=_name(session),
        kind="take sheet",
        facts=f"{which}  ·  {holes} hole{'' if holes == 1 else 's'}",
        summary=f"{len(plan)} takes{there}  ·  about {minutes(plan)} minutes",
    )


def _name(session: Session) -> str:
    return clean(session.flute.name) or "A flute without a name"


def _columns(lines: Sequence[_Line], rooms_mm: Sequence[float]) -> list[list[_Line]]:
    """Return the lines column by column, two to a page; `rooms_mm` are the first page's and the others'."""
    columns: list[list[_Line]] = [[]]
    for k, line in enumerate(lines):
        room = rooms_mm[0 if len(columns) <= 2 else 1]
        together = line.height_mm + (lines[k + 1].height_mm if line.leads else 0.0)
        if columns[-1] and _height_mm(columns[-1]) + together > room:
            columns.append([])
        columns[-1].append(line)
    return columns


def _levelled(columns: list[list[_Line]], rooms_mm: Sequence[float]) -> list[list[_Line]]:
    """Return the columns with those of the last page broken between groups, about as long as one another."""
    before = len(columns) - (2 - len(columns) % 2)
    lines = [line for column in columns[before:] for line in column]
    breaks = [k for k, line in enumerate(lines) if line.leads and k > 0]

    def longer_mm(k: int) -> float:
        return max(_height_mm(lines[:k]), _height_mm(lines[k:]))

    best = min(breaks, key=longer_mm, default=0)
    if not breaks or longer_mm(best) > rooms_mm[min(before, 1)]:
        return columns
    return [*columns[:before], lines[:best], lines[best:]]


def _height_mm(lines: Iterable[_Line]) -> float:
    return sum(line.height_mm for line in lines)


def _draw_down(page: Page, lines: Sequence[_Line], left: float, top: float) -> float:
    """Draw lines one below the other, and return where the last one ends."""
    for line in lines:
        line.draw(page, left, top)
        top += line.height_mm
    return top


def _draw_foot(page: Page, number: int, pages: int) -> None:
    """Draw the key to the holes, and which page this is."""
    y, x = page.bottom_mm - 5.6, MARGIN_MM
    page.line((MARGIN_MM, y - 3.4), (page.right_mm, y - 3.4), colour=HAIRLINE)
    for state, word in (("x", "closed"), ("o", "open"), ("h", "half-holed"), ("v", "vented, barely cracked")):
        draw_hole(page, x + 1.6, y, 2.8, state)
        page.text(x + 5.8, y + 1.0, f"{state}  {word}", SMALL)
        x += 5.8 + width_mm(f"{state}  {word}", SMALL) + 5.0
    page.text(page.right_mm, y + 1.0, "the mouth end is at the left", SMALL, align="right")
    page.text(MARGIN_MM, page.bottom_mm, "drawn with fluteprobe", LABEL, colour=QUIET)
    if pages > 1:
        words = f"page {number} of {pages}"
        page.text(page.right_mm, page.bottom_mm, words, LABEL, align="right", colour=QUIET)


# --- directions --------------------------------------------------------------------------------------


def _directions(column: float) -> _Line:
    """Return the directions in two columns, each a label with its words beside it."""
    indent = max(width_mm(label, LABEL_BOLD) for label, _ in _DIRECTIONS) + 2.5
    parts = [(label, wrapped(words.split(), SMALL, column - indent)) for label, words in _DIRECTIONS]
    split = (len(parts) + 1) // 2
    sides = (parts[:split], parts[split:])
    tallest = max(sum(_LINE_MM * len(lines) + 0.8 for _, lines in side) for side in sides)
    return _Line(height_mm=tallest + 0.6, draw=partial(_draw_directions, sides, indent, column))


def _draw_directions(  # noqa: PLR0913, PLR0917 - the words, their measures and their place
    sides: Iterable[Sequence[tuple[str, Sequence[str]]]],
    indent: float,
    column: float,
    page: Page,
    left: float,
    top: float,
) -> None:
    for side in sides:
        y = top + 2.8
        for label, lines in side:
            page.text(left, y, label, LABEL_BOLD)
            for line in lines:
                page.text(left + indent, y, line, SMALL)
                y += _LINE_MM
            y += 0.8
        left += column + _BETWEEN_MM


def _blanks(session: Session, room: float) -> _Line:
    """Return the line on which the conditions are noted; what the session knows stands there already."""
    sitting = session.sitting
    air = None if sitting.air_temperature_c is None else f"{sitting.air_temperature_c:g}".replace("-", "−")
    blanks = (
        ("date", sitting.date, 0.19),
        ("air at the start, °C", air, 0.22),
        ("at the end, °C", None, 0.19),
        ("microphone, distance", sitting.microphone, 0.40),
    )
    return _Line(height_mm=11.0, draw=partial(_draw_blanks, blanks, room))


def _draw_blanks(
    blanks: Iterable[tuple[str, str | None, float]], room: float, page: Page, left: float, top: float
) -> None:
    y = top + 6.0
    for label, value, share in blanks:
        start, end = left + width_mm(label, LABEL) + 1.5, left + share * room - (4.0 if share < 0.4 else 0.0)
        page.text(left, y, label, LABEL, colour=QUIET)
        page.line((start, y + 0.9), (end, y + 0.9), colour=QUIET)
        if value:
            page.text(start + 1.0, y, shortened(clean(value), SMALL, end - start - 1.0), SMALL)
        left += share * room


# --- the list ----------------------------------------------------------------------------------------


def _lines(session: Session, plan: Sequence[PlannedTake], column: float) -> list[_Line]:
    ticks, holes = recorded(plan, session.takes), session.flute.holes
    voice = LONG_FILE_NAME if holes >= LONG_FROM_HOLES else FILE_NAME
    expects = max((width_mm(take.expects, SMALL) for take in plan), default=0.0)
    size = _flute_size(holes, column - expects, voice)
    numbered = list(zip(range(1, len(plan) + 1), plan, ticks, strict=True))
    lines: list[_Line] = []
    for _, takes in groupby(numbered, key=lambda item: item[1].group):
        group = list(takes)
        lines.append(_heading(group[0][1], column))
        for number, take, done in group:
            draw = partial(_draw_take, take, number, done, size, voice, column)
            lines.append(_Line(height_mm=_TAKE_MM, draw=draw))
    return lines


def _flute_size(holes: int, column: float, voice: Type) -> FluteSize:
    """Return how large flutes are drawn: as large as the longest file name leaves room for."""
    name = width_mm(f"{'x' * holes}-over-2.wav", voice)
    length = column - _FLUTE_FROM_MM - 3.0 - name
    hole = min(_WIDEST_HOLE_MM, (length - _HEAD_MM - 0.8) / (_PITCH * holes + 0.4))
    return FluteSize(
        hole_mm=hole, pitch_mm=_PITCH * hole, hands_apart_mm=0.4 * hole, head_mm=_HEAD_MM, foot_mm=0.8
    )


def _heading(take: PlannedTake, column: float) -> _Line:
    """Return a group's title with its reason and what that rests on."""
    title = wrapped(take.group.split(), GROUP, column)
    reason = wrapped([*take.why.split(), f"({take.basis})"], LABEL, column)
    height = _HEADING_MM + _TITLE_LINE_MM * (len(title) - 1) + _LINE_MM * len(reason) + 0.9
    return _Line(height_mm=height, draw=partial(_draw_heading, title, reason), leads=True)


def _draw_heading(title: Sequence[str], reason: Sequence[str], page: Page, left: float, top: float) -> None:
    y = top + 6.4
    for line in title:
        page.text(left, y, line, GROUP)
        y += _TITLE_LINE_MM
    for line in reason:
        page.text(left, y - 0.6, line, LABEL, colour=QUIET)
        y += _LINE_MM


def _draw_take(  # noqa: PLR0913, PLR0917 - a line's contents and its place
    take: PlannedTake,
    number: int,
    done: bool,
    size: FluteSize,
    voice: Type,
    column: float,
    page: Page,
    left: float,
    top: float,
) -> None:
    y = top + 0.5 * _TAKE_MM
    _draw_box(page, left, y, done)
    page.text(left + 10.2, y + 1.1, f"{number}", SMALL, align="right", colour=QUIET)
    flute, holes = left + _FLUTE_FROM_MM, take.fingering.holes
    length, half = size.height_mm(holes), min(0.82 * size.hole_mm, 0.5 * _TAKE_MM - 0.6)
    page.path(_body(flute, flute + length, y, half), fill=WOOD)
    page.box((flute + 1.9, y - 0.4 * size.hole_mm), (0.9, 0.8 * size.hole_mm), QUIET)
    for k, state in enumerate(take.fingering.states):
        draw_hole(page, flute + hole_depth_mm(size, k, holes), y, size.hole_mm, state)
    page.text(flute + length + 3.0, y + 1.2, take.file_name, voice)
    page.text(left + column, y + 1.1, take.expects, SMALL, align="right", colour=QUIET)


def _draw_box(page: Page, x: float, y: float, done: bool) -> None:
    """Draw a box to tick, its left side at x and its middle at y; ticked where the take is there."""
    half = 0.5 * _BOX_MM
    corners = [(x, y - half), (x + _BOX_MM, y - half), (x + _BOX_MM, y + half), (x, y + half), (x, y - half)]
    page.path(Path(corners, closed=True), fill=WHITE, edge=QUIET, pt=0.6)
    if done:
        tick = [(x + 0.6, y), (x + 1.4, y + 0.9), (x + _BOX_MM + 0.3, y - half - 0.5)]
        page.path(Path(tick), edge=INK, pt=1.4 * FIRM_PT)


def _body(left: float, right: float, y: float, half: float) -> Path:
    """Return a flute lying down, its rounded mouth end at the left."""
    bend = min(half, 1.6)
    top, bottom = y - half, y + half
    points = [
        (right, top), (left + bend, top), (left, top), (left, top + bend),
        (left, bottom - bend), (left, bottom), (left + bend, bottom), (right, bottom), (right, top),
    ]  # fmt: skip
    go, curve = Path.LINETO, Path.CURVE3
    return Path(points, [Path.MOVETO, go, curve, curve, go, curve, curve, go, Path.CLOSEPOLY])
