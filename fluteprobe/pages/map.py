"""The register map: where every fingering sounds in each register, on one axis of pitch.

Every fingering is a row, low ones at the bottom; pitch runs to the right. One dot is the first register, two
the second, three the third. A tick marks the exact octave over the first register (and the exact twelfth,
where a third register was played), so that the stretch can be seen, which a lane of its own shows to scale.
What the breath alone shows of resonances that nobody has played are soft bars, as wide as each was seen.

Conventions: lengths in millimetres, pitches on the axis in semitones above A4 of the sitting, stretches in
cents, positive where the upper register is wide. Drawings shrink until as few pages as can be hold all rows;
type never does.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from math import ceil, floor, hypot, isfinite, log2
from pathlib import Path

from matplotlib.figure import Figure
from matplotlib.path import Path as Outline
from matplotlib.transforms import Affine2D

from fluteprobe.flute.fingering import STATES, Fingering
from fluteprobe.flute.register import Register
from fluteprobe.flute.tuning import A4_MIDI, Note
from fluteprobe.pages.contents import cents_text, note_text, uncertainty_text
from fluteprobe.pages.frame import Head, draw_foot, draw_head
from fluteprobe.pages.glyphs import draw_hole
from fluteprobe.pages.paper import (
    BAND,
    FINE_PT,
    FIRM_PT,
    HAIRLINE,
    INK,
    LABEL,
    LONG_WORD,
    MARGIN_MM,
    MINUS,
    PNG_DOTS_PER_INCH,
    QUIET,
    SMALL,
    WING,
    WORD,
    Page,
    Type,
    clean,
    house_style,
    save_pages,
    width_mm,
)
from fluteprobe.survey import Entry, Reading, Survey

SAME_RESONANCE_CENTS = 200.0  # resonances of one column are farther apart; a breath bump is known less well
SAME_BUMP_CENTS = 120.0
# The lane of stretches reaches the least of these that holds all, or the last where none does.
STRETCH_LIMITS_CENTS = (20.0, 30.0, 40.0, 60.0, 100.0)
NARROWEST_AXIS = 14.0  # semitones
ROOM_ABOVE = 2.5  # semitones of axis over the highest pitch that matters

_LEAST_ROW_MM, _MOST_ROW_MM = 3.45, 12.0
_ROOMY_MM = 5.5  # rows of at least this height get the larger type
_LARGEST_MARK_MM = 6.4  # marks and holes grow with the rows up to here
_AXIS_LABELS_MM = 7.0
_EDGE_MM = 7.0  # of the axis, kept for names beside the outermost marks
_LANE_MM, _NUMBER_MM, _LANE_GAP_MM = 24.0, 13.5, 7.5
_NAME_GAP_MM = 0.8
_STEP_MM = 0.5
_KEY_MM = 24.0
_FOOT_MM = 5.0
_NAME, _ROOMY_NAME = Type(size_pt=8.0), Type(size_pt=10.0)
_UNDECIDED = Type(size_pt=8.5, bold=True)
_WHOLE_TONES = {"C", "D", "E", "F", "G", "A", "B"}
_INTERVALS: Mapping[Register, str] = {2: "octave", 3: "twelfth"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Seen:
    """A breath resonance that nobody has played: where it stands, and how wide it was seen."""

    frequency_hz: float
    width_hz: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Stretch:
    """How far a register is from the whole multiple of the first, and the standard uncertainty of that."""

    register: Register
    cents: float
    uncertainty_cents: float


@dataclass(frozen=True, slots=True, kw_only=True)
class MapRow:
    """One fingering: what it played, low to high, tones of no decided register, and what the breath shows."""

    fingering: Fingering
    played: tuple[Entry, ...]
    undecided_hz: tuple[float, ...]
    seen: tuple[Seen, ...]
    stretches: tuple[Stretch, ...]

    @property
    def first_hz(self) -> float | None:
        """The pitch of the first register, None where it was not played."""
        return next((entry.frequency_hz for entry in self.played if entry.register == 1), None)

    @property
    def base_hz(self) -> float:
        """What rows are ordered by: the lowest register's pitch over its number."""
        if not self.played:
            return min(self.undecided_hz)
        lowest = min(self.played, key=lambda entry: entry.register)
        return lowest.frequency_hz / lowest.register


def write_map(
    survey: Survey, target: Path, *, paper: str = "a4", dots_per_inch: float = PNG_DOTS_PER_INCH
) -> tuple[Path, ...]:
    """Write a flute's register map as PDF, PNG or SVG, by the target's suffix; return the files written.

    Raises
    ------
    ValueError
        If the paper or the suffix is not known.
    """
    title = clean(survey.flute.name) or "A flute without a name"
    author = clean(survey.flute.maker or "") or None
    figures = map_figures(survey, paper=paper)
    named = f"{title}: register map"
    return save_pages(figures, target, title=named, author=author, dots_per_inch=dots_per_inch)


def map_figures(survey: Survey, *, paper: str = "a4") -> list[Figure]:
    """Return the pages of a flute's register map as figures.

    Raises
    ------
    ValueError
        If the paper is not known.
    """
    with house_style():
        rows = map_rows(survey)
        room = _rows_room_mm(Page(paper))
        pages = max(1, ceil(len(rows) * _LEAST_ROW_MM / room))
        length = ceil(len(rows) / pages)
        parts = [rows[k * length : (k + 1) * length] for k in range(pages)]
        plan = _plan(survey, rows, paper, room / max(length, 1))
        return [_draw_page(survey, plan, paper, part, (k + 1, pages)) for k, part in enumerate(parts)]


# --- what stands on the map --------------------------------------------------------------------------------


def map_rows(survey: Survey) -> tuple[MapRow, ...]:
    """Return the fingerings that gave a tone, low to high, with all that is known of their registers."""
    sounding = [r for r in survey.readings if r.fingering is not None and r.tone.frequency_hz is not None]
    fingerings = {entry.fingering for entry in survey.entries} | {
        r.fingering for r in sounding if _is_undecided(r) and r.fingering is not None
    }
    rows = [_row(fingering, survey.entries, sounding) for fingering in fingerings]
    return tuple(sorted(rows, key=lambda row: (row.base_hz, str(row.fingering))))


def _is_undecided(reading: Reading) -> bool:
    return reading.tone.kind == "tone" and reading.call.register is None


def _row(fingering: Fingering, entries: Iterable[Entry], sounding: Iterable[Reading]) -> MapRow:
    mine = [reading for reading in sounding if reading.fingering == fingering]
    played = tuple(
        sorted((e for e in entries if e.fingering == fingering), key=lambda entry: entry.frequency_hz)
    )
    undecided = _apart([reading.tone.frequency_hz or 0.0 for reading in mine if _is_undecided(reading)])
    known = [*(entry.frequency_hz for entry in played), *undecided]
    bumps = [
        Seen(frequency_hz=bump.frequency_hz, width_hz=bump.width_hz)
        for reading in mine
        for bump in reading.tone.breath_resonances
    ]
    return MapRow(
        fingering=fingering,
        played=played,
        undecided_hz=undecided,
        seen=_merged(bump for bump in bumps if not _is_near(bump.frequency_hz, known)),
        stretches=_stretches(played),
    )


def _is_near(frequency_hz: float, known_hz: Iterable[float]) -> bool:
    return any(abs(_cents(known, frequency_hz)) < SAME_RESONANCE_CENTS for known in known_hz)


def _apart(frequencies_hz: Sequence[float]) -> tuple[float, ...]:
    """Return each pitch once: of those within the width of a breath bump, the lowest."""
    kept: list[float] = []
    for frequency_hz in sorted(frequencies_hz):
        if not kept or _cents(kept[-1], frequency_hz) > SAME_BUMP_CENTS:
            kept.append(frequency_hz)
    return tuple(kept)


def _merged(bumps: Iterable[Seen]) -> tuple[Seen, ...]:
    """Return the bumps of several takes as one each: the sharpest seen of those that lie together."""
    groups: list[list[Seen]] = []
    for bump in sorted(bumps, key=lambda bump: bump.frequency_hz):
        if groups and _cents(groups[-1][-1].frequency_hz, bump.frequency_hz) < SAME_BUMP_CENTS:
            groups[-1].append(bump)
        else:
            groups.append([bump])
    return tuple(min(group, key=lambda bump: bump.width_hz / bump.frequency_hz) for group in groups)


def _stretches(played: Sequence[Entry]) -> tuple[Stretch, ...]:
    """Return how far each upper register is from its multiple of the first register's pitch."""
    first = next((entry for entry in played if entry.register == 1), None)
    if first is None:
        return ()
    return tuple(
        Stretch(
            register=entry.register,
            cents=_cents(entry.register * first.frequency_hz, entry.frequency_hz),
            uncertainty_cents=hypot(first.uncertainty_cents, entry.uncertainty_cents),
        )
        for entry in played
        if entry.register > 1
    )


def _cents(low_hz: float, high_hz: float) -> float:
    return 1200.0 * log2(high_hz / low_hz)


def stretch_limit_cents(rows: Iterable[MapRow]) -> float:
    """Return how far the lane of stretches reaches; a stretch beyond stands at its end as a wedge."""
    reaches = [abs(stretch.cents) for row in rows for stretch in row.stretches]
    widest = max(reaches, default=0.0)
    return next((limit for limit in STRETCH_LIMITS_CENTS if widest <= limit), STRETCH_LIMITS_CENTS[-1])


def axis_semitones(rows: Iterable[MapRow], a4_hz: float) -> tuple[float, float]:
    """Return where the pitch axis begins, at the lowest mark, and ends, above all played and all octaves."""
    rows = list(rows)
    played = [hz for row in rows for hz in (*(e.frequency_hz for e in row.played), *row.undecided_hz)]
    octaves = [2.0 * row.first_hz for row in rows if row.first_hz is not None]
    if not played:
        return 0.0, NARROWEST_AXIS
    top = 12.0 * log2(max(*played, *octaves, 0.0) / a4_hz) + ROOM_ABOVE
    seen = [bump.frequency_hz for row in rows for bump in row.seen]
    low = 12.0 * log2(min(*played, *seen) / a4_hz) if seen else 12.0 * log2(min(played) / a4_hz)
    return low, max(top, low + NARROWEST_AXIS)


# --- where it stands ---------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class Lane:
    """The lane of stretches: where it begins, how many cents it reaches, and a column of numbers for each."""

    left_mm: float
    limit_cents: float
    registers: tuple[Register, ...]

    @property
    def middle_mm(self) -> float:
        """Where no stretch stands."""
        return self.left_mm + 0.5 * _LANE_MM

    def x_mm(self, cents: float) -> float:
        """Return where a stretch stands, held inside the lane."""
        held = max(-self.limit_cents, min(self.limit_cents, cents))
        return self.middle_mm + 0.5 * _LANE_MM * held / self.limit_cents

    def number_mm(self, register: Register) -> float:
        """Return where a register's column of numbers ends."""
        return self.left_mm + _LANE_MM + 1.0 + _NUMBER_MM * (self.registers.index(register) + 1)


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """Where things stand on every page of a map, and how large."""

    a4_hz: float
    low: float
    high: float
    word: Type
    holes_mm: float
    left_mm: float
    row_mm: float
    lane: Lane

    @property
    def right_mm(self) -> float:
        """Where the pitch axis ends."""
        return self.lane.left_mm - _LANE_GAP_MM

    @property
    def semitone_mm(self) -> float:
        """How wide a semitone is on the axis."""
        return (self.right_mm - self.left_mm - 2.0 * _EDGE_MM) / (self.high - self.low)

    def at_mm(self, semitones: float) -> float:
        """Return where a pitch stands, in semitones above A4."""
        return self.left_mm + _EDGE_MM + self.semitone_mm * (semitones - self.low)

    def x_mm(self, frequency_hz: float) -> float:
        """Return where a frequency stands."""
        return self.at_mm(12.0 * log2(frequency_hz / self.a4_hz))

    @property
    def mark_mm(self) -> float:
        """The height that a mark may take: that of its row, up to a limit."""
        return min(self.row_mm, _LARGEST_MARK_MM)

    @property
    def dot_mm(self) -> float:
        """The radius of a dot: three of them fit in a row."""
        return 0.14 * self.mark_mm

    @property
    def name(self) -> Type:
        """The voice of note names and numbers."""
        return _ROOMY_NAME if self.row_mm >= _ROOMY_MM else _NAME


def _rows_room_mm(page: Page) -> float:
    return page.bottom_mm - _FOOT_MM - _KEY_MM - _AXIS_LABELS_MM - _rows_top_mm()


def _rows_top_mm() -> float:
    return MARGIN_MM + 19.2 + 2.0 * _AXIS_LABELS_MM


def _plan(survey: Survey, rows: Sequence[MapRow], paper: str, row_mm: float) -> Plan:
    holes = survey.flute.holes
    low, high = axis_semitones(rows, survey.sitting.a4_hz)
    word = WORD if holes <= 8 else LONG_WORD
    holes_left = MARGIN_MM + max((width_mm(str(row.fingering), word) for row in rows), default=0.0) + 2.5
    row_mm = min(row_mm, _MOST_ROW_MM)
    return Plan(
        a4_hz=survey.sitting.a4_hz,
        low=low,
        high=high,
        word=word,
        holes_mm=holes_left,
        left_mm=holes_left + _hole_pitch_mm(row_mm, holes) * holes + 2.5,
        row_mm=row_mm,
        lane=_lane(rows, Page(paper).right_mm),
    )


def _hole_pitch_mm(row_mm: float, holes: int) -> float:
    return 3.7 if row_mm >= _ROOMY_MM and holes <= 8 else 3.0


def _lane(rows: Sequence[MapRow], right_mm: float) -> Lane:
    twelfths = any(stretch.register == 3 for row in rows for stretch in row.stretches)
    registers: tuple[Register, ...] = (2, 3) if twelfths else (2,)
    left = right_mm - _LANE_MM - 1.0 - _NUMBER_MM * len(registers)
    return Lane(left_mm=left, limit_cents=stretch_limit_cents(rows), registers=registers)


def _draw_page(
    survey: Survey, plan: Plan, paper: str, rows: Sequence[MapRow], number: tuple[int, int]
) -> Figure:
    page = Page(paper)
    draw_head(page, _head(survey))
    top = _rows_top_mm()
    bottom = top + plan.row_mm * max(len(rows), 1)
    if rows:
        _draw_axis(page, plan, top, bottom)
        _draw_lane(page, plan.lane, top, bottom)
    else:
        page.text(MARGIN_MM, top, "Nothing has been heard in this flute yet.", SMALL)
    for k, row in enumerate(rows):
        _draw_row(page, plan, row, bottom - (k + 0.5) * plan.row_mm)
    _draw_key(page, page.bottom_mm - _FOOT_MM - _KEY_MM + 6.0)
    draw_foot(page, *number)
    return page.figure


def _head(survey: Survey) -> Head:
    facts = survey.flute
    serial = f"no. {clean(facts.serial)}" if facts.serial else ""
    made = ", ".join(filter(None, (clean(facts.maker or ""), serial)))
    holes = f"{facts.holes} hole{'' if facts.holes == 1 else 's'}"
    a4 = f"A4 = {survey.sitting.a4_hz:g} Hz"
    parts = (made, clean(facts.key or ""), clean(facts.wood or ""), holes, a4)
    count = len({entry.fingering for entry in survey.entries})
    return Head(
        title=clean(facts.name) or "A flute without a name",
        kind="register map",
        facts="  ·  ".join(filter(None, parts)),
        summary=f"{count} fingering{'' if count == 1 else 's'}" if count else "",
    )


# --- axes --------------------------------------------------------------------------------------------------


def _draw_axis(page: Page, plan: Plan, top: float, bottom: float) -> None:
    """Draw the notes as lines over the rows, and their names over and under them."""
    edge = _EDGE_MM / plan.semitone_mm
    for step in range(ceil(plan.low - edge), floor(plan.high + edge) + 1):
        note = Note(A4_MIDI + step)
        name = str(note)[:-1] if note.octave >= 0 else str(note)[:-2]
        if name not in _WHOLE_TONES:
            continue
        x = plan.at_mm(step)
        page.line((x, top), (x, bottom), colour=HAIRLINE if name == "C" else BAND)
        if name == "C" or plan.semitone_mm >= 2.6:
            words = str(note) if name == "C" else name
            for y in (top - 1.8, bottom + 4.2):
                page.text(x, y, words, SMALL if name == "C" else LABEL, align="center", colour=QUIET)


def _draw_lane(page: Page, lane: Lane, top: float, bottom: float) -> None:
    page.line((lane.middle_mm, top), (lane.middle_mm, bottom), colour=QUIET)
    page.text(lane.middle_mm, top - 6.0, "stretch, cents", LABEL, align="center", colour=QUIET)
    page.text(lane.middle_mm, top - 1.8, "0", LABEL, align="center", colour=QUIET)
    for side, sign in ((-1.0, MINUS), (1.0, "+")):
        for share in (0.5, 1.0):
            x = lane.x_mm(side * share * lane.limit_cents)
            page.line((x, top), (x, bottom), colour=BAND)
        words = f"{sign}{lane.limit_cents:g}"
        page.text(lane.x_mm(side * lane.limit_cents), top - 1.8, words, LABEL, align="center", colour=QUIET)
    for register in lane.registers:
        x = lane.number_mm(register)
        page.text(x, top - 6.0, "over the", LABEL, align="right", colour=QUIET)
        page.text(x, top - 1.8, _INTERVALS[register], LABEL, align="right", colour=QUIET)


# --- a row -------------------------------------------------------------------------------------------------


def _draw_row(page: Page, plan: Plan, row: MapRow, y: float) -> None:
    baseline = y + 1.0
    _draw_fingering(page, plan, row.fingering, y)
    page.line((plan.left_mm, y), (plan.right_mm, y), colour=BAND)
    shown = [bump for bump in row.seen if plan.x_mm(bump.frequency_hz) < plan.right_mm - _EDGE_MM]
    for bump in shown:
        _draw_seen(page, plan, bump, y)
    _draw_guides(page, plan, row, y)
    for entry in row.played:
        _draw_dots(page, plan.x_mm(entry.frequency_hz), y, plan.dot_mm, entry.register)
    for hz in row.undecided_hz:
        page.text(plan.x_mm(hz), baseline, "?", _UNDECIDED, align="center")
    _draw_names(page, plan, row, shown, baseline)
    for stretch in row.stretches:
        _draw_stretch(page, plan, stretch, y)


def _draw_fingering(page: Page, plan: Plan, fingering: Fingering, y: float) -> None:
    page.text(MARGIN_MM, y + 1.0, str(fingering), plan.word)
    pitch = _hole_pitch_mm(plan.row_mm, fingering.holes)
    for k, state in enumerate(fingering.states):
        draw_hole(page, plan.holes_mm + (k + 0.5) * pitch, y, 0.64 * pitch, state)


def _seen_mm(plan: Plan, bump: Seen) -> tuple[float, float]:
    half = 0.5 * bump.width_hz
    left, right = plan.x_mm(max(bump.frequency_hz - half, 1.0)), plan.x_mm(bump.frequency_hz + half)
    short = max(0.0, 1.2 - (right - left)) / 2.0
    return max(left - short, plan.left_mm), min(right + short, plan.right_mm)


def _draw_seen(page: Page, plan: Plan, bump: Seen, y: float) -> None:
    left, right = _seen_mm(plan, bump)
    height = 0.24 * plan.mark_mm
    page.box((left, y - 0.5 * height), (right - left, height), HAIRLINE)


def _draw_guides(page: Page, plan: Plan, row: MapRow, y: float) -> None:
    """Draw ticks at the exact multiples of the first register, and lines from them to what was played."""
    if row.first_hz is None:
        return
    registers = {2, *(stretch.register for stretch in row.stretches)}
    half = 0.42 * plan.mark_mm
    for register in sorted(registers):
        x = plan.x_mm(register * row.first_hz)
        page.line((x, y - half), (x, y + half), colour=QUIET, pt=FINE_PT)
    for entry in row.played:
        if entry.register > 1:
            start = plan.x_mm(entry.register * row.first_hz)
            page.line((start, y), (plan.x_mm(entry.frequency_hz), y), colour=INK, pt=FIRM_PT)


def _draw_dots(page: Page, x: float, y: float, radius: float, count: int) -> None:
    """Draw so many dots over one another, their middle at a point."""
    pitch = 2.25 * radius
    for k in range(count):
        page.path(_disc(x, y + (k - 0.5 * (count - 1)) * pitch, radius), fill=INK)


def _draw_names(page: Page, plan: Plan, row: MapRow, seen: Sequence[Seen], baseline: float) -> None:
    """Write each played note's name where it is free: right of its mark, left of it, or further off."""
    taken = [*(_seen_mm(plan, bump) for bump in seen), *_mark_spans_mm(plan, row)]
    for entry in row.played:
        name = note_text(entry.note)
        wide = width_mm(name, plan.name)
        left = _free_mm(plan, plan.x_mm(entry.frequency_hz), wide, taken)
        page.text(left, baseline, name, plan.name, colour=QUIET if entry.register == 1 else INK)
        taken.append((left, left + wide))


def _mark_spans_mm(plan: Plan, row: MapRow) -> list[tuple[float, float]]:
    spans = [_around(plan.x_mm(entry.frequency_hz), plan.dot_mm) for entry in row.played]
    spans += [_around(plan.x_mm(hz), 0.5 * width_mm("?", _UNDECIDED)) for hz in row.undecided_hz]
    if row.first_hz is not None:
        spans += [_around(plan.x_mm(2.0 * row.first_hz), 0.15)]
        spans += [_around(plan.x_mm(s.register * row.first_hz), 0.15) for s in row.stretches]
    return spans


def _around(x: float, half: float) -> tuple[float, float]:
    return x - half, x + half


def _free_mm(plan: Plan, x: float, wide: float, taken: Sequence[tuple[float, float]]) -> float:
    """Return the left end nearest to a mark at which a name touches nothing, the right side first."""
    near = plan.dot_mm + _NAME_GAP_MM
    places = [x + near, x - near - wide]
    steps = int((plan.right_mm - plan.left_mm) / _STEP_MM)
    further = [k * _STEP_MM for k in range(1, steps)]
    places += [place for step in further for place in (places[0] + step, places[1] - step)]
    for left in places:
        inside = left >= plan.left_mm and left + wide <= plan.right_mm
        if inside and not any(left < end + 0.5 and start - 0.5 < left + wide for start, end in taken):
            return left
    return places[0]


def _draw_stretch(page: Page, plan: Plan, stretch: Stretch, y: float) -> None:
    """Draw a stretch: a stem from the exact multiple, its uncertainty, its dots, or a wedge where beyond."""
    lane, radius = plan.lane, plan.dot_mm
    x, half = lane.x_mm(stretch.cents), 0.14 * plan.mark_mm
    if isfinite(stretch.uncertainty_cents):
        left, right = (lane.x_mm(stretch.cents + s * stretch.uncertainty_cents) for s in (-1.0, 1.0))
        page.box((left, y - half), (right - left, 2.0 * half), WING)
    page.line((lane.middle_mm, y), (x, y), colour=INK, pt=FIRM_PT)
    if abs(stretch.cents) > lane.limit_cents:
        page.path(_wedge(x, y, 1.6 * radius, 1.0 if stretch.cents > 0.0 else -1.0), fill=INK)
    else:
        _draw_dots(page, x, y, radius, stretch.register)
    words = f"{cents_text(stretch.cents)} {uncertainty_text(stretch.uncertainty_cents)}"
    page.text(lane.number_mm(stretch.register), y + 1.0, words, _NAME, align="right")


def _disc(x: float, y: float, radius: float) -> Outline:
    return Outline.unit_circle().transformed(Affine2D().scale(radius).translate(x, y))


def _wedge(x: float, y: float, size: float, side: float) -> Outline:
    back = x - side * 1.6 * size
    return Outline([(x, y), (back, y - size), (back, y + size), (x, y)], closed=True)


# --- the key -----------------------------------------------------------------------------------------------


def _draw_key(page: Page, top: float) -> None:
    page.line((MARGIN_MM, top - 4.0), (page.right_mm, top - 4.0))
    x = MARGIN_MM
    for count, words in ((1, "first register"), (2, "second"), (3, "third")):
        _draw_dots(page, x + 1.0, top, 0.55, count)
        x = _key_words(page, x + 3.0, top, words)
    page.text(x + 1.0, top + 1.0, "?", _UNDECIDED, align="center")
    x = _key_words(page, x + 3.4, top, "played, register undecided")
    page.line((x + 0.6, top - 1.6), (x + 0.6, top + 1.6), colour=QUIET, pt=FINE_PT)
    x = _key_words(page, x + 2.6, top, "exact octave or twelfth")
    page.box((x, top - 0.6), (4.0, 1.2), HAIRLINE)
    _key_words(page, x + 5.4, top, "seen in the breath, not played")
    x = MARGIN_MM
    for state, word in zip(STATES, ("closed", "open", "half-holed", "vented"), strict=True):
        draw_hole(page, x + 1.0, top + 5.4, 1.9, state)
        x = _key_words(page, x + 3.6, top + 5.4, f"{state}  {word}")
    x = _key_words(page, x, top + 5.4, "mouth end left")
    page.box((x, top + 4.7), (3.4, 1.4), WING)
    _draw_dots(page, x + 1.7, top + 5.4, 0.55, 2)
    _key_words(page, x + 4.8, top + 5.4, "stretch, with its uncertainty (standard, k = 1)")
    advice = (
        "A stretch that drifts along the scale comes from the bore and its ends; "
        "one that stands out at one fingering, from its holes (an estimate)."
    )
    page.text(MARGIN_MM, top + 11.8, advice, LABEL, colour=QUIET)


def _key_words(page: Page, x: float, y: float, words: str) -> float:
    page.text(x, y + 1.0, words, LABEL, colour=QUIET)
    return x + width_mm(words, LABEL) + 4.0
