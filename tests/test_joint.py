"""The Gaussian: against the same conditioning done the long way, and against drawn truth."""

from functools import cache

import numpy as np
import pytest
from foretelling import SIX_HOLES, first_takes, survey_of_tube, upper_takes
from test_fit import fit_of

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.joint import Joint

WANTED = [
    (Fingering("xxxxxx"), 2),
    (Fingering("oxxxxx"), 2),
    (Fingering("vxxxxx"), 2),
    (Fingering("xxvxxx"), 3),
]


@cache
def joint() -> Joint:
    survey = survey_of_tube(SIX_HOLES, [*first_takes(), *upper_takes()])
    return fit_of(survey).joint([fingering for fingering, _ in WANTED])


def test_left_out_one_is_conditioning_on_all_others() -> None:
    """Rasmussen & Williams 2006, eq. 5.12, against a solve without the row: equal to rounding."""
    heard = joint()
    deviation, variance = heard.one_left_out()
    for i in (0, 5, len(heard.heard) - 1):
        rest = np.arange(len(heard.heard)) != i
        gain = np.linalg.solve(heard.covariance[np.ix_(rest, rest)], heard.covariance[rest, i])
        assert deviation[i] == pytest.approx(heard.surprise[i] - gain @ heard.surprise[rest], abs=1e-6)
        assert variance[i] == pytest.approx(heard.covariance[i, i] - gain @ heard.covariance[rest, i])


def test_the_covariance_is_one() -> None:
    heard = joint()
    assert heard.covariance == pytest.approx(heard.covariance.T)
    assert np.linalg.eigvalsh(heard.covariance).min() > 0.0


def test_what_is_kept_back_makes_less_sure() -> None:
    heard = joint()
    asked = heard.asked(WANTED)
    _, sure = heard.foretold(asked)
    _, less = heard.foretold(asked, np.array([each.resonance == 1 for each in heard.heard]))
    _, least = heard.foretold(asked, np.zeros(len(heard.heard), dtype=bool))
    assert (sure <= less + 1e-9).all()
    assert (less < least).all()


def test_asked_together_or_singly_the_answer_is_the_same() -> None:
    heard = joint()
    together = np.array(heard.foretold(heard.asked(WANTED)))
    singly = np.array([np.array(heard.foretold(heard.asked([each])))[:, 0] for each in WANTED]).T
    assert together == pytest.approx(singly)


def test_uncertainty_comes_true() -> None:
    """Two sets of drawn bends and scatter on one tube, seven upper notes each, none of them given.

    Two standard deviations have to hold 90 % of them.
    """
    inside = []
    for random in range(2):
        survey = survey_of_tube(SIX_HOLES, [*first_takes(), *upper_takes()], random=random)
        heard = fit_of(survey).joint([])
        keep = np.array([each.sounding == 1 for each in heard.heard])
        upper = [each for each in heard.heard if each.kind == "second"]
        pitch, spread = heard.foretold(heard.asked([(each.fingering, 2) for each in upper]), keep)
        off = np.array([each.cents for each in upper]) - pitch
        inside += (np.abs(off) < 2.0 * spread).tolist()
    assert len(inside) == 14
    assert sum(inside) / len(inside) >= 0.9
