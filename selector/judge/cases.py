"""What a design means: one axis with every figure its rules compare, in floats."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

from ..domain.machine import Axis, Machine, Point
from ..domain.parts import AS_WOUND, DETENT_SHARE, RATED_RISE, Driver, Motor
from ..domain.results import AxisChoice
from ..physics import braking, power, thermal, torque

SETTLED = 1e-9  # K
SAME_SETTING = 0.005  # of a setting or share: three digits copied from a sheet
SAFE_START, START_SHARE = 0.7, 0.8  # of the start-stop speed; voltage share where it holds


@dataclass(frozen=True)
class Judged:
    """One point of an axis at one speed: what is asked and what is there."""

    point: Point
    speed: float
    required: float
    chain: torque.TorqueChain

    @property
    def headroom(self) -> float | None:
        """Usable over required, minus 1; None where nothing is required."""
        return float(self.chain.usable) / self.required - 1.0 if self.required > 0 else None

    @property
    def stalled(self) -> bool:
        """Whether no torque is left, so that the motor does not even turn by itself."""
        return self.speed > 0 and float(self.chain.usable) <= 0.0


@dataclass(frozen=True)
class AxisCase:
    """One axis of a design at its bus voltage."""

    machine: Machine
    axis: Axis
    choice: AxisChoice
    motor: Motor
    driver: Driver
    joining: str
    voltage: float
    spread: float

    @cached_property
    def joined(self) -> torque.Joined:
        """The motor's figures as its windings are joined."""
        m = self.motor
        rated = (m.holding_torque, m.rated_current, m.phase_resistance, m.phase_inductance)
        if self.joining == AS_WOUND or m.rated_as is None:
            return torque.Joined(*rated)
        return torque.joined(self.joining, m.rated_as, *rated)

    @cached_property
    def peak(self) -> float:
        """The setting: the driver's own where the design's figure is that one rounded. [A]"""
        nearest = min(self.driver.peak_settings, key=lambda s: abs(s - self.choice.peak))
        close = abs(nearest - self.choice.peak) <= SAME_SETTING * nearest
        return nearest if close else self.choice.peak

    @property
    def K(self) -> float:
        """Torque constant. [N·m/A]"""
        return float(torque.torque_constant(self.joined.holding_torque, self.joined.rated_current))

    @property
    def N(self) -> int:
        """Rotor teeth."""
        return self.motor.rotor_teeth

    @property
    def inertia(self) -> float:
        """Rotor and load, what is unknown counted as nothing. [kg·m²]"""
        return (self.motor.rotor_inertia or 0.0) + (self.axis.load_inertia or 0.0)

    @property
    def detent(self) -> float:
        """[N·m]"""
        stated = self.motor.detent_torque
        return DETENT_SHARE * self.joined.holding_torque if stated is None else stated

    @property
    def damping_ratio(self) -> float:
        """[-]"""
        stated = self.axis.damping_ratio
        return self.driver.damping if stated is None else stated

    def shaft_torque(self, point: Point) -> float:
        """Torque the point asks of the motor, with the inertia's share; may be negative. [N·m]"""
        return point.torque + self.inertia * point.acceleration

    # -- rest and steps ---------------------------------------------------------------------

    @property
    def holding_needed(self) -> float:
        """Torque to be held at rest, before margin. [N·m]"""
        return self.axis.holding_torque or 0.0

    @cached_property
    def rest_share(self) -> float:
        """Share of the setting at rest: as the design says, else the smallest that holds."""
        if self.choice.rest_current_peak is not None:
            asked = self.choice.rest_current_peak / self.peak
            nearest = min(self.driver.hold_shares, key=lambda share: abs(share - asked))
            return nearest if abs(nearest - asked) <= SAME_SETTING * nearest else asked
        if not self.axis.reduce_at_rest:
            return 1.0
        need = self.holding_needed * (1.0 + self.machine.margins.torque)
        for share in self.driver.hold_shares:
            if torque.standstill_torque(self.K, share * self.peak) >= need:
                return share
        return 1.0

    @property
    def rest_current(self) -> float:
        """[A]"""
        return self.rest_share * self.peak

    @property
    def holding_current(self) -> float:
        """Current that flows at rest with the supply at its low end and the winding warm. [A]"""
        return min(self.rest_current, self.voltage * (1.0 - self.spread) / self.resistance)

    @property
    def step_limit(self) -> float | None:
        """Lowest stated step rate of controller and driver. [Hz]"""
        stated = (self.machine.limits.step_rate, self.driver.max_step_rate)
        return min((rate for rate in stated if rate is not None), default=None)

    @cached_property
    def microsteps(self) -> int:
        """As the design says, else the finest the step rates allow, else the coarsest fine one."""
        if self.choice.microsteps is not None:
            return self.choice.microsteps
        fine = [n for n in sorted(self.driver.microsteps) if n >= 8]
        limit = self.step_limit
        fitting = [n for n in fine if limit is None or self.step_rate(n) <= limit]
        return (fitting or fine[:1] or [max(self.driver.microsteps)])[-1]

    def step_rate(self, microsteps: int) -> float:
        """At top speed. [Hz]"""
        return float(torque.step_rate(self.axis.top_speed, self.N, microsteps))

    def step_rate_at(self, speed: float) -> float:
        """Full steps. [Hz]"""
        return float(torque.step_rate(speed, self.N, 1))

    @property
    def resonance(self) -> float | None:
        """The motor's own frequency with its load; None where an inertia is unknown. [Hz]"""
        if self.motor.rotor_inertia is None or self.axis.load_inertia is None:
            return None
        return float(torque.natural_frequency(self.K, self.peak, self.inertia, self.N))

    @property
    def safe_start(self) -> float | None:
        """Speed it may jump to without a ramp; None where unknown or short of voltage. [rad/s]"""
        if self.resonance is None:
            return None
        load = max(abs(p.torque) for p in self.axis.points)
        edge = torque.start_stop_speed(self.K, self.peak, self.inertia, self.N, load)
        speed = SAFE_START * float(edge)
        share = torque.voltage_share(
            speed, self.voltage, self.peak, self.resistance, self.joined.inductance, self.K, self.N
        )
        return speed if share < START_SHARE else None

    # -- heat -------------------------------------------------------------------------------

    @property
    def heat_limit(self) -> float:
        """Highest winding temperature the insulation allows, less the margin. [°C]"""
        limit = thermal.INSULATION_LIMITS[self.motor.insulation_class or "B"]
        return limit - self.machine.margins.winding

    @property
    def winding_limit(self) -> float:
        """The same, or what a stated limit of the case allows if that is less. [°C]"""
        if self.motor.case_limit is None:
            return self.heat_limit
        room = self.motor.case_limit - self.machine.ambient
        return min(self.heat_limit, self.machine.ambient + room / thermal.CASE_SHARE)

    def steady_temperature(self, iron: float) -> float:
        """Winding temperature: of the duty, else the worst of each point and rest. [°C]"""
        points = self.axis.points
        if self.axis.has_duty:
            shares = [(p.share or 0.0, p) for p in points]
            return self._settled([*shares, (self.axis.rest_share, None)], iron)
        return max(self._settled([(1.0, p)], iron) for p in (*points, None))

    def _settled(self, scene: list[tuple[float, Point | None]], iron: float) -> float:
        rise = RATED_RISE if self.motor.rated_rise is None else self.motor.rated_rise
        to_air = self.axis.mounting_factor * float(
            thermal.thermal_resistance(rise, self.joined.rated_current, self.joined.resistance)
        )
        temperature = self.machine.ambient
        for step in range(200):
            before = temperature
            copper, core = self._losses(scene, temperature, iron)
            temperature = float(
                thermal.steady_temperature(self.machine.ambient, to_air, copper, core)
            )
            if abs(temperature - before) < SETTLED:
                break
            if step >= thermal.PLAIN_STEPS:  # two states take turns: close in on the middle
                temperature = (temperature + before) / 2.0
        return temperature

    def _losses(
        self, scene: list[tuple[float, Point | None]], temperature: float, iron: float
    ) -> tuple[float, float]:
        """Mean copper loss as if at 25 °C, and mean iron loss. [W]"""
        copper = core = 0.0
        J = self.joined
        R = float(torque.winding_resistance(J.resistance, temperature))
        R += self.driver.bridge_resistance
        for share, point in scene:
            if point is None:
                copper += share * J.resistance * self.rest_current**2
                continue
            i_d, i_q = power.phase_currents(
                point.speed,
                self.shaft_torque(point),
                self.voltage,
                self.peak,
                R,
                J.inductance,
                self.K,
                self.N,
            )
            copper += share * J.resistance * float(i_d**2 + i_q**2)
            core += share * float(
                power.iron_loss(
                    point.speed, i_d, i_q, J.holding_torque, J.inductance, self.K, self.N, iron
                )
            )
        return copper, core

    @cached_property
    def temperature(self) -> float:
        """Winding temperature that decides, and at which torque and power are taken. [°C]"""
        return self.steady_temperature(power.IRON_LOSS_LOW)

    @property
    def motor_resistance(self) -> float:
        """One winding, warm. [ohm]"""
        return float(torque.winding_resistance(self.joined.resistance, self.temperature))

    @property
    def resistance(self) -> float:
        """Warm winding with bridge. [ohm]"""
        return self.motor_resistance + self.driver.bridge_resistance

    # -- torque and power -------------------------------------------------------------------

    def speeds(self, point: Point) -> list[float]:
        """Speeds the point is judged at."""
        I, R, L = self.peak, self.resistance, self.joined.inductance
        corner = float(torque.corner_speed(self.voltage, 0.0, I, R, L, self.K, self.N))
        return [float(s) for s in torque.judged_speeds(point.speed, point.from_rest, corner)]

    @cached_property
    def judged(self) -> list[Judged]:
        """Every point at every speed it is judged at."""
        return [
            Judged(p, speed, abs(self.shaft_torque(p)), self.chain(speed))
            for p in self.axis.points
            for speed in self.speeds(p)
        ]

    def chain(self, speed: float) -> torque.TorqueChain:
        """Torque at a speed from nominal to usable."""
        t = self.machine.tolerances
        widths = torque.Tolerances(t.resistance, t.inductance, t.torque, self.spread)
        return torque.torque_chain(
            speed,
            self.voltage,
            self.peak,
            self.motor_resistance,
            self.driver.bridge_resistance,
            self.joined.inductance,
            self.K,
            self.N,
            self.driver.regulator_time,
            self.detent,
            self.damping_ratio,
            self.microsteps,
            widths,
            t.combine,
        )

    @cached_property
    def worst(self) -> Judged:
        """Where the torque headroom is least; the fastest of equals."""

        def key(j: Judged) -> tuple[float, float]:
            headroom = float("inf") if j.headroom is None else round(j.headroom, 9)
            return (-1.0 if j.stalled else headroom), -j.speed

        return min(self.judged, key=key)

    def power_at(self, speed: float, point: Point) -> float:
        """Bus power, with the iron loss the supply is sized for. [W]"""
        J = self.joined
        return float(
            power.bus_power(
                speed,
                self.shaft_torque(point),
                self.voltage,
                self.peak,
                self.resistance,
                J.inductance,
                self.K,
                self.N,
                J.holding_torque,
                self.driver.idle,
            )
        )

    @property
    def rest_power(self) -> float:
        """[W]"""
        return float(
            power.holding_power(self.voltage, self.rest_current, self.resistance, self.driver.idle)
        )

    @cached_property
    def peak_power(self) -> float:
        """Largest bus power over the points, the way to them, and rest. [W]"""
        J = self.joined
        return max(
            self.rest_power,
            *(
                float(
                    power.peak_bus_power(
                        p.speed,
                        p.from_rest,
                        self.shaft_torque(p),
                        self.voltage,
                        self.peak,
                        self.resistance,
                        J.inductance,
                        self.K,
                        self.N,
                        J.holding_torque,
                        self.driver.idle,
                    )
                )
                for p in self.axis.points
            ),
        )

    @cached_property
    def mean_power(self) -> float:
        """By the duty; without one the peak. [W]"""
        if not self.axis.has_duty:
            return self.peak_power
        work = sum((p.share or 0.0) * max(0.0, self.power_at(p.speed, p)) for p in self.axis.points)
        return work + self.axis.rest_share * self.rest_power

    @property
    def worst_power(self) -> float:
        """What a jammed or overloaded axis could draw: a note, no rule. [W]"""
        J, I, highest = self.joined, self.peak, self.voltage * (1.0 + self.spread)
        found = [self.rest_power]
        for j in self.judged:
            pullout = torque.pullout_torque(
                j.speed,
                power.SQUARE_WAVE * highest,
                I,
                self.resistance,
                J.inductance,
                self.K,
                self.N,
            )
            found.append(
                float(
                    power.worst_power(
                        j.speed,
                        self.shaft_torque(j.point),
                        self.voltage,
                        highest,
                        I,
                        self.resistance,
                        J.inductance,
                        self.K,
                        self.N,
                        J.holding_torque,
                        self.driver.idle,
                        pullout,
                    )
                )
            )
        return max(found)

    # -- braking ----------------------------------------------------------------------------

    @property
    def cold_resistance(self) -> float:
        """Winding at 25 °C, or the ambient if that is colder, with bridge. [ohm]"""
        coldest = min(25.0, self.machine.ambient)
        winding = float(torque.winding_resistance(self.joined.resistance, coldest))
        return winding + self.driver.bridge_resistance

    @property
    def stop_torque(self) -> float | None:
        """Torque the stated emergency stop asks for; None if its steepness is not stated. [N·m]"""
        slow = self.axis.stop_deceleration
        return None if slow is None else self.inertia * slow + self.axis.driving_torque

    @property
    def returned_energy(self) -> float:
        """Of an emergency stop from top speed. [J]"""
        top, slow, brake = self.axis.top_speed, self.axis.stop_deceleration, self.stop_torque
        if slow is None or brake is None:
            return float(braking.kinetic_energy(self.inertia, top))
        return float(braking.returned_energy(top, brake, slow, self.cold_resistance, self.K))

    @property
    def lowering_power(self) -> float:
        """Largest power a steadily driven point returns. [W]

        A vertical axis without such a point is taken to come down at its top speed.
        """
        driven = [(p.speed, -p.torque) for p in self.axis.points if p.torque < 0]
        if self.axis.vertical and not driven:
            driven = [(self.axis.top_speed, self.axis.driving_torque)]
        returned = (
            braking.lowering_power(speed, load, self.cold_resistance, self.K)
            for speed, load in driven
        )
        return max((float(power) for power in returned), default=0.0)

    @property
    def stopping_power(self) -> float:
        """Power the stated emergency stop returns at its start. [W]"""
        brake = self.stop_torque or 0.0
        return float(
            braking.lowering_power(self.axis.top_speed, brake, self.cold_resistance, self.K)
        )
