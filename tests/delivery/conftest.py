"""A headless Chromium that reaches no network, for tests that look at the pages as a reader does; hostile names."""

import json
import os
import shutil

import attrs
import pytest
from selenium import webdriver
from selenium.webdriver.chrome.options import Options
from selenium.webdriver.chrome.service import Service
from selenium.webdriver.support.ui import WebDriverWait

from geoves.domain.units import Template

FLAGS = (
    "--headless=new",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--no-first-run",
    "--host-resolver-rules=MAP * ~NOTFOUND",
    "--lang=en-US",
)


def find_browser():
    """Chromium and its driver; where either is missing the test skips, and fails on the project's own checks."""
    chromium = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
    driver = shutil.which("chromedriver")
    if chromium and driver:
        return chromium, driver
    reason = "chromium and chromedriver are needed to open the pages (Debian: chromium, chromium-driver)"
    if os.environ.get("CI"):
        pytest.fail(reason)
    return pytest.skip(reason)


class Browser:
    """One Chromium for many pages: opened from disk, console and network traffic logged."""

    def __init__(self, chromium, driver_path):
        options = Options()
        options.binary_location = chromium
        for flag in FLAGS:
            options.add_argument(flag)
        options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
        self.driver = webdriver.Chrome(options=options, service=Service(driver_path))

    def open(self, path, width=1300):
        """The page at `path` in a window of so many pixels; what was logged before is forgotten."""
        self.driver.get("about:blank")
        self.driver.get_log("performance")
        self.driver.get_log("browser")
        size = {"width": width, "height": 850, "deviceScaleFactor": 1, "mobile": width < 800}
        self.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
        self.driver.get(path.as_uri())

    def run(self, script, *arguments):
        return self.driver.execute_script(script, *arguments)

    def wait_for(self, condition, seconds=20):
        """What `condition`, an expression in the page, gives once it is true."""
        return WebDriverWait(self.driver, seconds).until(lambda one: one.execute_script(f"return {condition}"))

    def requested_addresses(self):
        """All that the page asked for, by the browser's own protocol, save what it holds inside itself."""
        messages = [json.loads(entry["message"])["message"] for entry in self.driver.get_log("performance")]
        sent = [one["params"]["request"]["url"] for one in messages if one["method"] == "Network.requestWillBeSent"]
        return [address for address in sent if not address.startswith(("data:", "blob:"))]

    def complaints(self):
        """Errors and warnings of the page's console."""
        return [one["message"] for one in self.driver.get_log("browser") if one["level"] in ("SEVERE", "WARNING")]


@pytest.fixture(scope="session")
def browser():
    """A headless Chromium that reaches no network."""
    one = Browser(*find_browser())
    yield one
    one.driver.quit()


# What a hostile or careless table may hold: template code, markup, script literals, text that runs right to left.
HOSTILE = (
    "{{ 7*7 }}",
    "<script>document.title='broken'</script>",
    "${7*7}`;document.title='broken';`",
    "{% raw %}",
    "</script><img src=x onerror=\"document.title='broken'\">",
    "\u202eevil\u202c \u0634\u0645\u0627\u0644",
    "'\"&amp;&lt;b&gt;",
    "@@DATA@@",
)


@pytest.fixture(scope="session")
def hostile_results(small_results):
    """The finished job with every name and remark replaced by text that would like to be code."""
    survey, found = small_results.survey, small_results.interpretation
    new = dict(zip((one.name for one in survey.soundings), HOSTILE, strict=True))
    soundings = tuple(attrs.evolve(one, name=new[one.name], note=HOSTILE[1]) for one in survey.soundings)
    wells = tuple(attrs.evolve(one, name=f"{one.name}{HOSTILE[i]}") for i, one in enumerate(survey.wells))
    well_names = {old.name: one.name for old, one in zip(survey.wells, wells, strict=True)}
    readings = tuple(
        attrs.evolve(one, well=well_names[one.well], description=HOSTILE[i % 8])
        for i, one in enumerate(found.well_readings)
    )
    permits = tuple(
        attrs.evolve(one, name=f"{one.name}{HOSTILE[i % 8]}", use=HOSTILE[i % 8])
        for i, one in enumerate(survey.permits)
    )
    picks = tuple(attrs.evolve(one, place=new[one.place], reason=HOSTILE[4]) for one in survey.picks)
    columns = tuple(
        attrs.evolve(
            one,
            sounding=new[one.sounding],
            picks=picks if one.picks else (),
            pick_opinions=tuple(attrs.evolve(said, pick=picks[0]) for said in one.pick_opinions),
        )
        for one in found.columns
    )
    units = tuple(attrs.evolve(one, name=HOSTILE[i]) for i, one in enumerate(small_results.region.template.units))
    region = attrs.evolve(small_results.region, name=HOSTILE[0] + HOSTILE[1], template=Template(units))
    return attrs.evolve(
        small_results,
        region=region,
        survey=attrs.evolve(survey, soundings=soundings, wells=wells, permits=permits, picks=picks),
        inverted=tuple(attrs.evolve(one, sounding=new[one.sounding]) for one in small_results.inverted),
        interpretation=attrs.evolve(found, columns=columns, well_readings=readings, unmapped_words=HOSTILE),
        doubts=tuple(attrs.evolve(one, value=HOSTILE[4], place=HOSTILE[0]) for one in small_results.doubts),
    )
