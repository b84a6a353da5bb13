"""Writing an assessment: four files in one folder, published in one step."""

from __future__ import annotations

from pathlib import Path

from lossagg.report.documents import publish_document, require_format
from lossagg.report.folder import FILES
from lossagg.report.manifest import RunFacts
from lossagg.report.reading import FORMAT, Assessment


def write_assessment(assessment: Assessment, out: str | Path, *, facts: RunFacts | None = None) -> Path:
    """Write an assessment into a folder: assessment.json, report.html, tables.xlsx, manifest.json.

    The first three depend on the assessment alone: the same assessment gives the same bytes. They
    appear together, or not at all.

    Args:
        assessment: the dictionary of format "lossagg.assessment/1", see `Assessment.to_dict`.
        out: the folder. It may be absent, empty, or hold an earlier result, which is replaced.
        facts: when and how the run was started, for the manifest.

    Returns:
        The folder written, as an absolute path.

    Raises:
        InputError: another format, a number JSON lacks, or a folder with files of someone else.
        EnvironmentFault: no space or no permission; nothing is left half-written.
    """
    from lossagg.report.page import render_report
    from lossagg.report.tables import every_table
    from lossagg.report.workbook import render_workbook

    require_format(assessment, "an assessment", FORMAT)

    def build() -> dict[str, bytes]:
        valued = assessment["portfolio"]["valuation_date"]
        return {
            "report.html": render_report(assessment).encode(),
            "tables.xlsx": render_workbook(every_table(assessment), valued),
        }

    return publish_document(assessment, out, FILES, build, facts)


def load_writing() -> None:
    """Import what writing an assessment needs: a second of work that fits beside the engines."""
    from matplotlib.figure import Figure  # noqa: F401
    from openpyxl import Workbook  # noqa: F401

    from lossagg.report import page, workbook  # noqa: F401
