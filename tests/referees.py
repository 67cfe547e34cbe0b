"""What tests of figures share: printed digits, arrays against scalars, random windings."""

from decimal import Decimal
from typing import NamedTuple

import numpy as np
import pytest
from hypothesis import strategies as st


def assert_as_printed(actual, printed):
    """Pass when ``actual`` rounds to the digits the source prints, e.g. "12.65"."""
    printed = Decimal(printed)
    half_a_digit = Decimal(5).scaleb(printed.as_tuple().exponent - 1)
    assert abs(Decimal(float(actual)) - printed) <= half_a_digit, f"{actual} is not {printed}"


def assert_array_equals_scalars(function, rows):
    """Pass when a function of columns gives what it gives row by row."""
    together = function(*np.array(rows, dtype=float).T)
    if isinstance(together, tuple | list):  # a field that depends on no column stays one number
        together = np.stack(np.broadcast_arrays(*together))
    alone = [np.asarray(function(*row), dtype=float) for row in rows]
    expected = np.stack(alone, axis=-1)
    assert np.broadcast_to(together, expected.shape) == pytest.approx(expected, 1e-12, 1e-12)


class Point(NamedTuple):
    """A motor on a bus at a speed: the first arguments of most functions of torque and power."""

    speed: float
    voltage: float
    current: float
    R: float
    L: float
    K: float
    N: int


def points() -> st.SearchStrategy[Point]:
    """Any small hybrid motor on any bus of its trade, from standstill to far above the corner."""
    return st.builds(
        Point,
        speed=st.one_of(st.just(0.0), st.floats(0.1, 300.0)),
        voltage=st.floats(8.0, 100.0),
        current=st.floats(0.2, 9.0),
        R=st.floats(0.2, 9.0),
        L=st.floats(0.5e-3, 25e-3),
        K=st.floats(0.08, 1.6),
        N=st.sampled_from([50, 100]),
    )
