"""Pages: tables in the site's units, cut where they are too long, and the lines before any volume."""

import pytest

from earthwork.reporting.basis import error_lines, missing_line, not_counted, scale_line, subgrade_line
from earthwork.reporting.page import Column, column_texts, table_of
from earthwork.reporting.plain_page import page as plain_page
from earthwork.results import Result
from earthwork.site import check_site
from earthwork.units import METRIC, US

COLUMNS = (Column("zone", "zone"), Column("cut_m3", "cut"), Column("cut_minus_fill_m3", "difference", sign=True))


def _site(tmp_path, **tables):
    ground = {"existing": "a.tif", "finished": "b.tif", **tables.pop("ground", {})}
    return check_site({"site": {"name": "x", "units": "metric"}, "ground": ground, **tables}, tmp_path)


def _volumes(**total):
    return {
        "grid": {"ground_scale": 1.0, "cell_m": 1.0, "rows": 2, "columns": 2, "sample": "cell"},
        "total": {"cut_m3": 600.0, "fill_m3": 400.0, "area_m2": 900.0, "missing_area_m2": 0.0, **total},
    }


def test_a_table_lines_up_and_carries_its_units():
    rows = [{"zone": "a", "cut_m3": 1234.5, "cut_minus_fill_m3": -0.2}, {"zone": "b", "cut_m3": None}]
    total = {"zone": "all", "cut_m3": 1234.5, "cut_minus_fill_m3": 100.0}
    table = table_of(rows, COLUMNS, METRIC, totals=[total])
    assert table.columns == ("zone", "cut\nm³", "difference\nm³")
    # The greatest number of a column sets its decimals, so that it adds up in print.
    assert table.rows == (("a", "1,234", "0"), ("b", "–", "–"), ("all", "1,234", "+100"))
    assert table.totals == 1


def test_a_table_in_us_units():
    table = table_of([{"zone": "a", "cut_m3": 764.554857984}], COLUMNS[:2], US)
    assert table.columns[1] == "cut\nyd³"
    assert table.rows == (("a", "1,000"),)


def test_a_long_table_is_cut_and_says_so():
    rows = [{"zone": str(i), "cut_m3": float(i)} for i in range(300)]
    table = table_of(rows, COLUMNS, METRIC, totals=[{"zone": "all", "cut_m3": 5.0}])
    assert (len(table.rows), table.left_out) == (25, 276)


def test_texts_of_other_values():
    assert column_texts("flags", [["a", "b"], [], None], US) == ["a, b", "–", "–"]
    assert column_texts("loads", [1200, 3], US) == ["1,200", "3"]
    assert column_texts("ready", [True, False], US) == ["yes", "no"]


def test_which_sections_are_deducted(tmp_path):
    assert "No section is deducted" in subgrade_line(_site(tmp_path))
    sections = [
        {"name": "yard", "thickness": 0.45},
        {"name": "green", "thickness": 0.15, "source": "topsoil"},
    ]
    line = subgrade_line(_site(tmp_path, section=sections))
    assert line.endswith("Deducted from finished grade: yard 0.45 m (imported), green 0.15 m (of topsoil).")


def test_trenches_are_not_counted_unless_allowed_for(tmp_path):
    assert not_counted(_site(tmp_path))[0].startswith("trench, footing and pool spoil")
    allowed = _site(tmp_path, allowance=[{"name": "trench", "material": "loess", "volume": 30}])
    assert not any("trench" in name for name in not_counted(allowed))
    assert not_counted(allowed)[-3:] == ["keys and benches", "slope overbuild", "dewatering"]


@pytest.mark.parametrize(
    ("scale", "text"),
    [
        # 1.001² − 1 = 0.2001 %; 1000 m³ × (1 − 1/1.001²) = 2.0 m³
        (1.001, "Ground scale 1.001000 (from the CRS and the mean elevation): it changes volumes by +0.20 %, +2.0 m³"),
        # 0.75² − 1 = −43.75 %; 1000 × (1 − 1/0.5625) = −778 m³
        (0.75, "it changes volumes by −43.75 %, −778 m³"),
        (1.0, "Ground scale 1: map lengths are taken as ground lengths."),
    ],
)
def test_ground_scale_and_its_effect(tmp_path, scale, text):
    volumes = _volumes()
    volumes["grid"]["ground_scale"] = scale
    assert text in scale_line(_site(tmp_path), volumes)


def test_a_given_ground_scale_is_named_as_given(tmp_path):
    volumes = _volumes()
    volumes["grid"]["ground_scale"] = 1.0002
    assert "as the site file says" in scale_line(_site(tmp_path, ground={"ground_scale": 1.0002}), volumes)


def test_missing_ground(tmp_path):
    site = _site(tmp_path)
    assert missing_line(site, _volumes()) == "No ground is missing: both surfaces have data everywhere."
    assert missing_line(site, _volumes(missing_area_m2=100.0)).startswith("Missing: 100 m² (10.0 %)")


def test_noise_alone_is_no_error_of_a_volume(tmp_path):
    none = {"cut_sd_m3": None, "fill_sd_m3": None, "false_cut_m3": 200.0}
    (line,) = error_lines(_site(tmp_path), {**_volumes(), "survey_error": none})
    assert "±" not in line
    assert "understates" in line
    assert "200 m³ of false cut" in line
    (line,) = error_lines(
        _site(tmp_path), {**_volumes(), "survey_error": {**none, "cut_sd_m3": 90.0, "fill_sd_m3": 80.0}}
    )
    assert "cut ± 90.0 m³, fill ± 80.0 m³" in line
    assert error_lines(_site(tmp_path), {**_volumes(), "survey_error": None}) == []


def test_any_result_has_a_page(tmp_path):
    class Any(Result):
        def to_dict(self):
            return {"total_l": 3785.411784, "note": None, "days": [{"day": 1, "total_l": 37.85411784}, {"day": 2}]}

    page = plain_page("water", _site(tmp_path), Any(units=US))
    assert page.title == "x: water"
    facts, table = page.blocks
    assert facts.rows[0][0] == "total"
    assert table.columns == ("day", "total\nL")


def test_small_volumes_are_not_told_as_nothing():
    from earthwork.reporting.balance_page import _needs, _per_step

    required = {"fill_m3": 0.18, "over_excavation_refill_m3": 0.0, "scarify_m3": 0.02, "allowance_m3": 0.0, "section_m3": 0.0}
    assert _needs(required, METRIC) == "fill 0.18, scarifying 0.02"
    assert _needs({**required, "fill_m3": 1807821680.4}, METRIC) == "fill 1,807,821,680, scarifying 0"
    site = type("Site", (), {"units": METRIC})
    assert _per_step({"surplus_change_per_cm_m3": -0.018}, site)[1] == "−0.02 m³"
    assert _per_step({"surplus_change_per_cm_m3": -1690257.2}, site)[1] == "−1,690,257 m³"


def test_loads_an_hour_have_no_thousandths():
    assert column_texts("loads_per_hour", [14.2291, 3.0], METRIC) == ["14.2", "3.0"]


@pytest.mark.parametrize(
    ("high_m", "text"),
    [(0.0004, "under 1 mm"), (0.104, "21 to 104 mm")],
)
def test_settlement_under_a_unit_is_said_so(high_m, text):
    from earthwork.reporting.pads_page import _settles

    site = type("Site", (), {"units": METRIC})
    assert _settles({"settlement_low_m": high_m / 5, "settlement_high_m": high_m}, site) == text
