"""Hole symbols, flutes and deviations, measured on the drawing itself."""

from collections.abc import Iterator

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.patches import PathPatch
from matplotlib.text import Text

from fluteprobe.flute.fingering import Fingering
from fluteprobe.pages.glyphs import (
    LEFT_OPEN,
    FluteSize,
    Scale,
    draw_deviation,
    draw_flute,
    draw_hole,
    draw_note,
    hole_depth_mm,
)
from fluteprobe.pages.paper import ACCENT, INK, MM_PER_INCH, NOTE, Page

SIZE = FluteSize(hole_mm=4.0, pitch_mm=5.5, hands_apart_mm=1.6)
SCALE = Scale(height_mm=30.0, limit_cents=30.0, tolerance_cents=10.0)
DPI = 300


def inked_share(state: str) -> float:
    """Return how much of a hole's disc is dark, from 0 to 1, counted in pixels."""
    page = Page("a6")
    draw_hole(page, 50.0, 50.0, 8.0, state)
    page.figure.set_dpi(DPI)
    canvas = FigureCanvasAgg(page.figure)
    canvas.draw()  # type: ignore[no-untyped-call]
    grey = np.asarray(canvas.buffer_rgba())[..., :3].mean(axis=-1)  # type: ignore[no-untyped-call]
    per_mm = DPI / MM_PER_INCH
    rows, columns = np.indices(grey.shape)
    inside = np.hypot(columns - 50.0 * per_mm, rows - 50.0 * per_mm) < 3.6 * per_mm
    return float((grey[inside] < 128).mean())


def test_ink_grows_as_the_finger_covers_the_hole() -> None:
    """The four states are told apart by how much is dark, at least a tenth of the hole between neighbours."""
    shares = [inked_share(state) for state in "ohvx"]
    assert np.all(np.diff(shares) > 0.1)
    assert shares[0] < 0.05
    assert shares[-1] == pytest.approx(1.0, abs=0.01)


def test_left_open_is_ordered_like_the_openness_of_a_fingering() -> None:
    half, vented = Fingering("hv").openness
    assert (LEFT_OPEN["h"] > LEFT_OPEN["v"]) == (half > vented)


@pytest.mark.parametrize("holes", [1, 3, 4, 5, 6, 10])
def test_holes_stand_in_order_inside_the_flute(holes: int) -> None:
    depths = [hole_depth_mm(SIZE, k, holes) for k in range(holes)]
    assert depths == sorted(depths)
    assert min(np.diff(depths), default=9.9) >= SIZE.hole_mm
    assert depths[0] - SIZE.hole_mm / 2 > 0.0
    assert depths[-1] + SIZE.hole_mm / 2 < SIZE.height_mm(holes)


def test_a_flute_has_one_dark_disc_for_each_closed_hole() -> None:
    page = Page()
    draw_flute(page, 50.0, 50.0, SIZE, Fingering("xoxxoo"))
    dark = [patch for patch in patches(page) if patch.get_facecolor() == rgba(INK)]
    assert len(dark) == 3


@pytest.mark.parametrize(
    ("cents", "mm"), [(0.0, 0.0), (10.0, 5.0), (-20.0, -10.0), (30.0, 15.0), (49.0, 15.0)]
)
def test_deviations_are_to_scale_and_stay_on_it(cents: float, mm: float) -> None:
    assert SCALE.rise_mm(cents) == pytest.approx(mm)


@pytest.mark.parametrize(("cents", "points"), [(12.0, "up"), (-12.0, "down")])
def test_off_pitch_is_a_wedge_whose_tip_is_the_deviation(cents: float, points: str) -> None:
    page = Page()
    draw_deviation(page, (50.0, 100.0), SCALE, cents, 0.0)
    wedge = next(patch for patch in patches(page) if patch.get_facecolor() == rgba(ACCENT))
    ys = np.asarray(wedge.get_path().vertices)[:, 1]
    tip = 100.0 - SCALE.rise_mm(cents)
    assert (ys.min() if points == "up" else ys.max()) == pytest.approx(tip)


def test_within_the_tolerance_nothing_is_in_the_accent_colour() -> None:
    page = Page()
    draw_deviation(page, (50.0, 100.0), SCALE, 9.9, 2.0)
    assert not any(rgba(ACCENT) in (patch.get_facecolor(), patch.get_edgecolor()) for patch in patches(page))


def test_an_unknown_uncertainty_has_no_wings() -> None:
    page = Page()
    draw_deviation(page, (50.0, 100.0), SCALE, 3.0, float("nan"))
    assert len(list(patches(page))) == 2  # stem and dot


@pytest.mark.parametrize("note", ["C5", "F♯4", "B♭6", "A-1", "D10"])
def test_a_note_is_written_letter_by_letter_from_left_to_right(note: str) -> None:
    page = Page()
    draw_note(page, (50.0, 50.0), note, NOTE)
    parts = sorted((label.get_position()[0], label.get_text()) for label in page.figure.findobj(Text))
    assert "".join(words for _, words in parts) == note


def patches(page: Page) -> Iterator[PathPatch]:
    return (artist for artist in page.figure.findobj(PathPatch) if isinstance(artist, PathPatch))


def rgba(colour: str) -> tuple[float, ...]:
    return (*(int(colour[k : k + 2], 16) / 255.0 for k in (1, 3, 5)), 1.0)
