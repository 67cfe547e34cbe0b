"""Torque a stepping motor gives at a speed, from the ideal winding down to what may be used.

Symbols: I peak of the phase sine; K torque per ampere of I; R winding plus bridge resistance;
L phase inductance; N rotor teeth; V bus voltage; E = K·ω back-EMF; X = N·ω·L; Z² = R² + X².
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

COPPER_PER_KELVIN = 0.00393  # at 20 °C, IACS copper; used from 25 °C as data sheets state R there
MODEL_FACTOR = 0.90
SPEED_FRACTIONS = tuple(k / 8 for k in range(1, 9))
DAMPING_STEPS = ((0.0, 0.0), (0.02, 0.17), (0.05, 0.53), (0.10, 0.80), (0.15, 0.95))

Numbers = Any  # a float or an array of floats


class Joined(NamedTuple):
    """Figures of a motor with its windings joined one way; see :func:`joined`."""

    holding_torque: float
    rated_current: float
    resistance: float
    inductance: float


class Tolerances(NamedTuple):
    """Half-widths as shares of nominal: winding resistance, inductance, torque, bus voltage."""

    resistance: Numbers
    inductance: Numbers
    torque: Numbers
    voltage: Numbers


class TorqueChain(NamedTuple):
    """The steps from the ideal torque to the usable one; every field in N·m or a bare factor."""

    nominal: Numbers
    modelled: Numbers
    toleranced: Numbers
    less_detent: Numbers
    damping: Numbers
    microstep: Numbers
    usable: Numbers
    voltage_share: Numbers


def torque_constant(holding_torque: Numbers, rated_current: Numbers) -> Numbers:
    r"""Torque per ampere of the phase sine's peak, which is also volts per rad/s.

    Parameters
    ----------
    holding_torque : float or array
        With the rated current in both phases. [N·m]
    rated_current : float or array
        DC in both phases at once. [A]

    Returns
    -------
    float or array
        K. [N·m/A]

    Notes
    -----
    Standing: derived, for sine torque curves. Both phases at I_r make a vector of length √2·I_r,
    so :math:`K = T_h / (\sqrt 2 I_r)`.

    Examples
    --------
    >>> round(torque_constant(1.9, 2.8), 4)
    0.4798
    """
    return holding_torque / (2.0**0.5 * rated_current)


def joined(
    joining: str,
    rated_as: str,
    holding_torque: float,
    rated_current: float,
    resistance: float,
    inductance: float,
) -> Joined:
    """Figures of a 6- or 8-wire motor joined in series or parallel, from its rating.

    Parameters
    ----------
    joining : str
        ``"series"`` or ``"parallel"``: how the half windings of each phase are joined. [-]
    rated_as : str
        What the figures stand for: ``"series"``, ``"parallel"`` or ``"unipolar"`` (half coils). [-]
    holding_torque, rated_current, resistance, inductance : float
        The data sheet's figures. [N·m], [A], [ohm], [H]

    Returns
    -------
    Joined
        Holding torque, rated current, resistance and inductance of that joining.

    Raises
    ------
    ValueError
        If a word is not one of those named.

    Notes
    -----
    Standing: derived. One half winding carries resistance r and inductance l. In series r and l
    become 2·r and 4·l (the halves are coupled), in parallel r/2 and l. The same copper loss
    allows I_u/√2 in series and √2·I_u in parallel for half coils rated I_u; the ampere turns,
    and with them the torque, are then √2 of the half coil's.

    Examples
    --------
    >>> joined("parallel", "series", 1.0, 2.0, 4.0, 0.008)
    Joined(holding_torque=1.0, rated_current=4.0, resistance=1.0, inductance=0.002)
    """
    root2 = float(np.sqrt(2.0))
    half_coil = {  # from the rating to one half winding: torque, current, resistance, inductance
        "series": (1 / root2, root2, 0.5, 0.25),
        "parallel": (1 / root2, 1 / root2, 2.0, 1.0),
        "unipolar": (1.0, 1.0, 1.0, 1.0),
    }
    full_coil = {"series": (root2, 1 / root2, 2.0, 4.0), "parallel": (root2, root2, 0.5, 1.0)}
    if rated_as not in half_coil or joining not in full_coil:
        raise ValueError(f"no joining {joining!r} from a rating as {rated_as!r}")
    if joining == rated_as:
        return Joined(holding_torque, rated_current, resistance, inductance)
    t, i, r, ind = (a * b for a, b in zip(half_coil[rated_as], full_coil[joining], strict=True))
    figures = (holding_torque * t, rated_current * i, resistance * r, inductance * ind)
    return Joined(*(float(f"{figure:.15g}") for figure in figures))


def winding_resistance(resistance_25: Numbers, temperature: Numbers) -> Numbers:
    """Resistance of a copper winding at a temperature.

    Parameters
    ----------
    resistance_25 : float or array
        At 25 °C. [ohm]
    temperature : float or array
        Of the winding. [°C]

    Returns
    -------
    float or array
        Resistance. [ohm]

    Notes
    -----
    Standing: published (0.00393 /K at 20 °C: K. C. Agrawal, Industrial Power Engineering and
    Applications Handbook, table of conductors); taken from 25 °C, where data sheets state R.

    Examples
    --------
    >>> winding_resistance(1.0, 125.0)
    1.393
    """
    return resistance_25 * (1.0 + COPPER_PER_KELVIN * (temperature - 25.0))


def voltage_share(
    speed: Numbers,
    voltage: Numbers,
    current: Numbers,
    R: Numbers,
    L: Numbers,
    K: Numbers,
    N: Numbers,
) -> Numbers:
    r"""Voltage that full in-phase current asks for, as a share of the bus; 1 is the corner.

    Parameters
    ----------
    speed, voltage, current : float or array
        Shaft speed, bus voltage, peak of the phase sine. [rad/s], [V], [A]
    R, L, K, N : float or array
        Resistance, inductance, torque constant, rotor teeth. [ohm], [H], [N·m/A], [-]

    Returns
    -------
    float or array
        Share. [-]

    Notes
    -----
    Standing: derived. :math:`\sqrt{(RI + E)^2 + (XI)^2}/V`.

    Examples
    --------
    >>> round(float(voltage_share(62.83, 48.0, 2.583, 1.596, 5.4e-3, 0.4798, 50)), 2)
    1.16
    """
    E, X = K * speed, N * speed * L
    return np.sqrt((R * current + E) ** 2 + (X * current) ** 2) / voltage


def corner_speed(
    voltage: Numbers, i_d: Numbers, i_q: Numbers, R: Numbers, L: Numbers, K: Numbers, N: Numbers
) -> Numbers:
    r"""Speed at which a current vector uses up the voltage; 0 if it does so at standstill.

    Parameters
    ----------
    voltage : float or array
        Largest peak of the phase voltage. [V]
    i_d, i_q : float or array
        Parts of the current along and across the rotor's flux. [A]
    R, L, K, N : float or array
        Resistance, inductance, torque constant, rotor teeth. [ohm], [H], [N·m/A], [-]

    Returns
    -------
    float or array
        Shaft speed. [rad/s]

    Notes
    -----
    Standing: derived. The voltage of the vector is
    :math:`(R i_q + \omega(K + N L i_d))^2 + (R i_d - \omega N L i_q)^2`; its meeting with
    :math:`V^2` is a quadratic in ω.

    Examples
    --------
    In phase with the back-EMF, 2.8 A of a 1.26 N·m motor from 24 V: 7.480 rev/s.

    >>> round(float(corner_speed(24.0, 0.0, 2.8, 0.9, 2.5e-3, 0.318198, 50)) / 6.283185, 3)
    7.48
    """
    NL = N * L
    a = (K + NL * i_d) ** 2 + (NL * i_q) ** 2
    half_b = R * i_q * K
    c = R**2 * (i_d**2 + i_q**2) - voltage**2
    root = np.sqrt(np.maximum(half_b**2 - a * c, 0.0))
    return np.where(c < 0.0, np.maximum((root - half_b) / a, 0.0), 0.0)


def pullout_torque(
    speed: Numbers,
    voltage: Numbers,
    current: Numbers,
    R: Numbers,
    L: Numbers,
    K: Numbers,
    N: Numbers,
) -> Numbers:
    r"""Largest steady torque with the current inside its setting and the voltage inside the bus.

    Ideal: no ripple, iron loss, saturation, detent or loss of damping; see :func:`torque_chain`.

    Parameters
    ----------
    speed, voltage, current : float or array
        Shaft speed, zero or more; bus voltage; set peak of the phase sine. [rad/s], [V], [A]
    R, L, K, N : float or array
        Resistance with bridge, inductance, torque constant, rotor teeth.
        [ohm], [H], [N·m/A], [-]

    Returns
    -------
    float or array
        Torque at which the rotor falls out of step; 0 when none is left. [N·m]

    Raises
    ------
    ValueError
        If a speed is negative.

    Notes
    -----
    Standing: derived; against a switching simulation it is too high by itself (simulated), hence
    the factors of :func:`torque_chain`. Largest :math:`K i_q` with :math:`|i| \le I`,
    :math:`|v| \le V`: all of the current while the voltage allows it; else the free maximum on
    the voltage circle, :math:`i_q = V/Z - ER/Z^2`; else the point where both circles meet.

    Examples
    --------
    >>> round(float(pullout_torque(62.832, 24.0, 2.8, 1.596, 5.4e-3, 0.47983, 50)), 4)
    0.5963
    """
    given = (speed, voltage, current, R, L, K, N)
    if all(np.ndim(value) == 0 for value in given):
        return float(_pullout(*(np.atleast_1d(float(value)) for value in given))[0])
    return _pullout(*np.broadcast_arrays(*(np.asarray(value, dtype=float) for value in given)))


def _pullout(*given: Any) -> Any:
    speed, voltage, current, R, L, K, N = given
    if np.any(speed < 0):
        raise ValueError(f"speed must be zero or more rad/s, got {speed.min()}")
    torque = K * current
    short = voltage_share(speed, voltage, current, R, L, K, N) > 1.0
    if short.any():
        torque[short] = _short_of_voltage(*(value[short] for value in given))
    return torque


def _short_of_voltage(
    speed: Any, voltage: Any, current: Any, R: Any, L: Any, K: Any, N: Any
) -> Any:
    """Pull-out torque where the bus cannot drive the full current in phase."""
    E, X = K * speed, N * speed * L
    Z2 = R**2 + X**2
    Z = np.sqrt(Z2)
    free_q = voltage / Z - E * R / Z2
    free = (E * X / Z2) ** 2 + free_q**2 <= current**2
    with np.errstate(divide="ignore", invalid="ignore"):
        s = (voltage**2 - E**2 - Z2 * current**2) / (2.0 * E)
        both_q = s * R / Z2 + X / Z * np.sqrt(np.maximum(current**2 - s**2 / Z2, 0.0))
        both_q = np.where((E > 0) & (np.abs(s) <= Z * current), both_q, 0.0)
    return K * np.maximum(np.where(free, free_q, both_q), 0.0)


def rippled_current(
    speed: Numbers,
    voltage: Numbers,
    current: Numbers,
    L: Numbers,
    K: Numbers,
    regulator_time: Numbers,
) -> Numbers:
    r"""Mean of a chopped current whose peak the regulator holds at its setting.

    Parameters
    ----------
    speed, voltage, current : float or array
        Shaft speed, bus voltage, setting. [rad/s], [V], [A]
    L, K : float or array
        Inductance, torque constant. [H], [N·m/A]
    regulator_time : float or array
        Dead time of the regulator. [s]

    Returns
    -------
    float or array
        Current that makes torque, zero or more. [A]

    Notes
    -----
    Standing: simulated. :math:`I - t_r (V + \min(V, E)) / (2L)`.

    Examples
    --------
    >>> round(float(rippled_current(31.416, 24.0, 1.7, 2.8e-3, 0.18717, 30e-6)), 3)
    1.54
    """
    ripple = regulator_time * (voltage + np.minimum(voltage, K * speed)) / (2.0 * L)
    return np.maximum(current - ripple, 0.0)


def damping_factor(share: Numbers, damping_ratio: Numbers) -> Numbers:
    """Share of static torque left above the corner, where an undamped rotor loses step.

    Parameters
    ----------
    share : float or array
        Voltage share of :func:`voltage_share`. [-]
    damping_ratio : float or array
        Of the rotor about its running angle. [-]

    Returns
    -------
    float or array
        1 up to a share of 0.8, falling on a line to its least at 1.3, then constant. [-]

    Notes
    -----
    Standing: simulated at damping ratios up to 0.10; the value at 0.15 is a guess. The line is
    smooth on purpose: a cliff would make a lower setting look better than it is.

    Examples
    --------
    >>> float(damping_factor(1.3, 0.05))
    0.53
    """
    ratios, least = zip(*DAMPING_STEPS, strict=True)
    floor = np.interp(damping_ratio, ratios, least)
    fall = np.clip((np.asarray(share) - 0.8) / 0.5, 0.0, 1.0)
    return 1.0 - (1.0 - floor) * fall


def microstep_factor(microsteps: Numbers) -> Numbers:
    """Share of torque left with coarse steps.

    Parameters
    ----------
    microsteps : int or array
        Microsteps to a full step, one or more. [-]

    Returns
    -------
    float or array
        1 from 8 microsteps on. [-]

    Notes
    -----
    Standing: guess (quarter 0.94, half 0.7, full 0.51).

    Examples
    --------
    >>> float(microstep_factor(4))
    0.94
    """
    return np.interp(np.log2(microsteps), [0.0, 1.0, 2.0, 3.0], [0.51, 0.70, 0.94, 1.0])


def judged_speeds(speed: Numbers, from_rest: bool, corner: Numbers) -> list[Numbers]:
    """Speeds at which a point's torque is judged: its own, and those passed on the way from rest.

    Parameters
    ----------
    speed : float
        Of the point. [rad/s]
    from_rest : bool
        Whether the axis gets there from rest under the same torque. [-]
    corner : float or array
        Speed where full current uses up the voltage; see :func:`corner_speed`. [rad/s]

    Returns
    -------
    list
        The speed itself last; before it eighths of it and the corner, cut to the speed. [rad/s]

    Notes
    -----
    Standing: derived. Torque kinks at the corner, so a grid alone could step over it.

    Examples
    --------
    >>> [float(s) for s in judged_speeds(8.0, False, 5.0)]
    [8.0]
    """
    if not from_rest:
        return [speed + 0.0 * corner]
    grid = [fraction * speed + 0.0 * corner for fraction in SPEED_FRACTIONS[:-1]]
    return [*grid, np.minimum(corner, speed), speed + 0.0 * corner]


def torque_chain(
    speed: Numbers,
    voltage: Numbers,
    current: Numbers,
    motor_resistance: Numbers,
    bridge_resistance: Numbers,
    L: Numbers,
    K: Numbers,
    N: Numbers,
    regulator_time: Numbers,
    detent_torque: Numbers,
    damping_ratio: Numbers,
    microsteps: Numbers,
    tolerances: Tolerances,
    combine: str = "combined",
) -> TorqueChain:
    r"""Usable torque and every step on the way to it.

    Valid for microsteps of 1/8 and finer and unsaturated iron; measured curves should replace it.

    Parameters
    ----------
    speed, voltage, current : float or array
        Shaft speed, set bus voltage, set peak of the phase sine. [rad/s], [V], [A]
    motor_resistance, bridge_resistance : float or array
        Of one winding when warm; of both switches in its path. [ohm], [ohm]
    L, K, N : float or array
        Inductance, torque constant, rotor teeth. [H], [N·m/A], [-]
    regulator_time, detent_torque, damping_ratio, microsteps : float or array
        See :func:`rippled_current` and :func:`damping_factor`. [s], [N·m], [-], [-]
    tolerances : Tolerances
        Half-widths as shares of nominal. [-]
    combine : str
        ``"combined"``: root sum of squares of the losses each tolerance can cause by itself;
        ``"worst"``: least torque over every combination of ends; ``"nominal"``: none. [-]

    Returns
    -------
    TorqueChain
        Nominal, modelled (0.90 of the rippled), toleranced, less detent, factors, usable, and
        the voltage share. [N·m], [-]

    Raises
    ------
    ValueError
        If ``combine`` is none of the three.

    Notes
    -----
    Standing: simulated (0.56 to 0.94 of a switching simulation before tolerance, never above 1);
    tolerance widths are practice, combination by root sum of squares is practice. Both ends of
    each tolerance count, because torque is not monotonic in L and K.

    Examples
    --------
    >>> chain = torque_chain(62.832, 48.0, 2.8, 1.13 * 1.29475, 0.1, 5.4e-3, 0.47983, 50, 30e-6,
    ...                      0.076, 0.15, 16, Tolerances(0.1, 0.2, 0.1, 0.02))
    >>> round(float(chain.nominal), 3), round(float(chain.toleranced), 2)
    (1.236, 0.93)
    """
    R = motor_resistance + bridge_resistance

    def modelled(
        resistance: Numbers = R,
        inductance: Numbers = L,
        constant: Numbers = K,
        volts: Numbers = voltage,
    ) -> Numbers:
        mean = rippled_current(speed, volts, current, inductance, constant, regulator_time)
        return MODEL_FACTOR * pullout_torque(
            speed, volts, mean, resistance, inductance, constant, N
        )

    nominal = pullout_torque(speed, voltage, current, R, L, K, N)
    x = modelled()
    tol = tolerances
    ends = {
        "resistance": [
            motor_resistance * (1 + s * tol.resistance) + bridge_resistance for s in (-1, 1)
        ],
        "inductance": [L * (1 + s * tol.inductance) for s in (-1, 1)],
        "constant": [K * (1 + s * tol.torque) for s in (-1, 1)],
        "volts": [voltage * (1 + s * tol.voltage) for s in (-1, 1)],
    }
    if combine == "combined":
        squares = 0.0
        for name, (low, high) in ends.items():
            least = np.minimum(modelled(**{name: low}), modelled(**{name: high}))
            squares = squares + np.maximum(x - least, 0.0) ** 2
        toleranced = np.maximum(x - np.sqrt(squares), 0.0)
    elif combine == "worst":
        corners = [
            modelled(r, ind, k, v)
            for r in ends["resistance"]
            for ind in ends["inductance"]
            for k in ends["constant"]
            for v in ends["volts"]
        ]
        toleranced = np.minimum(x, np.min(np.stack(np.broadcast_arrays(*corners)), axis=0))
    elif combine == "nominal":
        toleranced = x
    else:
        raise ValueError(f"tolerances are combined, worst or nominal, not {combine!r}")
    mean = rippled_current(speed, voltage, current, L, K, regulator_time)
    share = voltage_share(speed, voltage, mean, R, L, K, N)
    damping = damping_factor(share, damping_ratio)
    microstep = microstep_factor(microsteps)
    less_detent = np.maximum(toleranced - detent_torque, 0.0)
    usable = less_detent * damping * microstep
    return TorqueChain(nominal, x, toleranced, less_detent, damping, microstep, usable, share)


def standstill_torque(K: Numbers, current: Numbers) -> Numbers:
    """Torque a motor holds at rest without counting its detent.

    Parameters
    ----------
    K, current : float or array
        Torque constant; current at rest. [N·m/A], [A]

    Returns
    -------
    float or array
        Torque. [N·m]

    Notes
    -----
    Standing: derived, with the model's factor of 0.90 (simulated).

    Examples
    --------
    >>> round(standstill_torque(0.48, 1.4), 4)
    0.6048
    """
    return MODEL_FACTOR * K * current


def step_rate(speed: Numbers, N: Numbers, microsteps: Numbers) -> Numbers:
    """Step pulses a speed asks for.

    Parameters
    ----------
    speed : float or array
        Of the shaft. [rad/s]
    N, microsteps : float or array
        Rotor teeth; microsteps to a full step. [-], [-]

    Returns
    -------
    float or array
        Pulse rate. [Hz]

    Notes
    -----
    Standing: published (I. L. Kosow, Electric Machinery and Transformers, 2nd ed., Ex. 11-3: 50
    teeth make 200 full steps a turn).

    Examples
    --------
    >>> round(float(step_rate(62.83185307, 50, 1)))
    2000
    """
    return speed / (2.0 * np.pi) * 4.0 * N * microsteps


def natural_frequency(K: Numbers, current: Numbers, inertia: Numbers, N: Numbers) -> Numbers:
    r"""Frequency at which the rotor swings about its rest place.

    Parameters
    ----------
    K, current : float or array
        Torque constant; peak of the phase sine. [N·m/A], [A]
    inertia : float or array
        Rotor and load. [kg·m²]
    N : int or array
        Rotor teeth. [-]

    Returns
    -------
    float or array
        Frequency; full-step rates near it and its whole fractions are rough. [Hz]

    Notes
    -----
    Standing: published (D. W. Jones, Stepping Motor Physics, University of Iowa).
    :math:`f = \sqrt{N T_m / J} / 2\pi`, :math:`T_m = K I`.

    Examples
    --------
    >>> round(float(natural_frequency(0.48, 2.8, 4.8e-5, 50)), 1)
    188.3
    """
    return np.sqrt(N * K * current / inertia) / (2.0 * np.pi)


def start_stop_speed(
    K: Numbers, current: Numbers, inertia: Numbers, N: Numbers, load_torque: Numbers
) -> Numbers:
    r"""Speed a motor can jump to from rest without a ramp, at the edge of losing step.

    Use 0.7 of it, and only where the voltage share is below 0.8.

    Parameters
    ----------
    K, current : float or array
        Torque constant; peak of the phase sine. [N·m/A], [A]
    inertia : float or array
        Rotor and load. [kg·m²]
    N : int or array
        Rotor teeth. [-]
    load_torque : float or array
        Steady load. [N·m]

    Returns
    -------
    float or array
        Shaft speed; 0 where the load alone is too much. [rad/s]

    Notes
    -----
    Standing: derived by energy and simulated (first failure at 1.00 times in 53 of 56 cases).
    :math:`\omega = \sqrt{2 T_m / (N J) [2\cos\delta - (T_L/T_m)(\pi - 2\delta)]}`,
    :math:`\delta = \arcsin(T_L/T_m)`.

    Examples
    --------
    >>> round(float(start_stop_speed(0.48, 2.8, 4.8e-5, 50, 0.0)) * 60 / 6.283185, 1)
    452.0
    """
    most = K * current
    share = np.clip(np.abs(load_torque) / most, 0.0, 1.0)
    lag = np.arcsin(share)
    energy = 2.0 * np.cos(lag) - share * (np.pi - 2.0 * lag)
    return np.sqrt(np.maximum(2.0 * most / (N * inertia) * energy, 0.0))
