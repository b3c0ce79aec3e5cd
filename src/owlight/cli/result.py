"""Results in words: the number first, then what speaks against it, then where everything lies."""

from __future__ import annotations

import shutil
import textwrap
from pathlib import Path
from typing import Any

from owlight.cli.drawing import draw_curve
from owlight.quantity import beside, words
from owlight.shipped import program
from owlight.vocabulary.result import Sensitivity

Json = dict[str, Any]
SIMULATED = "SIMULATED, not a measurement of hardware"


def print_result(found: Json, bench: str | None) -> None:
    """The run as `demo`, `run` and `show` give it."""
    print(f"\n{found['sequence']}" + (f"  -  {SIMULATED}" if found["simulated"] else ""))
    print(f"run {found['run_id']}: {found['state']}" + (f" ({found['reason']})" if found["reason"] else ""))
    if found["ended_utc"]:
        # a simulated bench's waits pass at once, so its stamps run ahead of the computer's clock
        clock = " (simulated bench time)" if found["simulated_time"] else ""
        print(f"begun {found['started_utc'][:19]}Z, ended {found['ended_utc'][:19]}Z{clock}")
    print(_stays(found) + "\n")
    threshold = found["threshold"]
    for group in dict.fromkeys(point["group"] for point in found["points"]):
        _print_curve(found, group, threshold["ber"] if threshold else None)
    if not found["points"]:
        _print_readings(found["readings"])
    if not found["sensitivities"]:
        print(f"No sensitivity: {found['words']}")
    print_findings(found["findings"])
    if found["safe_state"] is not None:
        print_safe_state(found["safe_state"], found["reason"])
    elif found["state"] == "broken off":
        print(
            "Safe state: NOT RECORDED, because the program died and its guard has not written yet. Look at the bench."
        )
    elif found["state"] != "measuring":
        print("Safe state: left as it was, since another run is using the bench.")
    print(f"\nlogbook  {found['logbook']}")
    if "report" in found:
        print(f"report   {found['report']}")
    _print_next(found, bench)


def _stays(found: Json) -> str:
    told = f"{found['stays_done']} of {found['stays_planned']} stays measured, {found['stays_failed']} failed"
    missing = ", ".join(str(index) for index in found["missing"])
    return told + (f"; without any stay: point {missing}" if missing else "")


def _print_curve(found: Json, group: str, threshold_ber: float | None) -> None:
    points = [point for point in found["points"] if point["group"] == group]
    sensitivity = next((s for s in found["sensitivities"] if s["group"] == group), None)
    if group:
        print(group)
    curve = None
    if sensitivity is not None:
        import numpy as np

        from owlight.report.fitted import fitted_ber

        fitted = Sensitivity(**sensitivity)

        def curve(powers_dbm: list[float]) -> list[float]:
            return [float(ber) for ber in fitted_ber(fitted, found["modulation"], np.asarray(powers_dbm))]

    print(draw_curve(points, threshold_ber, curve))
    print()
    if sensitivity is not None:
        _print_sensitivity(found, sensitivity)


def _print_sensitivity(found: Json, s: Json) -> None:
    threshold = found["threshold"]
    print(f"Sensitivity  {s['received_power_dbm']:.3f} dBm" + ("  (extrapolated)" if s["extrapolated"] else ""))
    percent = round(100 * s["coverage"])
    print(f"  statistical {percent} %  {s['statistical_low_dbm']:.3f} to {s['statistical_high_dbm']:.3f} dBm")
    print(f"  total {percent} %        {s['low_dbm']:.3f} to {s['high_dbm']:.3f} dBm")
    print(f"  received power at {found['reference_plane']}; {found['power_convention']}")
    print(f"  at BER {threshold['ber']:g} ({threshold['name']}); {s['method']}")
    for penalty in found["penalties"]:
        if penalty["group"] == s["group"]:
            against = f"{penalty['reference']} ({penalty['reference_dbm']:.2f} dBm)"
            print(f"  {beside(penalty['penalty_db'])} {against}")
    print()


def _print_readings(stays: list[Json]) -> None:
    """Settings against mean readings, a row a point; the JSON has every stay."""
    points: dict[int, list[Json]] = {}
    for stay in stays:
        points.setdefault(stay["point"], []).append(stay)
    if not points:
        return
    swept = list(dict.fromkeys(setting["term"] for stay in stays for setting in stay["settings"]))
    read = list(dict.fromkeys(reading["term"] for stay in stays for reading in stay["readings"]))
    rows = [[*swept, "stays", *read]]
    for _, at_point in sorted(points.items()):
        set_to = {setting["term"]: _shown(setting) for setting in at_point[0]["settings"]}
        means = [_mean([r for stay in at_point for r in stay["readings"] if r["term"] == term]) for term in read]
        rows.append([*(set_to.get(term, "") for term in swept), str(len(at_point)), *means])
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))]
    for row in rows:
        print("  ".join(f"{cell:>{width}}" for cell, width in zip(row, widths, strict=True)))
    print()


def _mean(readings: list[Json]) -> str:
    values = [reading["value"] for reading in readings if reading["value"] is not None]
    if not values:
        return "no number" if readings else "not read"
    return _shown({"value": sum(values) / len(values), "unit": readings[0]["unit"]})


def _shown(value: Json) -> str:
    return words(value["value"], value["unit"]) if isinstance(value["value"], float) else str(value["value"])


def print_findings(findings: list[Json]) -> None:
    """Only what is not ok; how many were is said."""
    not_ok = [check for check in findings if check["finding"] != "ok"]
    print(f"Findings: {len(findings) - len(not_ok)} ok, {len(not_ok)} not")
    for check in not_ok:
        print(f"  {check['finding']:13} {check['name']}, {check['subject']}: {check['words']}")


def print_safe_state(safe: Json, told: str = "") -> None:
    """Why a step is unconfirmed stands below it, unless it was `told` above."""
    by = f", by {safe['by']}" if "by" in safe else ""
    print("Safe state: " + ("confirmed by read-back" if safe["confirmed"] else "NOT CONFIRMED") + by)
    for step in safe["steps"]:
        word = "confirmed" if step["confirmed"] else "UNCONFIRMED"
        asked, _, reason = step["words"].partition(": ")
        print(f"  {step['role']:17} {asked}: {word} (read back {step['read_back'] or 'nothing'})")
        if reason and reason not in told:
            print(textwrap.fill(reason, _columns(), initial_indent=" " * 20, subsequent_indent=" " * 20))


def _print_next(found: Json, bench: str | None) -> None:
    folder = _quoted(Path(found["logbook"]).parent)
    run = found["run_id"][:8]
    print("\nNext:")
    print(
        f"  {program()} logbook --logbook {folder}" if bench is None else f"  {program()} show {run} --logbook {folder}"
    )
    print(f"  {program()} reproduce {run} --logbook {folder}")
    if bench is None:
        print(f"  {program()} report {run} --logbook {folder}")
    else:
        print(f"  {program()} forecast lo_power_map --bench {bench}")


def _quoted(path: Path) -> str:
    text = str(path)
    return f'"{text}"' if " " in text else text


def _columns() -> int:
    return max(60, min(shutil.get_terminal_size().columns, 120))


def print_runs(found: list[Json], folder: Path) -> None:
    if not found:
        print(f"The logbook in {folder} holds no run.")
    for run in found:
        mark = " simulated" if run["simulated"] else ""
        print(f"{run['run_id'][:8]}  {run['started_utc'][:19]}Z  {run['state']:10}  {run['name']}{mark}")


def print_reproduction(found: Json) -> None:
    """Identical or not, and what differs."""
    if found["simulated"]:
        print(SIMULATED)
    if found["identical"]:
        captures = f"all {found['captures_compared']} captures are the same byte for byte, "
        print(
            f"Identical: {captures if found['captures_compared'] else ''}all {found['readings_compared']} readings too."
        )
    else:
        print(f"Not identical; {found['captures_compared']} captures compared, {found['captures_equal']} equal.")
    for line in found["differences"]:
        print(f"  {line}")
    for name in ("original", "reproduced"):
        s = found[f"sensitivity_{name}"]
        value = (
            "none" if s is None else f"{s['received_power_dbm']:.3f} dBm ({s['low_dbm']:.3f} to {s['high_dbm']:.3f})"
        )
        print(f"  sensitivity {name}: {value}")
    print_safe_state(found["safe_state"]) if found["safe_state"] else None


def print_demodulation(found: Json) -> None:
    """One capture's journey, a row a stage, then what was counted."""
    for stage in found["stages"]:
        figures = ", ".join(f"{name} {value:.4g}" for name, value in stage["figures"].items())
        print(
            textwrap.fill(
                figures or "-", _columns(), initial_indent=f"{stage['stage']:20} ", subsequent_indent=" " * 21
            )
        )
    print(f"\n{found['status']}" + (f": {found['reason']}" if found["reason"] else ""))
    if found["status"] != "locked":
        return
    for tributary in found["tributaries"]:
        print(f"  {tributary['name']}: {tributary['errors']} errors in {tributary['bits']} bits")
    if found["ber"] is None:
        print(f"  BER below {found['ber_high']:.3g} (no error seen, 95 %)")
    else:
        print(f"  BER {found['ber']:.4g} ({found['ber_low']:.4g} to {found['ber_high']:.4g}, 95 %)")
    print(f"  SNR {found['snr_db']:.2f} dB, EVM {found['evm_percent']:.1f} %, GMI {found['gmi_bits']:.3f} bit")
