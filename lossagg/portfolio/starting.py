"""A first portfolio file for a table of losses: every assumption in it is named, for a person to confirm."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass

from lossagg.records.amounts import NumberStyle
from lossagg.records.propose import NO_CURRENCY, Proposal, ProposedLine

HEAD = """\
# Started by lossagg from a table of losses. What is marked CONFIRM was read off the table or assumed; look at
# each of these, correct it, and delete the mark. Then: lossagg check, lossagg assess.
"""
LAWS = """\
# CONFIRM: families that are tried; the one of lowest AIC is used.
frequency = { fit = ["poisson", "negative-binomial"] }
severity = { fit = ["lognormal", "lomax", "weibull"] }
"""
COVERS = """\
# Covers, in the order in which they pay. None is assumed; an example:
# [[cover]]
# name = "Layer"
# deductible = 100000
# limit = 900000
"""

_LONGEST_NAME = 120


@dataclass(frozen=True)
class Assumption:
    """Something to be confirmed.

    Args:
        key: key of the portfolio file it is about.
        assumed: what stands there.
        why: where it comes from, or what depends on it.
    """

    key: str
    assumed: str
    why: str


def assumptions(proposal: Proposal) -> tuple[Assumption, ...]:
    """Everything that a new portfolio takes for granted, in the order of its file."""
    return (*_of_portfolio(proposal), *_of_columns(proposal), *_of_forms(proposal), *_of_lines(proposal))


def portfolio_text(proposal: Proposal, name: str) -> str:
    """The content of portfolio.toml.

    Args:
        proposal: how the table may be read.
        name: of the portfolio.
    """
    currency = f"currency = {_quoted(proposal.currency)}  # CONFIRM"
    if proposal.currency == NO_CURRENCY:
        currency += ": XXX stands for none; no column names one"
    parts = [
        HEAD,
        "[portfolio]",
        f"name = {_quoted(name[:_LONGEST_NAME])}",
        currency,
        f"valuation-date = {proposal.latest.isoformat()}  # CONFIRM: the latest date in the table; all later "
        "losses are still unknown",
        "levels = [0.90, 0.95, 0.99, 0.995]",
        "capital-level = 0.995  # CONFIRM: one year in two hundred",
    ]
    if proposal.other_currencies:
        parts.append('# rates = "rates.csv"  # dated rates: the rows are in several currencies')
    parts += ["", "# CONFIRM: which heading of the table is which column.", "[columns]"]
    parts += [f"{column} = {_quoted(heading)}" for column, heading in proposal.columns.items()]
    parts += [f"# not read: {_quoted(heading)}" for heading in proposal.unread]
    for line in proposal.lines:
        parts += ["", *_line(proposal, line)]
    return "\n".join(parts) + "\n\n" + COVERS


def _line(proposal: Proposal, line: ProposedLine) -> Iterator[str]:
    yield "[[line]]"
    yield f"name = {_quoted(line.name)}"
    yield f"records = {_quoted(proposal.file)}"
    for key in ("sheet", "encoding", "delimiter"):
        value = getattr(proposal.layout, key)
        if value is not None:
            yield f"{key} = {_quoted(value)}"
    yield from _forms(proposal)
    if line.threshold is not None:
        yield f"reporting-threshold = {line.threshold:.15g}  # CONFIRM: the records begin abruptly there"
    elif not proposal.thresholds_recorded:
        yield "# reporting-threshold = ...  # CONFIRM: none is to be seen; every loss is taken as recorded"
    yield f"first-year = {proposal.first_year}  # CONFIRM: complete since 1 January of the earliest loss"
    yield "trend = 0.0  # CONFIRM: growth of amounts per year; 0.03 for 3 %"
    yield '# exposure = "exposure.csv"  # CONFIRM: none; every year is taken as large as the next'
    yield LAWS.rstrip()


def _forms(proposal: Proposal) -> Iterator[str]:
    if proposal.other_styles:
        for style in (_style(proposal), *proposal.other_styles):
            keys = "; ".join(_keys(style)) or 'decimal = "."'
            yield f"# {keys}  # AMBIGUOUS: the table does not say; keep the right one, a key to a line"
    else:
        yield from _keys(_style(proposal))
    if proposal.other_dates:
        for form in (proposal.date_format or "%Y-%m-%d", *proposal.other_dates):
            yield f"# date-format = {_quoted(form)}  # AMBIGUOUS: the table does not say; keep the right one"
    elif proposal.date_format is not None:
        yield f"date-format = {_quoted(proposal.date_format)}"


def _style(proposal: Proposal) -> NumberStyle:
    return NumberStyle(proposal.decimal, proposal.thousands, proposal.grouping)


def _keys(style: NumberStyle) -> Iterator[str]:
    """The keys that declare a style; none for plain numbers."""
    if style.decimal != ".":
        yield f"decimal = {_quoted(style.decimal)}"
    if style.thousands is not None:
        yield f"thousands = {_quoted(style.thousands)}"
    if style.grouping != "three":
        yield f"grouping = {_quoted(style.grouping)}"


def _quoted(text: str) -> str:
    """A TOML basic string; JSON escapes the same characters, less DEL."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _of_portfolio(proposal: Proposal) -> Iterator[Assumption]:
    if proposal.currency == NO_CURRENCY:
        yield Assumption("currency", NO_CURRENCY, "No column names a currency: give its code.")
    else:
        yield Assumption("currency", proposal.currency, "As the table says.")
    if proposal.other_currencies:
        codes = ", ".join(proposal.other_currencies)
        yield Assumption("rates", "none", f"Rows in {codes} stop a check until a file of rates is named.")
    slips = ""
    if proposal.last_few:
        slips = (
            f" Losses dated in {proposal.latest.year}: only {proposal.last_few}; the latest before them: "
            f"{proposal.latest_before}. Is this a slip?"
        )
    yield Assumption(
        "valuation-date",
        proposal.latest.isoformat(),
        "The latest date in the table. If the table goes on to a later day without a loss, give that day."
        + slips,
    )
    yield Assumption("capital-level", "0.995", "One year in two hundred, as is customary; yours may differ.")


def _of_columns(proposal: Proposal) -> Iterator[Assumption]:
    for name, heading in proposal.columns.items():
        over = [h for h in proposal.passed_over.get(name, ()) if h != heading]
        also = f" Passed over: {', '.join(over)}." if over else ""
        yield Assumption(f"columns.{name}", heading, f"By its heading and its cells.{also}")
    if proposal.unread:
        named = ", ".join(proposal.unread[:10]) + (" and more" if len(proposal.unread) > 10 else "")
        yield Assumption(
            "columns", f"not read: {named}", "If these hold personal data, delete them from the copy."
        )


def _of_forms(proposal: Proposal) -> Iterator[Assumption]:
    if proposal.other_styles:
        styles = (_style(proposal), *proposal.other_styles)
        words = " or ".join(", ".join(_keys(style)) or "plain numbers with a point" for style in styles)
        until = "plain numbers are read" if styles[0].plain else "a check stops"
        yield Assumption("decimal", "not decided", f"AMBIGUOUS: {words}. Until you say, {until}.")
    elif not _style(proposal).plain:
        form = ", ".join(_keys(_style(proposal)))
        yield Assumption("decimal", form, "No other reading fits all numbers of the table.")
    if proposal.other_dates:
        words = " or ".join((proposal.date_format or "%Y-%m-%d", *proposal.other_dates))
        yield Assumption("date-format", "not decided", f"AMBIGUOUS: {words}. A check stops until you say.")
    elif proposal.date_format is not None:
        yield Assumption("date-format", proposal.date_format, "No other reading fits all dates of the table.")


def _of_lines(proposal: Proposal) -> Iterator[Assumption]:
    for line in proposal.lines:
        said = "By the line column." if "line" in proposal.columns else "No column tells lines apart."
        yield Assumption("line", f"{line.name}: {line.rows:,} row{'' if line.rows == 1 else 's'}", said)
        if proposal.thresholds_recorded:
            continue
        smallest = "" if line.smallest is None else f"The smallest loss is {line.smallest:,.2f}"
        if line.threshold is not None:
            why = f"{smallest}; the records begin abruptly above this amount."
            yield Assumption(f"reporting-threshold of {line.name}", f"{line.threshold:,.15g}", why)
        else:
            why = f"{smallest}; none is to be seen." if smallest else "There are no losses."
            yield Assumption(f"reporting-threshold of {line.name}", "none", why)
    yield Assumption("first-year", str(proposal.first_year), "The year of the earliest loss, taken as whole.")
    yield Assumption("trend", "0", "Amounts are taken as they are: no inflation.")
    yield Assumption("exposure", "none", "Every year is taken as exposed as the next.")
    yield Assumption("frequency, severity", "families to try", "Fitted and compared by lossagg fit.")
