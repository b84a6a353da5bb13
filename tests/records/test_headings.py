"""Headings: mapped, compared without case, and never guessed when missing or doubled."""

import pytest

from lossagg.errors import InputError

ROW = "\n1,2024-01-01,x\n"


def test_mapping_reads_other_headings_and_findings_name_them(check) -> None:
    checked = check(
        "Gross incurred,Loss date\n-1,2024-01-01\n2,2024-01-01\n",
        columns={"amount": "Gross incurred", "date": "Loss date"},
    )
    assert str(checked.findings[0]) == (
        "the amount is negative, in file losses.csv, row 2, column 'Gross incurred'; seen: '-1'. Give "
        "recoveries in their own column and amounts gross of them."
    )


def test_headings_are_compared_without_case_spaces_and_invisible_characters(read) -> None:
    table = read("\u200bAmount , DATE,Policy_Limit\n1,2024-01-01,5\n")
    assert sorted(table.headings) == ["amount", "date", "policy-limit"]


def test_mapping_to_a_missing_heading_names_the_nearest(read) -> None:
    with pytest.raises(InputError) as error:
        read("Gross incurred,date,x" + ROW, columns={"amount": "Gros incured"})
    assert str(error.value) == (
        "the column mapping names a heading for 'amount' that is not in the file, in file losses.csv, row 1; "
        "seen: 'Gros incured'. Did you mean 'Gross incurred'?"
    )


def test_mapping_of_an_unknown_name_names_the_nearest(read) -> None:
    with pytest.raises(InputError, match=r"not understood.*seen: 'recovery'. Did you mean 'recoveries'\?"):
        read("amount,date,x" + ROW, columns={"recovery": "x"})


def test_one_heading_for_two_columns_stops(read) -> None:
    with pytest.raises(InputError, match="one heading is mapped to two columns"):
        read("amount,date,x" + ROW, columns={"date": "date", "reported": "date"})


def test_missing_required_heading_names_the_nearest(read) -> None:
    with pytest.raises(InputError, match=r"required column 'amount' is missing.*Did you mean 'amounts'\?"):
        read("amounts,date,x" + ROW)


def test_file_without_headings_is_recognised_and_its_data_not_echoed(read) -> None:
    with pytest.raises(InputError, match="The first row looks like data") as error:
        read("Jane Miller,2024-01-01,1200.50\nJohn Smith,2024-01-02,7\n")
    assert "Miller" not in str(error.value)


@pytest.mark.parametrize("columns", [{}, {"amount": "Cost"}])
def test_a_first_row_that_is_a_note_or_a_record_is_not_echoed(read, columns) -> None:
    """Nothing in it is like a heading, so it may be about a person."""
    for first in ("Extract for Jane Miller,x", "Jane Miller,12 Main Street"):
        with pytest.raises(InputError, match="No cell of the first row is like a heading") as error:
            read(f"{first}\nJohn Smith,y\n", columns=columns)
        assert "Miller" not in str(error.value)
        assert "Street" not in str(error.value)
    with pytest.raises(InputError, match="There are 'date', 'cost'"):
        read("date,cost\n2024-01-01,5\n")


def test_empty_heading_stops(read) -> None:
    with pytest.raises(InputError, match=r"the heading of column 2 of 3 is empty, in file losses.csv, row 1"):
        read("amount, ,date\n1,2,2024-01-01\n")


def test_doubled_heading_stops(read) -> None:
    with pytest.raises(InputError, match=r"columns 1 and 3 have the same heading.*seen: 'AMOUNT '|'AMOUNT'"):
        read("amount,date,AMOUNT\n1,2024-01-01,3\n")


def test_unread_columns_are_named_and_their_cells_never_shown(check) -> None:
    checked = check("amount,date,person,recoverys\n1,2024-01-01,Jane Miller,0\n-5,2024-01-01,John Smith,0\n")
    finding = next(f for f in checked.findings if f.code == "unread-columns")
    assert finding.message == "2 columns are not read: 'person', 'recoverys'"
    assert finding.remedy == "'recoverys' looks like 'recoveries': map it if it is."
    text = " ".join(f"{f} {f.to_dict()}" for f in checked.findings)
    assert "Miller" not in text
    assert "Smith" not in text
    assert not hasattr(checked.table.cells, "person")
    assert "person" not in checked.table.cells


def test_a_name_mapped_to_the_amount_is_not_echoed(read) -> None:
    for text in ("Jane Miller", "Ann", "Miller 12", "Ng, A."):
        with pytest.raises(InputError, match="the amount is not a plain number") as error:
            read(f'amount,date\n"{text}",2024-01-01\n')
        assert text not in str(error.value)
        assert f"<text of {len(text)} characters>" in str(error.value)
