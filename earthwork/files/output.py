"""Output folders: everything is written aside and renamed at the end, so files appear whole or not at all."""

from __future__ import annotations

import errno
import fnmatch
import os
import re
import shutil
import signal
import tempfile
import threading
import unicodedata
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager, suppress
from pathlib import Path
from types import TracebackType

from earthwork.errors import OutputError

ASIDE = ".unfinished-"
#: What other programs leave beside a file and would take for facts about the new one.
SIDECARS = (".aux.xml", ".ovr", "-wal", "-shm", "-journal")

#: Signals that ask a process to end; not every system has the last.
_ENDING = tuple(getattr(signal, name) for name in ("SIGINT", "SIGTERM", "SIGHUP") if hasattr(signal, name))


class OutputFolder:
    """A folder that a command writes its files into, as a context manager.

    Files are written to :meth:`path` (a folder aside, in the same place) and renamed into the folder when the
    block ends without an error; on an error or an interrupt the folder is as it was before.

    Args:
        directory: the folder; made when it is not there.
        patterns: shell patterns of all names that the command may write, such as ``("volumes_*.csv",)``.
        earlier: names that an earlier run wrote; with ``overwrite``, those not written again are removed, so
            that no old file stands beside new ones.
        overwrite: replace files of an earlier run.

    Raises:
        OutputError: the folder has such files already and ``overwrite`` is not set, it cannot be written, or
            the disk is full.
    """

    def __init__(
        self,
        directory: str | Path,
        *,
        patterns: Sequence[str] = ("*",),
        earlier: Sequence[str] = (),
        overwrite: bool = False,
    ):
        self.directory = Path(directory)
        self.patterns = tuple(patterns)
        self.earlier = tuple(name for name in earlier if self.announces(name))
        self.overwrite = overwrite
        self.written: tuple[Path, ...] = ()
        self._aside: Path | None = None
        self._made: list[Path] = []
        self._open: list[Callable[[], None]] = []

    def __enter__(self) -> OutputFolder:
        if self.directory.exists() and not self.directory.is_dir():
            raise OutputError(f"{self.directory}: is a file; --out takes a folder")
        if not self.overwrite:
            self.refuse_present()
        try:
            with _interrupts_later(), output_errors(self.directory):
                self._make(self.directory)
                self._aside = Path(tempfile.mkdtemp(prefix=ASIDE, dir=self.directory))
        except BaseException:
            self._clean()
            raise
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        try:
            if kind is None:
                with _interrupts_later(), output_errors(self.directory):
                    self._publish()
        finally:
            with _interrupts_later():
                self._clean()
        if isinstance(error, OSError) and error.errno in _UNWRITABLE:
            raise _output_error(error, self.directory) from error

    def refuse_present(self) -> None:
        """Raise an OutputError where the folder has files that the command writes."""
        there = self.present()
        if there:
            names = ", ".join(there[:3]) + (f" and {len(there) - 3} more" if len(there) > 3 else "")
            raise OutputError(
                f"{self.directory}: has {names} already. Give another folder with --out, or --overwrite to replace them"
            )

    def path(self, name: str) -> Path:
        """Where to write a file now; it gets its place in the folder at the end."""
        if self._aside is None:
            raise RuntimeError("an output folder is used in a with block")
        if not self.announces(name):
            raise ValueError(f"{name} is not among the names announced: {', '.join(self.patterns)}")
        return self._aside / name

    def close_with(self, close: Callable[[], None]) -> None:
        """Call something at the end, before what is unfinished is removed: a file may still be open then."""
        self._open.append(close)

    def announces(self, name: str) -> bool:
        """Whether a name is among those that the command may write."""
        plain_name = Path(name).name == name
        return plain_name and any(fnmatch.fnmatchcase(name, pattern) for pattern in self.patterns)

    def present(self) -> list[str]:
        """Names in the folder that the command may write."""
        if not self.directory.is_dir():
            return []
        return sorted(p.name for p in self.directory.iterdir() if self.announces(p.name))

    def _make(self, directory: Path) -> None:
        if directory.is_dir():
            return
        self._make(directory.parent)
        directory.mkdir()
        self._made.append(directory)

    def _publish(self) -> None:
        assert self._aside is not None
        new = sorted(self._aside.iterdir())
        for file in new:
            os.replace(file, self.directory / file.name)
            for ending in SIDECARS:
                (self.directory / (file.name + ending)).unlink(missing_ok=True)
        for name in set(self.earlier) - {file.name for file in new}:
            (self.directory / name).unlink(missing_ok=True)
        self.written = tuple(self.directory / file.name for file in new)
        self._made = []

    def _clean(self) -> None:
        for close in self._open:
            close()
        self._open = []
        if self._aside is not None:
            shutil.rmtree(self._aside, ignore_errors=True)
            self._aside = None
        for directory in reversed(self._made):
            with suppress(OSError):
                directory.rmdir()
        self._made = []


_UNWRITABLE = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EROFS, errno.EACCES, errno.EPERM)


@contextmanager
def output_errors(place: Path) -> Iterator[None]:
    """Turn an error of the operating system into one message that names the place."""
    try:
        yield
    except OSError as error:
        raise _output_error(error, place) from error


def _output_error(error: OSError, place: Path) -> OutputError:
    reason = {errno.ENOSPC: "the disk is full", errno.EDQUOT: "the disk quota is used up"}.get(
        error.errno or 0, (error.strerror or str(error)).lower()
    )
    return OutputError(f"{place}: cannot be written: {reason}. Nothing was changed there")


@contextmanager
def _interrupts_later() -> Iterator[None]:
    """Hold requests to end back while files are renamed or removed, so that the set is never a mixture of two runs."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    held: list[int] = []
    before = {number: signal.getsignal(number) for number in _ENDING}
    # one that is ignored stays so, and one that a program outside Python handles is its own affair
    before = {number: handler for number, handler in before.items() if handler not in (signal.SIG_IGN, None)}
    for number in before:
        signal.signal(number, lambda number, frame: held.append(number))
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
    if held:
        signal.raise_signal(held[0])


def safe_file_name(text: str, taken: Sequence[str] = ()) -> str:
    """A file name stem made of a user's name: at most 60 lower-case ASCII letters, digits and hyphens.

    >>> safe_file_name("Lot 7 / <north>")
    'lot-7-north'
    >>> safe_file_name("../..", taken=("unnamed",))
    'unnamed-2'
    """
    plain = unicodedata.normalize("NFKD", text).encode("ascii", "ignore").decode()
    stem = re.sub(r"[^a-z0-9]+", "-", plain.lower()).strip("-")[:60].strip("-") or "unnamed"
    name, count = stem, 1
    while name in taken:
        count += 1
        name = f"{stem}-{count}"
    return name
