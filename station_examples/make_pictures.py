"""Pictures of the README, from a run of the example: python station_examples/make_pictures.py

Maps and charts are drawn by etflux itself. The brief needs LibreOffice and pdftoppm, the page needs Chromium with its
driver, the comparison needs the folder of measurements that ETFLUX_MEASURED names; where they are missing the picture
stays as it is, and the script says so.
"""

from __future__ import annotations

import importlib.util
import os
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

from etflux.brief.figures import draw, save
from etflux.job import run_workbook
from etflux.results import Results

HERE = Path(__file__).parent
DAY = "2031-07-27"
DOTS = 90  # an inch, of the brief
WIDE, TALL = 1280, 1180  # of the page, in pixels


def main() -> None:
    """Make every picture that can be made here."""
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place) / "run"
        results = run_workbook(HERE / "harrowbend.xlsx", output=folder, on=DAY)
        figures(results)
        for make in (brief, page, measured):
            if not make(folder):
                print(f"{make.__name__}: what it needs is not here; left as it is", file=sys.stderr)


def figures(results: Results) -> None:
    """Map, a stand's season, an episode."""
    save(draw(results, "contribution_c", DAY, size="page"), HERE / "map.png")
    save(draw(results, "season", DAY, stand="HB01-corn", size="page"), HERE / "season.png")
    save(draw(results, "episode", DAY, size="page"), HERE / "episode.png")


def brief(folder: Path) -> bool:
    """First page of the results workbook."""
    office, painter = shutil.which("soffice"), shutil.which("pdftoppm")
    if not (office and painter):
        return False
    profile = f"-env:UserInstallation={(folder / 'office').as_uri()}"
    subprocess.run(
        [office, "--headless", profile, "--convert-to", "pdf", "--outdir", str(folder), str(folder / "results.xlsx")],
        check=True, capture_output=True,
    )  # fmt: skip
    subprocess.run(
        [painter, "-r", str(DOTS), "-f", "1", "-l", "1", "-singlefile", "-png", str(folder / "results.pdf"),
         str(HERE / "brief")],
        check=True,
    )  # fmt: skip
    return True


def page(folder: Path) -> bool:
    """The top of the page in a browser."""
    browser, driver = shutil.which("chromium"), shutil.which("chromedriver")
    if not (browser and driver):
        return False
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service
    from selenium.webdriver.support.ui import WebDriverWait

    options = webdriver.ChromeOptions()
    options.binary_location = browser
    for argument in ("--headless=new", "--no-sandbox", "--hide-scrollbars", f"--window-size={WIDE},{TALL}"):
        options.add_argument(argument)
    window = webdriver.Chrome(service=Service(driver), options=options)
    try:
        window.get((folder / "brief.html").as_uri())
        ready = "return document.body.dataset.ready == 'yes'"
        WebDriverWait(window, 30).until(lambda shown: shown.execute_script(ready))
        window.execute_cdp_cmd(
            "Emulation.setDeviceMetricsOverride",
            {"width": WIDE, "height": TALL, "deviceScaleFactor": 1, "mobile": False},
        )
        WebDriverWait(window, 5).until(lambda shown: shown.execute_script("return window.innerHeight") == TALL)
        window.save_screenshot(str(HERE / "page.png"))
    finally:
        window.quit()
    return True


def measured(folder: Path) -> bool:
    """A season of irrigated maize beside what a flux tower measured."""
    if not os.environ.get("ETFLUX_MEASURED"):
        return False
    from etflux import run_case
    from etflux.compare import compare
    from etflux.compare.figures import scatter, time_series

    spec = importlib.util.spec_from_file_location("measured_sites", HERE.parent / "tests" / "measured" / "sites.py")
    assert spec is not None
    assert spec.loader is not None
    sites = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = sites
    spec.loader.exec_module(sites)
    results = run_case(sites.ne1(2004, {"surface_root_uptake": True}, only="kept"))
    comparison = compare(results, sites.measured("ne1", results))
    save(time_series(results, comparison, "kept", "et_mm"), HERE / "measured_days.png")
    save(scatter(results, comparison, "kept", "et_mm"), HERE / "measured_scatter.png")
    return True


if __name__ == "__main__":
    main()
