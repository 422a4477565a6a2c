"""The `roadhem` command: verbs are imported when they are called, so that help is instant.

A verb lives in a module of this package, or comes from another distribution by the entry-point group
"roadhem.commands". Whatever goes wrong ends as one sentence on stderr and an exit status: 2 when something the user
named cannot be used, 1 when the work found faults or went on without some inputs, 0 otherwise.
"""

from __future__ import annotations

import errno
import os
import sys
import warnings
from collections.abc import Sequence
from importlib import import_module
from importlib.metadata import entry_points
from pathlib import Path
from typing import NoReturn

import click

from roadhem import __version__
from roadhem.errors import RoadhemError

FAULTS, BAD_INPUT = 1, 2

VERBS = {
    "mark": "Propose seeds where an edge is sure.",
    "trace": "Trace the edge beside every seed of a set of tiles.",
    "measure": "Compare lines with the truth.",
    "shelf": "List the models and show what each one is.",
}
"""Verbs of this package with their line in the overview; verb V is the command V in roadhem.cli.V."""

WAYS_OUT = {
    **dict.fromkeys((errno.ENOSPC, errno.EDQUOT, errno.EFBIG), "free space or name another place"),
    **dict.fromkeys((errno.EACCES, errno.EPERM, errno.EROFS), "change the permissions or name another place"),
}
"""What to do about a complaint of the operating system."""

ENTRY_POINTS = "roadhem.commands"


class Stopped(RoadhemError):
    """Raised when the user ended a verb before it was done."""


class Verbs(click.Group):
    """A group that imports a verb only when it is asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Return all verbs, own ones and those of other distributions."""
        return sorted({*VERBS, *(point.name for point in entry_points(group=ENTRY_POINTS))})

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import a verb; None when there is none of that name."""
        if cmd_name in VERBS:
            command: click.Command = getattr(import_module(f"roadhem.cli.{cmd_name}"), cmd_name)
            return command
        for point in entry_points(group=ENTRY_POINTS, name=cmd_name):
            loaded: click.Command = point.load()
            return loaded
        return None

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Find the verb, or name the nearest one."""
        if args and self.get_command(ctx, args[0]) is None and not args[0].startswith("-"):
            import difflib

            verbs = self.list_commands(ctx)
            near = difflib.get_close_matches(args[0].lower(), verbs, 1, 0.0)
            raise click.UsageError(f"There is no verb {args[0]}, the nearest is {near[0]}", ctx)
        return super().resolve_command(ctx, args)

    def invoke(self, ctx: click.Context) -> object:
        """Run the verb; an interruption is told as any other error, without click's empty line."""
        try:
            return super().invoke(ctx)
        except KeyboardInterrupt:
            raise Stopped("Stopped before it was done; what was there before is unchanged") from None

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the overview without importing this package's verbs."""
        rows = []
        for name in self.list_commands(ctx):
            command = None if name in VERBS else self.get_command(ctx, name)
            rows.append((name, VERBS[name] if command is None else command.get_short_help_str(100)))
        with formatter.section("Verbs"):
            formatter.write_dl(rows)


@click.group(cls=Verbs, invoke_without_command=True, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, "--version", message="roadhem %(version)s")
@click.pass_context
def roadhem(ctx: click.Context) -> None:
    """Curb and pavement-edge lines from overhead tiles.

    The lines are no survey; each carries its spread, relative to the image. Every verb tells more with --help.
    """
    if ctx.invoked_subcommand is None:
        click.echo(ctx.get_help())


def main(arguments: Sequence[str] | None = None) -> NoReturn:
    """Run the command line and end the process."""
    warnings.simplefilter("ignore")  # libraries' hints to programmers; what users must know is told in sentences
    try:
        status = roadhem.main(arguments, prog_name="roadhem", standalone_mode=False)
    except BaseException as error:
        status = _tell(error)
    _leave(status if isinstance(status, int) else 0)


def _tell(error: BaseException) -> int:
    """Say in one sentence what went wrong; return the exit status."""
    if isinstance(error, SystemExit):
        return error.code if isinstance(error.code, int) else FAULTS
    if isinstance(error, click.exceptions.Exit):
        return error.exit_code
    if isinstance(error, Stopped):
        return _say(str(error), FAULTS)
    if isinstance(error, BrokenPipeError):
        return FAULTS
    if isinstance(error, click.ClickException):
        return _say(_usage(error), BAD_INPUT)
    if isinstance(error, RoadhemError):
        return _say(str(error), BAD_INPUT)
    if isinstance(error, OSError) and error.strerror:
        return _say(_system(error), BAD_INPUT)
    if isinstance(error, MemoryError):
        return _say("Memory ran out; close other programs or use fewer --workers", FAULTS)
    return _say(_unforeseen(error), FAULTS)


def _say(sentence: str, status: int) -> int:
    text = " ".join(sentence.split()).rstrip(".")
    click.echo(f"roadhem: {text}.", err=True)
    return status


def _usage(error: click.ClickException) -> str:
    context = getattr(error, "ctx", None)
    command = context.command_path if context is not None else "roadhem"
    if isinstance(error, click.NoSuchOption):
        nearest = f", the nearest is {error.possibilities[0]}" if error.possibilities else ""
        text = f"There is no option {error.option_name}{nearest}"
    else:
        text = error.format_message().strip().rstrip(".")
    return f"{text}; see {command} --help"


def _system(error: OSError) -> str:
    where = f"{error.filename}: " if error.filename else ""
    reason = (error.strerror or "").lower()
    return f"{where}{reason}; {WAYS_OUT.get(error.errno or 0, 'name another place')}"


def _unforeseen(error: BaseException) -> str:
    import traceback
    from datetime import datetime

    from roadhem import state

    text = "".join(traceback.format_exception(error))
    try:
        log: Path | str = state.logs() / f"fault-{datetime.now():%Y%m%d-%H%M%S}-{os.getpid()}.txt"
        Path(log).write_text(f"roadhem {__version__}\n{' '.join(sys.argv)}\n{text}", encoding="utf-8")
    except OSError:
        log = "nowhere, for its folder cannot be written"
    return f"Something went wrong that should not ({type(error).__name__}); please report it with the log in {log}"


def _leave(status: int) -> NoReturn:
    """Flush and end; a closed pipe at this point is nobody's concern."""
    for stream in (sys.stdout, sys.stderr):
        try:
            stream.flush()
        except (BrokenPipeError, ValueError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())
    sys.exit(status)
