"""One instrument: a driver over a link. Nothing is taken for set until the instrument says so itself."""

from __future__ import annotations

import math
import statistics

from owlight.clock import Clock
from owlight.driver import Action, Driver, Record, Setting, program_message, query, value_of
from owlight.errors import InstrumentError
from owlight.instrument.record import LaneRecord, fetch_lane
from owlight.instrument.settling import wait_arrived, wait_settled
from owlight.link import Link, Stamper
from owlight.quantity import words
from owlight.scpi import ErrorEntry, IdentityText, hint
from owlight.scpi.errors import OUT_OF_RANGE
from owlight.vocabulary import events, values
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Applied, Identity, Term, Value

QUERY_DEADLINE_S = 5.0
_MOST_ENTRIES = 64


class Instrument:
    """Every method is bounded; LinkError where the link fails, InstrumentError where the instrument disagrees."""

    def __init__(
        self, role: str, driver: Driver, link: Link, emit: events.Emit, stamper: Stamper, clock: Clock
    ) -> None:
        self.role = role
        self.driver = driver
        self.link = link
        self._emit = emit
        self._stamper = stamper
        self._clock = clock
        self._applied: dict[Term, Applied] = {}
        self._prepared = False

    def identify(self) -> Identity:
        """Who answers; nothing but `*IDN?` is sent, since the instrument may be in somebody's use."""
        try:
            who = IdentityText.from_text(self.link.identity_text or self._ask("*IDN?"))
        except ValueError as error:
            raise InstrumentError(f"{self.role}: {error}. Look at the address.", self.role) from None
        return Identity(
            at=self._stamper.stamp(),
            role=self.role,
            resource=self.link.resource,
            maker=who.maker,
            model=who.model,
            serial_number=who.serial_number,
            firmware=who.firmware,
            driver=self.driver.driver,
        )

    def take_over(self) -> None:
        """Empty the error queue into the record of exchanges, so that old entries are not taken for ours."""
        self._drain()

    def set(self, term: Term, value: Value) -> Applied:
        """Command, completion, error queue, settling, read-back, comparison; the read-back is what counts from then."""
        setting = self._setting(term)
        began_s = self._clock.monotonic_s()
        try:
            message = program_message(self.driver, term, value)
        except ValueError as error:
            raise self._refused(term, value, str(error)) from None
        entries = self._tell(message, max(QUERY_DEADLINE_S, setting.settled.at_most_s))
        if entries:
            raise self._refused(term, value, "; ".join(map(_in_words, entries)), entries)
        self._settle(term, setting, value)
        applied = self._compared(term, value, self._read_back(term), self._clock.monotonic_s() - began_s)
        self._emit(applied)
        if not applied.within:
            read_back = "not a number" if applied.read_back is None else _words(term, applied.read_back)
            raise self._refused(term, value, f"no error, but it reads back {read_back}")
        self._applied[term] = applied
        self._check_coupled(term, setting)
        return applied

    def read_setting(self, term: Term) -> Value | None:
        """How a setting stands, asked now; nothing is set."""
        self._setting(term)
        return self._read_back(term)

    def confirm(self, term: Term, value: Value) -> Value:
        """Asked now and held against `value`; InstrumentError where it stands otherwise. Nothing is set."""
        found = self.read_setting(term)
        if found is None or not _near(value, found, self.driver.tolerance_of(term)):
            stands = "not a number" if found is None else _words(term, found)
            raise InstrumentError(
                f"{term} stands at {stands} where {_words(term, value)} was asked for. Nothing is measured with it; "
                "look for another setting that moves it, or for somebody at the instrument.",
                self.role,
            )
        return found

    def read(self, term: Term, count: int = 1, phase: str = "") -> values.Reading:
        """Mean and standard deviation of `count` fresh readings; None as soon as one of them is not a number."""
        if term.name in self.driver.setting:
            found = [self._number(term, self._read_back(term)) for _ in range(count)]
        else:
            deadline_s = self._reading_deadline_s(term)
            found = [self._number(term, self._fresh(term, deadline_s)) for _ in range(count)]
        numbers = [number for number in found if number is not None]
        whole = len(numbers) == count
        reading = values.Reading(
            at=self._stamper.stamp(),
            term=term,
            value=statistics.fmean(numbers) if whole else None,
            standard_deviation=statistics.stdev(numbers) if whole and count > 1 else None,
            count=count,
            phase=phase,
        )
        self._emit(reading)
        return reading

    def act(self, term: Term) -> None:
        """Do it and wait until it is over."""
        action: Action | None = self.driver.action.get(term.name)
        if action is None:
            raise self._unknown(term)
        entries = self._tell(action.command, action.settled.at_most_s)
        if entries:
            raise self._refused(term, "", "; ".join(map(_in_words, entries)))
        wait_settled(self.role, action.settled, self._ask, self._clock)

    def record(
        self, channels: tuple[int, ...], record_length: int, ranges_v: dict[int, float]
    ) -> tuple[LaneRecord, ...]:
        """Arm, wait, fetch every channel, check for errors. A short record comes back short: it is a finding."""
        record = self.driver.record
        if record is None:
            raise self._unknown(Term(self.role, "record"))
        if not self._prepared:
            self._must_obey(record.prepare)
            self._prepared = True
        self._arm_and_wait(record)
        lanes = tuple(
            fetch_lane(self.link, record, channel, record_length, ranges_v.get(channel)) for channel in channels
        )
        entries = self._drain()
        if entries:
            raise InstrumentError(
                f"{self.role} reports an error with the record: {'; '.join(map(_in_words, entries))}. "
                "The record is not used; look at the instrument.",
                self.role,
            )
        return lanes

    def _arm_and_wait(self, record: Record) -> None:
        if record.settled.by == "opc":
            self._complete(record.arm, record.settled.at_most_s)
            return
        self.link.write(record.arm, QUERY_DEADLINE_S)
        try:
            wait_settled(self.role, record.settled, self._ask, self._clock)
        except InstrumentError:
            if record.abort:
                self.link.write(record.abort, QUERY_DEADLINE_S)
            raise

    def _setting(self, term: Term) -> Setting:
        if term.name not in self.driver.setting:
            raise self._unknown(term)
        return self.driver.setting[term.name]

    def _ask(self, message: str) -> str:
        return self.link.query(message, QUERY_DEADLINE_S)

    def _tell(self, message: str, deadline_s: float = QUERY_DEADLINE_S) -> list[ErrorEntry]:
        """Send, wait for completion where the instrument can say it, and return what its error queue says."""
        if "*OPC?" in self.driver.lacks:
            self.link.write(message, deadline_s)
        else:
            self._complete(message, deadline_s)
        return self._drain()

    def _complete(self, message: str, deadline_s: float) -> None:
        answered = self.link.query(f"{message};*OPC?", deadline_s)
        if answered.strip().lstrip("+") != "1":
            self.link.close()  # if this answer belongs to another question, so will all that follow
            raise InstrumentError(
                f"{self.role} answers *OPC? with {answered[:80]!r} instead of 1: its answers may not belong to our "
                f"questions. Whether it did {message!r} is unknown and the session is closed; look at the link.",
                self.role,
            )

    def _must_obey(self, messages: tuple[str, ...]) -> None:
        for message in messages:
            if entries := self._tell(message):
                raise InstrumentError(
                    f"{self.role} refused {message!r}: {'; '.join(map(_in_words, entries))}. "
                    "Its driver file does not fit it; nothing was measured.",
                    self.role,
                )

    def _drain(self) -> list[ErrorEntry]:
        """The error queue to its end. It is never cleared: what stands in it is on record as exchanges."""
        if "error queue" in self.driver.lacks:
            return []
        entries: list[ErrorEntry] = []
        for _ in range(_MOST_ENTRIES):
            try:
                entry = ErrorEntry.from_text(self._ask(self.driver.error_query))
            except ValueError as error:
                raise InstrumentError(f"{self.role}: {error}. Its driver file does not fit it.", self.role) from None
            if entry.number == 0:
                return entries
            entries.append(entry)
        raise InstrumentError(f"The error queue of {self.role} has no end. Look at the instrument.", self.role)

    def _settle(self, term: Term, setting: Setting, value: Value) -> None:
        tolerance = self.driver.tolerance_of(term)

        def there() -> bool:
            found = self._read_back(term)
            return found is not None and _near(value, found, tolerance)

        if setting.settled.by == "stable":
            wait_arrived(setting.settled, there, self._clock)
        else:
            wait_settled(self.role, setting.settled, self._ask, self._clock)

    def _read_back(self, term: Term) -> Value | None:
        return self._understood(term, self._ask(query(self.driver, term)))

    def _fresh(self, term: Term, deadline_s: float) -> Value | None:
        return self._understood(term, self.link.query(query(self.driver, term), deadline_s))

    def _understood(self, term: Term, response: str) -> Value | None:
        try:
            return value_of(self.driver, term, response)
        except ValueError as error:
            raise InstrumentError(
                f"{term} is answered with {response[:80]!r}: {error}. Its driver file does not fit the instrument.",
                self.role,
            ) from None

    def _number(self, term: Term, value: Value | None) -> float | None:
        return None if value is None or isinstance(value, str) or not math.isfinite(value) else float(value)

    def _reading_deadline_s(self, term: Term) -> float:
        reading = self.driver.reading.get(term.name)
        if reading is None:
            raise self._unknown(term)
        return reading.at_most_s

    def _compared(self, term: Term, value: Value, read_back: Value | None, settled_s: float) -> Applied:
        tolerance = self.driver.tolerance_of(term)
        return Applied(
            at=self._stamper.stamp(),
            setting=values.Setting(term, value),
            read_back=read_back,
            tolerance=tolerance,
            within=read_back is not None and _near(value, read_back, tolerance),
            settled_s=settled_s,
        )

    def _check_coupled(self, term: Term, setting: Setting) -> None:
        for name in setting.coupled:
            other = self._applied.get(Term(term.role, name))
            if other is None:
                continue
            now = self._compared(other.setting.term, other.setting.value, self._read_back(other.setting.term), 0.0)
            self._emit(now)
            if not now.within:
                del self._applied[other.setting.term]
                raise InstrumentError(
                    f"Setting {term} moved {other.setting.term} to {now.read_back}, away from {other.setting.value}. "
                    f"Set {term} before {other.setting.term}, or choose values that go together.",
                    self.role,
                )

    def _allowed(self, term: Term) -> str:
        """The range in words: what the driver says, or what the instrument answers; empty where neither does."""
        limits = self.driver.range_of(term)
        if limits is None and self.driver.setting[term.name].range_ == "asked":
            asked = [self._understood(term, self._ask(f"{query(self.driver, term)} {end}")) for end in ("MIN", "MAX")]
            ends = sorted(float(end) for end in asked if end is not None and not isinstance(end, str))
            limits = (ends[0], ends[1]) if len(ends) == 2 else None
        return "" if limits is None else f"{_words(term, limits[0])} to {_words(term, limits[1])}"

    def _refused(
        self, term: Term, value: Value, reason: str, entries: list[ErrorEntry] | None = None
    ) -> InstrumentError:
        self._applied.pop(term, None)
        allowed = ""
        if entries is None or any(entry.number in OUT_OF_RANGE for entry in entries):
            try:
                allowed = self._allowed(term) if term.name in self.driver.setting else ""
            except InstrumentError:
                allowed = ""  # the refusal is the news; that its limits cannot be read is not
        span = f" Allowed: {allowed}." if allowed else ""
        asked = f"{term} to {_words(term, value)}" if value != "" else str(term)
        return InstrumentError(
            f"{self.role} did not do {asked} as asked: {reason}.{span} Nothing is measured with it; change the value.",
            self.role,
        )

    def _unknown(self, term: Term) -> InstrumentError:
        return InstrumentError(f"The driver {self.driver.driver} has no {term}. Choose another driver.", self.role)


def _near(asked: Value, found: Value, tolerance: float | None) -> bool:
    if isinstance(asked, str) or isinstance(found, str) or tolerance is None:
        return asked == found
    # one part in 1e9 more: a value at the edge of its tolerance must not depend on the last bit of a conversion
    return abs(found - asked) <= tolerance * (1 + 1e-9) + 1e-12 * abs(asked)


def _words(term: Term, value: Value) -> str:
    if isinstance(value, bool):
        return "on" if value else "off"
    return value if isinstance(value, str) else words(float(value), TERMS[term].unit, 9)


def _in_words(entry: ErrorEntry) -> str:
    return f"{entry} ({hint(entry)})" if hint(entry) else str(entry)
