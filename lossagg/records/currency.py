"""Conversion to the currency of the portfolio by a dated table of rates.

A rate says how many units of the portfolio's currency one unit of the other is worth. Every amount of a row
is converted at the latest quotation on or before the date of its loss, and rounded to hundredths as a
ledger would. Converting at the rate of the loss date keeps later movements of the exchange out of the size
of a loss; trend then carries it to the forecast period (common practice, no source).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from decimal import Decimal
from pathlib import Path

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.amounts import NumberStyle
from lossagg.records.changes import Change
from lossagg.records.faults import Fault, list_faults
from lossagg.records.findings import Finding, counted, raise_stops
from lossagg.records.headings import Wanted
from lossagg.records.money import Money
from lossagg.records.raw import Layout
from lossagg.records.small_table import SmallTable, read_small_table
from lossagg.records.table import LossTable
from lossagg.records.words import WordArray, by_word

MONEY = ("amount", "paid", "outstanding", "recoveries", "threshold", "policy-limit", "deductible")
STALE_DAYS = 366
_WANTED = Wanted({"date": "date", "currency": "word", "rate": "number"}, ("date", "currency", "rate"))
_MOST_CENTS = 2.0**52
_REMEDY = "Rates are units of the portfolio's currency for one unit of the other, one a day."


@dataclass(frozen=True)
class RateTable:
    """Rates of exchange by currency, each sorted by date; get one from `read_rates`.

    Args:
        file: name of the file.
        sha256: its digest.
        rows: number of quotations.
        quotations: {currency: (dates, rates)}, each of shape (quotations of it,).
        findings: what was noticed in the file.
    """

    file: str
    sha256: str
    rows: int
    quotations: Mapping[str, tuple[IntArray, FloatArray]]
    findings: tuple[Finding, ...] = ()

    def __repr__(self) -> str:
        """One line: the file, its currencies and the number of quotations."""
        return f"RateTable({self.file!r}, {', '.join(sorted(self.quotations))}, rows={self.rows})"


def read_rates(
    path: str | Path,
    *,
    currency: str,
    columns: Mapping[str, str] | None = None,
    sheet: str | None = None,
    encoding: str | None = None,
    delimiter: str | None = None,
    decimal: str = ".",
    date_format: str | None = None,
) -> RateTable:
    """Read rates of exchange to one currency.

    Args:
        path: a CSV, TSV, XLSX or Parquet file with the columns `date`, `currency` and `rate`.
        currency: the currency converted to, three capital letters.
        columns: {canonical name: heading} where the file uses other headings.
        sheet: sheet of a workbook with several.
        encoding: encoding of a text file that is neither UTF-8 nor marked.
        delimiter: delimiter of a text file where it is not clear.
        decimal: decimal mark.
        date_format: format of the dates unless ISO.

    Returns:
        The rates.

    Raises:
        InputError: the file cannot be read as declared, a date or a rate is missing, zero or negative,
            one currency has two rates on one day, the own currency is not worth 1, or a rate looks
            inverted against the one before it.
        EnvironmentFault: the file cannot be opened.
    """
    layout = Layout(sheet=sheet, encoding=encoding, delimiter=delimiter)
    style = NumberStyle(decimal)
    table = read_small_table(Path(path), _WANTED, columns or {}, layout, style, date_format)
    codes = [word.upper() for word in table.word("currency")]
    _check_cells(table, codes, currency)
    days = table.date("date").astype(np.int64)
    rates = table.number("rate")
    quotations = {}
    for code in sorted(set(codes)):
        at = np.flatnonzero(np.array(codes) == code)
        at = at[np.argsort(days[at], kind="stable")]
        _check_sequence(table, at, days, rates)
        quotations[code] = (days[at], rates[at])
    return RateTable(table.file, table.sha256, len(days), quotations, table.findings)


def _check_cells(table: SmallTable, codes: list[str], currency: str) -> None:
    rates, days = table.number("rate"), table.date("date")
    for at in range(len(codes)):
        if np.isnat(days[at]):
            table.refuse(at, "date", "the date of a rate is missing or no day", _REMEDY)
        if not (len(codes[at]) == 3 and codes[at].isascii() and codes[at].isalpha()):
            table.refuse(at, "currency", "the currency of a rate is not a code of three letters", _REMEDY)
        if not (np.isfinite(rates[at]) and rates[at] > 0):
            table.refuse(at, "rate", "the rate is missing, zero, negative or infinite", _REMEDY)
        if codes[at] == currency and rates[at] != 1.0:
            table.refuse(
                at, "rate", f"the rate of the portfolio's own currency, {currency}, is not 1", _REMEDY
            )


def _check_sequence(table: SmallTable, at: IntArray, days: IntArray, rates: FloatArray) -> None:
    """One rate a day; none that is about the reciprocal of the one before it.

    A rate near 1 is near its reciprocal too, so an inversion shows only where the rate would move by more
    than a third; and a table inverted from its first row to its last cannot be told from a right one here:
    the sizes of the converted amounts are compared by currency for that.
    """
    for before, after in zip(at[:-1].tolist(), at[1:].tolist(), strict=True):
        if days[after] == days[before]:
            table.refuse(after, "date", "the currency has two rates on one day", _REMEDY)
        move = abs(np.log(rates[after] / rates[before]))
        if move > np.log(4 / 3) and abs(np.log(rates[after] * rates[before])) < 0.25 * move:
            what = f"the rate looks inverted: the one before it is {rates[before]:.6g}"
            table.refuse(after, "rate", what, _REMEDY)


def convert_losses(table: LossTable, rates: RateTable, currency: str) -> LossTable:
    """Convert every row to the currency of the portfolio, before the records are checked.

    Args:
        table: the records, with a `currency` column; rows without a currency are left for the checks.
        rates: rates to that currency.
        currency: currency of the portfolio.

    Returns:
        The table in one currency; `changes` keeps the amounts as written.

    Raises:
        InputError: the records have no currency column.
        RecordsError: a currency without rates, or without one on or before the date of a loss.
    """
    if "currency" not in table.words:
        raise InputError(
            "rates are given but the records have no currency column",
            where=place(file=table.file),
            remedy="Map the column that names the currency, or leave the rates out.",
        )
    word = table.words["currency"]
    foreign = by_word(word, lambda code: code.upper() not in ("", currency.upper())) & ~table.blank
    rate, age, faults = _rates_of_rows(table, rates, foreign)
    raise_stops(list_faults(faults, table.places()))
    rows = foreign & np.isfinite(rate)
    numbers = dict(table.numbers)
    for name in set(MONEY) & set(numbers):
        values = numbers[name].copy()
        values[rows] = np.rint(values[rows] * rate[rows] * 100.0) / 100.0
        numbers[name] = values
    exact = _converted(table.exact, rows & ~table.unreadable, numbers["amount"])
    codes = sorted({code.upper() for code in word[rows].present()})
    upper = np.array([code.upper() for code in word.names.to_pylist()])[word.codes]
    ranges = [_range(code, rate[rows & (upper == code)]) for code in codes]
    note = f"converted to {currency} at the latest rate of {rates.file} on or before each loss date, to "
    note += f"hundredths: {', '.join(ranges)}"
    words = {**table.words, "currency": WordArray.of(np.where(rows, currency, np.asarray(word)).tolist())}
    return replace(
        table,
        numbers=numbers,
        words=words,
        exact=exact,
        findings=(*table.findings, *rates.findings, *_stale(table, rates, rows, age)),
        changes=(*table.changes, Change("currency", table.exact, rows, note))
        if rows.any()
        else table.changes,
    )


def _rates_of_rows(
    table: LossTable, rates: RateTable, foreign: BoolArray
) -> tuple[FloatArray, IntArray, list[Fault]]:
    """Rate of each foreign row with a date, age of its quotation in days, and the rows without one."""
    rate, age = np.full(len(table), np.nan), np.zeros(len(table), dtype=np.int64)
    word, dated = table.words["currency"], ~np.isnat(table.date)
    days = table.date.astype(np.int64)
    faults = []
    for code in word[foreign].present():
        mine = foreign & (word == code)
        if code.upper() not in rates.quotations:
            known = ", ".join(sorted(rates.quotations))
            faults.append(
                Fault(
                    "unknown-currency",
                    "stop",
                    "currency",
                    mine,
                    f"the currency has no rate in {rates.file}",
                    f"Add its rates or correct the code; the file has {known}.",
                )
            )
            continue
        quoted, values = rates.quotations[code.upper()]
        at = np.searchsorted(quoted, days, side="right") - 1
        early = mine & dated & (at < 0)
        faults.append(
            Fault(
                "missing-rate",
                "stop",
                "date",
                early,
                f"{rates.file} has no rate of {code.upper()} on or before the date of the loss",
                "Add earlier quotations.",
            )
        )
        good = mine & dated & ~early
        rate[good] = values[at[good]]
        age[good] = days[good] - quoted[at[good]]
    return rate, age, [fault for fault in faults if fault.mask.any()]


def _converted(exact: Money, rows: BoolArray, amount: FloatArray) -> Money:
    """The amounts converted, which are hundredths by now and stand exactly for what their float64 does."""
    converted = exact.copy()
    cents = np.rint(amount * 100.0)
    plain = rows & (np.abs(cents) < _MOST_CENTS)
    converted.units[plain], converted.places[plain] = cents[plain].astype(np.int64), 2
    for at in set(converted.odd) & set(np.flatnonzero(plain).tolist()):
        del converted.odd[at]
    for at in np.flatnonzero(rows & ~plain).tolist():
        converted[at] = Decimal(repr(float(amount[at])))
    return converted


def _range(code: str, rate: FloatArray) -> str:
    low, high = float(rate.min()), float(rate.max())
    return f"{code} at {low:.6g}" + (f" to {high:.6g}" if high > low else "")


def _stale(table: LossTable, rates: RateTable, rows: BoolArray, age: IntArray) -> list[Finding]:
    old = rows & (age > STALE_DAYS)
    if not old.any():
        return []
    return [
        Finding(
            "stale-rate",
            "warn",
            table.file,
            None,
            table.headings["currency"],
            None,
            f"{counted(int(old.sum()), 'row')} converted at a rate more than a year older than the loss",
            f"Add later quotations to {rates.file}.",
            sheet=table.sheet,
            count=int(old.sum()),
        )
    ]
