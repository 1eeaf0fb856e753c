"""The survey as one web page: the chart's design, with each fingering's take to be heard beside it.

The page is whole in itself: its drawings are inline SVG by the same pens as the printed chart, its sounds are
compressed into it, nothing is fetched and no script runs; its own security policy forbids both. It is built
as a tree of elements, so that whatever a file says is text on the page and never markup.

Conventions: deviations in cents; drawings in millimetres. Upper registers come first, notes rise within one,
and of several fingerings for a note the best comes first. The same survey gives the same bytes.
"""

from base64 import b64encode
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from hashlib import sha256
from importlib.resources import files
from pathlib import Path
from xml.etree.ElementTree import Element, tostring

from fluteprobe.pages import paper
from fluteprobe.pages.chart import scale_limit_cents
from fluteprobe.pages.contents import (
    Aside,
    Contents,
    NoteGroup,
    Section,
    cents_text,
    chart_contents,
    spoke_text,
    uncertainty_text,
)
from fluteprobe.pages.glyphs import FluteSize, Scale, draw_deviation, draw_flute, draw_hole, draw_scale
from fluteprobe.pages.inline import Drawing
from fluteprobe.pages.spoken import deviation_in_words, fingering_in_words, note_in_words
from fluteprobe.pages.staff import CLEF_WIDTH, draw_staff, staff_of
from fluteprobe.results import replace_file
from fluteprobe.sound.clip import MIME_TYPE, compressed
from fluteprobe.sound.recording import Recording, RecordingError, open_recording
from fluteprobe.survey import Entry, Reading, Survey

COLUMN_MM = 22.0
UPPER_FLUTE = FluteSize(hole_mm=4.6, pitch_mm=6.0, hands_apart_mm=1.9)
FIRST_FLUTE = FluteSize(hole_mm=4.0, pitch_mm=5.1, hands_apart_mm=1.6)
SCALE_MM = 16.0
STAFF_SPACE_MM = 1.25
ROOMY_ENTRIES = 9  # of one register, side by side on a printed page; with more the columns are narrower

_STATE_WORDS = (("x", "closed"), ("o", "open"), ("h", "half-holed"), ("v", "barely cracked"))


@dataclass(frozen=True, slots=True, kw_only=True)
class _Look:
    """What the whole page has in common.

    `staff_steps` are how far the page's notes reach above the staff's bottom line and below it; `carried` is
    whether pitches are also told at the reference temperature.
    """

    scale: Scale
    staff_steps: tuple[float, float]
    carried: bool
    sounds: Mapping[tuple[str, int], bytes]


def write_web(
    survey: Survey,
    session_folder: Path | None,
    target: Path,
    *,
    tolerance_cents: float = 10.0,
    with_sound: bool = True,
) -> tuple[Path, ...]:
    """Write a survey as a web page and return the file written.

    Sound comes from the takes in the session folder; without a folder, or where a take cannot be read, there
    is none.

    Raises
    ------
    ValueError
        If the tolerance is not above 0.
    OSError
        If the page cannot be written; one that was there before is then untouched.
    """
    sounds = _sounds(survey, session_folder) if with_sound and session_folder is not None else {}
    replace_file(target, web_page(survey, sounds, tolerance_cents=tolerance_cents).encode("utf-8"))
    return (target,)


def web_page(
    survey: Survey, sounds: Mapping[tuple[str, int], bytes], *, tolerance_cents: float = 10.0
) -> str:
    """Return the page's text. `sounds` holds compressed sound by fingering and register.

    Raises
    ------
    ValueError
        If the tolerance is not above 0.
    """
    contents = chart_contents(survey, tolerance_cents)
    limit_cents = scale_limit_cents(survey.entries, tolerance_cents)
    scale = Scale(height_mm=SCALE_MM, limit_cents=limit_cents, tolerance_cents=tolerance_cents)
    look = _Look(
        scale=scale,
        staff_steps=_staff_steps(contents),
        carried=contents.reference_label is not None,
        sounds=sounds,
    )
    page = _tag("html", _head(contents), _body(contents, look), lang=paper.LANGUAGE)
    return "<!doctype html>\n" + tostring(page, encoding="unicode", method="html") + "\n"


# --- sound -------------------------------------------------------------------------------------------


def _sounds(survey: Survey, folder: Path) -> dict[tuple[str, int], bytes]:
    """Return the sound of every entry whose take can be read."""
    recordings: dict[str, Recording | None] = {}
    sounds = {}
    for entry in survey.entries:
        reading = _typical(entry, survey.readings)
        if reading is None:
            continue
        if reading.take not in recordings:
            recordings[reading.take] = _opened(folder, reading.take)
        clip = _clip(recordings[reading.take], reading)
        if clip:
            sounds[str(entry.fingering), int(entry.register)] = clip
    return sounds


def _typical(entry: Entry, readings: Iterable[Reading]) -> Reading | None:
    """Return the tone behind an entry that is nearest to its pitch."""
    mine = [
        r for r in readings
        if r.take in entry.takes and r.fingering == entry.fingering and r.call.register == entry.register
    ]  # fmt: skip
    return min(mine, key=lambda r: abs((r.tone.frequency_hz or 0.0) - entry.frequency_hz), default=None)


def _opened(folder: Path, take: str) -> Recording | None:
    """Open a take of the session; None if it cannot be read, or if its name leads out of the folder."""
    try:
        path = (folder / take).resolve()
        return open_recording(path) if path.is_relative_to(folder.resolve()) else None
    except (RecordingError, OSError, ValueError):
        return None


def _clip(recording: Recording | None, reading: Reading) -> bytes | None:
    if recording is None:
        return None
    try:
        return compressed(recording, reading.tone.start_s, min(reading.tone.end_s, recording.duration_s))
    except (RecordingError, ValueError):
        return None


# --- the page ----------------------------------------------------------------------------------------


def _tag(kind: str, /, *children: Element | str | None, **attributes: str) -> Element:
    """Return an element; text among its children is text, whatever is in it. `class_` is its class."""
    element = Element(kind, {key.rstrip("_").replace("_", "-"): value for key, value in attributes.items()})
    for child in children:
        if isinstance(child, Element):
            element.append(child)
        elif child and len(element):
            element[-1].tail = (element[-1].tail or "") + child
        elif child:
            element.text = (element.text or "") + child
    return element


def _head(contents: Contents) -> Element:
    style = _style()
    described = "  ·  ".join(filter(None, (contents.subtitle, contents.summary)))
    return _tag(
        "head",
        _tag("meta", charset="utf-8"),
        _tag("meta", http_equiv="Content-Security-Policy", content=_policy(style)),
        _tag("meta", name="viewport", content="width=device-width, initial-scale=1"),
        _tag("meta", name="generator", content="fluteprobe"),
        _tag("meta", name="description", content=described),
        _tag("title", f"{contents.title}: fingering chart"),
        _tag("link", rel="icon", href="data:,"),
        _tag("style", style),
    )


def _style() -> str:
    """Return the page's style sheet, with the colours of the house in it."""
    colours = {"ink": paper.INK, "quiet": paper.QUIET, "hairline": paper.HAIRLINE, "accent": paper.ACCENT}
    named = " ".join(f"--{name}: {colour};" for name, colour in colours.items())
    return f":root {{ {named} }}\n" + files("fluteprobe.pages").joinpath("web.css").read_text("utf-8")


def _policy(style: str) -> str:
    """Return a Content-Security-Policy (W3C CSP Level 3): this style and sounds within, nothing else."""
    digest = b64encode(sha256(style.encode("utf-8")).digest()).decode("ascii")
    rules = (
        "default-src 'none'", f"style-src 'sha256-{digest}'", "img-src data:", "media-src data:",
        "base-uri 'none'", "form-action 'none'",
    )  # fmt: skip
    return "; ".join(rules)


def _body(contents: Contents, look: _Look) -> Element:
    upper = sorted((s for s in contents.sections if s.register > 1), key=lambda s: s.register)
    first = [s for s in contents.sections if s.register == 1]
    registers = [_register(section, look) for section in (*upper, *first)]
    asides = [_list(aside) for aside in contents.asides]
    conditions = _list(Aside(label="conditions", items=contents.conditions))
    return _tag(
        "body",
        _header(contents),
        _tag(
            "main",
            _tag("div", *registers, class_="registers"),
            _tag("div", *asides, _key(look), conditions, class_="below"),
        ),
        _tag("footer", _tag("p", "measured and drawn with fluteprobe")),
        class_="crowded" if max(len(s.entries) for s in contents.sections) > ROOMY_ENTRIES else "roomy",
    )


def _header(contents: Contents) -> Element:
    facts = (_tag("p", words, dir="auto") for words in (contents.subtitle, contents.summary) if words)
    return _tag("header", _tag("h1", contents.title, dir="auto"), _tag("div", *facts))


def _register(section: Section, look: _Look) -> Element:
    name = f"register-{section.register}"
    notes = [_note(group, look) for group in section.groups]
    return _tag(
        "section",
        _tag("div", _tag("h2", section.title, id=name), _tag("p", section.remark), class_="title"),
        _tag("ol", *notes, class_="notes") if notes else None,
        class_="register first" if section.register == 1 else "register",
        aria_labelledby=name,
    )


def _note(group: NoteGroup, look: _Look) -> Element:
    ways = [_way(entry, group.note, look) for entry in group.entries]
    return _tag(
        "li",
        _staff(group.note, look.staff_steps),
        _tag(
            "h3",
            _note_name(group.note),
            _tag("span", note_in_words(group.note), class_="unseen"),
            *(_tag("i", "or", aria_hidden="true") for _ in group.entries[1:]),
        ),
        _tag("ul", *ways, class_="ways"),
        class_="note",
    )


def _note_name(note: str) -> Element:
    """Return a note's name as it is printed: its letter, a raised accidental, a small octave number."""
    octave = note.lstrip("ABCDEFG♯♭")
    accidental = note[1 : len(note) - len(octave)]
    raised = _tag("sup", accidental) if accidental else None
    return _tag("span", note[:1], raised, _tag("sub", octave), aria_hidden="true")


def _staff_steps(contents: Contents) -> tuple[float, float]:
    staves = [staff_of([group.note]) for section in contents.sections for group in section.groups]
    above, below = [s.above_steps for s in staves], [s.below_steps for s in staves]
    return max(above, default=0.0), max(below, default=0.0)


def _staff(note: str, steps: tuple[float, float]) -> Element:
    """Return a note on its staff, all staves of the page as high as one another."""
    staff, half = staff_of([note]), 0.5 * STAFF_SPACE_MM
    drawing = Drawing(COLUMN_MM, half * sum(steps))
    left, right, top = 1.4, COLUMN_MM - 1.4, half * (steps[0] - staff.above_steps)
    middle = 0.5 * (left + CLEF_WIDTH * STAFF_SPACE_MM + COLUMN_MM)
    draw_staff(drawing, staff, (left, top, right), STAFF_SPACE_MM, [middle])
    element = drawing.unspoken()
    element.set("class", "staff")
    return element


def _way(entry: Entry, note: str, look: _Look) -> Element:
    fingers = fingering_in_words(entry.fingering)
    size = UPPER_FLUTE if entry.register > 1 else FIRST_FLUTE
    return _tag(
        "li",
        _flute(entry, size, fingers),
        _tag("p", str(entry.fingering), class_="spelt"),
        _deviation(entry, look.scale),
        _numbers(entry, look),
        _player(look.sounds.get((str(entry.fingering), entry.register)), f"{note_in_words(note)}, {fingers}"),
        class_="way",
    )


def _flute(entry: Entry, size: FluteSize, words: str) -> Element:
    drawing = Drawing(COLUMN_MM, size.height_mm(entry.fingering.holes) + 0.4)
    draw_flute(drawing, 0.5 * COLUMN_MM, 0.2, size, entry.fingering)
    return drawing.spoken(words)


def _deviation(entry: Entry, scale: Scale) -> Element:
    drawing = Drawing(COLUMN_MM, scale.height_mm + 2.0)
    middle = 0.5 * drawing.height_mm
    draw_scale(drawing, -0.2, COLUMN_MM + 0.2, middle, scale)  # so that no gap shows between neighbours
    draw_deviation(drawing, (0.5 * COLUMN_MM, middle), scale, entry.cents, entry.uncertainty_cents)
    return drawing.unspoken()


def _numbers(entry: Entry, look: _Look) -> Element:
    """Return the numbers under a flute, each with a name for those who do not see where it stands."""
    tolerance = look.scale.tolerance_cents
    off = abs(entry.cents) > tolerance
    pairs = [
        _unseen_term("deviation"),
        _tag(
            "dd",
            _tag("span", cents_text(entry.cents, tolerance), aria_hidden="true"),
            _tag("span", deviation_in_words(entry.cents, tolerance), class_="unseen"),
            class_="cents off" if off else "cents",
        ),
        _unseen_term("standard uncertainty in cents"),
        _tag("dd", uncertainty_text(entry.uncertainty_cents)),
    ]
    if look.carried:
        pairs += [
            _unseen_term("estimate at the reference temperature, in cents"),
            _tag("dd", f"est. {cents_text(entry.cents_at_reference)}", class_="estimate"),
        ]
    many = "" if len(entry.takes) == 1 and entry.reliability >= 1.0 else "s"
    spoke = _tag("dd", f"{spoke_text(entry)} take{many}")
    if entry.reliability < 1.0:
        spoke.set("class", "doubtful")
    return _tag("dl", *pairs, _unseen_term("spoke in"), spoke)


def _unseen_term(words: str) -> Element:
    return _tag("dt", words, class_="unseen")


def _player(sound: bytes | None, words: str) -> Element | None:
    if sound is None:
        return None
    source = f"data:{MIME_TYPE};base64,{b64encode(sound).decode('ascii')}"
    audio = _tag(
        "audio",
        controls="controls",
        controlslist="nodownload noplaybackrate",
        preload="metadata",
        src=source,
        aria_label=f"Hear {words}",
    )
    return _tag("div", audio, class_="player")


# --- below the chart ---------------------------------------------------------------------------------


def _list(aside: Aside) -> Element:
    items = (_tag("li", item, dir="auto") for item in aside.items)
    return _tag("section", _tag("h2", aside.label), _tag("ul", *items))


def _key(look: _Look) -> Element:
    signs = [(_hole_sign(state), f"{state}  {word}") for state, word in _STATE_WORDS]
    limit, tolerance = look.scale.limit_cents, look.scale.tolerance_cents
    marks = (
        (0.0, 0.0, f"within {tolerance:g} cents"),
        (2.2 * tolerance, 0.0, "sharper"),
        (-2.2 * tolerance, 0.0, "flatter"),
        (0.0, 1.1 * tolerance, "uncertainty (standard, k = 1)"),
    )
    signs += [(_mark_sign(cents, uncertainty, tolerance), words) for cents, uncertainty, words in marks]
    told = [_tag("li", sign, words) for sign, words in signs]
    told += [
        _tag("li", f"the scale reaches from −{limit:g} to +{limit:g} cents"),
        _tag("li", "the mouth end is up"),
        _tag("li", "or: the same note, best first"),
    ]
    if look.carried:
        told.append(_tag("li", "est.: carried to the reference temperature, an estimate"))
    return _tag("section", _tag("h2", "key"), _tag("ul", *told), class_="key")


def _hole_sign(state: str) -> Element:
    drawing = Drawing(7.0, 4.4)
    draw_hole(drawing, 2.3, 2.2, 3.8, state)
    return drawing.unspoken()


def _mark_sign(cents: float, uncertainty_cents: float, tolerance_cents: float) -> Element:
    drawing = Drawing(7.0, 6.4)
    scale = Scale(height_mm=6.0, limit_cents=3.0 * tolerance_cents, tolerance_cents=tolerance_cents)
    draw_scale(drawing, 0.4, 6.6, 3.2, scale)
    draw_deviation(drawing, (3.5, 3.2), scale, cents, uncertainty_cents)
    return drawing.unspoken()
