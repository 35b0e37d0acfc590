"""Every place having spoken for itself -> SurfaceStack: the method `each`."""

from collections.abc import Callable
from functools import partial
from typing import NamedTuple

import numpy as np

from geoves.domain.grids import Grid, Surface, SurfaceStack
from geoves.domain.survey import Survey
from geoves.domain.tops import Interpretation
from geoves.domain.units import Role, Template
from geoves.errors import EngineError
from geoves.surfaces.canvas import Canvas, choose_reach, find_covered, find_ground
from geoves.surfaces.checks import calibrate_on_wells, cross_validate, describe_variogram
from geoves.surfaces.closed_forms import bedrock_surfaces, gravel_surfaces, shallow_surfaces
from geoves.surfaces.evidence import (
    Evidence,
    read_basal_contact,
    read_resistivity,
    read_thickness,
    say_how_few,
    tie_to_wells,
)
from geoves.surfaces.interpolation import Kriged, Map, assume_everywhere, interpolate, krige_cells
from geoves.surfaces.options import SurfaceOptions
from geoves.surfaces.realisations import summarise_cells
from geoves.surfaces.stack import assemble_surfaces
from geoves.surfaces.support import map_support


class Found(NamedTuple):
    """What was kriged of a county: quantities on the covered cells, those with evidence in `kriged`; and remarks."""

    contact: Kriged
    gravel: Kriged | None
    gravel_is_mapped: bool
    shallow: Kriged | None
    log_resistivity: Kriged | None
    cover: Kriged | None
    kriged: tuple[tuple[Evidence, Kriged], ...]
    remarks: tuple[str, ...]


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
    found = _krige_county(basal, interpretation, template, canvas, options, map)
    surfaces = [*_closed_surfaces(found, canvas, options), map_support(basal, canvas, reach)]
    overburden, said = _simulate_overburden(found, template, canvas, options, map)
    return SurfaceStack(
        grid=grid,
        ground=ground,
        covered=covered,
        surfaces={surface.name: surface for surface in [*surfaces, *overburden]},
        variograms=tuple(describe_variogram(evidence, result, options) for evidence, result in found.kriged),
        cross_validations=tuple(cross_validate(evidence, result, options) for evidence, result in found.kriged),
        reach=reach,
        remarks=(*remarks, *found.remarks, *said),
    )


def _krige_county(
    basal: Evidence,
    interpretation: Interpretation,
    template: Template,
    canvas: Canvas,
    options: SurfaceOptions,
    map: Map,  # noqa: A002
) -> Found:
    """Every quantity that the template's roles and the places' evidence allow."""
    krige_quantity = partial(interpolate, canvas=canvas, options=options, map=map)
    basal, shared_deviation, tied = tie_to_wells(basal, options)
    remarks = [*tied]
    contact = krige_quantity(basal)
    calibration = calibrate_on_wells(basal, contact, options)
    remarks.append(calibration.words)
    contact = contact._replace(deviation=calibration.factor * contact.deviation)
    if shared_deviation:
        # The doubt about the tie does not average out over soundings: a cell has it as far as it rests on them.
        by_curve = np.array([kind == "sounding" for kind in (*basal.kind, *basal.bound_kind)], dtype=float)
        share, _ = krige_cells(contact._replace(values=by_curve), canvas, options, map)
        contact = contact._replace(deviation=np.hypot(contact.deviation, share * shared_deviation))
    kriged = [(basal, contact)]

    def krige_role(role: Role, title: str) -> tuple[Evidence, Kriged | None]:
        evidence = read_thickness(interpretation, role, title, options)
        remarks.extend(say_how_few(evidence, options))
        return evidence, _krige_enough(evidence, krige_quantity, kriged, options)

    gravel = shallow = cover = log_resistivity = None
    gravel_is_mapped = False
    if template.with_role(Role.DEEP_AQUIFER):
        evidence, gravel = krige_role(Role.DEEP_AQUIFER, "Thickness of the deep gravel")
        gravel_is_mapped = gravel is not None
        gravel = gravel or assume_everywhere(evidence, contact)
    else:
        remarks.append("the template has no deep aquifer: no surface of its thickness")
    if template.with_role(Role.SHALLOW_AQUIFER):
        _, shallow = krige_role(Role.SHALLOW_AQUIFER, "Thickness of the shallow aquifer")
        resistivity = read_resistivity(interpretation)
        if shallow is not None and len(resistivity.values) < options.fewest:
            remarks.append(f"{resistivity.title}: {len(resistivity.values)} data are too few for a surface")
        elif shallow is not None:
            log_resistivity = _krige_enough(resistivity, krige_quantity, kriged, options)
    else:
        remarks.append("the template has no shallow aquifer: no surface of its resistivity")
    if template.with_role(Role.COVER):
        evidence = read_thickness(interpretation, Role.COVER, "Thickness of the cover", options)
        cover = _krige_enough(evidence, krige_quantity, kriged, options)
    return Found(contact, gravel, gravel_is_mapped, shallow, log_resistivity, cover, tuple(kriged), tuple(remarks))


def _krige_enough(
    evidence: Evidence,
    krige_quantity: Callable[[Evidence], Kriged],
    kriged: list[tuple[Evidence, Kriged]],
    options: SurfaceOptions,
) -> Kriged | None:
    """The quantity where its evidence is enough for a surface, noted among `kriged`."""
    if evidence.size < options.fewest:
        return None
    quantity = krige_quantity(evidence)
    kriged.append((evidence, quantity))
    return quantity


def _closed_surfaces(found: Found, canvas: Canvas, options: SurfaceOptions) -> list[Surface]:
    surfaces: list[Surface] = []
    if found.gravel is not None and found.gravel_is_mapped:
        surfaces += gravel_surfaces(found.contact, found.gravel, canvas, options)
    surfaces += bedrock_surfaces(found.contact, found.gravel, canvas)
    if found.shallow is not None:
        surfaces += shallow_surfaces(found.shallow, found.log_resistivity, canvas, options)
    return surfaces


def _simulate_overburden(
    found: Found,
    template: Template,
    canvas: Canvas,
    options: SurfaceOptions,
    map: Map,  # noqa: A002
) -> tuple[list[Surface], list[str]]:
    """Thickness of what lies on the basal contact, from realisations: parts that must fit have no closed form."""
    parts = {Role.COVER: found.cover, Role.SHALLOW_AQUIFER: found.shallow}
    unknown = [role.value for role, part in parts.items() if template.with_role(role) and part is None]
    confining = bool(template.with_role(Role.CONFINING)) and not unknown
    remarks = []
    if template.with_role(Role.CONFINING) and unknown:
        lacking = " and ".join(name.replace("_", " ") for name in unknown)
        remarks.append(f"no surface of the confining unit's thickness: too little is known of the {lacking}")
    kriged = {"basal_depth": found.contact, "cover": found.cover, "shallow": found.shallow}
    known = {name: quantity for name, quantity in kriged.items() if quantity is not None}
    if len(known) == 1 and not confining:
        return [], remarks
    blocks = summarise_cells(known, canvas, options, confining=confining, map=map)
    return list(assemble_surfaces(blocks, canvas).values()), remarks
