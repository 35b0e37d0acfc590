"""Prints the lower bound of every library that geoves runs with, as a file of constraints for pip.

The tools of the extra `test` are not bound: contributors have them from constraints.txt.
"""

import re
import sys
import tomllib
from pathlib import Path

BOUND = re.compile(r"^([A-Za-z0-9_.-]+)\s*>=\s*([0-9.]+)")


def list_lower_bounds(project):
    """A line a dependency, `name==version`; those without a bound are left to pip."""
    extras = project["optional-dependencies"]
    wanted = [*project["dependencies"], *(one for name in sorted(extras) if name != "test" for one in extras[name])]
    found = [BOUND.match(one) for one in wanted]
    return sorted({f"{one[1]}=={one[2]}" for one in found if one})


if __name__ == "__main__":
    pyproject = Path(__file__).parents[1] / "pyproject.toml"
    lines = list_lower_bounds(tomllib.loads(pyproject.read_text(encoding="utf-8"))["project"])
    sys.stdout.write("\n".join(lines) + "\n")
