"""Lack of fit: what the model misses, held against runs that repeat each other.

Replicates are runs at the same settings and levels in the same block.
"""

from __future__ import annotations

import numpy as np
from scipy.special import fdtrc, fdtri, ncfdtrinc

from wideberth.fit.least_squares import LeastSquares
from wideberth.fit.records import LackOfFit
from wideberth.study.coding import to_coded
from wideberth.study.records import FloatArray, IntArray, Study

_SAME = 9
_SIZE = 0.05
_POWER = 0.8


def replicate_groups(study: Study, rows: IntArray) -> IntArray:
    """Count off the groups of runs that repeat each other: shape (n,)."""
    x = to_coded(study.numeric, study.runs.numeric_actual[rows])
    keys = np.concatenate(
        [np.round(x, _SAME), study.runs.levels[rows], study.runs.block[rows][:, None]], axis=1
    )
    groups: IntArray = np.unique(keys, axis=0, return_inverse=True)[1].reshape(-1)
    return groups


def lack_of_fit(fit: LeastSquares, y: FloatArray, groups: IntArray) -> tuple[LackOfFit | None, str]:
    """Test the fit against its replicates.

    Returns
    -------
    (LackOfFit or None, str)
        The test, or ``None`` with the reason.
    """
    n_groups = int(groups.max()) + 1
    df_pure = len(y) - n_groups
    df_lack = fit.df - df_pure
    if df_pure == 0:
        return None, "no run was repeated at the same settings"
    if df_lack <= 0:
        return None, "there are no more different settings than terms"
    w = fit.weight
    means = np.bincount(groups, weights=w * y) / np.bincount(groups, weights=w)
    ss_pure = float(w @ (y - means[groups]) ** 2)
    ss_lack = max(fit.rss - ss_pure, 0.0)
    if ss_pure <= 1e-20 * float(w @ y**2):
        return None, "repeated runs agree exactly, so they show no noise to test against"
    ms_lack, ms_pure = ss_lack / df_lack, ss_pure / df_pure
    f = ms_lack / ms_pure
    return LackOfFit(
        f=f,
        df=(df_lack, df_pure),
        p=float(fdtrc(df_lack, df_pure, f)),
        ss_lack=ss_lack,
        ss_pure=ss_pure,
        rms_size=float(np.sqrt(max(ms_lack - ms_pure, 0.0))),
        found_size=_found_size(df_lack, df_pure, float(np.sqrt(ms_pure))),
    ), ""


def _found_size(df_lack: int, df_pure: int, sd: float) -> float:
    """Give the misfit that the test at 5 % finds with a power of 80 %, in the unit of ``sd``."""
    critical = float(fdtri(df_lack, df_pure, 1.0 - _SIZE))
    noncentrality = float(ncfdtrinc(df_lack, df_pure, 1.0 - _POWER, critical))
    return sd * float(np.sqrt(noncentrality / df_lack))
