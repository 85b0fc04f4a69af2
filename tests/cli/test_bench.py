"""``soil --points``: a curve from a file, without a site."""

from __future__ import annotations

import json

import pytest

from tests.soils.test_card_from_tests import CURVE


@pytest.fixture
def points(tmp_path):
    path = tmp_path / "hill.csv"
    path.write_text(CURVE, encoding="utf-8")
    return path


def test_fit_card_and_chart_in_one_command(run, points, tmp_path):
    code, out, _ = run(
        "soil", "--points", points, "--specific-gravity", "2.68", "--method", "ASTM D698", "--out", tmp_path / "o"
    )
    assert code == 0
    assert "1,760 kg/m³" in out
    names = {path.name for path in (tmp_path / "o").iterdir()}
    assert names == {
        "proctor.csv", "proctor.json", "proctor_hill.png", "proctor_points.csv", "proctor_fits.csv",
        "proctor_compactions.csv",
    }  # fmt: skip


def test_json_of_the_bench(run, points):
    code, out, _ = run("soil", "--points", points, "--specific-gravity", "2.68", "--json")
    document = json.loads(out)
    assert code == 0
    assert document["inputs"][0]["path"] == "hill.csv"
    assert document["result"]["curves"][0]["max_dry_density_kg_m3"] == pytest.approx(1760)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ([], "give a site file, or the points"),
        (["s.toml", "--points", "{points}"], "keep one of the two"),
        (["s.toml", "--method", "ASTM D698"], "--method belong to a run with --points"),
        (["--points", "{points}", "--units", "imperial"], "it must be metric or us"),
        (["--points", "none.csv"], "none.csv: no such file"),
        (["--points", "{points}", "--specific-gravity", "5"], "specific_gravity = 5"),
    ],
)
def test_bad_use_ends_with_2(run, points, arguments, message):
    code, out, err = run("soil", *(a.format(points=points) for a in arguments))
    assert (code, out) == (2, "")
    assert message in " ".join(err.replace("│", " ").split())
    assert "Traceback" not in err


def test_an_assumed_gravity_ends_strict_runs_with_3(run, points):
    assert run("soil", "--points", points, "--strict")[0] == 3
