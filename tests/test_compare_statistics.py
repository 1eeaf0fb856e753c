"""The statistics of comparisons, against published examples and general-purpose libraries."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy import stats

from fluteprobe.compare import statistics as ours

Reals = NDArray[np.float64]
CHANCES = st.lists(st.floats(0.0, 1.0), min_size=1, max_size=40)


def random() -> np.random.Generator:
    return np.random.default_rng(8)


# --- combined uncertainty ----------------------------------------------------------------------------


def test_combined_uncertainty_is_the_root_of_the_sum_of_squares() -> None:
    # JCGM 100:2008, example H.1 (end gauge), from memory: 25, 9.7, 2.9 and 16.6 nm combine to 32 nm.
    assert float(ours.combined(25.0, 9.7, 2.9, 16.6)) == pytest.approx(32.0, abs=0.5)


def test_combined_uncertainty_works_on_arrays() -> None:
    assert ours.combined(np.array([3.0, 5.0]), np.array([4.0, 12.0])) == pytest.approx([5.0, 13.0])


def test_a_weighted_mean_is_that_of_least_squares() -> None:
    # numpy.linalg.lstsq on the equations scaled by 1/u; the variance is the inverse of the normal matrix.
    chances = random()
    values, doubts = chances.normal(10.0, 3.0, 9), chances.uniform(0.5, 3.0, 9)
    scaled = (1.0 / doubts)[:, None]
    expected, *_ = np.linalg.lstsq(scaled, values / doubts)
    mean, uncertainty = ours.weighted_mean(values, doubts)
    assert mean == pytest.approx(float(expected[0]))
    assert uncertainty == pytest.approx(float(1.0 / np.sqrt(scaled.T @ scaled)[0, 0]))


# --- many comparisons --------------------------------------------------------------------------------


@given(CHANCES)
def test_adjusted_probabilities_are_scipy_s(chances: list[float]) -> None:
    assert ours.adjusted(chances) == pytest.approx(stats.false_discovery_control(chances, method="bh"))


def test_adjusting_passes_over_what_is_not_known() -> None:
    known = [0.01, 0.04, 0.03]
    found = ours.adjusted([0.01, np.nan, 0.04, 0.03])
    assert np.isnan(found[1])
    assert found[[0, 2, 3]] == pytest.approx(stats.false_discovery_control(known))


def test_chance_is_the_normal_distribution_s() -> None:
    scores = np.array([0.0, -1.0, 1.959964, 3.0, 8.0])
    assert ours.chance_of(scores) == pytest.approx(2.0 * stats.norm.sf(np.abs(scores)))
    # JCGM 100:2008, table G.1: k = 3 covers 99.73 %.
    assert ours.chance_of([ours.SURE])[0] == pytest.approx(0.0027, abs=0.00005)


# --- robust ------------------------------------------------------------------------------------------


def test_the_robust_deviation_is_scipy_s_and_leaves_out_what_is_not_there() -> None:
    values = random().normal(0.0, 4.0, (6, 11))
    values[2, 4:] = np.nan
    middle, scatter = ours.middle_and_scatter(values)
    for row, m, s in zip(values, middle, scatter, strict=True):
        known = row[np.isfinite(row)]
        assert m == pytest.approx(np.median(known))
        assert s == pytest.approx(stats.median_abs_deviation(known, scale="normal"), rel=1e-4)


def test_two_values_have_a_middle_and_no_scatter() -> None:
    middle, scatter = ours.middle_and_scatter(np.array([[1.0, 5.0, np.nan], [np.nan] * 3]))
    assert middle[0] == 3.0
    assert np.isnan([*scatter, middle[1]]).all()


def test_what_is_far_off_stands_out_and_a_wide_uncertainty_excuses() -> None:
    values = np.array([[0.0, 1.0, -1.0, 2.0, -2.0, 30.0]] * 2)
    doubts = np.array([[0.5] * 6, [0.5] * 5 + [10.0]])
    assert ours.standing_out(values, doubts).tolist() == [[False] * 5 + [True], [False] * 6]


def test_of_four_nothing_stands_out() -> None:
    assert not ours.standing_out(np.array([[0.0, 1.0, -1.0, 90.0]]), np.full((1, 4), 0.1)).any()


def test_notes_that_moved_do_not_move_the_offset() -> None:
    values = np.full(12, 5.0) + random().normal(0.0, 0.5, 12)
    values[:3] += 40.0
    offset = ours.common_offset(values, np.full(12, 0.5))
    assert offset.value == pytest.approx(5.0, abs=0.6)  # 3.5 times 0.5 cent over the root of nine notes
    assert offset.kept.tolist() == [False] * 3 + [True] * 9


def test_the_variance_between_values_is_found() -> None:
    chances = random()
    doubts = chances.uniform(0.5, 1.5, 4000)
    values = chances.normal(0.0, 3.0, 4000) + chances.normal(0.0, doubts)
    # The sampling error of a variance from 4000 values is 2.2 %.
    assert ours.between_variance(values, doubts) == pytest.approx(9.0, rel=0.08)
    assert ours.between_variance(np.array([1.0]), np.array([1.0])) == 0.0
    assert ours.between_variance(np.array([1.0, 1.5]), np.array([1.0, 1.0])) == 0.0


def test_the_variance_between_values_fills_up_the_weighted_squares() -> None:
    # Its definition: with it, the weighted squares about the weighted mean are as many as are free (Paule &
    # Mandel, J. Res. Natl. Bur. Stand. 87, 377 (1982)).
    values, doubts = np.array([10.0, 12.0, 3.0, 9.0, -4.0]), np.array([0.1, 1.0, 2.0, 0.5, 1.0])
    weights = 1.0 / (doubts**2 + ours.between_variance(values, doubts))
    mean = weights @ values / weights.sum()
    assert weights @ (values - mean) ** 2 == pytest.approx(4.0)


# --- lines and two ways ------------------------------------------------------------------------------


def test_a_line_is_that_of_scipy() -> None:
    times = np.array([0.0, 0.3, 0.9, 1.7, 2.0])
    values = np.array([1.0, 4.0, 2.0, 9.0, 8.0])
    line = ours.line_through(times, values, np.full(5, 0.1))  # far less than the scatter: so that decides
    expected = stats.linregress(times, values)
    assert line is not None
    assert line.slope == pytest.approx(expected.slope)
    assert line.uncertainty == pytest.approx(expected.stderr)
    assert line.probability == pytest.approx(expected.pvalue)


def test_a_line_through_sure_values_keeps_their_uncertainty() -> None:
    times = np.array([0.0, 1.0, 2.0, 3.0])
    line = ours.line_through(times, 3.0 * times, np.array([1.0, 2.0, 2.0, 1.0]))
    design = np.stack([np.ones(4), times], axis=1) / np.array([1.0, 2.0, 2.0, 1.0])[:, None]
    assert line is not None
    assert line.slope == pytest.approx(3.0)
    assert line.uncertainty == pytest.approx(np.sqrt(np.linalg.inv(design.T @ design)[1, 1]))


def test_groups_of_values_have_a_level_each() -> None:
    # numpy.linalg.lstsq with a column for each group.
    times, group = np.array([0.0, 0.5, 1.0, 1.5, 2.0, 2.5]), np.array([4, 7, 4, 7, 4, 7])
    values, doubts = np.array([1.0, 9.0, 3.5, 10.0, 4.0, 12.5]), np.array([1.0, 2.0, 1.0, 0.5, 1.0, 1.5])
    line = ours.line_through(times, values, doubts, group)
    design = np.stack([group == 4, group == 7, times], axis=1) / doubts[:, None]
    expected, squares, *_ = np.linalg.lstsq(design, values / doubts)
    assert line is not None
    assert line.slope == pytest.approx(expected[2])
    ratio = max(1.0, float(np.sqrt(squares[0] / 3.0)))
    assert line.uncertainty == pytest.approx(ratio * np.sqrt(np.linalg.inv(design.T @ design)[2, 2]))


def test_too_few_values_have_no_line() -> None:
    assert ours.line_through(np.array([0.0, 1.0]), np.array([0.0, 1.0]), np.ones(2)) is None
    thrice = (np.array([0.0, 1.0, 2.0]), np.array([0.0, 1.0, 5.0]), np.ones(3))
    assert ours.line_through(*thrice, np.array([0, 0, 1])) is None
    assert ours.line_through(np.zeros(3), thrice[1], np.ones(3)) is None


def two_way_case() -> tuple[Reals, Reals, NDArray[np.intp], NDArray[np.intp]]:
    chances = random()
    block, column = (grid.ravel() for grid in np.meshgrid(np.arange(7), np.arange(3), indexing="ij"))
    kept = np.delete(np.arange(21), [3, 8])  # not every player played every note
    doubts = chances.uniform(0.5, 2.0, 21)
    values = 4.0 * block + np.array([-3.0, 1.0, 2.0])[column] + chances.normal(0.0, doubts)
    return values[kept], doubts[kept], block[kept], column[kept]


def test_a_two_way_fit_is_that_of_a_design_matrix() -> None:
    values, doubts, block, column = two_way_case()
    fit = ours.two_way(values, doubts, block, column)
    # The last column's effect is minus the sum of the others: full rank, so numpy's least squares is unique.
    design = np.zeros((len(values), 7 + 2))
    design[np.arange(len(values)), block] = 1.0
    for k, c in enumerate(column):
        if c < 2:
            design[k, 7 + c] = 1.0
        else:
            design[k, 7:] = -1.0
    scaled = design / doubts[:, None]
    expected, *_ = np.linalg.lstsq(scaled, values / doubts)
    spread = np.linalg.inv(scaled.T @ scaled)
    assert fit.block == pytest.approx(expected[:7])
    assert fit.column == pytest.approx([*expected[7:], -expected[7:].sum()])
    assert fit.block_uncertainty / fit.ratio == pytest.approx(np.sqrt(np.diag(spread)[:7]))
    assert fit.column_uncertainty[:2] / fit.ratio == pytest.approx(np.sqrt(np.diag(spread)[7:]))
    assert fit.column.sum() == pytest.approx(0.0, abs=1e-9)
    left = values - design @ expected
    assert fit.rest == pytest.approx(left)
    fitted = np.einsum("ij,jk,ik->i", design, spread, design)
    assert fit.rest_uncertainty == pytest.approx(np.sqrt(doubts**2 - fitted))
    freedom = len(values) - 9
    assert fit.ratio == pytest.approx(max(1.0, np.sqrt((left**2 / doubts**2).sum() / freedom)))


def test_the_columns_rest_on_the_blocks_that_are_kept() -> None:
    values, doubts, block, column = two_way_case()
    kept = block != 2
    fit, without = (
        ours.two_way(values, doubts, block, column, kept),
        ours.two_way(
            values[kept], doubts[kept], np.unique(block[kept], return_inverse=True)[1], column[kept]
        ),
    )
    assert fit.column == pytest.approx(without.column)
    assert fit.column_uncertainty == pytest.approx(without.column_uncertainty)
    mine = block == 2
    weights = 1.0 / doubts[mine] ** 2
    assert fit.block[2] == pytest.approx(weights @ (values[mine] - fit.column[column[mine]]) / weights.sum())


def test_a_block_that_goes_its_own_way_does_not_tilt_the_columns() -> None:
    values, doubts, block, column = two_way_case()
    bent = values + np.where((block == 4) & (column == 1), 60.0, 0.0)
    fit = ours.steady_two_way(bent, doubts, block, column)
    kept = block != 4
    assert fit.column == pytest.approx(ours.two_way(values, doubts, block, column, kept).column)


def test_a_rest_beside_the_fit_has_the_uncertainty_that_it_scatters_by() -> None:
    # By Monte-Carlo, for the values kept and the one block that is not; 600 draws know a spread to 3 %.
    chances = random()
    _, doubts, block, column = two_way_case()
    kept = block != 2
    fits = [ours.two_way(chances.normal(0.0, doubts), doubts, block, column, kept) for _ in range(600)]
    scattered = np.std([fit.rest for fit in fits], axis=0)
    assert scattered == pytest.approx(fits[0].rest_uncertainty, rel=0.12)


def test_columns_that_share_no_block_are_in_different_groups() -> None:
    block = np.array([0, 0, 1, 1, 2])
    column = np.array([0, 1, 1, 2, 3])
    fit = ours.two_way(np.arange(5.0), np.ones(5), block, column)
    assert fit.group.tolist() == [0, 0, 0, 1]
    assert fit.column[3] == pytest.approx(0.0)


def test_the_told_uncertainty_of_a_players_part_holds() -> None:
    # By Monte-Carlo: 95 % of the errors within 2 u, and 1200 draws have a standard error of 0.6 %, more
    # where the three of one draw go together.
    chances = random()
    _, doubts, block, column = two_way_case()
    truth = 4.0 * block + np.array([-3.0, 1.0, 2.0])[column]
    errors = []
    for _ in range(400):
        fit = ours.two_way(truth + chances.normal(0.0, doubts), doubts, block, column)
        errors.append((fit.column - np.array([-3.0, 1.0, 2.0])) / (fit.column_uncertainty / fit.ratio))
    assert float(np.mean(np.abs(errors) < 2.0)) == pytest.approx(0.9545, abs=0.025)
