"""Every place having spoken for itself -> SurfaceStack: the method `each`."""

from functools import partial

import numpy as np

from geoves.domain.grids import Grid, Surface, SurfaceStack
from geoves.domain.survey import Survey
from geoves.domain.tops import Interpretation
from geoves.domain.units import Role, Template
from geoves.errors import EngineError
from geoves.surfaces.canvas import Canvas, choose_reach, find_covered, find_ground
from geoves.surfaces.checks import cross_validate, describe_variogram
from geoves.surfaces.closed_forms import bedrock_surfaces, gravel_surfaces, shallow_surfaces
from geoves.surfaces.evidence import read_basal_contact, read_thickness, say_how_few, tie_to_wells
from geoves.surfaces.interpolation import Kriged, Map, assume_everywhere, interpolate, krige_cells
from geoves.surfaces.options import SurfaceOptions


def build_surfaces(
    interpretation: Interpretation,
    survey: Survey,
    template: Template,
    grid: Grid,
    options: SurfaceOptions | None = None,
    *,
    map: Map = map,  # noqa: A002 - the seam is named for what it replaces
) -> SurfaceStack:
    """The surfaces that the template's roles allow, on the region's grid.

    Raises EngineError where fewer than three places know the depth of the basal contact.
    """
    options = options or SurfaceOptions()
    basal = read_basal_contact(interpretation, options)
    if len(basal.values) < 3:
        raise EngineError(
            f"bedrock cannot be mapped: {len(basal.values)} places know the depth of the basal contact "
            f"and {len(basal.bounds.bound)} a bound; at least 3 depths are needed"
        )
    ground, remarks = find_ground(survey, grid, options)
    reach = options.reach or choose_reach(survey, options)
    covered = find_covered(survey, grid, reach) & np.isfinite(ground)
    if not covered.any():
        raise EngineError("no cell lies inside the boundary and within reach of a datum; look at the coordinates")
    canvas = Canvas(grid, covered, ground[covered])
    krige_quantity = partial(interpolate, canvas=canvas, options=options, map=map)

    basal, shared_deviation, tied = tie_to_wells(basal, options)
    remarks += tied
    contact = krige_quantity(basal)
    if shared_deviation:
        # The doubt about the tie does not average out over soundings: a cell has it as far as it rests on them.
        by_curve = np.array([kind == "sounding" for kind in (*basal.kind, *basal.bound_kind)], dtype=float)
        share, _ = krige_cells(contact._replace(values=by_curve), canvas, options, map)
        contact = contact._replace(deviation=np.hypot(contact.deviation, share * shared_deviation))
    kriged = [(basal, contact)]
    gravel: Kriged | None = None
    surfaces: list[Surface] = []
    if template.with_role(Role.DEEP_AQUIFER):
        evidence = read_thickness(interpretation, Role.DEEP_AQUIFER, "Thickness of the deep gravel", options)
        remarks += say_how_few(evidence, options)
        if evidence.size >= options.fewest:
            gravel = krige_quantity(evidence)
            kriged.append((evidence, gravel))
            surfaces += gravel_surfaces(contact, gravel, canvas, options)
        else:
            gravel = assume_everywhere(evidence, contact)
    else:
        remarks.append("the template has no deep aquifer: no surface of its thickness")
    surfaces += bedrock_surfaces(contact, gravel, canvas)

    if template.with_role(Role.SHALLOW_AQUIFER):
        shallow, more, said = shallow_surfaces(interpretation, krige_quantity, canvas, options)
        surfaces += shallow
        kriged += more
        remarks += said
    else:
        remarks.append("the template has no shallow aquifer: no surface of its resistivity")
    return SurfaceStack(
        grid=grid,
        ground=ground,
        covered=covered,
        surfaces={surface.name: surface for surface in surfaces},
        variograms=tuple(describe_variogram(evidence, result) for evidence, result in kriged),
        cross_validations=tuple(cross_validate(evidence, result, options) for evidence, result in kriged),
        reach=reach,
        remarks=tuple(remarks),
    )
