"""Paper, type, colours and saving.

Contrast is checked against WCAG 2.1 (W3C Recommendation, 2018), success criteria 1.4.3 (text, 4.5 to 1) and
1.4.11 (graphical objects, 3 to 1), with that document's relative luminance: what holds there holds in grey.
The same is asked of the colours as people see them who lack one kind of cone (protanopia, deuteranopia,
tritanopia), simulated by Machado, Oliveira & Fernandes, IEEE Trans. Vis. Comput. Graph. 15, 1291 (2009), at
severity 1; their matrices are given from memory, and checked to keep white white.
"""

from pathlib import Path

import matplotlib as mpl
import matplotlib.image
import pytest
from matplotlib.backends.backend_pdf import PdfPages
from matplotlib.patches import PathPatch
from matplotlib.text import Text

from fluteprobe.pages import paper
from fluteprobe.pages.paper import (
    ACCENT,
    BAND,
    INK,
    LABEL,
    QUIET,
    SMALL,
    SMALLEST_TYPE_PT,
    TITLE_SIZES_PT,
    WHITE,
    WING,
    WOOD,
    Page,
    Type,
    clean,
    house_style,
    paper_size_mm,
    printable,
    save_pages,
    shortened,
    width_mm,
    wrapped,
)  # fmt: skip

# For linear RGB, row by row.
SIGHT = {
    "protanopia": (
        (0.152286, 1.052583, -0.204868), (0.114503, 0.786281, 0.099216), (-0.003882, -0.048116, 1.051998),
    ),
    "deuteranopia": (
        (0.367322, 0.860646, -0.227968), (0.280085, 0.672501, 0.047413), (-0.011820, 0.042940, 0.968881),
    ),
    "tritanopia": (
        (1.255528, -0.076749, -0.178779), (-0.078411, 0.930809, 0.147602), (0.004733, 0.691367, 0.303900),
    ),
}  # fmt: skip
MARKS_ON_GROUNDS = [(INK, WOOD), (INK, BAND), (ACCENT, BAND), (WING, WHITE), (INK, WING)]

VOICES = [voice for voice in vars(paper).values() if isinstance(voice, Type)]


def luminance(colour: str, sight: str | None = None) -> float:
    """Return WCAG 2.1's relative luminance of an sRGB colour, as it is or as it is seen."""
    parts = [int(colour[k : k + 2], 16) / 255.0 for k in (1, 3, 5)]
    linear = [part / 12.92 if part <= 0.03928 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
    if sight:
        rows = SIGHT[sight]
        linear = [max(0.0, sum(w * part for w, part in zip(row, linear, strict=True))) for row in rows]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one: str, other: str, sight: str | None = None) -> float:
    """Return WCAG 2.1's contrast ratio of two colours, as they are or as they are seen."""
    light, dark = sorted((luminance(one, sight), luminance(other, sight)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


@pytest.mark.parametrize("colour", [INK, QUIET, ACCENT])
def test_text_is_legible_in_grey(colour: str) -> None:
    assert contrast(colour, WHITE) >= 4.5


@pytest.mark.parametrize("sight", SIGHT)
def test_text_and_marks_stand_out_whichever_cones_are_missing(sight: str) -> None:
    assert all(sum(row) == pytest.approx(1.0, abs=2e-6) for row in SIGHT[sight])
    assert min(contrast(colour, WHITE, sight) for colour in (INK, QUIET, ACCENT)) >= 4.5
    assert min(contrast(mark, ground, sight) for mark, ground in MARKS_ON_GROUNDS) >= 3.0


@pytest.mark.parametrize(("mark", "ground"), MARKS_ON_GROUNDS)
def test_marks_stand_out_in_grey(mark: str, ground: str) -> None:
    assert contrast(mark, ground) >= 3.0


def test_no_voice_is_smaller_than_seven_points() -> None:
    assert min(voice.size_pt for voice in VOICES) >= SMALLEST_TYPE_PT == 7.0
    assert min(TITLE_SIZES_PT) >= SMALLEST_TYPE_PT


def test_paper_sizes() -> None:
    """ISO 216 A4 is 210 by 297 mm, A6 105 by 148 mm; US Letter is 8.5 by 11 in."""
    assert paper_size_mm("A4") == (210.0, 297.0)
    assert paper_size_mm("letter") == pytest.approx((8.5 * 25.4, 11.0 * 25.4))
    assert paper_size_mm("a6") == (105.0, 148.0)
    assert paper_size_mm("4x6") == pytest.approx((4.0 * 25.4, 6.0 * 25.4))
    with pytest.raises(ValueError, match="paper is one of a4, letter, a6, 4x6, not 'a5'"):
        Page("a5")


def test_a_magnified_page_has_less_room_and_prints_larger() -> None:
    plain, large = Page(), Page(magnified=1.25)
    assert (large.width_mm, large.height_mm) == pytest.approx((168.0, 237.6))
    assert large.figure.get_size_inches() == pytest.approx(plain.figure.get_size_inches())
    large.text(large.margin_mm, 50.0, "word", SMALL)
    large.line((0.0, 0.0), (large.width_mm, large.height_mm), pt=1.0)
    label = next(artist for artist in large.figure.findobj(Text) if isinstance(artist, Text))
    lines = [artist for artist in large.figure.findobj(PathPatch) if isinstance(artist, PathPatch)]
    assert label.get_fontsize() == pytest.approx(1.25 * SMALL.size_pt)
    assert [line.get_linewidth() for line in lines] == pytest.approx([1.25])
    at = label.get_transform().transform(label.get_position()) / large.figure.dpi * 25.4
    assert at == pytest.approx((13.0, 297.0 - 62.5))  # the margin is as wide as on any page


def test_clean_keeps_words_and_drops_what_cannot_be_printed() -> None:
    assert clean(" two\n\twords\x00 \u202eright\ud800 ") == "two words right"
    assert clean("Ωκεανός $x$") == "Ωκεανός $x$"


def test_a_letter_that_no_font_has_becomes_a_box() -> None:
    assert printable("a\U0001f9ff", SMALL)[0] in {
        "a□",
        "a\U0001f9ff",
    }  # the latter where the system can draw it
    assert printable("\U000e0fff", SMALL)[0] == "□"
    assert printable("C♯5 −12 ± 20 °C …", LABEL)[0] == "C♯5 −12 ± 20 °C …"


def test_shortened_and_wrapped_text_fits() -> None:
    words = "a long line of words that does not fit into so little room"
    assert shortened(words, SMALL, 200.0) == words
    assert shortened(words, SMALL, 30.0).endswith("…")
    assert width_mm(shortened(words, SMALL, 30.0), SMALL) <= 30.0
    lines = wrapped(words.split(), SMALL, 30.0)
    assert " ".join(lines) == words
    assert all(width_mm(line, SMALL) <= 30.0 for line in lines)
    assert wrapped([], SMALL, 30.0) == []


def test_settings_come_back_as_they_were() -> None:
    before = {name: mpl.rcParams[name] for name in mpl.rcParams if name != "backend"}
    with house_style():
        assert mpl.rcParams["pdf.fonttype"] == 42
    assert {name: mpl.rcParams[name] for name in before} == before


def test_an_unknown_suffix_is_refused_before_anything_is_written(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match=r"chart\.docx: a page is written as \.pdf, \.png or \.svg"):
        save_pages([Page().figure], tmp_path / "chart.docx", title="", author=None)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("suffix", [".pdf", ".png", ".svg"])
def test_a_failure_leaves_the_old_file_and_no_draft(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, suffix: str
) -> None:
    target = tmp_path / f"chart{suffix}"
    target.write_text("old")

    def fail(*_: object, **__: object) -> None:
        raise OSError("disk full")

    page = Page()
    monkeypatch.setattr(page.figure, "savefig", fail)
    monkeypatch.setattr(PdfPages, "savefig", fail)
    with pytest.raises(OSError, match="disk full"):
        save_pages([page.figure], target, title="x", author=None)
    assert target.read_text() == "old"
    assert [file.name for file in tmp_path.iterdir()] == [target.name]


def test_further_pages_of_an_earlier_longer_chart_are_removed(tmp_path: Path) -> None:
    target = tmp_path / "chart.png"
    others = [tmp_path / name for name in ("chart-2.svg", "chart-9.png", "chart-old.png", "map-2.png")]
    for path in others:
        path.write_text("mine")
    save_pages([Page().figure] * 4, target, title="x", author=None, dots_per_inch=20)
    save_pages([Page().figure] * 2, target, title="x", author=None, dots_per_inch=20)
    left = sorted(path.name for path in tmp_path.iterdir())
    assert left == sorted(["chart.png", "chart-2.png", *(path.name for path in others)])


@pytest.mark.parametrize("dots_per_inch", [50, 120])
def test_a_png_has_the_resolution_asked_for(tmp_path: Path, dots_per_inch: int) -> None:
    (path,) = save_pages(
        [Page("a6").figure], tmp_path / "card.png", title="x", author=None, dots_per_inch=dots_per_inch
    )
    height, width, _ = mpl.image.imread(path).shape
    assert (width / 105.0, height / 148.0) == pytest.approx([dots_per_inch / 25.4] * 2, rel=0.01)


def test_further_pages_of_a_picture_are_numbered(tmp_path: Path) -> None:
    target = tmp_path / "chart.svg"
    written = save_pages([Page().figure, Page().figure], target, title="x", author="y")
    assert [file.name for file in written] == ["chart.svg", "chart-2.svg"]
    assert all(file.exists() for file in written)
