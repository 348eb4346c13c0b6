"""The command `clockfall`: it loads a command's code only when that command runs."""

from __future__ import annotations

import os
import sys
from importlib import import_module
from typing import Final

import click

from clockfall import __version__
from clockfall.errors import BadInput, ClockfallError

COMMANDS: Final = {
    "decay": ("clockfall.app.decay", "The orbital decay, taken apart by effect and compared with its measurement."),
    "rates": ("clockfall.app.rates", "Every secular rate and predicted parameter, by effect."),
    "weigh": ("clockfall.app.weigh", "Both masses from measured parameters, and a test of the others."),
    "delays": ("clockfall.app.delays", "What each effect adds to the arrival times."),
    "inspiral": ("clockfall.app.inspiral", "Time to merger from masses, period and eccentricity given here."),
    "effects": ("clockfall.app.effects", "The installed effects; 'effects show NAME' reads one."),
    "show": ("clockfall.app.show", "Read a result file."),
    "draw": ("clockfall.app.draw", "Draw a result file: the budget, the masses, or the shift of periastron."),
    "compare": ("clockfall.app.compare", "What changed between two result files, by effect, in sigma."),
    "rerun": ("clockfall.app.rerun", "Repeat a result from its file alone, and say whether the numbers agree."),
}
"""Command -> (module, one line). The line stands here so that --help imports no command."""

DONE, FAILED, BAD_INPUT = 0, 1, 2


class LazyGroup(click.Group):
    """A group that imports a command's module when it is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Return the names in the order in which they are met in work."""
        del ctx  # the list is the same everywhere
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import and return one command."""
        del ctx  # the command is the same everywhere
        if cmd_name not in COMMANDS:
            return None
        command = import_module(COMMANDS[cmd_name][0]).command
        assert isinstance(command, click.Command)
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """List the commands without importing them."""
        del ctx  # the list is the same everywhere
        with formatter.section("Commands"):
            formatter.write_dl([(name, line) for name, (_, line) in COMMANDS.items()])


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 80})
@click.version_option(__version__, prog_name="clockfall")
def cli() -> None:
    """How a relativistic binary's orbit and its signals change with time, taken apart by physical effect.

    With no SYSTEM file a command runs on an invented demo binary.
    """


def main() -> None:
    """Run the command line and exit: 0 done, 1 failed, 2 bad input."""
    sys.exit(run(sys.argv[1:]))


def run(arguments: list[str]) -> int:
    """Run one command line; return the exit code. Bad input never shows a traceback."""
    debug = "--debug" in arguments
    try:
        code = cli.main(arguments, prog_name="clockfall", standalone_mode=False)
    except click.exceptions.Abort:
        return _complain("interrupted", FAILED)
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except KeyboardInterrupt:
        return _complain("interrupted", FAILED)
    except BrokenPipeError:
        # The reader of our output went away, as `head` does; nothing more can be said there.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return DONE
    except ClockfallError as error:
        if debug:
            raise
        return _complain(str(error), BAD_INPUT if isinstance(error, BadInput) else FAILED)
    return code if isinstance(code, int) else DONE


def _complain(text: str, code: int) -> int:
    click.echo(f"clockfall: {text}", err=True)
    return code
