"""From counts to a number with its interval, and the questions that decide whether to believe it.

Pure functions of values; scipy is imported where it is used, so that a forecast need not wait for it.
"""

from owlight.statistics.checks import Evidence, run_checks
from owlight.statistics.intervals import exact_interval, upper_limit
from owlight.statistics.pooling import groups, pool
from owlight.statistics.readings import mean_readings
from owlight.statistics.request import Reason, SensitivityRequest
from owlight.statistics.sensitivity import budget, estimate

__all__ = [
    "Evidence",
    "Reason",
    "SensitivityRequest",
    "budget",
    "estimate",
    "exact_interval",
    "groups",
    "mean_readings",
    "pool",
    "run_checks",
    "upper_limit",
]
