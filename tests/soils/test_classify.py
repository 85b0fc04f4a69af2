"""Soil groups (ASTM D2487): textbook soils, the edges of the rules, and a second library."""

from __future__ import annotations

import pytest
from geolysis.soil_classifier import create_uscs_classifier
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from earthwork.errors import SoilError
from earthwork.soils.classify import Grading, a_line, classify, grading_of, u_line
from earthwork.soils.consequences import collapse_prone, consequences


def coarse(gravel: float, fines: float, sizes: dict[float, float] | None = None) -> Grading:
    """A grading by gravel and fines [%], and (percent finer → mm) for D10, D30, D60."""
    rows = [(75.0, 100.0), (4.75, 100.0 - gravel), (0.075, fines)]
    rows += [(size, percent) for percent, size in (sizes or {}).items() if size not in (4.75, 0.075)]
    return grading_of(rows)


@pytest.mark.parametrize(
    ("grading", "limits", "symbol", "name"),
    [
        (None, (40, 20), "CL", "lean clay"),
        (None, (70, 25), "CH", "fat clay"),
        (None, (60, 40), "MH", "elastic silt"),
        (None, (40, 30), "ML", "silt"),
        (None, (24, 18), "CL-ML", "silty clay"),
        (None, None, "ML", "silt"),
        (coarse(0, 80), (40, 20), "CL", "lean clay with sand"),
        (coarse(20, 78), (40, 20), "CL", "lean clay with gravel"),
        (coarse(5, 60), (40, 20), "CL", "sandy lean clay"),
        (coarse(16, 60), (40, 20), "CL", "sandy lean clay with gravel"),
        (coarse(25, 60), (40, 20), "CL", "gravelly lean clay with sand"),
        (coarse(5, 30), (40, 20), "SC", "clayey sand"),
        (coarse(20, 30), (40, 20), "SC", "clayey sand with gravel"),
        (coarse(5, 30), None, "SM", "silty sand"),
        (coarse(5, 30), (24, 18), "SC-SM", "silty, clayey sand"),
        (coarse(60, 15), (40, 20), "GC", "clayey gravel with sand"),
        (coarse(80, 15), (24, 18), "GC-GM", "silty, clayey gravel"),
        (coarse(0, 2, {60: 2.0, 30: 0.7, 10: 0.2}), None, "SW", "well-graded sand"),
        (coarse(0, 2, {60: 0.4, 30: 0.3, 10: 0.2}), None, "SP", "poorly graded sand"),
        (coarse(0, 8, {60: 2.0, 30: 0.7, 10: 0.2}), None, "SW-SM", "well-graded sand with silt"),
        (coarse(0, 8, {60: 0.4, 30: 0.3, 10: 0.2}), (40, 20), "SP-SC", "poorly graded sand with clay"),
        (coarse(70, 2, {60: 20.0, 30: 4.75, 10: 1.0}), None, "GW", "well-graded gravel with sand"),
        (
            coarse(70, 8, {60: 20.0, 30: 4.75, 10: 0.5}),
            (24, 18),
            "GW-GC",
            "well-graded gravel with silty clay and sand",
        ),
    ],
)
def test_groups(grading: Grading | None, limits: tuple[float, float] | None, symbol: str, name: str) -> None:
    liquid, plastic = limits or (None, None)
    soil = classify(grading, liquid_limit=liquid, plastic_limit=plastic)
    assert (soil.symbol, soil.name) == (symbol, name)


@pytest.mark.parametrize(
    ("limits", "symbol", "name"), [((40, 20), "OL", "organic clay"), ((70, 55), "OH", "organic silt")]
)
def test_organic_soils(limits: tuple[float, float], symbol: str, name: str) -> None:
    soil = classify(None, liquid_limit=limits[0], plastic_limit=limits[1], organic=True)
    assert (soil.symbol, soil.name) == (symbol, name)


@pytest.mark.parametrize(
    ("fines", "symbol"), [(49.9, "SC"), (50.0, "CL"), (12.0, "SP-SC"), (12.1, "SC"), (5.0, "SP-SC"), (4.9, "SP")]
)
def test_just_at_the_shares_of_fines(fines: float, symbol: str) -> None:
    if fines < 13:
        grading = grading_of([(4.75, 100), (0.4, 60), (0.35, 30), (0.3, 13), (0.075, fines), (0.02, 1)])
    else:
        grading = coarse(0, fines)
    assert classify(grading, liquid_limit=40, plastic_limit=20).symbol == symbol


def test_lines_of_the_plasticity_chart() -> None:
    assert a_line(20) == 0
    assert a_line(50) == pytest.approx(21.9)
    assert u_line(8) == 0
    assert classify(None, liquid_limit=41.9, plastic_limit=20).symbol == "CL"
    # On the A line itself it is clay: LL 60, PI 29.2.
    assert classify(None, liquid_limit=60, plastic_limit=60 - 29.2 + 1e-9).symbol == "MH"
    assert classify(None, liquid_limit=60, plastic_limit=60 - 29.2 - 1e-9).symbol == "CH"
    assert "above the U line" in classify(None, liquid_limit=60, plastic_limit=5).notes[0]


@settings(max_examples=200)
@given(st.floats(15, 95), st.floats(5, 60))
def test_fine_groups_against_a_second_library(liquid: float, plastic: float) -> None:
    plasticity = liquid - plastic
    # Away from the lines, where the library rounds, and from the hatched zone, which it bounds by the
    # liquid limit.
    assume(plasticity > 7.1 and abs(plasticity - a_line(liquid)) > 0.1 and abs(liquid - 50) > 0.1)
    other = create_uscs_classifier(liquid_limit=liquid, plastic_limit=plastic, fines=80.0, sand=20.0).classify()
    assert classify(None, liquid_limit=liquid, plastic_limit=plastic).symbol == other.symbol


@settings(max_examples=200)
@given(st.floats(0.08, 0.5), st.floats(1.1, 6.0), st.floats(1.1, 20.0), st.floats(5, 95))
def test_clean_sands_and_gravels_against_a_second_library(d10: float, r30: float, r60: float, gravel: float) -> None:
    d30, d60 = d10 * r30, d10 * r30 * r60
    sand = 97.0 - gravel
    cu, cc = d60 / d10, d30**2 / (d10 * d60)
    limit = 4 if gravel > sand else 6
    assume(abs(cu - limit) > 0.1 and abs(cc - 1) > 0.05 and abs(cc - 3) > 0.05 and abs(gravel - sand) > 0.5)
    other = create_uscs_classifier(
        liquid_limit=0.0, plastic_limit=0.0, fines=3.0, sand=sand, d_10=d10, d_30=d30, d_60=d60
    ).classify()

    class Told(Grading):
        """A grading whose three sizes are told, not read off a curve."""

        def size_mm(self, percent: float) -> float | None:
            return {10: d10, 30: d30, 60: d60}[int(percent)]

    grading = Told(passing=((75.0, 100.0), (4.75, 100.0 - gravel), (0.075, 3.0)))
    assert classify(grading).symbol == other.symbol


def test_sizes_are_read_off_by_logarithm() -> None:
    grading = grading_of([(10, 100), (1, 60), (0.1, 10)])
    assert grading.size_mm(60) == pytest.approx(1.0)
    assert grading.size_mm(10) == pytest.approx(0.1)
    # Half way in percent is half way in the logarithm of the size.
    assert grading.size_mm(35) == pytest.approx(10**-0.5)
    assert grading.uniformity == pytest.approx(10)
    assert grading.size_mm(5) is None


def test_d10_a_little_below_the_finest_sieve() -> None:
    # 8 points an octave from 0.15 to 0.075 mm: two more points are a quarter of an octave, D10 = 0.075 / 2^(1/4).
    grading = grading_of([(4.75, 100), (0.425, 60), (0.15, 20), (0.075, 12)])
    assert grading.size_mm(10) == pytest.approx(0.075 / 2**0.25)
    soil = classify(grading)
    assert soil.symbol == "SW-SM"
    assert soil.uniformity == pytest.approx(0.425 / 0.06307, rel=1e-3)
    assert soil.notes == ("D10 lies below the finest sieve; it is carried on from the two finest",)
    assert grading_of([(0.15, 20), (0.075, 12)]).size_mm(9.9) is None


def test_a_flat_end_of_the_grading_is_not_carried_on() -> None:
    assert grading_of([(4.75, 100), (0.15, 11), (0.075, 11)]).size_mm(10) is None


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: grading_of([(4.75, 60), (0.075, 70)]), "percent passing must fall with the opening"),
        (lambda: grading_of([(4.75, 60), (4.75, 50)]), "given twice"),
        (lambda: grading_of([]), "no sieves"),
        (lambda: classify(grading_of([(19, 100), (4.75, 60)])), r"does not reach the 0\.075 mm"),
        (lambda: classify(grading_of([(2, 100), (1, 90)])), r"does not reach the 0\.075 mm"),
        (lambda: classify(grading_of([(4.75, 100), (2, 99), (0.075, 2)]), liquid_limit=30), "give both"),
        (lambda: classify(None, liquid_limit=30, plastic_limit=31), "must be more than 0 and at most"),
        (lambda: classify(grading_of([(50, 55), (4.75, 40), (0.075, 4)])), "needs D10, D30 and D60"),
    ],
)
def test_gradings_that_do_not_tell(call, message: str) -> None:
    with pytest.raises(SoilError, match=message):
        call()


@pytest.mark.parametrize(
    ("grading", "limits", "test", "plant", "caution"),
    [
        (coarse(0, 2, {60: 0.4, 30: 0.3, 10: 0.2}), None, "relative density", "vibratory", "liquefy"),
        (None, (70, 25), "compaction curve", "sheepsfoot", "expansive: plasticity index 45"),
        (None, (30, 26), "compaction curve", "pneumatic", "frost-susceptible"),
        (coarse(5, 30), (40, 20), "compaction curve", "padfoot", None),
        (coarse(0, 8, {60: 0.4, 30: 0.3, 10: 0.2}), None, "where it has a peak", "vibratory", "liquefy"),
    ],
)
def test_what_follows_from_a_group(grading, limits, test: str, plant: str, caution: str | None) -> None:
    liquid, plastic = limits or (None, None)
    means = consequences(classify(grading, liquid_limit=liquid, plastic_limit=plastic))
    assert test in means.governing_test
    assert plant in means.plant
    assert caution is None or any(caution in text for text in means.cautions)


def test_every_group_has_its_consequences() -> None:
    from earthwork.soils.classify import Classification

    symbols = [
        "GW",
        "GP",
        "SW",
        "SP",
        "GM",
        "GC",
        "SM",
        "SC",
        "GC-GM",
        "SC-SM",
        "ML",
        "CL",
        "CL-ML",
        "MH",
        "CH",
        "OL",
        "OH",
    ]
    symbols += [f"{a}{g}-{a}{f}" for a in "GS" for g in "WP" for f in "MC"]
    for symbol in symbols:
        soil = Classification(
            symbol=symbol, name="", gravel_percent=10, sand_percent=50, fines_percent=40, liquid_limit=40,
            plasticity_index=20,
        )  # fmt: skip
        assert consequences(soil).plant


def test_collapse_screen_by_hand() -> None:
    # LL 30 %, Gs 2.7: the liquid limit fills voids of 0.81: ρd = 2700 / 1.81 = 1,492 kg/m³.
    assert collapse_prone(1491.0, 30.0, 2.7)
    assert not collapse_prone(1492.5, 30.0, 2.7)
    loess = classify(None, liquid_limit=30, plastic_limit=22)
    assert any("collapsible" in c for c in consequences(loess, bank_dry_density_kg_m3=1400).cautions)
    assert not any("collapsible" in c for c in consequences(loess, bank_dry_density_kg_m3=1600).cautions)
