"""Delimited text: read strictly, or stopped with the line at fault. Each test is a file in one state."""

import datetime as dt
import hashlib

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.errors import InputError
from lossagg.records import read_losses

PLAIN = "amount,date,event\n100.50,2024-01-02,007\n200,2024-02-29,008\n"


def codes(table):
    return [finding.code for finding in table.findings]


def test_plain_file_is_typed_and_identifiers_keep_leading_zeros(read) -> None:
    table = read(PLAIN)
    assert table.amount.tolist() == [100.5, 200.0]
    assert table.amount.dtype == np.float64
    assert table.date.astype(object).tolist() == [dt.date(2024, 1, 2), dt.date(2024, 2, 29)]
    assert table.words["event"].tolist() == ["007", "008"]
    assert table.row.tolist() == [2, 3]
    assert table.file == "losses.csv"
    assert table.sha256 == hashlib.sha256(PLAIN.encode()).hexdigest()
    assert table.rows == len(table) == 2
    assert table.findings == ()


def test_byte_order_mark_does_not_reach_the_first_heading(read) -> None:
    table = read(PLAIN.encode("utf-8-sig"))
    assert table.amount.tolist() == [100.5, 200.0]
    assert codes(table) == ["byte-order-mark"]


def test_utf16_is_known_by_its_mark(read) -> None:
    assert read(PLAIN.encode("utf-16")).words["event"].tolist() == ["007", "008"]


@pytest.mark.parametrize(("delimiter", "name"), [(";", "semicolon"), ("\t", "tab"), ("|", "bar")])
def test_other_delimiters_are_found_and_reported(read, delimiter: str, name: str) -> None:
    table = read(PLAIN.replace(",", delimiter))
    assert table.amount.tolist() == [100.5, 200.0]
    assert [str(finding) for finding in table.findings] == [
        f"the fields are divided by a {name}, in file losses.csv. None needed."
    ]


def test_decimal_comma_in_a_semicolon_file_does_not_confuse_the_delimiter(read) -> None:
    table = read("amount;date\n1.234,50;2024-01-02\n7,25;2024-01-03\n", decimal=",", thousands=".")
    assert table.amount.tolist() == [1234.5, 7.25]


def test_ambiguous_delimiter_stops(read) -> None:
    with pytest.raises(InputError, match=r"delimiter is ambiguous: comma and semicolon both divide") as error:
        read("a,b;c\n1,2;3\n4,5;6\n")
    assert "Declare the delimiter" in str(error.value)


def test_declared_delimiter_settles_it(read) -> None:
    assert read("amount,x;date\n1,2;2024-01-01\n", delimiter=";", columns={"amount": "amount,x"}, decimal=",")


def test_one_column_stops(read) -> None:
    with pytest.raises(InputError, match=r"one column only, in file losses.csv, row 1"):
        read("amount\n1\n")


def test_cp1252_needs_its_encoding_declared(read) -> None:
    content = "amount,date,event\n1,2024-01-01,Zürich\n".encode("cp1252")
    with pytest.raises(InputError) as error:
        read(content)
    assert str(error.value) == (
        "the bytes are not utf-8, in file losses.csv, line 2, byte 32; seen: b'\\xfc'. Declare the encoding "
        'the file was written in, for example encoding = "cp1252".'
    )
    assert read(content, encoding="cp1252").words["event"].tolist() == ["Zürich"]


def test_unknown_encoding_is_named(read) -> None:
    with pytest.raises(InputError, match=r"declared encoding is unknown.*seen: 'cp99999'"):
        read(PLAIN, encoding="cp99999")


def test_declared_encoding_against_the_mark_stops(read) -> None:
    with pytest.raises(InputError, match=r"byte order mark of utf-8, another encoding is declared"):
        read(PLAIN.encode("utf-8-sig"), encoding="cp1252")


def test_nul_character_stops_with_its_line(read) -> None:
    with pytest.raises(InputError, match=r"NUL character, in file losses.csv, line 3"):
        read("amount,date\n1,2024-01-01\n2,2024\x00-01-01\n")


@pytest.mark.parametrize(
    ("row", "fields"), [("1,2024-01-01,x,y", 4), ("1,2024-01-01", 2)], ids=["long", "short"]
)
def test_ragged_row_stops_with_row_and_line(read, row: str, fields: int) -> None:
    with pytest.raises(InputError) as error:
        read(f'amount,date,event\n5,2024-01-01,"a\nb"\n{row}\n6,2024-01-01,c\n')
    assert str(error.value) == (
        f"a row has {fields} fields where the headings have 3, in file losses.csv, row 3, line 4. Quote "
        "fields that contain the delimiter, or repair the row."
    )


def test_open_quote_does_not_swallow_the_rest(read) -> None:
    with pytest.raises(InputError, match=r"a quote is opened and never closed, in .*row 3, line 3"):
        read('amount,date,event\n1,2024-01-01,a\n2,2024-01-02,"b\n3,2024-01-03,c\n')


def test_quote_inside_a_field_stops(read) -> None:
    with pytest.raises(InputError, match=r"a record cannot be read: .* row 2, line 2"):
        read('amount,date,event\n1,2024-01-01,"a"b\n')


def test_line_breaks_inside_quotes_are_kept_and_reported(read) -> None:
    table = read('amount,date,event\n1,2024-01-01,"a\nb"\n2,2024-01-02,c\n')
    assert table.row.tolist() == [2, 3]
    assert codes(table) == ["line-breaks"]


def test_old_line_ends_are_line_ends(read) -> None:
    assert read(PLAIN.replace("\n", "\r")).rows == read(PLAIN.replace("\n", "\r\n")).rows == 2


@pytest.mark.parametrize("content", ["", "\n\n  \n"])
def test_empty_file_stops(read, content: str) -> None:
    with pytest.raises(InputError, match=r"the file is empty, in file losses.csv"):
        read(content)


@pytest.mark.parametrize("content", ["amount,date\n", "amount,date\n\n,\n  \n"])
def test_headings_without_rows_stop(read, content: str) -> None:
    with pytest.raises(InputError, match=r"the table has headings but no rows, in file losses.csv"):
        read(content)


def test_blank_rows_at_the_foot_are_no_rows_and_those_between_are_set_aside(check) -> None:
    checked = check("amount,date\n1,2024-01-01\n\n2,2024-01-02\n,\n\n")
    assert checked.reconciliation.to_dict() == {
        "read": 3,
        "used": 2,
        "excluded": 1,
        "amount_read": 3.0,
        "amount_used": 3.0,
        "amount_excluded": 0.0,
        "unvalued": 1,
    }
    assert [(f.code, f.row) for f in checked.findings if "blank" in f.code] == [
        ("blank-row", 3),
        ("blank-foot", None),
    ]


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("a.csv", b"PK\x03\x04rest", "suffix says text but the content is a workbook"),
        ("a.csv", b"PAR1rest", "the content is a Parquet file"),
        ("a.xlsx", b"amount,date\n", "suffix says workbook but the content is of another kind"),
        (
            "a.xlsx",
            b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1",
            "encrypted or an old binary workbook.*Remove the pass",
        ),
        ("a.parquet", b"amount,date\n", "suffix says parquet but the content is of another kind"),
        ("a.xlsm", b"PK\x03\x04", "may carry macros and is not opened.*seen: '.xlsm'"),
        ("a.xls", b"\xd0\xcf", "may carry macros and is not opened"),
        ("a.json", b"[]", "kind of file is not known by its suffix.*seen: '.json'"),
        ("a.parquet", b"", "the file is empty"),
        ("a.parquet", b"PAR1rest", "Parquet file is damaged"),
        ("a.xlsx", b"PK\x03\x04rest", "workbook is damaged"),
    ],
)
def test_content_and_suffix_must_agree(read, name: str, content: bytes, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read(content, name)


def test_missing_file_is_named_without_its_folder(tmp_path) -> None:
    with pytest.raises(InputError) as error:
        read_losses(tmp_path / "none.csv")
    assert str(error.value) == "there is no such file, in file none.csv. Check its name and folder."


@pytest.mark.parametrize(
    ("name", "options"), [("a.csv", {"sheet": "S"}), ("a.parquet", {"encoding": "utf-8"})]
)
def test_options_that_do_not_apply_are_not_ignored(read, name: str, options: dict[str, str]) -> None:
    content = PLAIN if name == "a.csv" else b"PAR1"
    with pytest.raises(InputError, match="does not apply to this kind of file"):
        read(content, name, **options)


@settings(derandomize=True, deadline=None, max_examples=60)
@given(
    rows=st.lists(
        st.tuples(
            st.sampled_from(["1", "2.50", "", " 3", "x;y"]),
            st.sampled_from(["2024-01-02", "", "N/A", "2024-02-31"]),
            st.text(st.characters(exclude_characters='",\r\n\0', exclude_categories=["Cs"]), max_size=6),
        ),
        min_size=1,
        max_size=8,
    ),
    end=st.sampled_from(["\n", "\r\n", "\r"]),
    closed=st.booleans(),
)
def test_text_without_quotes_is_read_as_the_strict_reader_reads_it(
    tmp_path_factory, rows, end: str, closed: bool
) -> None:
    """Independent check of the short way through text without quotes: one quoted heading closes it."""
    body = end.join(",".join(row) for row in rows) + (end if closed else "")
    seen = []
    for heading in ("amount,date,event", '"amount",date,event'):
        path = tmp_path_factory.mktemp("ways") / "losses.csv"
        path.write_bytes((heading + end + body).encode())
        try:
            table = read_losses(path, delimiter=",")
        except InputError as error:
            seen.append(str(error))
        else:
            cells = {name: text.to_pylist() for name, text in table.cells.items()}
            seen.append((table.row.tolist(), cells, table.blank.tolist(), repr(table.findings)))
            different = len(set(rows[: len(table)]))
            assert len(set(table.fingerprint.tolist())) == different
    assert seen[0] == seen[1]
