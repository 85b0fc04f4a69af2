"""Every command end to end on the starter site: what it prints, writes and returns."""

import csv
import hashlib
import json

import pyogrio
import pytest
import rasterio

COMMANDS = ("check", "volumes", "soil", "balance")


@pytest.mark.parametrize("units", ["metric", "us"])
@pytest.mark.parametrize("command", COMMANDS)
def test_runs_and_prints_units(run, starters, command, units):
    code, out, err = run(command, starters[units], "--quiet")
    assert (code, err) == (0, "")
    assert "Juniper Bench" in out
    unit = {"check": ("m²", "ft²"), "soil": ("kg/m³", "lb/ft³")}.get(command, ("m³", "yd³"))
    assert unit[units == "us"] in out
    assert unit[units == "metric"] not in out


@pytest.mark.parametrize("command", COMMANDS)
def test_document(run_json, starters, command):
    document = run_json(command, starters["metric"])
    assert list(document) == ["command", "version", "site", "display_units", "inputs", "warnings", "result"]
    assert (document["command"], document["site"], document["display_units"]) == (command, "Juniper Bench", "metric")
    files = {f["path"]: f for f in document["inputs"]}
    assert list(files) == ["site.toml", "existing.tif", "finished.tif", "plan.gpkg"]
    for name, facts in files.items():
        content = (starters["metric"].parent / name).read_bytes()
        assert facts["bytes"] == len(content)
        assert facts["sha256"] == hashlib.sha256(content).hexdigest()


def test_the_same_input_gives_the_same_bytes(run, starters):
    first = run("balance", starters["us"], "--json", "--quiet", "--threads", "1")
    assert run("balance", starters["us"], "--json", "--quiet", "--threads", "3") == first


def test_first_lines_say_what_the_volumes_are(run, starters):
    for command in ("volumes", "balance"):
        _, out, _ = run(command, starters["metric"])
        head = " ".join(" ".join(out.splitlines()[:14]).split())
        assert "run from stripped ground to subgrade" in head
        assert "yard pavement 0.40 m (imported), slab and base 0.30 m (imported)" in head
        assert "Not counted: keys and benches, slope overbuild, dewatering" in head
        assert "Ground scale 1.0006" in head
        assert "No ground is missing" in head


def test_volumes_writes_its_files(run, starters, tmp_path):
    out = tmp_path / "out"
    code, _, err = run("volumes", starters["us"], "--out", out)
    names = [
        "volumes.csv",
        "volumes.json",
        "volumes_depth.tif",
        "volumes_map.png",
        "volumes_materials.csv",
        "volumes_zones.gpkg",
    ]
    assert code == 0
    assert sorted(p.name for p in out.iterdir()) == names
    assert [line.split("/")[-1] for line in err.splitlines() if line.startswith("wrote ")] == names
    document = json.loads((out / "volumes.json").read_text())
    assert document["outputs"] == [n for n in names if n != "volumes.json"]
    rows = list(csv.DictReader((out / "volumes.csv").open()))
    assert [r["zone"] for r in rows][:3] == ["whole site", "1 hall", "2 yard"]
    cut_m3 = document["result"]["total"]["cut_m3"]
    assert float(rows[0]["cut_yd3"]) == pytest.approx(cut_m3 / 0.764554857984, rel=1e-11)
    with rasterio.open(out / "volumes_depth.tif") as file:
        depth = file.read(1, masked=True)
        assert file.units == ("ft",)
        assert file.crs.to_epsg() == 2231
    total = document["result"]["total"]
    assert depth.max() == pytest.approx(total["max_fill_m"] / (1200 / 3937), rel=1e-6)
    assert -depth.min() == pytest.approx(total["max_cut_m"] / (1200 / 3937), rel=1e-6)
    info = pyogrio.read_info(out / "volumes_zones.gpkg")
    assert (info["features"], info["crs"]) == (2, "EPSG:2231")
    assert "fill_yd3" in info["fields"]


def test_balance_writes_its_files(run, starters, tmp_path):
    assert run("balance", starters["metric"], "--out", tmp_path, "--quiet")[0] == 0
    names = {p.name for p in tmp_path.iterdir()}
    assert {"balance.json", "balance_ledger.csv", "balance_map.png", "balance_curve.png", "balance_depth.tif"} <= names
    rows = list(csv.DictReader((tmp_path / "balance_ledger.csv").open()))
    result = json.loads((tmp_path / "balance.json").read_text())["result"]
    assert [float(r["dry_mass_t"]) for r in rows] == pytest.approx(
        [r["dry_mass_t"] for r in result["ledger"]], rel=1e-11
    )
    assert abs(result["ledger_closure_t"]) <= 1e-9 * sum(r["dry_mass_t"] for r in result["ledger"])


def test_outputs_are_refused_then_replaced(run, starters, tmp_path):
    assert run("soil", starters["metric"], "--out", tmp_path)[0] == 0
    code, out, err = run("soil", starters["metric"], "--out", tmp_path)
    assert (code, out) == (2, "")
    assert "soil.csv" in err
    assert "--overwrite" in err
    assert run("soil", starters["metric"], "--out", tmp_path, "--overwrite")[0] == 0


def test_quiet_says_nothing_of_files(run, starters, tmp_path):
    assert run("soil", starters["metric"], "--out", tmp_path, "--quiet")[2] == ""


def test_strict_ends_with_3_after_the_result(run, site):
    text = site.read_text().replace("expected_compaction = 97 ", "# ")
    site.write_text(text)
    code, out, err = run("soil", site)
    assert code == 0
    assert "warning [compaction-assumed]" in err
    strict = run("soil", site, "--strict")
    assert strict == (3, out, err)


def test_volumes_of_two_files(run_json, starters):
    folder = starters["metric"].parent
    document = run_json("volumes", "--existing", folder / "existing.tif", "--finished", folder / "finished.tif")
    with rasterio.open(folder / "existing.tif") as a, rasterio.open(folder / "finished.tif") as b:
        difference = b.read(1).astype(float) - a.read(1).astype(float)
    grid, total = document["result"]["grid"], document["result"]["total"]
    area = grid["ground_scale"] ** 2
    assert total["fill_m3"] - total["cut_m3"] == pytest.approx(difference.sum() * area, rel=1e-9)
    assert document["result"]["zones"] == []


def test_volumes_of_two_files_in_us_units(run, starters):
    folder = starters["us"].parent
    code, out, _ = run(
        "volumes", "--existing", folder / "existing.tif", "--finished", folder / "finished.tif", "--units", "us"
    )
    assert code == 0
    assert "yd³" in out


def test_new_then_everything_runs(run, tmp_path):
    code, out, _ = run("new", tmp_path / "fresh")
    assert code == 0
    assert str(tmp_path / "fresh" / "site.toml") in out
    assert run("balance", tmp_path / "fresh" / "site.toml", "--strict")[0] == 0


def test_new_overwrites_nothing(run, tmp_path):
    (tmp_path / "mine.txt").write_text("x")
    code, _, err = run("new", tmp_path)
    assert code == 2
    assert "is not empty (it has mine.txt)" in err
    assert [p.name for p in tmp_path.iterdir()] == ["mine.txt"]
