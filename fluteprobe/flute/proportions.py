"""What is believed of a flute's shape before it is heard: its known dimensions, else the trade's proportions.

Conventions: as in `shape`: mm, places from the sound hole, top hole first; spreads are standard deviations.
The usual proportions are common practice, no source, and are held loosely. Where a ladder note is known,
the first open hole stands about half a wavelength from the head's end; how far the open holes lengthen the
column is Benade's lattice formula (Fundamentals of Musical Acoustics, 1976, ch. 21; from memory).
"""

from collections.abc import Mapping
from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np

from fluteprobe.flute.shape import BORE, FIRST_PLACE, HEAD, LENGTH, WALL, Reals, Setting, Shape
from fluteprobe.flute.tube import FOOT_CORRECTION
from fluteprobe.flute.tuning import speed_of_sound_m_per_s

# Common practice, no source: a mid-range flute (400 Hz, all closed) has a bore of 19 mm, and a longer one a
# wider.
_BORE_MM, _BORE_AT_HZ, _BORE_SPREAD = 19.0, 400.0, 0.18
_WALL_MM, _WALL_SPREAD_MM = 4.0, 0.9
_HEAD_BORES, _HEAD_SPREAD_BORES = 2.1, 0.5
_HOLE_BORES, _HOLE_SPREAD_BORES = 0.42, 0.09
_CLOSED_HOLES = 0.012  # of the length, which the hollows under the fingers add to it
_STEP_CENTS, _STEP_SPREAD_CENTS = 200.0, 80.0
_PLACE_SPREAD = 0.03  # of half a wavelength
_LATTICE = 0.08  # of the length, between two holes
_ROOM_AIR_C, _AIR_SPREAD_C, _WARMED_CENTS = 20.0, 3.0, 4.0
_CENTS_PER_C = 3.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Known:
    """What a maker measured, in mm, None where not: `holes_mm` as (distance from the sound hole, diameter).

    `profile_mm` is the bore where it is not even, as (distance from the sound hole, diameter); `bore_mm` is
    then that at the sound hole. `tolerance_mm` is how far each may be off (one standard deviation). `air_c`
    is the air's temperature in °C.
    """

    bore_mm: float | None = None
    wall_mm: float | None = None
    length_mm: float | None = None
    holes_mm: tuple[tuple[float, float], ...] | None = None
    profile_mm: tuple[tuple[float, float], ...] = ()
    tolerance_mm: float = 0.3
    air_c: float | None = None

    @property
    def profile(self) -> tuple[tuple[float, float], ...]:
        """The bore's profile as shares of that at the sound hole; empty where it is even or not known."""
        return tuple((place, size / self.profile_mm[0][1]) for place, size in self.profile_mm)

    @property
    def head_bore_mm(self) -> float | None:
        """The bore at the sound hole."""
        return self.profile_mm[0][1] if self.profile_mm else self.bore_mm

    @property
    def has_dimensions(self) -> bool:
        """Whether any dimension was measured."""
        return any(
            each is not None for each in (self.head_bore_mm, self.wall_mm, self.length_mm, self.holes_mm)
        )


def without_dimensions(known: Known) -> Known:
    """Return what is known of the air alone."""
    return Known(air_c=known.air_c)


def believed_shape(holes: int, rungs: Mapping[int, float], known: Known) -> Shape:
    """Return the shape that a flute of so many holes is believed to have.

    Parameters
    ----------
    holes
        How many.
    rungs
        First-register pitches of the ladder in cents above 1 Hz, by open holes: at least one.
    known
        The dimensions that were measured.

    Raises
    ------
    ValueError
        If no rung is known.
    """
    if not rungs:
        raise ValueError("no note of the ladder is known")
    air_c = _ROOM_AIR_C if known.air_c is None else known.air_c
    ladder_cents, loose_cents = _whole_ladder(holes, rungs)
    half_mm = 500.0 * speed_of_sound_m_per_s(air_c) / 2.0 ** (ladder_cents / 1200.0)
    values = _usual_values(holes, half_mm, known)
    spread = _usual_spreads(holes, half_mm, values, loose_cents)
    covariance = np.diag(spread**2)
    _tie_to_head(covariance, holes)
    _pin(values, covariance, known)
    air_spread = (
        _WARMED_CENTS if known.air_c is not None else hypot(_WARMED_CENTS, _CENTS_PER_C * _AIR_SPREAD_C)
    )
    covariance[-1, -1] = air_spread**2
    return Shape(
        values=values, covariance=covariance, setting=Setting(temperature_c=air_c, profile=known.profile)
    )


def _whole_ladder(holes: int, rungs: Mapping[int, float]) -> tuple[Reals, Reals]:
    """Return the pitch of every rung, guessed where not known, and how far off each may be, in cents."""
    at = np.array(sorted(rungs))
    heard = np.array([rungs[k] for k in at])
    every = np.arange(holes + 1)
    pitch = np.interp(every, at, heard)
    pitch += _STEP_CENTS * (np.minimum(every - at[0], 0) + np.maximum(every - at[-1], 0))
    away = np.abs(every[:, None] - at[None, :]).min(axis=1)
    return pitch, _STEP_SPREAD_CENTS * np.sqrt(away)


def _usual_values(holes: int, half_mm: Reals, known: Known) -> Reals:
    """Return the likeliest shape; `half_mm` holds half a wavelength of every rung."""
    lowest_hz = 1.7e5 / half_mm[0]
    bore = known.head_bore_mm or _BORE_MM * sqrt(_BORE_AT_HZ / lowest_hz)
    wall = known.wall_mm or _WALL_MM
    sizes = np.full(holes, _HOLE_BORES * bore)
    if known.holes_mm is not None:
        sizes = np.array([size for _, size in known.holes_mm])
    head = _HEAD_BORES * bore
    values = np.zeros(FIRST_PLACE + 2 * holes + 1)
    values[[BORE, WALL, HEAD]] = bore, wall, head
    values[LENGTH] = half_mm[0] * (1.0 - _CLOSED_HOLES) - head - FOOT_CORRECTION * bore / 2.0
    spacing = _LATTICE * half_mm[0]
    heaviness = (wall + 0.7 * sizes) * (bore / sizes) ** 2
    lattice = 0.5 * spacing * (np.sqrt(1.0 + 4.0 * heaviness / spacing) - 1.0)
    values[FIRST_PLACE : FIRST_PLACE + holes] = half_mm[:0:-1] - head - lattice
    values[FIRST_PLACE + holes : -1] = sizes
    return values


def _usual_spreads(holes: int, half_mm: Reals, values: Reals, loose_cents: Reals) -> Reals:
    bore = values[BORE]
    spread = np.zeros(len(values))
    spread[BORE], spread[WALL], spread[HEAD] = _BORE_SPREAD * bore, _WALL_SPREAD_MM, _HEAD_SPREAD_BORES * bore
    per_cent = np.log(2.0) / 1200.0
    stations = half_mm * np.hypot(_PLACE_SPREAD, loose_cents * per_cent)
    spread[LENGTH] = stations[0]
    spread[FIRST_PLACE : FIRST_PLACE + holes] = stations[:0:-1]
    spread[FIRST_PLACE + holes : -1] = _HOLE_SPREAD_BORES * bore
    return spread


def _tie_to_head(covariance: Reals, holes: int) -> None:
    """Tie foot and holes to the head's depth: the ladder tells only their sum."""
    stations = [LENGTH, *range(FIRST_PLACE, FIRST_PLACE + holes)]
    head = covariance[HEAD, HEAD]
    covariance[np.ix_(stations, stations)] += head
    covariance[HEAD, stations] = covariance[stations, HEAD] = -head


def _pin(values: Reals, covariance: Reals, known: Known) -> None:
    """Put in what was measured, with its tolerance."""
    pins = {BORE: known.head_bore_mm, WALL: known.wall_mm, LENGTH: known.length_mm}
    for k, (place, size) in enumerate(known.holes_mm or ()):
        pins[FIRST_PLACE + k] = place
        pins[FIRST_PLACE + len(known.holes_mm or ()) + k] = size
    for index, value in pins.items():
        if value is not None:
            values[index] = value
            covariance[index, :] = covariance[:, index] = 0.0
            covariance[index, index] = known.tolerance_mm**2
