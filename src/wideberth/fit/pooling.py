"""The error of one batch: from the runs alone, or pooled with a standard deviation known before.

Pooling adds sums of squares and degrees of freedom, as for any two independent estimates of one
variance. Whether the two agree is tested, and said; it is the person who states that the history
is of the same process.
"""

from __future__ import annotations

import numpy as np
from scipy.special import fdtr, fdtrc

from wideberth.fit.least_squares import LeastSquares
from wideberth.fit.records import Pooled
from wideberth.study.records import KnownSd


def batch_error(
    fit: LeastSquares, known: KnownSd | None, *, exact_fit: bool
) -> tuple[float | None, int, Pooled | None]:
    """Give the standard deviation of one batch, its degrees of freedom, and what was pooled.

    ``None`` and 0 where neither runs nor history leave any degrees of freedom. The residuals of
    an exact fit count as 0.
    """
    rss = 0.0 if exact_fit else fit.rss
    own = float(np.sqrt(rss / fit.df)) if fit.df else None
    if known is None:
        return own, fit.df, None
    df = fit.df + known.df
    s = float(np.sqrt((rss + known.df * known.value**2) / df))
    p = None
    if own is not None:
        f = (own / known.value) ** 2
        p = float(min(1.0, 2 * min(fdtr(fit.df, known.df, f), fdtrc(fit.df, known.df, f))))
    return s, df, Pooled(known.value, known.df, own, p)
