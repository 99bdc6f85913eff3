"""The command ``faultassay``: thin over the library, and the only part that prints."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from typing import Annotated, Any

import typer
from typer.core import TyperGroup

from analyzer.cli.convert import CONVERT_EXAMPLES, convert
from analyzer.cli.describe import DESCRIBE_EXAMPLES, describe
from analyzer.cli.examine import EXAMINE_EXAMPLES, examine
from analyzer.cli.exits import DONE, INTERNAL_ERROR, INTERRUPTED, WRONG_USE
from analyzer.cli.forge import FORGE_EXAMPLES, forge
from analyzer.cli.messages import say_error, stop_writing
from analyzer.errors import FaultassayError

DEBUG_VARIABLE = "FAULTASSAY_DEBUG"

_HELP = """\
Say whether a recorded short circuit agrees with RL-circuit theory.

Start with `describe` to see what is in a file, then let `examine` find the fault: inception and point on
wave, symmetrical current and offset, X/R, source impedance, each with its 95 % interval.

\b
Exit codes
  0  done
  1  something departs from theory (only with examine --strict)
  2  wrong use, or an output that cannot be written
  3  an input could not be read (it goes before 1)
  4  an internal error

An aid to engineering judgement: settings, ratings and switching decisions follow local codes and licensed
practice.
"""


class _Commands(TyperGroup):
    """The group of commands; whatever a command raises ends here as an exit code and one line."""

    def invoke(self, ctx: Any) -> Any:
        try:
            result = super().invoke(ctx)
            sys.stdout.flush()
            return result
        except (typer.Exit, typer.Abort):
            raise
        except FaultassayError as error:  # commands catch those of inputs themselves
            say_error(str(error))
            raise typer.Exit(WRONG_USE) from None
        except KeyboardInterrupt:
            say_error("stopped")
            raise typer.Exit(INTERRUPTED) from None
        except BrokenPipeError:
            stop_writing()
            raise typer.Exit(DONE) from None
        except Exception as error:
            # The one broad catch: the last stop before the user, who must see a line and no traceback.
            if _is_wrong_use(error) or ctx.params.get("debug") or os.environ.get(DEBUG_VARIABLE):
                raise
            say_error(
                f"internal error: {type(error).__name__}: {error}. Please report this line and, if you may, "
                f"the record; `faultassay --debug ...` shows where it happened"
            )
            raise typer.Exit(INTERNAL_ERROR) from None


def _is_wrong_use(error: Exception) -> bool:
    """Whether the command line parser raised it; its class is not in the same module in all versions."""
    return hasattr(error, "format_message") and hasattr(error, "exit_code")


app = typer.Typer(
    name="faultassay",
    cls=_Commands,
    help=_HELP,
    add_completion=False,
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["--help", "-h"], "max_content_width": 100},
)
app.command(epilog=DESCRIBE_EXAMPLES)(describe)
app.command(epilog=EXAMINE_EXAMPLES)(examine)
app.command(epilog=CONVERT_EXAMPLES)(convert)
app.command(epilog=FORGE_EXAMPLES)(forge)


def _show_version(wanted: bool) -> None:
    if wanted:
        from analyzer import __version__

        typer.echo(f"faultassay {__version__}")
        raise typer.Exit(DONE)


@app.callback()
def _common(
    version: Annotated[
        bool,
        typer.Option("--version", is_eager=True, callback=_show_version, help="Show the version and stop."),
    ] = False,
    debug: Annotated[
        bool,
        typer.Option("--debug", help=f"Show where an internal error happened (or set {DEBUG_VARIABLE}=1)."),
    ] = False,
) -> None:
    pass


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments without the program's name; those of the process when left out.

    Returns
    -------
    int
        0 done; 1 something departs (``--strict`` only); 2 wrong use, or an output that cannot be written;
        3 an input could not be read; 4 an internal error; 130 stopped from the keyboard.
    """
    for stream in (sys.stdout, sys.stderr):
        # A terminal that lacks a letter shows another one rather than ending the program.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    command = typer.main.get_command(app)
    try:
        command.main(args=None if argv is None else list(argv), prog_name="faultassay")
    except SystemExit as stop:
        return stop.code if isinstance(stop.code, int) else DONE
    return DONE
