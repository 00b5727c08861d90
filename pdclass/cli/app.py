"""The commands of pdclass, and how an error ends one: one line and an exit code."""

from __future__ import annotations

import os
import sys
import traceback

# one thread a process for linear algebra: spinning threads slow a busy machine down many times
for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ.setdefault(_name, "1")

import typer  # noqa: E402

from pdclass.cli import learning, scoring, worlds  # noqa: E402
from pdclass.errors import PdclassError  # noqa: E402

app = typer.Typer(
    name="pdclass",
    help="From raw captures on live medium-voltage cables to reasoned, calibrated verdicts on discharge pulses. "
    "Advisory only: not a permit to work, not proof that equipment is healthy or safe.",
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    add_completion=False,
    rich_markup_mode=None,
)


@app.callback(invoke_without_command=True)
def _root(
    context: typer.Context,
    debug: bool = typer.Option(False, "--debug", help="Show the traceback of an error."),
    show_version: bool = typer.Option(False, "--version", help="Print the version and end."),
) -> None:
    if show_version:
        from pdclass import __version__

        print(__version__)
        raise typer.Exit
    context.obj = debug


app.command("demo")(worlds.demo)
app.command("simulate")(worlds.simulate)
app.command("extract")(scoring.extract)
app.command("import")(scoring.import_pulses)
app.command("train")(learning.train)
app.command("evaluate")(learning.evaluate)
app.command("score")(scoring.score)


def main() -> None:
    """Run a command; an error of ours becomes one line on stderr and its exit code."""
    debug = "--debug" in sys.argv
    try:
        sys.exit(app(standalone_mode=False) or 0)
    except PdclassError as error:
        _end(f"pdclass: {error}", error.exit_code, debug=debug)
    except (KeyboardInterrupt, typer.Abort):
        _end("pdclass: stopped; what was complete is kept, and the same command goes on from there", 130, debug=False)
    except BrokenPipeError:
        sys.exit(1)
    except Exception as error:  # noqa: BLE001 - whatever else happens is a defect, said in one line
        if callable(show := getattr(error, "show", None)):
            # the parser's own complaint about how a command was used
            show()
            sys.exit(getattr(error, "exit_code", 2))
        line = f"pdclass: defect: {type(error).__name__}: {error}; run again with --debug and report it"
        _end(" ".join(line.split()), 1, debug=debug)


def _end(line: str, code: int, *, debug: bool) -> None:
    if debug:
        traceback.print_exc()
    print(line, file=sys.stderr)
    sys.exit(code)
