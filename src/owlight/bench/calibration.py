"""The x axis: what a reading of the tap means at the reference plane, and what all points share of its doubt."""

from __future__ import annotations

from owlight.bench.model import Bench
from owlight.quantity import dbm
from owlight.vocabulary.result import BudgetLine


def received_power_dbm(bench: Bench, tap_w: float) -> float:
    """Only the tap and the calibrated record; nominal losses have no part in it. ValueError at zero or below."""
    return dbm(tap_w) + bench.plane_minus_tap.value_db


def lowest_received_power_dbm(bench: Bench) -> float | None:
    """Where the tap still reads ten times the meter's floor; None where the bench has no power meter."""
    meter = bench.role.get("power_meter")
    if meter is None or meter.floor_dbm is None:
        return None
    return meter.floor_dbm + 10.0 + bench.plane_minus_tap.value_db


def common_uncertainty(bench: Bench) -> tuple[BudgetLine, ...]:
    """Standard uncertainties that shift every point alike, so they never shrink with more points.

    The zero of the meter is common too, but in watts: it is no line here.
    """
    record, meter = bench.plane_minus_tap, bench.meter
    return (
        _line("power meter certificate", meter.certificate_u_db, "calibration factor of the meter"),
        _line("plane minus tap", record.standard_uncertainty_db, f"{record.certificate}, {record.date}"),
        _line("connector mating", record.mating_u_db, record.mating),
        _line("power meter linearity", meter.linearity_u_db, "between calibration level and the levels used"),
        _line("power meter wavelength", meter.wavelength_u_db, "responsivity at the wavelength set"),
    )


def _line(component: str, u_db: float | None, words: str) -> BudgetLine:
    # JCGM 100 (GUM) 4.3: evaluated otherwise than by statistics of this run's observations
    return BudgetLine(component, "B", u_db, None, words)
