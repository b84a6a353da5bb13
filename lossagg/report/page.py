"""The report as one self-contained HTML page: no script, no link to anything outside."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING, Any

from lossagg.report import digits, figures, front, tables
from lossagg.report.cells import Cell, Kind, Shown, Table, clean, show
from lossagg.report.option_parts import option_parts
from lossagg.report.reading import Assessment, Entry, every_caution, years_observed

if TYPE_CHECKING:
    import jinja2


SMOOTH = 1e-4  # a density that jumps by less is continuous but for the stopping of a fit
CLOSE_AIC = 2.0  # a difference below it says little: Burnham & Anderson 2002, section 2.6


@dataclass(frozen=True)
class LineSection:
    """What the page shows of one line."""

    anchor: str
    name: str
    given: bool
    facts: tuple[tuple[str, str], ...]
    tables: tuple[Table, ...]
    figures: tuple[str, ...]


@cache
def environment() -> jinja2.Environment:
    """The templates, escaping everything that is put into them."""
    import jinja2

    built = jinja2.Environment(
        loader=jinja2.PackageLoader("lossagg.report"),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    built.filters["shown"] = shown
    built.filters["clean"] = clean
    built.tests["numeric"] = is_numeric
    return built


def shown(cell: Cell, kind: Kind) -> Shown:
    """The cell as the page shows it."""
    return show(cell, kind)


def is_numeric(kind: Kind) -> bool:
    """True for kinds whose column is aligned to the right."""
    return kind != "text"


def render_report(assessment: Assessment) -> str:
    """The page of one assessment.

    Args:
        assessment: the dictionary of format "lossagg.assessment/1".

    Returns:
        HTML; the same assessment gives the same text.
    """
    context: dict[str, Any] = {
        "portfolio": assessment["portfolio"],
        "run": assessment["run"],
        "headline": front.headline(assessment),
        "crosscheck": front.crosscheck(assessment),
        "status": front.status(assessment),
        "cautions": every_caution(assessment),
        "levels": tables.totals.levels(assessment),
        "moments": tables.totals.moments(assessment),
        "curve": figures.exceedance_figure(assessment),
        "supported": years_observed(assessment),
        "predictive": _filled(tables.predictive.predictive(assessment)),
        "lines": tables.lines.overview(assessment),
        "line_levels": tables.lines.levels(assessment),
        "sanity": _filled(tables.sanity.sanity_of_gross(assessment)),
        "dependence": _filled(
            tables.allocation.allocation(assessment),
            tables.dependence.assumptions(assessment),
            tables.dependence.correlations(assessment),
            tables.dependence.bounds(assessment),
            tables.dependence.compared(assessment),
        ),
        "years": _filled(tables.years.near_capital(assessment), tables.years.events_near_capital(assessment)),
        "sections": [
            line_section(line, index, assessment["portfolio"]["currency"])
            for index, line in enumerate(assessment["lines"], 1)
        ],
        "cover_tables": _cover_tables(assessment),
        "options": _options(assessment),
        "reconciliation": tables.records.reconciliation(assessment),
        "controls": tables.controls.control_totals(assessment),
        "findings": tables.evidence.findings(assessment),
        "facts": tables.evidence.run(assessment),
        "inputs": tables.evidence.inputs(assessment),
    }
    return environment().get_template("report.html").render(context)


def render_index(facts: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> str:
    """The index page of a batch: one row per portfolio with a link to its report.

    Args:
        facts: version, seed and years of the batch, and how many portfolios there are in each status.
        rows: portfolio, status, message, headline, gross, net, verdict, cautions and link of each.
    """
    return environment().get_template("index.html").render(facts=facts, rows=rows)


def _filled(*built: Table) -> list[Table]:
    """The tables that have rows."""
    return [table for table in built if table.rows]


def _cover_tables(assessment: Assessment) -> list[Table]:
    if not assessment["covers"]:
        return []
    return [
        tables.covers.terms(assessment),
        tables.covers.results(assessment),
        tables.covers.levels(assessment),
        *_filled(tables.by_line.costs(assessment), tables.by_line.levels(assessment)),
    ]


def _options(assessment: Assessment) -> dict[str, Any] | None:
    options = tables.options_of(assessment)
    return None if options is None else option_parts(options)


def line_section(line: Entry, index: int, currency: str, extra: Sequence[Table] = ()) -> LineSection:
    """What a page shows of one line.

    Args:
        line: its entry.
        index: its number, from 1.
        currency: of the portfolio.
        extra: tables that follow those of every report, with the line in their first column.
    """
    built = (
        tables.records.by_year([line], currency),
        tables.records.development([line], currency),
        tables.fits.observed([line], currency),
        tables.fits.candidates([line]),
        tables.fit_tests.goodness([line]),
        tables.fit_tests.frequency([line]),
        tables.fit_tests.tail_rules([line], currency),
        *extra,
        tables.records.steps([line], currency),
    )
    drawn: tuple[str | None, ...] = ()
    if line["fit"]:
        drawn = (
            figures.survival_figure(line, f"line{index}-survival", currency),
            figures.quantile_figure(line, f"line{index}-quantiles", currency),
            figures.counts_figure(line, f"line{index}-counts"),
            figures.shape_figure(line, f"line{index}-shape", currency),
            figures.mean_excess_figure(line, f"line{index}-excess", currency),
        )
    return LineSection(
        anchor=f"line-{index}",
        name=line["name"],
        given=line["source"] == "given",
        facts=tuple(_line_facts(line, currency)),
        tables=tuple(_without_line(table) for table in built if table.rows),
        figures=tuple(figure for figure in drawn if figure),
    )


def _line_facts(line: Entry, currency: str) -> list[tuple[str, str]]:
    size, exposure = line["severity"], line["exposure"]
    facts = [("Label", line["label"])] if line.get("label") else []
    facts += [
        ("Frequency", tables.lines.law_text(line["frequency"])),
        ("Severity", tables.lines.law_text(size)),
    ]
    laws = (("frequency", line["frequency"]), ("severity", size))
    facts += [
        (f"Source of the {name}", law["stated_source"]) for name, law in laws if law.get("stated_source")
    ]
    if line["source"] == "given":
        return [*facts, ("Source", tables.lines.GIVEN)]
    facts += [(f"Why this {name}", text) for name, law in laws if (text := _choice_text(law))]
    if bound := line["frequency"].get("bound"):
        facts.append(("Rate without losses", _bound_text(bound)))
    if weighed := _credibility_text(line["frequency"]):
        facts.append(("Credibility of the rate", weighed))
    threshold = size["threshold"]
    facts.append(("Threshold", f"{threshold:,.2f} {currency}, trended" if threshold else "none"))
    if size.get("density_jump") is not None:
        facts.append(("Density at the splice", _jump_text(size["density_jump"])))
    if size["observations"] is not None:
        fitted = f"{size['observations']:,}, of which {size['censored']:,} at a policy limit"
        facts.append(("Losses fitted", fitted))
    if exposure:
        base = f" {exposure['base']}" if exposure["base"] else ""
        forecast = f"{digits.significant(exposure['forecast'], 6)}{base}"
        facts.append(("Exposure of the forecast period", forecast))
    facts += [("Note", note) for law in (line["frequency"], size) for note in law.get("notes", ())]
    return facts


def _choice_text(law: Entry) -> str:
    """Why a law was chosen: its rank by AIC, or the reason given for another; empty where it was given."""
    choice = law.get("choice")
    if not choice:
        return ""
    fitted = [tried for tried in law["candidates"] if tried["aic"] is not None]
    if choice["reason"]:
        worse = next(tried["aic"] for tried in fitted if tried["chosen"]) - fitted[0]["aic"]
        return (
            f"{choice['chosen']} chosen, though {choice['first']} ranks first with an AIC lower by "
            f"{worse:.1f}: {choice['reason']}"
        )
    if len(fitted) == 1:
        refused = len(law["candidates"]) - 1
        others = f"; {refused} refused, see the candidates" if refused else ", and no other was asked for"
        return f"{choice['chosen']} is the only candidate fitted{others}"
    lead = fitted[1]["aic"] - fitted[0]["aic"]
    close = ", too little to tell them apart" if lead < CLOSE_AIC else ""
    return f"{choice['chosen']} has the lowest AIC, by {lead:.1f} before {fitted[1]['family']}{close}"


def _jump_text(jump: float) -> str:
    """Whether the density of a splice jumps."""
    if abs(jump - 1.0) < SMOOTH:
        return "continuous"
    return f"jumps: just above the threshold it is {digits.significant(jump, 3)} times that just below"


def _bound_text(bound: Entry) -> str:
    """What the rate of a line is that had no loss."""
    rate, seen = digits.significant(bound["rate"], 5), digits.significant(bound["exposure"], 6)
    return (
        f"{rate} per unit of exposure, the one-sided {bound['level']:.0%} upper bound: no loss in {seen} of "
        "it; a higher rate would have shown one with more than that probability"
    )


def _credibility_text(law: Entry) -> str:
    """How the rate was weighed against a prior; empty where none is stated."""
    weighed = law.get("credibility")
    if not weighed:
        return ""
    return (
        f"rate {digits.significant(weighed['rate'], 4)} per unit of exposure: weight "
        f"{100 * weighed['weight']:.1f} % on the own {digits.significant(weighed['own_rate'], 4)} "
        f"({weighed['losses']:,} losses), the rest on the prior "
        f"{digits.significant(weighed['prior_rate'], 4)}; {weighed['method']}. Source of the prior: "
        f"{weighed['source']}"
    )


def _without_line(table: Table) -> Table:
    """The table of one line without the column that would repeat its name."""
    return Table(table.key, table.title, table.columns[1:], tuple(row[1:] for row in table.rows), table.notes)
