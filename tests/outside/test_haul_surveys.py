"""Haul plans on surveys of others, through the command line: what is dug leaves, what is filled arrives, to a billionth."""

import pytest
import rasterio

from tests.outside.conftest import data

SITE = """
[site]
name = "beach"
units = "metric"
[ground]
existing = {{ file = "{existing}", nodata = -10000 }}
finished = {{ file = "{finished}", nodata = -10000 }}
[[stratum]]
material = "sand"
[material.sand]
use = "fill"
bank.dry_density = 1550
bank.water_content = 6
loose.swell_percent = 12
fill.dry_density = 1650
loss_percent = 3
[fill]
relative_compaction = 95
expected_compaction = 96
[haul]
block = 20
truck = {{ heaped_volume = 12, payload = 18 }}
[[borrow]]
name = "dune"
at = [{east}, {north}]
material = "sand"
price = 2
"""


def test_a_beach_is_put_back(earthwork, tmp_path):
    folder = data("pair_beach_leo")
    before, after = (folder / f"leo_{day}_dsm_resampled_1m.tif" for day in ("20180713", "20180606"))
    with rasterio.open(before) as file:
        east, north = file.bounds.left, file.bounds.top
    text = SITE.format(existing=before.resolve(), finished=after.resolve(), east=east, north=north)
    (tmp_path / "site.toml").write_text(text)
    result = earthwork("haul", tmp_path / "site.toml", "--json").result
    volumes = earthwork("volumes", tmp_path / "site.toml", "--json").result["total"]
    kinds = {b["block"]: b["kind"] for b in result["blocks"]}
    moves = result["moves"]
    cut = sum(m["dry_mass_t"] for m in moves if kinds[m["from"]] == "cut")
    fill = sum(m["compacted_m3"] for m in moves if kinds[m["to"]] == "fill")
    assert cut == pytest.approx(volumes["cut_m3"] * 1.55 * 0.97, rel=1e-9)
    assert fill == pytest.approx(volumes["fill_m3"], rel=1e-9)
    for block in result["blocks"]:
        if block["kind"] == "cut":
            out = sum(m["dry_mass_t"] for m in moves if m["from"] == block["block"])
            assert out == pytest.approx(block["dry_mass_t"], rel=1e-6, abs=1e-9 * cut)
        if block["kind"] == "fill":
            into = sum(m["compacted_m3"] for m in moves if m["to"] == block["block"])
            assert into == pytest.approx(block["compacted_m3"], rel=1e-6, abs=1e-9 * fill)
    assert result["certificate"]["relative_gap"] <= 1e-9
    assert result["total_t_km"] == pytest.approx(sum(m["dry_mass_t"] * m["distance_m"] for m in moves) / 1000)
