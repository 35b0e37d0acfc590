"""geoves: from electrical soundings, wells and a resistivity template to GIS layers of a buried valley.

The steps are functions: `examine_curves`, `invert`, `interpret`, then `infer_geology` and `build_surfaces_together`, or
`build_surfaces` where every place speaks for itself, and `derive_layers`. `run` does them all for a region folder;
`make_sounding` and `draw_sounding` serve a single sounding in a notebook.
"""

from importlib import import_module, metadata
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from geoves.checking import CurveOptions, examine_curves
    from geoves.curves import make_sounding
    from geoves.delivery.notebook import draw_sounding
    from geoves.domain.fields import Field, FieldEnsemble, JointColumn
    from geoves.domain.survey import Curve, Sounding, Survey
    from geoves.domain.units import Role, Template, Unit
    from geoves.errors import EngineError, FormatError, GeovesError, InputError
    from geoves.geology import GeologyOptions, infer_geology
    from geoves.interpretation import InterpretationOptions, interpret
    from geoves.inversion import InversionOptions, invert
    from geoves.layers import LayerOptions, derive_layers
    from geoves.project.run import run
    from geoves.reading import read_region, read_survey
    from geoves.surfaces import SurfaceOptions, build_surfaces, build_surfaces_together

__version__ = metadata.version("geoves")
__all__ = [
    "Curve",
    "CurveOptions",
    "EngineError",
    "Field",
    "FieldEnsemble",
    "FormatError",
    "GeologyOptions",
    "GeovesError",
    "InputError",
    "InterpretationOptions",
    "InversionOptions",
    "JointColumn",
    "LayerOptions",
    "Role",
    "Sounding",
    "SurfaceOptions",
    "Survey",
    "Template",
    "Unit",
    "__version__",
    "build_surfaces",
    "build_surfaces_together",
    "derive_layers",
    "draw_sounding",
    "examine_curves",
    "infer_geology",
    "interpret",
    "invert",
    "make_sounding",
    "read_region",
    "read_survey",
    "run",
]

# Where each name lives. A name is fetched when it is first asked for, so that the command's help comes at once.
_HOMES = {
    "geoves.checking": ("CurveOptions", "examine_curves"),
    "geoves.curves": ("make_sounding",),
    "geoves.delivery.notebook": ("draw_sounding",),
    "geoves.domain.fields": ("Field", "FieldEnsemble", "JointColumn"),
    "geoves.domain.survey": ("Curve", "Sounding", "Survey"),
    "geoves.domain.units": ("Role", "Template", "Unit"),
    "geoves.errors": ("EngineError", "FormatError", "GeovesError", "InputError"),
    "geoves.geology": ("GeologyOptions", "infer_geology"),
    "geoves.interpretation": ("InterpretationOptions", "interpret"),
    "geoves.inversion": ("InversionOptions", "invert"),
    "geoves.layers": ("LayerOptions", "derive_layers"),
    "geoves.project.run": ("run",),
    "geoves.reading": ("read_region", "read_survey"),
    "geoves.surfaces": ("SurfaceOptions", "build_surfaces", "build_surfaces_together"),
}


def __getattr__(name: str) -> Any:
    for home, names in _HOMES.items():
        if name in names:
            return getattr(import_module(home), name)
    raise AttributeError(f"module 'geoves' has no attribute {name!r}")


def __dir__() -> list[str]:
    return __all__
