"""Commands that share a pass: the same answers as alone, the files read once."""

from __future__ import annotations

import threading
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

import earthwork
from earthwork.errors import PlanError
from earthwork.ground.surfaces import AlignedRaster
from earthwork.quantities.engine import walk
from earthwork.quantities.one_pass import OnePass
from earthwork.quantities.site_ground import open_site
from earthwork.quantities.volumes import VolumesTally
from earthwork.site import load_site
from tests.quantities.conftest import stack_of

SAMPLE = Path(__file__).parents[2] / "samples" / "cooper-ridge" / "site.toml"


@pytest.fixture(scope="module")
def site():
    return load_site(SAMPLE)


@pytest.fixture
def reads(monkeypatch):
    """How many cells of the existing and finished rasters are read."""
    counted = []
    plain = AlignedRaster.reader

    def reader(self):
        inner = plain(self)
        read = inner.read

        def counting(window):
            counted.append(window.height * window.width)
            return read(window)

        inner.read = counting
        return inner

    monkeypatch.setattr(AlignedRaster, "reader", reader)
    return counted


def test_commands_together_give_what_they_give_alone(site):
    shared = OnePass(site, open_site(site, moving=True))
    together = shared.run({"balance": lambda: earthwork.balance(site), "volumes": lambda: earthwork.volumes(site)})
    assert together["balance"].result.to_dict() == earthwork.balance(site).to_dict()
    alone = earthwork.volumes(site)
    assert together["volumes"].result.total.cut_m3 == pytest.approx(alone.total.cut_m3, rel=1e-12)
    assert together["volumes"].result.total.section_m3 == pytest.approx(alone.total.section_m3, rel=1e-12)


def test_the_ground_is_read_once(site, reads):
    ground = open_site(site, moving=True)
    reads.clear()  # opening looks at a few blocks for the mean elevation
    shared = OnePass(site, ground)
    shared.run({"balance": lambda: earthwork.balance(site), "volumes": lambda: earthwork.volumes(site)})
    assert shared.passes == 1
    assert sum(reads) == 2 * ground.stack.grid.rows * ground.stack.grid.columns


def test_without_room_for_tiles_later_questions_read_again_with_the_same_digits(site):
    shared = OnePass(site, open_site(site, moving=True), kept_bytes=0)
    answers = shared.run({"balance": lambda: earthwork.balance(site)})
    assert shared.passes > 1
    assert answers["balance"].result.to_dict() == earthwork.balance(site).to_dict()


def test_an_error_stops_one_command_only(site):
    def fails():
        raise PlanError("haul: nothing takes the waste")

    answers = OnePass(site, open_site(site)).run({"haul": fails, "volumes": lambda: earthwork.volumes(site)})
    assert str(answers["haul"].error) == "haul: nothing takes the waste"
    assert answers["volumes"].result.total.cut_m3 > 0


def test_a_bug_in_a_command_comes_out_and_the_others_end(site):
    def broken():
        raise ZeroDivisionError("a bug")

    before = threading.active_count()
    with pytest.raises(ZeroDivisionError, match="a bug"):
        OnePass(site, open_site(site)).run({"volumes": lambda: earthwork.volumes(site), "broken": broken})
    for thread in threading.enumerate():
        if thread.name == "volumes":
            thread.join(5)
    assert threading.active_count() <= before


def test_further_tallies_are_counted_without_any_command():
    stack = stack_of(np.zeros((5, 6)), np.full((5, 6), 2.0))
    ground = SimpleNamespace(stack=stack, zone_names=(), zones=None)
    tally = VolumesTally(ground)
    OnePass(SimpleNamespace(), ground, tallies=[tally]).run({})
    assert tally.total.values[2] == 60.0


def test_equal_questions_are_counted_once():
    stack = stack_of(np.zeros((5, 6)), np.full((5, 6), 2.0))
    ground = SimpleNamespace(stack=stack, zone_names=(), zones=None)
    seen = []

    class Counting(VolumesTally):
        def empty(self):
            return Counting(self.ground)

        def add(self, tile):
            seen.append(tile.window)
            super().add(tile)

    def ask():
        tally = Counting(ground)
        walk(stack, [tally])
        return tally.total.values.copy()

    answers = OnePass(SimpleNamespace(), ground).run({"one": ask, "two": ask})
    cells = sum(window.height * window.width for window in seen)
    assert cells == 30
    assert answers["one"].result.tolist() == answers["two"].result.tolist()
    assert answers["one"].result[2] == 60.0
