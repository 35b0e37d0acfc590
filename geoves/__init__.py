"""geoves: from vertical electrical soundings, wells and a resistivity template to GIS layers of a buried valley."""

from importlib.metadata import version

__version__ = version("geoves")
__all__ = ["__version__"]
