"""Winding temperature: standards' limits, a published case, and iteration to the steady value."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from referees import assert_array_equals_scalars
from scipy.integrate import solve_ivp

from selector.domain.parts import RATED_RISE
from selector.physics.thermal import (
    CASE_SHARE,
    INSULATION_LIMITS,
    RUNAWAY,
    case_temperature,
    steady_temperature,
    thermal_resistance,
)
from selector.physics.torque import COPPER_PER_KELVIN, winding_resistance

ambients = st.floats(-10.0, 60.0)
to_air = st.floats(0.5, 12.0)
losses = st.floats(0.0, 60.0)


@pytest.mark.parametrize(
    ("insulation", "limit"), [("A", 105), ("E", 120), ("B", 130), ("F", 155), ("H", 180)]
)
def test_insulation_classes_have_the_limits_of_the_standard(insulation, limit):
    # IEC 60085 / IEC 60034-18, read in a secondary source; check against the edition in force.
    assert INSULATION_LIMITS[insulation] == limit


# IEC 60034-1: limits of rise over a coolant of 40 °C, read in a secondary source.
RISE_LIMITS = {"B": 80.0, "F": 105.0, "H": 125.0}


@pytest.mark.parametrize(("insulation", "rise"), RISE_LIMITS.items())
def test_a_rise_at_its_limit_keeps_the_standards_distance_from_the_class_limit(insulation, rise):
    # by hand: 130 - 40 - 80, 155 - 40 - 105, 180 - 40 - 125
    distance = {"B": 10.0, "F": 10.0, "H": 15.0}[insulation]
    assert INSULATION_LIMITS[insulation] - 40.0 - rise == distance


def test_the_rise_of_a_silent_entry_is_that_of_class_b():
    assert RISE_LIMITS["B"] == RATED_RISE


def test_the_copper_coefficient_finds_the_published_rise_by_resistance():
    # Published worked case: 80 ohm at 20 °C, 100 ohm hot; with 234.5 the winding is at 83.625 °C,
    # a rise of 63.63 K. The coefficient belongs to 20 °C.
    hot = 20.0 + (100.0 / 80.0 - 1.0) / COPPER_PER_KELVIN
    assert hot == pytest.approx(83.625, abs=0.05)
    assert hot - 20.0 == pytest.approx(63.63, abs=0.05)


def test_taken_from_25_degrees_the_winding_model_overstates_that_resistance_by_half_a_percent():
    # From 25 °C on, as data sheets state R there: 234.5 + 83.625 over 234.5 + 25.
    exact = (234.5 + 83.625) / (234.5 + 25.0)
    assert winding_resistance(1.0, 83.625) / exact == pytest.approx(1.0, abs=0.005)
    assert winding_resistance(1.0, 83.625) >= exact


@given(st.floats(40.0, 120.0), st.floats(0.3, 8.0), st.floats(0.1, 9.0))
def test_a_motor_at_its_rating_reaches_its_rated_rise(rise, current, resistance):
    to_the_air = thermal_resistance(rise, current, resistance)
    found = steady_temperature(25.0, to_the_air, 2.0 * current**2 * resistance, 0.0)
    assert found == pytest.approx(25.0 + rise, rel=1e-9)


def test_thermal_resistance_by_hand():
    # 80 K; R at 105 °C = 1.13 · (1 + 0.00393·80) = 1.485272; 2 · 2.8² · 1.485272 = 23.28906 W
    assert thermal_resistance(80.0, 2.8, 1.13) == pytest.approx(80.0 / 23.28906496, rel=1e-9)


@given(ambients, to_air, losses, st.floats(0.0, 20.0))
def test_steady_temperature_is_where_iteration_settles(ambient, resistance, copper, iron):
    assume(COPPER_PER_KELVIN * resistance * copper < 0.9)
    temperature = ambient
    for _ in range(500):
        hot = copper * winding_resistance(1.0, temperature)
        temperature = ambient + resistance * (hot + iron)
    assume(temperature < 0.99 * RUNAWAY)
    found = steady_temperature(ambient, resistance, copper, iron)
    assert found == pytest.approx(temperature, rel=1e-9, abs=1e-6)


def test_steady_temperature_is_where_heating_in_time_ends():
    resistance, capacity = 3.4, 300.0

    def heating(_, state):
        power = 15.0 * winding_resistance(1.0, state[0]) + 2.0
        return [(power - (state[0] - 30.0) / resistance) / capacity]

    run = solve_ivp(heating, (0.0, 40_000.0), [30.0], rtol=1e-9, atol=1e-9)
    assert steady_temperature(30.0, resistance, 15.0, 2.0) == pytest.approx(run.y[0, -1], rel=1e-5)


@given(ambients, to_air, losses, st.floats(0.0, 20.0), st.floats(0.0, 20.0))
def test_more_loss_or_warmer_air_never_cools_a_winding(ambient, resistance, copper, iron, more):
    here = steady_temperature(ambient, resistance, copper, iron)
    slack = 1e-9 * RUNAWAY
    assert steady_temperature(ambient + more, resistance, copper, iron) >= here - slack
    assert steady_temperature(ambient, resistance, copper + more, iron) >= here - slack
    assert steady_temperature(ambient, resistance, copper, iron + more) >= here - slack
    assert here <= RUNAWAY


def test_a_winding_that_heats_itself_faster_than_it_cools_runs_away():
    # 1/(0.00393 · 5 K/W) = 50.9 W at 25 °C: from there on no balance
    assert steady_temperature(25.0, 5.0, 50.0, 0.0) == RUNAWAY  # balance beyond 1000 °C
    assert steady_temperature(25.0, 5.0, 51.0, 0.0) == RUNAWAY
    assert steady_temperature(25.0, 5.0, 30.0, 0.0) < 500.0
    temperature = 25.0
    for _ in range(2000):
        temperature = 25.0 + 5.0 * 51.0 * winding_resistance(1.0, temperature)
    assert temperature > RUNAWAY


def test_without_losses_a_winding_has_the_temperature_of_the_air():
    assert steady_temperature(40.0, 5.0, 0.0, 0.0) == 40.0


@pytest.mark.standing("guess")
def test_a_case_shows_three_quarters_of_the_windings_rise():
    assert CASE_SHARE == 0.75
    assert case_temperature(40.0, 100.0) == pytest.approx(85.0)


@given(st.lists(st.tuples(ambients, to_air, losses, st.floats(0.0, 20.0)), min_size=2))
def test_arrays_equal_scalars_of_every_function(rows):
    assert_array_equals_scalars(steady_temperature, rows)
    assert_array_equals_scalars(lambda a, r, p, f: case_temperature(a, p), rows)
    assert_array_equals_scalars(lambda a, r, p, f: thermal_resistance(80.0, r, 1.0 + p), rows)


def test_arrays_may_mix_a_balance_with_a_runaway():
    found = steady_temperature(25.0, 5.0, np.array([0.0, 51.0, 80.0]), 0.0)
    assert list(found) == [25.0, RUNAWAY, RUNAWAY]
