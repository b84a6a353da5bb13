"""Tables behind the options: how premiums are made, ranges of parameters, past years, curves, checks."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.report import digits
from lossagg.report.cells import Absent, Cell, Column, Estimated, Ranged, Table, clean
from lossagg.report.reading import Entry, absent
from lossagg.report.tables.options import bad_years, ceded, plain, reinstated, retained, terms, total


def parts(options: Entry) -> Table:
    """How each modelled premium and the cost of claims handling are made, ready to be computed by hand."""
    basis, currency = options["basis"], options["portfolio"]["currency"]
    paid, load = reinstated(options["options"]), basis["risk_load"]
    method = load["method"] if load and load["factor"] else None
    rows = tuple(
        (
            entry["name"],
            plain(entry["premium"]["parts"]["ceded"]),
            *((_spread(entry, method),) if method else ()),
            plain(entry["premium"]["parts"]["loss_adjustment"], "none"),
            plain(entry["premium"]["parts"]["fixed_expense"], "none"),
            plain(entry["premium"]["parts"]["risk_load"], "none"),
            plain(entry["premium"]["parts"]["variable"], "none"),
            *((_fraction(entry),) if paid else ()),
            plain(entry["premium"]["modelled"]),
            entry["premium"]["value"] if entry["premium"]["source"] == "quoted" else Absent("not quoted"),
            entry["retained"]["events"],
        )
        for entry in options["options"]
    )
    columns = (
        Column("Option"),
        Column("Expected ceded", "amount"),
        *((Column(_spread_heading(load), "amount"),) if method else ()),
        Column("Loss adjustment", "amount"),
        Column("Fixed expense", "amount"),
        Column("Risk load", "amount"),
        Column("Variable expense and profit", "amount"),
        *((Column("Reinstatement premium, times the initial", "number"),) if paid else ()),
        Column("Modelled premium", "amount"),
        Column("Quoted premium", "amount"),
        Column("Events a year of which something is kept", "number"),
    )
    share = basis["variable_expense"] + basis["profit"]
    notes = (
        f"Modelled premium = (expected ceded x {1 + basis['loss_adjustment']:g} + fixed expense + "
        f"risk load) / {1 - share:g}{', divided by one and the reinstatement premium' if paid else ''}.",
        *_load_note(load),
        *_handling_note(basis["claims_handling"]),
    )
    return Table("Premium parts", f"How premiums are made, {currency}", columns, rows, notes)


def _spread(entry: Entry, method: str) -> Cell:
    """What the risk load is taken of, beside the expected ceded loss."""
    found = entry["ceded"]["tail"] if method == "cost-of-capital" else entry["ceded"]["sd"]
    return Absent("none") if found is None else plain(found["value"])


def _spread_heading(load: Entry) -> str:
    if load["method"] == "cost-of-capital":
        return f"TVaR {digits.percent(load['level'])} of ceded"
    return "Standard deviation of ceded"


def _load_note(load: Entry | None) -> tuple[str, ...]:
    if not load or not load["factor"]:
        return ()
    of = {
        "cost-of-capital": "(tail value at risk - expected ceded)",
        "sd": "standard deviation of ceded",
        "variance": "standard deviation of ceded squared",
    }
    return (f"Risk load = {load['factor']:g} x {of[load['method']]}.",)


def _handling_note(handling: Entry | None) -> tuple[str, ...]:
    if not handling:
        return ()
    per_event, share = handling["per_event"], handling["share"]
    return (f"Claims handling = {per_event:,.10g} x events + {share:g} x expected retained.",)


def _fraction(entry: Entry) -> Cell:
    again = entry["premium"]["reinstatement"]
    return Absent("none") if again is None else plain(again["fraction"]["value"])


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
        f"The range below a figure holds 95% of {options['draws']} draws of the fitted parameters, all of "
        "which the command lossagg price writes to draws.csv. Premium and costs stay at the figures of the "
        "table: they are agreed before anybody knows the parameters.",
        *_simulated_note(options["options"]),
    )
    return Table("Option ranges", f"Range of the parameters, {currency} a year", columns, tuple(rows), notes)


def draws(options: Entry) -> Table:
    """Every parameter draw of every option: what the ranges and the dominated options are taken from."""
    drawn = options["drawn"] or {"levels": [], "tail_level": 0.99, "options": []}
    columns = (
        Column("Option"),
        Column("Draw", "count"),
        Column("Expected retained", "amount"),
        Column("Expected ceded", "amount"),
        *(Column(f"Worst year at {digits.percent(level)}", "amount") for level in drawn["levels"]),
        Column(f"TVaR {digits.percent(drawn['tail_level'])}", "amount"),
        Column("Reinstatement premium, times the initial", "number"),
    )
    rows = tuple(
        (own["option"], k, *(plain(value, "") for value in values))
        for own in drawn["options"]
        for k, values in enumerate(
            zip(
                own["retained"],
                own["ceded"],
                *own["worst_years"],
                own["tail"],
                own["reinstatement"],
                strict=True,
            ),
            start=1,
        )
    )
    return Table("Option draws", "Options under drawn parameters", columns, rows)


def _simulated_note(entries: Sequence[Entry]) -> tuple[str, ...]:
    """Which worst years a draw simulates, because they take two annual sums at once."""
    names = [entry["name"] for entry in entries if entry["parameters"] and entry["parameters"]["simulated"]]
    if not names:
        return ()
    listed = "; ".join(names[:3]) + (f" and {len(names) - 3} more" if len(names) > 3 else "")
    return (
        f"The worst year of {clean(listed)} is simulated in every draw with few years: its range is a little "
        "too wide, and takes no part in saying which option is dominated.",
    )


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
    if data is None:
        return ()
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
    label = (("label", subject["label"]),) if subject.get("label") else ()
    extra = (*label, ("lines", ", ".join(subject["lines"])), ("event-cap", cap))
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
