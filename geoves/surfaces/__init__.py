"""Interpretation or FieldEnsemble -> SurfaceStack: each place having spoken for itself, or all places together.

By the method `each`, three quantities are kriged with an error for every datum: the log depth of the basal contact (top
of gravel or rock), the thickness of each aquifer as a latent field of which what lies below zero is absence, and the
log resistivity of the shallow aquifer; bounds and absences enter as pseudo-data by expectation propagation. By the
method `together`, the fields of one geology are carried to every cell with all that is known of them. Bedrock is the
basal contact plus the gravel, so that no surface can cross another, and a depth above zero keeps all of them under the
ground.
"""

from geoves.surfaces.build import build_surfaces
from geoves.surfaces.options import SurfaceOptions
from geoves.surfaces.together import build_surfaces_together

__all__ = ["SurfaceOptions", "build_surfaces", "build_surfaces_together"]
