"""Drawings inside a web page: what the pens of the printed page draw, as SVG elements.

Conventions: those of `paper`: millimetres from the top left corner, y downwards, type in points. A drawing
has no margins, and its numbers are rounded to a hundredth of a millimetre.
"""

from xml.etree.ElementTree import Element, SubElement

from matplotlib.path import Path

from fluteprobe.pages.paper import HAIR_PT, INK, MM_PER_POINT, Align, Page, Type

_ANCHORS = {"left": "start", "center": "middle", "right": "end"}
_LETTERS = {int(Path.MOVETO): "M", int(Path.LINETO): "L", int(Path.CURVE3): "Q", int(Path.CURVE4): "C"}


class Drawing(Page):
    """A page to draw on that becomes an `<svg>` element instead of a sheet of paper."""

    def __init__(self, width_mm: float, height_mm: float) -> None:
        self.width_mm, self.height_mm = width_mm, height_mm
        self.margin_mm, self.gutter_mm, self.magnified = 0.0, 0.0, 1.0
        size = {"width": f"{_number(width_mm)}mm", "height": f"{_number(height_mm)}mm"}
        self.svg = Element("svg", size | {"viewBox": f"0 0 {_number(width_mm)} {_number(height_mm)}"})

    def spoken(self, words: str) -> Element:
        """Return the drawing with the words that stand for it where it is not seen."""
        self.svg.attrib |= {"role": "img", "aria-label": words}
        return self.svg

    def unspoken(self) -> Element:
        """Return the drawing as one that adds nothing to the text beside it."""
        self.svg.attrib |= {"aria-hidden": "true", "focusable": "false"}
        return self.svg

    def text(  # noqa: PLR0913 - as on a page
        self, x_mm: float, y_mm: float, words: str, voice: Type, *, align: Align = "left", colour: str = INK
    ) -> None:
        """Set one line of text on the baseline y."""
        place = {"x": _number(x_mm), "y": _number(y_mm), "text-anchor": _ANCHORS[align], "fill": colour}
        cut = {"font-style": "italic"} if voice.italic else {}
        cut |= {"font-weight": "bold"} if voice.bold else {}
        size = {"font-size": _number(voice.size_pt * MM_PER_POINT)}
        SubElement(self.svg, "text", place | size | cut).text = words

    def path(self, outline: Path, *, fill: str = "none", edge: str = "none", pt: float = HAIR_PT) -> None:
        """Draw a path in millimetres."""
        look = {"fill": fill}
        if edge != "none":
            look |= {"stroke": edge, "stroke-width": _number(pt * MM_PER_POINT)}
        SubElement(self.svg, "path", {"d": path_data(outline)} | look)


def path_data(outline: Path) -> str:
    """Return a path as SVG writes it."""
    parts = []
    for points, code in outline.iter_segments(simplify=False):
        letter = _LETTERS.get(int(code))
        parts.append("Z" if letter is None else letter + " ".join(_number(float(v)) for v in points))
    return "".join(parts)


def _number(value: float) -> str:
    return f"{round(value, 2) + 0.0:.2f}".rstrip("0").rstrip(".")
