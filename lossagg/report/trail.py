"""The trail of the rows as comma-separated text, safe to open in a spreadsheet program."""

from __future__ import annotations

from collections.abc import Collection, Sequence
from typing import TYPE_CHECKING

from lossagg.report.workbook import safe_text

if TYPE_CHECKING:
    import pandas as pd


def trail_csv(parts: Sequence[pd.DataFrame], texts: Collection[str]) -> bytes:
    """Write trails one below the other, in UTF-8; numbers in full, empty cells where there is none.

    Args:
        parts: tables with the same columns, or the first of them; none gives no content.
        texts: columns that hold text: what a spreadsheet program could take for a formula begins with an
            apostrophe there.
    """
    import pandas as pd

    if not parts:
        return b""
    whole = pd.concat([part.astype(object) for part in parts], ignore_index=True)
    for name in texts:
        whole[name] = whole[name].map({text: safe_text(text) for text in whole[name].unique()})
    content: str = whole.to_csv(index=False, lineterminator="\n")
    return content.encode()
