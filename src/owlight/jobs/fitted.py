"""The fitted curve of a summary as numbers, for whoever draws it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from owlight.vocabulary.result import Sensitivity


def fitted_ber(sensitivity: dict[str, Any], modulation: str, powers_dbm: Sequence[float]) -> list[float]:
    """BER of the curve model at each received power; `sensitivity` as it stands in a summary."""
    import numpy as np

    from owlight.report.fitted import fitted_ber as ber_of

    return [float(ber) for ber in ber_of(Sensitivity(**sensitivity), modulation, np.asarray(powers_dbm))]
