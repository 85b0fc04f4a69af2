"""The day sheets of both samples, printed: one page a day, whatever there is to say on it."""

import base64
import re

import pytest

from earthwork.reporting.runner import run_command
from earthwork.site import load_site
from tests.samples.ground_by_numpy import SAMPLES


@pytest.mark.parametrize(("sample", "paper"), [("cooper-ridge", (612, 792)), ("larkspur-campus", (595, 842))])
def test_a_page_a_day(browser, tmp_path, sample, paper):
    run_command("water", load_site(SAMPLES / sample / "site.toml"), out=tmp_path)
    sheets = tmp_path / "water_day_sheets.html"
    browser.driver.get(sheets.as_uri())
    printed = browser.driver.execute_cdp_cmd("Page.printToPDF", {"preferCSSPageSize": True, "printBackground": True})
    pdf = base64.b64decode(printed["data"])
    assert len(re.findall(rb"/Type\s*/Page\b", pdf)) == sheets.read_text(encoding="utf-8").count("<section>")
    boxes = {tuple(map(float, box)) for box in re.findall(rb"/MediaBox\s*\[0 0 ([\d.]+) ([\d.]+)\]", pdf)}
    assert [[round(side) for side in box] for box in boxes] == [list(paper)]
