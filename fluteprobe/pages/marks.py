"""The small signs of the comparison's pages: dots and wedges, frames, registers, fingerings lying down.

Conventions: millimetres on the page, y downwards; a place is a sign's middle. A dot is with the note (or with
the others), a wedge points to the side it is off: up is sharp.
"""

from matplotlib.path import Path
from matplotlib.transforms import Affine2D

from fluteprobe.flute.fingering import Fingering
from fluteprobe.pages.glyphs import draw_hole
from fluteprobe.pages.paper import ACCENT, FINE_PT, FIRM_PT, HAIRLINE, INK, WHITE, Page

HOLE_PITCH_MM = 2.75
MARK_MM = 2.1

Place = tuple[float, float]

_HOLE_MM = 1.9


def draw_mark(page: Page, at: Place, cents: float, tolerance_cents: float, size_mm: float = MARK_MM) -> None:
    """Draw a dot for what is within the tolerance, a wedge up or down for what is sharp or flat."""
    if abs(cents) <= tolerance_cents:
        page.path(disc(at, 0.36 * size_mm), fill=INK)
    else:
        page.path(wedge(at, size_mm, up=cents > 0.0), fill=ACCENT)


def draw_lying(page: Page, fingering: Fingering, left_mm: float, y_mm: float) -> None:
    """Draw a fingering lying down, its mouth end to the left."""
    for k, state in enumerate(fingering.states):
        draw_hole(page, left_mm + (k + 0.5) * HOLE_PITCH_MM, y_mm, _HOLE_MM, state)


def draw_register(page: Page, at: Place, register: int) -> None:
    """Draw a register as so many dots, one over another."""
    for k in range(register):
        page.path(disc((at[0], at[1] + (k - 0.5 * (register - 1)) * 1.25), 0.48), fill=INK)


def draw_flutes_shape(page: Page, at: Place, flute: int) -> None:
    """Draw one of up to three flutes: the first a dot, the second a ring, the third a diamond."""
    shape = disc(at, 0.95) if flute < 2 else diamond(at, 1.2)
    page.path(shape, fill=INK if flute == 0 else WHITE, edge=INK, pt=FINE_PT)


def draw_middle(page: Page, at: Place) -> None:
    """Draw the sign for the middle of a group and its scatter, as in a key."""
    x, y = at
    page.box((x - 1.2, y - 0.9), (2.4, 1.8), HAIRLINE)
    page.line((x, y - 1.4), (x, y + 1.4), colour=INK, pt=FIRM_PT)


def draw_frame(page: Page, at: Place, half_mm: Place) -> None:
    """Draw a frame around a place, given half its width and height."""
    (x, y), (across, down) = at, half_mm
    left, right, top, bottom = x - across, x + across, y - down, y + down
    corners = [(left, top), (right, top), (right, bottom), (left, bottom), (left, top)]
    page.path(Path(corners, closed=True), edge=INK, pt=FINE_PT)


def disc(at: Place, radius_mm: float) -> Path:
    """Return a disc."""
    return Path.unit_circle().transformed(Affine2D().scale(radius_mm).translate(*at))


def diamond(at: Place, half_mm: float) -> Path:
    """Return a square standing on its corner."""
    x, y = at
    points = [(x, y - half_mm), (x + half_mm, y), (x, y + half_mm), (x - half_mm, y), (x, y - half_mm)]
    return Path(points, closed=True)


def wedge(at: Place, size_mm: float, *, up: bool) -> Path:
    """Return a wedge that points up or down."""
    x, y = at
    reach = 0.5 * size_mm if up else -0.5 * size_mm
    points = [(x, y - reach), (x + 0.5 * size_mm, y + reach), (x - 0.5 * size_mm, y + reach), (x, y - reach)]
    return Path(points, closed=True)
