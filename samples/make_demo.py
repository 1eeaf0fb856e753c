"""Makes the demo flutes' session folders anew: flute.toml, takes/ and truth.json.

Run it from anywhere: `python samples/make_demo.py [FOLDER]`. The same files come out each time. The flutes,
their names and makers are invented; the recordings are simulated (see simulation.py).
"""

import json
import sys
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import soundfile
from builds import Plan, head_correction_mm, lay_out, play
from simulation import FluteBuild, Simulated

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.tube import Tube
from fluteprobe.flute.tuning import Note
from fluteprobe.session import FluteFacts, Sitting, facts_text

HERE = Path(__file__).parent
_WINDOW, _WINDOW_WIDTH = 0.235, 0.58  # of the bore
_LOUDEST = 0.7  # sample value of the loudest take of a flute


@dataclass(frozen=True, slots=True, kw_only=True)
class Demo:
    """A demo flute: folder, facts, conditions, what it is built like, and its takes."""

    folder: str
    facts: FluteFacts
    sitting: Sitting
    build: FluteBuild
    plans: tuple[Plan, ...]
    seed: int


def heron() -> Demo:
    """Return the six-hole mid-range flute."""
    tube = _tube(bore_mm=19.0, wall_mm=4.0, sizes_mm=(8.0, 8.0, 5.0, 8.5, 8.5, 9.0), temperature_c=22.0)
    off_cents = (8.0, 12.0, -6.0, 8.0, -4.0, 16.0, 19.0)
    tube = lay_out(tube, Note(67).frequency_hz(), (0, 3, 5, 7, 8, 10, 12), off_cents)
    build = _voiced(tube, aim=0.18)
    plans = (
        *(Plan(fingering=each) for each in ladder(6)),
        _plan("xxxxxx", number=2, force=1.12),
        _plan("xxxxxx", "over", aims=(1, 2)),
        _plan("xxvxxx", "over", aims=(3,)),
        _plan("xxxxxo", "over", aims=(2,)),
        _plan("xxxxoo", "over", aims=(2,)),
        _plan("oxxxxx", "over", aims=(2,)),
        _plan("vxxxxx", aims=(2,)),
        _plan("hxxxxx", "over", aims=(2,)),
        _plan("xoxxxx"),
        _plan("xxxoxx"),
        _plan("oxxoxo", wet_flue=True),
    )
    facts = _facts(build, name="Heron", maker="Lintel & Daughter", serial="31", key="G minor", wood="cherry")
    sitting = Sitting(
        air_temperature_c=22.0, reference_temperature_c=20.0, date="2026-02-14", place="a carpeted room"
    )
    return Demo(folder="heron", facts=facts, sitting=sitting, build=build, plans=plans, seed=31)


def bittern() -> Demo:
    """Return the five-hole low flute."""
    tube = _tube(bore_mm=25.0, wall_mm=4.5, sizes_mm=(10.0, 10.5, 10.0, 11.0, 11.5), temperature_c=19.0)
    off_cents = (4.0, 9.0, 14.0, 5.0, -8.0, 21.0)
    tube = lay_out(tube, Note(57).frequency_hz(), (0, 3, 5, 7, 10, 12), off_cents)
    build = _voiced(tube, aim=-0.2)
    plans = (
        *(Plan(fingering=each) for each in ladder(5)),
        _plan("xxxxx", number=2, force=0.9),
        _plan("xxxxx", "over", aims=(1, 2)),
        _plan("xxxxo", "over", aims=(2,)),
        _plan("xxxoo", "over", aims=(2,)),
        _plan("xxxxx", "over", number=2, aims=(3,)),
        _plan("oxxxx", aims=(2,)),
        _plan("vxxxo", aims=(2,)),
        _plan("hxxxx", "over", aims=(2,)),
        _plan("xxoxx"),
        _plan("oxoxo", wet_flue=True),
    )
    facts = _facts(build, name="Bittern", maker="Tarnside Flutes", serial="7", key="A minor", wood="walnut")
    sitting = Sitting(
        air_temperature_c=19.0, reference_temperature_c=20.0, date="2026-02-15", place="a workshop"
    )
    return Demo(folder="bittern", facts=facts, sitting=sitting, build=build, plans=plans, seed=7)


def make(demo: Demo, where: Path) -> None:
    """Write a demo flute's session folder under `where`."""
    folder = where / demo.folder
    (folder / "takes").mkdir(parents=True, exist_ok=True)
    (folder / "flute.toml").write_text(facts_text(demo.facts, demo.sitting), encoding="utf-8")
    takes = {plan.name: play(demo.build, plan, 1000 * demo.seed + i) for i, plan in enumerate(demo.plans)}
    gain = _LOUDEST / max(float(np.abs(take.samples).max()) for take in takes.values())
    for name, take in takes.items():
        samples = np.round(take.samples * gain * 32767.0).astype(np.int16)
        soundfile.write(folder / "takes" / f"{name}.flac", samples, take.rate_hz, subtype="PCM_16")
    truth = {f"takes/{name}.flac": _tones(take) for name, take in takes.items()}
    (folder / "truth.json").write_text(json.dumps(truth, indent=1) + "\n", encoding="utf-8")


def main() -> None:
    """Make both."""
    where = Path(sys.argv[1]) if len(sys.argv) > 1 else HERE
    for demo in (heron(), bittern()):
        make(demo, where)
        print(f"{demo.facts.name}: {len(demo.plans)} takes in {where / demo.folder}")


def _plan(word: str, breath: str = "normal", **wishes: object) -> Plan:
    return replace(Plan(fingering=Fingering(word)), breath=breath, **wishes)  # type: ignore[arg-type]


def _tube(*, bore_mm: float, wall_mm: float, sizes_mm: tuple[float, ...], temperature_c: float) -> Tube:
    """Return a tube with its holes anywhere, for `lay_out` to place."""
    return Tube(
        bore_mm=bore_mm,
        length_mm=100.0 * (len(sizes_mm) + 1),
        wall_mm=wall_mm,
        holes_mm=tuple((100.0 * (k + 1), size) for k, size in enumerate(sizes_mm)),
        head_correction_mm=head_correction_mm(bore_mm, _WINDOW * bore_mm, _WINDOW_WIDTH * bore_mm),
        temperature_c=temperature_c,
    )


def _voiced(tube: Tube, aim: float) -> FluteBuild:
    window, width = _WINDOW * tube.bore_mm, _WINDOW_WIDTH * tube.bore_mm
    return FluteBuild(
        tube=tube, window_mm=window, window_width_mm=width, flue_mm=0.22 * window, aim=aim, hiss=0.004
    )


def _facts(build: FluteBuild, *, name: str, **words: Any) -> FluteFacts:
    tube = build.tube
    holes = tuple((round(place, 1), size) for place, size in tube.holes_mm)
    return FluteFacts(
        name=name,
        holes=len(holes),
        bore_mm=tube.bore_mm,
        wall_mm=tube.wall_mm,
        holes_mm=holes,
        length_mm=round(tube.length_mm, 1),
        tolerance_mm=0.3,
        **words,
    )


def _tones(take: Simulated) -> list[dict[str, float]]:
    return [
        {key: round(value, 4) for key, value in asdict(tone).items() if key != "purity"}
        for tone in take.truth
    ]


if __name__ == "__main__":
    main()
