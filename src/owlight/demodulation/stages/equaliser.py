"""The equaliser at two samples a symbol: blind acquisition, then least squares on its own decisions.

Taps are (outputs, polarisations, length): y[q, k] = sum over p and j of taps[q, p, j] x[p, 2 k + j].
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from owlight.demodulation.stages.carrier import carrier_phase, decide

Complex = npt.NDArray[np.complex64]
Figures = dict[str, float]
SINGULAR = 0.5
"""Two outputs that correlate more than this carry the same polarisation; noise alone gives about 0.03."""
_CHUNK = 16384
_STARTS = ((1.0, 0.0), (np.sqrt(0.5), np.sqrt(0.5)), (np.sqrt(0.5), 1j * np.sqrt(0.5)), (0.0, 1.0))


def equalise(x: Complex, taps: Complex, begin: int, symbols: int) -> Complex:
    """Outputs of symbols `begin` to `begin + symbols`: (outputs, symbols) complex64; x is (polarisations, samples).

    >>> x = np.arange(12, dtype=np.complex64)[None, :]
    >>> middle = np.array([[[0, 1, 0]]], np.complex64)
    >>> equalise(x, middle, 1, 3).real.tolist()
    [[3.0, 5.0, 7.0]]
    """
    flat = np.ascontiguousarray(taps.reshape(len(taps), -1).T)
    y = np.empty((len(taps), symbols), dtype=np.complex64)
    for at, rows in _designs(x, taps.shape[2], begin, symbols):
        y[:, at : at + len(rows)] = (rows @ flat).T
    return y


def _designs(x: Complex, length: int, begin: int, symbols: int) -> Iterator[tuple[int, Complex]]:
    """Rows of samples under the taps, one a symbol, so many at once as a cache holds."""
    windows = np.lib.stride_tricks.sliding_window_view(x, length, axis=1)[:, 2 * begin :: 2]
    for at in range(0, symbols, _CHUNK):
        part = windows[:, at : min(at + _CHUNK, symbols)]
        yield at, np.ascontiguousarray(part.transpose(1, 0, 2)).reshape(part.shape[1], -1)


def blind_taps(x: Complex, outputs: int, length: int, symbols: int, step: float) -> tuple[Complex, Figures]:
    """Taps by the constant modulus criterion on the first `symbols`, each output on a polarisation of its own.

    D. N. Godard, IEEE Transactions on Communications 28(11), 1867, 1980. The second output starts as the orthogonal
    partner of the converged first one; from middle taps on both, about one capture in ten near 45 degrees ends with the
    same polarisation twice. If they are alike all the same, another start is tried. Needs outputs <= polarisations.
    Figures: mean squared error of the modulus, likeness of the outputs, number of starts.

    >>> rng = np.random.default_rng(1)
    >>> sent = (rng.choice([-1, 1], (2, 4000)) + 1j * rng.choice([-1, 1], (2, 4000))) / np.sqrt(2)
    >>> mixed = np.array([[0.8, 0.6], [-0.6, 0.8]]) @ np.repeat(sent, 2, axis=1)
    >>> taps, figures = blind_taps(mixed.astype(np.complex64), 2, 5, 3900, 2e-3)
    >>> figures["modulus_error"] < 0.01, figures["output_likeness"] < 0.1
    (True, True)
    """
    polarisations = len(x)
    symbols = min(symbols, (x.shape[1] - length) // 2)
    planes = np.ascontiguousarray(np.stack([x.real, x.imag]), dtype=np.float32)
    best: tuple[Complex, Figures] | None = None
    for tried, start in enumerate(_STARTS, 1):
        taps = np.zeros((outputs, polarisations, length), dtype=np.complex64)
        taps[0, :, length // 2] = start[:polarisations] if polarisations > 1 else 1.0
        error = _converge(planes, taps[0], step, symbols)
        if outputs == 2:
            taps[1, 0] = -np.conj(taps[0, 1, ::-1])
            taps[1, 1] = np.conj(taps[0, 0, ::-1])
            error = (error + _converge(planes, taps[1], step, symbols)) / 2
        alike = likeness(equalise(x, taps, 0, symbols)) if outputs == 2 else 0.0
        figures = {"modulus_error": error, "output_likeness": alike, "starts": float(tried)}
        if best is None or alike < best[1]["output_likeness"]:
            best = (taps, figures)
        if alike < SINGULAR:
            break
    assert best is not None
    return best[0], {**best[1], "starts": float(tried)}


def _converge(planes: npt.NDArray[np.float32], taps: Complex, step: float, symbols: int) -> float:
    """Twice over the same symbols, the second time with a tenth of the step."""
    from owlight.demodulation.kernels.cma import adapt

    real = np.ascontiguousarray(np.stack([taps.real, taps.imag]), dtype=np.float32)
    adapt(planes, real, step, 0, symbols)
    error = float(adapt(planes, real, step / 10, 0, symbols))
    taps[:] = real[0] + 1j * real[1]
    return error


def likeness(outputs: Complex, lags: int = 8) -> float:
    """The largest correlation of two outputs over a few lags: 1 when both are the same polarisation.

    >>> rng = np.random.default_rng(1)
    >>> one = (rng.standard_normal(5000) + 1j * rng.standard_normal(5000)).astype(np.complex64)
    >>> likeness(np.stack([one, one])) > 0.99, likeness(np.stack([one, one[::-1]])) < 0.1
    (True, True)
    """
    one, other = outputs[0, lags:-lags], outputs[1]
    count = len(one)
    level = float(np.sqrt(np.vdot(one, one).real * np.vdot(other, other).real * count / (count + 2 * lags)))
    found = [abs(complex(np.vdot(one, other[lag : lag + count]))) for lag in range(2 * lags + 1)]
    return max(found) / max(level, 1e-30)


def least_squares_taps(
    x: Complex, taps: Complex, span: tuple[int, int], turn_a_symbol: float, window: int, ridge: float
) -> tuple[Complex, Figures]:
    """Taps that bring the outputs of `taps` on symbols span[0] to span[1] closest to their own decisions.

    The decisions are turned as the carrier turns them (`turn_a_symbol` radians a symbol, then its phase), one carrier
    for all outputs, so that afterwards they share one phase. `ridge` (relative to the mean power of a sample) holds the
    taps where the matched filter left the band empty. Figure: error power in dB against the decisions.

    >>> rng = np.random.default_rng(1)
    >>> sent = (rng.choice([-1, 1], (1, 4000)) + 1j * rng.choice([-1, 1], (1, 4000))) / np.sqrt(2)
    >>> x = np.repeat(sent, 2, axis=1).astype(np.complex64)
    >>> echo = x + 0.3 * np.roll(x, 2, axis=1)                # the symbol before shines through
    >>> start = np.zeros((1, 1, 15), np.complex64)
    >>> start[0, 0, 7] = 1.0
    >>> taps, figures = least_squares_taps(echo, start, (100, 3000), 0.0, 64, 1e-6)
    >>> figures["error_db"] < -20.0
    True
    """
    begin, end = span
    y = equalise(x, taps, begin, end - begin)
    carrier = np.exp(1j * turn_a_symbol * np.arange(begin, end)).astype(np.complex64)
    steady = y * np.conj(carrier)
    if len(y) == 2:
        steady[1] *= _relative_turn(steady)
    phase = np.exp(1j * carrier_phase(steady, window)).astype(np.complex64)
    wanted = decide(steady * np.conj(phase)) * (phase * carrier)
    size = taps.shape[1] * taps.shape[2]
    gram, cross = np.zeros((size, size), np.complex128), np.zeros((size, len(taps)), np.complex128)
    power, count = 0.0, end - begin
    for at, rows in _designs(x, taps.shape[2], begin, count):
        conjugate = rows.conj().T
        gram += conjugate @ rows
        cross += conjugate @ wanted[:, at : at + len(rows)].T
    gram += ridge * np.trace(gram).real / size * np.eye(size)
    solved = np.linalg.solve(gram, cross)
    power = float(np.vdot(wanted, wanted).real)
    left = max(power - float(np.vdot(solved, cross).real), 1e-9 * power)
    fitted = np.ascontiguousarray(solved.T.reshape(taps.shape), dtype=np.complex64)
    return fitted, {"error_db": float(10 * np.log10(left / power))}


def _relative_turn(steady: Complex) -> complex:
    """What turns the second output to the phase of the first, up to a quarter turn: their fourth powers agree."""
    fourth = steady[:, :].astype(np.complex128) ** 4
    window = 64
    blocks = fourth.shape[1] // window
    sums = fourth[:, : blocks * window].reshape(2, blocks, window).sum(axis=2)
    return complex(np.exp(1j * np.angle(np.vdot(sums[1], sums[0])) / 4))
