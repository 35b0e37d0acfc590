"""Interpretation -> SurfaceStack: the kriged surfaces of one county, each place having spoken for itself.

Three quantities are kriged by ordinary kriging with an error for every datum: the log depth of the basal contact (top
of gravel or rock), the thickness of each aquifer as a latent field of which what lies below zero is absence, and the
log resistivity of the shallow aquifer. Bounds and absences enter as pseudo-data by expectation propagation. Bedrock is
the basal contact plus the gravel, so that no surface can cross another, and a depth above zero keeps all of them
under the ground.
"""

from geoves.surfaces.build import build_surfaces
from geoves.surfaces.options import SurfaceOptions

__all__ = ["SurfaceOptions", "build_surfaces"]
