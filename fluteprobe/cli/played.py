"""What people see of scales and tunes in a terminal.

Conventions: those of `screen`: at most 80 columns, cents with a sign, ± the standard uncertainty.
`–` is none.
"""

from collections.abc import Iterator, Sequence
from itertools import groupby
from textwrap import wrap

from fluteprobe.cli.columns import aligned
from fluteprobe.cli.screen import WIDTH
from fluteprobe.flute.scales import Scale, tonic_name
from fluteprobe.repertoire.keyboard import Key
from fluteprobe.repertoire.report import note_name
from fluteprobe.repertoire.scales import ScaleFit
from fluteprobe.repertoire.sounds import Grade, Match, Sound, Standard, Way
from fluteprobe.repertoire.tunes import TuneFit, short_notes
from fluteprobe.score.tune import Tune, TuneNote
from fluteprobe.session import FluteFacts, printable

MOST_TRANSPOSITIONS = 6
MOST_PLACES = 8
MOST_NAMED = 5
WORTH_A_LOOK = 0.5  # share of a tune below which a transposition is not worth a line

_NUMBERS = {"cents", "register", "surely", "perhaps", "off", "A4", "fingers", "short", "Hz", "key"}
_CAN = {"surely": "yes", "perhaps": "perhaps", "not": "no"}


# --- scales ------------------------------------------------------------------------------------------


def heading(flute: FluteFacts, standard: Standard) -> str:
    """Return whose table it is and what counts as in tune."""
    a4 = "A4 where it fits best" if standard.best_a4 else f"A4 = {standard.a4_hz:g} Hz"
    holes = f"{flute.holes} hole{'s' if flute.holes > 1 else ''}"
    tail = f" · {holes} · {a4} · within {standard.tolerance_cents:g} cents"
    name, room = printable(flute.name), WIDTH - len(tail)
    return (name if len(name) <= room else f"{name[: room - 1]}…") + tail


def scales_told(fits: Sequence[ScaleFit], *, show_all: bool) -> str:
    """Return the keys of each scale as a table; a single key is told note by note."""
    if len(fits) == 1:
        return _one_key(fits[0])
    blocks = []
    for scale, group in groupby(fits, key=lambda fit: fit.scale):
        blocks.append("\n".join([_title(scale), *_keys(list(group), show_all=show_all)]))
    told = "octave: from tonic to tonic; unbroken: the longest row of neighbouring notes; doubtful: "
    told += "perhaps within the tolerance; not: cannot be played"
    return "\n\n".join([*blocks, "\n".join(wrap(told, WIDTH))])


def _title(scale: Scale) -> str:
    """Return a scale's names and its steps; one without a name is its steps."""
    if scale.description == scale.name and not scale.name.isalpha():
        return scale.name
    return f"{scale.description}: {scale.steps_text}"


def _keys(fits: Sequence[ScaleFit], *, show_all: bool) -> list[str]:
    shown = [fit for fit in fits if show_all or fit.grade != "not"]
    if not shown:
        near = min(fits, key=lambda fit: len(fit.missing) - 0.01 * (fit.run[1] - fit.run[0]))
        key, missing = _note(tonic_name(near.tonic)), _named(near, "not")
        return [f"  no octave in any key; nearest is {key}, without {missing}"]
    moving = len({round(fit.a4_hz, 1) for fit in fits}) > 1
    table = [["  tonic", "octave", "A4", "unbroken", "doubtful", "not"]]
    table += [
        [
            f"  {_note(tonic_name(fit.tonic))}",
            _CAN[fit.grade],
            f"{fit.a4_hz:.1f}",
            _run(fit),
            _named(fit, "perhaps"),
            _named(fit, "not"),
        ]
        for fit in shown
    ]
    if not moving:
        table = [[*row[:2], *row[3:]] for row in table]
    return _columns(table)


def _run(fit: ScaleFit) -> str:
    """Return the longest row of notes in words."""
    start, end = fit.run
    if start == end:
        return "–"
    low, high = (_note(note_name(fit.notes[place].target_semitones)) for place in (start, end - 1))
    return f"{end - start}: {low} to {high}" if end - start > 1 else f"1: {low}"


def _named(fit: ScaleFit, grade: Grade) -> str:
    """Return the notes of one grade, the first few of them."""
    names = [_note(note_name(match.target_semitones)) for match in fit.notes if match.grade == grade]
    return " ".join([*names[:MOST_NAMED], "…"] if len(names) > MOST_NAMED else names) or "–"


def _one_key(fit: ScaleFit) -> str:
    """Return a key note by note, and what can be said of the whole."""
    title = f"{_note(tonic_name(fit.tonic))} {_title(fit.scale)}"
    if not fit.notes:
        return f"{title}\nNothing has been measured."
    lines = [title, f"at A4 = {fit.a4_hz:.1f} Hz", "", *_notes(fit.notes), ""]
    if not fit.octaves:
        lines.append("The flute's compass holds no octave from tonic to tonic.")
    for place, grade in fit.octaves:
        low = fit.notes[place].target_semitones
        lines.append(f"octave {_note(note_name(low))} to {_note(note_name(low + 12.0))}: {_CAN[grade]}")
    lines.append(f"longest unbroken row: {_run(fit)}")
    return "\n".join(lines)


def _notes(matches: Sequence[Match]) -> list[str]:
    """Return a line for each note: whether, how far off, with which fingering, and with which else."""
    table = [["note", "can", "cents", "fingering", "register", "or"]]
    for match in matches:
        best = match.ways[0] if match.ways else match.nearest
        row = [_note(note_name(match.target_semitones)), _CAN[match.grade]]
        if best is None:
            table.append([*row, "–", "", "", ""])
        else:
            table.append([*row, _off(best), *_played(best), _others(match)])
    return _columns(table)


def _played(way: Way) -> tuple[str, str]:
    return str(way.sound.fingering), _register(way.sound)


def _others(match: Match) -> str:
    """Return the other fingerings in brief: two at most, each with its deviation."""
    others = [f"{way.sound.fingering} {_signed(way.deviation_cents)}" for way in match.ways[1:3]]
    return ", ".join([*others, "…"] if len(match.ways) > 3 else others)


# --- tunes -------------------------------------------------------------------------------------------


def tune_told(tune: Tune, fits: Sequence[TuneFit], *, show_all: bool) -> str:
    """Return how a tune fits a flute: the transpositions, the fingerings of the first, what falls short."""
    named = ", ".join(filter(None, (printable(tune.title or ""), printable(tune.part))))
    lines = [f"{named[:60]}: {len(tune.notes)} notes, {_span(tune)}"]
    if not fits:
        return "\n".join([*lines, "Nothing has been measured that could be played."])
    worth = [fit for fit in fits[1:] if show_all or fit.expected >= WORTH_A_LOOK * fits[0].expected]
    shown = [fits[0], *(worth if show_all else worth[: MOST_TRANSPOSITIONS - 1])]
    return "\n".join([
        *lines,
        "",
        *_transpositions(shown),
        "",
        f"Moved {moved(fits[0].semitones)}:" if fits[0].semitones else "As written:",
        *_notes(fits[0].matches),
        *_short(tune, fits[0]),
    ])  # fmt: skip


def moved(semitones: int) -> str:
    """Return a transposition in words: `2 semitones up`, `an octave and 3 semitones down`."""
    octaves, rest = divmod(abs(semitones), 12)
    parts = [] if not octaves else ["an octave" if octaves == 1 else f"{octaves} octaves"]
    if rest:
        parts.append(f"{rest} semitone{'' if rest == 1 else 's'}")
    return f"{' and '.join(parts)} {'up' if semitones > 0 else 'down'}" if parts else "as written"


def _transpositions(fits: Sequence[TuneFit]) -> list[str]:
    table = [["moved", "surely", "perhaps", "off", "A4", "fingers", "short"]]
    table += [_fit_row(fit) for fit in fits]
    told = (
        "surely, perhaps: share of the time; off: cents, root mean square; fingers: moved from note to note"
    )
    return [*_columns(table), "", *wrap(f"{told}; short: notes that cannot be played", WIDTH)]


def _fit_row(fit: TuneFit) -> list[str]:
    return [
        moved(fit.semitones),
        f"{100.0 * fit.surely:.0f} %",
        f"{100.0 * fit.perhaps:.0f} %",
        "–" if fit.off_cents is None else f"{fit.off_cents:.1f}",
        f"{fit.a4_hz:.1f}",
        "–" if fit.moves is None else f"{fit.moves:.1f}",
        str(fit.short) if fit.short else "–",
    ]


def _span(tune: Tune) -> str:
    pitches = [note.pitch_semitones for note in tune.notes]
    return f"{_note(note_name(min(pitches)))} to {_note(note_name(max(pitches)))}"


def _short(tune: Tune, fit: TuneFit) -> Iterator[str]:
    """Return where each pitch that cannot be played comes in the tune."""
    if not fit.short:
        return
    yield ""
    yield "Falls short:"
    by_pitch: dict[float, list[TuneNote]] = {}
    for note in short_notes(tune, fit):
        by_pitch.setdefault(note.pitch_semitones, []).append(note)
    for pitch, notes in sorted(by_pitch.items()):
        places = [f"bar {note.bar} beat {note.beat:.3g}" for note in notes[:MOST_PLACES]]
        if len(notes) > MOST_PLACES:
            places.append(f"and {len(notes) - MOST_PLACES} more")
        sounding, written = _note(note_name(pitch + fit.semitones)), _note(note_name(pitch))
        name = sounding if sounding == written else f"{sounding} (written {written})"
        yield from wrap(f"{name}: {', '.join(map(printable, places))}", WIDTH, subsequent_indent="  ")


# --- keys --------------------------------------------------------------------------------------------


def keys_told(flute: FluteFacts, keys: Sequence[Key], a4_hz: float) -> str:
    """Return which key of a keyboard sounds which fingering's tone."""
    table = [["key", "note", "cents", "Hz", "fingering", "register", "passed over"]]
    table += [_key_row(key) for key in keys]
    counted = f"{len(keys)} key{'' if len(keys) == 1 else 's'} of 128 tuned"
    return "\n".join([f"{printable(flute.name)[:40]} · A4 = {a4_hz:g} Hz · {counted}", "", *_columns(table)])


def _key_row(key: Key) -> list[str]:
    others = [str(sound.fingering) for sound in key.others]
    return [
        str(key.note.midi),
        _note(str(key.note)),
        _signed(key.cents),
        f"{key.sound.frequency_hz:.2f}",
        str(key.sound.fingering),
        _register(key.sound),
        ", ".join([*others[:3], "…"] if len(others) > 3 else others),
    ]


# --- words and columns -------------------------------------------------------------------------------


def _note(name: str) -> str:
    return name.replace("#", "♯").replace("-", "−")


def _register(sound: Sound) -> str:
    return "?" if sound.register is None else str(sound.register)


def _off(way: Way) -> str:
    return f"{_signed(way.deviation_cents)} ± {max(way.sound.uncertainty_cents, 0.1):.1f}"


def _signed(cents: float) -> str:
    return f"{round(cents, 1) + 0.0:+.1f}".replace("-", "−")


def _columns(table: Sequence[Sequence[str]]) -> list[str]:
    """Return rows as lines, the columns whose titles say so to the right."""
    return aligned(table, {k for k, title in enumerate(table[0]) if title in _NUMBERS})
