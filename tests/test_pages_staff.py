"""Notes on a staff.

Where notes stand is common practice, no source: every primer of notation has G4 on the second line of the
treble staff, F3 on the fourth of the bass staff, and middle C on one ledger line between the two.
"""

from collections.abc import Iterator

import numpy as np
import pytest
from matplotlib.patches import PathPatch
from matplotlib.text import Text

from fluteprobe.pages.paper import Page
from fluteprobe.pages.staff import MOST_LEDGER_LINES, STEPS, Staff, draw_staff, ledger_lines, staff_of

SPACE_MM = 2.0
TOP_MM = 40.0
CHROMATIC = ("C", "C♯", "D", "D♯", "E", "F", "F♯", "G", "G♯", "A", "A♯", "B")


def drawn(staff: Staff) -> Page:
    page = Page()
    xs = [40.0 + 14.0 * k for k in range(len(staff.notes))]
    draw_staff(page, staff, (20.0, TOP_MM, 190.0), SPACE_MM, xs)
    return page


def extents(page: Page) -> Iterator[tuple[float, float, float, float]]:
    """Yield left, top, right and bottom of everything drawn, in page millimetres."""
    for patch in page.figure.findobj(PathPatch):
        if isinstance(patch, PathPatch):
            box = patch.get_path().get_extents()
            yield box.x0, box.y0, box.x1, box.y1


@pytest.mark.parametrize(
    ("note", "step", "lines"),
    [
        ("E4", 0, 0), ("G4", 2, 0), ("B4", 4, 0), ("F5", 8, 0), ("D4", -1, 0), ("C4", -2, 1), ("A3", -4, 2),
        ("G5", 9, 0), ("A5", 10, 1), ("C6", 12, 2), ("E6", 14, 3),
    ],
)  # fmt: skip
def test_where_notes_stand_in_the_treble_clef(note: str, step: int, lines: int) -> None:
    staff = staff_of([note, "G4", "G4", "G4"])
    assert (staff.clef, staff.notes[0].step, staff.notes[0].octaves) == ("treble", step, 0)
    assert ledger_lines(step) == lines


@pytest.mark.parametrize(("note", "step"), [("G2", 0), ("F3", 6), ("A3", 8), ("E2", -2), ("C4", 10)])
def test_where_notes_stand_in_the_bass_clef(note: str, step: int) -> None:
    staff = staff_of([note, "D3", "D2"])
    assert (staff.clef, staff.notes[0].step) == ("bass", step)


def test_every_note_from_c1_to_b8_is_near_the_staff_and_can_be_read_back() -> None:
    bottom = {"treble": STEPS.index("E") + 7 * 4, "bass": STEPS.index("G") + 7 * 2}
    for octave in range(1, 9):
        for name in CHROMATIC:
            staff = staff_of([f"{name}{octave}"])
            (written,) = staff.notes
            steps = written.step + bottom[staff.clef] + 7 * written.octaves
            assert (STEPS[steps % 7], steps // 7, written.accidental) == (name[0], octave, name[1:])
            assert ledger_lines(written.step) <= MOST_LEDGER_LINES


def test_notes_too_high_for_a_few_ledger_lines_stand_under_an_octave_mark() -> None:
    assert [note.octaves for note in staff_of(["E6", "F6", "G6", "C7", "A7"]).notes] == [0, 0, 1, 1, 2]
    words = [label.get_text() for label in drawn(staff_of(["E6", "G6", "C7", "A7"])).figure.findobj(Text)]
    assert [word for word in words if word] == ["8va", "15ma"]


def test_notes_too_low_stand_over_one() -> None:
    staff = staff_of(["F1", "C3"])
    assert [(note.step, note.octaves) for note in staff.notes] == [(-1, -1), (3, 0)]
    assert "8vb" in [label.get_text() for label in drawn(staff).figure.findobj(Text)]


def test_an_accidental_is_cancelled_on_the_same_line_only() -> None:
    signs = [note.accidental for note in staff_of(["B♭4", "B4", "B4", "F♯5", "F4", "F5"]).notes]
    assert signs == ["♭", "♮", "", "♯", "", "♮"]


@pytest.mark.parametrize("note", ["", "5", "C", "H4", "C♯x"])
def test_what_is_no_note_is_refused(note: str) -> None:
    with pytest.raises(ValueError, match="a note is a letter, perhaps ♯ or ♭, and an octave"):
        staff_of([note])


@pytest.mark.parametrize(
    "notes", [["G4"], ["A3", "C♯4", "E6"], ["C2", "E2", "B♭2"], ["A♯5", "C7", "C8"], ["F1", "C♯3"], []]
)
def test_all_that_is_drawn_keeps_inside_its_height(notes: list[str]) -> None:
    staff = staff_of(notes)
    boxes = list(extents(drawn(staff)))
    assert min(top for _, top, _, _ in boxes) >= TOP_MM - 0.01
    assert max(bottom for _, _, _, bottom in boxes) <= TOP_MM + staff.height_mm(SPACE_MM) + 0.01
    assert min(left for left, _, _, _ in boxes) >= 20.0 - 0.01


def test_heads_are_round_alike_and_centred_on_their_line() -> None:
    page = drawn(staff_of(["G4", "D5"]))
    spaces = [(x0, y0, x1, y1) for x0, y0, x1, y1 in extents(page) if 0.8 < (y1 - y0) / SPACE_MM < 1.1]
    heads = [box for box in spaces if box[2] - box[0] < 2.0 * SPACE_MM]
    assert len(heads) == 2
    bottom = TOP_MM + 0.5 * SPACE_MM * staff_of(["G4", "D5"]).above_steps
    for (x0, y0, x1, y1), x, step in zip(heads, (40.0, 54.0), (2, 6), strict=True):
        assert 0.5 * (x0 + x1) == pytest.approx(x, abs=0.01)
        assert 0.5 * (y0 + y1) == pytest.approx(bottom - 0.5 * SPACE_MM * step, abs=0.01)
        assert (x1 - x0) / (y1 - y0) == pytest.approx(1.33, abs=0.15)


def test_the_staff_has_five_lines_a_space_apart_and_a_ledger_line_where_needed() -> None:
    page = drawn(staff_of(["C4"]))
    flat = sorted((y0, x1 - x0) for x0, y0, x1, y1 in extents(page) if y1 - y0 < 1e-9)
    heights = np.array([y for y, _ in flat])
    assert np.diff(heights) == pytest.approx([SPACE_MM] * 5)
    assert [width > 100.0 for _, width in flat] == [True] * 5 + [False]
