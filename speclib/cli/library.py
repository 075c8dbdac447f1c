"""Commands that make and keep a library: init, history, verify."""

from __future__ import annotations

import shlex
from pathlib import Path

import click

from speclib.cli.options import by_option, json_option, open_library
from speclib.cli.output import print_json, print_lines, print_table, talk


@click.command()
@click.argument("path", type=click.Path(path_type=Path))
@by_option
@json_option
def init(path: Path, analyst: str | None, as_json: bool) -> None:
    """Make a new, empty library at PATH (any name; .sqlite is usual)."""
    from speclib.store.library import Library

    with Library.create(path, analyst=analyst) as library:
        state = library.state()
    if as_json:
        print_json({"schema": 1, "library": str(path), "library_state": state})
        return
    print_lines([f"{path} is ready; library state {state[:12]}."])
    talk(f"Next: speclib -L {shlex.quote(str(path))} intake --manifest MANIFEST.csv --by NAME")


@click.command()
@click.option("--limit", type=click.IntRange(min=1), default=30, show_default=True, help="How many events at most.")
@click.option("--spectrum", type=click.IntRange(min=1), help="Only what touched this spectrum.")
@click.option("--compound", metavar="NAME|ID|INCHIKEY", help="Only what touched this compound.")
@click.option("--case", type=click.IntRange(min=1), help="Only what touched this case.")
@json_option
@click.pass_context
def history(
    ctx: click.Context,
    limit: int,
    spectrum: int | None,
    compound: str | None,
    case: int | None,
    as_json: bool,
) -> None:
    """Show the audit trail, newest first."""
    from speclib.workflows.trail import library_history

    with open_library(ctx) as library:
        found = library_history(library, limit=limit, spectrum=spectrum, compound=compound, case=case)
    if as_json:
        print_json(found.to_json())
        return
    if found.subject:
        print_lines([f"History of {found.subject}"])
    print_table(
        ("seq", "at", "analyst", "action", "what", "hash"),
        (
            (
                e.event.seq,
                e.event.at[:19],
                e.event.analyst or "-",
                e.event.action,
                _what(e.event.detail, e.event.reason),
                e.event.hash[:10],
            )
            for e in found.entries
        ),
        right=("seq",),
    )
    print_lines([f"Library state {found.library_state}"])


def _what(detail: dict[str, object], reason: str | None) -> str:
    """An event's detail in one cell: counts instead of long lists."""
    parts = []
    for name, value in detail.items():
        if name == "sha256" or value in ([], None):
            continue
        shown = f"{len(value)}: {value[0]}..{value[-1]}" if isinstance(value, list) and len(value) > 4 else value
        parts.append(f"{name} {', '.join(map(str, shown)) if isinstance(shown, list) else shown}")
    return "; ".join(parts + ([f"reason: {reason}"] if reason else []))


@click.command()
@json_option
@click.pass_context
def verify(ctx: click.Context, as_json: bool) -> int:
    """Recompute hashes, the event chain and the replay of all events; exit 1 on any difference."""
    from speclib.cli.progress import progress
    from speclib.workflows.trail import verify as run_verify

    with open_library(ctx) as library:
        outcome = run_verify(library, progress=progress())
    if as_json:
        print_json(outcome.to_json())
    elif outcome.intact:
        print_lines(
            [
                f"Intact: {outcome.spectra} spectra, {outcome.rows} rows, {outcome.events} events.",
                f"Chain head {outcome.chain_head}",
            ]
        )
        talk("Keep the chain head outside this file: a chain proves little without an anchor elsewhere.")
    else:
        print_lines(["NOT intact:", *(f"- {difference}" for difference in outcome.differences)])
        talk("Keep this file as it is, go back to a backup, and find out who changed it outside speclib.")
    return 0 if outcome.intact else 1
