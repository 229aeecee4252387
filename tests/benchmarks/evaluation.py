"""Times the evaluation of very many nine-point runs against the bare numpy expression for the same figures.

Run as a module it is one process of `compare`: both kinds in turn for the times, or one kind once for its memory.
"""

from __future__ import annotations

import argparse
import json
import time
from collections.abc import Callable, Mapping
from statistics import median
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from tests.benchmarks import processes
from tests.benchmarks.report import Aim, Table, megabytes, seconds, times

Floats = NDArray[np.float64]
AIM: Final = 2.0
ROUNDS: Final = 7
#: Blocks of the size in which numpy is quickest here (larger ones leave the cache).
BLOCK: Final = 20_000
POINTS: Final = (0.0, 25.0, 50.0, 75.0, 100.0, 75.0, 50.0, 25.0, 0.0)
FIGURES: Final = ("inaccuracy", "zero_error", "span_error", "hysteresis", "nonlinearity_terminal")


def compare(runs: int, told: Mapping[str, str]) -> Table:
    """Time both over so many runs, and take the peak memory of each in a process of its own."""
    found = {
        what: json.loads(processes.run("-m", "tests.benchmarks.evaluation", what, str(runs), told=told))
        for what in ("both", "bare", "fleet")
    }
    bare, fleet = found["both"]["bare"], found["both"]["fleet"]
    memory = {what: megabytes(found[what]["memory"]) for what in ("bare", "fleet")}
    table = Table(f"Evaluation of {runs:,} runs of nine points", ["what", "time", "ratio", "peak memory"])
    table.rows = [
        ["bare numpy expression, five figures a run", seconds(bare), "", memory["bare"]],
        ["evaluation, thirteen figures a run", seconds(fleet), times(fleet / bare), memory["fleet"]],
    ]
    table.remarks.append(
        f"Medians of {ROUNDS} rounds in turn; the readings alone take {megabytes(runs * 9 * 8 * 2)}. The five "
        f"figures agree within {found['both']['difference']:.0e} % of span."
    )
    table.aims.append(Aim(f"Evaluation of {runs:,} runs against bare numpy", fleet / bare, AIM))
    return table


def bare(applied: Floats, measured: Floats, lrv: Floats, urv: Floats) -> Floats:
    """Greatest error, zero and span error, hysteresis, terminal-based non-linearity [% of span], written straight."""
    out = np.empty((len(FIGURES), len(measured)))
    x = np.array(POINTS[:5]) / 100
    for start in range(0, len(measured), BLOCK):
        rows = slice(start, start + BLOCK)
        low, high = lrv[rows, None], urv[rows, None]
        error = (measured[rows] - (4 + 16 * (applied[rows] - low) / (high - low))) / 16 * 100
        up, down = error[:, :5], error[:, :3:-1]
        mean = (up + down) / 2
        out[0, rows] = np.abs(error).max(axis=1)
        out[1, rows] = mean[:, 0]
        out[2, rows] = mean[:, 4] - mean[:, 0]
        out[3, rows] = np.abs(up - down).max(axis=1)
        out[4, rows] = np.abs(mean - (mean[:, :1] + out[2, rows, None] * x)).max(axis=1)
    return out


def readings(runs: int) -> tuple[Floats, Floats, Floats, Floats]:
    """Applied inputs, currents [mA], LRV and URV of runs with a little noise, made block by block."""
    rng = np.random.default_rng(9)
    lrv = rng.uniform(0.0, 10.0, runs)
    urv = lrv + rng.uniform(10.0, 100.0, runs)
    x = np.array(POINTS) / 100
    applied, measured = np.empty((runs, 9)), np.empty((runs, 9))
    for start in range(0, runs, BLOCK):
        rows = slice(start, start + BLOCK)
        applied[rows] = lrv[rows, None] + x * (urv - lrv)[rows, None]
        measured[rows] = 4 + 16 * x + rng.normal(0.0, 0.01, applied[rows].shape)
    return applied, measured, lrv, urv


def _fleet(applied: Floats, measured: Floats, lrv: Floats, urv: Floats) -> Any:
    from calibration.metrology.fleet import evaluate_runs

    return evaluate_runs(applied, measured, lrv, urv, points=POINTS)


def _timed(work: Callable[..., Any], given: tuple[Floats, ...]) -> tuple[float, Any]:
    start = time.perf_counter()
    made = work(*given)
    return time.perf_counter() - start, made


def _both(given: tuple[Floats, ...]) -> dict[str, float]:
    spent: dict[str, list[float]] = {"bare": [], "fleet": []}
    difference = 0.0
    for _ in range(ROUNDS):
        for name, work in (("bare", bare), ("fleet", _fleet)):
            took, made = _timed(work, given)
            spent[name].append(took)
            if name == "bare":
                expected = made
        for row, figure in zip(expected, FIGURES, strict=True):
            difference = max(difference, float(np.abs(row - getattr(made, figure)).max()))
    return {name: median(values) for name, values in spent.items()} | {"difference": difference}


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("what", choices=["both", "bare", "fleet"])
    parser.add_argument("runs", type=int)
    chosen = parser.parse_args()
    given = readings(chosen.runs)
    if chosen.what == "both":
        print(json.dumps(_both(given)))
        return
    _timed(bare if chosen.what == "bare" else _fleet, given)
    print(json.dumps({"memory": processes.peak_memory()}))


if __name__ == "__main__":
    main()
