"""Bank tests that name no material but say where they were taken: the ground tells which one they are of."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

from earthwork.soils.records import DensityTest, MaterialTests

if TYPE_CHECKING:
    from earthwork.site.model import SiteModel


def layer_materials(model: SiteModel) -> list[str]:
    """Materials that lie in the ground of a site, once each: stripped ones first, then the strata from the top."""
    return list(dict.fromkeys([strip.material for strip in model.strip] + [s.material for s in model.stratum]))


def waiting_tests(model: SiteModel, material: str, tests: MaterialTests) -> tuple[DensityTest, ...]:
    """Bank tests of a material that its rows do not name and that the ground can place; empty where it lies alone."""
    layers = layer_materials(model)
    if len(layers) < 2 or material not in layers:
        return ()
    return tuple(test for test in tests.bank if not test.material and test.placed)


def assign_tests(
    model: SiteModel, tests: Mapping[str, MaterialTests], found: Mapping[DensityTest, str | None]
) -> dict[str, MaterialTests]:
    """The tests with each waiting one kept by the material that it lies in, and by no other.

    Args:
        model: the site.
        tests: tests by material, as read.
        found: the material at each waiting test; None where the ground does not tell.
    """
    claimed = {(test, name) for name in tests for test in waiting_tests(model, name, tests[name])}
    placed = {}
    for name, own in tests.items():
        waiting = set(waiting_tests(model, name, own))
        kept = tuple(t for t in own.bank if t not in waiting or found[t] == name)
        nowhere = [t.label for t in own.bank if t in waiting and found[t] is None]
        others = [
            f"{t.label} ({found[t]})"
            for t in own.bank
            if t in waiting and found[t] not in (None, name) and (t, found[t]) not in claimed
        ]
        notes = [*own.notes]
        where = f"material.{name}.bank.tests"
        if nowhere:
            notes.append(
                (
                    "tests-not-placed",
                    f"{where}: outside the ground that is known, or over it, and left out: {', '.join(nowhere)}. "
                    "Check coordinates and elevations, or name the material in a column",
                )
            )
        if others:
            notes.append(
                (
                    "tests-elsewhere",
                    f"{where}: in another stratum by their place, and left out: {', '.join(others)}. "
                    "Name the material in a column if they are of this one",
                )
            )
        placed[name] = replace(own, bank=kept, notes=tuple(notes))
    return placed
