"""From the text of a bench file to a bench, or to every mistake in it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import fields
from datetime import date

from owlight.bench.model import PLANES, SIGNAL_INPUT, Bench, Role
from owlight.reader import Document, nearest, read
from owlight.reader.lines import Path
from owlight.vocabulary.terms import ROLES

_LASERS = ("signal_laser", "local_oscillator")
_LANES = (("XI", "XQ"), ("XI", "XQ", "YI", "YQ"))
_LARGEST_CONTRADICTION_DB = 1.0
_SIMULATED = ("simulated hislip", "simulated socket")


def read_bench(text: str, file: str) -> Document[Bench]:
    """A bench that does not contradict itself."""
    document = read(text, file, Bench)
    if document.value is None:
        return document
    rules = (_roles, _path, _calibration, _receiver, _limits)
    return document.plus(tuple(document.problem(path, words) for rule in rules for path, words in rule(document.value)))


Found = Iterator[tuple[Path, str]]


def _roles(bench: Bench) -> Found:
    serials: dict[str, str] = {}
    for name, role in bench.role.items():
        if name not in ROLES:
            yield ("role", name), f"unknown role{nearest(name, ROLES) or ';'} Roles: {', '.join(ROLES)}"
        yield from _needed(name, role)
        if role.calibration_due and not _is_date(role.calibration_due):
            yield ("role", name, "calibration_due"), f"{role.calibration_due!r} is no date; write it as 2027-06-30"
        if role.resource.startswith("simulated") and role.resource not in _SIMULATED:
            yield ("role", name, "resource"), f"{role.resource!r} is not served; allowed: {', '.join(_SIMULATED)}"
        if role.resource.startswith("simulated") and bench.simulation is None:
            yield ("role", name, "resource"), "is simulated, but the file has no [simulation] that names a world"
        twin = serials.setdefault(role.serial_number, name)
        # a laser that carries the data and is the local oscillator too is one instrument in two roles
        if twin != name and {twin, name} != set(_LASERS):
            yield ("role", name, "serial_number"), f"is also that of {twin}; two roles may not share an instrument"


def _needed(name: str, role: Role) -> Found:
    wanted = {"power_meter": ("floor",)} | dict.fromkeys(_LASERS, ("power_tolerance", "highest_power"))
    given = {
        "power_tolerance": role.power_tolerance_db,
        "highest_power": role.highest_power_dbm,
        "floor": role.floor_dbm,
    }
    for key, value in given.items():
        if key in wanted.get(name, ()) and value is None:
            yield ("role", name, key), "is missing; without it no worst case can be computed"
        if key not in wanted.get(name, ()) and value is not None:
            yield ("role", name, key), f"means nothing for {name}"


def _is_date(text: str) -> bool:
    try:
        date.fromisoformat(text)
    except ValueError:
        return False
    return True


def _path(bench: Bench) -> Found:
    path = bench.light_path
    losses = {item.name: getattr(path, item.name) for item in fields(path)}
    for name, least_db in losses.items():
        nominal = name.replace("_least_loss", "_loss").replace("_least_db", "_db")
        if nominal != name and least_db > losses[nominal]:
            yield ("light_path", name.removesuffix("_db")), f"is more than {nominal.removesuffix('_db')}"


def _calibration(bench: Bench) -> Found:
    record, path = bench.plane_minus_tap, bench.light_path
    if not _is_date(record.date):
        yield ("plane_minus_tap", "date"), f"{record.date!r} is no date; write it as 2026-11-30"
    expected_db = path.tap_to_meter_loss_db - path.tap_to_receiver_loss_db
    if abs(expected_db - record.value_db) > _LARGEST_CONTRADICTION_DB:
        words = f"is {record.value_db:g} dB, but the losses after the tap give {expected_db:.2f} dB"
        yield ("plane_minus_tap", "value"), f"{words}; one of them is wrong, perhaps by its sign"


def _receiver(bench: Bench) -> Found:
    receiver = bench.receiver
    given = [receiver.port_responsivity_a_per_w, receiver.diode_responsivity_a_per_w]
    if given.count(None) != 1:
        yield ("receiver",), "needs exactly one of port_responsivity and diode_responsivity: they differ by the hybrid"
    if receiver.reference_plane != SIGNAL_INPUT:
        yield ("receiver", "reference_plane"), f'is not the plane that plane_minus_tap leads to: "{SIGNAL_INPUT}"'
    if tuple(lane.name for lane in receiver.lane) not in _LANES:
        yield ("receiver", "lane"), "must be XI, XQ, YI, YQ in this order, or XI, XQ for one polarisation"
    channels = [lane.channel for lane in receiver.lane]
    for place, channel in enumerate(channels):
        if channel in channels[:place]:
            yield ("receiver", "lane", place, "channel"), f"{channel} carries another lane already"


def _limits(bench: Bench) -> Found:
    for plane in PLANES:
        if plane not in bench.limit:
            yield ("limit", plane), "is missing; each plane needs its highest power"
    for plane in bench.limit:
        if plane not in PLANES:
            yield ("limit", plane), f"unknown plane{nearest(plane, PLANES) or ';'} Planes: {', '.join(PLANES)}"
