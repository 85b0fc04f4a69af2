"""A real browser without a window, and reports to open in it.

The files here are named ``check_*.py``: they need Chromium with its driver, so they run when they are asked for
(``pytest tests/browser/check_page.py``), not with the other tests.
"""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import pytest
import rasterio
from rasterio.transform import from_origin
from selenium import webdriver
from selenium.webdriver.chrome.options import Options
from selenium.webdriver.chrome.service import Service
from selenium.webdriver.common.by import By
from selenium.webdriver.support.ui import WebDriverWait

import earthwork
from tests.reporting.report.conftest import SAMPLES, make_site

_FLAGS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-sync",
    "--disable-background-networking", "--disable-component-update", "--hide-scrollbars",
)  # fmt: skip


class Browser:
    """Chromium at a size and in a colour scheme."""

    def __init__(self, profile: Path) -> None:
        options = Options()
        options.binary_location = shutil.which("chromium") or "chromium"
        for flag in (*_FLAGS, f"--user-data-dir={profile}"):
            options.add_argument(flag)
        options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
        driver = shutil.which("chromedriver") or "chromedriver"
        self.driver = webdriver.Chrome(options=options, service=Service(driver))

    def open(self, page: Path, *, width: int = 1280, height: int = 900, scheme: str = "light", touch: bool = False):
        """Open a report and wait until its map is drawn."""
        self.driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {
            "media": "", "features": [{"name": "prefers-color-scheme", "value": scheme}],
        })  # fmt: skip
        self.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", {
            "width": width, "height": height, "deviceScaleFactor": 1, "mobile": touch,
        })  # fmt: skip
        self.driver.execute_cdp_cmd("Emulation.setTouchEmulationEnabled", {"enabled": touch, "maxTouchPoints": 5})
        self.driver.get(page.resolve().as_uri())
        WebDriverWait(self.driver, 60).until(lambda d: d.find_elements(By.CSS_SELECTOR, "#map.ready"))
        return self

    def one(self, selector: str):
        return self.driver.find_element(By.CSS_SELECTOR, selector)

    def all(self, selector: str):
        return self.driver.find_elements(By.CSS_SELECTOR, selector)

    def run(self, script: str, *arguments):
        return self.driver.execute_script(script, *arguments)

    def reading(self) -> dict[str, str]:
        """What stands under the pointer."""
        return {item.get_attribute("data-read"): item.text for item in self.all("[data-read]")}

    def go(self, easting: float, northing: float) -> dict[str, str]:
        """Ask the map for a place."""
        for name, value in (("easting", easting), ("northing", northing)):
            field = self.one(f"[name={name}]")
            field.clear()
            field.send_keys(f"{value:.2f}")
        self.one("form.go button").click()
        return self.reading()

    def frame(self) -> None:
        """Wait until what was asked for is drawn."""
        self.driver.execute_async_script(
            "const done = arguments[0]; requestAnimationFrame(() => requestAnimationFrame(done));"
        )

    def pixels(self, selector: str = "canvas.map-sheet") -> int:
        """A number that changes when the canvas does."""
        return self.run(
            "const c = document.querySelector(arguments[0]); const d = c.getContext('2d')"
            ".getImageData(0, 0, c.width, c.height).data; let h = 7;"
            "for (let i = 0; i < d.length; i += 37) h = (h * 31 + d[i]) | 0; return h;", selector
        )  # fmt: skip

    def errors(self) -> list[str]:
        """What the console has said since it was last asked."""
        return [row["message"] for row in self.driver.get_log("browser")]


@pytest.fixture(scope="session")
def browser(tmp_path_factory):
    made = Browser(tmp_path_factory.mktemp("profile"))
    yield made
    made.driver.quit()


@pytest.fixture(scope="session")
def larkspur(tmp_path_factory):
    """The report of the metric sample."""
    return earthwork.report(SAMPLES / "larkspur-campus" / "site.toml", out=tmp_path_factory.mktemp("larkspur") / "r")


@pytest.fixture(scope="session")
def cooper(tmp_path_factory):
    """The report of the US sample."""
    return earthwork.report(SAMPLES / "cooper-ridge" / "site.toml", out=tmp_path_factory.mktemp("cooper") / "r")


@pytest.fixture(scope="session")
def hostile(tmp_path_factory):
    """The report of the small site whose names want to break it."""
    return earthwork.report(make_site(tmp_path_factory.mktemp("hostile")))


@pytest.fixture(scope="session")
def large(tmp_path_factory):
    """The page of a site of 4,000 × 4,000 cells with survey noise."""
    directory = tmp_path_factory.mktemp("large")
    rng = np.random.default_rng(4)
    row, column = np.mgrid[:4000, :4000].astype(np.float32)
    existing = 200 + 20 * np.sin(row / 700) + 12 * np.cos(column / 500) + rng.normal(0, 0.03, row.shape)
    middle = np.hypot(row - 2000, column - 2000) < 1300
    finished = np.where(middle, 205 + 0.004 * column, existing)
    for name, values in (("existing.tif", existing), ("finished.tif", finished)):
        with rasterio.open(
            directory / name, "w", driver="GTiff", width=4000, height=4000, count=1, dtype="float32",
            crs="EPSG:32614", transform=from_origin(500000, 4400000, 0.5, 0.5), tiled=True, compress="deflate",
        ) as file:  # fmt: skip
            file.write(values.astype(np.float32), 1)
    site = directory / "site.toml"
    site.write_text(
        '[site]\nname = "Four thousand"\nunits = "metric"\n[ground]\nexisting = "existing.tif"\n'
        'finished = "finished.tif"\n',
        encoding="utf-8",
    )
    return earthwork.report(site, only=["page"])
