"""A sheet for each flute of a comparison, to hand to its player: how it stands among the others, on one page.

Every note that anybody plays is a line, low notes at the bottom. The strip shows where the others are (a bar,
as wide as they scatter) and where this flute is: a dot where it is with them, a wedge where it is apart by
more than the uncertainty allows. Then comes how far it is from the others' middle, and how fast it beats with
them. A note that this flute does not have yet stands there with the fingering that gives it elsewhere.

Conventions: lengths in millimetres, deviations in cents off equal temperament at the comparison's A4. One
page for each flute; lines grow closer with more notes, and of more than fit, the highest are counted only.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path

from matplotlib.figure import Figure

from fluteprobe.compare.standing import Stand, Standing, standing_of
from fluteprobe.compare.values import Comparison
from fluteprobe.pages.comparison import limit_cents
from fluteprobe.pages.contents import cents_text, note_text, uncertainty_text
from fluteprobe.pages.findings import row_name
from fluteprobe.pages.frame import Head, draw_foot, draw_head
from fluteprobe.pages.marks import HOLE_PITCH_MM, draw_lying, draw_mark, draw_middle, draw_register
from fluteprobe.pages.paper import (
    ACCENT,
    BAND,
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
    width_mm,
    wrapped,
)

_LEAST_ROW_MM, _MOST_ROW_MM = 4.4, 10.0
_NOTE_MM, _DOTS_MM, _GAP_MM = 11.0, 5.0, 4.0
_NUMBERS_MM = 62.0
_WORDS_MM = 30.0  # kept for what is said under the lines, and the key
_FOOT_MM = 5.0
_LINE_MM = 4.2
_LABEL_MM = 24.0
_MOST_LINES = 3
_NOTE, _NUMBER, _BOLD = Type(size_pt=10.0), Type(size_pt=9.0), Type(size_pt=9.0, bold=True)


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """Where things stand on a sheet."""

    comparison: Comparison
    standing: Standing
    tolerance_cents: float
    limit_cents: float
    left_mm: float
    right_mm: float
    top_mm: float
    row_mm: float

    def x_mm(self, cents: float) -> float:
        """Return where a deviation stands on the strip, held inside it."""
        held = max(-self.limit_cents, min(self.limit_cents, cents))
        return 0.5 * (self.left_mm + self.right_mm) + 0.5 * (self.right_mm - self.left_mm) * (
            held / self.limit_cents
        )


def write_students(
    comparison: Comparison,
    target: Path,
    *,
    paper: str = "a4",
    tolerance_cents: float = 10.0,
    dots_per_inch: float = PNG_DOTS_PER_INCH,
) -> tuple[Path, ...]:
    """Write a sheet for every flute as PDF, PNG or SVG, by the target's suffix; return the files written.

    Raises
    ------
    ValueError
        If the paper or the suffix is not known.
    """
    figures = student_figures(comparison, paper=paper, tolerance_cents=tolerance_cents)
    title = f"A sheet for each of {len(comparison.flutes)} flutes"
    return save_pages(figures, target, title=title, author=None, dots_per_inch=dots_per_inch)


def student_figures(
    comparison: Comparison, *, paper: str = "a4", tolerance_cents: float = 10.0
) -> list[Figure]:
    """Return a sheet for every flute as a figure.

    Raises
    ------
    ValueError
        If the paper is not known.
    """
    with house_style():
        return [
            _draw_sheet(comparison, standing_of(comparison, k), paper, tolerance_cents)
            for k in range(len(comparison.flutes))
        ]


def remarks_of(comparison: Comparison, standing: Standing) -> tuple[tuple[str, tuple[str, ...]], ...]:
    """Return what a sheet says in words: a label and its parts."""
    group = comparison.group
    a4 = () if group is None else (f"{group.a4_hz:.1f} Hz suits all flutes together best",)
    found = (
        ("as a whole", _whole(standing)),
        ("apart", tuple(_apart(comparison, standing))),
        ("to find yet", tuple(_missing(comparison, standing))),
        ("best A4", a4),
    )
    return tuple((label, words) for label, words in found if words)


# --- what is said ------------------------------------------------------------------------------------------


def _whole(standing: Standing) -> tuple[str, ...]:
    cents, doubt = standing.whole_cents, standing.whole_uncertainty_cents
    if cents is None or doubt is None:
        return ()
    size = f"{abs(cents):.1f} {uncertainty_text(doubt)} cents"
    if abs(cents) <= 3.0 * doubt:
        return (f"with the others within the uncertainty ({size})",)
    side, cure = ("sharper", "less") if cents > 0.0 else ("flatter", "more")
    return (f"{size} {side} than the others: a little {cure} breath brings it nearer (common practice)",)


def _apart(comparison: Comparison, standing: Standing) -> Iterator[str]:
    """Name the notes that are apart from the others, the farthest first."""
    apart = [stand for stand in standing.rows if stand.verdict is not None]
    apart.sort(key=lambda stand: -abs(stand.off_cents or 0.0))
    for stand in apart:
        yield f"{row_name(comparison, comparison.rows[stand.row])} {cents_text(stand.off_cents)}"


def _missing(comparison: Comparison, standing: Standing) -> Iterator[str]:
    """Name the notes that others play and this flute does not, with the fingering that most use."""
    have = {reach.note for reach in comparison.notes if standing.flute in reach.flutes}
    for stand in standing.rows:
        row = comparison.rows[stand.row]
        if stand.own is None and row.note not in have and stand.lend is not None:
            yield f"{note_text(row.note)} ({stand.lend}, {stand.players} of {len(row.cells)})"


# --- drawing -----------------------------------------------------------------------------------------------


def _draw_sheet(comparison: Comparison, standing: Standing, paper: str, tolerance_cents: float) -> Figure:
    page = Page(paper)
    plan = _plan(page, comparison, standing, tolerance_cents)
    draw_head(page, _head(comparison, standing))
    most = int((_rows_bottom_mm(page) - plan.top_mm) / plan.row_mm)
    stands = standing.rows[:most][::-1]
    if len(stands) < len(standing.rows):
        words = f"and {len(standing.rows) - len(stands)} higher"
        page.text(MARGIN_MM, plan.top_mm - 2.4, words, LABEL, colour=QUIET)
    _draw_strip(page, plan, plan.top_mm + plan.row_mm * len(stands))
    for k, stand in enumerate(stands):
        _draw_stand(page, plan, stand, plan.top_mm + (k + 0.5) * plan.row_mm)
    _draw_words(page, plan)
    draw_foot(page, 1, 1)
    return page.figure


def _plan(page: Page, comparison: Comparison, standing: Standing, tolerance_cents: float) -> Plan:
    top = MARGIN_MM + 30.0
    rows = max(1, len(comparison.rows))
    room = (_rows_bottom_mm(page) - top) / rows
    holes = max(flute.facts.holes for flute in comparison.flutes)
    return Plan(
        comparison=comparison,
        standing=standing,
        tolerance_cents=tolerance_cents,
        limit_cents=max(limit_cents(comparison.rows), 1.5 * tolerance_cents),
        left_mm=MARGIN_MM + _NOTE_MM + HOLE_PITCH_MM * holes + _DOTS_MM + _GAP_MM,
        right_mm=page.right_mm - _NUMBERS_MM,
        top_mm=top,
        row_mm=max(_LEAST_ROW_MM, min(_MOST_ROW_MM, room)),
    )


def _rows_bottom_mm(page: Page) -> float:
    return page.bottom_mm - _FOOT_MM - _WORDS_MM - 4.0 * _LINE_MM


def _head(comparison: Comparison, standing: Standing) -> Head:
    flute = comparison.flutes[standing.flute]
    player = clean(flute.sitting.player or "")
    label = clean(flute.label)
    made = clean(flute.facts.maker or "")
    own = sum(stand.own is not None for stand in standing.rows)
    facts = [label if player and player != label else "", made, f"A4 = {comparison.a4_hz:g} Hz"]
    return Head(
        title=player or label,
        kind=f"one of {len(comparison.flutes)} flutes",
        facts="  ·  ".join(part for part in facts if part),
        summary=f"plays {own} of {len(standing.rows)}",
    )


def _draw_strip(page: Page, plan: Plan, bottom: float) -> None:
    top, reach = plan.top_mm, plan.tolerance_cents
    low, high = plan.x_mm(-reach), plan.x_mm(reach)
    page.box((low, top), (high - low, bottom - top), BAND)
    page.line((plan.x_mm(0.0), top), (plan.x_mm(0.0), bottom), colour=QUIET)
    for cents in (-plan.limit_cents, 0.0, plan.limit_cents):
        page.text(plan.x_mm(cents), top - 2.4, cents_text(cents), LABEL, align="center", colour=QUIET)
    for x, words in zip(_number_places_mm(page), ("cents", "from the others", "beats a second"), strict=True):
        page.text(x, top - 2.4, words, LABEL, align="right", colour=QUIET)


def _number_places_mm(page: Page) -> tuple[float, float, float]:
    """Return where the columns of numbers end: this flute's cents, how far from the others, the beats."""
    return page.right_mm - 46.0, page.right_mm - 21.0, page.right_mm


def _draw_stand(page: Page, plan: Plan, stand: Stand, y: float) -> None:
    row = plan.comparison.rows[stand.row]
    page.line((plan.left_mm, y), (plan.right_mm, y), colour=BAND)
    page.text(MARGIN_MM, y + 1.2, note_text(row.note), _NOTE, colour=INK if stand.own else QUIET)
    fingering = stand.own.fingering if stand.own else stand.lend
    if fingering is not None:
        draw_lying(page, fingering, MARGIN_MM + _NOTE_MM, y)
    register = stand.own.register if stand.own else row.register
    draw_register(page, (plan.left_mm - _GAP_MM - 0.5 * _DOTS_MM + 0.8, y), register or 0)
    _draw_others(page, plan, stand, y)
    if stand.own is None:
        others = "1 other plays it" if stand.players == 1 else f"{stand.players} others play it"
        page.text(page.right_mm, y + 1.0, others, LABEL, align="right", colour=QUIET)
        return
    _draw_own(page, plan, stand, y)


def _draw_others(page: Page, plan: Plan, stand: Stand, y: float) -> None:
    """Draw the bar of the others: their median, and how far they scatter."""
    if stand.others_cents is None:
        return
    tall = 0.5 * min(plan.row_mm - 1.2, 4.4)
    scatter = plan.comparison.rows[stand.row].scatter_cents or 0.0
    low, high = (plan.x_mm(stand.others_cents + side * scatter) for side in (-1.0, 1.0))
    page.box((low, y - 0.62 * tall), (high - low, 1.24 * tall), HAIRLINE)
    middle = plan.x_mm(stand.others_cents)
    page.line((middle, y - tall), (middle, y + tall), colour=INK, pt=FIRM_PT)


def _draw_own(page: Page, plan: Plan, stand: Stand, y: float) -> None:
    """Draw this flute's own mark with its uncertainty, and the numbers."""
    own = stand.own
    assert own is not None  # noqa: S101  (drawn where there is one)
    low, high = (plan.x_mm(own.cents + side * own.uncertainty_cents) for side in (-1.0, 1.0))
    page.box((low, y - 0.45), (high - low, 0.9), WING)
    apart = stand.verdict is not None
    draw_mark(page, (plan.x_mm(own.cents), y), (stand.off_cents or 0.0) if apart else 0.0, 0.0)
    cents, off, beats = _number_places_mm(page)
    doubt = uncertainty_text(own.uncertainty_cents)
    page.text(cents, y + 1.0, f"{cents_text(own.cents)} {doubt}", _NUMBER, align="right", colour=QUIET)
    if stand.off_cents is not None:
        words = f"{cents_text(stand.off_cents)} {uncertainty_text(stand.uncertainty_cents)}"
        voice, colour = (_BOLD, ACCENT) if apart else (_NUMBER, INK)
        page.text(off, y + 1.0, words, voice, align="right", colour=colour)
    if stand.beats_hz is not None:
        page.text(beats, y + 1.0, f"{stand.beats_hz:.1f}", _NUMBER, align="right")


def _draw_words(page: Page, plan: Plan) -> None:
    """Write what there is to say, and the key under it."""
    y = _rows_bottom_mm(page) + 9.0
    page.line((MARGIN_MM, y - 4.6), (page.right_mm, y - 4.6), colour=HAIRLINE)
    for label, words in remarks_of(plan.comparison, plan.standing):
        page.text(MARGIN_MM, y, label, LABEL, colour=QUIET)
        for line in _lines(words, page.right_mm - MARGIN_MM - _LABEL_MM):
            page.text(MARGIN_MM + _LABEL_MM, y, line, SMALL)
            y += _LINE_MM
    _draw_key(page, page.bottom_mm - _FOOT_MM - 3.0)


def _lines(words: Sequence[str], room_mm: float) -> list[str]:
    lines = wrapped(words, SMALL, room_mm, between="  ·  ")
    return (
        lines if len(lines) <= _MOST_LINES else [*lines[: _MOST_LINES - 1], "… and more, on the comparison"]
    )


def _draw_key(page: Page, y: float) -> None:
    page.line((MARGIN_MM, y - 4.0), (page.right_mm, y - 4.0), colour=HAIRLINE)
    signs = (
        ("with the others", partial(draw_mark, page, cents=0.0, tolerance_cents=1.0)),
        ("sharper than they are", partial(draw_mark, page, cents=2.0, tolerance_cents=1.0)),
        ("flatter", partial(draw_mark, page, cents=-2.0, tolerance_cents=1.0)),
        ("the others, and how they scatter", partial(draw_middle, page)),
        ("second register", partial(draw_register, page, register=2)),
    )
    x = MARGIN_MM
    for words, draw in signs:
        draw((x + 1.3, y))
        page.text(x + 3.2, y + 1.0, words, LABEL, colour=QUIET)
        x += 3.2 + width_mm(words, LABEL) + 3.6
