"""What was recorded is found again; what cannot be recorded is said."""

from __future__ import annotations

import math
import shutil
import sqlite3
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from owlight.errors import BusyError, InputError, StorageError
from owlight.logbook import Logbook
from owlight.logbook.codec import from_json, to_json
from owlight.logbook.read import captures, curve, history, open_reader, provenance, runs
from owlight.vocabulary.captures import CaptureId, StageReport
from owlight.vocabulary.events import AttemptFinished, Check
from owlight.vocabulary.plan import Plan
from owlight.vocabulary.result import Conclusion

Told = tuple[Path, str, Plan, list[AttemptFinished]]


def test_plan_reads_back_equal(told: Told) -> None:
    folder, run, plan, _ = told
    with open_reader(folder) as reader:
        assert provenance.plan(reader, run) == plan


def test_history_reads_back_equal(told: Told) -> None:
    folder, run, _, stays = told
    with open_reader(folder) as reader:
        assert history.history(reader, run) == tuple(stays)


def test_json_keeps_every_value(told: Told) -> None:
    for stay in told[3]:
        assert from_json(to_json(stay), AttemptFinished) == stay


def test_capture_reads_back_byte_identical(told: Told, story: Any) -> None:
    folder, run, _, _ = told
    written = story.capture(1, 2)
    read = captures.load(folder, run, CaptureId(1, 2, 1))
    assert [lane.sha256 for lane in read.lanes] == [lane.sha256 for lane in written.lanes]
    assert all(np.array_equal(a.codes, b.codes) for a, b in zip(read.lanes, written.lanes, strict=True))


def test_curve_view_pools_counts(told: Told) -> None:
    folder, run, _, stays = told
    connection = sqlite3.connect(folder / "logbook.db")
    rows = connection.execute("SELECT errors, bits, ber FROM ber_curve WHERE run = ? ORDER BY point", (run,)).fetchall()
    for point, (errors, bits, ber) in enumerate(rows):
        mine = [s.demodulations[0] for s in stays if s.attempt.point.index == point]
        assert errors == sum(d.errors for d in mine) and bits == sum(d.bits for d in mine)
        assert ber == pytest.approx(errors / bits, rel=1e-15)


def test_readings_view_knows_the_settings(tmp_path: Path, plan: Plan, story: Any, provenance: Any) -> None:
    """Each reading at its own stay, also while the stay before it still waits for its demodulation."""
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        for point in (0, 1):
            writer.record(story.capture(point, 1))
        stays = [story.stay(plan, point, 1, errors=5) for point in (0, 1)]
        # the first ends after the second has begun and read
        late = (replace(stays[0], at=story.stamp()), replace(stays[1], at=story.stamp()))
        for reading in (*stays[0].readings, *stays[1].readings):
            writer.record(reading)
        for stay in late:
            writer.record(stay)
        writer.close()
    connection = sqlite3.connect(tmp_path / "logbook.db")
    rows = connection.execute("SELECT point, requested_dbm, role, name, value, unit FROM stay_reading").fetchall()
    connection.close()
    assert rows == [
        (i, p, "power_meter", "power", stays[i].readings[0].value, "W") for i, p in ((0, -39.0), (1, -38.0))
    ]


def test_sqlite_utils_command_prints_curve(told: Told) -> None:
    query = f"select received_power_dbm, errors, bits, ber from ber_curve where run = '{told[1]}'"
    command = [sys.executable, "-m", "sqlite_utils", str(told[0] / "logbook.db"), query]
    printed = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    assert printed.count("received_power_dbm") == 2 and "800000" in printed


def test_stays_carry_power_and_tributaries(told: Told) -> None:
    folder, run, _, written = told
    with open_reader(folder) as reader:
        stays = curve.stays(reader, run)
    assert [(s.point, s.attempt) for s in stays] == [(w.attempt.point.index, w.attempt.number) for w in written]
    assert [t.name for t in stays[0].tributaries] == ["XI", "XQ", "YI", "YQ"]
    assert stays[0].received_power_w == pytest.approx(1e-3 * 10**-3.9, rel=1e-12)


def test_failed_stay_stays_out_of_curve(
    tmp_path: Path, plan: Plan, story: Any, provenance: Any, tell_run: Callable[..., list[AttemptFinished]]
) -> None:
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        tell_run(writer, story, plan, stays=2)
        failed = replace(story.stay(plan, 0, 2, errors=9), outcome="failed", reason="half a block", captures=())
        writer.record(replace(failed, demodulations=()))
        writer.close()
    with open_reader(tmp_path) as reader:
        assert len(curve.stays(reader, writer.run_id)) == 2
        assert runs.header(reader, writer.run_id).stays_failed == 1


def test_run_without_end_broke_off(tmp_path: Path, plan: Plan, story: Any, provenance: Any) -> None:
    from owlight.vocabulary.events import SegmentStarted

    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        writer.record(SegmentStarted(story.stamp(), 1, "started"))
        with open_reader(tmp_path) as reader:
            assert runs.header(reader, writer.run_id).state == "measuring"
    with open_reader(tmp_path) as reader:
        assert runs.header(reader, writer.run_id).state == "broken off"


def test_second_writer_is_refused(tmp_path: Path) -> None:
    with Logbook.open(tmp_path), pytest.raises(StorageError, match="Another run writes"):
        Logbook.open(tmp_path)


def test_orphan_captures_are_dropped(tmp_path: Path, plan: Plan, story: Any, provenance: Any) -> None:
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        writer.record(story.capture(0, 1))
        writer.record(story.stay(plan, 0, 1, errors=5))
        writer.record(story.capture(0, 2))
        writer.close()
    assert captures.load(tmp_path, writer.run_id, CaptureId(0, 1, 1)).lanes
    with pytest.raises(StorageError, match="holds no capture"):
        captures.load(tmp_path, writer.run_id, CaptureId(0, 2, 1))


def test_hashes_stay_when_samples_go(
    tmp_path: Path, plan_keeping: Callable[[str], Plan], story: Any, provenance: Any
) -> None:
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan_keeping("none"), provenance)
        writer.record(story.capture(0, 1))
        writer.record(story.stay(plan_keeping("none"), 0, 1, errors=5))
        writer.close()
    with open_reader(tmp_path) as reader:
        assert len(captures.hashes(reader, writer.run_id)) == 4
    with pytest.raises(StorageError):
        captures.load(tmp_path, writer.run_id, CaptureId(0, 1, 1))


def test_sealed_captures_have_their_hash(told: Told) -> None:
    import hashlib

    folder, run, _, _ = told
    sealed = hashlib.sha256((folder / "captures" / f"{run}.db").read_bytes()).hexdigest()
    connection = sqlite3.connect(folder / "logbook.db")
    assert connection.execute("SELECT captures_sha256 FROM run").fetchone()[0] == sealed
    assert not (folder / "captures" / f"{run}.db-wal").exists()


def test_file_held_open_is_not_sealed(tmp_path: Path, plan: Plan, story: Any, provenance: Any) -> None:
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        writer.record(story.capture(0, 1))
        writer.record(story.stay(plan, 0, 1, errors=5))
        held = sqlite3.connect(tmp_path / "captures" / f"{writer.run_id}.db")
        assert held.execute("SELECT count(*) FROM waveform").fetchone()[0] == 4
        writer.close()
    held.close()
    assert captures.load(tmp_path, writer.run_id, CaptureId(0, 1, 1)).lanes
    with open_reader(tmp_path) as reader:
        assert reader.value("SELECT captures_sha256 FROM run") is None


def test_newest_conclusion_holds(tmp_path: Path, plan: Plan, provenance: Any) -> None:
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        for words in ("first", "second"):
            writer.conclude(Conclusion((), (), (), (), (), words))
        writer.close()
    with open_reader(tmp_path) as reader:
        found = curve.conclusion(reader, writer.run_id)
    assert found is not None and found.words == "second"


def test_runs_are_found_by_beginning(told: Told) -> None:
    folder, run, _, _ = told
    with open_reader(folder) as reader:
        assert runs.find_run(reader, run[:8]) == runs.find_run(reader, "last") == run
        with pytest.raises(InputError, match="There is no run"):
            runs.find_run(reader, "zzz")


def test_missing_logbook_is_input_error(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="There is no logbook"):
        open_reader(tmp_path)


def test_foreign_file_is_left_alone(tmp_path: Path) -> None:
    """Another program's file of that name: neither written to nor taken for a logbook; its bytes stay."""
    path = tmp_path / "logbook.db"
    with sqlite3.connect(path) as connection:
        connection.execute("CREATE TABLE recipe (name TEXT)")
    connection.close()
    before = path.read_bytes()
    with pytest.raises(StorageError, match=r"not a logbook of this program; nothing of it was changed\. Name another"):
        Logbook.open(tmp_path)
    with pytest.raises(InputError, match=r"is not a logbook of this program\. Name another folder"):
        open_reader(tmp_path)
    assert path.read_bytes() == before


def test_empty_file_is_no_logbook_yet(tmp_path: Path) -> None:
    path = tmp_path / "logbook.db"
    path.touch()
    with pytest.raises(InputError, match="is empty: it is not a logbook"):
        open_reader(tmp_path)
    Logbook.open(tmp_path).close()
    open_reader(tmp_path)


def test_trouble_in_reading_is_not_called_writing(told: Told) -> None:
    with open_reader(told[0]) as reader, pytest.raises(StorageError, match="could not be read"):
        reader.rows("SELECT nothing FROM nowhere")


def test_full_disk_is_two_sentences(
    tmp_path: Path, plan: Plan, story: Any, provenance: Any, tell_run: Callable[..., list[AttemptFinished]]
) -> None:
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        pages = logbook._connection.execute("PRAGMA page_count").fetchone()[0]
        logbook._connection.execute(f"PRAGMA max_page_count = {pages}")  # what a full disk does to SQLite
        with pytest.raises(StorageError, match=r"what it held before is safe\. Free disk space"):
            tell_run(writer, story, plan, stays=400)
        assert not (tmp_path / "reserve.bin").exists()  # freed, so that the end of the run finds room
    with open_reader(tmp_path) as reader:
        assert provenance_of(reader, writer.run_id) == plan


def provenance_of(reader: Any, run: str) -> Plan:
    return provenance.plan(reader, run)


def test_numpy_scalars_are_numbers(told: Told) -> None:
    connection = sqlite3.connect(":memory:")
    for value in (np.int64(7), np.float32(0.5), np.bool_(True)):
        assert isinstance(connection.execute("SELECT ?", (value,)).fetchone()[0], int | float)


@pytest.mark.parametrize(("keep", "left"), [("all", 4), ("doubtful", 1), ("one per point", 2), ("none", 0)])
def test_samples_stay_as_asked(
    tmp_path: Path, plan_keeping: Callable[[str], Plan], story: Any, provenance: Any, keep: str, left: int
) -> None:
    plan = plan_keeping(keep)
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        for point, attempt in ((0, 1), (1, 1), (0, 2), (1, 2)):
            writer.record(story.capture(point, attempt))
            stay = story.stay(plan, point, attempt, errors=5)
            if (point, attempt) == (1, 2):
                stay = replace(stay, checks=(Check("clipping", "capture 1/2/1", 0.1, 0.01, "bad", "clipped"),))
            writer.record(stay)
        writer.close()
    stored = sqlite3.connect(tmp_path / "captures" / f"{writer.run_id}.db")
    assert stored.execute("SELECT count(DISTINCT point || '/' || attempt) FROM waveform").fetchone()[0] == left
    logbook_rows = sqlite3.connect(tmp_path / "logbook.db")
    assert logbook_rows.execute("SELECT sum(kept), count(*) FROM capture").fetchone() == (left, 4)


def test_captures_of_next_stay_may_come_first(tmp_path: Path, plan: Plan, story: Any, provenance: Any) -> None:
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        writer.record(story.capture(0, 1))
        writer.record(story.capture(1, 1))
        writer.record(story.stay(plan, 0, 1, errors=5))
        writer.record(story.stay(plan, 1, 1, errors=5))
        writer.close()
    with open_reader(tmp_path) as reader:
        assert {key[0].point for key in captures.hashes(reader, writer.run_id)} == {0, 1}


def test_stay_without_its_capture_is_refused(tmp_path: Path, plan: Plan, story: Any, provenance: Any) -> None:
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        with pytest.raises(StorageError, match="never recorded"):
            writer.record(story.stay(plan, 0, 1, errors=5))


def test_figures_that_are_no_number_survive(tmp_path: Path, plan: Plan, story: Any, provenance: Any) -> None:
    stay = story.stay(plan, 0, 1, errors=5)
    stage = StageReport("carrier phase", 0.01, {"linewidth_hz": math.nan, "margin_db": math.inf})
    stay = replace(stay, demodulations=(replace(stay.demodulations[0], stages=(stage,)),))
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        writer.record(story.capture(0, 1))
        writer.record(stay)
        writer.close()
    with open_reader(tmp_path) as reader:
        figures = history.history(reader, writer.run_id)[0].demodulations[0].stages[0].figures
        assert reader.value("SELECT json_valid(finished_json) FROM attempt") == 1
    assert math.isnan(figures["linewidth_hz"]) and figures["margin_db"] == math.inf


def test_second_analysis_does_not_double_counts(told: Told) -> None:
    folder = told[0]
    connection = sqlite3.connect(folder / "logbook.db")
    before = connection.execute("SELECT sum(bits) FROM ber_curve").fetchone()
    connection.execute("INSERT INTO analysis SELECT 2, run, ?, software_id FROM analysis", ("d" * 64,))
    for table, columns in (
        ("demodulation", "run, point, attempt, number, status, reason, snr_db, evm_percent, gmi_bits, seconds"),
        ("tributary", "point, attempt, number, tributary, position, bits, errors, snr_db"),
    ):
        connection.execute(f"INSERT INTO {table} SELECT 2, {columns} FROM {table}")
    assert connection.execute("SELECT sum(bits) FROM ber_curve").fetchone() == before


@pytest.mark.skipif(shutil.which("sqlite3") is None, reason="the sqlite3 command is not installed")
def test_sqlite3_command_prints_curve(told: Told) -> None:
    query = f"select received_power_dbm, errors, bits from ber_curve where run = '{told[1]}'"
    command = ["sqlite3", "-readonly", str(told[0] / "logbook.db"), query]
    printed = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    assert printed.splitlines() == ["-39.0|2003|800000", "-38.0|4003|800000"]


def test_busy_logbook_is_told_apart(tmp_path: Path) -> None:
    """The demo goes to another folder then; any other trouble of storage ends it."""
    with Logbook.open(tmp_path), pytest.raises(BusyError):
        Logbook.open(tmp_path)


def test_implausible_record_is_no_lost_lock(tmp_path: Path, plan: Plan, story: Any, provenance: Any) -> None:
    """A clipped record was judged without looking at errors: it says nothing of how often the chain locks."""
    from dataclasses import replace

    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, provenance)
        writer.record(story.capture(0, 1, 1))
        writer.record(story.capture(0, 1, 2))
        stay = story.stay(plan, 0, 1, errors=5)
        writer.record(replace(stay, captures=(CaptureId(0, 1, 1), CaptureId(0, 1, 2))))
        writer.close()
    with open_reader(tmp_path) as reader:
        (found,) = curve.stays(reader, writer.run_id)
    assert (found.captures_locked, found.captures_total) == (1, 1)
