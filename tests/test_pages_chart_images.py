"""What the chart looks like, against pictures of it in tests/reference/: regression, no outside authority.

The pictures are grey and small. A page may differ from its picture by little everywhere (another rasteriser
smooths its edges in another way) but not by much anywhere: both are compared as the mean grey of squares of
3 mm, of 255 levels. A missing hole, number or note head changes a square by tens of levels.

When the page was changed on purpose, `PYTHONPATH=tests python tests/test_pages_chart_images.py` draws the
pictures anew. Look at them before they are committed.
"""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from numpy.typing import NDArray
from PIL import Image
from surveys import heron, high_flute, low_flute, sixty_entries

from fluteprobe.flute.fingering import Fingering
from fluteprobe.pages.chart import chart_figures
from fluteprobe.pages.paper import house_style
from fluteprobe.survey import Survey

REFERENCE = Path(__file__).parent / "reference"
DPI = 60
SQUARE_PX = round(3.0 * DPI / 25.4)
MOST_ANYWHERE = 12.0  # of 255 levels
MOST_ON_AVERAGE = 0.5

Grey = NDArray[np.float64]

PICTURES: list[tuple[Callable[[], Survey], str, bool]] = [
    (heron, "a4", False), (heron, "a6", False), (sixty_entries, "letter", False), (low_flute, "a4", True),
    (high_flute, "4x6", False),
]  # fmt: skip


def name_of(make: Callable[[], Survey], paper: str, large: bool) -> str:
    return f"{make.__name__}-{paper}{'-large' if large else ''}.png"


def first_page(make: Callable[[], Survey], paper: str, large: bool) -> Grey:
    return grey(chart_figures(make(), paper=paper, large=large)[0])


def grey(page: Figure) -> Grey:
    """Return a page's lightness, 0 to 255, as rows of pixels."""
    page.set_dpi(DPI)
    canvas = FigureCanvasAgg(page)
    with house_style():
        canvas.draw()  # type: ignore[no-untyped-call]
    return np.asarray(canvas.buffer_rgba())[..., :3].mean(axis=-1)  # type: ignore[no-untyped-call,no-any-return]


def squares(picture: Grey) -> Grey:
    """Return the mean of every whole square."""
    rows, columns = (length // SQUARE_PX for length in picture.shape)
    cut = picture[: rows * SQUARE_PX, : columns * SQUARE_PX]
    means: Grey = cut.reshape(rows, SQUARE_PX, columns, SQUARE_PX).mean(axis=(1, 3))
    return means


@pytest.mark.parametrize(("make", "paper", "large"), PICTURES, ids=[name_of(*p) for p in PICTURES])
def test_the_page_looks_as_it_did(make: Callable[[], Survey], paper: str, large: bool) -> None:
    kept = np.asarray(Image.open(REFERENCE / name_of(make, paper, large)), dtype=np.float64)
    drawn = first_page(make, paper, large)
    assert drawn.shape == kept.shape
    off = np.abs(squares(drawn) - squares(kept))
    assert off.max() <= MOST_ANYWHERE
    assert off.mean() <= MOST_ON_AVERAGE


def test_the_comparison_sees_one_hole_opened() -> None:
    """The tolerance is tight enough to find one closed hole drawn open."""
    entries = tuple(
        replace(e, fingering=Fingering("oxxooo")) if str(e.fingering) == "oxxxoo" else e
        for e in heron().entries
    )
    changed = replace(heron(), entries=entries)
    before, after = (squares(grey(chart_figures(survey)[0])) for survey in (heron(), changed))
    assert np.abs(before - after).max() > 2.0 * MOST_ANYWHERE


def test_the_pictures_are_small() -> None:
    assert sum(path.stat().st_size for path in REFERENCE.iterdir()) < 200_000


if __name__ == "__main__":
    for picture in PICTURES:
        levels = 5.0 * np.round(first_page(*picture) / 5.0)  # 52 greys keep the files small
        Image.fromarray(levels.astype(np.uint8)).save(REFERENCE / name_of(*picture), optimize=True)
