"""`lossagg fit` on the command line."""

from pathlib import Path

from folders import recorded_portfolio
from typer.testing import CliRunner

from lossagg.commands.app import build_app


def test_fit_prints_the_evidence_and_writes_it(tmp_path: Path) -> None:
    folder = recorded_portfolio(tmp_path / "fires")
    result = CliRunner().invoke(
        build_app(), ["fit", str(folder), "--out", str(tmp_path / "out"), "--draws", "5"]
    )
    assert result.exit_code == 0, result.output
    for heading in ("Parameters", "Candidates", "Do the losses fit?", "What the yearly counts say"):
        assert heading in result.output
    assert (tmp_path / "out" / "fit.html").exists()


def test_a_destination_with_other_files_is_refused_before_any_work(tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "mine.txt").write_text("keep")
    folder = recorded_portfolio(tmp_path / "fires")
    result = CliRunner().invoke(build_app(), ["fit", str(folder), "--out", str(tmp_path / "out")])
    assert result.exit_code == 2
    assert (tmp_path / "out" / "mine.txt").read_text() == "keep"
