"""Pad grades of least cost: the solver against brute force, limits, and sites that can be worked by hand."""

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry import box

import earthwork
from earthwork.errors import PlanError, SiteFileError
from earthwork.plan.grade_solver import (
    Balancing,
    Costs,
    PadCurve,
    StepLimit,
    check_steps,
    cost_of,
    solve_grades,
)
from tests.plan.test_pads import site, write_layer  # noqa: F401  (site is a fixture)

SHIFTS = np.linspace(-1.5, 1.5, 13)
COSTS = Costs(dig=0.0, fill=0.0, on_site=1.0, bring=10.0, take_away=8.0)


def wedge(name, area, height, tilt):
    """A pad of a given area on ground that falls evenly by ``tilt`` across it, ``height`` above its middle."""
    h = height + SHIFTS
    low, high = h - tilt / 2, h + tilt / 2
    fill = np.where(low >= 0, h, np.where(high <= 0, 0, high**2 / (2 * tilt))) * area
    return PadCurve((name,), SHIFTS, fill - h * area, fill)


def balancing_of(curves, factor, target=0.0):
    cut, fill = (sum(curve.at(0.0)[i] for curve in curves) for i in (0, 1))
    return Balancing(factor * cut - fill, fill, cut, fill, factor, target)


def brute(curves, ranges, steps, costs, balancing, count):
    best = np.inf
    names = [curve.names[0] for curve in curves]
    for shifts in itertools.product(*(np.linspace(*r, count) for r in ranges)):
        at = dict(zip(names, shifts, strict=True))
        if all(step.kept(at[step.one], at[step.other]) for step in steps):
            best = min(best, cost_of(shifts, curves, costs, balancing)[0])
    return best


def test_one_pad_is_lowered_until_its_cut_makes_its_fill():
    # Fill and cut of a wedge of 1000 m², 2 m across, at height h: fill (1 + h)²/4, cut (1 − h)²/4 (× 1000).
    # With 0.81 m³ made of one: 0.9 (1 − h) = 1 + h, so h = −0.1/1.9.
    curve = wedge("p", 1000.0, 0.0, 2.0)
    fine = np.linspace(-0.5, 0.5, 2001)
    curve = PadCurve(("p",), fine, 250 * (1 - fine) ** 2, 250 * (1 + fine) ** 2)
    found = solve_grades([curve], [(-0.5, 0.5)], [], COSTS, balancing_of([curve], 0.81))
    assert found.shifts_m[0] == pytest.approx(-0.1 / 1.9, abs=5e-4)
    assert found.surplus_m3 == pytest.approx(0, abs=0.5)


@settings(max_examples=25, deadline=None)
@given(
    heights=st.lists(st.floats(-1.2, 1.2), min_size=3, max_size=3),
    areas=st.lists(st.floats(500, 4000), min_size=3, max_size=3),
    tilts=st.lists(st.floats(0.2, 3), min_size=3, max_size=3),
    factor=st.floats(0.75, 1.1),
    bring=st.floats(2, 20),
    away=st.floats(2, 20),
    dig=st.floats(0, 2),
)
def test_no_grid_of_shifts_is_cheaper(heights, areas, tilts, factor, bring, away, dig):
    curves = [wedge(n, a, h, t) for n, a, h, t in zip("abc", areas, heights, tilts, strict=True)]
    ranges = [(-1.0, 1.0), (-0.5, 1.0), (-1.0, 0.25)]
    costs = Costs(dig, 0.0, 1.0, bring, away)
    steps = [StepLimit("a", "b", 1.5, 100.0, 100.4)]
    balancing = balancing_of(curves, factor)
    found = solve_grades(curves, ranges, steps, costs, balancing)
    best = brute(curves, ranges, steps, costs, balancing, 21)
    assert found.cost <= best * (1 + 0.01) + 1.0
    assert steps[0].kept(found.shifts_m[0], found.shifts_m[1])
    assert all(low - 1e-9 <= s <= high + 1e-9 for s, (low, high) in zip(found.shifts_m, ranges, strict=True))


def test_of_equal_plans_the_one_that_moves_least():
    curves = [wedge("a", 1000.0, 0.0, 2.0), wedge("b", 1000.0, 0.0, 2.0)]
    found = solve_grades(curves, [(-1.0, 1.0)] * 2, [], Costs(0, 0, 0, 0, 0), balancing_of(curves, 1.0))
    np.testing.assert_allclose(found.shifts_m, 0.0, atol=1e-9)


def test_a_pair_that_cannot_be_kept_is_named():
    curves = [wedge("north", 1000.0, 0.0, 2.0), wedge("south", 1000.0, 0.0, 2.0)]
    steps = [StepLimit("north", "south", 0.5, 103.0, 100.0)]
    with pytest.raises(PlanError, match=r'"north" and "south" differ by at least 1\.000 m .* 0\.5 m is allowed'):
        check_steps(curves, [(-1.0, 1.0), (-1.0, 1.0)], steps)
    check_steps(curves, [(-1.5, 1.0), (-1.0, 1.0)], steps)


def test_a_chain_that_cannot_be_kept_is_named():
    # Each pair alone is possible; together they ask 2 m over the two steps, and the ends are fixed 3 m apart.
    curves = [wedge(n, 1000.0, 0.0, 2.0) for n in ("low", "middle", "high")]
    steps = [StepLimit("low", "middle", 1.0, 100.0, 101.5), StepLimit("middle", "high", 1.0, 101.5, 103.0)]
    with pytest.raises(PlanError, match=r'the steps .*"low" to "middle".* cannot all be kept'):
        check_steps(curves, [(0.0, 0.0), (-1.0, 1.0), (0.0, 0.0)], steps)


# --- whole sites -------------------------------------------------------------------------------------------------

DESIGN = """
[design]
pads = "pads.gpkg"
name = "pad"
elevation = "grade"
elevation_is = "finished"
cut_slope = 2
fill_slope = 2
[balance]
step = 0.01
[balance.pad_moves]
import_cost = 12
export_cost = 9
average_distance = 100
{moves}
"""


@pytest.fixture
def designed(site, tmp_path):  # noqa: F811
    """Two pads on ground that rises east by 5 %: the east one in cut, the west one in fill; both at given grades."""

    def make(grades=(102.5, 102.5), moves="", shapes=(box(15, 40, 35, 60), box(65, 40, 85, 60))):
        site()
        write_layer(tmp_path / "pads.gpkg", list(shapes), pad=["west", "east"], grade=list(grades))
        path = tmp_path / "site.toml"
        text = path.read_text().replace('finished = "finished.tif"\n', "")
        text = text[: text.index("[pads]")] + DESIGN.format(moves=moves)
        path.write_text(text, encoding="utf-8")
        return path

    return make


def test_pads_move_until_the_site_balances(designed):
    path = designed()
    result = earthwork.balance(path)
    grades = result.pad_grades
    assert abs(grades.surplus_before_m3) > 50
    assert abs(grades.surplus_after_m3) < 10
    assert grades.cost_after < grades.cost_before
    assert [pad.pad for pad in grades.pads] == ["west", "east"]
    for pad in grades.pads:
        assert pad.elevation_after_m == pytest.approx(pad.elevation_before_m + pad.shift_m)
        assert pad.shift_m == pytest.approx(round(pad.shift_m, 2))
        assert pad.saves >= -1e-6
    # The volumes are those of the site designed at the new grades, to the last digit.
    again = earthwork.balance(designed(tuple(pad.elevation_after_m for pad in grades.pads)))
    assert again.volumes.total.cut_m3 == pytest.approx(grades.cut_after_m3, rel=1e-9)
    assert again.volumes.total.fill_m3 == pytest.approx(grades.fill_after_m3, rel=1e-9)
    assert again.surplus_compacted_m3 == pytest.approx(grades.surplus_after_m3, rel=1e-6, abs=1e-6)
    assert "pad_grades" in result.tables()
    assert result.to_dict()["pad_grades"]["pads"][0]["pad"] == "west"


def test_fixed_pads_stay_and_groups_move_together(designed):
    fixed = earthwork.balance(designed(moves='fixed = ["west"]')).pad_grades
    assert (fixed.pads[0].shift_m, fixed.pads[0].held_by) == (0.0, "fixed")
    assert fixed.pads[1].shift_m != 0
    together = earthwork.balance(designed(moves='groups = [["west", "east"]]')).pad_grades
    assert together.pads[0].shift_m == together.pads[1].shift_m != 0


def test_limits_and_steps_hold(designed):
    held = earthwork.balance(designed(moves='[[balance.pad_moves.limit]]\npad = "east"\nlowest = 102.48\n')).pad_grades
    assert held.pads[1].elevation_after_m >= 102.48 - 1e-9
    near = earthwork.balance(
        designed((102.5, 103.0), moves='[[balance.pad_moves.step]]\nbetween = ["east", "west"]\ngreatest = 0.25\n')
    ).pad_grades
    assert abs(near.pads[0].elevation_after_m - near.pads[1].elevation_after_m) <= 0.25 + 1e-9
    neighbours = earthwork.balance(
        designed((102.5, 103.0), moves="greatest_step = 0.3\nneighbours_within = 31\n")
    ).pad_grades
    assert abs(neighbours.pads[0].elevation_after_m - neighbours.pads[1].elevation_after_m) <= 0.3 + 1e-9


@pytest.mark.parametrize(
    ("moves", "message"),
    [
        ('fixed = ["wset"]', r'balance\.pad_moves\.fixed: there is no pad "wset"; did you mean "west"'),
        ('fixed = ["west", "east"]\n[[balance.pad_moves.step]]\nbetween = ["west", "east"]\ngreatest = 0.1',
         r'"east" and "west" differ by at least 1\.000 m'),
        ('[[balance.pad_moves.limit]]\npad = "west"\nlowest = 110', r'"west" cannot move within all of its limits'),
    ],
)  # fmt: skip
def test_impossible_moves_are_named(designed, moves, message):
    with pytest.raises(PlanError, match=message):
        earthwork.balance(designed((102.0, 103.0), moves=moves))


@pytest.mark.parametrize(
    ("moves", "message"),
    [
        ("range = [1.0, -1.0]", r"give the lower end of range first"),
        ('groups = [["west"], ["west"]]', r'give pad "west" in one group only'),
        ('[[balance.pad_moves.limit]]\npad = "west"\nlowest = 110\nhighest = 100', r"give a lowest under the highest"),
        ('[[balance.pad_moves.step]]\nbetween = ["west", "west"]\ngreatest = 1', r"name two pads that differ"),
    ],
)
def test_bad_moves(designed, moves, message):
    with pytest.raises(SiteFileError, match=message):
        earthwork.balance(designed(moves=moves))


def test_moves_need_a_design(designed):
    path = designed()
    text = path.read_text()
    start, stop = text.index("[design]"), text.index("[balance]")
    path.write_text(text[:start].replace("[ground]", '[ground]\nfinished = "finished.tif"') + text[stop:])
    with pytest.raises(SiteFileError, match=r"pads move only where a \[design\] builds them"):
        earthwork.balance(path)


# --- keys and benches in the balance -----------------------------------------------------------------------------


def test_keys_are_counted_where_the_site_asks(site, tmp_path):  # noqa: F811
    # Ground rising 1:4; 3 m of fill over the whole width.
    site(existing=lambda e, n: 100 + 0.25 * e, finished=lambda e, n: 100 + 0.25 * e + 3.0 * ((e > 20) & (e < 70)))
    path = tmp_path / "site.toml"
    plain = earthwork.balance(path)
    path.write_text(path.read_text() + "[keys]\ncount = true\n")
    counted = earthwork.balance(path)
    assert plain.keys is None
    volume = counted.keys.volume_m3
    # 100 m of key of 1.89 m² and benches of 0.375 m on 5000 m².
    assert volume == pytest.approx(100 * 1.89 + 5000 * 0.375, rel=0.02)
    card = counted.cards["silt"]
    assert counted.required_compacted_m3 - plain.required_compacted_m3 == pytest.approx(volume)
    gained = counted.available_compacted_m3 - plain.available_compacted_m3
    assert gained == pytest.approx(volume * card.effective_factor)
    lost = plain.surplus_compacted_m3 - counted.surplus_compacted_m3
    assert lost == pytest.approx(counted.keys.compacted_cost_m3)
    assert counted.to_dict()["ledger_closure_t"] == pytest.approx(0, abs=1e-6)
    assert counted.volumes.total.over_excavation_m3 == plain.volumes.total.over_excavation_m3
    pit = '[haul]\n[[borrow]]\nname = "pit"\nat = [500300.0, 4400050.0]\nmaterial = "silt"\ncapacity = 50000\nprice = 3\n'
    path.write_text(path.read_text() + pit)
    (warning,) = [w for w in earthwork.haul(path).warnings if w.code == "keys-not-planned"]
    assert f"{volume:,.0f} m³ of keys and benches" in warning.message
    assert f"{counted.keys.compacted_cost_m3:,.0f} m³ of compacted soil" in warning.message
