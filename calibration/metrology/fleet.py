"""The arithmetic of `errors` over very many runs at once, in blocks of bounded memory.

Runs that share a point list are evaluated together, column by column, with the readings of a block turned
so that each operation runs along the runs. Clean linear runs take a short way; runs with missing, clipped
or failed readings and square-root runs take the way of a single run. Both give the same figures.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibration.metrology.errors import FIGURES, Layout, curve_figures, figures_of_any, layout_of
from calibration.metrology.pointlist import PointList, directions_of
from calibration.metrology.signal import MEASURING_HIGH_MA, MEASURING_LOW_MA, SPAN_MA, ZERO_MA

Floats = NDArray[np.float64]

#: Multiplications of one matrix product in a block: beyond, BLAS calls in further threads, which wait for each other
#: longer than they work, and much longer on a machine that is busy.
PRODUCT = 2**18


@dataclass(frozen=True, eq=False)
class FleetFigures:
    """Figures of many runs; each an array of shape (runs,), [% of output span], NaN where it cannot be said.

    Attributes
    ----------
    applied, measured : array
        Inputs applied and currents measured [mA], as given.
    lrv, urv : array
        Range-values, as given.
    worst_error : array
        Error with the greatest size, signed.
    zero_error, span_error, hysteresis, repeatability : array
    nonlinearity_terminal, nonlinearity_zero_based, nonlinearity_independent : array
    zero_shift, span_shift, zero_se, span_se, residual_sd : array
        Fitted shifts, their standard errors, scatter about the fit.
    readings_used : array
        Readings that took part in the fit.
    """

    applied: Floats | None = field(repr=False)
    measured: Floats = field(repr=False)
    lrv: Floats = field(repr=False)
    urv: Floats = field(repr=False)
    worst_error: Floats
    zero_error: Floats
    span_error: Floats
    hysteresis: Floats
    repeatability: Floats
    nonlinearity_terminal: Floats
    nonlinearity_zero_based: Floats
    nonlinearity_independent: Floats
    zero_shift: Floats
    span_shift: Floats
    zero_se: Floats
    span_se: Floats
    residual_sd: Floats
    readings_used: Floats

    @property
    def inaccuracy(self) -> Floats:
        """Greatest |e| of each run."""
        return np.abs(self.worst_error)


class _Clean:
    """The short way for linear runs whose readings all carry a measurement."""

    def __init__(self, layout: Layout) -> None:
        self.layout = layout
        both = (layout.up.sum(axis=1) > 0) & (layout.down.sum(axis=1) > 0)
        up = layout.up / np.maximum(layout.up.sum(axis=1, keepdims=True), 1.0)
        down = layout.down / np.maximum(layout.down.sum(axis=1, keepdims=True), 1.0)
        self.middle = np.where(both[:, None], 0.5, 1.0) * (up + down)
        self.gap = (up - down)[both]

    def figures(self, x: Floats, measured: Floats) -> dict[str, Floats]:
        """Figures of clean runs; `measured` has shape (readings, runs), `x` too or (readings, 1)."""
        n, runs = measured.shape
        error = (measured - ZERO_MA) * (100.0 / SPAN_MA)
        error -= 100.0 * x
        highest, lowest = error.max(axis=0), error.min(axis=0)
        unknown = np.full(runs, np.nan)
        figures = curve_figures(self.layout, self.middle @ x, self.middle @ error)
        figures["worst_error"] = np.where(highest >= -lowest, highest, lowest)
        figures["hysteresis"] = np.abs(self.gap @ error).max(axis=0) if len(self.gap) else unknown
        spread = unknown
        for columns in self.layout.repeated:
            several = error[columns]
            spread = np.fmax(spread, several.max(axis=0) - several.min(axis=0))
        figures["repeatability"] = spread

        x_mean, e_mean = x.mean(axis=0), error.mean(axis=0)
        dx = x - x_mean
        sxx = np.einsum("ij,ij->j", dx, dx)
        sxx[sxx <= 1e-18 * n] = np.nan
        slope = np.einsum("ij,ij->j", np.broadcast_to(dx, error.shape), error) / sxx
        error -= e_mean
        error -= slope * dx
        variance = np.einsum("ij,ij->j", error, error) / (n - 2) if n > 2 else unknown
        figures["zero_shift"] = e_mean - slope * x_mean
        figures["span_shift"] = slope
        figures["zero_se"] = np.sqrt(variance * (1.0 / n + x_mean * x_mean / sxx))
        figures["span_se"] = np.sqrt(variance / sxx)
        figures["residual_sd"] = np.sqrt(variance)
        figures["readings_used"] = np.full(runs, float(n))
        return figures


def _blocks(runs: int, block: int) -> Iterator[slice]:
    return (slice(start, min(start + block, runs)) for start in range(0, runs, block))


def evaluate_runs(
    applied: ArrayLike | None,
    measured: ArrayLike,
    lrv: ArrayLike,
    urv: ArrayLike,
    *,
    points: PointList | Sequence[float],
    directions: Sequence[int] | None = None,
    square_root: ArrayLike = False,
    low_cut: ArrayLike = 0.0,
    hold: ArrayLike = False,
    block: int | None = None,
) -> FleetFigures:
    """Evaluate many runs over one point list.

    Parameters
    ----------
    applied : array, shape (runs, readings) or (readings,), or None
        Inputs actually applied [unit of the range-values]; NaN where missing. None: the points themselves.
    measured : array, shape (runs, readings)
        Currents measured [mA]; NaN where missing.
    lrv, urv : float or array, shape (runs,)
        Range-values.
    points : PointList or sequence, shape (readings,)
        Nominal points [% of input range].
    directions : sequence of int, optional
        +1 up, -1 down; else they follow from the points.
    square_root, low_cut, hold : scalar or array, shape (runs,)
        Transfer of each run, as for `signal.output_fraction`.
    block : int, optional
        Runs evaluated at a time, else as many as suit the machine; beside its results the work takes memory for one
        block only.

    Returns
    -------
    FleetFigures

    Raises
    ------
    ValueError
        If shapes do not fit each other.
    """
    i = np.asarray(measured, dtype=np.float64)
    named = points if isinstance(points, PointList) else None
    p = np.array(named.points if named else points, dtype=np.float64)
    if i.ndim != 2 or i.shape[1] != len(p):
        raise ValueError(f"Outputs must have shape (runs, {len(p)}); they have {i.shape}.")
    runs = i.shape[0]
    way = directions if directions is not None else (named.directions if named else directions_of(p))
    if len(way) != len(p):
        raise ValueError(f"There are {len(p)} points but {len(way)} directions.")
    layout = layout_of(tuple(p.tolist()), tuple(int(d) for d in way))
    clean = _Clean(layout)
    given = None if applied is None else np.asarray(applied, dtype=np.float64)
    if given is not None and given.shape not in (i.shape, (len(p),)):
        raise ValueError(f"Inputs have shape {given.shape}; outputs have {i.shape}.")

    low, high = np.asarray(lrv, dtype=np.float64), np.asarray(urv, dtype=np.float64)
    lows, highs = np.broadcast_to(low, runs), np.broadcast_to(high, runs)
    roots = np.broadcast_to(np.asarray(square_root, dtype=bool), runs)
    cuts = np.broadcast_to(np.asarray(low_cut, dtype=np.float64), runs)
    holds = np.broadcast_to(np.asarray(hold, dtype=bool), runs)
    out = {name: np.empty(runs) for name in FIGURES}

    for rows in _blocks(runs, block or max(1, PRODUCT // clean.middle.size)):
        current = np.ascontiguousarray(i[rows].T)
        fraction = _fractions(given, p, rows, lows[rows], highs[rows])
        rough = _rough(current, fraction) | roots[rows]
        if not rough.any():
            _store(out, rows, clean.figures(fraction, current))
            continue
        here = np.arange(rows.start, rows.stop)
        fraction = np.broadcast_to(fraction, current.shape)
        if not rough.all():
            _store(out, here[~rough], clean.figures(fraction[:, ~rough], current[:, ~rough]))
        for shape, chosen in _by_shape(rough, roots[rows], cuts[rows], holds[rows]):
            figures, _, _ = figures_of_any(layout, fraction[:, chosen], current[:, chosen], shape)
            _store(out, here[chosen], figures)
    return FleetFigures(applied=given, measured=i, lrv=low, urv=high, **out)


def _fractions(given: Floats | None, points: Floats, rows: slice, lrv: Floats, urv: Floats) -> Floats:
    """Fractions of range of a block, shape (readings, runs), or (readings, 1) where all runs share them."""
    if given is None:
        return (points / 100.0)[:, None]
    inputs = given[:, None] if given.ndim == 1 else np.ascontiguousarray(given[rows].T)
    x = inputs - lrv
    x *= 1.0 / (urv - lrv)
    return x


def _rough(current: Floats, fraction: Floats) -> NDArray[np.bool_]:
    """Runs with a missing, clipped or failed reading; most blocks are settled by their two extremes."""
    edge = 1e-9
    low, high = MEASURING_LOW_MA + edge, MEASURING_HIGH_MA - edge
    if current.min() > low and current.max() < high and np.isfinite(fraction.sum()):
        return np.zeros(current.shape[1], dtype=bool)
    good = (current > low) & (current < high) & np.isfinite(fraction)
    return np.asarray(~good.all(axis=0))


def _by_shape(
    rough: NDArray[np.bool_], roots: NDArray[np.bool_], cuts: Floats, holds: NDArray[np.bool_]
) -> Iterator[tuple[tuple[bool, float, bool], NDArray[np.bool_]]]:
    linear = rough & ~roots
    if linear.any():
        yield (False, 0.0, False), linear
    for cut in np.unique(cuts[roots]):
        for hold in (False, True):
            chosen = roots & (cuts == cut) & (holds == hold)
            if chosen.any():
                yield (True, float(cut), hold), chosen


def _store(out: dict[str, Floats], rows: slice | NDArray[np.intp], figures: dict[str, Floats]) -> None:
    for name, values in out.items():
        values[rows] = figures[name]


def evaluate_ragged(
    applied: ArrayLike | None,
    measured: ArrayLike,
    points: ArrayLike,
    directions: ArrayLike,
    starts: ArrayLike,
    lrv: ArrayLike,
    urv: ArrayLike,
    *,
    square_root: ArrayLike = False,
    low_cut: ArrayLike = 0.0,
    hold: ArrayLike = False,
    block: int | None = None,
) -> FleetFigures:
    """Evaluate runs of different length and point list, given end to end.

    Parameters
    ----------
    applied, measured, points, directions : array, shape (all readings,)
        Inputs [unit of the range-values] (None: the points themselves), currents [mA], points [%], +1 / -1,
        run by run.
    starts : array of int, shape (runs,)
        Index of the first reading of each run; a run reaches to the start of the next.
    lrv, urv, square_root, low_cut, hold : scalar or array, shape (runs,)
        As for `evaluate_runs`.
    block : int, optional
        Runs evaluated at a time, else as many as suit the machine.

    Returns
    -------
    FleetFigures

    Raises
    ------
    ValueError
        If the series differ in length, or `starts` does not rise from 0.
    """
    i = np.asarray(measured, dtype=np.float64)
    p, way = np.asarray(points, dtype=np.float64), np.asarray(directions, dtype=np.int8)
    given = None if applied is None else np.asarray(applied, dtype=np.float64)
    begin = np.asarray(starts, dtype=np.intp)
    if not i.shape == p.shape == way.shape or (given is not None and given.shape != i.shape):
        raise ValueError("Every reading needs an input, an output, a point and a direction.")
    length = np.diff(begin, append=i.size)
    if begin.size and (begin[0] != 0 or (length <= 0).any()):
        raise ValueError("Runs must start at 0, follow one another, and hold at least one reading each.")
    runs = begin.size
    low, high = np.asarray(lrv, dtype=np.float64), np.asarray(urv, dtype=np.float64)
    per_run = [np.broadcast_to(np.asarray(v), runs) for v in (low, high, square_root, low_cut, hold)]
    out = {name: np.empty(runs) for name in FIGURES}

    for size in np.unique(length):
        chosen = np.flatnonzero(length == size)
        columns = begin[chosen][:, None] + np.arange(size)
        keys = np.concatenate([p[columns], way[columns]], axis=1)
        kinds, kind_of = np.unique(keys, axis=0, return_inverse=True)
        for kind in range(len(kinds)):
            mine = chosen[kind_of.ravel() == kind]
            readings = begin[mine][:, None] + np.arange(size)
            lrvs, urvs, roots, cuts, holds = (v[mine] for v in per_run)
            figures = evaluate_runs(
                None if given is None else given[readings],
                i[readings],
                lrvs,
                urvs,
                points=kinds[kind, :size].tolist(),
                directions=kinds[kind, size:].astype(int).tolist(),
                square_root=roots,
                low_cut=cuts,
                hold=holds,
                block=block,
            )
            _store(out, mine, {name: getattr(figures, name) for name in FIGURES})
    return FleetFigures(applied=given, measured=i, lrv=low, urv=high, **out)
