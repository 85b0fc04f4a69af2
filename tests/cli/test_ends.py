"""How a run ends: exit codes, one message, nothing half written, whatever the terminal."""

import os
import subprocess
import sys

import pytest

RUN = [sys.executable, "-c", "from earthwork_cli.main import run; run()"]
HEAVY = (
    "numpy",
    "pandas",
    "matplotlib",
    "rasterio",
    "numba",
    "scipy",
    "shapely",
    "pydantic",
    "pyproj",
    "pyogrio",
)


def _environment(**changes):
    return {**os.environ, **changes}


def test_help_loads_nothing_heavy():
    code = f"""
import sys
from earthwork_cli.main import main
main(["--help"])
main(["--version"])
print([name for name in {HEAVY!r} if name in sys.modules], file=sys.stderr)
main(["volumes", "--help"])  # a command's own options may be parsed with pydantic
print([name for name in {HEAVY!r} if name in sys.modules and name != "pydantic"], file=sys.stderr)
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stderr.split() == ["[]", "[]"]
    assert "balance" in done.stdout


def test_help_is_fast():
    """At most a quarter of a second of processor time, in the best of five runs: others may have the machine too."""
    resource = pytest.importorskip("resource")
    times = []
    for _ in range(5):
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        subprocess.run([*RUN, "--help"], capture_output=True, check=True)
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
        times.append(after.ru_utime - before.ru_utime + after.ru_stime - before.ru_stime)
    assert min(times) <= 0.25


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["volumes"], "give a site file, or both --existing and --finished"),
        (["volumes", "--existing", "a.tif"], "--finished is missing"),
        (["volumes", "site.toml", "--nodata", "3"], "--nodata belong to a run without a site file"),
        (["volumes", "--existing", "a", "--finished", "b", "--zone-name", "n"], "give --zones FILE too"),
        (["volumes", "--existing", "a", "--finished", "b", "--units", "furlong"], "it must be metric or us"),
        (["balance"], "Missing argument"),
        (["balance", "nowhere.toml"], "no such site file"),
        (["balance", "."], "is a folder"),
        (["soil", "s.toml", "--overwrite"], "give the folder with --out DIR"),
        (["soil", "s.toml", "--threads", "0"], "--threads"),
        (["dig"], "No such command"),
        (["soil", "s.toml", "--jason"], "No such option"),
    ],
)
def test_bad_usage_is_one_message_and_code_2(run, arguments, message):
    code, out, err = run(*arguments)
    assert (code, out) == (2, "")
    assert message in " ".join(err.split())
    assert "Traceback" not in err


def test_all_faults_of_a_site_file_in_one_message(run, site):
    text = site.read_text().replace("depth = 0.15", "depht = 0.15").replace('units = "metric"', 'units = "imperial"')
    site.write_text(text)
    code, out, err = run("check", site)
    assert (code, out) == (2, "")
    assert "did you mean 'depth'?" in err
    assert "site.units" in err
    assert err.startswith("error: ")


def test_nothing_is_written_when_the_input_is_bad(run, site, tmp_path):
    (site.parent / "finished.tif").write_bytes(b"no raster")
    code, out, err = run("volumes", site, "--out", tmp_path / "out")
    assert (code, out) == (2, "")
    assert "finished.tif" in err
    assert not (tmp_path / "out").exists()


def test_names_cannot_steer_the_terminal(run, site):
    site.write_text(site.read_text().replace('name = "Juniper Bench"', 'name = "Ju\\u001b[2Jniper [bold]x[/bold]"'))
    code, out, _ = run("soil", site)
    assert code == 0
    assert "\x1b" not in out
    assert "Ju?[2Jniper [bold]x[/bold]" in out


@pytest.mark.parametrize("encoding", ["ascii", "cp1252", "latin-1", "utf-8"])
@pytest.mark.parametrize("json", [[], ["--json"]])
def test_any_encoding(starters, encoding, json):
    done = subprocess.run(
        [*RUN, "soil", str(starters["metric"]), *json],
        capture_output=True,
        check=True,
        env=_environment(PYTHONIOENCODING=encoding, PYTHONUTF8="0"),
    )
    text = done.stdout.decode(encoding)
    assert done.stderr == b""
    if json:
        assert '"command": "soil"' in text
    else:
        assert ("kg/m³" if encoding != "ascii" else "kg/m3") in text


def test_a_reader_that_leaves_is_no_failure(starters):
    process = subprocess.Popen(
        [*RUN, "balance", str(starters["metric"]), "--json", "--quiet"], stdout=subprocess.PIPE, stderr=subprocess.PIPE
    )
    assert process.stdout is not None
    process.stdout.close()
    assert process.wait() == 0
    assert process.stderr.read() == b""
    process.stderr.close()


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="no /dev/full here")
def test_no_room_for_the_result(starters):
    with open("/dev/full", "w") as full:
        done = subprocess.run([*RUN, "soil", str(starters["metric"])], stdout=full, stderr=subprocess.PIPE, text=True)
    assert done.returncode == 2
    assert done.stderr == "error: cannot write the result: no space left on device\n"


@pytest.mark.skipif(os.name != "posix", reason="signals")
@pytest.mark.parametrize("number", ["SIGINT", "SIGTERM", "SIGHUP"])
def test_an_interrupt_leaves_nothing(starters, tmp_path, number):
    out = tmp_path / "out"
    code = f"""
import os, signal
signal.signal(signal.SIGINT, signal.default_int_handler)  # a job in the background ignores it
signal.signal(signal.SIGHUP, signal.SIG_DFL)
import earthwork.reporting.runner as runner
def late(*a, **k):
    os.kill(os.getpid(), signal.{number})
    signal.pause()
runner._write = late
from earthwork_cli.main import run
run(["soil", {str(starters["metric"])!r}, "--out", {str(out)!r}])
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert done.returncode == 130
    assert done.stderr.strip() == "interrupted; nothing half written is left"
    assert done.stdout == ""
    assert not out.exists()


@pytest.mark.skipif(os.name != "posix", reason="signals")
def test_a_run_that_is_to_outlive_its_terminal_does():
    code = """
import os, signal
signal.signal(signal.SIGHUP, signal.SIG_IGN)  # as nohup does
import earthwork_cli.main as main
main.main = lambda arguments: os.kill(os.getpid(), signal.SIGHUP) or 7
main.run([])
"""
    assert subprocess.run([sys.executable, "-c", code]).returncode == 7


def test_a_folder_that_cannot_be_written(run, starters, tmp_path):
    (tmp_path / "file").write_text("x")
    code, out, err = run("soil", starters["metric"], "--out", tmp_path / "file" / "below")
    assert (code, out) == (2, "")
    assert "cannot be written" in err


def test_long_values_leave_the_labels_whole(capsys):
    from earthwork_cli.terminal import print_page

    from earthwork.reporting.page import Facts, Page

    long = "sheepsfoot or padfoot roller, with a pneumatic one to seal the surface " * 2
    print_page(Page("x", (Facts((("group of the soil", long, ""), ("governing test", "short", "and a note"))),)))
    text = capsys.readouterr().out
    assert "group of the soil" in text
    assert "…" not in text
    assert " ".join(text.split()).count("sheepsfoot") == 2


@pytest.mark.parametrize("columns", [40, 79, 80, 100, 110, 113, 114, 200])
def test_no_number_is_cut_off_however_narrow_the_terminal(capsys, monkeypatch, columns):
    from earthwork_cli.terminal import print_page

    from earthwork.reporting.page import Page, Table

    headings = ("material", "use", "cut m³", "strip m³", "over-excavation m³", "dry mass t", "loss %", "compacted m³")
    rows = (
        ("silt", "fill", "122,376,580", "0", "0", "174,998,515", "2.0 (given)", "102,506,159"),
        ("a long name of a material that must wrap", "rock", "−1", "2", "31,415,926,535", "3", "4.25", "5"),
    )
    monkeypatch.setenv("COLUMNS", str(columns))
    print_page(Page("x", (Table(headings, rows),)))
    lines = capsys.readouterr().out.splitlines()
    for row in rows:
        for number in row[2:]:
            assert any(number in line.split() or f" {number} " in f" {line} " for line in lines), number


#: One letter, 40, 200, wide, right to left, combining, with spaces.
_NAMES = ("A", "N" * 40, "W" * 200, "粘" * 50, "مبنى السكن الجامعي الشرقي", "e\u0301" * 30, "one long name " * 14)


@pytest.mark.parametrize("columns", [40, 60, 80, 110, 200])
def test_no_value_or_name_is_cut_off_by_a_long_name(capsys, monkeypatch, columns):
    from earthwork_cli.terminal import print_page

    from earthwork.reporting.page import Facts, Notes, Page

    notes = Notes(lines=_NAMES)
    monkeypatch.setenv("COLUMNS", str(columns))
    print_page(Page("x", (Facts(tuple((name, "1,234,567,890 m³", "dug and refilled") for name in _NAMES)), notes)))
    text = capsys.readouterr().out
    assert "…" not in text
    assert text.count("1,234,567,890 m³") == len(_NAMES)
    letters = "".join(text.split())
    for letter in "NW粘\u0301":
        assert letters.count(letter) == 2 * sum(name.count(letter) for name in _NAMES), letter
    assert letters.count("refilled") == len(_NAMES)


@pytest.mark.parametrize("columns", [40, 80, 110, 200])
def test_tables_line_up_under_whole_headings(capsys, monkeypatch, columns):
    from earthwork_cli.terminal import print_page
    from rich.cells import cell_len

    from earthwork.reporting.page import Page, Table

    headings = ("pad", "natural ground", "of its max.\n%", "difference\nm", "over\nm", "distortion\n1 in", "粘" * 9)
    rows = tuple((name, "loess", "81.2", "12,345,678.90", "0.55", "4,612,113,249", "5") for name in _NAMES)
    monkeypatch.setenv("COLUMNS", str(columns))
    print_page(Page("x", (Table(headings, rows, text_columns=2),)))
    text = capsys.readouterr().out
    assert text.count("粘") == 9 + 50
    for word in ("natural", "ground", "difference", "distortion", "81.2", "12,345,678.90", "4,612,113,249"):
        assert word in text.split(), word
    ends = {cell_len(line[: line.index("81.2")]) for line in text.splitlines() if "81.2" in line}
    assert len(ends) == 1
    # A heading stands in lines, not as one word over the other where names are short.
    assert len(text[: text.index("───")].splitlines()) < 8


def test_columns_line_up_where_the_encoding_lacks_letters(capsys, monkeypatch):
    import io
    import sys

    from earthwork_cli.terminal import prepare_streams, print_page

    from earthwork.reporting.page import Facts, Page, Table

    names = ("± deviation", "粘土 e\u0301", "A", "sum → whole …")
    raw = io.BytesIO()
    monkeypatch.setattr(sys, "stdout", io.TextIOWrapper(raw, encoding="ascii"))
    prepare_streams()
    rows = tuple((name, "1,234.5") for name in names)
    print_page(Page("x", (Table(("row", "cut\nm³"), rows), Facts(tuple((*row, "") for row in rows)))))
    sys.stdout.flush()
    lines = [line for line in raw.getvalue().decode("ascii").splitlines() if "1,234.5" in line]
    assert len({line.index("1,234.5") for line in lines[:4]}) == 1
    assert len({line.index("1,234.5") for line in lines[4:]}) == 1
    assert lines[1].split() == ["??", "e", "1,234.5"]
    assert lines[0].split()[0] == "+/-"


def test_labels_stay_on_one_line_where_notes_stand_below(capsys, monkeypatch):
    from earthwork_cli.terminal import print_page

    from earthwork.reporting.page import Facts, Page

    monkeypatch.setenv("COLUMNS", "40")
    print_page(Page("x", (Facts((("tank that bridges it", "566,947 L", "full at the start, with a lid"),)),)))
    lines = capsys.readouterr().out.splitlines()
    assert lines[2:] == ["  tank that bridges it  566,947 L", "    full at the start, with a lid"]
