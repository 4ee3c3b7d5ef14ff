"""Plain tables and paragraphs that fit a terminal, made of text alone.

`rich` lays the tables out; markup, emoji codes and highlighting are off, so that user's text is only text.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from io import StringIO

from rich import box
from rich.cells import cell_len
from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from trainopt.report.numbers import plain

WIDTH = 100
NARROWEST = 8
"""Letters that a column of words keeps at least, where it has that many."""


@dataclass
class Page:
    """Headed tables and paragraphs in order; `render` turns them into text."""

    parts: list[RenderableType] = field(default_factory=list)
    needed: int = 0

    def line(self, text: str, style: str = "") -> None:
        """A paragraph."""
        self.parts.append(Text(plain(text), style=style))

    def gap(self) -> None:
        """An empty line."""
        self.parts.append(Text(""))

    def heading(self, text: str) -> None:
        """A heading with an empty line before it."""
        self.gap()
        self.line(text, "bold")

    def items(self, texts: Iterable[str], style: str = "") -> None:
        """Paragraphs with a dash, their further lines set in."""
        for text in texts:
            row = Table.grid(padding=(0, 1))
            row.add_column(width=1)
            row.add_column(overflow="fold")
            row.add_row(Text("-", style=style), Text(plain(text), style=style))
            self.parts.append(Padding(row, (0, 0, 0, 2)))

    def table(self, columns: Sequence[str], rows: Sequence[Sequence[str]], left: int = 1, total: bool = False) -> None:
        """A table; the first `left` columns hold words and may wrap, the others numbers, set to the right.

        A heading `Area\\nm²` has its unit in a line of its own. `total` sets the last row off.
        """
        table = Table(box=box.SIMPLE_HEAD, padding=(0, 1, 0, 0), pad_edge=False, show_edge=False)
        needed = 2
        for index, name in enumerate(columns):
            words = index < left
            heading = [plain(line) for line in name.split("\n")]
            longest = max(cell_len(plain(text)) for text in (*heading, *(row[index] for row in rows)))
            least = min(NARROWEST, longest) if words else longest
            needed += least + 2
            table.add_column(
                Text("\n".join(heading)),
                justify="left" if words else "right",
                overflow="fold",
                no_wrap=not words,
                vertical="top",
                min_width=least,
            )
        self.needed = max(self.needed, needed)
        for number, row in enumerate(rows):
            if total and number == len(rows) - 1:
                table.add_section()
            table.add_row(*(Text(plain(cell)) for cell in row))
        self.parts.append(Padding(table, (0, 0, 0, 2)))

    def render(self, width: int = WIDTH, color: bool = False) -> str:
        """The page as text, at most `width` columns wide; escape codes only where `color` is set.

        Wider only where the numbers of a table need it: a number is never cut.
        """
        out = StringIO()
        console = Console(
            file=out,
            width=max(min(width, WIDTH), self.needed),
            force_terminal=color,
            color_system="standard" if color else None,
            markup=False,
            emoji=False,
            highlight=False,
            legacy_windows=False,
        )
        console.print(Group(*self.parts))
        return "\n".join(line.rstrip() for line in out.getvalue().splitlines()) + "\n"
