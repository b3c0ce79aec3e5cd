"""Lanes of the whole receiver: beat, gain, noise of a dark lane, bandwidth, skew, coupling, clock, codes."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
import scipy.signal

from owlight.simulation.optics import capture_codes
from owlight.simulation.optics.capture import lane_volts
from owlight.simulation.optics.digitiser import bessel_response, quantised, sampled
from owlight.simulation.optics.keys import generator
from owlight.simulation.world import LANES, Drift, Lane, Laser, Oscilloscope, Path, Receiver

ELECTRON_C = 1.602176634e-19


def watts(dbm):
    return 1e-3 * 10 ** (dbm / 10)


def line_hz(wave, rate_hz):
    """Where the strongest spectral line is, to a small part of a bin."""
    spectrum = np.abs(np.fft.fft(wave * np.blackman(wave.size)))
    top = int(np.argmax(spectrum))
    low, mid, high = np.log(spectrum[[top - 1, top, (top + 1) % wave.size]])
    offset = (low - high) / (2 * (low - 2 * mid + high))
    return ((top + offset + wave.size / 2) % wave.size - wave.size / 2) * rate_hz / wave.size


def changed(world, **receiver):
    return replace(world, receiver=replace(world.receiver, **receiver))


def lanes_of(world, **lane):
    return changed(world, lane={name: Lane(**lane) for name in LANES})


@pytest.mark.parametrize("detuning_hz", [3e9, -7.5e9])
def test_detuned_oscillator_beats_there(ideal, settings, detuning_hz):
    world = replace(ideal, local_oscillator=Laser(frequency_error_hz=-detuning_hz))
    volts = lane_volts(world, settings(drive_on=False), 1, 0.0)
    for i, q in (volts[:2], volts[2:]):
        # G. P. Agrawal, Fiber-Optic Communication Systems, 10.1: the intermediate frequency is the difference
        assert line_hz(i + 1j * q, 80e9) == pytest.approx(detuning_hz, abs=0.05 * 80e9 / 100_000)


def test_wavelengths_set_the_beat(ideal, settings):
    volts = lane_volts(ideal, settings(drive_on=False, lo_wavelength_nm=1550.02), 1, 0.0)
    expected_hz = 299792458.0 / 1550e-9 - 299792458.0 / 1550.02e-9
    assert line_hz(volts[0] + 1j * volts[1], 80e9) == pytest.approx(expected_hz, abs=0.05 * 80e9 / 100_000)


def test_beat_out_of_band_leaves_noise(ideal, settings):
    world = changed(ideal, bandwidth_hz=22e9)
    dark = lane_volts(world, settings(signal_on=False), 1, 0.0)
    far = lane_volts(world, settings(lo_wavelength_nm=1560.0), 1, 0.0)
    for seen, noise in zip(far, dark, strict=True):
        assert np.std(seen) == pytest.approx(np.std(noise), rel=0.02)


def test_amplitude_is_that_of_even_splitting(ideal, settings):
    volts = lane_volts(ideal, settings(drive_on=False), 1, 0.0)
    # dual polarisation, everything split evenly: (R/2) sqrt(Ps Plo) of the total powers
    # Kikuchi 2016 section III with half of each power at either hybrid
    expected = 0.5 * math.sqrt(watts(-30) * watts(13))
    for i, q in (volts[:2], volts[2:]):
        assert abs(np.mean(i + 1j * q)) == pytest.approx(expected, rel=1e-3)  # shot noise averages to 2e-4


def test_oscillator_gives_gain(ideal, settings):
    amplitudes = [
        abs(np.mean(volts[0] + 1j * volts[1]))
        for volts in (lane_volts(ideal, settings(drive_on=False, lo_power_dbm=p), 1, 0.0) for p in (4.0, 10.0, 16.0))
    ]
    # amplitude as the square root of LO power: 12 dB more power, 6 dB (a factor of 3.98) more amplitude
    assert amplitudes[2] / amplitudes[0] == pytest.approx(10 ** (12 / 20), rel=2e-3)
    assert amplitudes[1] / amplitudes[0] == pytest.approx(10 ** (6 / 20), rel=2e-3)


def dark_density(world, s, key=1):
    """One-sided A^2/Hz of a lane with the signal off, white up to half the rate."""
    return np.var(lane_volts(world, s, key, 0.0)[0]) / (s.sample_rate_hz / 2)


@pytest.mark.parametrize("rejection_db", [None, 20.0, 12.0])
def test_dark_lane_noise_adds_up(ideal, settings, rejection_db):
    world = changed(lanes_of(ideal, common_mode_rejection_db=rejection_db), thermal_noise_a_per_sqrt_hz=20e-12)
    world = replace(world, local_oscillator=Laser(intensity_noise_db_per_hz=-145.0))
    found = dark_density(world, settings(signal_on=False, record_length=250_000))
    pair_a = watts(13) / 4  # at 1 A/W a lane's pair sees a quarter
    left = 0.0 if rejection_db is None else 10 ** (-rejection_db / 20)
    expected = 2 * ELECTRON_C * pair_a + 20e-12**2 + 10**-14.5 * (left * pair_a) ** 2
    # form as in B. Zhang et al., Optics Express 20(3), 2012; four standard deviations of a variance
    assert found == pytest.approx(expected, rel=4 * math.sqrt(2 / 250_000))


def test_oscillator_intensity_noise_is_common_to_all_lanes(ideal, settings):
    """One laser lights every pair: what balancing leaves is the same noise in each lane, shot noise is its own."""
    world = replace(lanes_of(ideal, common_mode_rejection_db=10.0), local_oscillator=Laser(0.0, -125.0))
    noisy = np.corrcoef(lane_volts(world, settings(signal_on=False), 1, 0.0))
    quiet = np.corrcoef(lane_volts(ideal, settings(signal_on=False), 1, 0.0))
    assert np.min(noisy) > 0.95
    assert np.max(np.abs(quiet - np.eye(4))) < 5 / math.sqrt(100_000)


def test_dark_of_all_light_is_thermal(ideal, settings):
    world = changed(ideal, thermal_noise_a_per_sqrt_hz=18e-12)
    found = dark_density(world, settings(signal_on=False, lo_on=False))
    assert found == pytest.approx(18e-12**2, rel=4 * math.sqrt(2 / 100_000))


def test_best_oscillator_power_is_where_noises_meet(ideal, settings):
    """Signal grows as the LO's current, so current over noise density has its top where thermal meets residual RIN."""
    world = changed(lanes_of(ideal, common_mode_rejection_db=12.0), thermal_noise_a_per_sqrt_hz=20e-12)
    world = replace(world, local_oscillator=Laser(intensity_noise_db_per_hz=-145.0))
    best_a = 20e-12 / (10**-7.25 * 10**-0.6)  # B. Zhang et al., Optics Express 20(3), 2012: 1.416 mA here
    steps = np.log([1 / 3, 1 / 2, 1 / 1.4, 1.0, 1.4, 2.0, 3.0])
    noise_per_a = []
    for step in steps:
        pair_a = best_a * math.exp(step)
        s = settings(signal_on=False, lo_power_dbm=10 * math.log10(4 * pair_a / 1e-3), record_length=200_000)
        noise_per_a.append(dark_density(world, s) / pair_a)
    # cosh(step) times a constant plus shot noise, which is flat: fit both and a shift of the centre
    shift = np.linspace(-0.3, 0.3, 601)
    residues = [
        np.linalg.lstsq(np.column_stack([np.ones(7), np.cosh(steps - d)]), np.array(noise_per_a), rcond=None)[1][0]
        for d in shift
    ]
    assert shift[int(np.argmin(residues))] == pytest.approx(0.0, abs=0.03)  # 3 %: noise of seven densities of 0.3 %


def test_bandwidth_is_a_bessel_filter():
    f = np.linspace(0.0, 40e9, 200)
    b, a = scipy.signal.bessel(4, 2 * np.pi * 22e9, analog=True, norm="mag")
    _, reference = scipy.signal.freqs(b, a, 2 * np.pi * f)
    found = bessel_response(f, 22e9)
    np.testing.assert_allclose(np.abs(found), np.abs(reference), rtol=1e-9)
    # the same but for a constant delay
    slope = np.unwrap(np.angle(found / reference))
    np.testing.assert_allclose(slope, np.polyval(np.polyfit(f, slope, 1), f), atol=1e-9)
    assert abs(bessel_response(np.array([22e9]), 22e9)[0]) ** 2 == pytest.approx(0.5, rel=1e-12)
    assert np.angle(bessel_response(np.array([1e9]), 22e9))[0] == pytest.approx(0.0, abs=1e-6)  # a lane's skew is all


@pytest.mark.parametrize("skew_s", [3e-12, -1.5e-12])
def test_positive_skew_arrives_late(ideal, settings, skew_s):
    world = changed(ideal, lane={"XQ": Lane(skew_s=skew_s)})
    world = replace(world, signal_laser=Laser(frequency_error_hz=8e9))
    s = settings(drive_on=False, signal_power_dbm=0.0)
    straight, skewed = lane_volts(world, s, 1, 0.0)[:2]
    tone = np.exp(-2j * np.pi * 8e9 * np.arange(s.record_length) / 80e9)
    i, q = np.vdot(tone.conj(), straight), np.vdot(tone.conj(), skewed)
    # Q of exp(j w t) lags I by 90 degrees, and by w tau more where it is late
    lag = -np.angle(q / i) - math.pi / 2
    assert lag / (2 * math.pi * 8e9) == pytest.approx(skew_s, abs=2e-14)  # shot noise: 2e-15 s


def test_gain_scales_a_lane(ideal, settings):
    s = settings(drive_on=False)
    world = changed(ideal, lane={"YI": Lane(gain_db=6.0, offset_v=0.0)})
    plain, raised = (lane_volts(w, s, 1, 0.0)[2] for w in (ideal, world))
    np.testing.assert_allclose(raised, plain * 10 ** (6 / 20), rtol=1e-12)
    louder = lane_volts(ideal, replace(s, gain_db=-3.0), 1, 0.0)[2]
    np.testing.assert_allclose(louder, plain * 10 ** (-3 / 20), rtol=1e-12)


def test_automatic_gain_holds_the_swing(ideal, settings):
    for power_dbm in (-40.0, -20.0):
        s = settings(signal_power_dbm=power_dbm, gain_control="automatic")
        for lane in lane_volts(ideal, s, 1, 0.0):
            assert np.std(lane) == pytest.approx(ideal.receiver.automatic_rms_v, rel=1e-9)


def test_coupling_decides_about_the_constant(ideal, settings):
    world = lanes_of(ideal, common_mode_rejection_db=20.0)
    s = settings(signal_on=False)
    constant = 0.1 * watts(13) / 4  # the residue of balancing a quarter of the LO at 1 A/W
    assert np.mean(lane_volts(world, s, 1, 0.0)[0]) == pytest.approx(constant, rel=1e-3)
    assert abs(np.mean(lane_volts(world, replace(s, coupling="AC"), 1, 0.0)[0])) < 1e-3 * constant


def test_direct_detection_appears_with_mismatch(ideal, settings):
    world = lanes_of(ideal, common_mode_rejection_db=20.0)
    s = settings(lo_on=False, signal_power_dbm=10.0)
    found = lane_volts(world, s, 1, 0.0)[0]
    assert np.mean(found) == pytest.approx(0.1 * watts(10) / 4, rel=0.01)  # mean power of random symbols
    assert np.std(found) > 0.1 * np.mean(found)  # a filtered QPSK envelope is not constant
    assert abs(np.mean(lane_volts(ideal, s, 1, 0.0)[0])) < 1e-3 * np.mean(found)


def test_fast_clock_sees_slow_light(ideal, settings):
    world = replace(ideal, signal_laser=Laser(frequency_error_hz=5e9), oscilloscope=Oscilloscope(clock_error_ppm=500.0))
    volts = lane_volts(world, settings(drive_on=False), 1, 0.0)
    # samples come closer together, so a tone turns less from one to the next
    assert line_hz(volts[0] + 1j * volts[1], 80e9) == pytest.approx(5e9 / 1.0005, abs=0.05 * 80e9 / 100_000)


def test_polarisation_turns_evenly(ideal, settings):
    rate = 2e6
    world = replace(ideal, path=Path(rotation_rad_per_s=rate))
    s = settings(drive_on=False, polarisations=1, signal_power_dbm=0.0)
    volts = lane_volts(world, s, 1, 0.0)
    x, y = volts[0] + 1j * volts[1], volts[2] + 1j * volts[3]
    angle = np.arctan2((y * np.exp(-1j * np.angle(x[0]))).real, (x * np.exp(-1j * np.angle(x[0]))).real)
    t = np.arange(s.record_length) / 80e9
    slope, start = np.polyfit(t, np.unwrap(angle), 1)
    assert slope == pytest.approx(rate, rel=1e-3)
    assert start == pytest.approx(0.0, abs=1e-3)
    assert np.std(np.abs(x) ** 2 + np.abs(y) ** 2) < 0.02 * np.mean(np.abs(x) ** 2)


@pytest.mark.parametrize("drive_on", [False, True])
def test_polarisation_keeps_all_power(ideal, settings, drive_on):
    """The same data in both polarisations add as fields: only a true rotation keeps their power."""
    world = replace(ideal, drift=Drift(polarisation_deg=90.0), path=Path(rotation_rad_per_s=1e5))
    s = settings(drive_on=drive_on, signal_power_dbm=0.0, offsets=(0, 3178, 0, 3178), record_length=30_000)
    shares = []
    for planned_time_s in (0.0, 2e4, 5e4, 9e4):
        powers = [np.mean(lane**2) for lane in lane_volts(world, s, 1, planned_time_s)]
        # R^2 Ps Plo / 4 in either quadrature of both hybrids together; drift moves power from one to the other
        assert sum(powers) == pytest.approx(watts(0) * watts(13) / 2, rel=0.02)  # 12,000 random symbols
        shares.append((powers[0] + powers[1]) / sum(powers))
    assert np.ptp(shares) > 0.3


def test_quadrature_error_is_beyond_ninety_degrees(ideal, settings):
    world = replace(
        changed(ideal, quadrature_error_x_deg=7.0, quadrature_error_y_deg=-4.0), signal_laser=Laser(0, None, 0, 3e9)
    )
    volts = lane_volts(world, settings(drive_on=False, signal_power_dbm=0.0), 1, 0.0)
    # I = cos a and Q = sin(a - error) have the correlation -sin(error)
    for pair, error_deg in ((volts[:2], 7.0), (volts[2:], -4.0)):
        assert -math.degrees(math.asin(np.corrcoef(*pair)[0, 1])) == pytest.approx(error_deg, abs=0.02)


def test_linewidth_is_a_random_walk(ideal, settings):
    world = replace(ideal, signal_laser=Laser(linewidth_hz=60e6), local_oscillator=Laser(linewidth_hz=40e6))
    s = settings(drive_on=False, signal_power_dbm=10.0)
    volts = lane_volts(world, s, 1, 0.0)
    phase = np.unwrap(np.angle(volts[0] + 1j * volts[1]))
    # variance of a phase step: 2 pi (sum of linewidths) tau; C. Henry, IEEE J. Quantum Electron. 18(2), 259, 1982
    for steps in (1, 100):
        moved = phase[steps::steps] - phase[:-steps:steps]
        expected = 2 * math.pi * 100e6 * steps / 80e9
        assert np.mean(moved**2) == pytest.approx(expected, rel=4 * math.sqrt(2 / moved.size))
    starts = [np.angle(v[0][0] + 1j * v[1][0]) for v in (lane_volts(ideal, s, key, 0.0) for key in range(12))]
    assert np.ptp(starts) > 2.0  # every capture starts anywhere


def test_intensity_noise_of_the_signal(ideal, settings):
    world = replace(ideal, signal_laser=Laser(intensity_noise_db_per_hz=-130.0))
    s = settings(drive_on=False, signal_power_dbm=10.0)
    volts = lane_volts(world, s, 1, 0.0)
    power = np.abs(volts[0] + 1j * volts[1]) ** 2
    expected = 10**-13.0 * 40e9  # one-sided density up to half the rate
    assert np.var(power) / np.mean(power) ** 2 == pytest.approx(expected, rel=0.04)  # shot noise adds 1 %


def test_no_bias_no_light(ideal, settings):
    assert np.all(lane_volts(ideal, settings(bias=False), 1, 0.0)[0] == 0.0)


def test_damaged_pair_is_unbalanced(ideal, settings):
    whole = lane_volts(ideal, settings(), 1, 0.0)
    damaged = lane_volts(ideal, settings(), 1, 0.0, frozenset({"XQ"}))
    np.testing.assert_array_equal(whole[0], damaged[0])
    assert np.mean(damaged[1]) == pytest.approx(-watts(13) / 8, rel=0.01)  # only the minus diode is left
    assert abs(np.mean(whole[1])) < 0.01 * watts(13) / 8


# IEEE Std 1241: a full-scale sine over noise and distortion is 6.02 N + 1.76 dB
@pytest.mark.parametrize(("bits", "tolerance"), [(None, 0.04), (7.0, 0.015), (5.5, 0.015), (4.0, 0.015)])
def test_effective_bits_by_sine(bits, tolerance):
    angle, fill = 2 * np.pi * 0.0371281 * np.arange(100_000), 0.7  # not full, so that no crest clips
    codes = quantised(0.5 * fill * np.sin(angle), 1.0, Oscilloscope(effective_bits=bits), generator(3, "sine"))
    shape = np.column_stack([np.sin(angle), np.cos(angle), np.ones(angle.size)])
    fitted = shape @ np.linalg.lstsq(shape, codes.astype(float), rcond=None)[0]
    sinad_db = 10 * math.log10(np.var(fitted) / np.mean((codes - fitted) ** 2)) - 20 * math.log10(fill)
    # a variance of 100,000 values is good to 0.45 %, four of it are 0.013 bit; without noise the rounding error of a
    # sine is not quite uniform: 4 % of power at this amplitude
    assert (sinad_db - 1.76) / 6.02 == pytest.approx(8.0 if bits is None else bits, abs=tolerance)


def test_range_clips_at_its_ends():
    ramp = np.linspace(-2.0, 2.0, 4001)
    codes = quantised(ramp, 1.0, Oscilloscope(), generator(1, "none"))
    assert codes.dtype == np.int8
    assert (codes.min(), codes.max()) == (-128, 127)
    inside = np.abs(ramp) < 0.49
    assert np.max(np.abs(codes[inside] / 256 - ramp[inside])) <= 0.5 / 256 + 1e-12


def test_codes_are_the_scaled_volts(ideal, settings):
    world = changed(ideal, lane={"XI": Lane(offset_v=2e-5)})
    s = settings(ranges_v=(2e-4, 4e-4, 2e-4, 4e-4))
    volts, codes = lane_volts(world, s, 5, 0.0), capture_codes(world, s, 5, 0.0)
    for lane, code, range_v in zip(volts, codes, s.ranges_v, strict=True):
        assert np.max(np.abs(code * range_v / 256 - np.clip(lane, -range_v / 2, range_v * 127 / 256))) <= range_v / 511
    assert np.mean(codes[0]) * 2e-4 / 256 == pytest.approx(2e-5, rel=0.05)


def test_sampling_thins_out_exactly():
    n = np.arange(4096)
    wave = np.cos(2 * np.pi * 100 * n / 4096)
    np.testing.assert_allclose(sampled(wave.copy(), 1.0, 2, None, 0.0, None), wave[::2], atol=1e-12)


def test_receiver_file_default_is_perfect():
    assert Receiver().lane_of("XI") == Lane()


def test_record_too_slow_for_its_light_is_refused(ideal, settings):
    with pytest.raises(ValueError, match="take a shorter record"):
        lane_volts(ideal, settings(sample_rate_hz=1e9, record_length=4_000_000), 1, 0.0)
