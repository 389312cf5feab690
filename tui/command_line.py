"""The console entry. Nothing is imported before ctrl+c is listened to: loading numpy alone takes a noticeable time."""

from __future__ import annotations

import os
import sys

INTERRUPTED = 130


def main(argv: list[str] | None = None) -> int:
    """Run the program on ``argv`` (default: the process's own arguments) and return its exit status."""
    try:
        from encircle.tui.commands import run

        return run(sys.argv[1:] if argv is None else argv)
    except KeyboardInterrupt:
        _say_interrupted()
        return INTERRUPTED


def _say_interrupted() -> None:
    """Straight to the descriptor: after an interrupt no half-loaded module is to be relied on."""
    try:
        os.write(2, b"encircle: interrupted\n")
    except OSError:
        return  # standard error is closed; the status says it all


if __name__ == "__main__":
    raise SystemExit(main())
