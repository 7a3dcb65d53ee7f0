"""Detection limits against Currie's published numbers and the noncentral t of a reference library."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.detection import critical_value, detection_limit


def test_a_well_known_sigma_gives_curries_factors() -> None:
    """Currie, Anal. Chem. 40 (1968) 586: L_C = 1.645 σ and L_D = 3.29 σ for alpha = beta = 5 % and a known blank."""
    assert critical_value(1.0, math.inf) == pytest.approx(1.645, abs=5e-4)
    assert detection_limit(1.0, math.inf) == pytest.approx(3.29, abs=5e-4)
    # the paired observation: σ0 √2 (Currie 1968; L_C = 2.33 σ, L_D = 4.65 σ without the counting term)
    assert critical_value(math.sqrt(2.0), math.inf) == pytest.approx(2.3264, abs=5e-4)
    assert detection_limit(math.sqrt(2.0), math.inf) == pytest.approx(4.6528, abs=5e-4)


@pytest.mark.parametrize(("dof", "delta"), [(4, 4.0673), (9, 3.5754), (19, 3.4150)])
def test_few_degrees_of_freedom_cost_what_the_noncentral_t_says(dof: int, delta: float) -> None:
    """δ(ν, 0.05, 0.05): 4.07 for ν = 4 (Currie, IUPAC 1995, from memory); the others computed by scipy.stats.nct."""
    assert detection_limit(1.0, dof) == pytest.approx(delta, abs=1e-4)


@pytest.mark.parametrize(("dof", "factor"), [(4, 3.0149), (6, 2.7481), (9, 2.5924), (19, 2.4454)])
def test_critical_value_of_a_pair_with_few_readings(dof: int, factor: float) -> None:
    """t(0.95, ν) √2, tables of Student's t (computed to five digits)."""
    assert critical_value(math.sqrt(2.0), dof) == pytest.approx(factor, abs=1e-4)


@given(dof=st.floats(2.0, 200.0), tail=st.floats(1e-4, 0.2), beta=st.floats(0.01, 0.4), u=st.floats(1e-9, 1e3))
def test_a_value_at_the_limit_is_missed_in_a_share_beta(dof: float, tail: float, beta: float, u: float) -> None:
    """The distribution of estimate over s at a true value of L_D is scipy.stats.nct (reference library)."""
    from scipy.stats import nct

    limit, critical = detection_limit(u, dof, tail, beta), critical_value(u, dof, tail)
    assert nct.cdf(critical / u, dof, limit / u) == pytest.approx(beta, rel=1e-5)
    assert min(limit, critical) > 0.0


@pytest.mark.parametrize(
    ("arguments", "name"),
    [((-1.0, 4.0), "u"), ((math.nan, 4.0), "u"), ((1.0, 0.0), "dof"), ((1.0, 4.0, 0.5), "tail")],
)
def test_what_cannot_be_is_named(arguments: tuple[float, ...], name: str) -> None:
    with pytest.raises(ValueError, match=f"^{name}:"):
        critical_value(*arguments)
    with pytest.raises(ValueError, match=r"^beta:"):
        detection_limit(1.0, 4.0, 0.05, 0.0)
