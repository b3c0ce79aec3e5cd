"""The curve fitted by maximum likelihood, each stay with a random shift of its power.

Counts of a stay are binomial at the BER of its measured power times 10^(d/10); d is normal with standard deviation
tau and shared by all the stay counted, for what moves between stays (the tap's reading included) does not average
down with bits. The shift is integrated out with Gauss-Hermite nodes centred on its most probable value
(J. C. Naylor, A. F. M. Smith, Applied Statistics 31, 214, 1982). tau follows from the residuals' mean square
(R. C. Paule, J. Mandel, J. Research NBS 87, 377, 1982), which charges the fitted parameters; maximum likelihood
alone would make it small with few stays. The balance of two polarisations comes from how the errors of a stay
divide between them, which no shift of the stay can move.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from owlight.statistics.curve import (
    BETA,
    FLOOR,
    LN_A,
    LOWEST_DB,
    RESIDUE,
    STEP_DB,
    BerTable,
    Counts,
    Floats,
    Pooled,
    pooled,
)

_ROUNDS = 60
_WHOLE_STEPS = 12
_CENTRING_STEPS = 8
_CLOSE = 1e-5
"""Of log a, b and tau in dB: 4e-5 dB of power, far below any interval."""
_BOUNDED = (FLOOR, RESIDUE)
_MOST_SHARE = 0.98
"""Of 1/SNR at the middle of the powers that b may have; beyond it the curve is flat."""


@dataclass(frozen=True, eq=False)
class Fit:
    """R fits: parameters (R, 4), covariance (R, 4, 4) given tau, imbalance (R), tau (R), residuals (R, N)."""

    parameters: Floats
    covariance: Floats
    imbalance: Floats
    tau_db: Floats
    residual: Floats
    fixed_residual: Floats
    on_boundary: np.ndarray[tuple[int, ...], np.dtype[np.bool_]]
    converged: np.ndarray[tuple[int, ...], np.dtype[np.bool_]]


@dataclass(frozen=True, eq=False)
class Task:
    """What stays the same from round to round; `free` names the parameters that are fitted."""

    table: BerTable
    counts: Counts
    free: tuple[int, ...]
    tau_floor_db: float
    nodes: int


@dataclass(eq=False)
class _State:
    parameters: Floats
    imbalance: Floats
    tau2: Floats
    shift: Floats


def fit(task: Task) -> Fit:
    """Fisher scoring for the curve, tau and the balance brought along; all replicates of `counts.errors` at once."""
    state = _start(task)
    converged = np.zeros(len(state.tau2), dtype=bool)
    for number in range(_ROUNDS):
        # whole steps may circle round the maximum where residuals are large; half steps then fall into it
        moved = _move_parameters(task, state, 1.0 if number < _WHOLE_STEPS else 0.5)
        moved = np.maximum(moved, _move_imbalance(task, state))
        moved = np.maximum(moved, _move_tau(task, state, _pooled(task, state)))
        converged = moved < _CLOSE
        if converged.all():
            break
    return _result(task, state, converged)


def _start(task: Task) -> _State:
    """A straight line through the 1/SNR that each stay's ratio means, over 1/P."""
    counts, table = task.counts, task.table
    errors, bits = counts.errors.sum(axis=-1), counts.bits.sum(axis=-1)
    axis = np.arange(len(table.log_ber))[::-1]
    place = np.interp(np.log((errors + 0.5) / (bits + 1.0)), table.log_ber[::-1], axis)
    z = 10.0 ** (-(LOWEST_DB + STEP_DB * place) / 10.0)
    weight = (errors + 0.5) / z**2  # relative error of z is nearly that of the ratio
    x = np.exp(-counts.log_power)
    parameters = np.zeros((len(errors), 4))
    parameters[:, BETA] = 1.0
    mean_x, mean_z = (weight * x).sum(-1) / weight.sum(-1), (weight * z).sum(-1) / weight.sum(-1)
    spread = (weight * (x - mean_x[:, None]) ** 2).sum(-1)
    slope = (weight * (x - mean_x[:, None]) * (z - mean_z[:, None])).sum(-1) / np.maximum(spread, 1e-30)
    if FLOOR in task.free:
        intercept = np.clip(mean_z - slope * mean_x, 0.0, 0.5 * z.min(axis=-1))
        parameters[:, FLOOR] = intercept
        parameters[:, LN_A] = np.log((mean_z - intercept) / mean_x)
    else:
        parameters[:, LN_A] = np.log(mean_z / mean_x)
    tau2 = np.full(len(errors), max(task.tau_floor_db, 0.05) ** 2)
    return _State(parameters, np.zeros(len(errors)), tau2, np.zeros(errors.shape))


def _pooled(task: Task, state: _State, shift: Floats | None = None) -> Pooled:
    log_power = task.counts.log_power[None, :]
    if shift is not None:
        log_power = log_power + shift * np.log(10.0) / 10.0
    converter = task.counts.converter[:, None]
    return pooled(task.table, state.parameters, state.imbalance, log_power, task.counts.share, converter)


def _variance(task: Task, state: _State, here: Pooled) -> Floats:
    """Of a relative residual: binomial, and the shift's."""
    m = np.exp(here.log_ber)
    return np.asarray((1.0 - m) / (task.counts.bits.sum(-1) * m) + here.by_shift**2 * state.tau2[:, None])


def _information(task: Task, state: _State, here: Pooled, held: Floats) -> Floats:
    """Expected information (R, 4, 4); rows of parameters that are held become the unit matrix."""
    by = here.by_parameter * (1.0 - held)[:, None, :]
    matrix = np.einsum("rni,rnj->rij", by / _variance(task, state, here)[..., None], by)
    return np.asarray(matrix + held[:, :, None] * np.eye(4))


def _move_parameters(task: Task, state: _State, stride: float) -> Floats:
    here = _pooled(task, state)
    _centre_shift(task, state)
    score = _marginal_score(task, state)
    held = _not_free(task, len(score))
    step = _scoring_step(task, state, here, score, held)
    for which in _BOUNDED:
        # at its bound and pushed outwards: held there, and the others step as if it were a constant
        held[:, which] = np.where((state.parameters[:, which] <= 0.0) & (step[:, which] <= 0.0), 1.0, held[:, which])
    step = _scoring_step(task, state, here, score, held)
    before = state.parameters.copy()
    state.parameters = _stepped(before, stride * step)
    return np.asarray(np.abs(state.parameters - before).max(axis=1))


def _stepped(parameters: Floats, step: Floats) -> Floats:
    """The step taken along log(a + b) and b's share of it: a and b themselves trade places along a bent valley."""
    moved = parameters + step
    a, b = np.exp(parameters[:, LN_A]), parameters[:, FLOOR]
    by_total = (a * step[:, LN_A] + step[:, FLOOR]) / (a + b)
    by_share = step[:, FLOOR] / (a + b) - b / (a + b) * by_total
    log_total = np.log(a + b) + np.clip(by_total, -0.5, 0.5)
    share = np.clip(b / (a + b) + np.clip(by_share, -0.2, 0.2), 0.0, _MOST_SHARE)
    moved[:, LN_A] = log_total + np.log1p(-share)
    moved[:, FLOOR] = np.exp(log_total) * share
    moved[:, RESIDUE] = np.maximum(moved[:, RESIDUE], 0.0)
    moved[:, BETA] = parameters[:, BETA] + np.clip(step[:, BETA], -0.5, 0.5)
    return moved


def _not_free(task: Task, replicates: int) -> Floats:
    held = np.ones((replicates, 4))
    held[:, list(task.free)] = 0.0
    return held


def _scoring_step(task: Task, state: _State, here: Pooled, score: Floats, held: Floats) -> Floats:
    information = _information(task, state, here, held)
    return np.asarray(np.linalg.solve(information, (score * (1.0 - held))[..., None])[..., 0])


def _centre_shift(task: Task, state: _State) -> None:
    """Newton steps of each stay's shift to its most probable value, where the nodes must stand to be of use."""
    for _ in range(_CENTRING_STEPS):
        there = _pooled(task, state, state.shift)
        excess, weight = _excess(task, there.log_ber)
        gradient = excess * there.by_shift - state.shift / state.tau2[:, None]
        curvature = weight * there.by_shift**2 + 1.0 / state.tau2[:, None]
        step = np.clip(gradient / curvature, -1.0, 1.0)
        state.shift = state.shift + step
        if np.max(np.abs(step) * np.sqrt(curvature)) < 0.01:  # a hundredth of the nodes' own width
            break


def _excess(task: Task, log_ber: Floats) -> tuple[Floats, Floats]:
    """Derivative of the binomial log-likelihood by ln m, and its expected information."""
    m = np.exp(log_ber)
    spare = (slice(None),) * 2 + (None,) * (log_ber.ndim - 2)
    errors, bits = task.counts.errors.sum(axis=-1)[spare], task.counts.bits.sum(axis=-1)[None, :][spare]
    return (errors - bits * m) / (1.0 - m), bits * m / (1.0 - m)


def _marginal_score(task: Task, state: _State) -> Floats:
    """Derivative (R, 4) of the log-likelihood with the shift of each stay integrated out."""
    at_mode = _pooled(task, state, state.shift)
    _, weight = _excess(task, at_mode.log_ber)
    width = 1.0 / np.sqrt(weight * at_mode.by_shift**2 + 1.0 / state.tau2[:, None])
    nodes, node_weights = np.polynomial.hermite_e.hermegauss(task.nodes)
    shift = state.shift[..., None] + width[..., None] * nodes
    log_power = task.counts.log_power[None, :, None] + shift * np.log(10.0) / 10.0
    converter = task.counts.converter[:, None, None]
    there = pooled(task.table, state.parameters, state.imbalance, log_power, task.counts.share, converter)
    excess, _ = _excess(task, there.log_ber)
    errors, bits = task.counts.errors.sum(axis=-1)[..., None], task.counts.bits.sum(axis=-1)[None, :, None]
    logs = errors * there.log_ber + (bits - errors) * np.log1p(-np.exp(there.log_ber))
    logs += np.log(node_weights) + 0.5 * nodes**2 - 0.5 * shift**2 / state.tau2[:, None, None]
    likely = np.exp(logs - logs.max(axis=-1, keepdims=True))
    likely /= likely.sum(axis=-1, keepdims=True)
    return np.asarray(np.einsum("rnq,rnqi->ri", likely * excess, there.by_parameter))


def _move_tau(task: Task, state: _State, here: Pooled) -> Floats:
    """Paule and Mandel: the tau at which the standardised residuals have as many squares as degrees of freedom."""
    bits, m = task.counts.bits.sum(axis=-1), np.exp(here.log_ber)
    square = (task.counts.errors.sum(axis=-1) / (bits * m) - 1.0) ** 2
    freedom = square.shape[1] - len(task.free)
    before = state.tau2.copy()
    binomial, by2 = (1.0 - m) / (bits * m), here.by_shift**2
    for _ in range(3):
        variance = binomial + by2 * state.tau2[:, None]
        excess = (square / variance).sum(axis=1) - freedom
        falling = (square * by2 / variance**2).sum(axis=1)
        # the function is convex and falling: Newton from below never overshoots, from above the floor holds it
        state.tau2 = np.maximum(state.tau2 + excess / np.maximum(falling, 1e-300), task.tau_floor_db**2)
        state.tau2 = np.minimum(state.tau2, 4.0 * np.maximum(before, 0.25))
    return np.asarray(np.abs(np.sqrt(state.tau2) - np.sqrt(before)))


def _held_at_zero(task: Task, state: _State) -> Floats:
    bounded = [which for which in _BOUNDED if which in task.free]
    return np.asarray((state.parameters[:, bounded] <= 0.0).sum(axis=1), dtype=np.float64)


def _move_imbalance(task: Task, state: _State) -> Floats:
    if task.counts.bits.shape[1] != 2:
        return np.zeros(len(state.imbalance))
    here = _pooled(task, state, state.shift)
    weighted = task.counts.share * np.exp(here.log_ber_each)
    first = weighted[..., 0] / weighted.sum(axis=-1)
    lean = here.by_imbalance_each[..., 0] - here.by_imbalance_each[..., 1]
    errors = task.counts.errors.sum(axis=-1)
    score = ((task.counts.errors[..., 0] - errors * first) * lean).sum(axis=1)
    information = (errors * first * (1.0 - first) * lean**2).sum(axis=1)
    step = np.clip(score / np.maximum(information, 1e-12), -0.3, 0.3)
    state.imbalance = state.imbalance + step
    return np.asarray(np.abs(step))


def _result(task: Task, state: _State, converged: np.ndarray[tuple[int, ...], np.dtype[np.bool_]]) -> Fit:
    here = _pooled(task, state)
    held = _not_free(task, len(state.tau2))
    for which in _BOUNDED:
        held[:, which] = np.where(state.parameters[:, which] <= 0.0, 1.0, held[:, which])
    free = 1.0 - held
    covariance = np.linalg.inv(_information(task, state, here, held)) * free[:, :, None] * free[:, None, :]
    m = np.exp(here.log_ber)
    relative = task.counts.errors.sum(axis=-1) / (task.counts.bits.sum(axis=-1) * m) - 1.0
    floor = _State(state.parameters, state.imbalance, np.full_like(state.tau2, task.tau_floor_db**2), state.shift)
    return Fit(
        parameters=state.parameters,
        covariance=covariance,
        imbalance=state.imbalance,
        tau_db=np.sqrt(state.tau2),
        residual=relative / np.sqrt(_variance(task, state, here)),
        fixed_residual=relative / np.sqrt(_variance(task, floor, here)),
        on_boundary=_held_at_zero(task, state) > 0,
        converged=converged,
    )
