"""The demo catalogue is invented; these are the marks of parts that could exist.

Bands are common practice of the trade, without a source, and say what they rest on.
"""

from __future__ import annotations

import re
from collections import defaultdict
from itertools import pairwise
from math import sqrt
from pathlib import Path

import pytest
from scipy.stats import spearmanr

from selector.domain.parts import SettingRange
from selector.inputs.load import load_catalogue
from selector.physics.torque import joined

pytestmark = pytest.mark.standing("practice")

CATALOGUE = load_catalogue(Path(__file__).parents[1] / "catalogues")
MOTORS, DRIVERS, SUPPLIES = CATALOGUE.motors, CATALOGUE.drivers, CATALOGUE.supplies
BARE = [motor for motor in MOTORS if motor.brake is None]  # a brake adds length, not torque
FRAMES = {"wren": 0.042, "coot": 0.057, "ibis": 0.086}


def named(part):
    return part.part


def price(part):
    return float(part.price.amount)


def length(motor):
    return motor.size[2]


def largest_stated(driver):
    """Peak of the largest current an entry states, whether its steps reach it or not."""
    stated = driver.current_settings
    largest = stated.max if isinstance(stated, SettingRange) else max(stated)
    return largest * (sqrt(2.0) if driver.current_basis == "rms" else 1.0)


def rank_correlation(first, second):
    return spearmanr(first, second).statistic


def as_bipolar(motor):
    """Figures with the half windings in series, so that motors of one body can be compared."""
    figures = (
        motor.holding_torque, motor.rated_current, motor.phase_resistance, motor.phase_inductance
    )  # fmt: skip
    return joined("series", motor.rated_as or "series", *figures)


def bodies():
    """Motors that differ in their winding only."""
    groups = defaultdict(list)
    for motor in BARE:
        groups[motor.frame, length(motor), motor.step_angle].append(motor)
    return [pytest.param(group, id=group[0].part) for group in groups.values() if len(group) > 1]


# --- all parts ----------------------------------------------------------------------------------


def test_there_is_enough_to_choose_from():
    assert len(MOTORS) >= 60
    assert len(DRIVERS) >= 20
    assert len(SUPPLIES) >= 40
    assert len([motor for motor in MOTORS if motor.wires == 8]) >= 5
    assert {motor.rated_as for motor in MOTORS if motor.wires == 8} == {
        "series", "parallel", "unipolar"
    }  # fmt: skip


def test_every_name_is_of_the_invented_families_and_its_own():
    scheme = (
        r"(wren|coot|ibis)-\d{2,3}[a-z](-brake)?"
        r"|(sedge|rush|reed|flag)-[a-z]+(-calm|-duo)?"
        r"|(pond|mere|lode)-[a-z]+"
    )
    names = [part.part for part in CATALOGUE.parts]
    assert len(set(names)) == len(names)
    assert [name for name in names if not re.fullmatch(scheme, name)] == []


@pytest.mark.parametrize("part", CATALOGUE.parts, ids=named)
def test_every_part_can_be_bought_placed_and_weighed(part):
    assert price(part) > 0.0
    assert part.price.currency == "EUR"
    assert part.outer_volume > 0.0
    assert part.mass > 0.0
    assert part.supplier
    # packed copper, iron and air: between a light plastic case and solid iron
    assert 250.0 < part.mass / part.outer_volume < 5500.0


@pytest.mark.parametrize(
    "parts", [MOTORS, DRIVERS, SUPPLIES], ids=["motors", "drivers", "supplies"]
)
def test_dear_parts_are_stocked_in_smaller_numbers_and_some_state_no_stock(parts):
    stated = [part for part in parts if part.stock is not None]
    assert 0.6 * len(parts) < len(stated) < len(parts)
    assert any(part.stock == 0 for part in stated)
    assert rank_correlation([price(part) for part in stated], [p.stock for p in stated]) < -0.5


# --- motors -------------------------------------------------------------------------------------


@pytest.mark.parametrize("motor", MOTORS, ids=named)
def test_a_motors_name_tells_frame_and_length(motor):
    family, millimetres = re.match(r"(\w+)-(\d+)", motor.part).groups()
    assert motor.frame == pytest.approx(FRAMES[family])
    assert motor.size[:2] == (motor.frame, motor.frame)
    if motor.brake is None:
        assert length(motor) == pytest.approx(int(millimetres) / 1000.0)
    else:
        assert length(motor) > int(millimetres) / 1000.0


@pytest.mark.parametrize("frame", FRAMES.values(), ids=FRAMES)
def test_each_frame_comes_in_several_lengths_and_each_length_in_several_windings(frame):
    windings = defaultdict(set)
    for motor in BARE:
        if motor.frame == frame:
            windings[length(motor)].add(motor.rated_current)
    assert len(windings) >= 4
    assert all(len(currents) >= 2 for currents in windings.values())


def test_torque_goes_with_body_volume():
    volumes = [motor.outer_volume for motor in BARE]
    assert rank_correlation([as_bipolar(motor).holding_torque for motor in BARE], volumes) > 0.9


@pytest.mark.parametrize("frame", FRAMES.values(), ids=FRAMES)
def test_within_a_frame_torque_goes_with_length(frame):
    motors = [motor for motor in BARE if motor.frame == frame]
    lengths = [length(motor) for motor in motors]
    assert rank_correlation([as_bipolar(motor).holding_torque for motor in motors], lengths) > 0.9


@pytest.mark.parametrize("motor", BARE, ids=named)
def test_torque_per_volume_is_that_of_hybrid_motors(motor):
    # Hybrid motors of these frames hold 4 to 9 N·m per litre of square body: the air gap's share
    # grows with size and length, end bells weigh on the shortest.
    assert 3.5 < motor.holding_torque / (1000.0 * motor.outer_volume) < 10.0


@pytest.mark.parametrize("motor", MOTORS, ids=named)
def test_time_constant_is_one_to_twelve_milliseconds(motor):
    assert 1e-3 < motor.phase_inductance / motor.phase_resistance < 12e-3


@pytest.mark.parametrize("motor", MOTORS, ids=named)
def test_copper_loss_at_the_rating_is_what_the_surface_can_shed(motor):
    # 80 K of rise times 5 to 12 W/(m²·K) of still air and radiation, mounting plate included, is
    # 400 to 1000 W/m² of hot loss; cold loss, as rated here, is a quarter less.
    a, b, c = motor.size
    surface = 2.0 * (a * b + b * c + c * a)
    loss = 2.0 * motor.rated_current**2 * motor.phase_resistance
    assert 300.0 < loss / surface < 900.0


@pytest.mark.parametrize("body", bodies())
def test_windings_of_one_body_store_the_same_energy_and_lose_the_same_power(body):
    # Same iron, same copper space: turns change L and R as the square and the current inversely.
    figures = [as_bipolar(motor) for motor in body]
    energies = [each.inductance * each.rated_current**2 for each in figures]
    losses = [each.resistance * each.rated_current**2 for each in figures]
    assert max(energies) < 1.2 * min(energies)
    assert max(losses) < 1.2 * min(losses)


@pytest.mark.parametrize("body", bodies())
def test_windings_of_one_body_hold_the_same_torque_once_joined(body):
    torques = [as_bipolar(motor).holding_torque for motor in body]
    assert max(torques) < 1.15 * min(torques)


@pytest.mark.parametrize("frame", FRAMES.values(), ids=FRAMES)
def test_rotor_inertia_grows_with_length(frame):
    inertias = defaultdict(list)
    for motor in BARE:
        if motor.frame == frame and motor.rotor_inertia is not None:
            inertias[length(motor)].append(motor.rotor_inertia)
    ordered = [inertias[key] for key in sorted(inertias)]
    assert all(max(shorter) < min(longer) for shorter, longer in pairwise(ordered))


@pytest.mark.parametrize("motor", BARE, ids=named)
def test_rotor_inertia_is_a_few_hundredths_of_mass_times_half_frame_squared(motor):
    # A rotor of half the frame's width and two fifths of the mass: 0.4/2 · 0.5² = 0.05.
    assert 0.02 < motor.rotor_inertia / (motor.mass * (motor.frame / 2.0) ** 2) < 0.08


@pytest.mark.parametrize("motor", MOTORS, ids=named)
def test_detent_torque_where_stated_is_a_few_percent_of_holding_torque(motor):
    if motor.detent_torque is not None:
        assert 0.02 < motor.detent_torque / motor.holding_torque < 0.10


def test_motors_cost_by_size():
    assert rank_correlation([price(m) for m in BARE], [m.outer_volume for m in BARE]) > 0.9


@pytest.mark.parametrize("motor", [m for m in MOTORS if m.brake is not None], ids=named)
def test_a_brake_leaves_the_motor_as_it_is_and_adds_length_mass_price_and_inertia(motor):
    plain = CATALOGUE.find("motors", motor.part.removesuffix("-brake"))
    assert motor.brake.torque >= motor.holding_torque * 0.5
    assert length(motor) > length(plain)
    assert motor.mass > plain.mass
    assert price(motor) > price(plain)
    # Samples of one winding differ by a few percent; the brake's hub turns with the rotor.
    assert motor.holding_torque == pytest.approx(plain.holding_torque, rel=0.1)
    assert motor.phase_resistance == pytest.approx(plain.phase_resistance, rel=0.1)
    assert motor.phase_inductance == pytest.approx(plain.phase_inductance, rel=0.1)
    assert motor.rotor_inertia >= plain.rotor_inertia


# --- drivers ------------------------------------------------------------------------------------


@pytest.mark.parametrize("driver", DRIVERS, ids=named)
def test_a_drivers_name_tells_its_kind(driver):
    _, _, *kind = driver.part.split("-")
    assert driver.active_damping == (kind == ["calm"])
    assert driver.channels == (2 if kind == ["duo"] else 1)


@pytest.mark.parametrize("driver", DRIVERS, ids=named)
def test_a_driver_can_be_set_to_the_largest_current_it_states(driver):
    assert driver.peak_settings[-1] == pytest.approx(largest_stated(driver), rel=1e-9)


@pytest.mark.parametrize("driver", DRIVERS, ids=named)
def test_a_drivers_figures_are_those_of_chopper_drivers(driver):
    # Bridges of 12 to 110 V; 0.3 to 10 A; a setting reaches down to a tenth or more of the largest.
    assert 8.0 <= driver.supply_voltage.min < driver.supply_voltage.max <= 110.0
    assert 2.0 <= driver.supply_voltage.max / driver.supply_voltage.min <= 6.0
    assert 0.2 <= driver.peak_settings[0] < driver.peak_settings[-1] <= 10.0
    assert 0.1 <= driver.peak_settings[0] / driver.peak_settings[-1] <= 0.3
    assert len(driver.peak_settings) >= 6
    assert {1, 2, 4, 8, 16} <= set(driver.microsteps)
    assert 100e3 <= driver.max_step_rate <= 1e6
    assert 0.5 <= driver.idle <= 3.0
    assert driver.bus_capacitance is None or 40e-6 <= driver.bus_capacitance <= 1e-3
    assert all(0.2 <= share <= 0.8 for share in driver.hold_current)


def test_bridges_for_more_current_have_less_resistance_and_lose_a_few_percent():
    stated = [driver for driver in DRIVERS if driver.switch_resistance is not None]
    peaks = [driver.peak_settings[-1] for driver in stated]
    assert rank_correlation(peaks, [driver.switch_resistance for driver in stated]) < -0.9
    for driver, peak in zip(stated, peaks, strict=True):
        drop = 2.0 * driver.switch_resistance * peak
        assert 0.2 < drop < 1.5, driver.part


def test_drivers_cost_by_current():
    currents = [driver.channels * driver.peak_settings[-1] for driver in DRIVERS]
    assert rank_correlation([price(driver) for driver in DRIVERS], currents) > 0.9


def test_for_every_motor_there_is_a_driver_of_its_rated_current():
    for motor in MOTORS:
        current = as_bipolar(motor).rated_current
        assert any(
            driver.peak_settings[0] <= current <= driver.peak_settings[-1] for driver in DRIVERS
        ), motor.part


# --- supplies -----------------------------------------------------------------------------------


def test_supplies_have_the_usual_voltages():
    # Preferred values by IEC 60038, from memory.
    assert {supply.voltage for supply in SUPPLIES} == {12.0, 24.0, 36.0, 48.0, 60.0, 72.0}


@pytest.mark.parametrize("supply", SUPPLIES, ids=named)
def test_a_supplys_figures_agree_with_each_other(supply):
    assert supply.power == pytest.approx(supply.voltage * supply.current, rel=5e-3)
    if supply.trim is not None:
        assert 0.85 <= supply.trim.min / supply.voltage <= 1.0
        assert 1.0 <= supply.trim.max / supply.voltage <= 1.2
    if supply.overvoltage_trip is not None:
        assert 1.05 * supply.trim.max < supply.overvoltage_trip < 1.4 * supply.voltage
    assert (supply.peak_power is None) == (supply.peak_time is None)
    if supply.peak_power is not None:
        assert 1.0 < supply.peak_power / supply.power <= 2.0
    shares = [step.share for step in supply.derating]
    assert shares == sorted(shares, reverse=True)


@pytest.mark.parametrize("supply", SUPPLIES, ids=named)
def test_power_per_volume_and_mass_are_those_of_convection_cooled_units(supply):
    # Enclosed and DIN-rail units give 200 to 500 W per litre, open frames up to twice that; per
    # kilogram 300 to 900 W.
    most = 1000.0 if supply.part.startswith("pond") else 500.0
    assert 200.0 < supply.power / (1000.0 * supply.outer_volume) < most
    assert 250.0 < supply.power / supply.mass < 1000.0


@pytest.mark.parametrize("supply", SUPPLIES, ids=named)
def test_efficiency_is_that_of_switched_supplies(supply):
    assert 0.85 <= supply.efficiency <= 0.96


def test_larger_and_higher_supplies_are_no_less_efficient():
    powers = [supply.power for supply in SUPPLIES]
    assert rank_correlation(powers, [supply.efficiency for supply in SUPPLIES]) > 0.5


@pytest.mark.parametrize("supply", SUPPLIES, ids=named)
def test_output_capacitance_holds_some_milliseconds_of_output(supply):
    # C·V/I: enough against switching ripple and load steps, no more than the room allows.
    held = supply.output_capacitance * supply.voltage / supply.current
    assert 2e-3 < held < 20e-3
    if supply.largest_startup_capacitance is not None:
        assert supply.largest_startup_capacitance > supply.output_capacitance


def test_within_a_family_supplies_cost_by_power():
    for family in ("pond", "mere", "lode"):
        units = [supply for supply in SUPPLIES if supply.part.startswith(family)]
        powers = [supply.power for supply in units]
        assert rank_correlation([price(unit) for unit in units], powers) > 0.9
