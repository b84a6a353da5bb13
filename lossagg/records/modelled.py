"""What a row is worth in the model where that is not what is recorded: net, or at ultimate."""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.errors import InputError, place
from lossagg.records.check import CheckedLosses
from lossagg.records.development import OPEN_CLAIMS, Development, OpenClaims
from lossagg.records.events import is_open
from lossagg.records.history import read_history
from lossagg.records.ultimate import Factors, find_factors
from lossagg.records.years import Window


def check_open_claims(checked: CheckedLosses, open_claims: str, development: Development | None) -> None:
    """Check that the treatment of open claims asked for has what it needs.

    Raises:
        InputError: an unknown treatment, records without a status, or no factors to develop with.
    """
    if open_claims not in OPEN_CLAIMS:
        raise InputError(
            "unknown treatment of open claims", value=open_claims, remedy=f"Use {', '.join(OPEN_CLAIMS)}."
        )
    if open_claims == "as-recorded":
        return
    if "status" not in checked.table.words:
        raise InputError(
            f"open claims are to be treated ({open_claims}) but the records have no status",
            where=place(file=checked.table.file),
            remedy="Map the column that says which claims are open.",
        )
    if open_claims == "develop" and (development is None or not development.develops("open")):
        raise InputError(
            "open claims are to be developed but there are no factors for them",
            where=place(file=checked.table.file),
            remedy="Give open-factors by age, or open-tail to estimate them from the valuations in the "
            "records, under development.",
        )


def factors_of(
    checked: CheckedLosses,
    window: Window,
    development: Development | None,
    default: float,
    hours_window: int | None,
    net: FloatArray | None,
) -> Factors | None:
    """Factors to ultimate of each year, None without development.

    Args:
        checked: the records of the line.
        window: its observation window.
        development: what is asked for.
        default: reporting threshold of the rows that carry none.
        hours_window: longest duration of one event, None without end.
        net: amounts net of recoveries where those are modelled; shape (rows,).

    Raises:
        InputError: a history that does not support the factors asked of it.
    """
    if development is None:
        return None
    history = None
    if development.from_history:
        history = read_history(
            checked, window, default_threshold=default, hours_window=hours_window, amount=net
        )
    return find_factors(development, len(window.years), history)


def modelled_amounts(
    checked: CheckedLosses,
    window: Window,
    factors: Factors | None,
    open_claims: OpenClaims,
    net: FloatArray | None,
) -> FloatArray | None:
    """Amount of each row as it is modelled, None where that is the one recorded; shape (rows,).

    Args:
        checked: the records of the line.
        window: its observation window.
        factors: factors of its years, None without development.
        open_claims: what is done with open claims.
        net: amounts net of recoveries where those are modelled; shape (rows,).
    """
    if open_claims != "develop" or factors is None or factors.open is None:
        return net
    table = checked.table
    value = table.amount.copy() if net is None else net.copy()
    rows = np.flatnonzero(checked.used & is_open(table))
    value[rows] *= factors.open[window.position(table.date[rows])]
    return value
