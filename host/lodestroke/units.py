"""Quantities with units: text as written in a file to SI floats, and back to text for people.

The unit registry (pint) is made on first use; importing this module costs nothing. Centimetres of
water and millimetres of mercury are the conventional ones (water 1000 kg/m³, mercury 13595.1 kg/m³,
standard gravity 9.80665 m/s²). Temperatures are kept in degrees Celsius, the one exception to SI.
"""

from __future__ import annotations

import difflib
import functools
import math
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Any

if TYPE_CHECKING:
    from pint import UnitRegistry
    from pydantic import GetCoreSchemaHandler, ValidationInfo
    from pydantic_core import CoreSchema

# SI unit of a quantity: what to call it, and units that people write for it (used in errors).
KNOWN: dict[str, tuple[str, tuple[str, ...]]] = {
    "Pa": ("pressure", ("cmH2O", "kPa", "Pa", "mbar", "mmHg", "hPa", "bar", "psi", "torr")),
    "A": ("current", ("A", "mA")),
    "V": ("voltage", ("V", "mV")),
    "ohm": ("resistance", ("ohm", "mohm", "kohm")),
    "H": ("inductance", ("mH", "H", "uH")),
    "s": ("time", ("ms", "s", "us", "min", "h", "day")),
    "Hz": ("frequency", ("Hz", "kHz", "1/s", "1/min")),
    "m": ("length", ("mm", "m", "um", "cm")),
    "m^3": ("volume", ("ul", "ml", "m^3", "mm^3")),
    "degC": ("temperature", ("degC", "K", "degF")),
    "K/W": ("thermal resistance", ("K/W",)),
    "J/K": ("heat capacity", ("J/K",)),
    "1/K": ("temperature coefficient", ("1/K",)),
    "A/m": ("magnetisation", ("kA/m", "A/m")),
    "kg/m^3": ("density", ("kg/m^3", "g/cm^3", "g/ml")),
    "Pa*s": ("viscosity", ("mPa*s", "Pa*s")),
    "N/m": ("surface tension", ("mN/m", "N/m")),
    "m^3/Pa": ("compliance", ("m^3/Pa", "ul/Pa", "ml/kPa")),
    "Pa*s/m^3": ("hydraulic resistance", ("Pa*s/m^3",)),
    "Pa*s^2/m^3": ("hydraulic inertance", ("Pa*s^2/m^3",)),
    "T": ("flux density", ("T", "mT")),
    "deg": ("angle", ("deg", "rad")),
    "": ("plain number", ("%",)),
}

_NUMBER = re.compile(
    r"\s*([-+]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][-+]?\d{1,4})?)\s*(.*?)\s*", re.DOTALL | re.ASCII)
_FACTOR = re.compile(r"(1|%|[A-Za-zµμΩ°_][A-Za-zµμΩ°_0-9]*)(?:(?:\^|\*\*)([-+]?\d))?")
_SUPERSCRIPTS = {"²": "^2", "³": "^3", "⁻¹": "^-1", "·": "*", "×": "*", "−": "-", "μ": "µ"}
_PLAIN_UNITS = {"": {"%": 0.01, "percent": 0.01},
                "deg": {"deg": 1.0, "°": 1.0, "degree": 1.0, "rad": 180.0 / math.pi}}
_TEXT_MAX = 60
IN_FILE = "file"         # validation context: quantities are text with units


class UnitError(ValueError):
    """Text that is not the quantity asked for; `bound` and `try_` are parts of the error told."""

    def __init__(self, what: str, *, bound: str = "", try_: str = "") -> None:
        super().__init__(what)
        self.what = what
        self.bound = bound
        self.try_ = try_


@functools.cache
def registry() -> UnitRegistry[Any]:
    """The one pint registry, made on first use."""
    import pint

    return pint.UnitRegistry()


@functools.lru_cache(maxsize=512)
def _factor(unit_text: str) -> tuple[float, dict[str, float]]:
    """Factor to SI base units, and the dimensions, of a unit text such as "Pa*s/m^3".

    The text is read by a grammar of our own, factor by factor: pint would evaluate anything.
    """
    ureg = registry()
    factor = 1.0
    dimensions: dict[str, float] = {}
    sign = 1
    for position, part in enumerate(re.split(r"([*/ ])", unit_text.replace("**", "^"))):
        if position % 2:
            sign = -1 if part == "/" else 1
            continue
        match = _FACTOR.fullmatch(part)
        if match is None:
            raise UnitError(f'cannot read "{part}" in the unit "{unit_text}"',
                            bound="names joined by * and /, powers as ^2",
                            try_='write it like "Pa*s/m^3"')
        name, power = match.group(1), sign * int(match.group(2) or 1)
        if name == "1":
            continue
        one, dims = _named_factor(ureg, name)
        factor *= one ** power
        for dim, exponent in dims.items():
            dimensions[dim] = dimensions.get(dim, 0.0) + power * exponent
    return factor, {dim: exponent for dim, exponent in dimensions.items() if exponent}


@functools.lru_cache(maxsize=512)
def _named_factor(ureg: UnitRegistry[Any], name: str) -> tuple[float, dict[str, float]]:
    """One unit name; degC and degF count as differences here."""
    if name == "%":
        return 0.01, {}
    name = {"°C": "degC", "Ω": "ohm", "degC": "degC"}.get(name, name)
    if name in ("degC", "degF"):
        name = "delta_" + name
    try:
        unit = ureg.parse_units(name)
        one: Any
        one, base = ureg.get_base_units(unit)
        powers: dict[Any, Any] = dict(unit.dimensionality)
        factor = float(one)
        dims = {str(dim): float(power) for dim, power in powers.items()}
    except Exception as err:  # pint raises many kinds; all of them mean "not a unit"
        near = difflib.get_close_matches(name.lower(), _lower_names(), n=1, cutoff=0.6)
        hint = f'did you mean "{_lower_names()[near[0]]}"?' if near else "see the shipped rig files"
        raise UnitError(f'unknown unit "{name}"', try_=hint) from err
    if "radian" in str(base):        # an angle has no dimension in pint: rpm would be off by 2 pi
        raise UnitError(f'"{name}" is an angle', bound="rates are in Hz or 1/min",
                        try_='write "60 1/min"')
    return factor, dims


@functools.cache
def _lower_names() -> dict[str, str]:
    """Common unit names by their lower-case form, for near matches."""
    return {name.lower(): name for _, names in KNOWN.values() for name in names}


def parse(text: object, unit: str) -> float:
    """The value of `text` ("35 cmH2O") in `unit`, a key of KNOWN; plain numbers where unit is "".

    Returns SI (degrees Celsius for "degC", degrees of arc for "deg"). Raises UnitError when the
    unit is missing, unknown or of another dimension, or when the value is not finite.
    """
    kind, names = KNOWN[unit]
    if isinstance(text, bool) or not isinstance(text, str | int | float):
        shape = {bool: "true or false", list: "a list", dict: "a table"}.get(type(text), "no text")
        raise UnitError(f"{shape} where a {kind} belongs", try_=f"write {_example(unit)}")
    if not isinstance(text, str):
        return _plain(_float(text), unit, kind, names)
    if len(text) > _TEXT_MAX:
        raise UnitError(f"too long for a {kind}", bound=f"at most {_TEXT_MAX} characters",
                        try_=f"write {_example(unit)}")
    match = _NUMBER.fullmatch(text)
    if match is None:
        raise UnitError(f"no number at the start of this {kind}", try_=f"write {_example(unit)}")
    number, unit_text = float(match.group(1)), _tidy(match.group(2))
    if not unit_text:
        return _plain(number, unit, kind, names)
    return _finite(_convert(number, unit_text, unit, kind, names), kind)


def _plain(number: float, unit: str, kind: str, names: tuple[str, ...]) -> float:
    if unit:
        shown = f"{number:g}" if math.isfinite(number) else "1"
        raise UnitError("number without unit", bound=f"a {kind} has a unit",
                        try_=f'write "{shown} {names[0]}"')
    return _finite(number, kind)


def _float(number: float) -> float:
    """A number of any length as a float: whole numbers beyond its range become infinite."""
    try:
        return float(number)
    except OverflowError:
        return math.inf


def _finite(value: float, kind: str) -> float:
    if not math.isfinite(value):
        raise UnitError(f"this {kind} is not a finite number", bound="finite",
                        try_="write an ordinary number")
    return value


def _tidy(unit_text: str) -> str:
    for mark, plain in _SUPERSCRIPTS.items():
        unit_text = unit_text.replace(mark, plain)
    return re.sub(r"\s*([*/^])\s*", r"\1", re.sub(r"\s+", " ", unit_text))


def _convert(number: float, text: str, unit: str, kind: str, names: tuple[str, ...]) -> float:
    """number [text] in `unit`; checks the dimension."""
    if unit == "degC":
        return _celsius(number, text, names)
    if unit in _PLAIN_UNITS:         # nothing but these: every other plain unit is a mistake
        if text not in _PLAIN_UNITS[unit]:
            raise UnitError(f'"{text}" is no unit of {kind}',
                            bound=f"one of {', '.join(_PLAIN_UNITS[unit])}",
                            try_=f"write {_example(unit)}")
        return number * _PLAIN_UNITS[unit][text]
    try:
        factor, dims = _factor(text)
        target, wanted = _factor(unit)
        if dims != wanted:
            raise UnitError(f'"{text}" is no unit of {kind}', bound=f"a unit such as {names[0]}",
                            try_=f"write {_example(unit)}")
        return number * factor / target
    except (OverflowError, ZeroDivisionError) as err:
        raise UnitError(f"this {kind} is out of any range", bound="finite") from err


def _celsius(number: float, text: str, names: tuple[str, ...]) -> float:
    """Temperatures have an offset: 300 K is 26.85 degC, 77 degF is 25 degC."""
    name = text.replace("°", "deg")
    if name == "degC":
        value = number
    elif name in ("K", "kelvin"):
        value = number - 273.15
    elif name == "degF":
        value = (number - 32.0) / 1.8
    else:
        raise UnitError(f'"{text}" is no unit of temperature', bound=f"one of {', '.join(names)}",
                        try_=f"write {_example('degC')}")
    if value < -273.15:
        raise UnitError("colder than absolute zero", bound="-273.15 degC",
                        try_="check the sign and the unit")
    return value


def _example(unit: str) -> str:
    """A well-formed example in quotes."""
    return f'"1 {KNOWN[unit][1][0]}"' if unit else "0.5"


def show(value: float, unit: str) -> str:
    """An SI value as people write it: the prefix chosen so that the number is short.

    >>> show(0.004, "s"), show(3432.3275, "Pa"), show(1.2, "A")
    ('4 ms', '3.43233 kPa', '1.2 A')
    """
    if unit == "":
        return f"{value:g}"
    if unit in ("s", "m", "A", "V", "Pa", "H", "Hz", "ohm", "A/m", "Pa*s", "N/m", "T", "W"):
        steps = [("k", 1e3), ("", 1.0), ("m", 1e-3), ("u", 1e-6)][1 if unit == "s" else 0:]
        fits = [step for step in steps if abs(value) >= step[1]] or [steps[-1]]
        prefix, factor = fits[0] if value else ("", 1.0)
        return f"{value / factor:.6g} {prefix}{unit}"
    if unit == "m^3" and value:
        return f"{value * 1e9:.6g} ul"
    return f"{value:.6g} {unit}"


@dataclass(frozen=True)
class Unit:
    """Field metadata: the field is a quantity, written as text with a unit, kept as an SI float.

    In a file (validation context IN_FILE) a number needs its unit; Python code may give SI numbers.
    """

    si: str

    def __get_pydantic_core_schema__(
        self, source: Any, handler: GetCoreSchemaHandler
    ) -> CoreSchema:
        from pydantic_core import core_schema

        return core_schema.with_info_before_validator_function(self._read, handler(source))

    def _read(self, value: object, info: ValidationInfo) -> object:
        if info.context != IN_FILE and type(value) in (int, float):
            return _finite(_float(value), KNOWN[self.si][0])  # type: ignore[arg-type]
        return parse(value, self.si)


Pressure = Annotated[float, Unit("Pa")]
Current = Annotated[float, Unit("A")]
Voltage = Annotated[float, Unit("V")]
Resistance = Annotated[float, Unit("ohm")]
Inductance = Annotated[float, Unit("H")]
Time = Annotated[float, Unit("s")]
Frequency = Annotated[float, Unit("Hz")]
Length = Annotated[float, Unit("m")]
Volume = Annotated[float, Unit("m^3")]
Temperature = Annotated[float, Unit("degC")]
ThermalResistance = Annotated[float, Unit("K/W")]
HeatCapacity = Annotated[float, Unit("J/K")]
PerKelvin = Annotated[float, Unit("1/K")]
Magnetisation = Annotated[float, Unit("A/m")]
Density = Annotated[float, Unit("kg/m^3")]
Viscosity = Annotated[float, Unit("Pa*s")]
SurfaceTension = Annotated[float, Unit("N/m")]
Compliance = Annotated[float, Unit("m^3/Pa")]
HydraulicResistance = Annotated[float, Unit("Pa*s/m^3")]
HydraulicInertance = Annotated[float, Unit("Pa*s^2/m^3")]
FluxDensity = Annotated[float, Unit("T")]
Angle = Annotated[float, Unit("deg")]
Ratio = Annotated[float, Unit("")]
