"""Supply of a two-wire loop: is there voltage left for the transmitter at its greatest current?

I_max is the high failure current, not 20 mA: a transmitter that cannot drive its failure current cannot report
its failure.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from register.engineering.broadcasting import numbers, plain

DEFAULT_HIGH_FAILURE_CURRENT_MA = 22.5


def available_resistance(
    supply_v: ArrayLike | None, least_v: ArrayLike | None, greatest_ma: ArrayLike = DEFAULT_HIGH_FAILURE_CURRENT_MA
) -> Any:
    """Give the loop resistance that the supply can drive, (V_supply − V_min)/I_max.

    Parameters
    ----------
    supply_v : float or array
        Supply voltage at the loop's source [V].
    least_v : float or array
        Least voltage at the transmitter's terminals, its lift-off voltage [V].
    greatest_ma : float or array
        Greatest current of the loop, the high failure current [mA].

    Returns
    -------
    float or array
        Resistance [Ω]; negative where the supply is below the lift-off voltage, nan where a number is missing.
    """
    supply, least, current = numbers(supply_v, least_v, greatest_ma)
    return plain((supply - least) / np.where(current > 0, current / 1000.0, np.nan))


def resistance_margin(
    supply_v: ArrayLike | None,
    least_v: ArrayLike | None,
    resistance_ohm: ArrayLike | None,
    greatest_ma: ArrayLike = DEFAULT_HIGH_FAILURE_CURRENT_MA,
) -> Any:
    """Give the available less the actual loop resistance [Ω]; negative where the loop has too much."""
    (resistance,) = numbers(resistance_ohm)
    return plain(available_resistance(supply_v, least_v, greatest_ma) - resistance)


def least_supply(
    resistance_ohm: ArrayLike | None,
    least_v: ArrayLike | None,
    greatest_ma: ArrayLike = DEFAULT_HIGH_FAILURE_CURRENT_MA,
) -> Any:
    """Give the supply voltage [V] that a loop of this resistance needs, V_min + R·I_max."""
    resistance, least, current = numbers(resistance_ohm, least_v, greatest_ma)
    return plain(least + resistance * current / 1000.0)
