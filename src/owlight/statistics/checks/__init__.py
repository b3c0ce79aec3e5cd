"""Questions that an engineer asks before believing a BER curve, each answered by a pure function with a stored Check.

Limits are arguments. Where no source is named, a default is engineering judgement: common practice, not law.
"""

from owlight.statistics.checks.run import Evidence, run_checks

__all__ = ["Evidence", "run_checks"]
