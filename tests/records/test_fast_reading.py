"""The fast ways agree with the slow ones: text parsed in compiled code, rows marked, numbers of Parquet."""

import csv
import io
import random
import struct
from decimal import Decimal

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.records import read_losses
from lossagg.records.marks import mark_column
from lossagg.records.plain_text import parse_plain

PIECES = st.sampled_from(["a", "1", " ", '"', '""', ",", ";", "\n", "\r\n", "\r", "é", "\t", '","', '"\n"'])


@settings(derandomize=True, deadline=None, max_examples=1500)
@given(pieces=st.lists(PIECES, min_size=1, max_size=14))
def test_text_is_parsed_as_the_strict_reader_parses_it_or_not_at_all(pieces: list[str]) -> None:
    """Any text at all: where the fast way gives rows, the csv module of Python, strict, gives the same."""
    text = "h,k\n" + "".join(pieces)
    batches = parse_plain(text.encode(), ",", 2)
    if batches is None:
        return
    fast = [list(row.values()) for batch in batches for row in batch.to_pylist()]
    strict = list(csv.reader(io.StringIO(text, newline=""), strict=True))[1:]
    assert fast == [row or ["", ""] for row in strict]


@pytest.mark.parametrize(
    "text", ['h,k\n1,"2,""3"""\n', "h,k\n1,2", 'h,k\r\n"1",2\r\n', "h,k\n\n1,2\n\n", 'h,k\n"",\n']
)
def test_ordinary_text_takes_the_fast_way(text: str) -> None:
    """Guards the property above against passing because everything is left to the strict reader."""
    assert parse_plain(text.encode(), ",", 2) is not None


@settings(derandomize=True, deadline=None, max_examples=200)
@given(cells=st.lists(st.text(max_size=30), min_size=1, max_size=20))
def test_rows_are_marked_alike_exactly_when_their_cells_are_alike(cells: list[str]) -> None:
    cells = [*cells, *cells, "x" * 300, "x" * 299 + "y", "x" * 300]
    marks = np.zeros(len(cells), dtype=np.uint64)
    for column in (pa.array(cells), pa.array(cells[::-1]), pa.array(range(len(cells)))[:0]):
        if len(column):
            mark_column(marks, column)
    rows = list(zip(cells, cells[::-1], strict=True))
    assert len(set(marks.tolist())) == len(set(rows))
    sliced = np.zeros(len(cells) - 1, dtype=np.uint64)
    whole = np.zeros(len(cells), dtype=np.uint64)
    mark_column(sliced, pa.array(cells)[1:])
    mark_column(whole, pa.array(cells))
    assert sliced.tolist() == whole[1:].tolist()


def test_cells_that_move_between_columns_change_the_mark() -> None:
    marks = np.zeros(2, dtype=np.uint64)
    mark_column(marks, pa.array(["ab", "a"]))
    mark_column(marks, pa.array(["c", "bc"]))
    assert marks[0] != marks[1]
    nulls = np.zeros(2, dtype=np.uint64)
    mark_column(nulls, pa.array([0, None], pa.int64()))
    assert nulls[0] != nulls[1]


def test_numbers_of_parquet_are_the_shortest_decimals_of_their_floats(tmp_path) -> None:
    """Independent check: repr of the standard library, over all magnitudes and many decimals."""
    rng = random.Random(5)
    values = [struct.unpack("<d", rng.randbytes(8))[0] for _ in range(3000)]
    values = [value for value in values if np.isfinite(value)]
    values += [round(rng.uniform(0, 10 ** rng.randrange(14)), rng.randrange(12)) for _ in range(3000)]
    pq.write_table(pa.table({"amount": values, "date": ["2024-01-01"] * len(values)}), tmp_path / "a.parquet")
    table = read_losses(tmp_path / "a.parquet")
    assert table.exact.tolist() == [Decimal(repr(value)) for value in values]
    assert table.amount.tolist() == values
    single = np.array(values[-1000:], dtype=np.float32)
    pq.write_table(pa.table({"amount": single, "date": ["2024-01-01"] * 1000}), tmp_path / "b.parquet")
    table = read_losses(tmp_path / "b.parquet")
    assert table.exact.tolist() == [Decimal(str(value)) for value in single]
