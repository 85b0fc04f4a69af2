"""A report's folder: whole files at any moment, mixed reports named and mended, other files left alone."""

from __future__ import annotations

import json
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from earthwork.errors import OutputError
from earthwork.files.report_folder import JOURNAL, MANIFEST, ReportFolder, find_mixed

PATTERNS = ("a.txt", "b.txt", "c.txt", "d.csv", MANIFEST)

WRITE = """
import sys
from earthwork.files.report_folder import ReportFolder
{before}
directory, text, names = sys.argv[1], sys.argv[2], sys.argv[3].split(",")
with ReportFolder(directory, patterns={patterns!r}, chosen={patterns!r}, inputs=text, facts={{}}, overwrite=True) as f:
    for name in names:
        f.path(name).write_text(text * 1000)
"""
KILL = """
import os, signal
real, left = os.replace, [int(sys.argv[4])]
def replace(a, b):
    left[0] -= 1
    if left[0] < 0:
        os.kill(os.getpid(), signal.SIGKILL)
    real(a, b)
os.replace = replace
"""


def write(directory, text, names="a.txt,b.txt,c.txt", *, chosen=PATTERNS, overwrite=True):
    with ReportFolder(
        directory, patterns=PATTERNS, chosen=chosen, inputs=text, facts={"command": "report"}, overwrite=overwrite
    ) as folder:
        for name in names.split(","):
            folder.path(name).write_text(text * 1000)
    return folder


def texts(directory: Path) -> dict[str, str]:
    return {p.name: p.read_text() for p in directory.iterdir() if p.is_file() and p.suffix in (".txt", ".csv")}


def test_the_manifest_tells_every_file(tmp_path):
    write(tmp_path / "r", "old")
    manifest = json.loads((tmp_path / "r" / MANIFEST).read_text())
    assert [row["name"] for row in manifest["files"]] == ["a.txt", "b.txt", "c.txt"]
    assert manifest["files"][0]["bytes"] == 3000
    assert manifest["inputs_sha256"] == "old"
    assert find_mixed(tmp_path / "r") is None
    assert not (tmp_path / "r" / JOURNAL).exists()


@pytest.mark.parametrize("renames", range(6))
def test_killed_at_any_rename_every_file_is_whole_and_the_next_run_mends(tmp_path, renames):
    directory = tmp_path / "r"
    write(directory, "old")
    script = WRITE.format(before=KILL, patterns=PATTERNS)
    done = subprocess.run([sys.executable, "-c", script, str(directory), "new", "a.txt,b.txt,d.csv", str(renames)])
    assert done.returncode == (-signal.SIGKILL if renames < 5 else 0)
    assert set(texts(directory).values()) <= {"old" * 1000, "new" * 1000}
    mixed = find_mixed(directory)
    if renames < 5:
        assert mixed is not None
        assert mixed.died
        # journal, a, b, d, manifest: after the second rename the report is of two runs
        assert bool(mixed.files) == (renames >= 2)
        assert ("mixed" in mixed.message) == (renames >= 2)
    write(directory, "newer", "a.txt,b.txt,d.csv")
    assert find_mixed(directory) is None
    assert texts(directory) == dict.fromkeys(("a.txt", "b.txt", "d.csv"), "newer" * 1000)
    assert not list(directory.glob(".unfinished-*"))


def test_a_mixed_report_is_mended_without_overwrite(tmp_path):
    write(tmp_path, "old")
    (tmp_path / "b.txt").write_text("of another run")
    assert find_mixed(tmp_path).files == ("b.txt",)
    write(tmp_path, "new", overwrite=False)
    assert find_mixed(tmp_path) is None


def test_a_whole_report_is_not_replaced_unasked(tmp_path):
    write(tmp_path, "old")
    with pytest.raises(OutputError, match=r"has a\.txt, b\.txt, c\.txt and 1 more already.*--overwrite"):
        write(tmp_path, "new", overwrite=False)
    assert texts(tmp_path)["a.txt"] == "old" * 1000


def test_a_part_is_added_beside_what_is_there(tmp_path):
    write(tmp_path, "old", chosen=("a.txt", "b.txt", "c.txt"))
    write(tmp_path, "old", "d.csv", chosen=("d.csv",), overwrite=False)
    assert sorted(texts(tmp_path)) == ["a.txt", "b.txt", "c.txt", "d.csv"]
    assert find_mixed(tmp_path) is None


def test_files_of_others_are_left_alone(tmp_path):
    write(tmp_path, "old")
    (tmp_path / "d.csv").write_text("a friend's")
    assert find_mixed(tmp_path) is None
    write(tmp_path, "new")
    assert (tmp_path / "d.csv").read_text() == "a friend's"


def test_what_a_run_no_longer_writes_goes(tmp_path):
    write(tmp_path, "old")
    write(tmp_path, "new", "a.txt")
    assert sorted(texts(tmp_path)) == ["a.txt"]


def test_an_error_leaves_the_folder_as_it_was(tmp_path):
    write(tmp_path, "old")
    before = {p.name: p.stat().st_mtime_ns for p in tmp_path.iterdir()}

    def fails():
        with ReportFolder(tmp_path, patterns=PATTERNS, chosen=PATTERNS, inputs="x", facts={}, overwrite=True) as f:
            f.path("a.txt").write_text("half")
            raise ZeroDivisionError("division")

    with pytest.raises(ZeroDivisionError, match="division"):
        fails()
    assert {p.name: p.stat().st_mtime_ns for p in tmp_path.iterdir()} == before


def test_no_room_leaves_the_folder_as_it_was(tmp_path):
    write(tmp_path, "old")
    before = """
import resource, sys
resource.setrlimit(resource.RLIMIT_FSIZE, (2000, 2000))
"""
    script = WRITE.format(before=before, patterns=PATTERNS)
    done = subprocess.run(
        [sys.executable, "-c", script, str(tmp_path), "new", "a.txt,b.txt"], capture_output=True, text=True
    )
    assert "OutputError" in done.stderr
    assert "Nothing was changed there" in done.stderr
    assert texts(tmp_path)["a.txt"] == "old" * 1000
    assert find_mixed(tmp_path) is None


def test_a_run_that_goes_on_is_not_taken_for_dead(tmp_path):
    with ReportFolder(tmp_path, patterns=PATTERNS, chosen=PATTERNS, inputs="x", facts={}) as running:
        assert running._aside is not None
        assert find_mixed(tmp_path) is None
        other = write(tmp_path, "other")
        assert other.mixed is None
        assert running._aside.is_dir()
        assert texts(tmp_path)["a.txt"] == "other" * 1000
