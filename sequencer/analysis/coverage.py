"""From standard uncertainties to a coverage factor: degrees of freedom and the shape of what dominates."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Literal

Shape = Literal["normal", "t", "rectangular", "trapezoidal"]

#: Coverage probability of the normal and the t factor: that of ±2 standard deviations, 95.45 %.
NORMAL_COVERAGE = math.erf(math.sqrt(2.0))
#: Coverage probability of the bounded shapes (EA-4/02 S9, S10).
BOUNDED_COVERAGE = 0.95
#: Largest ratio of all other contributions (root sum of squares) to the dominant one or two, as EA-4/02 S9.14 words
#: it (from memory). There a k of 1.65 covers 92 to 93 %, not 95 % (computed): a Budget uses the stricter one below.
DOMINANCE_EA = 0.3
#: The ratio a Budget uses: the interval then still holds at least 94.5 % (computed in the tests).
DOMINANCE = 0.1


def effective_dof(u_parts: Sequence[float], dofs: Sequence[float]) -> float:
    """Welch-Satterthwaite (GUM G.2b), unrounded; inf when every part has infinitely many.

    u_parts : contributions |c_i| u_i in the unit of the result.    dofs : their degrees of freedom, > 0.
    """
    total = math.fsum(u * u for u in u_parts)
    if total == 0.0:
        return math.inf
    spread = math.fsum((u * u / total) ** 2 / dof for u, dof in zip(u_parts, dofs, strict=True))
    return 1.0 / spread if spread > 0.0 else math.inf


def t_factor(dof: float) -> float:
    """k at 95.45 % from the effective degrees of freedom, truncated down (GUM G.4.1, Table G.2), at least 1."""
    if math.isinf(dof):
        return 2.0
    from scipy.special import stdtrit

    # 19.0 may arrive as 18.999999999999996: rounding of the sum is no reason to lose a degree of freedom.
    whole = max(1, math.floor(dof * (1.0 + 1e-12)))
    return float(stdtrit(whole, 0.5 * (1.0 + NORMAL_COVERAGE)))


def rectangular_factor() -> float:
    """k of one dominant rectangular contribution: p √3 (EA-4/02 S9)."""
    return BOUNDED_COVERAGE * math.sqrt(3.0)


def trapezoid_factor(half_width_1: float, half_width_2: float) -> float:
    """k of the sum of two rectangular contributions (EA-4/02 S10.13): a trapezium with edge ratio β.

    half_width_1, half_width_2 : > 0, any order, same unit.
    """
    p = BOUNDED_COVERAGE
    beta = abs(half_width_1 - half_width_2) / (half_width_1 + half_width_2)
    if p < 2.0 * beta / (1.0 + beta):  # the interval ends on the flat top, where the tail formula does not hold
        return p * (1.0 + beta) / 2.0 / math.sqrt((1.0 + beta * beta) / 6.0)
    return (1.0 - math.sqrt((1.0 - p) * (1.0 - beta * beta))) / math.sqrt((1.0 + beta * beta) / 6.0)


def shape_and_factor(
    u_parts: Sequence[float], distributions: Sequence[str], dofs: Sequence[float], *, dominance: float = DOMINANCE
) -> tuple[Shape, float]:
    """Shape of the result and its k.

    One rectangular contribution is dominant when all others together (root sum of squares) are at most `dominance`
    times it; two are when the rest is at most `dominance` times their root sum of squares. Otherwise the result
    is taken as normal, or as t when the effective degrees of freedom are finite.
    """
    ranked = sorted(range(len(u_parts)), key=lambda i: u_parts[i], reverse=True)
    if _dominant(ranked[:1], u_parts, distributions, dominance):
        return "rectangular", rectangular_factor()
    if _dominant(ranked[:2], u_parts, distributions, dominance):
        return "trapezoidal", trapezoid_factor(u_parts[ranked[0]], u_parts[ranked[1]])
    dof = effective_dof(u_parts, dofs)
    return ("normal" if math.isinf(dof) else "t"), t_factor(dof)


def _dominant(top: Sequence[int], u_parts: Sequence[float], distributions: Sequence[str], dominance: float) -> bool:
    """Whether the contributions named in `top` are all rectangular and outweigh the rest."""
    if not top or any(distributions[i] != "rectangular" or u_parts[i] == 0.0 for i in top):
        return False
    rest = math.hypot(*(u for i, u in enumerate(u_parts) if i not in top))
    return rest <= dominance * math.hypot(*(u_parts[i] for i in top))
