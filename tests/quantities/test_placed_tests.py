"""Bank tests that name no material: the strip or stratum at their place tells it."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import Any

import pytest

import earthwork
from earthwork.errors import FileError, SoilError
from earthwork.site import Site, check_site
from tests.samples.ground_by_numpy import SAMPLES

HEAD = "test,easting,northing,elevation,water_content_percent,dry_density_kg_m3\n"
#: Level ground at 100 m: 0.3 m of topsoil, loess down to 96 m, shale below.
ROWS = (
    "T1,5,5,99.8,12,1200\n"
    "L1,5,5,99.6,7,1400\nL2,15,5,98.0,7,1430\nL3,5,15,96.1,7,1460\n"
    "S1,5,5,95.9,3,2240\nS2,15,15,90.0,3,2260\n"
)
SOILS: dict[str, Any] = {
    "topsoil": {"use": "topsoil"},
    "loess": {"use": "fill", "specific_gravity": 2.68, "fill": {"dry_density": 1700}},
    "shale": {"use": "rock", "specific_gravity": 2.7, "fill": {"dry_density": 2000}},
}


def site(folder: Path, rows: str = HEAD + ROWS, *, owners: tuple[str, ...] = tuple(SOILS), **changes: Any) -> Site:
    (folder / "bank.csv").write_text(rows, encoding="utf-8")
    head = "ncols 20\nnrows 20\nxllcorner 0\nyllcorner 0\ncellsize 1\nNODATA_value -9999\n"
    for name, level in (("existing", 100.0), ("finished", 99.0)):
        (folder / f"{name}.asc").write_text(head + f"{' '.join([str(level)] * 20)}\n" * 20, encoding="utf-8")
    given = {"bank": {"dry_density": 1500}}
    shared = {"bank": {"tests": "bank.csv"}}
    document = {
        "site": {"name": "Teasel Lane", "units": "metric"},
        "ground": {"existing": "existing.asc", "finished": "finished.asc"},
        "strip": [{"material": "topsoil", "depth": 0.3}],
        "stratum": [{"material": "loess", "bottom": {"level": 96.0}}, {"material": "shale"}],
        "material": {
            name: {**soil, "loose": {"swell_percent": 30}, **(shared if name in owners else given)}
            for name, soil in SOILS.items()
        },
        "fill": {"relative_compaction": 95, "expected_compaction": 96},
        **changes,
    }  # fmt: skip
    return check_site(document, folder)


def counts(made: Site) -> dict[str, tuple[int, float]]:
    cards = earthwork.soil(made).cards
    return {c.material: (len(c.bank_tests.tests), c.bank_dry_density_kg_m3) for c in cards if c.bank_tests}


def test_each_test_counts_where_it_was_taken(tmp_path: Path) -> None:
    assert counts(site(tmp_path)) == {"topsoil": (1, 1200.0), "loess": (3, 1430.0), "shale": (2, 2250.0)}


def test_depth_serves_where_there_is_no_elevation(tmp_path: Path) -> None:
    lines = (HEAD + ROWS).replace("elevation", "depth").splitlines()
    turned = [lines[0]]
    for line in lines[1:]:
        cells = line.split(",")
        turned.append(",".join([*cells[:3], f"{100 - float(cells[3]):.2f}", *cells[4:]]))
    assert counts(site(tmp_path, "\n".join(turned) + "\n")) == counts(site(tmp_path))


def test_the_sample_says_itself_what_its_tests_are_of(tmp_path: Path) -> None:
    """The material column of the sample against the strata of its site file, for each test."""
    from earthwork.files.soil_tests import read_density_tests
    from earthwork.quantities.placed_tests import materials_at
    from earthwork.quantities.site_ground import open_site

    for name, length_m in (("larkspur-campus", 1.0), ("cooper-ridge", 1200 / 3937)):
        folder = SAMPLES / name
        path = folder / "lab" / "bank.csv"
        tests = read_density_tests(path, length_m=length_m).tests
        found = materials_at(open_site(earthwork.Site.open(folder / "site.toml")), tests)
        with path.open(encoding="utf-8") as file:
            named = [row["material"] for row in csv.DictReader(file)]
        assert [found[test] for test in tests] == named


def test_places_off_the_ground_are_told(tmp_path: Path) -> None:
    rows = HEAD + ROWS + "X1,500,5,98,7,1500\nX2,5,5,320,7,1500\n"
    result = earthwork.soil(site(tmp_path, rows))
    assert len(result["loess"].bank_tests.tests) == 3
    told = [w.message for w in result.warnings if w.code == "tests-not-placed"]
    assert all("outside the ground that is known, or over it, and left out: X1, X2" in text for text in told)
    assert len(told) == 3


def test_rows_of_another_stratum_are_told(tmp_path: Path) -> None:
    result = earthwork.soil(site(tmp_path, owners=("loess",)))
    assert len(result["loess"].bank_tests.tests) == 3
    (told,) = [w.message for w in result.warnings if w.code == "tests-elsewhere"]
    assert "T1 (topsoil), S1 (shale), S2 (shale)" in told


def test_a_named_test_in_another_stratum_is_doubted_by_check(tmp_path: Path) -> None:
    rows = HEAD.replace("test,", "test,material,") + "a,loess,5,5,98,7,1430\nb,loess,5,5,95,7,1440\n"
    warnings = earthwork.check(site(tmp_path, rows, owners=("loess",))).warnings
    (told,) = [w.message for w in warnings if w.code == "test-in-other-stratum"]
    assert "b (shale)" in told
    assert "a (" not in told


@pytest.mark.parametrize(
    ("rows", "error", "message"),
    [
        ("dry_density_kg_m3\n1430\n1440\n", FileError, r"row 2 does not say which it is of; add a column material"),
        (HEAD + "a,5,5,98,7,1430\nb,5,5,97,7,1440\n", SoilError, r"material\.shale\.bank\.tests: no test lies in it"),
    ],
)
def test_tests_that_nothing_tells_apart(tmp_path: Path, rows: str, error: type[Exception], message: str) -> None:
    with pytest.raises(error, match=message):
        earthwork.soil(site(tmp_path, rows))


def test_balance_takes_the_same_cards(tmp_path: Path) -> None:
    balance = earthwork.balance(site(tmp_path)).to_dict()
    mass = {m["material"]: m["dry_mass_t"] for m in balance["materials"]}
    # 400 m² cut from 99.7 to 99.0 m in loess of 1,430 kg/m³.
    assert mass["loess"] == pytest.approx(400 * 0.7 * 1.43)
