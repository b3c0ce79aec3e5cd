"""A sequence expanded against a bench: points, order, limits, forecast, and what to measure next. Pure."""

from owlight.plan.forecast import Forecast, ForecastStay, forecast
from owlight.plan.limits import light_at_start, light_state, longest_unattended_s
from owlight.plan.make import PlanRequest, make_plan
from owlight.plan.next_attempt import LAG, capped, next_attempt
from owlight.plan.safe_steps import safe_steps
from owlight.plan.signal import signal_of

__all__ = [
    "LAG",
    "Forecast",
    "ForecastStay",
    "PlanRequest",
    "capped",
    "forecast",
    "light_at_start",
    "light_state",
    "longest_unattended_s",
    "make_plan",
    "next_attempt",
    "safe_steps",
    "signal_of",
]
