"""Published instances with known optima, put to both solvers as groups, options and rows.

A maximum is the negative of a least negative value.
"""

from __future__ import annotations

from dataclasses import dataclass

import pytest

from selector.search import milp
from selector.search.cpsat import CpSat, Deadline
from selector.search.model import Model, Outcome


@dataclass
class Instance:
    """A model with what is to be minimised."""

    model: Model
    objective: dict[int, int]

    def by(self, solver: str) -> Outcome:
        if solver == "CP-SAT":
            return CpSat(self.model).minimise(self.objective, Deadline(None))
        return milp.minimise(self.model, self.objective)


solvers = pytest.mark.parametrize("solver", ["CP-SAT", "HiGHS"])


# Md. Shahadatullah Khan, Kin F. Li, Eric G. Manning, Md. Mostofa Akbar, "Solving the knapsack
# problem for adaptive multimedia systems", Studia Informatica Universalis 2(1), 2002, 161-182;
# instance I01 as in the file of the coin-or project Dip, Dip/data/MMKP/khan. Take one row of each
# group, five resources, 25 of each. "value: resource 1 to 5".
KHAN_I01 = """
7: 1 3 1 1 6 | 17: 1 4 9 9 3 | 25: 4 3 9 8 2 | 35: 4 5 8 0 6 | 36: 6 8 3 0 7
9: 0 0 4 4 2 | 10: 0 0 1 8 7 | 10: 1 1 6 0 6 | 39: 9 1 2 2 4 | 44: 8 7 0 8 2
15: 2 0 5 5 5 | 19: 2 3 2 6 2 | 20: 3 1 6 4 7 | 44: 6 7 5 6 9 | 50: 9 5 9 2 2
5: 0 1 3 8 0 | 25: 2 2 7 0 8 | 32: 5 5 6 1 9 | 37: 6 3 6 9 1 | 37: 7 9 7 2 3
24: 4 0 7 0 2 | 30: 4 8 9 0 0 | 32: 5 2 7 2 0 | 43: 5 5 9 5 2 | 44: 9 2 2 2 3
"""


def khan(resources: int) -> Instance:
    model, objective = Model(), {}
    use: list[dict[int, int]] = [{} for _ in range(resources)]
    for line in KHAN_I01.strip().splitlines():
        rows = [row.split(":") for row in line.split("|")]
        for number, (value, amounts) in zip(model.add_group(len(rows)), rows, strict=True):
            objective[number] = -int(value)
            for terms, amount in zip(use, amounts.split(), strict=False):
                terms[number] = int(amount)
    for terms in use:
        model.add_row(terms, 25)
    return Instance(model, objective)


@solvers
def test_khan_multiple_choice_knapsack_of_five_resources(solver):
    found = khan(5).by(solver)
    assert (found.status, found.value) == ("optimal", -173)
    assert [number % 5 for number in found.taken] == [3, 4, 1, 2, 3]


@pytest.mark.standing("derived")  # by enumeration of the 3125 choices
@solvers
def test_khan_multiple_choice_knapsack_of_one_resource(solver):
    assert khan(1).by(solver).value == -191


def knapsacks(profits: list[int], weights: list[int], capacities: list[int]) -> Instance:
    """Each item goes into one of the knapsacks or is left."""
    model, objective = Model(), {}
    held: list[dict[int, int]] = [{} for _ in capacities]
    for profit, weight in zip(profits, weights, strict=True):
        *into, _left = model.add_group(len(capacities) + 1)
        for terms, number in zip(held, into, strict=True):
            terms[number], objective[number] = weight, -profit
    for terms, capacity in zip(held, capacities, strict=True):
        model.add_row(terms, capacity)
    return Instance(model, objective)


def numbers(text: str) -> list[int]:
    return [int(word) for word in text.split()]


@pytest.mark.standing("memory")  # the optimum; the data agree with two copies of the set
@solvers
def test_knapsack_of_fifteen_items(solver):
    # John Burkardt, data set KNAPSACK_01, problem p07.
    found = knapsacks(
        numbers("135 139 149 150 156 163 173 184 192 201 210 214 221 229 240"),
        numbers("70 73 77 80 82 87 90 94 98 106 110 113 115 118 120"),
        [750],
    ).by(solver)
    assert (found.status, found.value) == ("optimal", -1458)


# The next four: Silvano Martello, Paolo Toth, Knapsack Problems: Algorithms and Computer
# Implementations, Wiley 1990, by the printed test output of their programs.


@solvers
def test_martello_toth_knapsack(solver):
    found = knapsacks(numbers("350 400 450 20 70 8 5 5"), numbers("25 35 45 5 25 3 2 2"), [104]).by(
        solver
    )
    assert (found.status, found.value) == ("optimal", -900)
    # By hand: 25 + 45 + 5 + 25 + 2 + 2 = 104 and 350 + 450 + 20 + 70 + 5 + 5 = 900.
    assert [k // 2 + 1 for k in found.taken if k % 2 == 0] == [1, 3, 4, 5, 7, 8]


@solvers
def test_martello_toth_generalised_assignment(solver):
    weights = [numbers("4 1 2 1 4 3 8"), numbers("9 9 8 1 3 8 7")]
    profits = [numbers("6 9 4 2 10 3 6"), numbers("4 8 9 1 7 5 4")]
    model, objective = Model(), {}
    jobs = [model.add_group(2) for _ in range(7)]
    for agent, capacity in enumerate((11, 22)):
        model.add_row({jobs[j][agent]: weights[agent][j] for j in range(7)}, capacity)
        objective |= {jobs[j][agent]: -profits[agent][j] for j in range(7)}
    found = Instance(model, objective).by(solver)
    assert (found.status, found.value) == ("optimal", -40)
    assert [j + 1 for j in range(7) if jobs[j][0] in found.taken] == [1, 2, 4, 6]


@solvers
def test_martello_toth_two_knapsacks(solver):
    found = knapsacks(
        numbers("92 57 49 68 60 43 67 84 87 72"), numbers("23 31 29 44 53 38 63 85 89 82"),
        [70, 127],
    ).by(solver)  # fmt: skip
    assert (found.status, found.value) == ("optimal", -333)


@solvers
def test_martello_toth_bin_packing(solver):
    sizes = numbers("70 60 50 33 33 33 11 7 3")
    model, objective = Model(), {}
    items = [model.add_group(6) for _ in sizes]
    for k in range(6):
        used, _unused = model.add_group(2)
        objective[used] = 1
        held = {items[j][k]: size for j, size in enumerate(sizes)}
        model.add_row(held | {used: -100}, 0)
    found = Instance(model, objective).by(solver)
    assert (found.status, found.value) == ("optimal", 4)


@pytest.mark.standing("memory")
@solvers
def test_knapsack_of_fifty_items(solver):
    # Manual of OR-Tools, page "The Knapsack Problem".
    found = knapsacks(
        numbers(
            "360 83 59 130 431 67 230 52 93 125 670 892 600 38 48 147 78 256 63 17 120 164 432 35 "
            "92 110 22 42 50 323 514 28 87 73 78 15 26 78 210 36 85 189 274 43 33 10 19 389 276 312"
        ),
        numbers(
            "7 0 30 22 80 94 11 81 70 64 59 18 0 36 3 8 15 42 9 0 42 47 52 32 26 48 55 6 29 84 2 4 "
            "18 56 7 29 93 44 71 3 86 66 31 65 0 79 20 65 52 13"
        ),
        [850],
    ).by(solver)
    assert (found.status, found.value) == ("optimal", -7534)


@solvers
def test_a_model_without_solution_is_called_infeasible(solver):
    instance = khan(5)
    instance.model.add_row({k: -v for k, v in instance.objective.items()}, None, 174)
    assert instance.by(solver).status == "infeasible"
