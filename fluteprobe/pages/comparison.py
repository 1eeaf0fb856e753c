"""The comparison's page: every note a line, every flute a column, and beside them how far they lie apart.

A column says at a glance what a flute plays: a dot is a note within the tolerance, a wedge points to where it
is off, nothing is a note that it does not play; a frame is a note that stands out from the others. The strip
to the right shows all flutes on one scale of cents, with the middle half of the group's scatter behind them;
two flutes have their difference in numbers. It is the same page for two flutes and for thirty; of still more,
how many play a note takes the columns' place.

Conventions: lengths in millimetres, deviations in cents off equal temperament at the comparison's A4. Low
notes are at the bottom. Lines grow closer until as few pages as can be hold all; type never shrinks.
"""

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import partial
from math import ceil
from pathlib import Path

from matplotlib.figure import Figure
from matplotlib.path import Path as Outline

from fluteprobe.compare.values import Cell, Comparison, Difference, Row
from fluteprobe.flute.fingering import Fingering
from fluteprobe.pages.contents import cents_text, note_text, uncertainty_text
from fluteprobe.pages.findings import Finding, findings_of
from fluteprobe.pages.frame import Head, draw_foot, draw_head
from fluteprobe.pages.glyphs import draw_share
from fluteprobe.pages.marks import (
    HOLE_PITCH_MM,
    MARK_MM,
    draw_flutes_shape,
    draw_frame,
    draw_lying,
    draw_mark,
    draw_middle,
    draw_register,
)
from fluteprobe.pages.paper import (
    ACCENT,
    BAND,
    FINE_PT,
    FIRM_PT,
    HAIRLINE,
    INK,
    LABEL,
    MARGIN_MM,
    PNG_DOTS_PER_INCH,
    QUIET,
    SMALL,
    WING,
    Page,
    Type,
    clean,
    house_style,
    save_pages,
    shortened,
    width_mm,
    wrapped,
)

MOST_COLUMNS = 36
NUMBERED_UP_TO = 8  # columns with room for a number beside the mark
SHAPED_UP_TO = 3  # flutes that can be told apart on the strip, each with its uncertainty
LIMITS_CENTS = (20.0, 30.0, 40.0, 60.0, 100.0)

_LEAST_ROW_MM, _MOST_ROW_MM = 4.4, 12.0
_NOTE_MM, _DOTS_MM = 11.0, 5.0
_WIDEST_COLUMN_MM, _STRIP_MM, _WIDE_STRIP_MM = 24.0, 46.0, 88.0
_DOUBT_FROM_MM = 19.0  # columns with room for an uncertainty too
_NUMBERS_MM, _DIFFERENCE_MM = 21.0, 48.0
_GAP_MM = 4.0
_HEADS_MM, _STAGGER_MM = 7.0, 2.6
_LINE_MM = 3.7
_LABEL_MM = 24.0
_KEY_MM, _KEY_LINE_MM = 12.6, 4.6
_FOOT_MM = 5.0
_MOST_NAME_LINES, _MOST_NAMES = 5, 80
_NOTE, _NUMBER, _BOLD = Type(size_pt=10.0), Type(size_pt=8.5), Type(size_pt=8.5, bold=True)
_COLUMN = Type(size_pt=7.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """Where things stand on every page of a comparison, and how large."""

    comparison: Comparison
    tolerance_cents: float
    limit_cents: float
    left_mm: float
    column_mm: float
    strip_mm: tuple[float, float]
    row_mm: float
    top_mm: float

    @property
    def has_columns(self) -> bool:
        """Whether every flute has a column of its own."""
        return len(self.comparison.flutes) <= MOST_COLUMNS

    @property
    def is_pair(self) -> bool:
        """Whether two flutes are compared, which have their difference in numbers."""
        return len(self.comparison.flutes) == 2

    def middle_mm(self, flute: int) -> float:
        """Return the middle of a flute's column."""
        return self.left_mm + (flute + 0.5) * self.column_mm

    def x_mm(self, cents: float) -> float:
        """Return where a deviation stands on the strip, held inside it."""
        left, right = self.strip_mm
        held = max(-self.limit_cents, min(self.limit_cents, cents))
        return 0.5 * (left + right) + 0.5 * (right - left) * held / self.limit_cents


def write_comparison(
    comparison: Comparison,
    target: Path,
    *,
    paper: str = "a4",
    tolerance_cents: float = 10.0,
    dots_per_inch: float = PNG_DOTS_PER_INCH,
) -> tuple[Path, ...]:
    """Write a comparison's pages as PDF, PNG or SVG, by the target's suffix; return the files written.

    Raises
    ------
    ValueError
        If the paper or the suffix is not known.
    """
    figures = comparison_figures(comparison, paper=paper, tolerance_cents=tolerance_cents)
    title = f"{title_of(comparison)}: comparison"
    return save_pages(figures, target, title=title, author=None, dots_per_inch=dots_per_inch)


def comparison_figures(
    comparison: Comparison, *, paper: str = "a4", tolerance_cents: float = 10.0
) -> list[Figure]:
    """Return a comparison's pages as figures.

    Raises
    ------
    ValueError
        If the paper is not known.
    """
    with house_style():
        page = Page(paper)
        findings = findings_of(comparison, page.right_mm - MARGIN_MM - _LABEL_MM)
        top, bottom = _rows_top_mm(comparison, page), _rows_bottom_mm(findings, page)
        rows = comparison.rows[::-1]
        pages = max(1, ceil(len(rows) * _LEAST_ROW_MM / (bottom - top)))
        length = ceil(len(rows) / pages)
        row_mm = max(_LEAST_ROW_MM, min(_MOST_ROW_MM, (bottom - top) / max(length, 1)))
        plan = _plan(comparison, tolerance_cents, page, top, row_mm)
        parts = [rows[k * length : (k + 1) * length] for k in range(pages)]
        return [_draw_page(plan, paper, part, findings, (k, pages)) for k, part in enumerate(parts, start=1)]


def title_of(comparison: Comparison) -> str:
    """Return what is compared, in a few words: one instrument, two flutes by name, or how many."""
    flutes = comparison.flutes
    if comparison.is_one_instrument:
        return clean(flutes[0].facts.name) or "A flute without a name"
    if len(flutes) == 2:
        return " and ".join(clean(flute.label) for flute in flutes)
    return f"{len(flutes)} flutes"


def short_names(comparison: Comparison) -> tuple[str, ...]:
    """Return the flutes' labels, without the name of the flute where all are sittings with one."""
    labels = [clean(flute.label) for flute in comparison.flutes]
    if not comparison.is_one_instrument:
        return tuple(labels)
    name = f"{clean(comparison.flutes[0].facts.name)}, "
    return tuple(label.removeprefix(name) or label for label in labels)


def limit_cents(rows: Iterable[Row]) -> float:
    """Return how far the strip of cents reaches; what is beyond stands at its end."""
    reaches = sorted(abs(cell.cents) for row in rows for cell in row.played)
    if not reaches:
        return LIMITS_CENTS[0]
    reach = reaches[int(0.98 * (len(reaches) - 1))]  # a few far off do not press all others together
    return next((limit for limit in LIMITS_CENTS if reach <= limit), LIMITS_CENTS[-1])


# --- where things stand ------------------------------------------------------------------------------------


def _plan(comparison: Comparison, tolerance_cents: float, page: Page, top: float, row_mm: float) -> Plan:
    flutes = len(comparison.flutes)
    holes = max(flute.facts.holes for flute in comparison.flutes)
    named = _NOTE_MM + (HOLE_PITCH_MM * holes + _DOTS_MM if comparison.by == "fingering" else _DOTS_MM)
    left = MARGIN_MM + named + _GAP_MM
    strip_right = page.right_mm - (_DIFFERENCE_MM if flutes == 2 else _NUMBERS_MM)
    room = strip_right - (_STRIP_MM if flutes <= MOST_COLUMNS else _WIDE_STRIP_MM) - _GAP_MM - left
    column = min(_WIDEST_COLUMN_MM, room / flutes) if flutes <= MOST_COLUMNS else room
    columns = flutes if flutes <= MOST_COLUMNS else 1
    return Plan(
        comparison=comparison,
        tolerance_cents=tolerance_cents,
        limit_cents=max(limit_cents(comparison.rows), 1.5 * tolerance_cents),
        left_mm=left,
        column_mm=column,
        strip_mm=(left + columns * column + _GAP_MM, strip_right),
        row_mm=row_mm,
        top_mm=top,
    )


def _name_lines(comparison: Comparison, page: Page) -> list[str]:
    """Return the flutes' numbers and names, in lines; of very many, the first."""
    names = [f"{k} {name}" for k, name in enumerate(short_names(comparison)[:_MOST_NAMES], start=1)]
    lines = wrapped(names, SMALL, page.right_mm - MARGIN_MM, between="  ·  ")
    if len(lines) > _MOST_NAME_LINES or len(names) < len(comparison.flutes):
        lines = [*lines[: _MOST_NAME_LINES - 1], "… and more, in the order they were given"]
    return lines


def _rows_top_mm(comparison: Comparison, page: Page) -> float:
    return MARGIN_MM + 20.0 + _LINE_MM * len(_name_lines(comparison, page)) + _HEADS_MM + 3.0


def _rows_bottom_mm(findings: Sequence[Finding], page: Page) -> float:
    lines = sum(len(finding.lines) for finding in findings)
    return page.bottom_mm - _FOOT_MM - _KEY_MM - _LINE_MM * lines - 1.2 * len(findings) - 9.0


# --- drawing -----------------------------------------------------------------------------------------------


def _draw_page(
    plan: Plan, paper: str, rows: Sequence[Row], findings: Sequence[Finding], number: tuple[int, int]
) -> Figure:
    page = Page(paper)
    draw_head(page, _head(plan.comparison))
    for k, line in enumerate(_name_lines(plan.comparison, page)):
        page.text(MARGIN_MM, MARGIN_MM + 23.0 + _LINE_MM * k, line, SMALL)
    bottom = plan.top_mm + plan.row_mm * len(rows)
    _draw_columns(page, plan, bottom)
    _draw_strip(page, plan, bottom)
    for k, row in enumerate(rows):
        _draw_row(page, plan, row, plan.top_mm + (k + 0.5) * plan.row_mm)
    end = page.bottom_mm - _FOOT_MM
    _draw_key(page, plan, end - _KEY_MM + 4.0)
    if number[0] == number[1]:
        _draw_findings(page, findings, _rows_bottom_mm(findings, page) + 7.0)
    draw_foot(page, *number)
    return page.figure


def _head(comparison: Comparison) -> Head:
    facts = [f"A4 = {comparison.a4_hz:g} Hz"]
    if comparison.is_carried:
        facts.append(f"carried to {comparison.temperature_c:g} °C: an estimate")
    elif comparison.temperature_c is not None:
        facts.append(f"air {comparison.temperature_c:g} °C")
    by = "fingering" if comparison.by == "fingering" else "sounding note"
    count = len(comparison.rows)
    things = "fingering" if comparison.by == "fingering" else "note"
    return Head(
        title=title_of(comparison),
        kind=f"compared by {by}",
        facts="  ·  ".join(facts),
        summary=f"{count} {things}{'' if count == 1 else 's'}",
    )


def _draw_columns(page: Page, plan: Plan, bottom: float) -> None:
    """Draw the heads of the columns: a name or a number each, on two levels where tight; a fine line down."""
    y = plan.top_mm - 2.4
    if not plan.has_columns:
        page.text(plan.left_mm, y, "how many play it", LABEL, colour=QUIET)
        return
    names = [f"{k} {name}" for k, name in enumerate(short_names(plan.comparison), start=1)]
    fit = all(width_mm(name, SMALL) < plan.column_mm - 0.6 for name in names)
    tight = width_mm(str(len(names)), _COLUMN) > plan.column_mm - 0.8
    for k, name in enumerate(names):
        x = plan.middle_mm(k)
        words, voice = (name, SMALL) if fit else (str(k + 1), _COLUMN)
        raised = _STAGGER_MM if tight and not k % 2 else 0.0
        page.text(x, y - raised, words, voice, align="center", colour=QUIET)
        page.line((x, plan.top_mm), (x, bottom), colour=BAND)


def _draw_strip(page: Page, plan: Plan, bottom: float) -> None:
    """Draw the ground of the strip: the tolerance as a band, the tuned pitch, and the scale over it."""
    top, reach = plan.top_mm, plan.tolerance_cents
    low, high = plan.x_mm(-reach), plan.x_mm(reach)
    page.box((low, top), (high - low, bottom - top), BAND)
    page.line((plan.x_mm(0.0), top), (plan.x_mm(0.0), bottom), colour=QUIET)
    for cents in (-plan.limit_cents, 0.0, plan.limit_cents):
        page.text(plan.x_mm(cents), top - 2.4, cents_text(cents), LABEL, align="center", colour=QUIET)
    right = "beats a second" if plan.is_pair else "play · scatter"
    page.text(page.right_mm, top - 2.4, right, LABEL, align="right", colour=QUIET)
    if plan.is_pair:
        words = "moved" if plan.comparison.is_one_instrument else "1 less 2"
        page.text(plan.strip_mm[1] + 15.0, top - 2.4, words, LABEL, align="right", colour=QUIET)


def _draw_row(page: Page, plan: Plan, row: Row, y: float) -> None:
    page.line((plan.left_mm, y), (plan.strip_mm[1], y), colour=BAND)
    page.text(MARGIN_MM, y + 1.2, note_text(row.note), _NOTE)
    x = MARGIN_MM + _NOTE_MM
    if plan.comparison.by == "fingering":
        draw_lying(page, row.played[0].fingering, x, y)
        x = plan.left_mm - _GAP_MM - 0.5 * _DOTS_MM + 0.8
    else:
        x += 0.3 * _DOTS_MM
    draw_register(page, (x, y), row.register or 0)
    if plan.has_columns:
        for cell in row.played:
            _draw_cell(page, plan, cell, y)
    else:
        share = len(row.played) / len(row.cells)
        draw_share(page, (plan.left_mm + 0.5 * plan.column_mm, y), plan.column_mm - 4.0, share)
    _draw_on_strip(page, plan, row, y)
    if plan.is_pair:
        _draw_difference(page, plan, row, y)
    else:
        _draw_numbers(page, row, y)


def _draw_cell(page: Page, plan: Plan, cell: Cell, y: float) -> None:
    """Draw a note in its flute's column: its sign, and its number where there is room."""
    x, wide = plan.middle_mm(cell.flute), plan.column_mm
    size = min(MARK_MM, 0.72 * wide)
    numbered = len(plan.comparison.flutes) <= NUMBERED_UP_TO
    at = x - 0.5 * wide + 3.2 if numbered else x
    draw_mark(page, (at, y), cell.cents, plan.tolerance_cents, size)
    if cell.stands_out:
        half = 0.5 * min(size + 1.5, wide - 0.2)
        draw_frame(page, (at, y), (half, min(half, 0.47 * plan.row_mm)))
    if numbered:
        off = abs(cell.cents) > plan.tolerance_cents
        words = cents_text(cell.cents, plan.tolerance_cents)
        page.text(at + 2.6, y + 1.0, words, _BOLD if off else _NUMBER, colour=ACCENT if off else INK)
        if wide >= _DOUBT_FROM_MM:
            doubt = uncertainty_text(cell.uncertainty_cents)
            page.text(x + 0.5 * wide - 2.4, y + 1.0, doubt, _COLUMN, align="right", colour=QUIET)


def _draw_on_strip(page: Page, plan: Plan, row: Row, y: float) -> None:
    """Draw all flutes of a row on the scale of cents: where the middle is, and each one."""
    tall = 0.5 * min(plan.row_mm - 1.2, 4.4)
    if row.scatter_cents is not None and len(row.played) >= 3:
        low, high = (plan.x_mm(row.middle_cents + side * row.scatter_cents) for side in (-1.0, 1.0))
        page.box((low, y - 0.62 * tall), (high - low, 1.24 * tall), HAIRLINE)
        middle = plan.x_mm(row.middle_cents)
        page.line((middle, y - tall), (middle, y + tall), colour=INK, pt=FIRM_PT)
    few = len(plan.comparison.flutes) <= SHAPED_UP_TO
    if (
        plan.is_pair
        and (difference := _difference(plan.comparison, row))
        and difference.verdict in {"different", "likely"}
    ):
        ends = [plan.x_mm(cell.cents) for cell in row.played]
        page.line((ends[0], y), (ends[1], y), colour=ACCENT, pt=1.4)
    if few:
        for cell in row.played:
            _draw_few(page, plan, cell, (plan.x_mm(cell.cents), y))
    else:
        _draw_ticks(page, [plan.x_mm(cell.cents) for cell in row.played], (y - 0.5 * tall, y + 0.5 * tall))
    _draw_numbers_of_outstanding(page, plan, row, y)


def _draw_ticks(page: Page, xs_mm: Sequence[float], ends_mm: tuple[float, float]) -> None:
    """Draw an upright tick at each place, all as one line."""
    points = [(x, y) for x in xs_mm for y in ends_mm]
    page.path(Outline(points, [Outline.MOVETO, Outline.LINETO] * len(xs_mm)), edge=INK, pt=FINE_PT)


def _draw_few(page: Page, plan: Plan, cell: Cell, at: tuple[float, float]) -> None:
    """Draw one of two or three flutes: the first a dot, the second a ring, the third a diamond."""
    low, high = (plan.x_mm(cell.cents + side * cell.uncertainty_cents) for side in (-1.0, 1.0))
    page.box((low, at[1] - 0.45), (high - low, 0.9), WING)
    draw_flutes_shape(page, at, cell.flute)


def _draw_numbers_of_outstanding(page: Page, plan: Plan, row: Row, y: float) -> None:
    """Write beside what stands out whose it is, where two such numbers would not touch."""
    taken: list[float] = []
    for cell in row.played:
        words = str(cell.flute + 1)
        x = plan.x_mm(cell.cents) + (1.0 if cell.cents >= row.middle_cents else -1.0) * (
            0.8 + 0.5 * width_mm(words, _COLUMN)
        )
        inside = plan.strip_mm[0] + 1.5 < x < plan.strip_mm[1] - 1.5
        if cell.stands_out and inside and all(abs(x - other) > 3.5 for other in taken):
            page.text(x, y + 0.9, words, _COLUMN, align="center")
            taken.append(x)


def _draw_difference(page: Page, plan: Plan, row: Row, y: float) -> None:
    """Write how two flutes differ: bold where it is real, with a word where it is only likely."""
    difference = _difference(plan.comparison, row)
    if difference is None:
        return
    left = plan.strip_mm[1] + 7.0
    words = cents_text(-difference.cents if plan.comparison.is_one_instrument else difference.cents)
    real = difference.verdict in {"different", "likely"}
    voice = _BOLD if difference.verdict == "different" else _NUMBER
    page.text(left + 8.0, y + 1.0, words, voice, align="right", colour=ACCENT if real else INK)
    doubt = uncertainty_text(difference.uncertainty_cents)
    page.text(left + 9.0, y + 1.0, doubt, _COLUMN, colour=QUIET)
    word = {"different": "real", "likely": "likely", "air": "air?"}.get(difference.verdict or "", "")
    page.text(left + 18.5, y + 1.0, word, LABEL)
    beats = f"{difference.beats.rate_hz:.1f}"
    page.text(page.right_mm, y + 1.0, beats, _NUMBER, align="right")


def _difference(comparison: Comparison, row: Row) -> Difference | None:
    place = comparison.rows.index(row)
    found = (d for pair in comparison.pairs for d in pair.differences if d.row == place)
    return next(found, None)


def _draw_numbers(page: Page, row: Row, y: float) -> None:
    """Write how many play a note, and how far they scatter."""
    if row.scatter_cents is not None:
        page.text(page.right_mm, y + 1.0, f"±{row.scatter_cents:.0f}", _NUMBER, align="right")
    words = f"{len(row.played)} of {len(row.cells)}"
    page.text(page.right_mm - 7.0, y + 1.0, words, _COLUMN, align="right", colour=QUIET)


# --- findings and key --------------------------------------------------------------------------------------


def _draw_findings(page: Page, findings: Sequence[Finding], top: float) -> None:
    y = top
    page.line((MARGIN_MM, y - 4.2), (page.right_mm, y - 4.2), colour=HAIRLINE)
    for finding in findings:
        page.text(MARGIN_MM, y, finding.label, LABEL, colour=QUIET)
        for line in finding.lines:
            page.text(MARGIN_MM + _LABEL_MM, y, line, SMALL)
            y += _LINE_MM
        y += 1.2


def _draw_key(page: Page, plan: Plan, y: float) -> None:
    """Draw every sign of the page with what it means, on one line or two."""
    page.line((MARGIN_MM, y - 4.0), (page.right_mm, y - 4.0), colour=HAIRLINE)
    x = MARGIN_MM
    for words, draw in _signs(page, plan):
        wide = 3.2 + width_mm(words, LABEL)
        if x + wide > page.right_mm:
            x, y = MARGIN_MM, y + _KEY_LINE_MM
        draw((x + 1.3, y))
        page.text(x + 3.2, y + 1.0, words, LABEL, colour=QUIET)
        x += wide + 3.6


def _signs(page: Page, plan: Plan) -> Iterator[tuple[str, partial[None]]]:
    tolerance = plan.tolerance_cents
    if plan.has_columns:
        yield f"within {tolerance:g} cents", partial(draw_mark, page, cents=0.0, tolerance_cents=tolerance)
        yield "sharper", partial(draw_mark, page, cents=2.0 * tolerance, tolerance_cents=tolerance)
        yield "flatter", partial(draw_mark, page, cents=-2.0 * tolerance, tolerance_cents=tolerance)
    if len(plan.comparison.flutes) <= SHAPED_UP_TO:
        for flute, name in enumerate(short_names(plan.comparison)):
            yield shortened(name, LABEL, 34.0), partial(draw_flutes_shape, page, flute=flute)
    if any(cell.stands_out for row in plan.comparison.rows for cell in row.played):
        yield "stands out", partial(draw_frame, page, half_mm=(1.2, 1.2))
    if not plan.is_pair:
        yield "middle and scatter of the flutes", partial(draw_middle, page)
    if plan.comparison.by == "fingering":
        yield "holes: mouth end left", partial(_draw_sample, page)
    yield "second register", partial(draw_register, page, register=2)


def _draw_sample(page: Page, at: tuple[float, float]) -> None:
    draw_lying(page, Fingering("x"), at[0] - 0.5 * HOLE_PITCH_MM, at[1])
