"""Tables of the options: what each keeps, what each costs, how sure that is, and the curves."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.report import digits
from lossagg.report.cells import Absent, Cell, Column, Estimated, Ranged, Table
from lossagg.report.reading import Entry, absent, ranged, reasons

MOST_ROWS = 60
UNLIMITED = Absent("unlimited")
NONE = Absent("none")
BASE = Absent("base")
AGAIN = (
    " Where reinstatements are paid, the expected reinstatement premium with its tax comes off, and that of "
    "the year, pro rata to what the cover pays in it, goes on."
)
PERIODS = {0.9: "1-in-10", 0.95: "1-in-20", 0.99: "1-in-100"}


def figure(entry: Entry | None) -> Cell:
    """A figure with its range; one that a formula gives has none to show."""
    if entry is None:
        return Absent("not computed")
    value, low, high = entry["value"], entry["low"], entry["high"]
    if value is None:
        return absent(entry["reason"])
    if low == value == high or (low is None and high is None):
        return float(value)
    return ranged(entry)


def plain(value: float | None, words: str = "does not exist") -> Cell:
    """A number, or words for its absence."""
    return Absent(words) if value is None else value


def shown_options(options: Entry) -> list[Entry]:
    """The options a page has room for: all, or the base and those no other dominates, cheapest first."""
    entries: list[Entry] = list(options["options"])
    if len(entries) <= MOST_ROWS:
        return entries
    best = [entry for entry in entries if entry["base"] or not entry["dominated_by"]]
    best.sort(key=lambda entry: (not entry["base"], entry["total"]["expected"]["value"] or float("inf")))
    kept = {entry["name"] for entry in best[:MOST_ROWS]}
    return [entry for entry in entries if entry["name"] in kept]


def _left_out(options: Entry, entries: Sequence[Entry]) -> tuple[str, ...]:
    missing = len(options["options"]) - len(entries)
    if not missing:
        return ()
    return (
        f"{len(entries)} of {len(options['options'])} options are shown: the base, and those with the least "
        f"expected total cost that no other dominates. All stand in options.xlsx and options.csv.",
    )


def terms(options: Entry, entries: Sequence[Entry] | None = None) -> Table:
    """The terms of every option; the order in which they act once where it is the same for all."""
    chosen = options["options"] if entries is None else entries
    orders = {entry["terms"]["order"] for entry in chosen if entry["terms"]}
    several = len(orders) > 1
    rows = tuple(
        (e["name"], e["description"], *(((e["terms"] or {}).get("order", ""),) if several else ()))
        for e in chosen
    )
    columns = (Column("Option"), Column("Terms"), *((Column("Order of operations"),) if several else ()))
    notes = () if several else tuple(f"Order of operations: {order}." for order in orders)
    return Table("Option terms", "Options: terms", columns, rows, notes)


def retained(options: Entry, entries: Sequence[Entry] | None = None) -> Table:
    """What the insured keeps of a year under every option."""
    chosen = options["options"] if entries is None else entries
    currency = options["portfolio"]["currency"]
    levels = options["levels"]
    rows: list[tuple[Cell, ...]] = []
    for entry in chosen:
        own = entry["retained"]
        by_level = {row["level"]: row for row in own["levels"]}
        rows.append(
            (
                entry["name"],
                figure(own["expected"]),
                figure(own["sd"]),
                _variation(own),
                figure(own["no_loss"]),
                *(figure(by_level[level]["var"]) for level in levels),
                figure(by_level[0.99]["tvar"]),
                UNLIMITED if own["most"] is None else own["most"],
            )
        )
    columns = (
        Column("Option"),
        Column("Expected retained", "money", ranged=True),
        Column("Standard deviation", "money", ranged=True),
        Column("CV", "ratio", ranged=True),
        Column("Years with nothing retained", "probability", ranged=True),
        *(Column(f"Worst year at {digits.percent(level)}", "money", ranged=True) for level in levels),
        Column("TVaR 99%", "money", ranged=True),
        Column("Most retained in a year", "money"),
    )
    notes = (
        "Worst year at a level: in that part of the years no more is retained. TVaR 99%: the average of the "
        "worst one in a hundred. A range below a figure is its guaranteed bracket (exact engine) or 95% "
        "interval (simulation); a figure without one comes from a formula.",
        *_left_out(options, chosen),
        *reasons([cell for row in rows for cell in row]),
    )
    return Table("Option retained", f"What you keep, {currency} a year", columns, tuple(rows), notes)


def ceded(options: Entry, entries: Sequence[Entry] | None = None) -> Table:
    """What every option buys: expected ceded loss, ratios, premium and credit."""
    chosen = options["options"] if entries is None else entries
    currency = options["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = []
    for entry in chosen:
        premium, credit = entry["premium"], entry["credit"]
        rows.append(
            (
                entry["name"],
                figure(entry["ceded"]["expected"]),
                plain(entry["loss_elimination_ratio"]),
                figure(entry["aggregate_charge"]) if entry["aggregate_charge"] else Absent("no cap"),
                plain(entry["increased_limit_factor"], "no limit"),
                figure(premium),
                premium["source"],
                BASE if entry["base"] else plain(credit["amount"]),
                BASE if entry["base"] else plain(credit["part"]),
                BASE if entry["base"] else credit["source"],
                BASE if entry["base"] else plain(entry["break_even"], "keeps no more"),
            )
        )
    columns = (
        Column("Option"),
        Column("Expected ceded", "money", ranged=True),
        Column("Loss elimination ratio", "probability"),
        Column("Charge for the cap", "money", ranged=True),
        Column("Increased limit factor", "ratio"),
        Column("Premium before tax", "money", ranged=True),
        Column("Premium is"),
        Column("Premium credit", "money"),
        Column("Credit, part of base premium", "probability"),
        Column("Credit is"),
        Column("Credit per unit of extra retained loss", "ratio"),
    )
    notes = (
        "Premium credit: premium of the base option less that of this one. Above 1, the last column says "
        "that the credit is larger than the extra loss expected to be kept. Mixed: one of the two premiums "
        "is quoted, the other modelled.",
        *_reinstated_note(chosen),
        *_left_out(options, chosen),
    )
    return Table("Option premium", f"What you buy, {currency} a year", columns, tuple(rows), notes)


def reinstated(entries: Sequence[Entry]) -> bool:
    """Whether any of the options has reinstatements that are paid."""
    return any(entry["premium"]["reinstatement"] for entry in entries)


def _reinstated_note(entries: Sequence[Entry]) -> tuple[str, ...]:
    if not reinstated(entries):
        return ()
    return (
        "Where reinstatements are paid the premium is the initial one; the credit counts the reinstatement "
        "premium expected as well.",
    )


def total(options: Entry, entries: Sequence[Entry] | None = None) -> Table:
    """Expected total cost of risk of every option, and what it is made of."""
    chosen = options["options"] if entries is None else entries
    currency, paid = options["portfolio"]["currency"], reinstated(options["options"])
    rows: list[tuple[Cell, ...]] = []
    for entry in chosen:
        own, costs = entry["total"], entry["costs"]
        rows.append(
            (
                entry["name"],
                figure(entry["retained"]["expected"]),
                figure(entry["premium"]),
                *((plain(costs["reinstatement"]),) if paid else ()),
                plain(costs["premium_tax"]),
                plain(costs["collateral"]),
                plain(costs["claims_handling"]),
                figure(own["expected"]),
                figure(own["capital"]),
                figure(own["with_capital"]),
            )
        )
    columns = (
        Column("Option"),
        Column("Expected retained", "money", ranged=True),
        Column("Premium", "money", ranged=True),
        *((Column("Reinstatement premium", "money"),) if paid else ()),
        Column("Premium tax", "money"),
        Column("Collateral", "money"),
        Column("Claims handling", "money"),
        Column("Expected total cost", "money", ranged=True),
        Column("Cost of capital", "money", ranged=True),
        Column("Total with capital", "money", ranged=True),
    )
    notes = (
        "Expected total cost: expected retained, premium, "
        f"{'reinstatement premium expected, ' if paid else ''}tax, collateral and claims handling.",
        *_left_out(options, chosen),
        *reasons([cell for row in rows for cell in row]),
    )
    return Table("Option cost", f"What it costs on average, {currency} a year", columns, tuple(rows), notes)


def bad_years(options: Entry, entries: Sequence[Entry] | None = None) -> Table:
    """Total cost of every option in bad years, and what the options are to each other."""
    chosen = options["options"] if entries is None else entries
    currency = options["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = []
    for entry in chosen:
        levels = {row["level"]: row["total"] for row in entry["total"]["levels"]}
        rows.append(
            (
                entry["name"],
                *(figure(levels[level]) for level in PERIODS),
                _beats(entry),
                _dominated(entry),
            )
        )
    columns = (
        Column("Option"),
        *(Column(f"Total in a {period} year", "money", ranged=True) for period in PERIODS.values()),
        Column("Years in which it costs less than the base", "probability"),
        Column("Dominated by"),
    )
    held = f" and in each of {options['draws']} parameter draws" if options["draws"] else ""
    again = reinstated(options["options"])
    notes = (
        "Total cost in a bad year: the worst year retained at that level, and everything that is paid "
        "whatever happens"
        f"{', with the reinstatement premium of that year' if again else ''}. All "
        "options meet the same simulated years.",
        "Dominated: another option costs no more on average, in every bad year of the table and in the mean "
        f"of the worst hundredth, at the estimates{held}.",
        "Years in which it costs less than the base: counted in the simulated years. The command lossagg "
        "price --annual FILE writes what every option keeps and cedes in each of them; to what is kept, add "
        "the expected total cost less the expected retained."
        f"{AGAIN if again else ''}",
        *_left_out(options, chosen),
    )
    return Table("Option years", f"What it costs in a bad year, {currency}", columns, tuple(rows), notes)


def _beats(entry: Entry) -> Cell:
    if entry["base"]:
        return BASE
    beats = entry["beats_base"]
    return Absent("not computed") if beats is None else Estimated(beats["value"], beats["standard_error"])


def _dominated(entry: Entry) -> Cell:
    if entry["dominated_by"]:
        return _names(entry["dominated_by"])
    better = entry["dominated_at_estimates"]
    return f"not in every draw. At the estimates: {_names(better)}" if better else NONE


def _names(names: Sequence[str]) -> str:
    return "; ".join(names[:3]) + (f" and {len(names) - 3} more" if len(names) > 3 else "")


def _variation(own: Entry) -> Cell:
    """The coefficient of variation, with its range where mean and deviation have one."""
    if own["cv"] is None:
        return Absent("does not exist")
    low, high = own["cv_range"] or (None, None)
    if low is None or high is None or high - low <= 1e-9 * own["cv"]:
        return float(own["cv"])
    return Ranged(own["cv"], low, high)
