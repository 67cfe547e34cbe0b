"""Bus power: the project's check numbers, the phase equations and an energy balance."""

from __future__ import annotations

from math import pi, sqrt

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from referees import assert_array_equals_scalars, assert_as_printed, points

from selector.physics.power import (
    IRON_LOSS,
    IRON_LOSS_HIGH,
    IRON_LOSS_LOW,
    bus_power,
    driver_loss,
    holding_power,
    iron_loss,
    peak_bus_power,
    phase_currents,
    worst_power,
)
from selector.physics.supply import naive_current
from selector.physics.torque import pullout_torque, torque_constant, winding_resistance

RPM = 2.0 * pi / 60.0
SQUARE_WAVE = 4.0 / pi
IDLE = 1.5

# The project's own collected numbers, from a script apart from this program; 0.1 %. Holding torque,
# rated current, R at 25 °C, L, one switch; V, I, rpm; torque and power. Winding 85 °C, iron 0.014.
CHECKS = [
    (0.45, 1.7, 1.5, 2.8e-3, 0.2, 24, 1.7, 300, 0.15, 19.01),
    (0.45, 1.7, 1.5, 2.8e-3, 0.2, 36, 1.7, 1200, 0.10, 38.47),
    (1.26, 2.8, 0.9, 2.5e-3, 0.1, 24, 2.8, 300, 0.40, 40.15),
    (1.26, 2.8, 0.9, 2.5e-3, 0.1, 36, 2.8, 900, 0.30, 64.50),
    (1.9, 2.8, 1.13, 5.4e-3, 0.1, 24, 2.8, 600, 0.25, 31.07),
    (1.9, 2.8, 1.13, 5.4e-3, 0.1, 48, 2.8, 600, 0.50, 82.24),
    (4.5, 5.5, 0.46, 4.0e-3, 0.05, 48, 5.5, 300, 1.50, 126.2),
]

shares = st.floats(0.0, 0.98)
shares_either_way = st.floats(-0.98, 0.98)  # below zero the load drives the motor


def voltages_of(currents, point):
    """Phase voltage along and across the flux, from the phase equations."""
    X = point.N * point.speed * point.L
    v_d = point.R * currents.i_d - X * currents.i_q
    v_q = point.R * currents.i_q + X * currents.i_d + point.K * point.speed
    return v_d, v_q


def reachable_torque(point, share):
    """A share of the most that setting and voltage allow apart; none for some points."""
    X, E = point.N * point.speed * point.L, point.K * point.speed
    Z = np.hypot(point.R, X)
    by_voltage = SQUARE_WAVE * point.voltage / Z - E * point.R / Z**2
    return share * point.K * min(point.current, by_voltage)


def currents_at(point, torque):
    return phase_currents(point.speed, torque, *point[1:])


def power_at(point, torque, iron=IRON_LOSS_HIGH, idle=IDLE):
    holding = sqrt(2.0) * point.K * point.current
    return bus_power(point.speed, torque, *point[1:], holding, idle, iron)


@pytest.mark.standing("derived")
@pytest.mark.parametrize("check", CHECKS, ids=lambda row: f"{row[0]}Nm-{row[5]}V-{row[7]}rpm")
def test_the_collected_powers_come_out(check):
    holding, rated, resistance, L, switch, volts, amperes, rpm, torque, power = check
    R = winding_resistance(resistance, 85.0) + 2.0 * switch
    K = torque_constant(holding, rated)
    found = bus_power(rpm * RPM, torque, volts, amperes, R, L, K, 50, holding, IDLE, 0.014)
    assert found == pytest.approx(power, rel=1e-3)


@pytest.mark.standing("derived")
def test_four_axes_need_far_less_than_their_worst_case_and_the_sum_of_phase_currents():
    # Four 1.9 N·m motors, 24 V, 300 rpm, 0.25 N·m while accelerating, winding 85 °C.
    R, K, speed = winding_resistance(1.13, 85.0) + 0.2, torque_constant(1.9, 2.8), 300 * RPM
    motor = (R, 5.4e-3, K, 50, 1.9, IDLE)
    axis = bus_power(speed, 0.25, 24.0, 2.8, *motor)
    assert_as_printed(axis, "36.1")
    assert_as_printed(bus_power(speed, 0.25, 24.0, 2.8, *motor, 0.0), "16.2")
    assert_as_printed(1.2 * 4 * axis, "173")
    upper = pullout_torque(speed, SQUARE_WAVE * 24.0, 2.8, *motor[:4])
    worst = worst_power(speed, 0.10, 24.0, 24.0, 2.8, *motor, upper)
    assert_as_printed(1.2 * 4 * worst, "378")
    assert naive_current([2.8] * 4) == pytest.approx(26.88, rel=1e-9)
    assert_as_printed(24.0 * naive_current([2.8] * 4), "645")


@pytest.mark.standing("practice")
@pytest.mark.parametrize(
    ("volts", "amperes"), [(12.0, 0.20), (15.0, 0.18), (20.8, 0.16), (24.0, 0.18)]
)
def test_a_slow_axis_at_one_ampere_takes_about_a_fifth_of_it_from_the_supply(volts, amperes):
    # Order of magnitude: the observation states neither motor nor speed, so a factor of two. Here
    # a 0.45 N·m motor at 30 rpm, barely loaded.
    K = torque_constant(0.45, 1.7)
    power = bus_power(30 * RPM, 0.02, volts, 1.0, 1.9, 2.8e-3, K, 50, 0.45, IDLE, IRON_LOSS)
    assert amperes / 2 < power / volts < amperes * 2


# --- currents -----------------------------------------------------------------------------------


@given(points(), shares_either_way)
def test_currents_fill_the_setting_or_the_voltage_and_never_pass_the_voltage(point, share):
    torque = reachable_torque(point, share)
    in_reach = pullout_torque(*point._replace(voltage=SQUARE_WAVE * point.voltage))
    assume(torque * share > 0.0 and abs(torque) < 0.999 * in_reach)
    currents = currents_at(point, torque)
    assert currents.i_q == pytest.approx(torque / point.K, rel=1e-12)
    length = np.hypot(*currents)
    volts = np.hypot(*voltages_of(currents, point))
    V_x = SQUARE_WAVE * point.voltage
    if length == pytest.approx(point.current, rel=1e-9):
        assert volts <= V_x * (1 + 1e-6)
    else:
        assert volts == pytest.approx(V_x, rel=1e-6)


@given(points(), shares)
def test_current_along_the_flux_is_the_largest_that_a_scan_allows(point, share):
    torque = reachable_torque(point, share)
    assume(0.0 < torque <= 0.98 * pullout_torque(*point._replace(
        voltage=SQUARE_WAVE * point.voltage)))  # fmt: skip
    i_q = torque / point.K
    i_d = np.linspace(-point.current, point.current, 40_001)
    currents = type(currents_at(point, torque))(i_d, i_q)
    allowed = (np.hypot(i_d, i_q) <= point.current) & (
        np.hypot(*voltages_of(currents, point)) <= SQUARE_WAVE * point.voltage
    )
    assume(allowed.any())
    found = currents_at(point, torque).i_d
    assert found == pytest.approx(i_d[allowed].max(), abs=1e-4 * point.current)


@given(points(), st.floats(1.01, 3.0))
def test_a_torque_beyond_the_setting_counts_with_the_full_setting(point, factor):
    currents = currents_at(point, factor * point.K * point.current)
    assert np.hypot(*currents) == pytest.approx(point.current, rel=1e-9)


def test_two_phases_of_a_sine_lose_what_the_vector_loses():
    # rms of a sine is 0.7071 of its peak: definition of rms
    angle = np.linspace(0.0, 2.0 * pi, 10_000, endpoint=False)
    i_d, i_q = phase_currents(5.0, 0.2, 24.0, 2.8, 1.5, 5.4e-3, 0.48, 50)
    phase_a = i_d * np.cos(angle) - i_q * np.sin(angle)
    phase_b = i_d * np.sin(angle) + i_q * np.cos(angle)
    assert np.sqrt(np.mean(phase_a**2)) / 2.8 == pytest.approx(0.7071, rel=1e-3)
    loss = 1.5 * np.mean(phase_a**2 + phase_b**2)
    assert loss == pytest.approx(1.5 * (i_d**2 + i_q**2), rel=1e-9)
    assert np.abs(phase_a).max() + 1e-6 >= 2.8
    assert (np.abs(phase_a) + np.abs(phase_b)).max() <= sqrt(2.0) * 2.8 + 1e-9


# --- power --------------------------------------------------------------------------------------


@given(points(), shares_either_way)
def test_what_enters_the_windings_leaves_as_heat_and_work(point, share):
    torque = reachable_torque(point, share)
    in_reach = pullout_torque(*point._replace(voltage=SQUARE_WAVE * point.voltage))
    assume(torque * share > 0.0 and abs(torque) < 0.999 * in_reach)
    currents = currents_at(point, torque)
    v_d, v_q = voltages_of(currents, point)
    entering = v_d * currents.i_d + v_q * currents.i_q
    length = np.hypot(*currents)
    heat_and_work = point.R * length**2 + point.speed * point.K * currents.i_q
    assert entering == pytest.approx(heat_and_work, rel=1e-9)
    electrical = power_at(point, torque, iron=0.0) - driver_loss(point.voltage, length, IDLE)
    assert entering == pytest.approx(electrical, rel=1e-9, abs=1e-9)


@given(points(), shares, st.floats(1.0, 3.0))
def test_bus_power_never_falls_with_a_larger_setting_at_a_torque_in_reach(point, share, factor):
    most = pullout_torque(point.speed, SQUARE_WAVE * point.voltage, *point[2:])
    torque = share * float(most)
    assume(torque > 0.0)
    holding = sqrt(2.0) * point.K * point.current
    powers = [
        bus_power(point.speed, torque, point.voltage, setting, *point[3:], holding, IDLE)
        for setting in (point.current, factor * point.current)
    ]
    assert powers[1] >= powers[0] * (1 - 1e-9)


@given(points(), shares)
def test_bus_power_covers_the_work_of_a_driving_axis(point, share):
    torque = reachable_torque(point, share)
    assume(torque > 0.0)
    assert power_at(point, torque) >= point.speed * torque + IDLE


@given(points(), shares)
def test_worst_power_is_never_below_that_of_the_demanded_point(point, share):
    torque = reachable_torque(point, share)
    assume(torque > 0.0)
    holding = sqrt(2.0) * point.K * point.current
    upper = pullout_torque(*point._replace(voltage=SQUARE_WAVE * point.voltage))
    worst = worst_power(point.speed, torque, point.voltage, point.voltage, *point[2:], holding,
                        IDLE, upper)  # fmt: skip
    assert worst >= power_at(point, torque) * (1 - 1e-12)


@given(points())
def test_power_at_rest_is_the_limit_of_power_at_no_speed_and_no_torque(point):
    assume(point.R * point.current < SQUARE_WAVE * point.voltage * 0.999)
    resting = holding_power(point.voltage, point.current, point.R, IDLE)
    assert power_at(point._replace(speed=0.0), 0.0) == pytest.approx(resting, rel=1e-9)


def test_far_above_the_corner_the_current_without_load_collapses():
    # Full copper loss below the corner whatever the load; above it hardly any.
    slow = np.hypot(*phase_currents(2.0, 0.0, 24.0, 2.8, 1.6, 5.4e-3, 0.48, 50))
    fast = np.hypot(*phase_currents(60.0, 0.0, 24.0, 2.8, 1.6, 5.4e-3, 0.48, 50))
    assert slow == pytest.approx(2.8, rel=1e-9)
    assert fast < 0.1 * slow


@given(points())
def test_a_driven_axis_returns_no_more_than_the_work_put_in(point):
    torque = -0.5 * point.K * point.current
    assert power_at(point, torque) >= point.speed * torque


# --- iron and driver ----------------------------------------------------------------------------


def test_iron_loss_without_current_by_hand():
    # 0.010 W/(N·m·Hz) · 2 N·m · 50 · 10 turns/s = 10 W
    assert iron_loss(2.0 * pi * 10, 0.0, 0.0, 2.0, 5e-3, 0.5, 50, 0.010) == pytest.approx(10.0)


def test_current_against_the_flux_takes_iron_loss_away_and_with_it_adds_up_to_threefold():
    L, K, N = 5e-3, 0.5, 50
    cancelling = -K / N / L
    assert iron_loss(60.0, cancelling, 0.0, 2.0, L, K, N) == pytest.approx(0.0, abs=1e-12)
    none = iron_loss(60.0, 0.0, 0.0, 2.0, L, K, N)
    assert iron_loss(60.0, 50.0, 0.0, 2.0, L, K, N) == pytest.approx(3.0 * none, rel=1e-12)
    doubled = (sqrt(2.0) - 1.0) * K / N / L
    assert iron_loss(60.0, doubled, 0.0, 2.0, L, K, N) == pytest.approx(2.0 * none, rel=1e-12)


@pytest.mark.standing("guess")
def test_the_band_of_iron_loss_holds_its_best_value():
    assert (IRON_LOSS_LOW, IRON_LOSS, IRON_LOSS_HIGH) == (0.005, 0.010, 0.014)


@given(points(), shares)
def test_iron_loss_within_its_band_moves_bus_power_by_its_own_difference(point, share):
    torque = reachable_torque(point, share)
    assume(torque > 0.0)
    holding = sqrt(2.0) * point.K * point.current
    _, _, _, _, L, K, N = point
    low, high = (
        iron_loss(point.speed, *currents_at(point, torque), holding, L, K, N, c)
        for c in (IRON_LOSS_LOW, IRON_LOSS_HIGH)
    )
    assert 0.0 <= low <= high
    moved = power_at(point, torque, IRON_LOSS_HIGH) - power_at(point, torque, IRON_LOSS_LOW)
    assert moved == pytest.approx(high - low, rel=1e-6, abs=1e-6)


def test_driver_loss_is_three_percent_of_bus_voltage_times_the_mean_of_both_phases():
    # mean of |sin| over a turn is 2/π, for two phases 4/π
    angle = np.linspace(0.0, 2.0 * pi, 100_000, endpoint=False)
    mean = np.mean(np.abs(np.sin(angle)) + np.abs(np.cos(angle)))
    assert driver_loss(24.0, 2.8, 1.5) == pytest.approx(1.5 + 0.03 * 24.0 * mean * 2.8, rel=1e-6)


# --- arrays -------------------------------------------------------------------------------------


@given(st.lists(points(), min_size=2, max_size=6), st.floats(-1.0, 1.5))
def test_arrays_equal_scalars_of_every_function(rows, share):
    def currents(w, V, I, R, L, K, N):
        return phase_currents(w, share * K * I, V, I, R, L, K, N)

    def bus(w, V, I, R, L, K, N):
        return bus_power(w, share * K * I, V, I, R, L, K, N, K * I, 1.5)

    def worst(w, V, I, R, L, K, N):
        return worst_power(w, share * K * I, V, 1.1 * V, I, R, L, K, N, K * I, 1.5, K * I)

    def iron(w, V, I, R, L, K, N):
        return iron_loss(w, -0.3 * I, 0.5 * I, K * I, L, K, N)

    for function in (currents, bus, worst, iron):
        assert_array_equals_scalars(function, rows)
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: driver_loss(V, I, R), rows)
    assert_array_equals_scalars(lambda w, V, I, R, L, K, N: holding_power(V, I, R, K), rows)


@given(points(), shares, st.booleans())
def test_the_peak_on_the_way_is_that_of_a_fine_grid(point, share, backwards):
    in_reach = float(pullout_torque(*point._replace(voltage=SQUARE_WAVE * point.voltage)))
    assume(in_reach > 0.0)  # beyond, the full setting counts and the power is not continuous
    torque = 0.999 * share * in_reach * (-1 if backwards else 1)
    holding = sqrt(2.0) * point.K * point.current
    motor = (point.voltage, point.current, point.R, point.L, point.K, point.N, holding, IDLE)
    even = np.linspace(0.0, point.speed, 50_001)
    speeds = np.concatenate([even, np.geomspace(1e-6, 1.0, 50_001) * point.speed])
    grid = float(bus_power(speeds, torque, *motor).max())
    peak = peak_bus_power(point.speed, True, torque, *motor)
    assert peak >= grid * (1 - 1e-9)
    assert peak == pytest.approx(grid, rel=1e-4)  # a sharp peak stands between grid points
    assert peak_bus_power(point.speed, False, torque, *motor) == pytest.approx(
        float(bus_power(point.speed, torque, *motor)), rel=1e-12
    )
