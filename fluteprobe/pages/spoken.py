"""What a screen reader says where the page shows a drawing: fingerings and deviations in words.

Conventions: holes are counted from the mouth; `top` is the first and `bottom` the last. Deviations in cents,
positive is sharp.
"""

from itertools import groupby

from fluteprobe.flute.fingering import Fingering

_STATES = {"x": "closed", "o": "open", "h": "half-holed", "v": "barely cracked"}
_ORDINALS = ("second", "third", "fourth", "fifth", "sixth", "seventh", "eighth", "ninth")
_RUN = 3  # so many neighbours are told as "from … to …"


def fingering_in_words(fingering: Fingering) -> str:
    """Return a fingering as one says it: `top hole open, the others closed`."""
    states = fingering.states
    if len(set(states)) == 1:
        return f"{'the hole' if len(states) == 1 else 'all holes'} {_STATES[states[0]]}"
    common = max("xohv", key=states.count)
    told = [
        f"{_holes(states, state)} {_STATES[state]}"
        for state in sorted(set(states) - {common}, key=states.index)
    ]
    left = states.count(common)
    rest = "the other" if left == 1 else "the others"
    return f"{', '.join(told)}, {rest} {_STATES[common]}"


def deviation_in_words(cents: float, tolerance_cents: float) -> str:
    """Return a deviation as one says it: `26 cents flat, more than the tolerance`."""
    if abs(cents) <= tolerance_cents:
        where = "in tune" if round(cents) == 0 else f"{abs(cents):.0f} cents {_side(cents)}"
        return f"{where}, within the tolerance"
    return f"{abs(cents):.0f} cents {_side(cents)}, more than the tolerance"


def note_in_words(note: str) -> str:
    """Return a note's name without signs that are read out wrongly: `G♯5` is `G sharp 5`."""
    return note.replace("♯", " sharp ").replace("♭", " flat ")


def _side(cents: float) -> str:
    return "sharp" if cents > 0.0 else "flat"


def _holes(states: str, state: str) -> str:
    """Return which holes are in a state: `top hole`, `second and bottom holes`, `third to bottom holes`."""
    places = [k for k, other in enumerate(states) if other == state]
    names: list[str] = []
    for _, run in groupby(enumerate(places), key=lambda pair: pair[1] - pair[0]):
        held = [_name(place, len(states)) for _, place in run]
        names += [f"{held[0]} to {held[-1]}"] if len(held) >= _RUN else held
    words = " and ".join(filter(None, [", ".join(names[:-1]), names[-1]]))
    return f"{words} hole{'' if len(places) == 1 else 's'}"


def _name(place: int, holes: int) -> str:
    if place == 0:
        return "top"
    return "bottom" if place == holes - 1 else _ORDINALS[place - 1]
