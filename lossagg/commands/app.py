"""The application: which commands there are, and what they share."""

from __future__ import annotations

from typing import Annotated

import typer

from lossagg.commands.assess import assess
from lossagg.commands.batch import batch
from lossagg.commands.check import check
from lossagg.commands.fit import fit
from lossagg.commands.new import new
from lossagg.commands.price import price
from lossagg.commands.replay import replay
from lossagg.version import __version__

ABOUT = (
    "From loss records to capital, layer costs and a report.\n\n"
    "Exit codes: 0 done; 1 finished, but a headline was withheld or a portfolio of a batch failed; "
    "2 bad input or usage; 3 interrupted, or the machine (disk, memory).\n\n"
    "The figures are those of a model. They are not an actuarial opinion, a certification or a filing; "
    "local rules and licensed practice prevail."
)


def build_app() -> typer.Typer:
    """The command line application with every command that works."""
    # Plain help: loading and drawing rich help would make `lossagg --help` slow.
    app = typer.Typer(
        add_completion=False, no_args_is_help=True, rich_markup_mode=None, pretty_exceptions_enable=False
    )
    app.callback(help=ABOUT)(_options)
    app.command()(assess)
    app.command()(batch)
    app.command()(check)
    app.command()(fit)
    app.command()(new)
    app.command()(price)
    app.command()(replay)
    return app


def _version(asked: bool) -> None:
    if asked:
        typer.echo(f"lossagg {__version__}")
        raise typer.Exit


def _options(
    version: Annotated[
        bool, typer.Option("--version", help="Print the version and leave.", callback=_version, is_eager=True)
    ] = False,
) -> None:
    """Take the options that stand before a command."""
