"""The verb `reproduce`: measure again from the stored sources, and compare captures, counts and sensitivity.

Everything comes from the logbook, so it works after the original files were deleted or changed.
"""

from __future__ import annotations

import tempfile
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from owlight.jobs.night import Order, measure
from owlight.jobs.resolve import resolve, world_path
from owlight.jobs.summary import summary
from owlight.logbook.read import captures, history, open_reader, provenance, runs
from owlight.vocabulary.events import History
from owlight.vocabulary.plan import Plan, Source
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Identity

Json = dict[str, Any]
_FOLDER_OF = {"sequence": "sequences", "driver": "drivers"}


@dataclass(frozen=True)
class Stored:
    """What one run kept of itself, as far as a comparison needs it."""

    plan: Plan
    identities: tuple[Identity, ...]
    software: Mapping[str, str]
    hashes: Mapping[Any, str]
    readings: Mapping[Any, float | None]


def reproduce(run_text: str, bench: str | None, order: Order) -> Json:
    """Measure again and compare; `bench` replaces the stored bench (its world with it)."""
    with open_reader(order.folder) as reader:
        run_id = runs.find_run(reader, run_text)
        before = _stored(reader, run_id)
    with tempfile.TemporaryDirectory(prefix="owlight-") as folder:
        sequence_path, bench_path = unpack(before.plan.sources, Path(folder))
        used_bench = bench or str(bench_path)
        resolved = resolve(str(sequence_path), used_bench)
        world = world_path(used_bench, resolved.bench) if resolved.simulated else None
        asked = replace(order, world=world, seed=before.plan.seed, reproduces=run_id)
        again = measure(resolved, asked).run_id
    with open_reader(order.folder) as reader:
        after = _stored(reader, again)
    return {**summary(order.folder, again), **_compared(order.folder, run_id, again, before, after)}


def unpack(sources: Iterable[Source], folder: Path) -> tuple[Path, Path]:
    """The stored texts laid out as a lab's folder; returns the paths of sequence and bench."""
    places: dict[str, Path] = {}
    for source in sources:
        if source.kind == "chain":
            continue
        place = folder / _FOLDER_OF.get(source.kind, "simulated_instruments") / f"{source.name}.toml"
        place.parent.mkdir(exist_ok=True)
        place.write_text(source.text, "utf-8", newline="")
        places[source.kind] = place
    return places["sequence"], places["bench"]


def _stored(reader: Any, run_id: str) -> Stored:
    return Stored(
        plan=provenance.plan(reader, run_id),
        identities=tuple(provenance.identities(reader, run_id)),
        software=provenance.software(reader, run_id),
        hashes=captures.hashes(reader, run_id),
        readings=_readings(history.history(reader, run_id)),
    )


def _readings(finished: History) -> dict[Any, float | None]:
    """Each reading by stay and place in it."""
    return {
        (stay.attempt.point.index, stay.attempt.number, place, str(reading.term)): reading.value
        for stay in finished
        for place, reading in enumerate(stay.readings)
    }


def _compared(folder: Path, first: str, second: str, before: Stored, after: Stored) -> Json:
    common = before.hashes.keys() & after.hashes.keys()
    old, new = summary(folder, first), summary(folder, second)
    # a key is a capture and one of its lanes; people count captures
    counted = {key[0] for key in common}
    unequal = {key[0] for key in common if before.hashes[key] != after.hashes[key]}
    same = before.hashes == after.hashes and before.readings == after.readings and old["points"] == new["points"]
    return {
        "reproduces": first,
        "identical": same and bool(before.hashes or before.readings),
        "captures_compared": len(counted),
        "captures_equal": len(counted) - len(unequal),
        "readings_compared": len(before.readings.keys() & after.readings.keys()),
        "differences": [
            *_differences(before, after),
            *_different_readings(before, after),
            *_different_results(old, new),
        ],
        "sensitivity_original": old["sensitivity"],
        "sensitivity_reproduced": new["sensitivity"],
    }


def _differences(before: Stored, after: Stored) -> list[str]:
    """Files, instruments and software, in words."""
    found: list[str] = []
    old = {(s.kind, s.name): s.sha256 for s in before.plan.sources}
    new = {(s.kind, s.name): s.sha256 for s in after.plan.sources}
    for kind, name in sorted(old.keys() | new.keys()):
        if (kind, name) not in new or (kind, name) not in old:
            side = "only in the original" if (kind, name) in old else "only in the new run"
            found.append(f"file: {kind} {name} is {side}")
        elif old[kind, name] != new[kind, name]:
            found.append(f"file: {kind} {name} differs{_changed_lines(before, after, kind, name)}")
    was = {i.role: (i.maker, i.model, i.serial_number, i.firmware) for i in before.identities}
    now = {i.role: (i.maker, i.model, i.serial_number, i.firmware) for i in after.identities}
    for role in sorted(was.keys() | now.keys()):
        if was.get(role) != now.get(role):
            found.append(f"instrument: {role} was {_who(was.get(role))}, is {_who(now.get(role))}")
    for name in sorted(before.software.keys() | after.software.keys()):
        versions = before.software.get(name, "absent"), after.software.get(name, "absent")
        if versions[0] != versions[1]:
            found.append(f"software: {name} was {versions[0]}, is {versions[1]}")
    return found


def _changed_lines(before: Stored, after: Stored, kind: str, name: str) -> str:
    """Up to three changed lines, so that the cause can be read at once."""
    texts = [next(s.text for s in side.plan.sources if (s.kind, s.name) == (kind, name)) for side in (before, after)]
    old, new = (set(text.splitlines()) for text in texts)
    gone = [line.strip() for line in texts[0].splitlines() if line not in new and line.strip()]
    come = [line.strip() for line in texts[1].splitlines() if line not in old and line.strip()]
    words = "; ".join(f"{a} -> {b}" for a, b in zip(gone[:3], come[:3], strict=False))
    return f": {words}" if words else ""


def _who(fields: tuple[str, ...] | None) -> str:
    return "absent" if fields is None else ", ".join(fields)


def _different_readings(before: Stored, after: Stored) -> list[str]:
    """How many readings differ, and the largest difference of each term."""
    common = before.readings.keys() & after.readings.keys()
    apart = [key for key in common if before.readings[key] != after.readings[key]]
    if not apart:
        return []
    largest: dict[str, float] = {}
    for key in apart:
        was, now = before.readings[key], after.readings[key]
        if was is not None and now is not None:
            largest[key[-1]] = max(largest.get(key[-1], 0.0), abs(now - was))
    units = {str(term): spec.unit for term, spec in TERMS.items()}
    words = "; ".join(f"{term} by up to {value:.3g} {units.get(term, '')}" for term, value in sorted(largest.items()))
    return [f"readings: {len(apart)} of {len(common)} differ: {words}"]


def _different_results(old: Json, new: Json) -> list[str]:
    found: list[str] = []
    counts = [{(p["group"], p["point"]): (p["errors"], p["bits"]) for p in run["points"]} for run in (old, new)]
    changed = [key for key in counts[0].keys() | counts[1].keys() if counts[0].get(key) != counts[1].get(key)]
    if changed:
        found.append(f"counts: {len(changed)} of {len(counts[0].keys() | counts[1].keys())} points differ")
    a, b = old["sensitivity"], new["sensitivity"]
    if a and b and a["received_power_dbm"] != b["received_power_dbm"]:
        delta_db = b["received_power_dbm"] - a["received_power_dbm"]
        u_db = (a["u_statistical_db"] ** 2 + b["u_statistical_db"] ** 2) ** 0.5
        words = f"{delta_db:+.3f} dB, {abs(delta_db) / u_db:.1f} times its statistical standard uncertainty"
        found.append(f"sensitivity: the new run lies {words} from the original")
    elif bool(a) != bool(b):
        found.append(f"sensitivity: the {'original' if a else 'new run'} has one, the other has none")
    return found
