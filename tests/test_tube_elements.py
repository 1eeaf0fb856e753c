"""The tube model against an independent computation: finite elements on the one-dimensional horn equation.

scikit-fem, a general-purpose finite-element library, solves d/dx (p' / Z) = Y p for the pressure p along a
bore that is driven by a flow of 1 at the head; Z and Y are its impedance and admittance per metre. The walls
are Zwikker & Kosten's exact ones (Sound Absorbing Materials, 1949, in Bessel functions), not the model's
expansion in the thickness of the layer at the wall. Openings and holes are lumped elements, written out here
once more from the published formulas.
"""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar
from scipy.special import jv
from skfem import Basis, BilinearForm, ElementLineP2, MeshLine, solve
from test_tube import FLUTE, NO_HOLES, PIPE

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.tube import Tube, openness_of, resonances
from fluteprobe.flute.tuning import cents_between, speed_of_sound_m_per_s

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]

SOUND = speed_of_sound_m_per_s(20.0)
# Air at 20 °C, handbook values from memory: kg/m³, Pa s, ratio of specific heats, Prandtl's number.
DENSITY, VISCOSITY, GAMMA, PRANDTL = 1.204, 1.82e-5, 1.402, 0.71
STEP_MM = 2.0
HOLE_MM = 1.0  # over so much of the bore a hole's series impedance is spread

CONE = replace(PIPE, profile_mm=((0.0, 18.0), (600.0, 12.0)))
STEPPED = replace(PIPE, profile_mm=((0.0, 18.0), (250.0, 18.0), (250.0, 14.0), (600.0, 14.0)))
NARROWING = replace(FLUTE, profile_mm=((0.0, 20.0), (200.0, 20.0), (386.0, 15.0)))


def from_a_wall(radius_m: Floats, layer_m: complex) -> Complexes:
    """Return F, the share that the wall takes: 2 J1(z) / (z J0(z)) at z = radius / layer."""
    z: Complexes = np.asarray(radius_m / layer_m, np.complex128)
    return np.asarray(2.0 * jv(1, z) / (z * jv(0, z)))


def line(radius_m: Floats, omega: float) -> tuple[Complexes, Complexes]:
    """Return impedance and admittance per metre of a round bore (Zwikker & Kosten)."""
    layer = np.sqrt(VISCOSITY / (DENSITY * omega)) / np.sqrt(-1j)
    area = np.pi * radius_m**2
    mass = 1j * omega * DENSITY / (area * (1.0 - from_a_wall(radius_m, layer)))
    spring = 1j * omega * area / (DENSITY * SOUND**2)
    return mass, spring * (1.0 + (GAMMA - 1.0) * from_a_wall(radius_m, layer / np.sqrt(PRANDTL)))


def radius_at(tube: Tube, place_m: Any) -> Any:
    places, sizes = np.transpose(tube.profile_mm or ((0.0, tube.bore_mm),))
    return np.interp(place_m * 1000.0, places, sizes) / 2000.0


def opening(radius_m: float, omega: float) -> complex:
    """Return an unflanged end's impedance: Levine & Schwinger, fitted by Silva et al. 2009 (from memory)."""
    x = 1j * omega / SOUND * radius_m
    ratio = (1.226 * x + 0.457 * x**2) / (2.0 + 1.560 * x + 0.457 * x**2)
    return complex(ratio * DENSITY * SOUND / (np.pi * radius_m**2))


def hole(
    bore_m: float, wall_m: float, hole_m: float, openness: float, omega: float
) -> tuple[complex, complex]:
    """Return an open or closed hole's series impedance and shunt admittance.

    Lefebvre & Scavone 2012 for the lengths inside, Dalmont et al. 2002 outside, Keefe 1982 for the volume
    between a round bore and the hole's chimney (all from memory).
    """
    k, ratio = omega / SOUND, hole_m / bore_m
    mass, spring = line(np.array([hole_m]), omega)
    turning, own = complex(np.sqrt(mass[0] * spring[0])), complex(np.sqrt(mass[0] / spring[0]))
    height = wall_m + hole_m * ratio / 8.0 * (1.0 + 0.207 * ratio**3)
    duct = np.tanh(turning * height)
    outside = 1j * k * hole_m * (0.82 - 0.47 * (hole_m / (bore_m + wall_m)) ** 0.8) + 0.25 * (k * hole_m) ** 2
    end = (outside + duct) / (1.0 + outside * duct) if openness else 1.0 / duct
    powers = (0.822, -0.095, -1.566, 2.138, -1.640, 0.502)
    inside = 1j * k * hole_m * sum(c * ratio**n for n, c in enumerate(powers))
    closed, opened = (
        -0.12 - 0.17 * np.tanh(2.4 * wall_m / hole_m),
        -0.35 + 0.06 * np.tanh(2.7 * wall_m / hole_m),
    )
    series = opened if openness else closed
    bore_impedance = DENSITY * SOUND / (np.pi * bore_m**2)
    return complex(1j * k * hole_m * ratio**2 * series * bore_impedance), complex(
        1.0 / (own * (end + inside))
    )


def elements(tube: Tube) -> MeshLine:
    """Return a mesh with nodes at both ends, at the bore's turns and about every hole."""
    turns = [0.0, tube.length_mm, *(place for place, _ in tube.profile_mm)]
    turns += [place + side * HOLE_MM / 2.0 for place, _ in tube.holes_mm for side in (-1, 0, 1)]
    nodes = np.unique(np.concatenate([np.array(turns), np.arange(0.0, tube.length_mm, STEP_MM)]))
    return MeshLine(nodes[np.concatenate([[True], np.diff(nodes) > 1e-6])] / 1000.0)


def impedance(tube: Tube, openness: Floats, omega: float, mesh: MeshLine) -> complex:
    """Return what the jet meets, by finite elements, normalised by the impedance of a bore of `bore_mm`."""
    basis = Basis(mesh, ElementLineP2())
    holes = [
        (
            place / 1000.0,
            hole(radius_at(tube, place / 1000.0), tube.wall_mm / 1000.0, size / 2000.0, share, omega),
        )
        for (place, size), share in zip(tube.holes_mm, openness, strict=True)
    ]

    def stiffness(u: Any, v: Any, w: Any) -> Any:
        mass, spring = line(radius_at(tube, w.x[0]), omega)
        for place_m, (series, _) in holes:
            mass = mass + np.where(
                np.abs(w.x[0] - place_m) < HOLE_MM / 2000.0, series / HOLE_MM * 1000.0, 0.0
            )
        return u.grad[0] * v.grad[0] / mass + spring * u * v

    matrix = BilinearForm(stiffness, dtype=np.complex128).assemble(basis).tolil()
    for place_m, (_, shunt) in holes:
        node = int(np.argmin(np.abs(basis.doflocs[0] - place_m)))
        matrix[node, node] += shunt
    head, foot = (int(np.argmin(np.abs(basis.doflocs[0] - end))) for end in (0.0, tube.length_mm / 1000.0))
    matrix[foot, foot] += 1.0 / opening(radius_at(tube, tube.length_mm / 1000.0), omega)
    driven = np.zeros(len(basis.doflocs[0]), np.complex128)
    driven[head] = 1.0
    pressure = complex(solve(matrix.tocsr(), driven)[head])
    k, radius = omega / SOUND, tube.bore_mm / 2000.0
    sound_hole = 1j * k * tube.head_correction_mm / 1000.0 + 0.25 * (k * radius) ** 2
    return pressure * np.pi * radius**2 / (DENSITY * SOUND) + sound_hole


def by_elements(tube: Tube, openness: Floats, near_hz: float) -> float:
    """Return the resonance near a frequency: where the impedance is least."""
    mesh = elements(tube)
    found = minimize_scalar(
        lambda hertz: abs(impedance(tube, openness, 2.0 * np.pi * hertz, mesh)) ** 2,
        bounds=(0.98 * near_hz, 1.02 * near_hz),
        method="bounded",
        options={"xatol": 1e-5 * near_hz},
    )
    return float(found.x)


@pytest.mark.parametrize("tube", [PIPE, CONE, STEPPED], ids=["plain", "tapered", "stepped"])
def test_a_bore_without_holes_agrees_within_half_a_cent(tube: Tube) -> None:
    """0.5 cent: what the walls' expansion and pieces of 5 mm leave out."""
    for near_hz in resonances(tube, NO_HOLES, 3).frequency_hz[0]:
        assert cents_between(by_elements(tube, np.zeros(0), near_hz), near_hz) == pytest.approx(0.0, abs=0.5)


@pytest.mark.parametrize("word", ["xxxxxx", "oxxxxx", "xxxooo", "oooooo"])
@pytest.mark.parametrize("tube", [FLUTE, NARROWING], ids=["even", "narrowing"])
def test_a_bore_with_holes_agrees_within_three_cents(tube: Tube, word: str) -> None:
    """3 cents: a hole's series impedance is spread over 1 mm here and stands at its middle there."""
    fingering = Fingering(word)
    openness = openness_of([fingering])[0]
    for near_hz in resonances(tube, [fingering], 2).frequency_hz[0]:
        assert cents_between(by_elements(tube, openness, near_hz), near_hz) == pytest.approx(0.0, abs=3.0)
