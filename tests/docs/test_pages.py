"""Every page: links that resolve, pictures that are light, words that are the program's own."""

import re
import textwrap

import pytest

from geoves.delivery.cautions import CAUTIONS

# ](target) outside of code; images included.
LINK = re.compile(r"\]\(([^)\s]+)\)")
HEADING = re.compile(r"^#+ (.+)$", re.MULTILINE)


def without_code(text):
    return re.sub(r"`[^`\n]*`", "", re.sub(r"```.*?```", "", text, flags=re.DOTALL))


def anchor(heading):
    """The fragment of a heading on a forge: lower case, signs dropped, blanks as hyphens (common practice)."""
    return re.sub(r"[^\w\- ]", "", heading.strip().lower()).replace(" ", "-")


def anchors(path):
    outside = re.sub(r"```.*?```", "", path.read_text("utf-8"), flags=re.DOTALL)
    return {anchor(heading) for heading in HEADING.findall(outside)}


def test_links_resolve(page):
    for target in LINK.findall(without_code(page.read_text("utf-8"))):
        if target.startswith("https://"):
            continue
        path, _, fragment = target.partition("#")
        linked = (page.parent / path).resolve() if path else page
        assert linked.exists(), f"{page.name} links to {target}"
        if fragment:
            assert fragment in anchors(linked), f"{page.name} links to {target}"


def test_a_broken_link_would_be_found(tmp_path):
    (tmp_path / "there.md").write_text("# A heading, here\n", encoding="utf-8")
    page = tmp_path / "page.md"
    page.write_text("[one](there.md#a-heading-here)\n", encoding="utf-8")
    test_links_resolve(page)
    for broken in ("[one](missing.md)", "[one](there.md#elsewhere)"):
        page.write_text(broken, encoding="utf-8")
        with pytest.raises(AssertionError):
            test_links_resolve(page)


def test_every_page_can_be_reached_from_the_readme(root):
    found, waiting = set(), [root / "README.md"]
    while waiting:
        page = waiting.pop()
        if page in found:
            continue
        found.add(page)
        targets = LINK.findall(without_code(page.read_text("utf-8")))
        linked = [(page.parent / target.partition("#")[0]).resolve() for target in targets if ":" not in target]
        waiting += [path for path in linked if path.suffix == ".md"]
    assert set(root.glob("docs/**/*.md")) <= found


def test_the_page_speaks_of_itself_alone(page):
    text = page.read_text("utf-8")
    assert not re.search(r"\.\./shared|/(?:work|root|tmp)/|issue #?\d|TODO|FIXME", text)


def test_lines_are_short_outside_of_tables(page):
    long = [line for line in page.read_text("utf-8").splitlines() if len(line) > 120 and line[:1] not in "|!"]
    assert long == []


def test_pictures_are_light(root):
    pictures = list(root.glob("docs/figures/*.png"))
    assert {picture.name for picture in pictures} >= {"map.png", "strip.png"}
    assert all(picture.stat().st_size < 400_000 for picture in pictures)


@pytest.mark.parametrize("name", ["README.md", "docs/explanation/limits.md"])
def test_the_cautions_are_those_of_the_delivery(root, name):
    flowing = " ".join((root / name).read_text("utf-8").split())
    for caution in CAUTIONS.values():
        assert textwrap.shorten(caution, 2000) in flowing
