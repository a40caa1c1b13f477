"""The command `subside`: its commands, and how every error ends.

Nothing heavy is imported here; each command loads what it needs when it runs, so that ``--help``
answers at once.
"""

from __future__ import annotations

import signal
import sys
import traceback
from collections.abc import Callable
from importlib import import_module
from typing import Any

import click

from subside.errors import SubsideError, nearest

__all__ = ["cli", "main"]

_COMMANDS = {
    "init": "subside.cli.init", "inspect": "subside.cli.inspect", "check": "subside.cli.check",
    "run": "subside.cli.run", "export": "subside.cli.export", "plugins": "subside.cli.plugins",
}


class _Commands(click.Group):
    """Commands in the order one uses them, each from its own file."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(_COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in _COMMANDS:
            return None
        command: click.Command = import_module(_COMMANDS[cmd_name]).command
        return command

    def resolve_command(self, ctx: click.Context, args: list[str]) -> Any:
        if args and args[0] not in _COMMANDS:
            raise click.UsageError(f"no command is called '{args[0]}'."
                                   + nearest(args[0], _COMMANDS), ctx)
        return super().resolve_command(ctx, args)


@click.command(cls=_Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="subside", prog_name="subside")
def cli() -> None:
    """Land subsidence from the pressure grid of a flow simulation.

    Start with:

    \b
        subside init my-field
        subside run my-field/scenario.toml

    Exit codes: 0 done, 1 a check failed, 2 the input is wrong, 3 it could not be done.
    """


def main(arguments: list[str] | None = None) -> None:
    """Run the command line and exit with its code."""
    arguments = sys.argv[1:] if arguments is None else arguments
    debug = "--debug" in arguments
    # a polite kill ends like Ctrl-C: unfinished files are taken away
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    sys.exit(_guarded(lambda: cli.main(arguments, prog_name="subside", standalone_mode=False),
                      debug))


def _guarded(job: Callable[[], Any], debug: bool) -> int:
    """The exit code of a job; its errors as one paragraph on stderr."""
    try:
        result = job()
        return result if isinstance(result, int) else 0
    except click.exceptions.NoArgsIsHelpError as error:
        error.show()
        return 2
    except click.ClickException as error:
        context = getattr(error, "ctx", None)
        see = f" See '{context.command_path} --help'." if context is not None else ""
        _say(error.format_message() + see, debug)
        return 2
    except click.Abort:
        _say("stopped by the user; no half-written file was left behind.", debug)
        return 3
    except SubsideError as error:
        _say(str(error), debug)
        return error.exit_code
    except MemoryError as error:
        _say(f"memory ran out ({error}); use a coarser map, fewer output dates, or a machine with "
             "more memory.", debug)
        return 3
    except SystemExit:  # how click ends when whoever reads the output has gone
        return 3
    except Exception as error:
        _say(f"unforeseen {type(error).__name__}: {error}. This is a defect of subside; run again "
             "with --debug and report what it prints.", debug)
        return 3


def _say(message: str, debug: bool) -> None:
    if debug:
        traceback.print_exc()
    click.echo("subside: " + " ".join(message.split()), err=True)
