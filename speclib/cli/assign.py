"""The command assign."""

from __future__ import annotations

from pathlib import Path

import click

from speclib.cli.options import by_option, json_option, open_library
from speclib.cli.output import print_assignments, print_json, print_lines, talk


@click.command()
@click.argument("spectrum_id", required=False, type=click.IntRange(min=1), metavar="[SPECTRUM]")
@click.option("--from", "table", type=click.Path(path_type=Path), help="CSV of assignments.")
@click.option("--mz", type=float, help="m/z of the peak.")
@click.option("--formula", help="Formula of the ion, e.g. C2H3O.")
@click.option("--loss", help="Neutral loss; it follows from the formula when the compound has one.")
@click.option("--mechanism", help="Why, e.g. alpha-cleavage.")
@click.option("--note", default="", help="Anything to keep with it.")
@by_option
@json_option
@click.pass_context
def assign(
    ctx: click.Context,
    spectrum_id: int | None,
    table: Path | None,
    mz: float | None,
    formula: str | None,
    loss: str | None,
    mechanism: str | None,
    note: str,
    analyst: str | None,
    as_json: bool,
) -> int:
    """Assign peaks by hand: one peak of SPECTRUM, or many from a CSV.

    Columns of the CSV: file or spectrum_id, index, mz, formula, neutral_loss, mechanism, note. What a person assigns
    is accepted at once, individually.
    """
    from speclib.cli.progress import progress
    from speclib.workflows.assign import NewAssignment, assign_from_csv, assign_peak

    if (spectrum_id is None) == (table is None):
        raise click.UsageError("Give either SPECTRUM with --mz, --formula and --mechanism, or --from CSV.", ctx)
    with open_library(ctx) as library:
        if table is not None:
            result = assign_from_csv(library, table, analyst=analyst, progress=progress())
        elif mz is None or not formula or not mechanism:
            raise click.UsageError("One assignment needs --mz, --formula and --mechanism.", ctx)
        else:
            new = NewAssignment(mz, formula, mechanism, loss, note, spectrum_id)
            result = assign_peak(library, new, analyst=analyst)
    if as_json:
        print_json(result.to_json())
        return 1 if result.skipped else 0
    if table is None:
        print_assignments(result.assignments)
    print_lines(
        [
            f"{len(result.assignments)} assignments recorded, {result.already_held} held already, "
            f"{len(result.skipped)} skipped. Library state {result.library_state[:12]}."
        ]
    )
    for skipped in result.skipped:
        talk(f"skipped {skipped.reason}")
    return 1 if result.skipped else 0
