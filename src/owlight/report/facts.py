"""Everything the page shows, read once; nothing is measured or concluded anew."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from owlight.bench import Bench, read_bench
from owlight.logbook.read import Reader, curve, history, provenance, runs
from owlight.vocabulary.events import Check, History, SafeState
from owlight.vocabulary.plan import Plan, Source
from owlight.vocabulary.result import Conclusion, Sensitivity, Stay
from owlight.vocabulary.values import Identity


@dataclass(frozen=True)
class Facts:
    folder: Path
    header: runs.RunHeader
    plan: Plan
    conclusion: Conclusion | None
    stays: tuple[Stay, ...]
    history: History
    safe_state: SafeState | None
    identities: tuple[Identity, ...]
    sources: tuple[Source, ...]
    software: Mapping[str, str]
    written_by: Mapping[str, str]
    """Host, operator, command line, what it reproduces, hash of the captures file."""

    @property
    def checks(self) -> tuple[Check, ...]:
        return self.conclusion.checks if self.conclusion else ()

    @property
    def sensitivities(self) -> tuple[Sensitivity, ...]:
        return self.conclusion.sensitivities if self.conclusion else ()

    @property
    def bench(self) -> Bench | None:
        """None when the stored text no longer reads, for example after a change of the file's format."""
        source = next((source for source in self.sources if source.kind == "bench"), None)
        return read_bench(source.text, source.name).value if source else None


def gather(reader: Reader, run_id: str) -> Facts:
    return Facts(
        folder=reader.folder,
        header=runs.header(reader, run_id),
        plan=provenance.plan(reader, run_id),
        conclusion=curve.conclusion(reader, run_id),
        stays=curve.stays(reader, run_id),
        history=history.history(reader, run_id),
        safe_state=runs.safe_state(reader, run_id),
        identities=provenance.identities(reader, run_id),
        sources=provenance.sources(reader, run_id),
        software=provenance.software(reader, run_id),
        written_by=provenance.run_facts(reader, run_id),
    )


def gather_earlier(reader: Reader, run_id: str) -> Facts | None:
    """The last run of the same sequence that came to a conclusion."""
    found = runs.earlier(reader, run_id)
    return None if found is None else gather(reader, found)
