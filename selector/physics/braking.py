"""Energy that braking axes send back to the bus, and what must take it up."""

from __future__ import annotations

from typing import Any

import numpy as np

CAPACITOR_SHARE = 0.8  # of the stated capacitance: practice, electrolytic tolerance and age

Numbers = Any


def returned_energy(
    speed: Numbers, torque: Numbers, deceleration: Numbers, R: Numbers, K: Numbers
) -> Numbers:
    r"""Energy one axis returns while it stops evenly from a speed.

    On the safe side: 1.2 to 4 times the rise of a simulation.

    Parameters
    ----------
    speed : float or array
        From which it stops. [rad/s]
    torque : float or array
        Braking torque at the shaft. [N·m]
    deceleration : float or array
        Of the shaft, above zero. [rad/s²]
    R, K : float or array
        Cold resistance with bridge, torque constant. [ohm], [N·m/A]

    Returns
    -------
    float or array
        Energy. [J]

    Notes
    -----
    Standing: published in form (R. Crowder, Electric Drives and Electromechanical Systems,
    eq. 5.27 to 5.30) and simulated for stepping motors.
    :math:`E = T(\omega_0-\omega_c)^2/2a` with :math:`\omega_c = R T/K^2`, below which the copper
    takes all.

    Examples
    --------
    >>> K = 1.9 / 2.8 / 2**0.5
    >>> round(float(returned_energy(62.832, 0.5, 0.5 / 3.84e-4, 1.33, K)), 4)
    0.6899
    """
    least = R * torque / K**2
    return torque * np.maximum(speed - least, 0.0) ** 2 / (2.0 * deceleration)


def kinetic_energy(inertia: Numbers, speed: Numbers) -> Numbers:
    """Energy of a turning mass: all that a stop of unknown steepness could return.

    Parameters
    ----------
    inertia, speed : float or array
        Rotor and load; shaft speed. [kg·m²], [rad/s]

    Returns
    -------
    float or array
        Energy. [J]

    Notes
    -----
    Standing: derived.

    Examples
    --------
    >>> kinetic_energy(2.0, 3.0)
    9.0
    """
    return 0.5 * inertia * speed**2


def lowering_power(speed: Numbers, torque: Numbers, R: Numbers, K: Numbers) -> Numbers:
    r"""Power a steadily driven axis returns.

    Parameters
    ----------
    speed, torque : float or array
        Of the shaft; the driving torque as a positive figure. [rad/s], [N·m]
    R, K : float or array
        Cold resistance with bridge, torque constant. [ohm], [N·m/A]

    Returns
    -------
    float or array
        Power, zero or more. [W]

    Notes
    -----
    Standing: derived. :math:`T\omega - R(T/K)^2`.

    Examples
    --------
    >>> round(float(lowering_power(50.0, 0.4, 1.0, 0.5)), 2)
    19.36
    """
    return np.maximum(torque * speed - R * (torque / K) ** 2, 0.0)


def risen_voltage(highest_voltage: Numbers, energy: Numbers, capacitance: Numbers) -> Numbers:
    r"""Bus voltage after its capacitors took up an energy; infinite without any.

    Parameters
    ----------
    highest_voltage, energy, capacitance : float or array
        Before braking; of all braking axes; that can be counted on. [V], [J], [F]

    Returns
    -------
    float or array
        Voltage. [V]

    Notes
    -----
    Standing: derived. :math:`\sqrt{V^2 + 2E/C}`.

    Examples
    --------
    >>> round(float(risen_voltage(48.0, 0.6899, 2.2e-3)), 2)
    54.14
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        rise = np.where(np.asarray(energy) > 0.0, 2.0 * np.asarray(energy) / capacitance, 0.0)
    return np.sqrt(highest_voltage**2 + rise)


def needed_capacitance(highest_voltage: float, limit: float, energy: float) -> float | None:
    """Capacitance that keeps a rise under a limit; None when no capacitor can.

    Parameters
    ----------
    highest_voltage, limit, energy : float
        Before braking; allowed; of all braking axes. [V], [V], [J]

    Returns
    -------
    float or None
        Capacitance to be counted on. [F]

    Notes
    -----
    Standing: published (R. Crowder, Electric Drives and Electromechanical Systems, example on
    p. 162).

    Examples
    --------
    >>> round(needed_capacitance(100.0, 110.0, 5.735) * 1e6)
    5462
    """
    if limit <= highest_voltage:
        return None
    return 2.0 * energy / (limit**2 - highest_voltage**2)
