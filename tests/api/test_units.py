"""Bare numbers in declared units, texts with their own, and back."""

from __future__ import annotations

import math
import string
import time

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.unit_text import UnitError, inverse_of
from service.units import PHYSICS, Kind, UnitSystem, declare


def units(potential: str = "temperature", /, **declared: str) -> UnitSystem:
    system, refused = declare(potential, {Kind(name): unit for name, unit in declared.items()})
    assert not refused
    return system


MILLIMETRES = units(length="mm")
KELVIN = units(length="mm", potential="K")
FAHRENHEIT = units(length="ft", potential="degF")


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("25 mm", 25.0),
        ("2.5 cm", 25.0),
        ("25 um", 0.025),
        ("25 µm", 0.025),
        ("1 inch", 25.4),
        ("1e-3 m", 1.0),
    ],
)
def test_length_is_converted_with_one_rounding(text: str, expected: float) -> None:
    assert MILLIMETRES.read(Kind.LENGTH, text) == expected


@given(st.floats(min_value=-1e12, max_value=1e12))
def test_bare_length_and_level_are_untouched(value: float) -> None:
    for system in (MILLIMETRES, FAHRENHEIT):
        for kind in (Kind.LENGTH, Kind.POTENTIAL, Kind.POTENTIAL_DIFFERENCE):
            assert system.read(kind, value) == value
            assert system.write(kind, value) == value


@given(st.floats(min_value=1e-6, max_value=1e6))
def test_text_in_the_declared_unit_is_the_bare_number(value: float) -> None:
    assert MILLIMETRES.read(Kind.LENGTH, f"{value!r} mm") == value
    assert MILLIMETRES.read(Kind.POTENTIAL, f"{value!r} degC") == value


@pytest.mark.parametrize(
    ("system", "text", "expected"),
    [
        (MILLIMETRES, "303.15 K", 30.0),
        (MILLIMETRES, "86 degF", 30.0),
        (MILLIMETRES, "30 °C", 30.0),
        (KELVIN, "30 degC", 303.15),
        (KELVIN, "68 degF", 293.15),
        (FAHRENHEIT, "20 degC", 68.0),
        (FAHRENHEIT, "0 K", -459.67),
    ],
)
def test_temperature_level_carries_its_offset(system: UnitSystem, text: str, expected: float) -> None:
    assert system.read(Kind.POTENTIAL, text) == expected


@pytest.mark.parametrize(
    ("system", "text", "expected"),
    [
        (MILLIMETRES, "5 degC", 5.0),
        (MILLIMETRES, "5 K", 5.0),
        (MILLIMETRES, "9 degF", 5.0),
        (KELVIN, "5 delta_degC", 5.0),
        (FAHRENHEIT, "5 K", 9.0),
    ],
)
def test_temperature_difference_carries_none(system: UnitSystem, text: str, expected: float) -> None:
    assert system.read(Kind.POTENTIAL_DIFFERENCE, text) == expected


def test_differences_are_answered_without_an_offset() -> None:
    assert MILLIMETRES.declared[Kind.POTENTIAL_DIFFERENCE] == "K"
    assert FAHRENHEIT.declared[Kind.POTENTIAL_DIFFERENCE] == "delta_degF"
    assert units("electric_potential", potential="mV").declared[Kind.POTENTIAL_DIFFERENCE] == "mV"


@pytest.mark.parametrize("text", ["40 W/(m degC)", "40 W/(m K)", "40 W/m/K", "40 W m^-1 K^-1", "0.4 W/(cm·°C)"])
def test_per_kelvin_and_per_degree_are_the_same(text: str) -> None:
    """W/(mm K) in the solver."""
    assert MILLIMETRES.read(Kind.CONDUCTIVITY, text) == pytest.approx(0.04, rel=1e-15)


@pytest.mark.parametrize(
    ("kind", "text", "expected"),
    [
        # Flows stay in W, lengths become mm.
        (Kind.FLUX, "1.5 kW/m^2", 1.5e-3),
        (Kind.FLUX, "1.5 kW/m²", 1.5e-3),
        (Kind.FILM_COEFFICIENT, "850 W/(m^2 K)", 850e-6),
        (Kind.DENSITY, "2 MW/m^3", 2e-3),
        (Kind.DENSITY, "2 W/cm^3", 2e-3),
    ],
)
def test_everything_else_becomes_what_the_declared_length_implies(kind: Kind, text: str, expected: float) -> None:
    assert MILLIMETRES.read(kind, text) == pytest.approx(expected, rel=1e-15)


@pytest.mark.parametrize("potential", PHYSICS)
def test_default_units_are_coherent(potential: str) -> None:
    """With all units left out the solver gets every number as it is, for all four potentials."""
    system = units(potential)
    for kind in Kind:
        assert system.read(kind, 7.0) == 7.0
        assert system.write(kind, 7.0) == 7.0


@pytest.mark.parametrize("potential", PHYSICS)
def test_coherence_holds_in_small_units_too(potential: str) -> None:
    """conductivity * difference / length = flux, and flux * length^2 = flow, whatever the lengths are in."""
    system = units(potential, length="mm")
    conductivity, flux, flow = (system.read(kind, 1.0) for kind in (Kind.CONDUCTIVITY, Kind.FLUX, Kind.FLOW))
    # A unit difference over one metre, which is 1000 mm, drives a unit flux; one square metre of it is a unit
    # flow.
    assert conductivity / 1000 == pytest.approx(flux, rel=1e-15)
    assert flux * 1000**2 == pytest.approx(flow, rel=1e-15)


def test_mass_concentration_makes_flows_count_mass() -> None:
    system = units("concentration", potential="mg/l")
    assert system.declared[Kind.FLUX] == "kg/(m^2 s)"
    assert system.declared[Kind.FLOW] == "kg/s"
    # 1 m^2/s under a gradient of 1 (mg/l)/m, which is 1e-3 kg/m^3 per metre, carries 1e-3 kg/(m^2 s).
    assert system.read(Kind.CONDUCTIVITY, 1.0) == pytest.approx(1e-3, rel=1e-15)


def test_hydraulic_head_is_a_length_of_its_own() -> None:
    system = units("hydraulic_head", length="m", potential="cm", conductivity="m/day")
    assert system.read(Kind.POTENTIAL, "1 m") == 100.0
    # 86 400 m/day under a gradient of 1 cm per m is 0.01 m/s.
    assert system.read(Kind.CONDUCTIVITY, 86_400) == pytest.approx(0.01, rel=1e-15)


@pytest.mark.parametrize(
    ("kind", "text", "sentence"),
    [
        (Kind.LENGTH, "1,5 mm", "write decimals with a point"),
        (Kind.LENGTH, "1'500 mm", "leave thousands unmarked"),
        (Kind.LENGTH, "1_500 mm", "leave thousands unmarked"),
        (Kind.LENGTH, "1 m; 2", "not readable"),
        (Kind.LENGTH, "1 m**2**3**4**5", "not readable"),
        (Kind.LENGTH, "1 m^99", "not readable"),
        (Kind.LENGTH, "1 class__", "not known"),
        (Kind.LENGTH, "1 m m m m m m m", "more than 6 names"),
        (Kind.LENGTH, "1 ((((m", "not known"),
        (Kind.LENGTH, "1e9999 m", "not readable"),
        (Kind.LENGTH, "nan m", "does not begin with a number"),
        (Kind.LENGTH, "٣ m", "does not begin with a number"),
        (Kind.LENGTH, "1e59 Gm", "in mm has to be zero or between"),
        (Kind.LENGTH, "1e-70 m", "in mm has to be zero or between"),
        (Kind.POTENTIAL, "5 degC m/m", "does not measure temperature"),
        (Kind.POTENTIAL_DIFFERENCE, "5 kg", "does not measure difference of temperature"),
        (Kind.CONDUCTIVITY, "40 W/m K", "Write W/(m K)"),
        (Kind.CONDUCTIVITY, "0.04 m K/W", "one over a thermal conductivity; write 25 W/(m K) instead"),
        (Kind.FILM_COEFFICIENT, "2 m^2 K/kW", "one over a film coefficient; write 500 W/"),
        (Kind.FILM_COEFFICIENT, "0 m^2 K/W", "does not measure film coefficient"),
        (Kind.LENGTH, "1e-999 1/m", "does not measure length"),
    ],
)
def test_text_that_is_no_quantity_is_refused(kind: Kind, text: str, sentence: str) -> None:
    with pytest.raises(UnitError, match=sentence.replace("(", r"\(").replace(")", r"\)")):
        MILLIMETRES.read(kind, text)


@given(st.text(alphabet=string.printable + "°µ²³·", max_size=70))
def test_any_text_is_read_or_refused_with_a_sentence_at_once(text: str) -> None:
    started = time.perf_counter()
    sentence, value = ".", 0.0
    try:
        value = MILLIMETRES.read(Kind.LENGTH, text)
    except UnitError as error:
        sentence = str(error)
    assert sentence.endswith(".")
    assert math.isfinite(value)
    # Generous for a busy machine; the worst text of thousands took under a millisecond.
    assert time.perf_counter() - started < 1.0


@pytest.mark.parametrize("text", ["1 " + "a" * 60 + "!", "1 " + "(" * 62, "1" * 64, "1 " + "m " * 31])
def test_long_texts_do_not_take_long(text: str) -> None:
    started = time.perf_counter()
    with pytest.raises(UnitError):
        MILLIMETRES.read(Kind.LENGTH, text)
    assert time.perf_counter() - started < 1.0


def test_every_wrong_declared_unit_is_named() -> None:
    system, refused = declare("temperature", {Kind.LENGTH: "s", Kind.FLUX: "W/m^2", Kind.FLOW: "!"})
    assert set(refused) == {Kind.LENGTH, Kind.FLOW}
    assert system.declared[Kind.LENGTH] == "m"


@pytest.mark.parametrize(
    ("unit", "inverse"),
    [
        ("K/W", "W/K"),
        ("mV/A", "A/mV"),
        ("ohm", "S"),
        ("kohm", "1/kohm"),
        ("1/S", "1/(1/S)"),
        ("s/m^3", "m^3/s"),
        ("K/(J/s)", "1/(K/(J/s))"),
        ("K s/J", "J/(K s)"),
        ("m/(m^3/s)", "1/(m/(m^3/s))"),
        ("(m s)/m^3", "m^3/(m s)"),
    ],
)
def test_inverse_of_a_unit_is_its_inverse_in_plain_words(unit: str, inverse: str) -> None:
    assert inverse_of(unit) == inverse
