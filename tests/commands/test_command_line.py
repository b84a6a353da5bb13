"""The command line: exit codes, messages on stderr, plain output into a pipe, instant help."""

from __future__ import annotations

import logging
import os
import subprocess
import sys
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import pytest
from invented_assessment import small_assessment
from typer.testing import CliRunner

from lossagg import __version__
from lossagg.commands.app import build_app
from lossagg.errors import InputError, LossaggWarning
from lossagg.report.folder import FILES

RUNNER = CliRunner()


def run(*arguments: object):
    return RUNNER.invoke(build_app(), [str(argument) for argument in arguments], prog_name="lossagg")


@pytest.fixture
def stand_in(monkeypatch: pytest.MonkeyPatch):
    """A portfolio that does what a test asks, in place of one that is read and computed."""
    asked: dict[str, Any] = {}

    def plant(action) -> dict[str, Any]:
        def read_portfolio(path: Path, pricer: object = None) -> SimpleNamespace:
            def assess(**settings: Any) -> SimpleNamespace:
                asked.update(settings, path=path)
                document = action()
                return SimpleNamespace(to_dict=lambda: document)

            return SimpleNamespace(assess=assess)

        module = SimpleNamespace(read_portfolio=read_portfolio)
        monkeypatch.setitem(sys.modules, "lossagg.portfolio", module)
        monkeypatch.setitem(sys.modules, "lossagg.pricing", SimpleNamespace(options_of_assessment=None))
        return asked

    return plant


def withheld() -> dict[str, Any]:
    document = small_assessment()
    document["headline"] |= {
        "withheld": True,
        "value": None,
        "less_mean": None,
        "reason": "withheld: planted",
    }
    return document


def raising(error: BaseException):
    def action() -> dict[str, Any]:
        raise error

    return action


def test_help_lists_the_commands_that_work_and_no_other() -> None:
    result = run("--help")
    assert result.exit_code == 0
    listed = result.output[result.output.index("Commands:") :].splitlines()[1:]
    assert [line.split()[0] for line in listed if line.startswith("  ") and line.split()] == [
        "assess",
        "batch",
        "check",
        "fit",
        "new",
        "price",
        "replay",
    ]
    assert "not an actuarial opinion" in result.output


@pytest.mark.parametrize("command", ["assess", "batch"])
def test_help_of_each_command_names_its_options(command: str) -> None:
    text = run(command, "--help").output
    for option in ("--out DIR", "--years N", "--seed S", "--workers W"):
        assert option in text


def test_version() -> None:
    assert run("--version").output == f"lossagg {__version__}\n"


def test_done_is_0_with_a_plain_summary_and_four_files(tmp_path: Path, stand_in) -> None:
    asked = stand_in(small_assessment)
    result = run("assess", "pool", "--out", tmp_path / "out", "--years", 5000, "--seed", 7, "--workers", 2)
    assert result.exit_code == 0, result.output
    assert {name: asked[name] for name in ("years", "seed", "workers")} == {
        "years": 5000,
        "seed": 7,
        "workers": 2,
    }
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == sorted(FILES)
    assert "Kestrel Haven port pool" in result.stdout
    assert "EUR 9,271,000" in result.stdout
    assert "\x1b" not in result.output
    assert not set("│─━┃╭") & set(result.output)
    assert result.stderr == ""


def test_years_are_left_to_the_portfolio_when_not_given(tmp_path: Path, stand_in) -> None:
    asked = stand_in(small_assessment)
    assert run("assess", "pool", "--out", tmp_path / "out").exit_code == 0
    assert "years" not in asked
    assert asked["seed"] == 1


@pytest.mark.parametrize(("text", "part"), [("0.5%", 0.005), ("0.02", 0.02), (" 3 %", 0.03)])
def test_until_is_a_part_of_the_figure(tmp_path: Path, stand_in, text: str, part: float) -> None:
    """With what the engines note on stderr, also where that is no terminal."""

    def noting() -> dict[str, Any]:
        logging.getLogger("lossagg.engines.simulation").info("about 7 years expected")
        return small_assessment()

    asked = stand_in(noting)
    file = tmp_path / "years.parquet"
    result = run("assess", "pool", "--out", tmp_path / "out", "--until", text, "--annual", file)
    assert result.exit_code == 0, result.output
    assert asked["until"] == pytest.approx(part)
    assert asked["annual"] == file
    assert "years" not in asked
    assert result.stderr == "note: about 7 years expected\n"


@pytest.mark.parametrize("arguments", [("--until", "wide"), ("--until", "0"), ("--until", "100%")])
def test_until_that_is_no_part_is_2(tmp_path: Path, stand_in, arguments: tuple[str, ...]) -> None:
    stand_in(small_assessment)
    result = run("assess", "pool", "--out", tmp_path / "out", *arguments)
    assert result.exit_code == 2
    assert "--until must be a part between 0 and 100%" in result.stderr
    both = run("assess", "pool", "--out", tmp_path / "out", "--until", "1%", "--years", 100)
    assert both.exit_code == 2
    assert "--until decides how many years are simulated" in both.stderr


def test_withheld_is_1_and_says_so(tmp_path: Path, stand_in) -> None:
    stand_in(withheld)
    result = run("assess", "pool", "--out", tmp_path / "out")
    assert result.exit_code == 1
    assert "WITHHELD" in result.stdout
    assert (tmp_path / "out" / "report.html").is_file()


def test_bad_input_is_2_with_what_where_value_and_remedy(tmp_path: Path, stand_in) -> None:
    stand_in(
        raising(
            InputError(
                "the limit is negative", where="key 'cover.limit'", value=-1, remedy="Give at least 0."
            )
        )
    )
    result = run("assess", "pool", "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert result.stderr == (
        "error: the limit is negative\n  where: key 'cover.limit'\n  seen: -1\n  do: Give at least 0.\n"
    )
    assert result.stdout == ""
    assert list(tmp_path.iterdir()) == []


def test_taken_output_folder_is_2_before_anything_is_computed(tmp_path: Path, stand_in) -> None:
    stand_in(raising(AssertionError("computed")))
    (tmp_path / "mine.txt").write_text("")
    result = run("assess", "pool", "--out", tmp_path)
    assert result.exit_code == 2
    assert "files that lossagg did not write" in result.stderr


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["assess"], "PORTFOLIO"),
        (["assess", "pool"], "--out"),
        (["assess", "pool", "--out", "x", "--years", "0"], "--years"),
        (["assess", "pool", "--out", "x", "--seed", "-1"], "--seed"),
        (["assess", "pool", "--out", "x", "--workers", "many"], "--workers"),
        (["assess", "pool", "--out", "x", "--unknown"], "--unknown"),
        (["asses"], "asses"),
    ],
)
def test_wrong_usage_is_2(arguments: list[str], message: str) -> None:
    result = run(*arguments)
    assert result.exit_code == 2
    assert message in result.stderr
    assert "Traceback" not in result.output


def test_interruption_is_3(tmp_path: Path, stand_in) -> None:
    stand_in(raising(KeyboardInterrupt()))
    result = run("assess", "pool", "--out", tmp_path / "out")
    assert result.exit_code == 3
    assert result.stderr.startswith("error: interrupted\n")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("error", "message"),
    [
        (ZeroDivisionError("division by zero"), "error: unexpected ZeroDivisionError: division by zero"),
        (MemoryError(), "error: the machine ran out of memory"),
        (
            PermissionError(13, "Permission denied", "losses.csv"),
            "error: Permission denied\n  where: file losses.csv",
        ),
    ],
)
def test_the_unexpected_is_3_without_a_traceback(tmp_path: Path, stand_in, error, message: str) -> None:
    stand_in(raising(error))
    result = run("assess", "pool", "--out", tmp_path / "out")
    assert result.exit_code == 3
    assert result.stderr.startswith(message)
    assert "Traceback" not in result.output


def test_the_environment_can_ask_for_the_traceback(
    tmp_path: Path, stand_in, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("LOSSAGG_DEBUG", "1")
    stand_in(raising(ZeroDivisionError("division by zero")))
    result = run("assess", "pool", "--out", tmp_path / "out")
    assert result.exit_code == 3
    assert "Traceback" in result.stderr


def test_warnings_go_to_stderr_and_into_the_manifest(tmp_path: Path, stand_in) -> None:
    import warnings

    def action() -> dict[str, Any]:
        warnings.warn(LossaggWarning("the step is coarse by 0.8%"), stacklevel=1)
        return small_assessment()

    stand_in(action)
    result = run("assess", "pool", "--out", tmp_path / "out")
    assert result.exit_code == 0
    assert result.stderr == "warning: LossaggWarning: the step is coarse by 0.8%\n"
    assert "the step is coarse" in (tmp_path / "out" / "manifest.json").read_text()


def test_batch_with_nothing_to_run_is_2(tmp_path: Path) -> None:
    result = run("batch", tmp_path, "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert "no folder in it holds a portfolio.toml" in result.stderr


def test_batch_prints_a_table_and_leaves_with_1_when_one_failed(tmp_path: Path) -> None:
    """The real worker on a portfolio file that is not TOML."""
    (tmp_path / "in" / "alder").mkdir(parents=True)
    (tmp_path / "in" / "alder" / "portfolio.toml").write_text("this is no portfolio")
    result = run("batch", tmp_path / "in", "--out", tmp_path / "out")
    assert result.exit_code == 1
    assert "1 portfolio: 1 failed" in result.stdout
    assert "alder" in result.stdout
    assert "Traceback" not in result.output


def test_from_portfolio_file_to_the_same_bytes_with_any_number_of_workers(tmp_path: Path) -> None:
    """Nothing stood in for: a real portfolio file, the real engines, twice."""
    (tmp_path / "pool").mkdir()
    (tmp_path / "pool" / "portfolio.toml").write_text(
        """
[portfolio]
name = "Two quays"
currency = "EUR"
valuation-date = 2026-09-30
levels = [0.9, 0.99]
capital-level = 0.99

[[line]]
name = "Quays"
frequency = { family = "poisson", mean = 3.0 }
severity = { family = "exponential", mean = 1000.0 }

[[cover]]
name = "Layer"
deductible = 500
limit = 2000
"""
    )
    for workers in (1, 2):
        out = tmp_path / f"out-{workers}"
        result = run("assess", tmp_path / "pool", "--out", out, "--years", 20000, "--workers", workers)
        assert result.exit_code == 0, result.output
    one, two = (
        {name: (tmp_path / f"out-{workers}" / name).read_bytes() for name in FILES} for workers in (1, 2)
    )
    assert [name for name in FILES if one[name] != two[name]] == ["manifest.json"]
    assert "Two quays" in one["report.html"].decode()


def process(*arguments: str) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "lossagg", *arguments]
    environment = {name: value for name, value in os.environ.items() if name != "LOSSAGG_DEBUG"}
    return subprocess.run(command, capture_output=True, text=True, env=environment, check=False)


def test_the_program_itself_leaves_with_the_code_of_its_command(tmp_path: Path) -> None:
    ended = process("batch", str(tmp_path / "nowhere"), "--out", str(tmp_path / "out"))
    assert ended.returncode == 2
    assert ended.stderr.startswith("error: there is no such folder of portfolios\n  where: folder ")
    assert process("assess").returncode == 2
    assert process("--version").stdout == f"lossagg {__version__}\n"


def test_help_loads_nothing_heavy() -> None:
    """`lossagg --help` must feel instant, so none of these may be imported on the way."""
    program = (
        "import sys\nfrom lossagg.commands.app import build_app\n"
        "build_app()(['--help'], standalone_mode=False)\n"
        "heavy = {'numpy', 'scipy', 'pandas', 'numba', 'matplotlib', 'pydantic', 'openpyxl', 'rich'}\n"
        "sys.exit(', '.join(sorted(heavy & set(sys.modules))) or 0)"
    )
    ended = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=False)
    assert ended.returncode == 0, ended.stderr
