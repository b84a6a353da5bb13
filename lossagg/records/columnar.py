"""Parquet tables, read batch by batch; every type is written as text that identifies its value exactly."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from lossagg.errors import InputError, place
from lossagg.records.raw import Choose, RawTable, TableBuilder

_BATCH = 100_000


def read_parquet(path: Path, choose: Choose) -> RawTable:
    """Read a Parquet table.

    Args:
        path: the file.
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
        headings = tuple(str(name) for name in schema.names)
        positions = choose(headings, None)
        _check_types(schema, positions, path.name)
        builder = TableBuilder(path.name, None, headings, positions)
        _fill(builder, source, schema, positions)
    return builder.finish()


def _fill(builder: TableBuilder, source: Any, schema: Any, positions: Mapping[str, int]) -> None:
    import pyarrow as pa

    try:
        for batch in source.iter_batches(batch_size=_BATCH):
            columns = [_texts(column) for column in batch.columns]
            native = {
                name: np.full(len(batch), not _is_text(schema.field(position).type), dtype=np.bool_)
                for name, position in positions.items()
            }
            builder.add(columns, native)
    except (pa.ArrowInvalid, OSError) as error:
        raise InputError(
            "the Parquet file is damaged",
            where=place(file=builder.file),
            remedy="Export the records again.",
        ) from error


def _texts(column: Any) -> Sequence[str]:
    """Write one batch of a column as text, nulls as empty cells."""
    import pyarrow as pa
    import pyarrow.compute as pc

    kind = column.type
    if pa.types.is_dictionary(kind):
        return _texts(column.dictionary_decode())
    if pa.types.is_floating(kind):
        values = column.fill_null(float("nan")).to_numpy(zero_copy_only=False)
        nulls = column.is_null().to_numpy(zero_copy_only=False)
        return [
            "" if null else text
            for null, text in zip(nulls.tolist(), values.astype(str).tolist(), strict=True)
        ]
    if pa.types.is_integer(kind) or pa.types.is_date32(kind) or pa.types.is_string(kind):
        return pc.cast(column, pa.string()).fill_null("").to_pylist()  # type: ignore[no-any-return]
    return [_text(value) for value in column.to_pylist()]


def _text(value: Any) -> str:
    if value is None:
        return ""
    return value.isoformat() if hasattr(value, "isoformat") else str(value)


def _is_text(kind: Any) -> bool:
    import pyarrow as pa

    if pa.types.is_dictionary(kind):
        return _is_text(kind.value_type)
    return bool(pa.types.is_string(kind) or pa.types.is_large_string(kind) or pa.types.is_boolean(kind))


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
