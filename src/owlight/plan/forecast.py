"""What can be said of a night without touching an instrument, as plain values for printing."""

from __future__ import annotations

from dataclasses import dataclass

from owlight.quantity import words
from owlight.vocabulary.plan import Plan, PlanePower, Point, SafeStep
from owlight.vocabulary.terms import TERMS


@dataclass(frozen=True)
class ForecastStay:
    """`settings` as name and value with unit, outermost axis first."""

    pass_number: int
    point: int
    reference: bool
    settings: tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class Forecast:
    name: str
    seed: int
    simulated: bool
    points: int
    stays: tuple[ForecastStay, ...]
    seconds: float
    bytes_on_disk: int
    highest_power: tuple[PlanePower, ...]
    safe_state: tuple[SafeStep, ...]


def forecast(plan: Plan) -> Forecast:
    stays = [_stay(plan.points[index], number) for number, indices in enumerate(plan.order, 1) for index in indices]
    return Forecast(
        name=plan.name,
        seed=plan.seed,
        simulated=plan.simulated,
        points=len(plan.points),
        stays=tuple(stays),
        seconds=plan.forecast_s,
        bytes_on_disk=plan.forecast_bytes,
        highest_power=plan.highest_power,
        safe_state=plan.safe_state,
    )


def _stay(point: Point, pass_number: int) -> ForecastStay:
    settings = [
        (str(each.term), words(each.value, TERMS[each.term].unit) if isinstance(each.value, float) else str(each.value))
        for each in point.settings
    ]
    return ForecastStay(pass_number, point.index, point.reference, tuple(settings))
