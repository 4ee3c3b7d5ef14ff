"""What a report says, before it is a page or a workbook: sections of paragraphs, tables and pictures.

Tables keep their numbers as numbers, so that page and workbook show the same values.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

from trainopt.report.numbers import NONE, PRESSURE_DECIMALS, aligned, fixed, plain, significant

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from trainopt.train.results import BlockDesign, StageDesign

Cell = str | int | float | None
Kind = Literal["text", "whole", "decimal", "significant"]


@dataclass(frozen=True)
class Column:
    """One column: heading, unit, and how its values are shown ("decimal": at most so many `decimals`)."""

    name: str
    unit: str = ""
    kind: Kind = "decimal"
    decimals: int = 2

    @property
    def heading(self) -> str:
        """Heading with its unit in one line."""
        return f"{self.name}, {self.unit}" if self.unit else self.name

    def texts(self, values: Sequence[Cell]) -> list[str]:
        """The values of the whole column as they are shown."""
        if self.kind == "text":
            return [NONE if value is None else plain(str(value)) for value in values]
        numbers = [None if value is None or isinstance(value, str) else float(value) for value in values]
        if self.kind == "whole":
            return [fixed(number, 0) for number in numbers]
        if self.kind == "significant":
            return [significant(number) for number in numbers]
        return aligned(numbers, self.decimals)


def words(name: str) -> Column:
    """A column of text."""
    return Column(name, kind="text")


@dataclass(frozen=True)
class Table:
    """A captioned table; the first column heads its rows, `total` sets the last row off."""

    caption: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]
    total: bool = False

    def texts(self) -> list[list[str]]:
        """The rows as they are shown; a blank cell stays blank."""
        columns = [column.texts([row[index] for row in self.rows]) for index, column in enumerate(self.columns)]
        return [
            ["" if self.rows[r][c] == "" else columns[c][r] for c in range(len(self.columns))]
            for r in range(len(self.rows))
        ]


@dataclass(frozen=True)
class Picture:
    """A figure, what to see in it (`caption`), and what it shows to those who cannot see it (`alt`)."""

    name: str
    draw: Callable[[], Figure]
    caption: str
    alt: str


@dataclass(frozen=True)
class Section:
    """A headed part of a report: `key` is its anchor and its sheet's name."""

    key: str
    title: str
    paragraphs: tuple[str, ...] = ()
    pictures: tuple[Picture, ...] = ()
    tables: tuple[Table, ...] = ()
    items: tuple[str, ...] = ()


def pressure_column(name: str, units: str) -> Column:
    """A column of pressures already in `units`."""
    return Column(name, units, decimals=PRESSURE_DECIMALS[units])


def used_stages(blocks: tuple[BlockDesign, ...]) -> list[tuple[BlockDesign, StageDesign]]:
    """Every used stage with its block, in flow order."""
    return [(block, stage) for block in blocks for stage in block.stages]
