"""Field types of the records: quantities by kind, yes/no, money. Text becomes SI floats here."""

from __future__ import annotations

import re
import unicodedata
from decimal import Decimal
from typing import Annotated, Any, NamedTuple

from pydantic import BaseModel, BeforeValidator, ConfigDict
from pydantic_core import PydanticCustomError

from .. import units

CURRENCY = re.compile(r"^[A-Z]{3}$")
_MONEY = re.compile(r"^([0-9]{1,9}(?:\.[0-9]{1,4})?)(?:\s+([A-Z]{3}))?$")
LONGEST_TEXT = 500


class Record(BaseModel):
    """A frozen record that refuses unknown fields."""

    model_config = ConfigDict(frozen=True, extra="forbid", arbitrary_types_allowed=True)


class Money(NamedTuple):
    """An amount; ``currency`` is None where the file's own currency is meant."""

    amount: Decimal
    currency: str | None = None


def fault(
    name: str, expected: str, remedy: str = "", at: tuple[str | int, ...] = ()
) -> PydanticCustomError:
    """The error a validator raises: its fields go into a :class:`selector.errors.Fault`.

    ``at`` leads from the record that raises to the key at fault.
    """
    fields = {"name": name, "expected": expected, "remedy": remedy, "at": at}
    return PydanticCustomError("selector", "expected {expected}", fields)


def quantity(
    kind: str, *, above: float | None = None, least: float | None = None, most: str | None = None
) -> Any:
    """Validator of a quantity: text with a unit, or a float in SI when set from Python.

    ``most`` is the largest that makes sense for one field, as text with its unit.
    """
    called = units.named(kind)

    def read(value: Any) -> float:
        if isinstance(value, str):
            try:
                number = units.parse(kind, value)
            except units.QuantityError as error:
                raise fault(error.name, error.expected, error.remedy) from None
        elif isinstance(value, int | float) and not isinstance(value, bool):
            number = float(value)
            if number != number or number in (float("inf"), float("-inf")):
                raise fault("no-number", f"{called} that is finite")
        else:
            raise fault("wrong-shape", f"{called} such as {units.KINDS[kind].example}")
        if above is not None and number <= above:
            raise fault("too-small", f"{called} above {above:g}", "check sign and figure")
        if least is not None and number < least:
            raise fault("too-small", f"{called} of {least:g} or more", "check the sign")
        if most is not None and number > units.parse(kind, most):
            raise fault("absurd-size", f"{called} of {most} at most", "check the unit")
        return number

    return BeforeValidator(read)


def _yes_no(value: Any) -> bool:
    if isinstance(value, bool):
        return value
    if value in ("yes", "no"):
        return bool(value == "yes")
    raise fault("no-yes-or-no", "yes or no")


def _count(value: Any) -> int:
    if isinstance(value, str) and re.fullmatch(r"[+-]?[0-9]{1,9}", value):
        value = int(value)
    if not isinstance(value, int) or isinstance(value, bool):
        raise fault("no-count", "a whole number such as 4", "write it without unit or decimals")
    if value < 1:
        raise fault("too-small", "a whole number, 1 or more")
    return value


def _count_from_zero(value: Any) -> int:
    return 0 if value in ("0", 0) and value is not False else _count(value)


def _text(value: Any) -> str:
    if not isinstance(value, str) or not value.strip():
        raise fault("no-text", "some text on one line")
    if any(unicodedata.category(c) in ("Cc", "Cs", "Zl", "Zp") for c in value):
        raise fault("no-text", "text without control characters or line breaks")
    if len(value) > LONGEST_TEXT:
        raise fault("too-long", f"text of {LONGEST_TEXT} characters at most", "shorten it")
    return value.strip()


def _currency(value: Any) -> str:
    if not isinstance(value, str) or not CURRENCY.match(value):
        raise fault("no-currency", "a currency of three capitals such as EUR (ISO 4217)")
    return value


def _money(value: Any) -> Money:
    if isinstance(value, Money):
        return value
    if isinstance(value, int | float | Decimal) and not isinstance(value, bool):
        value = str(value)
    found = _MONEY.match(value.strip()) if isinstance(value, str) else None
    if found is None:
        remedy = "use a point, no sign, no mark between thousands, at most four decimals"
        raise fault("no-price", "a price such as 24.90 or 24.90 EUR", remedy)
    amount = Decimal(found.group(1))
    if amount > Decimal(10**7):
        raise fault("absurd-size", "a price of ten million at most")
    return Money(amount, found.group(2))


def _size(value: Any) -> tuple[float, float, float]:
    if isinstance(value, tuple) and len(value) == 3:
        return (float(value[0]), float(value[1]), float(value[2]))
    sides = re.split(r"\s+x\s+", value) if isinstance(value, str) else []
    if len(sides) != 3:
        raise fault("wrong-shape", "three sides such as 57 mm x 57 mm x 76 mm")
    try:
        a, b, c = (units.parse("length", side) for side in sides)
    except units.QuantityError as error:
        raise fault(error.name, error.expected, error.remedy) from None
    if min(a, b, c) <= 0:
        raise fault("too-small", "three sides above zero")
    return (a, b, c)


def listed(value: Any) -> Any:
    """A list as written, or a single item as a list of one."""
    if isinstance(value, str):
        return (value,)
    return tuple(value) if isinstance(value, list) else value


def list_or_keys(value: Any) -> str:
    """Which of its two shapes a field is written in, where it takes a list or keys."""
    return "keys" if isinstance(value, dict | Record) else "list"


Torque = Annotated[float, quantity("torque")]
TorqueAboveZero = Annotated[float, quantity("torque", above=0)]
TorqueFromZero = Annotated[float, quantity("torque", least=0)]
Current = Annotated[float, quantity("current", above=0)]
Resistance = Annotated[float, quantity("resistance", above=0)]
ResistanceFromZero = Annotated[float, quantity("resistance", least=0)]
Inductance = Annotated[float, quantity("inductance", above=0)]
Capacitance = Annotated[float, quantity("capacitance", least=0)]
Voltage = Annotated[float, quantity("voltage", above=0)]
Power = Annotated[float, quantity("power", above=0)]
PowerFromZero = Annotated[float, quantity("power", least=0)]
Speed = Annotated[float, quantity("speed", least=0)]
Acceleration = Annotated[float, quantity("acceleration")]
AccelerationAboveZero = Annotated[float, quantity("acceleration", above=0)]
RotorInertia = Annotated[float, quantity("inertia", above=0, most="100000 g*cm^2")]
HoldingTorque = Annotated[float, quantity("torque", above=0, most="100 N*m")]
InertiaFromZero = Annotated[float, quantity("inertia", least=0)]
Temperature = Annotated[float, quantity("temperature")]
Rise = Annotated[float, quantity("temperature_difference", above=0)]
RiseFromZero = Annotated[float, quantity("temperature_difference", least=0)]
Mass = Annotated[float, quantity("mass", above=0)]
Length = Annotated[float, quantity("length", above=0)]
Volume = Annotated[float, quantity("volume", above=0)]
Frequency = Annotated[float, quantity("frequency", above=0)]
Time = Annotated[float, quantity("time", least=0)]
LeadTime = Annotated[float, quantity("lead_time", least=0)]
Angle = Annotated[float, quantity("angle", above=0)]
Share = Annotated[float, quantity("share", least=0)]
DampingRatio = Annotated[float, quantity("damping_ratio", least=0)]
YesNo = Annotated[bool, BeforeValidator(_yes_no)]
Count = Annotated[int, BeforeValidator(_count)]
CountFromZero = Annotated[int, BeforeValidator(_count_from_zero)]
Text = Annotated[str, BeforeValidator(_text)]
Currency = Annotated[str, BeforeValidator(_currency)]
Price = Annotated[Money, BeforeValidator(_money)]
Size = Annotated[tuple[float, float, float], BeforeValidator(_size)]
