"""Loss records: read, checked, reconciled, prepared. Knows no laws and no portfolio file."""

from lossagg.records.check import CheckedLosses, check_losses
from lossagg.records.exposure import ExposureTable, read_exposure
from lossagg.records.findings import Finding, RecordsError
from lossagg.records.money import Reconciliation
from lossagg.records.prepare import PreparedLosses, prepare_losses
from lossagg.records.steps import Step
from lossagg.records.table import LossTable, read_losses
from lossagg.records.trend import midpoint
from lossagg.records.years import YearTable

__all__ = [
    "CheckedLosses",
    "ExposureTable",
    "Finding",
    "LossTable",
    "PreparedLosses",
    "Reconciliation",
    "RecordsError",
    "Step",
    "YearTable",
    "check_losses",
    "midpoint",
    "prepare_losses",
    "read_exposure",
    "read_losses",
]
