"""An ideal bench to start from, and a receiver that is told everything but the noise."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import numpy.typing as npt
import pytest

from owlight.modulation import root_raised_cosine_spectrum
from owlight.simulation.optics import LightSettings
from owlight.simulation.optics.capture import instants_of, lane_volts
from owlight.simulation.optics.transmitter import GUARD_SYMBOLS, fraction_of, start_of, symbols
from owlight.simulation.world import Receiver, World

Complex = npt.NDArray[np.complex128]
_EDGE_SYMBOLS = 200  # a finite record lacks the far tails of its first and last pulses


@pytest.fixture
def ideal() -> World:
    """No loss, no error, one volt an ampere; shot noise alone."""
    return World(receiver=Receiver(transimpedance_v_per_a=1.0))


@pytest.fixture
def settings() -> Callable[..., LightSettings]:
    """Settings with every light on, changed by keyword."""
    usual = LightSettings(
        signal_on=True,
        signal_power_dbm=-30.0,
        signal_wavelength_nm=1550.0,
        lo_on=True,
        lo_power_dbm=13.0,
        lo_wavelength_nm=1550.0,
        attenuation_db=0.0,
        drive_on=True,
        modulation="QPSK",
        symbol_rate_bd=32e9,
        polarisations=2,
        rolloff=0.1,
        pattern_order=15,
        offsets=(0, 3178, 9760, 10855),
        sample_rate_hz=80e9,
        record_length=100_000,
        ranges_v=(1e-3,) * 4,
        coupling="DC",
        bias=True,
        gain_db=0.0,
        gain_control="manual",
    )
    return lambda **changes: replace(usual, **changes)


@pytest.fixture
def genie() -> Callable[[World, LightSettings, int], tuple[Complex, Complex]]:
    """Matched-filtered symbols and those sent, both (2, symbols): told the pattern's place, the trigger, the phase."""

    def receive(world: World, s: LightSettings, key: int) -> tuple[Complex, Complex]:
        at, every = instants_of(world, s, 0.0)
        volts = lane_volts(world, s, key, 0.0)
        lanes = np.array([volts[0] + 1j * volts[1], volts[2] + 1j * volts[3]])
        rate_hz, length = at.rate_hz / every, s.record_length
        per_symbol = rate_hz / s.symbol_rate_bd
        lead_symbols = (at.lead / every) / per_symbol
        first = int(np.ceil(GUARD_SYMBOLS + fraction_of(key) + lead_symbols)) + _EDGE_SYMBOLS
        count = int(length / per_symbol) - 2 * _EDGE_SYMBOLS
        delay_symbols = first - GUARD_SYMBOLS - fraction_of(key) - lead_symbols
        f = np.fft.fftfreq(length, 1.0 / per_symbol)
        filtered = (
            np.fft.fft(lanes) * root_raised_cosine_spectrum(f, s.rolloff) * np.exp(2j * np.pi * f * delay_symbols)
        )
        # so many samples a symbol that every symbol falls on one
        step = round(per_symbol) if per_symbol == round(per_symbol) else round(2 * per_symbol)
        fine_length = round(length * step / per_symbol)
        wide = np.zeros((2, fine_length), dtype=np.complex128)
        wide[:, : length // 2] = filtered[:, : length // 2]
        wide[:, -(length // 2) :] = filtered[:, -(length // 2) :]
        received = np.fft.ifft(wide)[:, : count * step : step]
        sent = symbols(s, start_of(s, key), first + count)[:, first:]
        # one complex factor a polarisation, from the data: amplitude and phase of the light
        for axis in range(s.polarisations):
            received[axis] /= np.vdot(sent[axis], received[axis]) / np.vdot(sent[axis], sent[axis])
        return received, sent

    return receive
