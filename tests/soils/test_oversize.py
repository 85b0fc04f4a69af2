"""Oversize correction (ASTM D4718): by hand, there and back, and its limits."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from earthwork.errors import SoilError
from earthwork.soils import oversize

shares = st.floats(0.0, 40.0)


@given(st.floats(1400, 2200), shares, st.floats(2.3, 2.9))
def test_density_there_and_back(fine: float, share: float, gravity: float) -> None:
    whole = oversize.whole_dry_density(fine, share, gravity)
    assert oversize.fine_dry_density(whole, share, gravity) == pytest.approx(fine, rel=1e-12)
    # A mixture lies between its parts.
    low, high = sorted((fine, gravity * 1000))
    assert low * (1 - 1e-12) <= whole <= high * (1 + 1e-12)


@given(st.floats(0, 40), shares, st.floats(0, 5))
def test_water_there_and_back(fine: float, share: float, coarse: float) -> None:
    whole = oversize.whole_water_content_percent(fine, share, coarse)
    assert oversize.fine_water_content_percent(whole, share, coarse) == pytest.approx(fine, abs=1e-12, rel=1e-12)


def test_by_volumes_on_paper() -> None:
    # 70 kg of fines at 2000 take 0.035 m³; 30 kg of stones at 2.5 take 0.012 m³: 100 kg in 0.047 m³.
    assert oversize.whole_dry_density(2000, 30, 2.5) == pytest.approx(100 / 0.047, rel=1e-12)
    # 70 kg hold 8.4 kg of water, 30 kg hold 0.3 kg: 8.7 % of 100 kg.
    assert oversize.whole_water_content_percent(12, 30, 1) == pytest.approx(8.7, rel=1e-12)


def test_no_oversize_changes_nothing() -> None:
    assert oversize.whole_dry_density(1833.0, 0.0, 2.6) == pytest.approx(1833.0, rel=1e-15)
    assert oversize.whole_water_content_percent(14.2, 0.0, 1.0) == 14.2


@pytest.mark.parametrize("share", [-0.1, 40.1, float("nan")])
def test_beyond_the_standard(share: float) -> None:
    with pytest.raises(SoilError, match=r"it must be 0 to 40 % \(ASTM D4718\)"):
        oversize.whole_dry_density(1800, share, 2.65)


def test_what_leaves_no_room_is_refused() -> None:
    with pytest.raises(SoilError, match="fill the whole volume"):
        oversize.fine_dry_density(7000, 40, 2.5)
    with pytest.raises(SoilError, match="hold more water than the whole soil"):
        oversize.fine_water_content_percent(0.2, 40, 3)
