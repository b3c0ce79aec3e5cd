"""Does the curve's shape hold? Scatter between powers against scatter within them."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from owlight.statistics.fit import Fit


def lack_of_fit_p(found: Fit, point: npt.NDArray[np.int64], fitted_parameters: int) -> float | None:
    """Probability of so much misfit by chance; None where too few powers could show it.

    With repeated powers: the F test of lack of fit against pure error (N. R. Draper, H. Smith, Applied Regression
    Analysis, chapter on lack of fit), which the random shift of stays cannot fool. Without: chi-square with the known
    scatter only, which cannot tell a wrong shape from stays that scatter more than the meter says.
    """
    from scipy.special import chdtrc, fdtrc

    residual, fixed = found.residual[0], found.fixed_residual[0]
    labels, row = np.unique(point, return_inverse=True)
    count = np.bincount(row)
    misfit_freedom, error_freedom = len(labels) - fitted_parameters, len(residual) - len(labels)
    if misfit_freedom < 1:
        return None
    if error_freedom < 2:
        return float(chdtrc(len(fixed) - fitted_parameters, fixed @ fixed))
    mean = np.bincount(row, weights=residual) / count
    pure_error = float(((residual - mean[row]) ** 2).sum()) / error_freedom
    misfit = float((count * mean**2).sum()) / misfit_freedom
    by_scatter = float(fdtrc(misfit_freedom, error_freedom, misfit / max(pure_error, 1e-12)))
    # repeats that agree by luck better than counting allows must not condemn a shape that counting cannot tell wrong
    fixed_mean = np.bincount(row, weights=fixed) / count
    return max(by_scatter, float(chdtrc(misfit_freedom, (count * fixed_mean**2).sum())))
