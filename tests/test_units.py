"""Every spelling of every kind has the factor that nature or treaty gives it."""

from __future__ import annotations

import math
import re

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from scipy import constants as c

from selector.units import KINDS, SMALLEST, QuantityError, named, parse, write

TURN = 2 * math.pi

# Second method: SI factors put together from scipy's constants, not from the library under test.
FACTORS = {
    "torque": {
        "N*m": 1, "N*cm": c.centi, "mN*m": c.milli, "N*mm": c.milli,
        "kgf*cm": c.kgf * c.centi, "ozf*in": c.oz * c.g * c.inch, "lbf*in": c.lbf * c.inch,
        "lbf*ft": c.lbf * c.foot, "Nm": 1, "N.m": 1, "N·m": 1, "Ncm": c.centi, "mNm": c.milli,
        "oz-in": c.oz * c.g * c.inch, "kgcm": c.kgf * c.centi, "lb-in": c.lbf * c.inch,
        "lb-ft": c.lbf * c.foot,
    },
    "current": {"A": 1, "mA": c.milli},
    "resistance": {
        "ohm": 1, "mohm": c.milli, "kohm": c.kilo, "Ω": 1, "Ohm": 1, "mΩ": c.milli,
        "\u2126": 1, "m\u2126": c.milli,
    },
    "inductance": {"H": 1, "mH": c.milli, "uH": c.micro, "\xb5H": c.micro, "\u03bcH": c.micro},
    "capacitance": {"F": 1, "mF": c.milli, "uF": c.micro, "\xb5F": c.micro, "\u03bcF": c.micro},
    "voltage": {"V": 1, "mV": c.milli, "kV": c.kilo},
    "power": {"W": 1, "mW": c.milli, "kW": c.kilo},
    "speed": {
        "rad/s": 1, "rpm": TURN / c.minute, "rev/min": TURN / c.minute, "rev/s": TURN,
        "deg/s": c.degree,
    },
    "acceleration": {
        "rad/s^2": 1, "rad/s2": 1, "rev/s^2": TURN, "rpm/s": TURN / c.minute, "deg/s^2": c.degree,
    },
    "inertia": {
        "kg*m^2": 1, "kgm2": 1, "kg*m2": 1, "g*cm^2": c.gram * c.centi**2,
        "g*cm2": c.gram * c.centi**2, "gcm2": c.gram * c.centi**2, "kg*cm^2": c.centi**2,
        "kg*cm2": c.centi**2, "kgcm2": c.centi**2, "kg*mm^2": c.milli**2,
        "ozf*in*s^2": c.oz * c.g * c.inch,
    },
    "temperature_difference": {"K": 1},
    "mass": {"kg": 1, "g": c.gram, "lb": c.lb},
    "length": {"m": 1, "cm": c.centi, "mm": c.milli, "in": c.inch},
    "volume": {
        "m^3": 1, "dm^3": c.liter, "dm3": c.liter, "l": c.liter, "L": c.liter,
        "cm^3": c.centi**3, "cm3": c.centi**3, "ml": c.milli * c.liter, "mm^3": c.milli**3,
    },
    "frequency": {"Hz": 1, "kHz": c.kilo, "MHz": c.mega},
    "time": {
        "s": 1, "ms": c.milli, "us": c.micro, "\xb5s": c.micro, "\u03bcs": c.micro,
        "min": c.minute, "h": c.hour,
    },
    "lead_time": {"day": 1, "days": 1, "d": 1, "week": c.week / c.day, "weeks": c.week / c.day},
    "angle": {"deg": 1, "°": 1, "rad": 1 / c.degree},
    "share": {"%": c.centi},
    "damping_ratio": {"%": c.centi},
    "volume_worth": {"/m^3": 1, "/dm^3": 1 / c.liter, "/l": 1 / c.liter, "/cm^3": c.centi**-3},
    "mass_worth": {"/kg": 1, "/g": 1 / c.gram},
}  # fmt: skip
SPELLINGS = [(kind, unit) for kind, units in FACTORS.items() for unit in units]


@pytest.mark.parametrize(("kind", "unit"), SPELLINGS)
def test_a_spelling_has_the_factor_of_its_unit(kind, unit):
    factor = FACTORS[kind][unit]
    figure = 0.731 * KINDS[kind].most / factor if kind in ("angle", "damping_ratio") else 0.625
    for text in (f"{figure!r} {unit}", f"{figure!r}{unit}", f"  +{figure!r}   {unit} "):
        assert parse(kind, text) == pytest.approx(figure * factor, rel=1e-12)


@pytest.mark.parametrize("kind", [kind for kind in KINDS if kind != "temperature"])
def test_no_spelling_is_left_out(kind):
    assert set(FACTORS[kind]) == set(KINDS[kind].spellings)


@pytest.mark.parametrize("celsius", [-40.0, 0.0, 25.0, 40.0, 100.0])
def test_temperatures_agree_with_another_table_of_scales(celsius):
    fahrenheit = float(c.convert_temperature(celsius, "Celsius", "Fahrenheit"))
    assert set(KINDS["temperature"].spellings) == {"degC", "°C", "degF"}
    assert parse("temperature", f"{celsius} degC") == parse("temperature", f"{celsius} °C")
    assert parse("temperature", f"{celsius} degC") == celsius
    assert parse("temperature", f"{fahrenheit!r} degF") == pytest.approx(celsius, abs=1e-9)


@pytest.mark.parametrize(
    ("kind", "text", "value"),
    [
        ("inductance", "5.4 mH", 0.0054),
        ("torque", "2.8 N*cm", 0.028),
        ("share", "25 %", 0.25),
        ("share", "7 %", 0.07),
        ("length", "57 mm", 0.057),
        ("capacitance", "2200 uF", 0.0022),
        ("inertia", "480 g*cm^2", 4.8e-5),
    ],
)
def test_a_figure_comes_out_as_if_written_in_si(kind, text, value):
    assert parse(kind, text) == value  # to the last bit, so that no dust is printed


@pytest.mark.parametrize("kind", KINDS)
def test_the_example_of_a_kind_is_one_of_it(kind):
    example_text = re.sub("EUR", "", KINDS[kind].example)
    assert KINDS[kind].least <= parse(kind, example_text) <= KINDS[kind].most


def test_the_article_fits_the_word():
    assert named("inertia") == "an inertia"
    assert named("temperature_difference") == "a temperature difference"
    assert {named(kind).split()[0] for kind in ("angle", "acceleration", "inductance")} == {"an"}


@pytest.mark.parametrize(
    ("kind", "text", "name", "remedy"),
    [
        ("speed", "50 Hz", "wrong-kind", '"Hz" is a unit of frequency, not speed'),
        ("frequency", "600 rpm", "wrong-kind", '"rpm" is a unit of speed'),
        ("torque", "1.2 J", "wrong-kind", '"J" is a unit of energy'),
        ("torque", "1.2 kg", "wrong-kind", '"kg" is a unit of mass'),
        ("acceleration", "3 rad/s", "wrong-kind", '"rad/s" is a unit of speed'),
        ("temperature", "313 K", "wrong-kind", "temperature difference"),
        ("temperature_difference", "80 degC", "wrong-kind", "temperature"),
        ("temperature", "40 C", "unknown-unit", 'did you mean "°C"?'),
        ("torque", "1.2 nm", "unknown-unit", 'did you mean "Nm"?'),
        ("current", "18 AWG", "unknown-unit", "one of: A, mA"),
        ("share", "0.25", "missing-unit", 'add "%"'),
        ("speed", "300", "missing-unit", "one of: rad/s, rpm"),
        ("current", "2,8 A", "no-number", "decimal sign as a point"),
        ("current", "1 000 mA", "no-number", "no mark between thousands"),
        ("current", "1.000.5 mA", "no-number", "no mark between thousands"),
        ("current", "", "no-number", "finite number"),
        ("current", "nan A", "no-number", "finite number"),
        ("current", "-inf A", "no-number", "finite number"),
        ("current", "1e400 A", "absurd-size", "check the unit"),
        ("current", "2800 A", "absurd-size", "check the unit"),
        ("current", "1e-300 A", "absurd-size", "check the exponent"),
        ("current", "-2.8 A", "too-small", "check the sign"),
        ("temperature", "-300 degC", "absurd-size", "check the unit"),
    ],
)
def test_what_is_no_quantity_is_told_apart(kind, text, name, remedy):
    with pytest.raises(QuantityError) as caught:
        parse(kind, text)
    assert caught.value.name == name
    assert remedy in caught.value.remedy
    assert caught.value.expected.startswith(f"{named(kind)} such as ")


@settings(max_examples=400)
@given(kind=st.sampled_from(sorted(KINDS)), data=st.data())
def test_what_is_written_is_read_back(kind, data):
    limits = KINDS[kind]
    value = data.draw(
        st.one_of(
            st.floats(limits.least, limits.most).filter(lambda x: x == 0.0 or abs(x) >= SMALLEST),
            st.integers(math.ceil(limits.least), math.floor(limits.most)).map(float),
        )
    )
    own = {"1/m^3": "/m^3", "1/kg": "/kg"}.get(limits.unit)
    assert parse(kind, write(kind, value, own, digits=17)) == pytest.approx(value, rel=1e-15)
    unit = data.draw(st.sampled_from(sorted(limits.spellings)))
    read = parse(kind, write(kind, value * 0.999, unit))
    assert read == pytest.approx(value * 0.999, rel=1e-11, abs=1e-9 if kind == "temperature" else 0)


@settings(max_examples=200)
@given(st.integers(1, 99_999), st.sampled_from(["N*m", "N*cm", "mN*m"]))
def test_decimal_figures_survive_to_the_last_digit(number, unit):
    text = f"{number / 1000:.12g} {unit}"
    assert write("torque", parse("torque", text), unit) == text


FIGURES = st.from_regex(r"[+-]?[0-9.,eE'_ ]{0,8}", fullmatch=True)
WORDS = st.sampled_from(sorted({u for k in KINDS.values() for u in k.spellings}))


@settings(max_examples=1500)
@given(
    st.sampled_from(sorted(KINDS)),
    st.one_of(
        st.text(max_size=30),
        st.builds("{}{}{}".format, FIGURES, st.sampled_from(["", " ", "\xa0"]), WORDS),
        st.builds("{} {}".format, st.floats(), WORDS | st.text(max_size=4)),
    ),
)
@example("torque", "9" * 6000 + " N*m")
@example("torque", "1e" + "9" * 6000 + " N*m")
@example("torque", "1 {0}")
@example("torque", "1 \x00")
@example("time", "²")
@example("time", "1² s")
@example("time", "\ud800")
def test_no_text_breaks_the_parser(kind, text):
    try:
        value = parse(kind, text)
    except QuantityError as error:
        assert re.fullmatch("[a-z]+(-[a-z]+)*", error.name)
        assert error.expected
        assert error.remedy
        assert len(str(error)) < 400
    else:
        assert KINDS[kind].least <= value <= KINDS[kind].most
        assert value == 0.0 or abs(value) >= SMALLEST
