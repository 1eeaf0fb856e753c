"""The air in the flute: a transmission line with finger holes, and its resonances.

Conventions: plane waves, time dependence exp(+jωt). Lengths are in mm from the sound hole towards the foot,
the hole nearest the mouth first; temperatures in °C; frequencies in Hz. `openness` runs from 0 (closed) to 1
(open) and is the share of a hole's area that is uncovered; arrays of it have shape (fingerings, holes).
Impedances and admittances are normalised by the bore's characteristic impedance ρc/(πa²), so they are plain
numbers. A resonance is a maximum of the admittance that the jet meets at the sound hole; NaN stands where
there are fewer resonances than were asked for.

A bore that is no plain cylinder is a row of cones and cylinders; what the flow does beyond plane waves at a
step is left out.

The formulas are published ones, quoted from memory:
walls       Keefe, JASA 75, 58 (1984): propagation constant for a smooth isothermal wall
foot        Levine & Schwinger, Phys. Rev. 73, 383 (1948), as fitted by Silva et al., J. Sound Vib. 322 (2009)
holes       Keefe, JASA 72, 676 (1982); Dalmont et al., Acta Acustica 88, 567 (2002); Lefebvre & Scavone,
            JASA 131, 3153 (2012)
cones       radius times pressure is a plane wave; Fletcher & Rossing, ch. 8
sound hole  an acoustic mass; Fletcher & Rossing, The Physics of Musical Instruments, ch. 8 and 16
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import ceil, pi, sqrt

import numpy as np
import numpy.typing as npt

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.tuning import speed_of_sound_m_per_s

Reals = npt.NDArray[np.float64]
Complexes = npt.NDArray[np.complex128]

FOOT_CORRECTION = 0.6133  # in bore radii, unflanged (Levine & Schwinger 1948)

_LONGEST_CONE_MM = 60.0  # whose walls' losses are those of its mean radius
_POINTS_PER_SPACING = 24
_CHUNK = 64
_REFINING_STEPS = (1.0, 0.3, 0.05, 0.05, 0.02)  # in grid steps


@dataclass(frozen=True, slots=True, kw_only=True)
class Tube:
    """A sounding tube with its finger holes.

    `length_mm` is from the sound hole to the foot. `holes_mm` pairs each hole's distance from the sound hole
    with its diameter. `head_correction_mm` is the length of bore that weighs as much as the air in and
    around the sound hole.

    `profile_mm` pairs places, from the sound hole to the foot, with the bore's diameter there, straight in
    between and even beyond the ends; two diameters at one place are a step. Without it the bore is `bore_mm`
    throughout; with it, `bore_mm` is only the size that impedances and `head_correction_mm` refer to.

    Raises
    ------
    ValueError
        If a dimension is not positive, or holes or places do not follow one another from sound hole to foot.
    """

    bore_mm: float
    length_mm: float
    wall_mm: float
    holes_mm: tuple[tuple[float, float], ...]
    head_correction_mm: float
    temperature_c: float = 20.0
    profile_mm: tuple[tuple[float, float], ...] = ()

    def __post_init__(self) -> None:
        sizes = (
            self.bore_mm,
            self.length_mm,
            self.wall_mm,
            *(size for _, size in (*self.holes_mm, *self.profile_mm)),
        )
        if not min(sizes) > 0.0 or self.head_correction_mm < 0.0:
            raise ValueError("bore, length, wall and hole diameters are above 0 mm")
        places = [0.0, *(place for place, _ in self.holes_mm), self.length_mm]
        if any(below <= above for above, below in pairwise(places)):
            raise ValueError(
                f"the holes do not follow one another from sound hole to foot: {places[1:-1]} mm"
            )
        turns = [place for place, _ in self.profile_mm]
        if turns != sorted(turns):
            raise ValueError(
                f"the bore's places do not follow one another from sound hole to foot: {turns} mm"
            )

    @property
    def radius_m(self) -> float:
        """The bore's radius in m."""
        return self.bore_mm / 2000.0

    def radius_at_m(self, place_mm: float) -> float:
        """Return the bore's radius in m at a distance from the sound hole."""
        if not self.profile_mm:
            return self.radius_m
        places, sizes = np.transpose(self.profile_mm)
        return float(np.interp(place_mm, places, sizes)) / 2000.0

    @property
    def wideness(self) -> float:
        """The foot's area over that of `bore_mm`."""
        return (self.radius_at_m(self.length_mm) / self.radius_m) ** 2

    @property
    def effective_length_m(self) -> float:
        """Length with both end corrections, in m: half a wavelength of the all-closed first register."""
        return (self.length_mm + self.head_correction_mm) / 1000.0 + FOOT_CORRECTION * self.radius_at_m(
            self.length_mm
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Resonances:
    """The lowest resonances of some fingerings: arrays of shape (fingerings, count), NaN where none is left.

    `width_hz` is the half-power width and `strength` the normalised admittance at the peak.
    """

    frequency_hz: Reals
    width_hz: Reals
    strength: Reals

    @property
    def quality(self) -> Reals:
        """Frequency over half-power width."""
        return np.asarray(self.frequency_hz / self.width_hz)


def openness_of(fingerings: Sequence[Fingering]) -> Reals:
    """Return the nominal openness of fingerings, shape (fingerings, holes)."""
    return np.array([fingering.openness for fingering in fingerings], dtype=np.float64)


def input_admittance(tube: Tube, openness: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> Complexes:
    """Return the normalised admittance that the jet meets: sound hole and tube in series.

    Parameters
    ----------
    tube
        The flute.
    openness
        0 closed to 1 open, shape (holes,) or (fingerings, holes).
    frequency_hz
        Shape (frequencies,), or (fingerings, frequencies) where each fingering has its own.

    Returns
    -------
    numpy.ndarray
        Complex, shape (fingerings, frequencies), or (frequencies,) for a single fingering.

    Raises
    ------
    ValueError
        If the number of holes differs from the tube's.
    """
    states = np.atleast_2d(np.asarray(openness, dtype=np.float64))
    _require_holes(tube, states)
    admittance = 1.0 / _impedance(tube, states, np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64)))
    return admittance[0] if np.ndim(openness) == 1 and np.ndim(frequency_hz) < 2 else admittance


def resonances(tube: Tube, fingerings: Sequence[Fingering] | Reals, count: int = 4) -> Resonances:
    """Return the `count` lowest resonances of each fingering.

    The minima of the impedance's magnitude are found on a grid and refined by parabolas, to better than
    0.05 cent; the width is that of the resonance curve with the same bottom and curvature.

    Parameters
    ----------
    tube
        The flute.
    fingerings
        Fingerings, or openness of shape (fingerings, holes).
    count
        How many resonances of each.

    Raises
    ------
    ValueError
        If the number of holes differs from the tube's.
    """
    states = fingerings if isinstance(fingerings, np.ndarray) else openness_of(fingerings)
    _require_holes(tube, states)
    grid_hz = _grid(tube, count)
    starts = range(0, len(states), _CHUNK)
    parts = [_chunk_peaks(tube, states[i : i + _CHUNK], grid_hz, count) for i in starts]
    frequency, width, strength = (np.concatenate(column) for column in zip(*parts, strict=True))
    return Resonances(frequency_hz=frequency, width_hz=width, strength=strength)


def outflows(tube: Tube, openness: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> Complexes:
    """Return what flows out of each finger hole and, last, out of the foot, per unit of flow into the head.

    Parameters
    ----------
    tube
        The flute.
    openness
        Shape (holes,).
    frequency_hz
        Shape (frequencies,).

    Returns
    -------
    numpy.ndarray
        Complex, shape (holes + 1, frequencies). A closed hole's flow only presses on the finger.
    """
    return _walk(tube, openness, frequency_hz)[0]


def hole_pressures(tube: Tube, openness: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> Complexes:
    """Return the normalised pressure in the bore at each finger hole per unit of flow into the head.

    Complex, shape (holes, frequencies); parameters as for `outflows`.
    """
    return _walk(tube, openness, frequency_hz)[1]


# --- the line ----------------------------------------------------------------------------------------


class _Air:
    """Wave numbers and boundary layers of the air in a tube at some frequencies."""

    def __init__(self, tube: Tube, frequency_hz: Reals) -> None:
        warmer = tube.temperature_c - 26.85
        density = 1.1769 * (1.0 - 0.00335 * warmer)  # kg/m³, Keefe 1984
        viscosity = 1.846e-5 * (1.0 + 0.00250 * warmer)  # Pa s, Keefe 1984
        omega = 2.0 * pi * frequency_hz
        self.k = omega / speed_of_sound_m_per_s(tube.temperature_c)
        self.layers = np.sqrt(omega * density / viscosity)  # 1/m

    def propagation(self, radius_m: float) -> Complexes:
        """Return attenuation + j phase constant in 1/m (Keefe 1984, wide-tube expansion)."""
        thin = 1.0 / (radius_m * self.layers)
        attenuation = thin * (1.045 + thin * (1.080 + 0.750 * thin))
        return np.asarray(self.k * (attenuation + 1j * (1.0 + 1.045 * thin)))


@dataclass(frozen=True, slots=True, kw_only=True)
class _Piece:
    """A piece of the bore, a cone or cylinder: its length, and its radius at the upper and the lower end.

    `reference_m` is the radius whose characteristic impedance is 1.
    """

    length_m: float
    upper_m: float
    lower_m: float
    reference_m: float

    @property
    def slope(self) -> float:
        """How much the radius grows towards the foot, per length."""
        return (self.lower_m - self.upper_m) / self.length_m

    def propagation(self, air: _Air) -> Complexes:
        """Return attenuation + j phase constant in 1/m."""
        return air.propagation(0.5 * (self.upper_m + self.lower_m))


def _require_holes(tube: Tube, states: Reals) -> None:
    if states.shape[1] != len(tube.holes_mm):
        raise ValueError(f"the tube has {len(tube.holes_mm)} holes, the fingering {states.shape[1]}")


def _impedance(tube: Tube, states: Reals, frequency_hz: Reals) -> Complexes:
    """Return the impedance that the jet meets, from the foot up to the sound hole."""
    air = _Air(tube, frequency_hz)
    z = _foot_impedance(tube, air) + np.zeros((len(states), 1))
    below_mm = tube.length_mm
    for index in range(len(tube.holes_mm) - 1, -1, -1):
        place_mm = tube.holes_mm[index][0]
        z = _through_bore(z, _pieces(tube, place_mm, below_mm), air)
        series, shunt = _holes_alike(tube, index, states[:, index], air)
        z = z + series / 2.0
        z = z / (1.0 + z * shunt) + series / 2.0
        below_mm = place_mm
    return np.asarray(_through_bore(z, _pieces(tube, 0.0, below_mm), air) + _head_impedance(tube, air))


def _through_bore(z: Complexes, pieces: list[_Piece], air: _Air) -> Complexes:
    """Return the impedance before some pieces of the bore from that after them."""
    for piece in reversed(pieces):
        turn = piece.propagation(air)
        tanh = np.tanh(turn * piece.length_m)
        if piece.slope == 0.0:
            wideness = (piece.upper_m / piece.reference_m) ** 2
            z = (z + tanh / wideness) / (1.0 + z * tanh * wideness)
        else:
            wave, rise = _wave(z, 1.0, piece.lower_m, piece, turn)
            wave, rise = wave - rise * tanh / turn, rise - wave * tanh * turn
            pressure, flow = _plain(wave, rise, piece.upper_m, piece, turn)
            z = pressure / flow
    return np.asarray(z)


def _wave(
    pressure: Complexes, flow: Complexes | float, radius_m: float, piece: _Piece, turn: Complexes
) -> tuple[Complexes, Complexes]:
    """Return radius times pressure, and how it rises per metre, at one end of a piece."""
    return radius_m * pressure, piece.slope * pressure - flow * turn * piece.reference_m**2 / radius_m


def _plain(
    wave: Complexes, rise: Complexes, radius_m: float, piece: _Piece, turn: Complexes
) -> tuple[Complexes, Complexes]:
    """Return pressure and flow at one end of a piece: the way back from `_wave`."""
    pressure = wave / radius_m
    return pressure, (piece.slope * pressure - rise) * radius_m / (turn * piece.reference_m**2)


def _pieces(tube: Tube, upper_mm: float, lower_mm: float) -> list[_Piece]:
    """Return the cones and cylinders that a stretch of the bore consists of, from head to foot."""
    turns = {upper_mm, *(place for place, _ in tube.profile_mm if upper_mm < place < lower_mm), lower_mm}
    pieces = []
    for first_mm, last_mm in pairwise(sorted(turns)):
        count = ceil((last_mm - first_mm) / _LONGEST_CONE_MM) if tube.profile_mm else 1
        step_mm = (last_mm - first_mm) / count
        pieces += [_piece(tube, first_mm + k * step_mm, step_mm) for k in range(count)]
    return pieces


def _piece(tube: Tube, upper_mm: float, length_mm: float) -> _Piece:
    """Return a piece without turns; its ends' radii follow from two places within, clear of steps."""
    above, below = (tube.radius_at_m(upper_mm + share * length_mm) for share in (1.0 / 3.0, 2.0 / 3.0))
    return _Piece(
        length_m=length_mm / 1000.0,
        upper_m=2.0 * above - below,
        lower_m=2.0 * below - above,
        reference_m=tube.radius_m,
    )


def _foot_impedance(tube: Tube, air: _Air) -> Complexes:
    """Return the radiation impedance of an unflanged end (Silva et al. 2009, after Levine & Schwinger).

    Its low-frequency end correction is (1.393 − 0.167)/2 = 0.613 radii, its resistance (ka)²/4.
    """
    x = 1j * air.k * tube.radius_at_m(tube.length_mm)
    return np.asarray((1.226 * x + 0.457 * x**2) / (2.0 + 1.560 * x + 0.457 * x**2) / tube.wideness)


def _head_impedance(tube: Tube, air: _Air) -> Complexes:
    """Return the sound hole's: a mass, and the resistance (ka)²/4 of a small source in the open."""
    mass = 1j * air.k * tube.head_correction_mm / 1000.0
    return np.asarray(mass + 0.25 * (air.k * tube.radius_m) ** 2)


def _holes_alike(tube: Tube, index: int, openness: Reals, air: _Air) -> tuple[Complexes, Complexes]:
    """Return `_hole` of each fingering, working out equal ones once where all share their frequencies."""
    if air.k.ndim > 1:
        return _hole(tube, index, openness[:, None], air)
    levels, which = np.unique(openness, return_inverse=True)
    series, shunt = _hole(tube, index, levels[:, None], air)
    return series[which], shunt[which]


def _hole(tube: Tube, index: int, openness: Reals, air: _Air) -> tuple[Complexes, Complexes]:
    """Return series impedance and shunt admittance of a hole, normalised by the bore's.

    Inner and series lengths after Lefebvre & Scavone 2012, the matching volume after Keefe 1982.
    """
    bore, hole = tube.radius_at_m(tube.holes_mm[index][0]), tube.holes_mm[index][1] / 2000.0
    wall, ratio, whole = tube.wall_mm / 1000.0, hole / bore, hole / tube.radius_m
    duct = np.tanh(air.propagation(hole) * (wall + hole * ratio / 8.0 * (1.0 + 0.207 * ratio**3)))
    load = _covered_end(bore + wall, hole, openness, air)
    own = (load + duct) / (1.0 + load * duct)
    shunt = whole**2 * own / (1.0 + own * 1j * air.k * _inner_length(hole, ratio))
    open_series = -0.35 + 0.06 * np.tanh(2.7 * wall / hole)
    closed_series = -0.12 - 0.17 * np.tanh(2.4 * wall / hole)
    series = (
        hole
        * (ratio * tube.radius_m / bore) ** 2
        * (closed_series + (open_series - closed_series) * openness)
    )
    return np.asarray(1j * air.k * series), np.asarray(shunt)


def _inner_length(hole_m: float, ratio: float) -> float:
    """Return the inner length correction in m (Lefebvre & Scavone 2012, low frequency)."""
    polynomial = (0.822, -0.095, -1.566, 2.138, -1.640, 0.502)
    return hole_m * sum(coefficient * ratio**power for power, coefficient in enumerate(polynomial))


def _covered_end(outer_m: float, hole_m: float, openness: Reals, air: _Air) -> Complexes:
    """Return the admittance of a hole's outer end, normalised by the hole's own characteristic impedance.

    The outer correction on a cylinder of radius `outer_m` is Dalmont's (2002); a partly covered hole is a
    diaphragm there, its inner correction after Kergomard & Garcia, J. Sound Vib. 114, 465 (1987), with
    viscous friction.
    """
    root = np.sqrt(openness)
    outside = 0.82 - 0.47 * (hole_m / outer_m) ** 0.8
    inside = 0.82 * np.maximum(1.0 - 1.35 * root + 0.31 * root**3, 0.0)
    mass = 1j * air.k * hole_m * (outside + inside)
    radiation = 0.25 * (air.k * hole_m) ** 2 * root
    friction = sqrt(2.0) * air.k / air.layers / np.maximum(root, 1e-6)
    return np.asarray(root / (mass + radiation + friction))


# --- peaks -------------------------------------------------------------------------------------------


def _grid(tube: Tube, count: int) -> Reals:
    """Return frequencies from well under the lowest resonance to above the last of the shortest fingering."""
    spacing = speed_of_sound_m_per_s(tube.temperature_c) / (2.0 * tube.effective_length_m)
    shortest_mm = tube.holes_mm[0][0] if tube.holes_mm else tube.length_mm
    highest = spacing * tube.length_mm / max(shortest_mm, 0.35 * tube.length_mm) * (count + 0.7)
    return np.arange(0.4 * spacing, highest, spacing / _POINTS_PER_SPACING)


def _chunk_peaks(tube: Tube, states: Reals, grid_hz: Reals, count: int) -> tuple[Reals, Reals, Reals]:
    hindrance = _squared_impedance(tube, states, grid_hz)
    middle = hindrance[:, 1:-1]
    dip = (middle < hindrance[:, :-2]) & (middle <= hindrance[:, 2:])
    order = np.cumsum(dip, axis=1)
    frequency = np.full((len(states), count), np.nan)
    for n in range(count):
        rows, columns = np.nonzero(dip & (order == n + 1))
        frequency[rows, n] = grid_hz[columns + 1]
    return _refined(tube, states, frequency, float(grid_hz[1] - grid_hz[0]))


def _refined(tube: Tube, states: Reals, frequency_hz: Reals, step_hz: float) -> tuple[Reals, Reals, Reals]:
    """Return frequency, half-power width and strength of the peaks near `frequency_hz`.

    Near a resonance |Z|² is a parabola, m (1 + 4(f − f0)²/width²), so a few of them lead to its bottom.
    """
    missing = np.isnan(frequency_hz)
    centre = np.where(missing, 1.0, frequency_hz)
    for share in _REFINING_STEPS:
        h = share * step_hz
        low, middle, high = (_squared_impedance(tube, states, centre + offset) for offset in (-h, 0.0, h))
        curvature = np.maximum((low - 2.0 * middle + high) / h**2, 1e-12)
        centre = np.maximum(
            centre + np.clip((low - high) / (2.0 * h) / curvature, -step_hz, step_hz), step_hz
        )
    bottom = _squared_impedance(tube, states, centre)
    width = np.sqrt(8.0 * bottom / curvature)
    found = [np.where(missing, np.nan, values) for values in (centre, width, 1.0 / np.sqrt(bottom))]
    return found[0], found[1], found[2]


def _squared_impedance(tube: Tube, states: Reals, frequency_hz: Reals) -> Reals:
    impedance = _impedance(tube, states, frequency_hz)
    return np.asarray(impedance.real**2 + impedance.imag**2)


# --- inside the tube ---------------------------------------------------------------------------------


def _walk(tube: Tube, openness: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> tuple[Complexes, Complexes]:
    """Return flows out of the openings and pressures at the holes, walking from the head to the foot."""
    states = np.asarray(openness, dtype=np.float64)[None, :]
    _require_holes(tube, states)
    frequency = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
    air = _Air(tube, frequency)
    pressure = (_impedance(tube, states, frequency) - _head_impedance(tube, air))[0]
    flow = np.ones_like(pressure)
    flows, pressures, place_mm = [], [], 0.0
    for index, (next_mm, _) in enumerate(tube.holes_mm):
        pressure, flow = _along(pressure, flow, _pieces(tube, place_mm, next_mm), air)
        series, shunt = (part[0] for part in _hole(tube, index, states[:, index : index + 1], air))
        pressure = pressure - flow * series / 2.0
        pressures.append(pressure)
        flows.append(pressure * shunt)
        flow = flow - pressure * shunt
        pressure = pressure - flow * series / 2.0
        place_mm = next_mm
    flows.append(_along(pressure, flow, _pieces(tube, place_mm, tube.length_mm), air)[1])
    return np.array(flows), np.array(pressures).reshape(len(tube.holes_mm), len(frequency))


def _along(
    pressure: Complexes, flow: Complexes, pieces: list[_Piece], air: _Air
) -> tuple[Complexes, Complexes]:
    """Return pressure and flow after some pieces of the bore from those before them."""
    for piece in pieces:
        turn = piece.propagation(air)
        cosh, sinh = np.cosh(turn * piece.length_m), np.sinh(turn * piece.length_m)
        wave, rise = _wave(pressure, flow, piece.upper_m, piece, turn)
        wave, rise = wave * cosh + rise * sinh / turn, rise * cosh + wave * sinh * turn
        pressure, flow = _plain(wave, rise, piece.lower_m, piece, turn)
    return pressure, flow
