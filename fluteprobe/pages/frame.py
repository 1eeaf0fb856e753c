"""The head and foot that pages share: what the page is of, what page it is, which one of how many.

Conventions: those of `paper`; the head starts at the top margin and returns where the page is free below it.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from fluteprobe.pages.paper import (
    ACCENT,
    LABEL,
    MARGIN_MM,
    QUIET,
    SUBTITLE,
    Page,
    Type,
    shortened,
    width_mm,
)

TITLE_SIZES_PT = (24.0, 20.0, 17.0, 14.0)

_APART_MM = 6.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Head:
    """What stands at the top of a page: a title with its kind beside it, and facts under both."""

    title: str
    kind: str
    facts: str
    summary: str = ""


def draw_head(page: Page, head: Head) -> float:
    """Draw a page's head; return where the page is free below it."""
    across = page.right_mm - MARGIN_MM
    room = across - width_mm(head.kind, SUBTITLE) - _APART_MM
    voice = title_voice(head.title, room)
    page.text(MARGIN_MM, MARGIN_MM + 7.0, shortened(head.title, voice, room), voice)
    page.text(page.right_mm, MARGIN_MM + 7.0, head.kind, SUBTITLE, align="right", colour=QUIET)
    y = MARGIN_MM + 13.2
    summary = shortened(head.summary, SUBTITLE, across)
    beside = across - width_mm(summary, SUBTITLE) - _APART_MM
    page.text(MARGIN_MM, y, shortened(head.facts, SUBTITLE, beside), SUBTITLE, colour=QUIET)
    page.text(page.right_mm, y, summary, SUBTITLE, align="right", colour=QUIET)
    page.line((MARGIN_MM, y + 3.2), (MARGIN_MM + 14.0, y + 3.2), colour=ACCENT, pt=1.6)
    return y + 6.0


def draw_foot(page: Page, number: int, pages: int) -> None:
    """Draw a page's foot: who drew it and, of several, which page this is."""
    page.text(MARGIN_MM, page.bottom_mm, "measured and drawn with fluteprobe", LABEL, colour=QUIET)
    if pages > 1:
        words = f"page {number} of {pages}"
        page.text(page.right_mm, page.bottom_mm, words, LABEL, align="right", colour=QUIET)


def title_voice(title: str, room_mm: float, sizes_pt: Sequence[float] = TITLE_SIZES_PT) -> Type:
    """Return the largest voice in which a title fits, or the smallest where none does."""
    voices = [Type(size_pt=size) for size in sizes_pt]
    return next((voice for voice in voices if width_mm(title, voice) <= room_mm), voices[-1])
