"""Every mistake gets its words and its exit status; nothing is opened, nothing is written, nobody sees a traceback."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from owlight import shipped, simulation
from owlight.cli.measure import exit_status

RATES = ("--symbol-rate", "32 GBd", "--sample-rate", "80 GS/s")
INPUT, SAFETY, STORAGE = 2, 4, 5


@pytest.fixture
def unopened(monkeypatch: pytest.MonkeyPatch) -> None:
    """Nothing may be started, so nothing can be opened."""

    def started(*arguments: object, **more: object) -> None:
        pytest.fail("a bench was started")

    monkeypatch.setattr(simulation, "start", started)


def test_two_typos_are_told_at_once(owlight: Any, tmp_path: Path, unopened: None) -> None:
    text = shipped.find("sequences", "power_log").read_text("utf-8")
    text = text.replace('"power_meter.averaging_time"', '"power_metre.averaging_time"')
    text = text.replace('"signal_laser.power" = "10 dBm"', '"signal_laser.power" = "10 dB"')
    path = tmp_path / "typos.toml"
    path.write_text(text, "utf-8")
    lines = {word: 1 + text[: text.index(word)].count("\n") for word in ("power_metre", '"10 dB"')}
    answer = owlight("run", path, "--bench", "bench", "--logbook", tmp_path / "log")
    assert answer.status == INPUT and answer.out == ""
    assert f"typos.toml:{lines['power_metre']}" in answer.err and 'did you mean "power_meter"' in answer.err
    assert f"typos.toml:{lines[chr(34) + '10 dB' + chr(34)]}" in answer.err and "dBm" in answer.err
    assert "Nothing was opened" in answer.err and not (tmp_path / "log").exists()


@pytest.mark.parametrize("command", ["run", "forecast"])
def test_too_much_power_is_refused(owlight: Any, tmp_path: Path, unopened: None, command: str) -> None:
    """Plane, limit, what was computed and the point are named before anything is opened."""
    text = shipped.find("sequences", "qpsk_sensitivity").read_text("utf-8")
    text = text.replace('from = "-40 dBm"\nto = "-36 dBm"\nstep = "0.5 dB"', 'values = ["-36 dBm", "6 dBm"]')
    path = tmp_path / "bright.toml"
    path.write_text(text, "utf-8")
    folder = ("--logbook", tmp_path / "log") if command == "run" else ()
    answer = owlight(command, path, "--bench", "bench", *folder)
    assert answer.status == SAFETY and answer.out == ""
    # 6 dBm is asked for, and the bench file gives the attenuator 0.3 dB of accuracy and the laser 0.5 dB of tolerance
    for words in ("Point 1", "receiver signal input", "limit of 3.00 dBm", "Nothing was set"):
        assert words in answer.err, words
    assert not (tmp_path / "log").exists()


@pytest.mark.parametrize("option", ["--force", "--yes", "--no-limits", "--ignore-limits"])
def test_no_option_lifts_a_limit(owlight: Any, unopened: None, option: str) -> None:
    answer = owlight("run", "qpsk_sensitivity", "--bench", "bench", option)
    assert answer.status == INPUT and "No such option" in answer.err


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("forecast", "nosuch", "--bench", "bench"), "SEQUENCE: There is no sequence 'nosuch'"),
        (("forecast", "qpsk_sensitivity", "--bench", "nosuch"), "--bench: There is no bench 'nosuch'"),
        (("run", "qpsk_sensitivity"), "--bench"),
        (("safe", "--bench", "nosuch"), "nosuch"),
        (("identify", "--bench", "nosuch", "--json"), "nosuch"),
        (("simulate", "nosuch"), "BENCH: There is no bench 'nosuch'"),
        (("show", "last", "--logbook", "nowhere"), "no logbook in nowhere"),
        (("logbook", "--logbook", "nowhere"), "no logbook in nowhere"),
        (("report", "last", "--logbook", "nowhere"), "no logbook in nowhere"),
        (("reproduce", "last", "--logbook", "nowhere"), "no logbook in nowhere"),
        (("demodulate", "nowhere.npz", *RATES), "nowhere.npz"),
        (("sow",), "sow"),
    ],
    ids=lambda value: " ".join(value) if isinstance(value, tuple) else "",
)
def test_missing_things_are_named(
    owlight: Any,
    unopened: None,
    monkeypatch: pytest.MonkeyPatch,
    tmp_path: Path,
    arguments: tuple[str, ...],
    words: str,
) -> None:
    monkeypatch.chdir(tmp_path)
    answer = owlight(*arguments)
    assert answer.status == INPUT and answer.out == "" and words in answer.err
    assert list(tmp_path.iterdir()) == []


def test_folder_that_is_a_file_is_storage(owlight: Any, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    answer = owlight("run", "power_log", "--bench", "bench", "--logbook", tmp_path / "file")
    assert answer.status == STORAGE and "nothing was started" in answer.err


def test_damaged_logbook_is_storage(owlight: Any, tmp_path: Path) -> None:
    (tmp_path / "logbook.db").write_bytes(b"this is no data base" * 100)
    answer = owlight("show", "last", "--logbook", tmp_path)
    assert answer.status == STORAGE and "Copy the file" in answer.err


CODES = np.random.default_rng(1).integers(-90, 90, (4, 4000)).astype(np.int8)


@pytest.mark.parametrize(
    ("arrays", "words"),
    [
        ({"codes": CODES * np.nan}, "not integers"),
        ({"other": CODES}, "no array `codes`, but other"),
        ({"codes": CODES.T}, "Transpose it"),
        ({"codes": CODES[:3]}, "3 x 4000"),
        ({"codes": CODES[:, :0]}, "no sample"),
        ({"codes": CODES * np.array([[1], [0], [1], [1]], np.int8)}, "dead or stuck"),
        ({"codes": CODES * np.array([[1], [0], [1], [1]], np.int8)}, "Record again"),
        ({"codes": CODES, "volts_per_code": np.array(np.inf)}, "volts_per_code"),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_unusable_records_are_told(owlight: Any, tmp_path: Path, arrays: dict[str, Any], words: str) -> None:
    np.savez(tmp_path / "record.npz", **arrays)
    answer = owlight("demodulate", tmp_path / "record.npz", *RATES, "--json")
    assert answer.status == INPUT and answer.out == "" and words in answer.err


@pytest.mark.parametrize(
    ("option", "value", "words"),
    [
        ("--symbol-rate", "32 GHz", "a symbol rate (Bd) is needed"),
        ("--symbol-rate", "32 GHz", 'for example "32 GBd"'),
        ("--symbol-rate", "1e400 Bd", "not possible"),
        ("--sample-rate", "20 GS/s", "At least 35.2 GS/s"),
        ("--symbol-rate", "32", "--symbol-rate"),
        ("--symbol-rate", "0 GBd", "above zero"),
        ("--symbol-rate", "-32 GBd", "above zero"),
        ("--sample-rate", "80 GBd", "--sample-rate"),
        ("--sample-rate", "nan S/s", "--sample-rate"),
        ("--reference", "16", "order 16"),
        ("--reference", "nowhere.npy", "nowhere.npy"),
        ("--modulation", "QPSQ", "QPSQ"),
        ("--polarisations", "3", "--polarisations"),
        ("--rolloff", "2", "--rolloff"),
    ],
)
def test_unusable_arguments_are_told(owlight: Any, tmp_path: Path, option: str, value: str, words: str) -> None:
    np.savez(tmp_path / "record.npz", codes=CODES)
    answer = owlight("demodulate", tmp_path / "record.npz", *RATES, option, value)
    assert answer.status == INPUT and answer.out == "" and words in answer.err


@pytest.mark.parametrize(
    ("labels", "words"),
    [
        (np.zeros((2, 127)), "float64 numbers"),
        (np.zeros((3, 127), np.int8), "3 x 127"),
        (np.zeros((2, 127, 1), np.int8), "2 x 127 x 1"),
        (np.zeros((2, 0), np.int8), "2 x 0"),
        (np.full((2, 127), 4), "labels from 4 to 4"),
        (np.full((2, 127), True), "bool"),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_unusable_labels_are_told(owlight: Any, tmp_path: Path, labels: Any, words: str) -> None:
    np.savez(tmp_path / "record.npz", codes=CODES)
    np.save(tmp_path / "labels.npy", labels)
    answer = owlight("demodulate", tmp_path / "record.npz", *RATES, "--reference", tmp_path / "labels.npy")
    assert answer.status == INPUT and answer.out == "" and words in answer.err and "integers from 0 to 3" in answer.err


def test_other_files_are_told_in_own_words(owlight: Any, tmp_path: Path) -> None:
    """Not in NumPy's, which would have a stranger's pickle loaded, nor with numbers of the operating system."""
    (tmp_path / "text").write_text("1 2 3")
    np.savez(tmp_path / "record.npz", codes=CODES)
    for file, reference, words in (
        ("text", "15", "cannot be read as a NumPy archive"),
        ("none", "15", "There is no file"),
        ("record.npz", "text", "is no NumPy file"),
        ("record.npz", "none", "there is no file"),
        ("record.npz", "record.npz", "an archive, not one array"),
    ):
        named = reference if reference == "15" else tmp_path / reference
        answer = owlight("demodulate", tmp_path / file, *RATES, "--reference", named)
        assert answer.status == INPUT and words in answer.err, answer.err
        assert "pickle" not in answer.err and "Errno" not in answer.err


def test_codes_are_not_called_volts(owlight: Any, tmp_path: Path) -> None:
    for more, name in (({}, "rms_xi_codes"), ({"volts_per_code": np.array(1e-3)}, "rms_xi_v")):
        np.savez(tmp_path / "record.npz", codes=CODES, **more)
        answer = owlight("demodulate", tmp_path / "record.npz", *RATES, "--json")
        figures = json.loads(answer.out)["stages"][0]["figures"]
        assert name in figures and len([key for key in figures if key.startswith("rms_xi")]) == 1


def test_truncated_archive_is_told(owlight: Any, tmp_path: Path) -> None:
    path = tmp_path / "record.npz"
    np.savez(path, codes=CODES)
    path.write_bytes(path.read_bytes()[:5000])
    answer = owlight("demodulate", path, *RATES)
    assert answer.status == INPUT and "cannot be read as a NumPy archive" in answer.err


def test_unforeseen_faults_are_two_sentences(owlight: Any, monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    def fails(*arguments: object) -> None:
        raise ZeroDivisionError("division by zero")

    monkeypatch.setattr("owlight.jobs.listing.listing", fails)
    monkeypatch.setattr(shipped, "user_cache", lambda: tmp_path / "cache")
    answer = owlight("logbook")
    assert answer.status == 3 and answer.out == "" and len(answer.err.splitlines()) == 2
    assert "ZeroDivisionError" in answer.err and "Traceback" not in answer.err
    assert "in fails" in (tmp_path / "cache" / "last_fault.txt").read_text("utf-8")


@pytest.mark.parametrize(
    ("command", "words"),
    [
        (("show",), "No bench was open."),
        (("safe", "--bench", "bench"), "may not be safe"),
        (("run", "power_log", "--bench", "bench"), "has been made safe, and what was measured is in the logbook"),
    ],
    ids=lambda value: value[0] if isinstance(value, tuple) else "",
)
def test_unforeseen_faults_claim_what_is_true(
    owlight: Any, monkeypatch: pytest.MonkeyPatch, tmp_path: Path, command: tuple[str, ...], words: str
) -> None:
    def fails(*arguments: object, **more: object) -> None:
        raise ZeroDivisionError("division by zero")

    for place in ("jobs.summary.summary", "jobs.safe.make_safe", "jobs.night.measure"):
        monkeypatch.setattr(f"owlight.{place}", fails)
    monkeypatch.setattr(shipped, "user_cache", lambda: tmp_path / "cache")
    answer = owlight(*command)
    assert answer.status == 3 and words in answer.err
    assert command[0] == "run" or "has been made safe" not in answer.err


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs a device that is always full")
@pytest.mark.parametrize("runs", [1, 2000], ids=["at the end", "while printing"])
def test_full_output_is_storage(runs: int) -> None:
    """Whether the words fit the buffer, and fail when it is emptied, or not."""
    code = "import owlight.jobs.listing as l, owlight.cli as c\n"
    code += "one = dict(run_id='12345678', started_utc='2026', state='finished', name='n', simulated=True)\n"
    code += f"l.listing = lambda folder: [one] * {runs}\nc.main()"
    with open("/dev/full", "w") as full:
        found = subprocess.run(
            [sys.executable, "-c", code, "logbook"], stdout=full, stderr=subprocess.PIPE, text=True, check=False
        )
    assert found.returncode == STORAGE
    assert found.stderr.count("The output could not be written (No space left on device)") == 1
    assert len(found.stderr.splitlines()) == 1


def test_usage_names_how_it_was_started(owlight: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("OWLIGHT_STARTED_AS", "python3 here/src")
    assert "Usage: python3 here/src run [OPTIONS]" in owlight("run", "--help").out
    assert "Try 'python3 here/src run --help'" in owlight("run").err


def test_interrupted_command_has_its_status(owlight: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*arguments: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("owlight.jobs.listing.listing", interrupted)
    assert owlight("logbook").status == 130


@pytest.mark.parametrize(
    ("found", "status"),
    [
        ({"state": "finished", "findings": [], "missing": []}, 0),
        ({"state": "finished", "findings": [{"finding": "doubtful"}], "missing": []}, 0),
        ({"state": "finished", "findings": [{"finding": "ok"}, {"finding": "bad"}], "missing": []}, 1),
        ({"state": "finished", "findings": [], "missing": [3]}, 1),
        ({"state": "gave up", "findings": [], "missing": [3]}, 3),
        ({"state": "broken off", "findings": [], "missing": []}, 3),
        ({"state": "called off", "findings": [{"finding": "bad"}], "missing": [3]}, 130),
        ({"state": "finished", "findings": [], "missing": [], "safe_state": {"confirmed": True}}, 0),
        ({"state": "finished", "findings": [], "missing": [], "safe_state": {"confirmed": False}}, 3),
        ({"state": "called off", "findings": [], "missing": [], "safe_state": {"confirmed": False}}, 3),
    ],
)
def test_status_follows_the_outcome(found: dict[str, object], status: int) -> None:
    assert exit_status(found) == status
