"""The order: for whom, where, on which sample and by whom a test is done. What a report needs beside its results.

Items of ISO/IEC 17025:2017, 7.8.2.1 (from memory of the standard's list, in own words), by letter beside each.
"""

from __future__ import annotations

import re
from typing import Annotated

from pydantic import AfterValidator, BaseModel, ConfigDict, Field

from drivers.text.binding import Written
from drivers.text.measures import refuse


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


def _date(value: str) -> str:
    from datetime import date

    try:
        if not re.fullmatch(r"\d{4}-\d{2}-\d{2}", value):
            raise ValueError
        date.fromisoformat(value)
    except ValueError as reason:
        raise refuse(f'"{value}" is not a date; expected such as "2026-11-30"') from reason
    return value


IsoDate = Annotated[str, AfterValidator(_date)]


class Party(_Part):
    """A laboratory or a customer."""

    name: str
    address: str | None = None
    contact: str | None = None


class Photo(_Part):
    """A picture of the sample, kept elsewhere; its hash proves which."""

    file: str
    sha256: Annotated[str, Field(pattern=r"^[0-9a-f]{64}$")]


class Sample(_Part):
    """The item under test, as received."""

    model: str | None = None
    serial: str | None = None
    revision: str | None = None
    label: str | None = Field(None, description="what the rating plate says")
    accessories: tuple[str, ...] = ()
    received: IsoDate | None = None
    condition: str | None = None
    photos: tuple[Photo, ...] = ()


class Persons(_Part):
    """Who did the work, who looked it over, who may sign."""

    operator: str | None = None
    reviewer: str | None = None
    authorised: str | None = None


class Order(Written):
    """One order. Every item may be left out; `lacking` says what an issued report would miss."""

    number: str
    lab: Party | None = None
    place: str | None = Field(None, description="where the work is done, if not at the laboratory's address")
    customer: Party | None = None
    sample: Sample = Sample()
    sampling: str | None = Field(None, description="plan and method of sampling, or that the sample was handed in")
    persons: Persons = Persons()
    remarks: str | None = None

    def lacking(self) -> list[str]:
        """What a report that is issued must say (ISO/IEC 17025:2017, 7.8.2.1) and this order does not."""
        sample, persons = self.sample, self.persons
        wanted = {
            "lab.name (b)": self.lab,
            "lab.address (b)": self.lab and self.lab.address,
            "customer (e)": self.customer,
            "customer.contact (e)": self.customer and self.customer.contact,
            "sample.model (g)": sample.model,
            "sample.serial (g)": sample.serial,
            "sample.condition (g)": sample.condition,
            "sample.received (h)": sample.received,
            "sampling (k)": self.sampling,
            "persons.operator (7.5.1)": persons.operator,
            "persons.authorised (o)": persons.authorised,
        }
        return [name for name, value in wanted.items() if not value]
