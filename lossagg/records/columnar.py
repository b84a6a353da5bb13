"""Parquet tables, read batch by batch; numbers and days stay as stored, anything else becomes text."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from lossagg.errors import InputError, place
from lossagg.records.raw import MOST_ROWS, Choose, Layout, RawTable, TableBuilder, cell_text

MOST_BYTES = 16 * 1024**3
_BATCH = 100_000


def read_parquet(path: Path, layout: Layout, choose: Choose) -> RawTable:
    """Read a Parquet table.

    Args:
        path: the file.
        layout: whether it may be empty.
        choose: says from the headings which columns to keep.

    Returns:
        The table as text; numbers and dates are marked as such. Row 2 is the first record, as if the
        headings stood in row 1, so that places agree with the same table saved as CSV.

    Raises:
        InputError: a damaged file, a column that is read but holds lists, structures or bytes, no rows.
    """
    import pyarrow as pa
    import pyarrow.parquet as pq

    try:
        source = pq.ParquetFile(path)
    except pa.ArrowInvalid as error:
        raise InputError(
            "the Parquet file is damaged or only partly written",
            where=place(file=path.name),
            remedy="Export the records again.",
        ) from error
    with source:
        schema = source.schema_arrow
        _check_size(source.metadata, path.name)
        headings = tuple(str(name) for name in schema.names)
        positions = choose(headings, None)
        _check_types(schema, positions, path.name)
        builder = TableBuilder(path.name, None, headings, positions, layout.may_be_empty)
        _fill(builder, source)
    table = builder.finish()
    # What the batches and the columns that are not read took goes back to the system.
    pa.default_memory_pool().release_unused()
    return table


def _fill(builder: TableBuilder, source: Any) -> None:
    import pyarrow as pa

    try:
        for batch in source.iter_batches(batch_size=_BATCH):
            builder.add([_plain(column) for column in batch.columns])
    except (pa.ArrowInvalid, OSError) as error:
        raise InputError(
            "the Parquet file is damaged",
            where=place(file=builder.file),
            remedy="Export the records again.",
        ) from error


def _plain(column: Any) -> Any:
    """A batch of a column as it is kept: numbers and days as they are, anything else as text."""
    import pyarrow as pa
    import pyarrow.compute as pc

    kind = column.type
    if pa.types.is_dictionary(kind):
        return _plain(column.dictionary_decode())
    if pa.types.is_string(kind) or pa.types.is_large_string(kind):
        return pc.cast(column, pa.string()).fill_null("")
    if any(test(kind) for test in (pa.types.is_integer, pa.types.is_floating, pa.types.is_date32)):
        return column
    if pa.types.is_decimal(kind):
        return column
    if pa.types.is_timestamp(kind) and kind.tz is None:
        return pc.cast(column, pa.string()).fill_null("")
    return pa.array(map(cell_text, column.to_pylist()), pa.string())


def _check_size(metadata: Any, file: str) -> None:
    """Stop at what the foot of the file says of its size, before anything is unpacked."""
    groups = (metadata.row_group(at) for at in range(metadata.num_row_groups))
    unpacked = sum(group.total_byte_size for group in groups)
    if metadata.num_rows > MOST_ROWS or unpacked > MOST_BYTES:
        raise InputError(
            f"the Parquet file has {metadata.num_rows} rows and unpacks to {unpacked} bytes",
            where=place(file=file),
            remedy=f"Split it: at most {MOST_ROWS} rows and {MOST_BYTES} bytes are read.",
        )


def _check_types(schema: Any, positions: Mapping[str, int], file: str) -> None:
    import pyarrow as pa

    for name, position in positions.items():
        kind = schema.field(position).type
        if pa.types.is_nested(kind) or pa.types.is_binary(kind) or pa.types.is_large_binary(kind):
            raise InputError(
                f"the column {name!r} holds neither numbers, dates nor text",
                where=place(file=file, column=schema.names[position]),
                value=str(kind),
                remedy="Export it as a plain column.",
            )
