"""The batch: one portfolio that fails, dies or falls silent never takes another with it."""

from __future__ import annotations

import json
import subprocess
import sys
import time
from pathlib import Path

import pytest

from lossagg.batch import run_batch
from lossagg.batch.processes import Job, ending, run_jobs
from lossagg.batch.record import BatchRecord, Entry, write_record
from lossagg.batch.twins import twins_of
from lossagg.errors import InputError

WORKER = (sys.executable, str(Path(__file__).with_name("stand_in_worker.py")))


def portfolios(folder: Path, **faults: str) -> Path:
    for name, fault in faults.items():
        write_portfolio(folder / name, name, fault)
    return folder


def write_portfolio(folder: Path, name: str, fault: str) -> None:
    """A portfolio file of one given line, the fault that the stand-in worker plays as its description."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "portfolio.toml").write_text(
        f'[portfolio]\nname = "{name}"\ndescription = "{fault}"\n'
        'currency = "EUR"\nvaluation-date = 2025-12-31\n'
        '[[line]]\nname = "Fire"\nfrequency = { family = "poisson", mean = 2 }\n'
        'severity = { family = "exponential", mean = 5000 }\n'
    )


def contents(out: Path) -> dict[str, bytes]:
    return {
        str(path.relative_to(out)): path.read_bytes()
        for path in sorted(out.rglob("*"))
        if path.is_file() and path.name != "manifest.json"
    }


def test_the_rest_goes_on_whatever_becomes_of_one(tmp_path: Path) -> None:
    source = portfolios(
        tmp_path / "in",
        alder="",
        birch="broken",
        cedar="exit",
        dogwood="killed",
        elm="unexpected",
        fir="memory",
        hazel="withheld",
        oak="",
    )
    (source / "notes").mkdir()
    stages: list[tuple[str, float]] = []
    outcome = run_batch(
        source,
        tmp_path / "out",
        years=5000,
        seed=3,
        workers=2,
        worker=WORKER,
        progress=lambda stage, done: stages.append((stage, done)),
    )
    assert outcome.exit_code == 1
    assert {entry.folder: entry.status for entry in outcome.record.entries} == {
        "alder": "done",
        "birch": "failed",
        "cedar": "failed",
        "dogwood": "failed",
        "elm": "failed",
        "fir": "failed",
        "hazel": "withheld",
        "oak": "done",
    }
    messages = {entry.folder: entry.message for entry in outcome.record.entries}
    assert messages["birch"] == "the limit is negative, in file birch/portfolio.toml; seen: -1. Raise it."
    assert messages["cedar"] == "its process ended with code 7 and without an answer"
    assert "SIGKILL" in str(messages["dogwood"])
    assert "ZeroDivisionError" in str(messages["elm"])
    assert "out of memory" in str(messages["fir"])
    assert stages[-1] == ("8 of 8 portfolios", 1.0)
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == [
        "alder",
        "batch.json",
        "hazel",
        "index.html",
        "oak",
    ]
    record = json.loads((tmp_path / "out" / "batch.json").read_text())
    assert record["counts"] == {"done": 2, "withheld": 1, "failed": 5, "interrupted": 0, "waiting": 0}
    assert (record["seed"], record["years"]) == (3, 5000)
    assert record["portfolios"][0]["headline"]["value"] > 0
    page = (tmp_path / "out" / "index.html").read_text()
    assert '<a href="alder/report.html">' in page
    assert "birch/report.html" not in page
    assert "the limit is negative" in page


def test_same_bytes_for_any_number_of_workers(tmp_path: Path) -> None:
    source = portfolios(tmp_path / "in", alder="", birch="broken", cedar="")
    one = run_batch(source, tmp_path / "one", workers=1, worker=WORKER)
    three = run_batch(source, tmp_path / "three", workers=3, worker=WORKER)
    assert contents(one.out) == contents(three.out)
    assert one.exit_code == 1


def test_earlier_result_of_a_portfolio_that_fails_now_is_gone(tmp_path: Path) -> None:
    """What stands in the folder after a batch is of that batch."""
    source = portfolios(tmp_path / "in", alder="", birch="")
    assert run_batch(source, tmp_path / "out", worker=WORKER).exit_code == 0
    assert (tmp_path / "out" / "birch" / "report.html").is_file()
    write_portfolio(source / "birch", "birch", "broken")
    assert run_batch(source, tmp_path / "out", worker=WORKER).exit_code == 1
    assert not (tmp_path / "out" / "birch").exists()


def test_files_of_someone_else_fail_their_portfolio_only_and_stay(tmp_path: Path) -> None:
    source = portfolios(tmp_path / "in", alder="", birch="")
    run_batch(source, tmp_path / "out", worker=WORKER)
    (tmp_path / "out" / "birch" / "mine.txt").write_text("mine")
    outcome = run_batch(source, tmp_path / "out", worker=WORKER)
    assert [entry.status for entry in outcome.record.entries] == ["done", "failed"]
    assert (tmp_path / "out" / "birch" / "mine.txt").read_text() == "mine"


def test_nothing_to_run_and_taken_folders_are_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no such folder"):
        run_batch(tmp_path / "nowhere", tmp_path / "out")
    with pytest.raises(InputError, match="no folder in it holds"):
        run_batch(tmp_path, tmp_path / "out")
    source = portfolios(tmp_path / "in", alder="")
    with pytest.raises(InputError, match="lossagg assess"):
        run_batch(source / "alder", tmp_path / "out")
    (tmp_path / "taken").mkdir()
    (tmp_path / "taken" / "mine.txt").write_text("")
    with pytest.raises(InputError, match="no batch of lossagg wrote"):
        run_batch(source, tmp_path / "taken")
    assert not (tmp_path / "out").exists()


def test_two_portfolios_of_one_name_stop_the_batch_before_anything_runs(tmp_path: Path) -> None:
    source = portfolios(tmp_path / "in", alder="", birch="", cedar="", oak="", pine="")
    write_portfolio(source / "cedar", " Alder", "")
    write_portfolio(source / "pine", "oak", "")
    with pytest.raises(InputError) as error:
        run_batch(source, tmp_path / "out", worker=WORKER)
    text = str(error.value)
    assert "2 portfolios of the folder bear the same name" in text
    assert "alder/portfolio.toml and cedar/portfolio.toml" in text
    assert "also: oak/portfolio.toml, pine/portfolio.toml" in text
    assert "birch" not in text
    assert not (tmp_path / "out").exists()


def test_a_broken_file_has_no_name_and_stops_itself_only(tmp_path: Path) -> None:
    source = portfolios(tmp_path / "in", alder="", birch="")
    for name, content in (("cedar", b"name = "), ("oak", b"\xff\xfe"), ("pine", b"portfolio = 3")):
        (source / name).mkdir()
        (source / name / "portfolio.toml").write_bytes(content)
    assert twins_of(source, ["alder", "birch", "cedar", "oak", "pine", "none"], "portfolio.toml") == {}
    outcome = run_batch(source, tmp_path / "out", worker=WORKER)
    assert [entry.status for entry in outcome.record.entries] == [
        "done",
        "done",
        "failed",
        "failed",
        "failed",
    ]


def test_interruption_kills_what_runs_and_is_recorded(tmp_path: Path) -> None:
    source = portfolios(tmp_path / "in", alder="", birch="")

    def interrupt(stage: str, done: float) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        run_batch(source, tmp_path / "out", workers=1, worker=WORKER, progress=interrupt)
    record = json.loads((tmp_path / "out" / "batch.json").read_text())
    assert [entry["status"] for entry in record["portfolios"]] == ["done", "interrupted"]


def test_no_process_survives_an_error() -> None:
    sleeper = (sys.executable, "-c", "import time; time.sleep(600)")
    quick = (sys.executable, "-c", "")
    started = []

    class Noted(subprocess.Popen):
        def __init__(self, *args, **kwargs) -> None:
            super().__init__(*args, **kwargs)
            started.append(self)

    def fail(key: str, code: int) -> None:
        raise RuntimeError(key)

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(subprocess, "Popen", Noted)
        begun = time.monotonic()
        with pytest.raises(RuntimeError, match="quick"):
            run_jobs([Job("sleeper", sleeper), Job("quick", quick)], 2, fail)
    assert time.monotonic() - begun < 60
    assert len(started) == 2
    assert all(process.returncode is not None for process in started)


def test_endings_without_an_answer() -> None:
    assert ending(-9).endswith("the machine may have run out of memory")
    assert "SIGTERM" in ending(-15)
    assert "signal 250" in ending(-250)


def test_index_escapes_hostile_names(tmp_path: Path) -> None:
    hostile = "<script>alert(1)</script>"
    record = BatchRecord((Entry(hostile, "script-alert-1-script", "failed", hostile),), 1, None)
    write_record(tmp_path, record)
    page = (tmp_path / "index.html").read_text()
    assert "<script" not in page
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in page
