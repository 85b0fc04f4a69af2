"""Takes the pictures of the report for the README, in headless Chromium and LibreOffice.

Run ``python docs/report_pictures.py`` after a change of the page or the samples, and look at them. Needs chromium,
chromedriver, soffice and pdftoppm, and the extra ``browser``.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path

ROOT = Path(__file__).parents[1]
sys.path[:0] = [str(ROOT), str(ROOT / "docs")]
PLACE = ROOT / "docs" / "pictures"


def main() -> None:
    """Write all pictures of the report into docs/pictures."""
    import earthwork
    from tests.browser.conftest import Browser

    with tempfile.TemporaryDirectory() as folder:
        made = earthwork.report(ROOT / "samples" / "larkspur-campus" / "site.toml", out=Path(folder) / "report")
        browser = Browser(Path(folder) / "profile")
        try:
            _answers(browser, made.directory)
            _map(browser, made)
            _phone(browser, made.directory)
        finally:
            browser.driver.quit()
        _workbook(made.directory, Path(folder))


def _keep(source: Path, name: str) -> None:
    from pictures import small

    target = PLACE / name
    small(source, target)
    source.unlink()
    print(f"wrote {target.relative_to(ROOT)}: {target.stat().st_size // 1000} kB")


def _shoot(browser, directory: Path, name: str) -> None:
    shot = directory / "shot.png"
    browser.frame()
    browser.driver.save_screenshot(str(shot))
    _keep(shot, name)


def _answers(browser, directory: Path) -> None:
    browser.open(directory / "report.html", width=1200, height=900)
    _shoot(browser, directory, "report-answers.png")


def _map(browser, made) -> None:
    browser.open(made.directory / "report.html", width=1200, height=1180)
    canvas = browser.one("canvas.map-sheet")
    browser.one("[data-do=section]").click()
    # across the deepest fill
    deepest = made.parts.probe.fill
    for east, north in ((-75.0, -12.0), (70.0, 22.0)):
        browser.go(deepest.easting + east, deepest.northing + north)
        canvas.send_keys("\ue007")
    browser.go(deepest.easting, deepest.northing)
    browser.run("document.querySelector('.section-read').scrollIntoView({block: 'end'})")
    _shoot(browser, made.directory, "report-map.png")


def _phone(browser, directory: Path) -> None:
    browser.open(directory / "report.html", width=390, height=844, scheme="dark", touch=True)
    _shoot(browser, directory, "report-phone.png")


def _workbook(directory: Path, folder: Path) -> None:
    source = directory / "workbook.xlsx"
    subprocess.run(
        ["soffice", f"-env:UserInstallation={(folder / 'office').as_uri()}", "--headless", "--convert-to", "pdf",
         "--outdir", str(folder), str(source)],
        check=True, capture_output=True,
    )  # fmt: skip
    text = subprocess.run(["pdftotext", folder / "workbook.pdf", "-"], check=True, capture_output=True, text=True).stdout
    page = next(i for i, sheet in enumerate(text.split("\f"), start=1) if "required, compacted" in sheet)
    subprocess.run(
        ["pdftoppm", "-r", "110", "-png", "-singlefile", "-f", str(page), "-l", str(page), folder / "workbook.pdf",
         folder / "sheet"], check=True,
    )  # fmt: skip
    _keep(folder / "sheet.png", "report-workbook.png")


if __name__ == "__main__":
    main()
