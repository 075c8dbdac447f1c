"""The command withdraw."""

from __future__ import annotations

from typing import Any

import click

from speclib.cli.options import by_option, json_option, open_library
from speclib.cli.output import print_json, print_lines, talk


@click.command()
@click.argument("spectrum_ids", nargs=-1, type=click.IntRange(min=1), metavar="[SPECTRUM...]")
@click.option("--assignment", type=click.IntRange(min=1), metavar="ID", help="Retract this assignment instead.")
@click.option("--reason", help="Why; required.")
@by_option
@json_option
@click.pass_context
def withdraw(
    ctx: click.Context,
    spectrum_ids: tuple[int, ...],
    assignment: int | None,
    reason: str | None,
    analyst: str | None,
    as_json: bool,
) -> None:
    """Take references back, all of them or none, or one assignment made by hand.

    Nothing is deleted. What is taken back is no donor any more, and every case that rests on it is flagged.
    """
    from speclib.workflows.withdraw import retract_assignment, withdraw_references

    if bool(spectrum_ids) == (assignment is not None):
        raise click.UsageError("Give either SPECTRUM... or --assignment ID.", ctx)
    with open_library(ctx) as library:
        if assignment is not None:
            result = retract_assignment(library, assignment, analyst=analyst, reason=reason)
        else:
            result = withdraw_references(library, spectrum_ids, analyst=analyst, reason=reason)
    if as_json:
        print_json(result.to_json())
        return
    _show(result)


def _show(result: Any) -> None:
    print_lines(f"{entry.label} is withdrawn." for entry in result.withdrawn)
    if result.retracted:
        print_lines(
            [f"Assignment {result.retracted.id} (m/z {result.retracted.mz:g} {result.retracted.formula}) is retracted."]
        )
    for case_id in result.flagged_cases:
        talk(f"Case {case_id} rests on it and is flagged: speclib case show {case_id}")
