"""The command search."""

from __future__ import annotations

from typing import Any

import click

from speclib.cli.options import (
    json_option,
    open_library,
    query_options,
    read_options,
    reading_options,
    selection_option,
)
from speclib.cli.output import CAUTION, number, print_json, print_lines, print_table, show_disagreements, talk


@click.command()
@click.argument("target", metavar="FILE|SPECTRUM")
@query_options
@click.option(
    "--measure",
    type=click.Choice(["cosine", "loss", "shifted"]),
    default="cosine",
    show_default=True,
    help="cosine: same m/z; loss: same neutral losses; shifted: same m/z or moved by the mass difference.",
)
@click.option(
    "--reverse",
    is_flag=True,
    help="Rank by reverse similarity: peaks that only the unknown has do not count.",
)
@click.option(
    "--weights",
    default="square-root",
    show_default=True,
    help="Peak weighting by name (a wrong name lists them).",
)
@click.option("--top", type=click.IntRange(min=1), default=10, show_default=True, help="How many neighbours.")
@click.option(
    "--min-peaks", type=click.IntRange(min=1), default=3, show_default=True, help="How many peaks must match."
)
@click.option("--confirmed-only", is_flag=True, help="Leave provisional references out.")
@click.option("--all-replicates", is_flag=True, help="List every replicate, not the best of each compound.")
@click.option("--tolerance-da", type=float, help="m/z tolerance for accurate mass in Da.")
@click.option("--tolerance-ppm", type=float, help="m/z tolerance for accurate mass in ppm.")
@reading_options
@json_option
@click.pass_context
def search(ctx: click.Context, /, target: str, as_json: bool, **values: Any) -> None:
    """Find the references nearest to an unknown: the spectrum in FILE, or a stored SPECTRUM by its number."""
    from speclib.cli.progress import progress
    from speclib.search.exact import SearchSettings
    from speclib.similarity.scores import Measure
    from speclib.similarity.weights import get_weighting
    from speclib.units import ACCURATE_MASS_TOLERANCE, Tolerance
    from speclib.workflows.search import SearchRequest, search_library

    da, ppm = values["tolerance_da"], values["tolerance_ppm"]
    if da is not None and ppm is not None:
        raise click.UsageError("Give --tolerance-da or --tolerance-ppm, not both.", ctx)
    tolerance = ACCURATE_MASS_TOLERANCE if da is None else Tolerance(da, "da")
    settings = SearchSettings(
        measure=Measure(values["measure"]),
        weighting=get_weighting(values["weights"]),
        reverse=values["reverse"],
        top=values["top"],
        min_matched=values["min_peaks"],
        tolerance=tolerance if ppm is None else Tolerance(ppm, "ppm"),
        fold_replicates=not values["all_replicates"],
    )
    request = SearchRequest(
        target,
        values["index"],
        values["mass"],
        values["formula"],
        values["exclude_compounds"],
        values["confirmed_only"],
        settings,
        read_options(values),
        selection_option(values),
    )
    with open_library(ctx) as library:
        result = search_library(library, request, progress=progress())
    if as_json:
        print_json(result.to_json())
        return
    _show(result)


def _show(result: Any) -> None:
    query = result.query
    print_lines(
        [
            f"{query.label}: {query.peak_count} peaks, base peak m/z {query.base_peak_mz:g}; molecular mass "
            f"{result.molecular_mass.value or '-'} ({result.molecular_mass.origin})",
            f"{result.measure} ({result.weighting}), {result.searched} references, "
            f"library state {result.library_state[:12]}",
        ]
    )
    print_table(
        ("rank", "compound", "formula", "simil.", "reverse", "peaks", "dM", "dRI"),
        (
            (
                n.rank,
                n.compound.name + ("" if n.status.value == "confirmed" else f" ({n.status.value})"),
                n.compound.formula,
                number(n.similarity),
                number(n.reverse_similarity),
                n.matched_peaks,
                "-" if n.mass_difference is None else f"{n.mass_difference:+g}",
                "-" if n.ri_difference is None else f"{n.ri_difference:+.0f}",
            )
            for n in result.neighbours
        ),
        right=("rank", "simil.", "reverse", "peaks", "dM", "dRI"),
    )
    if result.neighbours:
        show_disagreements(result.neighbours, 4)
    for remark in result.remarks:
        talk(f"Note: {remark}.")
    talk(CAUTION)
