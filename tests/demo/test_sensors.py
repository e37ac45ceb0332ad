"""Sensors: steps, range ends and codes of the parts the node interface describes."""

import numpy as np
import pytest

from hub.demo.sensors import Channel, Fault

TIMES = np.arange(0, 5000, dtype=np.int64) * 60_000


def show(name: str, value: float | np.ndarray, **more: object) -> np.ndarray:
    true = np.broadcast_to(np.asarray(value, float), TIMES.shape)
    return Channel(name, 3, **more).show(true, TIMES)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("name", "value", "step"),
    [("pack_voltage", 7.71, 0.004), ("pack_current", 0.2137, 0.0001), ("pack_temperature", 21.3, 0.0625)],
)
def test_readings_fall_on_the_parts_steps(name: str, value: float, step: float) -> None:
    # 4 mV and 0.1 mA (on 0.1 Ω) of a 12-bit shunt current monitor, 1/16 °C of a one-wire thermometer.
    shown = show(name, value)
    assert abs(shown / step - np.round(shown / step)).max() < 1e-6
    assert shown.mean() == pytest.approx(value, abs=step / 4)
    assert np.unique(shown).size > 1


def test_gain_and_offset() -> None:
    assert show("pack_current", 1.0, gain=1.02, offset=-0.003).mean() == pytest.approx(1.017, abs=1e-4)


def test_current_clips_at_the_range_end() -> None:
    # ± 320 mV on 0.1 Ω.
    assert set(show("pack_current", 3.6)) == {3.2}
    assert set(show("pack_current", -9.0)) == {-3.2}


def test_noise_is_the_same_whatever_the_pieces() -> None:
    true = np.linspace(6.0, 8.0, TIMES.size)
    whole = Channel("pack_voltage", 3).show(true, TIMES)
    channel = Channel("pack_voltage", 3)
    parts = [channel.show(v, t) for v, t in zip(np.array_split(true, 9), np.array_split(TIMES, 9), strict=True)]
    assert np.array_equal(np.concatenate(parts), whole)
    assert not np.array_equal(Channel("pack_voltage", 4).show(true, TIMES), whole)


def test_a_thermometer_shows_85_before_its_first_conversion() -> None:
    # 0550h, the power-on value of the part.
    first = np.zeros(TIMES.size, bool)
    first[[0, 700]] = True
    shown = Channel("pack_temperature", 3).show(np.full(TIMES.size, 20.0), TIMES, first)
    assert np.flatnonzero(shown == 85.0).tolist() == [0, 700]
    assert not (Channel("pack_voltage", 3).show(np.full(TIMES.size, 6.0), TIMES, first) == 85.0).any()


def test_a_loose_wire_shows_minus_127() -> None:
    fault = Fault("pack_temperature", "loose-wire", int(TIMES[10]), int(TIMES[20]))
    shown = show("pack_temperature", 20.0, faults=(fault,))
    assert np.flatnonzero(shown == -127.0).tolist() == list(range(10, 20))
    assert (show("air_temperature", 20.0, faults=(fault,)) > -127.0).all()


def test_a_stuck_channel_repeats_its_last_reading() -> None:
    true = np.linspace(5.0, 25.0, TIMES.size)
    channel = Channel(
        "air_temperature", 3, faults=(Fault("air_temperature", "stuck", int(TIMES[100]), int(TIMES[160])),)
    )
    shown = np.concatenate([channel.show(true[a:b], TIMES[a:b]) for a, b in [(0, 100), (100, 130), (130, 5000)]])
    assert set(shown[100:160]) == {shown[99]}
    assert shown[160:400].std() > 0.1


def test_nothing_in_nothing_out() -> None:
    assert Channel("signal", 1).show(np.empty(0), np.empty(0, np.int64)).size == 0
