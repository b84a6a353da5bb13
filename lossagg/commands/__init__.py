"""The command line: reads arguments, calls the rooms below, prints. No arithmetic."""

from __future__ import annotations

import os
import signal


def main() -> None:
    """Run the command line; the console script `lossagg` and `python -m lossagg` call it."""
    # Work already runs side by side; a sum of products by several threads would only wait for them, and its
    # last digit would depend on their number. Read by the library when numpy is first imported, so before.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    from lossagg.commands.app import build_app

    # A polite end from outside leaves as cleanly as Ctrl-C does.
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    build_app()(prog_name="lossagg")
