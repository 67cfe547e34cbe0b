"""Problems made in Python: a fixed small one, and random ones of many kinds. SI figures."""

from __future__ import annotations

from decimal import Decimal
from random import Random
from typing import Any

from selector.domain.fields import Money
from selector.domain.machine import (
    Axis,
    Limits,
    Load,
    Machine,
    Margins,
    Point,
    Problem,
    Tolerances,
    VoltageLimits,
    Worth,
)
from selector.domain.parts import (
    Catalogue,
    DeratingStep,
    Driver,
    Motor,
    SettingRange,
    Supply,
    VoltageRange,
)

TURN = 6.283185307179586  # rad


def euros(amount: Any) -> Money:
    """A price."""
    return Money(Decimal(str(amount)), "EUR")


def make_motor(part: str = "teal", **changes: Any) -> Motor:
    """A motor of 57 mm frame."""
    stated: dict[str, Any] = {
        "part": part, "price": euros(24), "stock": 20, "lead_time": 5.0, "mass": 0.7,
        "size": (0.057, 0.057, 0.056), "frame": 0.057, "step_angle": 1.8,
        "holding_torque": 1.26, "rated_current": 2.8, "phase_resistance": 0.9,
        "phase_inductance": 2.5e-3, "rotor_inertia": 3.0e-5, "detent_torque": 0.04,
        "insulation_class": "B",
    }  # fmt: skip
    return Motor(**stated | changes)


def make_driver(part: str = "fern", **changes: Any) -> Driver:
    """A driver of 1 to 4 A peak, 12 to 48 V."""
    stated: dict[str, Any] = {
        "part": part, "price": euros(30), "stock": 20, "lead_time": 5.0, "mass": 0.12,
        "volume": 1.2e-4, "supply_voltage": VoltageRange(min=12.0, max=48.0),
        "current_settings": (1.0, 1.5, 2.0, 2.5, 3.0, 4.0), "current_basis": "peak",
        "microsteps": (1, 2, 4, 8, 16, 32), "max_step_rate": 200e3, "switch_resistance": 0.1,
        "idle_power": 1.0, "hold_current": (0.5,), "bus_capacitance": 470e-6,
        "active_damping": True, "off_time": 15e-6,
    }  # fmt: skip
    return Driver(**stated | changes)


def make_supply(part: str = "brook", **changes: Any) -> Supply:
    """A 24 V supply of 150 W."""
    stated: dict[str, Any] = {
        "part": part, "price": euros(40), "stock": 20, "lead_time": 5.0, "mass": 0.5,
        "volume": 5e-4, "voltage": 24.0, "rated_power": 150.0, "rated_current": 6.25,
        "tolerance": 0.02, "output_capacitance": 2000e-6,
    }  # fmt: skip
    return Supply(**stated | changes)


def make_axis(axis: str = "x", **changes: Any) -> Axis:
    """An axis that either motor of :func:`make_problem` can drive."""
    stated: dict[str, Any] = {
        "axis": axis, "points": (Point(speed=5 * TURN, torque=0.2),), "load_inertia": 2e-5,
        "stop_deceleration": 300.0,
    }  # fmt: skip
    return Axis(**stated | changes)


def make_problem(**changes: Any) -> Problem:
    """Two motors, two drivers, two supplies and two axes.

    ``changes`` are fields of the machine, or ``motors``, ``drivers``, ``supplies``.
    """
    parts: dict[str, Any] = {
        "motors": (make_motor("teal"), make_motor(
            "grebe", price=euros(16), holding_torque=0.55, rated_current=2.0, mass=0.4,
            size=(0.057, 0.057, 0.041), phase_resistance=1.4, phase_inductance=3.0e-3,
            rotor_inertia=1.2e-5, detent_torque=0.02,
        )),
        "drivers": (make_driver("fern"), make_driver(
            "moss", price=euros(18), supply_voltage=VoltageRange(min=9.0, max=36.0),
            current_settings=(0.7, 1.0, 1.4, 1.8, 2.2), bus_capacitance=220e-6,
        )),
        "supplies": (make_supply("brook"), make_supply(
            "river", price=euros(55), voltage=36.0, rated_power=200.0, rated_current=5.6,
        )),
    }  # fmt: skip
    parts |= {kind: tuple(changes.pop(kind)) for kind in list(parts) if kind in changes}
    stated: dict[str, Any] = {
        "name": "bench", "currency": "EUR", "catalogues": ("parts",),
        "limits": Limits(step_rate=100e3), "bus_capacitance": 2200e-6,
        "axes": (make_axis("x"), make_axis("y")),
    }  # fmt: skip
    return Problem(machine=Machine(**stated | changes), catalogue=Catalogue(**parts))


# -- random ones ----------------------------------------------------------------------------


def random_problem(seed: int) -> Problem:
    """A small machine with a small catalogue; about seven in ten have a design."""
    return _Maker(Random(seed)).problem()


class _Maker:
    def __init__(self, random: Random) -> None:
        self.random = random
        self.axes = self.pick((1, 1, 2, 2, 2, 3, 3))
        self.coarse = self.often(0.6)
        self.complete = self.often(0.75)  # every part states price, size, mass, lead time

    def often(self, share: float) -> bool:
        return self.random.random() < share

    def pick(self, among: Any) -> Any:
        return self.random.choice(among)

    def between(self, low: float, high: float, digits: int = 4) -> float:
        return float(f"{self.random.uniform(low, high):.{digits}g}")

    def maybe(self, share: float, value: Any) -> Any:
        return value if self.often(share) else None

    def problem(self) -> Problem:
        motors = tuple(self.motor(k) for k in range(self.random.randint(2, 5)))
        drivers = tuple(self.driver(k) for k in range(self.random.randint(2, 3)))
        supplies = tuple(self.supply(k) for k in range(self.random.randint(2, 4)))
        quantity = self.pick((1, 1, 1, 2, 3))
        machine = Machine(
            name="random", currency="EUR", catalogues=("parts",), quantity=quantity,
            ambient=self.pick((25.0, 40.0, 40.0, 40.0, 55.0)),
            margins=Margins() if self.often(0.7) else Margins(
                torque=self.pick((0.0, 0.5)), supply=self.pick((0.0, 0.3)),
                winding=self.pick((0.0, 20.0)),
            ),
            tolerances=Tolerances(combine=self.pick(("combined",) * 3 + ("worst", "nominal"))),
            limits=self.limits(), minimise=self.goals(), loads=self.loads(),
            bus_capacitance=self.pick((0.0, 1e-3, 2.2e-3, 4.7e-3, 10e-3)),
            axes=tuple(self.axis(name, motors) for name in ("x", "y", "z")[: self.axes]),
        )  # fmt: skip
        parts = Catalogue(motors=motors, drivers=drivers, supplies=supplies)
        return Problem(machine=machine, catalogue=parts)

    # -- parts ------------------------------------------------------------------------------

    def common(self, part: str, side: float, price: float) -> dict[str, Any]:
        amount = self.pick((5, 10, 20)) if self.coarse else round(price * self.between(0.7, 1.4), 2)
        stated: dict[str, Any] = {
            "part": part, "price": euros(amount), "mass": self.between(0.5, 1.5, 2),
            "stock": self.pick((None, None, 2, 3, 4, 6, 50, 50, 50, 50)),
            "lead_time": self.pick((2.0, 5.0, 10.0)),
        }  # fmt: skip
        if self.often(0.5):
            stated["size"] = (side, side, self.between(side / 2, side, 2))
        else:
            stated["volume"] = side**3 * self.pick((0.5, 1.0))
        if not self.complete:
            for key in ("price", "mass", "size", "volume", "lead_time"):
                if self.often(0.06):
                    stated.pop(key, None)
            if self.often(0.04):
                stated["pack"] = 5
            if self.often(0.04):
                stated["price"] = {"1": f"{amount} EUR", "10": "1.00 EUR"}
            if self.often(0.03):
                stated["price"] = Money(Decimal("1.00"), "USD")
        return stated

    def motor(self, k: int) -> Motor:
        frame = self.pick((0.042, 0.057, 0.057, 0.086))
        torque = self.between(*{0.042: (0.2, 0.6), 0.057: (0.6, 2.2), 0.086: (2.0, 5.0)}[frame])
        current = self.between(1.0, 4.0, 2)
        heat = {0.042: 6.0, 0.057: 12.0, 0.086: 22.0}[frame] * self.between(0.7, 1.2)
        resistance = float(f"{heat / (2 * current**2):.3g}")
        wires = {}
        if self.often(0.3):
            wires = {
                "wires": 8, "rated_as": self.pick(("series", "parallel", "unipolar")),
                "joinings": self.pick((("series", "parallel"), ("parallel",), ("series",))),
            }  # fmt: skip
        return Motor(
            **self.common(f"{self.pick('abcd')}-motor-{k}", frame, 12 + 12 * torque), **wires,
            frame=frame, step_angle=self.pick((1.8, 1.8, 1.8, 0.9)), holding_torque=torque,
            rated_current=current, phase_resistance=resistance,
            phase_inductance=resistance * self.between(1.5e-3, 4.5e-3, 3),
            rotor_inertia=self.maybe(0.92, torque * self.between(1.0e-5, 2.5e-5, 3)),
            detent_torque=self.maybe(0.6, torque * self.between(0.02, 0.05, 2)),
            insulation_class=self.pick((None, "B", "B", "F", "A")),
            rated_rise=self.maybe(0.2, 70.0), case_limit=self.maybe(0.15, 85.0),
        )  # fmt: skip

    def driver(self, k: int) -> Driver:
        count, low, step = self.random.randint(3, 6), self.between(0.5, 1.5, 2), self.between(
            0.3, 0.9, 2)  # fmt: skip
        if self.often(0.3):
            settings: Any = SettingRange(min=low, max=low + (count - 1) * step, step=step)
        else:
            settings = tuple(round(low + n * step, 3) for n in range(count))
        return Driver(
            **self.common(f"{self.pick('abcd')}-driver-{k}", 0.05, 25),
            supply_voltage=VoltageRange(
                min=self.pick((8.0, 12.0, 18.0, 23.0)),
                max=self.pick((36.0, 48.0, 60.0, 60.0, 80.0)),
            ),
            current_settings=settings, current_basis=self.pick(("peak", "rms")),
            microsteps=self.pick(((1, 2, 4, 8, 16), (8, 16, 32, 64), (1, 8), (1, 2, 4, 8, 16, 32))),
            max_step_rate=self.maybe(0.6, self.pick((30e3, 100e3, 200e3))),
            switch_resistance=self.maybe(0.6, self.between(0.03, 0.2, 2)),
            idle_power=self.maybe(0.7, self.between(0.4, 2.5, 2)),
            hold_current=self.pick(((), (0.5,), (0.3, 0.5, 0.7))),
            active_damping=self.often(0.5), off_time=self.maybe(0.3, 15e-6),
            current_loop_bandwidth=self.maybe(0.2, 4000.0),
            bus_capacitance=self.maybe(0.8, self.pick((100e-6, 220e-6, 470e-6, 1000e-6))),
            max_ambient=self.maybe(0.2, self.pick((50.0, 60.0))),
            channels=2 if not self.complete and self.often(0.05) else 1,
        )  # fmt: skip

    def supply(self, k: int) -> Supply:
        voltage = self.pick((24.0, 36.0, 36.0, 48.0))
        power = self.pick((60.0, 100.0, 150.0, 240.0, 350.0))
        trim = None
        if self.often(0.4):
            low, high = self.pick(((2, 2), (1, 3), (0, 2), (2.5, 1.3)))
            trim = VoltageRange(min=voltage - low, max=voltage + high)
        rating = self.pick((
            {"rated_power": power, "rated_current": round(power / voltage, 2)},
            {"rated_power": power}, {"rated_current": round(power / voltage, 1)},
        ))  # fmt: skip
        stated = self.common(f"{self.pick('abcd')}-supply-{k}", 0.08, 15 + power / 5)
        if self.coarse:
            stated["price"] = stated.get("price") and euros(self.pick((10, 20, 40)))
        return Supply(
            **stated, **rating, voltage=voltage, trim=trim,
            tolerance=self.pick((None, 0.01, 0.02, 0.03)),
            derating=self.pick(((), (), (DeratingStep(at=50.0, share=1.0),
                                         DeratingStep(at=70.0, share=0.5)))),
            max_ambient=self.maybe(0.3, self.pick((50.0, 60.0, 70.0))),
            output_capacitance=self.maybe(0.6, self.pick((1e-3, 2e-3, 4e-3))),
            largest_startup_capacitance=self.maybe(0.25, self.pick((2e-3, 6e-3, 12e-3))),
            parallel=self.pick((1, 1, 1, 2, 2)),
            overvoltage_trip=self.maybe(0.35, round(voltage * self.pick((1.05, 1.15, 1.3)), 1)),
            absorbs_energy=self.often(0.15),
        )  # fmt: skip

    # -- the machine ------------------------------------------------------------------------

    def goals(self) -> Any:
        return self.pick((
            ("cost",), ("cost",), ("cost",), ("volume",), ("mass",), ("cost", "volume"),
            ("mass", "cost"), ("volume", "mass", "cost"), ("cost", "mass"),
            Worth(volume=self.pick((0.0, 8000.0)), mass=self.pick((3.0, 5.5)), currency="EUR"),
            Worth(volume=12345.0),
        ))  # fmt: skip

    def limits(self) -> Limits:
        voltage = VoltageLimits(min=self.maybe(0.1, 24.0), max=self.maybe(0.15, 36.0))
        return Limits(
            voltage=voltage, step_rate=self.maybe(0.6, self.pick((60e3, 100e3, 200e3))),
            price=self.maybe(0.15, euros(self.pick((40, 80, 200)) + 60 * self.axes)),
            volume=self.maybe(0.12, self.between(6e-4, 1.5e-3) * (1 + self.axes)),
            mass=self.maybe(0.12, self.between(1.6, 2.6) * (1 + self.axes)),
            lead_time=self.maybe(0.12, 5.0),
        )  # fmt: skip

    def loads(self) -> tuple[Load, ...]:
        if not self.often(0.25):
            return ()
        span = VoltageRange(min=self.pick((9.0, 20.0)), max=self.pick((30.0, 60.0, 60.0)))
        return (Load(load="controller", power=self.pick((5.0, 12.5)), supply_voltage=span),)

    def axis(self, name: str, motors: tuple[Motor, ...]) -> Axis:
        like = self.pick(motors)
        torque = like.holding_torque * self.between(0.04, 0.25)
        speed = TURN * self.between(0.5, 9.0)
        inertia = self.maybe(0.8, torque * self.between(0.5e-5, 10e-5, 3))
        points = []
        duty = self.often(0.5)
        for _ in range(self.pick((1, 1, 2))):
            share = self.between(0.1, 0.5, 2) if duty else None
            accelerates = inertia is not None and self.often(0.4)
            points.append(Point(
                speed=speed, torque=self.pick((1.0, 1.0, 1.0, 0.5, 0.0, -0.4)) * torque,
                acceleration=self.pick((200.0, 600.0, -400.0)) if accelerates else 0.0,
                from_rest=self.often(0.8), share=share,
            ))  # fmt: skip
            speed *= self.pick((0.3, 1.0))
        vertical = self.often(0.2)
        frames: tuple[float, ...] = ()
        if self.often(0.15):
            frames = tuple(sorted({like.frame, self.pick((0.042, 0.057))}))
        holding = torque * self.pick((0.5, 1.0, 2.0)) if vertical or self.often(0.2) else None
        return Axis(
            axis=name, points=tuple(points), load_inertia=inertia, vertical=vertical,
            holding_torque=holding, held_without_power=vertical and self.often(0.5),
            reduce_at_rest=self.often(0.35), above_rated_at_rest=self.often(0.25),
            stop_deceleration=self.maybe(0.75, self.pick((200.0, 500.0, 1500.0))),
            frames=frames, damping_ratio=self.maybe(0.15, self.pick((0.0, 0.03, 0.1))),
            mounting_factor=self.pick((1.0, 1.0, 1.0, 1.3)),
        )  # fmt: skip
