"""The judge: a sound design holds, and spoiling it once per rule fails that rule and no other."""

import pytest

import selector
from selector.judge import axis_rules, bus_rules

MOTOR = dict(
    part="M", price="30 EUR", frame=0.057, step_angle=1.8, holding_torque=1.26, rated_current=2.8,
    phase_resistance=0.9, phase_inductance=2.5e-3, rotor_inertia=3e-5, detent_torque=0.04,
    insulation_class="B", rated_rise=80.0, stock=10, lead_time=5.0, mass=0.7,
    size=(0.057, 0.057, 0.056),
)  # fmt: skip
DRIVER = dict(
    part="D", price="20 EUR", supply_voltage={"min": 12.0, "max": 50.0},
    current_settings=[1.4, 2.0, 2.8, 3.8, 4.2], current_basis="peak", microsteps=[1, 4, 8, 16, 32],
    max_step_rate=2e5, switch_resistance=0.05, idle_power=1.0, hold_current=[0.5],
    bus_capacitance=470e-6, stock=10, lead_time=5.0, mass=0.1, size=(0.09, 0.06, 0.02),
)  # fmt: skip
SUPPLY = dict(
    part="S", price="40 EUR", voltage=36.0, trim={"min": 32.0, "max": 40.0}, tolerance=0.01,
    rated_power=240.0, rated_current=6.7, output_capacitance=3e-3, overvoltage_trip=46.0,
    largest_startup_capacitance=0.02, parallel=2, stock=10, lead_time=5.0, mass=0.6,
    size=(0.16, 0.1, 0.04), derating=[{"at": 50.0, "share": 1.0}, {"at": 70.0, "share": 0.5}],
)  # fmt: skip
AXIS = dict(
    axis="x", holding_torque=0.2, reduce_at_rest=True, load_inertia=6e-5, stop_deceleration=400.0,
    frames=[0.057],
    points=[
        {"speed": 50.0, "torque": 0.24, "acceleration": 300.0, "share": 0.3},
        {"speed": 40.0, "torque": 0.2, "share": 0.3},
    ],
)  # fmt: skip
MACHINE = dict(
    name="one", currency="EUR", catalogues="none", bus_capacitance=1e-3,
    loads=[{"load": "board", "power": 5.0, "supply_voltage": {"min": 20.0, "max": 40.0}}],
    limits={"step_rate": 1e5, "price": "100 EUR", "volume": 2e-3, "mass": 2.0, "lead_time": 10.0,
            "voltage": {"min": 24.0, "max": 40.0}},
)  # fmt: skip
CHOICE = dict(axis="x", motor="M", driver="D", current_peak=2.0, rest_current_peak=1.0,
              microsteps=16)  # fmt: skip
BUS = dict(voltage=36.0, supply="S")


def case(motor=(), driver=(), supply=(), axis=(), machine=(), choice=(), bus=()):
    """The sound problem and design, each record with changes."""
    catalogue = selector.Catalogue(
        motors=(selector.Motor(**MOTOR | dict(motor)),),
        drivers=(selector.Driver(**DRIVER | dict(driver)),),
        supplies=(selector.Supply(**SUPPLY | dict(supply)),),
    )
    axes = (selector.Axis(**AXIS | dict(axis)),)
    problem = selector.Problem(
        machine=selector.Machine(**MACHINE | dict(machine), axes=axes), catalogue=catalogue
    )
    design = selector.Design(
        machine="", axes=(selector.AxisChoice(**CHOICE | dict(choice)),),
        buses=(selector.BusChoice(**BUS | dict(bus)),),
    )  # fmt: skip
    return problem, design


def states(**changes):
    judgement = selector.judge_design(*case(**changes))
    return judgement, {(f.rule, f.state) for f in judgement.findings}


def test_the_sound_design_passes_every_rule():
    judgement, found = states()
    assert judgement.verdict == "holds"
    assert {state for _, state in found} == {"passes"}


LIMITS = MACHINE["limits"]
SPOILED = {
    "frame": dict(axis={"frames": [0.042]}),
    "setting on the driver": dict(choice={"current_peak": 1.9, "rest_current_peak": 0.95}),
    "driver current": dict(driver={"derating": [{"at": 40.0, "share": 0.4}]}),
    "motor peak current": dict(
        motor={"rated_current": 1.36, "holding_torque": 0.6, "phase_resistance": 0.3,
               "phase_inductance": 0.6e-3, "insulation_class": "H"},
        choice={"rest_current_peak": 1.0},
        axis={"points": [{"speed": 50.0, "torque": 0.04, "share": 0.3}]},
    ),
    "rest current": dict(
        choice={"current_peak": 3.8, "rest_current_peak": 3.8},
        axis={"points": [{"speed": 50.0, "torque": 0.24, "share": 1.0}]},
        motor={"insulation_class": "H"},
    ),
    "rest share on the driver": dict(choice={"rest_current_peak": 1.2}),
    "reduced at rest": dict(axis={"reduce_at_rest": False}),
    "holding": dict(axis={"holding_torque": 0.24}),
    "stop torque": dict(axis={"stop_deceleration": 8000.0}),
    "held without power": dict(
        axis={"vertical": True, "holding_torque": 0.2}, motor={"brake": {"torque": 0.2}}
    ),
    "microsteps": dict(choice={"microsteps": 64}, machine={"limits": LIMITS | {"step_rate": 2e5}}),
    "step rate": dict(machine={"limits": LIMITS | {"step_rate": 2e4}}),
    "winding temperature": dict(machine={"ambient": 45.0}, axis={"mounting_factor": 2.6}),
    "case temperature": dict(motor={"case_limit": 50.0}),
    "torque": dict(
        axis={"points": [{"speed": 50.0, "torque": 0.5, "share": 0.2},
                         {"speed": 40.0, "torque": 0.25, "share": 0.3}]}
    ),
    "set voltage": dict(supply={"trim": None, "voltage": 35.0}),
    "lowest driver voltage": dict(driver={"supply_voltage": {"min": 35.9, "max": 50.0}}),
    "lowest bus voltage": dict(
        machine={"limits": LIMITS | {"voltage": {"min": 37.0, "max": 40.0}}}
    ),
    "largest bus voltage": dict(
        machine={"limits": LIMITS | {"voltage": {"min": 24.0, "max": 35.0}}}
    ),
    "load voltage, low end": dict(
        machine={"loads": [{"load": "board", "power": 5.0,
                            "supply_voltage": {"min": 35.9, "max": 40.0}}]}
    ),
    "load voltage, high end": dict(
        machine={"loads": [{"load": "board", "power": 5.0,
                            "supply_voltage": {"min": 20.0, "max": 36.0}}]}
    ),
    "units in parallel": dict(
        bus={"count": 3},
        machine={"limits": LIMITS | {"price": "300 EUR", "volume": 5e-3, "mass": 5.0}},
    ),
    "braking rise": dict(
        axis={"stop_deceleration": None, "load_inertia": 4e-3,
              "points": [{"speed": 50.0, "torque": 0.24, "share": 0.3}]},
        supply={"overvoltage_trip": 90.0},
    ),
    "overvoltage trip": dict(
        axis={"stop_deceleration": None, "load_inertia": 4e-4,
              "points": [{"speed": 50.0, "torque": 0.24, "share": 0.3}]},
        supply={"overvoltage_trip": 38.0},
    ),
    "start-up capacitance": dict(supply={"largest_startup_capacitance": 1e-3}),
    "stock": dict(motor={"stock": 0}),
    "price limit": dict(machine={"limits": LIMITS | {"price": "89.99 EUR"}}),
    "volume limit": dict(machine={"limits": LIMITS | {"volume": 0.9e-3}}),
    "mass limit": dict(machine={"limits": LIMITS | {"mass": 1.3}}),
    "lead time": dict(machine={"limits": LIMITS | {"lead_time": 4.0}}),
    "supply mean power": dict(supply={"rated_power": 30.0, "rated_current": None}),
}  # fmt: skip
TOGETHER = {"supply mean power": {"supply peak power"}}  # the mean is never above the peak


@pytest.mark.parametrize("rule", SPOILED)
def test_a_spoiled_design_fails_that_rule_and_no_other(rule):
    judgement, found = states(**SPOILED[rule])
    assert judgement.verdict == "fails"
    assert {r for r, state in found if state == "fails"} == {rule} | TOGETHER.get(rule, set())


def test_every_rule_that_can_fail_is_spoiled_once():
    found = set()
    for changes in [{}, *SPOILED.values()]:
        found |= {finding.rule for finding in states(**changes)[0].findings}
    never_fails = {"steady lowering", "start"}
    spoiled = set(SPOILED).union(*TOGETHER.values())
    assert found - never_fails <= spoiled | {"highest driver voltage"}
    assert len(axis_rules.RULES) + len(bus_rules.RULES) == 21


def test_the_highest_driver_voltage_fails_with_the_braking_rise():
    _judgement, found = states(driver={"supply_voltage": {"min": 12.0, "max": 40.0}})
    failed = {rule for rule, state in found if state == "fails"}
    assert failed == {"highest driver voltage", "braking rise"}


def test_a_50_volt_driver_does_not_get_48_volts():
    """90 % of 50 V is 45 V, which the set 48 V passes before any braking."""
    _, found = states(supply={"voltage": 48.0, "trim": None, "overvoltage_trip": None},
                      machine={"limits": {}}, bus={"voltage": 48.0},
                      )  # fmt: skip
    assert ("highest driver voltage", "fails") in found


UNKNOWN = {
    "start": dict(axis={"points": [{"speed": 50.0, "torque": 0.2, "share": 0.3}]}),
    "quantities": dict(driver={"channels": 2}, motor={"pack": 4}),
    "held without power": dict(axis={"vertical": True, "holding_torque": 0.2}),
    "step rate": dict(driver={"max_step_rate": None},
                      machine={"limits": {k: v for k, v in LIMITS.items() if k != "step_rate"}}),
    "overvoltage trip": dict(supply={"overvoltage_trip": None}),
    "start-up capacitance": dict(supply={"largest_startup_capacitance": None}),
    "steady lowering": dict(axis={"points": [{"speed": 50.0, "torque": -0.3, "share": 0.3}]}),
    "stock": dict(driver={"stock": None}),
    "lead time": dict(driver={"lead_time": None}),
    "price limit": dict(motor={"price": None}),
    "braking rise": dict(axis={"load_inertia": None,
                               "points": [{"speed": 50.0, "torque": 0.24, "share": 0.3}]}),
    "torque": dict(motor={"rotor_inertia": None}),
}  # fmt: skip


@pytest.mark.parametrize("rule", UNKNOWN)
def test_what_is_not_stated_is_unknown_and_never_blocks(rule):
    judgement, found = states(**UNKNOWN[rule])
    assert (rule, "unknown") in found
    assert judgement.verdict == "holds"


def test_a_design_without_supply_is_judged_as_far_as_it_can_be():
    judgement, found = states(bus={"supply": None})
    assert judgement.verdict == "holds"
    assert {"set voltage", "supply mean power", "supply peak power"} <= {
        rule for rule, state in found if state == "unknown"
    }
    assert judgement.buses[0].available_power is None


def test_loading_is_the_inverse_of_headroom_and_required_holds_no_margin():
    judgement, _ = states()
    bus = judgement.buses[0]
    assert bus.peak_power / bus.available_power == pytest.approx(1 / (1 + bus.supply_headroom))
    worst = judgement.axes[0].worst_point
    inertia = MOTOR["rotor_inertia"] + AXIS["load_inertia"]
    assert worst.required_torque == pytest.approx(0.24 + inertia * 300.0, rel=1e-12)


def test_lossy_iron_heats_more():
    judgement, _ = states()
    figures = judgement.axes[0]
    assert figures.winding_temperature < figures.winding_temperature_high
