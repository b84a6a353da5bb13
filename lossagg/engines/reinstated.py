"""The premium of a layer whose reinstatements are paid.

With k limits reinstated at rates c_j pro rata to the amount used, the reinstatement premium of a year is
P * sum_j c_j min((Z - (j - 1) l)+, l) / l, so the initial premium that pays for the expected recoveries
is P = E[min(Z, (k + 1) l)] / (1 + sum_j c_j E[min((Z - (j - 1) l)+, l)] / l) (Sundt 1991, section 3; Walhin
and Paris 1999; for rates all alike, 1 + c E[min(Z, k l)] / l). No expense, no loading: see `pricing`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.cover import Cover
from lossagg.engines.result import AnnualLoss
from lossagg.errors import DoesNotExistError, InputError


@dataclass(frozen=True, kw_only=True)
class ReinstatedPremium:
    """The pure premium of a cover with reinstatements; amounts at the cover's share.

    Attributes:
        recoveries: expected yearly recoveries.
        fraction: expected reinstatement premium as a multiple of the initial premium.
        initial: initial premium that, with the reinstatement premium, pays the expected recoveries.
    """

    recoveries: float
    fraction: float
    initial: float

    @property
    def reinstatement(self) -> float:
        """Expected yearly reinstatement premium."""
        return self.initial * self.fraction


def reinstated_premium(loss: AnnualLoss, cover: Cover) -> ReinstatedPremium:
    """The pure premium of a cover, its reinstatement premiums taken into account.

    Args:
        loss: what the cover pays in a year, by any engine.
        cover: its terms, with reinstatements.

    Raises:
        InputError: a cover without reinstatements.
        DoesNotExistError: recoveries without a mean.
    """
    if cover.reinstatements is None:
        raise InputError("the cover has no reinstatements", remedy="Give reinstatements to its terms.")
    recoveries = loss.mean()
    if not np.isfinite(recoveries):
        raise DoesNotExistError("no premium: the expected recoveries are infinite", value=recoveries)
    limit = cover.year_share * cover.event_most
    fraction = sum(
        rate * loss.layer_mean(k * limit, (k + 1) * limit) / limit
        for k, rate in enumerate(cover.reinstatements.each)
        if rate > 0
    )
    return ReinstatedPremium(recoveries=recoveries, fraction=fraction, initial=recoveries / (1.0 + fraction))
