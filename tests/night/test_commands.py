"""Commands as a person and other programs use them, most of them on one finished night."""

from __future__ import annotations

import json
import os
import re
import shutil
import sqlite3
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from owlight.logbook.read import captures, open_reader, runs
from owlight.vocabulary.terms import ROLES

RUN_KEYS = {
    "run_id", "logbook", "state", "simulated", "sequence", "threshold", "points", "sensitivity", "penalty_db",
    "penalty_reference", "findings", "safe_state", "missing", "reason",
}  # fmt: skip
POINT_KEYS = {
    "received_power_dbm", "received_power_u_db", "errors", "bits", "ber", "ber_low", "ber_high", "upper_limit",
    "findings",
}  # fmt: skip
SENSITIVITY_KEYS = {
    "received_power_dbm", "low_dbm", "high_dbm", "statistical_low_dbm", "statistical_high_dbm", "coverage",
    "extrapolated", "method",
}  # fmt: skip
DEMODULATION_KEYS = {
    "status", "ber", "errors", "bits", "ber_low", "ber_high", "snr_db", "evm_percent", "gmi_bits", "tributaries",
    "stages", "seconds",
}  # fmt: skip


def test_finished_night_has_the_fixed_names(finished: Any) -> None:
    found = finished.answer.json
    assert finished.answer.status == 0
    assert found.keys() >= RUN_KEYS
    assert found["state"] == "finished" and found["simulated"] is True and found["missing"] == []
    assert found["threshold"].keys() == {"name", "ber"}
    assert len(found["points"]) == 5 and all(point.keys() >= POINT_KEYS for point in found["points"])
    assert found["sensitivity"].keys() >= SENSITIVITY_KEYS
    assert found["safe_state"].keys() == {"confirmed", "steps"} and found["safe_state"]["confirmed"] is True
    assert Path(found["logbook"]).is_file() and Path(found["report"]).is_file()


def test_intervals_are_in_order(finished: Any) -> None:
    found = finished.answer.json
    for point in found["points"]:
        assert point["ber_low"] <= point["ber"] <= point["ber_high"]
        assert point["ber"] == point["errors"] / point["bits"]
    s = found["sensitivity"]
    order = ("low_dbm", "statistical_low_dbm", "received_power_dbm", "statistical_high_dbm", "high_dbm")
    values = [s[name] for name in order]
    assert values == sorted(values) and s["low_dbm"] < s["high_dbm"] and s["coverage"] == 0.95
    # the threshold lies within the points
    powers = [point["received_power_dbm"] for point in found["points"]]
    assert min(powers) < s["received_power_dbm"] < max(powers) and s["extrapolated"] is False


def test_show_answers_as_the_run_did(finished: Any, command: Any) -> None:
    shown = command("show", finished.answer.json["run_id"][:8], "--logbook", finished.folder, "--json")
    assert shown.status == 0 and shown.err == ""
    assert shown.json == {key: value for key, value in finished.answer.json.items() if key != "report"}


def test_text_has_the_number_and_no_colour(finished: Any, command: Any) -> None:
    """Complete without a terminal: number, interval, plane, convention, threshold, safe state, what comes next."""
    shown = command("show", "last", "--logbook", finished.folder).out
    s = finished.answer.json["sensitivity"]
    for words in (
        f"Sensitivity  {s['received_power_dbm']:.3f} dBm", f"{s['low_dbm']:.3f} to {s['high_dbm']:.3f} dBm",
        "SIMULATED", "receiver signal input", "total average, both polarisations", "0.0038",
        "confirmed by read-back", "10 of 10 stays measured", "Findings:", "reproduce",
    ):  # fmt: skip
        assert words in shown, words
    assert "\x1b" not in shown and max(map(len, shown.splitlines())) < 400


def test_logbook_and_report_answer(finished: Any, command: Any) -> None:
    listed = command("logbook", "--logbook", finished.folder, "--json").json["runs"]
    assert finished.answer.json["run_id"] in [run["run_id"] for run in listed]
    written = command("report", "last", "--logbook", finished.folder, "--json").json["report"]
    assert Path(written).read_text("utf-8").lower().startswith("<!doctype html>")


def test_reproduction_is_identical_without_the_files(finished: Any, command: Any, tmp_path: Path) -> None:
    folder = tmp_path / "log"
    shutil.copytree(finished.folder, folder)
    hidden = finished.sequence.with_suffix(".gone")
    finished.sequence.rename(hidden)
    try:
        again = command("reproduce", "last", "--logbook", folder, "--json", cwd=tmp_path)
    finally:
        hidden.rename(finished.sequence)
    found = again.json
    assert again.status == 0
    assert found.keys() >= {"identical", "captures_compared", "differences", "sensitivity_original"}
    assert found["identical"] is True and found["captures_compared"] == 10 and found["differences"] == []
    assert found["sensitivity_original"] == found["sensitivity_reproduced"] == finished.answer.json["sensitivity"]
    assert found["run_id"] != found["reproduces"] == finished.answer.json["run_id"]


def test_changed_world_is_told_by_how_much(finished: Any, command: Any, lab: Any, tmp_path: Path) -> None:
    """A noisier receiver: the file, the counts and the sensitivity say so."""
    folder = tmp_path / "log"
    shutil.copytree(finished.folder, folder)
    bench = lab.copy("bench", "simulated_instruments", {})
    lab.copy("world", "simulated_instruments", {'thermal_noise = "18 pA': 'thermal_noise = "25 pA'})
    found = command("reproduce", "last", "--bench", bench, "--logbook", folder, "--json").json
    assert found["identical"] is False and found["captures_compared"] == 10
    differences = "\n".join(found["differences"])
    assert "world" in differences and "18 pA" in differences and "25 pA" in differences
    assert "counts: 5 of 5 points differ" in differences
    delta_db = (
        found["sensitivity_reproduced"]["received_power_dbm"] - found["sensitivity_original"]["received_power_dbm"]
    )
    # thermal noise current up by 2.85 dB, and it is not the only noise
    assert 0.3 < delta_db < 2.9 and f"{delta_db:+.3f} dB" in differences


def test_settings_and_readings_are_reproduced(command: Any, lab: Any) -> None:
    """Without captures the readings are what is compared."""
    few = {'"30 dB"': '"17 dB"', "passes = 2": "passes = 1"}
    sequence = lab.copy("log", "sequences", few, of="power_log")
    first = command("run", sequence, "--bench", "bench", "--logbook", lab.folder / "log", "--json")
    assert first.status == 0 and first.json["sensitivity"] is None and first.json["points"] == []
    assert first.json["stays_done"] == 6 and first.json["missing"] == []
    again = command("reproduce", "last", "--logbook", lab.folder / "log", "--json").json
    assert again["identical"] is True and again["captures_compared"] == 0 and again["readings_compared"] > 12


def test_nested_sweep_gives_a_curve_each(command: Any, lab: Any) -> None:
    """Two powers of the local oscillator: two sensitivities, each with a vertical range of its own."""
    fewer = {
        '"6 dBm", "9 dBm", "12 dBm"': '"6 dBm", "12 dBm"', 'from = "-40 dBm"': 'from = "-39 dBm"',
        "symbols = 50_000": "symbols = 20_000",
    }  # fmt: skip
    sequence = lab.copy("map", "sequences", fewer, of="lo_power_map")
    ran = command("run", sequence, "--bench", "bench", "--logbook", lab.folder / "log", "--json")
    found = {s["group"]: s["received_power_dbm"] for s in ran.json["sensitivities"]}
    assert set(found) == {"lo_power 6 dBm", "lo_power 12 dBm"}
    # the amplifiers' noise weighs less with more local oscillator
    assert found["lo_power 12 dBm"] < found["lo_power 6 dBm"] - 0.5
    ranges = re.findall(r"Vertical range.*XI ([0-9.]+) V", ran.err)
    # 6 dB more local oscillator is twice the amplitude; a rung of the ladder is 1.21
    assert len(ranges) == 2 and 1.6 < max(map(float, ranges)) / min(map(float, ranges)) < 2.5


@pytest.fixture(scope="module")
def record(finished: Any, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The codes of one capture of the night as anybody might save them."""
    path = tmp_path_factory.mktemp("records") / "capture.npz"
    with open_reader(finished.folder) as reader:
        run_id = runs.find_run(reader, finished.answer.json["run_id"])
        identifier = max(key[0] for key in captures.hashes(reader, run_id))
        capture = captures.load(finished.folder, run_id, identifier)
    np.savez(path, codes=np.stack([lane.codes for lane in capture.lanes]))
    return path


AS_SENT = ("--symbol-rate", "32 GBd", "--sample-rate", "80 GS/s", "--modulation", "QPSK", "--json")


def test_record_from_a_file_is_counted(record: Path, command: Any) -> None:
    found = command("demodulate", record, *AS_SENT, "--polarisations", "2", "--rolloff", "0.1", "--reference", "15")
    assert found.status == 0 and found.json.keys() >= DEMODULATION_KEYS
    assert found.json["status"] == "locked" and found.json["errors"] == found.json["ber"] * found.json["bits"] > 0
    assert [t["name"] for t in found.json["tributaries"]] == ["XI", "XQ", "YI", "YQ"]


def test_wrong_pattern_gives_no_ber(record: Path, command: Any) -> None:
    """Of another order than was sent: the best correlation is told, and no ratio of a half is."""
    found = command("demodulate", record, *AS_SENT, "--reference", "11")
    assert found.status == 1 and found.json["status"] == "no lock" and "best correlation" in found.json["reason"]
    assert all(found.json[key] is None for key in ("ber", "errors", "bits", "ber_low", "ber_high"))
    assert found.json["tributaries"] == []


def test_simulate_tells_its_addresses_first(start: Any) -> None:
    server = start("simulate", "bench", "--json")
    roles = json.loads(server.stdout.readline())
    assert set(roles) == set(ROLES)
    assert all(set(addresses) == {"hislip", "socket"} for addresses in roles.values())
    assert all("127.0.0.1" in address for addresses in roles.values() for address in addresses.values())
    server.terminate()
    assert server.wait(20) == 0


def test_curve_is_there_for_sqlite(finished: Any) -> None:
    with sqlite3.connect(f"file:{finished.folder / 'logbook.db'}?mode=ro", uri=True) as logbook:
        rows = logbook.execute("SELECT errors, bits FROM ber_curve").fetchall()
    assert sorted(rows) == sorted((p["errors"], p["bits"]) for p in finished.answer.json["points"])


def test_reader_of_the_output_may_leave(finished: Any) -> None:
    """`| head`: no words about it, and the status of a command that did its work."""
    arguments = [sys.executable, "-m", "owlight", "show", "last", "--logbook", str(finished.folder), "--json"]
    source = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2] / "src")}
    with subprocess.Popen(arguments, stdout=subprocess.PIPE, stderr=subprocess.PIPE, env=source) as process:
        assert process.stdout is not None and process.stderr is not None
        process.stdout.close()
        assert process.stderr.read() == b""
    assert process.returncode == 0
