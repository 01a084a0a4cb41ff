"""The command `spheru`: a table of commands, each imported when it is called.

Faults of the input end with exit code 2, a failed run with 1; neither shows a traceback unless
``--debug`` asks for it.
"""

from __future__ import annotations

import importlib
import sys
from typing import TYPE_CHECKING, Any, Final

import click

from spheru import __version__
from spheru.errors import InputFault, SpheruError, UnknownNameError

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["main"]

# name -> (module that holds a click command `command`, one line of help)
COMMANDS: Final = {
    "estimate": ("spheru.cli.estimate", "Check a settings file and predict by mean field."),
    "grow": ("spheru.cli.grow", "Grow the map of a settings file and measure it."),
    "series": ("spheru.cli.series", "Run many settings, or find the value that meets a target."),
    "measure": ("spheru.cli.measure", "Measure label images, simulated or photographed."),
    "report": ("spheru.cli.report", "Write the report of a run's folder from its files."),
    "materials": ("spheru.cli.materials", "List the material records, or show one."),
}


class _Commands(click.Group):
    """A group that imports a command's module when the command is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        del ctx
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command:
        del ctx
        if cmd_name not in COMMANDS:
            raise click.UsageError(str(UnknownNameError("command", cmd_name, COMMANDS)))
        command: click.Command = importlib.import_module(COMMANDS[cmd_name][0]).command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        del ctx
        with formatter.section("Commands"):
            formatter.write_dl([(name, line) for name, (_, line) in COMMANDS.items()])


@click.group(cls=_Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="spheru")
@click.option("--debug", is_flag=True, help="Show where a fault was raised.")
def _spheru(debug: bool) -> None:
    """Grow maps of spherulites from a material record and a cooling curve.

    Predictions rank and explain; they do not qualify a part. A quiescent melt is assumed: no flow,
    no secondary crystallisation, no melting.
    """
    del debug  # read from the command line by `main`


def main(arguments: Sequence[str] | None = None) -> Any:
    """Run one command and leave with its exit code.

    Parameters
    ----------
    arguments : sequence of str, optional
        Words after the program's name; those of the command line where it is None.

    Raises
    ------
    SystemExit
        Always: 0 done, 1 the run failed or was stopped, 2 the input is at fault.
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    try:
        code = _spheru.main(words, prog_name="spheru", standalone_mode=False)
    except click.ClickException as fault:
        fault.show()
        sys.exit(2)
    except (click.Abort, KeyboardInterrupt):
        _say("stopped; nothing was left half written")
        sys.exit(1)
    except Exception as fault:
        if "--debug" in words:
            raise
        if isinstance(fault, SpheruError):
            _say(str(fault))
            sys.exit(2 if isinstance(fault, InputFault) else 1)
        _say(f"unexpected fault: {type(fault).__name__}: {fault} (spheru --debug ... shows where)")
        sys.exit(1)
    sys.exit(code if isinstance(code, int) else 0)


def _say(message: str) -> None:
    click.echo(f"spheru: {message}", err=True)
