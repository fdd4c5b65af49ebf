"""The pump itself: coils, slug, channel, return spring, valves, vessels, liquid, room."""

from __future__ import annotations

from typing import Annotated, Literal

from annotated_types import Ge, Gt, Le, Len
from pydantic import Field

from ..units import (
    Compliance,
    Density,
    HeatCapacity,
    HydraulicInertance,
    HydraulicResistance,
    Inductance,
    Length,
    Magnetisation,
    PerKelvin,
    Pressure,
    Ratio,
    Resistance,
    SurfaceTension,
    Temperature,
    ThermalResistance,
    Time,
    Viscosity,
    Volume,
)
from .models_board import Text
from .toml_file import Table

_Size = Annotated[Length, Gt(0.0), Le(1.0)]
_Share = Annotated[Ratio, Ge(0.0), Le(0.5)]
_Creep = Annotated[Ratio, Ge(-1e-2), Le(1e-2)]


class Coil(Table):
    """A solenoid around the channel. Resistance is at 20 degC; the coefficient is copper's."""

    name: Text = ""
    turns: Annotated[int, Ge(1), Le(1_000_000)]
    length: _Size
    inner_radius: _Size
    outer_radius: _Size
    resistance: Annotated[Resistance, Gt(0.0), Le(1000.0)]
    temperature_coefficient: Annotated[PerKelvin, Ge(0.0), Le(0.01)] = 0.00393
    inductance: Annotated[Inductance, Gt(0.0), Le(10.0)]
    position: Annotated[Length, Ge(-1.0), Le(1.0)] = 0.0
    winding_to_body: Annotated[ThermalResistance, Gt(0.0), Le(1000.0)]
    winding_heat: Annotated[HeatCapacity, Gt(0.0), Le(100000.0)]
    body_to_air: Annotated[ThermalResistance, Gt(0.0), Le(1000.0)]
    body_heat: Annotated[HeatCapacity, Gt(0.0), Le(100000.0)]


class Slug(Table):
    """The shuttling magnetic liquid."""

    length: _Size
    saturation_magnetisation: Annotated[Magnetisation, Gt(0.0), Le(2e6)]
    initial_susceptibility: Annotated[Ratio, Gt(0.0), Le(100.0)]
    density: Annotated[Density, Gt(0.0), Le(20000.0)] = 1200.0
    viscosity: Annotated[Viscosity, Gt(0.0), Le(100.0)]
    surface_tension: Annotated[SurfaceTension, Ge(0.0), Le(1.0)] = 0.0
    hysteresis: Annotated[Pressure, Ge(0.0), Le(1e5)] = 0.0
    travel: _Size


class Channel(Table):
    """Where the slug runs. `length` is the straight part; 0 leaves it open."""

    shape: Literal["circle", "rectangle"] = "circle"
    radius: Annotated[Length, Gt(0.0), Le(0.1)] | None = None
    width: Annotated[Length, Gt(0.0), Le(0.1)] | None = None
    height: Annotated[Length, Gt(0.0), Le(0.1)] | None = None
    length: Annotated[Length, Ge(0.0), Le(10.0)] = 0.0

    @property
    def area_m2(self) -> float:
        """Cross-section in m²."""
        if self.shape == "circle":
            return 3.141592653589793 * (self.radius or 0.0) ** 2
        return (self.width or 0.0) * (self.height or 0.0)


class Spring(Table):
    """What brings the slug back: a trapped gas volume, or nothing (a second coil)."""

    kind: Literal["air", "none"] = "air"
    volume: Annotated[Volume, Gt(0.0), Le(1.0)] | None = None


class Chamber(Table):
    """Between the two valves."""

    compliance: Annotated[Compliance, Gt(0.0), Le(1e-3)]


class Inlet(Table):
    """Where the liquid comes from. `head` is stated, or measured by an inlet sensor."""

    head: Annotated[Pressure, Ge(-1e5), Le(1e6)] = 0.0


class Outlet(Table):
    """The outlet vessel, behind a restriction to a stated head."""

    head: Annotated[Pressure, Ge(-1e5), Le(1e6)] = 0.0
    compliance: Annotated[Compliance, Gt(0.0), Le(1e-3)]
    restriction: Annotated[HydraulicResistance, Gt(0.0), Le(1e18)]


class Fluid(Table):
    """The pumped liquid. Density and viscosity default to the named liquid's."""

    name: Literal["water"] = "water"
    temperature: Annotated[Temperature, Ge(0.0), Le(100.0)] = 20.0
    density: Annotated[Density, Gt(0.0), Le(20000.0)] | None = None
    viscosity: Annotated[Viscosity, Gt(0.0), Le(100.0)] | None = None


class Ambient(Table):
    """The room."""

    temperature: Annotated[Temperature, Ge(-40.0), Le(85.0)] = 20.0
    pressure: Annotated[Pressure, Ge(2e4), Le(2e5)] = 101325.0


class Valve(Table):
    """A plug of magnetic liquid held by a magnet: closed below cracking, blown past collapse."""

    cracking: Annotated[Pressure, Gt(0.0), Le(1e6)]
    closing: Annotated[Pressure, Ge(0.0), Le(1e6)]
    resistance: Annotated[HydraulicResistance, Gt(0.0), Le(1e18)]
    inertance: Annotated[HydraulicInertance, Ge(0.0), Le(1e15)] = 0.0
    leak: Annotated[HydraulicResistance, Gt(0.0), Le(1e21)] = 1e18
    collapse: Annotated[Pressure, Gt(0.0), Le(1e6)]
    reform: Annotated[Time, Ge(0.0), Le(3600.0)] = 0.5


class Valves(Table):
    """Valves in series on each side; the first one is next to the chamber."""

    inlet: Annotated[list[Valve], Len(1, 8)]
    outlet: Annotated[list[Valve], Len(1, 8)]


class Tolerances(Table):
    """Relative, one standard deviation: how well the rig's values are known."""

    cracking: _Share = 0.0
    collapse: _Share = 0.0
    saturation_magnetisation: _Share = 0.0
    compliance: _Share = 0.0
    resistance: _Share = 0.0
    viscosity: _Share = 0.0


class Drift(Table):
    """Slow change per cycle, relative."""

    cracking: _Creep = 0.0
    collapse: _Creep = 0.0
    viscosity: _Creep = 0.0
    saturation_magnetisation: _Creep = 0.0


Coils = Annotated[list[Coil], Field(min_length=1, max_length=2)]

__all__ = [
    "Ambient", "Chamber", "Channel", "Coil", "Coils", "Drift", "Fluid", "Inlet",
    "Outlet", "Slug", "Spring", "Tolerances", "Valve", "Valves",
]
