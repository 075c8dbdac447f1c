"""Commands on cases: list, show, review."""

from __future__ import annotations

import click

from speclib.cli.options import by_option, json_option, open_library
from speclib.cli.output import CAUTION, number, print_json, print_lines, print_table, talk


@click.group()
def case() -> None:
    """Cases: unknowns with their neighbours, proposals and decisions."""


@case.command(name="list")
@json_option
@click.pass_context
def list_(ctx: click.Context, as_json: bool) -> None:
    """List the cases and how far they are."""
    from speclib.workflows.cases import all_cases

    with open_library(ctx) as library:
        found = all_cases(library)
        state = library.state()
    if as_json:
        print_json({"schema": 1, "library_state": state, "cases": found})
        return
    columns = ("case", "status", "spectrum", "file", "undecided", "accepted", "rejected")
    keys = ("case_id", "status", "spectrum_id", "file", "undecided", "accepted", "rejected")
    print_table(columns, ([c[k] for k in keys] for c in found), right=("case", "spectrum", *columns[4:]))


@case.command()
@click.argument("case_id", type=click.IntRange(min=1), metavar="CASE")
@json_option
@click.pass_context
def show(ctx: click.Context, case_id: int, as_json: bool) -> None:
    """Show one case: neighbours, proposals with their state, refused ones; --json holds every check and donor."""
    from speclib.cli.carry import show_proposals
    from speclib.workflows.carry import load_case

    with open_library(ctx) as library:
        found = load_case(library, case_id)
    if as_json:
        print_json(found.to_json())
        return
    mass, formula = found.settings["molecular_mass"], found.settings["molecular_formula"]
    print_lines(
        [
            f"Case {found.id} ({found.status}, revision {found.rev}): {found.spectrum.label}",
            f"molecular mass {mass['value'] or '-'} ({mass['origin']}), "
            f"formula {formula['value'] or '-'} ({formula['origin']}); "
            f"made at library state {found.library_state[:12]}",
        ]
    )
    print_lines(f"FLAGGED since {flag['at'][:10]}: {flag['reason']}" for flag in found.flags)
    if found.neighbours:
        print_table(
            ("rank", "spectrum", "compound", "simil.", "dM"),
            (
                (n.rank, n.spectrum_id, n.compound_name, number(n.similarity), n.detail["mass_difference"])
                for n in found.neighbours
            ),
            right=("rank", "spectrum", "simil.", "dM"),
        )
    show_proposals(found.proposals, found.refused)
    for remark in found.settings["remarks"]:
        talk(f"Note: {remark}.")
    talk(CAUTION)


@click.command()
@click.argument("case_id", type=click.IntRange(min=1), metavar="CASE")
@click.option(
    "--accept", multiple=True, type=click.IntRange(min=1), metavar="ID", help="Accept a proposal; repeatable."
)
@click.option(
    "--reject", multiple=True, type=click.IntRange(min=1), metavar="ID", help="Reject a proposal; repeatable."
)
@click.option(
    "--accept-from",
    type=click.FloatRange(0.0, 1.0),
    metavar="CONFIDENCE",
    help="Accept the best undecided proposal of each peak from this confidence upward; recorded as 'by rule'.",
)
@click.option("--revise", is_flag=True, help="Decide anew what is decided already; needs --reason.")
@click.option("--settle-flags", is_flag=True, help="Close the case's flags: you have looked at what they say.")
@click.option(
    "--seen-rev", type=click.IntRange(min=1), help="Revision of the case you looked at; refuse if it moved on since."
)
@click.option("--reason", help="Why; required for rejections and revised decisions.")
@by_option
@json_option
@click.pass_context
def review(
    ctx: click.Context,
    case_id: int,
    accept: tuple[int, ...],
    reject: tuple[int, ...],
    accept_from: float | None,
    revise: bool,
    seen_rev: int | None,
    settle_flags: bool,
    reason: str | None,
    analyst: str | None,
    as_json: bool,
) -> None:
    """Accept or reject proposals of a case."""
    from speclib.workflows.cases import Decisions, review_case

    decisions = Decisions(accept, reject, accept_from, revise, seen_rev, settle_flags)
    with open_library(ctx) as library:
        result = review_case(library, case_id, decisions, analyst=analyst, reason=reason)
    if as_json:
        print_json(result.to_json())
        return
    undecided = sum(p.state == "proposed" for p in result.case.proposals)
    print_lines(
        [
            f"Case {case_id}: {len(result.accepted)} accepted, {len(result.rejected)} rejected, {undecided} undecided. "
            f"Library state {result.library_state[:12]}."
        ]
    )
