"""Counts by year beside a list of claims: they must agree, and where they do not both are shown."""

from collections.abc import Callable
from pathlib import Path

import pytest

from lossagg.errors import InputError
from lossagg.records import CheckedLosses, RecordsError, check_counts, read_counts

ROWS = ["C1,2023-05-01,10", "C2,2024-03-01,11", "C3,2024-04-01,", "C4,2024-05-01,13", "C4,2024-05-01,13"]
LIST = "\n".join(["claim,date,amount", *ROWS]) + "\n"
Check = Callable[..., CheckedLosses]
Write = Callable[..., Path]


def test_counts_that_agree_are_silent(check: Check, write: Write) -> None:
    """The row without an amount stands for its claim, the copy does not."""
    check_counts(check(LIST), read_counts(write("year,count\n2023,1\n2024,3\n2025,0\n", "counts.csv")))


def test_69_counts_and_claims_that_disagree_stop_with_both_shown(check: Check, write: Write) -> None:
    counts = read_counts(write("year,claims\n2023,1\n2024,4\n2025,2\n", "n.csv"), columns={"count": "claims"})
    with pytest.raises(RecordsError) as error:
        check_counts(check(LIST), counts)
    assert [str(found) for found in error.value.findings] == [
        "the counts say 4 claims of 2024, the list of claims in losses.csv holds 3 (2 used, 1 set aside), in "
        "file n.csv, row 3, column 'claims'; seen: '4'. Find which of the two is incomplete; leave the "
        "counts out if the list is right.",
        "the counts say 2 claims of 2025, the list of claims in losses.csv holds 0 (0 used, 0 set aside), in "
        "file n.csv, row 4, column 'claims'; seen: '2'. Find which of the two is incomplete; leave the "
        "counts out if the list is right.",
    ]


def test_a_year_the_counts_leave_out_disagrees_unless_it_is_before_the_window(
    check: Check, write: Write
) -> None:
    counts = read_counts(write("year,count\n2024,3\n", "counts.csv"))
    with pytest.raises(RecordsError, match=r"the counts say nothing of 2023, .* holds 1 \(1 used"):
        check_counts(check(LIST), counts)
    check_counts(check(LIST, first_year=2024), counts)


def test_lines_have_their_own_counts(check: Check, write: Write) -> None:
    rows = "\n".join(["claim,date,amount,line", *(f"{row},{'AB'[k > 0]}" for k, row in enumerate(ROWS))])
    checked = check(rows, lines=["A", "B"])
    counts = read_counts(write("year,count,line\n2023,1,a\n2024,3,B\n", "counts.csv"))
    for line in "AB":
        check_counts(checked.for_line(line), counts.for_line(line))
    with pytest.raises(
        InputError, match=r"the counts have no rows for a line, in file counts\.csv; seen: 'C'"
    ):
        counts.for_line("C")


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ("2023,1\n2023,1", "the year stands in more than one row, in file counts.csv, row 3, column 'year'"),
        ("2023,1.5", "no whole number, in file counts.csv, row 2, column 'count'; seen: '1.5'"),
        ("2023,-1", "missing, negative or no whole number"),
        ("2023,", "missing, negative or no whole number"),
        ("23,1", "the year is not a calendar year between 1900 and 2200"),
        ("2023,many", "the count is not a plain number"),
    ],
)
def test_counts_that_cannot_be_used(write: Write, rows: str, message: str) -> None:
    with pytest.raises(InputError) as error:
        read_counts(write(f"year,count\n{rows}\n", "counts.csv"))
    assert message in str(error.value)
