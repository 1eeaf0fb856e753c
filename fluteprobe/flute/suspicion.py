"""Takes whose name is doubted: their pitch fits another fingering of this flute far better than their own.

Conventions: pitches in cents above 1 Hz (1200 log2 of the frequency); a labelling gives every take a
fingering; log-likelihoods are natural, of pitches as densities per cent.

How it works: every tone's pitch has a density under its take's fingering, from the other takes of that
fingering, the ladder of the whole flute and, where dimensions are given, the fitted tube, each with the
spread that breath and model leave. Which register sounds is told by the breath resonances, which know no
name. A tone that nothing explains still has the density of a stray one, a neighbour's flute. Where a take is
badly explained, every other fingering is tried for it, alone and in exchange with another take; the
labelling of the whole session must gain by far more than a mistyped name is rare.

Nothing is doubted that its own name can explain: a cross-fingering anywhere that the ladder lets it be, an
overblown take in any register, a half-hole, a flute of an odd scale.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from itertools import islice
from math import exp, hypot, log, log2

from fluteprobe.flute.bumps import Bump, bump_clue
from fluteprobe.flute.evidence import PRIOR, REGISTERS, Register, RegisterCall
from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.fingering import ladder as rungs
from fluteprobe.flute.ladder import FORKED_ABOVE, LADDER_ABOVE, Ladder, known_ladder, smeared
from fluteprobe.flute.model import Dimensions, Model, fitted_model
from fluteprobe.flute.register import Sounding, register_alone

_SAME_CENTS = 40.0  # two takes of a fingering in one register, blown as it came
_STRAY_SHARE = 0.003
_STRAY_WIDTH_CENTS = 4800.0
_BY_TAKES, _BY_LADDER = 0.7, 0.3
# What breath resonances call the third register may be a higher one, and so, rarely, may any tone.
_HIGHER_OF_THIRD, _HIGHER_SHARE = 0.3, 0.01
_HIGHER_LADDER, _HIGHER_FORKED = (2550.0, 280.0), (2250.0, 380.0)
_MODEL_CENTS: Mapping[Register, float] = {1: 35.0, 2: 55.0, 3: 80.0}
_LOOSE_CENTS = 110.0  # more for half-holed and vented fingerings, whose opening is not known
_BY_MODEL = 0.6

_BADLY = -9.0  # a log density this low is a stray's, not that of a tone that belongs
_FITS = -8.5
# What the session's log-likelihood must gain; changes less than _ALIKE apart are both possible.
# Right names, 19 simulated flutes with 427 takes, gained 4.7 at most by any change.
_GAIN = 6.5
_ALIKE = 2.0
_MOST_NAMES = 2
_MOST_BAD_SHARE = 0.5
# Where a fingering has many takes, some tell as much as all of them.
_MOST_PARTNERS, _MOST_EXCHANGES = 6, 4
_MOST_TRIED = 6  # of the badly explained takes, the worst, in each round
_ROUNDS = 4

_Takes = Mapping[str, Sequence[Sounding]]
_Labels = Mapping[str, Fingering]


@dataclass(frozen=True, slots=True, kw_only=True)
class _Change:
    """A labelling that explains the session better: what it gains, and which takes it renames.

    `doubted` are those of the renamed takes that every other labelling as good renames too, each with the
    fingerings that these give it.
    """

    gain: float
    labels: _Labels
    renamed: tuple[str, ...]
    doubted: Mapping[str, Sequence[Fingering]] = field(default_factory=dict)


def doubted_names(
    holes: int, soundings: Sequence[Sounding], dimensions: Dimensions | None = None
) -> dict[str, str]:
    """Return a caution for every take whose name is doubted, by take.

    `soundings` are clean tones; edge tones and multiphonics say nothing of a name.
    """
    takes: dict[str, list[Sounding]] = {}
    for sounding in soundings:
        takes.setdefault(sounding.take, []).append(sounding)
    named = {take: tones[0].fingering for take, tones in takes.items()}
    session = _Session(holes, takes, None)
    if dimensions is not None and session.bad(named):
        session = _Session(holes, takes, _model(holes, soundings, dimensions))
    labels: _Labels = named
    cautions: dict[str, str] = {}
    for _ in range(_ROUNDS):
        change = _best_change(session, labels)
        if change is None:
            break
        cautions |= _told(session, labels, change)
        labels = change.labels
    return cautions


def called_without_name(call: RegisterCall, bumps: Sequence[Bump]) -> RegisterCall:
    """Return the call on a tone whose name is doubted: undecided, unless the breath alone says the same."""
    alone = register_alone(bumps)
    if call.register is None or alone.register == call.register:
        return call
    return replace(call, register=None, probability=alone.probability)


def _model(holes: int, soundings: Sequence[Sounding], dimensions: Dimensions | None) -> Model | None:
    """Return the tube fitted to the ladder as it is named: names that are wrong are not in its rising run."""
    if dimensions is None:
        return None
    rungs = known_ladder(holes, _lowest((s.fingering, s.pitch_cents) for s in soundings)).rungs
    return fitted_model(dimensions, rungs, {sounding.fingering for sounding in soundings})


def _lowest(heard: Iterable[tuple[Fingering, float]]) -> dict[Fingering, float]:
    lowest: dict[Fingering, float] = {}
    for fingering, pitch_cents in heard:
        lowest[fingering] = min(lowest.get(fingering, 1e9), pitch_cents)
    return lowest


# --- the likelihood of a labelling -------------------------------------------------------------------


class _Session:
    """The takes of a flute, and what their tones say of register whatever their names are."""

    def __init__(self, holes: int, takes: _Takes, model: Model | None) -> None:
        self.holes = holes
        self.takes = takes
        self.model = model
        self._registers = {id(tone): _register_shares(tone) for tones in takes.values() for tone in tones}
        self._known: dict[tuple[object, ...], float] = {}

    def ladder(self, labels: _Labels) -> Ladder:
        """Return the ladder that a labelling makes."""
        heard = ((labels[take], tone.pitch_cents) for take, tones in self.takes.items() for tone in tones)
        return known_ladder(self.holes, _lowest(heard))

    def likelihoods(self, labels: _Labels) -> dict[str, float]:
        """Return each take's log-likelihood given the others, that of its worst explained tone."""
        ladder, groups = self.ladder(labels), _groups(labels)
        return {take: self.likelihood(take, its, groups[its], ladder) for take, its in labels.items()}

    def relabelled(
        self, labels: _Labels, before: _Labels, ladder: Ladder, known: Mapping[str, float]
    ) -> dict[str, float]:
        """Return the same where it is `known` of the labels and ladder before: only what changes is asked."""
        if self.ladder(labels) != ladder:
            return self.likelihoods(labels)
        changed = {take for take in labels if labels[take] != before[take]}
        touched = {fingering for take in changed for fingering in (labels[take], before[take])}
        groups = _groups(labels)
        anew = {
            take: self.likelihood(take, fingering, groups[fingering], ladder)
            for fingering in touched
            for take in groups.get(fingering, ())
        }
        return {**known, **anew}

    def bad(self, labels: _Labels) -> list[str]:
        """Return the takes that a labelling explains worst; none where it explains most of them badly."""
        value = self.likelihoods(labels)
        bad = sorted((take for take in value if value[take] < _BADLY), key=lambda take: value[take])
        return bad[:_MOST_TRIED] if len(bad) <= _MOST_BAD_SHARE * len(labels) else []

    def likelihood(self, take: str, fingering: Fingering, group: Sequence[str], ladder: Ladder) -> float:
        """Return a take's log-likelihood under a fingering, given the takes of that fingering.

        What is asked twice is worked out once.
        """
        partners = tuple(islice((other for other in group if other != take), _MOST_PARTNERS))
        key = (take, fingering, partners, ladder.reach(fingering))
        if key not in self._known:
            others = [tone for other in partners for tone in self.takes[other]]
            densities = (self._log_density(tone, fingering, others, ladder) for tone in self.takes[take])
            self._known[key] = min(densities)
        return self._known[key]

    def _log_density(
        self, tone: Sounding, fingering: Fingering, others: Sequence[Sounding], ladder: Ladder
    ) -> float:
        shares = self._registers[id(tone)]
        by_ladder = self._by_flute(tone.pitch_cents, fingering, ladder)
        higher = max(_HIGHER_OF_THIRD * shares[3], _HIGHER_SHARE)
        known = sum(shares[register] * by_ladder[register] for register in REGISTERS)
        known = (1.0 - higher) * known + higher * by_ladder[4]
        if others:
            density = sum(self._beside(tone, other, fingering, ladder) for other in others) / len(others)
            known = _BY_TAKES * density + _BY_LADDER * known
        return log((1.0 - _STRAY_SHARE) * known + _STRAY_SHARE / _STRAY_WIDTH_CENTS)

    def _by_flute(self, pitch_cents: float, fingering: Fingering, ladder: Ladder) -> dict[int, float]:
        """Return the density of a pitch in registers 1 to 3, and above them (4), by ladder and tube."""
        above = LADDER_ABOVE if fingering.is_ladder else FORKED_ABOVE
        higher = _HIGHER_LADDER if fingering.is_ladder else _HIGHER_FORKED
        reach = ladder.reach(fingering)
        if reach is None:
            return dict.fromkeys((*REGISTERS, 4), 1.0 / _STRAY_WIDTH_CENTS)
        density = {
            register: smeared(pitch_cents - middle, *reach, spread)
            for register, (middle, spread) in (*above.items(), (4, higher))
        }
        if self.model is not None and fingering in self.model.resonances_hz:
            for register, own in _by_model(self.model, fingering, pitch_cents).items():
                density[register] = _BY_MODEL * own + (1.0 - _BY_MODEL) * density[register]
        return density

    def _beside(self, tone: Sounding, other: Sounding, fingering: Fingering, ladder: Ladder) -> float:
        """Return the density of a tone's pitch given another take's tone of its fingering."""
        above = LADDER_ABOVE if fingering.is_ladder else FORKED_ABOVE
        flute = self._by_flute(other.pitch_cents, fingering, ladder)
        weights = {r: self._registers[id(other)][r] * (flute[r] + 1e-7) for r in REGISTERS}
        total = sum(weights.values())
        interval = tone.pitch_cents - other.pitch_cents
        density = 0.0
        for mine in REGISTERS:
            for its in REGISTERS:
                middle = above[mine][0] - above[its][0]
                spread = _SAME_CENTS if mine == its else hypot(above[mine][1], above[its][1])
                share = self._registers[id(tone)][mine] * weights[its] / total
                density += share * _normal(interval - middle, spread)
        return density


def _register_shares(tone: Sounding) -> dict[int, float]:
    """Return the probability of each register by the breath resonances alone."""
    likelihood = bump_clue(tone.bumps).likelihood
    weights = {register: PRIOR[register] * likelihood[register] for register in REGISTERS}
    total = sum(weights.values())
    return {register: weight / total for register, weight in weights.items()}


def _by_model(model: Model, fingering: Fingering, pitch_cents: float) -> dict[int, float]:
    loose = _LOOSE_CENTS if set(fingering.states) & {"h", "v"} else 0.0
    density = {}
    for register, frequency_hz in zip(REGISTERS, model.resonances_hz[fingering], strict=True):
        spread = hypot(_MODEL_CENTS[register], model.misfit_cents, loose)
        if frequency_hz > 0.0:
            density[int(register)] = _normal(pitch_cents - 1200.0 * log2(frequency_hz), spread)
    return density


def _normal(x: float, spread: float) -> float:
    return exp(-0.5 * (x / spread) ** 2) / (spread * 2.506628)


def _groups(labels: _Labels) -> dict[Fingering, list[str]]:
    """Return the takes of every fingering."""
    groups: dict[Fingering, list[str]] = {}
    for take, fingering in labels.items():
        groups.setdefault(fingering, []).append(take)
    return groups


# --- other labellings --------------------------------------------------------------------------------


def _best_change(session: _Session, labels: _Labels) -> _Change | None:
    """Return the change of names that explains the session best, if it gains enough."""
    bad = session.bad(labels)
    if not bad:
        return None
    ladder, known = session.ladder(labels), session.likelihoods(labels)
    before = sum(known.values())
    changes = []
    for renamed in _possible(session, labels, bad, known):
        value = session.relabelled(renamed, labels, ladder, known)
        changed = tuple(take for take in renamed if renamed[take] != labels[take])
        gain = sum(value.values()) - before
        if gain > _GAIN and min(value[take] for take in changed) > _FITS:
            changes.append(_Change(gain=gain, labels=renamed, renamed=changed))
    return _with_alternatives(changes) if changes else None


def _with_alternatives(changes: Sequence[_Change]) -> _Change:
    """Return the best change, doubting only what all changes that are nearly as good agree to doubt."""
    best = max(changes, key=lambda change: change.gain)
    alike = [change for change in changes if change.gain > best.gain - _ALIKE]
    shared = [take for take in best.renamed if all(take in change.renamed for change in alike)]
    doubted = {
        take: tuple(dict.fromkeys([best.labels[take], *(change.labels[take] for change in alike)]))
        for take in shared or best.renamed
    }
    return replace(best, doubted=doubted)


def _possible(
    session: _Session, labels: _Labels, bad: Sequence[str], known: Mapping[str, float]
) -> list[_Labels]:
    """Return the labellings worth trying: a bad take under another name, or exchanged with another take."""
    ladder, groups = session.ladder(labels), _groups(labels)
    tried: list[_Labels] = []
    for take in bad:
        for fingering in dict.fromkeys([*labels.values(), *rungs(session.holes)]):
            group = groups.get(fingering, ())
            if fingering == labels[take] or session.likelihood(take, fingering, group, ladder) < _BADLY:
                continue
            tried.append({**labels, take: fingering})
            worst = sorted(group, key=lambda other: known[other])[:_MOST_EXCHANGES]
            tried += [{**labels, take: fingering, other: labels[take]} for other in worst]
    return tried


# --- in words ----------------------------------------------------------------------------------------


def _told(session: _Session, labels: _Labels, change: _Change) -> dict[str, str]:
    """Return the caution of every take that a change doubts."""
    if len(change.doubted) == 1:
        ((take, names),) = change.doubted.items()
        likely = sorted(names, key=lambda name: not name.is_ladder)[:_MOST_NAMES]
        like, expected = " or ".join(str(name) for name in likely), _expected(session, labels, take)
        return {take: f"sounds like {like} ({_hz(session, take)}{expected}): look at its name"}
    one, other = change.doubted
    return {
        take: f"names swapped (it sounds like {change.labels[take]}, and {partner} like {labels[take]}): "
        "look at both names"
        for take, partner in ((one, other), (other, one))
    }


def _hz(session: _Session, take: str) -> str:
    pitches = sorted(2.0 ** (tone.pitch_cents / 1200.0) for tone in session.takes[take])
    return " and ".join(f"{pitch:.0f}" for pitch in pitches) + " Hz"


def _expected(session: _Session, labels: _Labels, take: str) -> str:
    """Say where the flute's ladder lets a take's own fingering be, if it tells."""
    reach = session.ladder(labels).reach(labels[take])
    if reach is None:
        return ""
    low, high = (2.0 ** (cents / 1200.0) for cents in reach)
    return f"; the first register of {labels[take]} is expected at {low:.0f} to {high:.0f} Hz"
