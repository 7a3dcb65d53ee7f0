"""Samples in memory: one channel over time, and the mixed rows that a journal hands out."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Choice = slice | NDArray[np.bool_] | NDArray[np.intp]


@dataclass(frozen=True)
class Series:
    """One channel over time: three arrays of one length, in the order of appending.

    time_s: float64, s since the start of the run. value: float64, in the channel's unit. flag: uint8, SampleFlag.
    """

    time_s: NDArray[np.float64]
    value: NDArray[np.float64]
    flag: NDArray[np.uint8]

    def __len__(self) -> int:
        return len(self.time_s)

    def same_bits(self, other: "Series") -> bool:
        """Whether both hold the same bits; other than "equal", this tells -0.0 from 0.0 and finds NaN the same."""
        return (
            self.time_s.tobytes() == other.time_s.tobytes()
            and self.value.tobytes() == other.value.tobytes()
            and self.flag.tobytes() == other.flag.tobytes()
        )


@dataclass(frozen=True)
class Rows:
    """Samples of several channels as they were appended; channel: int16, index into the segment's channel table."""

    channel: NDArray[np.int16]
    time_s: NDArray[np.float64]
    value: NDArray[np.float64]
    flag: NDArray[np.uint8]

    def __len__(self) -> int:
        return len(self.channel)

    def of(self, chosen: Choice) -> Series:
        """The chosen rows, without their channel."""
        return Series(self.time_s[chosen], self.value[chosen], self.flag[chosen])


def joined(parts: Sequence[Series]) -> Series:
    """Several stretches of one channel as one; none at all give an empty one."""
    return Series(
        np.concatenate([np.empty(0), *(part.time_s for part in parts)]),
        np.concatenate([np.empty(0), *(part.value for part in parts)]),
        np.concatenate([np.empty(0, np.uint8), *(part.flag for part in parts)]),
    )


def joined_rows(parts: Sequence[Rows]) -> Rows:
    """Several batches as one; at least one is needed."""
    return Rows(
        np.concatenate([part.channel for part in parts]),
        np.concatenate([part.time_s for part in parts]),
        np.concatenate([part.value for part in parts]),
        np.concatenate([part.flag for part in parts]),
    )
