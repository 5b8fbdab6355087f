"""The `pbm` command: a file per sub-command, errors in one paragraph; exit codes 0 done, 1 the answer is no, 2 wrong use or input."""

import os
import sys

import typer

from pbm import __version__
from pbm.commands import appraise, demo, intake, note, store, survey, tune, watch
from pbm.commands.versions import ONE_THREAD
from pbm.errors import PbmError

app = typer.Typer(
    name="pbm",
    help="Watch analysers between control events by the patient results themselves.\n\n"
    "A monitor supplements control materials and never replaces them; limits and actions are the laboratory "
    "director's decision under local regulation.",
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    add_completion=False,
)
app.command("demo")(demo.demo)
app.command("intake")(intake.intake)
app.command("survey")(survey.survey)
app.command("tune")(tune.tune)
app.command("appraise")(appraise.appraise)
app.command("watch")(watch.watch)
app.command("note")(note.note)
app.add_typer(store.app, name="store")


def _version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"pbm {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    version: bool = typer.Option(False, "--version", callback=_version, is_eager=True, help="Show the version."),
) -> None:
    pass


def main() -> None:
    """Run `pbm`; an error that a person can act on becomes one paragraph on stderr and exit code 2."""
    os.environ.update(ONE_THREAD)
    try:
        app()
    except PbmError as error:
        typer.echo(f"pbm: {error}", err=True)
        sys.exit(2)
    except BrokenPipeError:
        # The reader (`head`, a pager) has gone; the interpreter must not try to flush to it again.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(0)
