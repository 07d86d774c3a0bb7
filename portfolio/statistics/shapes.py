"""The shape of each characteristic: what it is by nature first, what its values say second, and when to refuse.

A declared type limits the families that are tried; without one the normal holds unless another family is clearly
better (AICc by 2). A family is refused by its Anderson-Darling statistic. Light tails may fall back on the normal, whose
figure is then cautious; everything else is "no known shape" (capability study, sections 0 and 3). Indices of shapes use
quantiles (ISO 22514-4), which is the usual index where the shape is normal.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr

from portfolio.statistics import ragged, shape_families, shape_fits, shape_tests
from portfolio.statistics.capability import Indices
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
"A folded normal whose mean lies so many sigmas above 0 is the normal."
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
            mirror = x.spread(x.start[:-1] + x.start[1:] - 1) - np.arange(len(y))
            y = np.where(down, y[mirror], y)
        y = np.where(y == 0, x.spread(self.step) / 4, y)
        return shape_fits.Sample(y, x.start)


def _judged(values: _Values, declared: NDArray[np.object_]) -> Shapes:
    x, y = values.plain, values.from_bound()
    count = len(x.n)
    smallest = np.minimum.reduceat(y.values, y.start[:-1])
    with np.errstate(divide="ignore", invalid="ignore"):
        possible = _possible(smallest, y.mean / y.sigma)
    allowed = np.ones((count, len(FAMILIES)), dtype=bool)
    for word in set(declared.tolist()) - {""}:
        group = np.isin(FAMILIES, TYPES.get(word, (word,)))
        allowed[declared == word] = group
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


def _possible(smallest: Floats, ratio: Floats) -> Bools:
    """Which families the values allow, (R, F). The folded normal far above its bound is the normal once more."""
    out = np.ones((len(smallest), len(FAMILIES)), dtype=bool)
    out[:, BOUNDED] = (smallest > 0)[:, None]
    out[:, NUMBER["half-normal"]] = smallest >= 0
    out[:, NUMBER["folded normal"]] = (smallest >= 0) & (ratio < PLAIN)
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


def quantiles(shapes: Shapes, probabilities: ArrayLike) -> Floats:
    """Quantiles (K, P) in the unit of the characteristic; NaN where refused.

    `probabilities` (P,) strictly between 0 and 1. Shapes read off the values know only `SPREAD`; NaN elsewhere.
    """
    p = np.asarray(probabilities, dtype=np.float64)
    out = np.full((len(shapes), len(p)), np.nan)
    for number, family in enumerate(FAMILIES):
        rows = np.flatnonzero(shapes.family == family)
        if len(rows):
            out[rows] = from_bound(
                family, p, shapes.parameters[rows][:, None], shapes.location[rows][:, None], shapes.sign[rows][:, None]
            )
    empirical = shapes.family == EMPIRICAL
    if empirical.any():
        for column, known in enumerate(SPREAD):
            out[np.ix_(empirical, np.isclose(p, known, rtol=1e-9))] = shapes.parameters[empirical, column][:, None]
    return out


def from_bound(family: str, p: Floats, parameters: Floats, location: Floats, sign: Floats) -> Floats:
    """Quantiles of x = location + sign y; `parameters` (..., 3), the rest broadcasts against `parameters[..., 0]`."""
    a, b, c = parameters[..., 0], parameters[..., 1], parameters[..., 2]
    if not BOUNDED[NUMBER[family]]:
        return shape_families.quantile(family, p, a, b, c)
    p, sign = np.broadcast_arrays(p, sign)
    return location + sign * shape_families.quantile(family, np.where(sign > 0, p, 1 - p), a, b, c)


def ppm(shapes: Shapes, lower: Floats, upper: Floats) -> Floats:
    """Parts per million outside the limits (-inf / +inf where there is none) for exactly this shape, (K,).

    A plug-in figure: below one value in the sample it is a statement of the shape, not of the values. NaN where
    refused or read off the values.
    """
    out = np.full(len(shapes), np.nan)
    for number, family in enumerate(FAMILIES):
        rows = np.flatnonzero(shapes.family == family)
        a, b, c = shapes.parameters[rows].T
        near, far = lower[rows], upper[rows]
        if BOUNDED[number]:
            location, sign = shapes.location[rows], shapes.sign[rows]
            near, far = sign * (near - location), sign * (far - location)
            near, far = np.where(sign > 0, near, far), np.where(sign > 0, far, near)
        out[rows] = 1e6 * (
            shape_families.tails(family, near, a, b, c)[0] + shape_families.tails(family, far, a, b, c)[1]
        )
    return out


def open_limits(shapes: Shapes, lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """The limits that values can pass: a limit at or beyond the end of a one-sided shape is none, (K,) each."""
    one_sided = np.isin(shapes.family, np.array(FAMILIES, dtype=object)[BOUNDED])
    with np.errstate(invalid="ignore"):
        no_lower = one_sided & (shapes.sign > 0) & (lower <= shapes.location)
        no_upper = one_sided & (shapes.sign < 0) & (upper >= shapes.location)
    return np.where(no_lower, -np.inf, lower), np.where(no_upper, np.inf, upper)


def indices(shapes: Shapes, lower: Floats, upper: Floats) -> Indices:
    """Cp, Cpl, Cpu, Cpk by the quantile method, (K,) each.

    Cpu = (U - q50) / (q99.865 - q50), Cpl = (q50 - L) / (q50 - q0.135), Cp = (U - L) / (q99.865 - q0.135), with the
    normal probabilities of -3, 0, 3. NaN where refused, where a limit is missing, where limits are crossed. A limit at
    the natural bound of a one-sided shape cannot be passed and counts as missing.

    Source: ISO 22514-4; Clements (1989).
    """
    lower, upper = open_limits(shapes, lower, upper)
    return index_of(quantiles(shapes, SPREAD), lower, upper)


def index_of(q: Floats, lower: Floats, upper: Floats) -> Indices:
    """The indices of quantiles `q` (K, 3) at `SPREAD`."""
    with np.errstate(invalid="ignore", divide="ignore"):
        low, middle, high = q[..., 0], q[..., 1], q[..., 2]
        ordered = np.asarray(lower) < upper
        cpl = np.where(ordered & np.isfinite(lower), (middle - lower) / (middle - low), np.nan)
        cpu = np.where(ordered & np.isfinite(upper), (upper - middle) / (high - middle), np.nan)
        cp = np.where(ordered & np.isfinite(lower) & np.isfinite(upper), (upper - lower) / (high - low), np.nan)
    return Indices(cp, cpl, cpu, np.fmin(cpl, cpu))


def shifted(shapes: Shapes, shift: Floats) -> Shapes:
    """The shapes with every value moved by `shift` (K,), in units: median and both tails move together."""
    parameters, fitted = shapes.parameters.copy(), shapes.fitted.copy()
    for number in np.flatnonzero(~BOUNDED):
        fitted[:, number, 0] += shift
        rows = shapes.family == FAMILIES[number]
        parameters[rows, 0] += shift[rows]
    empirical = shapes.family == EMPIRICAL
    parameters[empirical] += shift[empirical, None]
    return replace(shapes, parameters=parameters, fitted=fitted, location=shapes.location + shift)


def scaled(shapes: Shapes, factor: Floats) -> Shapes:
    """The shapes with the distance of every value from its natural bound multiplied by `factor` (K,) > 0.

    Spread grows with level, as for concentrations and times (capability study, 5.5). Without a bound from 0.
    """
    if (np.asarray(factor) <= 0).any():
        raise ValueError("a factor is not above 0; give how many times larger the values become")
    parameters, fitted = shapes.parameters.copy(), shapes.fitted.copy()
    away = np.where(shapes.sign > 0, shapes.location, shapes.location)
    for number, family in enumerate(FAMILIES):
        rows = shapes.family == family
        fitted[:, number] = _stretched(family, fitted[:, number], factor, away)
        parameters[rows] = _stretched(family, parameters[rows], factor[rows], away[rows])
    empirical = shapes.family == EMPIRICAL
    parameters[empirical] = away[empirical, None] + factor[empirical, None] * (
        parameters[empirical] - away[empirical, None]
    )
    return replace(shapes, parameters=parameters, fitted=fitted)


def _stretched(family: str, parameters: Floats, factor: Floats, away: Floats) -> Floats:
    out = parameters.copy()
    if family in ("normal", "student t"):
        out[:, 0] = away + factor * (out[:, 0] - away)
        out[:, 1] *= factor
    elif family == "lognormal":
        out[:, 0] += np.log(factor)
    elif family in ("weibull", "gamma"):
        out[:, 1] *= factor
    else:
        out[:, :2] *= factor[:, None]
    return out


def sheppard(sigma: Floats, step: Floats) -> Floats:
    """Standard deviation freed of the recording step: sqrt(sigma^2 - step^2 / 12), (K,).

    Unbiased up to a step of 2 sigma; above it nothing helps and sigma is returned as it is (such characteristics are
    not judged). No step: unchanged. Source: Sheppard (1898); capability study, section 4.
    """
    with np.errstate(invalid="ignore"):
        corrects = (step > 0) & (step <= 2 * sigma)
        return np.where(corrects, np.sqrt(sigma**2 - np.where(corrects, step, 0.0) ** 2 / 12), sigma)
