"""Every simulated year as a row of a Parquet file, for the user's own arithmetic.

Rows are written as the years are simulated, in their order, so the file may be larger than the memory. It
gets its name when it is complete; a run that fails leaves nothing behind.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.book import Subject
from lossagg.errors import InputError


class AnnualFile:
    """A Parquet file that takes in the simulated years, to be used as a context.

    Of an assessment its columns are named as subjects are: "line fire", "gross", "cover stop", "net", "ceded
    fire", "retained fire", "largest fire" (largest loss of the year), "largest" (of all lines).

    Args:
        path: where it goes; an existing file is replaced when the new one is complete.

    Raises:
        InputError: a path that does not end in .parquet, or whose folder does not exist.
    """

    def __init__(self, path: Path) -> None:
        if path.suffix != ".parquet":
            raise InputError(
                "the file of annual results must end in .parquet",
                value=str(path),
                remedy="Name it years.parquet, for example.",
            )
        if not path.parent.is_dir():
            raise InputError(
                "the folder for the annual results does not exist",
                value=str(path.parent),
                remedy="Create it, or name another.",
            )
        self.path = path
        self._partial = path.with_name(path.name + ".partial")
        self._writer: Any = None

    def __enter__(self) -> AnnualFile:
        return self

    def add(self, first: int, amounts: Mapping[Subject, FloatArray] | Mapping[str, FloatArray]) -> None:
        """Append consecutive years, a column per subject or name; `first`, the number of the first of them,
        counts from 0."""
        import pyarrow as pa
        import pyarrow.parquet as pq

        years = next(iter(amounts.values())).size
        columns: dict[str, np.ndarray] = {"year": np.arange(first, first + years)}
        columns |= {str(name): values for name, values in amounts.items()}
        table = pa.table(columns)
        if self._writer is None:
            self._writer = pq.ParquetWriter(self._partial, table.schema)
        self._writer.write_table(table)

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._writer is None:
            return
        try:
            self._writer.close()
            if kind is None:
                self._partial.replace(self.path)
        finally:
            self._partial.unlink(missing_ok=True)
