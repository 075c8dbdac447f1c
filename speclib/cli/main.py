"""Entry point of the command `speclib`.

Exit status: 0 done; 1 refused or failed, or part of a batch skipped; 2 wrong usage. No traceback reaches a user, unless
SPECLIB_DEBUG is set.
"""

from __future__ import annotations

import importlib
import os
import sys
from pathlib import Path
from typing import Any

import click

from speclib import __version__
from speclib.errors import SpeclibError

COMMANDS: dict[str, str] = {
    "init": "speclib.cli.library:init",
    "compound": "speclib.cli.compound:compound",
    "intake": "speclib.cli.intake:intake",
    "confirm": "speclib.cli.confirm:confirm",
    "withdraw": "speclib.cli.withdraw:withdraw",
    "assign": "speclib.cli.assign:assign",
    "search": "speclib.cli.search:search",
    "carry": "speclib.cli.carry:carry",
    "run": "speclib.cli.run:run",
    "case": "speclib.cli.case:case",
    "review": "speclib.cli.case:review",
    "history": "speclib.cli.library:history",
    "verify": "speclib.cli.library:verify",
}
"""Where each command lives; modules load when they are needed."""


class LazyGroup(click.Group):
    """A group whose commands are imported on demand, listed in the order of the work."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002 (click's)
        """All commands."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002 (click's)
        """Import and return a command."""
        place = COMMANDS.get(cmd_name)
        if place is None:
            return None
        module, _, attribute = place.partition(":")
        command: click.Command = getattr(importlib.import_module(module), attribute)
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """As click does, with the nearest names when a command does not exist."""
        import difflib

        if args and not args[0].startswith("-") and args[0] not in COMMANDS:
            near = difflib.get_close_matches(args[0], COMMANDS, n=2)
            hint = f" Did you mean {' or '.join(near)}?" if near else ""
            ctx.fail(f"No such command {args[0]!r}.{hint}")
        return super().resolve_command(ctx, args)


@click.group(
    cls=LazyGroup,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog="A neighbour or a carried assignment is tentative until an authentic standard is run under the same "
    "conditions.",
)
@click.option(
    "-L",
    "--library",
    type=click.Path(path_type=Path),
    envvar="SPECLIB_LIBRARY",
    help="The library file; also from SPECLIB_LIBRARY.",
)
@click.version_option(__version__, prog_name="speclib")
@click.pass_context
def cli(ctx: click.Context, library: Path | None) -> None:
    """Keep confirmed EI GC-MS spectra, search unknowns, carry fragment assignments over."""
    ctx.obj = library


def main(args: list[str] | None = None) -> None:
    """Run the command line and exit."""
    sys.exit(run(args))


def run(args: list[str] | None = None) -> int:
    """Run the command line and return the exit status."""
    for stream in (sys.stdout, sys.stderr):
        # A console in an old code page must not turn a degree sign into a crash.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace", **({} if stream.isatty() else {"encoding": "utf-8"}))
    try:
        outcome: Any = cli.main(args=args, prog_name="speclib", standalone_mode=False)
    except SpeclibError as error:
        return _fail(str(error))
    except click.exceptions.Exit as stop:
        return stop.exit_code
    except click.ClickException as error:
        error.show(file=sys.stderr)
        return error.exit_code
    except (click.Abort, KeyboardInterrupt):
        return _fail("stopped; what was finished is kept, nothing is half-written")
    except BrokenPipeError:
        # The reader of a pipe has gone (`| head`): nobody is left to tell.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1
    except Exception as error:
        if os.environ.get("SPECLIB_DEBUG"):
            raise
        return _fail(
            f"unexpected {type(error).__name__}: {error}; this is a fault of speclib, nothing is half-written; "
            "set SPECLIB_DEBUG=1 for the details"
        )
    return outcome if isinstance(outcome, int) else 0


def _fail(message: str) -> int:
    from speclib.cli.output import plain

    click.echo(f"speclib: {plain(message)}", err=True)
    return 1
