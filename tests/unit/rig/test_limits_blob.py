"""The rig as the board gets it: integers that mean what the rig says and stay inside 30 bits."""

from __future__ import annotations

import math
import struct
import zlib
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from lodeboard.limits import CHANNELS, FIELDS
from lodeboard.thermal import Coil as BoardCoil
from lodestroke.errors import RigError
from lodestroke.rig import Rig, limits_blob, limits_values
from lodestroke.rig.limits_blob import _line, _plausible
from lodestroke.rig.models_sensors import CurrentSensor, PressureSensor

SMALL = 1 << 30


def changed(rig: Rig, section: str, **values: Any) -> Rig:
    return rig.model_copy(update={section: getattr(rig, section).model_copy(update=values)})


def with_coil(rig: Rig, **values: Any) -> Rig:
    return rig.model_copy(update={"coils": [rig.coils[0].model_copy(update=values)]})


def test_blob_is_the_fields_in_order_with_their_crc(bench: Rig) -> None:
    blob, crc = limits_blob(bench)
    values = limits_values(bench)
    assert struct.unpack(f"<{len(FIELDS)}i", blob) == tuple(values[name] for name in FIELDS)
    assert crc == zlib.crc32(blob)      # IEEE 802.3, as zlib computes it
    assert set(values) == set(FIELDS)


def test_absent_channel_stands_at_its_stated_value(bench: Rig) -> None:
    values = limits_values(changed(bench, "inlet", head=250.0))
    assert (values["inlet_present"], values["inlet_offset"]) == (0, 250)
    assert (values["supply_present"], values["supply_offset"]) == (0, 30000)


sensors = st.builds(
    lambda full, lo, hi, low, span: PressureSensor(
        counts_full=full, counts_low=int(lo * full), counts_high=int(hi * full),
        low=low, high=low + span),
    st.sampled_from([1023, 4095, 16383, 65535]), st.floats(0.0, 0.3), st.floats(0.6, 1.0),
    st.floats(-50000.0, 20000.0), st.floats(500.0, 200000.0))


@given(sensors, st.floats(0.0, 1.0))
def test_counts_convert_within_a_pascal_and_a_count(sensor: PressureSensor, share: float) -> None:
    line = _line(sensor, "chamber")
    counts = round(share * sensor.counts_full)
    assert sensor.counts_full * line["gain"] < SMALL
    board_pa = ((counts * line["gain"]) >> line["shift"]) + line["offset"]
    slope = (sensor.high - sensor.low) / (sensor.counts_high - sensor.counts_low)
    true_pa = sensor.low + (counts - sensor.counts_low) * slope
    assert abs(board_pa - true_pa) <= 1.0 + 0.6 * slope + 1e-4 * (sensor.high - sensor.low)


def test_shipped_sensors_convert_within_one_unit_everywhere(bench: Rig) -> None:
    for name in ("chamber", "outlet", "coil_a"):
        sensor = getattr(bench.sensors, name)
        line, scale = _line(sensor, name), 1000.0 if name == "coil_a" else 1.0
        slope = scale * (sensor.high - sensor.low) / (sensor.counts_high - sensor.counts_low)
        for counts in range(sensor.counts_full + 1):
            board = ((counts * line["gain"]) >> line["shift"]) + line["offset"]
            assert abs(board - (scale * sensor.low + (counts - sensor.counts_low) * slope)) <= 1.0


def test_rails_are_implausible_unless_zero_is_measured_there(bench: Rig) -> None:
    both = CurrentSensor(low=-4.0, high=4.0, counts_low=0, counts_high=4095, counts_full=4095)
    shunt = CurrentSensor(low=0.0, high=4.0, counts_low=0, counts_high=4000, counts_full=4095)
    assert _plausible(bench, both, "coil_a")["low_counts"] == 1
    assert _plausible(bench, both, "coil_a")["high_counts"] == 4094
    assert _plausible(bench, shunt, "coil_a")["low_counts"] == 0


def test_stuck_watch_needs_noise_or_is_asked_for(bench: Rig) -> None:
    still = bench.sensors.chamber.model_copy(update={"noise": 0.1})
    asked = still.model_copy(update={"stuck": 2.0})
    assert _plausible(bench, bench.sensors.chamber, "chamber")["stuck_ticks"] == 200
    assert _plausible(bench, still, "chamber")["stuck_ticks"] == 0
    assert _plausible(bench, asked, "chamber")["stuck_ticks"] == 2000


def test_pressure_limits_round_towards_safety(bench: Rig) -> None:
    limits = bench.limits
    rig = changed(bench, "limits",
                  chamber_high=limits.chamber_high.model_copy(update={"hard": 4000.9}),
                  chamber_low=limits.chamber_low.model_copy(update={"hard": -3000.9}))
    values = limits_values(rig)
    assert values["chamber_high_hard_pa"] == 4000
    assert values["chamber_low_hard_pa"] == -3000


def test_every_product_of_the_tick_fits_a_small_integer(bench: Rig) -> None:
    v = limits_values(bench)
    for name in CHANNELS:
        sensor = getattr(bench.sensors, name)
        if sensor is not None:
            assert sensor.counts_full * v[f"{name}_gain"] < SMALL
    span_ma = v["target_max_ma"] + 4000
    assert span_ma * (v["kp_q8"] + v["ki_q8"] + v["feed_q8"]) < SMALL
    mean_sq = v["over_current_ma"] ** 2 >> 10
    assert mean_sq * v["r20_mohm"] * 2 < SMALL
    assert v["r20_mohm"] * v["alpha_ppm"] < SMALL


def test_time_limits_are_ticks_of_the_rig(bench: Rig) -> None:
    values = limits_values(changed(bench, "board", tick=0.002))
    assert values["tick_us"] == 2000
    assert values["tail_ticks"] == 125
    assert values["coil_open_ticks"] == 25
    assert values["ramp_ma"] == 120
    assert values["fold_min_q8"] == 128


def test_deadman_is_needed_on_metal_unless_said_otherwise(bench: Rig) -> None:
    metal = changed(bench, "board", kind="rp2040")
    assert limits_values(bench)["deadman_needed"] == 0
    assert limits_values(metal)["deadman_needed"] == 1
    assert limits_values(changed(metal, "limits", deadman=False))["deadman_needed"] == 0


# heat.two_node.constant_current.a: 0.62 A through 5.25 ohm at 20 degC, alpha20 = 0.00393 per K,
# 3.5 and 14 K/W, 6 and 38 J/K, 23 degC; two-node balance solved by modes at 50 digits, by matrix
# exponential and by an ODE solver, which agree. Seconds: winding degC.
HEATING = {10: 25.7399191547, 100: 33.0890976543, 1000: 55.7520333014}


def test_board_estimate_follows_the_two_node_solution_and_reads_rather_warm(bench: Rig) -> None:
    rig = with_coil(bench, resistance=5.25, winding_to_body=3.5, body_to_air=14.0,
                    winding_heat=6.0, body_heat=38.0)
    rig = changed(rig, "ambient", temperature=23.0)
    values = limits_values(rig)

    class Store:
        get = staticmethod(values.__getitem__)

    coil = BoardCoil()
    coil.load(Store)
    for second in range(1, 1001):
        for _ in range(1000):
            coil.step(620)
        if second in HEATING:
            rise, true_rise = coil.winding_mc / 1000 - 23.0, HEATING[second] - 23.0
            assert 0.98 * true_rise <= rise <= 1.08 * true_rise + 0.2


def test_regulator_settles_on_its_target_in_the_coil_equation(bench: Rig) -> None:
    """Exact discrete R-L circuit, i' = a i + (1 - a) u V / R (textbook solution of L di/dt)."""
    from lodeboard.regulator import Regulator

    values = limits_values(bench)

    class Store:
        get = staticmethod(values.__getitem__)

    regulator = Regulator()
    regulator.load(Store)
    for ohm in (8.15, 8.0 * 1.33 + 0.15):           # at 20 degC, and at about 105 degC
        regulator.reset()
        decay = math.exp(-0.001 * ohm / 0.005)
        current, peak = 0.0, 0.0
        for _ in range(60):
            duty = regulator.step(2000, round(1000 * current)) / 32768
            current = decay * current + (1 - decay) * duty * 30.0 / ohm
            peak = max(peak, current)
        assert current == pytest.approx(2.0, abs=0.01)
        assert peak < 2.0 * 1.05


@pytest.mark.parametrize(("values", "words"), [
    ({"winding_heat": 1e5, "winding_to_body": 900.0}, "too long for the board's estimate"),
    ({"winding_heat": 0.001, "winding_to_body": 0.01}, "too short for the board's estimate"),
    ({"resistance": 900.0}, "does not fit the board's integers"),
])
def test_coil_beyond_the_boards_integers_is_refused(
    bench: Rig, values: dict[str, float], words: str
) -> None:
    with pytest.raises(RigError) as caught:
        limits_values(with_coil(bench, **values))
    assert words in caught.value.what
    assert caught.value.bound
    assert caught.value.try_


def test_sensor_scale_beyond_the_boards_integers_is_refused(bench: Rig) -> None:
    coarse = bench.sensors.chamber.model_copy(
        update={"counts_low": 0, "counts_high": 1, "low": -1e6, "high": 1e6})
    with pytest.raises(RigError, match="scale does not fit"):
        limits_values(changed(bench, "sensors", chamber=coarse))
