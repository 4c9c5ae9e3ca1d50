"""The program: its commands, and what every error and exit code means."""

from __future__ import annotations

import os
import sys
from typing import Annotated

# No plugin changes how stackmill reads its files, and looking for one costs a fifth of a forecast.
os.environ.setdefault("PYDANTIC_DISABLE_PLUGINS", "__all__")

import typer

from stackmill.cli import calibrate, check, materials, rates, relief, schema, stops
from stackmill.errors import InputErrors, StackmillError

app = typer.Typer(
    name="stackmill",
    help="When to stop the ion mill: stop-time forecasts, with honest chances, for delayering chips.\n\n"
    "Example: stackmill stops job.yaml",
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    add_completion=False,
    context_settings={"help_option_names": ["-h", "--help"]},
)
app.command()(calibrate.calibrate)
app.command()(check.check)
app.command()(materials.materials)
app.command()(rates.rates)
app.command()(relief.relief)
app.command()(schema.schema)
app.command()(stops.stops)


def _version(value: bool) -> None:
    if value:
        from stackmill import __version__

        typer.echo(f"stackmill {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Show the version.")
    ] = False,
) -> None:
    """Only here so that --version stands beside the commands."""


def main(arguments: list[str] | None = None) -> int:
    """Run the command line and give its exit code (see the README for what each means)."""
    debug = "--debug" in (sys.argv if arguments is None else arguments)
    try:
        left = app(arguments, standalone_mode=False)
    except StackmillError as error:
        _say(_report(error))
        return error.exit_code
    except (KeyboardInterrupt, typer.Abort):
        _say("stackmill: interrupted")
        return 130
    except BrokenPipeError:
        # The reader has gone: keep Python from complaining about the rest on its way out.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except Exception as error:
        return _unexpected(error, debug)
    return left if isinstance(left, int) else 0  # typer gives back the code of a command that left early


def _report(error: StackmillError) -> str:
    if isinstance(error, InputErrors):
        from stackmill.documents.wording import report

        return report(error)
    return error.headline()


def _unexpected(error: Exception, debug: bool) -> int:
    show = getattr(error, "format_message", None)
    if show is not None:  # typer's own complaint about an option or argument
        _say(f"error: {show()} (see stackmill --help)")
        return 2
    if debug:
        import traceback

        _say(traceback.format_exc().rstrip())
    _say(f"error: stackmill itself failed: {type(error).__name__}: {error} (run again with --debug and report it)")
    return 70


def _say(text: str) -> None:
    if sys.stderr is None:
        return
    try:
        sys.stderr.write(text + "\n")
    except UnicodeEncodeError:
        sys.stderr.write(text.encode("ascii", "backslashreplace").decode() + "\n")
