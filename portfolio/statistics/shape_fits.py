"""Maximum likelihood for every family, many characteristics at once.

Families with sufficient statistics need one look at the values; Weibull (Newton), folded normal (a root on its ridge)
and Student t (Fisher scoring) look several times. Nothing here chooses between families.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import gammaln, polygamma, psi

from portfolio.statistics import ragged
from portfolio.statistics.ragged import Bools, Floats, Ints

LOG_2PI = float(np.log(2 * np.pi))
STEPS = 100
NEAR = 1e-9
"Share of a parameter to which it is found. What has arrived stays, so that no result depends on its neighbours."
LEFT = 1e-7
"Log-likelihood that Student t may be short of its maximum."
FEWEST_FREEDOM, MOST_FREEDOM = 2.0, 500.0
"Degrees of freedom of Student t that are searched; above the upper end the normal is taken."
SMOOTH = 40.0
"Gamma shape from which Stirling's series is exact to 12 digits."
APART = 20.0
"Folded values whose mirror image lies so far away (tanh = 1 in double precision) are plain normal ones."


@dataclass(frozen=True)
class Sample:
    """R groups of values, flat, with the sums that several families share; every group has at least two values."""

    values: Floats
    start: Ints

    @cached_property
    def n(self) -> Ints:
        """Number of values, (R,)."""
        return np.diff(self.start)

    @cached_property
    def mean(self) -> Floats:
        """Mean, (R,)."""
        return ragged.means(self.values, self.start)

    @cached_property
    def deviations(self) -> Floats:
        """Values less the mean of their group, (N,)."""
        return self.values - self.spread(self.mean)

    @cached_property
    def sigma(self) -> Floats:
        """Standard deviation with divisor n, (R,)."""
        return np.sqrt(self.average(self.deviations**2))

    @cached_property
    def mean_square(self) -> Floats:
        """Mean of the squared values, (R,)."""
        return self.average(self.values**2)

    @cached_property
    def logs(self) -> Floats:
        """Natural logarithms less the logarithm of the group's mean, (N,): keeps the digits of narrow values."""
        return np.log1p(self.deviations / self.spread(self.mean))

    @cached_property
    def mean_log(self) -> Floats:
        """Mean of `logs`, (R,): log of geometric over arithmetic mean, never above 0."""
        return self.average(self.logs)

    def spread(self, each: Floats) -> Floats:
        """One number per group on all its values, (N,)."""
        return np.repeat(each, self.n)

    def average(self, flat: Floats) -> Floats:
        """Mean over each group, (R,)."""
        return ragged.sums(flat, self.start) / self.n

    def rows(self, keep: Bools) -> Sample:
        """The groups marked in `keep` (R,)."""
        start = np.concatenate(([0], np.cumsum(self.n[keep]))).astype(np.int64)
        return Sample(self.values[np.repeat(keep, self.n)], start)


def fitted(family: str, sample: Sample) -> tuple[Floats, Floats]:
    """Parameters (R, 3) and maximised log-likelihood (R,) of one family.

    Values must lie in the support of the family: above 0 for the bounded ones (0 itself is possible for the folded
    and the half-normal). The sigma of the normal is the unbiased kind (divisor n - 1), as every normal index uses it;
    its likelihood is the maximal one.
    """
    parameters, average = _FITS[family](sample)
    full = np.full((len(sample.n), 3), np.nan)
    for column, parameter in enumerate(parameters):
        full[:, column] = parameter
    return full, average * sample.n


Fit = tuple[tuple[Floats, ...], Floats]


def _normal(sample: Sample) -> Fit:
    sigma = sample.sigma
    return (sample.mean, sigma * np.sqrt(sample.n / (sample.n - 1))), _normal_average(sigma)


def _normal_average(sigma: Floats) -> Floats:
    out: Floats = -np.log(sigma) - (LOG_2PI + 1) / 2
    return out


def _lognormal(sample: Sample) -> Fit:
    level = np.log(sample.mean)
    sigma = np.sqrt(sample.average((sample.logs - sample.spread(sample.mean_log)) ** 2))
    centre = sample.mean_log + level
    return (centre, sigma), _normal_average(sigma) - centre


def _gamma(sample: Sample) -> Fit:
    gap = -sample.mean_log
    k = gamma_shape(gap)
    level = np.log(sample.mean)
    # k ln k - ln Gamma(k) - k without the cancellation that large shapes would suffer
    smooth = 0.5 * (np.log(np.maximum(k, SMOOTH)) - LOG_2PI) - _stirling(np.maximum(k, SMOOTH))
    small = np.minimum(k, SMOOTH)
    core = np.where(k >= SMOOTH, smooth, small * np.log(small) - gammaln(small) - small)
    return (k, sample.mean / k), core - k * gap - (sample.mean_log + level)


def gamma_shape(gap: Floats) -> Floats:
    """Shape k with ln k - digamma(k) = gap > 0, by Newton on 1 / k (Choi & Wette 1969; start Minka 2002, from memory)."""
    gap = np.maximum(gap, 1e-300)
    k = (3 - gap + np.sqrt((gap - 3) ** 2 + 24 * gap)) / (12 * gap)
    moving = np.ones(k.shape, dtype=bool)
    for _ in range(STEPS):
        big = k > 1e6
        safe = np.where(big, 1.0, k)
        value = np.where(big, 0.5 / k + 1 / (12 * k**2), np.log(safe) - psi(safe))
        slope = np.where(big, 0.5 / k**2, polygamma(1, safe) - 1 / safe)
        step = np.clip((value - gap) / (slope * k), -1, 1)
        k = np.where(moving, k * np.exp(step), k)
        moving &= np.abs(step) > NEAR
        if not moving.any():
            break
    return k


def _stirling(k: Floats) -> Floats:
    out: Floats = 1 / (12 * k) - 1 / (360 * k**3) + 1 / (1260 * k**5)
    return out


def _weibull(sample: Sample) -> Fit:
    """Newton on ln k of the profile likelihood; powers relative to the largest value, so none overflows."""
    largest = np.maximum.reduceat(sample.logs, sample.start[:-1])
    z = sample.logs - sample.spread(largest)
    mean = sample.mean_log - largest
    sigma = np.sqrt(np.maximum(sample.average(z * z) - mean**2, 1e-300))
    k = np.pi / np.sqrt(6) / sigma
    moving = np.ones(len(k), dtype=bool)
    for _ in range(STEPS):
        weight = np.exp(z * sample.spread(k))
        zero = sample.average(weight)
        weight *= z
        first = sample.average(weight) / zero
        weight *= z
        second = sample.average(weight) / zero - first**2
        step = -(first - 1 / k - mean) / ((second + 1 / k**2) * k)
        k = np.where(moving, k * np.exp(np.clip(step, -1, 1)), k)
        moving &= np.abs(step) > NEAR
        if not moving.any():
            break
    zero = sample.average(np.exp(z * sample.spread(k)))
    level = np.log(sample.mean)
    scale = np.exp(level + largest + np.log(zero) / k)
    average = np.log(k) - np.log(zero) + k * mean - (sample.mean_log + level) - 1
    return (k, scale), average


def _half_normal(sample: Sample) -> Fit:
    sigma = np.sqrt(sample.mean_square)
    return (sigma,), _normal_average(sigma) + np.log(2)


def _rayleigh(sample: Sample) -> Fit:
    sigma = np.sqrt(sample.mean_square / 2)
    return (sigma,), sample.mean_log + np.log(sample.mean) - 2 * np.log(sigma) - 1


def _folded(sample: Sample) -> Fit:
    """The maximum lies on the ridge mean^2 + sigma^2 = mean(y^2): one root instead of a stalling EM.

    With u = y / rms and r = mean / rms the score is g(r) = mean(u tanh(a u)) - r, a = r / (1 - r^2), which starts like
    r^3 (1 - mean(u^4) / 3): divided by r^3 it falls through one root, or the half-normal (r = 0) is the maximum.
    """
    mean, sigma = sample.mean.copy(), sample.sigma.copy()
    average = _normal_average(sigma)
    smallest = np.minimum.reduceat(sample.values, sample.start[:-1])
    touched = smallest * mean < APART * sigma**2
    if touched.any():
        part = sample.rows(touched)
        rms = np.sqrt(part.mean_square)
        u = part.values / part.spread(rms)
        r = _ridge(u, part)
        one = 1 - r**2
        mean[touched], sigma[touched] = r * rms, rms * np.sqrt(one)
        bent = np.abs(u) * part.spread(r / one)
        log_cosh = part.average(bent + np.log1p(np.exp(-2 * bent))) - np.log(2)
        average[touched] = _normal_average(sigma[touched]) + np.log(2) + 0.5 - (1 + r**2) / (2 * one) + log_cosh
    return (mean, sigma), average


def _ridge(u: Floats, sample: Sample) -> Floats:
    """Root r of the folded score (0 where there is none), by regula falsi (Illinois)."""
    low = np.zeros(len(sample.n))
    high = sample.average(u)
    at_low = 1 - sample.average(u**4) / 3
    inside = at_low > 0
    at_high = _folded_score(u, sample, high)
    r, last = np.where(inside, high, 0.0), np.zeros(len(low))
    moving = inside
    for _ in range(STEPS):
        gap = at_high - at_low
        moving = moving & (gap != 0)  # else both ends are on the root already
        trial = high - at_high * (high - low) / np.where(moving, gap, 1.0)
        trial = np.where(moving, np.clip(trial, low, high), r)
        moving = moving & (np.abs(trial - r) > 1e-8)
        r = trial
        if not moving.any():
            break
        score = _folded_score(u, sample, np.maximum(trial, 1e-6))
        left = score >= 0
        again = np.where(left, last == 1, last == -1)
        at_high = np.where(left, np.where(again, at_high / 2, at_high), score)
        at_low = np.where(left, score, np.where(again, at_low / 2, at_low))
        low, high = np.where(left, trial, low), np.where(left, high, trial)
        last = np.where(left, 1, -1)
    return r


def _folded_score(u: Floats, sample: Sample, r: Floats) -> Floats:
    a = r / np.maximum(1 - r**2, 1e-12)
    return (sample.average(u * np.tanh(u * sample.spread(a))) - r) / r**3


def _student(sample: Sample) -> Fit:
    """Fisher scoring in (centre, ln scale, 1 / freedom); the normal where tails are not heavier than normal.

    Source: information matrix of Lange, Little & Taylor (1989), Appendix B, from memory; checked in tests.
    """
    centre, scale = sample.mean.copy(), sample.sigma.copy()
    freedom = np.full(len(centre), np.inf)
    average = _normal_average(scale)
    heavy = sample.average(sample.deviations**4) > 3 * scale**4
    if heavy.any():
        part = sample.rows(heavy)
        found, better = _score_student(part)
        gain = better > average[heavy]
        rows = np.flatnonzero(heavy)[gain]
        centre[rows], scale[rows], freedom[rows] = (parameter[gain] for parameter in found)
        average[rows] = better[gain]
    return (centre, scale, freedom), average


def _score_student(sample: Sample) -> tuple[tuple[Floats, Floats, Floats], Floats]:
    excess = sample.average(sample.deviations**4) / sample.sigma**4 - 3
    nu = np.clip(4 + 6 / excess, 3.0, 50.0)
    shift = np.zeros(len(nu))
    log_scale = np.log(sample.sigma * np.sqrt((nu - 2) / nu))
    share = 1 / nu
    lowest, highest = 1 / MOST_FREEDOM, 1 / FEWEST_FREEDOM
    moving = np.ones(len(nu), dtype=bool)
    for _ in range(STEPS):
        nu = 1 / share
        z = (sample.deviations - sample.spread(shift)) / sample.spread(np.exp(log_scale))
        square = z * z
        bent = square * sample.spread(share)
        weight = sample.spread(1 + share) / (1 + bent)
        first = sample.average(weight * z)
        second = sample.average(weight * square)
        logs = sample.average(np.log1p(bent))
        third = 0.5 * (psi((nu + 1) / 2) - psi(nu / 2) - share - logs + second * share) * -(nu**2)
        spread_score = second - 1
        i_scale = 2 * nu / (nu + 3)
        i_both = 2 * nu**2 / ((nu + 1) * (nu + 3))
        i_share = nu**4 * (
            (polygamma(1, nu / 2) - polygamma(1, (nu + 1) / 2)) / 4 - (nu + 5) / (2 * nu * (nu + 1) * (nu + 3))
        )
        determinant = i_scale * i_share - i_both**2
        to_share = (i_scale * third - i_both * spread_score) / determinant
        to_scale = (i_share * spread_score - i_both * third) / determinant
        stuck = ((share <= lowest) & (to_share < 0)) | ((share >= highest) & (to_share > 0))
        to_share = np.where(stuck, 0.0, np.clip(to_share, -0.15, 0.15))
        to_scale = np.where(stuck, spread_score / i_scale, np.clip(to_scale, -1, 1))
        to_shift = first * np.exp(log_scale) * (nu + 3) / (nu + 1)
        moving &= sample.n * np.abs(to_scale * spread_score + to_share * third + first**2) > LEFT
        if not moving.any():
            break
        share = np.where(moving, np.clip(share + to_share, lowest, highest), share)
        log_scale = np.where(moving, log_scale + to_scale, log_scale)
        shift = np.where(moving, shift + to_shift, shift)
    nu, scale = 1 / share, np.exp(log_scale)
    z = (sample.deviations - sample.spread(shift)) / sample.spread(scale)
    logs = sample.average(np.log1p(z * z * sample.spread(share)))
    average = gammaln((nu + 1) / 2) - gammaln(nu / 2) - 0.5 * np.log(nu * np.pi) - log_scale - (nu + 1) / 2 * logs
    return (sample.mean + shift, scale, nu), average


_FITS = {
    "normal": _normal,
    "lognormal": _lognormal,
    "weibull": _weibull,
    "gamma": _gamma,
    "folded normal": _folded,
    "half-normal": _half_normal,
    "rayleigh": _rayleigh,
    "student t": _student,
}
