"""How wrong an instrument is: gain, offset, drift, noise, resolution.

Every draw has a generator of its own, seeded from (seed, instrument, kind), so that neither the order of the
exchanges nor the presence of another instrument changes what an instrument says. Drift is a function of time alone.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

DRIFT_KNOT_s = 10.0
DRIFT_TAU_s = 900.0  # common practice, no source: benches warm and cool within a quarter of an hour
SHARE = 1 / 3  # of an accuracy's half width: the standard deviation of gains and offsets
MOST = 0.8  # of it: gains and offsets stay inside, which leaves room for drift and noise
NOISE_SHARE = 1 / 20  # of the half width that belongs to the range
DRIFT_SHARE = 1 / 10
BLOCK = 64


def generator(seed: int, name: str, kind: str) -> np.random.Generator:
    """The generator of one kind of error of one instrument; stable over processes and platforms."""
    digest = hashlib.sha256(f"{seed}\0{name}\0{kind}".encode()).digest()
    return np.random.Generator(np.random.PCG64(int.from_bytes(digest[:16], "big")))


def normals(source: np.random.Generator) -> Iterator[float]:
    """Standard normal numbers for ever, drawn in blocks."""
    while True:
        yield from source.standard_normal(BLOCK).tolist()


@dataclass(frozen=True)
class Span:
    """One line of an accuracy statement: ± (reading x value + of_range x range), half width; resolution 0: none."""

    range: float
    reading: float
    of_range: float
    resolution: float = 0.0


class Drift:
    """A slow wander with standard deviation `sd`, bounded to three of it; linear between knots of 10 s."""

    def __init__(self, source: np.random.Generator, sd: float) -> None:
        self._sd = sd
        self._draws = normals(source)
        self._keep = math.exp(-DRIFT_KNOT_s / DRIFT_TAU_s)
        self._knot = 0
        self._left, self._right = 0.0, self._following(0.0)

    def at(self, t_s: float) -> float:
        """The drift at a moment; moments must not lie more than a knot before the latest one asked for."""
        if not self._sd:
            return 0.0
        knot = int(t_s // DRIFT_KNOT_s)
        while self._knot < knot:
            self._left, self._right, self._knot = self._right, self._following(self._right), self._knot + 1
        share = t_s / DRIFT_KNOT_s - self._knot
        return self._sd * (self._left + share * (self._right - self._left))

    def _following(self, value: float) -> float:
        """An autoregressive step: stationary, standard deviation 1."""
        step = self._keep * value + math.sqrt(1.0 - self._keep**2) * next(self._draws)
        return min(max(step, -3.0), 3.0)


def _drawn(draws: Iterator[float], half: float) -> float:
    return min(max(next(draws) * SHARE, -MOST), MOST) * half


class Imperfect:
    """One measuring or programming function with its spans, as one individual has it. `scale` 0: ideal."""

    def __init__(self, spans: tuple[Span, ...], seed: int, name: str, kind: str, scale: float) -> None:
        self.spans = spans
        self._scale = scale
        gains, offsets = (normals(generator(seed, name, f"{kind} {what}")) for what in ("gain", "offset"))
        self._gains = [scale * _drawn(gains, span.reading) for span in spans]
        self._offsets = [scale * _drawn(offsets, span.of_range * span.range) for span in spans]
        self._drift = Drift(generator(seed, name, f"{kind} drift"), scale)
        self._noise = normals(generator(seed, name, f"{kind} noise"))

    def programmed(self, setting: float, index: int = 0) -> float:
        """What really comes when `setting` is asked for: gain and offset; nothing where nothing is asked for."""
        return setting * (1.0 + self._gains[index]) + self._offsets[index] if setting else 0.0

    def read(self, true: float, t_s: float, index: int = 0, averaged: float = 1.0) -> float:
        """What is read where `true` is; `averaged`: how many times longer than usual the noise is averaged."""
        if not self._scale:
            return true
        span = self.spans[index]
        width = self._scale * span.of_range * span.range
        value = true * (1.0 + self._gains[index]) + self._offsets[index]
        value += DRIFT_SHARE * span.of_range * span.range * self._drift.at(t_s)
        value += NOISE_SHARE * width * next(self._noise) / math.sqrt(averaged)
        return round(value / span.resolution) * span.resolution if span.resolution else value
