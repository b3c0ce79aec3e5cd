"""A plan from a sequence, a bench and drivers: everything settled and judged before the first light."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from owlight.bench import Bench
from owlight.driver import Driver
from owlight.errors import InputError
from owlight.plan.durations import CLOSING_S, capture_bytes, night_bytes, start_s, stay_s
from owlight.plan.fit import misfits
from owlight.plan.limits import highest_powers, refuse_over_limits, refuse_unattended
from owlight.plan.points import order_of, points_of
from owlight.plan.safe_steps import safe_steps
from owlight.plan.signal import all_settings, signal_of
from owlight.sequence import Sequence
from owlight.vocabulary.plan import CaptureRequest, ChainText, Plan, Source, StopRule

EDGE_SYMBOLS = 2_048
"""Taken more than asked: the filters' edges and the search for the pattern's start count no bits."""
RECORD_STEP = 256
"""Oscilloscopes round a record length; a multiple of this is left alone by most."""


@dataclass(frozen=True)
class PlanRequest:
    """`resources` are the addresses in use, which for a simulated bench are not those of its file."""

    sequence: Sequence
    bench: Bench
    drivers: Mapping[str, Driver]
    sources: tuple[Source, ...]
    chain: ChainText | None
    seed: int
    simulated: bool
    resources: Mapping[str, str]


def make_plan(request: PlanRequest) -> Plan:
    """SafetyRefusal where a limit could be exceeded, InputError where sequence and bench do not fit."""
    sequence, bench = request.sequence, request.bench
    points = points_of(sequence)
    refuse_over_limits(bench, sequence, points)
    signal = signal_of(sequence) if sequence.signal else None
    capture = capture_request(sequence)
    settings = all_settings(sequence, signal, capture)
    problems = misfits(bench, request.drivers, sequence, settings, points)
    if problems:
        raise InputError("The sequence does not fit the bench; nothing was opened:", problems)
    order = order_of(sequence, request.seed)
    stop = StopRule(**vars(sequence.stop))
    record_bytes = capture_bytes(capture, _bytes_per_sample(request.drivers)) if capture else 0
    one_stay_s = stay_s(settings, [axis.term for axis in sequence.axes], len(sequence.readings), record_bytes, stop)
    stays = sum(map(len, order))
    forecast_s = start_s(sequence.conditions) + stays * one_stay_s + CLOSING_S
    powers = highest_powers(bench, sequence, points)
    refuse_unattended(bench, sequence, powers, forecast_s)
    return Plan(
        name=sequence.name,
        sources=request.sources,
        seed=request.seed,
        simulated=request.simulated,
        measurand=sequence.measurand,
        signal=signal,
        settings=settings,
        conditions=sequence.conditions,
        points=points,
        order=order,
        readings=sequence.readings,
        capture=capture,
        chain=request.chain,
        stop=stop,
        highest_power=powers,
        stay_s=one_stay_s,
        forecast_s=forecast_s,
        forecast_bytes=night_bytes(stays, len(points), capture, record_bytes, stop),
        safe_state=safe_steps(bench, request.drivers, request.resources),
    )


def _bytes_per_sample(drivers: Mapping[str, Driver]) -> int:
    record = drivers["oscilloscope"].record if "oscilloscope" in drivers else None
    return record.bytes_per_sample if record is not None else 2


def capture_request(sequence: Sequence) -> CaptureRequest | None:
    """`symbols` are the least a lane holds; the record is a little longer."""
    capture, signal = sequence.capture, sequence.signal
    if capture is None or signal is None:
        return None
    samples = (capture.symbols + EDGE_SYMBOLS) * capture.sample_rate_hz / signal.symbol_rate_bd
    return CaptureRequest(
        symbols=capture.symbols,
        sample_rate_hz=capture.sample_rate_hz,
        record_length=RECORD_STEP * math.ceil(samples / RECORD_STEP),
        lanes=("XI", "XQ", "YI", "YQ")[: 2 * signal.polarisations],
        vertical=capture.vertical,
        keep=capture.keep,
    )
