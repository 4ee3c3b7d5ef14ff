"""The catalog: the modules and holders that can be bought."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

from pydantic import Field, PrivateAttr

from trainopt.files.fields import (
    NOT_NEGATIVE,
    POSITIVE,
    Amount,
    Count,
    Entry,
    Name,
    Number,
    Price,
    Range,
    Words,
)
from trainopt.files.source import Source


class Module(Entry):
    """One module type."""

    medium: Annotated[str, Name()]
    """The medium it is built from."""
    area: Annotated[float, Amount("area", POSITIVE, "1.1 m2")]
    """Filter area of one module."""
    price: Price
    """Price of one module, used once, in the catalog's currency."""
    hold_up: Annotated[float, Amount("volume", NOT_NEGATIVE, "3.2 L")] = 0.0
    """Liquid one module keeps at the end of a batch."""
    max_count: Annotated[int, Count(Range(least=1, most=10000), "40")]
    """Most modules that a stage may run in parallel."""


class Holder(Entry):
    """One holder (housing, rack) type."""

    modules: tuple[Annotated[str, Name("oat-coarse-11")], ...]
    """The module types it takes."""
    slots: Annotated[int, Count(example="10")]
    """How many modules it takes."""
    price: Annotated[float, Number(NOT_NEGATIVE, "4200")]
    """Price of one holder, spread over its batches."""
    batches: Annotated[int, Count(example="200")] = 1
    """Batches that its price is spread over."""
    owned: Annotated[int, Count(Range(least=0), "2")] = 0
    """Holders that are there already and cost nothing: so many in the whole train, whichever stages use them. Which
    type a stage uses is chosen as though it alone could use those of each type."""


class Catalog(Entry):
    """What can be bought."""

    currency: Annotated[str, Words("EUR", empty=True)] = ""
    """Currency of every price."""
    modules: dict[str, Module]
    """Module types by name."""
    holders: dict[str, Holder] = Field(default_factory=dict)
    """Holder types by name; a module that no holder lists needs none."""

    _source: Source = PrivateAttr(default=Source(Path(), "(built in Python)", ""))

    @property
    def source(self) -> Source:
        """The file it was read from."""
        return self._source
