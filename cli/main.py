"""The entry point ``earthwork``: sets the streams up, runs a command, and turns every end into an exit code.

0 done · 2 bad input, bad usage, or no room to write · 3 a warning with ``--strict`` · 130 interrupted.
"""

from __future__ import annotations

import contextlib
import errno
import gc
import os
import signal
import sys
from collections.abc import Sequence
from typing import Any

import typer

from earthwork.errors import EarthworkError

from .commands import app
from .terminal import prepare_streams, say, say_error

#: Base of the usage errors, wherever the installed typer keeps it.
_UsageError: Any = typer.BadParameter.__mro__[2]
assert _UsageError.__name__ == "ClickException"

_INTERRUPTED = 130
_NO_ROOM = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG)


def run(arguments: Sequence[str] | None = None) -> None:
    """Run a command line and leave the process with its exit code."""
    # Importing makes a million objects and no garbage: looking for some all the while costs a tenth of the start.
    gc.set_threshold(500_000)
    prepare_streams()
    # GDAL writes its own remarks to stderr; what matters of them stands in our message.
    os.environ.setdefault("CPL_LOG", os.devnull)
    signal.signal(signal.SIGTERM, _terminate)
    # a terminal that is closed asks to end as well, unless the run is to outlive it (nohup)
    if hasattr(signal, "SIGHUP") and signal.getsignal(signal.SIGHUP) == signal.SIG_DFL:
        signal.signal(signal.SIGHUP, _terminate)
    code = main(arguments)
    with contextlib.suppress(OSError, ValueError):
        sys.stderr.flush()
    # Nothing of what stands in memory needs to be taken apart: looking through it costs 0.2 s of every end.
    gc.freeze()
    sys.exit(code)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run a command line; the exit code."""
    try:
        given = None if arguments is None else list(arguments)
        code = int(app(args=given, prog_name="earthwork", standalone_mode=False) or 0)
        sys.stdout.flush()
        return _interrupted() if code == _INTERRUPTED else code
    except typer.Exit as end:
        return _interrupted() if end.exit_code == _INTERRUPTED else int(end.exit_code)
    except _UsageError as error:
        error.show()
        return 2
    except EarthworkError as error:
        say_error(str(error))
        return 2
    except (KeyboardInterrupt, typer.Abort):
        return _interrupted()
    except (BrokenPipeError, SystemExit):
        # typer ends the process itself, with code 1, when the reader of stdout has gone; nothing else here exits.
        return _reader_gone()
    except MemoryError:
        say_error("not enough memory; try --threads 1, or a coarser ground.cell")
        return 2
    except OSError as error:
        if error.errno not in _NO_ROOM:
            raise
        _discard_stdout()
        say_error(f"cannot write the result: {(error.strerror or str(error)).lower()}")
        return 2


def _interrupted() -> int:
    say("interrupted; nothing half written is left")
    return _INTERRUPTED


def _reader_gone() -> int:
    """Whoever read stdout has had enough, as with ``| head``: that is no failure."""
    _discard_stdout()
    return 0


def _discard_stdout() -> None:
    """Send what is still in stdout's buffer nowhere, so that the exit does not fail on it again."""
    with contextlib.suppress(OSError, ValueError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _terminate(number: int, frame: Any) -> None:
    """A request to end is taken as an interrupt, so that nothing half written stays."""
    raise KeyboardInterrupt
