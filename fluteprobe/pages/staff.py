"""Notes on a five-line staff: clefs, heads, accidentals, ledger lines and octave marks, drawn by ourselves.

Conventions: notes are written at concert pitch. A step is counted upwards from the staff's bottom line: its
lines are steps 0, 2, 4, 6 and 8, its spaces the odd ones between. Outlines are in staff spaces (the distance
between two lines), x to the right and y upwards; on the page all is in millimetres, y downwards.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby
from typing import Literal

import numpy as np
from matplotlib.path import Path
from matplotlib.transforms import Affine2D
from numpy.typing import NDArray

from fluteprobe.pages.paper import INK, LABEL, MM_PER_POINT, QUIET, Page, width_mm

Clef = Literal["treble", "bass"]

STEPS = "CDEFGAB"
TOP_LINE = 8
MOST_LEDGER_LINES = 3  # to either side; a note beyond is written octaves nearer, under or over a mark
OCTAVE_MARKS = {1: "8va", 2: "15ma", 3: "22ma", -1: "8vb", -2: "15mb", -3: "22mb"}
HEAD_WIDTH = 1.36  # in staff spaces, as it stands tilted
CLEF_WIDTH = 2.8

_BOTTOM_LINE: dict[Clef, int] = {"treble": 7 * 4 + 2, "bass": 7 * 2 + 4}  # E4 and G2, in steps from C0
_CLEF_LINE: dict[Clef, int] = {"treble": 2, "bass": 6}  # the line that the clef names: G4, F3
_CLEF_REACH = {"treble": (-4.2, 12.2), "bass": (0.8, 8.4)}  # lowest and highest, in steps
_CLEAR = 1.7  # steps kept free beyond the outermost head
_MARK_STEPS = 4.0  # room for an octave mark
_LINE = 0.11  # width of a staff line
_LEDGER = 0.16
_LEDGER_HALF = 1.12
_STAFF_COLOUR = "#8c8275"


@dataclass(frozen=True, slots=True, kw_only=True)
class Written:
    """A note as it is written: its step, the accidental before it, and how many octaves higher it sounds."""

    step: int
    accidental: str
    octaves: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Staff:
    """A clef and the notes after it, left to right."""

    clef: Clef
    notes: tuple[Written, ...]

    @property
    def above_steps(self) -> float:
        """Return how far above the bottom line the drawing reaches."""
        marked = _MARK_STEPS if any(note.octaves > 0 for note in self.notes) else 0.0
        highest = max((note.step for note in self.notes), default=TOP_LINE)
        return max(_CLEF_REACH[self.clef][1], highest + _CLEAR + marked)

    @property
    def below_steps(self) -> float:
        """Return how far under the bottom line the drawing reaches."""
        marked = _MARK_STEPS if any(note.octaves < 0 for note in self.notes) else 0.0
        lowest = min((note.step for note in self.notes), default=0)
        return -min(_CLEF_REACH[self.clef][0], lowest - _CLEAR - marked)

    def height_mm(self, space_mm: float) -> float:
        """Return the height of the drawing for a distance between two lines."""
        return 0.5 * space_mm * (self.above_steps + self.below_steps)


def staff_of(notes: Sequence[str]) -> Staff:
    """Return the staff that notes such as `C♯5` and `B♭3` stand on, in the clef with fewer ledger lines.

    An accidental that an earlier note on the same line or space needs, and this one does not, is cancelled.

    Raises
    ------
    ValueError
        If a note is not a letter from A to G, perhaps an accidental, and an octave number.
    """
    read = [_parts(note) for note in notes]
    clef = min(_BOTTOM_LINE, key=lambda name: sum(ledger_lines(n - _BOTTOM_LINE[name]) for n, _ in read))
    signs: dict[int, str] = {}
    written = []
    for number, accidental in read:
        cancels = not accidental and signs.get(number, "") in {"♯", "♭"}
        signs[number] = "♮" if cancels else accidental
        octaves = _octaves_off(number - _BOTTOM_LINE[clef])
        step = number - _BOTTOM_LINE[clef] - len(STEPS) * octaves
        written.append(Written(step=step, accidental=signs[number], octaves=octaves))
    return Staff(clef=clef, notes=tuple(written))


def ledger_lines(step: int) -> int:
    """Return how many ledger lines a head on that step needs."""
    return max(0, (step - TOP_LINE) // 2, -step // 2)


def draw_staff(
    page: Page,
    staff: Staff,
    place_mm: tuple[float, float, float],
    space_mm: float,
    xs_mm: Sequence[float],
) -> None:
    """Draw a staff given its left end, where the clef stands, its top and its right end; a note at each x."""
    left, top, right = place_mm
    pen = _Pen(page=page, bottom_mm=top + 0.5 * space_mm * staff.above_steps, space_mm=space_mm)
    for step in range(0, TOP_LINE + 1, 2):
        pen.line(step, left, right, _LINE, _STAFF_COLOUR)
    pen.sign(_CLEFS[staff.clef], left + 0.5 * CLEF_WIDTH * space_mm, _CLEF_LINE[staff.clef])
    for note, x in zip(staff.notes, xs_mm, strict=True):
        _draw_note(pen, note, x)
    for octaves, run in groupby(zip(staff.notes, xs_mm, strict=True), key=lambda pair: pair[0].octaves):
        if octaves:
            _draw_octave_mark(pen, octaves, list(run))


@dataclass(frozen=True, slots=True, kw_only=True)
class _Pen:
    """A page, where the staff's bottom line stands on it, and how far apart two lines are."""

    page: Page
    bottom_mm: float
    space_mm: float

    def y_mm(self, step: float) -> float:
        return self.bottom_mm - 0.5 * self.space_mm * step

    def line(self, step: float, left_mm: float, right_mm: float, width: float, colour: str) -> None:
        y = self.y_mm(step)
        self.page.line((left_mm, y), (right_mm, y), colour=colour, pt=width * self.space_mm / MM_PER_POINT)

    def sign(self, outline: Path, x_mm: float, step: float) -> None:
        placed = Affine2D().scale(self.space_mm, -self.space_mm).translate(x_mm, self.y_mm(step))
        self.page.path(outline.transformed(placed), fill=INK)


def _parts(note: str) -> tuple[int, str]:
    """Return a note's steps above C0, and its accidental."""
    letter, octave = note[:1], note[1:].lstrip("♯♭")
    try:
        return STEPS.index(letter or "?") + len(STEPS) * int(octave), note[1 : len(note) - len(octave)]
    except ValueError:
        raise ValueError(
            f"a note is a letter, perhaps ♯ or ♭, and an octave such as C♯5, not {note!r}"
        ) from None


def _octaves_off(step: int) -> int:
    """Return by how many octaves a step is too high (or, negative, too low) for a few ledger lines."""
    octaves = 0
    while ledger_lines(step - len(STEPS) * octaves) > MOST_LEDGER_LINES:
        octaves += 1 if step > 0 else -1
    return octaves


def _draw_note(pen: _Pen, note: Written, x_mm: float) -> None:
    for k in range(1, ledger_lines(note.step) + 1):
        step = TOP_LINE + 2 * k if note.step > 0 else -2 * k
        half = _LEDGER_HALF * pen.space_mm
        pen.line(step, x_mm - half, x_mm + half, _LEDGER, _STAFF_COLOUR)
    pen.sign(_HEAD, x_mm, note.step)
    if note.accidental:
        pen.sign(_ACCIDENTALS[note.accidental], x_mm - 1.58 * pen.space_mm, note.step)


def _draw_octave_mark(pen: _Pen, octaves: int, run: Sequence[tuple[Written, float]]) -> None:
    """Draw the mark over (or under) a run of notes: its word, a dashed line, and a hook at the end."""
    words = OCTAVE_MARKS.get(octaves, f"{abs(octaves)} octaves")
    steps = [note.step for note, _ in run]
    up = octaves > 0
    step = max(TOP_LINE, *steps) + _CLEAR + 0.5 if up else min(0, *steps) - _CLEAR - 0.5
    y = pen.y_mm(step) + (0.0 if up else 0.7 * pen.space_mm)
    left, right = run[0][1] - 0.7 * pen.space_mm, run[-1][1] + 1.2 * pen.space_mm
    pen.page.text(left, y, words, LABEL, colour=QUIET)
    y_line = y - 0.35 * pen.space_mm
    start, dash = left + width_mm(words, LABEL) + 0.6, 0.9
    for x in np.arange(start, right, 1.6 * dash):
        pen.page.line((x, y_line), (min(x + dash, right), y_line), colour=QUIET)
    if right > start:
        pen.page.line((right, y_line), (right, y_line + (0.9 if up else -0.9)), colour=QUIET)


# --- outlines, in staff spaces around the line or space they stand on -----------------------------

Node = tuple[float, float, float]  # x and y of a pen's way, and how wide it writes there


def _smooth(points: NDArray[np.float64]) -> tuple[list[tuple[float, float]], list[np.uint8]]:
    """Return Bézier curves through points, as vertices and codes without the first point's (Catmull-Rom)."""
    before, after = np.vstack([points[:1], points[:-1]]), np.vstack([points[1:], points[-1:]])
    slopes = (after - before) / 6.0
    vertices: list[tuple[float, float]] = []
    for k in range(len(points) - 1):
        curve = (points[k] + slopes[k], points[k + 1] - slopes[k + 1], points[k + 1])
        vertices += [(float(x), float(y)) for x, y in curve]
    return vertices, [Path.CURVE4] * len(vertices)


def _stroke(nodes: Sequence[Node]) -> Path:
    """Return the outline of what a pen of changing width writes along its way."""
    way = np.array(nodes)
    points, halves = way[:, :2], 0.5 * way[:, 2:]
    along = np.gradient(points, axis=0)
    across = np.stack([-along[:, 1], along[:, 0]], axis=1) / np.linalg.norm(along, axis=1, keepdims=True)
    one, other = points + halves * across, (points - halves * across)[::-1]
    (there, codes), (back, more) = _smooth(one), _smooth(other)
    start = (float(one[0, 0]), float(one[0, 1]))
    turn = (float(other[0, 0]), float(other[0, 1]))
    return Path(
        [start, *there, turn, *back, start],
        [Path.MOVETO, *codes, Path.LINETO, *more, Path.CLOSEPOLY],
    )


def _oval(x: float, y: float, across: float, up: float, tilt_degrees: float = 0.0) -> Path:
    turned = Affine2D().scale(0.5 * across, 0.5 * up).rotate_deg(tilt_degrees).translate(x, y)
    return Path.unit_circle().transformed(turned)


def _bar(x: float, y: float, across: float, up: float, rise: float = 0.0) -> Path:
    """Return a bar around a point, its right end higher than its left by `rise`."""
    left, right, half = x - 0.5 * across, x + 0.5 * across, 0.5 * up
    low, high = y - 0.5 * rise, y + 0.5 * rise
    corners = [
        (left, low - half),
        (right, high - half),
        (right, high + half),
        (left, low + half),
        (left, low - half),
    ]
    return Path(corners, closed=True)


_TREBLE = Path.make_compound_path(
    _stroke([
        (-0.16, -0.44, 0.06), (-0.42, -0.22, 0.12), (-0.50, 0.12, 0.17), (-0.26, 0.52, 0.22),
        (0.20, 0.62, 0.26), (0.72, 0.34, 0.24), (0.90, -0.14, 0.22), (0.66, -0.72, 0.18), (0.06, -1.00, 0.16),
        (-0.66, -0.82, 0.20), (-1.16, -0.24, 0.28), (-1.14, 0.50, 0.34), (-0.70, 1.20, 0.34),
        (-0.08, 1.86, 0.32), (0.40, 2.56, 0.32), (0.54, 3.30, 0.28), (0.40, 4.02, 0.18), (0.16, 4.32, 0.10),
        (-0.12, 4.02, 0.14), (-0.30, 3.30, 0.20), (-0.20, 2.30, 0.18), (0.02, 0.80, 0.16),
        (0.24, -0.80, 0.16), (0.36, -1.80, 0.16), (0.24, -2.36, 0.16), (-0.16, -2.62, 0.14),
        (-0.56, -2.46, 0.12), (-0.72, -2.10, 0.10),
    ]),
    _oval(-0.46, -2.06, 0.62, 0.62),
)  # fmt: skip
_BASS = Path.make_compound_path(
    _stroke([
        (-0.92, 0.10, 0.10), (-0.86, 0.58, 0.14), (-0.42, 0.98, 0.18), (0.14, 0.94, 0.26), (0.54, 0.46, 0.38),
        (0.54, -0.26, 0.40), (0.20, -1.04, 0.30), (-0.40, -1.72, 0.18), (-1.04, -2.18, 0.07),
    ]),
    _oval(-0.62, 0.02, 0.66, 0.62), _oval(1.10, 0.50, 0.34, 0.34), _oval(1.10, -0.50, 0.34, 0.34),
)  # fmt: skip
_CLEFS: dict[Clef, Path] = {"treble": _TREBLE, "bass": _BASS}
_HEAD = _oval(0.0, 0.0, HEAD_WIDTH, 0.84, 24.0)
_SHARP = Path.make_compound_path(
    _bar(-0.2, -0.06, 0.1, 2.5), _bar(0.2, 0.06, 0.1, 2.5), _bar(0.0, 0.38, 0.94, 0.25, 0.22),
    _bar(0.0, -0.38, 0.94, 0.25, 0.22),
)  # fmt: skip
_NATURAL = Path.make_compound_path(
    _bar(-0.26, 0.4, 0.1, 1.9), _bar(0.26, -0.4, 0.1, 1.9), _bar(0.0, 0.36, 0.62, 0.24, 0.14),
    _bar(0.0, -0.36, 0.62, 0.24, 0.14),
)  # fmt: skip
_FLAT = Path.make_compound_path(
    _bar(-0.34, 0.55, 0.1, 2.4),
    _stroke([
        (-0.34, 0.24, 0.08), (0.02, 0.44, 0.16), (0.32, 0.28, 0.25), (0.26, -0.06, 0.21),
        (-0.02, -0.36, 0.14), (-0.34, -0.62, 0.08),
    ]),
)  # fmt: skip
_ACCIDENTALS = {"♯": _SHARP, "♭": _FLAT, "♮": _NATURAL}
