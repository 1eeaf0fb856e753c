"""Inline drawings. The syntax of path data is that of W3C SVG 2, chapter 9."""

from xml.etree.ElementTree import tostring

from matplotlib.path import Path

from fluteprobe.flute.fingering import Fingering
from fluteprobe.pages.glyphs import FluteSize, draw_flute
from fluteprobe.pages.inline import Drawing, path_data
from fluteprobe.pages.paper import LABEL


def test_path_data_has_every_kind_of_segment() -> None:
    points = [(0, 0), (10, 0), (10, 5), (5, 5), (4, 5), (0, 4), (0, 1.0049), (0, 0)]
    codes = [Path.MOVETO, Path.LINETO, *[Path.CURVE3] * 2, *[Path.CURVE4] * 3, Path.CLOSEPOLY]
    assert path_data(Path(points, codes)) == "M0 0L10 0Q10 5 5 5C4 5 0 4 0 1Z"


def test_numbers_have_no_negative_zero_and_no_idle_digits() -> None:
    assert path_data(Path([(-0.001, 1.5), (2.126, -3.0)])) == "M0 1.5L2.13 -3"


def test_a_drawing_is_an_svg_element_in_millimetres() -> None:
    drawing = Drawing(20.0, 12.5)
    drawing.box((1.0, 2.0), (3.0, 4.0), "#123456")
    drawing.line((0.0, 0.0), (5.0, 0.0), colour="#654321", pt=72.0)
    drawing.text(1.0, 2.0, "<8va> & so on", LABEL, align="right")
    text = tostring(drawing.spoken("a box"), encoding="unicode")
    assert text == (
        '<svg width="20mm" height="12.5mm" viewBox="0 0 20 12.5" role="img" aria-label="a box">'
        '<path d="M1 2L4 2L4 6L1 6Z" fill="#123456" />'
        '<path d="M0 0L5 0" fill="none" stroke="#654321" stroke-width="25.4" />'
        '<text x="1" y="2" text-anchor="end" fill="#211c17" font-size="2.82" font-style="italic">'
        "&lt;8va&gt; &amp; so on</text></svg>"
    )


def test_the_pens_of_the_page_draw_into_it() -> None:
    drawing = Drawing(22.0, 40.0)
    draw_flute(drawing, 11.0, 0.0, FluteSize(hole_mm=4.0, pitch_mm=5.0, hands_apart_mm=1.0), Fingering("oxh"))
    svg = drawing.unspoken()
    assert svg.get("aria-hidden") == "true"
    assert len(svg.findall("path")) == 2 + 3 + 1  # the body, the mouth, three holes, and a finger on the last
