"""The command `tinctor`. Nothing heavy is imported until a command's body runs."""

from __future__ import annotations

import gc
import os
from typing import Annotated

import typer

from tinctor.cli import documents, library
from tinctor.cli.determine import EPILOG as DETERMINE_EPILOG
from tinctor.cli.determine import TRANSFER_EPILOG, determine, transfer
from tinctor.cli.output import speak_utf8
from tinctor.cli.plan import DILUTION_EPILOG, OVERLAP_EPILOG, WAVELENGTHS_EPILOG, dilution, overlap, wavelengths
from tinctor.cli.resolve import EPILOG, resolve
from tinctor.cli.standards import EPILOG as STANDARDS_EPILOG
from tinctor.cli.standards import MIXTURES_EPILOG, mixtures, standards
from tinctor.version import __version__

__all__ = ["app", "main"]

# A cold start makes many objects that live to the end: collecting among them takes a sixth of it and finds nothing.
gc.set_threshold(50_000, 20, 20)
# Looking for pydantic plugins reads the metadata of every package installed; none is used here.
os.environ.setdefault("PYDANTIC_DISABLE_PLUGINS", "1")

app = typer.Typer(
    name="tinctor",
    help="How much of each known absorber is in a mixed solution, from its UV-visible absorbance spectrum, "
    "and how far to trust the answer.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
)
app.command("resolve", epilog=EPILOG)(resolve)
app.command("overlap", epilog=OVERLAP_EPILOG)(overlap)
app.command("wavelengths", epilog=WAVELENGTHS_EPILOG)(wavelengths)
app.command("dilution", epilog=DILUTION_EPILOG)(dilution)
app.command("standards", epilog=STANDARDS_EPILOG)(standards)
app.command("determine", epilog=DETERMINE_EPILOG)(determine)
app.command("mixtures", epilog=MIXTURES_EPILOG)(mixtures)
app.command("transfer", epilog=TRANSFER_EPILOG)(transfer)
app.command("json")(documents.run_json)
app.command("schema")(documents.show_schema)
app.add_typer(library.app, name="library")


def _version(asked: bool) -> None:
    if asked:
        typer.echo(f"tinctor {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and stop.")
    ] = False,
) -> None:
    """Options before any command."""


def main() -> None:
    """Run the command line."""
    speak_utf8()
    app()
