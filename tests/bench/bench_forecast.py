"""Forecasts of upper notes: how far off, how surely, on simulated flutes that tuned nothing.

Conventions: the flutes' seeds start at 6000; the model's numbers (flute/joint.py, flute/speak.py) were
counted on seeds 300 to 359. Played are the usual takes and the same second register on more fingerings. A
note counts if it truly sounds in the second register, and is compared with its true mean frequency. "In
±2u" is the share within two standard uncertainties. Given are the first register alone (normal breath), and
also three second-register takes, chosen by the seed; with a ruler flute.toml gives bore, wall and holes.
Simulated flutes are no real flutes: the tube model that is fitted is the one that was blown.
"""

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cache
from itertools import pairwise
from pathlib import Path
from tempfile import TemporaryDirectory
from time import process_time

import numpy as np
import soundfile
from bench.tables import cents_text, share_text, table
from builds import Plan, play, random_build, usual_takes
from simulation import SimulatedTone

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.tuning import cents_between
from fluteprobe.forecast import Forecast, forecast
from fluteprobe.session import FluteFacts, create_session
from fluteprobe.session.facts import Sitting
from fluteprobe.survey import Reading, Survey, measure, summed_up

FIRST_SEED = 6000

_CLEAN = 0.99
_SAME_CENTS = 10.0
_GIVEN = 3
_BINS = (0.0, 0.1, 0.3, 0.5, 0.7, 0.9, 1.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Played:
    """A simulated flute: its survey, its dimensions, its true second register, and what was sought."""

    seed: int
    survey: Survey
    ruler: FluteFacts
    true_hz: Mapping[Fingering, float]
    spoke: Mapping[Fingering, bool]


@dataclass(frozen=True, slots=True, kw_only=True)
class Tally:
    """Deviations and uncertainties in cents, how many notes sounded, and what time it took."""

    off: Sequence[float]
    uncertainty: Sequence[float]
    sounded: int
    refused: int
    seconds: Sequence[float]


def report(*, full: bool, say: Callable[[str], None]) -> None:
    """Print every table on forecasts."""
    seeds = range(FIRST_SEED, FIRST_SEED + (16 if full else 2))
    say(f"### Second-register pitch foretold, {len(seeds)} flutes\n\n" + pitch_table(seeds))
    say("### Likely to speak, before anything was overblown\n\n" + chance_table(seeds))
    say("### Takes under each other's names, wrong dimensions\n\n" + unfit_table(seeds))


def pitch_table(seeds: Iterable[int]) -> str:
    """Return how far off forecasts are, by what was given."""
    rows = []
    for words, given, ruler in (
        ("first register", 0, False),
        ("first register, a ruler", 0, True),
        (f"and {_GIVEN} upper takes", _GIVEN, False),
    ):
        told = tally(seeds, given=given, ruler=ruler)
        off, uncertainty = np.array(told.off), np.array(told.uncertainty)
        rows.append(
            [
                words,
                share_text(len(off), told.sounded),
                cents_text(float(np.median(np.abs(off)))),
                cents_text(float(np.sqrt(np.mean(off**2)))),
                f"{np.mean(off):+.1f}",
                share_text(int(np.sum(np.abs(off) < 2.0 * uncertainty)), len(off)),
                cents_text(float(np.mean(uncertainty))),
                str(told.refused),
                f"{np.median(told.seconds):.2f}",
            ]
        )
    titles = ["given", "foretold", "median off", "rms", "bias", "in ±2u", "mean u", "refused", "processor s"]
    return table(titles, rows)


def tally(seeds: Iterable[int], *, given: int, ruler: bool) -> Tally:
    """Foretell what sounded in the second register from what is given."""
    off: list[float] = []
    uncertainty: list[float] = []
    seconds: list[float] = []
    sounded = refused = 0
    for seed in seeds:
        flute = played(seed)
        chosen = _chosen(flute, given)
        survey = without_upper(flute, chosen)
        if ruler:
            survey = replace(survey, flute=flute.ruler)
        start = process_time()
        told = forecast(survey)
        seconds.append(process_time() - start)
        refused += told.reason is not None
        wanted = {f: hz for f, hz in flute.true_hz.items() if f not in chosen}
        sounded += len(wanted)
        for each in told.predictions:
            if each.register == 2 and each.fingering in wanted:
                off.append(cents_between(wanted[each.fingering], each.frequency_hz))
                uncertainty.append(each.uncertainty_cents)
    return Tally(off=off, uncertainty=uncertainty, sounded=sounded, refused=refused, seconds=seconds)


def chance_table(seeds: Iterable[int]) -> str:
    """Return how often those spoke that were given a chance, by the chance."""
    pairs = []
    for seed in seeds:
        flute = played(seed)
        told = chance_of(forecast(without_upper(flute, ())))
        pairs += [(told[fingering], spoke) for fingering, spoke in flute.spoke.items() if fingering in told]
    rows = []
    for low, high in pairwise(_BINS):
        inside = [(chance, spoke) for chance, spoke in pairs if low <= chance < high]
        mean = sum(chance for chance, _ in inside) / max(len(inside), 1)
        spoken = sum(spoke for _, spoke in inside)
        rows.append(
            [
                f"{low:.1f} to {high:.1f}",
                str(len(inside)),
                f"{100.0 * mean:.0f} %",
                share_text(spoken, len(inside)),
            ]
        )
    return table(["told", "fingerings", "mean told", "spoke"], rows)


def chance_of(told: Forecast) -> dict[Fingering, float]:
    """Return the chance to speak in the second register, by fingering."""
    return {each.fingering: each.likely_to_speak for each in told.predictions if each.register == 2}


def unfit_table(seeds: Iterable[int]) -> str:
    """Return how many flutes are refused, as they are and with something wrong."""
    spoilt: Mapping[str, Callable[[Played], Survey]] = {
        "as they are": lambda flute: flute.survey,
        "two takes' names changed": swapped,
        "a ruler's bore 1.5 times": lambda flute: _ruled(flute, bore=1.5),
        "a ruler's places 1.3 times": lambda flute: _ruled(flute, place=1.3),
    }
    rows = []
    for words, spoil in spoilt.items():
        told = [(flute, forecast(spoil(flute))) for flute in map(played, seeds)]
        refused = sum(result.reason is not None for _, result in told)
        rows.append([words, str(len(told)), str(refused)])
    return table(["flutes", "", "refused"], rows)


def swapped(flute: Played) -> Survey:
    """Return a survey in which two first-register takes at least 120 cents apart bear each other's names."""
    low = [r for r in flute.survey.readings if r.call.register == 1 and r.breath == "normal"]
    chance = np.random.default_rng(flute.seed)
    while True:
        one, other = (low[k] for k in chance.choice(len(low), 2, replace=False))
        if abs(cents_between(one.tone.frequency_hz or 1.0, other.tone.frequency_hz or 1.0)) > 120.0:
            break
    names = {id(one): other, id(other): one}
    readings = tuple(
        replace(r, fingering=names[id(r)].fingering, take=names[id(r)].take) if id(r) in names else r
        for r in flute.survey.readings
    )
    return replace(flute.survey, readings=readings)


def _ruled(flute: Played, *, bore: float = 1.0, place: float = 1.0) -> Survey:
    ruler = flute.ruler
    assert ruler.bore_mm is not None
    assert ruler.holes_mm is not None
    holes = tuple((place * at, size) for at, size in ruler.holes_mm)
    facts = replace(ruler, bore_mm=bore * ruler.bore_mm, holes_mm=holes)
    return replace(flute.survey, flute=facts)


# --- flutes ------------------------------------------------------------------------------------------


@cache
def played(seed: int) -> Played:
    """Simulate, record and measure a flute."""
    build = random_build(seed)
    tube = build.tube
    facts = FluteFacts(name=f"Flute {seed}", holes=len(tube.holes_mm))
    truth: dict[str, tuple[SimulatedTone, ...]] = {}
    plans = {plan.name: plan for plan in (*usual_takes(build, seed), *_more_takes(len(tube.holes_mm)))}
    with TemporaryDirectory() as where:
        folder = Path(where) / "flute"
        create_session(folder, facts, Sitting(air_temperature_c=round(tube.temperature_c, 1)))
        for number, plan in enumerate(plans.values()):
            made = play(build, plan, 1000 * seed + number)
            truth[f"takes/{plan.name}.flac"] = made.truth
            samples = 0.5 * made.samples / max(float(np.abs(made.samples).max()), 1e-9)
            soundfile.write(folder / "takes" / f"{plan.name}.flac", samples, made.rate_hz, subtype="PCM_16")
        survey = measure(folder)
    ruler = replace(facts, bore_mm=tube.bore_mm, wall_mm=tube.wall_mm, holes_mm=tube.holes_mm)
    sought = [plan for plan in plans.values() if plan.breath == "over" and plan.aims[-1] == 2]
    spoke = {plan.fingering: False for plan in sought}
    for plan in sought:
        spoke[plan.fingering] |= any(tone.register == 2 for tone in truth[f"takes/{plan.name}.flac"])
    return Played(seed=seed, survey=survey, ruler=ruler, true_hz=_true_hz(survey, truth), spoke=spoke)


def _more_takes(holes: int) -> list[Plan]:
    """Return more fingerings in the second register: the top hole open or vented, and crossed ones."""
    words = ["o" + "x" * (holes - 1 - k) + "o" * k for k in range(1, holes - 1)]
    words += ["v" + "x" * (holes - 1 - k) + "o" * k for k in (1, 2)]
    crossed = [
        "x" * above + "o" + "x" * closed + "o" * (holes - 1 - above - closed)
        for above in range(holes - 2, -1, -1)
        for closed in (1, 2)
        if above + 1 + closed <= holes
    ]
    upper = [Plan(fingering=Fingering(word), breath="over", aims=(2,)) for word in [*words, *crossed]]
    return [*upper, *(Plan(fingering=Fingering(word)) for word in crossed)]


def _true_hz(survey: Survey, truth: Mapping[str, Sequence[SimulatedTone]]) -> dict[Fingering, float]:
    """Return the true second register of what was heard as such."""
    found: dict[Fingering, list[float]] = {}
    for reading in survey.readings:
        heard_hz = reading.tone.frequency_hz
        if reading.call.register != 2 or reading.fingering is None or heard_hz is None:
            continue
        for tone in truth[reading.take]:
            near = abs(cents_between(heard_hz, tone.frequency_hz)) < _SAME_CENTS
            if tone.register == 2 and tone.purity > _CLEAN and near:
                found.setdefault(reading.fingering, []).append(tone.frequency_hz)
    return {fingering: float(np.mean(all_hz)) for fingering, all_hz in found.items()}


def _chosen(flute: Played, count: int) -> tuple[Fingering, ...]:
    everything = sorted(flute.true_hz, key=str)
    picked = np.random.default_rng(flute.seed).permutation(len(everything))[:count]
    return tuple(everything[k] for k in picked)


def without_upper(flute: Played, chosen: Sequence[Fingering]) -> Survey:
    """Return the survey with the takes of normal breath, and all of the chosen fingerings."""
    kept: tuple[Reading, ...] = tuple(
        reading
        for reading in flute.survey.readings
        if reading.breath == "normal" or reading.fingering in chosen
    )
    return replace(flute.survey, readings=kept, entries=summed_up(kept, [], flute.survey.sitting))
