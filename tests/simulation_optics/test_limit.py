"""The shot-noise limit, by counting errors behind a receiver that is told everything but the noise."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import erfcinv

from owlight.modulation import bits_of_labels, constellation
from owlight.simulation.world import Lane, Laser, Receiver, Transmitter

PHOTON_J = 6.62607015e-34 * 299792458.0 / 1550e-9
UNIT_EFFICIENCY_A_PER_W = 1.602176634e-19 / PHOTON_J


@pytest.fixture
def quantum(ideal):
    return replace(ideal, receiver=Receiver(responsivity_a_per_w=UNIT_EFFICIENCY_A_PER_W, transimpedance_v_per_a=1.0))


def snr_db(received, sent):
    """Es/N0 of each polarisation, unbiased."""
    return [
        10 * np.log10(np.mean(np.abs(s) ** 2) / np.mean(np.abs(r - s) ** 2))
        for r, s in zip(received, sent, strict=True)
    ]


def labels_of(symbols, modulation):
    points = constellation(modulation)
    return np.argmin(np.abs(symbols[..., None] - points), axis=-1)


def test_counted_errors_meet_the_limit(quantum, settings, genie):
    # J. G. Proakis, Digital Communications: Gray QPSK has BER erfc(sqrt(Es/N0 / 2)) / 2. Behind a 90 degree hybrid
    # Es/N0 is the number of photons a symbol (Kikuchi 2016): 7.1254 for 3.8e-3, so -45.343 dBm a polarisation.
    s = settings(signal_power_dbm=-45.343 + 3.0103, lo_power_dbm=16.0, record_length=250_000)
    errors = bits = 0
    for key in range(5):
        received, sent = genie(quantum, s, key)
        wrong = labels_of(received, "QPSK") ^ labels_of(sent, "QPSK")
        errors += int(bits_of_labels(wrong, 2).sum())
        bits += 2 * wrong.size
    assert bits > 1_900_000
    counted_db = 10 * np.log10(2 * erfcinv(2 * errors / bits) ** 2)
    # 7,500 errors: 1.2 % of BER is 0.013 dB, and five of it; asked for are 0.1 dB
    assert counted_db == pytest.approx(10 * np.log10(7.1254), abs=0.065)


@pytest.mark.parametrize(
    ("changes", "photons"),
    [
        pytest.param({"modulation": "16QAM"}, 33.0565, id="16QAM"),
        pytest.param({"polarisations": 1}, 7.1254, id="one polarisation"),
        pytest.param({"sample_rate_hz": 64e9}, 7.1254, id="fields finer than samples"),
        pytest.param({"rolloff": 0.5, "symbol_rate_bd": 16e9}, 20.0, id="another pulse"),
    ],
)
def test_snr_is_photons_a_symbol(quantum, settings, genie, changes, photons):
    s = settings(lo_power_dbm=16.0, **changes)
    total_w = photons * PHOTON_J * s.symbol_rate_bd * s.polarisations
    received, sent = genie(quantum, replace(s, signal_power_dbm=10 * np.log10(total_w / 1e-3)), 7)
    found = snr_db(received[: s.polarisations], sent[: s.polarisations])
    # 20,000 symbols at least: 0.031 dB, and three of it
    assert found == pytest.approx([10 * np.log10(photons)] * s.polarisations, abs=0.095)


def test_thermal_noise_costs_what_it_adds(quantum, settings, genie):
    pair_a = UNIT_EFFICIENCY_A_PER_W * 1e-3 * 10**1.3 / 4
    shot = 2 * 1.602176634e-19 * pair_a
    world = replace(quantum, receiver=replace(quantum.receiver, thermal_noise_a_per_sqrt_hz=shot**0.5))
    s = settings(signal_power_dbm=-40.0)
    cost = [a - b for a, b in zip(snr_db(*genie(quantum, s, 1)), snr_db(*genie(world, s, 1)), strict=True)]
    assert cost == pytest.approx([3.0103] * 2, abs=0.1)  # equal densities; 0.03 dB from two finite counts


def test_transmitter_noise_is_a_ceiling(quantum, settings, genie):
    world = replace(quantum, transmitter=Transmitter(noise_ceiling_db=20.0))
    for power_dbm in (-20.0, 0.0):
        photons = 1e-3 * 10 ** (power_dbm / 10) / 2 / (PHOTON_J * 32e9)
        found = snr_db(*genie(world, settings(signal_power_dbm=power_dbm), 1))
        # noises add; 40,000 symbols are good to 0.022 dB, and four of it
        assert found == pytest.approx([-10 * np.log10(0.01 + 1 / photons)] * 2, abs=0.09)


def test_mismatch_alone_changes_no_signal(quantum, settings, genie):
    lanes = dict.fromkeys(("XI", "XQ", "YI", "YQ"), Lane(common_mode_rejection_db=20.0))
    world = replace(quantum, receiver=replace(quantum.receiver, lane=lanes))
    s = settings(signal_power_dbm=-40.0)
    plain, unlike = snr_db(*genie(quantum, s, 1)), snr_db(*genie(world, replace(s, coupling="AC"), 1))
    assert unlike == pytest.approx(plain, abs=0.05)  # without intensity noise there is nothing to let through


def test_intensity_noise_costs_through_mismatch(quantum, settings, genie):
    lanes = dict.fromkeys(("XI", "XQ", "YI", "YQ"), Lane(common_mode_rejection_db=20.0))
    pair_a = UNIT_EFFICIENCY_A_PER_W * 1e-3 * 10**1.3 / 4
    shot = 2 * 1.602176634e-19 * pair_a
    rin = shot / (0.1 * pair_a) ** 2
    noisy = replace(quantum, local_oscillator=Laser(intensity_noise_db_per_hz=10 * np.log10(rin)))
    noisy = replace(noisy, receiver=replace(quantum.receiver, lane=lanes))
    s = settings(signal_power_dbm=-40.0, coupling="AC")
    cost = [a - b for a, b in zip(snr_db(*genie(quantum, s, 1)), snr_db(*genie(noisy, s, 1)), strict=True)]
    assert cost == pytest.approx([3.0103] * 2, abs=0.1)
