"""Events become rows. Captures first, then the stay they belong to in one transaction; nothing is overwritten."""

from __future__ import annotations

import os
import sqlite3
from pathlib import Path

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

_URGENT = {"fault", "interlock"}


class RunWriter:
    """The one writer of one run. `record` returns when the event is durable."""

    def __init__(
        self, run: str, connection: sqlite3.Connection, captures: CapturesFile, path: Path, software_id: int, keep: str
    ) -> None:
        self.run_id = run
        self._connection = connection
        self._captures = captures
        self._path = path
        self._software_id = software_id
        self._keep = keep
        self._segment = 0
        # a stay's captures come before the stay itself, and those of the next may come in between
        self._headers: dict[CaptureId, Capture] = {}
        self._early_identities: list[Identity] = []

    def record(self, event: Event) -> None:
        """StorageError when the disk or the database refuses; what was recorded before stays."""
        with troubles(self._path):
            match event:
                case Capture():
                    self._capture(event)
                case AttemptFinished():
                    with transaction(self._connection):
                        self._attempt(event)
                case Exchange() | Applied() | Reading():
                    self._chatter(event)
                case SegmentStarted() | SegmentEnded() | Identity() | Note() | SafeState() | Check():
                    with transaction(self._connection):
                        self._rare(event)

    def _capture(self, capture: Capture) -> None:
        if self._keep != "none":
            self._captures.write(capture)
        self._headers[capture.id] = capture

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
                    "segment", self.run_id, event.number, event.reason, event.at.utc, os.getpid(), 0, None, None, None
                )
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
                self._finding(event, None, None)

    def _identity(self, e: Identity) -> None:
        self._insert(
            "identity", self.run_id, self._segment, e.role, e.at.utc, e.resource, e.maker, e.model, e.serial_number,
            e.firmware, e.driver,
        )  # fmt: skip

    def _finding(self, check: Check, point: int | None, attempt: int | None) -> None:
        self._insert("finding", None, self.run_id, point, attempt, check.name, check.subject, check.statistic,
                     check.limit, check.finding, check.words)  # fmt: skip

    def _attempt(self, e: AttemptFinished) -> None:
        point, number = e.attempt.point.index, e.attempt.number
        p = e.received_power
        measured = (None,) * 9
        if p is not None:
            measured = (
                p.requested_dbm, p.attenuation_set_db, p.attenuation_read_db, p.tap_before_w, p.tap_before_sd_w,
                p.tap_after_w, p.tap_after_sd_w, p.received_power_dbm, p.received_power_u_db,
            )  # type: ignore[assignment]  # fmt: skip
        self._insert(
            "attempt", self.run_id, point, number, self._segment, e.at.count, e.attempt.reason, e.outcome, e.reason,
            e.attempt.planned_time_s, e.attempt.captures, e.started.utc, e.started.count, e.at.utc, e.seconds,
            *measured, to_json(e),
        )  # fmt: skip
        for identifier in e.captures:
            self._header(identifier)
        for demodulation in e.demodulations:
            self._demodulation(demodulation)
        for check in e.checks:
            self._finding(check, point, number)

    def _header(self, identifier: CaptureId) -> None:
        capture = self._headers.pop(identifier)
        key = (self.run_id, identifier.point, identifier.attempt, identifier.number)
        kept = self._keep != "none"
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
            figures = {name: float(value) for name, value in stage.figures.items() if value == value}
            self._insert("stage", analysis, *key, position, stage.stage, stage.seconds, to_json(figures))

    def _analysis(self, chain_sha256: str) -> int:
        key = (self.run_id, chain_sha256, self._software_id)
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
            cursor = self._connection.execute(
                "INSERT INTO conclusion (run, at_utc, software_id, conclusion_json) "
                "VALUES (?, strftime('%Y-%m-%dT%H:%M:%fZ', 'now'), ?, ?)",
                (self.run_id, self._software_id, to_json(conclusion)),
            )
            for s in conclusion.sensitivities:
                self._insert(
                    "sensitivity", cursor.lastrowid, self.run_id, s.group, s.received_power_dbm, s.statistical_low_dbm,
                    s.statistical_high_dbm, s.low_dbm, s.high_dbm, s.coverage, s.extrapolated, s.method,
                )  # fmt: skip

    def close(self) -> None:
        """Drop captures whose stay never finished, then seal the captures file under its hash."""
        with troubles(self._path):
            rows = self._connection.execute(
                "SELECT point, attempt, number FROM capture WHERE run = ?", (self.run_id,)
            ).fetchall()
            dropped = self._captures.drop_unknown({CaptureId(*row) for row in rows})
            sha256 = self._captures.seal()
            with transaction(self._connection):
                self._connection.execute("UPDATE run SET captures_sha256 = ? WHERE run = ?", (sha256, self.run_id))
                self._connection.execute(
                    "UPDATE segment SET discarded_captures = ? WHERE run = ? AND number = ?",
                    (dropped, self.run_id, self._segment),
                )
