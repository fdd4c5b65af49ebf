"""Quantities against published unit definitions, and the errors of wrong ones."""

from __future__ import annotations

import subprocess
import sys

import pytest
from hypothesis import given
from hypothesis import strategies as st

from lodestroke.units import KNOWN, UnitError, parse, show

# BIPM SI brochure and NIST SP 811 appendix B definitions: g_n = 9.80665 m/s2, water 1000 kg/m3,
# mercury 13595.1 kg/m3, torr = 101325/760 Pa (exact fractions).
PRESSURES = [
    ("35 cmH2O", "1 Pa", 3432.3275), ("-12.5 cmH2O", "1 Pa", -1225.83125),
    ("7.5 mmHg", "1 Pa", 999.917905613), ("15 mmHg", "1 cmH2O", 20.39265),
    ("120 mmHg", "1 cmH2O", 163.1412), ("1.25 psi", "1 Pa", 8618.44661646),
    ("25 mbar", "1 cmH2O", 25.4929053244), ("3.4 kPa", "1 cmH2O", 34.6703512412),
    ("760 torr", "1 mmHg", 759.999891726), ("2500 Pa", "1 mmHg", 18.7515393961),
]


@pytest.mark.parametrize(("text", "per", "expected"), PRESSURES)
def test_pressure_converts_as_defined(text: str, per: str, expected: float) -> None:
    assert parse(text, "Pa") / parse(per, "Pa") == pytest.approx(expected, rel=1e-10)


def test_mmhg_differs_from_torr_as_defined() -> None:
    # same sources: one conventional mmHg minus one torr is 1.89939473684e-5 Pa
    difference = parse("1 mmHg", "Pa") - parse("1 torr", "Pa")
    assert difference == pytest.approx(1.89939473684e-5, abs=1e-9)


def test_centimetre_of_water_is_the_conventional_one() -> None:
    # NIST SP 811 appendix B.8 prints 98.0638 Pa for water at 4 degC (from memory); ours is 98.0665
    assert parse("1 cmH2O", "Pa") == pytest.approx(98.0638, rel=5e-5)
    assert parse("1 cmH2O", "Pa") == pytest.approx(98.0665, rel=1e-12)


def test_gauge_and_absolute_differ_by_the_ambient_pressure() -> None:
    # definition; worked examples at 98300 Pa and 98640 Pa of ambient pressure
    assert parse("35 cmH2O", "Pa") + 98300 == pytest.approx(101732.3275, rel=1e-9)
    assert (103100 - 98640) / parse("1 cmH2O", "Pa") == pytest.approx(45.4793430988, rel=1e-9)


@pytest.mark.parametrize(("text", "unit", "value"), [
    ("1.2 A", "A", 1.2), ("40 ms", "s", 0.04), ("0.5 Hz", "Hz", 0.5), ("90 1/min", "Hz", 1.5),
    ("6 mPa*s", "Pa*s", 0.006), ("6 mPa·s", "Pa*s", 0.006), ("20 ul", "m^3", 2e-8),
    ("2e-10 m^3/Pa", "m^3/Pa", 2e-10), ("2e-10 m³/Pa", "m^3/Pa", 2e-10), ("5 K/W", "K/W", 5.0),
    ("5 degC/W", "K/W", 5.0), ("31.8 kA/m", "A/m", 31800.0), ("1.2 g/cm^3", "kg/m^3", 1200.0),
    ("50 Ω", "ohm", 50.0), ("5 µs", "s", 5e-6), ("5 μs", "s", 5e-6), ("60 %", "", 0.6),
    ("+3 V", "V", 3.0), (".5 V", "V", 0.5), ("5. V", "V", 5.0), ("  7 V ", "V", 7.0),
    ("5e9 Pa * s / m ^ 3", "Pa*s/m^3", 5e9), ("3.2e7 Pa*s**2/m**3", "Pa*s^2/m^3", 3.2e7),
    ("90 deg", "deg", 90.0), ("3.141592653589793 rad", "deg", 180.0), ("1 day", "s", 86400.0),
])
def test_quantity_is_read_in_si(text: str, unit: str, value: float) -> None:
    assert parse(text, unit) == pytest.approx(value, rel=1e-12)


@pytest.mark.parametrize(("text", "value"), [
    ("25 degC", 25.0), ("25 °C", 25.0), ("300 K", 26.85), ("77 degF", 25.0), ("0 K", -273.15),
])
def test_temperature_minds_its_offset(text: str, value: float) -> None:
    # definition of the kelvin and the Fahrenheit scale
    assert parse(text, "degC") == pytest.approx(value, abs=1e-9)


@pytest.mark.parametrize(("text", "unit", "what", "advice"), [
    ("1.2", "A", "number without unit", 'write "1.2 A"'),
    (1.2, "A", "number without unit", 'write "1.2 A"'),
    ("3 V", "A", '"V" is no unit of current', 'write "1 A"'),
    ("35 cmh2o", "Pa", 'unknown unit "cmh2o"', 'did you mean "cmH2O"?'),
    ("60 rpm", "Hz", '"rpm" is an angle', 'write "60 1/min"'),
    ("6 rad/s", "Hz", '"rad" is an angle', 'write "60 1/min"'),
    ("90 deg", "", '"deg" is no unit of plain number', "write 0.5"),
    ("90 %", "deg", '"%" is no unit of angle', 'write "1 deg"'),
    ("1e400 A", "A", "this current is not a finite number", "write an ordinary number"),
    (float("nan"), "", "this plain number is not a finite number", "write an ordinary number"),
    (float("inf"), "V", "number without unit", 'write "1 V"'),
    ("-300 degC", "degC", "colder than absolute zero", "check the sign and the unit"),
    ("5 A", "degC", '"A" is no unit of temperature', 'write "1 degC"'),
    ("quick", "s", "no number at the start of this time", 'write "1 ms"'),
    (True, "A", "true or false where a current belongs", 'write "1 A"'),
    (["1 A"], "A", "a list where a current belongs", 'write "1 A"'),
    ({"a": 1}, "A", "a table where a current belongs", 'write "1 A"'),
    ("9**9**9 A", "A", 'cannot read "^9^9" in the unit "**9**9 A"', 'write it like "Pa*s/m^3"'),
])
def test_wrong_quantity_says_what_to_write(text: object, unit: str, what: str, advice: str) -> None:
    with pytest.raises(UnitError) as caught:
        parse(text, unit)
    assert caught.value.what == what
    assert caught.value.try_ == advice


@given(st.text(max_size=40) | st.from_regex(r"-?\d+ [A-Za-z*/^0-9 ]{1,12}", fullmatch=True),
       st.sampled_from(sorted(KNOWN)))
def test_any_text_gives_a_number_or_a_unit_error(text: str, unit: str) -> None:
    told = "a number"
    try:
        assert abs(parse(text, unit)) < float("inf")
    except UnitError as err:
        told = err.what and (err.bound or err.try_)
    assert told


@given(st.floats(-1e9, 1e9, allow_subnormal=False).filter(lambda v: v == 0 or abs(v) > 1e-12),
       st.sampled_from(["Pa", "A", "V", "s", "m", "Hz", "ohm", "m^3/Pa", "K/W", "Pa*s", "m^3"]))
def test_shown_quantity_reads_back_as_itself(value: float, unit: str) -> None:
    assert parse(show(value, unit), unit) == pytest.approx(value, rel=1e-5)


@pytest.mark.parametrize(("value", "unit", "text"), [
    (0.004, "s", "4 ms"), (120.0, "s", "120 s"), (3432.3275, "Pa", "3.43233 kPa"),
    (0.0, "A", "0 A"),
    (-0.5, "A", "-500 mA"), (2e-8, "m^3", "20 ul"), (0.4, "", "0.4"), (5e-6, "s", "5 us"),
])
def test_quantity_is_shown_short(value: float, unit: str, text: str) -> None:
    assert show(value, unit) == text


def test_unit_registry_is_not_imported_until_a_quantity_is_read() -> None:
    code = "import sys, lodestroke.units; sys.exit('pint' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
