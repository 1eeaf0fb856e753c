"""The key: each sign that may stand on the page, in lines that fit. There is no outside source here."""

import pytest
from matplotlib.text import Text

from fluteprobe.flute.fingering import STATES
from fluteprobe.pages.key import STATE_WORDS, draw_key, key_of
from fluteprobe.pages.paper import Page


def words_of(page: Page) -> list[str]:
    return [label.get_text() for label in page.figure.findobj(Text) if isinstance(label, Text)]


def test_every_state_of_a_hole_has_its_words() -> None:
    assert set(STATE_WORDS) == set(STATES)


@pytest.mark.parametrize("room_mm", [60.0, 110.0, 165.0, 400.0])
def test_signs_keep_their_order_and_fit_the_room(room_mm: float) -> None:
    key = key_of(STATES, 10.0, room_mm, brief=False)
    one_line = key_of(STATES, 10.0, 9999.0, brief=False)
    assert [sign.words for line in key.lines for sign in line] == [
        sign.words for line in one_line.lines for sign in line
    ]
    assert all(sum(sign.whole_mm + 5.0 for sign in line) - 5.0 <= room_mm for line in key.lines)
    assert key.height_mm == pytest.approx(6.0 * len(key.lines) + 4.5)


def test_the_tolerance_is_named_in_the_key() -> None:
    page = Page()
    draw_key(key_of(STATES, 7.5, 165.0, brief=False), page, 50.0)
    assert {"within 7.5 cents", "x  closed", "same note, best first", "key"} <= set(words_of(page))


def test_a_brief_key_names_only_what_is_there() -> None:
    page = Page("a6", magnified=0.875)
    draw_key(key_of({"x", "o"}, 10.0, 90.0, brief=True), page, 50.0)
    assert [word for word in words_of(page) if word] == [
        "mouth end", "x  closed", "o  open", "within 10 cents", "sharper", "flatter", "uncertainty",
    ]  # fmt: skip
