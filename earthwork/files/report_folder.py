"""The folder of a report: files aside and then renamed, the manifest last, and what a run that died has left.

The manifest lists every file with its digest and the digest of the inputs that it was made from. Before the first file
gets its place, a journal names all that will; it goes when the manifest stands. A file that is not as the manifest says,
or that only a journal names, is of another run: the report is then *mixed*, each file of it whole. Files that neither
names are not the report's, and are left alone.
"""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import IO, Any

from earthwork.files.hashing import file_facts
from earthwork.files.output import ASIDE, SIDECARS, OutputFolder

MANIFEST = "report_manifest.json"
JOURNAL = ".report_publishing.json"
_LOCK = ".running"


@dataclass(frozen=True)
class Mixed:
    """A report whose files are not all of one run."""

    directory: Path
    files: tuple[str, ...]  #: names of the files that are not as the manifest says
    died: bool  #: whether a run that did not come to its end has left its folder

    @property
    def message(self) -> str:
        """What was found, for people."""
        if not self.files:
            return f"{self.directory}: an earlier run did not come to its end; what it had begun is removed"
        names = ", ".join(self.files[:4]) + (f" and {len(self.files) - 4} more" if len(self.files) > 4 else "")
        return (
            f"{self.directory}: the report there is mixed, {names} not of the run that its manifest tells of; "
            "this run mends it"
        )


def read_manifest(directory: Path) -> dict[str, Any] | None:
    """The manifest of a report, or None where there is none that can be read."""
    try:
        manifest = json.loads((directory / MANIFEST).read_bytes())
        return manifest if isinstance(manifest["files"], list) else None
    except (OSError, ValueError, KeyError, TypeError):
        return None


def listed(manifest: dict[str, Any] | None) -> dict[str, dict[str, Any]]:
    """Entries of a manifest by file name."""
    rows = manifest["files"] if manifest else []
    return {str(row["name"]): row for row in rows if isinstance(row, dict) and "name" in row}


def find_mixed(directory: Path) -> Mixed | None:
    """What is wrong with the report in a folder, or None: there is no report, or all of it is of one run."""
    if not directory.is_dir():
        return None
    entries = listed(read_manifest(directory))
    begun = set(_journal(directory)) - set(entries)
    wrong = [name for name, row in entries.items() if not _is_as_listed(directory / name, row)]
    wrong += [name for name in begun if (directory / name).exists()]
    died = bool(_left_behind(directory))
    return Mixed(directory, tuple(sorted(wrong)), died) if wrong or died else None


def _journal(directory: Path) -> list[str]:
    """Names that a run was about to publish when it died."""
    try:
        names = json.loads((directory / JOURNAL).read_bytes())
        return [str(name) for name in names if Path(str(name)).name == str(name)]
    except (OSError, ValueError, TypeError):
        return []


def _is_as_listed(path: Path, entry: dict[str, Any]) -> bool:
    if not path.is_file() or path.stat().st_size != entry.get("bytes"):
        return False
    return bool(file_facts(path)["sha256"] == entry.get("sha256"))


def _left_behind(directory: Path) -> list[Path]:
    """Folders of runs that did not come to their end and are not running now."""
    return [path for path in directory.glob(ASIDE + "*") if path.is_dir() and not _is_running(path)]


def _is_running(aside: Path) -> bool:
    """Whether a live process holds the lock of a folder aside; True where that cannot be known."""
    try:
        import fcntl
    except ImportError:  # no such locks on this system: leave the folder alone
        return True
    try:
        with open(aside / _LOCK) as file:
            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
            return False
    except FileNotFoundError:
        return False
    except OSError:
        return True


class ReportFolder(OutputFolder):
    """A folder that a report is written into; see :class:`earthwork.files.output.OutputFolder`.

    Args:
        directory, patterns, overwrite: as there; a report that is mixed is mended without ``overwrite``.
        chosen: the names that this run publishes, as patterns; other files are made aside and dropped.
        inputs: digest of the inputs that the run is made from.
        facts: what else the manifest tells.
    """

    def __init__(
        self,
        directory: str | Path,
        *,
        patterns: Sequence[str],
        chosen: Sequence[str],
        inputs: str,
        facts: dict[str, Any],
        overwrite: bool = False,
    ) -> None:
        self.mixed = find_mixed(Path(directory))
        mends = self.mixed is not None and bool(self.mixed.files)
        super().__init__(directory, patterns=patterns, overwrite=overwrite or mends)
        self._chosen = OutputFolder(directory, patterns=chosen)
        self._inputs = inputs
        self._facts = facts
        self._lock: IO[str] | None = None
        self.of_other_inputs: tuple[str, ...] = ()  #: once published: files beside the new ones, made from other inputs

    def __enter__(self) -> ReportFolder:
        if not self.overwrite:
            self._refuse_present()
        super().__enter__()
        assert self._aside is not None
        self._lock = open(self._aside / _LOCK, "w")
        try:
            import fcntl

            fcntl.flock(self._lock, fcntl.LOCK_EX)
        except ImportError:  # no such locks on this system: folders left behind are not removed there
            pass
        return self

    def _refuse_present(self) -> None:
        """Only what this run writes is in the way."""
        every, self.patterns = self.patterns, self._chosen.patterns
        try:
            self.refuse_present()
        finally:
            self.patterns = every
        self.overwrite = True

    def _publish(self) -> None:
        assert self._aside is not None
        for path in _left_behind(self.directory):
            shutil.rmtree(path, ignore_errors=True)
        new = sorted(p for p in self._aside.iterdir() if p.name != _LOCK and self._chosen.announces(p.name))
        before = listed(read_manifest(self.directory))
        rows = {name: row for name, row in before.items() if not self._chosen.announces(name)}
        rows = {name: row for name, row in rows.items() if _is_as_listed(self.directory / name, row)}
        rows.update({p.name: self._entry(p) for p in new})
        last = self._write(MANIFEST, {**self._facts, "inputs_sha256": self._inputs, "files": _sorted(rows)})
        gone = (set(before) | set(_journal(self.directory))) - set(rows)
        journal = self._write(JOURNAL, sorted({*(p.name for p in new), *gone}))
        for file in [*new, last, journal]:
            _to_disk(file)
        os.replace(journal, self.directory / JOURNAL)
        for file in new:
            os.replace(file, self.directory / file.name)
            for ending in SIDECARS:
                (self.directory / (file.name + ending)).unlink(missing_ok=True)
        for name in gone:
            (self.directory / name).unlink(missing_ok=True)
        os.replace(last, self.directory / MANIFEST)
        (self.directory / JOURNAL).unlink()
        self.written = tuple(self.directory / name for name in [*(p.name for p in new), MANIFEST])
        self._made = []
        self.of_other_inputs = tuple(n for n in sorted(rows) if rows[n].get("inputs_sha256") != self._inputs)

    def _write(self, name: str, content: Any) -> Path:
        assert self._aside is not None
        path = self._aside / name
        path.write_text(json.dumps(content, ensure_ascii=False, indent=2) + "\n", encoding="utf-8")
        return path

    def _entry(self, path: Path) -> dict[str, Any]:
        return {"name": path.name, **file_facts(path), "inputs_sha256": self._inputs}

    def _clean(self) -> None:
        if self._lock is not None:
            self._lock.close()
            self._lock = None
        super()._clean()


def _sorted(rows: dict[str, dict[str, Any]]) -> list[dict[str, Any]]:
    return [rows[name] for name in sorted(rows)]


def _to_disk(path: Path) -> None:
    """Make sure that a file is on the disk before its name is: a power cut must not leave an empty one."""
    with open(path, "rb+") as file:
        os.fsync(file.fileno())
