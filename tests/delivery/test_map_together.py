"""The map's panel on one geology: what all others say stands beside what a sounding or a well says by itself."""

from selenium.webdriver.common.keys import Keys

from geoves.delivery.map_page import write_map_page
from tests.delivery.joint_county import SET_ASIDE, join


def test_the_panel_says_alone_others_and_together(browser, small_results, tmp_path):
    browser.open(write_map_page(join(small_results), tmp_path / "map.html"))
    browser.wait_for("document.body.dataset.ready === 'yes'")

    def panel_of(name):
        wanted = browser.driver.find_element("id", "wanted")
        wanted.clear()
        wanted.send_keys(name, Keys.ENTER)
        return browser.run("return document.getElementById('answer').textContent")

    words = panel_of("Larch 1")
    assert "By this curve alone: Basal gravel or rock begins at" in words
    assert "the others expect 71 m (60 to 83); together 66 m (59 to 72)." in words
    assert "Set aside by the one geology" in panel_of(SET_ASIDE)
    assert "All other places, without this well, expect basal gravel or rock at 68 m (58 to 80)." in panel_of("W-1")
    assert browser.complaints() == []
