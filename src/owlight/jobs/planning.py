"""A plan from resolved files: resources, chain and limits put together; nothing is opened."""

from __future__ import annotations

from collections.abc import Mapping

from owlight.demodulation.chain import LaneBelief, make_chain
from owlight.errors import InputError
from owlight.jobs.resolve import Resolved
from owlight.plan import PlanRequest, make_plan, signal_of
from owlight.vocabulary.plan import ChainText, Plan


def chain_of(resolved: Resolved) -> ChainText | None:
    """The sequence's demodulation with what the bench believes of its lanes."""
    sequence = resolved.sequence
    if sequence is None or sequence.signal is None or sequence.capture is None:
        return None
    signal = signal_of(sequence)
    count = 2 * signal.polarisations
    lanes = tuple(LaneBelief(lane.name, lane.skew_s, lane.inverted) for lane in resolved.bench.receiver.lane[:count])
    overrides = sequence.demodulation.overrides if sequence.demodulation else {}
    name = sequence.demodulation.chain if sequence.demodulation else _default_chain(signal.polarisations)
    return make_chain(name, signal, lanes, overrides)


def _default_chain(polarisations: int) -> str:
    return "dual polarisation" if polarisations == 2 else "single polarisation"


def plan_of(resolved: Resolved, resources: Mapping[str, str] | None = None, seed: int | None = None) -> Plan:
    """InputError or SafetyRefusal; `resources` replace those of the bench file where the bench is simulated."""
    if resolved.sequence is None:
        raise InputError("There is no sequence to plan. Name a sequence file.")
    named = {name: role.resource for name, role in resolved.bench.role.items()}
    request = PlanRequest(
        sequence=resolved.sequence,
        bench=resolved.bench,
        drivers=resolved.drivers,
        sources=resolved.sources,
        chain=chain_of(resolved),
        seed=resolved.sequence.seed if seed is None else seed,
        simulated=resolved.simulated,
        resources={**named, **(resources or {})},
    )
    return make_plan(request)
