"""The command confirm."""

from __future__ import annotations

import click

from speclib.cli.options import by_option, json_option, open_library
from speclib.cli.output import print_json, print_lines, talk


@click.command()
@click.argument("spectrum_ids", nargs=-1, required=True, type=click.IntRange(min=1), metavar="SPECTRUM...")
@click.option("--standard", required=True, help="The authentic standard: supplier, lot, purity.")
@click.option("--reason", help="Anything to keep with the sign-off.")
@by_option
@json_option
@click.pass_context
def confirm(
    ctx: click.Context,
    spectrum_ids: tuple[int, ...],
    standard: str,
    reason: str | None,
    analyst: str | None,
    as_json: bool,
) -> None:
    """Sign off references against an authentic standard, all of them or none."""
    from speclib.workflows.confirm import confirm_references

    with open_library(ctx) as library:
        result = confirm_references(library, spectrum_ids, standard=standard, analyst=analyst, reason=reason)
    if as_json:
        print_json(result.to_json())
        return
    print_lines(
        f"{entry.label} is confirmed by {result.analyst} against {result.standard}." for entry in result.confirmed
    )
    for spectrum_id, reasons in result.doubts.items():
        for reason_text in reasons:
            talk(f"Doubt still open on spectrum {spectrum_id}: {reason_text}.")
