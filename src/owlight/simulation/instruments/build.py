"""From the files of a world to instruments that share one light."""

from __future__ import annotations

from collections.abc import Mapping

from owlight.simulation.device.bench_time import BenchTime
from owlight.simulation.device.instrument import Instrument
from owlight.simulation.device.model import InstrumentFile
from owlight.simulation.instruments.oscilloscope import Oscilloscope
from owlight.simulation.instruments.power_meter import PowerMeter
from owlight.simulation.instruments.receiver import Receiver
from owlight.simulation.light import SharedLight
from owlight.simulation.physics import Physics


def build(
    files: Mapping[str, InstrumentFile], serial_numbers: Mapping[str, str], physics: Physics, time: BenchTime
) -> tuple[dict[str, Instrument], SharedLight]:
    """The instruments by role, in the order of `files`, and their light."""
    instruments = {role: Instrument(role, file, serial_numbers[role], time) for role, file in files.items()}
    light = SharedLight(physics, instruments, time)
    for instrument in instruments.values():
        if instrument.file.kind == "power_meter":
            instrument.behave(PowerMeter(instrument, light))
        elif instrument.file.kind == "oscilloscope":
            instrument.behave(Oscilloscope(instrument, light))
        elif instrument.file.kind == "receiver":
            instrument.behave(Receiver(light))
    return instruments, light
