"""The entry point: start quickly, leave quickly, and end quietly when interrupted at any moment."""

from __future__ import annotations

import contextlib
import gc
import os
import sys


def run() -> None:
    """Run the command line and leave with its exit code.

    A forecast lives for a moment: collecting garbage, and taking the interpreter down piece by piece when all is
    written, would take a fifth of its time.
    """
    gc.disable()
    try:
        from stackmill.cli.main import main

        code = main()
        for stream in (sys.stdout, sys.stderr):
            with contextlib.suppress(OSError, AttributeError):  # gone, or never there
                stream.flush()
    except KeyboardInterrupt:
        code = 130
    os._exit(code)
