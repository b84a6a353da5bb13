"""Publishing: everything or nothing, the same bytes, and nothing of anyone else's lost."""

from __future__ import annotations

import hashlib
import json
import os
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest
from invented_assessment import sample_assessment, small_assessment

from lossagg.errors import EnvironmentFault, InputError
from lossagg.report import RunFacts, check_destination, folder, write_assessment
from lossagg.report.canonical import canonical_json
from lossagg.report.folder import FILES, publish


def another() -> dict[str, Any]:
    """The small assessment with its headline withheld."""
    assessment = small_assessment()
    assessment["headline"] |= {"withheld": True, "value": None, "reason": "withheld: planted"}
    return assessment


def contents(path: Path) -> dict[str, bytes]:
    return {entry.name: entry.read_bytes() for entry in path.iterdir()}


def test_same_assessment_same_bytes_but_for_the_manifest(tmp_path: Path) -> None:
    first = write_assessment(sample_assessment(), tmp_path / "a")
    second = write_assessment(sample_assessment(), tmp_path / "deep" / "er" / "b")
    one, two = contents(first), contents(second)
    assert sorted(one) == sorted(FILES)
    assert [name for name in FILES if one[name] != two[name]] == ["manifest.json"]


def test_json_is_the_assessment_itself(tmp_path: Path) -> None:
    out = write_assessment(sample_assessment(), tmp_path / "a")
    text = (out / "assessment.json").read_text(encoding="utf-8")
    assert json.loads(text) == sample_assessment()
    assert text.endswith("}\n")


def test_manifest_names_inputs_outputs_and_times(tmp_path: Path) -> None:
    facts = RunFacts(
        started=datetime(2026, 10, 1, 7, 30, tzinfo=UTC), command=("lossagg", "assess"), workers=2
    )
    out = write_assessment(another(), tmp_path / "a", facts=facts)
    manifest = json.loads((out / "manifest.json").read_text(encoding="utf-8"))
    assert manifest["started"] == "2026-10-01T07:30:00.000Z"
    assert manifest["status"] == "withheld"
    assert manifest["inputs"] == sample_assessment()["run"]["inputs"]
    for entry in manifest["outputs"]:
        assert entry["sha256"] == hashlib.sha256((out / entry["path"]).read_bytes()).hexdigest()
    assert [entry["path"] for entry in manifest["outputs"]] == [
        name for name in FILES if name != "manifest.json"
    ]
    assert manifest["libraries"]["numpy"]


def test_earlier_result_is_replaced(tmp_path: Path) -> None:
    write_assessment(small_assessment(), tmp_path / "a")
    out = write_assessment(another(), tmp_path / "a")
    assert json.loads((out / "assessment.json").read_text(encoding="utf-8"))["headline"]["withheld"]
    assert [entry.name for entry in tmp_path.iterdir()] == ["a"]


def test_files_of_someone_else_are_refused_and_kept(tmp_path: Path) -> None:
    (tmp_path / "notes.txt").write_text("mine")
    with pytest.raises(InputError, match="files that lossagg did not write") as caught:
        write_assessment(small_assessment(), tmp_path)
    assert caught.value.value == "notes.txt"
    assert contents(tmp_path) == {"notes.txt": b"mine"}


def test_a_report_of_someone_else_by_the_same_name_is_kept(tmp_path: Path) -> None:
    (tmp_path / "report.html").write_text("mine")
    with pytest.raises(InputError):
        check_destination(tmp_path)
    (tmp_path / "manifest.json").write_text('{"format": "another"}')
    with pytest.raises(InputError):
        check_destination(tmp_path)


def test_file_current_folder_and_folder_below_a_file_are_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="is a file"):
        check_destination(tmp_path / "file")
    with pytest.raises(InputError, match="inside a file"):
        check_destination(tmp_path / "file" / "out")
    (tmp_path / "empty").mkdir()
    monkeypatch.chdir(tmp_path / "empty")
    with pytest.raises(InputError, match="current folder"):
        check_destination(Path())


@pytest.mark.parametrize("number", [0, 1, 2, 3])
def test_failure_at_any_file_leaves_nothing_new(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int
) -> None:
    """A full disk, planted at each file in turn: the earlier result stands untouched, no rest remains."""
    before = contents(write_assessment(small_assessment(), tmp_path / "a"))
    written: list[Path] = []
    real = folder.write_flushed

    def full(path: Path, content: bytes) -> None:
        written.append(path)
        if len(written) > number:
            path.write_bytes(content[:10])
            raise OSError(28, "No space left on device")
        real(path, content)

    monkeypatch.setattr(folder, "write_flushed", full)
    with pytest.raises(EnvironmentFault, match="No space left on device") as caught:
        write_assessment(another(), tmp_path / "a")
    assert caught.value.exit_code == 3
    assert contents(tmp_path / "a") == before
    with pytest.raises(EnvironmentFault):
        write_assessment(another(), tmp_path / "new" / "b")
    assert [entry.name for entry in tmp_path.iterdir()] == ["a"]


def test_failure_of_the_last_rename_puts_the_earlier_result_back(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = contents(write_assessment(small_assessment(), tmp_path / "a"))
    real = Path.rename

    def stuck(self: Path, target: Path) -> Path:
        if self.name.endswith(".new"):
            raise OSError(16, "Device or resource busy")
        return real(self, target)

    monkeypatch.setattr(Path, "rename", stuck)
    with pytest.raises(EnvironmentFault, match="busy"):
        write_assessment(another(), tmp_path / "a")
    assert contents(tmp_path / "a") == before
    assert [entry.name for entry in tmp_path.iterdir()] == ["a"]


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser may write anywhere")
def test_read_only_parent_is_a_fault_of_the_machine(tmp_path: Path) -> None:
    tmp_path.chmod(0o500)
    try:
        with pytest.raises(EnvironmentFault, match="Permission denied"):
            publish(tmp_path / "a", {"assessment.json": b"{}"})
    finally:
        tmp_path.chmod(0o700)


@pytest.mark.parametrize("value", [float("nan"), float("inf"), object()])
def test_json_has_no_numbers_that_do_not_exist(value: object, tmp_path: Path) -> None:
    assessment = small_assessment()
    assessment["gross"]["levels"][2]["var"]["value"] = value
    with pytest.raises(InputError, match=r"gross\.levels\[2\]\.var\.value"):
        write_assessment(assessment, tmp_path / "a")
    assert list(tmp_path.iterdir()) == []


def test_another_format_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="not an assessment") as caught:
        write_assessment(small_assessment() | {"format": "other/9"}, tmp_path / "a")
    assert caught.value.value == "other/9"


def test_json_writes_the_shortest_number_that_reads_back() -> None:
    assert canonical_json({"a": 0.1, "b": 1e300, "c": [1, True, None]}) == (
        '{\n  "a": 0.1,\n  "b": 1e+300,\n  "c": [\n    1,\n    true,\n    null\n  ]\n}\n'
    )
