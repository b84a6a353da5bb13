"""Loss records: read, checked, reconciled, prepared. Knows no laws and no portfolio file."""

from lossagg.records.basis import ground_up_losses, line_rows, undeclared_deductibles
from lossagg.records.check import CheckedLosses, check_losses
from lossagg.records.controls import ControlResult, ControlTotal, control_findings, reconcile_controls
from lossagg.records.counts import CountTable, check_counts, read_counts
from lossagg.records.currency import RateTable, convert_losses, read_rates
from lossagg.records.development import Development
from lossagg.records.exposure import ExposureTable, read_exposure
from lossagg.records.findings import Action, Finding, RecordsError, counted
from lossagg.records.index_file import read_trend_index
from lossagg.records.money import Reconciliation
from lossagg.records.none import no_records
from lossagg.records.prepare import prepare_losses
from lossagg.records.prepared import PreparedLosses
from lossagg.records.previous import Followed, follow_claims
from lossagg.records.steps import Step
from lossagg.records.table import LossTable, read_losses
from lossagg.records.trail import largest_losses, row_trail
from lossagg.records.trend import TrendIndex, midpoint
from lossagg.records.ultimate import Developed
from lossagg.records.years import YearTable

__all__ = [
    "Action",
    "CheckedLosses",
    "ControlResult",
    "ControlTotal",
    "CountTable",
    "Developed",
    "Development",
    "ExposureTable",
    "Finding",
    "Followed",
    "LossTable",
    "PreparedLosses",
    "RateTable",
    "Reconciliation",
    "RecordsError",
    "Step",
    "TrendIndex",
    "YearTable",
    "check_counts",
    "check_losses",
    "control_findings",
    "convert_losses",
    "counted",
    "follow_claims",
    "ground_up_losses",
    "largest_losses",
    "line_rows",
    "midpoint",
    "no_records",
    "prepare_losses",
    "read_counts",
    "read_exposure",
    "read_losses",
    "read_rates",
    "read_trend_index",
    "reconcile_controls",
    "row_trail",
    "undeclared_deductibles",
]
