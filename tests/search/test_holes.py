"""Small machines in which one rule, one column or one step decides; and bounds of stopped runs."""

from __future__ import annotations

import pytest
from exhaustive import Best, best_design
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

from selector.domain.machine import Limits, Load, Margins, Point, Problem, VoltageLimits
from selector.domain.parts import AS_WOUND, VoltageRange
from selector.judge import judge
from selector.search import choice as search


def agreed(problem: Problem) -> Best:
    """The referee's design, once the search has chosen the same and the judge lets it stand."""
    best, result = best_design(problem), search.choose(problem)
    if best.key is None:
        assert (result.verdict, result.choice) == ("none exists", None)
        return best
    assert result.verdict == "proved"
    assert (result.bound, tuple(result.choice.values)) == (best.values[0], best.values)
    design = search.design_of(result.offers, result.choice)
    bus = design.buses[0]
    assert (bus.voltage, bus.supply, bus.count) == (best.voltage, best.supply, best.count)
    names = [(a.motor, a.joining or AS_WOUND, a.driver, a.peak) for a in design.axes]
    assert names == [option.name for option in best.options]
    resting = [option.rest_share * option.setting for option in best.options]
    assert [axis.rest_current_peak for axis in design.axes] == pytest.approx(resting)
    assert [f.rule for f in judge(problem, design).findings if f.state == "fails"] == []
    return best


# -- dominance of supplies and of options -----------------------------------------------------


def test_a_cheaper_supply_that_trips_does_not_stand_in_for_one_that_does_not():
    heavy = make_axis(load_inertia=3e-4)
    trips = make_supply("trips", price=euros(40), overvoltage_trip=25.0)
    for trip in (None, 40.0):
        holds = make_supply("holds", price=euros(41), overvoltage_trip=trip)
        best = agreed(make_problem(axes=(heavy,), supplies=(trips, holds)))
        assert best.supply == "holds"


def test_a_supply_with_a_lower_trip_is_chosen_where_it_suffices():
    trips = make_supply("trips", price=euros(40), overvoltage_trip=30.0)
    holds = make_supply("holds", price=euros(41))
    assert agreed(make_problem(axes=(make_axis(),), supplies=(trips, holds))).supply == "trips"


def test_a_cheaper_supply_that_starts_into_less_does_not_stand_in():
    little = make_supply("little", price=euros(40), largest_startup_capacitance=2500e-6)
    for much in (None, 2900e-6):
        starts = make_supply("starts", price=euros(41), largest_startup_capacitance=much)
        problem = make_problem(axes=(make_axis(),), drivers=(make_driver(),),
                               supplies=(little, starts))  # fmt: skip
        assert agreed(problem).supply == "starts"


def test_a_cheaper_driver_of_more_capacitance_does_not_stand_in_where_the_supply_limits_it():
    large = make_driver("large", price=euros(20), bus_capacitance=1000e-6)
    small = make_driver("small", price=euros(21), bus_capacitance=100e-6)
    for limit, chosen in ((2400e-6, ["small"] * 2), (3300e-6, ["large", "small"]),
                          (4200e-6, ["large"] * 2), (None, ["large"] * 2)):  # fmt: skip
        supply = make_supply(largest_startup_capacitance=limit)
        best = agreed(make_problem(drivers=(large, small), supplies=(supply,)))
        assert [option.driver.part for option in best.options] == chosen


# -- order among equals -----------------------------------------------------------------------


def test_a_trim_weighs_more_than_any_power():
    """Equal in price: the trimmed supply would start the driver that idles at 1 W less."""
    lean = make_driver("lean", bus_capacitance=470e-6, idle_power=1.0)
    idle = make_driver("idle", bus_capacitance=100e-6, idle_power=2.0)
    plain = make_supply("plain", largest_startup_capacitance=2300e-6)
    trimmed = make_supply("a-trimmed", voltage=26.0, trim=VoltageRange(min=24.0, max=28.0))
    limits = Limits(step_rate=1e5, voltage=VoltageLimits(max=24.0))
    problem = make_problem(axes=(make_axis(),), drivers=(lean, idle), supplies=(plain, trimmed),
                           limits=limits)  # fmt: skip
    best, alone = agreed(problem), agreed(problem_with(problem, supplies=(trimmed,)))
    assert (best.supply, alone.supply) == ("plain", "a-trimmed")
    assert best.options[0].mean > alone.options[0].mean + 0.5
    assert best.values == alone.values


def problem_with(problem: Problem, **parts) -> Problem:
    """The same machine with another catalogue."""
    catalogue = problem.catalogue.model_copy(update=parts)
    return problem.model_copy(update={"catalogue": catalogue})


# -- stock ------------------------------------------------------------------------------------

STOCKS = [(1, 1), (1, 2), (1, 3), (2, 2), (2, 3), (2, 4), (2, 5), (2, 6), (3, 5), (3, 8)]


@pytest.mark.parametrize("quantity, stock", STOCKS)
@pytest.mark.parametrize("kind", ["motors", "drivers"])
def test_three_equal_axes_share_what_is_left_of_the_best_part(kind, quantity, stock):
    make = make_motor if kind == "motors" else make_driver
    few = make("few", price=euros(20), stock=stock)
    many = make("many", price=euros(21), stock=None)
    one = {"motors": (make_motor(),), "drivers": (make_driver(),)} | {kind: (few, many)}
    axes = tuple(make_axis(name) for name in "xyz")
    best = agreed(make_problem(axes=axes, quantity=quantity, supplies=(make_supply(),), **one))
    names = [getattr(option, kind[:-1]).part for option in best.options]
    assert names.count("few") == min(3, stock // quantity)


# -- settings ---------------------------------------------------------------------------------


@pytest.mark.parametrize("settings, shares", [((1.5, 2.0), (0.5,)), ((2.0, 3.0), (0.3, 0.5))])
def test_a_larger_setting_is_lighter_where_it_may_fall_to_a_smaller_share(settings, shares):
    slow = Point(speed=1.0, torque=0.1, share=0.01)
    axis = make_axis(points=(slow,), holding_torque=0.2, reduce_at_rest=True)
    driver = make_driver(current_settings=settings, hold_current=shares)
    one = {"axes": (axis,), "motors": (make_motor(),), "supplies": (make_supply(),)}
    best = agreed(make_problem(drivers=(driver,), **one))
    assert best.options[0].setting == settings[1]
    smaller = agreed(make_problem(
        drivers=(driver.model_copy(update={"current_settings": settings[:1]}),), **one
    ))  # fmt: skip
    assert smaller.options[0].rest_share > best.options[0].rest_share
    assert smaller.options[0].mean > best.options[0].mean


# -- braking ----------------------------------------------------------------------------------


@pytest.mark.parametrize("missing", [0.2, 0.05, 0.02, 0.009, 0.002, -0.002, -0.05])  # J
def test_braking_decides_between_driver_limits_by_little(missing):
    """Under the lower limit of the two drivers the stop returns a little more than fits."""
    axis = make_axis(load_inertia=4e-4, points=(Point(speed=10 * TURN, torque=0.2),))
    low = make_driver("low", price=euros(20), supply_voltage=VoltageRange(min=12.0, max=36.0))
    high = make_driver("high", price=euros(21), supply_voltage=VoltageRange(min=12.0, max=48.0))
    parts = {"motors": (make_motor(),), "drivers": (low, high), "supplies": (make_supply(),)}
    free = best_design(make_problem(axes=(axis,), bus_capacitance=1.0, **parts))
    room = 0.5 * 0.8 * ((0.9 * 36.0) ** 2 - (24.0 * 1.02) ** 2)  # J/F
    held = 2000e-6 + 470e-6
    more = (free.options[0].energy - missing) / room - held
    assert more > 0
    best = agreed(make_problem(axes=(axis,), bus_capacitance=more, **parts))
    assert best.options[0].driver.part == ("high" if missing > 0 else "low")
    only = parts | {"drivers": (low,)}
    alone = agreed(make_problem(axes=(axis,), bus_capacitance=more, **only))
    assert (alone.key is None) == (missing > 0)


def test_braking_decides_for_one_of_two_supplies():
    """One supply takes up every stop under the lower limit, the cheaper one does not."""
    axis = make_axis(load_inertia=4e-4, points=(Point(speed=10 * TURN, torque=0.2),))
    low = make_driver("low", price=euros(21), supply_voltage=VoltageRange(min=12.0, max=36.0))
    high = make_driver("high", price=euros(20), supply_voltage=VoltageRange(min=12.0, max=60.0))
    bare = make_supply("bare", output_capacitance=None)
    full = make_supply("full", price=euros(50), output_capacitance=20e-3)
    best = agreed(make_problem(axes=(axis,), drivers=(low, high), motors=(make_motor(),),
                               supplies=(bare, full)))  # fmt: skip
    assert (best.supply, best.options[0].driver.part) == ("bare", "high")


# -- one step of the goal ---------------------------------------------------------------------


@pytest.mark.parametrize("steps", [1, 2, 3])
def test_a_design_cheaper_by_a_step_than_the_first_one_found_is_found(steps):
    """The few best options of an axis are short in stock or light but dear; the best design takes
    the one that is neither."""
    scarce = [make_motor(f"scarce-{k}", price=euros("23.9"), stock=1) for k in range(search.FEW)]
    light = make_motor("light", price=euros("24.0000"), phase_resistance=0.3)
    wanted = make_motor("wanted", price=euros(f"23.{10_000 - steps}"), phase_resistance=1.0)
    axes = tuple(make_axis(f"axis-{k}") for k in range(search.FEW + 1))
    problem = make_problem(
        axes=axes, motors=(*scarce, light, wanted), drivers=(make_driver(),),
        supplies=(make_supply(),),
    )  # fmt: skip
    best = agreed(problem)
    assert [option.motor.part for option in best.options].count("wanted") == 1
    left = problem_with(problem, motors=(*scarce, light))
    assert agreed(left).values[0] == best.values[0] + steps


# -- float dust -------------------------------------------------------------------------------

SPANS = [(0.10, 21.6, 26.4), (0.05, 22.8, 25.2)]


def dusty(tolerance: float, load: VoltageRange | None = None, **changes) -> Problem:
    """One axis at 24 V, all energy back into the supply, with a load on the bus if given."""
    supply = make_supply(tolerance=tolerance, absorbs_energy=True)
    loads = () if load is None else (Load(load="board", power=5.0, supply_voltage=load),)
    return make_problem(axes=(make_axis(),), supplies=(supply,), loads=loads, **changes)


@pytest.mark.parametrize("tolerance, low, high", SPANS)
def test_a_load_that_bears_exactly_what_the_supply_gives(tolerance, low, high):
    assert agreed(dusty(tolerance, VoltageRange(min=low, max=high))).supply == "brook"
    for short in (VoltageRange(min=low + 1e-3, max=high), VoltageRange(min=low, max=high - 1e-3)):
        assert agreed(dusty(tolerance, short)).key is None


@pytest.mark.parametrize("tolerance, low, high", SPANS)
def test_a_driver_that_bears_exactly_what_the_supply_gives(tolerance, low, high):
    whole = Margins(voltage_use=1.0)
    for span, bears in (((low, high), True), ((low + 1e-3, high), False),
                        ((low, high - 1e-3), False)):  # fmt: skip
        driver = make_driver(supply_voltage=VoltageRange(min=span[0], max=span[1]))
        best = agreed(dusty(tolerance, drivers=(driver,), margins=whole))
        assert (best.key is not None) == bears


@pytest.mark.parametrize("tolerance, low, high", SPANS)
@pytest.mark.parametrize("absorbs", [True, False])
def test_a_trip_exactly_at_the_highest_voltage(tolerance, low, high, absorbs):
    """Nothing comes back from an axis this slow, so that the trip leaves room enough."""
    slow = make_axis(points=(Point(speed=0.01, torque=0.2),), stop_deceleration=1000.0)
    for trip, allowed in ((high, True), (high + 1e-3, True), (high - 1e-3, False)):
        supply = make_supply(tolerance=tolerance, absorbs_energy=absorbs, overvoltage_trip=trip)
        best = agreed(make_problem(axes=(slow,), supplies=(supply,)))
        assert (best.key is not None) == allowed
        if allowed:
            assert best.options[0].energy == 0.0


# -- limits on a goal -------------------------------------------------------------------------

SCALES = {"cost": 10_000, "volume": 10**9, "mass": 10**6}


def limited(goal: str, steps: int, minimise: tuple[str, ...]) -> Problem:
    """The fixed problem with prices to a step, and a limit of so many steps."""
    limit = steps / SCALES[goal]
    stated = {"price": euros(f"{limit:.4f}")} if goal == "cost" else {goal: limit}
    motors = (make_motor(price=euros("24.0003")), make_motor("b", price=euros("23.9999"), mass=0.9))
    return make_problem(motors=motors, limits=Limits(step_rate=1e5, **stated), minimise=minimise)


@pytest.mark.parametrize("goal", SCALES)
@pytest.mark.parametrize("alone", [True, False])
def test_a_limit_on_the_first_goal_exactly_at_the_best(goal, alone):
    minimise = (goal,) if alone else (goal, *(other for other in SCALES if other != goal))
    value = agreed(limited(goal, 10**10, minimise)).values[0]
    for steps, exists in ((value + 1, True), (value, True), (value - 1, False), (1, False)):
        best = agreed(limited(goal, steps, minimise))
        assert (best.key is not None) == exists
        if exists:
            assert best.values[0] == value


@pytest.mark.parametrize("goal", SCALES)
@pytest.mark.parametrize("first", SCALES)
def test_a_limit_on_another_goal_exactly_at_the_least(goal, first):
    least = agreed(limited(goal, 10**10, (goal, first)[: 1 + (goal != first)])).values[0]
    best = agreed(limited(goal, least, (first,)))
    assert best.key is not None
    assert agreed(limited(goal, least - 1, (first,))).key is None


@pytest.mark.parametrize("goal", ["volume", "mass"])
def test_a_limit_that_is_a_hair_below_its_steps_as_a_float(goal):
    """Such as 0.000500003 m³: times 1e9 it falls short of 500003 mm³, and still allows them."""
    beside, scale = (10**5, 10**9) if goal == "volume" else (10**6, 10**6)
    total = next(t for t in range(11 * beside // 10, 10**7) if t / scale * scale < t)
    own = {"mass": 0.1, "volume": 5e-5, "size": None}
    motor = make_motor(**own | {goal: (total - beside) / scale})
    half = beside / 2 / scale
    parts = {
        "motors": (motor,), "drivers": (make_driver(**{goal: half}),),
        "supplies": (make_supply(**{goal: half}),),
    }  # fmt: skip
    for minimise in ((goal,), ("cost",)):
        for limit, exists in ((total, True), (total - 1, False)):
            limits = Limits(step_rate=1e5, **{goal: limit / scale})
            problem = make_problem(axes=(make_axis(),), limits=limits, minimise=minimise, **parts)
            assert (agreed(problem).key is not None) == exists


# -- stopped ----------------------------------------------------------------------------------


class Countdown:
    """A deadline that is over when it has been asked so many times."""

    asked = 0

    def __init__(self, seconds: float | None) -> None:
        self.most = seconds

    def left(self) -> float | None:
        """Plenty, then nothing."""
        self.asked += 1
        return 1000.0 if self.most is None or self.asked <= self.most else 0.0


def within(result: search.Result, best: Best) -> bool:
    """Check what a stopped search says against the best design; whether it was proved."""
    assert result.verdict in ("proved", "not proved") or best.key is None
    value = float("inf") if best.key is None else best.values[0]
    assert result.bound is None or result.bound <= value
    if result.choice is not None:
        assert result.choice.values[0] >= value
        assert result.bound is None or result.bound <= result.choice.values[0]
    if result.verdict == "proved":
        assert (result.bound, tuple(result.choice.values)) == (value, best.values)
    return result.verdict != "not proved"


STOPPED = [12, 41, 49, 96]


@pytest.mark.parametrize("seed", STOPPED)
def test_a_bound_of_a_search_stopped_at_any_moment_is_none_too_high(seed, monkeypatch):
    monkeypatch.setattr(search, "Deadline", Countdown)
    problem = random_problem(seed)
    best, proved = best_design(problem), []
    for moment in range(40):
        proved.append(within(search.choose(problem, moment), best))
        if proved[-1]:
            break
    assert not proved[0]


@pytest.mark.parametrize("beyond", [-2, -1, 0, 1, 2, 1000])
def test_the_best_design_lies_about_the_first_guess_of_its_goal(beyond, monkeypatch):
    """Two cheap motors for three axes; the third one's price puts the goal at the guess."""
    scarce = [make_motor(f"scarce-{k}", price=euros(20), stock=1) for k in range(search.FEW)]
    axes = tuple(make_axis(f"axis-{k}") for k in range(search.FEW + 1))
    parts = {"drivers": (make_driver(),), "supplies": (make_supply(),)}

    def problem(steps: int) -> Problem:
        dear = make_motor("dear", price=euros(f"{20 + steps / 10_000:.4f}"))
        return make_problem(axes=axes, motors=(*scarce, dear), **parts)

    bounds = search._Search(problem(0), search.Deadline(None), lambda _: None).bounds
    floor = min(cell.floor for cell in bounds.cells(0))
    cheap = len(axes) * (20 + 30) + 40
    wanted = int(floor * (1.0 + search.GUESS)) + beyond
    best = agreed(problem(wanted - cheap * 10_000))
    assert best.values == (wanted,)
    monkeypatch.setattr(search, "Deadline", Countdown)
    for moment in range(12):
        within(search.choose(problem(wanted - cheap * 10_000), moment), best)


@pytest.mark.parametrize("seconds", [0.0, 0.01, 0.03, 0.1, 0.2])
def test_a_bound_of_a_search_stopped_by_the_clock_is_none_too_high(seconds):
    axes = tuple(make_axis(name, load_inertia=k * 1e-5) for k, name in enumerate("xyz", 2))
    problem = make_problem(axes=axes)
    proved = within(search.choose(problem, seconds), best_design(problem))
    assert seconds or not proved
