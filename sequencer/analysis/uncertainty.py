"""Uncertainty budgets as data (JCGM 100:2008, the GUM; EA-4/02 for the shapes)."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Literal, Self

from sequencer.analysis.coverage import DOMINANCE, Shape, effective_dof, shape_and_factor
from sequencer.analysis.estimates import Estimate, mean_between, mean_estimate

__all__ = ["Budget", "Contribution", "Distribution", "Estimate", "mean_between", "mean_estimate"]

Distribution = Literal["normal", "rectangular", "triangular", "arcsine"]

#: Half width to standard uncertainty (GUM 4.3.7, 4.3.9, H.1.3.4); a half width called normal is taken as k = 2.
DIVISORS: dict[str, float] = {
    "normal": 2.0,
    "rectangular": math.sqrt(3.0),
    "triangular": math.sqrt(6.0),
    "arcsine": math.sqrt(2.0),
}


def _require(condition: bool, name: str, got: object, expected: str) -> None:
    if not condition:
        raise ValueError(f"{name}: expected {expected}, got {got!r}")


def _require_size(name: str, number: float) -> None:
    _require(math.isfinite(number) and number >= 0.0, name, number, "a finite number, zero or above")


@dataclass(frozen=True)
class Contribution:
    """One line of a budget.

    u : standard uncertainty of the input, >= 0.    sensitivity : unit of the result per unit of the input.
    dof : degrees of freedom of u, > 0, inf for a bound that is taken as known.
    Raises ValueError naming the argument.
    """

    name: str
    u: float
    sensitivity: float = 1.0
    distribution: Distribution = "normal"
    dof: float = math.inf
    source: str = ""

    def __post_init__(self) -> None:
        _require_size("u", self.u)
        _require(math.isfinite(self.sensitivity), "sensitivity", self.sensitivity, "a finite number")
        _require(self.distribution in DIVISORS, "distribution", self.distribution, f"one of {', '.join(DIVISORS)}")
        _require(self.dof > 0.0, "dof", self.dof, "a number above zero")

    @property
    def contribution(self) -> float:
        """|c| u, in the unit of the result."""
        return abs(self.sensitivity) * self.u

    @classmethod
    def from_half_width(
        cls,
        name: str,
        half_width: float,
        distribution: Distribution = "rectangular",
        *,
        sensitivity: float = 1.0,
        dof: float = math.inf,
        source: str = "",
    ) -> Self:
        """Input known to lie within ± half_width (accuracy statement, tolerance): GUM 4.3.7, rectangular by default."""
        _require_size("half_width", half_width)
        _require(distribution in DIVISORS, "distribution", distribution, f"one of {', '.join(DIVISORS)}")
        return cls(name, half_width / DIVISORS[distribution], sensitivity, distribution, dof, source)

    @classmethod
    def from_expanded(
        cls,
        name: str,
        U: float,
        k: float = 2.0,
        *,
        sensitivity: float = 1.0,
        dof: float = math.inf,
        source: str = "",
    ) -> Self:
        """Input with a certificate that states U and k (GUM 4.3.3)."""
        _require_size("U", U)
        _require(math.isfinite(k) and k > 0.0, "k", k, "a number above zero")
        return cls(name, U / k, sensitivity, "normal", dof, source)

    @classmethod
    def from_resolution(cls, name: str, step: float, *, sensitivity: float = 1.0, source: str = "") -> Self:
        """Reading rounded to steps: rectangular, step/√12 (GUM F.2.2.1)."""
        _require_size("step", step)
        return cls(name, step / math.sqrt(12.0), sensitivity, "rectangular", math.inf, source)

    @classmethod
    def from_readings(
        cls,
        name: str,
        s: float,
        n_eff: float,
        *,
        sensitivity: float = 1.0,
        source: str = "",
    ) -> Self:
        """Mean of readings with standard deviation s, worth n_eff independent ones, n_eff > 1 (GUM 4.2.3)."""
        _require_size("s", s)
        _require(math.isfinite(n_eff) and n_eff > 1.0, "n_eff", n_eff, "a number above 1")
        return cls(name, s / math.sqrt(n_eff), sensitivity, "normal", n_eff - 1.0, source)

    def as_dict(self) -> dict[str, Any]:
        """As in budgets.json; infinitely many degrees of freedom are null, JSON having no infinity."""
        return {
            "name": self.name,
            "u": self.u,
            "sensitivity": self.sensitivity,
            "contribution": self.contribution,
            "distribution": self.distribution,
            "dof": _finite_or_none(self.dof),
            "source": self.source,
        }


@dataclass(frozen=True)
class Budget:
    """A result with all that makes it uncertain; inputs are taken as uncorrelated (GUM 5.1.2).

    value : in `unit`.    dominance : when one or two rectangular contributions decide the shape, see `coverage`.
    """

    value: float
    unit: str
    contributions: tuple[Contribution, ...]
    dominance: float = DOMINANCE

    def __post_init__(self) -> None:
        _require(math.isfinite(self.value), "value", self.value, "a finite number")
        object.__setattr__(self, "contributions", tuple(self.contributions))
        _require(bool(self.contributions), "contributions", self.contributions, "at least one contribution")

    @property
    def u(self) -> float:
        """Combined standard uncertainty (GUM 5.1.2)."""
        return math.hypot(*self._parts)

    @property
    def dof(self) -> float:
        """Effective degrees of freedom, Welch-Satterthwaite (GUM G.4.1), unrounded."""
        return effective_dof(self._parts, [c.dof for c in self.contributions])

    @property
    def shape(self) -> Shape:
        """Shape of the result that k was taken from."""
        return self._shape_and_k[0]

    @property
    def k(self) -> float:
        """Coverage factor: 95.45 % for normal and t, 95 % for the bounded shapes."""
        return self._shape_and_k[1]

    @property
    def U(self) -> float:
        """Expanded uncertainty k u."""
        return self.k * self.u

    @property
    def _parts(self) -> list[float]:
        return [c.contribution for c in self.contributions]

    @property
    def _shape_and_k(self) -> tuple[Shape, float]:
        kinds = [c.distribution for c in self.contributions]
        return shape_and_factor(self._parts, kinds, [c.dof for c in self.contributions], dominance=self.dominance)

    def as_dict(self) -> dict[str, Any]:
        """As in budgets.json; infinitely many degrees of freedom are null."""
        return {
            "value": self.value,
            "unit": self.unit,
            "u": self.u,
            "dof": _finite_or_none(self.dof),
            "k": self.k,
            "U": self.U,
            "shape": self.shape,
            "contributions": [c.as_dict() for c in self.contributions],
        }


def _finite_or_none(number: float) -> float | None:
    return number if math.isfinite(number) else None
