"""The command carry."""

from __future__ import annotations

from typing import Any

import click

from speclib.cli.options import (
    by_option,
    json_option,
    open_library,
    query_options,
    read_options,
    reading_options,
    selection_option,
)
from speclib.cli.output import CAUTION, number, print_json, print_lines, print_table, show_disagreements, talk

SHOWN_DONORS = 5
LOW_MASS = 100
"""Below this m/z an unnamed composition is worth a line; above, formulas offer too many."""


@click.command()
@click.argument("target", metavar="FILE|SPECTRUM")
@query_options
@click.option("--no-save", is_flag=True, help="Show the proposals only; keep no case and need no signature.")
@click.option(
    "--min-similarity",
    type=click.FloatRange(0.0, 1.0),
    default=0.3,
    show_default=True,
    help="How alike a donor must be.",
)
@click.option(
    "--min-peaks", type=click.IntRange(min=1), default=3, show_default=True, help="How many peaks must match."
)
@click.option(
    "--donors",
    "most_donors",
    type=click.IntRange(min=1),
    default=20,
    show_default=True,
    help="How many donors.",
)
@reading_options
@by_option
@json_option
@click.pass_context
def carry(ctx: click.Context, /, target: str, as_json: bool, **values: Any) -> None:
    """Propose fragment assignments for an unknown, carried from its confirmed relatives.

    The unknown is the spectrum in FILE, or a stored SPECTRUM by its number. It is kept as a case with its proposals,
    unless --no-save is given.
    """
    from speclib.cli.progress import progress
    from speclib.workflows.carry import CarryRequest, carry_to_unknown

    request = CarryRequest(
        target,
        values["index"],
        values["mass"],
        values["formula"],
        values["exclude_compounds"],
        values["min_similarity"],
        values["min_peaks"],
        values["most_donors"],
        read_options(values),
        selection_option(values),
    )
    with open_library(ctx) as library:
        result = carry_to_unknown(
            library, request, save=not values["no_save"], analyst=values["analyst"], progress=progress()
        )
    if as_json:
        print_json(result.to_json())
        return
    _show(result)


def _show(result: Any) -> None:
    u = result.unknown
    print_lines(
        [
            f"{u.label}: {u.peak_count} peaks, base peak m/z {u.base_peak_mz:g}; molecular mass "
            f"{result.molecular_mass.value or '-'} ({result.molecular_mass.origin}), formula "
            f"{result.molecular_formula.value or '-'} ({result.molecular_formula.origin})",
        ]
    )
    if result.donors:
        print_lines(["", "Donors"])
        print_table(
            ("rank", "compound", "formula", "simil.", "peaks", "dM"),
            (
                (
                    d.rank,
                    d.compound.name + ("" if d.status.value == "confirmed" else f" ({d.status.value})"),
                    d.compound.formula,
                    number(d.similarity),
                    d.matched_peaks,
                    "-" if d.mass_difference is None else f"{d.mass_difference:+g}",
                )
                for d in result.donors[:SHOWN_DONORS]
            ),
            right=("rank", "simil.", "peaks", "dM"),
        )
        show_disagreements(result.donors[:SHOWN_DONORS], 3)
        if len(result.donors) > SHOWN_DONORS:
            print_lines(
                [f"... and {len(result.donors) - SHOWN_DONORS} donors less alike (all of them with --json).", ""]
            )
    show_proposals(result.proposals, result.refused)
    for remark in result.remarks:
        talk(f"Note: {remark}.")
    if result.case_id is not None:
        following = f" Next: speclib review {result.case_id} --accept ID --by NAME" if result.proposals else ""
        talk(f"Kept as case {result.case_id}.{following}")
    talk(CAUTION)


def show_proposals(proposals: Any, refused: Any) -> None:
    """Tables of proposals and of refused ones; what speaks against a proposal stands below its table."""
    print_lines([f"Proposals ({len(proposals)})"])
    if proposals:
        print_table(
            ("id", "m/z", "ion", "loss", "mechanism", "route", "conf.", "state", "donors"),
            (
                (
                    p.id or "-",
                    f"{p.mz:g}",
                    f"{p.formula}+" + ("." if p.parity.value == "OE" else ""),
                    "?" if p.neutral_loss is None else (p.neutral_loss or "none"),
                    p.mechanism,
                    p.route.value,
                    number(p.confidence, 2),
                    p.state,
                    _donors(p),
                )
                for p in proposals
            ),
            right=("id", "m/z", "conf."),
        )
        print_lines(
            f"{p.id or ''} m/z {p.mz:g} {p.formula}+ but: {check.detail}".strip()
            for p in proposals
            for check in p.checks
            if check.passed is False
        )
        unnamed = [f"m/z {p.mz:g} {words}" for p in proposals if (words := _unvoted(p, proposals))]
        if unnamed:
            print_lines(
                [f"Low m/z that the formula could give otherwise, though no donor says so: {'; '.join(unnamed)}."]
            )
        basis = sorted({p.confidence_basis for p in proposals})
        print_lines([f"Confidence: {', '.join(basis)} (a prior is a documented guess, not a measured probability)."])
    if refused:
        print_lines(["", f"Refused ({len(refused)})"])
        print_table(
            ("id", "m/z", "ion", "route", "refused by", "because"),
            (
                (
                    p.id or "-",
                    f"{p.mz:g}",
                    f"{p.formula}+",
                    p.route.value,
                    p.refused_by,
                    next((c.detail for c in p.checks if c.name == p.refused_by), ""),
                )
                for p in refused
            ),
            right=("id", "m/z"),
        )


def _unvoted(proposal: Any, proposals: Any) -> str:
    """Compositions that the formula allows at the proposal's peak and that nobody proposes, for the first one only."""
    there = [p.formula for p in proposals if p.peak == proposal.peak]
    detail = next((c.detail for c in proposal.checks if c.name == "formula"), "")
    _, _, others = detail.partition("so is ")
    free = [name for name in others.split(", ") if name and name not in there]
    if proposal.formula != there[0] or proposal.mz >= LOW_MASS:
        return ""
    return ", ".join(free)


def _donors(proposal: Any) -> str:
    names: list[str] = list(dict.fromkeys(vote.compound_name for vote in proposal.donors))
    return names[0] + (f" +{len(names) - 1}" if len(names) > 1 else "")
