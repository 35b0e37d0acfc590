# ruff: noqa: INP001 - a script beside its pictures, not a package
"""Draws the pictures of README.md and docs/ anew from a delivery of the demo region: `make docs-figures`.

map.png is map.html as headless Chromium shows it with no network, one permit opened so that the predicted column
stands beside the map; strip.png is one sounding of report.html. Needs chromium and chromedriver.
"""

import argparse
import io
import shutil
from pathlib import Path

import geopandas
from PIL import Image
from selenium import webdriver
from selenium.webdriver.chrome.options import Options
from selenium.webdriver.chrome.service import Service
from selenium.webdriver.common.by import By
from selenium.webdriver.common.keys import Keys
from selenium.webdriver.support.ui import WebDriverWait

HERE = Path(__file__).resolve().parent
FLAGS = ("--headless=new", "--no-sandbox", "--disable-gpu", "--host-resolver-rules=MAP * ~NOTFOUND", "--lang=en-US")
WIDTH, HEIGHT = 1280, 800
COLOURS = 192  # a palette of so many: a third of the bytes, and no difference that an eye would find
LEAST_PROBABILITY = 0.3  # of gravel, at the permit that is shown


def open_browser() -> webdriver.Chrome:
    """A Chromium of one size that reaches no network."""
    chromium = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
    driver = shutil.which("chromedriver")
    if not chromium or not driver:
        raise SystemExit("chromium and chromedriver are needed (Debian: chromium, chromium-driver)")
    options = Options()
    options.binary_location = chromium
    for flag in FLAGS:
        options.add_argument(flag)
    browser = webdriver.Chrome(options=options, service=Service(driver))
    size = {"width": WIDTH, "height": HEIGHT, "deviceScaleFactor": 1, "mobile": False}
    browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
    return browser


def choose_permit(delivery: Path) -> str:
    """A permit whose column has something to show: the deepest rock where gravel is not improbable."""
    permits = geopandas.read_file(delivery / "layers.gpkg", layer="permits")
    shown = permits[(permits["covered"] == 1) & (permits["gravel_probability"] >= LEAST_PROBABILITY)]
    return str((shown if len(shown) else permits).sort_values("bedrock_depth").iloc[-1]["permit"])


def draw_map(browser: webdriver.Chrome, delivery: Path) -> bytes:
    """The map with the permit's predicted column, as PNG."""
    browser.get((delivery / "map.html").as_uri())
    WebDriverWait(browser, 60).until(lambda page: page.execute_script("return document.body.dataset.ready === 'yes'"))
    browser.find_element(By.ID, "wanted").send_keys(choose_permit(delivery), Keys.ENTER)
    WebDriverWait(browser, 20).until(lambda page: page.find_elements(By.CSS_SELECTOR, "#answer .strip"))
    # The whole county again: the search has gone near, and the picture should show where the valley runs.
    browser.execute_script(
        "map_geoves.eachLayer(layer => { if (layer instanceof L.ImageOverlay)"
        " map_geoves.fitBounds(layer.getBounds(), {animate: false}); })"
    )
    return browser.get_screenshot_as_png()


def draw_strip(browser: webdriver.Chrome, delivery: Path) -> bytes:
    """The first sounding's strip of the report, as PNG."""
    browser.get((delivery / "report.html").as_uri())
    strip = browser.find_element(By.ID, "sounding-0")
    browser.execute_script("arguments[0].style.padding = '16px'", strip)
    return strip.screenshot_as_png


def save(picture: bytes, path: Path) -> None:
    """The picture with a palette, under its name."""
    image = Image.open(io.BytesIO(picture)).convert("RGB")
    image.quantize(COLOURS, dither=Image.Dither.NONE).save(path, optimize=True)


def main() -> None:
    """Draw all pictures of a delivery."""
    parser = argparse.ArgumentParser(description="Draw the pictures of the documentation anew.")
    parser.add_argument("--delivery", type=Path, default=HERE.parents[1] / "demo_region" / "delivery")
    delivery = parser.parse_args().delivery.resolve()
    browser = open_browser()
    try:
        save(draw_map(browser, delivery), HERE / "map.png")
        save(draw_strip(browser, delivery), HERE / "strip.png")
    finally:
        browser.quit()


if __name__ == "__main__":
    main()
