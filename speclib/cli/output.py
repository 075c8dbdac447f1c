"""Output: JSON for pipes, tables within 100 columns for people; data on stdout, talk on stderr."""

from __future__ import annotations

import json
import shutil
import sys
from collections.abc import Iterable, Sequence
from typing import Any

import click

WIDTH = 100
CAUTION = (
    "Tentative until an authentic standard is run under the same conditions (level 2 or 3 at most, Sumner 2007). "
    "Where a result can affect health, safety or law, the laboratory's accredited procedure, safety data sheets and "
    "local regulations come first."
)


def plain(text: object) -> str:
    """Text that is safe on a terminal: characters that do not print are shown as escapes."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in str(text))


def print_json(document: dict[str, Any]) -> None:
    """Print one JSON document on stdout."""
    click.echo(json.dumps(document, ensure_ascii=False, indent=2, allow_nan=False))


def width() -> int:
    """Columns to fill: those of a terminal, at most 100; 100 in a pipe."""
    return min(WIDTH, shutil.get_terminal_size((WIDTH, 24)).columns) if sys.stdout.isatty() else WIDTH


def talk(text: str) -> None:
    """Say something on stderr: wrapped on a terminal, one line per message in a pipe or log."""
    said = plain(text)
    if sys.stderr.isatty():
        import textwrap

        columns = min(WIDTH, shutil.get_terminal_size((WIDTH, 24)).columns)
        said = textwrap.fill(said, columns, break_long_words=False, break_on_hyphens=False)
    click.echo(said, err=True)


def print_lines(lines: Iterable[str]) -> None:
    """Print lines of a result on stdout, wrapped to the width."""
    import textwrap

    for line in lines:
        hanging = " " * (len(line) - len(line.lstrip()) + 2)
        for part in textwrap.wrap(plain(line), width(), subsequent_indent=hanging) or [""]:
            click.echo(part)


def print_table(columns: Sequence[str], rows: Iterable[Sequence[object]], *, right: Sequence[str] = ()) -> None:
    """Print a table; columns named in `right` are aligned to the right. Nothing is cut off: long cells wrap."""
    from rich import box
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, width=None)
    for name in columns:
        table.add_column(Text(name), justify="right" if name in right else "left", overflow="fold")
    for row in rows:
        table.add_row(*(Text("" if cell is None else plain(cell)) for cell in row))
    console = Console(file=sys.stdout, width=width(), highlight=False, no_color=not sys.stdout.isatty())
    console.print(table)


def show_disagreements(neighbours: Iterable[Any], most: int) -> None:
    """What speaks against each neighbour, a line each, at most `most` points."""
    print_lines(["What disagrees"])
    for n in neighbours:
        words = "; ".join(n.disagreements[:most]) or "nothing above 5 % of the base peak"
        more = f"; and {len(n.disagreements) - most} more" if len(n.disagreements) > most else ""
        print_lines([f"  {n.rank} {n.compound.name}: {words}{more}"])
    print_lines([""])


def print_assignments(assignments: Iterable[Any]) -> None:
    """Print accepted assignments, with the numbers that `withdraw --assignment` takes."""
    print_table(
        ("id", "spectrum", "m/z", "ion", "loss", "mechanism", "parity", "origin"),
        (
            (
                a.id,
                a.spectrum_id,
                f"{a.mz:g}",
                f"{a.formula}+",
                "?" if a.neutral_loss is None else (a.neutral_loss or "none"),
                a.mechanism,
                a.parity.value,
                a.origin.value,
            )
            for a in assignments
        ),
        right=("id", "spectrum", "m/z"),
    )


def number(value: float | None, digits: int = 3) -> str:
    """A number for a table; a dash when there is none."""
    return "-" if value is None else f"{value:.{digits}f}"
