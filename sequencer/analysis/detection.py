"""Detection limits for a normal quantity whose scatter was estimated from few readings (Currie 1968; ISO 11843-1).

The critical value L_C is passed by nothing but scatter in a share alpha of all cases; a true value at the detection
limit L_D stays below L_C in a share beta of them. With s from nu degrees of freedom the former is a quantile of
Student's t, the latter the noncentrality of a t whose lower tail at L_C is beta; both tend to Currie's 1.645 σ and
3.29 σ for one tail of 5 % and a well known σ.
"""

from __future__ import annotations

import math

ALPHA = BETA = 0.05


def critical_value(u: float, dof: float, tail: float = ALPHA) -> float:
    """L_C, in the unit of u.

    u : standard uncertainty of the quantity where it is truly zero.    dof : its degrees of freedom, inf if known.
    tail : probability beyond L_C on one side; half of alpha where both sides count.
    Raises ValueError for u < 0, dof <= 0, or a tail outside 0 ... 0.5.
    """
    _check(u, dof, tail)
    return u * _quantile(dof, tail)


def detection_limit(u: float, dof: float, tail: float = ALPHA, beta: float = BETA) -> float:
    """L_D, in the unit of u; arguments as for `critical_value`, beta the share of it that is missed."""
    _check(u, dof, tail)
    if not 0.0 < beta < 0.5:
        raise ValueError(f"beta: expected a probability between 0 and 0.5, got {beta!r}")
    return u * _noncentrality(dof, _quantile(dof, tail), beta)


def _quantile(dof: float, tail: float) -> float:
    from scipy.special import ndtri, stdtrit

    return float(-ndtri(tail) if math.isinf(dof) else stdtrit(dof, 1.0 - tail))


def _noncentrality(dof: float, quantile: float, beta: float) -> float:
    """δ at which a noncentral t of these degrees of freedom lies below `quantile` with probability beta."""
    from scipy.optimize import brentq
    from scipy.special import nctdtr, ndtri

    known = quantile - float(ndtri(beta))  # of a known σ: z + z
    if math.isinf(dof):
        return known
    found = brentq(lambda delta: float(nctdtr(dof, delta, quantile)) - beta, 0.0, 3.0 * known)
    return float(found)


def _check(u: float, dof: float, tail: float) -> None:
    if not (math.isfinite(u) and u >= 0.0):
        raise ValueError(f"u: expected a finite number, zero or above, got {u!r}")
    if not dof > 0.0:
        raise ValueError(f"dof: expected a number above zero, got {dof!r}")
    if not 0.0 < tail < 0.5:
        raise ValueError(f"tail: expected a probability between 0 and 0.5, got {tail!r}")
