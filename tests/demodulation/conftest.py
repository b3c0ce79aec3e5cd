"""A transmission of its own for these tests: it shares nothing with the demodulation, nor with the simulated bench."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from scipy import fft, interpolate, signal

from owlight.demodulation import Chain, LaneBelief, make_chain
from owlight.vocabulary.captures import Capture, CaptureId, Demodulation, Lane
from owlight.vocabulary.plan import Signal
from owlight.vocabulary.values import Stamp

OVERSAMPLING = 5
NAMES = {1: ("I", "Q"), 2: ("XI", "XQ", "YI", "YQ")}


@dataclass(frozen=True)
class Link:
    """Symbols in, lanes out. `snr_db` is Es/N0 a polarisation in front of the receiver; ideal where not told."""

    symbols: int = 100_000
    snr_db: float = 8.8
    seed: int = 1
    polarisations: int = 2
    symbol_rate_bd: float = 32e9
    sample_rate_hz: float = 80e9
    rolloff: float = 0.1
    order: int = 15
    offsets: tuple[int, ...] = (0, 3178, 9760, 10855)
    bandwidth_hz: float | None = None
    effective_bits: float | None = None
    quadrature_deg: float = 0.0
    gain_db: float = 0.0
    skews_s: tuple[float, ...] = (0.0, 0.0, 0.0, 0.0)
    clock_ppm: float = 0.0
    offset_hz: float = 0.0
    linewidth_hz: float = 0.0
    rotation_rad_per_s: float = 0.0
    group_delay_difference_s: float = 0.0
    injected: tuple[int, ...] = ()
    noise_only: bool = False

    def impaired(self) -> Link:
        """Everything that a decent receiver does to a signal."""
        return replace(
            self,
            bandwidth_hz=22e9,
            effective_bits=5.5,
            quadrature_deg=3.0,
            gain_db=0.5,
            skews_s=(0.0, 2e-12, -1.5e-12, 3e-12),
            clock_ppm=2.0,
            offset_hz=200e6,
            linewidth_hz=100e3,
            rotation_rad_per_s=1e3,
            group_delay_difference_s=8e-12,
        )


@dataclass(frozen=True)
class Sent:
    """`snr_db` counts the converter's noise in; `sent` are the symbols, (polarisations, symbols)."""

    capture: Capture
    snr_db: float
    sent: npt.NDArray[np.complex128]


def transmit(link: Link) -> Sent:
    rng = np.random.default_rng(link.seed)
    sent = _symbols(link, rng)
    x = _fields(link, sent, rng)
    lanes, converter = _lanes(link, x, rng)
    snr = 1.0 / (10 ** (-link.snr_db / 10) + converter)
    named = zip(NAMES[link.polarisations], lanes, strict=True)
    made = tuple(Lane(name, codes, 1e-3, 0.0, 0.0, f"{link.seed}{name}") for name, codes in named)
    at = Stamp("2026-01-01T00:00:00Z", 0.0, 0)
    return Sent(Capture(CaptureId(0, 1, 1), at, link.sample_rate_hz, made, link.seed), 10 * np.log10(snr), sent)


def _symbols(link: Link, rng: np.random.Generator) -> npt.NDArray[np.complex128]:
    length = 2**link.order - 1
    taps = {7: [1], 9: [4], 11: [2], 15: [1]}[link.order]
    bits = signal.max_len_seq(link.order, state=np.ones(link.order), taps=taps)[0].astype(float)
    start = rng.integers(1, length)
    signs = [
        2 * bits[(start + o + np.arange(link.symbols)) % length] - 1 for o in link.offsets[: 2 * link.polarisations]
    ]
    signs[0][list(link.injected)] *= -1
    pairs = np.array(signs).reshape(link.polarisations, 2, -1)
    return (pairs[:, 0] + 1j * pairs[:, 1]) / np.sqrt(2)


def _fields(link: Link, sent: npt.NDArray[np.complex128], rng: np.random.Generator) -> npt.NDArray[np.complex128]:
    """The field in front of the receiver's hybrid, OVERSAMPLING values a symbol, unit symbol power."""
    n = link.symbols * OVERSAMPLING
    rate_hz = link.symbol_rate_bd * OVERSAMPLING
    f = fft.fftfreq(n, 1 / OVERSAMPLING)
    spectrum = np.tile(fft.fft(sent, axis=1), OVERSAMPLING) * _root_raised_cosine(f, link.rolloff) * OVERSAMPLING
    if link.polarisations == 2:
        angle = rng.uniform(0, np.pi / 2)
        delay = np.exp(-2j * np.pi * f * link.symbol_rate_bd * link.group_delay_difference_s / 2)
        turned = _turn(angle) @ spectrum
        spectrum = np.stack([turned[0] * delay, turned[1] / delay])
    x = fft.ifft(spectrum, axis=1)
    if link.noise_only:
        x *= 0
    t = np.arange(n) / rate_hz
    if link.polarisations == 2:
        start = rng.uniform(0, 2 * np.pi)
        angle = start + link.rotation_rad_per_s * t
        c, s = np.cos(angle), np.sin(angle) * np.exp(1j * rng.uniform(0, 2 * np.pi))
        x = np.stack([c * x[0] + s * x[1], -np.conj(s) * x[0] + c * x[1]])
    # N0 spread over the whole band of the oversampled signal: a variance OVERSAMPLING times that a symbol
    sigma = np.sqrt(10 ** (-link.snr_db / 10) * OVERSAMPLING / 2)
    x = x + sigma * (rng.standard_normal(x.shape) + 1j * rng.standard_normal(x.shape))
    steps = rng.standard_normal(n) * np.sqrt(2 * np.pi * link.linewidth_hz / rate_hz)
    return x * np.exp(1j * (rng.uniform(0, 2 * np.pi) + np.cumsum(steps) + 2 * np.pi * link.offset_hz * t))


def _turn(angle: float) -> npt.NDArray[np.float64]:
    return np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])


def _root_raised_cosine(f: npt.NDArray[np.float64], rolloff: float) -> npt.NDArray[np.float64]:
    raised = 0.5 * (1 + np.cos(np.pi / rolloff * np.clip(np.abs(f) - (1 - rolloff) / 2, 0, rolloff)))
    return np.sqrt(raised)


def _lanes(
    link: Link, x: npt.NDArray[np.complex128], rng: np.random.Generator
) -> tuple[list[npt.NDArray[np.int8]], float]:
    n, rate_hz = x.shape[1], link.symbol_rate_bd * OVERSAMPLING
    f = fft.fftfreq(n, 1 / rate_hz)
    response = (np.abs(f) < 0.49 * link.sample_rate_hz).astype(complex)  # no noise folds into the converter's band
    if link.bandwidth_hz is not None:
        b, a = signal.bessel(4, 2 * np.pi * link.bandwidth_hz, analog=True, norm="mag")
        response *= signal.freqs(b, a, 2 * np.pi * f)[1]
    error, gain = np.radians(link.quadrature_deg), 10 ** (link.gain_db / 40)
    at = np.arange(int(n / OVERSAMPLING * link.sample_rate_hz / link.symbol_rate_bd) - 8) + 4.0
    at *= rate_hz / (link.sample_rate_hz * (1 + 1e-6 * link.clock_ppm))
    codes, converter = [], 0.0
    for p, field in enumerate(x):
        for lane, wave in enumerate((gain * field.real, (field * np.exp(-1j * error)).imag / gain)):
            delayed = response * np.exp(-2j * np.pi * f * link.skews_s[2 * p + lane])
            filtered = fft.ifft(fft.fft(wave) * delayed).real
            taken = interpolate.make_interp_spline(np.arange(n), filtered, k=5)(at)
            if lane == 0:
                full = 8 * float(np.std(taken))
            codes.append(_digitised(taken / full, link.effective_bits, rng))
            converter += _converter_share(full, link, response, f) / x.shape[0]
    return codes, converter


def _digitised(filled: npt.NDArray[np.float64], effective_bits: float | None, rng: np.random.Generator):
    """Codes of a lane that fills its range so much; eight standard deviations of I are the range of both lanes.

    IEEE Std 1241: E effective bits are a noise of (range / 2^E)^2 / 12.
    """
    if effective_bits is None:
        return np.round(filled * 2**15).astype(np.int16)
    extra = (4.0 ** (8 - effective_bits) - 1) / 12
    noisy = filled * 256 + rng.standard_normal(len(filled)) * np.sqrt(extra)
    return np.clip(np.round(noisy), -128, 127).astype(np.int8)


def _converter_share(full: float, link: Link, response, f) -> float:
    """Converter noise of one lane in N0 over Es, as a filter that undoes the bandwidth would see it."""
    if link.effective_bits is None:
        return 0.0
    density = full**2 / 4**link.effective_bits / 12 / link.sample_rate_hz
    shape = _root_raised_cosine(f / link.symbol_rate_bd, link.rolloff) ** 2
    inside = shape > 0
    seen = np.sum(shape[inside] / np.abs(response[inside]) ** 2) / np.sum(shape)
    return float(density * link.symbol_rate_bd * seen)


@pytest.fixture(scope="session")
def transmission() -> Callable[[Link], Sent]:
    """Transmissions by link, each made once."""
    return lru_cache(maxsize=16)(transmit)


@pytest.fixture(scope="session")
def ideal() -> Link:
    return Link()


@pytest.fixture(scope="session")
def chain_of() -> Callable[..., Chain]:
    """The chain of somebody who knows everything of a link that a bench file can tell."""

    def made(link: Link, overrides: Any = None, **believed: Any) -> Chain:
        names = NAMES[link.polarisations]
        known = replace(link, **believed)
        kind = {1: "single polarisation", 2: "dual polarisation"}[link.polarisations]
        sent = Signal(
            modulation="QPSK",
            symbol_rate_bd=known.symbol_rate_bd,
            polarisations=link.polarisations,
            pulse_shape="root raised cosine",
            rolloff=known.rolloff,
            pattern_order=known.order,
            tributary_offsets=known.offsets[: 2 * link.polarisations],
        )
        lanes = tuple(LaneBelief(name, skew_s, False) for name, skew_s in zip(names, known.skews_s, strict=False))
        return Chain.from_text(make_chain(kind, sent, lanes, overrides).text)

    return made


@pytest.fixture(scope="session")
def figures_of() -> Callable[[Demodulation], dict[str, float]]:
    return lambda found: {name: value for stage in found.stages for name, value in stage.figures.items()}
