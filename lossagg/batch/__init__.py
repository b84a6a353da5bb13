"""The quarterly run: every portfolio of a folder, each in its own process.

`assess_folder` does one portfolio from its file to its report; `run_batch` does all of them, and one
that fails does not stop the others.
"""

from __future__ import annotations

from lossagg.batch.failure import Failure, explain
from lossagg.batch.run import BatchOutcome, run_batch
from lossagg.batch.single import Outcome, assess_folder

__all__ = ["BatchOutcome", "Failure", "Outcome", "assess_folder", "explain", "run_batch"]
