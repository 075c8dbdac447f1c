"""The command intake."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from speclib.cli.options import by_option, json_option, open_library, read_options, reading_options, selection_option
from speclib.cli.output import print_json, print_lines, print_table, talk


@click.command()
@click.argument("files", nargs=-1, type=click.Path(path_type=Path))
@click.option("--manifest", type=click.Path(path_type=Path), help="CSV that says what each file holds.")
@click.option("--compound", "compound_name", metavar="NAME", help="The files are references of this compound.")
@click.option("--smiles", help="Structure of that compound, when the library does not hold it yet.")
@click.option("--replicate", is_flag=True, help="Store spectra again whose peaks are held already.")
@reading_options
@by_option
@json_option
@click.pass_context
def intake(ctx: click.Context, /, files: tuple[Path, ...], as_json: bool, **values: Any) -> int:
    """Read spectra into the library and check them.

    FILES become unknowns, or provisional references of --compound. A manifest (columns file, index, compound, smiles,
    cas, classes, derivative_of, status, standard, rt_min, ri, phase, method, mass_accuracy, mz_from, mz_to,
    instrument, note; only file is required) takes in many at once. A file that cannot be read is skipped with its
    reason; the others go in.
    """
    from speclib.cli.progress import progress
    from speclib.workflows.compounds import NewCompound
    from speclib.workflows.intake import IntakeOptions, intake_files, intake_manifest

    manifest, name, smiles = values["manifest"], values["compound_name"], values["smiles"]
    if bool(files) == (manifest is not None):
        raise click.UsageError("Give either FILES or --manifest.", ctx)
    if manifest is not None and values["at"] is not None:
        raise click.UsageError("--at goes with FILES, not with a manifest.", ctx)
    if manifest is not None and (name or smiles):
        raise click.UsageError("--compound and --smiles go with FILES; a manifest names its compounds itself.", ctx)
    options = IntakeOptions(read_options(values), values["replicate"], selection_option(values))
    with open_library(ctx) as library:
        if manifest is not None:
            result = intake_manifest(library, manifest, analyst=values["analyst"], options=options, progress=progress())
        else:
            compound = NewCompound(name or smiles, smiles) if name or smiles else None
            result = intake_files(
                library,
                files,
                analyst=values["analyst"],
                options=options,
                compound=compound,
                progress=progress(),
            )
    if as_json:
        print_json(result.to_json())
    else:
        _show(result)
    return 1 if result.skipped else 0


def _show(result: Any) -> None:
    new = [s for s in result.spectra if not s.already_held]
    print_table(
        ("spectrum", "file", "status", "compound id", "findings"),
        (
            (
                s.spectrum_id,
                s.file + (f" #{s.index}" if s.index > 1 else ""),
                "held already" if s.already_held else s.status,
                s.compound_id or "-",
                "; ".join(f"{f.severity.value}: {f.reason}" for f in s.findings) or s.remark or "-",
            )
            for s in result.spectra
        ),
        right=("spectrum", "compound id"),
    )
    held = len(result.spectra) - len(new)
    print_lines(
        [
            f"{len(new)} stored, {held} held already, {len(result.skipped)} skipped. "
            f"Library state {result.library_state[:12]}."
        ]
    )
    for skipped in result.skipped:
        talk(f"skipped {skipped.file}: {skipped.reason}")
