"""Commands on chromatographic runs: show."""

from __future__ import annotations

from pathlib import Path

import click

from speclib.cli.options import json_option
from speclib.cli.output import print_json, print_lines, print_table, talk


@click.group()
def run() -> None:
    """Chromatographic runs (ANDI-MS netCDF): show."""


@run.command()
@click.argument("path", type=click.Path(path_type=Path), metavar="FILE")
@json_option
def show(path: Path, as_json: bool) -> None:
    """List the tallest peaks of the total ion current; --json lists every scan."""
    from speclib.workflows.sources import show_run

    found = show_run(path)
    if as_json:
        print_json(found.to_json())
        return
    first, last = found.scans[0][1] / 60, found.scans[-1][1] / 60
    scanned = f"{found.mz_from or '?'}-{found.mz_to or '?'}"
    kind = "selected ions: cannot be searched" if found.is_selected_ion else f"scanned m/z {scanned}"
    print_lines([f"{found.file}: {len(found.scans)} scans, {first:.2f} to {last:.2f} min, {kind}"])
    top = max(found.scans[i][2] for i in found.peaks) if found.peaks else 1.0
    print_table(
        ("scan", "min", "total ion current", "%", ""),
        (
            (n, f"{t / 60:.3f}", f"{tic:.0f}", f"{100 * tic / top:.0f}", "#" * round(40 * tic / top))
            for n, t, tic, _ in (found.scans[i] for i in found.peaks)
        ),
        right=("scan", "min", "total ion current", "%"),
    )
    talk(f"Next: speclib search {path.name} --at MINUTES --width 0.05 --background T1..T2")
