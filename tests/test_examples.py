"""The shipped examples say what they are said to show, and every design of theirs is judged."""

import json
from pathlib import Path

import pytest

import selector

ROOT = Path(__file__).parent.parent
EXAMPLES = ROOT / "examples"
MACHINES = ["seed-dispenser", "tray-store", "drying-cabinet"]


@pytest.fixture(scope="module")
def answers():
    found = {}
    for name in MACHINES:
        problem = selector.load_problem(EXAMPLES / f"{name}.yaml")
        found[name] = problem, selector.pick(problem)
    return found


def limited(problem, **limits):
    """The problem with other limits."""
    changed = problem.machine.limits.model_copy(update=limits)
    machine = problem.machine.model_copy(update={"limits": changed})
    return problem.model_copy(update={"machine": machine})


@pytest.mark.parametrize("name", MACHINES)
def test_each_machine_has_a_proved_design_that_the_judge_lets_stand(answers, name):
    problem, answer = answers[name]
    assert answer.verdict == "proved"
    assert answer.judgement.verdict == "holds"
    assert 3 <= len(problem.machine.axes) <= 8


def test_the_dispenser_lives_on_24_volts_or_less(answers):
    _, answer = answers["seed-dispenser"]
    assert answer.design.buses[0].voltage <= 24.0


def test_the_tray_store_does_not_live_on_24_volts(answers):
    from selector.domain.machine import VoltageLimits

    problem, answer = answers["tray-store"]
    assert answer.design.buses[0].voltage > 28.0
    assert any(axis.vertical for axis in problem.machine.axes)
    low = selector.pick(limited(problem, voltage=VoltageLimits(max=28.0)))
    assert low.verdict == "none exists"
    assert low.reasons == ("no option fits axis carriage",)


def test_the_cabinet_takes_the_least_volume_and_costs_more_than_it_must(answers):
    problem, answer = answers["drying-cabinet"]
    cheapest = selector.pick(
        problem.model_copy(
            update={"machine": problem.machine.model_copy(update={"minimise": ("cost",)})}
        )
    )
    assert answer.judgement.totals.volume < cheapest.judgement.totals.volume
    assert answer.judgement.totals.cost > cheapest.judgement.totals.cost


def test_the_bench_design_holds():
    assert selector.judge_file(EXAMPLES / "bench-dispenser.yaml").verdict == "holds"


@pytest.mark.parametrize("name", MACHINES)
def test_a_repeat_gives_the_same_answer_byte_for_byte(answers, name):
    from selector.reports.tables import answer_data, as_json

    problem, answer = answers[name]
    again = as_json(answer_data(selector.pick(problem)))
    assert again == as_json(answer_data(answer))
    assert json.loads(again)["verdict"] == "proved"


MOTOR = dict(
    part="M", price="60 EUR", frame=0.057, step_angle=1.8, holding_torque=1.9, rated_current=2.8,
    phase_resistance=1.13, phase_inductance=5.4e-3, rotor_inertia=4.8e-5, stock=20,
)  # fmt: skip
DRIVER = dict(
    part="D", price="25 EUR", supply_voltage={"min": 12.0, "max": 50.0},
    current_settings=[2.8], current_basis="peak", microsteps=[8, 16],
    max_step_rate=2e5, switch_resistance=0.05, bus_capacitance=470e-6, stock=20,
)  # fmt: skip


@pytest.mark.standing("practice")
def test_four_axes_of_57_mm_end_on_a_supply_of_150_to_240_watts():
    """Common practice, no source: a good engineer buys 150 to 240 W here; the sum of all phase
    amperes would ask for 645 W."""
    supplies = tuple(
        selector.Supply(part=f"S{watts}", price=f"{10 + watts // 4} EUR", voltage=24.0,
                        rated_power=float(watts), output_capacitance=4e-3, tolerance=0.02)
        for watts in (100, 120, 150, 200, 240, 320, 480)
    )  # fmt: skip
    catalogue = selector.Catalogue(
        motors=(selector.Motor(**MOTOR),), drivers=(selector.Driver(**DRIVER),), supplies=supplies
    )
    points = (
        selector.Point(point="running", speed=31.41592653589793, torque=0.10),
        selector.Point(point="accelerating", speed=31.41592653589793, torque=0.25),
    )
    axes = tuple(selector.Axis(axis=name, points=points) for name in "abcd")
    machine = selector.Machine(name="four", currency="EUR", catalogues="none", axes=axes)
    answer = selector.pick(selector.Problem(machine=machine, catalogue=catalogue))
    assert answer.verdict == "proved"
    watts = int(answer.design.buses[0].supply[1:])
    assert 150 <= watts <= 240
    assert answer.judgement.buses[0].naive_current * 24.0 == pytest.approx(645.0, abs=0.5)
