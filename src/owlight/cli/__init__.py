"""Arguments and printing, nothing else; whatever a command needs is imported when it runs."""

from __future__ import annotations

import os
import sys


def main() -> None:
    """The console script: every known error becomes its words on stderr and its exit status."""
    from owlight.errors import OwlightError

    try:
        from owlight.cli.app import app

        app(standalone_mode=True)
    except OwlightError as trouble:
        print(f"owlight: {trouble}", file=sys.stderr)
        raise SystemExit(trouble.exit_status) from None
    except BrokenPipeError:
        # the reader of our output left (for example `| head`); nothing more can be said to it
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        raise SystemExit(0) from None
