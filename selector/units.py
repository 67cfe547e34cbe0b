"""Quantities with units, by kind: text to SI floats and back. The only file that knows pint.

A check of dimensions alone is too weak here: ``600 rpm`` must not pass as a frequency, nor ``J``
as a torque. So each kind lists the spellings it takes, and pint supplies the factor of each.
"""

from __future__ import annotations

import difflib
import math
import re
from dataclasses import dataclass
from decimal import Decimal
from functools import cache
from typing import Any

NUMBER = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_WRITTEN = re.compile(rf"^({NUMBER})\s*(.*)$", re.DOTALL)
_FIGURES_GO_ON = re.compile(r"^[\s,.'’_]*[0-9]")  # as in 1,5 and 1'000 and 1 000
_POINT = "write the decimal sign as a point, and no mark between thousands"
_LONGEST_SHOWN = 24
SMALLEST = 1e-15  # of any SI figure but zero: less is a slip, and its square may vanish

# Units that none of the kinds below takes, so that the message can say what they are.
_FOREIGN = {
    "energy": ("J", "mJ", "kJ", "Wh", "kWh"),
    "force": ("N", "kN", "lbf", "ozf", "kgf"),
    "speed in a line": ("m/s", "mm/s", "m/min", "mm/min"),
    "acceleration in a line": ("m/s^2", "mm/s^2", "m/s2"),
    "charge": ("Ah", "mAh"),
    "apparent power": ("VA", "kVA"),
}


@dataclass(frozen=True)
class Kind:
    """A kind of quantity: its SI unit, what users may write, and the sizes that make sense.

    ``spellings`` maps what may be written to the expression pint reads; ``least`` and ``most``
    bound what a small machine can mean, so that a slip of a prefix is caught.
    """

    name: str
    unit: str
    spellings: dict[str, str]
    least: float
    most: float
    example: str


class QuantityError(ValueError):
    """Text that is no quantity of the wanted kind; ``name`` is the kind of fault."""

    def __init__(self, name: str, expected: str, remedy: str) -> None:
        self.name, self.expected, self.remedy = name, expected, remedy
        super().__init__(f"expected {expected}; {remedy}")


def _same(*units: str) -> dict[str, str]:
    return {unit: unit for unit in units}


KINDS: dict[str, Kind] = {
    kind.name: kind
    for kind in [
        Kind(
            "torque",
            "N*m",
            _same("N*m", "N*cm", "mN*m", "N*mm", "kgf*cm", "ozf*in", "lbf*in", "lbf*ft")
            | {"Nm": "N*m", "N.m": "N*m", "Ncm": "N*cm", "mNm": "mN*m", "oz-in": "ozf*in"}
            | {"kgcm": "kgf*cm", "lb-in": "lbf*in", "lb-ft": "lbf*ft", "N·m": "N*m"},
            -1e3, 1e3, "1.9 N*m",
        ),
        Kind("current", "A", _same("A", "mA"), 0.0, 100.0, "2.8 A"),
        Kind(
            "resistance", "ohm",
            _same("ohm", "mohm", "kohm") | {"Ω": "ohm", "Ohm": "ohm", "mΩ": "mohm"}
            | {"\u2126": "ohm", "m\u2126": "mohm"},
            0.0, 1e4, "1.13 ohm",
        ),
        Kind(
            "inductance", "H", _same("H", "mH", "uH") | {"µH": "uH", "μH": "uH"},
            0.0, 1.0, "5.4 mH",
        ),
        Kind(
            "capacitance", "F", _same("F", "mF", "uF") | {"µF": "uF", "μF": "uF"},
            0.0, 10.0, "2200 uF",
        ),
        Kind("voltage", "V", _same("V", "mV", "kV"), 0.0, 1e3, "36 V"),
        Kind("power", "W", _same("W", "mW", "kW"), 0.0, 1e5, "150 W"),
        Kind(
            "speed", "rad/s",
            _same("rad/s", "rpm") | {"rev/s": "turn/s", "rev/min": "rpm", "deg/s": "deg/s"},
            0.0, 1e4, "300 rpm",
        ),
        Kind(
            "acceleration", "rad/s^2",
            _same("rad/s^2") | {"rad/s2": "rad/s^2", "rev/s^2": "turn/s^2"}
            | {"rpm/s": "rpm/s", "deg/s^2": "deg/s^2"},
            -1e7, 1e7, "400 rad/s^2",
        ),
        Kind(
            "inertia", "kg*m^2",
            _same("kg*m^2", "g*cm^2", "kg*cm^2", "kg*mm^2")
            | {"kgm2": "kg*m^2", "gcm2": "g*cm^2", "kgcm2": "kg*cm^2", "kg*m2": "kg*m^2"}
            | {"g*cm2": "g*cm^2", "kg*cm2": "kg*cm^2", "ozf*in*s^2": "ozf*in*s^2"},
            0.0, 100.0, "480 g*cm^2",
        ),
        Kind(
            "temperature", "degC", _same("degC", "degF") | {"°C": "degC"}, -60.0, 300.0, "40 degC"
        ),
        Kind("temperature_difference", "K", _same("K"), 0.0, 300.0, "80 K"),
        Kind("mass", "kg", _same("kg", "g") | {"lb": "lb"}, 0.0, 1e3, "1.2 kg"),
        Kind("length", "m", _same("m", "cm", "mm") | {"in": "inch"}, 0.0, 100.0, "57 mm"),
        Kind(
            "volume", "m^3",
            _same("m^3", "dm^3", "cm^3", "mm^3") | {"l": "dm^3", "L": "dm^3", "ml": "cm^3"}
            | {"dm3": "dm^3", "cm3": "cm^3"},
            0.0, 10.0, "0.4 dm^3",
        ),
        Kind("frequency", "Hz", _same("Hz", "kHz", "MHz"), 0.0, 1e9, "200 kHz"),
        Kind("time", "s", _same("s", "ms", "us", "min", "h") | {"µs": "us", "μs": "us"},
             0.0, 1e7, "20 us"),
        Kind(
            "lead_time", "day",
            _same("day", "week") | {"days": "day", "weeks": "week", "d": "day"},
            0.0, 3650.0, "2 weeks",
        ),
        Kind("angle", "deg", _same("deg", "rad") | {"°": "deg"}, 0.0, 360.0, "1.8 deg"),
        Kind("share", "1", {"%": "percent"}, 0.0, 100.0, "25 %"),
        Kind("damping_ratio", "1", {"%": "percent"}, 0.0, 1.0, "8 %"),
        Kind("volume_worth", "1/m^3", {f"/{u}": f"1/{p}" for u, p in
             {"m^3": "m^3", "dm^3": "dm^3", "l": "dm^3", "cm^3": "cm^3"}.items()},
             0.0, 1e9, "8 EUR/dm^3"),
        Kind("mass_worth", "1/kg", {"/kg": "1/kg", "/g": "1/g"}, 0.0, 1e6, "5 EUR/kg"),
    ]
}  # fmt: skip


@cache
def _registry() -> Any:
    import pint

    return pint.UnitRegistry(autoconvert_offset_to_baseunit=True)


@cache
def _scale(expression: str, unit: str) -> tuple[float, float]:
    """Factor and offset that turn a figure in ``expression`` into one in ``unit``."""
    if expression == unit:
        return 1.0, 0.0
    ask = _registry().Quantity
    offset = ask(0.0, expression).to(unit or "1").magnitude
    return float(ask(1.0, expression).to(unit or "1").magnitude - offset), float(offset)


def parse(kind_name: str, text: str) -> float:
    """Read a quantity such as ``"55 N*cm"`` as a float in the kind's SI unit.

    Raises
    ------
    QuantityError
        If the text is no number with a unit of this kind, or a size no small machine can mean.
    """
    kind = KINDS[kind_name]
    wanted = f"{named(kind_name)} such as {kind.example}"
    written = _WRITTEN.match(text.strip())
    if written is None:
        raise QuantityError("no-number", wanted, "write a finite number and its unit")
    figure, unit = written.group(1), written.group(2).strip()
    if _FIGURES_GO_ON.match(unit):
        raise QuantityError("no-number", wanted, _POINT)
    if not unit:
        units = list(kind.spellings)[:6]
        which = "the unit, one of: " + ", ".join(units) if len(units) > 1 else f'"{units[0]}"'
        raise QuantityError("missing-unit", wanted, f"add {which}")
    if unit not in kind.spellings:
        raise _unit_fault(kind, unit, wanted)
    value = _value(figure, *_scale(kind.spellings[unit], kind.unit))
    if value < 0.0 <= kind.least:
        raise QuantityError("too-small", f"{wanted}, not negative", "check the sign")
    if not math.isfinite(value) or not kind.least <= value <= kind.most:
        low, high = _bound(kind, kind.least), _bound(kind, kind.most)
        raise QuantityError("absurd-size", f"{wanted}, from {low} to {high}", "check the unit")
    if 0.0 < abs(value) < SMALLEST:
        raise QuantityError("absurd-size", f"{wanted}, or zero", "check the exponent")
    return value


def named(kind_name: str) -> str:
    """The kind in words with its article, such as "an inertia"."""
    words = kind_name.replace("_", " ")
    return f"an {words}" if words[0] in "aeiou" else f"a {words}"


def _bound(kind: Kind, value: float) -> str:
    """A bound of a kind as its user would write it."""
    if kind.unit == "1":
        return f"{100 * value:g} %"
    return f"{value:g} {kind.unit.replace('1/', 'per ')}"


def _value(figure: str, factor: float, offset: float) -> float:
    """Convert in decimals where the factor is a power of ten, so that no dust is left.

    In floats, 2.8 N*cm come out as 0.027999999999999997 N*m.
    """
    plain = float(figure)
    shift = round(math.log10(factor))
    decimal = offset == 0.0 and math.isclose(factor, 10.0**shift, rel_tol=1e-14)
    if plain == 0.0 or not math.isfinite(plain):
        return plain + offset
    return float(Decimal(figure).scaleb(shift)) if decimal else plain * factor + offset


def _unit_fault(kind: Kind, unit: str, wanted: str) -> QuantityError:
    shown = unit if len(unit) <= _LONGEST_SHOWN else unit[: _LONGEST_SHOWN - 3] + "..."
    others = [k.name.replace("_", " ") for k in KINDS.values() if unit in k.spellings]
    others += [name for name, units in _FOREIGN.items() if unit in units]
    near = [known for known in kind.spellings if known.casefold() == unit.casefold()]
    near += difflib.get_close_matches(unit[:_LONGEST_SHOWN], kind.spellings, n=1, cutoff=0.55)
    if others:
        mine = kind.name.replace("_", " ")
        return QuantityError("wrong-kind", wanted, f'"{unit}" is a unit of {others[0]}, not {mine}')
    known = f'did you mean "{near[0]}"?' if near else "one of: " + ", ".join(kind.spellings)
    return QuantityError("unknown-unit", wanted, f'"{shown}" is not known here; {known}')


def write(kind_name: str, value: float, unit: str | None = None, digits: int = 12) -> str:
    """Text of a quantity that :func:`parse` reads back, in ``unit`` or the kind's SI unit."""
    kind = KINDS[kind_name]
    unit = unit or ("%" if kind.unit == "1" else kind.unit)
    factor, offset = _scale(kind.spellings[unit], kind.unit)
    inverse = round(1.0 / factor)
    exact = offset == 0.0 and inverse > 1 and math.isclose(inverse * factor, 1.0, rel_tol=1e-14)
    figure = value * inverse if exact else (value - offset) / factor
    return f"{figure:.{digits}g} {unit}"
