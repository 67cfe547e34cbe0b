"""Steady winding temperature from the losses and the motor's own rating."""

from __future__ import annotations

from typing import Any

import numpy as np

from .torque import COPPER_PER_KELVIN, winding_resistance

INSULATION_LIMITS = {"A": 105.0, "E": 120.0, "B": 130.0, "F": 155.0, "H": 180.0}  # IEC 60085, °C
CASE_SHARE = 0.75  # of the winding's rise that the case shows: guess
PLAIN_STEPS = 12  # of an iteration to a steady state before it is damped
RUNAWAY = 1000.0  # °C; stands for "no steady temperature"

Numbers = Any


def thermal_resistance(
    rated_rise: Numbers, rated_current: Numbers, resistance_25: Numbers
) -> Numbers:
    r"""Thermal resistance winding to air that a motor's rating implies.

    Supposes the mounting of the rating, usually a metal plate.

    Parameters
    ----------
    rated_rise, rated_current, resistance_25 : float or array
        Rise at rated current in both phases; that current; cold resistance. [K], [A], [ohm]

    Returns
    -------
    float or array
        Thermal resistance. [K/W]

    Notes
    -----
    Standing: derived. :math:`\Delta T / (2 I_r^2 R_{hot})`, R at 25 °C plus the rise.

    Examples
    --------
    >>> round(float(thermal_resistance(80.0, 2.8, 1.13)), 3)
    3.435
    """
    hot = winding_resistance(resistance_25, 25.0 + rated_rise)
    return rated_rise / (2.0 * rated_current**2 * hot)


def steady_temperature(
    ambient: Numbers, resistance_to_air: Numbers, copper_loss_25: Numbers, iron_loss: Numbers
) -> Numbers:
    r"""Winding temperature at which losses and cooling balance, copper growing with it.

    Parameters
    ----------
    ambient : float or array
        Air around the motor. [°C]
    resistance_to_air : float or array
        Winding to air. [K/W]
    copper_loss_25 : float or array
        Mean copper loss of the motor as if its winding were at 25 °C. [W]
    iron_loss : float or array
        Mean iron loss. [W]

    Returns
    -------
    float or array
        Temperature; :data:`RUNAWAY` where there is no balance. [°C]

    Notes
    -----
    Standing: derived. :math:`T = T_a + R_{th}(P_{25}(1 + \alpha(T - 25)) + P_{fe})` solved for T;
    with :math:`\alpha R_{th} P_{25} \ge 1` each kelvin brings more heat than it sheds.

    Examples
    --------
    The rating itself: 80 K above 25 °C from the rated copper loss.

    >>> r = thermal_resistance(80.0, 2.8, 1.13)
    >>> round(float(steady_temperature(25.0, r, 2 * 2.8**2 * 1.13, 0.0)), 6)
    105.0
    """
    gain = COPPER_PER_KELVIN * resistance_to_air * copper_loss_25
    heat = resistance_to_air * (copper_loss_25 * (1.0 - 25.0 * COPPER_PER_KELVIN) + iron_loss)
    with np.errstate(divide="ignore", invalid="ignore"):
        balance = (ambient + heat) / (1.0 - gain)
    return np.where(gain < 1.0, np.minimum(balance, RUNAWAY), RUNAWAY)


def case_temperature(ambient: Numbers, winding: Numbers) -> Numbers:
    """Temperature of the motor's case.

    Parameters
    ----------
    ambient, winding : float or array
        Air and winding. [°C]

    Returns
    -------
    float or array
        Temperature. [°C]

    Notes
    -----
    Standing: guess (three quarters of the winding's rise).

    Examples
    --------
    >>> case_temperature(40.0, 100.0)
    85.0
    """
    return ambient + CASE_SHARE * (winding - ambient)
