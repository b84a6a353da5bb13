"""The rules of the house: layering, style, types, and what may stand at the top level."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
TOP_LEVEL = {"README.md", "DEVELOPERS.md", "pyproject.toml", "lossagg", "portfolios", "tests", "validation"}


def run(*command: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)


def tool(name: str) -> str:
    return str(Path(sys.executable).with_name(name))


@pytest.mark.parametrize(
    "command",
    [
        pytest.param(("lint-imports", "--no-cache"), id="a room imports only from rooms below it"),
        pytest.param(("ruff", "check", "."), id="style"),
        pytest.param(("ruff", "format", "--check", "."), id="layout of the code"),
        pytest.param(("mypy",), id="strict types"),
    ],
)
def test_house_rule(command: tuple[str, ...]) -> None:
    result = run(tool(command[0]), *command[1:])
    assert result.returncode == 0, result.stdout + result.stderr


def test_layering_contract_sees_imports_inside_functions(tmp_path: Path) -> None:
    """The contract must fail on a planted upward import, hidden in a function."""
    package = tmp_path / "lossagg"
    for room in ("kernels", "engines"):
        (package / room).mkdir(parents=True)
        (package / room / "__init__.py").write_text("")
    (package / "__init__.py").write_text("")
    (package / "kernels" / "loop.py").write_text(
        "def f():\n    from lossagg import engines\n    return engines\n"
    )
    (tmp_path / "contracts.toml").write_text(
        '[tool.importlinter]\nroot_package = "lossagg"\n[[tool.importlinter.contracts]]\n'
        'name = "layers"\ntype = "layers"\ncontainers = ["lossagg"]\nlayers = ["engines", "kernels"]\n'
    )
    result = subprocess.run(
        [tool("lint-imports"), "--config", "contracts.toml", "--no-cache"],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        check=False,
        env={"PYTHONPATH": str(tmp_path), "PATH": ""},
    )
    assert result.returncode == 1, result.stdout + result.stderr
    assert "lossagg.kernels.loop" in result.stdout


def test_top_level_holds_only_what_the_plan_names() -> None:
    listed = run("git", "ls-files")
    if listed.returncode != 0:
        pytest.skip("not a git checkout")
    top = {name.split("/")[0] for name in listed.stdout.splitlines()}
    assert {name for name in top if not name.startswith(".")} <= TOP_LEVEL


def test_help_loads_no_numerics() -> None:
    """`lossagg --help` must feel instant: no numpy, scipy, pandas, numba or matplotlib behind it."""
    code = (
        "import sys, lossagg.commands as c\n"
        "sys.argv = ['lossagg', '--help']\n"
        "try:\n    c.main()\nexcept SystemExit:\n    pass\n"
        "heavy = {'numpy', 'scipy', 'pandas', 'numba', 'matplotlib', 'pydantic'}\n"
        "print('LOADED', sorted(heavy & set(sys.modules)))\n"
    )
    result = run(sys.executable, "-c", code)
    assert "LOADED []" in result.stdout, result.stdout + result.stderr


def test_public_surface_is_complete() -> None:
    import lossagg

    for name in set(lossagg.__all__) - {"__version__"}:
        assert getattr(lossagg, name).__doc__, name
