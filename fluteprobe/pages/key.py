"""The key at the chart's foot: every sign on the page, and what it means.

Conventions: lengths in millimetres, deviations in cents. Signs stand in lines, as many as the room asks for.
"""

from collections.abc import Callable, Collection, Iterable
from dataclasses import dataclass
from functools import partial

from fluteprobe.pages.glyphs import Scale, draw_deviation, draw_hole, draw_scale, draw_share
from fluteprobe.pages.paper import HAIRLINE, LABEL, QUIET, SMALL, Page, width_mm
from fluteprobe.pages.rows import LABEL_GAP_MM

STATE_WORDS = {"x": "closed", "o": "open", "h": "half-holed", "v": "barely cracked"}

_LINE_MM = 6.0
_APART_MM = 5.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Sign:
    """A sign: how wide it is, how it is drawn from its left end and middle, and what it means."""

    width_mm: float
    draw: Callable[[Page, float, float], None]
    words: str

    @property
    def whole_mm(self) -> float:
        """The width of the sign with its words."""
        return self.width_mm + width_mm(self.words, SMALL)


@dataclass(frozen=True, slots=True, kw_only=True)
class Key:
    """Signs in lines. `brief` on a card, where nothing stands in the gutter."""

    lines: tuple[tuple[Sign, ...], ...]
    brief: bool

    @property
    def height_mm(self) -> float:
        """The height with the rules over and under it."""
        return _LINE_MM * len(self.lines) + 4.5


def key_of(states: Collection[str], tolerance_cents: float, room_mm: float, *, brief: bool) -> Key:
    """Return the key to some hole states and to deviations; a brief one has no more than these."""
    signs = [*_hole_signs(states), *_deviation_signs(tolerance_cents, brief=brief)]
    return Key(lines=_in_lines([*signs, *([] if brief else _other_signs())], room_mm), brief=brief)


def draw_key(key: Key, page: Page, top: float) -> None:
    """Draw a key from its top down."""
    bottom = top + key.height_mm - 1.3
    page.line((page.left_mm, top + 1.5), (page.right_mm, top + 1.5), colour=HAIRLINE)
    if not key.brief:
        page.text(page.left_mm - LABEL_GAP_MM, top + 6.3, "key", LABEL, align="right", colour=QUIET)
    for k, line in enumerate(key.lines):
        x, y = page.left_mm, top + 5.3 + _LINE_MM * k
        for sign in line:
            sign.draw(page, x, y)
            page.text(x + sign.width_mm, y + 1.0, sign.words, SMALL)
            x += sign.whole_mm + _APART_MM
    page.line((page.left_mm, bottom), (page.right_mm, bottom), colour=HAIRLINE)


def _in_lines(signs: Iterable[Sign], room_mm: float) -> tuple[tuple[Sign, ...], ...]:
    lines: list[list[Sign]] = [[]]
    left = room_mm
    for sign in signs:
        if lines[-1] and sign.whole_mm > left:
            lines.append([])
            left = room_mm
        lines[-1].append(sign)
        left -= sign.whole_mm + _APART_MM
    return tuple(tuple(line) for line in lines)


def _hole_signs(states: Collection[str]) -> list[Sign]:
    mouth = Sign(width_mm=5.4, draw=_draw_mouth, words="mouth end")
    return [
        mouth,
        *(
            Sign(width_mm=6.0, draw=partial(_draw_state, state), words=f"{state}  {words}")
            for state, words in STATE_WORDS.items()
            if state in states
        ),
    ]


def _deviation_signs(tolerance_cents: float, *, brief: bool) -> list[Sign]:
    limit = 3.0 * tolerance_cents
    scale = Scale(height_mm=5.0, limit_cents=limit, tolerance_cents=tolerance_cents)
    marks = [
        (0.0, 0.0, f"within {tolerance_cents:g} cents"),
        (2.2 * tolerance_cents, 0.0, "sharper"),
        (-2.2 * tolerance_cents, 0.0, "flatter"),
        (0.0, 1.1 * tolerance_cents, "uncertainty" if brief else "uncertainty (k = 1)"),
    ]
    return [
        Sign(width_mm=6.0, draw=partial(_draw_mark, scale, (cents, doubt)), words=words)
        for cents, doubt, words in marks
    ]


def _other_signs() -> list[Sign]:
    return [
        Sign(width_mm=4.5, draw=_draw_or, words="same note, best first"),
        Sign(width_mm=9.5, draw=_draw_takes, words="takes that spoke"),
    ]


def _draw_mouth(page: Page, x: float, y: float) -> None:
    page.box((x + 0.2, y - 0.45), (3.4, 0.9), QUIET)


def _draw_state(state: str, page: Page, x: float, y: float) -> None:
    draw_hole(page, x + 1.9, y, 3.4, state)


def _draw_mark(scale: Scale, mark: tuple[float, float], page: Page, x: float, y: float) -> None:
    draw_scale(page, x, x + 3.8, y, scale)
    draw_deviation(page, (x + 1.9, y), scale, *mark)


def _draw_or(page: Page, x: float, y: float) -> None:
    page.text(x, y + 1.0, "or", LABEL, colour=QUIET)


def _draw_takes(page: Page, x: float, y: float) -> None:
    page.text(x, y + 0.6, "1 of 2", SMALL)
    draw_share(page, (x + 3.5, y + 2.0), 7.0, 0.5)
