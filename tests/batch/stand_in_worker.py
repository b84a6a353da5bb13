"""A worker whose portfolios do as their file says: run well, fail, die or fall silent.

Run as `python stand_in_worker.py REQUEST` in place of `python -m lossagg.batch.worker REQUEST`: the
real worker on an invented assessment, with faults where the portfolio file asks for one.
"""

from __future__ import annotations

import os
import signal
import sys
import tomllib
from pathlib import Path
from types import SimpleNamespace
from typing import Any

sys.path.insert(0, str(Path(__file__).parents[1]))

from invented_assessment import small_assessment

from lossagg.batch import worker
from lossagg.errors import InputError


def read_portfolio(folder: str, pricer: object = None) -> SimpleNamespace:
    fault = tomllib.loads((Path(folder) / "portfolio.toml").read_text())["portfolio"]["description"]
    match fault:
        case "broken":
            raise InputError(
                "the limit is negative", where=f"file {folder}/portfolio.toml", value=-1, remedy="Raise it."
            )
        case "unexpected":
            raise ZeroDivisionError("division by zero")
        case "memory":
            raise MemoryError
        case "exit":
            os._exit(7)
        case "killed":
            os.kill(os.getpid(), signal.SIGKILL)

    def assess(**settings: Any) -> SimpleNamespace:
        document = small_assessment()
        document["portfolio"]["name"] = Path(folder).name
        document["run"]["seed"] = settings["seed"]
        document["run"]["years"] = settings.get("years", 1_000_000)
        if fault == "withheld":
            document["headline"] |= {
                "withheld": True,
                "value": None,
                "less_mean": None,
                "reason": "withheld: planted",
            }
            document["crosscheck"]["verdict"] = "disagree"
        return SimpleNamespace(to_dict=lambda: document)

    return SimpleNamespace(assess=assess)


if __name__ == "__main__":
    sys.modules["lossagg.portfolio"] = SimpleNamespace(read_portfolio=read_portfolio)  # type: ignore[assignment]
    sys.modules["lossagg.pricing"] = SimpleNamespace(options_of_assessment=None)  # type: ignore[assignment]
    sys.exit(worker.main(sys.argv[1:]))
