"""What a DC supply gives: trim, derating, parallel units; and the rules of thumb beside it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

DERATING_START, DERATING_PER_KELVIN = 50.0, 0.025  # practice, where the entry states none

Numbers = Any


def derated_share(
    ambient: float, table: Sequence[tuple[float, float]], highest: float | None
) -> float:
    """Share of its rating that a unit gives at an ambient temperature.

    Parameters
    ----------
    ambient : float
        Air at the unit's intake. [°C]
    table : sequence of (temperature, share)
        As the maker states it, temperatures rising; empty if not stated. [°C], [-]
    highest : float or None
        Highest temperature it may run at, if stated. [°C]

    Returns
    -------
    float
        Share, 0 to 1; beyond the table's last point 0. [-]

    Notes
    -----
    Standing: practice where no table is stated: full to 50 °C, then 2.5 % less per kelvin.

    Examples
    --------
    >>> derated_share(60.0, [], None)
    0.75
    >>> derated_share(60.0, [(50.0, 1.0), (70.0, 0.5)], None)
    0.75
    """
    if highest is not None and ambient > highest:
        return 0.0
    if not table:
        return float(np.clip(1.0 - DERATING_PER_KELVIN * (ambient - DERATING_START), 0.0, 1.0))
    temperatures, shares = zip(*table, strict=True)
    if ambient > temperatures[-1]:
        return 0.0
    return float(np.interp(ambient, temperatures, shares))


def supply_power(
    set_voltage: Numbers, rated_power: float, rated_current: float, share: float, units: int
) -> Numbers:
    """Continuous power of supplies in parallel at a trimmed voltage.

    Parameters
    ----------
    set_voltage : float or array
        Output voltage. [V]
    rated_power, rated_current : float
        Of one unit. [W], [A]
    share : float
        Of the rating left at this ambient. [-]
    units : int
        In parallel. [-]

    Returns
    -------
    float or array
        Power. [W]

    Notes
    -----
    Standing: practice: trimmed up the power binds, trimmed down the current does.

    Examples
    --------
    >>> float(supply_power(22.0, 240.0, 10.0, 1.0, 1))
    220.0
    """
    return units * share * np.minimum(rated_power, rated_current * set_voltage)


def rule_of_thumb_current(voltage: float, rated_currents: Sequence[float]) -> float:
    """Supply current by the trade's rule: half the rated current per motor, a third from 36 V.

    Parameters
    ----------
    voltage : float
        Of the bus. [V]
    rated_currents : sequence of float
        Of every motor. [A]

    Returns
    -------
    float
        Current. [A]

    Notes
    -----
    Standing: practice, for lightly loaded machines; no bound. Between 24 and 36 V the share is
    read off the line between.

    Examples
    --------
    >>> rule_of_thumb_current(24.0, [2.8, 2.8])
    2.8
    """
    return float(np.interp(voltage, [24.0, 36.0], [1 / 2, 1 / 3])) * sum(rated_currents)


def naive_current(rated_currents: Sequence[float]) -> float:
    """Supply current by adding up phase amperes, 20 % on top: several times too much.

    Parameters
    ----------
    rated_currents : sequence of float
        Of every motor. [A]

    Returns
    -------
    float
        Current. [A]

    Notes
    -----
    Standing: practice, a wrong one: amperes of the phases are not amperes of the supply.

    Examples
    --------
    >>> round(naive_current([2.8] * 4), 1)
    26.9
    """
    return 1.2 * 2.0 * sum(rated_currents)
