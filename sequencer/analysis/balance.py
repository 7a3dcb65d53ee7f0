"""Balancing through cell taps: which current leaves a cell because it stands high, or enters it because it stands low.

With b_j the current out of cell j, tap j gives I_j = b_j - b_(j+1) (Kirchhoff): inner taps show differences between
cells, and a current that is equal in all of them is seen by none. So cells are offset at once, in sign patterns whose
sum is zero and that leave one or two cells at the mean, with baselines between; a cell at the mean is taken to give
nothing.

    I_j = c_j + h_j [s_j = +1] + l_j [s_j = -1] - h_(j+1) [s_(j+1) = +1] - l_(j+1) [s_(j+1) = -1]

by least squares: h > 0 is a bleed out of the high cell, l < 0 a charge into the low one, c_j what flows whatever the
offsets (a divider, a monitor's supply), which is no balancing. Scatter is taken from the baselines, which no balancing
can disturb that begins with an offset, and from the readings within each phase; the larger of both counts.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from sequencer.analysis.coverage import effective_dof
from sequencer.analysis.detection import ALPHA, BETA, critical_value, detection_limit

Array = npt.NDArray[np.float64]
Way = Literal["high", "low"]


def sign_patterns(cells: int) -> tuple[tuple[int, ...], ...]:
    """Offsets of the cells as signs, one pattern a row; each sums to zero, each cell is high as often as low.

    All rotations of one row with a cell at the mean, or two of an even number: + + - - 0, + + 0 - - 0. (Strictly
    orthogonal signs without a zero would leave a bleed of the high and a charge of the low cells the same thing; of two
    cells they are.) Few cells are shown again, for the scatter's sake.
    Raises ValueError below two cells.
    """
    if cells < 2:
        raise ValueError(f"cells: a cell needs another one to differ from, got {cells}")
    if cells == 2:
        return ((1, -1), (-1, 1)) * 2
    half = (cells - 1) // 2
    row = (1,) * half + (0,) * (1 - cells % 2) + (-1,) * half + (0,)
    patterns = tuple(row[cells - shift :] + row[: cells - shift] for shift in range(cells))
    return patterns + tuple(tuple(-sign for sign in one) for one in patterns) if cells == 3 else patterns


def sequence(cells: int) -> tuple[tuple[int, ...], ...]:
    """What is shown one after the other: the patterns, each between two baselines (all zero)."""
    rest = (0,) * cells
    shown = [rest]
    for pattern in sign_patterns(cells):
        shown += [pattern, rest]
    return tuple(shown)


@dataclass(frozen=True)
class Phases:
    """What the taps gave, phase by phase, in the order of time.

    signs : (m, cells), rows of -1, 0, 1; all zero: a baseline.
    mean_A, u_A, dof : (m, cells - 1), mean current out of each tap, its standard uncertainty from the scatter within
    the phase (autocorrelation respected), and the degrees of freedom of that.
    middle_s : (m,), s.    drift_A_s : (cells - 1,), A/s, what the zeros before and after differ by, a second.
    scale : (cells - 1,), half width by which the shunt and meter of a tap may be wrong, a share of the current.
    """

    signs: npt.NDArray[np.int64]
    mean_A: Array
    u_A: Array
    dof: Array
    middle_s: Array
    drift_A_s: Array
    scale: Array


@dataclass(frozen=True)
class Exchange:
    """What one cell exchanges when it stands high, or low: the current out of it, A, less than zero into it.

    u_scatter_A, dof : from readings.   drift_A : half width that the zeros leave open.
    taps_A : what each tap has to it, out_A being their sum; a wrong scale of a tap is wrong by a share of this.
    misfit_A : what the model of `balance` leaves unexplained, as a standard uncertainty. Where nothing flows, scales
    and model have nothing to be wrong about: they belong to an amount, and to telling which cell it is of.
    critical_A, detectable_A : L_C and L_D, alpha and beta over all exchanges together.
    clear_A : from here on it is this cell's own, and no other's by a wrong scale.
    """

    cell: int
    way: Way
    out_A: float
    u_scatter_A: float
    dof: float
    drift_A: float
    taps_A: tuple[float, ...]
    misfit_A: float
    critical_A: float
    detectable_A: float
    clear_A: float

    @property
    def seen(self) -> bool:
        """Whether something flows."""
        return abs(self.out_A) > self.critical_A

    @property
    def clear(self) -> bool:
        """Whether it is this cell's."""
        return abs(self.out_A) > self.clear_A

    @property
    def kind(self) -> str:
        """What such a current is, by its sign, with room for the {cells}."""
        direction = "out of" if self.out_A > 0 else "into"
        return f"{direction} {{cells}} standing {self.way}"


def balance(phases: Phases, *, alpha: float = ALPHA, beta: float = BETA) -> tuple[Exchange, ...]:
    """Every cell's exchange when high, and (more than two cells) when low; `alpha` is that of one false find at all.

    Raises ValueError for shapes that do not belong together, fewer than two baselines, or patterns that tell nothing.
    """
    cells = _checked(phases)
    columns = _columns(cells)
    design = _design(phases.signs, columns)
    inverse = np.linalg.pinv(design)
    if np.linalg.matrix_rank(design) < design.shape[1]:
        raise ValueError(f"signs: {phases.signs.shape[0]} phases do not tell {len(columns)} exchanges apart")
    observed = phases.mean_A.ravel()
    solution = inverse @ observed
    weights = inverse[cells - 1 :]
    scatter_A, scatter_dof = _baseline_scatter(phases)
    left_A = _misfit(observed - design @ solution, design.shape[1])
    drifts_A = np.abs(weights @ np.outer(phases.middle_s - phases.middle_s[0], phases.drift_A_s).ravel())
    tail = alpha / (2 * len(columns))  # both signs of each count: Bonferroni, which errs on the safe side
    found = []
    for (cell, way), row, drift_A in zip(columns, weights, drifts_A, strict=True):
        taps_A = (row.reshape(-1, cells - 1) * phases.mean_A).sum(axis=0)
        u_A, dof = _scatter(row, phases, scatter_A, scatter_dof)
        misfit_A = float(np.linalg.norm(row)) * max(left_A**2 - scatter_A**2, 0.0) ** 0.5
        bounds = [float(drift_A) / math.sqrt(3.0)]
        doubts = [misfit_A, float(np.linalg.norm(phases.scale * taps_A)) / math.sqrt(3.0)]
        null, full = _combined(u_A, dof, bounds), _combined(u_A, dof, bounds + doubts)
        found.append(
            Exchange(
                cell=cell,
                way=way,
                out_A=float(taps_A.sum()),
                u_scatter_A=u_A,
                dof=dof,
                drift_A=float(drift_A),
                taps_A=tuple(taps_A.tolist()),
                misfit_A=misfit_A,
                critical_A=critical_value(*null, tail),
                detectable_A=detection_limit(*null, tail, beta),
                clear_A=critical_value(*full, tail),
            )
        )
    return tuple(found)


def _combined(u_A: float, dof: float, bounds: list[float]) -> tuple[float, float]:
    """Standard uncertainty of scatter and what is known as a bound, and its effective degrees of freedom."""
    return math.hypot(u_A, *bounds), effective_dof([u_A, *bounds], [dof, *[math.inf] * len(bounds)])


def standing_A(phases: Phases, zeros_A: Array) -> Array:
    """What flows out of each tap whatever the offsets, A: baselines less zeros; (cells - 1,)."""
    return np.asarray(phases.mean_A[_baselines(phases)].mean(axis=0) - zeros_A, dtype=np.float64)


def _checked(phases: Phases) -> int:
    m, cells = phases.signs.shape
    for name in ("mean_A", "u_A", "dof"):
        shape = getattr(phases, name).shape
        if shape != (m, cells - 1):
            raise ValueError(
                f"{name}: expected the shape {(m, cells - 1)} of {m} phases and {cells} cells, got {shape}"
            )
    if not (np.all(np.isfinite(phases.mean_A)) and np.all(np.isfinite(phases.u_A))):
        raise ValueError("mean_A, u_A: expected finite numbers")
    if np.count_nonzero(_baselines(phases)) < 2:
        raise ValueError("signs: expected two baselines at least, rows of zeros, to take the scatter from")
    return int(cells)


def _baselines(phases: Phases) -> npt.NDArray[np.bool_]:
    return np.asarray(~np.any(phases.signs, axis=1), dtype=np.bool_)


def _columns(cells: int) -> list[tuple[int, Way]]:
    """What is solved for; of two cells a bleed of the high and a charge of the low one are the same thing."""
    highs: list[tuple[int, Way]] = [(cell, "high") for cell in range(1, cells + 1)]
    return highs if cells == 2 else highs + [(cell, "low") for cell in range(1, cells + 1)]


def _design(signs: npt.NDArray[np.int64], columns: list[tuple[int, Way]]) -> Array:
    """(m x taps, taps + columns): rows phase by phase, tap by tap; first what each tap gives whatever the offsets."""
    m, cells = signs.shape
    taps = cells - 1
    design = np.zeros((m, taps, taps + len(columns)))
    for tap in range(taps):
        design[:, tap, tap] = 1.0
        for number, (cell, way) in enumerate(columns, taps):
            if cell - 1 in (tap, tap + 1):
                shown = signs[:, cell - 1] == (1 if way == "high" else -1)
                design[:, tap, number] = np.where(shown, 1.0 if cell - 1 == tap else -1.0, 0.0)
    return design.reshape(m * taps, -1)


def _baseline_scatter(phases: Phases) -> tuple[float, float]:
    """Standard deviation of a phase's mean about its tap's own mean, pooled over the taps, and its freedom."""
    rest_A = phases.mean_A[_baselines(phases)]
    dof = (rest_A.shape[0] - 1) * rest_A.shape[1]
    return float(np.sqrt(np.sum((rest_A - rest_A.mean(axis=0)) ** 2) / dof)), float(dof)


def _misfit(residuals: Array, parameters: int) -> float:
    """Standard deviation of what the model leaves; 0 where nothing is left over to tell it by."""
    dof = residuals.size - parameters
    return float(np.sqrt(np.sum(residuals**2) / dof)) if dof > 0 else 0.0


def _scatter(row: Array, phases: Phases, between_A: float, between_dof: float) -> tuple[float, float]:
    """Standard uncertainty of one exchange from scatter, and its degrees of freedom."""
    from_phases_A = float(np.linalg.norm(row)) * between_A
    parts = np.abs(row) * phases.u_A.ravel()
    within_A = float(np.linalg.norm(parts))
    if from_phases_A >= within_A:
        return from_phases_A, between_dof
    return within_A, effective_dof(parts.tolist(), phases.dof.ravel().tolist())
