"""The command line: the group of commands, and what happens to everything that goes wrong.

Commands are thin: they open the input, send rows through the public calls and hand records to the writers. Each
stands in its own module of `basirank.commands` and is loaded when it is asked for. Whatever the user got wrong is one
line on standard error and exit code 2.
"""

from __future__ import annotations

import os
import signal
import sys
import threading
from importlib import import_module
from typing import Any

import click

from . import __version__
from .commands.shared import WRONG_INPUT, say
from .extras import MissingExtra
from .readers import InputError
from .writers import OutputError

INTERRUPTED, PIPE_CLOSED, TERMINATED = 130, 141, 143

COMMANDS = {
    "rank": "Sort a list by basicity, strongest base first.",
    "annotate": "Add constants, first site and state to each row, in order.",
    "explain": "Show why a compound has its pKaH, term by term.",
    "report": "Write a ranked list as a page with pictures, intervals and increments.",
    "curve": "Forms, charge and log D against pH, as a table or a picture.",
    "calibrate": "Learn from own measured constants: a local model for the other commands.",
    "score": "Compare a table of measured constants with the predicted ones.",
    "titrate": "Titration curve of a compound or its salt, with equivalence points.",
    "workup": "Acid-base extraction: pH into water and back, and the washes that separate a mixture.",
    "salts": "Counter-ions ranked for a salt, pH of maximum solubility, solubility against pH.",
    "tune": "Small changes of structure that bring a pKaH into a window.",
}
"""Each command with its line in the help; its module in `basirank.commands` has the same name."""

EXAMPLES = """
\b
Examples:
  basirank rank list.smi
  basirank rank CCN c1ccncc1 --ph 7.4 --ph 5.5
  basirank annotate library.csv -o annotated.csv
  basirank explain "OC(=O)CN"
  basirank curve "OC(=O)CN glycine" -o glycine.svg
  basirank titrate "CCN.Cl" --concentration 0.05
  basirank workup mixture.smi
  basirank salts CCN --top 10
  basirank tune "C1CCCCN1Cc1ccccc1" --to 6.5:7.5
  basirank report list.smi -o report.html
"""


class OneLineErrors(click.Group):
    """A group whose every error is one line on standard error, and never a traceback."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Names of the commands, in the order of the help."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Load a command."""
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = import_module(f".commands.{cmd_name}", __package__).command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """The list of commands in the help, none of them loaded."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))

    def main(self, args: Any = None, prog_name: Any = None, **extra: Any) -> Any:  # type: ignore[override]
        """Run a command and end the process with its exit code (without `standalone_mode`: return it)."""
        standalone_mode = extra.pop("standalone_mode", True)
        code = self._code(args, prog_name, **extra)
        if standalone_mode:
            sys.exit(code)
        return code

    def _code(self, args: Any, prog_name: Any, **extra: Any) -> int:
        try:
            result: object = super().main(args, prog_name, standalone_mode=False, **extra)
            return result if isinstance(result, int) else 0
        except click.ClickException as error:
            say(error.format_message())
            return WRONG_INPUT
        except click.Abort:
            say("interrupted")
            return INTERRUPTED

    def invoke(self, ctx: click.Context) -> Any:
        """Run the chosen command, turning what can go wrong into an exit code."""
        try:
            code = super().invoke(ctx)
            sys.stdout.flush()
            return code
        except BrokenPipeError:
            _forget_stdout()
            return PIPE_CLOSED
        except KeyboardInterrupt:
            say("interrupted")
            return INTERRUPTED
        except (InputError, OutputError, MissingExtra) as error:
            if isinstance(error, OutputError):
                _forget_stdout()
            say(str(error))
            return WRONG_INPUT
        except OSError as error:
            say(f"{error.strerror or error}{f': {error.filename}' if error.filename else ''}")
            return WRONG_INPUT
        except (click.ClickException, click.exceptions.Exit, click.Abort):
            raise
        except Exception as error:
            if os.environ.get("BASIRANK_TRACEBACK"):
                raise
            say(f"a fault of the program: {type(error).__name__}: {error} (BASIRANK_TRACEBACK=1 shows where)")
            return 1


def _forget_stdout() -> None:
    """Send what is left for a closed standard output nowhere, so that Python ends without a complaint."""
    try:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    except (OSError, ValueError):
        pass


@click.group(
    cls=OneLineErrors,
    invoke_without_command=True,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog=EXAMPLES,
)
@click.version_option(__version__, prog_name="basirank")
@click.pass_context
def commands(ctx: click.Context) -> None:
    """Rank, annotate and explain the basicity (pKaH) of organic compounds, site by site.

    INPUT is a file (.smi .csv .tsv .sdf, each also .gz or .zst, or .parquet), a folder of Parquet files, a
    quoted pattern of file names, '-' for standard input, or SMILES. A line of a .smi file is a SMILES, white
    space, a name. Tables keep their own columns; a row that cannot be computed is kept as 'refused'.
    """
    if ctx.invoked_subcommand is None:
        click.echo(ctx.get_help())


def _quiet() -> None:
    """A process that is being stopped says nothing of what its closing pools and pipes run into."""
    sys.unraisablehook = lambda problem: None
    threading.excepthook = lambda problem: None


def _terminate(signum: int, frame: Any) -> None:
    _quiet()
    raise SystemExit(TERMINATED)


def _interrupt(signum: int, frame: Any) -> None:
    _quiet()
    raise KeyboardInterrupt


def main() -> None:
    """Entry point of the `basirank` command."""
    if hasattr(signal, "SIGTERM"):
        signal.signal(signal.SIGTERM, _terminate)
    if signal.getsignal(signal.SIGINT) is signal.default_int_handler:  # not where the caller has it ignored
        signal.signal(signal.SIGINT, _interrupt)
    commands(prog_name="basirank")
