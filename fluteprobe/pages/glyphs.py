"""What is drawn rather than written: holes under a finger, flutes, note names, deviations to scale.

Conventions: millimetres on the page, y downwards. A hole is drawn as what the finger leaves of it: full ink
is closed, a bare ring is open, and the light between ring and finger is the part left open. Mouth end up.
"""

from dataclasses import dataclass, replace
from math import atan2, degrees, isfinite, sqrt

import numpy as np
from matplotlib.path import Path
from matplotlib.transforms import Affine2D

from fluteprobe.flute.fingering import Fingering
from fluteprobe.pages.paper import (
    ACCENT,
    BAND,
    FIRM_PT,
    HAIR_PT,
    INK,
    MM_PER_POINT,
    QUIET,
    WHITE,
    WING,
    WOOD,
    Page,
    Type,
    width_mm,
)

FINGER_TO_HOLE = 2.2  # the finger's pad is drawn this much wider than the hole
WEDGE_MM = 2.3  # the width of a wedge
WING_MM = 2.1  # half the width of the box that shows an uncertainty
LEFT_OPEN = {"h": 0.5, "v": 0.22}  # share of the hole's width that the finger leaves


@dataclass(frozen=True, slots=True, kw_only=True)
class FluteSize:
    """How large a flute is drawn: hole diameter, distance between holes, and the space between the hands."""

    hole_mm: float
    pitch_mm: float
    hands_apart_mm: float
    head_mm: float = 4.4
    foot_mm: float = 0.8

    def height_mm(self, holes: int) -> float:
        """Return the height of a flute with that many holes."""
        return (
            self.head_mm + holes * self.pitch_mm + (self.hands_apart_mm if holes >= 4 else 0.0) + self.foot_mm
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Scale:
    """A scale for deviations: its height on the page, and its limit and tolerance to either side."""

    height_mm: float
    limit_cents: float
    tolerance_cents: float

    def rise_mm(self, cents: float) -> float:
        """Return how far above the middle a deviation stands, held inside the scale."""
        held = max(-self.limit_cents, min(self.limit_cents, cents))
        return 0.5 * self.height_mm * held / self.limit_cents


def draw_hole(page: Page, x_mm: float, y_mm: float, diameter_mm: float, state: str) -> None:
    """Draw one hole: `x` closed, `o` open, `h` half-holed, `v` vented."""
    radius = 0.5 * diameter_mm
    if state == "x":
        page.path(_disc(x_mm, y_mm, radius), fill=INK)
        return
    line_mm = 0.32
    page.path(_disc(x_mm, y_mm, radius - 0.5 * line_mm), fill=WHITE, edge=INK, pt=line_mm * 72.0 / 25.4)
    if state in LEFT_OPEN:
        page.path(_finger_on(x_mm, y_mm, radius, LEFT_OPEN[state]), fill=INK)
    if state == "v":
        page.line((x_mm + 1.3 * radius, y_mm), (x_mm + 1.95 * radius, y_mm), colour=INK, pt=FIRM_PT)


def draw_flute(  # noqa: PLR0913 - the flute, its size and place, and how it is drawn
    page: Page, x_mm: float, top_mm: float, size: FluteSize, fingering: Fingering, *, outlined: bool = False
) -> None:
    """Draw a flute upright, its mouth end at the top and its middle line at x; of wood, or outlined."""
    half = 0.82 * size.hole_mm
    bottom = top_mm + size.height_mm(fingering.holes)
    body = _body(x_mm, top_mm, bottom, half)
    page.path(body, fill="none" if outlined else WOOD, edge=QUIET if outlined else "none")
    page.box((x_mm - 0.4 * size.hole_mm, top_mm + 1.8), (0.8 * size.hole_mm, 0.9), QUIET)
    for k, state in enumerate(fingering.states):
        draw_hole(page, x_mm, top_mm + hole_depth_mm(size, k, fingering.holes), size.hole_mm, state)


def hole_depth_mm(size: FluteSize, hole: int, holes: int) -> float:
    """Return how far below the flute's top a hole's middle stands; hole 0 is nearest the mouth."""
    between_hands = size.hands_apart_mm if holes >= 4 and hole >= (holes + 1) // 2 else 0.0
    return size.head_mm + (hole + 0.5) * size.pitch_mm + between_hands


def draw_deviation(
    page: Page, at_mm: tuple[float, float], scale: Scale, cents: float, uncertainty_cents: float
) -> None:
    """Draw a deviation: a stem from the tuned pitch, then a dot within the tolerance or else a wedge.

    The wedge points away from the tuned pitch, its tip at the deviation. Wings span the uncertainty; one that
    is not a number has none.
    """
    x_mm, middle_mm = at_mm
    y = middle_mm - scale.rise_mm(cents)
    off = abs(cents) > scale.tolerance_cents
    colour = ACCENT if off else INK
    high, low = (middle_mm - scale.rise_mm(cents + side * uncertainty_cents) for side in (1.0, -1.0))
    if isfinite(uncertainty_cents):
        page.box((x_mm - WING_MM, high), (2.0 * WING_MM, low - high), WING)
    stem_end = y + (0.5 * WEDGE_MM if cents > 0.0 else -0.5 * WEDGE_MM) if off else y
    page.line((x_mm, middle_mm), (x_mm, stem_end), colour=colour, pt=FIRM_PT)
    page.path(_wedge(x_mm, y, up=cents > 0.0) if off else _disc(x_mm, y, 0.8), fill=colour)


def draw_scale(page: Page, left_mm: float, right_mm: float, middle_mm: float, scale: Scale) -> None:
    """Draw the ground that deviations stand on: the tolerance as a band, the tuned pitch as a line."""
    reach = scale.rise_mm(scale.tolerance_cents)
    page.box((left_mm, middle_mm - reach), (right_mm - left_mm, 2.0 * reach), BAND)
    page.line((left_mm, middle_mm), (right_mm, middle_mm), colour=QUIET, pt=HAIR_PT)


def draw_share(page: Page, at_mm: tuple[float, float], length_mm: float, share: float) -> None:
    """Draw a share from 0 to 1 as a fine line of which that part is firm, centred at a point."""
    x, y = at_mm
    left = x - 0.5 * length_mm
    page.line((left, y), (left + length_mm, y), colour=QUIET, pt=HAIR_PT)
    page.box((left, y - 0.25), (length_mm * min(1.0, max(0.0, share)), 0.5), INK)


def draw_note(page: Page, at_mm: tuple[float, float], note: str, voice: Type) -> None:
    """Write a note's name centred at a point: its letter, a smaller accidental, and a small octave number."""
    octave = note.lstrip("ABCDEFG♯♭")
    accidental = note[1 : len(note) - len(octave)]
    small, smaller = (replace(voice, size_pt=share * voice.size_pt) for share in (0.76, 0.62))
    parts = [(note[:1], voice, 0.0), (accidental, small, 0.09), (octave, smaller, 0.0)]
    widths = [width_mm(words, cut) if words else 0.0 for words, cut, _ in parts]
    apart = 0.006 * voice.size_pt
    x = at_mm[0] - 0.5 * (sum(widths) + apart * (2 if accidental else 1))
    for (words, cut, raised), width in zip(parts, widths, strict=True):
        if words:
            page.text(x, at_mm[1] - raised * voice.size_pt * MM_PER_POINT, words, cut)
        x += width + apart if words else 0.0


def _disc(x_mm: float, y_mm: float, radius_mm: float) -> Path:
    return Path.unit_circle().transformed(Affine2D().scale(radius_mm).translate(x_mm, y_mm))


def _finger_on(x_mm: float, y_mm: float, radius_mm: float, left_open: float) -> Path:
    """Return the part of a hole under a finger that has slid to the left (a lens between two arcs)."""
    pad = FINGER_TO_HOLE
    edge = 1.0 - 2.0 * left_open
    centre = edge - pad
    cross_x = (1.0 - pad**2 + centre**2) / (2.0 * centre)
    cross_y = sqrt(1.0 - cross_x**2)
    at_hole = degrees(atan2(cross_y, cross_x))
    at_pad = degrees(atan2(cross_y, cross_x - centre))
    rim, tip = Path.arc(at_hole, 360.0 - at_hole), Path.arc(-at_pad, at_pad)
    tip = tip.transformed(Affine2D().scale(pad).translate(centre, 0.0))
    lens = Path.make_compound_path(rim, tip)
    joined = np.where(np.arange(len(lens)) == len(rim), Path.LINETO, np.asarray(lens.codes))
    return Path(lens.vertices, joined).transformed(Affine2D().scale(radius_mm).translate(x_mm, y_mm))


def _body(x_mm: float, top_mm: float, bottom_mm: float, half_mm: float) -> Path:
    bend_mm = min(half_mm, 1.6)
    left, right, shoulder = x_mm - half_mm, x_mm + half_mm, top_mm + bend_mm
    left_side = [(left, bottom_mm), (left, shoulder), (left, top_mm), (left + bend_mm, top_mm)]
    right_side = [(right - bend_mm, top_mm), (right, top_mm), (right, shoulder), (right, bottom_mm)]
    points = [*left_side, *right_side, (left, bottom_mm)]
    go, bend = Path.LINETO, Path.CURVE3
    return Path(points, [Path.MOVETO, go, bend, bend, go, bend, bend, go, Path.CLOSEPOLY])


def _wedge(x_mm: float, y_mm: float, *, up: bool) -> Path:
    """Return a wedge whose point is at the deviation itself."""
    half, back = 0.5 * WEDGE_MM, y_mm + (0.85 * WEDGE_MM if up else -0.85 * WEDGE_MM)
    tip, right, left = (x_mm, y_mm), (x_mm + half, back), (x_mm - half, back)
    return Path([tip, right, left, tip], closed=True)
