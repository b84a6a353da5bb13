"""The process of one portfolio: `python -m lossagg.batch.worker REQUEST`.

The request is a JSON object with the arguments of `assess_folder` and `answer`, the file that gets
the answer. The answer is written in one step, so a process that dies leaves none.
"""

from __future__ import annotations

import json
import os
import sys
from pathlib import Path
from typing import Any

from lossagg.batch.failure import debugging, explain
from lossagg.batch.single import assess_folder


def main(arguments: list[str]) -> int:
    """Assess the portfolio of the request; the return value is the exit code of the process."""
    request: dict[str, Any] = json.loads(arguments[0])
    answer = Path(request.pop("answer"))
    reply = _run(request)
    partial = answer.with_suffix(".part")
    partial.write_text(json.dumps(reply), encoding="utf-8")
    os.replace(partial, answer)
    return int(reply["exit_code"])


def _run(request: dict[str, Any]) -> dict[str, Any]:
    try:
        outcome = assess_folder(**request)
    # The outermost boundary of this process: whatever stopped it is told to the batch.
    except Exception as error:  # noqa: BLE001
        if debugging():
            sys.excepthook(type(error), error, error.__traceback__)
        failure = explain(error)
        return {"status": "failed", "message": failure.sentence(), "exit_code": failure.exit_code}
    status = "withheld" if outcome.withheld else "done"
    return {"status": status, "message": None, "exit_code": 1 if outcome.withheld else 0}


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
