"""Printing: colour, boxes and a progress bar on a terminal; plain lines into a pipe or a file."""

from __future__ import annotations

import logging
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Literal

import typer

from lossagg.report.cells import Table, clean, show
from lossagg.report.summary import Summary, plain_table

if TYPE_CHECKING:
    from rich.table import Table as RichTable
    from rich.text import Text

    from lossagg.batch import BatchOutcome

SHOW_AFTER_SECONDS = 1.0


@contextmanager
def progress_bar() -> Iterator[Callable[[str, float], None]]:
    """A function to report progress to; a bar appears on a terminal after the first second.

    Into a pipe or a file nothing is printed.
    """
    if not sys.stderr.isatty():
        yield lambda stage, done: None
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    columns = (TextColumn("{task.description}", markup=False), BarColumn(), TimeElapsedColumn())
    bar = Progress(*columns, console=Console(stderr=True), transient=True)
    started, task = time.monotonic(), bar.add_task("starting", total=1.0)

    def report(stage: str, done: float) -> None:
        bar.update(task, description=clean(stage), completed=done)
        if time.monotonic() - started >= SHOW_AFTER_SECONDS:
            bar.start()

    try:
        yield report
    finally:
        bar.stop()


@contextmanager
def notes_shown(*, always: bool) -> Iterator[None]:
    """Show on stderr what the engines note as they run: that they compile, what a pilot expects.

    Args:
        always: whether also where stderr is no terminal.
    """
    log, shown = logging.getLogger("lossagg"), _Notes()
    if not (always or sys.stderr.isatty()):
        yield
        return
    before = log.level
    log.addHandler(shown)
    log.setLevel(logging.INFO)
    try:
        yield
    finally:
        log.removeHandler(shown)
        log.setLevel(before)


class _Notes(logging.Handler):
    """Prints notes as plain lines on stderr."""

    def emit(self, record: logging.LogRecord) -> None:
        """Print one."""
        typer.echo(f"note: {clean(record.getMessage())}", err=True)


def warn(texts: Sequence[str]) -> None:
    """Warnings, on stderr."""
    for text in texts:
        typer.echo(f"warning: {clean(text)}", err=True)


def print_summary(summary: Summary) -> None:
    """The summary of an assessment, on stdout."""
    if sys.stdout.isatty():
        _print_rich(summary)
        return
    _print_lines([summary.title, *summary.headline, ""])
    for table in summary.tables:
        _print_lines([*plain_table(table), ""])
    _print_lines([*summary.remarks, "", *summary.files])


def print_batch(outcome: BatchOutcome) -> None:
    """The table of a batch, on stdout."""
    from lossagg.batch.index import index_table

    table = index_table(outcome.record)
    lines = [outcome.record.summary(), str(outcome.out / "index.html")]
    if sys.stdout.isatty():
        from rich.console import Console

        console = Console()
        console.print(_rich_table(table))
        for line in lines:
            console.print(clean(line), markup=False, highlight=False, soft_wrap=True)
        return
    _print_lines([*plain_table(table), "", *lines])


def print_tables(tables: Sequence[Table]) -> None:
    """Tables one below the other with their notes, on stdout."""
    if sys.stdout.isatty():
        from rich.console import Console

        console = Console()
        for table in tables:
            console.print(_rich_table(table))
            for note in table.notes:
                console.print(clean(note), markup=False, highlight=False)
        return
    for table in tables:
        _print_lines([*plain_table(table), *(clean(note) for note in table.notes), ""])


def _print_lines(lines: Sequence[str]) -> None:
    for line in lines:
        typer.echo(line)


def _print_rich(summary: Summary) -> None:
    from rich.console import Console
    from rich.panel import Panel
    from rich.text import Text

    console = Console()
    box = Text("\n".join(summary.headline), style="bold")
    colour = "red" if summary.withheld else "blue"
    console.print(Panel(box, title=Text(summary.title), title_align="left", border_style=colour))
    for table in summary.tables:
        console.print(_rich_table(table))
    for remark in summary.remarks:
        console.print(Text(remark))
    for path in summary.files:
        console.print(Text(path), soft_wrap=True)


def _rich_table(table: Table) -> RichTable:
    from rich import box
    from rich.table import Table as Grid
    from rich.text import Text

    drawn = Grid(title=Text(clean(table.title)), title_justify="left", box=box.SIMPLE_HEAD)
    for column in table.columns:
        heading = Text(clean(column.heading))
        # Folded where the terminal is narrow: an amount or a place cut short would mislead.
        justify: Literal["left", "right"] = "left" if column.kind == "text" else "right"
        drawn.add_column(heading, justify=justify, overflow="fold")
    for row in table.rows:
        views = [show(cell, column.kind) for cell, column in zip(row, table.columns, strict=True)]
        drawn.add_row(*(_rich_cell(view.text, view.range) for view in views))
    return drawn


def _rich_cell(text: str, limits: str) -> Text:
    from rich.text import Text

    return Text.assemble(text, ("\n" + limits, "dim")) if limits else Text(text)
