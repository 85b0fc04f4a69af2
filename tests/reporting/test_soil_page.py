"""The soil page: what an engineer looks for on a card stands there, with its unit."""

from __future__ import annotations

from pathlib import Path

import earthwork
from earthwork.reporting.page import Facts, Notes, Page, Table
from earthwork.reporting.proctor_page import page as proctor_page
from earthwork.reporting.soil_page import page
from earthwork.soils.bench import site_of_points
from tests.soils.test_card import FILL, LOESS, site
from tests.soils.test_card_from_tests import GRADED, TESTED, UNSAID, site_with


def text_of(shown: Page) -> str:
    lines = []
    for block in shown.blocks:
        lines.append(block.heading)
        if isinstance(block, Facts):
            lines += [" | ".join(row) for row in block.rows]
        elif isinstance(block, Table):
            lines += [" | ".join(block.columns), *(" | ".join(row) for row in block.rows)]
        elif isinstance(block, Notes):
            lines += block.lines
    return "\n".join(lines)


def test_tests_and_how_sure_they_are(tmp_path: Path) -> None:
    made = site_with(tmp_path, {**TESTED, "field": {"tests": "log.csv"}}, fill=UNSAID)
    text = text_of(page(made, earthwork.soil(made)))
    for part in (
        "compaction curve | 6 points, parabola | ASTM D698",
        "maximum dry density | 1,760 kg/m³",
        "bank tests | 1,430 kg/m³ | 5 tests, scatter ± 20.0 kg/m³, water 7.5 %",
        "upper | 1,430 kg/m³ | ± 28.3 kg/m³, 2 tests",
        "compaction reached | 96.5 % | ± 0.9, 95.4 to 97.6 %",
        "How sure the shrinkage factor is",
        "loess | bank | 0.63 %",
        "Local code and the licensed geotechnical engineer govern.",
    ):
        assert part in text


def test_group_plant_and_cautions() -> None:
    made = site(GRADED)
    text = text_of(page(made, earthwork.soil(made)))
    assert "group (ASTM D2487) | CL | lean clay" in text
    assert "sheepsfoot" in text
    assert "matric suction, estimate" in text
    assert "collapsible" in text


def test_bare_figures_have_neither() -> None:
    made = site(LOESS, fill=FILL)
    text = text_of(page(made, earthwork.soil(made)))
    assert "How sure" not in text
    assert "ASTM D2487" not in text


def test_bands_only_where_a_percentage_applies() -> None:
    rock = {"use": "rock", "bank": {"dry_density": 2250}, "fill": {"dry_density": 2000}, "loose": {"swell_percent": 45}}
    fill = {**FILL, "by_depth": [{"below": 6.0, "relative_compaction": 98, "expected_compaction": 99}]}
    made = site(rock, fill=fill)
    assert "Deep fill" not in text_of(page(made, earthwork.soil(made)))
    made = site(LOESS, fill=fill)
    assert "Deep fill" in text_of(page(made, earthwork.soil(made)))


def test_page_of_the_bench(tmp_path: Path) -> None:
    site_with(tmp_path, TESTED)
    made = site_of_points(tmp_path / "curve.csv", specific_gravity=2.68, method="ASTM D698", units="us")
    text = text_of(proctor_page(made, earthwork.proctor(made)))
    assert "method | ASTM D698 | specific gravity 2.68" in text
    assert "maximum dry density | 109.9 lb/ft³" in text
    assert "curve.csv row 2" in text
