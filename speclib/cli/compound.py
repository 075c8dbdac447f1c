"""Commands on compounds: add, list, show."""

from __future__ import annotations

import shlex
from pathlib import Path

import click

from speclib.cli.options import by_option, json_option, open_library
from speclib.cli.output import number, print_assignments, print_json, print_lines, print_table, talk


@click.group()
def compound() -> None:
    """Compounds of the library: add, list, show."""


@compound.command()
@click.argument("name", required=False)
@click.option(
    "--from", "table", type=click.Path(path_type=Path), help="Add many: an SD file, or a CSV with the column smiles."
)
@click.option("--smiles", help="Structure; the identity of the compound.")
@click.option("--formula", help="Formula, when there is no structure.")
@click.option("--cas", help="CAS Registry Number.")
@click.option("--synonym", "synonyms", multiple=True, help="Another name; repeatable.")
@click.option("--class", "classes", multiple=True, help="Compound class; repeatable.")
@click.option("--derivative-of", metavar="NAME|ID|INCHIKEY", help="Parent compound of a derivative.")
@click.option("--derivative", help="What kind of derivative, e.g. TMS.")
@by_option
@json_option
@click.pass_context
def add(
    ctx: click.Context,
    name: str | None,
    table: Path | None,
    smiles: str | None,
    formula: str | None,
    cas: str | None,
    synonyms: tuple[str, ...],
    classes: tuple[str, ...],
    derivative_of: str | None,
    derivative: str | None,
    analyst: str | None,
    as_json: bool,
) -> int:
    """Add a compound called NAME, or all compounds of a file with --from.

    Columns of the CSV: compound, smiles, formula, cas, synonyms, classes, derivative_of, derivative; only smiles is
    required.
    """
    from speclib.workflows.compounds import NewCompound, add_compound

    if (name is None) == (table is None):
        raise click.UsageError("Give either NAME or --from FILE.", ctx)
    if table is not None:
        return _add_from(ctx, table, analyst, as_json)

    new = NewCompound(name or "", smiles, formula, cas, synonyms, classes, derivative_of, derivative)
    with open_library(ctx) as library:
        made = add_compound(library, new, analyst=analyst)
        state = library.state()
    if as_json:
        print_json({"schema": 1, "library_state": state, "compound": made.to_json()})
        return 0
    mass = f", nominal mass {made.structure.nominal_mass}" if made.structure else ""
    print_lines([f"Compound {made.id}: {made.name}, {made.formula}{mass}"])
    quoted = shlex.quote(made.name)
    talk(f"Next: take in its spectra with a manifest, or: speclib intake FILE --compound {quoted} --by NAME")
    return 0


def _add_from(ctx: click.Context, table: Path, analyst: str | None, as_json: bool) -> int:
    from speclib.cli.progress import progress
    from speclib.workflows.structures import add_compounds_from

    with open_library(ctx) as library:
        result = add_compounds_from(library, table, analyst=analyst, progress=progress())
    if as_json:
        print_json(result.to_json())
        return 1 if result.skipped else 0
    print_table(
        ("id", "compound", "formula", "M"),
        ((c.id, c.name, c.formula, c.structure.nominal_mass if c.structure else "-") for c in result.compounds),
        right=("id", "M"),
    )
    print_lines([f"{len(result.compounds)} compounds added, {len(result.skipped)} skipped."])
    for skipped in result.skipped:
        talk(f"skipped {skipped.reason}")
    return 1 if result.skipped else 0


@compound.command(name="list")
@click.option("--class", "class_name", help="Only compounds of this class.")
@json_option
@click.pass_context
def list_(ctx: click.Context, class_name: str | None, as_json: bool) -> None:
    """List the compounds with what the library knows of them."""
    from speclib.workflows.compounds import summarize_compounds

    with open_library(ctx) as library:
        found = summarize_compounds(library, class_name=class_name)
        state = library.state()
    if as_json:
        print_json({"schema": 1, "library_state": state, "compounds": [s.to_json() for s in found]})
        return
    print_table(
        ("id", "compound", "formula", "M", "classes", "spectra", "confirmed", "assigned"),
        (
            (
                s.compound.id,
                s.compound.name,
                s.compound.formula,
                s.compound.structure.nominal_mass if s.compound.structure else "-",
                ", ".join(s.compound.classes),
                s.references,
                s.confirmed,
                s.assignments,
            )
            for s in found
        ),
        right=("id", "M", "spectra", "confirmed", "assigned"),
    )


@compound.command()
@click.argument("compound_name", metavar="NAME|ID|INCHIKEY")
@json_option
@click.pass_context
def show(ctx: click.Context, compound_name: str, as_json: bool) -> None:
    """Show one compound, its spectra and its accepted assignments."""
    from speclib.workflows.compounds import show_compound

    with open_library(ctx) as library:
        details = show_compound(library, compound_name)
    if as_json:
        print_json(details.to_json())
        return
    c = details.compound
    print_lines([f"Compound {c.id}: {c.name}"])
    facts = [
        ("formula", c.formula),
        ("CAS", c.cas),
        ("also", ", ".join(c.synonyms)),
        ("classes", ", ".join(c.classes)),
    ]
    if c.structure:
        facts += [
            ("SMILES", c.structure.smiles),
            ("InChIKey", c.structure.inchikey),
            ("mass", f"{c.structure.nominal_mass} nominal, {c.structure.exact_mass:.5f} exact"),
        ]
    print_lines(f"  {name}: {value}" for name, value in facts if value)
    print_table(
        ("spectrum", "status", "file", "peaks", "base peak", "scanned", "RI"),
        (
            (
                e.id,
                e.status.value if e.status else e.role.value,
                f"{e.source_file or '-'}" + (f" #{e.source_index}" if e.source_index > 1 else ""),
                len(e.spectrum),
                f"{e.spectrum.base_peak[0]:g}",
                _range(e.spectrum.measurement.mz_from, e.spectrum.measurement.mz_to),
                number(e.spectrum.measurement.retention_index, 0),
            )
            for e in details.spectra
        ),
        right=("spectrum", "peaks", "base peak", "RI"),
    )
    if details.assignments:
        print_assignments(details.assignments)


def _range(low: float | None, high: float | None) -> str:
    """Scanned range for a table; a question mark for a limit that is not known."""
    return f"{'?' if low is None else f'{low:g}'}-{'?' if high is None else f'{high:g}'}"
