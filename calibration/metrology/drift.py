"""How fast a transmitter drifts, how well that is known, and when it may leave its tolerance.

The rate is estimated from the differences between tests, never from their cumulative sum. Each difference d
= as-found(k) less as-left(k-1) over the time Δt is taken as

    d = μ·Δt + wandering + errors of the two tests

    Var(d)            = q·Δt + u²(as-found k) + u²(as-left k-1)
    Cov(d_k, d_k+1)   = -(variance that as-found k and as-left k share; all of it if nothing was adjusted)

with a steady rate μ and a random walk of variance q a year. u is taken without what both tests share, since
that cancels in the difference. q ≥ 0 comes from restricted maximum likelihood (REML), μ from generalised
least squares with that q, its interval from Student's t with n - 1 degrees of freedom. A single difference
holds the errors of two tests and is never a trend; under four pairs no rate is given.

Where neighbouring differences share a test, as they do while nothing is adjusted, the rate rests on the
slow part of the series and q on the fast part, and REML often returns q = 0: the interval then covered only
81 to 93 % in simulation where walk and test errors are of one size. For the standard error q is therefore
raised to where the restricted likelihood times √q is greatest, which kept the coverage at 93 % or more
(Chung and others, Psychometrika 78, 2013, use the same factor to keep variances off zero). Rate and q
themselves stay those of REML.

References
----------
Searle, Casella, McCulloch, Variance Components, for REML. Ordinary textbook form of generalised
least squares; the tests compare it with statsmodels and its 95 % interval with simulation.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import date, datetime, timedelta
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibration.metrology.pairing import (
    DAYS_PER_YEAR,
    Break,
    Intervention,
    LeftOut,
    Pair,
    Pairing,
    Segment,
    Visit,
    cumulative_curve,
    pair_tests,
)

__all__ = [
    "Break",
    "DriftRate",
    "DriftRates",
    "Intervention",
    "LeftOut",
    "Meeting",
    "Pair",
    "Pairing",
    "Prediction",
    "Segment",
    "Visit",
    "cumulative_curve",
    "estimate_rate",
    "pair_tests",
    "rates_from_differences",
]

Floats = NDArray[np.float64]

LEAST_PAIRS = 4
HORIZON_YEARS = 100.0

_GRID = 61
_REFINEMENTS = 32
_GOLDEN = (math.sqrt(5.0) - 1.0) / 2.0


@dataclass(frozen=True, eq=False)
class DriftRates:
    """Rates of many series of equally many differences; arrays over the leading dimensions.

    Attributes
    ----------
    differences, years, covariance : array, shape (…, n), (…, n), (…, n, n)
        The differences, the times between tests [years], the covariance of the errors of the tests.
    rate, se : array
        μ and its standard error [unit a year].
    walk : array
        q by REML [unit² a year].
    """

    differences: Floats
    years: Floats
    covariance: Floats
    rate: Floats
    se: Floats
    walk: Floats


def error_covariance(var_end: ArrayLike, var_start: ArrayLike, shared: ArrayLike = 0.0) -> Floats:
    """Covariance of the differences that comes from the errors of the tests.

    Parameters
    ----------
    var_end, var_start : array, shape (…, n)
        Variances of the as-found and the as-left of each difference.
    shared : float or array, shape (…, n - 1)
        Variance shared by the as-found that ends a difference and the as-left that starts the next.

    Returns
    -------
    array, shape (…, n, n)
    """
    total = np.asarray(var_end, dtype=np.float64) + np.asarray(var_start, dtype=np.float64)
    n = total.shape[-1]
    covariance = np.zeros((*total.shape, n))
    own = np.arange(n)
    covariance[..., own, own] = total
    covariance[..., own[:-1], own[1:]] = covariance[..., own[1:], own[:-1]] = -np.asarray(shared, dtype=np.float64)
    return covariance


def rates_from_differences(differences: ArrayLike, years: ArrayLike, covariance: ArrayLike) -> DriftRates:
    """Estimate μ and q by generalised least squares and REML.

    Parameters
    ----------
    differences : array, shape (…, n)
        Differences, n ≥ 2.
    years : array, shape (n,) or (…, n)
        Times between tests [years], above zero.
    covariance : array, shape (n, n) or (…, n, n)
        Covariance of the errors of the tests, positive semi-definite; see `error_covariance`.

    Returns
    -------
    DriftRates

    Raises
    ------
    ValueError
        If there are fewer than two differences, or a time is not above zero.

    Notes
    -----
    With D = diag(Δt)^-1/2 and the eigenvectors of D·R·D the likelihood becomes a sum over independent
    terms of variance q + λ, in which q is found by a search over a logarithmic grid and a golden-section
    refinement, for all series at once.
    """
    d = np.asarray(differences, dtype=np.float64)
    n = d.shape[-1] if d.ndim else 0
    if n < 2:
        raise ValueError("A rate and its scatter need at least two differences.")
    t = np.broadcast_to(np.asarray(years, dtype=np.float64), d.shape)
    if not (t > 0.0).all():
        raise ValueError("The time between two tests must be above zero.")
    r = np.broadcast_to(np.asarray(covariance, dtype=np.float64), (*d.shape, n))
    root = np.sqrt(t)
    scaled = r / (root[..., :, None] * root[..., None, :])
    values, vectors = np.linalg.eigh(scaled)
    values = np.where(values > 1e-12 * np.abs(values).max(axis=-1, keepdims=True), values, 0.0)
    z = np.einsum("...ji,...j->...i", vectors, d / root)
    a = np.einsum("...ji,...j->...i", vectors, root)

    plain = (a * z).sum(-1) / (a * a).sum(-1)
    # Were the tests free of error, this would be q.
    scatter = ((z - plain[..., None] * a) ** 2).sum(-1) / (n - 1)
    # From here on in the unit in which the larger of walk and test errors is one, so that no unit is too small.
    size = np.sqrt(np.maximum(scatter, values.max(-1)))
    size = np.where(size > 0.0, size, 1.0)
    z, values, scatter = z / size[..., None], values / (size**2)[..., None], scatter / size**2
    # Ten orders of size below the errors of the tests there is no walk to be found, and its square would vanish.
    scatter = np.where(scatter > 1e-20, scatter, 0.0)
    walk = np.where(values.max(-1) == 0.0, scatter, _greatest_likelihood(z, a, values, scatter, 0.0))
    off = ~np.eye(n, dtype=bool)
    linked = (r[..., off] != 0.0).any(-1)
    cautious = walk
    if linked.any():
        cautious = np.where(linked, np.maximum(walk, _greatest_likelihood(z, a, values, scatter, 1.0)), walk)
    weight = walk[..., None] + values
    # Nothing varies at all: the line goes through every difference and its standard error is zero.
    exact = (weight <= 0.0).any(-1)
    weight = np.where(exact[..., None], 1.0, weight)
    information = (a * a / weight).sum(-1)
    spread = ((a / weight) ** 2 * (cautious[..., None] + values)).sum(-1)
    return DriftRates(
        differences=d,
        years=t,
        covariance=r,
        rate=size * (a * z / weight).sum(-1) / information,
        se=np.where(exact, 0.0, size * np.sqrt(spread) / information),
        walk=size**2 * walk,
    )


def _criterion(q: Floats, z: Floats, a: Floats, values: Floats, power: float) -> Floats:
    """-2 log (restricted likelihood · q^(power/2)), less a constant, for q of shape (…, m)."""
    weight = q[..., None] + values[..., None, :]
    weight = np.where(weight > 0.0, weight, 1e-30)
    information = (a[..., None, :] ** 2 / weight).sum(-1)
    mean = (a[..., None, :] * z[..., None, :] / weight).sum(-1) / information
    left = (z[..., None, :] - mean[..., None] * a[..., None, :]) ** 2 / weight
    favour = power * np.log(q) if power else 0.0
    return np.asarray(np.log(weight).sum(-1) + np.log(information) + left.sum(-1) - favour)


def _greatest_likelihood(z: Floats, a: Floats, values: Floats, scatter: Floats, power: float) -> Floats:
    """The q that maximises the restricted likelihood times q^(power/2), for all series at once."""
    unit = np.where(scatter > 0.0, scatter, 1.0)[..., None]
    grid = np.logspace(-10.0, 2.0, _GRID)
    best = _criterion(unit * grid, z, a, values, power).argmin(-1)
    low = np.log(grid[np.maximum(best - 1, 0)])
    high = np.log(grid[np.minimum(best + 1, _GRID - 1)])
    for _ in range(_REFINEMENTS):
        width = _GOLDEN * (high - low)
        left, right = high - width, low + width
        ends = _criterion(unit * np.exp(np.stack([left, right], axis=-1)), z, a, values, power)
        first = ends[..., 0] <= ends[..., 1]
        low, high = np.where(first, low, left), np.where(first, right, high)
    found = unit[..., 0] * np.exp(0.5 * (low + high))
    if power == 0.0:
        both = _criterion(np.stack([np.zeros_like(found), found], axis=-1), z, a, values, power)
        found = np.where((values.min(-1) > 0.0) & (both[..., 0] <= both[..., 1]), 0.0, found)
    return np.where(scatter <= 0.0, 0.0, found)


@dataclass(frozen=True, eq=False)
class Prediction:
    """What is expected after a time, with its band.

    Attributes
    ----------
    years, start_value, confidence
        As given.
    centre, half_width, lower, upper : array
        In the unit of the channel; NaN where no rate is given.
    """

    years: Floats
    start_value: float
    confidence: float
    centre: Floats
    half_width: Floats
    lower: Floats
    upper: Floats


@dataclass(frozen=True)
class Meeting:
    """When the prediction band meets a limit.

    Attributes
    ----------
    start, start_value, lower_limit, upper_limit
        As given.
    on : date or None
        First day, or None where it does not within a hundred years or no rate is given.
    years : float
        Time from the start; infinite or NaN accordingly.
    words : str
        The same in words.
    """

    start: date
    start_value: float
    lower_limit: float
    upper_limit: float
    on: date | None
    years: float
    words: str


@dataclass(frozen=True, eq=False)
class DriftRate:
    """The rate of one channel of one transmitter.

    Attributes
    ----------
    channel : str
    pairs : tuple of Pair
        Pairs that took part.
    confidence : float
    n : int
        How many.
    enough : bool
        At least four; otherwise all figures are NaN.
    rate, se, lower, upper : float
        μ, its standard error and its interval [unit a year].
    walk : float
        q [unit² a year].
    dof : int
        n - 1.
    t_factor : float
        Two-sided Student factor.
    notes : tuple of str
        What a reader should know about these figures.
    """

    channel: str
    pairs: tuple[Pair, ...]
    confidence: float
    n: int
    enough: bool
    rate: float
    se: float
    lower: float
    upper: float
    walk: float
    dof: int
    t_factor: float
    notes: tuple[str, ...]

    def predict(
        self, years: ArrayLike, *, start_value: float = 0.0, u_found: float = 0.0, u_left: float = 0.0
    ) -> Prediction:
        """Predict the next as-found reading.

        Parameters
        ----------
        years : float or array
            Time since the last as-left [years].
        start_value : float
            The last as-left value; 0 predicts the next difference.
        u_found, u_left : float
            Standard uncertainty of the coming as-found and of the last as-left.

        Returns
        -------
        Prediction
            start + μ·Δt ± t·√(q·Δt + u²_found + u²_left + Δt²·var μ).
        """
        t = np.asarray(years, dtype=np.float64)
        variance = self.walk * t + u_found**2 + u_left**2 + (t * self.se) ** 2
        centre = start_value + self.rate * t
        half = self.t_factor * np.sqrt(variance)
        return Prediction(t, start_value, self.confidence, centre, half, centre - half, centre + half)

    def meets(
        self,
        start: date,
        start_value: float,
        lower_limit: float,
        upper_limit: float,
        *,
        u_found: float = 0.0,
        u_left: float = 0.0,
    ) -> Meeting:
        """Find the day on which the prediction band first touches a limit.

        Parameters
        ----------
        start : date
            Day of the last as-left.
        start_value : float
            The last as-left value.
        lower_limit, upper_limit : float
            Limits, in the unit of the channel (the MPE at that point); infinite where there is none on that side.
        u_found, u_left : float
            As for `predict`.

        Returns
        -------
        Meeting
        """
        percent = f"{100.0 * self.confidence:g} % prediction band"
        on: date | None = None
        years = math.nan
        if not self.enough:
            words = "not enough data"
        else:
            room = (upper_limit - start_value, start_value - lower_limit)
            years = min(
                self._time_to_use_up(room[0], self.rate, u_found, u_left),
                self._time_to_use_up(room[1], -self.rate, u_found, u_left),
            )
            if years <= 0.0:
                on, words = _as_day(start), f"the {percent} reaches the limit from the start"
            elif years > HORIZON_YEARS:
                words = f"the {percent} stays within the limit for more than {HORIZON_YEARS:g} years"
            else:
                on = _as_day(start) + timedelta(math.floor(years * DAYS_PER_YEAR))
                words = f"the {percent} meets the limit on {on.isoformat()}"
        return Meeting(start, start_value, lower_limit, upper_limit, on, years, words)

    def _time_to_use_up(self, room: float, rate: float, u_found: float, u_left: float) -> float:
        """First t ≥ 0 with rate·t + factor·√(a + q·t + c·t²) = room; infinite if there is none."""
        k2 = self.t_factor**2
        a, c = u_found**2 + u_left**2, self.se**2
        if math.isinf(room):
            return math.inf
        if room <= self.t_factor * math.sqrt(a):
            return 0.0
        second, first, constant = rate**2 - k2 * c, -(2.0 * room * rate + k2 * self.walk), room**2 - k2 * a
        times = [t for t in _roots(second, first, constant) if t > 0.0 and room - rate * t >= -1e-12 * room]
        return min(times, default=math.inf)


def _as_day(when: date) -> date:
    return when.date() if isinstance(when, datetime) else when


def _roots(second: float, first: float, constant: float) -> list[float]:
    """Real roots of second·t² + first·t + constant, without loss of digits where one is far smaller."""
    square = first * first - 4.0 * second * constant
    if square < 0.0:
        return []
    large = -0.5 * (first + math.copysign(math.sqrt(square), first))
    roots = []
    if second != 0.0:
        roots.append(large / second)
    if large != 0.0:
        roots.append(constant / large)
    return roots


def estimate_rate(pairing: Pairing, channel: str, confidence: float = 0.95) -> DriftRate:
    """Estimate the rate of one channel.

    Parameters
    ----------
    pairing : Pairing
        Pairs from `pair_tests`.
    channel : str
        Which channel.
    confidence : float
        Coverage of interval and band.

    Returns
    -------
    DriftRate
    """
    pairs = tuple(p for p in pairing.pairs if np.isfinite(p.differences.get(channel, math.nan)))
    n = len(pairs)
    notes = _notes(pairs)
    if n < LEAST_PAIRS:
        have = f"{n} {'pair' if n == 1 else 'pairs'} of tests"
        missing = f"not enough data: {have}, at least {LEAST_PAIRS} are needed"
        nan = math.nan
        return DriftRate(channel, pairs, confidence, n, False, nan, nan, nan, nan, nan, n - 1, nan, (missing, *notes))
    shared = [
        pairing.visits[one.end_index].shared_variance if one.end_index == next_one.start_index else 0.0
        for one, next_one in pairwise(pairs)
    ]
    covariance = error_covariance(
        [(p.u_end or 0.0) ** 2 for p in pairs], [(p.u_start or 0.0) ** 2 for p in pairs], shared
    )
    result = rates_from_differences([p.differences[channel] for p in pairs], [p.years for p in pairs], covariance)
    factor = float(special.stdtrit(n - 1, 0.5 + confidence / 2.0))
    rate, se = float(result.rate), float(result.se)
    if result.walk == 0.0 and se > 0.0:
        notes = (*notes, "the scatter is no larger than the uncertainty of the tests explains")
    if se == 0.0:
        notes = (
            *notes,
            "the differences agree to the last digit, so their scatter is hidden by their resolution",
        )
    return DriftRate(
        channel=channel,
        pairs=pairs,
        confidence=confidence,
        n=n,
        enough=True,
        rate=rate,
        se=se,
        lower=rate - factor * se,
        upper=rate + factor * se,
        walk=float(result.walk),
        dof=n - 1,
        t_factor=factor,
        notes=notes,
    )


def _notes(pairs: tuple[Pair, ...]) -> tuple[str, ...]:
    unknown = sum(p.u_start is None or p.u_end is None for p in pairs)
    if not unknown:
        return ()
    some = "any test" if unknown == len(pairs) else f"the tests of {unknown} of {len(pairs)} pairs"
    return (f"the uncertainty of {some} is not known and was taken as zero: all scatter counts as drift",)
