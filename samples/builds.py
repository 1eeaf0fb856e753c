"""Flutes to simulate: laid out for a scale, drawn at random, and what a player plays on them.

Conventions: lengths in mm from the sound hole, hole nearest the mouth first; scales are semitones above the
all-closed note, from low to high; pressures in Pa. Random choices come from the seeds alone.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from math import pi, sqrt

import numpy as np
import numpy.typing as npt
from simulation import Curve, FluteBuild, Microphone, Simulated, blow, speaking_pressure_pa, steps

from fluteprobe.flute.fingering import Breath, Fingering, ladder
from fluteprobe.flute.tube import Tube, resonances
from fluteprobe.flute.tuning import speed_of_sound_m_per_s

Reals = npt.NDArray[np.float64]

SCALES = {
    5: ((0, 3, 5, 7, 10, 12), (0, 2, 4, 7, 9, 12), (0, 2, 5, 7, 9, 12)),
    6: ((0, 2, 4, 5, 7, 9, 11), (0, 3, 5, 7, 8, 10, 12), (0, 2, 3, 5, 7, 9, 10), (0, 2, 4, 6, 7, 9, 11)),
}

_TRIES = (1.0, 1.3, 1.7, 2.3, 3.2, 4.4)
_PAUSE_S = 0.25
_ROUNDS = 14
_LEAST_WOOD_MM = 5.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """A take to play: the fingering, the breath in its name, its number, and the registers aimed at in turn.

    `force` multiplies the breath pressure. Tongued, the tones have a short pause between them; otherwise the
    register breaks in mid-breath, while the low tone first rises in pitch. A wet flue throws
    the jet off the edge and roughens it: mostly nothing speaks.
    """

    fingering: Fingering
    breath: Breath = "normal"
    number: int = 1
    aims: tuple[int, ...] = (1,)
    force: float = 1.0
    tongued: bool = True
    wet_flue: bool = False

    @property
    def name(self) -> str:
        """The take's file name without its ending."""
        breath = "" if self.breath == "normal" else f"-{self.breath}"
        return f"{self.fingering}{breath}{'' if self.number == 1 else f'-{self.number}'}"


def lay_out(
    tube: Tube, lowest_hz: float, scale: Sequence[float], deviations_cents: Sequence[float] | None = None
) -> Tube:
    """Return the tube with its length and hole places moved until its ladder plays a scale.

    The hole sizes stay. A deviation per note of the ladder, low to high, says how far off it may be.

    Raises
    ------
    ValueError
        If the holes would run into one another or under the sound hole.
    """
    cents = 100.0 * np.array(scale) + np.array(deviations_cents or [0.0] * len(scale))
    wanted_hz = lowest_hz * 2.0 ** (cents / 1200.0)
    sound = speed_of_sound_m_per_s(tube.temperature_c)
    steps_of = ladder(len(tube.holes_mm))
    tube = _placed(tube, 500.0 * sound / wanted_hz - tube.head_correction_mm)
    for _ in range(_ROUNDS):
        played_hz = resonances(tube, steps_of, 1).frequency_hz[:, 0]
        half_wave = 500.0 * sound / wanted_hz
        tube = _placed(tube, _stations(tube) + 0.8 * half_wave * np.log(played_hz / wanted_hz))
    _require_room(tube)
    return tube


def random_build(seed: int) -> FluteBuild:
    """Return a plausible flute: bore 14 to 28 mm, five or six holes, all closed about 180 to 700 Hz."""
    random = np.random.default_rng([seed, 1])
    for _ in range(200):
        try:
            return _drawn(random)
        except ValueError:
            continue
    raise ValueError(f"no flute could be laid out from seed {seed}")


def head_correction_mm(
    bore_mm: float, window_mm: float, window_width_mm: float, edge_mm: float = 2.5
) -> float:
    """Return the length of bore as heavy as the air in a sound hole and at its two ends."""
    window = window_mm * window_width_mm
    length = edge_mm + 1.2 * sqrt(window / pi)
    return float(pi / 4.0 * bore_mm**2 / window * length)


def usual_takes(build: FluteBuild, seed: int) -> tuple[Plan, ...]:
    """Return what a player records of a flute: the ladder, overblown, vented, half-holed and forked."""
    random = np.random.default_rng([seed, 2])
    holes = len(build.tube.holes_mm)
    ladder_up = ladder(holes)
    plans = [Plan(fingering=each, force=_force(random)) for each in ladder_up]
    plans += [Plan(fingering=each, breath="over", aims=(2,), force=_force(random)) for each in ladder_up[:-1]]
    plans += [
        Plan(fingering=ladder_up[k], breath="over", number=2, aims=(1, 2), force=_force(random))
        for k in (0, 1)
    ]
    plans += [
        Plan(fingering=ladder_up[k], breath="over", number=3, aims=(3,), force=_force(random))
        for k in (0, 1, 2)
    ]
    for word in ("v" + "x" * (holes - 1), "h" + "x" * (holes - 1), "o" + "x" * (holes - 1)):
        plans += [Plan(fingering=Fingering(word), breath="over", aims=(2,), force=_force(random))]
    plans += [Plan(fingering=Fingering(word), force=_force(random)) for word in _forked(holes)]
    return tuple(plans)


def spoken_takes(build: FluteBuild, seed: int) -> Iterator[tuple[Plan, Simulated]]:
    """Yield the usual takes of a flute, played, with what truly sounded."""
    for number, plan in enumerate(usual_takes(build, seed)):
        yield plan, play(build, plan, 1000 * seed + number)


def play(build: FluteBuild, plan: Plan, seed: int, microphone: Microphone | None = None) -> Simulated:
    """Return a planned take, played with a finger's usual luck on half-holed and vented holes."""
    random = np.random.default_rng([seed, 3])
    luck = {"x": 0.0, "o": 1.0, "h": random.uniform(0.3, 0.6), "v": random.uniform(0.04, 0.12)}
    openness = [luck[state] for state in plan.fingering.states]
    curve = breath_curve(build, openness, plan)
    if plan.wet_flue:
        build = replace(build, aim=build.aim + 3.0, hiss=3.0 * build.hiss)
    return blow(build, openness, curve, seed=seed, microphone=microphone)


def breath_curve(build: FluteBuild, openness: Sequence[float], plan: Plan, blow_s: float = 2.2) -> Curve:
    """Return the breath curve of a plan: the registers aimed at, in equal shares of the time."""
    share = blow_s / len(plan.aims) * (1.0 if len(plan.aims) == 1 else 1.2)
    pressures: list[float] = []
    blows: list[tuple[float, float]] = []
    for aim in plan.aims:
        pressures.append(sought_pressure_pa(build, openness, aim, () if plan.tongued else pressures))
        blows += [(plan.force * pressures[-1], share), *([(0.0, _PAUSE_S)] if plan.tongued else [])]
    return steps(blows[:-1] if plan.tongued else blows)


def sought_pressure_pa(
    build: FluteBuild, openness: Sequence[float], register: int, before_pa: Sequence[float] = ()
) -> float:
    """Return a pressure at which that register speaks, found by trying, as a player does.

    The first register needs no trying. A higher one must speak twice, after the pressures that come before
    it; where nothing tried makes it speak, the pressure at which it should is returned.
    """
    expected = speaking_pressure_pa(build, openness, register)
    for factor in _TRIES if register > 1 else ():
        curve = steps([(pressure, 0.6) for pressure in (*before_pa, factor * expected)])
        trials = (blow(build, openness, curve, seed=seed).truth for seed in (0, 1))
        if all(tones and tones[-1].register == register for tones in trials):
            return factor * expected
    return expected


# --- helpers -----------------------------------------------------------------------------------------


def _stations(tube: Tube) -> Reals:
    """Return the foot's and the holes' places, foot first."""
    return np.array([tube.length_mm, *(place for place, _ in reversed(tube.holes_mm))])


def _placed(tube: Tube, stations_mm: Reals) -> Tube:
    """Return the tube with its foot and holes there (foot first), kept in order."""
    down = np.sort(stations_mm)[::-1] - 0.01 * np.arange(len(stations_mm))
    sizes = [size for _, size in tube.holes_mm]
    holes = tuple((float(place), size) for place, size in zip(down[:0:-1], sizes, strict=True))
    return replace(tube, length_mm=float(down[0]), holes_mm=holes)


def _require_room(tube: Tube) -> None:
    edges = [(0.0, 30.0), *tube.holes_mm, (tube.length_mm, 0.0)]
    for (above, size), (below, next_size) in pairwise(edges):
        if below - above < 0.5 * (size + next_size) + _LEAST_WOOD_MM:
            raise ValueError(f"no room between {above:.0f} and {below:.0f} mm")


def _drawn(random: np.random.Generator) -> FluteBuild:
    holes = int(random.integers(5, 7))
    lowest_hz = 180.0 * (700.0 / 180.0) ** random.uniform()
    bore = float(np.clip(19.0 * sqrt(400.0 / lowest_hz) * random.uniform(0.85, 1.2), 14.0, 28.0))
    window = bore * random.uniform(0.21, 0.27)
    width = bore * random.uniform(0.5, 0.65)
    tube = Tube(
        bore_mm=bore,
        length_mm=100.0 * (holes + 1),
        wall_mm=random.uniform(3.0, 5.5),
        holes_mm=tuple((100.0 * (k + 1), bore * random.uniform(0.34, 0.52)) for k in range(holes)),
        head_correction_mm=head_correction_mm(bore, window, width),
        temperature_c=random.uniform(18.0, 26.0),
    )
    scale = SCALES[holes][random.integers(len(SCALES[holes]))]
    tube = lay_out(tube, lowest_hz, scale, list(random.normal(0.0, 12.0, holes + 1)))
    return FluteBuild(
        tube=tube,
        window_mm=window,
        window_width_mm=width,
        flue_mm=window * random.uniform(0.19, 0.25),
        aim=random.choice([-1.0, 1.0]) * random.uniform(0.05, 0.35),
        hiss=0.006 * 10.0 ** random.uniform(-0.3, 0.4),
    )


def _force(random: np.random.Generator) -> float:
    return float(np.exp(random.normal(0.0, 0.15)))


def _forked(holes: int) -> Iterator[str]:
    """Return words with closed holes under open ones."""
    for open_from, closed_from in ((1, 2), (2, 3), (1, 3)):
        word = "x" * open_from + "o" * (closed_from - open_from) + "x" * (holes - closed_from)
        yield word
