"""What a comparison is made of.

Conventions: flutes and rows are named by their place (0, 1 …) in `Comparison.flutes` and `.rows`. Pitches are
carried to the comparison's temperature wherever the air's temperature is known, and are as played elsewhere.
A cell's cents are from the row's note in equal temperament at the comparison's A4, positive is sharp. A
difference is the first flute minus the second. Uncertainties are standard (k = 1). None is "not known".
"""

from dataclasses import dataclass
from typing import Literal

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.register import Register
from fluteprobe.session import FluteFacts, Sitting

Matching = Literal["fingering", "note"]
# "different": so large that, of all so called, at most 1 % are chance. "likely": larger than three combined
# standard uncertainties, but among so many comparisons chance alone may give one. "air": just as large, but
# the air may explain it, for its temperature is not known: an offset of whole sittings, or a note that has
# nothing beside it.
Verdict = Literal["different", "likely", "air"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Flute:
    """One survey as a column: a label of its own, and by how much its pitches were carried.

    `shift_cents` is None where the air's temperature is not known: then nothing was carried. `kin` numbers
    the flutes that are one and the same instrument.
    """

    label: str
    facts: FluteFacts
    sitting: Sitting
    shift_cents: float | None
    kin: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Cell:
    """What one flute gives in a row; `off_cents` is from the row's middle, with three flutes or more."""

    flute: int
    fingering: Fingering
    register: Register
    frequency_hz: float
    as_played_hz: float
    cents: float
    uncertainty_cents: float
    reliability: float
    tones: int
    off_cents: float | None
    stands_out: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Beats:
    """How fast two flutes beat when they hold the same note."""

    flutes: tuple[int, int]
    rate_hz: float
    uncertainty_hz: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Row:
    """One fingering in one register, or one note: a cell for every flute, None where it was not measured.

    `mean_cents` is weighted, with the scatter between flutes in its uncertainty; `middle_cents` is the median
    and `scatter_cents` the robust standard deviation, None under three flutes; `spread_cents` is the highest
    minus the lowest, None under two. `fastest` are the beats of the two that are farthest apart.
    """

    by: str
    register: Register | None
    note: str
    cells: tuple[Cell | None, ...]
    mean_cents: float
    mean_uncertainty_cents: float
    middle_cents: float
    scatter_cents: float | None
    spread_cents: float | None
    fastest: Beats | None

    @property
    def played(self) -> tuple[Cell, ...]:
        """The cells that are there."""
        return tuple(cell for cell in self.cells if cell is not None)


@dataclass(frozen=True, slots=True, kw_only=True)
class Difference:
    """How two flutes differ in one row.

    `cents` is the whole difference, `alone_cents` what is left of it once the offset of the pair is taken
    off. The probabilities are those of chance giving as much, adjusted for all comparisons made.
    """

    row: int
    cents: float
    uncertainty_cents: float
    probability: float
    verdict: Verdict | None
    alone_cents: float | None
    alone_uncertainty_cents: float | None
    alone_probability: float | None
    alone_verdict: Verdict | None
    beats: Beats


@dataclass(frozen=True, slots=True, kw_only=True)
class Pair:
    """Two flutes: their offset as wholes, and every shared row.

    The offset is what is common to the notes; single notes that moved do not move it. `widened` is the ratio
    by which uncertainties were widened because the notes of one and the same flute scatter more than they
    tell. The offset is None with fewer than FEWEST_FOR_OFFSET shared rows.
    """

    flutes: tuple[int, int]
    offset_cents: float | None
    offset_uncertainty_cents: float | None
    offset_verdict: Verdict | None
    widened: float
    differences: tuple[Difference, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Reach:
    """Which flutes play a note, and in which register each (aligned)."""

    note: str
    midi: int
    flutes: tuple[int, ...]
    registers: tuple[Register, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class GroupPitch:
    """The A4 that suits all shared notes best; `remaining_cents` is the rms of what is left at it."""

    a4_hz: float
    uncertainty_hz: float
    remaining_cents: float
    cells: int


@dataclass(frozen=True, slots=True, kw_only=True)
class PlayersPart:
    """What a player adds to a flute as a whole, against the mean of the players who can be compared with."""

    player: str
    group: int
    cents: float
    uncertainty_cents: float
    verdict: Verdict | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Rest:
    """What a player does with one row of an instrument beyond what the player adds to the whole of it."""

    player: str
    kin: int
    row: int
    cents: float
    uncertainty_cents: float
    verdict: Verdict | None


@dataclass(frozen=True, slots=True, kw_only=True)
class FlutesPart:
    """The common part: what an instrument gives in a row whoever plays it (`kin` names the instrument)."""

    kin: int
    row: int
    cents: float
    uncertainty_cents: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Parts:
    """What is the flute's, what the player's, and what cannot be told apart, in sentences."""

    players: tuple[PlayersPart, ...]
    flutes: tuple[FlutesPart, ...]
    rests: tuple[Rest, ...]
    unseparated: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class NoteDrift:
    """How one row drifts beyond the whole flute."""

    row: int
    cents_per_year: float
    uncertainty_cents_per_year: float
    verdict: Verdict | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Drift:
    """How one flute's pitch runs over its dates, as a whole and note by note.

    `days` and `levels_cents` are the sittings' dates (days from the first) and pitches as wholes (their mean
    is 0), with their uncertainties; `flutes` are the sittings, in the order of the dates.
    """

    kin: int
    flutes: tuple[int, ...]
    days: tuple[int, ...]
    levels_cents: tuple[float, ...]
    level_uncertainties_cents: tuple[float, ...]
    cents_per_year: float
    uncertainty_cents_per_year: float
    verdict: Verdict | None
    notes: tuple[NoteDrift, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    """Several measured flutes beside one another.

    `pairs` holds every pair up to PAIRS_UP_TO flutes and is empty for more. `chance` is how many of the
    `compared` single differences chance alone would put beyond three uncertainties.
    """

    by: Matching
    a4_hz: float
    temperature_c: float | None
    flutes: tuple[Flute, ...]
    rows: tuple[Row, ...]
    pairs: tuple[Pair, ...]
    compared: int
    notes: tuple[Reach, ...]
    group: GroupPitch | None
    parts: Parts | None
    drifts: tuple[Drift, ...]
    cautions: tuple[str, ...]

    @property
    def is_one_instrument(self) -> bool:
        """Whether all are sittings with one and the same flute."""
        return len({flute.kin for flute in self.flutes}) == 1

    @property
    def is_carried(self) -> bool:
        """Whether any pitch was carried from one temperature to another."""
        return any(flute.shift_cents for flute in self.flutes)
