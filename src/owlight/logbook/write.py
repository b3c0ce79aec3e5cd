"""Events become rows. Captures first, then the stay they belong to in one transaction; nothing is overwritten."""

from __future__ import annotations

import os
import sqlite3
from dataclasses import dataclass
from pathlib import Path

from owlight.errors import StorageError
from owlight.logbook.captures import CapturesFile
from owlight.logbook.codec import to_json
from owlight.logbook.database import transaction, troubles
from owlight.vocabulary.captures import Capture, CaptureId, Demodulation
from owlight.vocabulary.events import (
    AttemptFinished,
    Check,
    Event,
    Note,
    SafeState,
    SegmentEnded,
    SegmentStarted,
)
from owlight.vocabulary.result import Conclusion
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Applied, Exchange, Identity, Reading


@dataclass(frozen=True)
class Place:
    """Where a run is written, and which of its samples stay: `keep` as in the sequence file."""

    folder: Path
    run: str
    software_id: int
    keep: str


class RunWriter:
    """The one writer of one run. `record` returns when the event is durable."""

    def __init__(self, place: Place, connection: sqlite3.Connection, captures: CapturesFile) -> None:
        self.run_id = place.run
        self._place = place
        self._path = place.folder / "logbook.db"
        self._connection = connection
        self._captures = captures
        self._segment = 0
        self._dropped = captures.drop_all_but(self._kept())
        # a stay's captures come before the stay itself, and those of the next may come in between
        self._headers: dict[CaptureId, Capture] = {}
        self._early_identities: list[Identity] = []

    def record(self, event: Event) -> None:
        """StorageError when the disk or the database refuses; what was recorded before stays.

        The reserve is freed then, so that the end of the run can still be written.
        """
        try:
            with troubles(self._path):
                self._record(event)
        except StorageError:
            (self._place.folder / "reserve.bin").unlink(missing_ok=True)
            raise

    def _record(self, event: Event) -> None:
        match event:
            case Capture():
                self._capture(event)
            case AttemptFinished():
                self._stay(event)
            case Exchange() | Applied() | Reading():
                self._chatter(event)
            case SegmentStarted() | SegmentEnded() | Identity() | Note() | SafeState() | Check():
                with transaction(self._connection):
                    self._rare(event)

    def _capture(self, capture: Capture) -> None:
        if self._place.keep != "none":
            self._captures.write(capture)
        self._headers[capture.id] = capture

    def _stay(self, event: AttemptFinished) -> None:
        """Samples that do not stay go last: a stay is never without what it says was kept."""
        unknown = [identifier for identifier in event.captures if identifier not in self._headers]
        if unknown:
            raise StorageError(f"A stay names captures that were never recorded: {unknown}. Nothing of it was stored.")
        kept = self._worth_keeping(event)
        with transaction(self._connection):
            self._attempt(event, kept)
        if self._place.keep != "none" and len(kept) < len(event.captures):
            self._captures.drop(set(event.captures) - kept)
        for identifier in event.captures:
            del self._headers[identifier]

    def _worth_keeping(self, event: AttemptFinished) -> set[CaptureId]:
        every, keep = set(event.captures), self._place.keep
        if keep == "all":
            return every
        if keep == "doubtful":
            well = event.outcome == "ok" and all(check.finding in {"ok", "not evaluated"} for check in event.checks)
            return set() if well and all(d.status == "locked" for d in event.demodulations) else every
        if keep == "one per point" and event.outcome == "ok":
            has_one = any(kept.point == event.attempt.point.index for kept in self._kept())
            return set() if has_one else set(event.captures[:1])
        return set()

    def _kept(self) -> set[CaptureId]:
        rows = self._connection.execute(
            "SELECT point, attempt, number FROM capture WHERE run = ? AND kept", (self.run_id,)
        ).fetchall()
        return {CaptureId(*row) for row in rows}

    def _chatter(self, event: Exchange | Applied | Reading) -> None:
        """Without a sync of its own: a killed process loses nothing, a power cut at most the chatter since the last
        stay, since the stay's own commit syncs all that went before."""
        self._connection.execute("PRAGMA synchronous = NORMAL")
        try:
            if isinstance(event, Exchange):
                self._exchange(event)
            elif isinstance(event, Applied):
                self._applied(event)
            else:
                self._reading(event)
        finally:
            self._connection.execute("PRAGMA synchronous = FULL")

    def _insert(self, table: str, *values: object) -> None:
        self._connection.execute(f"INSERT INTO {table} VALUES ({', '.join('?' * len(values))})", values)

    def _exchange(self, e: Exchange) -> None:
        self._insert(
            "exchange", None, self.run_id, e.at.utc, e.at.count, e.role, e.sent, e.received, e.block_bytes,
            e.block_sha256, e.seconds, e.trouble, e.maybe_executed,
        )  # fmt: skip

    def _applied(self, e: Applied) -> None:
        term = e.setting.term
        unit = TERMS[term].unit if term in TERMS else ""
        self._insert(
            "setting", None, self.run_id, e.at.utc, e.at.count, term.role, term.name, unit, e.setting.value,
            e.read_back, e.tolerance, e.within, e.settled_s,
        )  # fmt: skip

    def _reading(self, e: Reading) -> None:
        unit = TERMS[e.term].unit if e.term in TERMS else ""
        self._insert(
            "reading", None, self.run_id, e.at.utc, e.at.count, e.at.monotonic_s, e.term.role, e.term.name, unit,
            e.value, e.standard_deviation, e.count, e.phase,
        )  # fmt: skip

    def _rare(self, event: SegmentStarted | SegmentEnded | Identity | Note | SafeState | Check) -> None:
        match event:
            case SegmentStarted():
                self._segment = event.number
                self._insert(
                    "segment", self.run_id, event.number, event.reason, event.at.utc, os.getpid(), self._dropped,
                    None, None, None,
                )  # fmt: skip
                for identity in self._early_identities:
                    self._identity(identity)
                self._early_identities.clear()
            case SegmentEnded():
                self._connection.execute(
                    "UPDATE segment SET ended_utc = ?, state = ?, end_reason = ? WHERE run = ? AND number = ?",
                    (event.at.utc, event.state, event.reason, self.run_id, self._segment),
                )
            case Identity():
                # the bench is opened, and proves who is there, before the segment's first line
                if self._segment:
                    self._identity(event)
                else:
                    self._early_identities.append(event)
            case Note():
                self._insert("event", None, self.run_id, event.at.utc, event.at.count, event.role, event.severity,
                             event.words)  # fmt: skip
            case SafeState():
                steps = to_json(event.steps)
                self._insert("safe_state", self.run_id, event.at.count, event.at.utc, event.confirmed, steps)
            case Check():
                self._finding(event)

    def _identity(self, e: Identity) -> None:
        self._insert(
            "identity", self.run_id, self._segment, e.role, e.at.utc, e.resource, e.maker, e.model, e.serial_number,
            e.firmware, e.driver,
        )  # fmt: skip

    def _finding(
        self, check: Check, point: int | None = None, attempt: int | None = None, conclusion_id: int | None = None
    ) -> None:
        self._insert("finding", None, self.run_id, point, attempt, check.name, check.subject, check.statistic,
                     check.limit, check.finding, check.words, conclusion_id)  # fmt: skip

    def _attempt(self, e: AttemptFinished, kept: set[CaptureId]) -> None:
        point, number = e.attempt.point.index, e.attempt.number
        p = e.received_power
        measured: tuple[float | None, ...] = (None,) * 9
        if p is not None:
            measured = (
                p.requested_dbm, p.attenuation_set_db, p.attenuation_read_db, p.tap_before_w, p.tap_before_sd_w,
                p.tap_after_w, p.tap_after_sd_w, p.received_power_dbm, p.received_power_u_db,
            )  # fmt: skip
        self._insert(
            "attempt", self.run_id, point, number, self._segment, e.at.count, e.attempt.reason, e.outcome, e.reason,
            e.attempt.planned_time_s, e.attempt.captures, e.started.utc, e.started.count, e.at.utc, e.seconds,
            *measured, to_json(e),
        )  # fmt: skip
        for identifier in e.captures:
            self._header(self._headers[identifier], identifier in kept)
        for demodulation in e.demodulations:
            self._demodulation(demodulation)
        for check in e.checks:
            self._finding(check, point, number)

    def _header(self, capture: Capture, kept: bool) -> None:
        key = (self.run_id, capture.id.point, capture.id.attempt, capture.id.number)
        self._insert("capture", *key, capture.at.utc, capture.sample_rate_hz, capture.seed, kept)
        for position, lane in enumerate(capture.lanes):
            self._insert("lane", *key, lane.name, position, len(lane.codes), lane.volts_per_code, lane.offset_v,
                         lane.clipped_fraction, lane.sha256)  # fmt: skip

    def _demodulation(self, d: Demodulation) -> None:
        analysis = self._analysis(d.chain_sha256)
        key = (d.capture.point, d.capture.attempt, d.capture.number)
        self._insert("demodulation", analysis, self.run_id, *key, d.status, d.reason, d.snr_db, d.evm_percent,
                     d.gmi_bits, d.seconds)  # fmt: skip
        for position, t in enumerate(d.tributaries):
            self._insert("tributary", analysis, *key, t.name, position, t.bits, t.errors, t.snr_db)
        for position, stage in enumerate(d.stages):
            self._insert("stage", analysis, *key, position, stage.stage, stage.seconds, to_json(stage.figures))

    def _analysis(self, chain_sha256: str) -> int:
        key = (self.run_id, chain_sha256, self._place.software_id)
        self._connection.execute(
            "INSERT OR IGNORE INTO analysis (run, chain_sha256, software_id) VALUES (?, ?, ?)", key
        )
        found = self._connection.execute(
            "SELECT analysis FROM analysis WHERE run = ? AND chain_sha256 = ? AND software_id = ?", key
        ).fetchone()
        return int(found[0])

    def conclude(self, conclusion: Conclusion) -> None:
        """Stored beside an earlier one, never over it."""
        with troubles(self._path), transaction(self._connection):
            number = self._connection.execute(
                "INSERT INTO conclusion (run, at_utc, software_id, conclusion_json) "
                "VALUES (?, strftime('%Y-%m-%dT%H:%M:%f000Z', 'now'), ?, ?)",
                (self.run_id, self._place.software_id, to_json(conclusion)),
            ).lastrowid
            for s in conclusion.sensitivities:
                self._insert(
                    "sensitivity", number, self.run_id, s.group, s.received_power_dbm, s.statistical_low_dbm,
                    s.statistical_high_dbm, s.low_dbm, s.high_dbm, s.coverage, s.extrapolated, s.method,
                )  # fmt: skip
            for p in conclusion.points:
                self._insert(
                    "curve_point", number, self.run_id, p.group, p.point, p.received_power_dbm, p.received_power_u_db,
                    p.errors, p.bits, p.ber, p.ber_low, p.ber_high, p.upper_limit, p.stays, p.captures_locked,
                    p.captures_total, p.fitted, "; ".join(p.findings),
                )  # fmt: skip
            for check in conclusion.checks:
                self._finding(check, conclusion_id=number)

    def close(self) -> None:
        """Drop captures whose stay never finished, then seal the captures file under its hash."""
        with troubles(self._path):
            self._dropped += self._captures.drop_all_but(self._kept())
            sha256 = self._captures.seal()
            with transaction(self._connection):
                self._connection.execute("UPDATE run SET captures_sha256 = ? WHERE run = ?", (sha256, self.run_id))
                self._connection.execute(
                    "UPDATE segment SET discarded_captures = ? WHERE run = ? AND number = ?",
                    (self._dropped, self.run_id, self._segment),
                )
