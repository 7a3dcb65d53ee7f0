"""Budgets against the GUM (JCGM 100:2008) and EA-4/02."""

import json
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.coverage import DOMINANCE_EA
from sequencer.analysis.uncertainty import Budget, Contribution, mean_estimate

INF = math.inf


def normal(u: float, c: float = 1.0, dof: float = INF) -> Contribution:
    return Contribution("n", u, c, "normal", dof)


def rectangular(u: float, c: float = 1.0) -> Contribution:
    return Contribution("r", u, c, "rectangular")


def gauge_block() -> Budget:
    """GUM H.1, end gauge of 50 mm, lengths in nm (table H.1)."""
    length = 50_000_623.0
    return Budget(
        50_000_838.0,
        "nm",
        (
            Contribution.from_expanded("standard", 75.0, 3.0, dof=18, source="H.1.3.1"),
            normal(5.8, dof=24),
            normal(3.9, dof=5),
            normal(6.7, dof=8),
            Contribution.from_half_width("expansion difference", 1e-6, sensitivity=-length * -0.1, dof=50),
            Contribution.from_half_width("expansion", 2e-6, sensitivity=0.0),
            Contribution("temperature", 0.41, 0.0, "arcsine"),
            Contribution.from_half_width("temperature difference", 0.05, sensitivity=-length * 11.5e-6, dof=2),
        ),
    )


def test_gum_h1_end_gauge() -> None:
    budget = gauge_block()
    assert budget.u == pytest.approx(31.664, abs=0.01)  # H.1.4 prints 32 nm
    assert math.floor(budget.dof) == 16  # H.1.6
    assert budget.dof == pytest.approx(16.75, abs=0.05)
    assert budget.shape == "t"
    assert budget.k == pytest.approx(2.17, abs=0.006)  # table G.2, 16 degrees of freedom, 95.45 %


def test_gum_h2_resistance_per_reading() -> None:
    """GUM H.2.4, second approach: R from each set of readings, so that their correlation is inside."""
    voltage = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
    current = np.array([19.663, 19.639, 19.640, 19.685, 19.678]) * 1e-3
    phase = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])
    estimate = mean_estimate(voltage * np.cos(phase) / current)
    contribution = Contribution.from_readings("five sets", estimate.s, 5)
    assert estimate.value == pytest.approx(127.732, abs=0.002)
    assert contribution.u == pytest.approx(0.0711, abs=0.0005)
    assert contribution.dof == 4


# GUM table G.2 (= NIST TN 1297 table B.1), column 95.45 %
TABLE_G2 = {
    1: 13.97, 2: 4.53, 3: 3.31, 4: 2.87, 5: 2.65, 6: 2.52, 7: 2.43, 8: 2.37, 9: 2.32, 10: 2.28, 11: 2.25, 12: 2.23,
    13: 2.21, 14: 2.20, 15: 2.18, 16: 2.17, 17: 2.16, 18: 2.15, 19: 2.14, 20: 2.13, 25: 2.11, 30: 2.09, 35: 2.07,
    40: 2.06, 45: 2.06, 50: 2.05, 100: 2.025, INF: 2.000,
}  # fmt: skip


@pytest.mark.parametrize(("dof", "k"), TABLE_G2.items())
def test_gum_table_g2(dof: float, k: float) -> None:
    assert Budget(1.0, "V", (normal(0.1, dof=dof),)).k == pytest.approx(k, abs=0.006)


def test_degrees_of_freedom_are_truncated() -> None:
    """GUM G.4.1: to the next lower integer."""
    assert Budget(1.0, "V", (normal(0.1, dof=4.99),)).k == pytest.approx(2.87, abs=0.006)


def test_gum_g41_example() -> None:
    """Relative u 0.25 %, 0.57 %, 0.82 % with 9, 4, 14 degrees of freedom: 1.03 %, 19.0 (from memory)."""
    budget = Budget(100.0, "%", (normal(0.25, dof=9), normal(0.57, dof=4), normal(0.82, dof=14)))
    assert budget.u == pytest.approx(1.03, abs=0.005)
    assert budget.dof == pytest.approx(18.9987, abs=1e-3)


@pytest.mark.parametrize(
    ("distribution", "divisor"),
    [  # GUM 4.3.7, 4.3.9, H.1.3.4
        ("normal", 2.0), ("rectangular", 1.7321), ("triangular", 2.4495), ("arcsine", 1.4142),
    ],
)  # fmt: skip
def test_divisors(distribution: str, divisor: float) -> None:
    contribution = Contribution.from_half_width("a", 1.0, distribution)  # type: ignore[arg-type]
    assert contribution.u == pytest.approx(1.0 / divisor, rel=1e-4)
    assert contribution.distribution == distribution


def test_resolution_divisor() -> None:
    assert Contribution.from_resolution("step", 1.0).u == pytest.approx(0.2887, abs=5e-5)  # GUM F.2.2.1


@pytest.mark.parametrize(
    ("half_width_V", "u_V"),
    [  # meter accuracy ±(% of reading + % of range), rectangular: u = a/√3 (GUM 4.3.7), computed
        (5.0 * 20e-6 + 10.0 * 5e-6, 86.603e-6),
        (4.2 * 35e-6 + 10.0 * 5e-6, 113.7e-6),
        (21.0 * 45e-6 + 100.0 * 6e-6, 0.892e-3),
    ],
)
def test_accuracy_statement(half_width_V: float, u_V: float) -> None:
    assert Contribution.from_half_width("meter", half_width_V).u == pytest.approx(u_V, rel=5e-4)


def test_ea_s3_standard_resistor() -> None:
    parts = (normal(2.5), rectangular(5.8), rectangular(1.6), rectangular(3.2),
             Contribution("ratio", 4.1e-7, 1e7, "triangular"), normal(0.7, dof=4))  # fmt: skip
    budget = Budget(10_000_178.0, "mΩ", parts)
    assert budget.u == pytest.approx(8.33, abs=0.05)
    assert budget.k == pytest.approx(2.0, abs=0.005)
    assert pytest.approx(17.0, abs=0.5) == budget.U


def test_ea_s5_thermocouple() -> None:
    parts = (0.1, 0.077, 0.0223, 0.0886, 0.0236, 0.15, 0.173, 0.577)
    kinds = ("normal", "normal", "normal", "rectangular", "rectangular", "rectangular", "rectangular", "rectangular")
    budget = Budget(1000.5, "°C", tuple(Contribution("", u, 1.0, kind) for u, kind in zip(parts, kinds, strict=True)))
    assert budget.u == pytest.approx(0.641, abs=0.002)
    assert budget.k == 2.0
    assert pytest.approx(1.3, abs=0.05) == budget.U


def handheld_meter(dominance: float) -> Budget:
    """EA-4/02 S9: certificate 0.001 V (normal, k = 2), drift ±0.011 V, resolution 0.1 V."""
    parts = (
        Contribution.from_expanded("calibrator", 0.001),
        Contribution.from_half_width("drift", 0.011),
        Contribution.from_resolution("display", 0.1),
    )
    return Budget(0.10, "V", parts, dominance=dominance)


def test_ea_s9_handheld_meter_by_its_own_criterion() -> None:
    budget = handheld_meter(DOMINANCE_EA)
    assert budget.u == pytest.approx(0.030, abs=0.0005)
    assert budget.shape == "rectangular"
    assert budget.k == pytest.approx(1.65, abs=0.01)
    assert round(budget.U, 2) == 0.05  # as printed


def test_ea_s9_by_our_stricter_criterion_prints_the_same_uncertainty() -> None:
    """The second contribution is no longer neglected: trapezium, k 1.71; EA's printed U of 0.05 V stands."""
    budget = handheld_meter(Budget(0.0, "V", (normal(1.0),)).dominance)
    assert budget.shape == "trapezoidal"
    assert round(budget.U, 2) == 0.05


def test_one_rectangular_alone_has_k_165() -> None:
    budget = Budget(0.0, "V", (rectangular(1.0), normal(0.05)))
    assert (budget.shape, budget.k) == ("rectangular", pytest.approx(0.95 * math.sqrt(3.0)))


def test_ea_s10_calliper() -> None:
    budget = Budget(0.1, "µm", (rectangular(0.46), rectangular(1.7, 1.15), rectangular(15.0), rectangular(29.0)))
    assert budget.u == pytest.approx(32.7, abs=0.1)
    assert budget.shape == "trapezoidal"
    assert budget.k == pytest.approx(1.83, abs=0.01)
    assert pytest.approx(60.0, abs=0.5) == budget.U


def test_ea_s12_water_meter() -> None:
    budget = Budget(0.0, "1", (normal(6.0e-4, dof=2), normal(6.8e-4)))
    assert budget.u == pytest.approx(9.1e-4, abs=0.1e-4)
    assert budget.dof == pytest.approx(10.4, abs=0.1)
    assert budget.k == pytest.approx(2.28, abs=0.01)
    assert pytest.approx(2.0e-3, abs=0.1e-3) == budget.U


SHARES = st.floats(0.0, 1.0)


@given(SHARES, SHARES, SHARES, SHARES, st.integers(0, 2**32 - 1))
def test_value_plus_minus_U_covers(a: float, b: float, c: float, d: float, seed: int) -> None:
    """Coverage of mixed shapes by drawing them (the idea of JCGM 101), bounds known exactly."""
    kinds = ("rectangular", "rectangular", "normal", "arcsine")
    sizes = [size if size > 0.01 else 0.0 for size in (a, b, c, d)]
    if not any(sizes):
        sizes[0] = 1.0
    budget = Budget(0.0, "V", tuple(Contribution("", u, 1.0, k) for u, k in zip(sizes, kinds, strict=True)))
    rng = np.random.default_rng(seed)
    n = 60_000
    error = math.sqrt(3.0) * (sizes[0] * rng.uniform(-1, 1, n) + sizes[1] * rng.uniform(-1, 1, n))
    error += sizes[2] * rng.normal(size=n) + math.sqrt(2.0) * sizes[3] * np.sin(rng.uniform(0, 2 * np.pi, n))
    noise = 4.0 * math.sqrt(0.05 * 0.95 / n)
    assert np.mean(np.abs(error) <= budget.U) >= 0.945 - noise


@pytest.mark.parametrize(("n", "bound"), [(5, 1.0), (5, 3.0), (10, 1.0), (30, 0.3)])
def test_coverage_with_few_readings_and_a_bound(n: int, bound: float) -> None:
    """Type A from n readings beside a rectangular bound of `bound` times their true u: Welch-Satterthwaite at work."""
    coverage, noise = few_readings_coverage(n, bound)
    assert coverage >= 0.945 - noise


def test_three_readings_are_the_weak_spot_of_welch_satterthwaite() -> None:
    """A known weakness of the formula, not of the code: about 93 % instead of 95 % (computed). Hence n >= 5."""
    coverage, noise = few_readings_coverage(3, 0.5)
    assert 0.925 - noise <= coverage <= 0.945 + noise


def few_readings_coverage(n: int, bound: float) -> tuple[float, float]:
    rng = np.random.default_rng(5)
    hits, trials = 0, 4000
    for _ in range(trials):
        readings = rng.normal(0.0, math.sqrt(n), n)
        shift = rng.uniform(-1, 1) * math.sqrt(3.0) * bound
        parts = (Contribution.from_readings("a", float(np.std(readings, ddof=1)), n), rectangular(bound))
        hits += abs(float(np.mean(readings)) + shift) <= Budget(0.0, "V", parts).U
    return hits / trials, 3.0 * math.sqrt(0.05 * 0.95 / trials)


def test_budget_as_data() -> None:
    data = json.loads(json.dumps(gauge_block().as_dict(), allow_nan=False))
    assert set(data) == {"value", "unit", "u", "dof", "k", "U", "shape", "contributions"}
    first = data["contributions"][0]
    assert set(first) == {"name", "u", "sensitivity", "contribution", "distribution", "dof", "source"}
    assert (first["name"], first["u"], first["dof"]) == ("standard", 25.0, 18)
    assert data["contributions"][5]["dof"] is None


def test_sensitivity_has_no_sign_in_the_budget() -> None:
    assert Contribution("a", 2.0, -3.0).contribution == 6.0


@pytest.mark.parametrize(
    ("arguments", "named"),
    [
        ({"u": -1.0}, "u"), ({"u": math.nan}, "u"), ({"u": INF}, "u"), ({"u": 1.0, "dof": 0.0}, "dof"),
        ({"u": 1.0, "sensitivity": math.nan}, "sensitivity"), ({"u": 1.0, "distribution": "round"}, "distribution"),
    ],
)  # fmt: skip
def test_impossible_contribution_is_refused_by_name(arguments: dict[str, float], named: str) -> None:
    with pytest.raises(ValueError, match=f"^{named}: "):
        Contribution("a", **arguments)  # type: ignore[arg-type]


def test_one_reading_has_no_scatter() -> None:
    with pytest.raises(ValueError, match=r"^n_eff: "):
        Contribution.from_readings("a", 1.0, 1.0)


def test_budget_without_contributions_is_refused() -> None:
    with pytest.raises(ValueError, match=r"^contributions: "):
        Budget(1.0, "V", ())
