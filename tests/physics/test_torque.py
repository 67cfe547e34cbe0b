"""Torque: the project's check numbers, outside values, and a second method for each formula."""

from __future__ import annotations

import itertools
from math import asin, cos, pi, radians, sin, sqrt

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from referees import Point, assert_array_equals_scalars, assert_as_printed, points
from scipy.integrate import quad, solve_ivp
from scipy.optimize import brentq, minimize_scalar

from selector.physics.torque import (
    COPPER_PER_KELVIN,
    DAMPING_STEPS,
    MODEL_FACTOR,
    Tolerances,
    corner_speed,
    damping_factor,
    joined,
    judged_speeds,
    microstep_factor,
    natural_frequency,
    pullout_torque,
    rippled_current,
    standstill_torque,
    start_stop_speed,
    step_rate,
    torque_chain,
    torque_constant,
    voltage_share,
    winding_resistance,
)

RPM = 2.0 * pi / 60.0
SQUARE_WAVE = 4.0 / pi
REGULATOR_TIME = 30e-6
TOLERANCES = Tolerances(0.10, 0.20, 0.10, 0.02)

# The project's own collected numbers, from a script apart from this program; 0.1 %.
# Holding torque [N·m], rated current [A], R at 25 °C [ohm], L [H], one switch [ohm]; winding 85 °C,
# 50 teeth, regulator 30 µs.
SMALL = (0.45, 1.7, 1.5, 2.8e-3, 0.2)
MIDDLE = (1.26, 2.8, 0.9, 2.5e-3, 0.1)
LONG = (1.9, 2.8, 1.13, 5.4e-3, 0.1)
LARGE = (4.5, 5.5, 0.46, 4.0e-3, 0.05)
# motor, V, I, rpm; then R, E, X, pull-out at V, pull-out at 4/π·V, I_eff, 0.90·pull-out at I_eff
CHECKS = [
    (SMALL, 24, 1.7, 300, 2.254, 5.880, 4.398, 0.3182, 0.3182, 1.540, 0.2594),
    (SMALL, 36, 1.7, 1200, 2.254, 23.52, 17.59, 0.3087, 0.3182, 1.381, 0.2327),
    (MIDDLE, 24, 2.8, 300, 1.312, 9.996, 3.927, 0.8910, 0.8910, 2.596, 0.7434),
    (MIDDLE, 36, 2.8, 900, 1.312, 29.99, 11.78, 0.7932, 0.8893, 2.404, 0.6452),
    (LONG, 24, 2.8, 600, 1.596, 30.15, 16.96, 0.5963, 0.7809, 2.667, 0.5367),
    (LONG, 48, 2.8, 600, 1.596, 30.15, 16.96, 1.235, 1.344, 2.583, 1.066),
    (LARGE, 48, 5.5, 300, 0.6685, 18.18, 6.283, 3.182, 3.182, 5.252, 2.735),
]


def at_85_degrees(motor, voltage, current, rpm):
    holding_torque, rated_current, resistance, inductance, switch = motor
    return Point(
        speed=rpm * RPM,
        voltage=float(voltage),
        current=current,
        R=winding_resistance(resistance, 85.0) + 2.0 * switch,
        L=inductance,
        K=torque_constant(holding_torque, rated_current),
        N=50,
    )


def voltage_of(i_d, i_q, point):
    """Length of the phase voltage that a current vector asks for, from the phase equations."""
    X = point.N * point.speed * point.L
    v_d = point.R * i_d - X * i_q
    v_q = point.R * i_q + X * i_d + point.K * point.speed
    return np.hypot(v_d, v_q)


@pytest.mark.standing("derived")
@pytest.mark.parametrize("check", CHECKS, ids=lambda row: f"{row[0][0]}Nm-{row[1]}V-{row[3]}rpm")
def test_the_collected_numbers_come_out(check):
    motor, volts, amperes, rpm, R, E, X, here, upper, mean_current, modelled = check
    point = at_85_degrees(motor, volts, amperes, rpm)
    mean = rippled_current(point.speed, point.voltage, amperes, point.L, point.K, REGULATOR_TIME)
    found = [
        point.R,
        point.K * point.speed,
        point.N * point.speed * point.L,
        pullout_torque(*point),
        pullout_torque(*point._replace(voltage=SQUARE_WAVE * point.voltage)),
        mean,
        MODEL_FACTOR * pullout_torque(*point._replace(current=float(mean))),
    ]
    assert found == pytest.approx([R, E, X, here, upper, mean_current, modelled], rel=1e-3)


@pytest.mark.standing("derived")
def test_the_collected_chain_from_nominal_to_usable_comes_out():
    chain = torque_chain(
        600 * RPM, 48.0, 2.8, winding_resistance(1.13, 100.0), 0.10, 5.4e-3,
        torque_constant(1.9, 2.8), 50, REGULATOR_TIME, 0.04 * 1.9, 0.15, 16, TOLERANCES,
    )  # fmt: skip
    assert_as_printed(chain.nominal, "1.236")
    assert_as_printed(chain.modelled, "1.066")
    assert_as_printed(chain.toleranced, "0.930")
    assert_as_printed(chain.less_detent, "0.854")
    assert_as_printed(chain.voltage_share, "1.16")


@pytest.mark.standing("derived")
def test_the_collected_natural_frequency_and_start_stop_speed_come_out():
    K = torque_constant(1.9, 2.8)
    assert pullout_torque(0.0, 48.0, 2.8, 1.6, 5.4e-3, K, 50) == pytest.approx(1.344, rel=1e-3)
    assert natural_frequency(K, 2.8, 4.8e-5, 50) == pytest.approx(188.3, rel=1e-3)
    assert start_stop_speed(K, 2.8, 4.8e-5, 50, 0.0) / RPM == pytest.approx(452.0, rel=1e-3)


# --- copper -------------------------------------------------------------------------------------


def test_copper_has_the_published_temperature_coefficient():
    # K. C. Agrawal, Industrial Power Engineering and Applications Handbook, conductor table:
    # 0.00393 /K at 20 °C.
    assert_as_printed(COPPER_PER_KELVIN, "0.00393")


@pytest.mark.parametrize("temperature", [20.0, 60.0, 85.0, 100.0, 130.0])
def test_the_coefficient_agrees_with_copper_of_no_resistance_at_minus_234_5_degrees(temperature):
    # IACS copper: R2/R1 = (234.5 + t2)/(234.5 + t1), from 20 °C, where 0.00393 belongs.
    published = (234.5 + temperature) / (234.5 + 20.0)
    assert 1.0 + COPPER_PER_KELVIN * (temperature - 20.0) == pytest.approx(published, rel=1e-3)


@pytest.mark.parametrize("temperature", [25.0, 60.0, 85.0, 100.0, 130.0])
def test_taking_the_coefficient_from_25_degrees_errs_to_more_resistance_and_by_little(temperature):
    exact = (234.5 + temperature) / (234.5 + 25.0)
    taken = winding_resistance(1.0, temperature)
    assert exact <= taken <= 1.006 * exact


@given(st.floats(0.1, 10.0), st.floats(-20.0, 180.0), st.floats(0.0, 100.0))
def test_a_hotter_winding_never_has_less_resistance(resistance, temperature, hotter):
    cold = winding_resistance(resistance, temperature)
    assert winding_resistance(resistance, temperature + hotter) >= cold > 0.0


# --- steps and resonance ------------------------------------------------------------------------


def test_fifty_teeth_make_two_hundred_steps_a_turn():
    # I. L. Kosow, Electric Machinery and Transformers, 2nd ed., Ex. 11-3: 90/50 = 1.8 degrees.
    assert step_rate(2.0 * pi, 50, 1) == pytest.approx(200.0, rel=1e-12)
    assert_as_printed(360.0 / step_rate(2.0 * pi, 50, 1), "1.8")


@pytest.mark.standing("derived")
def test_ten_turns_a_second_are_two_thousand_full_steps_a_second():
    assert step_rate(10 * 2.0 * pi, 50, 1) == pytest.approx(2000.0, rel=1e-12)
    microsteps_a_turn = step_rate(2.0 * pi, 50, 16)
    assert 5e-3 / microsteps_a_turn == pytest.approx(1.5625e-6, rel=1e-12)


def test_natural_frequency_of_the_published_case():
    # D. W. Jones, Stepping Motor Physics, Univ. of Iowa, gives the formula. The worked case prints:
    # torque 0.32 N·cm at 0.3 degrees, J 48 g·cm²; k 0.611 N·m/rad, 357 rad/s, 56.8 Hz.
    k = 0.32e-2 / radians(0.3)
    assert_as_printed(k, "0.611")
    frequency = natural_frequency(k / 50, 1.0, 48e-7, 50)
    assert_as_printed(2.0 * pi * frequency, "357")
    assert_as_printed(frequency, "56.8")


@pytest.mark.standing("derived")
def test_natural_frequency_of_a_motor_and_its_load():
    # Both phases on at rated current: a vector of √2·I_r, so the holding torque itself.
    K = torque_constant(1.26, 2.8)
    assert natural_frequency(K, sqrt(2.0) * 2.8, 6.0e-5, 50) == pytest.approx(163.1, rel=1e-3)


def test_natural_frequency_is_that_of_a_rotor_swinging_in_time():
    torque, inertia, teeth = 0.9, 6e-5, 50

    def swing(_, state):
        angle, speed = state
        return [speed, -torque * sin(teeth * angle) / inertia]

    def crossing(_, state):
        return state[0]

    crossing.direction = 1.0
    small = 1e-4 / teeth
    run = solve_ivp(swing, (0.0, 0.05), [small, 0.0], events=crossing, rtol=1e-10, atol=1e-14)
    period = np.diff(run.t_events[0]).mean()
    assert natural_frequency(0.45, 2.0, inertia, teeth) == pytest.approx(1.0 / period, rel=1e-5)


@pytest.mark.standing("derived")
@pytest.mark.parametrize(
    ("share", "degrees"), [(0.1, "0.1148"), (0.5, "0.6000"), (0.8, "1.0626"), (1.0, "1.8")]
)
def test_torque_over_angle_is_the_sine_whose_slope_natural_frequency_uses(share, degrees):
    # Form T = T_h sin(N θ), four steps to a period: D. W. Jones; the angles are derived.
    most, teeth, inertia = 0.8 * 1.5, 50, 5e-5
    lag = asin(share) / teeth
    assert_as_printed(np.degrees(lag), degrees)
    stiffness = (2.0 * pi * natural_frequency(0.8, 1.5, inertia, teeth)) ** 2 * inertia
    assert stiffness / teeth * sin(teeth * lag) == pytest.approx(share * most, rel=1e-9)


@pytest.mark.parametrize("share", [0.0, 0.1, 0.3, 0.6, 0.9])
def test_start_stop_speed_is_what_the_work_of_the_torque_curve_can_brake(share):
    most, teeth, inertia = 1.344, 50, 4.8e-5
    # The rotor may lag until the torque, past its peak, has fallen to the load.
    lag = asin(share)
    work, _ = quad(lambda angle: most * (sin(teeth * angle) - share), lag / teeth,
                   (pi - lag) / teeth)  # fmt: skip
    closed = start_stop_speed(most, 1.0, inertia, teeth, share * most)
    assert closed == pytest.approx(sqrt(2.0 * work / inertia), rel=1e-6)


def test_a_load_beyond_the_motor_leaves_no_start_stop_speed():
    assert start_stop_speed(0.5, 2.0, 5e-5, 50, 1.0) == pytest.approx(0.0, abs=1e-6)
    assert start_stop_speed(0.5, 2.0, 5e-5, 50, 2.0) == pytest.approx(0.0, abs=1e-6)


@given(st.floats(0.0, 1.0), st.floats(0.0, 1.0))
def test_more_load_never_raises_the_start_stop_speed(load, more):
    light = start_stop_speed(0.5, 2.0, 5e-5, 50, load)
    assert start_stop_speed(0.5, 2.0, 5e-5, 50, load + more) <= light + 1e-9


@pytest.mark.standing("practice")
@pytest.mark.parametrize(("amperes", "ohms", "printed"), [(2.8, 1.1, "3.08"), (0.67, 6.8, "4.56")])
def test_nameplate_voltage_is_all_that_a_motor_at_rest_asks_for(amperes, ohms, printed):
    asked = voltage_share(0.0, 1.0, amperes, ohms, 2.5e-3, 0.3, 50)
    assert asked == pytest.approx(float(printed), rel=2e-3)


# --- pull-out torque ----------------------------------------------------------------------------

# p 50, R 0.9 ohm, L 2.5 mH, psi 6.36396 mWb. Relation: P. Acarnley, Stepping Motors, hybrid
# pull-out section, from memory; the figures in N·m are the project's own, 0.01 %.
VOLTAGE_FED = Point(0.0, 0.0, 1e6, 0.9, 2.5e-3, 50 * 6.36396e-3, 50)
TURNS_A_SECOND = [2, 5, 10, 15, 20]
PULLOUT_TABLE = [
    (24.0, [3.8690, 1.7192, 0.8744, 0.5848, 0.4391]),
    (24.0 * SQUARE_WAVE, [5.0216, 2.2371, 1.1384, 0.7614, 0.5717]),
    (48.0, [8.0873, 3.6147, 1.8404, 1.2312, 0.9245]),
]


@pytest.mark.standing("memory")
@pytest.mark.parametrize(("volts", "torques"), PULLOUT_TABLE, ids=["sine24", "square24", "sine48"])
def test_without_a_current_limit_pullout_is_that_of_a_voltage_fed_motor(volts, torques):
    for turns, torque in zip(TURNS_A_SECOND, torques, strict=True):
        point = VOLTAGE_FED._replace(speed=2.0 * pi * turns, voltage=volts)
        assert pullout_torque(*point) == pytest.approx(torque, rel=1e-4)


@pytest.mark.parametrize("turns", [5.0, 15.0])
def test_pullout_is_the_best_load_angle_of_the_phase_equations_in_time(turns):
    speed, volts = 2.0 * pi * turns, 24.0
    _, _, _, R, L, K, N = VOLTAGE_FED
    period = 2.0 * pi / (N * speed)
    settled = np.ceil(14.0 * L / R / period) * period
    times = settled + np.linspace(0.0, period, 64, endpoint=False)

    def steady_torque(lead):
        def phases(t, currents):
            angle = N * speed * t
            return [
                (-volts * sin(angle + lead) - R * currents[0] + K * speed * sin(angle)) / L,
                (volts * cos(angle + lead) - R * currents[1] - K * speed * cos(angle)) / L,
            ]

        run = solve_ivp(phases, (0.0, times[-1]), [0.0, 0.0], t_eval=times, rtol=1e-8, atol=1e-8)
        i_a, i_b = run.y
        return np.mean(K * (-i_a * np.sin(N * speed * times) + i_b * np.cos(N * speed * times)))

    best = minimize_scalar(
        lambda lead: -steady_torque(lead), bounds=(0.0, pi / 2), method="bounded"
    )
    closed = pullout_torque(*VOLTAGE_FED._replace(speed=speed, voltage=volts))
    assert closed == pytest.approx(-best.fun, rel=1e-4)


def highest_on_a_grid(point, slack, size=801):
    """Largest K·i_q on a grid of current vectors, limits widened by ``slack`` cells; its cell."""
    line = np.linspace(-point.current, point.current, size)
    reach = slack * (line[1] - line[0])
    i_d, i_q = np.meshgrid(line, line[size // 2 :])
    X = point.N * point.speed * point.L
    allowed = (np.hypot(i_d, i_q) <= point.current + reach) & (
        voltage_of(i_d, i_q, point) <= point.voltage + np.hypot(point.R, X) * reach
    )
    return point.K * float(i_q[allowed].max(initial=0.0)), point.K * (line[1] - line[0])


@pytest.mark.parametrize("check", CHECKS, ids=lambda row: f"{row[0][0]}Nm-{row[1]}V-{row[3]}rpm")
def test_pullout_matches_a_scan_over_current_vectors(check):
    point = at_85_degrees(*check[:4])
    scanned, _ = highest_on_a_grid(point, 0.0, size=4001)
    assert pullout_torque(*point) == pytest.approx(scanned, rel=1e-3)


@given(points())
def test_pullout_lies_between_scans_inside_and_around_the_limits(point):
    # The best vector lies in some cell, so a corner of it is allowed once the limits give way by
    # a cell's diagonal; and no allowed corner may beat it.
    inner, _ = highest_on_a_grid(point, 0.0)
    outer, cell = highest_on_a_grid(point, sqrt(0.5))
    assert inner * (1 - 1e-9) <= pullout_torque(*point) <= outer + cell


def test_a_low_setting_far_above_the_corner_leaves_no_torque():
    # The current that would cancel the back-EMF is larger than the setting.
    assert pullout_torque(150.0, 24.0, 0.5, 1.6, 5.4e-3, 0.48, 50) == 0.0


def test_at_standstill_pullout_is_the_setting_or_what_resistance_lets_through():
    assert pullout_torque(0.0, 24.0, 2.0, 1.5, 5e-3, 0.5, 50) == pytest.approx(1.0, rel=1e-12)
    assert pullout_torque(0.0, 3.0, 9.0, 1.5, 5e-3, 0.5, 50) == pytest.approx(1.0, rel=1e-12)


@given(points(), st.floats(1.0, 3.0))
def test_more_bus_voltage_never_lowers_pullout_torque(point, factor):
    more = point._replace(voltage=factor * point.voltage)
    assert pullout_torque(*more) >= pullout_torque(*point) - 1e-6 * point.K * point.current


@given(points(), st.floats(1.0, 3.0))
def test_more_current_never_lowers_pullout_torque(point, factor):
    more = point._replace(current=factor * point.current)
    assert pullout_torque(*more) >= pullout_torque(*point) - 1e-6 * point.K * point.current


@given(points())
def test_pullout_torque_is_never_negative_nor_above_what_the_setting_makes(point):
    assert 0.0 <= pullout_torque(*point) <= point.K * point.current * (1 + 1e-12)


@given(points())
def test_pullout_is_the_full_setting_up_to_the_corner_and_less_beyond(point):
    full = point.K * point.current
    share = voltage_share(*point)
    assume(abs(share - 1.0) > 1e-6)
    if share < 1.0:
        assert pullout_torque(*point) == pytest.approx(full, rel=1e-12)
    else:
        assert pullout_torque(*point) < full


@pytest.mark.parametrize("speed", [-1.0, np.array([1.0, -1e-9])])
def test_negative_speed_is_refused(speed):
    with pytest.raises(ValueError, match="zero or more"):
        pullout_torque(speed, 24.0, 2.8, 1.6, 5.4e-3, 0.48, 50)
    with pytest.raises(ValueError, match="zero or more"):
        torque_chain(speed, 24.0, 2.8, 1.5, 0.1, 5.4e-3, 0.48, 50, 3e-5, 0.0, 0.1, 16, TOLERANCES)


# --- the corner ---------------------------------------------------------------------------------


@pytest.mark.standing("derived")
@pytest.mark.parametrize(("volts", "turns"), [(24.0, "7.480"), (48.0, "15.568")])
def test_the_corner_of_the_voltage_fed_case(volts, turns):
    corner = corner_speed(volts, 0.0, 2.8, 0.9, 2.5e-3, 50 * 6.36396e-3, 50)
    assert_as_printed(corner / (2.0 * pi), turns)


@given(points())
def test_corner_speed_is_where_the_voltage_share_reaches_one(point):
    assume(voltage_share(*point._replace(speed=0.0)) < 0.999)
    found = brentq(lambda speed: voltage_share(*point._replace(speed=speed)) - 1.0, 0.0, 1e5)
    _, voltage, current, R, L, K, N = point
    assert corner_speed(voltage, 0.0, current, R, L, K, N) == pytest.approx(found, rel=1e-9)


@given(points(), st.floats(-1.0, 1.0))
def test_at_its_corner_any_driving_vector_asks_for_the_whole_voltage(point, lean):
    i_d, i_q = point.current * sin(lean), point.current * cos(lean)
    assume(point.R * point.current < 0.999 * point.voltage)
    corner = corner_speed(point.voltage, i_d, i_q, point.R, point.L, point.K, point.N)
    asked = voltage_of(i_d, i_q, point._replace(speed=float(corner)))
    assert asked == pytest.approx(point.voltage, rel=1e-9)


def test_a_vector_beyond_the_voltage_at_rest_has_its_corner_at_standstill():
    assert corner_speed(10.0, 0.0, 8.0, 1.5, 5e-3, 0.5, 50) == 0.0


@given(st.floats(0.0, 300.0), st.booleans(), st.floats(0.0, 500.0))
def test_judged_speeds_end_at_the_point_and_never_pass_it(speed, from_rest, corner):
    judged = judged_speeds(speed, from_rest, corner)
    assert judged[-1] == speed
    assert max(judged) <= speed
    assert len(judged) == (9 if from_rest else 1)
    if from_rest:
        assert min(corner, speed) in judged


# --- from the ideal torque to the usable one ----------------------------------------------------


@given(points(), st.floats(1e-6, 60e-6))
def test_ripple_takes_at_least_what_the_bus_and_at_most_what_twice_the_bus_would(point, time):
    mean = rippled_current(point.speed, point.voltage, point.current, point.L, point.K, time)
    one_bus = time * point.voltage / (2.0 * point.L)
    assert max(0.0, point.current - 2.0 * one_bus) <= mean <= max(0.0, point.current - one_bus)


def test_no_dead_time_means_no_ripple():
    assert rippled_current(50.0, 48.0, 2.8, 3e-3, 0.4, 0.0) == 2.8


@pytest.mark.parametrize(("ratio", "least"), DAMPING_STEPS)
def test_damping_falls_on_a_line_from_a_share_of_0_8_to_1_3(ratio, least):
    # by hand: halfway between, at 1.05, half of the fall
    assert damping_factor(0.8, ratio) == pytest.approx(1.0, abs=1e-12)
    assert damping_factor(1.05, ratio) == pytest.approx((1.0 + least) / 2.0, abs=1e-12)
    assert damping_factor(1.3, ratio) == pytest.approx(least, abs=1e-12)
    assert damping_factor(5.0, ratio) == pytest.approx(least, abs=1e-12)


@given(st.floats(0, 3), st.floats(0, 1), st.floats(0, 0.3), st.floats(0, 0.1))
def test_damping_factor_falls_with_voltage_share_and_rises_with_damping(share, more, ratio, better):
    here = damping_factor(share, ratio)
    assert 0.0 <= damping_factor(share + more, ratio) <= here <= 1.0
    assert damping_factor(share, ratio + better) >= here


@pytest.mark.standing("guess")
@pytest.mark.parametrize(
    ("microsteps", "factor"), [(1, 0.51), (2, 0.7), (4, 0.94), (8, 1.0), (16, 1.0), (256, 1.0)]
)
def test_coarse_steps_cost_torque(microsteps, factor):
    assert microstep_factor(microsteps) == pytest.approx(factor, abs=1e-12)


def chain_of(point, combine, tolerances=TOLERANCES, microsteps=16):
    return torque_chain(
        point.speed, point.voltage, point.current, 0.9 * point.R, 0.1 * point.R, point.L, point.K,
        point.N, REGULATOR_TIME, 0.02 * point.K, 0.08, microsteps, tolerances, combine,
    )  # fmt: skip


def modelled(point):
    mean = rippled_current(
        point.speed, point.voltage, point.current, point.L, point.K, REGULATOR_TIME
    )
    return 0.90 * pullout_torque(*point._replace(current=float(mean)))


@given(points())
def test_neither_combined_nor_worst_tolerances_leave_more_than_none(point):
    nominal = chain_of(point, "nominal")
    assert chain_of(point, "combined").usable <= nominal.usable
    assert chain_of(point, "worst").usable <= nominal.usable


@given(points())
def test_worst_is_the_least_of_all_corners_of_the_tolerances(point):
    least = modelled(point)
    for r, ind, k, v in itertools.product((-1, 1), repeat=4):
        corner = point._replace(
            R=point.R * (0.9 * (1 + 0.10 * r) + 0.1),
            L=point.L * (1 + 0.20 * ind),
            K=point.K * (1 + 0.10 * k),
            voltage=point.voltage * (1 + 0.02 * v),
        )
        least = min(least, modelled(corner))
    assert chain_of(point, "worst").toleranced == pytest.approx(least, rel=1e-9, abs=1e-12)


@given(points())
def test_combined_is_nominal_less_the_root_of_squares_of_single_losses(point):
    x = modelled(point)
    pairs = [
        [point._replace(R=point.R * (0.9 * (1 + s * 0.10) + 0.1)) for s in (-1, 1)],
        [point._replace(L=point.L * (1 + s * 0.20)) for s in (-1, 1)],
        [point._replace(K=point.K * (1 + s * 0.10)) for s in (-1, 1)],
        [point._replace(voltage=point.voltage * (1 + s * 0.02)) for s in (-1, 1)],
    ]
    losses = [max(0.0, x - min(modelled(end) for end in pair)) for pair in pairs]
    expected = max(0.0, x - sqrt(sum(loss**2 for loss in losses)))
    assert chain_of(point, "combined").toleranced == pytest.approx(expected, rel=1e-9, abs=1e-12)


@given(points(), st.sampled_from(["nominal", "combined", "worst"]))
def test_without_tolerances_every_way_of_combining_them_is_the_same(point, combine):
    none = chain_of(point, combine, Tolerances(0.0, 0.0, 0.0, 0.0))
    assert none.toleranced == pytest.approx(modelled(point), rel=1e-12)


@given(points(), st.sampled_from(["nominal", "combined", "worst"]), st.sampled_from([1, 2, 4, 16]))
def test_each_step_of_the_chain_follows_from_the_one_before(point, combine, microsteps):
    chain = chain_of(point, combine, microsteps=microsteps)
    assert chain.nominal == pytest.approx(pullout_torque(*point), rel=1e-12)
    assert 0.0 <= chain.usable <= chain.less_detent <= chain.toleranced <= chain.modelled
    assert chain.modelled <= 0.90 * chain.nominal + 1e-12
    less = max(0.0, chain.toleranced - 0.02 * point.K)
    assert chain.less_detent == pytest.approx(less, rel=1e-12, abs=1e-15)
    factors = chain.damping * chain.microstep
    assert chain.usable == pytest.approx(less * factors, rel=1e-12, abs=1e-15)


def test_an_unknown_way_of_combining_is_refused():
    with pytest.raises(ValueError, match="combined, worst or nominal"):
        chain_of(Point(10.0, 24.0, 2.0, 1.5, 5e-3, 0.5, 50), "average")


@given(points())
def test_a_motor_at_rest_holds_what_it_would_pull_out_at_without_ripple(point):
    at_rest = point._replace(speed=0.0)
    assume(voltage_share(*at_rest) < 1.0)
    expected = 0.90 * pullout_torque(*at_rest)
    assert standstill_torque(point.K, point.current) == pytest.approx(expected, rel=1e-12)


# --- windings -----------------------------------------------------------------------------------

RATINGS = st.tuples(
    st.floats(0.1, 12.0), st.floats(0.3, 8.0), st.floats(0.1, 9.0), st.floats(0.3e-3, 30e-3)
)
WAYS = ["series", "parallel"]


def copper_loss(figures):
    return 2.0 * figures.rated_current**2 * figures.resistance


def test_torque_constant_makes_the_holding_torque_of_both_phases():
    # by hand: 2.8 A in both phases is a vector of 2.8·√2 A
    assert torque_constant(1.9, 2.8) * 2.8 * sqrt(2.0) == pytest.approx(1.9, rel=1e-12)


@given(RATINGS)
def test_parallel_has_a_quarter_of_the_series_resistance_and_twice_its_current(rating):
    parallel = joined("parallel", "series", *rating)
    torque, current, resistance, inductance = rating
    assert parallel == pytest.approx((torque, 2 * current, resistance / 4, inductance / 4))


@given(RATINGS, st.sampled_from(WAYS), st.sampled_from(WAYS))
def test_joining_there_and_back_changes_nothing(rating, there, back):
    again = joined(back, there, *joined(there, back, *rating))
    assert again == pytest.approx(rating, rel=1e-9)


@given(RATINGS, st.sampled_from([*WAYS, "unipolar"]), st.sampled_from(WAYS))
def test_no_joining_changes_copper_loss(rating, rated_as, joining):
    _, current, resistance, _ = rating
    loss = copper_loss(joined(joining, rated_as, *rating))
    assert loss == pytest.approx(2.0 * current**2 * resistance, rel=1e-9)


@given(RATINGS, st.sampled_from([*WAYS, "unipolar"]))
def test_series_and_parallel_agree_in_torque_stored_energy_and_copper(rating, rated_as):
    series, parallel = (joined(way, rated_as, *rating) for way in WAYS)
    assert series.holding_torque == pytest.approx(parallel.holding_torque, rel=1e-9)
    assert series.inductance * series.rated_current**2 == pytest.approx(
        parallel.inductance * parallel.rated_current**2, rel=1e-9
    )
    assert series.resistance == pytest.approx(4.0 * parallel.resistance, rel=1e-9)
    assert series.inductance == pytest.approx(4.0 * parallel.inductance, rel=1e-9)


@pytest.mark.standing("derived")
def test_a_unipolar_rating_becomes_series_and_parallel():
    half = (1.0, 2.0, 3.0, 4e-3)
    root2 = sqrt(2.0)
    assert joined("series", "unipolar", *half) == pytest.approx((root2, root2, 6.0, 16e-3))
    assert joined("parallel", "unipolar", *half) == pytest.approx((root2, 2 * root2, 1.5, 4e-3))


@pytest.mark.parametrize(("joining", "rated_as"), [("star", "series"), ("series", "bipolar")])
def test_an_unknown_joining_is_refused(joining, rated_as):
    with pytest.raises(ValueError, match="no joining"):
        joined(joining, rated_as, 1.0, 2.0, 3.0, 4e-3)


# --- arrays -------------------------------------------------------------------------------------


def flat_chain(speed, voltage, current, R, L, K, N, combine):
    return chain_of(Point(speed, voltage, current, R, L, K, N), combine)


@given(st.lists(points(), min_size=2, max_size=6))
def test_arrays_equal_scalars_of_every_function_of_a_point(rows):
    assert_array_equals_scalars(pullout_torque, rows)
    assert_array_equals_scalars(voltage_share, rows)
    for combine in ("nominal", "combined", "worst"):
        assert_array_equals_scalars(lambda *row, c=combine: flat_chain(*row, c), rows)
    assert_array_equals_scalars(
        lambda w, V, I, R, L, K, N: corner_speed(V, -0.3 * I, 0.7 * I, R, L, K, N), rows
    )
    assert_array_equals_scalars(
        lambda w, V, I, R, L, K, N: rippled_current(w, V, I, L, K, 30e-6), rows
    )
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: step_rate(w, N, 16), rows)
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: standstill_torque(K, I), rows)
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: torque_constant(K, I), rows)
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: winding_resistance(R, w), rows)
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: natural_frequency(K, I, L, N), rows)
    assert_array_equals_scalars(
        lambda w, V, I, R, L, K, N: start_stop_speed(K, I, L, N, 0.1 * R), rows
    )
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: damping_factor(w / V, L * 5), rows)
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: microstep_factor(N), rows)
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: judged_speeds(100.0, True, w), rows)


def test_a_row_of_speeds_may_meet_a_column_of_voltages():
    speeds, volts = np.array([5.0, 60.0, 200.0]), np.array([[24.0], [48.0]])
    table = pullout_torque(speeds, volts, 2.8, 1.6, 5.4e-3, 0.48, 50)
    assert table.shape == (2, 3)
    assert table[1, 2] == pullout_torque(200.0, 48.0, 2.8, 1.6, 5.4e-3, 0.48, 50)
