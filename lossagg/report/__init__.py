"""The report: reads an assessment, computes nothing.

`write_assessment` puts JSON, page, workbook and manifest of an assessment into a folder. Every
number in them is one of the assessment, shown with the digits its accuracy supports.
"""

from __future__ import annotations

from lossagg.report.fitting import write_fit
from lossagg.report.folder import check_destination
from lossagg.report.manifest import RunFacts
from lossagg.report.options import write_options
from lossagg.report.writing import load_writing, write_assessment

__all__ = ["RunFacts", "check_destination", "load_writing", "write_assessment", "write_fit", "write_options"]
