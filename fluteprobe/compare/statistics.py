"""The statistics of a comparison: means, offsets, chance, scatter, two-way fits and lines.

Conventions: values and standard uncertainties (k = 1) are arrays in the same unit, mostly cents; NaN is "not
measured" where a docstring allows it. Weights are inverse variances. Nothing here knows flutes.
"""

from dataclasses import dataclass
from math import erfc, nan, sqrt

import numpy as np
import numpy.typing as npt

Reals = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]
Wholes = npt.NDArray[np.intp]

SURE = 3.0  # coverage factor of a difference that is called one: 99.7 % (JCGM 100:2008, 6.3 and table G.1)
FALSE_SHARE = 0.01  # of the differences called sure, how many may be chance
MAD_TO_SIGMA = 1.4826  # a normal distribution's standard deviation over its median absolute deviation
STANDS_OUT = 3.5  # robust score (Iglewicz & Hoaglin, How to Detect and Handle Outliers, 1993)
FEWEST_FOR_OUTLIERS = 5

_LEAST_UNCERTAINTY = 1e-3


@dataclass(frozen=True, slots=True, kw_only=True)
class Mean:
    """A mean with its standard uncertainty, and which values it rests on."""

    value: float
    uncertainty: float
    kept: Flags


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """A straight line through values: its slope, standard uncertainty, degrees of freedom and probability."""

    slope: float
    uncertainty: float
    freedom: int
    probability: float


@dataclass(frozen=True, slots=True, kw_only=True)
class TwoWay:
    """An additive fit, value = block + column: see `two_way`.

    `block` and `block_uncertainty` have shape (blocks,), `column` and `column_uncertainty` (columns,) and
    `rest` and `rest_uncertainty` (values,). `group` numbers the columns that hang together, shape (columns,).
    `ratio` is the Birge ratio by which the uncertainties of blocks and columns were widened, at least 1.
    """

    block: Reals
    block_uncertainty: Reals
    column: Reals
    column_uncertainty: Reals
    rest: Reals
    rest_uncertainty: Reals
    group: Wholes
    ratio: float


def combined(*uncertainties: npt.ArrayLike) -> Reals:
    """Return the combined standard uncertainty of a sum or difference (JCGM 100:2008, eq. 10)."""
    return np.asarray(np.sqrt(sum(np.square(np.asarray(u, dtype=np.float64)) for u in uncertainties)))


def chance_of(scores: npt.ArrayLike) -> Reals:
    """Return how likely chance alone gives scores (scores,) as large, either way, if they are normal."""
    return np.array([erfc(abs(float(score)) / sqrt(2.0)) for score in np.asarray(scores)], dtype=np.float64)


def adjusted(probabilities: npt.ArrayLike) -> Reals:
    """Return probabilities adjusted for how many there are, shape (tests,); NaN stays NaN.

    Calling those up to q keeps the expected share of false ones among the called up to q (Benjamini &
    Hochberg, J. R. Stat. Soc. B 57, 289 (1995)).
    """
    given = np.asarray(probabilities, dtype=np.float64)
    known = np.flatnonzero(np.isfinite(given))
    order = known[np.argsort(given[known], kind="stable")[::-1]]
    ranks = np.arange(len(order), 0, -1)
    result = np.full(given.shape, nan)
    result[order] = np.minimum.accumulate(np.minimum(given[order] * len(order) / ranks, 1.0))
    return result


def weighted_mean(values: Reals, uncertainties: Reals) -> tuple[float, float]:
    """Return the mean by inverse variances and its standard uncertainty (JCGM 100:2008, eq. 10)."""
    weights = _weights(uncertainties)
    total = weights.sum()
    return float(weights @ values / total), float(1.0 / np.sqrt(total))


def weighted_median(values: Reals, uncertainties: Reals) -> float:
    """Return the median by inverse standard uncertainties: what minimises Σ |value − median| / u."""
    order = np.argsort(values, kind="stable")
    weights = 1.0 / np.maximum(uncertainties[order], _LEAST_UNCERTAINTY)
    below = np.cumsum(weights) - 0.5 * weights
    return float(np.interp(0.5 * weights.sum(), below, values[order]))


def common_offset(values: Reals, uncertainties: Reals) -> Mean:
    """Return what is common to values of which some may stand far off: changed notes do not move it.

    It is the weighted mean of those within SURE uncertainties of the weighted median (a one-step M-estimate:
    Huber & Ronchetti, Robust Statistics, 2009, ch. 4), widened by their scatter where that is more than
    they tell (Birge, Phys. Rev. 40, 207 (1932)).
    """
    middle = weighted_median(values, uncertainties)
    scale = max(1.0, MAD_TO_SIGMA * float(np.median(np.abs(values - middle) / _at_least(uncertainties))))
    kept = np.abs(values - middle) <= SURE * scale * _at_least(uncertainties)
    if not kept.any():
        kept = np.ones_like(kept)
    mean, uncertainty = weighted_mean(values[kept], uncertainties[kept])
    ratio = birge_ratio(values[kept] - mean, uncertainties[kept], int(kept.sum()) - 1)
    return Mean(value=mean, uncertainty=ratio * uncertainty, kept=kept)


def birge_ratio(rests: Reals, uncertainties: Reals, freedom: int) -> float:
    """Return how many times more values scatter than they tell, at least 1 (Birge 1932)."""
    if freedom < 1:
        return 1.0
    return max(1.0, sqrt(float((_weights(uncertainties) * rests**2).sum()) / freedom))


def between_variance(values: Reals, uncertainties: Reals) -> float:
    """Return the variance between values beyond their own uncertainty.

    It is what makes the weighted squares add up to the degrees of freedom (Paule & Mandel, J. Res. Natl. Bur.
    Stand. 87, 377 (1982)), found by halving; 0 where they do not exceed them.
    """
    freedom = len(values) - 1
    own = _at_least(uncertainties) ** 2

    def excess(between: float) -> float:
        weights = 1.0 / (own + between)
        mean = weights @ values / weights.sum()
        return float(weights @ (values - mean) ** 2) - freedom

    if freedom < 1 or excess(0.0) <= 0.0:
        return 0.0
    low, high = 0.0, float(np.ptp(values)) ** 2  # with which the squares are less than one each
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if excess(middle) > 0.0 else (low, middle)
    return high


def middle_and_scatter(values: Reals) -> tuple[Reals, Reals]:
    """Return the median and the robust standard deviation along the last axis, NaN left out.

    The deviation is 1.4826 times the median absolute deviation (Hampel, J. Am. Stat. Assoc. 69, 383 (1974)),
    NaN for fewer than three values.
    """
    middle = _nanmedian(values)
    scatter = MAD_TO_SIGMA * _nanmedian(np.abs(values - middle[..., None]))
    return middle, np.where(np.isfinite(values).sum(axis=-1) >= 3, scatter, nan)


def standing_out(values: Reals, uncertainties: Reals) -> Flags:
    """Return which values stand out from their row, shapes (rows, columns); NaN never does.

    The score is the distance from the median over the larger of the robust standard deviation and the value's
    own uncertainty; STANDS_OUT and over stands out. It takes FEWEST_FOR_OUTLIERS values in a row.
    """
    middle, scatter = middle_and_scatter(values)
    enough = np.isfinite(values).sum(axis=-1) >= FEWEST_FOR_OUTLIERS
    scale = np.fmax(scatter[..., None], _at_least(uncertainties))
    far = np.abs(values - middle[..., None]) >= STANDS_OUT * scale
    return np.asarray(far & enough[..., None] & np.isfinite(values))


def line_through(
    times: Reals, values: Reals, uncertainties: Reals, group: Wholes | None = None
) -> Line | None:
    """Return the weighted least-squares line through values; each group of them has a level of its own.

    Its uncertainty is widened by the scatter about it (Birge 1932); its probability of no slope is Student's
    with the remaining degrees of freedom (JCGM 100:2008, G.3). None where no freedom remains, or no group
    has two times.
    """
    from scipy.special import stdtr

    weights = _weights(uncertainties)
    group = np.zeros(len(times), dtype=np.intp) if group is None else np.unique(group, return_inverse=True)[1]
    away, apart = (each - _group_means(each, weights, group) for each in (times, values))
    leverage = float(weights @ away**2)
    freedom = len(values) - int(group.max()) - 2
    if freedom < 1 or leverage <= 1e-12 * float(weights.sum()):
        return None
    slope = float((weights * away) @ apart / leverage)
    uncertainty = birge_ratio(apart - slope * away, uncertainties, freedom) / sqrt(leverage)
    probability = 2.0 * float(stdtr(freedom, -abs(slope) / uncertainty))
    return Line(slope=slope, uncertainty=uncertainty, freedom=freedom, probability=probability)


def _group_means(values: Reals, weights: Reals, group: Wholes) -> Reals:
    """Return each value's group mean, by weights."""
    return np.asarray((np.bincount(group, weights * values) / np.bincount(group, weights))[group])


def two_way(
    values: Reals, uncertainties: Reals, block: Wholes, column: Wholes, kept: Flags | None = None
) -> TwoWay:
    """Fit value = block + column by weighted least squares, the columns of each group adding up to zero.

    `block` and `column` number each value's, from 0 without gaps, shape (values,). Columns that share no
    block, not even through others, are in different groups: nothing can be told of their difference. The
    blocks are eliminated from the normal equations (Scheffé, The Analysis of Variance, 1959, ch. 4). The
    columns rest on the values `kept`, whole blocks; blocks are told by all.
    """
    weights = _weights(uncertainties)
    kept = np.ones(len(values), dtype=np.bool_) if kept is None else kept
    table, totals = _sums(weights, values, block, column)
    per_block = table.sum(axis=1)
    shares = table / per_block[:, None]
    steady = kept[np.unique(block, return_index=True)[1]]
    group = _groups(table[steady] > 0.0)
    spread = _spread(table[steady], shares[steady], group)
    away = weights * (values - (totals / per_block)[block])
    columns = spread @ np.bincount(column[kept], away[kept], table.shape[1])
    blocks = (totals - table @ columns) / per_block
    rest = values - blocks[block] - columns[column]
    freedom = int(kept.sum()) - int(steady.sum()) - (table.shape[1] - int(group.max()) - 1)
    ratio = birge_ratio(rest[kept], uncertainties[kept], freedom)
    apart = np.eye(table.shape[1])[column] - shares[block]
    tilted = np.einsum("vi,ij,vj->v", apart, spread, apart)
    rest_variance = 1.0 / weights - 1.0 / per_block[block] + np.where(kept, -tilted, tilted)
    block_variance = 1.0 / per_block + np.einsum("bi,ij,bj->b", shares, spread, shares)
    return TwoWay(
        block=blocks,
        block_uncertainty=ratio * np.sqrt(np.maximum(block_variance, 0.0)),
        column=columns,
        column_uncertainty=ratio * np.sqrt(np.maximum(np.diag(spread), 0.0)),
        rest=rest,
        rest_uncertainty=np.sqrt(np.maximum(rest_variance, 0.0)),
        group=group,
        ratio=ratio,
    )


def steady_two_way(values: Reals, uncertainties: Reals, block: Wholes, column: Wholes) -> TwoWay:
    """Fit `two_way`, the columns resting on blocks of which no value stands far off.

    One block that goes its own way would tilt all columns; those beyond SURE uncertainties, themselves
    widened by how the rests scatter, are left out of the columns once, unless what is left would no longer
    join them.
    """
    fit = two_way(values, uncertainties, block, column)
    told = fit.rest_uncertainty > _LEAST_UNCERTAINTY
    if not told.any():
        return fit
    scores = np.where(told, np.abs(fit.rest) / np.maximum(fit.rest_uncertainty, _LEAST_UNCERTAINTY), 0.0)
    scale = max(1.0, MAD_TO_SIGMA * float(np.median(scores[told])))
    kept = ~np.isin(block, block[scores > SURE * scale])
    still = np.unique(column[kept])
    if kept.all() or len(still) < len(fit.column):
        return fit
    steadier = two_way(values, uncertainties, block, column, kept)
    return steadier if (steadier.group == fit.group).all() else fit


# --- helpers -----------------------------------------------------------------------------------------


def _at_least(uncertainties: Reals) -> Reals:
    return np.fmax(uncertainties, _LEAST_UNCERTAINTY)


def _weights(uncertainties: Reals) -> Reals:
    return np.asarray(1.0 / _at_least(uncertainties) ** 2)


def _nanmedian(values: Reals) -> Reals:
    """Return the median along the last axis without NaN, NaN where nothing else is; quiet about it."""
    ordered = np.sort(values, axis=-1)
    count = np.isfinite(values).sum(axis=-1)
    low, high = np.maximum((count - 1) // 2, 0), count // 2
    last = ordered.shape[-1] - 1
    pair = [np.take_along_axis(ordered, np.minimum(k, last)[..., None], axis=-1)[..., 0] for k in (low, high)]
    return np.where(count > 0, 0.5 * (pair[0] + pair[1]), nan)


def _spread(table: Reals, shares: Reals, group: Wholes) -> Reals:
    """Return the covariance of columns that add up to zero in each group, (columns, columns).

    The normal matrix has each group's sum as its null space, which is filled up before it is inverted and
    taken off again. Its diagonal is added up from the rest, for weights of very different size would cancel.
    """
    normal = -(table.T @ shares)
    np.fill_diagonal(normal, 0.0)
    diagonal = -normal.sum(axis=1)
    same = group[:, None] == group[None, :]
    project = same / same.sum(axis=1)[:, None]
    scale = project @ diagonal
    scale = np.where(scale > 0.0, scale, 1.0)  # a column that is a group by itself
    filled = normal + np.diag(diagonal) + scale[:, None] * project
    return np.asarray(np.linalg.inv(filled) - project / scale[:, None])


def _sums(weights: Reals, values: Reals, block: Wholes, column: Wholes) -> tuple[Reals, Reals]:
    """Return the weights (blocks, columns), and the weighted values of each block."""
    table = np.zeros((int(block.max()) + 1, int(column.max()) + 1))
    np.add.at(table, (block, column), weights)
    return table, np.asarray(np.bincount(block, weights * values, len(table)), dtype=np.float64)


def _groups(joined: Flags) -> Wholes:
    """Return a number for each column: the same for those that share blocks, directly or through others."""
    near = (joined.astype(np.intp).T @ joined.astype(np.intp)) > 0
    group = np.arange(joined.shape[1])
    for _ in range(joined.shape[1]):
        lowest = np.array([group[near[k] | (np.arange(len(group)) == k)].min() for k in range(len(group))])
        if (lowest == group).all():
            break
        group = lowest
    return np.unique(group, return_inverse=True)[1]
