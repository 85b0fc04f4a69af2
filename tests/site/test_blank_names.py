"""Names of blanks are no names."""

from pathlib import Path

import pytest

from earthwork.errors import SiteFileError
from earthwork.site import check_site


@pytest.mark.parametrize("name", ["", " ", "\t \n"])
def test_blank_name_is_refused(name):
    ground = {"existing": "a.tif", "finished": {"level": 3}}
    with pytest.raises(SiteFileError, match=r"(?s)site\.name = .*it must not be blank"):
        check_site({"site": {"name": name, "units": "metric"}, "ground": ground}, Path("."))
