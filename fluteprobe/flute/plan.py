"""Which fingerings are worth recording on a flute with that many holes, and in which order.

Conventions: takes come in groups, the ladder first, because every other take is read against it. A group
begins with its lowest note, and goes on to whichever of its fingerings is the fewest fingers away.
Nothing here knows what a flute will really play: a fingering that stays silent is a finding too.

Why each group is worth it is said with it, and on what that rests: a published source, or common practice.
"""

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Literal, get_args

from fluteprobe.flute.fingering import MAX_HOLES, Breath, Fingering, ladder

Edition = Literal["short", "standard", "full"]

EDITIONS: tuple[Edition, ...] = get_args(Edition)
SHORT_TAKES = 15

_SHORT_RUNGS = 8  # a longer ladder goes by every second rung in the short edition
_STANDARD_LEAKS = 3  # with so many holes at the foot open or fewer, a cracked top hole is tried

_PRACTICE = "common practice, no source"
_COLUMN = "Fletcher & Rossing, Physics of Musical Instruments, ch. 16"
_CROSS = "Wolfe & Smith, J. Acoust. Soc. Am. 114, 2263, 2003"


@dataclass(frozen=True, slots=True, kw_only=True)
class PlannedTake:
    """One take to record: the fingering, how to blow it, and why it is worth a file.

    `group` is the title of the takes it belongs to, `why` their reason in a sentence, `basis` what the reason
    rests on. `number` is 2 for a take that repeats an earlier one. `expects` says what it should give, where
    that is known.
    """

    fingering: Fingering
    breath: Breath
    group: str
    why: str
    basis: str
    number: int = 1
    expects: str = ""

    @property
    def stem(self) -> str:
        """The take's file name without its suffix: `oxxxxx-over-2`."""
        breath = "" if self.breath == "normal" else f"-{self.breath}"
        return f"{self.fingering}{breath}{'' if self.number == 1 else f'-{self.number}'}"

    @property
    def file_name(self) -> str:
        """The take's file name as a WAV file: `oxxxxx-over-2.wav`."""
        return f"{self.stem}.wav"


@dataclass(frozen=True, slots=True, kw_only=True)
class _Group:
    title: str
    why: str
    basis: str
    breath: Breath
    fingerings: tuple[Fingering, ...]
    number: int = 1


def take_plan(holes: int, edition: str = "standard") -> tuple[PlannedTake, ...]:
    """Return the takes to record on a flute with so many holes, in order, none twice.

    "standard" is the ladder in two registers, the leaking top hole, and the nearer cross-fingerings; "short"
    is the 15 of these that tell most (fewer where so few holes give fewer); "full" adds half holes, every
    fingering with one open hole over closed ones, cracks lower down, soft breath and repeats.

    Raises
    ------
    ValueError
        If there are not 1 to 10 holes, or the edition is not known.
    """
    if not 1 <= holes <= MAX_HOLES:
        raise ValueError(f"a flute has 1 to {MAX_HOLES} holes, not {holes}")
    if edition == "short":
        return _short(holes)
    if edition == "standard":
        return _takes(_standard_groups(holes))
    if edition == "full":
        return _takes(_full_groups(holes))
    raise ValueError(f"an edition is one of {', '.join(EDITIONS)}, not {edition!r}")


def fingers_moved(one: Fingering, other: Fingering) -> int:
    """Return on how many holes two fingerings differ."""
    return sum(a != b for a, b in zip(one.states, other.states, strict=True))


# --- editions ----------------------------------------------------------------------------------------


def _standard_groups(holes: int) -> list[_Group]:
    below = _rests(holes)
    return [
        _ladder_group(ladder(holes)),
        _overblown_ladder_group(ladder(holes)[:-1]),
        _leak_group(holes),
        _top_group("v", below[1:_STANDARD_LEAKS]),
        _top_group("o", below[1:-1]),
        _cross_group(_crossed(holes, closed=range(1, 3)), "normal"),
        _again_group(ladder(holes)[:1], "normal"),
    ]


def _full_groups(holes: int) -> list[_Group]:
    below = _rests(holes)
    crossed = _crossed(holes, closed=range(1, holes))
    return [
        _ladder_group(ladder(holes)),
        _half_holes_group(holes),
        _overblown_ladder_group(ladder(holes)),
        _leak_group(holes),
        *(_top_group(state, below[1:]) for state in "vho"),
        _cross_group(crossed, "normal"),
        _cross_group(crossed, "over"),
        _top_and_another_group(holes),
        _lower_crack_group(holes),
        _soft_group(holes),
        _again_group(ladder(holes)[:1], "normal"),
        _again_group((Fingering("o" + below[0]),), "over"),
    ]


def _short(holes: int) -> tuple[PlannedTake, ...]:
    """Return the takes of the standard edition that tell most, in its order."""
    everything = _takes(_standard_groups(holes))
    wanted: list[tuple[Fingering, Breath]] = [(rung, "normal") for rung in _thinned(ladder(holes))]
    wanted += [(fingering, "over") for fingering in _upper_first(holes)]
    wanted += [(take.fingering, take.breath) for take in everything if take.number == 1]
    known = {(take.fingering, take.breath) for take in everything}
    chosen = set([key for key in dict.fromkeys(wanted) if key in known][:SHORT_TAKES])
    return tuple(take for take in everything if take.number == 1 and (take.fingering, take.breath) in chosen)


def _thinned(rungs: Sequence[Fingering]) -> list[Fingering]:
    """Return the ladder, of a long one every second rung and both ends."""
    if len(rungs) <= _SHORT_RUNGS:
        return list(rungs)
    return [*rungs[:-1:2], rungs[-1]]


def _upper_first(holes: int) -> Iterator[Fingering]:
    """Yield the fingerings for the second register, those that speak on most flutes first."""
    below = _rests(holes)
    yield from (Fingering(state + below[0]) for state in "xvoh")
    for rest in below[1:]:
        yield from (Fingering(state + rest) for state in "xo")


def _takes(groups: Iterable[_Group]) -> tuple[PlannedTake, ...]:
    """Return the groups' takes, each the first time it comes up, easy on the fingers within a group."""
    planned: dict[tuple[Fingering, Breath, int], PlannedTake] = {}
    for group in groups:
        new = [f for f in group.fingerings if (f, group.breath, group.number) not in planned]
        for fingering in _easy_order(new):
            key = (fingering, group.breath, group.number)
            planned[key] = PlannedTake(
                fingering=fingering, breath=group.breath, group=group.title, why=group.why,
                basis=group.basis, number=group.number,
            )  # fmt: skip
    return tuple(planned.values())


def _easy_order(fingerings: Iterable[Fingering]) -> list[Fingering]:
    """Return fingerings from the first on, always going to the one that is the fewest fingers away.

    Of several as near, the first as given is next.
    """
    left = list(dict.fromkeys(fingerings))
    order = [left.pop(0)] if left else []
    while left:
        nearest = min(left, key=lambda fingering: fingers_moved(order[-1], fingering))
        left.remove(nearest)
        order.append(nearest)
    return order


# --- groups ------------------------------------------------------------------------------------------


def _ladder_group(rungs: Sequence[Fingering]) -> _Group:
    return _Group(
        title="The ladder",
        why="The first register from low to high. Every other take is read against it.",
        basis=_COLUMN, breath="normal", fingerings=tuple(rungs),
    )  # fmt: skip


def _half_holes_group(holes: int) -> _Group:
    return _Group(
        title="Half holes on the ladder",
        why="The notes between two rungs.",
        basis=_PRACTICE, breath="normal",
        fingerings=tuple(Fingering("x" * (holes - 1 - k) + "h" + "o" * k) for k in range(holes)),
    )  # fmt: skip


def _overblown_ladder_group(rungs: Sequence[Fingering]) -> _Group:
    return _Group(
        title="The ladder, overblown",
        why="The second register of the same fingerings: how far from the octave shows the bore.",
        basis=_COLUMN, breath="over", fingerings=tuple(rungs),
    )  # fmt: skip


def _leak_group(holes: int) -> _Group:
    rest = _rests(holes)[0]
    return _Group(
        title="Top hole leaking, the others closed",
        why="A leak at the top hole weakens the first register; the second speaks instead, near the octave.",
        basis=_PRACTICE, breath="over", fingerings=tuple(Fingering(state + rest) for state in "vho"),
    )  # fmt: skip


def _top_group(state: str, rests: Sequence[str]) -> _Group:
    how = {"v": "cracked", "h": "half-holed", "o": "open"}[state]
    return _Group(
        title=f"Top hole {how}, others opened from the foot",
        why="The second-register scale that many flutes play.",
        basis=_PRACTICE, breath="over", fingerings=tuple(Fingering(state + rest) for rest in rests),
    )  # fmt: skip


def _cross_group(crossed: Sequence[Fingering], breath: Breath) -> _Group:
    blown = ", overblown" if breath == "over" else ""
    return _Group(
        title=f"Cross-fingerings{blown}",
        why="Holes closed below the first open one lower its note, and in the second register by more.",
        basis=_CROSS, breath=breath, fingerings=tuple(crossed),
    )  # fmt: skip


def _top_and_another_group(holes: int) -> _Group:
    crossed = _crossed(holes - 1, closed=range(1, holes - 1))
    return _Group(
        title="Top hole and another open",
        why="Two open holes with closed ones between them and below: more upper notes.",
        basis=_PRACTICE, breath="over", fingerings=tuple(Fingering(f"o{fingering}") for fingering in crossed),
    )  # fmt: skip


def _lower_crack_group(holes: int) -> _Group:
    return _Group(
        title="A crack lower down",
        why="A leak elsewhere favours other registers: sometimes the third.",
        basis=_PRACTICE, breath="over",
        fingerings=tuple(Fingering("x" * k + "v" + "x" * (holes - 1 - k)) for k in range(1, holes)),
    )  # fmt: skip


def _soft_group(holes: int) -> _Group:
    return _Group(
        title="Softly",
        why="How far the pitch falls when blown softly, at both ends of the ladder.",
        basis=_PRACTICE, breath="soft", fingerings=(ladder(holes)[0], ladder(holes)[-1]),
    )  # fmt: skip


def _again_group(fingerings: Sequence[Fingering], breath: Breath) -> _Group:
    return _Group(
        title="Once more",
        why="Shows how well the pitch repeats, and how far it moved while the flute warmed.",
        basis=_PRACTICE, breath=breath, fingerings=tuple(fingerings), number=2,
    )  # fmt: skip


def _rests(holes: int) -> tuple[str, ...]:
    """Return what stands below the top hole as holes are opened from the foot up, all closed first."""
    return tuple("x" * (holes - 1 - k) + "o" * k for k in range(holes))


def _crossed(holes: int, *, closed: range) -> tuple[Fingering, ...]:
    """Return all fingerings with one open hole, so many closed ones below it, and the rest to the foot open.

    From the lowest first open hole to the highest.
    """
    return tuple(
        Fingering("x" * above + "o" + "x" * count + "o" * (holes - 1 - above - count))
        for above in range(holes - 2, -1, -1)
        for count in closed
        if above + 1 + count <= holes
    )
