"""Energy sent back to the bus: a published example, check numbers, and sums over time."""

from __future__ import annotations

from math import inf, pi

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from referees import assert_array_equals_scalars, assert_as_printed
from scipy.integrate import quad, solve_ivp
from scipy.optimize import brentq

from selector.physics.braking import (
    kinetic_energy,
    lowering_power,
    needed_capacitance,
    returned_energy,
    risen_voltage,
)
from selector.physics.torque import torque_constant

speeds = st.floats(0.0, 300.0)
torques = st.floats(0.0, 6.0)
decelerations = st.floats(10.0, 5000.0)
resistances = st.floats(0.2, 9.0)
constants = st.floats(0.08, 1.6)


@pytest.mark.standing("derived")
def test_the_collected_braking_case_comes_out():
    # 1.9 N·m motor, 0.5 N·m from 600 rpm, 3.84e-4 kg·m², 48 V, 2.2 mF, cold winding 1.13 + 0.2 ohm
    K, R, torque = torque_constant(1.9, 2.8), 1.33, 0.5
    least = brentq(lambda w: torque * w - R * (torque / K) ** 2, 0.0, 100.0)
    assert least == pytest.approx(2.888, rel=1e-3)
    slowing = torque / 3.84e-4
    assert returned_energy(0.999 * least, torque, slowing, R, K) == 0.0
    assert returned_energy(1.001 * least, torque, slowing, R, K) > 0.0
    energy = returned_energy(600 * 2 * pi / 60, torque, slowing, R, K)
    assert energy == pytest.approx(0.6899, rel=1e-3)
    assert risen_voltage(48.0, energy, 2.2e-3) == pytest.approx(54.14, rel=1e-3)


# R. Crowder, Electric Drives and Electromechanical Systems, 2nd ed., eq. 5.27 to 5.30, p. 158-162.
# As printed: stored 12.34 J; nothing returns at 94.25 A; braking at 30 A; bus 100 V, limit 110 V;
# returned 5.735 J; 5460 µF.
STORED, NOTHING_RETURNS, BRAKING = 12.34, 94.25, 30.0


def crowder_energy():
    # With R and K of one, amperes are newton metres and the current at which nothing returns is
    # the speed; the inertia follows from the stored energy.
    inertia = 2.0 * STORED / NOTHING_RETURNS**2
    return returned_energy(NOTHING_RETURNS, BRAKING, BRAKING / inertia, 1.0, 1.0)


def test_energy_and_capacitor_of_the_published_example():
    energy = crowder_energy()
    assert_as_printed(energy, "5.735")
    assert needed_capacitance(100.0, 110.0, energy) * 1e6 == pytest.approx(5460, rel=1e-3)


@pytest.mark.standing("derived")
def test_ignoring_copper_loss_would_more_than_double_the_capacitor():
    inertia = 2.0 * STORED / NOTHING_RETURNS**2
    stored = kinetic_energy(inertia, NOTHING_RETURNS)
    whole = needed_capacitance(100.0, 110.0, stored)
    assert whole * 1e6 == pytest.approx(11752, rel=1e-4)
    assert whole / needed_capacitance(100.0, 110.0, crowder_energy()) == pytest.approx(
        2.15, abs=0.005
    )


@pytest.mark.standing("derived")
@pytest.mark.parametrize(
    ("farads", "volts", "joules", "risen"), [(10e-3, 24, 5, 39.699), (4.7e-3, 48, 2, 56.170)]
)
def test_capacitors_that_take_up_an_energy(farads, volts, joules, risen):
    assert risen_voltage(volts, joules, farads) == pytest.approx(risen, rel=1e-4)


@pytest.mark.standing("practice")
def test_a_reported_rise_of_a_bench_supply_has_the_right_order():
    # A 20 V supply with 220 + 470 µF rose to about 40 V when a motor stopped from 30 turns/s; a
    # small motor's rotor and load, 1e-5 to 1e-4 kg·m², hold 0.2 to 2 J there.
    absorbed = 0.414
    assert risen_voltage(20.0, absorbed, 690e-6) == pytest.approx(40.0, rel=0.01)
    speed = 30 * 2 * pi
    assert kinetic_energy(1e-5, speed) < absorbed < kinetic_energy(1e-4, speed)


@given(speeds, torques, decelerations, resistances, constants)
def test_returned_energy_is_the_sum_over_time_of_what_copper_leaves(speed, torque, slowing, R, K):
    assume(torque > 1e-3 and speed > 1e-2)
    least = R * torque / K**2

    def power(t):
        return max(0.0, torque * (speed - slowing * t) - R * (torque / K) ** 2)

    end = max(0.0, (speed - least) / slowing)
    summed, _ = quad(power, 0.0, speed / slowing, points=[min(end, speed / slowing)])
    found = returned_energy(speed, torque, slowing, R, K)
    assert found == pytest.approx(summed, rel=1e-6, abs=1e-9)


@given(speeds, torques, resistances, constants)
def test_lowering_power_is_that_of_a_loaded_generator(speed, torque, R, K):
    # The bus gets EMF less drop, times the current; nothing while the drop is the larger.
    current = torque / K
    assert lowering_power(speed, torque, R, K) == pytest.approx(
        max(0.0, (K * speed - R * current) * current), rel=1e-9, abs=1e-9
    )


@given(speeds, st.floats(1e-3, 6.0), decelerations, resistances, constants)
def test_a_stop_returns_no_more_than_the_stored_energy(speed, torque, slowing, R, K):
    stored = kinetic_energy(torque / slowing, speed)
    assert 0.0 <= returned_energy(speed, torque, slowing, R, K) <= stored * (1 + 1e-12)


@given(speeds, torques, decelerations, resistances, constants, st.floats(1.0, 3.0))
def test_more_speed_or_less_resistance_never_returns_less(speed, torque, slowing, R, K, factor):
    here = returned_energy(speed, torque, slowing, R, K)
    assert returned_energy(factor * speed, torque, slowing, R, K) >= here
    assert returned_energy(speed, torque, slowing, R / factor, K) >= here * (1 - 1e-12)


@given(st.floats(10.0, 100.0), st.floats(0.0, 20.0), st.floats(1e-4, 0.05))
def test_risen_voltage_balances_the_energy_of_the_capacitor(volts, energy, farads):
    risen = risen_voltage(volts, energy, farads)
    taken = farads * risen**2 / 2 - farads * volts**2 / 2
    assert taken == pytest.approx(energy, rel=1e-6, abs=1e-9)


def test_risen_voltage_is_that_of_a_capacitor_charged_in_time():
    watts, farads = 40.0, 2.2e-3
    run = solve_ivp(lambda t, v: [watts / (farads * v[0])], (0.0, 0.02), [48.0], rtol=1e-10)
    assert risen_voltage(48.0, watts * 0.02, farads) == pytest.approx(run.y[0, -1], rel=1e-6)


def test_without_a_capacitor_any_energy_is_too_much_and_none_is_none():
    assert risen_voltage(48.0, 0.1, 0.0) == inf
    assert risen_voltage(48.0, 0.0, 0.0) == 48.0


@given(st.floats(10.0, 100.0), st.floats(0.1, 40.0), st.floats(1e-3, 20.0))
def test_with_the_needed_capacitance_the_bus_rises_just_to_its_limit(volts, room, energy):
    needed = needed_capacitance(volts, volts + room, energy)
    assert risen_voltage(volts, energy, needed) == pytest.approx(volts + room, rel=1e-9)


@pytest.mark.parametrize("limit", [48.0, 40.0])
def test_no_capacitor_keeps_a_bus_under_a_limit_it_is_at_already(limit):
    assert needed_capacitance(48.0, limit, 1.0) is None


@given(st.lists(st.tuples(speeds, torques, decelerations, resistances, constants), min_size=2))
def test_arrays_equal_scalars_of_every_function(rows):
    assert_array_equals_scalars(returned_energy, rows)
    assert_array_equals_scalars(lambda w, T, a, R, K: kinetic_energy(R, w), rows)
    assert_array_equals_scalars(lambda w, T, a, R, K: lowering_power(w, T, R, K), rows)
    assert_array_equals_scalars(lambda w, T, a, R, K: risen_voltage(a, T, R), rows)


def test_arrays_may_mix_capacitors_with_none():
    risen = risen_voltage(48.0, np.array([0.0, 0.5, 0.5]), np.array([0.0, 0.0, 1e-3]))
    assert list(risen[:2]) == [48.0, inf]
    assert risen[2] == pytest.approx((48.0**2 + 1000.0) ** 0.5)
