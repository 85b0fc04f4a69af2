"""The report as a whole: its files, what it reads, what it says, names that want to break it, and ends that come early."""

from __future__ import annotations

import csv
import html.parser
import json
import shutil
import signal
import subprocess
import sys
import time
import tomllib
from pathlib import Path
from types import SimpleNamespace

import openpyxl
import pytest

import earthwork
from earthwork.errors import OutputError
from earthwork.files.report_folder import MANIFEST, find_mixed
from earthwork.quantities.one_pass import OnePass
from earthwork.reporting.report import answers
from earthwork.reporting.report.groups import GROUPS, chosen_groups, group_of
from tests.reporting.report.conftest import HOSTILE, SAMPLES, SOIL, make_site, write_pads


def names(directory: Path) -> set[str]:
    return {p.name for p in directory.iterdir()}


# --- what it writes -------------------------------------------------------------------------------------------------


def test_every_group_is_written_and_the_manifest_lists_it(sample):
    there = names(sample.directory)
    assert {"report.html", "report.json", "workbook.xlsx", "site.gpkg", "site.glb", "surfaces.xml"} <= there
    assert {group_of(name) for name in there - {MANIFEST}} == set(GROUPS)
    manifest = json.loads((sample.directory / MANIFEST).read_text())
    assert {row["name"] for row in manifest["files"]} == there - {MANIFEST}
    assert find_mixed(sample.directory) is None


def test_the_ground_is_read_once(sample):
    assert sample.parts.passes == 1


def test_parts_are_those_of_the_commands(sample):
    alone = earthwork.balance(SAMPLES / "cooper-ridge" / "site.toml")
    document = json.loads((sample.directory / "report.json").read_text())["result"]
    for key in ("available_compacted_m3", "required_compacted_m3", "surplus_compacted_m3"):
        assert document["balance"][key] == pytest.approx(alone.to_dict()[key], rel=1e-12)
    assert document["summary"]["surplus_compacted_m3"] == document["balance"]["surplus_compacted_m3"]


def test_what_the_site_does_not_give_is_listed(hostile):
    document = json.loads((hostile.directory / "report.json").read_text())["result"]
    left_out = {row["command"]: row["reason"] for row in document["left_out"]}
    assert left_out["haul"] == "the site file lacks [haul]"
    assert document["haul"] is None
    assert "[haul]" in (hostile.directory / "report.html").read_text()


def test_a_site_without_soils_still_has_its_report(tmp_path):
    site = make_site(tmp_path)
    text = site.read_text()
    site.write_text(text[: text.index("[[strip]]")])
    result = earthwork.report(site)
    assert set(result.parts.results) == {"volumes"}
    assert "Whether they balance is not known" in (result.directory / "report.html").read_text()


def test_two_runs_give_the_same_bytes_whatever_the_threads(hostile_site, tmp_path):
    first = earthwork.report(hostile_site, out=tmp_path / "a", threads=1)
    second = earthwork.report(hostile_site, out=tmp_path / "b", threads=3)
    same = [
        p.name for p in first.written if p.suffix in (".csv", ".json", ".html", ".xlsx", ".xml", ".dxf", ".txt", ".glb")
    ]
    assert "report.html" in same
    for name in same:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes(), name
    assert [p.name for p in second.written] == [p.name for p in first.written]


def test_only_what_is_chosen_is_written(hostile_site, tmp_path):
    earthwork.report(hostile_site, out=tmp_path, only=["maps,tables"])
    assert {group_of(name) for name in names(tmp_path) - {MANIFEST}} == {"maps", "tables"}
    earthwork.report(hostile_site, out=tmp_path, only=["json"])
    assert {group_of(name) for name in names(tmp_path) - {MANIFEST}} == {"maps", "tables", "json"}
    assert find_mixed(tmp_path) is None


def test_a_group_that_there_is_not_is_refused():
    with pytest.raises(OutputError, match=r"--only is 'pages'; it must be one or more of page, tables, maps"):
        chosen_groups(["tables", "pages"])


def test_it_is_not_replaced_unasked(hostile, hostile_site):
    with pytest.raises(OutputError, match=r"has .* already\. Give another folder with --out, or --overwrite"):
        earthwork.report(hostile_site)


# --- what it says ---------------------------------------------------------------------------------------------------


class Page(html.parser.HTMLParser):
    """Tags with their attributes, and the text outside scripts and styles."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[str] = []
        self.headings: list[str] = []
        self.inside = ""
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        self.inside = tag

    def handle_endtag(self, tag):
        self.inside = ""

    def handle_data(self, data):
        if self.inside not in ("script", "style"):
            self.words.append(data)
        if self.inside == "h2":
            self.headings.append(data)

    @property
    def text(self) -> str:
        return " ".join(" ".join(self.words).split())


@pytest.fixture(scope="module")
def page(sample):
    return Page((sample.directory / "report.html").read_text())


def test_a_designed_site_has_its_lines_in_the_report(tmp_path):
    site = make_site(tmp_path)
    write_pads(tmp_path / "pads.gpkg", ["level", "high"], [101.0, 102.4])
    text = site.read_text(encoding="utf-8").replace('finished = "finished.tif"\n', "")
    design = '[design]\npads = "pads.gpkg"\nname = "pad"\nelevation = "grade"\nelevation_is = "subgrade"\n'
    site.write_text(f"{text}{design}cut_slope = 2\nfill_slope = 2\n", encoding="utf-8")
    result = earthwork.report(site, out=tmp_path / "report")
    assert {"volumes_design.dxf", "volumes_design.gpkg"} <= {p.name for p in (tmp_path / "report").iterdir()}
    assert group_of("volumes_design.dxf") == "gis"
    assert result is not None


def pad_document(name, flags, *, material="silt", ground=()):
    rows = [{"material": material, "share_percent": 100.0, "flags": list(ground)}]
    return {"pad": name, "flags": flags, "natural_ground": {"material": material, "flags": list(ground), "materials": rows}}


def test_only_pads_with_something_to_look_at_are_flagged():
    pads = [
        pad_document("A", ["fill"]),
        pad_document("B", ["cut"]),
        pad_document("C", ["fill", "transition mended"]),
        pad_document("D", ["deep fill", "fill", "differential fill"]),
        pad_document("E", ["cut"], material="loess", ground=("collapse",)),
    ]
    parts = SimpleNamespace(documents={"pads": {"pads": pads}})
    answer = answers._pads(parts)
    assert (answer.value, answer.mark) == ("2 of 5", "look")
    assert answer.note == "D: deep fill, differential fill; E: on loess: collapse"
    assert answers.summary(parts)["pads_flagged"] == ["D", "E"]
    parts.documents["pads"]["pads"] = pads[:3]
    assert (answers._pads(parts).value, answers._pads(parts).mark) == ("0 of 3", "good")


def test_the_answer_box_comes_first_with_the_figures_of_the_balance(page, sample):
    text = page.text
    balance = sample.parts.documents["balance"]
    short_yd3 = round(-balance["surplus_compacted_m3"] / 0.764554857984)
    assert f"short by {short_yd3:,} yd³" in text
    loads = sum(m["loads"] for m in balance["imports"])
    assert f"{loads:,} in" in text
    assert text.index("Does the site balance?") < text.index("Ground scale") < text.index("Cut and fill")
    titles = {
        "soil": "Soil",
        "balance": "Balance",
        "haul": "Haul",
        "lifts": "Lifts",
        "water": "Water by day",
        "pads": "Pads",
    }
    parts = [title for name, title in titles.items() if name in sample.parts.results]
    last = ["Check it by hand", "Assumptions, inputs and method", "Care"]
    assert page.headings == ["Look at these first", "Map", "Quantities", *parts, *last]


def test_everything_that_a_meeting_asks_is_there(page):
    for words in ("Ground scale", "datum", "No ground is missing", "topsoil", "compacted per bank after loss", "ASTM D698",
                  "Not counted in any figure", "SHA-256", "Engineer of record", "Local codes and licensed engineers",
                  "by zone and material", "Earth moving can kill"):  # fmt: skip
        assert words in page.text, words


def test_the_page_needs_nothing_from_outside(sample):
    text = (sample.directory / "report.html").read_text()
    page = Page(text)
    for tag, attributes in page.tags:
        for name in ("src", "href"):
            value = attributes.get(name) or ""
            assert value.startswith(("data:", "#")) or not value, (tag, value[:60])
    assert "default-src 'none'" in text
    assert len(text.encode()) < 8_000_000


def test_pictures_have_words_and_tables_have_heads(page):
    pictures = [a for tag, a in page.tags if tag == "img"]
    assert pictures
    assert all(len(a["alt"] or "") > 20 for a in pictures)
    heads = [a for tag, a in page.tags if tag == "th"]
    assert heads
    assert all(a.get("scope") in ("row", "col") for a in heads)


def test_a_heading_on_two_lines_keeps_its_unit_and_long_lists_are_folded():
    import jinja2

    from earthwork.reporting.page import Notes, Table

    environment = jinja2.Environment(loader=jinja2.PackageLoader("earthwork.reporting.report"), autoescape=True)
    blocks = environment.get_template("blocks.html.j2").module
    text = "".join(str(blocks.block(Table(columns=("zone", "cut,\nbank\nm³", "area\nm²"), rows=()))).split("\n"))
    assert 'cut,<br>bank<span class="unit">m³</span>' in text
    assert 'area<span class="unit">m²</span>' in text
    lines = Page(str(blocks.block(Notes(lines=tuple(f"pad {i}" for i in range(300))))))
    assert "276 more" in lines.text
    assert "pad 299" in lines.text
    assert "more" not in Page(str(blocks.block(Notes(lines=("one", "two"))))).text


def test_the_hand_check_can_be_followed(sample, hostile):
    """Every sum, as written, gives what stands beside it, to the digits that are printed."""
    for result in (sample, hostile):
        checked = 0
        for check in result.checks:
            for line in check.lines:
                if not any(c.isdigit() for c in line.sum):
                    continue
                sum_ = line.sum.replace("−", "-").replace("×", "*").replace("÷", "/").replace(",", "")
                printed = line.value.replace("−", "-").replace(",", "").split()[0].rstrip(";")
                # the last digit of each number in the sum is rounded
                assert eval(sum_) == pytest.approx(float(printed), rel=2e-3, abs=0.0025), (check.title, line)
                checked += 1
        assert checked >= 9


# --- names that want to break it ------------------------------------------------------------------------------------


def test_names_are_text_in_the_page(hostile):
    text = (hostile.directory / "report.html").read_text()
    page = Page(text)
    for name in (*HOSTILE[:3], SOIL, "Quarry </script><b>"):
        assert " ".join(name.split()) in page.text, name
    scripts = [tag for tag, _ in page.tags if tag == "script"]
    assert len(scripts) == 2
    assert not [tag for tag, _ in page.tags if tag in ("b", "i")]
    start = text.index('id="map-data">') + len('id="map-data">')
    data = json.loads(text[start : text.index("</script>", start)])
    assert HOSTILE[0] in {o["name"] for o in data["outlines"]}


def test_names_are_no_formulas_in_tables(hostile):
    for path in hostile.directory.glob("*.csv"):
        for row in csv.reader(path.open(encoding="utf-8-sig")):
            assert not [cell for cell in row if cell.startswith(("=", "+", "@")) or cell.startswith("-<")], path.name


def test_names_are_no_formulas_in_the_workbook(hostile):
    book = openpyxl.load_workbook(hostile.directory / "workbook.xlsx")
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row]
    held = [cell for cell in cells if cell.value in (SOIL, HOSTILE[1])]
    assert held
    # a formula element in the file would have type "f"; these are shared strings
    import zipfile

    with zipfile.ZipFile(hostile.directory / "workbook.xlsx") as archive:
        for name in archive.namelist():
            if name.startswith("xl/worksheets/"):
                content = archive.read(name).decode()
                assert "<f>1+1" not in content
                assert "HYPERLINK" not in content


def test_the_manifest_and_document_are_json_with_the_names_as_they_are(hostile):
    document = json.loads((hostile.directory / "report.json").read_text())
    assert {z["zone"] for z in document["result"]["volumes"]["zones"]} == set(HOSTILE)
    assert document["site"] == tomllib.loads(SITE_NAME)["name"]


SITE_NAME = 'name = "Quarry </script><b>"'


# --- ends that come early -------------------------------------------------------------------------------------------

RUN = """
import sys, earthwork
earthwork.report(sys.argv[1], out=sys.argv[2], overwrite=True, only=["tables", "json", "workbook"])
"""


@pytest.mark.parametrize("after_s", [0.9, 2.2])
def test_killed_at_any_time_all_files_are_whole(hostile_site, tmp_path, after_s):
    out = tmp_path / "report"
    earthwork.report(hostile_site, out=out, only=["tables", "json", "workbook"])
    before = {p.name: p.read_bytes() for p in out.iterdir()}
    run = subprocess.Popen([sys.executable, "-c", RUN, str(hostile_site), str(out)])
    time.sleep(after_s)
    run.send_signal(signal.SIGKILL)
    run.wait()
    # the inputs are the same, so an old file and a new one have the same bytes
    assert {name: (out / name).read_bytes() for name in before} == before
    result = earthwork.report(hostile_site, out=out, only=["tables", "json", "workbook"], overwrite=True)
    assert find_mixed(out) is None
    assert not list(out.glob(".unfinished-*"))
    died = [w for w in result.warnings if w.code == "report-mended"]
    assert all("did not come to its end" in w.message or "mixed" in w.message for w in died)


def test_a_mixed_report_is_named_and_mended_whole(tmp_path):
    site = make_site(tmp_path / "site")
    out = tmp_path / "report"
    earthwork.report(site, out=out)
    (out / "workbook.xlsx").write_bytes((out / "workbook.xlsx").read_bytes()[:-10])
    result = earthwork.report(site, out=out, only=["json"])
    assert result.warnings[0].code == "report-mended"
    assert "workbook.xlsx" in result.warnings[0].message
    assert result.groups == ("workbook", "json")
    assert find_mixed(out) is None


def test_a_run_of_some_groups_names_what_it_leaves_of_other_inputs(tmp_path):
    site = make_site(tmp_path / "site")
    out = tmp_path / "report"
    earthwork.report(site, out=out, only=["tables", "json", "workbook"])
    same = earthwork.report(site, out=out, only=["tables"], overwrite=True)
    assert "report-of-other-inputs" not in {w.code for w in same.warnings}
    site.write_text(site.read_text() + "\n# changed\n")
    result = earthwork.report(site, out=out, only=["tables"], overwrite=True)
    assert result.warnings[0].code == "report-of-other-inputs"
    assert "than this run: report.json, workbook.xlsx." in result.warnings[0].message
    whole = earthwork.report(site, out=out, only=["json", "workbook"], overwrite=True)
    assert "report-of-other-inputs" not in {w.code for w in whole.warnings}


@pytest.mark.parametrize("limit", [3000, 200_000])
def test_no_room_is_one_message_and_changes_nothing(hostile_site, tmp_path, limit):
    out = tmp_path / "report"
    earthwork.report(hostile_site, out=out)
    before = {p.name: (p.stat().st_mtime_ns, p.stat().st_size) for p in out.iterdir()}
    script = (
        f"import resource, sys; resource.setrlimit(resource.RLIMIT_FSIZE, ({limit}, {limit}));"
        "from earthwork_cli.main import run; run(sys.argv[1:])"
    )
    arguments = ["report", str(hostile_site), "--out", str(out), "--overwrite", "--quiet"]
    done = subprocess.run([sys.executable, "-c", script, *arguments], capture_output=True, text=True)
    assert done.returncode == 2, done.stderr
    assert "Traceback" not in done.stderr
    assert done.stderr.count("error:") == 1
    assert {p.name: (p.stat().st_mtime_ns, p.stat().st_size) for p in out.iterdir()} == before


def test_an_interrupt_leaves_nothing(hostile_site, tmp_path, monkeypatch):
    def stop(self, requests):
        raise KeyboardInterrupt

    monkeypatch.setattr(OnePass, "_count", stop)
    with pytest.raises(KeyboardInterrupt):
        earthwork.report(hostile_site, out=tmp_path / "report")
    assert not (tmp_path / "report").exists()


# --- the command ----------------------------------------------------------------------------------------------------


def earthwork_command(*arguments: str) -> subprocess.CompletedProcess[str]:
    script = "import sys; from earthwork_cli.main import run; run(sys.argv[1:])"
    return subprocess.run([sys.executable, "-c", script, *arguments], capture_output=True, text=True)


def test_the_command_writes_beside_the_site_file_and_prints_the_answers(tmp_path):
    site = make_site(tmp_path)
    done = earthwork_command("report", str(site), "--only", "page", "--only", "json")
    assert done.returncode == 0, done.stderr
    assert "Does the site balance?" in done.stdout
    assert f"Open in a browser: {tmp_path / 'report' / 'report.html'}\n" in done.stdout
    assert names(tmp_path / "report") == {"report.html", "report.json", MANIFEST} | {
        n for n in names(tmp_path / "report") if n.endswith(".html")
    }
    shutil.rmtree(tmp_path / "report")
    done = earthwork_command("report", str(site), "--only", "json", "--json", "--quiet")
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout) == json.loads((tmp_path / "report" / "report.json").read_text())


def test_the_command_refuses_bad_groups(tmp_path):
    site = make_site(tmp_path)
    done = earthwork_command("report", str(site), "--only", "everything")
    assert done.returncode == 2
    assert "--only is 'everything'" in done.stderr
    assert not (tmp_path / "report").exists()


def test_a_designed_site_has_its_lines_and_pads(tmp_path):
    result = earthwork.report(SAMPLES / "larkspur-campus" / "design.toml", out=tmp_path, only=["gis", "page"])
    kinds = {line.kind for line in _breaklines(tmp_path / "surfaces.xml")}
    assert {"toe of fill", "top of cut"} <= kinds
    codes = [line.split(",")[4] for line in (tmp_path / "stakeout.txt").read_text().splitlines()]
    assert any(code.startswith("SG ") and "corner 1" in code for code in codes)
    assert result.parts.passes == 1
    assert "built from [design]" in (tmp_path / "report.html").read_text()


def _breaklines(path: Path):
    import xml.etree.ElementTree as ElementTree

    from earthwork.files.landxml import Breakline

    for line in ElementTree.parse(path).getroot().iter("{http://www.landxml.org/schema/LandXML-1.2}Breakline"):
        yield Breakline(line.get("name"), None, line.get("desc"))
