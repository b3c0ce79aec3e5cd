"""The forecast in words."""

from __future__ import annotations

from itertools import groupby

from owlight.plan import Forecast


def print_forecast(found: Forecast) -> None:
    """Points in order, time, disk, powers beside their limits, and how the bench will be made safe."""
    mark = " (simulated bench)" if found.simulated else ""
    print(f"{found.name}{mark}\n")
    follows = "order and simulated noise follow" if found.simulated else "the order follows"
    print(f"{len(found.stays)} stays at {found.points} points; {follows} seed {found.seed}")
    print(f"about {_time(found.seconds)} of bench time, {found.bytes_on_disk / 1e6:.0f} MB on disk\n")
    for number, stays in groupby(found.stays, key=lambda stay: stay.pass_number):
        print(f"pass {number}")
        for stay in stays:
            settings = ", ".join(f"{name} {value}" for name, value in stay.settings)
            print(f"  {'reference' if stay.reference else f'point {stay.point}':10} {settings}")
    print("\nHighest power that could reach each plane, with sources at their upper tolerance and the least loss:")
    for power in found.highest_power:
        room_db = power.limit_dbm - power.power_dbm
        words = f"{room_db:.1f} dB below" if room_db >= 0 else f"{-room_db:.1f} dB ABOVE"
        print(
            f"  {power.plane:22} {power.power_dbm:7.2f} dBm, {words} its limit of {power.limit_dbm:g} dBm"
            f"  ({power.situation})"
        )
    print("\nThe way to the safe state, on every way out:")
    for number, step in enumerate(found.safe_state, 1):
        print(f"  {number}. {step.role:17} {step.words or step.command}  (sends {step.command}, checks {step.query})")


def _time(seconds: float) -> str:
    if seconds < 120:
        return f"{seconds:.0f} s"
    return f"{seconds / 60:.0f} min" if seconds < 7200 else f"{seconds / 3600:.1f} h"
