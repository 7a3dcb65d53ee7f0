"""What can go wrong between us and an instrument.

BenchFault
├── LinkFault        the link: refused, lost, silent
├── ReplyFault       the answer: too few fields, not a number
└── InstrumentFault  the instrument: said an error, did not do as it was told
"""

from __future__ import annotations


class BenchFault(Exception):
    """Something on the bench, not the charger; says which instrument and what."""

    def __init__(self, instrument: str, what: str) -> None:
        self.instrument = instrument
        self.what = what
        super().__init__(f"{instrument}: {what}")

    def __reduce__(self) -> tuple[type[BenchFault], tuple[str, str]]:
        return type(self), (self.instrument, self.what)


class LinkFault(BenchFault):
    """The link refused, was lost, or stayed silent past its time-out."""


class ReplyFault(BenchFault):
    """An answer that cannot be read as what was asked for."""


class InstrumentFault(BenchFault):
    """The instrument reported an error, or its readback is not what was set."""
