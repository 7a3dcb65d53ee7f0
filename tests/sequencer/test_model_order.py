"""The order: what an issued report needs beside its results. Items: ISO/IEC 17025:2017, 7.8.2.1, from memory."""

from __future__ import annotations

import pytest

from drivers.text.binding import bind
from drivers.text.document import compose
from drivers.text.faults import Faults
from sequencer.engine.inputs import FOLDERS
from sequencer.model.order import Order

GARDEN = (FOLDERS["order"] / "garden.yaml").read_text("utf-8")


def read(text: str) -> tuple[Order | None, list[str]]:
    faults = Faults()
    bound = bind(Order, compose(text.encode(), "o.yaml"), "order", faults)
    return (None if bound is None else bound.model), [str(fault) for fault in faults.found]


def test_the_shipped_order_lacks_nothing() -> None:
    order, faults = read(GARDEN)
    assert faults == []
    assert order is not None
    assert order.lacking() == []


@pytest.mark.parametrize(
    ("line", "lacks"),
    [
        ("  serial: S-00417\n", "sample.serial (g)"),
        ("  received: 2026-11-30\n", "sample.received (h)"),
        ("sampling: one piece handed in by the customer; the results concern this piece only\n", "sampling (k)"),
        (", authorised: C. Moss", "persons.authorised (o)"),
        (', address: "1 Potting Lane, Fernwick"', "lab.address (b)"),
    ],
)
def test_what_is_left_out_is_named(line: str, lacks: str) -> None:
    assert line in GARDEN
    order, faults = read(GARDEN.replace(line, ""))
    assert faults == []
    assert order is not None
    assert order.lacking() == [lacks]


@pytest.mark.parametrize("date", ["30.11.2026", "2026-13-01", "2026-02-30", "soon"])
def test_a_date_that_is_none(date: str) -> None:
    _, faults = read(GARDEN.replace("2026-11-30", date))
    assert "is not a date" in faults[0]


def test_unknown_keys_and_a_hash_that_is_none() -> None:
    _, faults = read(GARDEN.replace("serial:", "serail:"))
    assert "did you mean 'serial'" in faults[0]
    _, faults = read(GARDEN.replace("  accessories: [mains lead]\n", "  photos: [{file: a.jpg, sha256: 12}]\n"))
    assert "sha256" in faults[0]
