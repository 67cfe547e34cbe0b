"""Judging in arrays against the judge's scalars, and the claims the search leans on."""

from __future__ import annotations

from random import Random

import numpy as np
import pytest
from factory import random_problem

from selector.domain.machine import Axis, Problem
from selector.domain.parts import AS_WOUND
from selector.domain.results import AxisChoice
from selector.judge import axis_rules
from selector.judge.cases import AxisCase
from selector.search.candidates import AxisTable
from selector.search.offers import Offers, offers_of
from selector.search.options import Combos, Judged


def tables(seed: int) -> list[AxisTable]:
    offers = offers_of(random_problem(seed))
    if not (offers.windings and offers.drivers and offers.rails):
        return []
    return [AxisTable(axis, offers) for axis in offers.problem.machine.axes]


def every(table: AxisTable) -> Combos:
    """Every winding, driver, rail and setting the driver has, ambient counted, and the motor may
    take."""
    shape = (*table.judged.shape, table.settings.shape[1])
    rows = Combos(*(index.ravel() for index in np.indices(shape)))
    return rows.pick(~np.isnan(table._setting(rows.winding, rows.driver, rows.rank)))


def adequate(table: AxisTable, rows: Combos):
    """Whether each row is adequate, and the figures of those that are."""
    judged = Judged(table, rows)
    keep, _, options = judged.outcome()
    return keep.copy(), options, judged.temperature[keep]


def case_of(table: AxisTable, rows: Combos, k: int) -> AxisCase:
    offers: Offers = table.offers
    problem: Problem = offers.problem
    axis: Axis = table.axis
    winding, driver = offers.windings[rows.winding[k]], offers.drivers[rows.driver[k]]
    rail = offers.rails[rows.rail[k]]
    choice = AxisChoice(
        axis=axis.axis, motor=winding.motor.part, driver=driver.part,
        joining=None if winding.joining == AS_WOUND else winding.joining,
        current_peak=float(table.settings[rows.driver[k], rows.rank[k]]),
    )  # fmt: skip
    return AxisCase(problem.machine, axis, choice, winding.motor, driver, winding.joining,
                    rail.voltage, rail.spread)  # fmt: skip


def holds(case: AxisCase) -> bool:
    """Whether the judge lets an axis stand at its voltage."""
    findings = [finding for rule in axis_rules.RULES for finding in rule(case)]
    span, use = case.driver.supply_voltage, case.machine.margins.voltage_use
    low, high = case.voltage * (1 - case.spread), case.voltage * (1 + case.spread)
    inertia_known = case.motor.rotor_inertia is not None or not case.axis.accelerates
    return (
        all(finding.state != "fails" for finding in findings)
        and low >= span.min - 1e-9 and high <= use * span.max + 1e-9
        and inertia_known and case.microsteps >= 8
    )  # fmt: skip


@pytest.mark.parametrize("seed", range(40))
def test_arrays_judge_as_the_judge_does(seed):
    random = Random(seed)
    for table in tables(seed):
        rows = every(table)
        rows = rows.pick(table.possible[rows.winding, rows.driver])
        rows = table._within_voltage(rows)
        if not len(rows):
            continue
        keep, options, temperature = adequate(table, rows)
        row_of = {int(k): n for n, k in enumerate(np.flatnonzero(keep))}
        some = {random.randrange(len(rows)) for _ in range(12)}
        some |= set(random.sample(sorted(row_of), min(8, len(row_of))))
        for k in sorted(some):
            case = case_of(table, rows, k)
            assert holds(case) == bool(keep[k]), case.choice
            if not keep[k]:
                continue
            n = row_of[k]
            found = [options.peak[n], options.mean[n], options.energy[n], options.rest_share[n],
                     temperature[n]]  # fmt: skip
            wanted = [case.peak_power, case.mean_power, case.returned_energy, case.rest_share,
                      case.temperature]  # fmt: skip
            assert found == pytest.approx(wanted, rel=1e-6)
            assert options.microsteps[n] == case.microsteps


@pytest.mark.parametrize("seed", range(40))
def test_what_is_left_out_before_judging_fails_before_the_judge(seed):
    random = Random(seed)
    for table in tables(seed):
        rows = every(table)
        possible = table.possible[rows.winding, rows.driver]
        reached = table.reaches[rows.winding, rows.driver, rows.rail]
        first = table.first_rank[rows.winding, rows.driver]
        out = np.flatnonzero(~(possible & reached & (rows.rank >= first)))
        for k in random.sample(out.tolist(), min(12, len(out))):
            assert not holds(case_of(table, rows, k))


@pytest.mark.parametrize("seed", range(400))
def test_bounds_that_need_no_judging_leave_out_nothing_adequate(seed):
    for table in tables(seed):
        rows = every(table)
        frames_and_steps = table.microsteps[rows.winding, rows.driver] >= 8
        rows = table._within_voltage(rows.pick(frames_and_steps))
        if not len(rows):
            continue
        keep, options, _ = adequate(table, rows)
        frames = table.axis.frames
        motors = [table.offers.windings[w].motor for w in rows.winding]
        fits = np.array([
            (not frames or any(abs(m.frame - f) < 1e-6 for f in frames))
            and (m.rotor_inertia is not None or not table.axis.accelerates)
            for m in motors
        ])  # fmt: skip
        pair = rows.winding, rows.driver
        slow, t = table.axis.stop_deceleration, table.offers.tables
        if slow is not None:  # the one rule of a setting that is part of the bound
            inertia = t["J"][rows.winding] + (table.axis.load_inertia or 0.0)
            strength = 0.9 * t["K"][rows.winding] * table.settings[rows.driver, rows.rank]
            fits &= strength >= inertia * slow + table.axis.driving_torque
        assert table.possible[pair][keep & fits].all()
        assert table.reaches[(*pair, rows.rail)][keep].all()
        assert (rows.rank >= table.first_rank[pair])[keep & fits].all()
        floor = table.power_floor[options.winding, options.driver]
        assert (options.peak >= floor * (1 - 1e-9)).all()


@pytest.mark.parametrize("seed", range(400))
def test_above_a_setting_that_ends_its_row_none_takes_less_power_nor_runs_cooler(seed):
    for table in tables(seed):
        if table.axis.reduce_at_rest:
            continue
        rows = table._within_voltage(every(table))
        if not len(rows):
            continue
        keep, options, temperature = adequate(table, rows)
        flows = Judged(table, rows).full_flow()[keep]
        order = np.lexsort((options.setting, options.rail, options.driver, options.winding))
        same = flows[order][:-1].copy()  # the smaller setting of two ends its row
        for name in ("winding", "driver", "rail"):
            column = getattr(options, name)[order]
            same &= column[1:] == column[:-1]
        for figure in (options.peak, options.mean, temperature):
            steps = np.diff(figure[order])[same]
            assert (steps >= -1e-9 * np.abs(figure[order][1:][same])).all()


@pytest.mark.parametrize("seed", range(400))
def test_a_setting_too_hot_leaves_no_larger_one_that_is_not(seed):
    for table in tables(seed):
        if table.axis.reduce_at_rest:
            continue
        rows = every(table)
        judged = Judged(table, rows)
        keep, hopeless, _ = judged.outcome()
        first_hopeless: dict[tuple[int, int, int], int] = {}
        for k in np.flatnonzero(hopeless):
            where = int(rows.winding[k]), int(rows.driver[k]), int(rows.rail[k])
            first_hopeless[where] = min(int(rows.rank[k]), first_hopeless.get(where, 99))
        for k in np.flatnonzero(keep):
            where = int(rows.winding[k]), int(rows.driver[k]), int(rows.rail[k])
            assert rows.rank[k] < first_hopeless.get(where, 99)
