"""Output folders: whole or not at all."""

import errno
import os
import shutil
import signal
import tempfile

import pytest

from earthwork.errors import OutputError
from earthwork.files.output import OutputFolder, safe_file_name


def _write(folder, **files):
    for name, text in files.items():
        folder.path(f"{name}.csv").write_text(text)


def _names(directory):
    return sorted(p.name for p in directory.iterdir())


def test_files_appear_when_the_block_ends(tmp_path):
    out = tmp_path / "a" / "b"
    with OutputFolder(out) as folder:
        _write(folder, one="1", two="2")
        assert [n for n in _names(out) if not n.startswith(".")] == []
    assert _names(out) == ["one.csv", "two.csv"]
    assert [p.name for p in folder.written] == ["one.csv", "two.csv"]


def _fail(out, error):
    with OutputFolder(out, overwrite=True) as folder:
        _write(folder, one="new")
        raise error


def test_an_error_leaves_the_folder_as_it_was(tmp_path):
    out = tmp_path / "out"
    with pytest.raises(ZeroDivisionError, match="division"):
        _fail(out, ZeroDivisionError("division"))
    assert not out.exists()
    out.mkdir()
    (out / "one.csv").write_text("old")
    with pytest.raises(KeyboardInterrupt, match=r"^$"):
        _fail(out, KeyboardInterrupt())
    assert _names(out) == ["one.csv"]
    assert (out / "one.csv").read_text() == "old"


def test_existing_files_are_refused_unless_told_otherwise(tmp_path):
    (tmp_path / "volumes_zones.csv").write_text("old")
    (tmp_path / "notes.txt").write_text("mine")
    with (
        pytest.raises(OutputError, match=r"has volumes_zones\.csv already.*--overwrite"),
        OutputFolder(tmp_path, patterns=("volumes_*.csv",)),
    ):
        pass
    with OutputFolder(tmp_path, patterns=("volumes_*.csv",), overwrite=True) as folder:
        folder.path("volumes_zones.csv").write_text("new")
    assert (tmp_path / "volumes_zones.csv").read_text() == "new"
    assert (tmp_path / "notes.txt").read_text() == "mine"


def test_files_of_other_commands_do_not_matter(tmp_path):
    (tmp_path / "balance.json").write_text("{}")
    with OutputFolder(tmp_path, patterns=("volumes.json",)) as folder:
        folder.path("volumes.json").write_text("{}")
    assert _names(tmp_path) == ["balance.json", "volumes.json"]


def test_what_an_earlier_run_wrote_and_this_one_does_not_is_removed(tmp_path):
    for name in ("volumes_zones.csv", "volumes_mine.csv", "volumes_depth.tif", "volumes_depth.tif.aux.xml"):
        (tmp_path / name).write_text("old")
    earlier = ["volumes_zones.csv", "volumes_depth.tif", "../../elsewhere.csv"]
    with OutputFolder(tmp_path, patterns=("volumes_*",), earlier=earlier, overwrite=True) as folder:
        folder.path("volumes_depth.tif").write_text("new")
    assert _names(tmp_path) == ["volumes_depth.tif", "volumes_mine.csv"]


def test_only_announced_names_are_written(tmp_path):
    with OutputFolder(tmp_path / "o", patterns=("volumes.json",)) as folder:
        with pytest.raises(ValueError, match="not among the names announced"):
            folder.path("other.json")
        with pytest.raises(ValueError, match="not among"):
            folder.path("../volumes.json")


def test_a_file_in_the_place_of_the_folder(tmp_path):
    (tmp_path / "out").write_text("x")
    with pytest.raises(OutputError, match="is a file; --out takes a folder"), OutputFolder(tmp_path / "out"):
        pass


def test_a_full_disk_is_one_message(tmp_path):
    with pytest.raises(OutputError, match="cannot be written: the disk is full"), OutputFolder(tmp_path / "o"):
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
    assert not (tmp_path / "o").exists()


@pytest.fixture
def ends():
    """Requests to end that reach the program, as the command line takes them."""

    def end(number, frame):
        raise KeyboardInterrupt

    numbers = [n for n in ("SIGINT", "SIGTERM", "SIGHUP") if hasattr(signal, n)]
    before = {n: signal.signal(getattr(signal, n), end) for n in numbers}
    yield
    for n, handler in before.items():
        signal.signal(getattr(signal, n), handler)


@pytest.mark.parametrize("number", ["SIGINT", "SIGTERM", "SIGHUP"])
def test_an_interrupt_waits_until_all_files_are_renamed(tmp_path, monkeypatch, ends, number):
    replaced = []
    real = os.replace

    def slow(source, target):
        if not replaced:
            signal.raise_signal(getattr(signal, number))
        replaced.append(target)
        real(source, target)

    monkeypatch.setattr(os, "replace", slow)
    with pytest.raises(KeyboardInterrupt, match=r"^$"), OutputFolder(tmp_path / "o") as folder:
        _write(folder, one="1", two="2")
    assert _names(tmp_path / "o") == ["one.csv", "two.csv"]


@pytest.mark.parametrize("number", ["SIGINT", "SIGTERM", "SIGHUP"])
def test_a_second_interrupt_waits_until_all_is_removed(tmp_path, monkeypatch, ends, number):
    real = shutil.rmtree

    def slow(place, **options):
        signal.raise_signal(getattr(signal, number))
        real(place, **options)

    monkeypatch.setattr(shutil, "rmtree", slow)
    with pytest.raises(KeyboardInterrupt, match=r"^$"):
        _fail(tmp_path / "o", KeyboardInterrupt())
    assert not (tmp_path / "o").exists()


def test_what_is_ignored_stays_ignored(tmp_path, monkeypatch, ends):
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    real = os.replace
    monkeypatch.setattr(os, "replace", lambda a, b: (signal.raise_signal(signal.SIGINT), real(a, b)))
    with OutputFolder(tmp_path) as folder:
        _write(folder, one="1")
    assert _names(tmp_path) == ["one.csv"]
    assert signal.getsignal(signal.SIGINT) == signal.SIG_IGN


def test_a_folder_that_was_made_in_vain_is_removed(tmp_path, monkeypatch):
    def full(**options):
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(tempfile, "mkdtemp", full)
    with pytest.raises(OutputError, match="the disk is full"), OutputFolder(tmp_path / "a" / "b"):
        pass
    assert _names(tmp_path) == []


@pytest.mark.parametrize(
    ("text", "name"),
    [
        ("Loess", "loess"),
        ("../../etc/passwd", "etc-passwd"),
        ("Ünïcode Ton", "unicode-ton"),
        ("🏗", "unnamed"),
        ("x" * 300, "x" * 60),
        ("CON", "con"),
    ],
)
def test_safe_file_names(text, name):
    assert safe_file_name(text) == name


def test_safe_file_names_are_unique():
    assert safe_file_name("A b", taken=["a-b", "a-b-2"]) == "a-b-3"
