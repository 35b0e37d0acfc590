"""What a user may import from geoves."""

import subprocess
import sys

import geoves


def test_every_public_name_is_found_and_has_a_docstring():
    missing = [name for name in geoves.__all__ if name != "__version__" and not getattr(geoves, name).__doc__]
    assert missing == []


def test_an_unknown_name_is_an_attribute_error():
    assert not hasattr(geoves, "krige_everything")


def test_importing_the_package_imports_no_library():
    code = "import sys, geoves; print([name for name in ('numpy', 'pandas', 'rasterio') if name in sys.modules])"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"
