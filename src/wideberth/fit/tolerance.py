"""The one-sided normal tolerance factor at a setting of a fitted model.

References
----------
Owen (1968), Technometrics 10, 445-478: for a mean with variance ``h sigma^2`` the exact factor is
``sqrt(h)`` times a quantile of the noncentral t (from memory). With h = 1/n it is the tabulated
factor of a sample of size n.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.special import chdtri, nctdtrit, ndtri

from wideberth.study.records import FloatArray

_LARGEST_NONCENTRALITY = 1e3


def tolerance_factor(
    leverage: npt.ArrayLike, df: float, share: float, confidence: float
) -> FloatArray:
    """Give K such that ``mean + K s`` lies above a share of batches with the stated confidence.

    Parameters
    ----------
    leverage : array_like
        h, the variance of the fitted mean in units of sigma squared; any shape.
    df : float
        Residual degrees of freedom, 1 or more.
    share, confidence : float
        Between 0 and 1.

    Returns
    -------
    ndarray
        Of the shape of ``leverage``.
    """
    h = np.asarray(leverage, dtype=np.float64)
    z = float(ndtri(share))
    root = np.sqrt(np.maximum(h, (z / _LARGEST_NONCENTRALITY) ** 2))
    exact = root * nctdtrit(df, z / root, confidence)
    # with next to no error in the mean only the spread of s is left
    limit = z * np.sqrt(df / chdtri(df, confidence))
    return np.where(h < (z / _LARGEST_NONCENTRALITY) ** 2, limit, exact)
