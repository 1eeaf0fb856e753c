"""Names of takes: a file name, as people type it, becomes a fingering, a breath and a number.

Conventions: the plain form is `FINGERING[-BREATH][-NUMBER].EXT`: `oxxxxx.wav`, `oxxxxx-over-2.wav`. Read as
the same are upper case, other separators, letters that look alike (Cyrillic, Greek, full-width, zero for o),
hands written apart (`oxx xxx`), longer words for the breath (`overblown`), and what computers add to a copy
(`(2)`, `copy`). Unicode's composed and decomposed spellings are one. A number before the fingering is a
track's and says nothing. What is not understood is refused, with the nearest plain name: nothing is guessed.
"""

import re
import unicodedata
from collections.abc import Container, Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from difflib import get_close_matches
from itertools import chain, count
from types import MappingProxyType

from fluteprobe.flute.fingering import BREATHS, MAX_HOLES, STATES, Breath, Fingering
from fluteprobe.session.files import FACTS_FILE, LIST_FILE
from fluteprobe.session.words import UNSAFE, printable, shown

HIGHEST_NUMBER = 9999

_LOOK_ALIKES = str.maketrans({
    **dict.fromkeys("хχ×✕✖✗╳●⚫", "x"),  # Cyrillic, Greek and signs
    **dict.fromkeys("оοօ○◯⚪", "o"),
    **dict.fromkeys("нһη", "h"),
    **dict.fromkeys("ѵν", "v"),
})  # fmt: skip
_BREATH_WORDS: dict[Breath, tuple[str, ...]] = {
    "soft": ("soft", "softly", "softer", "gentle", "gently", "quiet", "quietly", "leise", "sanft"),
    "normal": ("normal", "normally", "norm", "ordinary", "usual", "medium"),
    "over": ("over", "overblow", "overblown", "overblowing", "überblasen", "ueberblasen"),
}
_LIKELY_WORDS: dict[str, Breath] = {
    "low": "soft", "weak": "soft", "light": "soft", "piano": "soft", "loud": "over", "hard": "over",
    "high": "over", "strong": "over", "forte": "over", "octave": "over",
}  # fmt: skip
_PASSED_OVER = (
    "copy", "of", "kopie", "von", "copie", "de", "copia", "di", "cópia", "kopia", "kopi", "af", "kopio",
    "копия", "duplicate", "take", "takes", "recording", "rec", "aufnahme", "no", "nr", "blown", "breath",
    "flute", "fingering", "wav", "wave", "aif", "aiff", "caf", "flac", "ogg", "oga", "opus", "mp3", "m4a",
    "mp4", "aac", "3gp", "amr",
)  # fmt: skip
_NEIGHBOUR_KEYS = str.maketrans({**dict.fromkeys("czsd", "x"), **dict.fromkeys("pilkq", "o")})
_MARKS = re.compile(r"\(\s*([0-9]{1,9})\s*\)|([^\W_]+)")
_WORDS = re.compile(r"[^\W_]+")
_LONGEST_ENDING, _LONGEST_WORD, _MOST_DIGITS = 5, 30, 9


@dataclass(frozen=True, slots=True, kw_only=True)
class TakeName:
    """What a name says; `number` is None where it says none."""

    fingering: Fingering
    breath: Breath
    number: int | None

    @property
    def stem(self) -> str:
        """The plain form, without an ending."""
        breath = "" if self.breath == "normal" else f"-{self.breath}"
        return f"{self.fingering}{breath}{'' if (self.number or 1) == 1 else f'-{self.number}'}"


@dataclass(frozen=True, slots=True, kw_only=True)
class _Parts:
    """The words of a name, sorted by what they are; `copies` are numbers in ( )."""

    states: tuple[str, ...]
    breaths: tuple[Breath, ...]
    numbers: tuple[int, ...]
    copies: tuple[int, ...]
    unknown: tuple[str, ...]


class UnfitNameError(ValueError):
    """A name that is no take's; its text says why and what to do."""


def parse_take_name(name: str) -> tuple[Fingering, Breath, int]:
    """Return fingering, breath and number from a take's file name, `oxxxxx-over-2.wav`.

    Raises
    ------
    UnfitNameError
        If the name is no fingering; the message proposes the nearest plain name where there is one.
    """
    take = read_take_name(name)
    return take.fingering, take.breath, take.number or 1


def read_take_name(
    name: str, holes: int | None = None, taken: Container[str] = (), known: Container[str] = ()
) -> TakeName:
    """Return what a file's name says, for a flute with so many holes.

    A name that is proposed has none of the stems `taken` (see `stems_of`); `known` are further words that may
    stand in it, such as the flute's name.

    Raises
    ------
    UnfitNameError
        If it says no fingering, or more than is understood.
    """
    stem, ending = split_ending(name)
    parts = _parts(plain(stem), holes, known)
    fault = next(_faults(name, parts, holes), None)
    if fault:
        raise UnfitNameError(f"{fault}: {_cure(parts, holes, ending, taken)}")
    if holes is not None and len(parts.states[0]) != holes:
        raise UnfitNameError(
            f"the name has {counted(len(parts.states[0]))} where the flute has {holes}: "
            f"rename it, or correct holes in {FACTS_FILE}"
        )
    return TakeName(
        fingering=Fingering(parts.states[0]),
        breath=parts.breaths[0] if parts.breaths else "normal",
        number=_number(parts),
    )


def read_fingering(text: str, holes: int) -> Fingering:
    """Return a fingering as a person types it into a table.

    Raises
    ------
    UnfitNameError
        If it is none for that many holes; the text says what is expected, with the nearest if there is one.
    """
    word = "".join(_WORDS.findall(plain(text)))
    if len(word) == holes and _is_states(word, holes):
        return Fingering(word.replace("0", "o"))
    near = _nearest_states((word,), holes)
    hint = f"; did you mean {near}?" if near else ""
    states = f"{holes} letters of {', '.join(STATES)}" if holes > 1 else f"one of {', '.join(STATES)}"
    raise UnfitNameError(f"{states}, top hole first, as {example(holes)}{hint}")


def read_breath(text: str) -> Breath:
    """Return a breath as a person types it into a table; nothing is normal.

    Raises
    ------
    UnfitNameError
        If it is none; the text says what is expected, with the nearest where there is one.
    """
    words = [word for word in _WORDS.findall(plain(text)) if word not in _PASSED_OVER_PLAIN]
    breaths = {_BREATH_OF.get(word) for word in words}
    if len(breaths) > 1 or None in breaths:
        near = _nearest_breath(words)
        raise UnfitNameError(f"{', '.join(BREATHS)} or nothing{f'; did you mean {near}?' if near else ''}")
    return next((breath for breath in breaths if breath), "normal")


def plain(text: str) -> str:
    """Return text as it is compared: small letters, composed, one letter for all that look alike."""
    return unicodedata.normalize("NFKC", unicodedata.normalize("NFKC", text).casefold()).translate(
        _LOOK_ALIKES
    )


def same_name(text: str) -> str:
    """Return a file's name so that two of them that some file system takes for one are the same."""
    return unicodedata.normalize("NFC", unicodedata.normalize("NFC", text).casefold())


def split_ending(name: str) -> tuple[str, str]:
    """Return a file name without and with its ending alone: `oxxxxx.over` has none."""
    stem, dot, ending = name.rpartition(".")
    word = plain(ending.strip())
    is_ending = word.isalnum() and word.isascii() and len(word) <= _LONGEST_ENDING and not word.isdecimal()
    if not (dot and stem and is_ending) or word in _BREATH_OF or _is_states(word, None):
        return name, ""
    return stem, f".{ending.strip()}"


def stems_of(names: Iterable[str]) -> frozenset[str]:
    """Return the stems of some files, as those that are free are told from them."""
    return frozenset(same_name(split_ending(name)[0]) for name in names)


def words_of(text: str) -> frozenset[str]:
    """Return the words of a text as names are compared."""
    return frozenset(_WORDS.findall(plain(text)))


def example(holes: int) -> str:
    """Return a fingering that every player knows: the top hole open, all others closed."""
    return "o" + "x" * (holes - 1)


def counted(holes: int) -> str:
    """Return how many holes, in words."""
    return "1 hole" if holes == 1 else f"{holes} holes"


_BREATH_OF: Mapping[str, Breath] = MappingProxyType(
    {plain(word): breath for breath, words in _BREATH_WORDS.items() for word in words}
)
_PASSED_OVER_PLAIN = frozenset(plain(word) for word in _PASSED_OVER)


# --- reading -------------------------------------------------------------------------------------------


def _parts(text: str, holes: int | None, known: Container[str]) -> _Parts:
    """Sort the words of a plain text by what they are."""
    states: list[str] = []
    breaths, numbers, copies, unknown = [], [], [], []
    at_states = False
    for copy, word in _MARKS.findall(text):
        was_at, at_states = at_states, False
        for piece in _pieces(word, holes) if word else ():
            if _is_states(piece, holes):
                at_states = True
                joins = was_at and holes is not None and len(states[-1]) < holes
                states[-1:] = [states[-1] + piece] if joins else [*states[-1:], piece]
            elif piece in _BREATH_OF:
                breaths.append(_BREATH_OF[piece])
            elif piece.isdecimal():
                numbers += [int(piece[:_MOST_DIGITS])] if states else []
            elif piece not in _PASSED_OVER_PLAIN and piece not in known:
                unknown.append(piece)
        copies += [int(copy)] if copy else []
    return _Parts(
        states=tuple(state.replace("0", "o") for state in states),
        breaths=tuple(dict.fromkeys(breaths)),
        numbers=tuple(numbers),
        copies=tuple(copies),
        unknown=tuple(unknown),
    )


def _pieces(word: str, holes: int | None) -> tuple[str, ...]:
    """Part what was typed without a separator: `over2`, `oxxxxx2`, `oxxxxxover`."""
    if _is_states(word, holes) or _is_known(word):
        return (word,)
    letters = word.rstrip("0123456789")
    if letters != word and _is_known(letters):
        return letters, word[len(letters) :]
    head = word[:holes] if holes else re.match(rf"[{STATES}0]*", word)[0].rstrip("0")  # type: ignore[index]
    rest = word[len(head) :]
    if (
        head
        and _is_states(head, holes)
        and rest
        and (rest.isdecimal() or _is_known(rest.rstrip("0123456789")))
    ):
        return head, *_pieces(rest, holes)
    return (word,)


def _is_states(word: str, holes: int | None) -> bool:
    """Whether a word is hole states; zeros alone are a number, unless there are as many as holes."""
    return bool(word) and not set(word) - set(f"{STATES}0") and (word.strip("0") != "" or len(word) == holes)


def _is_known(word: str) -> bool:
    return word in _BREATH_OF or word in _PASSED_OVER_PLAIN


def _number(parts: _Parts) -> int | None:
    """Return the take's number: one that was typed before one that a computer added to a copy."""
    return next(iter((*parts.numbers, *parts.copies)), None)


def _faults(name: str, parts: _Parts, holes: int | None) -> Iterator[str]:
    """Say why a name is no take's."""
    if UNSAFE.search(name):
        yield "the name has signs that cannot be typed"
    if not parts.states or (holes is None and len(parts.states[0]) > MAX_HOLES):
        yield "the name is no fingering"
    if len(parts.states) > 1:
        yield f"the name has two fingerings, {shown(parts.states[0])} and {shown(parts.states[1])}"
    if parts.unknown:
        yield f'the name has a word that is not known, "{shown(parts.unknown[0])}"'
    if len(parts.breaths) > 1:
        yield f"the name says both {parts.breaths[0]} and {parts.breaths[1]}"
    if len(parts.numbers) > 1:
        yield f"the name has several numbers, {' and '.join(map(str, parts.numbers[:2]))}"
    number = _number(parts)
    if number is not None and not 1 <= number <= HIGHEST_NUMBER:
        yield f"takes are numbered from 1 to {HIGHEST_NUMBER}"


# --- cures ---------------------------------------------------------------------------------------------


def _cure(parts: _Parts, holes: int | None, ending: str, taken: Container[str]) -> str:
    """Say how to name a take: the nearest plain name where one can be guessed."""
    near = _nearest(parts, holes)
    if near:
        return f"rename it to {free_name(near, ending, taken)}"
    usual = example(holes or 6)
    return f"rename it to its fingering, as {usual}.wav or {usual}-over-2.wav, or list it in {LIST_FILE}"


def _nearest(parts: _Parts, holes: int | None) -> TakeName | None:
    """Return what a name most likely means, or None."""
    fits = {states for states in parts.states if len(states) == (holes or min(len(states), MAX_HOLES))}
    states = _nearest_states(parts.unknown, holes) if not fits else fits.pop() if len(fits) == 1 else None
    if states is None:
        return None
    likely = _nearest_breath(parts.unknown)
    numbers = () if parts.unknown and not likely else parts.numbers or parts.copies
    alone = len(numbers) == 1 and 1 <= numbers[0] <= HIGHEST_NUMBER
    return TakeName(
        fingering=Fingering(states),
        breath=parts.breaths[0] if parts.breaths else likely or "normal",
        number=numbers[0] if alone else None,
    )


def _nearest_states(words: Iterable[str], holes: int | None) -> str | None:
    """Return the fingering of a word with letters beside those meant (c for x, p for o), or None."""
    for word in words:
        meant = word.translate(_NEIGHBOUR_KEYS).replace("0", "o")
        right = sum(letter in STATES for letter in word)
        if (
            len(word) == holes
            and not set(meant) - set(STATES)
            and (2 * right >= len(word) or set(word) <= {"o", "c"})
        ):
            return meant
    return None


def _nearest_breath(words: Iterable[str]) -> Breath | None:
    """Return the breath that one of the words likely means, or None."""
    for word in words:
        near = get_close_matches(word[:_LONGEST_WORD], _BREATH_OF, n=1, cutoff=0.65)
        if word in _LIKELY_WORDS:
            return _LIKELY_WORDS[word]
        if near:
            return _BREATH_OF[near[0]]
    return None


def free_name(name: TakeName, ending: str, taken: Container[str]) -> str:
    """Return a take's plain file name, numbered on where another file has that stem."""
    numbers = chain([name.number or 1], count(2))
    stems = (replace(name, number=number).stem for number in numbers)
    return printable(f"{next(stem for stem in stems if stem not in taken)}{ending.lower()}")
