"""What a supply gives: the trade's conventions, and limits that hold whatever the entry says."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from referees import assert_array_equals_scalars

from selector.physics.supply import (
    DERATING_PER_KELVIN,
    DERATING_START,
    derated_share,
    naive_current,
    rule_of_thumb_current,
    supply_power,
)

ambients = st.floats(-20.0, 100.0)
TABLE = [(50.0, 1.0), (60.0, 0.8), (70.0, 0.5)]


@pytest.mark.standing("practice")
@pytest.mark.parametrize(
    ("ambient", "share"), [(-10, 1.0), (25, 1.0), (50, 1.0), (60, 0.75), (70, 0.5), (90, 0.0)]
)
def test_without_a_table_a_supply_gives_all_to_50_degrees_then_loses_2_5_percent_a_kelvin(
    ambient, share
):
    assert (DERATING_START, DERATING_PER_KELVIN) == (50.0, 0.025)
    assert derated_share(ambient, [], None) == pytest.approx(share, abs=1e-12)


@pytest.mark.parametrize(
    ("ambient", "share"),
    # by hand: 55 °C is halfway from 1 to 0.8; 62 °C a fifth of the way from 0.8 to 0.5
    [(20.0, 1.0), (50.0, 1.0), (55.0, 0.9), (60.0, 0.8), (62.0, 0.74), (70.0, 0.5), (70.1, 0.0)],
)
def test_a_table_is_read_along_straight_lines_and_ends_at_its_last_point(ambient, share):
    assert derated_share(ambient, TABLE, None) == pytest.approx(share, abs=1e-12)


@given(ambients)
def test_a_table_that_states_the_common_rule_gives_what_silence_gives(ambient):
    stated = derated_share(ambient, [(50.0, 1.0), (90.0, 0.0)], None)
    assert stated == pytest.approx(derated_share(ambient, [], None), abs=1e-12)


@given(ambients, st.floats(0.0, 50.0), st.sampled_from([[], TABLE]), st.none() | ambients)
def test_warmer_air_never_raises_the_share_and_it_stays_a_share(ambient, warmer, table, highest):
    here = derated_share(ambient, table, highest)
    assert 0.0 <= derated_share(ambient + warmer, table, highest) <= here <= 1.0


@pytest.mark.parametrize("table", [[], TABLE])
def test_above_its_highest_temperature_a_supply_gives_nothing(table):
    assert derated_share(55.0, table, 55.0) > 0.0
    assert derated_share(55.1, table, 55.0) == 0.0


@pytest.mark.parametrize(
    ("volts", "watts"),
    # by hand, 240 W and 10 A at 24 V: down to 22 V 10 A bind, up to 26 V 240 W bind
    [(22.0, 220.0), (24.0, 240.0), (26.0, 240.0)],
)
def test_trimmed_down_the_current_binds_and_trimmed_up_the_power(volts, watts):
    assert supply_power(volts, 240.0, 10.0, 1.0, 1) == pytest.approx(watts, rel=1e-12)


@given(st.floats(10, 80), st.floats(20, 1000), st.floats(0.5, 40), st.floats(0, 1),
       st.integers(1, 8))  # fmt: skip
def test_supply_power_keeps_every_unit_inside_both_ratings(volts, power, current, share, units):
    one = supply_power(volts, power, current, share, units) / units
    assert one <= share * power * (1 + 1e-9)
    assert one / volts <= share * current * (1 + 1e-9)
    both_slack = one < share * power * (1 - 1e-9) and one / volts < share * current * (1 - 1e-9)
    assert not both_slack


@pytest.mark.standing("practice")
@pytest.mark.parametrize(
    ("volts", "share"), [(12.0, 1 / 2), (24.0, 1 / 2), (30.0, 5 / 12), (36.0, 1 / 3), (72.0, 1 / 3)]
)
def test_rule_of_thumb_takes_half_the_rated_current_and_a_third_from_36_volts(volts, share):
    assert rule_of_thumb_current(volts, [2.8, 4.2]) == pytest.approx(share * 7.0, rel=1e-12)


@pytest.mark.standing("derived")
def test_the_naive_sum_of_four_motors():
    assert naive_current([2.8] * 4) == pytest.approx(26.88, rel=1e-12)
    assert 24.0 * naive_current([2.8] * 4) == pytest.approx(645, abs=0.5)


@given(st.floats(10, 80), st.lists(st.floats(0.3, 8.0), min_size=1, max_size=8))
def test_the_naive_sum_is_several_times_the_rule_of_thumb(volts, currents):
    ratio = naive_current(currents) / rule_of_thumb_current(volts, currents)
    assert 4.8 * (1 - 1e-9) <= ratio <= 7.2 * (1 + 1e-9)


@given(st.lists(st.tuples(st.floats(10, 80)), min_size=2))
def test_supply_power_of_an_array_of_voltages_equals_its_scalars(rows):
    assert_array_equals_scalars(lambda volts: supply_power(volts, 240.0, 10.0, 0.9, 2), rows)
