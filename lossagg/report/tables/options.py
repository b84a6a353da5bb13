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
    """The terms of every option."""
    chosen = options["options"] if entries is None else entries
    rows = tuple((e["name"], e["description"], (e["terms"] or {}).get("order", "")) for e in chosen)
    columns = (Column("Option"), Column("Terms"), Column("Order of operations"))
    return Table("Option terms", "Options: terms", columns, rows)


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
                plain(own["cv"]),
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
        Column("CV", "number"),
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
        Column("Increased limit factor", "number"),
        Column("Premium before tax", "money", ranged=True),
        Column("Premium is"),
        Column("Premium credit", "money"),
        Column("Credit, part of base premium", "probability"),
        Column("Credit is"),
        Column("Credit per unit of extra retained loss", "number"),
    )
    notes = (
        "Premium credit: premium of the base option less that of this one. Above 1, the last column says "
        "that the credit is larger than the extra loss expected to be kept.",
        *_left_out(options, chosen),
    )
    return Table("Option premium", f"What you buy, {currency} a year", columns, tuple(rows), notes)


def total(options: Entry, entries: Sequence[Entry] | None = None) -> Table:
    """Expected total cost of risk of every option, and what it is made of."""
    chosen = options["options"] if entries is None else entries
    currency = options["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = []
    for entry in chosen:
        own, costs = entry["total"], entry["costs"]
        rows.append(
            (
                entry["name"],
                figure(entry["retained"]["expected"]),
                figure(entry["premium"]),
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
        Column("Premium tax", "money"),
        Column("Collateral", "money"),
        Column("Claims handling", "money"),
        Column("Expected total cost", "money", ranged=True),
        Column("Cost of capital", "money", ranged=True),
        Column("Total with capital", "money", ranged=True),
    )
    notes = (
        "Expected total cost: expected retained, premium, tax, collateral and claims handling.",
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
                _names(entry["dominated_by"]),
            )
        )
    columns = (
        Column("Option"),
        *(Column(f"Total in a {period} year", "money", ranged=True) for period in PERIODS.values()),
        Column("Years in which it costs less than the base", "probability"),
        Column("Dominated by"),
    )
    held = f" and in each of {options['draws']} parameter draws" if options["draws"] else ""
    notes = (
        "Total cost in a bad year: the worst year retained at that level, and everything that is paid "
        "whatever happens. All options meet the same simulated years.",
        "Dominated: another option costs no more on average, in every bad year of the table and in the mean "
        f"of the worst hundredth, at the estimates{held}.",
        *_left_out(options, chosen),
    )
    return Table("Option years", f"What it costs in a bad year, {currency}", columns, tuple(rows), notes)


def _beats(entry: Entry) -> Cell:
    if entry["base"]:
        return BASE
    beats = entry["beats_base"]
    return Absent("not computed") if beats is None else Estimated(beats["value"], beats["standard_error"])


def _names(names: Sequence[str]) -> Cell:
    if not names:
        return NONE
    return ", ".join(names[:3]) + (f" and {len(names) - 3} more" if len(names) > 3 else "")


def parts(options: Entry) -> Table:
    """How each modelled premium is made: everything needed to compute it by hand."""
    basis, currency = options["basis"], options["portfolio"]["currency"]
    rows = tuple(
        (
            entry["name"],
            plain(entry["premium"]["parts"]["ceded"]),
            plain(entry["premium"]["parts"]["loss_adjustment"], "none"),
            plain(entry["premium"]["parts"]["fixed_expense"], "none"),
            plain(entry["premium"]["parts"]["risk_load"], "none"),
            plain(entry["premium"]["parts"]["variable"], "none"),
            plain(entry["premium"]["modelled"]),
            entry["premium"]["value"] if entry["premium"]["source"] == "quoted" else Absent("not quoted"),
        )
        for entry in options["options"]
    )
    columns = (
        Column("Option"),
        Column("Expected ceded", "amount"),
        Column("Loss adjustment", "amount"),
        Column("Fixed expense", "amount"),
        Column("Risk load", "amount"),
        Column("Variable expense and profit", "amount"),
        Column("Modelled premium", "amount"),
        Column("Quoted premium", "amount"),
    )
    share = basis["variable_expense"] + basis["profit"]
    notes = (
        f"Modelled premium = (expected ceded x {1 + basis['loss_adjustment']:g} + fixed expense + "
        f"risk load) / {1 - share:g}.",
    )
    return Table("Premium parts", f"Modelled premiums, {currency}", columns, rows, notes)


def ranges(options: Entry) -> Table:
    """What the uncertainty of the parameters leaves open, 95 % of the draws."""
    currency, level = options["portfolio"]["currency"], digits.percent(options["frontier_level"])
    rows: list[tuple[Cell, ...]] = []
    for entry in options["options"]:
        drawn = entry["parameters"]
        if drawn is None:
            continue
        own = {row["level"]: row["var"] for row in entry["retained"]["levels"]}
        rows.append(
            (
                entry["name"],
                _drawn(entry["retained"]["expected"], drawn["retained"]),
                _drawn(own[options["frontier_level"]], drawn["worst_year"]),
                _drawn(entry["ceded"]["expected"], drawn["ceded"]),
                _drawn(entry["total"]["expected"], drawn["total"]),
            )
        )
    columns = (
        Column("Option"),
        Column("Expected retained", "money", ranged=True),
        Column(f"Worst year at {level}", "money", ranged=True),
        Column("Expected ceded", "money", ranged=True),
        Column("Expected total cost", "money", ranged=True),
    )
    notes = (
        f"The range below a figure holds 95% of {options['draws']} draws of the fitted parameters. Premium "
        "and costs stay at the figures of the table: they are agreed before anybody knows the parameters.",
    )
    return Table("Option ranges", f"Range of the parameters, {currency} a year", columns, tuple(rows), notes)


def _drawn(entry: Entry, limits: Sequence[float | None] | None) -> Cell:
    if entry["value"] is None:
        return absent(entry["reason"])
    if limits is None:
        return Ranged(entry["value"], None, None, "not computed for this option")
    return Ranged(entry["value"], limits[0], limits[1])


def history(options: Entry, entries: Sequence[Entry] | None = None) -> Table:
    """What each option would have kept and cost in each past year."""
    past, currency = options["history"], options["portfolio"]["currency"]
    names = {e["name"] for e in (options["options"] if entries is None else entries)}
    rows: list[tuple[Cell, ...]] = []
    for own in past["options"] if past else ():
        if own["option"] not in names:
            continue
        for k, year in enumerate(past["years"]):
            total_cost = None if own["total"] is None else own["total"][k]
            rows.append(
                (
                    own["option"],
                    str(year),
                    past["events"][k],
                    past["gross"][k],
                    own["retained"][k],
                    own["ceded"][k],
                    plain(total_cost),
                )
            )
    columns = (
        Column("Option"),
        Column("Year"),
        Column("Events", "count"),
        Column("Losses, trended", "money"),
        Column("Retained", "money"),
        Column("Ceded", "money"),
        Column("Total cost", "money"),
    )
    notes = () if past is None else (past["note"],)
    return Table("Option as-if", f"Past years on these terms, {currency}", columns, tuple(rows), notes)


def past_costs(options: Entry, entries: Sequence[Entry]) -> Table:
    """Total cost of each option in each past year, one column per year."""
    past, currency = options["history"], options["portfolio"]["currency"]
    names = [entry["name"] for entry in entries]
    rows: list[tuple[Cell, ...]] = [("Losses, trended", *past["gross"], past["mean"])]
    for own in past["options"]:
        if own["option"] in names:
            costs = own["total"] or [None] * len(past["years"])
            rows.append((own["option"], *(plain(cost) for cost in costs), plain(own["mean"])))
    columns = (
        Column("Option"),
        *(Column(str(year), "money") for year in past["years"]),
        Column("Mean", "money"),
    )
    title = f"Total cost each option would have had in past years, {currency}"
    return Table("Option past", title, columns, tuple(rows), (past["note"],))


def curves(options: Entry) -> tuple[Table, ...]:
    """Loss elimination, layers, increased limits and exposure curve as tables."""
    data, currency = options["curves"], options["portfolio"]["currency"]
    elimination = Table(
        "Loss elimination",
        f"Loss elimination and excess factors, {currency}",
        (
            Column("Amount", "amount"),
            Column("Loss elimination ratio", "number"),
            Column("Excess loss factor", "number"),
            Column("Events above, a year", "number"),
        ),
        tuple(
            (row["amount"], row["factor"], row["excess_factor"], row["events_above"])
            for row in data["loss_elimination"]
        ),
    )
    layers = Table(
        "Layer costs",
        f"Expected cost of layers, {currency} a year",
        (
            Column("From", "amount"),
            Column("To", "amount"),
            Column("Events, a year", "number"),
            Column("Expected cost", "amount"),
            Column("Cost / width", "number"),
        ),
        tuple((r["from"], r["to"], r["events"], r["cost"], r["rate_on_line"]) for r in data["layers"]),
    )
    limits = Table(
        "Increased limits",
        f"Increased limit factors, basic limit {data['basic_limit'] or 0:,.0f} {currency}",
        (Column("Limit", "amount"), Column("Factor", "number")),
        tuple((row["amount"], row["factor"]) for row in data["increased_limits"]),
    )
    exposure = Table(
        "Exposure curve",
        f"Exposure curve, largest loss {data['largest_loss'] or 0:,.0f} {currency}",
        (
            Column("Part of the largest", "number"),
            Column("Amount", "amount"),
            Column("Factor", "number"),
        ),
        tuple((row["share"], row["amount"], row["factor"]) for row in data["exposure"]),
    )
    return tuple(table for table in (elimination, layers, limits, exposure) if table.rows)


def checks(options: Entry) -> Table:
    """Exact figures against the simulated years, option by option."""
    rows = tuple(
        (
            entry["name"],
            row["measure"],
            "" if row["level"] is None else digits.percent(row["level"]),
            row["exact"][0],
            row["exact"][1],
            Estimated(row["simulated"][0], row["standard_error"]),
            Estimated(row["simulated"][1], row["standard_error"]),
            "yes" if row["agrees"] else "NO",
        )
        for entry in options["options"]
        for row in entry["check"]["comparisons"]
    )
    columns = (
        Column("Option"),
        Column("Measure"),
        Column("Level"),
        Column("Exact, low", "number"),
        Column("Exact, high", "number"),
        Column("Simulated, low", "number"),
        Column("Simulated, high", "number"),
        Column("Agree"),
    )
    notes = (
        "Years above the worst year: no more than that part of the simulated years may lie above the upper "
        "end of its bracket, no fewer above the lower end. Agree: within four standard errors of the "
        "simulation; where not, the option is withheld.",
    )
    return Table("Option checks", "Exact against simulated figures", columns, rows, notes)


def basis(options: Entry) -> Table:
    """Loads, costs and appetite as stated: what is not stated is zero or absent."""
    rows = tuple((name.replace("_", "-"), _stated(value)) for name, value in options["basis"].items())
    subject = options["subject"]
    cap = "none" if subject["event_cap"] is None else f"{subject['event_cap']:,.2f}"
    extra = (("lines", ", ".join(subject["lines"])), ("event-cap", cap))
    return Table("Option basis", "What the table rests on", (Column("Key"), Column("Value")), (*extra, *rows))


def _stated(value: object) -> str:
    if value is None:
        return "not stated"
    if isinstance(value, dict):
        return ", ".join(f"{name.replace('_', '-')} = {_stated(part)}" for name, part in value.items())
    return f"{value:,.10g}" if isinstance(value, float) else str(value)


def every_option_table(options: Entry) -> tuple[Table, ...]:
    """All tables of the options, for the workbook."""
    return (
        retained(options),
        ceded(options),
        total(options),
        bad_years(options),
        terms(options),
        parts(options),
        ranges(options),
        history(options),
        *curves(options),
        checks(options),
        basis(options),
    )
