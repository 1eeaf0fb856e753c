"""The printed chart, checked on the file itself. All surveys are invented."""

import os
import re
import subprocess
import sys
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from xml.etree import ElementTree

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch
from matplotlib.text import Text
from numpy.typing import NDArray
from pypdf import PdfReader
from surveys import (
    all_off,
    entry,
    first_register_only,
    heron,
    high_flute,
    low_flute,
    nothing_heard,
    one_take,
    sixty_entries,
    strange_words,
)  # fmt: skip

from fluteprobe.flute.fingering import Fingering
from fluteprobe.forecast.values import Prediction
from fluteprobe.pages.chart import chart_figures, scale_limit_cents, write_chart
from fluteprobe.pages.contents import cents_text, chart_contents, note_text, uncertainty_text
from fluteprobe.pages.paper import CARDS, house_style
from fluteprobe.survey import Entry, Survey

TOUCH_PX = 1.0  # at 72 dots per inch: boxes of text are drawn around the line's height, not around the ink
TOLERANCE_CENTS = 10.0

Boxes = NDArray[np.float64]  # rows of left, bottom, right, top in points


def flat() -> Survey:
    return all_off(-49.0)


def sharp() -> Survey:
    return all_off(49.0)


EVERY: list[Callable[[], Survey]] = [
    heron, one_take, nothing_heard, first_register_only, sixty_entries, flat, sharp, strange_words, low_flute,
    high_flute,
]  # fmt: skip
SHEETS: list[tuple[Callable[[], Survey], str, bool]] = [
    *((make, "a4", False) for make in EVERY),
    (heron, "letter", False),
    *((make, "a6", False) for make in (heron, sixty_entries, strange_words, flat, nothing_heard)),
    *((make, "4x6", False) for make in (heron, high_flute)),
    *((make, "a4", True) for make in (heron, sixty_entries)),
]


@dataclass(frozen=True, slots=True, kw_only=True)
class Seen:
    """What stands on one page: its size, its texts with their boxes and sizes, and all that is drawn."""

    size_pt: tuple[float, float]
    words: tuple[str, ...]
    text_boxes: Boxes
    type_sizes_pt: tuple[float, ...]
    mark_boxes: Boxes


@dataclass(frozen=True, slots=True, kw_only=True)
class Chart:
    """A chart as a reader gets it, and the entries that are to be on it."""

    entries: tuple[Entry, ...]
    pages: tuple[Seen, ...]
    pdf_text: str


@pytest.mark.parametrize(
    ("make", "paper", "large"), SHEETS, ids=[f"{s[0].__name__}-{s[1]}-{s[2]}" for s in SHEETS]
)
def test_every_chart_is_legible_and_whole(
    make: Callable[[], Survey], paper: str, large: bool, tmp_path: Path
) -> None:
    """Each chart is drawn once, and looked at in all these ways: drawing is what takes time."""
    chart = written(make(), paper, large, tmp_path)
    no_two_texts_overlap(chart)
    nothing_stands_outside_the_page(chart)
    the_smallest_type_is_seven_points(chart)
    every_entry_can_be_read_out_of_the_pdf(chart)
    every_page_but_a_lone_one_is_numbered(chart)


def written(survey: Survey, paper: str, large: bool, folder: Path) -> Chart:
    target = folder / "chart.pdf"
    drawn: list[Figure] = []
    with pytest.MonkeyPatch.context() as patched:
        patched.setattr("fluteprobe.pages.chart._draw_page", _keeping(drawn))
        write_chart(survey, target, paper=paper, large=large)
    contents = chart_contents(survey, TOLERANCE_CENTS, best_only=paper in CARDS)
    return Chart(
        entries=tuple(e for section in contents.sections for e in section.entries),
        pages=tuple(seen(page) for page in drawn),
        pdf_text="\n".join(page.extract_text() for page in PdfReader(target).pages),
    )


def _keeping(drawn: list[Figure]) -> Callable[..., Figure]:
    from fluteprobe.pages.chart import _draw_page

    def draw(*arguments: object) -> Figure:
        drawn.append(_draw_page(*arguments))  # type: ignore[arg-type]
        return drawn[-1]

    return draw


def seen(page: Figure) -> Seen:
    page.set_dpi(72)
    FigureCanvasAgg(page)
    labels = [label for label in texts_of(page) if label.get_text().strip()]
    marks = [patch for patch in page.findobj(PathPatch) if isinstance(patch, PathPatch)]
    with house_style():
        boxes = [label.get_window_extent().extents for label in labels]
    return Seen(
        size_pt=(page.bbox.width, page.bbox.height),
        words=tuple(label.get_text() for label in labels),
        text_boxes=np.array(boxes),
        type_sizes_pt=tuple(float(label.get_fontsize()) for label in labels),
        mark_boxes=np.array([mark_box(patch) for patch in marks]),
    )


def mark_box(patch: PathPatch) -> NDArray[np.float64]:
    points = patch.get_transform().transform(np.asarray(patch.get_path().vertices))
    return np.concatenate([points.min(axis=0), points.max(axis=0)])


def texts_of(page: Figure) -> list[Text]:
    return [label for label in page.findobj(Text) if isinstance(label, Text)]


def settings() -> dict[object, object]:
    """Return matplotlib's settings but the backend, which settles itself when it is first read."""
    return {name: mpl.rcParams[name] for name in mpl.rcParams if name != "backend"}


def no_two_texts_overlap(chart: Chart) -> None:
    for page in chart.pages:
        low, high = page.text_boxes[:, :2], page.text_boxes[:, 2:]
        shared = np.minimum(high[:, None], high) - np.maximum(low[:, None], low)
        over = np.triu(shared.min(axis=2) > TOUCH_PX, k=1)
        assert [(page.words[i], page.words[j]) for i, j in np.argwhere(over)] == []


def nothing_stands_outside_the_page(chart: Chart) -> None:
    for page in chart.pages:
        boxes = np.concatenate([page.text_boxes, page.mark_boxes])
        assert boxes[:, :2].min() >= 0.0
        assert np.all(boxes[:, 2:].max(axis=0) <= page.size_pt)


def the_smallest_type_is_seven_points(chart: Chart) -> None:
    assert min(min(page.type_sizes_pt) for page in chart.pages) >= 7.0 - 1e-9


def every_entry_can_be_read_out_of_the_pdf(chart: Chart) -> None:
    words, joined = Counter(chart.pdf_text.split()), re.sub(r"\s", "", chart.pdf_text)
    fingerings = Counter(str(e.fingering) for e in chart.entries)
    assert all(words[word] >= times for word, times in fingerings.items())
    deviations = Counter(cents_text(e.cents, TOLERANCE_CENTS) for e in chart.entries)
    assert all(words[word] >= times for word, times in deviations.items())
    assert all(note_text(e.note) in joined for e in chart.entries)


def every_page_but_a_lone_one_is_numbered(chart: Chart) -> None:
    count = len(chart.pages)
    expected = [f"page {k} of {count}" for k in range(1, count + 1)] if count > 1 else []
    assert [word for page in chart.pages for word in page.words if word.startswith("page ")] == expected


# --- the files -------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def heron_pdf(tmp_path_factory: pytest.TempPathFactory) -> PdfReader:
    target = tmp_path_factory.mktemp("pdf") / "chart.pdf"
    assert write_chart(heron(), target) == (target,)
    return PdfReader(target)


def test_the_pdf_names_its_flute_and_language_and_carries_its_fonts(heron_pdf: PdfReader) -> None:
    facts = heron_pdf.metadata
    assert facts is not None
    assert (facts.title, facts.author) == ("Heron: fingering chart", "Osier & Reed")
    assert "/CreationDate" not in facts
    assert heron_pdf.trailer["/Root"]["/Lang"] == "en"  # type: ignore[index]
    fonts = list(heron_pdf.pages[0]["/Resources"]["/Font"].values())  # type: ignore[index]
    inner = [font["/DescendantFonts"][0] if "/DescendantFonts" in font else font for font in fonts]
    assert inner
    assert all("/FontFile2" in font["/FontDescriptor"] for font in inner)
    assert "/XObject" not in heron_pdf.pages[0]["/Resources"] or not heron_pdf.pages[0].images  # type: ignore[operator]


def test_what_else_the_page_says(heron_pdf: PdfReader) -> None:
    text = re.sub(r"\s+", " ", heron_pdf.pages[0].extract_text())
    for words in (
        "Heron", "Osier & Reed", "A minor", "Second register", "First register", "xhxxxx (over)", "undecided",
        "half-holed", "A4 = 440 Hz", "air 22 °C", "carried to 20 °C: an estimate", "est. at 20 °C",
        "2024-05-11", "2 of 3", "played by Ada", "takes/xxxxxx-over-3.wav", "±10", "+30",
    ):  # fmt: skip
        assert words in text
    assert all(uncertainty_text(e.uncertainty_cents) in text for e in heron().entries)


def test_text_in_the_svg_is_text(tmp_path: Path) -> None:
    target = tmp_path / "chart.svg"
    write_chart(heron(), target)
    root = ElementTree.parse(target).getroot()  # noqa: S314 - our own file
    texts = [node.text or "" for node in root.iter("{http://www.w3.org/2000/svg}text")]
    assert {str(e.fingering) for e in heron().entries} <= set(texts)
    assert {cents_text(e.cents, TOLERANCE_CENTS) for e in heron().entries} <= set(texts)
    assert all(note_text(e.note) in "".join(texts) for e in heron().entries)
    assert root.findtext("{http://www.w3.org/2000/svg}title") == "Heron: fingering chart"
    assert root.get("lang") == "en"


def test_the_same_survey_gives_the_same_bytes_in_any_process(tmp_path: Path) -> None:
    """Python orders sets anew in every process; the file must not follow. Nor is pyplot ever loaded."""
    program = (
        "import sys, pathlib; sys.path[:0] = sys.argv[2].split(';')\n"
        "from surveys import heron; from fluteprobe.pages.chart import write_chart\n"
        "for suffix in sys.argv[3:]:\n"
        "    write_chart(heron(), pathlib.Path(sys.argv[1] + suffix), dots_per_inch=60)\n"
        "assert 'matplotlib.pyplot' not in sys.modules"
    )
    here, suffixes = Path(__file__).resolve().parent, (".pdf", ".png", ".svg")
    command = [sys.executable, "-W", "error", "-c", program, str(tmp_path / "other"), f"{here};{here.parent}"]
    subprocess.run([*command, *suffixes], check=True, env={**os.environ, "PYTHONHASHSEED": "1"})
    for suffix in suffixes:
        write_chart(heron(), tmp_path / f"own{suffix}", dots_per_inch=60)
        own, other = ((tmp_path / f"{name}{suffix}").read_bytes() for name in ("own", "other"))
        assert own == other


def test_matplotlib_keeps_its_settings_and_folders_stay_clean(tmp_path: Path) -> None:
    before = settings()
    write_chart(one_take(), tmp_path / "chart.png", dots_per_inch=40)
    assert settings() == before
    assert [file.name for file in tmp_path.iterdir()] == ["chart.png"]


def test_a_shorter_chart_leaves_no_page_of_a_longer_one(tmp_path: Path) -> None:
    target = tmp_path / "chart.png"
    longer = write_chart(sixty_entries(), target, dots_per_inch=40)
    assert [path.name for path in longer] == ["chart.png", "chart-2.png", "chart-3.png"]
    assert write_chart(one_take(), target, dots_per_inch=40) == (target,)
    assert list(tmp_path.iterdir()) == [target]


# --- what is on it ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("paper", ["a4", "letter"])
def test_a_six_hole_flute_with_22_entries_takes_one_page(paper: str) -> None:
    assert len(chart_figures(heron(), paper=paper)) == 1


def test_it_takes_both_sides_of_a_card() -> None:
    assert len(chart_figures(heron(), paper="a6")) == len(chart_figures(heron(), paper="4x6")) == 2


def test_large_print_is_larger() -> None:
    def smallest(large: bool) -> float:
        pages = chart_figures(heron(), large=large)
        return min(
            float(label.get_fontsize()) for page in pages for label in texts_of(page) if label.get_text()
        )

    assert smallest(large=True) == pytest.approx(1.3 * smallest(large=False))


def test_upper_registers_that_fit_share_a_row_and_the_third_ends_it() -> None:
    third = entry("xxxxxx", 3, 88, -4.0)
    few = replace(heron(), entries=(*[e for e in heron().entries if e.register == 1], third,
                                    *[e for e in heron().entries if e.register == 2][:5]))  # fmt: skip
    (page,) = chart_figures(few)
    headings = {t.get_text(): t.get_position() for t in texts_of(page) if t.get_text().endswith("register")}
    assert headings["Second register"][1] == headings["Third register"][1] < headings["First register"][1]
    assert headings["Second register"][0] < headings["Third register"][0]


def test_the_scale_holds_every_deviation_with_its_uncertainty() -> None:
    assert scale_limit_cents([], 10.0) == 25.0
    assert scale_limit_cents([entry("x", 1, 60, 22.7, uncertainty=4.6)], 10.0) == 30.0
    assert scale_limit_cents([entry("x", 1, 60, 49.0, uncertainty=900.0)], 10.0) == 60.0
    assert scale_limit_cents([entry("x", 1, 60, 5.0)], 40.0) == 100.0


def test_a_wider_tolerance_calls_less_of_it_off() -> None:
    def bold(tolerance_cents: float) -> int:
        (page,) = chart_figures(heron(), tolerance_cents=tolerance_cents)
        return sum(label.get_fontweight() == "bold" for label in texts_of(page))

    assert bold(10.0) == sum(abs(e.cents) > 10.0 for e in heron().entries)
    assert bold(25.0) == 0


def test_the_printed_number_and_its_mark_agree_at_the_tolerance() -> None:
    (page,) = chart_figures(low_flute())
    bold = {label.get_text() for label in texts_of(page) if label.get_fontweight() == "bold"}
    assert bold == {"+10.3", "−10.02"}


def test_unknown_paper_and_a_large_card_are_refused() -> None:
    with pytest.raises(ValueError, match="paper is one of a4, letter, a6, 4x6, not 'a3'"):
        chart_figures(heron(), paper="a3")
    with pytest.raises(ValueError, match="large print needs a larger paper than A6"):
        chart_figures(heron(), paper="A6", large=True)


@pytest.mark.parametrize("paper", ["a4", "a6"])
def test_ten_holes_and_one_hole_are_drawn(paper: str) -> None:
    for states in ("x", "vhoxvhoxvh"):
        survey = one_take()
        facts = replace(survey.flute, holes=len(states))
        changed = replace(survey, flute=facts, entries=(entry(states, 2, 80, 3.0),))
        assert len(chart_figures(changed, paper=paper)) == 1


# --- what is foretold --------------------------------------------------------------------------------


def foretold(word: str, note: str, rank: int, chance: float = 0.9) -> Prediction:
    return Prediction(
        fingering=Fingering(word),
        register=2,
        frequency_hz=900.0 + 10.0 * rank,
        uncertainty_cents=12.0,
        note=note,
        cents=-7.0,
        basis="fitted tube",
        likely_to_speak=chance,
        fills=note,
        rank=rank,
    )


def test_what_is_foretold_is_marked_as_such_and_stands_under_what_was_played() -> None:
    """Once a note, the fingering to try first; its chance to speak where takes are counted otherwise."""
    told = [foretold("oxxxxo", "B5", 2, 0.45), foretold("oxoxxx", "A5", 1), foretold("oxxxoo", "B5", 3)]
    section = chart_contents(heron(), foretold=told).sections[-1]
    assert section.foretold
    assert section.title == "Foretold"
    assert section.remark.startswith("Not played yet: estimates")
    assert [str(entry.fingering) for entry in section.entries] == ["oxoxxx", "oxxxxo"]
    words = {text.get_text() for page in chart_figures(heron(), foretold=told) for text in page.findobj(Text)}
    assert {"Foretold", "speaks", "90 %", "45 %"} <= words


def test_nothing_foretold_leaves_the_chart_as_it_is() -> None:
    hardly = replace(foretold("oxxxxo", "B5", 1), rank=None)
    assert chart_contents(heron(), foretold=[hardly]) == chart_contents(heron())
