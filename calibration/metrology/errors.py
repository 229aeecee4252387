"""What a run of readings says about a transmitter.

How to read this file: a *run* is a series of readings, each an input actually applied and the output
current measured with it. The *points* of a run are the nominal inputs that were asked for [% of input
range]; a point is met on the way *up* and on the way *down*, in one *cycle* or several. Points need not be
symmetric nor complete. From the readings follow, in this order:

1. *Measured error* of each reading: e = (I_measured - I_ideal)/16 mA·100 %, the ideal taken at the input
   actually applied, not at the nominal point. *Inaccuracy* is the greatest |e| of the run.
2. *Averages* at each point, up and down apart. Their mean, point by point, is the *mean curve*.
3. *Zero error*: the mean curve at 0 %. *Span error*: the mean curve at 100 % less the zero error.
4. *Hysteresis*: the greatest |average up - average down| at one point. Dead band is included, as in IEC
   61298-2; ISA-51.1 calls that sum hysteretic error together with dead band and keeps the two apart, which
   takes a further test.
5. *Repeatability*: the greatest spread (highest less lowest) of readings at one point approached from the
   same side; it takes at least two cycles. 43 CFR 3175.135 defines it alike for three runs each way.
6. *Non-linearity* of the mean curve: the greatest deviation from a straight line, which is laid
   - *terminal-based*: through both end points,
   - *zero-based*: through the low end point, its slope making the greatest deviation least,
   - *independent*: where it makes the greatest deviation least (a minimax fit, exact, not least squares).
   For square root the curve is taken over the ideal output, so that this is the conformity of ISA-51.1.
7. *Fitted zero shift* a and *fitted span shift* b: least squares e = a + b·x over all readings that carry a
   measurement. They use every reading, so they differ from the zero and span errors, which use the end
   points alone: both are shown, each under its own name. For square root the input-referred error [% of
   input span] is fitted, weighted by the square of the slope dI/dp, because an input-side zero shift is
   then one number; it would otherwise look like a steep bend near zero.

A reading at or beyond the edge of the measuring signal (3.8 and 20.5 mA, NAMUR NE 43) is *clipped*: the
error computed from it, and from a failure current, is only a bound of the true one. It enters the
inaccuracy where it bounds from the right side, and nothing else. What cannot be said is NaN, never zero.

References
----------
IEC 61298-2:2008, Tests under reference conditions. ANSI/ISA-51.1, Process instrumentation terminology.
43 CFR 3175.132-135 (US law, the same quantities). NAMUR NE 43.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibration.metrology.evaluation import Level, RunEvaluation, ShiftFit
from calibration.metrology.linefit import greatest_bow, greatest_from_first, minimax_line, slope_from_first
from calibration.metrology.pointlist import DOWN, UP, PointList, directions_of, points_from_applied
from calibration.metrology.signal import (
    SPAN_MA,
    ZERO_MA,
    Signal,
    classify,
    error_percent,
    fraction_of_output,
    output_fraction,
    saturated,
    transfer_slope,
)

Floats = NDArray[np.float64]
Shape = tuple[bool, float, bool]
"""`square_root, low_cut, hold` as the functions of `signal` take them."""

FIGURES = (
    "worst_error",
    "zero_error",
    "span_error",
    "hysteresis",
    "repeatability",
    "nonlinearity_terminal",
    "nonlinearity_zero_based",
    "nonlinearity_independent",
    "zero_shift",
    "span_shift",
    "zero_se",
    "span_se",
    "residual_sd",
    "readings_used",
)


@dataclass(frozen=True)
class Layout:
    """Where the readings of a point list belong: which columns are which point, and from which side.

    Attributes
    ----------
    points, directions : tuple
        As applied.
    levels : array, shape (m,)
        The different points, ascending [%].
    up, down : array, shape (m, n)
        1 where a reading belongs to a point from that side, else 0.
    """

    points: tuple[float, ...]
    directions: tuple[int, ...]
    levels: Floats
    up: Floats
    down: Floats

    @property
    def zero(self) -> int | None:
        """Index of the level at 0 %."""
        return self._level_at(0.0)

    @property
    def full(self) -> int | None:
        """Index of the level at 100 %."""
        return self._level_at(100.0)

    def _level_at(self, percent: float) -> int | None:
        found = np.flatnonzero(np.abs(self.levels - percent) < 1e-6)
        return int(found[0]) if found.size else None

    @property
    def repeated(self) -> list[NDArray[np.intp]]:
        """Columns of each point and side that was met at least twice."""
        sides = np.concatenate([self.up, self.down])
        return [np.flatnonzero(row) for row in sides if row.sum() >= 2]


@lru_cache(maxsize=256)
def layout_of(points: tuple[float, ...], directions: tuple[int, ...]) -> Layout:
    """Lay out a point list; NaN points (readings of which nothing is known) belong nowhere."""
    p, way = np.array(points, dtype=np.float64), np.array(directions)
    levels = np.unique(p[np.isfinite(p)])
    member = p == levels[:, None]
    return Layout(
        points=points,
        directions=directions,
        levels=levels,
        up=(member & (way == UP)).astype(np.float64),
        down=(member & (way == DOWN)).astype(np.float64),
    )


def curve_figures(layout: Layout, curve_x: Floats, mean: Floats) -> dict[str, Floats]:
    """Zero, span and non-linearity from mean curves; `curve_x` and `mean` have shape (levels, runs)."""
    unknown = np.full(mean.shape[1], np.nan)
    zero = mean[layout.zero] if layout.zero is not None else unknown
    figures = {
        "zero_error": zero,
        "span_error": mean[layout.full] - zero if layout.full is not None else unknown,
        "nonlinearity_terminal": unknown,
        "nonlinearity_zero_based": unknown,
        "nonlinearity_independent": unknown,
    }
    if len(layout.levels) >= 3:
        # Inputs read in disorder make no curve; gaps are passed over, so that 0, –, 0 is disorder too.
        there = np.where(np.isnan(mean), np.nan, curve_x)
        in_order = ~(there[1:] <= np.fmax.accumulate(there, axis=0)[:-1]).any(axis=0)
        x = np.where(in_order, curve_x, np.nan) if not in_order.all() else curve_x
        slope = (mean[-1] - mean[0]) / (x[-1] - x[0])
        off = mean[1:-1] - mean[0] - slope * (x[1:-1] - x[0])
        figures["nonlinearity_terminal"] = np.fmax.reduce(np.abs(off), axis=0)
        figures["nonlinearity_zero_based"] = greatest_from_first(x, mean)
        figures["nonlinearity_independent"] = greatest_bow(x, mean)
    return figures


def _fit_figures(x: Floats, y: Floats, weight: Floats) -> dict[str, Floats]:
    """Weighted least squares y = a + b·x down each column; weight 0 leaves a reading out."""
    used = weight > 0.0
    y = np.where(used, y, 0.0)
    x = np.where(used, x, 0.0)
    count = used.sum(axis=0).astype(np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        total = weight.sum(axis=0)
        x_mean = (weight * x).sum(axis=0) / total
        y_mean = (weight * y).sum(axis=0) / total
        dx = x - x_mean
        sxx = (weight * dx * dx).sum(axis=0)
        sxx[sxx <= 1e-18 * total] = np.nan
        b = (weight * dx * y).sum(axis=0) / sxx
        a = y_mean - b * x_mean
        residual = y - y_mean - b * dx
        dof = np.where(count > 2.0, count - 2.0, np.nan)
        variance = (weight * residual * residual).sum(axis=0) / dof
        return {
            "zero_shift": a,
            "span_shift": b,
            "zero_se": np.sqrt(variance * (1.0 / total + x_mean * x_mean / sxx)),
            "span_se": np.sqrt(variance / sxx),
            "residual_sd": np.sqrt(variance),
            "readings_used": count,
        }


@dataclass(frozen=True, eq=False)
class _Curves:
    """Averages at each point; arrays of shape (levels, runs)."""

    x: Floats
    up: Floats
    down: Floats
    mean: Floats


def _side_means(side: Floats, values: Floats, used: Floats) -> Floats:
    with np.errstate(divide="ignore", invalid="ignore"):
        mean: Floats = (side @ (values * used)) / (side @ used)
    return mean


def _middle(up: Floats, down: Floats) -> Floats:
    return np.where(np.isnan(up), down, np.where(np.isnan(down), up, 0.5 * (up + down)))


def figures_of_any(
    layout: Layout, x: Floats, measured: Floats, shape: Shape
) -> tuple[dict[str, Floats], _Curves, Floats]:
    """Figures of runs that may hold missing, clipped and failed readings, linear or square root.

    Parameters
    ----------
    layout : Layout
        Point list that all runs share.
    x : array, shape (n, runs)
        Fraction of range applied.
    measured : array, shape (n, runs)
        Current [mA].
    shape : tuple
        `square_root, low_cut, hold`, one transfer for all runs.

    Returns
    -------
    dict of array, _Curves, array
        `FIGURES`; the averages; errors that carry a measurement or a bound [% of output span], else NaN.
    """
    f = output_fraction(x, *shape)
    error = error_percent(measured, ZERO_MA + SPAN_MA * f)
    edge = saturated(measured)
    usable = np.isfinite(error) & (edge == 0) & np.isfinite(layout.points)[:, None]
    bounds = np.where(usable | (edge * error > 0.0), error, np.nan)
    highest: Floats = np.fmax.reduce(bounds, axis=0, initial=np.nan)
    lowest: Floats = np.fmin.reduce(bounds, axis=0, initial=np.nan)
    used = usable.astype(np.float64)
    known = np.where(usable, error, 0.0)

    up, down = _side_means(layout.up, known, used), _side_means(layout.down, known, used)
    place = np.where(usable, f, 0.0)
    curve_x = _middle(_side_means(layout.up, place, used), _side_means(layout.down, place, used))
    curves = _Curves(curve_x, up, down, _middle(up, down))

    figures = curve_figures(layout, curves.x, curves.mean)
    figures["worst_error"] = np.where(highest >= -lowest, highest, lowest)
    figures["hysteresis"] = np.fmax.reduce(np.abs(up - down), axis=0, initial=np.nan)
    spread = np.full(error.shape[1], np.nan)
    for columns in layout.repeated:
        np.fmax(spread, _spread(np.where(usable[columns], error[columns], np.nan)), out=spread)
    figures["repeatability"] = spread

    if shape[0]:
        referred = (fraction_of_output((measured - ZERO_MA) / SPAN_MA, *shape) - x) * 100.0
        slope = transfer_slope(x, *shape)
        fits = usable & np.isfinite(referred) & np.isfinite(slope) & (measured > ZERO_MA)
        figures |= _fit_figures(x, referred, np.where(fits, slope * slope, 0.0))
    else:
        figures |= _fit_figures(x, error, used)
    return figures, curves, bounds


def _spread(errors: Floats) -> Floats:
    """Highest less lowest down each column; NaN with fewer than two readings."""
    several = np.isfinite(errors).sum(axis=0) >= 2
    return np.where(several, np.fmax.reduce(errors, axis=0) - np.fmin.reduce(errors, axis=0), np.nan)


def _series(values: Sequence[float | None] | ArrayLike) -> Floats:
    if isinstance(values, np.ndarray):
        return np.asarray(values, dtype=np.float64)
    return np.array([np.nan if v is None else v for v in values], dtype=np.float64)  # type: ignore[union-attr]


def evaluate_run(
    applied: Sequence[float | None] | ArrayLike | None,
    measured: Sequence[float | None] | ArrayLike,
    signal: Signal,
    *,
    points: PointList | Sequence[float] | None = None,
    directions: Sequence[int] | None = None,
) -> RunEvaluation:
    """Evaluate one run of readings.

    Parameters
    ----------
    applied : sequence, shape (n,), or None
        Inputs actually applied, in the unit of `signal`, None or NaN where missing. None alone: the points
        themselves.
    measured : sequence, shape (n,)
        Currents measured [mA], None or NaN where missing.
    signal : Signal
        The configured range.
    points : PointList or sequence, optional
        Nominal points [% of input range]. Not known: the inputs applied are grouped within 1 % of range.
    directions : sequence of int, optional
        +1 up, -1 down; else they follow from the points.

    Returns
    -------
    RunEvaluation

    Raises
    ------
    ValueError
        If the series differ in length, or neither inputs nor points are given.
    """
    i = _series(measured)
    if applied is None and points is None:
        raise ValueError("A run needs the inputs that were applied, or its nominal points.")
    if points is None:
        p = _series(applied)  # type: ignore[arg-type]
        named = points_from_applied(signal.percent_of_input(p))
    else:
        named = np.array(points.points if isinstance(points, PointList) else points, dtype=np.float64)
        p = np.asarray(signal.input_of_percent(named)) if applied is None else _series(applied)
    if directions is not None:
        way = np.asarray(directions, dtype=np.int8)
    elif isinstance(points, PointList):
        way = np.array(points.directions, dtype=np.int8)
    else:
        way = np.full(named.shape, UP, dtype=np.int8)
        way[np.isfinite(named)] = directions_of(named[np.isfinite(named)])
    if not len(p) == len(i) == len(named) == len(way):
        raise ValueError(
            "A run needs one input, output, point and direction for each reading; there are "
            f"{len(p)} inputs, {len(i)} outputs, {len(named)} points and {len(way)} directions."
        )

    layout = layout_of(tuple(named.tolist()), tuple(int(d) for d in way))
    x = np.asarray(signal.fraction(p))
    arrays, curves, bounds = figures_of_any(layout, x[:, None], i[:, None], signal.shape)
    figure = {name: float(values[0]) for name, values in arrays.items()}
    ideal = np.asarray(signal.ideal_current(p))
    error = error_percent(i, ideal)
    usable = np.isfinite(error) & (saturated(i) == 0)
    levels = _levels(layout, x, error, usable, curves)
    gaps = [level.hysteresis for level in levels]
    bound = np.abs(bounds[:, 0])
    return RunEvaluation(
        applied=p,
        measured=i,
        signal=signal,
        points=named,
        directions=way,
        ideal=ideal,
        error=error,
        input_error=np.asarray(signal.input_error(p, i)),
        states=np.asarray(classify(i)),
        usable=usable,
        complete=bool(np.isfinite(p).all() and np.isfinite(i).all()) and len(p) > 0,
        levels=levels,
        worst_index=int(np.nanargmax(bound)) if np.isfinite(bound).any() else None,
        worst_error=figure["worst_error"],
        inaccuracy=abs(figure["worst_error"]),
        zero_error=figure["zero_error"],
        span_error=figure["span_error"],
        hysteresis=figure["hysteresis"],
        hysteresis_at=levels[int(np.nanargmax(gaps))].point if np.isfinite(gaps).any() else float("nan"),
        repeatability=figure["repeatability"],
        nonlinearity_terminal=figure["nonlinearity_terminal"],
        nonlinearity_zero_based=figure["nonlinearity_zero_based"],
        nonlinearity_independent=figure["nonlinearity_independent"],
        independent_line=_independent_line(curves, figure["nonlinearity_independent"]),
        zero_based_line=_zero_based_line(curves, figure["nonlinearity_zero_based"]),
        fit=ShiftFit(
            zero_shift=figure["zero_shift"],
            span_shift=figure["span_shift"],
            zero_se=figure["zero_se"],
            span_se=figure["span_se"],
            residual_sd=figure["residual_sd"],
            readings=int(figure["readings_used"]),
            dof=int(figure["readings_used"]) - 2,
            input_referred=signal.is_square_root,
        ),
    )


def _levels(layout: Layout, x: Floats, error: Floats, usable: NDArray[np.bool_], curves: _Curves) -> tuple[Level, ...]:
    used, place = usable.astype(np.float64)[:, None], np.where(usable, x, 0.0)[:, None]
    percent = 100.0 * _middle(_side_means(layout.up, place, used), _side_means(layout.down, place, used))[:, 0]
    known = np.where(usable, error, np.nan)[:, None]
    spreads = [
        [float(_spread(known[side[m] > 0.0])[0]) if side[m].any() else float("nan") for m in range(len(layout.levels))]
        for side in (layout.up, layout.down)
    ]
    return tuple(
        Level(
            point=float(layout.levels[m]),
            input_percent=float(percent[m]),
            up=float(curves.up[m, 0]),
            down=float(curves.down[m, 0]),
            mean=float(curves.mean[m, 0]),
            hysteresis=abs(float(curves.up[m, 0] - curves.down[m, 0])),
            spread_up=spreads[0][m],
            spread_down=spreads[1][m],
        )
        for m in range(len(layout.levels))
    )


def _independent_line(curves: _Curves, deviation: float) -> tuple[float, float]:
    if deviation != deviation:
        return (float("nan"), float("nan"))
    there = np.isfinite(curves.mean[:, 0])
    line = minimax_line(curves.x[there, 0], curves.mean[there, 0])
    return (line.intercept, line.slope)


def _zero_based_line(curves: _Curves, deviation: float) -> tuple[float, float]:
    if deviation != deviation:
        return (float("nan"), float("nan"))
    there = np.isfinite(curves.mean[:, 0])
    x, mean = curves.x[there, 0], curves.mean[there, 0]
    slope = slope_from_first(x, mean)
    return (float(mean[0] - slope * x[0]), slope)
