"""Paper, type and colours of the house, and a page to draw on.

Conventions: lengths in millimetres from the page's top left corner, x to the right and y downwards; type
sizes and line widths in points. Text is set on its baseline and never read as markup. Nothing here changes
matplotlib's settings outside `house_style()`; identical pages give identical bytes on the same versions.
"""

import unicodedata
from bisect import bisect_left
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from functools import cache
from io import BytesIO
from pathlib import Path as File
from typing import Any, Literal

import matplotlib as mpl
from matplotlib.artist import Artist
from matplotlib.backends.backend_pdf import PdfPages
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties, findfont, fontManager, get_font
from matplotlib.patches import PathPatch
from matplotlib.path import Path
from matplotlib.text import Text
from matplotlib.textpath import text_to_path
from matplotlib.transforms import Affine2D

from fluteprobe.pages.language import pdf_in_language, svg_in_language
from fluteprobe.results import replace_file

MM_PER_INCH = 25.4
MM_PER_POINT = MM_PER_INCH / 72.0
PAPERS_MM = {
    "a4": (210.0, 297.0),  # ISO 216, and A6
    "letter": (215.9, 279.4),  # ANSI/ASME Y14.1 size A: 8.5 by 11 in
    "a6": (105.0, 148.0),
    "4x6": (101.6, 152.4),  # inches: the size of an index card
}
CARDS = ("a6", "4x6")  # small enough for a flute's case
MARGIN_MM = 13.0
CARD_MARGIN_MM = 5.0
GUTTER_MM = 19.0  # left of the drawings, where their lines are named
CARD_GUTTER_MM = 8.7
SMALLEST_TYPE_PT = 7.0
PNG_DOTS_PER_INCH = 200
LANGUAGE = "en"
SUFFIXES = (".pdf", ".png", ".svg")

# One accent on warm greys. Meaning is carried by shape and place; these only support it.
WHITE = "#ffffff"
INK = "#211c17"
QUIET = "#675f55"
HAIRLINE = "#b8afa2"
WOOD = "#efe7d9"
BAND = "#e6dfd2"
WING = "#9a8f7f"
ACCENT = "#a02c1c"

HAIR_PT = 0.4
FINE_PT = 0.7
FIRM_PT = 1.1
MINUS = "−"

Align = Literal["left", "center", "right"]

_FAMILIES = ("STIXGeneral", "DejaVu Serif", "DejaVu Sans", "serif")
_MISSING = "□"
_NO_GUESTS = ("STIX", "DejaVu", "Last Resort", "cm")
_UNPRINTABLE = {"Cf", "Cn", "Co", "Cs"}  # direction marks, unassigned, private, half of a pair
_SETTINGS: dict[Any, Any] = {
    "pdf.fonttype": 42,
    "svg.fonttype": "none",
    "svg.hashsalt": "fluteprobe",
    "font.serif": ["STIXGeneral", "DejaVu Serif"],
    "text.hinting": "none",
    "path.simplify": False,
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Type:
    """A voice of the page: size in points, and its cut."""

    size_pt: float
    italic: bool = False
    bold: bool = False


TITLE_SIZES_PT = (31.0, 26.0, 22.0, 18.0)
SUBTITLE = Type(size_pt=11.0, italic=True)
HEADING = Type(size_pt=15.0, italic=True)
NOTE = Type(size_pt=19.0)
NOTE_SMALL = Type(size_pt=15.0)
OR = Type(size_pt=12.0, italic=True)
NUMBER = Type(size_pt=11.5)
NUMBER_BOLD = Type(size_pt=11.5, bold=True)
LABEL = Type(size_pt=8.0, italic=True)
SMALL = Type(size_pt=8.0)
WORD = Type(size_pt=8.5)
LONG_WORD = Type(size_pt=SMALLEST_TYPE_PT)  # of nine or ten holes


class Page:
    """One sheet: a figure that is drawn on in millimetres.

    Parameters
    ----------
    paper
        A key of PAPERS_MM, in any case.
    magnified
        How much larger everything is printed than it is asked for, type included: the page is that much
        smaller to draw on, and every length here is of that smaller page.

    Raises
    ------
    ValueError
        If the paper is not known.
    """

    def __init__(self, paper: str = "a4", *, magnified: float = 1.0) -> None:
        printed_mm = paper_size_mm(paper)
        self.width_mm, self.height_mm = (length / magnified for length in printed_mm)
        self.margin_mm = margin_mm(paper) / magnified
        self.gutter_mm = gutter_mm(paper)
        self.magnified = magnified
        self.figure = Figure(
            figsize=(printed_mm[0] / MM_PER_INCH, printed_mm[1] / MM_PER_INCH), facecolor=WHITE
        )
        from_millimetres = Affine2D().scale(1.0 / self.width_mm, -1.0 / self.height_mm).translate(0.0, 1.0)
        self._transform = from_millimetres + self.figure.transFigure

    @property
    def left_mm(self) -> float:
        """Where the gutter ends and the drawings begin."""
        return self.margin_mm + self.gutter_mm

    @property
    def right_mm(self) -> float:
        """Where the right margin begins."""
        return self.width_mm - self.margin_mm

    @property
    def bottom_mm(self) -> float:
        """Where the bottom margin begins."""
        return self.height_mm - self.margin_mm

    def text(  # noqa: PLR0913 - a word's place, voice and colour are all of them needed
        self, x_mm: float, y_mm: float, words: str, voice: Type, *, align: Align = "left", colour: str = INK
    ) -> None:
        """Set one line of text on the baseline y."""
        words, families = printable(words, voice)
        printed = replace(voice, size_pt=self.magnified * voice.size_pt)
        label = Text(
            x_mm, y_mm, words, color=colour, ha=align, va="baseline", fontproperties=_font(printed, families),
            parse_math=False, usetex=False, transform=self._transform,
        )  # fmt: skip
        self._add(label)

    def line(
        self,
        start_mm: tuple[float, float],
        end_mm: tuple[float, float],
        *,
        colour: str = HAIRLINE,
        pt: float = HAIR_PT,
    ) -> None:
        """Draw a straight line."""
        self.path(Path([start_mm, end_mm]), edge=colour, pt=pt)

    def box(self, corner_mm: tuple[float, float], size_mm: tuple[float, float], colour: str) -> None:
        """Fill a rectangle, given its top left corner and its width and height."""
        (left, top), (width, height) = corner_mm, size_mm
        right, bottom = left + width, top + height
        corners = [(left, top), (right, top), (right, bottom), (left, bottom), (left, top)]
        self.path(Path(corners, closed=True), fill=colour)

    def path(self, outline: Path, *, fill: str = "none", edge: str = "none", pt: float = HAIR_PT) -> None:
        """Draw a path in page millimetres."""
        patch = PathPatch(outline, facecolor=fill, edgecolor=edge, transform=self._transform)
        patch.set_linewidth(0.0 if edge == "none" else self.magnified * pt)
        patch.set_capstyle("butt")
        patch.set_joinstyle("miter")
        self._add(patch)

    def _add(self, artist: Artist) -> None:
        artist.set_clip_on(False)
        self.figure.add_artist(artist)


def paper_size_mm(paper: str) -> tuple[float, float]:
    """Return a paper's width and height.

    Raises
    ------
    ValueError
        If the paper is not known.
    """
    try:
        return PAPERS_MM[paper.lower()]
    except KeyError:
        raise ValueError(f"paper is one of {', '.join(PAPERS_MM)}, not {paper!r}") from None


def margin_mm(paper: str) -> float:
    """Return how wide a paper's margins are."""
    return CARD_MARGIN_MM if paper.lower() in CARDS else MARGIN_MM


def gutter_mm(paper: str) -> float:
    """Return how wide the gutter is on a paper, however magnified."""
    return CARD_GUTTER_MM if paper.lower() in CARDS else GUTTER_MM


def clean(words: str) -> str:
    """Return text fit for one printed line: no control, direction or private characters, single spaces."""
    kept = (letter for letter in words if unicodedata.category(letter) not in _UNPRINTABLE)
    spaced = (" " if unicodedata.category(letter) == "Cc" else letter for letter in kept)
    return " ".join("".join(spaced).split())


def printable(words: str, voice: Type) -> tuple[str, tuple[str, ...]]:
    """Return text without letters that no font here has, and the font families to set it in.

    Fonts of the system join only where our own lack a letter; what none has becomes an empty box.
    """
    guests: list[str] = []
    letters = []
    for letter in words:
        home = _home_of(letter, voice)
        letters.append(_MISSING if home is None else letter)
        if home is not None and home not in _FAMILIES and home not in guests:
            guests.append(home)
    return "".join(letters), (*_FAMILIES[:-1], *guests, _FAMILIES[-1])


@cache
def width_mm(words: str, voice: Type) -> float:
    """Return how wide a line of text is set."""
    words, families = printable(words, voice)
    named = _font(voice, families[:-1])  # without the last, generic one, which settings would have to resolve
    width, _, _ = text_to_path.get_text_width_height_descent(words, named, ismath=False)
    return float(width) * MM_PER_POINT


def shortened(words: str, voice: Type, room_mm: float) -> str:
    """Return the text, cut with an ellipsis where it is wider than the room."""
    if width_mm(words, voice) <= room_mm:
        return words

    def too_wide(cut: int) -> bool:
        return width_mm(words[:cut].rstrip() + "…", voice) > room_mm

    cut = max(0, bisect_left(range(len(words)), True, key=too_wide) - 1)
    return words[:cut].rstrip() + "…"


def wrapped(parts: Sequence[str], voice: Type, room_mm: float, *, between: str = " ") -> list[str]:
    """Return the parts as lines that fit the room, broken only between parts; one too wide is cut."""
    lines: list[str] = []
    for part in parts:
        longer = f"{lines[-1]}{between}{part}" if lines else part
        if lines and width_mm(longer, voice) <= room_mm:
            lines[-1] = longer
        else:
            lines.append(shortened(part, voice, room_mm))
    return lines


@contextmanager
def house_style() -> Iterator[None]:
    """Draw with the house's settings, whatever the user's own are, and put those back."""
    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(_SETTINGS)
        yield


def save_pages(
    pages: Sequence[Figure],
    target: File,
    *,
    title: str,
    author: str | None,
    dots_per_inch: float = PNG_DOTS_PER_INCH,
) -> tuple[File, ...]:
    """Write the pages and return the files written: one PDF, or a PNG or SVG for each page (`-2`, `-3` …).

    Each file is written beside its place first and then put there whole. Further pages that an earlier,
    longer set left behind are removed.

    Raises
    ------
    ValueError
        If the target's suffix is not .pdf, .png or .svg.
    """
    suffix = target.suffix.lower()
    if suffix not in SUFFIXES:
        raise ValueError(f"{target.name}: a page is written as {', '.join(SUFFIXES[:-1])} or {SUFFIXES[-1]}")
    with house_style():
        if suffix == ".pdf":
            _save_pdf(pages, target, title, author)
            return (target,)
        targets = tuple(_numbered(target, k) for k in range(1, len(pages) + 1))
        for page, place in zip(pages, targets, strict=True):
            _save_picture(page, place, title, author, dots_per_inch)
        _remove_further(target, len(pages) + 1)
        return targets


def _save_pdf(pages: Sequence[Figure], target: File, title: str, author: str | None) -> None:
    facts: dict[str, Any] = {"Title": title, "Creator": "fluteprobe", "CreationDate": None}
    if author:
        facts["Author"] = author
    draft = BytesIO()
    with PdfPages(draft, metadata=facts) as book:
        for page in pages:
            book.savefig(page)
    replace_file(target, pdf_in_language(draft.getvalue(), LANGUAGE))


def _save_picture(page: Figure, target: File, title: str, author: str | None, dots_per_inch: float) -> None:
    kind = target.suffix.lower().lstrip(".")
    creator, by = ("Software", "Author") if kind == "png" else ("Creator", "Contributor")
    facts: dict[str, Any] = {"Title": title, creator: "fluteprobe"} | ({by: author} if author else {})
    if kind == "svg":
        facts["Date"] = None
    draft = BytesIO()
    page.savefig(draft, format=kind, dpi=dots_per_inch if kind == "png" else 72, metadata=facts)
    drawn = draft.getvalue()
    replace_file(target, svg_in_language(drawn, LANGUAGE, title) if kind == "svg" else drawn)


def _numbered(target: File, number: int) -> File:
    return target if number == 1 else target.with_name(f"{target.stem}-{number}{target.suffix}")


def _remove_further(target: File, number: int) -> None:
    """Remove pages from that number on, as far as they are numbered without a gap."""
    while (further := _numbered(target, number)).is_file():
        further.unlink()
        number += 1


def _font(voice: Type, families: Sequence[str]) -> FontProperties:
    return FontProperties(
        family=list(families),
        size=voice.size_pt,
        style="italic" if voice.italic else "normal",
        weight="bold" if voice.bold else "normal",
    )


@cache
def _home_of(letter: str, voice: Type) -> str | None:
    """Return the first family that has the letter, our own before the system's; None if there is none."""
    cut = (voice.italic, voice.bold)
    for family in _FAMILIES[:-1]:
        if ord(letter) in _letters_of(family, *cut):
            return family
    return next((family for family in _guests() if ord(letter) in _letters_of(family, *cut)), None)


@cache
def _guests() -> tuple[str, ...]:
    """Return the system's plain TrueType families: the kind that a PDF takes in as it is."""
    faces = (face for face in fontManager.ttflist if face.fname.lower().endswith(".ttf"))
    plain = {face.name for face in faces if (face.style, face.weight) == ("normal", 400)}
    return tuple(sorted(name for name in plain if not name.startswith(_NO_GUESTS)))


@cache
def _letters_of(family: str, italic: bool, bold: bool) -> frozenset[int]:
    wanted = FontProperties(
        family=family, style="italic" if italic else "normal", weight="bold" if bold else "normal"
    )
    try:
        return frozenset(get_font(findfont(wanted, fallback_to_default=False)).get_charmap())
    except (ValueError, OSError, RuntimeError):
        return frozenset()
