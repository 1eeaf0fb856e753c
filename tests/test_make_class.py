"""The sample class: made anew it is what lies in samples/, and what it was built with can be found in it."""

from pathlib import Path

import pytest
from make_class import CLASS, make, pupil_survey, work_surveys

from fluteprobe.compare import compare
from fluteprobe.results import read_results

SAMPLES = Path(__file__).parent.parent / "samples"
FOLDERS = ["avocet/before", "avocet/after", *(f"class/{pupil.name.lower()}" for pupil in CLASS)]


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    where = tmp_path_factory.mktemp("samples")
    make(where)
    return where


@pytest.mark.parametrize("folder", FOLDERS)
def test_what_is_made_anew_is_what_lies_there(folder: str, made: Path) -> None:
    ours, kept = (read_results(where / folder / "measurements.json") for where in (made, SAMPLES))
    assert (ours.flute, ours.sitting) == (kept.flute, kept.sitting)
    assert [(e.fingering, e.register) for e in ours.entries] == [
        (e.fingering, e.register) for e in kept.entries
    ]
    # Another machine may round the tube's resonances otherwise in their last digit.
    assert [e.frequency_hz for e in ours.entries] == pytest.approx(
        [e.frequency_hz for e in kept.entries], abs=2e-4
    )


def test_the_hole_that_was_enlarged_is_what_moved() -> None:
    comparison = compare(work_surveys())
    moved = {
        comparison.rows[d.row].by: -(d.alone_cents or 0.0)
        for d in comparison.pairs[0].differences
        if d.alone_verdict
    }
    assert set(moved) == {"xxxooo"}  # the fourth hole is the highest open one, in both registers
    assert moved["xxxooo"] > 5.0
    assert comparison.pairs[0].offset_verdict is None


def test_the_pupil_with_the_flat_breath_is_flat_as_a_whole() -> None:
    comparison = compare([pupil_survey(pupil, place) for place, pupil in enumerate(CLASS)])
    snipe = [flute.label for flute in comparison.flutes].index("Snipe")
    against = [pair for pair in comparison.pairs if snipe in pair.flutes]
    assert {pair.offset_verdict for pair in against} == {"different"}
    signs = [(-1.0 if pair.flutes[1] == snipe else 1.0) * (pair.offset_cents or 0.0) for pair in against]
    assert max(signs) < 0.0
