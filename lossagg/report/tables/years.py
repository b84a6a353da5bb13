"""Tables of single simulated years: their events, what each cover paid of them, and how."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.report.cells import Absent, Cell, Column, Table, clean
from lossagg.report.reading import Assessment, Entry

NOT_COVERED = Absent("not covered")
ABOUT = (
    "A simulated year is one possible year, not a forecast: it shows of what events a year of this size can "
    "be made. The command lossagg replay shows any other year, and how each payment comes about."
)


def near_capital(assessment: Assessment) -> Table:
    """The simulated years nearest to the capital figure: lines, covers, gross and net."""
    currency = assessment["portfolio"]["currency"]
    years = _years(assessment)
    subjects = [entry["subject"] for entry in years[0]["amounts"]] if years else []
    rows: list[tuple[Cell, ...]] = [
        (_subject(subject), *(_amount(year, subject) for year in years)) for subject in subjects
    ]
    columns = (Column("Annual amount"), *(Column(f"Year {year['year']:,}", "amount") for year in years))
    notes = (ABOUT,) if years else ()
    return Table(
        "Years", f"Simulated years nearest to the capital figure, {currency}", columns, tuple(rows), notes
    )


def events_near_capital(assessment: Assessment) -> Table:
    """The largest events of these years and what each cover paid of them."""
    currency = assessment["portfolio"]["currency"]
    years = _years(assessment)
    covers = [payment["cover"] for payment in years[0]["covers"]] if years else []
    rows: list[tuple[Cell, ...]] = []
    for year in years:
        rows += [(year["year"], *row) for row in _event_rows(year, covers)]
    columns = (Column("Year", "count"), *_event_columns(covers))
    return Table("Year events", f"Events of these years, {currency}", columns, tuple(rows))


def replayed(year: Entry, currency: str) -> tuple[Table, ...]:
    """One replayed year: its amounts, its events, and every payment term by term.

    Args:
        year: the year as the assessment keeps years.
        currency: of its amounts.
    """
    covers = [payment["cover"] for payment in year["covers"]]
    title = f"Year {year['year']:,}"
    amounts: list[tuple[Cell, ...]] = [
        (_subject(entry["subject"]), entry["amount"]) for entry in year["amounts"]
    ]
    factors = tuple(f"Factor {clean(name)}: {value:.6g}." for name, value in year["factors"].items())
    tables = [
        Table(
            "Year",
            f"{title}, {currency}",
            (Column("Annual amount"), Column(f"Amount, {currency}", "amount")),
            tuple(amounts),
            factors,
        ),
        Table(
            "Events", f"{title}: events, {currency}", _event_columns(covers), tuple(_event_rows(year, covers))
        ),
    ]
    if covers:
        tables.append(_steps(year, title, currency))
    return tuple(tables)


def _years(assessment: Assessment) -> Sequence[Entry]:
    kept = assessment.get("years_near_capital")
    return kept["years"] if kept else ()


def _subject(subject: str) -> str:
    kind, _, name = subject.partition(" ")
    words = {"line": f"Line {name}", "cover": f"Paid by {name}", "gross": "Gross", "net": "Net"}
    return clean(words.get(kind, subject))


def _amount(year: Entry, subject: str) -> Cell:
    found = [entry["amount"] for entry in year["amounts"] if entry["subject"] == subject]
    return found[0] if found else Absent("not computed")


def _event_columns(covers: Sequence[str]) -> tuple[Column, ...]:
    return (
        Column("Line"),
        Column("Event", "count"),
        Column("Loss", "amount"),
        *(Column(f"Counts towards {clean(cover)}", "amount") for cover in covers),
    )


def _event_rows(year: Entry, covers: Sequence[str]) -> list[tuple[Cell, ...]]:
    rows: list[tuple[Cell, ...]] = []
    for event in year["events"]:
        paid = {payment["cover"]: payment["paid"] for payment in event["payments"]}
        name = clean(event["line"]) + (" (one event)" if event["shock"] else "")
        rows.append((name, event["number"], event["cost"], *(paid.get(c, NOT_COVERED) for c in covers)))
        for part in event.get("parts", ()):
            rows.append((f"of it {clean(part['line'])}", "", part["cost"], *("" for _ in covers)))
    smaller = year["smaller"]
    if smaller["events"]:
        words = f"{smaller['events']:,} smaller events"
        rows.append((words, "", smaller["amount"], *("" for _ in covers)))
    return rows


def _steps(year: Entry, title: str, currency: str) -> Table:
    """Every payment, of events and of the year, with the amount left after each term."""
    rows: list[tuple[Cell, ...]] = []
    for event in year["events"]:
        for payment in event["payments"]:
            if payment["paid"] > 0:
                name = f"{event['line']} {event['number']}"
                rows.append((clean(name), event["cost"], *_payment(payment)))
    rows += [("the year", "", *_payment(payment)) for payment in year["covers"]]
    columns = (
        Column("Of"),
        Column("Loss", "amount"),
        Column("Cover"),
        Column("Left after each term"),
        Column("Paid", "amount"),
    )
    notes = ("Events of which a cover pays nothing are left out here.",)
    return Table("Payments", f"{title}: what was paid and why, {currency}", columns, tuple(rows), notes)


def _payment(payment: Entry) -> tuple[Cell, ...]:
    steps = "; ".join(f"{clean(step['operation'])} {step['amount']:,.2f}" for step in payment["steps"])
    return clean(payment["cover"]), steps or "everything is paid", payment["paid"]
