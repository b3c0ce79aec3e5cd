"""What is different from last time: files, instruments, software, result."""

from __future__ import annotations

import math

from owlight.report.facts import Facts
from owlight.report.wording import signed
from owlight.vocabulary.result import Sensitivity


def inputs(now: Facts, before: Facts) -> tuple[str, ...]:
    return (*_files(now, before), *_instruments(now, before), *_software(now, before), *_seed(now, before))


def results(now: Facts, before: Facts) -> tuple[str, ...]:
    """One line a curve that both have."""
    old = {found.group: found for found in before.sensitivities}
    shared = _shared_axis(now, before)
    return tuple(_moved(s, old[s.group], shared) for s in now.sensitivities if s.group in old)


def _files(now: Facts, before: Facts) -> tuple[str, ...]:
    new, old = ({(s.kind, s.name): s.sha256 for s in facts.sources} for facts in (now, before))
    changed = [key for key in sorted(new.keys() & old.keys()) if new[key] != old[key]]
    return (
        *(f"{kind} {name} has changed" for kind, name in changed),
        *(f"{kind} {name} is new" for kind, name in sorted(new.keys() - old.keys())),
        *(f"{kind} {name} is no longer used" for kind, name in sorted(old.keys() - new.keys())),
    )


def _instruments(now: Facts, before: Facts) -> tuple[str, ...]:
    new, old = ({i.role: (i.serial_number, i.firmware) for i in facts.identities} for facts in (now, before))
    lines = []
    for role in sorted(new.keys() & old.keys()):
        for what, was, became in zip(("serial number", "firmware"), old[role], new[role], strict=True):
            if was != became:
                lines.append(f"{role}: {what} {was} became {became}")
    return tuple(lines)


def _software(now: Facts, before: Facts) -> tuple[str, ...]:
    names = sorted(now.software.keys() | before.software.keys())
    pairs = [(name, before.software.get(name, "absent"), now.software.get(name, "absent")) for name in names]
    return tuple(f"{name} {was} became {became}" for name, was, became in pairs if was != became)


def _seed(now: Facts, before: Facts) -> tuple[str, ...]:
    return () if now.plan.seed == before.plan.seed else (f"seed {before.plan.seed} became {now.plan.seed}",)


def _shared_axis(now: Facts, before: Facts) -> bool:
    """Whether both power axes err alike: the same meter, the same calibration record, the same mating."""
    new, old = now.bench, before.bench
    meters = [
        next((i.serial_number for i in facts.identities if i.role == "power_meter"), None) for facts in (now, before)
    ]
    if new is None or old is None or meters[0] is None:
        return False
    return meters[0] == meters[1] and new.plane_minus_tap == old.plane_minus_tap and new.meter == old.meter


def _moved(now: Sensitivity, before: Sensitivity, shared: bool) -> str:
    """What both share cancels in their difference and is then no part of its uncertainty."""
    moved_db = now.received_power_dbm - before.received_power_dbm
    parts = [now.u_statistical_db, before.u_statistical_db]
    if not shared:
        parts += [now.u_common_db, before.u_common_db]
    u_db = math.hypot(*parts)
    times = f", {abs(moved_db) / u_db:.1f} times its standard uncertainty" if u_db > 0 else ""
    why = "; meter and power calibration are the same, so their doubt cancels" if shared else ""
    return f"{now.group + ': ' if now.group else ''}sensitivity {signed(moved_db, 3)} dB{times}{why}"
