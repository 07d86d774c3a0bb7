"""The shape of each characteristic: what it is by nature first, what its values say second, and when to refuse.

A declared type limits the families that are tried; without one the normal holds unless another family is clearly
better (AICc by 2). A family is refused by its Anderson-Darling statistic. Light tails may fall back on the normal, whose
figure is then cautious; everything else is "no known shape" (capability study, sections 0 and 3).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from portfolio.statistics import ragged, shape_fits, shape_tests
from portfolio.statistics.ragged import Bools, Floats, Ints
from portfolio.statistics.shape_families import BOUNDED, FAMILIES, FREE, NUMBER

TYPES = {
    "dimension": ("normal",),
    "form": ("half-normal", "folded normal", "rayleigh", "weibull"),
    "concentration": ("lognormal", "gamma", "weibull"),
}
"Families that a declared type allows; 'dimension' fits Student t beside the normal, only to warn of heavy tails."
GATE = 2.0
"AICc by which another family must beat the normal where nothing is declared."
PLAUSIBLE = 4.0
"AICc within which a family counts as plausible for the bounds."
CAUTIOUS, NO_SHAPE, EMPIRICAL = "cautious_normal", "no_shape", "empirical"
MANY = 1000
"Values from which the 0.135 % quantiles may be read off the values themselves (capability study, 3.2)."
FEWEST = 8
LIGHT_SKEW = 0.5
PLAIN = 4.0
"A folded normal whose mean lies so many sigmas above its bound is the normal."
BLOCK = 100_000
"Values fitted at once: arrays of this length stay in the processor's cache."
SPREAD = ndtr(np.array([-3.0, 0.0, 3.0]))
"Probabilities of the quantile method: 0.135 %, the median, 99.865 %."


@dataclass(frozen=True)
class Shapes:
    """Shapes of K characteristics; F families in the order of `FAMILIES`.

    `family` (K,): '' where refused, 'empirical' where quantiles come from the values. `parameters` (K, 3) as in
    `shape_families`; for 'empirical' the three quantiles themselves. Families on one side of a natural bound describe
    y = sign (x - location). `fitted` (K, F, 3), `log_likelihood`, `aicc`, `plausible` (K, F): every family that was
    tried (NaN, infinite, False where it was not). `a2` (K,) of the last family tried. `accepted`: the family passed;
    `cautious`: the normal stands in for light tails. `heavy_tails`: Student t is clearly better than the normal.
    `abandoned`: the declared shape did not fit. `note`: '', 'cautious_normal', 'no_shape', 'empirical'.
    """

    family: NDArray[np.object_]
    parameters: Floats
    location: Floats
    sign: Floats
    fitted: Floats
    log_likelihood: Floats
    aicc: Floats
    plausible: Bools
    a2: Floats
    accepted: Bools
    cautious: Bools
    heavy_tails: Bools
    abandoned: Bools
    note: NDArray[np.object_]

    def __len__(self) -> int:
        return len(self.family)


def fit(
    ordered: Floats,
    start: Ints,
    declared: NDArray[np.object_],
    lower_bound: Floats,
    upper_bound: Floats,
    *,
    step: Floats | None = None,
) -> Shapes:
    """Shape of each characteristic.

    Parameters
    ----------
    ordered : (N,) values sorted inside each characteristic; `start` (K + 1,)
    declared : (K,) '' for nothing, one of `FAMILIES`, or one of `TYPES`
    lower_bound, upper_bound : (K,) natural bounds, NaN or infinite where there is none. Families that live above a
        bound are measured from the nearer one, from 0 where there is none; values on the wrong side (or on it) make
        them unavailable
    step : (K,) recording step, NaN or 0 where values are continuous: equal values are spread over their cell for the
        test of the shape, and values recorded as the bound count as a quarter step away from it

    Raises
    ------
    ValueError
        If a declared word is unknown.

    Source
    ------
    AICc Hurvich & Tsai (1989); Anderson & Darling (1954); capability study, sections 3.2 to 3.5 (measured there).
    """
    wishes = np.asarray(declared, dtype=object)
    _check(wishes)
    count = len(start) - 1
    width = np.zeros(count) if step is None else np.where(np.isfinite(step) & (step > 0), step, 0.0)
    blocks = [
        _fit_block(
            ordered[start[a] : start[b]], start[a : b + 1] - start[a], wishes[a:b], lower_bound[a:b], upper_bound[a:b],
            width[a:b],
        )
        for a, b in _blocks(start)
    ]  # fmt: skip
    return Shapes(**{f.name: np.concatenate([getattr(block, f.name) for block in blocks]) for f in fields(Shapes)})


def _check(declared: NDArray[np.object_]) -> None:
    unknown = sorted({str(word) for word in set(declared.tolist()) - {"", *FAMILIES, *TYPES}})
    if unknown:
        known = ", ".join((*FAMILIES, *TYPES))
        raise ValueError(f"unknown shape {', '.join(map(repr, unknown))}; give '' or one of: {known}")


def _blocks(start: Ints) -> Iterator[tuple[int, int]]:
    """Runs of neighbouring characteristics of bounded size; at least one run, even without characteristics."""
    count = len(start) - 1
    a = 0
    while True:
        b = int(np.searchsorted(start, start[a] + BLOCK, side="right")) - 1
        b = min(max(b, a + 1), count)
        yield a, b
        if b >= count:
            return
        a = b


def _fit_block(
    values: Floats, start: Ints, declared: NDArray[np.object_], lower: Floats, upper: Floats, step: Floats
) -> Shapes:
    count = len(start) - 1
    n = np.diff(start)
    spread = ragged.standard_deviations(values, start)
    usable = (n >= FEWEST) & (spread > 0)
    location, sign = _oriented(values, start, lower, upper)
    blank = Shapes(
        family=np.full(count, "", dtype=object),
        parameters=np.full((count, 3), np.nan),
        location=location,
        sign=sign,
        fitted=np.full((count, len(FAMILIES), 3), np.nan),
        log_likelihood=np.full((count, len(FAMILIES)), np.nan),
        aicc=np.full((count, len(FAMILIES)), np.inf),
        plausible=np.zeros((count, len(FAMILIES)), dtype=bool),
        a2=np.full(count, np.nan),
        accepted=np.zeros(count, dtype=bool),
        cautious=np.zeros(count, dtype=bool),
        heavy_tails=np.zeros(count, dtype=bool),
        abandoned=np.zeros(count, dtype=bool),
        note=np.where(n > 0, NO_SHAPE, "").astype(object),
    )
    if usable.any():
        sample = shape_fits.Sample(values, start).rows(usable)
        rows = np.flatnonzero(usable)
        found = _judged(
            _Values(sample, step[rows], lower[rows], upper[rows], location[rows], sign[rows]), declared[rows]
        )
        for f in fields(Shapes):
            getattr(blank, f.name)[rows] = getattr(found, f.name)
    return blank


def _oriented(values: Floats, start: Ints, lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """Where the one-sided families begin and which way they run: from the nearer natural bound, else upwards from 0."""
    low, high = ragged.extremes(values, start)
    with np.errstate(invalid="ignore"):
        below, above = np.isfinite(lower), np.isfinite(upper)
        mirrored = above & (~below | (upper - high < low - lower))
    return np.where(mirrored, upper, np.where(below, lower, 0.0)), np.where(mirrored, -1.0, 1.0)


@dataclass(frozen=True)
class _Values:
    """Usable characteristics of a block: values as they are, and how the one-sided families see them."""

    plain: shape_fits.Sample
    step: Floats
    lower: Floats
    upper: Floats
    location: Floats
    sign: Floats

    def from_bound(self) -> shape_fits.Sample:
        """y = sign (x - location), ascending; 0 becomes a quarter of the recording step."""
        x = self.plain
        y = x.spread(self.sign) * (x.values - x.spread(self.location))
        down = x.spread(self.sign) < 0
        if down.any():
            mirror = np.repeat(x.start[:-1] + x.start[1:] - 1, x.n) - np.arange(len(y))
            y = np.where(down, y[mirror], y)
        y = np.where(y == 0, x.spread(self.step) / 4, y)
        return shape_fits.Sample(y, x.start)


def _judged(values: _Values, declared: NDArray[np.object_]) -> Shapes:
    x, y = values.plain, values.from_bound()
    count = len(x.n)
    allowed = np.ones((count, len(FAMILIES)), dtype=bool)
    for word in set(declared.tolist()) - {""}:
        group = np.isin(FAMILIES, TYPES.get(word, (word,)))
        allowed[declared == word] = group
    smallest = np.minimum.reduceat(y.values, y.start[:-1])
    possible = _possible(smallest, y.mean / y.sigma, allowed[:, NUMBER["normal"]])
    asked = allowed.copy()
    asked[allowed[:, NUMBER["normal"]], NUMBER["student t"]] = True

    fitted = np.full((count, len(FAMILIES), 3), np.nan)
    likelihood = np.full((count, len(FAMILIES)), np.nan)
    _fill(fitted, likelihood, x, y, asked & possible)
    aicc = _aicc(fitted, likelihood, x.n)
    chosen, plausible = _choose(aicc, allowed, declared == "")
    a2, fits = _test(values, x, y, fitted, chosen)

    abandoned = ~fits & (declared != "")
    if abandoned.any():  # once more with every family, as if nothing had been declared
        again = np.broadcast_to(abandoned[:, None], possible.shape) & possible & np.isnan(likelihood)
        _fill(fitted, likelihood, x, y, again)
        aicc[abandoned] = _aicc(fitted, likelihood, x.n)[abandoned]
        everything = np.ones_like(allowed)
        second, plausible_second = _choose(aicc, everything, np.ones(count, dtype=bool))
        chosen = np.where(abandoned, second, chosen)
        plausible[abandoned] = plausible_second[abandoned]
        a2_second, fits_second = _test(values, x, y, fitted, np.where(abandoned, second, -1))
        a2, fits = np.where(abandoned, a2_second, a2), np.where(abandoned, fits_second, fits)

    sigma = x.sigma
    skew = x.average(x.deviations**3) / sigma**3
    excess = x.average(x.deviations**4) / sigma**4 - 3
    cautious = ~fits & (excess < 0) & (np.abs(skew) < LIGHT_SKEW)
    empirical = ~fits & ~cautious & (x.n >= MANY)
    names = np.array([*FAMILIES, ""], dtype=object)
    family = np.where(fits, names[chosen], np.where(cautious, "normal", np.where(empirical, EMPIRICAL, "")))
    parameters = np.take_along_axis(fitted, np.maximum(chosen, 0)[:, None, None], axis=1)[:, 0]
    parameters = np.where(fits[:, None], parameters, np.nan)
    if cautious.any():
        parameters[cautious], likelihood[cautious, 0] = shape_fits.fitted("normal", x.rows(cautious))
        fitted[cautious, 0] = parameters[cautious]
    for row in np.flatnonzero(empirical).tolist():  # few and long: one call each
        inside = x.values[x.start[row] : x.start[row + 1]]
        parameters[row] = np.quantile(inside, SPREAD, method="weibull")
    plausible[~fits] = False
    plausible[cautious, 0] = True
    with np.errstate(invalid="ignore"):
        heavier = aicc[:, NUMBER["normal"]] - aicc[:, NUMBER["student t"]] >= GATE
    return Shapes(
        family=family.astype(object),
        parameters=parameters,
        location=values.location,
        sign=values.sign,
        fitted=fitted,
        log_likelihood=likelihood,
        aicc=aicc,
        plausible=plausible,
        a2=a2,
        accepted=fits,
        cautious=cautious,
        heavy_tails=heavier,
        abandoned=abandoned,
        note=np.select([fits, cautious, empirical], ["", CAUTIOUS, EMPIRICAL], NO_SHAPE).astype(object),
    )


def _possible(smallest: Floats, ratio: Floats, beside_normal: Bools) -> Bools:
    """Which families the values allow, (R, F). The folded normal far above its bound is no second normal beside it."""
    out = np.ones((len(smallest), len(FAMILIES)), dtype=bool)
    out[:, BOUNDED] = (smallest > 0)[:, None]
    out[:, NUMBER["half-normal"]] = smallest >= 0
    out[:, NUMBER["folded normal"]] = (smallest >= 0) & (~beside_normal | (ratio < PLAIN))
    return out


def _fill(fitted: Floats, likelihood: Floats, x: shape_fits.Sample, y: shape_fits.Sample, asked: Bools) -> None:
    for number, family in enumerate(FAMILIES):
        rows = asked[:, number]
        if not rows.any():
            continue
        source = y if BOUNDED[number] else x
        part = source if rows.all() else source.rows(rows)
        fitted[rows, number], likelihood[rows, number] = shape_fits.fitted(family, part)


def _aicc(fitted: Floats, likelihood: Floats, n: Ints) -> Floats:
    """AICc (R, F), infinite where a family was not fitted; Student t without heavy tails is no family of its own."""
    correction = 2 * FREE * (FREE + 1) / (n[:, None] - FREE - 1)
    out = np.where(np.isnan(likelihood), np.inf, 2 * FREE - 2 * likelihood + correction)
    student = NUMBER["student t"]
    out[np.isinf(fitted[:, student, 2]), student] = np.inf
    return out


def _choose(aicc: Floats, allowed: Bools, gated: Bools) -> tuple[Ints, Bools]:
    """Best family (-1: none) and the plausible ones; where `gated`, the normal holds unless beaten by `GATE`."""
    inside = np.where(allowed, aicc, np.inf)
    best = np.argmin(inside, axis=1)
    least = inside.min(axis=1)
    with np.errstate(invalid="ignore"):
        close = gated & (inside[:, NUMBER["normal"]] - least < GATE)
        plausible = inside - least[:, None] <= PLAUSIBLE
    chosen = np.where(np.isinf(least), -1, np.where(close, NUMBER["normal"], best))
    return chosen.astype(np.int64), plausible & np.isfinite(inside)


def _test(
    values: _Values, x: shape_fits.Sample, y: shape_fits.Sample, fitted: Floats, chosen: Ints
) -> tuple[Floats, Bools]:
    """Anderson-Darling statistic of the chosen families and whether it lies below its 5 % point."""
    a2 = np.full(len(chosen), np.nan)
    fits = np.zeros(len(chosen), dtype=bool)
    for number, family in enumerate(FAMILIES):
        rows = chosen == number
        if rows.any():
            source = (y if BOUNDED[number] else x).rows(rows)
            parameters = fitted[rows, number]
            a2[rows] = shape_tests.anderson_darling(family, parameters, source, values.step[rows])
            fits[rows] = a2[rows] <= shape_tests.critical(family, parameters, source.n)
    return a2, fits
