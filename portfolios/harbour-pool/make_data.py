"""Make the records and exposures of this portfolio: every run gives the same bytes.

Run it in this folder, or name another: `python make_data.py [FOLDER]`. Everything is invented. Each line
draws from its own stream, so a change to one line leaves the other files as they are.

An event is drawn at the prices of the middle of the year to be forecast (1 July 2026), taken back to its
own date with the line's inflation, shared among its claims, kept if it reaches the threshold of its year,
and capped at the limit of the policy. The records are what the claims department would then hold.
"""

from __future__ import annotations

import io
import sys
import zipfile
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from datetime import date, datetime, timedelta
from pathlib import Path

import numpy as np
from numpy.random import Generator
from openpyxl import Workbook

SEED = 20251231
YEARS = range(2016, 2026)
VALUATION = date(2025, 12, 31)
PRICES_OF = date(2026, 7, 1)
MEMBERS = [f"M{number:02d}" for number in range(1, 19)]

WINTER = [1.7, 1.6, 1.3, 0.9, 0.6, 0.5, 0.5, 0.6, 0.9, 1.2, 1.6, 1.7]
SUMMER = [0.6, 0.6, 0.7, 0.9, 1.1, 1.5, 1.9, 1.8, 1.1, 0.7, 0.5, 0.7]
EVEN = [1.0] * 12


@dataclass(frozen=True)
class Recipe:
    """How one line behaves in truth: what a fit should find again, within its standard errors."""

    stream: int
    exposure: list[float]
    rate: float  # events per unit of exposure, however small
    dispersion: float  # variance of the count = mean + dispersion * mean**2
    size: Callable[[Generator], float]  # one event at the prices of 1 July 2026
    trend: float
    months: list[float]
    threshold: Callable[[int], float]
    limits: dict[float, float] = field(default_factory=dict)  # policy limit -> share of the policies
    several: float = 0.0  # part of the large enough events that bring several claims
    settled_after: float = 300.0  # mean days from notice to settlement
    recovered: float = 0.0  # part of the claims with money back from third parties
    bad_years: dict[int, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Claim:
    """One row of the claims file."""

    number: str
    member: str
    day: date
    reported: date
    event: str
    status: str
    paid: float | None
    outstanding: float | None
    amount: float | None
    recoveries: float
    limit: float | None
    threshold: float


HULL = Recipe(
    stream=1,
    exposure=[30810, 31240, 32105, 33020, 27460, 30195, 34480, 36105, 37240, 38610],  # vessel-days
    rate=0.00165,
    dispersion=0.01,
    size=lambda rng: rng.lognormal(np.log(28_000), 1.25),
    trend=0.035,
    months=WINTER,
    threshold=lambda year: 2_500.0,
    limits={150_000: 0.25, 400_000: 0.45, 1_500_000: 0.30},
    several=0.06,
    recovered=0.18,
    bad_years={2019: 1.35},
)
CREW = Recipe(
    stream=2,
    # payroll in thousands at 2025 wages: at the wages of each year it would grow with inflation too
    exposure=[68_900, 70_450, 72_300, 74_120, 66_980, 70_310, 76_040, 79_500, 81_870, 84_260],
    rate=0.00125,
    dispersion=0.0,
    size=lambda rng: rng.gamma(0.7, 34_000),
    trend=0.03,
    months=EVEN,
    threshold=lambda year: 1_000.0 if year < 2021 else 2_500.0,
    settled_after=420.0,
)
QUAY = Recipe(
    stream=7,
    exposure=[2_455, 2_490, 2_610, 2_655, 2_700, 2_845, 2_960, 3_120, 3_205, 3_310],  # millions insured
    rate=0.0054,
    dispersion=0.08,
    size=lambda rng: 270_000 * ((1 - rng.random()) ** (-1 / 2.3) - 1),
    trend=0.045,
    months=WINTER,
    threshold=lambda year: 10_000.0,
    limits={1_000_000: 0.50, 2_000_000: 0.35, 5_000_000: 0.15},
    settled_after=380.0,
    bad_years={2019: 1.5},
)
LIABILITY = Recipe(
    stream=4,
    exposure=[5_210, 5_340, 5_515, 5_690, 2_730, 3_905, 5_480, 6_020, 6_250, 6_395],  # thousand journeys
    rate=0.034,
    dispersion=0.025,
    size=lambda rng: rng.lognormal(np.log(6_200), 1.55),
    trend=0.05,
    months=SUMMER,
    threshold=lambda year: 0.0,
    limits={100_000: 0.25, 250_000: 0.40, 500_000: 0.35},
    several=0.03,
    settled_after=260.0,
    recovered=0.07,
    bad_years={2019: 1.12},
)


def events_of(recipe: Recipe, rng: Generator) -> list[tuple[date, float]]:
    """Date and amount, at the prices of the date, of every event that reaches its threshold."""
    found = []
    for year, exposure in zip(YEARS, recipe.exposure, strict=True):
        mean = recipe.rate * exposure * recipe.bad_years.get(year, 1.0)
        if recipe.dispersion > 0:
            mean *= rng.gamma(1 / recipe.dispersion, recipe.dispersion)
        for _ in range(rng.poisson(mean)):
            day = day_in(year, recipe.months, rng)
            amount = recipe.size(rng) / (1 + recipe.trend) ** ((PRICES_OF - day).days / 365.25)
            if amount >= max(recipe.threshold(year), 1.0):
                found.append((day, amount))
    return sorted(found)


def day_in(year: int, months: list[float], rng: Generator) -> date:
    """A day of the year, by the season of the line."""
    month = int(rng.choice(12, p=np.array(months) / sum(months))) + 1
    first, following = date(year, month, 1), date(year + month // 12, month % 12 + 1, 1)
    return first + timedelta(days=int(rng.integers((following - first).days)))


def parts_of(amount: float, least: float, several: float, rng: Generator) -> list[float]:
    """The claims of one event, each at or above the threshold."""
    count = 2 + int(rng.poisson(0.8))
    if rng.random() >= several or amount < 3 * count * max(least, 500.0):
        return [amount]
    return list(least + (amount - count * least) * rng.dirichlet(np.full(count, 1.5)))


def claims_of(recipe: Recipe, prefix: str, rng: Generator) -> list[Claim]:
    """The records of a line, in the order of the events."""
    rows: list[Claim] = []
    for day, amount in events_of(recipe, rng):
        parts = parts_of(amount, recipe.threshold(day.year), recipe.several, rng)
        event = f"{prefix}E{day:%y%m%d}-{len(rows) % 100:02d}" if len(parts) > 1 else ""
        rows += [claim_from(recipe, day, part, event, rng) for part in parts]
    return numbered([row for row in rows if row.reported <= VALUATION], prefix)


def numbered(rows: list[Claim], prefix: str) -> list[Claim]:
    """The rows with claim numbers: year of loss and a running number in the order of notice."""
    order = sorted(range(len(rows)), key=lambda i: (rows[i].day.year, rows[i].reported, i))
    seen: dict[int, int] = {}
    result = []
    for i in order:
        year = rows[i].day.year
        seen[year] = seen.get(year, 0) + 1
        result.append(replace(rows[i], number=f"{prefix}{year}-{seen[year]:04d}"))
    return result


def claim_from(recipe: Recipe, day: date, amount: float, event: str, rng: Generator) -> Claim:
    """One claim as the claims department holds it at the valuation date."""
    limit = float(rng.choice(list(recipe.limits), p=list(recipe.limits.values()))) if recipe.limits else None
    amount = round(min(amount, limit or amount), 2)
    reported = day + timedelta(days=int(rng.gamma(0.9, 18)))
    wait = recipe.settled_after * rng.exponential() * (1 + np.log1p(amount / 50_000))
    settled = reported + timedelta(days=int(wait)) <= VALUATION
    paid, outstanding = amount, 0.0
    if not settled:
        paid = round(amount * float(rng.beta(1.2, 2.0)), 2)
        outstanding = round(amount - paid, 2)
        if amount != limit and outstanding > 10_000:  # reserves are set in round sums
            outstanding = 500.0 * round(outstanding / 500)
            amount = round(min(paid + outstanding, limit or np.inf), 2)
            outstanding = round(amount - paid, 2)
    recoveries = round(amount * float(rng.beta(2, 3)), 2) if rng.random() < recipe.recovered else 0.0
    return Claim(
        "", str(rng.choice(MEMBERS)), day, reported, event, "closed" if settled else "open",
        paid, outstanding, amount, recoveries, limit, recipe.threshold(day.year),
    )  # fmt: skip


def storm(rng: Generator) -> list[Claim]:
    """The gale of November 2021: nine ports, one event, one port beyond its limit."""
    rows = []
    for place, part in enumerate(
        [1_148_000, 182_500, 95_300, 71_200, 46_700, 31_050, 24_900, 17_350, 12_800]
    ):
        day = date(2021, 11, 18) + timedelta(days=place % 2)
        limits = {1_000_000.0 if place == 0 else 2_000_000.0: 1.0}
        rows.append(claim_from(replace(QUAY, limits=limits), day, part, "GALE-2021-11", rng))
    return [replace(row, member=member) for row, member in zip(rows, MEMBERS[2:], strict=False)]


def text(amount: float | None, comma: bool = False) -> str:
    """An amount with cents; nothing where there is none."""
    if amount is None:
        return ""
    return f"{amount:.2f}".replace(".", ",") if comma else f"{amount:.2f}"


def write_table(
    path: Path, rows: list[list[str]], delimiter: str = ",", start: str = "", end: str = "\n"
) -> None:
    """A delimited file; no value here holds a delimiter, so none is quoted."""
    path.write_bytes((start + "".join(delimiter.join(row) + end for row in rows)).encode("utf-8"))


def write_hull(folder: Path) -> None:
    """The marine desk's workbook: its own headings, a total at the foot, a sheet of notes."""
    rows = claims_of(HULL, "H", np.random.default_rng([SEED, HULL.stream]))
    total = sum(row.amount or 0.0 for row in rows)
    # planted: a claim notified without an amount
    gap = 3 * len(rows) // 5
    rows[gap] = replace(rows[gap], paid=None, outstanding=None, amount=None, recoveries=0.0, status="open")
    book = Workbook()
    sheet = book.active
    sheet.title = "Hull claims"
    sheet.append(
        ["Claim", "Member", "Casualty", "Date of casualty", "Notified", "State", "Paid", "Reserve",
         "Gross claim", "Recovered", "Agreed value"]
    )  # fmt: skip
    for row in rows:
        sheet.append(
            [row.number, row.member, row.event or None, row.day, row.reported, row.status, row.paid,
             row.outstanding, row.amount, row.recoveries or None, row.limit]
        )  # fmt: skip
    # planted: the total at the foot, which would count every loss twice
    sheet.append(["Total", *[None] * 7, round(total, 2)])
    notes = book.create_sheet("Notes")
    notes.append(
        ["Gross claim = paid + reserve, before recoveries. Claims below 2,500 are settled by the members."]
    )
    notes.append(["The agreed value of the vessel is the most the pool pays for one claim."])
    save_workbook(book, folder / "hull.xlsx")


def save_workbook(book: Workbook, path: Path) -> None:
    """Save with fixed dates, and stored, not compressed: the bytes depend on neither clock nor library."""
    moment = datetime(VALUATION.year, VALUATION.month, VALUATION.day)
    book.properties.creator = "Marine desk"
    book.properties.created = moment
    saved = io.BytesIO()
    book.save(saved)
    now = f"{book.properties.modified:%Y-%m-%dT%H:%M:%SZ}".encode()
    with zipfile.ZipFile(saved) as old, zipfile.ZipFile(path, "w", zipfile.ZIP_STORED) as new:
        for name in old.namelist():
            content = old.read(name)
            if name == "docProps/core.xml":
                content = content.replace(now, f"{moment:%Y-%m-%dT%H:%M:%SZ}".encode())
            entry = zipfile.ZipInfo(name, (moment.year, moment.month, moment.day, 0, 0, 0))
            entry.create_system = 3
            new.writestr(entry, content)


def write_crew(folder: Path) -> None:
    """Crew injury: the headings lossagg knows; the threshold is in every row because it was raised."""
    rows = claims_of(CREW, "C", np.random.default_rng([SEED, CREW.stream]))
    # planted: a booking the wrong way round, a claim below the threshold of its year, a row twice
    wrong, small, twice = len(rows) // 4, 7 * len(rows) // 10, len(rows) // 2
    rows[wrong] = replace(rows[wrong], amount=-(rows[wrong].amount or 0.0), paid=-(rows[wrong].paid or 0.0))
    rows[small] = replace(rows[small], amount=840.0, paid=840.0, outstanding=0.0, status="closed")
    rows.insert(twice + 3, rows[twice])
    head = ["claim", "member", "date", "reported", "status", "paid", "outstanding", "amount", "threshold"]
    write_table(
        folder / "crew.csv",
        [head]
        + [
            [r.number, r.member, str(r.day), str(r.reported), r.status, text(r.paid), text(r.outstanding),
             text(r.amount), f"{r.threshold:.0f}"]
            for r in rows
        ],
    )  # fmt: skip


def write_quay(folder: Path) -> None:
    """Quay and terminal property: few and heavy, with the gale of 2021 under one event."""
    rng = np.random.default_rng([SEED, QUAY.stream])
    rows = numbered(claims_of(QUAY, "Q", rng) + storm(rng), "Q")
    # planted: a loss dated after the valuation, typed with the wrong year
    late = next(i for i, row in enumerate(rows) if row.day.year == 2025 and row.day.month in (2, 3))
    wrong_day = rows[late].day.replace(year=2026)
    rows[late] = replace(rows[late], day=wrong_day, reported=wrong_day + timedelta(days=6))
    head = ["claim", "member", "event", "date", "reported", "status", "currency", "paid", "outstanding",
            "amount", "policy-limit", "threshold"]  # fmt: skip
    write_table(
        folder / "quay.csv",
        [head]
        + [
            [r.number, r.member, r.event, str(r.day), str(r.reported), r.status, "EUR", text(r.paid),
             text(r.outstanding), text(r.amount), f"{r.limit:.0f}", f"{r.threshold:.0f}"]
            for r in rows
        ],
    )  # fmt: skip


def write_liability(folder: Path) -> None:
    """Passenger liability: semicolons, decimal commas, day first, as the claims handlers' system exports."""
    rows = claims_of(LIABILITY, "L", np.random.default_rng([SEED, LIABILITY.stream]))
    lines = [
        [r.number, r.member, f"{r.day:%d.%m.%Y}", f"{r.reported:%d.%m.%Y}", r.event, r.status,
         text(r.paid, True), text(r.outstanding, True), text(r.amount, True),
         text(r.recoveries, True), f"{r.limit:.0f}"]
        for r in rows
    ]  # fmt: skip
    # planted: an amount written as n/a, a refund booked as a claim, a row of an event exported twice
    unknown, refund = len(lines) // 3, 3 * len(lines) // 4
    twice = next(i for i in range(9 * len(lines) // 10, len(lines)) if rows[i].event)
    lines[unknown][6:9] = ["", "", "n/a"]
    lines[refund][6:10] = ["-1250,00", "0,00", "-1250,00", "0,00"]
    lines.insert(twice + 1, list(lines[twice]))
    head = ["Claim no", "Member", "Date of accident", "Date notified", "Occurrence", "State", "Paid to date",
            "Case reserve", "Incurred", "Recovered", "Sum insured"]  # fmt: skip
    write_table(folder / "liability.csv", [head, *lines], delimiter=";", start="\ufeff", end="\r\n")


def write_exposures(folder: Path) -> None:
    """One file per line: each has its own base."""
    for name, base, recipe, delimiter in (
        ("hull", "vessel-days", HULL, ","),
        ("crew", "payroll", CREW, ","),
        ("quay", "insured value", QUAY, ","),
        ("liability", "passenger journeys", LIABILITY, ";"),
    ):
        rows = [[str(year), f"{value:.0f}"] for year, value in zip(YEARS, recipe.exposure, strict=True)]
        write_table(folder / f"{name}-exposure.csv", [["year", base], *rows], delimiter)


def main(folder: Path) -> None:
    """Write every file of the portfolio but the portfolio file itself."""
    for write in (write_hull, write_crew, write_quay, write_liability, write_exposures):
        write(folder)


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
