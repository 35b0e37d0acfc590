"""The pages of the documentation, as a reader of the repository has them."""

from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
PAGES = sorted(
    [ROOT / "README.md", ROOT / "DEVELOPERS.md", ROOT / "demo_region" / "README.md", *ROOT.glob("docs/**/*.md")]
)


@pytest.fixture(scope="session")
def root():
    return ROOT


@pytest.fixture(params=PAGES, ids=[page.relative_to(ROOT).as_posix() for page in PAGES])
def page(request):
    return request.param
