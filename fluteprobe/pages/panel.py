"""A panel: a rectangle on the page in which arrays are drawn to scale, with its ticks.

Conventions: millimetres on the page, y downwards there and upwards in the data. What lies beyond a panel's
range is held at its edge (levels) or left out (places along x); points that are not numbers break a line.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, floor, log10

import numpy as np
from matplotlib.path import Path
from numpy.typing import NDArray

from fluteprobe.pages.paper import BAND, INK, LABEL, MINUS, QUIET, Page

Floats = NDArray[np.float64]
Range = tuple[float, float]

DASH_MM = 0.8


@dataclass(frozen=True, slots=True, kw_only=True)
class Panel:
    """Where a panel stands, and which data it shows; `log_x` where x runs in octaves."""

    left_mm: float
    top_mm: float
    width_mm: float
    height_mm: float
    across: Range
    up: Range
    log_x: bool = False

    @property
    def right_mm(self) -> float:
        """The panel's right edge."""
        return self.left_mm + self.width_mm

    @property
    def bottom_mm(self) -> float:
        """The panel's lower edge."""
        return self.top_mm + self.height_mm

    def x_mm(self, values: Floats) -> Floats:
        """Return where values along x stand."""
        low, high = self.across
        if self.log_x:
            share = np.log(np.maximum(values, 1e-9) / low) / np.log(high / low)
        else:
            share = (values - low) / (high - low)
        return np.asarray(self.left_mm + self.width_mm * share)

    def y_mm(self, values: Floats) -> Floats:
        """Return where values along y stand, held inside the panel."""
        low, high = self.up
        return np.asarray(self.bottom_mm - self.height_mm * np.clip((values - low) / (high - low), 0.0, 1.0))

    def point_mm(self, x: float, y: float) -> tuple[float, float]:
        """Return where one point stands."""
        return float(self.x_mm(np.array([x]))[0]), float(self.y_mm(np.array([y]))[0])

    def holds(self, x: float) -> bool:
        """Whether a place along x is within the panel."""
        return self.across[0] <= x <= self.across[1]


def draw_line(  # noqa: PLR0913 - data, colour and width are all of them needed
    page: Page, panel: Panel, x: Floats, y: Floats, *, colour: str = INK, pt: float = 0.6
) -> None:
    """Draw y over x (points,) as a line."""
    inside = (x >= panel.across[0]) & (x <= panel.across[1]) & np.isfinite(y)
    if inside.sum() < 2:
        return
    points = np.stack([panel.x_mm(x), panel.y_mm(np.where(np.isfinite(y), y, 0.0))], axis=1)[inside]
    begins = np.diff(np.flatnonzero(inside), prepend=-2) > 1
    codes = np.where(begins, Path.MOVETO, Path.LINETO)
    page.path(Path(points, codes), edge=colour, pt=pt)


def draw_area(page: Page, panel: Panel, x: Floats, between: tuple[Floats, Floats], colour: str) -> None:
    """Fill between two lines (points,) over x, from edge to edge of the panel."""
    low, high = between
    inside = x[(x > panel.across[0]) & (x < panel.across[1])]
    ends = [edge for edge in panel.across if x[0] <= edge <= x[-1]]
    kept = np.unique(np.concatenate([inside, ends]))
    if len(kept) < 2:
        return
    places = panel.x_mm(kept)
    upper = np.stack([places, panel.y_mm(np.interp(kept, x, high))], axis=1)
    lower = np.stack([places, panel.y_mm(np.interp(kept, x, low))], axis=1)[::-1]
    page.path(Path(np.concatenate([upper, lower, upper[:1]]), closed=True), fill=colour)


def draw_dashes(page: Page, panel: Panel, x: Floats, y: Floats, *, colour: str) -> None:
    """Draw a short level dash at each point (points,) that is inside the panel."""
    inside = (x >= panel.across[0]) & (x <= panel.across[1]) & (y >= panel.up[0]) & (y <= panel.up[1])
    if not inside.any():
        return
    places, heights = panel.x_mm(x[inside]), panel.y_mm(y[inside])
    ends = np.stack([places - 0.5 * DASH_MM, heights, places + 0.5 * DASH_MM, heights], axis=1)
    codes = np.tile([Path.MOVETO, Path.LINETO], len(places))
    page.path(Path(ends.reshape(-1, 2), codes), edge=colour, pt=0.9)


def draw_x_ticks(page: Page, panel: Panel, ticks: Sequence[tuple[float, str]]) -> None:
    """Name places along x under the panel."""
    for value, words in ticks:
        x, _ = panel.point_mm(value, panel.up[0])
        page.line((x, panel.bottom_mm), (x, panel.bottom_mm + 0.9), colour=QUIET)
        page.text(x, panel.bottom_mm + 3.8, words, LABEL, align="center", colour=QUIET)


def draw_y_ticks(page: Page, panel: Panel, ticks: Sequence[tuple[float, str]]) -> None:
    """Name heights left of the panel, with a fine line across it."""
    for value, words in ticks:
        _, y = panel.point_mm(panel.across[0], value)
        page.line((panel.left_mm, y), (panel.right_mm, y), colour=BAND)
        page.text(panel.left_mm - 1.5, y + 1.0, words, LABEL, align="right", colour=QUIET)


def round_ticks(low: float, high: float, most: int, *, signed: bool = False) -> list[tuple[float, str]]:
    """Return up to `most` round values (steps of 1, 2 or 5) within a range, with their words."""
    step = 10.0 ** floor(log10((high - low) / most))
    step = next(s for s in (step, 2.0 * step, 5.0 * step, 10.0 * step) if _count(low, high, s) <= most)
    decimals = max(0, -floor(log10(step) + 1e-9))
    values = [k * step for k in range(ceil(low / step - 1e-9), floor(high / step + 1e-9) + 1)]
    return [(value, _number(value, decimals, signed=signed)) for value in values]


def octave_ticks(low: float, high: float) -> list[tuple[float, str]]:
    """Return the values 1, 2 and 5 of each decade within a range, with their words."""
    decades = range(floor(log10(low)), ceil(log10(high)) + 1)
    values = [digit * 10.0**decade for decade in decades for digit in (1.0, 2.0, 5.0)]
    return [(value, f"{value:g}") for value in values if low <= value <= high]


def _count(low: float, high: float, step: float) -> int:
    return floor(high / step + 1e-9) - ceil(low / step - 1e-9) + 1


def _number(value: float, decimals: int, *, signed: bool) -> str:
    words = f"{abs(value):.{decimals}f}"
    if float(words) == 0.0:
        return words
    sign = MINUS if value < 0.0 else "+" if signed else ""
    return f"{sign}{words}"
