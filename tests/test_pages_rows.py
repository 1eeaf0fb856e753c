"""How registers are shared out over rows. All surveys are invented; there is no outside source here."""

import pytest
from surveys import entry, heron, sixty_entries

from fluteprobe.pages.contents import NoteGroup, Section, chart_contents
from fluteprobe.pages.glyphs import FluteSize, Scale
from fluteprobe.pages.paper import HEADING, NOTE, WORD
from fluteprobe.pages.rows import PART_GAP_MM, WIDEST_COLUMN_MM, Look, Row, rows_of, word_voice

ROOM_MM = 165.0
LOOK = Look(
    flute=FluteSize(hole_mm=3.0, pitch_mm=4.0, hands_apart_mm=1.2),
    scale=Scale(height_mm=15.0, limit_cents=30.0, tolerance_cents=10.0),
    space_mm=1.5, heading=HEADING, note=NOTE, word=WORD, narrowest_mm=13.2, detailed=True,
)  # fmt: skip


def section(register: int, notes: int, fingerings: int = 1) -> Section:
    """Return a register with so many notes, each with so many fingerings."""
    groups = tuple(
        NoteGroup(note=f"{'CDEFGAB'[k % 7]}5", entries=(entry("xo", 2, 72 + k, 0.0),) * fingerings)
        for k in range(notes)
    )
    return Section(register=register, title=f"Register {register}", groups=groups, remark="")  # type: ignore[arg-type]


def rows(*sections: Section) -> list[Row]:
    return rows_of(sections, LOOK, 6, ROOM_MM, None)


def test_registers_that_fit_share_a_row_from_the_lowest() -> None:
    (row,) = rows(section(3, 1), section(2, 6))
    assert [part.section.register for part in row.parts] == [2, 3]
    end = row.left_mm(1, 0.0) + row.column_mm
    assert end <= ROOM_MM + 1e-9
    assert row.left_mm(1, 0.0) == pytest.approx(6 * row.column_mm + PART_GAP_MM)


def test_registers_that_do_not_fit_stand_one_under_the_other_from_the_highest() -> None:
    found = rows(section(3, 4), section(2, 10))
    assert [[part.section.register for part in row.parts] for row in found] == [[3], [2]]


def test_a_register_without_notes_is_a_heading() -> None:
    (row,) = rows(section(2, 0))
    assert (row.columns, row.parts[0].headed) == ((), True)
    assert row.height_mm < 15.0


@pytest.mark.parametrize(("notes", "fingerings"), [(5, 5), (13, 1), (14, 2), (1, 40), (20, 3)])
def test_every_fingering_has_a_column_and_no_row_is_too_wide(notes: int, fingerings: int) -> None:
    found = rows(section(2, notes, fingerings))
    assert sum(len(row.columns) for row in found) == notes * fingerings
    for row in found:
        assert LOOK.narrowest_mm <= row.column_mm <= WIDEST_COLUMN_MM
        assert row.column_mm * len(row.columns) <= ROOM_MM + 1e-9
        assert row.columns[0].leads
    assert [row.parts[0].headed for row in found] == [True] + [False] * (len(found) - 1)


def test_one_note_s_alternatives_stay_in_one_row_where_they_can() -> None:
    for made in (heron(), sixty_entries()):
        for part in chart_contents(made).sections:
            leads = [column for row in rows(part) for column in row.columns if column.leads]
            assert len(leads) == len(part.groups)


def test_long_fingerings_are_spelt_smaller() -> None:
    assert word_voice(6).size_pt > word_voice(10).size_pt >= 7.0
