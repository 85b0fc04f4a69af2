"""What is said of faults in a site file: the key as it stands there, the value and the rule, in one line."""

import pytest

from earthwork.errors import SiteFileError
from earthwork.site import check_site


def faults(tmp_path, **ground):
    site = {"name": "x", "units": "metric"}
    surfaces = {"existing": "a.tif", "finished": {"level": 3.0}}
    with pytest.raises(SiteFileError, match="fault") as refused:
        check_site({"site": site, "ground": surfaces | ground}, tmp_path)
    return [line.strip() for line in str(refused.value).splitlines()[1:]]


@pytest.mark.parametrize("value", [-1, 0, True, "atuo", [1], float("nan"), float("inf")])
def test_a_ground_scale_is_a_number_or_auto(tmp_path, value):
    (fault,) = faults(tmp_path, ground_scale=value)
    assert fault.startswith("ground.ground_scale = ")
    assert fault.endswith(': it must be a number over 0, or "auto"')


@pytest.mark.parametrize("value", ["auto", 1, 0.9996])
def test_ground_scales_that_are_taken(tmp_path, value):
    ground = {"existing": "a.tif", "finished": {"level": 3.0}, "ground_scale": value}
    site = check_site({"site": {"name": "x", "units": "metric"}, "ground": ground}, tmp_path)
    assert site.model.ground.ground_scale == value


def test_an_area_is_a_file_or_a_table(tmp_path):
    assert faults(tmp_path, limits=3) == ["ground.limits = 3: it must be a file name, or a table with file"]


@pytest.mark.parametrize(
    ("surface", "named"),
    [
        ({"file": "b.tif", "level": 3.0}, "file and level"),
        ({"level": 3.0, "plane": {"at": [0, 0], "elevation": 1.0, "slope": [0, 0]}}, "level and plane"),
    ],
)
def test_a_surface_is_one_of_three(tmp_path, surface, named):
    said = faults(tmp_path, existing=surface)
    assert said == [f"ground.existing: give one of file, level and plane, not {named}"]


def test_a_faulty_key_is_not_said_to_be_missing_as_well(tmp_path):
    assert faults(tmp_path, finished=5) == [
        "ground.finished = 5: it must be a file name, or a table with file, level or plane"
    ]


def test_a_faulty_thickness_hides_no_other_fault(tmp_path):
    strata = [{"material": "a", "thickness": -1}, {"material": "b"}, {"material": "c"}]
    document = {
        "site": {"name": "x", "units": "metric"},
        "ground": {"existing": "a.tif", "finished": {"level": 3.0}},
        "stratum": strata,
    }
    with pytest.raises(SiteFileError, match="2 faults") as refused:
        check_site(document, tmp_path)
    first, second = (line.strip() for line in str(refused.value).splitlines()[1:])
    assert first == "stratum[1].thickness = -1: it must be at least 0 m"
    assert second == "stratum[2] (b): bottom or thickness is missing; only the last has none"
