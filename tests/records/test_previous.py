"""The records beside those of the previous quarter: handed in again, gone, or rewritten."""

import datetime as dt
from collections.abc import Callable
from pathlib import Path

import pytest

from lossagg.records import CheckedLosses, RecordsError, check_losses, follow_claims, read_losses

HEADINGS = "claim,date,amount,status,line"
EARLIER = [
    f"C{k:02d},202{k % 5}-03-0{1 + k % 9},{1000 + k},{'closed' if k % 2 else 'open'},A" for k in range(40)
]
TERMS = {"valuation_date": dt.date(2025, 12, 31), "currency": "EUR", "tolerance": 0.9}
Checked = Callable[..., CheckedLosses]


@pytest.fixture
def checked(tmp_path: Path) -> Checked:
    """Write rows to a file of a name, and check them."""

    def _checked(name: str, rows: list[str], headings: str = HEADINGS, **terms: object) -> CheckedLosses:
        (tmp_path / name).write_text("\n".join([headings, *rows]) + "\n")
        return check_losses(read_losses(tmp_path / name), **{**TERMS, **terms})  # type: ignore[arg-type]

    return _checked


def changed(**rows: str | None) -> list[str]:
    """The earlier rows, some replaced or left out."""
    new = [rows.get(row[:3], row) for row in EARLIER]
    return [row for row in new if row is not None] + ["C99,2025-03-01,7,open,A"]


def test_59_last_quarters_file_again_stops_unless_it_is_confirmed(checked: Checked) -> None:
    now, earlier = checked("q4.csv", EARLIER), checked("q3.csv", EARLIER)
    with pytest.raises(RecordsError) as error:
        follow_claims(now, earlier)
    assert str(error.value) == (
        "the records are those of the previous quarter, q3.csv, handed in again, in file q4.csv; seen: "
        f"'SHA-256 {now.table.sha256[:16]}...'. Supply the new extract; if nothing happened since, confirm "
        "it with unchanged = true."
    )
    followed = follow_claims(now, earlier, unchanged=True)
    assert [found.action for found in followed.findings] == ["warn"]
    assert (followed.earlier, followed.claims, followed.new, followed.vanished) == (40, 40, 0, 0)


def test_59_the_same_rows_in_another_order_are_seen_too(checked: Checked) -> None:
    now, earlier = checked("q4.csv", EARLIER[::-1]), checked("q3.csv", EARLIER)
    assert now.table.sha256 != earlier.table.sha256
    with pytest.raises(RecordsError, match=r"handed in again.*seen: 'every row the same'"):
        follow_claims(now, earlier)


def test_59_a_confirmation_of_other_records_stops(checked: Checked) -> None:
    now, earlier = checked("q4.csv", changed()), checked("q3.csv", EARLIER)
    with pytest.raises(RecordsError, match=r"confirmed to be those of q3\.csv, but they differ"):
        follow_claims(now, earlier, unchanged=True)


REWRITTEN = {
    "C07": None,
    "C01": "C01,2021-03-02,1001,open,A",
    "C02": "C02,2022-03-03,100.2,open,A",
    "C03": "C03,2023-03-04,1500,closed,A",
    "C04": "C04,2019-03-05,1004,open,A",
    "C06": "C06,2021-03-07,4000,open,A",
}


def test_60_claims_that_vanished_or_were_rewritten_are_listed(checked: Checked) -> None:
    now, earlier = checked("q4.csv", changed(**REWRITTEN)), checked("q3.csv", EARLIER)
    followed = follow_claims(now, earlier, tolerance=0.2)
    assert [str(found).partition(". ")[0] for found in followed.findings] == [
        "the claim stood in q3.csv and is gone, in file q3.csv, row 9, column 'amount'; seen: 'C07'",
        "the claim was closed in q3.csv and is open now, in file q4.csv, row 3, column 'status'; seen: 'C01'",
        "the claim fell to 100.20 from 1,002.00 in q3.csv, in file q4.csv, row 4, column 'amount'; "
        "seen: 'C02'",
        "the claim was closed at 1,003.00 in q3.csv and is closed at 1,500.00 now, in file q4.csv, row 5, "
        "column 'amount'; seen: 'C03'",
        "the loss is dated 2019-03-05, in q3.csv 2024-03-05, in file q4.csv, row 6, column 'date'; "
        "seen: 'C04'",
    ]
    assert all(found.remedy and found.action == "warn" for found in followed.findings)
    counts = followed.to_dict()
    assert counts.pop("file") == "q3.csv"
    assert counts == {
        "earlier": 40,
        "claims": 40,
        "earlier_amount": 40_780.0,
        "amount": 40_780.0 - 1007 - (1002 - 100.2) + 497 + 2994 + 7,
        "new": 1,
        **dict.fromkeys(("vanished", "reopened", "fallen", "rewritten", "moved"), 1),
    }


@pytest.mark.parametrize(
    ("rows", "share"),
    [
        (REWRITTEN, "12.5% of the claims"),
        ({"C03": "C03,2023-03-04,6003,closed,A"}, "12.3% of the money"),
    ],
    ids=["claims", "money"],
)
def test_60_more_than_is_tolerated_stops(checked: Checked, rows: dict[str, str | None], share: str) -> None:
    """Five of forty claims; or one whose 5,000 are 12.3 % of the 40,780 of the earlier file."""
    now, earlier = checked("q4.csv", changed(**rows)), checked("q3.csv", EARLIER)
    with pytest.raises(
        RecordsError, match=rf"{share} of q3\.csv vanished or were rewritten \(.*5\.0%"
    ) as error:
        follow_claims(now, earlier)
    assert {found.action for found in error.value.findings} == {"stop", "warn"}
    follow_claims(now, earlier, tolerance=0.13)


def test_growth_new_claims_and_closing_are_no_differences(checked: Checked) -> None:
    grown = {row[:3]: row.replace("open", "closed").replace(",10", ",20") for row in EARLIER if "open" in row}
    followed = follow_claims(checked("q4.csv", changed(**grown)), checked("q3.csv", EARLIER), tolerance=0.0)
    assert followed.findings == ()


def test_every_claim_gone_stops_and_none_there_before_does_not(checked: Checked) -> None:
    others = [row.replace("C", "D") for row in EARLIER]
    with pytest.raises(RecordsError, match=r"100\.0% of the claims"):
        follow_claims(checked("q4.csv", others), checked("q3.csv", EARLIER))
    with pytest.raises(RecordsError) as error:
        follow_claims(checked("q4.csv", others), checked("q3.csv", EARLIER), tolerance=0.99)
    assert error.value.findings[-1].message.startswith(
        "20 further claims with the same difference (rows 22, "
    )
    assert error.value.findings[-1].count == 20


def test_a_claim_of_another_line_does_not_stand_for_it(checked: Checked) -> None:
    moved = {"C08": EARLIER[8][:-1] + "B"}
    several = {"lines": ["A", "B"]}
    now = checked("q4.csv", changed(**moved), **several).for_line("A")
    earlier = checked("q3.csv", EARLIER, **several).for_line("A")
    found = follow_claims(now, earlier).findings
    assert [(one.code, one.line) for one in found] == [("vanished-claim", "A")]


def test_a_row_set_aside_for_a_fault_still_stands_for_its_claim(checked: Checked) -> None:
    missing = {"C08": "C08,2023-03-09,,open,A"}
    followed = follow_claims(checked("q4.csv", changed(**missing)), checked("q3.csv", EARLIER))
    assert (followed.vanished, followed.fallen) == (0, 1)


def test_without_identifiers_nothing_can_be_followed_which_is_said(checked: Checked) -> None:
    plain = [",".join(row.split(",")[1:]) for row in changed()]
    now = checked("q4.csv", plain, "date,amount,status,line")
    followed = follow_claims(now, checked("q3.csv", EARLIER))
    assert "claims cannot be followed from q3.csv" in str(followed.findings[0])
    assert (followed.earlier, followed.claims, followed.vanished) == (40, 41, None)
