"""Arguments and printing, nothing else; whatever a command needs is imported when it runs."""

from __future__ import annotations

import os
import sys

_UNFORESEEN = 3
_STOPPED = 130


def main() -> None:
    """The console script: every error becomes words on stderr and an exit status; nobody is shown a traceback."""
    status = _status()
    try:
        sys.stdout.flush()
    except BrokenPipeError:
        _reader_left()
    except OSError as trouble:
        status = status or _told(trouble)
        _reader_left()
    raise SystemExit(status)


def _status() -> int:
    from owlight.errors import OwlightError, StopNow

    try:
        from owlight.cli.app import app

        app(standalone_mode=True)
    except SystemExit as end:
        if type(sys.stdout).__name__ == "PacifyFlushWrapper":  # how typer marks that the reader of our output left
            return 0
        return end.code if isinstance(end.code, int) else int(end.code is not None)
    except OwlightError as trouble:
        print(f"owlight: {trouble}", file=sys.stderr)
        return trouble.exit_status
    except (StopNow, KeyboardInterrupt):
        return _STOPPED
    except BrokenPipeError:
        _reader_left()
    except Exception as trouble:
        return _told(trouble)
    return 0


def _reader_left() -> None:
    """Whoever read our output left (for example `| head`); nothing more can be said to it."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _told(trouble: Exception) -> int:
    """What nobody foresaw: two sentences on the screen, the traceback in a file."""
    import traceback

    from owlight import shipped

    place = "nowhere, because the cache folder cannot be written"
    try:
        kept = shipped.user_cache() / "last_fault.txt"
        kept.parent.mkdir(parents=True, exist_ok=True)
        kept.write_text("".join(traceback.format_exception(trouble)), "utf-8")
        place = str(kept)
    except OSError:
        pass
    print(
        f"owlight: {type(trouble).__name__}: {trouble}. Nobody foresaw this; a bench that was open has been made safe "
        f"and what was measured is in the logbook.\nThe details are in {place}; please report them.",
        file=sys.stderr,
    )
    return _UNFORESEEN
