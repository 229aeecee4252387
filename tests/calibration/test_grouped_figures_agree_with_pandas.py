"""Figures of a run that are made by grouping readings, against pandas as a second opinion."""

from __future__ import annotations

import random

import pandas
import pytest

from calibration.metrology.errors import evaluate_run
from calibration.metrology.pointlist import THREE_CYCLES
from calibration.metrology.signal import Signal


@pytest.mark.parametrize("seed", range(20))
def test_point_averages_hysteresis_and_repeatability_are_those_of_a_group_by(seed: int) -> None:
    chance = random.Random(seed)
    signal = Signal(-25.0, 100.0)
    applied = [float(value) for value in THREE_CYCLES.inputs(signal)]
    measured = [float(signal.ideal_current(value)) + chance.gauss(0, 0.02) for value in applied]
    run = evaluate_run(applied, measured, signal, points=THREE_CYCLES)
    table = pandas.DataFrame(
        {
            "point": THREE_CYCLES.points,
            "direction": THREE_CYCLES.directions,
            "error": [(i - (4 + 16 * (p + 25) / 125)) / 16 * 100 for p, i in zip(applied, measured, strict=True)],
        }
    )
    by_side = table.groupby(["point", "direction"])["error"]
    means = by_side.mean().unstack()
    assert [level.up for level in run.levels] == pytest.approx(list(means[1]), nan_ok=True)
    assert [level.down for level in run.levels] == pytest.approx(list(means[-1]), nan_ok=True)
    assert run.hysteresis == pytest.approx((means[1] - means[-1]).abs().max())
    assert run.repeatability == pytest.approx((by_side.max() - by_side.min()).max())
    curve = means.mean(axis=1)  # mean of the up and the down average, whichever are there
    assert run.zero_error == pytest.approx(curve[0])
    assert run.span_error == pytest.approx(curve[100] - curve[0])
