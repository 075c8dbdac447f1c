"""Options that several commands share: same flag, same meaning everywhere."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

if TYPE_CHECKING:
    from speclib.formats.reading import ReadOptions
    from speclib.store.library import Library
    from speclib.workflows.sources import RunSelection

F = TypeVar("F", bound=Callable[..., Any])


def json_option(command: F) -> F:
    """`--json`: one document on stdout."""
    return click.option("--json", "as_json", is_flag=True, help="Print one JSON document on stdout.")(command)


def by_option(command: F) -> F:
    """`--by`: who signs the change."""
    return click.option(
        "--by",
        "analyst",
        envvar="SPECLIB_ANALYST",
        help="Who makes this change; also from SPECLIB_ANALYST. Never guessed.",
    )(command)


def reading_options(command: F) -> F:
    """How to read a file that does not say it itself."""
    for option in reversed(
        (
            click.option("--mass-accuracy", type=click.Choice(["unit", "accurate"]), help="How m/z are to be read."),
            click.option("--decimal", type=click.Choice(["point", "comma"]), help="Decimal mark of a text file."),
            click.option(
                "--separator",
                type=click.Choice(["tab", "semicolon", "comma", "blank"]),
                help="Column separator of a text file.",
            ),
            click.option("--encoding", help="Encoding of a text file, e.g. cp1252."),
            click.option("--at", type=float, metavar="MINUTES", help="Take the spectrum at this time of a run."),
            click.option("--width", type=float, metavar="MINUTES", help="Average the scans of this width around it."),
            click.option("--background", metavar="T1..T2", help="Take off the mean of this window (minutes)."),
            click.option("--mz-from", type=float, help="Lower end of the scanned range."),
            click.option("--mz-to", type=float, help="Upper end of the scanned range."),
        )
    ):
        command = option(command)
    return command


def query_options(command: F) -> F:
    """What is known of the unknown, and which compounds to leave out."""
    for option in reversed(
        (
            click.option("--index", type=click.IntRange(min=1), help="Which spectrum of a file, counted from 1."),
            click.option("--mass", help="Molecular mass: nominal (286), or exact with a decimal point (286.2144)."),
            click.option("--formula", help="Molecular formula, e.g. C16H30O4."),
            click.option(
                "--exclude-compound",
                "exclude_compounds",
                multiple=True,
                metavar="NAME|ID|INCHIKEY",
                help="Leave a compound out; repeatable.",
            ),
        )
    ):
        command = option(command)
    return command


def read_options(values: dict[str, Any]) -> ReadOptions:
    """Take the reading options out of a command's values."""
    from speclib.formats.reading import ReadOptions
    from speclib.model.spectrum import MassAccuracy

    accuracy = values.pop("mass_accuracy")
    return ReadOptions(
        mass_accuracy=MassAccuracy(accuracy) if accuracy else None,
        decimal=values.pop("decimal"),
        separator=values.pop("separator"),
        encoding=values.pop("encoding"),
        mz_from=values.pop("mz_from"),
        mz_to=values.pop("mz_to"),
    )


def selection_option(values: dict[str, Any]) -> RunSelection | None:
    """Take the options that choose a spectrum of a run out of a command's values."""
    from speclib.workflows.sources import run_selection

    return run_selection(values.pop("at"), values.pop("width"), values.pop("background"))


def open_library(ctx: click.Context) -> Library:
    """Open the library named by `-L` or SPECLIB_LIBRARY; the command closes it.

    Raises:
        click.UsageError: no library is named.
    """
    from speclib.store.library import Library

    path: Path | None = ctx.find_object(Path)
    if path is None:
        raise click.UsageError("No library is named. Give -L FILE before the command, or set SPECLIB_LIBRARY.", ctx)
    return Library(path)
