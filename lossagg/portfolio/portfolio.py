"""A portfolio folder: its file, its records, and the way to an assessment."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Executor, ThreadPoolExecutor
from contextlib import nullcontext
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol

from lossagg.engines import Simulation
from lossagg.engines.book import GROSS, Book
from lossagg.portfolio.annual_file import AnnualFile
from lossagg.portfolio.assess import Progress, compute, evidence_of, figures, silent
from lossagg.portfolio.assessment import FORMAT, Assessment, Data, Writer
from lossagg.portfolio.cautions import cautions
from lossagg.portfolio.dependences import (
    assumed,
    dependence_cautions,
    dependence_data,
    independent_losses,
)
from lossagg.portfolio.evidence_cautions import evidence_cautions
from lossagg.portfolio.files import PORTFOLIO_FILE, LineRecords, portfolio_file, read_records
from lossagg.portfolio.history import prepare_line
from lossagg.portfolio.line import LineModel, build_line
from lossagg.portfolio.model_data import book_data
from lossagg.portfolio.places import placed_covers, tower_cautions
from lossagg.portfolio.reconciling import reconcile_portfolio
from lossagg.portfolio.schema import PortfolioFile, read_portfolio_file
from lossagg.records import PreparedLosses
from lossagg.version import __version__


class Pricer(Protocol):
    """Prices the options of a portfolio file with the laws of an assessment; see `pricing`."""

    def __call__(
        self,
        portfolio: Portfolio,
        models: Sequence[LineModel],
        *,
        years: int,
        seed: int,
        workers: int | None,
        withheld: str,
        progress: Progress,
    ) -> Data | None:
        """The options as data with their cautions; None where the file has none."""


@dataclass(frozen=True)
class Portfolio:
    """A portfolio read and checked, not yet modelled.

    Attributes:
        folder: where it lies.
        file: its portfolio file.
        records: the checked records and exposures of each line that has any, by line name.
        inputs: path within the folder, SHA-256 and rows of every file read.
        writer: how its assessments are written.
        pricer: how the options of its file are priced for its assessments.
    """

    folder: Path
    file: PortfolioFile
    records: dict[str, LineRecords]
    inputs: tuple[Data, ...]
    writer: Writer | None = None
    pricer: Pricer | None = None

    @property
    def name(self) -> str:
        """The name in the portfolio file."""
        return self.file.portfolio.name

    def __repr__(self) -> str:
        return f"<Portfolio {self.name!r}: {len(self.file.line)} lines, {len(self.file.cover)} covers>"

    def prepare(self) -> dict[str, PreparedLosses]:
        """The losses of each line as they are modelled: events, trend, thresholds, exposure."""
        return {
            line.name: prepare_line(self.file, line, self.records[line.name])
            for line in self.file.line
            if line.name in self.records
        }

    def models(self) -> tuple[LineModel, ...]:
        """Every line with its laws for the forecast year, fitted or given.

        Raises:
            FitError: a line whose records support none of the laws asked for.
            InputError: a given law whose parameters are out of range.
        """
        prepared = self.prepare()
        return tuple(
            build_line(line, prepared.get(line.name), f"line[{k}]")
            for k, line in enumerate(self.file.line, start=1)
        )

    def assess(
        self,
        *,
        years: int = 1_000_000,
        seed: int = 1,
        workers: int | None = None,
        until: float | None = None,
        annual: Path | None = None,
        executor: Executor | None = None,
        progress: Progress = silent,
    ) -> Assessment:
        """Compute annual loss, capital and cover costs by three engines that must agree.

        Args:
            years: simulated years.
            seed: seed of the simulation, 0 to 2**64 - 1; the same seed gives the same bytes.
            workers: threads; all processors by default. The results do not depend on it.
            until: simulate until the interval of the capital figure reaches no further than this part of
                it to either side, 0.005 for 0.5 %, however many years that takes.
            annual: a Parquet file to receive every simulated year, by line and cover.
            executor: where the years are simulated instead of in threads: a pool of processes, a cluster.
            progress: called with the stage and the fraction done.

        Returns:
            The assessment; its headline is withheld where the engines disagree, or the records disagree with
            the control totals stated for them.

        Raises:
            InputError: a value of the portfolio file that cannot be used.
            FitError: records that support none of the laws asked for.
            EngineError: a book beyond the resources of the exact engines.
        """
        progress("preparing and fitting", 0.0)
        models = self.models()
        section = self.file.portfolio
        shared = assumed(self.file.dependence, [line.name for line in self.file.line])
        book = Book(
            lines=tuple(model.line for model in models),
            covers=placed_covers(self.file),
            dependences=tuple(own.dependence for own in shared),
        )
        simulation = Simulation(
            years=years,
            seed=seed,
            workers=workers,
            until=until,
            level=section.capital_level,
            executor=executor,
        )
        # The evidence of the lines needs no engine, and the engines leave the interpreter most of the time.
        with ThreadPoolExecutor(1) as beside, AnnualFile(annual) if annual else nullcontext() as file:
            evidence = beside.submit(evidence_of, models)
            every_year = file.add if file else None
            results = compute(book, simulation, progress=progress, every_year=every_year)
        years = results["simulation"].losses[GROSS].years  # type: ignore[attr-defined]
        apart = None
        if shared:
            progress("lines taken as independent", 0.95)
            apart = independent_losses(book, years=years, seed=seed, workers=workers)
        shown = evidence.result()
        findings = [finding for model in models for finding in model.findings]
        controls = reconcile_portfolio(self.file, self.records)
        findings += controls.findings
        data: Data = {
            "format": FORMAT,
            "portfolio": self.description(),
            "run": {"version": __version__, "seed": seed, "years": years, "inputs": list(self.inputs)},
            **figures(
                book,
                shown,
                results,
                section.levels,
                section.capital_level,
                broken=controls.withheld,
                years=years,
                seed=seed,
                apart=apart,
                models=models,
            ),
            "dependence": dependence_data(shared),
            "model": book_data(book),
            "reconciliation": controls.data,
            "findings": [finding.to_dict() for finding in dict.fromkeys(findings)],
            "cautions": [
                *cautions(models, sorted({*section.levels, section.capital_level}), independent=not shared),
                *evidence_cautions(shown),
                *dependence_cautions(shared),
                *tower_cautions(self.file.tower),
            ],
        }
        data["options"] = None
        if self.pricer is not None:
            priced = self.pricer(
                self,
                models,
                years=years,
                seed=seed,
                workers=workers,
                withheld=data["headline"]["reason"] if data["headline"]["withheld"] else "",
                progress=lambda stage, done: progress(f"options: {stage}", 0.9 + 0.1 * done),
            )
            data["cautions"] += priced.pop("cautions") if priced else []
            data["options"] = priced
        progress("done", 1.0)
        return Assessment(data, self.writer)

    def description(self) -> Data:
        """Name, currency, dates and levels, as every result carries them."""
        section = self.file.portfolio
        start, end = section.forecast
        return {
            "name": section.name,
            "currency": section.currency,
            "valuation_date": section.valuation_date.isoformat(),
            "description": section.description,
            "levels": list(section.levels),
            "capital_level": section.capital_level,
            "forecast": {"start": start.isoformat(), "end": end.isoformat()},
        }


def read_portfolio(
    path: str | Path, *, writer: Writer | None = None, pricer: Pricer | None = None
) -> Portfolio:
    """Read a portfolio folder: its file, every key checked, and its records, every row checked.

    Args:
        path: the folder, or its portfolio file.
        writer: what `Assessment.write` calls.
        pricer: what prices the options of the file for its assessments; without it they carry none.

    Raises:
        InputError: a file, key, row or value that cannot be used, with its place and the remedy.
    """
    folder, file = portfolio_file(Path(path))
    content = read_portfolio_file(file)
    placed_covers(content)
    assumed(content.dependence, [line.name for line in content.line])
    records, inputs = read_records(folder, content)
    return Portfolio(folder, content, records, inputs, writer, pricer)


__all__ = ["PORTFOLIO_FILE", "Portfolio", "read_portfolio"]
