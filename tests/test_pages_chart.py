"""The printed chart, checked on the file itself. All surveys are invented."""

import os
import re
import subprocess
import sys
from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from itertools import combinations
from pathlib import Path
from xml.etree import ElementTree

import matplotlib as mpl
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch
from matplotlib.text import Text
from matplotlib.transforms import Bbox
from pypdf import PdfReader
from surveys import (
    all_off,
    entry,
    first_register_only,
    heron,
    nothing_heard,
    one_take,
    sixty_entries,
    strange_words,
)  # fmt: skip

from fluteprobe.pages.chart import chart_figures, scale_limit_cents, write_chart
from fluteprobe.pages.contents import cents_text, note_text, uncertainty_text
from fluteprobe.survey import Survey

TOUCH_PX = 1.0  # at 72 dots per inch: boxes of text are drawn around the line's height, not around the ink


def flat() -> Survey:
    return all_off(-49.0)


def sharp() -> Survey:
    return all_off(49.0)


SURVEYS: list[Callable[[], Survey]] = [
    heron, one_take, nothing_heard, first_register_only, sixty_entries, flat, sharp, strange_words,
]  # fmt: skip


@pytest.fixture(scope="module", params=SURVEYS, ids=lambda make: str(make.__name__))
def survey(request: pytest.FixtureRequest) -> Survey:
    made: Survey = request.param()
    return made


@pytest.fixture(scope="module", params=["a4", "letter"])
def pages(survey: Survey, request: pytest.FixtureRequest) -> list[Figure]:
    return chart_figures(survey, paper=request.param)


def text_boxes(page: Figure) -> list[tuple[str, Bbox]]:
    page.set_dpi(72)
    FigureCanvasAgg(page)
    return [(label.get_text(), label.get_window_extent()) for label in labels_of(page)]


def labels_of(page: Figure) -> list[Text]:
    return [label for label in page.findobj(Text) if isinstance(label, Text) and label.get_text().strip()]


def settings() -> dict[object, object]:
    """Return matplotlib's settings but the backend, which settles itself when it is first read."""
    return {name: mpl.rcParams[name] for name in mpl.rcParams if name != "backend"}


def test_no_two_texts_overlap(pages: list[Figure]) -> None:
    for page in pages:
        for (one, a), (other, b) in combinations(text_boxes(page), 2):
            across = min(a.x1, b.x1) - max(a.x0, b.x0)
            down = min(a.y1, b.y1) - max(a.y0, b.y0)
            assert min(across, down) <= TOUCH_PX, (one, other)


def test_nothing_stands_outside_the_page(pages: list[Figure]) -> None:
    for page in pages:
        edge = page.bbox.width, page.bbox.height
        boxes = text_boxes(page)
        boxes += [
            ("patch", p.get_window_extent()) for p in page.findobj(PathPatch) if isinstance(p, PathPatch)
        ]
        edge = page.bbox.width, page.bbox.height
        for words, box in boxes:
            assert box.x0 >= 0.0, words
            assert box.y0 >= 0.0, words
            assert box.x1 <= edge[0], words
            assert box.y1 <= edge[1], words


def test_the_smallest_type_is_seven_points(pages: list[Figure]) -> None:
    sizes = [float(label.get_fontsize()) for page in pages for label in labels_of(page)]
    assert all(size >= 7.0 for size in sizes)


def test_every_entry_can_be_read_out_of_the_pdf(survey: Survey, tmp_path: Path) -> None:
    target = tmp_path / "chart.pdf"
    write_chart(survey, target)
    text = "\n".join(page.extract_text() for page in PdfReader(target).pages)
    words, joined = Counter(text.split()), re.sub(r"\s", "", text)
    fingerings = Counter(str(e.fingering) for e in survey.entries)
    assert all(words[word] >= times for word, times in fingerings.items())
    deviations = Counter(cents_text(e.cents) for e in survey.entries)
    assert all(words[word] >= times for word, times in deviations.items())
    assert all(uncertainty_text(e.uncertainty_cents) in words for e in survey.entries)
    assert all(note_text(e.note) in joined for e in survey.entries)


def test_the_pdf_names_its_flute_and_carries_its_fonts(tmp_path: Path) -> None:
    target = tmp_path / "chart.pdf"
    write_chart(heron(), target)
    reader = PdfReader(target)
    assert reader.metadata is not None
    assert (reader.metadata.title, reader.metadata.author) == ("Heron: fingering chart", "Osier & Reed")
    assert "/CreationDate" not in reader.metadata
    fonts = list(reader.pages[0]["/Resources"]["/Font"].values())  # type: ignore[index]
    inner = [font["/DescendantFonts"][0] if "/DescendantFonts" in font else font for font in fonts]
    assert inner
    assert all("/FontFile2" in font["/FontDescriptor"] for font in inner)


def test_what_else_the_page_says(tmp_path: Path) -> None:
    target = tmp_path / "chart.pdf"
    write_chart(heron(), target)
    text = re.sub(r"\s+", " ", PdfReader(target).pages[0].extract_text())
    for words in (
        "Heron", "Osier & Reed", "A minor", "Second register", "First register", "xhxxxx (over)", "undecided",
        "half-holed", "A4 = 440 Hz", "air 22 °C", "carried to 20 °C: an estimate", "est. at 20 °C",
        "2024-05-11", "67 %", "played by Ada", "takes/xxxxxx-over-3.wav", "±10", "+30",
    ):  # fmt: skip
        assert words in text


def test_text_in_the_svg_is_text(tmp_path: Path) -> None:
    target = tmp_path / "chart.svg"
    write_chart(heron(), target)
    root = ElementTree.parse(target).getroot()  # noqa: S314 - our own file
    texts = {node.text for node in root.iter("{http://www.w3.org/2000/svg}text")}
    assert {str(e.fingering) for e in heron().entries} <= texts
    assert "Heron" in texts


@pytest.mark.parametrize("suffix", [".pdf", ".png", ".svg"])
def test_the_same_survey_gives_the_same_bytes_in_any_process(tmp_path: Path, suffix: str) -> None:
    """Python orders sets anew in every process; the file must not follow. Nor is pyplot ever loaded."""
    program = (
        "import sys, pathlib; sys.path[:0] = sys.argv[2].split(';')\n"
        "from surveys import heron; from fluteprobe.pages.chart import write_chart\n"
        "write_chart(heron(), pathlib.Path(sys.argv[1])); assert 'matplotlib.pyplot' not in sys.modules"
    )
    here = Path(__file__).resolve().parent
    for seed in ("1", "2"):
        command = [sys.executable, "-W", "error", "-c", program]
        command += [str(tmp_path / f"{seed}{suffix}"), f"{here};{here.parent}"]
        subprocess.run(command, check=True, env={**os.environ, "PYTHONHASHSEED": seed})
    write_chart(heron(), tmp_path / f"3{suffix}")
    first, *others = [(tmp_path / f"{seed}{suffix}").read_bytes() for seed in "123"]
    assert all(first == other for other in others)


def test_matplotlib_keeps_its_settings_and_folders_stay_clean(tmp_path: Path) -> None:
    before = settings()
    write_chart(one_take(), tmp_path / "chart.png")
    assert settings() == before
    assert [file.name for file in tmp_path.iterdir()] == ["chart.png"]


@pytest.mark.parametrize("paper", ["a4", "letter"])
def test_a_six_hole_flute_with_22_entries_takes_one_page(paper: str) -> None:
    assert len(chart_figures(heron(), paper=paper)) == 1


def test_sixty_entries_spill_onto_further_pages(tmp_path: Path) -> None:
    write_chart(sixty_entries(), tmp_path / "chart.svg")
    pages = sorted(file.name for file in tmp_path.iterdir())
    assert pages[:2] == ["chart-2.svg", "chart-3.svg"]
    assert len(pages) == len(chart_figures(sixty_entries())) == 3


def test_the_scale_holds_every_deviation_with_its_uncertainty() -> None:
    assert scale_limit_cents([], 10.0) == 25.0
    assert scale_limit_cents([entry("x", 1, 60, 22.7, uncertainty=4.6)], 10.0) == 30.0
    assert scale_limit_cents([entry("x", 1, 60, 49.0, uncertainty=900.0)], 10.0) == 60.0
    assert scale_limit_cents([entry("x", 1, 60, 5.0)], 40.0) == 100.0


def test_a_wider_tolerance_calls_less_of_it_off() -> None:
    def bold(tolerance_cents: float) -> int:
        (page,) = chart_figures(heron(), tolerance_cents=tolerance_cents)
        return sum(
            label.get_fontweight() == "bold" for label in page.findobj(Text) if isinstance(label, Text)
        )

    assert bold(10.0) == sum(abs(e.cents) > 10.0 for e in heron().entries)
    assert bold(25.0) == 0


def test_unknown_paper_is_refused() -> None:
    with pytest.raises(ValueError, match="paper is one of a4, letter, not 'a3'"):
        chart_figures(heron(), paper="a3")


def test_ten_holes_and_one_hole_are_drawn() -> None:
    for states in ("x", "vhoxvhoxvh"):
        survey = one_take()
        facts = replace(survey.flute, holes=len(states))
        assert len(chart_figures(replace(survey, flute=facts, entries=(entry(states, 2, 80, 3.0),)))) == 1
