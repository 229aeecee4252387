"""Straight lines through points: least squares with its covariance, and the line of least greatest deviation.

Least squares answers "what is the trend and how well is it known"; the minimax line answers "how far from
straight is this curve", which is what independent non-linearity asks.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class LineFit:
    """A straight line y = a + b·(x - origin) fitted by least squares, with what is needed to use it.

    Attributes
    ----------
    x, y, weights, origin, through_origin, absolute_weights
        As given to `fit_line`.
    intercept, slope : float
        a in the unit of y, b in the unit of y per unit of x.
    covariance : array, shape (2, 2)
        Covariance of (a, b); NaN where nothing is left over to estimate the scatter from.
    residual_sd : float
        Standard deviation of the residuals (of unit weight), with `dof` degrees of freedom.
    dof : int
        Points less fitted coefficients.
    r_squared : float
        Share of the sum of squares explained; about zero, not about the mean, for a line through the origin.
    residuals : array
        y less the line.
    """

    x: Floats
    y: Floats
    weights: Floats
    origin: float
    through_origin: bool
    absolute_weights: bool
    intercept: float
    slope: float
    covariance: Floats
    residual_sd: float
    dof: int
    r_squared: float
    residuals: Floats

    @property
    def intercept_se(self) -> float:
        """Standard error of the intercept."""
        return float(np.sqrt(self.covariance[0, 0]))

    @property
    def slope_se(self) -> float:
        """Standard error of the slope."""
        return float(np.sqrt(self.covariance[1, 1]))

    @property
    def correlation(self) -> float:
        """Correlation of intercept and slope; NaN for a line through the origin."""
        scale = self.intercept_se * self.slope_se
        return float(self.covariance[0, 1] / scale) if scale > 0.0 else float("nan")

    def predict(self, x: ArrayLike) -> Floats:
        """Height of the line at x."""
        return self.intercept + self.slope * (np.asarray(x, dtype=np.float64) - self.origin)

    def predict_se(self, x: ArrayLike, of_new_reading: bool = False) -> Floats:
        """Standard error of the line at x, or of a single new reading of unit weight there."""
        d = np.asarray(x, dtype=np.float64) - self.origin
        c = self.covariance
        variance = c[0, 0] + 2.0 * d * c[0, 1] + d * d * c[1, 1]
        return np.asarray(np.sqrt(variance + (self.residual_sd**2 if of_new_reading else 0.0)))

    def student_factor(self, confidence: float = 0.95) -> float:
        """Two-sided coverage factor; normal where the weights are absolute."""
        tail = 0.5 + confidence / 2.0
        return float(special.ndtri(tail) if self.absolute_weights else special.stdtrit(self.dof, tail))

    def prediction_interval(
        self, x: ArrayLike, confidence: float = 0.95, of_new_reading: bool = False
    ) -> tuple[Floats, Floats]:
        """Two-sided interval for the line at x, or for a single new reading there."""
        half = self.student_factor(confidence) * self.predict_se(x, of_new_reading)
        return self.predict(x) - half, self.predict(x) + half

    def slope_interval(self, confidence: float = 0.95) -> tuple[float, float]:
        """Two-sided interval for the slope."""
        half = self.student_factor(confidence) * self.slope_se
        return self.slope - half, self.slope + half


def fit_line(
    x: ArrayLike,
    y: ArrayLike,
    weights: ArrayLike | None = None,
    *,
    origin: float = 0.0,
    through_origin: bool = False,
    absolute_weights: bool = False,
) -> LineFit:
    """Fit a straight line by (weighted) least squares.

    Parameters
    ----------
    x, y : array, shape (n,)
        Points; all finite.
    weights : array, shape (n,), optional
        Weights, inversely proportional to the variance of each y.
    origin : float
        The x at which the intercept is taken.
    through_origin : bool
        Force the line through y = 0 at `origin`.
    absolute_weights : bool
        The weights are 1/u² with u known, so the covariance is not scaled by the residuals.

    Returns
    -------
    LineFit

    Raises
    ------
    ValueError
        If there are too few points, values that are not numbers, or all x equal.

    Notes
    -----
    Sums are centred, which keeps the certified digits of NIST's StRD data sets in double precision
    [1]_. Uncertainty of the coefficients and of a value read from the line as in JCGM 100:2008, H.3 [2]_.

    .. [1] NIST Statistical Reference Datasets, Linear Regression.
    .. [2] JCGM 100:2008, Annex H.3, Calibration of a thermometer.
    """
    given_x, given_y = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if given_x.ndim != 1 or given_x.shape != given_y.shape:
        raise ValueError(f"A line needs as many x as y; got shapes {given_x.shape} and {given_y.shape}.")
    w = np.ones_like(given_x) if weights is None else np.asarray(weights, dtype=np.float64)
    coefficients = 1 if through_origin else 2
    if given_x.size < coefficients:
        raise ValueError(f"A line needs at least {coefficients} points; there are {given_x.size}.")
    if not (np.isfinite(given_x).all() and np.isfinite(given_y).all()):
        raise ValueError("Points of a line must be numbers; leave missing ones out.")
    if w.shape != given_x.shape or not np.isfinite(w).all() or not (w > 0.0).all():
        raise ValueError("Weights must be one positive number for each point.")

    d = given_x - origin
    total = w.sum()
    centre_x = 0.0 if through_origin else float((w * d).sum() / total)
    centre_y = 0.0 if through_origin else float((w * given_y).sum() / total)
    dx, dy = d - centre_x, given_y - centre_y
    sxx = float((w * dx * dx).sum())
    if sxx == 0.0:
        raise ValueError("All points lie at one x: no line can be laid through them.")
    slope = float((w * dx * dy).sum()) / sxx
    residuals = dy - slope * dx
    left_over = float((w * residuals * residuals).sum())
    dof = given_x.size - coefficients
    variance = left_over / dof if dof else float("nan")
    scale = 1.0 if absolute_weights else variance
    slope_variance = scale / sxx
    mean_variance = 0.0 if through_origin else scale / float(total)
    cross = -centre_x * slope_variance
    covariance = np.array([[mean_variance + centre_x**2 * slope_variance, cross], [cross, slope_variance]])
    explained = float((w * dy * dy).sum())
    return LineFit(
        x=given_x,
        y=given_y,
        weights=w,
        origin=origin,
        through_origin=through_origin,
        absolute_weights=absolute_weights,
        intercept=centre_y - slope * centre_x,
        slope=slope,
        covariance=covariance,
        residual_sd=float(np.sqrt(variance)),
        dof=dof,
        r_squared=1.0 - left_over / explained if explained > 0.0 else float("nan"),
        residuals=residuals,
    )


@dataclass(frozen=True, eq=False)
class MinimaxLine:
    """The straight line whose greatest deviation from the points is least.

    Attributes
    ----------
    x, y : array
        Points, in ascending x.
    intercept, slope : float
        The line y = intercept + slope·x.
    deviation : float
        Greatest distance, in y, of a point from the line.
    """

    x: Floats
    y: Floats
    intercept: float
    slope: float
    deviation: float


def _ascending(x: ArrayLike, y: ArrayLike, least: int) -> tuple[Floats, Floats]:
    given_x, given_y = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if given_x.ndim != 1 or given_x.shape != given_y.shape or given_x.size < least:
        raise ValueError(f"A line needs at least {least} points with an x and a y each.")
    order = np.argsort(given_x)
    given_x, given_y = given_x[order], given_y[order]
    if not (np.diff(given_x) > 0.0).all() or not np.isfinite(given_y).all():
        raise ValueError("The points must be numbers at different x.")
    return given_x, given_y


def minimax_line(x: ArrayLike, y: ArrayLike) -> MinimaxLine:
    """Lay the line that minimises the greatest deviation, exactly.

    Parameters
    ----------
    x, y : array, shape (n,)
        At least two points at different x, in any order.

    Returns
    -------
    MinimaxLine

    Raises
    ------
    ValueError
        If there are fewer than two points, or two at the same x.

    Notes
    -----
    Three points in order of x are best served by the line half-way between the chord of the outer two
    and the middle one. The whole set is best served by the best line of its worst three points, since the
    greatest deviation is a maximum of convex functions of two unknowns and is therefore fixed by three of
    them (alternation theorem, Helly).
    """
    px, py = _ascending(x, y, 2)
    if px.size == 2:
        slope = float((py[1] - py[0]) / (px[1] - px[0]))
        return MinimaxLine(px, py, float(py[0] - slope * px[0]), slope, 0.0)
    i, j, k = np.array(list(combinations(range(px.size), 3))).T
    chord = (py[k] - py[i]) / (px[k] - px[i])
    bow = (py[j] - py[i]) - chord * (px[j] - px[i])
    worst = int(np.argmax(np.abs(bow)))
    slope = float(chord[worst])
    intercept = float(py[i[worst]] - slope * px[i[worst]] + bow[worst] / 2.0)
    return MinimaxLine(px, py, intercept, slope, float(abs(bow[worst]) / 2.0))


def minimax_line_through_first(x: ArrayLike, y: ArrayLike) -> MinimaxLine:
    """Lay the line through the first point (least x) that minimises the greatest deviation, exactly.

    Parameters
    ----------
    x, y : array, shape (n,)
        At least two points at different x, in any order.

    Returns
    -------
    MinimaxLine

    Raises
    ------
    ValueError
        If there are fewer than two points, or two at the same x.

    Notes
    -----
    With one unknown the greatest deviation is fixed by two points; the slope leaves both with equal
    and opposite deviations.
    """
    px, py = _ascending(x, y, 2)
    u, v = px[1:] - px[0], py[1:] - py[0]
    if u.size == 1:
        slope, deviation = float(v[0] / u[0]), 0.0
    else:
        i, j = np.array(list(combinations(range(u.size), 2))).T
        least = np.abs(v[i] * u[j] - v[j] * u[i]) / (u[i] + u[j])
        worst = int(np.argmax(least))
        slope = float((v[i[worst]] + v[j[worst]]) / (u[i[worst]] + u[j[worst]]))
        deviation = float(least[worst])
    return MinimaxLine(px, py, float(py[0] - slope * px[0]), slope, deviation)


def greatest_bow(x: Floats, y: Floats) -> Floats:
    """Deviation of the minimax line for many curves at once.

    Parameters
    ----------
    x : array, shape (m, n) or (m, 1)
        Ascending abscissas of n curves of m points.
    y : array, shape (m, n)
        Heights; NaN points are passed over.

    Returns
    -------
    array, shape (n,)
        Greatest deviation from the best line; NaN for a curve with fewer than three points, which bends
        nowhere.
    """
    greatest = np.full(y.shape[1], np.nan)
    for i, k in combinations(range(y.shape[0]), 2):
        if k - i < 2:
            continue
        chord = (y[k] - y[i]) / (x[k] - x[i])
        bow = y[i + 1 : k] - y[i] - chord * (x[i + 1 : k] - x[i])
        np.fmax(greatest, 0.5 * np.fmax.reduce(np.abs(bow), axis=0), out=greatest)
    return greatest


def greatest_from_first(x: Floats, y: Floats) -> Floats:
    """Deviation of the minimax line through the first point, for many curves at once.

    Parameters
    ----------
    x, y : array
        As for `greatest_bow`.

    Returns
    -------
    array, shape (n,)
        Greatest deviation; NaN where the first point is missing or fewer than two others are left.
    """
    u, v = x[1:] - x[0], y[1:] - y[0]
    greatest = np.full(y.shape[1], np.nan)
    for i in range(v.shape[0] - 1):
        least = np.abs(v[i] * u[i + 1 :] - v[i + 1 :] * u[i]) / (u[i] + u[i + 1 :])
        np.fmax(greatest, np.fmax.reduce(least, axis=0), out=greatest)
    return greatest


def slope_from_first(x: ArrayLike, y: ArrayLike) -> float:
    """Slope of the line through the first point that makes the greatest deviation of the others least.

    Parameters
    ----------
    x, y : array, shape (n,)
        One curve, x ascending, without gaps.

    Returns
    -------
    float
        NaN with fewer than two other points.

    Notes
    -----
    The greatest deviation stands at two points, above the line at one and below it at the other; see
    `greatest_from_first`.
    """
    u, v = (np.asarray(values, dtype=np.float64)[1:] - np.asarray(values, dtype=np.float64)[0] for values in (x, y))
    pairs = [
        (abs(v[i] * u[j] - v[j] * u[i]) / (u[i] + u[j]), (v[i] + v[j]) / (u[i] + u[j]))
        for i, j in combinations(range(len(u)), 2)
    ]
    return float(max(pairs)[1]) if pairs else float("nan")
