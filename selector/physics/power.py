"""Power a motor and its driver take from the bus: copper, iron, driver, and the shaft's work."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from .torque import corner_speed

# Iron loss per holding torque and electrical frequency. Standing: guess, from one observation of
# an unloaded motor; the band is what the observation leaves open.
IRON_LOSS_LOW, IRON_LOSS, IRON_LOSS_HIGH = 0.005, 0.010, 0.014  # W/(N·m·Hz)
SQUARE_WAVE = 4.0 / np.pi
DRIVER_LOSS_SHARE = 0.03
MOST_FLUX = 3.0  # square of flux over that of the magnet at which the iron is taken as saturated
GRID, SECTIONS, GOLDEN = 16, 30, (5.0**0.5 - 1.0) / 2.0  # search for the peak over speed

Numbers = Any


class Currents(NamedTuple):
    """Current along and across the rotor's flux. [A]"""

    i_d: Numbers
    i_q: Numbers


def _refuse_negative(speed: Numbers) -> None:
    if np.any(np.asarray(speed) < 0):
        raise ValueError(f"speed must be zero or more rad/s, got {np.min(speed)}")


def phase_currents(
    speed: Numbers,
    torque: Numbers,
    voltage: Numbers,
    current: Numbers,
    R: Numbers,
    L: Numbers,
    K: Numbers,
    N: Numbers,
) -> Currents:
    r"""Current vector of a chopper that fills its setting while the bus lets it.

    Parameters
    ----------
    speed, torque : float or array
        At the shaft; a negative torque drives the motor. [rad/s], [N·m]
    voltage, current : float or array
        Bus voltage, set peak of the phase sine. [V], [A]
    R, L, K, N : float or array
        Resistance with bridge, inductance, torque constant, rotor teeth.
        [ohm], [H], [N·m/A], [-]

    Returns
    -------
    Currents
        Along and across the rotor's flux. [A]

    Raises
    ------
    ValueError
        If a speed is negative.

    Notes
    -----
    Standing: simulated (electrical power within ±0.05·V·I, 5 to 95 %). i_q = T/K; i_d is what
    the setting leaves, or the largest that a voltage of 4/π·V carries. A torque out of reach
    counts with the full setting.

    Examples
    --------
    Below the voltage limit the vector is as long as the setting.

    >>> i = phase_currents(10.0, 0.2, 24.0, 2.8, 1.5, 5.4e-3, 0.48, 50)
    >>> round(float(np.hypot(*i)), 6)
    2.8
    """
    _refuse_negative(speed)
    E, X = K * speed, N * speed * L
    Z2 = R**2 + X**2
    V_x = SQUARE_WAVE * voltage
    asked = np.asarray(torque / K, dtype=float)
    i_q = np.clip(asked, -current, current)
    left = np.sqrt(np.maximum(current**2 - i_q**2, 0.0))
    root = X**2 * E**2 - Z2 * (Z2 * i_q**2 + E**2 + 2.0 * E * R * i_q - V_x**2)
    held = (-X * E + np.sqrt(np.maximum(root, 0.0))) / Z2
    out_of_reach = (root < 0.0) | (np.abs(asked) > current) | (held < -left)
    return Currents(np.where(out_of_reach, left, np.minimum(left, held)), i_q)


def iron_loss(
    speed: Numbers,
    i_d: Numbers,
    i_q: Numbers,
    holding_torque: Numbers,
    L: Numbers,
    K: Numbers,
    N: Numbers,
    coefficient: Numbers = IRON_LOSS,
) -> Numbers:
    r"""Loss in the iron, which grows with electrical frequency and the square of flux.

    Parameters
    ----------
    speed : float or array
        Of the shaft. [rad/s]
    i_d, i_q : float or array
        Current vector. [A]
    holding_torque, L, K, N : float or array
        Of the motor. [N·m], [H], [N·m/A], [-]
    coefficient : float or array
        Loss per holding torque and frequency. [W/(N·m·Hz)]

    Returns
    -------
    float or array
        Power. [W]

    Raises
    ------
    ValueError
        If a speed is negative.

    Notes
    -----
    Standing: guess; the weakest figure of the model. :math:`c T_h f \min(3, |\psi_i|^2/\psi^2)`,
    :math:`\psi = K/N`, :math:`f = N\omega/2\pi`.

    Examples
    --------
    >>> round(float(iron_loss(6.2832, 0.0, 0.0, 1.9, 5.4e-3, 0.48, 50, 0.010)), 3)
    0.95
    """
    _refuse_negative(speed)
    flux = K / N
    frequency = N * speed / (2.0 * np.pi)
    ratio = ((flux + L * i_d) ** 2 + (L * i_q) ** 2) / flux**2
    return coefficient * holding_torque * frequency * np.minimum(MOST_FLUX, ratio)


def driver_loss(voltage: Numbers, current: Numbers, idle_power: Numbers) -> Numbers:
    """Loss of a driver beside that of its bridge resistance.

    Parameters
    ----------
    voltage, current, idle_power : float or array
        Bus voltage, length of the current vector, loss without current. [V], [A], [W]

    Returns
    -------
    float or array
        Power. [W]

    Notes
    -----
    Standing: guess (3 % of the bus voltage times the sum of phase currents).

    Examples
    --------
    >>> round(float(driver_loss(24.0, 2.8, 1.5)), 3)
    4.067
    """
    return idle_power + DRIVER_LOSS_SHARE * voltage * SQUARE_WAVE * current


def bus_power(
    speed: Numbers,
    torque: Numbers,
    voltage: Numbers,
    current: Numbers,
    R: Numbers,
    L: Numbers,
    K: Numbers,
    N: Numbers,
    holding_torque: Numbers,
    idle_power: Numbers,
    iron_coefficient: Numbers = IRON_LOSS_HIGH,
) -> Numbers:
    r"""Power one axis takes from the bus at a speed and torque; negative when it returns some.

    Parameters
    ----------
    speed, torque : float or array
        At the shaft: load, friction and acceleration together. [rad/s], [N·m]
    voltage, current : float or array
        Bus voltage, set peak of the phase sine. [V], [A]
    R, L, K, N, holding_torque : float or array
        Of motor and bridge. [ohm], [H], [N·m/A], [-], [N·m]
    idle_power : float or array
        Of the driver. [W]
    iron_coefficient : float or array
        See :func:`iron_loss`. [W/(N·m·Hz)]

    Returns
    -------
    float or array
        Power. [W]

    Notes
    -----
    Standing: simulated in its electrical part; iron and driver loss are guesses.
    :math:`R|i|^2 + \omega T + P_{fe} + P_{drv}`. The supply's current is this over V, never the
    sum of phase currents.

    Examples
    --------
    >>> K = 1.9 / 2.8 / 2**0.5
    >>> round(float(bus_power(31.4159, 0.25, 24.0, 2.8, 1.596, 5.4e-3, K, 50, 1.9, 1.5)), 1)
    36.1
    """
    i_d, i_q = phase_currents(speed, torque, voltage, current, R, L, K, N)
    length = np.sqrt(i_d**2 + i_q**2)
    iron = iron_loss(speed, i_d, i_q, holding_torque, L, K, N, iron_coefficient)
    return R * length**2 + speed * torque + iron + driver_loss(voltage, length, idle_power)


def peak_bus_power(
    speed: float,
    from_rest: bool,
    torque: Numbers,
    voltage: Numbers,
    current: Numbers,
    R: Numbers,
    L: Numbers,
    K: Numbers,
    N: Numbers,
    holding_torque: Numbers,
    idle_power: Numbers,
    iron_coefficient: Numbers = IRON_LOSS_HIGH,
) -> Numbers:
    r"""Largest bus power on the way from rest to a speed, at one torque.

    Parameters
    ----------
    speed : float
        Reached in the end. [rad/s]
    from_rest : bool
        Whether the lower speeds are passed under the same torque. [-]
    torque : float or array
        At the shaft. [N·m]
    voltage, current : float or array
        Bus voltage, set peak of the phase sine. [V], [A]
    R, L, K, N, holding_torque, idle_power, iron_coefficient : float or array
        As in :func:`bus_power`. [ohm], [H], [N·m/A], [-], [N·m], [W], [W/(N·m·Hz)]

    Returns
    -------
    float or array
        Power. [W]

    Notes
    -----
    Standing: derived from :func:`bus_power`. Up to the speed where the full current uses up 4/π of
    the voltage the power is linear in speed, so its ends do. Beyond, the current along the flux
    falls while work and iron loss grow; the loss turns sharply where the flux leaves its cap, a
    speed with a closed form, and any smooth maximum is found by golden section about the best of
    a grid.

    Examples
    --------
    >>> K = 1.9 / 2.8 / 2**0.5
    >>> motor = (24.0, 2.8, 1.596, 5.4e-3, K, 50, 1.9, 1.5)
    >>> round(float(peak_bus_power(94.25, True, 0.05, *motor)), 1)
    33.3
    >>> round(float(bus_power(94.25, 0.05, *motor)), 1)
    16.3
    """

    given = torque, voltage, current, R, L, K, N, holding_torque, idle_power, iron_coefficient
    own = bus_power(speed, *given)
    if not from_rest:
        return own
    i_q = np.clip(torque / K, -current, current)
    i_d = np.sqrt(np.maximum(current**2 - i_q**2, 0.0))
    flux = K / N
    i_d_cusp = (np.sqrt(np.maximum(MOST_FLUX * flux**2 - (L * i_q) ** 2, 0.0)) - flux) / L
    V_x = SQUARE_WAVE * voltage
    kink = np.minimum(corner_speed(V_x, i_d, i_q, R, L, K, N), speed)
    cusp = corner_speed(V_x, np.minimum(i_d, i_d_cusp), i_q, R, L, K, N)
    cusp = np.clip(cusp, kink, speed)
    tried = [bus_power(w, *given) for w in (0.0, kink, cusp)]
    kink, peak, *columns = np.broadcast_arrays(
        np.atleast_1d(kink), np.maximum.reduce([own, *np.broadcast_arrays(*tried)]), *given
    )
    peak, beyond = peak.copy(), kink < speed
    if beyond.any():
        rows = [column[beyond] for column in columns]
        peak[beyond] = np.maximum(peak[beyond], _peak_between(kink[beyond], speed, rows))
    return peak if np.ndim(own) else float(peak[0])


def _peak_between(low: Numbers, high: Numbers, given: list[Numbers]) -> Numbers:
    """Largest bus power between two speeds: golden section about the best of a grid.

    The grid is even in ω + R/(N·L) by ratio, the scale on which current follows speed.
    """
    R, L, N = given[3], given[4], given[6]
    scale = R / (N * L)
    ratio = (high + scale) / (low + scale)
    grid = np.stack([(low + scale) * ratio ** (k / GRID) - scale for k in range(GRID + 1)])
    grid = np.clip(grid, low, high)
    best = np.argmax(np.stack([bus_power(speeds, *given) for speeds in grid]), axis=0)[None]
    low = np.take_along_axis(grid, np.maximum(best - 1, 0), axis=0)[0]
    high = np.take_along_axis(grid, np.minimum(best + 1, GRID), axis=0)[0]
    left, right = high - GOLDEN * (high - low), low + GOLDEN * (high - low)
    at_left, at_right = bus_power(left, *given), bus_power(right, *given)
    for _ in range(SECTIONS):
        rising = at_left < at_right
        low, high = np.where(rising, left, low), np.where(rising, high, right)
        kept, at_kept = np.where(rising, right, left), np.where(rising, at_right, at_left)
        tried = np.where(rising, low + GOLDEN * (high - low), high - GOLDEN * (high - low))
        at_tried = bus_power(tried, *given)
        left, right = np.where(rising, kept, tried), np.where(rising, tried, kept)
        at_left = np.where(rising, at_kept, at_tried)
        at_right = np.where(rising, at_tried, at_kept)
    return np.maximum(at_left, at_right)


def holding_power(voltage: Numbers, current: Numbers, R: Numbers, idle_power: Numbers) -> Numbers:
    """Power one axis takes at rest.

    Parameters
    ----------
    voltage, current, R, idle_power : float or array
        Bus voltage, current at rest, resistance with bridge, idle loss. [V], [A], [ohm], [W]

    Returns
    -------
    float or array
        Power. [W]

    Notes
    -----
    Standing: derived, with the guessed driver loss.

    Examples
    --------
    >>> round(float(holding_power(24.0, 1.4, 1.44, 1.5)), 2)
    5.61
    """
    return R * current**2 + driver_loss(voltage, current, idle_power)


def worst_power(
    speed: Numbers,
    torque: Numbers,
    voltage: Numbers,
    highest_voltage: Numbers,
    current: Numbers,
    R: Numbers,
    L: Numbers,
    K: Numbers,
    N: Numbers,
    holding_torque: Numbers,
    idle_power: Numbers,
    pullout: Numbers,
) -> Numbers:
    r"""Most an overloaded or jammed axis could draw at a speed: a note, not a rating.

    Parameters
    ----------
    speed, torque : float or array
        At the shaft. [rad/s], [N·m]
    voltage, highest_voltage, current : float or array
        Set and highest bus voltage, setting. [V], [V], [A]
    R, L, K, N, holding_torque, idle_power : float or array
        As in :func:`bus_power`. [ohm], [H], [N·m/A], [-], [N·m], [W]
    pullout : float or array
        Pull-out torque at 4/π of the highest voltage. [N·m]

    Returns
    -------
    float or array
        Power. [W]

    Notes
    -----
    Standing: derived. The larger of the demanded point's power and full copper loss with the
    work of the pull-out torque.

    Examples
    --------
    >>> K = 1.9 / 2.8 / 2**0.5
    >>> round(float(worst_power(31.416, 0.1, 24, 24, 2.8, 1.596, 5.4e-3, K, 50, 1.9, 1.5, K * 2.8)))
    79
    """
    demanded = bus_power(speed, torque, voltage, current, R, L, K, N, holding_torque, idle_power)
    i_d, i_q = phase_currents(speed, torque, voltage, current, R, L, K, N)
    iron = iron_loss(speed, i_d, i_q, holding_torque, L, K, N, IRON_LOSS_HIGH)
    driver = driver_loss(highest_voltage, current, idle_power)
    return np.maximum(demanded, R * current**2 + speed * pullout + iron + driver)
