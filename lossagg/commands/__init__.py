"""The command line: reads arguments, calls the rooms below, prints. No arithmetic."""

from __future__ import annotations

import signal


def main() -> None:
    """Run the command line; the console script `lossagg` and `python -m lossagg` call it."""
    from lossagg.commands.app import build_app

    # A polite end from outside leaves as cleanly as Ctrl-C does.
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    build_app()(prog_name="lossagg")
