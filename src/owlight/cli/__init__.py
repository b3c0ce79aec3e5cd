"""Arguments and printing, nothing else; whatever a command needs is imported when it runs."""

from __future__ import annotations

import os
import sys

_UNFORESEEN = 3
_STOPPED = 130
_NO_BENCH = "No bench was open."
_WHAT_IS_SAFE = dict.fromkeys(("forecast", "show", "report", "logbook", "demodulate"), _NO_BENCH) | {
    "safe": "The bench may not be safe: look at it.",
    "identify": "Nothing was set on the bench.",
    "simulate": "No hardware is concerned.",
}
_MEASURED = "A bench that was open has been made safe, and what was measured is in the logbook."


def main() -> None:
    """The console script: every error becomes words on stderr and an exit status; nobody is shown a traceback."""
    status = _status()
    try:
        _flush()
    except BrokenPipeError:
        _reader_left()
    except OSError as trouble:
        told = _unwritable(trouble)
        status = status or told
    raise SystemExit(status)


def _flush() -> None:
    if sys.stdout is not None:  # it is where a shell closed it: `>&-`
        sys.stdout.flush()


def _status() -> int:
    from owlight.errors import OwlightError, StopNow

    try:
        from owlight.cli.app import app
        from owlight.shipped import program

        app(standalone_mode=True, prog_name=program())
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
        return _unwritable(trouble) if isinstance(trouble, OSError) and _while_printing(trouble) else _told(trouble)
    return 0


def _while_printing(trouble: BaseException) -> bool:
    """Raised in this package or its parser of arguments, which do nothing but print."""
    last = trouble.__traceback__
    while last is not None and last.tb_next is not None:
        last = last.tb_next
    return last is not None and last.tb_frame.f_globals["__name__"].startswith(("owlight.cli", "typer"))


def _unwritable(trouble: OSError) -> int:
    from owlight.errors import StorageError

    _reader_left()
    print(
        f"owlight: The output could not be written ({trouble.strerror or trouble}). "
        "Make room where it goes, or send it elsewhere, and ask again.",
        file=sys.stderr,
    )
    return StorageError.exit_status


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
    command = next((word for word in sys.argv[1:] if not word.startswith("-")), "")
    print(
        f"owlight: {type(trouble).__name__}: {trouble}. Nobody foresaw this. {_WHAT_IS_SAFE.get(command, _MEASURED)}\n"
        f"The details are in {place}; please report them.",
        file=sys.stderr,
    )
    return _UNFORESEEN
