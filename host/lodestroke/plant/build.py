"""From a rig to the plant's arrays. `vary` draws every toleranced quantity anew from the seed."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from . import layout as k
from .coil import field_table
from .slug import drag_circle, drag_rectangle
from .steps import substeps
from .valves import series_collapse

if TYPE_CHECKING:
    from ..rig import Rig

TABLE_N = 4001
_LIMIT_SIGMA = 3.0  # tolerances are cut at three standard deviations


@dataclass(frozen=True)
class Params:
    """Everything the integrator needs: p (N_P,), field tables (TABLE_N,), sensors (channels, N_S)."""

    p: np.ndarray
    table_a: np.ndarray
    table_b: np.ndarray
    sensors: np.ndarray


def params_from_rig(rig: Rig, seed: int | None = None) -> Params:
    """The rig as arrays, nominal; with a seed, each toleranced quantity drawn (normal, cut at 3 sd)."""
    p = np.zeros(k.N_P)
    _slug(p, rig)
    _vessels(p, rig)
    for side, base in (("inlet", k.CRACK_IN), ("outlet", k.CRACK_OUT)):
        _valves(p, getattr(rig.valves, side), base)
    _driver(p, rig)
    p[k.TICK_S] = rig.board.tick
    p[k.DRIFT_CRACK] = rig.drift.cracking
    p[k.DRIFT_COLLAPSE] = rig.drift.collapse
    p[k.DRIFT_DRAG] = rig.drift.viscosity
    p[k.DRIFT_M_S] = rig.drift.saturation_magnetisation
    if seed is not None:
        _vary(p, rig, np.random.default_rng([seed, 0x70756D70]))
    p[k.SUBSTEPS] = substeps(p, str(rig.source))
    tables = _tables(p, rig)
    return Params(p, tables[0], tables[1], _sensors(rig, rig.board.tick / p[k.SUBSTEPS]))


def _slug(p: np.ndarray, rig: Rig) -> None:
    slug, channel = rig.slug, rig.channel
    area = channel.area_m2
    p[k.AREA] = area
    p[k.SLUG_INERTANCE] = slug.density * slug.length / area
    if channel.shape == "circle":
        p[k.SLUG_DRAG] = drag_circle(slug.viscosity, slug.length, channel.radius or 0.0)
    else:
        p[k.SLUG_DRAG] = drag_rectangle(
            slug.viscosity, slug.length, channel.width or 0.0, channel.height or 0.0
        )
    p[k.X_MAX] = slug.travel / 2.0
    p[k.STICK] = slug.hysteresis
    p[k.M_S] = slug.saturation_magnetisation
    p[k.CHI] = slug.initial_susceptibility
    p[k.FACE] = slug.length / 2.0
    p[k.SPRING_V] = rig.spring.volume or 0.0 if rig.spring.kind == "air" else 0.0
    p[k.AMBIENT_P] = rig.ambient.pressure
    p[k.SPRING_N] = 1.0  # isothermal: small gas volumes at a few hertz between metal walls
    p[k.AMBIENT_C] = rig.ambient.temperature


def _vessels(p: np.ndarray, rig: Rig) -> None:
    p[k.C_CH] = rig.chamber.compliance
    p[k.C_OUT] = rig.outlet.compliance
    p[k.R_OUT] = rig.outlet.restriction
    p[k.HEAD_IN] = rig.inlet.head
    p[k.HEAD_OUT] = rig.outlet.head


def _valves(p: np.ndarray, valves: list, base: int) -> None:  # type: ignore[type-arg]
    """Valves in series on one side, lumped: see valves.py."""
    for n, name in enumerate(("cracking", "closing", "resistance", "inertance", "leak")):
        p[base + n] = sum(getattr(valve, name) for valve in valves)
    p[base + 5] = series_collapse([v.collapse for v in valves], [v.leak for v in valves])
    # a conducting valve without inertance would be an algebraic loop: give it a millisecond's worth
    p[base + 3] = max(p[base + 3], 1e-3 * p[base + 2])
    p[base + 6] = max(valve.reform for valve in valves)


def _driver(p: np.ndarray, rig: Rig) -> None:
    p[k.SUPPLY] = rig.driver.supply
    p[k.R_SOURCE] = rig.driver.source_resistance
    p[k.DIODE] = 0.7  # silicon junction, common practice
    p[k.FULL_BRIDGE] = 1.0 if rig.driver.bridge == "full" else 0.0
    p[k.COILS] = len(rig.coils)
    for n, base in enumerate((k.R20_A, k.R20_B)):
        coil = rig.coils[min(n, len(rig.coils) - 1)]
        p[base : base + 7] = (
            coil.resistance,
            coil.inductance,
            coil.temperature_coefficient,
            coil.winding_to_body,
            coil.winding_heat,
            coil.body_to_air,
            coil.body_heat,
        )


def _tables(p: np.ndarray, rig: Rig) -> list[np.ndarray]:
    """Field per ampere of each coil over every place that a slug face can reach."""
    reach = p[k.X_MAX] + p[k.FACE] + 1e-3
    p[k.TABLE_FROM] = -reach
    p[k.TABLE_STEP] = 2.0 * reach / (TABLE_N - 1)
    p[k.TABLE_N] = TABLE_N
    tables = []
    for n in range(2):
        coil = rig.coils[min(n, len(rig.coils) - 1)]
        tables.append(
            field_table(
                -reach - coil.position,
                p[k.TABLE_STEP],
                TABLE_N,
                float(coil.turns),
                coil.length,
                coil.inner_radius,
                coil.outer_radius,
            )
        )
    return tables


def _sensors(rig: Rig, substep_s: float) -> np.ndarray:
    rows = np.zeros((6, k.N_S))
    for n, name in enumerate(("chamber", "outlet", "coil_a", "coil_b", "supply", "inlet")):
        sensor = getattr(rig.sensors, name)
        if sensor is None:
            continue
        keep = 1.0 - math.exp(-substep_s / sensor.lag) if sensor.lag > 0.0 else 1.0
        rows[n, : k.S_PRESENT + 1] = (
            sensor.low,
            sensor.high,
            sensor.counts_low,
            sensor.counts_high,
            sensor.counts_full,
            sensor.noise,
            keep,
            1.0,
        )
    return rows


def _vary(p: np.ndarray, rig: Rig, draw: np.random.Generator) -> None:
    tolerances = rig.tolerances
    for share, places in (
        (tolerances.cracking, (k.CRACK_IN, k.CRACK_OUT)),
        (tolerances.collapse, (k.COLLAPSE_IN, k.COLLAPSE_OUT)),
        (tolerances.saturation_magnetisation, (k.M_S,)),
        (tolerances.compliance, (k.C_CH, k.C_OUT)),
        (tolerances.resistance, (k.R20_A, k.R20_B)),
        (tolerances.viscosity, (k.SLUG_DRAG,)),
    ):
        for place in places:
            z = float(np.clip(draw.standard_normal(), -_LIMIT_SIGMA, _LIMIT_SIGMA))
            p[place] *= 1.0 + share * z
    for base in (k.CRACK_IN, k.CRACK_OUT):
        p[base + 1] = min(p[base + 1], p[base])
