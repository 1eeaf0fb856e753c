"""The comparison's page and the sheets for players, checked on the file itself. All flutes are invented."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from classes import KEYS, flute
from matplotlib.colors import to_rgba
from matplotlib.patches import PathPatch
from on_page import check_page, labels_on, pdf_text, shapes_on
from pypdf import PdfReader
from surveys import sixty_entries, strange_words

from fluteprobe.compare import compare
from fluteprobe.compare.standing import standing_of
from fluteprobe.compare.values import Comparison
from fluteprobe.pages.comparison import (
    MOST_COLUMNS,
    comparison_figures,
    limit_cents,
    title_of,
    write_comparison,
)
from fluteprobe.pages.paper import ACCENT, QUIET
from fluteprobe.pages.student import remarks_of, student_figures, write_students
from fluteprobe.survey import Survey

ROWS = len(KEYS)


def some(count: int, spread: float = 6.0) -> list[Survey]:
    """Return flutes of one build, some of which have only a part of the upper notes."""
    chances = np.random.default_rng(count)
    return [
        flute(f"Wren {k}", list(chances.normal(0.0, spread, ROWS - k % 4)), player=f"Player {k}",
              air_temperature_c=18.0 + k % 5)
        for k in range(count)
    ]  # fmt: skip


def pair() -> Comparison:
    return compare(some(2))


def class_of_thirty() -> Comparison:
    odd = flute("Odd", [0.0, 45.0, *[0.0] * (ROWS - 2)], air_temperature_c=20.0)
    return compare([*some(29), odd])


def two_hundred() -> Comparison:
    return compare(some(200))


def by_note() -> Comparison:
    five = {("xxxxx", 1): 69, ("xxxxo", 1): 72, ("oxxxx", 2): 81}
    return compare([*some(2), flute("Coot", [3.0] * 3, scale=five), flute("Rail", {})])


def sittings() -> Comparison:
    dated = (("Ada", "2024-01-10"), ("Bela", "2024-07-02"), ("Ada", "2025-01-20"))
    return compare(
        [flute("Wren", [9.0 * k] * ROWS, player=who, date=when) for k, (who, when) in enumerate(dated)]
    )


def strange() -> Comparison:
    return compare(
        [strange_words(), replace(strange_words(), entries=())], names=["a" * 90, "$\\frac{1}{0}$"]
    )


def long_lists() -> Comparison:
    return compare([sixty_entries(), sixty_entries()], names=["one", "two"])


def corners(shape: PathPatch) -> int:
    return int(np.asarray(shape.get_path().vertices).shape[0])


MADE: list[Callable[[], Comparison]] = [
    pair, class_of_thirty, two_hundred, by_note, sittings, strange, long_lists,
]  # fmt: skip


@pytest.mark.parametrize("make", MADE)
def test_pages_are_clean(make: Callable[[], Comparison]) -> None:
    for page in comparison_figures(make(), paper="letter" if make is by_note else "a4"):
        check_page(page)


@pytest.mark.parametrize("make", [pair, by_note, strange])
def test_sheets_are_clean_and_one_for_each_flute(make: Callable[[], Comparison]) -> None:
    comparison = make()
    pages = student_figures(comparison, paper="letter" if make is by_note else "a4")
    assert len(pages) == len(comparison.flutes)
    for page in pages:
        check_page(page)


def test_thirty_flutes_go_on_one_page_with_a_column_each() -> None:
    (page,) = comparison_figures(class_of_thirty())
    words = [label.get_text() for label in labels_on(page)]
    assert [word for word in words if word.isdecimal()][:30] == [str(k) for k in range(1, 31)]


def test_what_stands_out_is_framed_and_named() -> None:
    comparison = class_of_thirty()
    (page,) = comparison_figures(comparison)
    out = sum(cell.stands_out for row in comparison.rows for cell in row.played)
    framed = [s for s in shapes_on(page) if to_rgba(s.get_facecolor())[3] == 0.0 and corners(s) == 5]
    assert out >= 1
    assert len(framed) == out + 1  # and one in the key
    assert any("A4 xxxxxo: 30 +" in label.get_text() for label in labels_on(page))


def test_a_pair_s_differences_can_be_read_out_of_the_pdf(tmp_path: Path) -> None:
    comparison = pair()
    (target,) = write_comparison(comparison, tmp_path / "comparison.pdf")
    text = pdf_text(target)
    for difference in comparison.pairs[0].differences:
        number = f"{round(difference.cents):+d}".replace("-", "−").replace("+0", "0")
        assert f"{number} ±{difference.uncertainty_cents:.1f}" in text
    real = sum(d.verdict == "different" for d in comparison.pairs[0].differences)
    assert text.split().count("real") == real


def test_the_accent_is_never_alone() -> None:
    # Everything in the accent's colour is a wedge, a bold number, or a line between two marks.
    (page,) = comparison_figures(pair())
    accents = [s for s in shapes_on(page) if s.get_facecolor() == to_rgba(ACCENT)]
    assert {corners(shape) for shape in accents} <= {2, 4, 5}
    for label in labels_on(page):
        if label.get_color() == ACCENT:
            assert label.get_fontweight() == "bold"


def test_one_flute_before_and_after_is_told_by_what_moved(tmp_path: Path) -> None:
    before, after = [0.0] * ROWS, [20.0, *[0.0] * (ROWS - 1)]
    air = 20.0
    comparison = compare(
        [
            flute("Wren", off, air_temperature_c=air, date=f"2026-03-0{k}")
            for k, off in ((1, before), (2, after))
        ]
    )
    (target,) = write_comparison(comparison, tmp_path / "comparison.pdf")
    text = pdf_text(target)
    assert title_of(comparison) == "Wren"
    assert "moved" in text
    assert "G4 xxxxxx +20 ±1.5" in text


def test_many_flutes_have_how_many_play_in_place_of_columns() -> None:
    comparison = two_hundred()
    assert len(comparison.flutes) > MOST_COLUMNS
    (page,) = comparison_figures(comparison)
    words = [label.get_text() for label in labels_on(page)]
    assert "how many play it" in words
    assert "200 of 200" in words


def test_long_tables_go_on_further_pages() -> None:
    comparison = long_lists()
    pages = comparison_figures(comparison)
    assert len(pages) > 1
    fingerings = {row.by for row in comparison.rows}
    assert len(fingerings) == len(comparison.rows)


def test_a_few_far_off_do_not_press_the_others_together() -> None:
    comparison = compare([flute(f"F{k}", [5.0] * ROWS) for k in range(9)] + [flute("Odd", [900.0] * ROWS)],
                         by="fingering")  # fmt: skip
    assert limit_cents(comparison.rows) == 100.0
    calm = compare([flute(f"F{k}", [5.0] * ROWS) for k in range(2)])
    assert limit_cents(calm.rows) == 20.0


def test_files_are_the_same_each_time(tmp_path: Path) -> None:
    first, second = (write_comparison(pair(), tmp_path / f"{k}.pdf")[0].read_bytes() for k in "ab")
    assert first == second


def test_an_unknown_paper_is_told() -> None:
    with pytest.raises(ValueError, match=r"^paper is one of a4, letter, a6, 4x6, not 'b5'$"):
        comparison_figures(pair(), paper="b5")


# --- sheets ------------------------------------------------------------------------------------------


def trio() -> Comparison:
    some_notes = dict.fromkeys(KEYS[:8], 0.0)
    return compare(
        [flute("Wren", [12.0] * ROWS, player="Ada"), flute("Coot", [0.0] * ROWS), flute("Rail", some_notes)]
    )


def test_a_sheet_says_how_the_flute_stands_as_a_whole_and_what_it_has_yet_to_find() -> None:
    comparison = trio()
    said = dict(remarks_of(comparison, standing_of(comparison, 0)))
    assert said["as a whole"] == (
        "12.0 ±0.4 cents sharper than the others: a little less breath brings it nearer (common practice)",
    )
    assert "to find yet" not in said
    rail = dict(remarks_of(comparison, standing_of(comparison, 2)))
    assert rail["to find yet"] == ("A5 (xxxxxo, 2 of 3)", "B5 (xxxxoo, 2 of 3)")


def test_how_a_flute_stands_is_from_the_median_of_the_others() -> None:
    comparison = trio()
    stand = standing_of(comparison, 0).rows[1]
    a4 = 440.0 * 2.0 ** (12.0 / 1200.0)
    assert (stand.off_cents, stand.others_cents) == pytest.approx((12.0, 0.0), abs=1e-9)
    assert stand.beats_hz == pytest.approx(a4 - 440.0)
    # Two others of 1 cent each: their mean has 1 / √2, and this one its own.
    assert stand.uncertainty_cents == pytest.approx((1.0 + 0.5) ** 0.5)
    assert stand.verdict == "different"


def test_a_fingering_is_lent_by_flutes_with_as_many_holes_alone() -> None:
    comparison = by_note()
    coot = [flute.label for flute in comparison.flutes].index("Coot")
    assert comparison.flutes[coot].facts.holes == 5
    assert {stand.lend for stand in standing_of(comparison, coot).rows} == {None}


def test_the_uncertainty_of_a_median_of_others_holds() -> None:
    # By Monte-Carlo: medians of nine normal values scatter 1.2533 / 3 (large samples), here within 6 %.
    chances = np.random.default_rng(2)
    found = np.std(np.median(chances.normal(0.0, 1.0, (20000, 9)), axis=1))
    comparison = compare([flute(f"F{k}", [0.0] * ROWS) for k in range(10)])
    told = standing_of(comparison, 0).rows[0].uncertainty_cents
    assert told is not None
    assert (told**2 - 1.0) ** 0.5 == pytest.approx(found, rel=0.06)


def test_sheets_are_one_document_with_a_page_each(tmp_path: Path) -> None:
    (target,) = write_students(trio(), tmp_path / "students.pdf")
    pages = PdfReader(target).pages
    assert len(pages) == 3
    assert "Ada" in pages[0].extract_text()


def test_the_most_notes_that_fit_a_sheet_are_kept() -> None:
    comparison = compare([sixty_entries(), sixty_entries()], names=["one", "two"])
    page, _ = student_figures(comparison)
    check_page(page)
    labels = labels_on(page)
    (left_out,) = (int(x.get_text().split()[1]) for x in labels if x.get_text().endswith(" higher"))
    own = [x for x in labels if " ±" in x.get_text() and x.get_color() == QUIET]
    rows = len(comparison.rows)
    assert len(own) == rows - left_out
    assert 0 < left_out < rows
