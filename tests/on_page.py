"""What stands on a drawn page: its texts with their boxes, its shapes, and checks for every page."""

import re
from itertools import combinations
from pathlib import Path

from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch
from matplotlib.text import Text
from matplotlib.transforms import Bbox
from pypdf import PdfReader

DOTS_PER_INCH = 288  # fine enough that letters are not moved to whole pixels by more than 1 % of a line
TOUCH_PX = 4.0  # one point: boxes of text are drawn around the line's height, not around the ink
SMALLEST_TYPE_PT = 7.0


def labels_on(page: Figure) -> list[Text]:
    return [label for label in page.findobj(Text) if isinstance(label, Text) and label.get_text().strip()]


def shapes_on(page: Figure) -> list[PathPatch]:
    return [shape for shape in page.findobj(PathPatch) if isinstance(shape, PathPatch)]


def text_boxes(page: Figure) -> list[tuple[str, Bbox]]:
    page.set_dpi(DOTS_PER_INCH)
    FigureCanvasAgg(page)
    return [(label.get_text(), label.get_window_extent()) for label in labels_on(page)]


def check_page(page: Figure) -> None:
    """Check that no two texts overlap, nothing stands outside the page, and no type is too small."""
    boxes = text_boxes(page)
    for (one, a), (other, b) in combinations(boxes, 2):
        across = min(a.x1, b.x1) - max(a.x0, b.x0)
        down = min(a.y1, b.y1) - max(a.y0, b.y0)
        assert min(across, down) <= TOUCH_PX, (one, other)
    boxes += [("a shape", shape.get_window_extent()) for shape in shapes_on(page)]
    for words, box in boxes:
        assert min(box.x0, box.y0) >= 0.0, words
        assert box.x1 <= page.bbox.width, words
        assert box.y1 <= page.bbox.height, words
    assert all(float(label.get_fontsize()) >= SMALLEST_TYPE_PT for label in labels_on(page))
    assert not any(label.get_parse_math() for label in labels_on(page))


def pdf_text(target: Path) -> str:
    """Return all text of a PDF with single spaces."""
    return re.sub(r"\s+", " ", " ".join(page.extract_text() for page in PdfReader(target).pages))
