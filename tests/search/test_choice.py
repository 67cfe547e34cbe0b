"""The search against an exhaustive referee, the judge and a second solver."""

from __future__ import annotations

from random import Random

import pytest
from exhaustive import best_design
from factory import (
    TURN,
    euros,
    make_axis,
    make_driver,
    make_motor,
    make_problem,
    make_supply,
    random_problem,
)

from selector.domain.machine import Limits, Load, Point, Problem, VoltageLimits
from selector.domain.parts import AS_WOUND, VoltageRange
from selector.domain.results import Design
from selector.errors import WrongVerdict
from selector.judge import judge
from selector.search import choice as search
from selector.search import milp
from selector.search.choice import _Search, choose
from selector.search.cpsat import Deadline

# The last ones were found by going through seeds 0 to 2000.
SEEDS = [*range(250), 476, 647, 1059, 1244, 1638, 1985]
SOME = range(0, 250, 4)


def design_of(result):
    """The design of a result, or None."""
    return None if result.choice is None else search.design_of(result.offers, result.choice)


def told(design: Design | None):
    """A design as the referee names one."""
    if design is None:
        return None
    names = tuple((a.motor, a.joining or AS_WOUND, a.driver, a.peak) for a in design.axes)
    bus = design.buses[0]
    return bus.voltage, names, bus.supply, bus.count


@pytest.mark.parametrize("seed", SEEDS)
def test_the_choice_is_the_first_in_order_of_all_designs(seed):
    problem = random_problem(seed)
    result, best = choose(problem), best_design(problem)
    design = design_of(result)
    if best.key is None:
        assert (result.verdict, design) == ("none exists", None)
        assert result.second_route
        return
    assert result.verdict == "proved"
    assert tuple(result.choice.values) == best.values
    names = tuple(option.name for option in best.options)
    assert told(design) == (best.voltage, names, best.supply, best.count)
    for option, axis in zip(best.options, design.axes, strict=True):
        assert axis.rest_current_peak == pytest.approx(option.rest_share * option.setting)
        assert axis.microsteps == option.microsteps
    failing = [f.rule for f in judge(problem, design).findings if f.state == "fails"]
    assert failing == []


@pytest.mark.parametrize("seed", range(250))
def test_an_axis_is_called_without_option_only_if_it_has_none(seed):
    problem = random_problem(seed)
    result = choose(problem)
    if result.verdict == "none exists":
        by_axis = best_design(problem).by_axis
        for axis, options in zip(problem.machine.axes, by_axis, strict=True):
            if f"no option fits axis {axis.axis}" in result.reasons:
                assert not any(options.values())


def test_most_random_problems_have_a_design_and_many_have_none():
    verdicts = [choose(random_problem(seed)).verdict for seed in range(100)]
    assert 50 <= verdicts.count("proved") <= 80


@pytest.mark.parametrize("seed", SOME)
def test_highs_finds_the_same_best_goal(seed):
    problem = random_problem(seed)
    result = choose(problem)
    search = _Search(problem, Deadline(None), lambda _: None)
    search.cells = {rail: search.bounds.cells(rail) for rail in range(len(search.offers.rails))}
    search.judged_to = search.bounds.room[:, 0] * 0.0
    search._judge(list(search.cells), float("inf"))
    models = list(search._all_models())
    outcomes = [milp.minimise(model.model, model.goals[0]) for model in models]
    assert all(outcome.status in ("optimal", "infeasible") for outcome in outcomes)
    values = [outcome.value for outcome in outcomes if outcome.status == "optimal"]
    expected = [] if result.choice is None else [result.choice.values[0]]
    assert ([min(values)] if values else []) == expected


def changed(problem: Problem, machine: dict | None = None, **parts) -> Problem:
    return problem.model_copy(update={
        "machine": problem.machine.model_copy(update=machine or {}),
        "catalogue": problem.catalogue.model_copy(update=parts),
    })  # fmt: skip


@pytest.mark.parametrize("seed", SOME)
def test_the_order_of_the_catalogue_changes_nothing(seed):
    problem, random = random_problem(seed), Random(seed)
    parts = {
        kind: tuple(random.sample(entries, len(entries)))
        for kind in ("motors", "drivers", "supplies")
        for entries in [getattr(problem.catalogue, kind)]
    }
    assert design_of(choose(changed(problem, **parts))) == design_of(choose(problem))


@pytest.mark.parametrize("seed", SOME)
def test_the_order_of_the_axes_changes_neither_goals_nor_power(seed):
    """Names are compared axis by axis, so among equals of all else the order may decide."""
    problem = random_problem(seed)
    turned = changed(problem, {"axes": problem.machine.axes[::-1]})
    before, after = choose(problem), choose(turned)
    assert before.verdict == after.verdict
    if before.choice is None:
        return
    assert before.choice.order(before.offers)[:-3] == after.choice.order(after.offers)[:-3]
    best = best_design(turned)
    names = tuple(option.name for option in best.options)
    assert told(design_of(after)) == (best.voltage, names, best.supply, best.count)


@pytest.mark.parametrize("seed", SOME)
def test_a_second_run_gives_the_same_design(seed):
    first, second = (design_of(choose(random_problem(seed))) for _ in range(2))
    assert first == second


@pytest.mark.parametrize("seed", SOME)
def test_a_dearer_and_larger_twin_of_a_part_is_never_chosen(seed):
    problem = random_problem(seed)
    motor = problem.catalogue.motors[0]
    twin = motor.model_copy(update={
        "part": "a-twin", "price": euros(900), "mass": 50.0, "volume": 0.01, "size": None,
    })  # fmt: skip
    more = changed(problem, motors=(*problem.catalogue.motors, twin))
    before, after = choose(problem), choose(more)
    if before.choice is not None:
        assert after.choice.values[0] <= before.choice.values[0]
        first = before.offers.goals[0].of
        if motor.price is not None and motor.outer_volume and motor.mass and first(motor) > 0:
            short = motor.stock is not None and motor.stock < 9
            assert short or design_of(after) == design_of(before)


@pytest.mark.parametrize("seed", SOME)
def test_a_part_that_was_not_chosen_is_not_missed(seed):
    problem = random_problem(seed)
    design = design_of(choose(problem))
    if design is None:
        return
    used = {name for axis in design.axes for name in (axis.motor, axis.driver)}
    used.add(design.buses[0].supply)
    left = {
        kind: tuple(part for part in getattr(problem.catalogue, kind) if part.part in used)
        for kind in ("motors", "drivers", "supplies")
    }
    assert design_of(choose(changed(problem, **left))) == design


# -- single cases -----------------------------------------------------------------------------


def test_a_motor_that_is_only_turned_must_still_have_torque_left():
    """No torque is asked, but above the corner an undamped motor has none left to turn with."""
    axis = make_axis(points=(Point(speed=30 * TURN, torque=0.0),), damping_ratio=0.0)
    damped = axis.model_copy(update={"damping_ratio": 0.1})
    values = [choose(make_problem(axes=(a,))).choice.values for a in (axis, damped)]
    assert values == [list(best_design(make_problem(axes=(a,))).values) for a in (axis, damped)]
    assert values[1] < values[0]


def test_a_supply_is_not_set_above_its_own_trip():
    unit = make_supply(trim=VoltageRange(min=24.0, max=28.0), overvoltage_trip=25.0,
                       absorbs_energy=True)  # fmt: skip
    above = Limits(step_rate=1e5, voltage=VoltageLimits(min=26.0))
    assert choose(make_problem(supplies=(unit,), limits=above)).verdict == "none exists"


def test_the_reason_names_the_axis_without_option_alone():
    problem = make_problem(axes=(make_axis("x", frames=(0.1,)), make_axis("y")))
    assert choose(problem).reasons == ["no option fits axis x"]


@pytest.mark.parametrize("kind", ["motors", "drivers", "supplies"])
def test_an_empty_shelf_is_no_design(kind):
    result = choose(make_problem(**{kind: ()}))
    assert (result.verdict, bool(result.reasons)) == ("none exists", True)


def test_axes_that_need_different_voltages_have_no_design():
    drivers = (
        make_driver("low", supply_voltage=VoltageRange(min=12.0, max=30.0), stock=1),
        make_driver("high", supply_voltage=VoltageRange(min=30.0, max=48.0), stock=1),
    )
    result = choose(make_problem(drivers=drivers, motors=(make_motor(),)))
    assert result.verdict == "none exists"


def test_a_supply_stronger_by_less_than_a_step_still_counts():
    """100.009 W and 100.000 W are both 100.00 W rounded down, yet only one of them covers 83.34 W
    with 20 % to spare."""
    weak = make_supply("weak", rated_power=100.0, rated_current=9.0, price=euros(40))
    strong = make_supply("strong", rated_power=100.009, rated_current=9.0, price=euros(41))
    alone = make_problem(axes=(make_axis(),), supplies=(strong,))
    axis = best_design(alone).options[0].steps[0]
    load = Load(load="heater", power=(8334 - axis) / 100,
                supply_voltage=VoltageRange(min=9.0, max=60.0))  # fmt: skip
    problem = make_problem(axes=(make_axis(),), supplies=(weak, strong), loads=(load,))
    best = best_design(problem)
    assert best.supply == "strong"
    assert told(design_of(choose(problem)))[2] == "strong"


def test_a_verdict_that_the_second_route_denies_is_withheld(monkeypatch):
    """The first solver falsified: it says infeasible of everything."""
    from selector.search.cpsat import CpSat
    from selector.search.model import Outcome

    monkeypatch.setattr(CpSat, "minimise", lambda *_: Outcome("infeasible"))
    with pytest.raises(WrongVerdict, match="HiGHS finds one"):
        choose(make_problem())
