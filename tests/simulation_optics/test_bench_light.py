"""Levels, meter, drift, damage and keys of a world, and the file it is read from."""

from __future__ import annotations

import math
import tomllib
from dataclasses import replace
from pathlib import Path as File

import numpy as np
import pytest

from owlight.simulation.optics import (
    capture_codes,
    damaged_by,
    diode_peak_power_w,
    lo_port_power_w,
    meter_power_w,
    photocurrent_a,
    receiver_power_w,
)
from owlight.simulation.optics.drift import drifted
from owlight.simulation.optics.power import beat_frequency_hz
from owlight.simulation.world import Drift, Laser, Meter, Path, Transmitter, World, read_world

FOLDER = File(__file__).parents[2] / "simulated_instruments"


def dbm(w):
    return 10 * math.log10(w / 1e-3)


def demo():
    document = read_world((FOLDER / "world.toml").read_text(), "world.toml")
    assert document.problems == ()
    return document.value


def test_losses_add_up(settings):
    world = World(
        signal_laser=Laser(power_error_db=0.2),
        transmitter=Transmitter(loss_db=12.0),
        path=Path(1.0, 1.5, 0.01, 10.1, 0.56, -0.02),
        meter=Meter(scale_error_db=0.1),
    )
    s = settings(signal_power_dbm=10.0, attenuation_db=20.0)
    tap_dbm = 10.2 - 12.0 - 1.0 - 1.5 - 20.2
    assert dbm(receiver_power_w(world, s, 0.0)) == pytest.approx(tap_dbm - 10.1 - 0.02)
    assert dbm(meter_power_w(world, s, 1, 0.0, 0.1)) == pytest.approx(tap_dbm - 0.56 + 0.1)


def test_oscillator_loses_on_its_way(settings):
    world = World(local_oscillator=Laser(power_error_db=-0.1), path=Path(lo_loss_db=1.0))
    assert dbm(lo_port_power_w(world, settings(lo_power_dbm=13.0))) == pytest.approx(11.9)


def plane_minus_tap_db(world):
    """True level at the receiver's input less true level at the meter, without drift."""
    path = world.path
    return path.tap_to_meter_loss_db - path.tap_to_receiver_loss_db + path.tap_error_db


def test_tap_tells_the_received_power(settings):
    world = replace(demo(), meter=Meter(), drift=Drift())
    for attenuation_db in (0.0, 25.0):
        s = settings(signal_power_dbm=10.0, attenuation_db=attenuation_db)
        level_dbm = dbm(meter_power_w(world, s, 1, 0.0, 0.1)) + plane_minus_tap_db(world)
        assert level_dbm == pytest.approx(dbm(receiver_power_w(world, s, 0.0)), abs=1e-9)


def test_readings_scatter_less_when_averaged(settings):
    world = World(meter=Meter(noise_w=1e-12, noise_floor_w=1e-13, zero_error_w=-5e-12))
    s = settings(signal_on=False)
    for averaging_s in (0.01, 1.0, 1e6):
        readings = [meter_power_w(world, s, key, 0.0, averaging_s) for key in range(2000)]
        expected = math.hypot(1e-12 / math.sqrt(averaging_s), 1e-13)
        assert np.std(readings) == pytest.approx(expected, rel=0.07)  # 4 / sqrt(2 * 2000)
        assert np.mean(readings) == pytest.approx(-5e-12, abs=4 * expected / math.sqrt(2000))


def test_dark_is_dark(settings):
    s = settings(signal_on=False, lo_on=False)
    world = demo()
    assert receiver_power_w(world, s, 0.0) == lo_port_power_w(world, s) == diode_peak_power_w(world, s) == 0.0
    assert abs(photocurrent_a(world, s, 1, 0.0)) < 6 * world.receiver.monitor_noise_a
    assert len(capture_codes(world, s, 1, 0.0)) == 4


def test_diode_sees_the_coherent_crest(ideal, settings):
    # fields add: (sqrt(20/8) + sqrt(1/4))^2 mW, where powers would add to 2.74 mW
    s = settings(signal_power_dbm=0.0, lo_power_dbm=13.0)
    assert diode_peak_power_w(ideal, s) == pytest.approx(4.33e-3, abs=0.01e-3)
    assert damaged_by(ideal, 7.9e-3) == frozenset()
    assert damaged_by(ideal, 8.0e-3) == {"XI", "XQ", "YI", "YQ"}  # 9 dBm is 7.94 mW


def test_monitor_sums_all_diodes(ideal, settings):
    s = settings(signal_power_dbm=0.0, lo_power_dbm=10.0)
    assert photocurrent_a(ideal, s, 1, 0.0) == pytest.approx(11e-3)
    assert photocurrent_a(ideal, replace(s, bias=False), 1, 0.0) == 0.0
    lossy = replace(ideal, receiver=replace(ideal.receiver, excess_loss_db=3.0, responsivity_a_per_w=0.8))
    assert photocurrent_a(lossy, s, 1, 0.0) == pytest.approx(0.8 * 11e-3 / 10**0.3)


def test_same_arguments_same_bytes(settings):
    world, s = demo(), settings(signal_power_dbm=10.0, attenuation_db=24.0, ranges_v=(0.3,) * 4, coupling="AC")
    s = replace(s, record_length=20_000)

    def capture(key=3, planned_time_s=1234.5):
        return b"".join(lane.tobytes() for lane in capture_codes(world, s, key, planned_time_s))

    first = capture()
    assert len(first) == 80_000
    capture(key=4)  # nothing in between leaves a trace
    assert capture() == first
    assert capture(key=4) != first
    assert capture(planned_time_s=9999.0) != first


def test_imperfections_do_not_share_randomness(settings):
    """The converter's noise is the same numbers whether or not a laser has intensity noise."""
    world = replace(demo(), local_oscillator=Laser())
    s = settings(signal_on=False, lo_on=False, record_length=20_000, ranges_v=(0.3,) * 4)
    quiet = capture_codes(world, s, 3, 0.0)
    noisy = capture_codes(replace(world, local_oscillator=Laser(1e6, -140.0)), s, 3, 0.0)
    for one, other in zip(quiet, noisy, strict=True):
        np.testing.assert_array_equal(one, other)


def test_drift_needs_no_history():
    drift = Drift(seed=3)
    times_s = np.linspace(0.0, 43_200.0, 200)
    forward = [drifted(drift, "power", 0.05, t) for t in times_s]
    backward = [drifted(drift, "power", 0.05, t) for t in times_s[::-1]]
    assert forward == backward[::-1]
    assert forward != [drifted(drift, "other", 0.05, t) for t in times_s]
    assert forward != [drifted(Drift(seed=4), "power", 0.05, t) for t in times_s]


def test_drift_has_its_stated_size_and_is_slow():
    drift = Drift(seed=5)
    values = np.array([drifted(drift, "power", 0.05, t) for t in np.arange(0.0, 60 * 86_400.0, 601.0)])
    assert np.std(values) == pytest.approx(0.05, rel=0.05)  # sixty days of half-day waves
    assert abs(np.mean(values)) < 0.002
    seconds = np.array([drifted(drift, "power", 0.05, t) for t in np.arange(0.0, 600.0)])
    # eight sinusoids of amplitude 0.025, the fastest of 600 s: below 1e-3 a second together
    assert np.max(np.abs(np.diff(seconds))) < 1e-3
    assert drifted(drift, "power", 0.0, 77.0) == 0.0


def test_drift_reaches_power_tap_and_frequency(settings):
    s, times_s = settings(), np.arange(0.0, 60 * 86_400.0, 3001.0)
    moving = World(drift=Drift(power_db=0.1, frequency_hz=50e6, tap_db=0.05))
    tap_db = [dbm(meter_power_w(moving, s, 1, t, 1.0)) for t in times_s]
    plane_db = [dbm(receiver_power_w(moving, s, t)) for t in times_s]
    assert np.std(tap_db) == pytest.approx(0.1, rel=0.05)  # sixty days of half-day waves
    assert np.std(np.subtract(plane_db, tap_db)) == pytest.approx(0.05, rel=0.05)
    assert np.std([dbm(lo_port_power_w(moving, s, t)) for t in times_s]) == pytest.approx(0.1, rel=0.05)
    # two lasers, each of the stated wander
    assert np.std([beat_frequency_hz(moving, s, t) for t in times_s]) == pytest.approx(50e6 * math.sqrt(2), rel=0.05)


def test_shipped_world_serves_the_shipped_bench():
    world, bench = demo(), tomllib.loads((FOLDER / "bench.toml").read_text())
    assert world.serial_numbers == {role: table["serial_number"] for role, table in bench["role"].items()}
    belief_db = float(bench["plane_minus_tap"]["value"].split()[0])
    # the record may be wrong by what its certificate and mating allow, three times over
    assert abs(plane_minus_tap_db(world) - belief_db) < 3 * math.hypot(0.03, 0.03)
    for name in world.instruments.values():
        assert (FOLDER / f"{name}.toml").exists()


def test_every_mistake_of_a_world_is_listed():
    text = (FOLDER / "world.toml").read_text()
    text = text.replace('receiver = "receiver"', "").replace("[receiver.lane.YQ]", "[receiver.lane.Z]")
    text = text.replace('bandwidth = "22 GHz"', 'bandwidht = "22 GHz"').replace('skew = "2.0 ps"', "skew = 2.0")
    keys = [problem.key for problem in read_world(text, "world.toml").problems]
    assert sorted(keys) == [
        "instruments.receiver",
        "receiver.bandwidht",
        "receiver.lane.XQ.skew",
        "receiver.lane.Z",
    ]


def test_empty_world_is_ideal():
    document = read_world("", "world.toml")
    assert document.value == World()
    assert len(document.problems) == 14  # it serves nobody: an instrument and a serial number for each of seven roles
