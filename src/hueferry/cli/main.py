"""The command `hueferry`: one module a command, gathered here, and what an error becomes.

Exit codes: 0 all done; 1 some files failed and the rest is done; 2 the caller's fault and nothing written; 3 a solver
gave up.
"""

from __future__ import annotations

import os
import sys
from typing import Any

import typer

from hueferry import __version__
from hueferry.cli import cost, demo, drift, export, maps, match, palette, report, stain
from hueferry.cli.terminal import remark, show_json
from hueferry.errors import HueferryError, SolverError

USAGE_FAULT = 2
SOLVER_FAULT = 3
INTERRUPTED = 130

# The parent of every complaint about a command line; it has no public name of its own.
_CommandLineError: Any = typer.BadParameter.__mro__[2]

app = typer.Typer(
    name="hueferry",
    help="Bring a set of images into agreement in colour by optimal transport, and prove it.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)
app.command("match")(match.match)
app.command("stain")(stain.stain)
app.command("cost")(cost.cost)
app.command("palette")(palette.palette)
app.command("fit")(maps.fit)
app.command("apply")(maps.apply)
app.command("export")(export.export)
app.command("check")(maps.check)
app.add_typer(drift.app, name="drift")
app.command("report")(report.report)
app.command("demo")(demo.demo)


def _print_version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"hueferry {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: bool = typer.Option(False, "--version", help="Print the version.", callback=_print_version, is_eager=True),
) -> None:
    pass


def main() -> None:
    """Run the command line and leave with its exit code."""
    sys.exit(run(sys.argv[1:]))


def run(arguments: list[str]) -> int:
    """Run one command line and return its exit code; an error is one sentence on stderr, and JSON if that was asked."""
    try:
        code = typer.main.get_command(app).main(arguments, prog_name="hueferry", standalone_mode=False)
    except SolverError as error:
        return _complain(arguments, error, str(error), SOLVER_FAULT)
    except HueferryError as error:
        return _complain(arguments, error, str(error), USAGE_FAULT)
    except _CommandLineError as error:
        return _complain(arguments, error, error.format_message(), USAGE_FAULT)
    except (typer.Abort, KeyboardInterrupt):
        remark("hueferry: stopped; what was written so far is whole")
        return INTERRUPTED
    except BrokenPipeError:
        # The reader of our results went away: not an error, but nothing more can be flushed either.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    return code if isinstance(code, int) else 0


def _complain(arguments: list[str], error: Exception, sentence: str, code: int) -> int:
    remark(f"hueferry: {sentence}")
    if "--json" in arguments:
        show_json({"schema": "hueferry/error-1", "error": type(error).__name__, "message": sentence, "exit_code": code})
    return code
