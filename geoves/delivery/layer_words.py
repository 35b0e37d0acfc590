"""What each layer of the GeoPackage and each of its columns is called and means."""

from collections.abc import Mapping
from types import MappingProxyType

from geoves.delivery.dictionary import Column, Kind, LayerWords

_BEDROCK_STATUS = MappingProxyType(
    {
        "seen": "base seen: the curve shows where basal gravel or rock begins, not which of the two",
        "not_distinct": "base not distinct: its resistivity is too like that of what lies on it",
        "deeper_than": "base deeper than the curve reached: the depth is a lower bound",
    }
)
_TOP_STATUS = MappingProxyType(
    {
        "at": "the top lies at this depth",
        "below": "the top is deeper than this depth",
        "absent": "the unit is not there",
    }
)
_PLACE_KIND = MappingProxyType(
    {"sounding": "read from a curve", "well": "read from a driller's log", "pick": "decided by the interpreter"}
)
_ARRAY = MappingProxyType(
    {"schlumberger": "Schlumberger array", "wenner": "Wenner array, as AB/2 = 1.5 a and MN/2 = 0.5 a"}
)
_LIKELIHOOD = MappingProxyType(
    {
        "likely": "probability of deep gravel of 0.66 or more",
        "possible": "probability of deep gravel of 0.33 to 0.66",
        "not_shown": "probability of deep gravel below 0.33: the data do not show it, which is no proof of its absence",
    }
)
_ANSWER = MappingProxyType(
    {
        "likely": "probability of 0.66 or more, all over the circle of location",
        "unlikely": "probability of 0.34 or less, all over the circle of location",
        "undetermined": "the odds are near even, or the circle straddles: yes in a part of it, no in another",
    }
)
_SECTION_KIND = MappingProxyType(
    {"named": "asked for in region.toml", "along": "along the valley's axis", "across": "across the valley"}
)
_SEVERITY = MappingProxyType(
    {
        "fault": "impossible: such a run stops before it delivers",
        "doubt": "unlikely: flagged, and the run went on",
        "note": "nothing suspicious, but good to know",
    }
)
_JOINT_STATE = MappingProxyType(
    {
        "heard": "heard, and fitted as well as its errors ask",
        "set_aside": "set aside: it contradicts its neighbours and the template, and what stands here rests on them",
        "poor_fit": "heard, but the one geology fits its curve worse than its errors allow",
    }
)
_LINE = Column("line", "Line", "Number of the line of valley_axis.", "count")
_ORDER = Column("order", "Order", "1 for a main valley, 2 for its tributaries, and so on.", "count")


def _banded(name: str, title: str, description: str) -> tuple[Column, ...]:
    """A length with its 5 % and 95 % quantiles."""
    return (
        Column(name, title, description, "length"),
        Column(
            f"{name}_p05", f"{title}, 5 % quantile", f"{description} One chance in twenty that it is less.", "length"
        ),
        Column(
            f"{name}_p95", f"{title}, 95 % quantile", f"{description} One chance in twenty that it is more.", "length"
        ),
    )


def _quantiles(name: str, title: str, kind: Kind) -> tuple[Column, ...]:
    """The 5 % and 95 % quantiles of a property of a layer."""
    ends = (("p05", "5 %"), ("p95", "95 %"))
    return tuple(
        Column(f"{name}_{end}", f"{title}, {share} quantile", "Over models that fit.", kind) for end, share in ends
    )


def _probability(name: str, title: str, description: str) -> Column:
    return Column(name, title, description, "fraction", span=(0.0, 1.0))


# What one geology says of a sounding or a well, by the method together; empty by the method each.
_TOGETHER = (
    *_banded(
        "together_basal_depth",
        "Basal contact depth, together",
        "Depth at which basal gravel or rock begins by the one geology of all places.",
    ),
    *_banded(
        "together_bedrock_depth",
        "Bedrock depth, together",
        "Depth to bedrock by the one geology of all places.",
    ),
    _probability(
        "together_gravel_probability",
        "Probability of basal gravel, together",
        "Probability that at least 1 m of the deep aquifer lies on the rock, by the one geology of all places.",
    ),
    *_banded(
        "others_basal_depth",
        "Basal contact depth by all others",
        "Depth at which basal gravel or rock begins by all other places and the template, this place's own "
        "curve, log and picks taken out.",
    ),
    _probability(
        "others_gravel_probability",
        "Probability of basal gravel by all others",
        "The same probability by all other places and the template, this place's own evidence taken out.",
    ),
    Column(
        "together_shift",
        "Shift by its own evidence",
        "How far this place's own evidence moved the basal contact from what all others say, in their deviations.",
        "ratio",
    ),
    Column(
        "moved_by_picks",
        "Moved by the picks",
        "How far the interpreter's picks moved the basal contact here, in deviations before they were heard.",
        "ratio",
    ),
    Column("together_state", "State in the one geology", "Whether the place was heard.", codes=_JOINT_STATE),
)
_TOGETHER_MISFIT = Column(
    "together_misfit",
    "Misfit of the one geology",
    "Root mean square of the curve's residuals over their errors under the one geology; about 1 is as it should be.",
    "ratio",
)
_FLAT_LAYER_BIAS = Column(
    "flat_layer_bias",
    "Misreading by flat layers",
    "How far flat layers by themselves would misread the depth of the basal contact here, resistivities known, as a "
    "share of it: below 0 too shallow, above 0 too deep. What the method together says minds it already.",
    "ratio",
)

_SOUNDING = Column("sounding", "Sounding", "Name of the sounding.")
_WELL = Column("well", "Well", "Name of the well.")
_UNIT = Column("unit", "Unit", "Code of the unit in the resistivity template.")
_GROUND = Column("ground_elevation", "Ground elevation", "Elevation of the land surface at the place.", "length")
_RADIUS = Column(
    "location_accuracy",
    "Location accuracy",
    "Radius of the circle in which the place lies; empty: not stated.",
    "length",
)

LAYERS: Mapping[str, LayerWords] = MappingProxyType(
    {
        words.name: words
        for words in (
            LayerWords(
                "soundings",
                "Soundings",
                "Vertical electrical soundings with what each curve says by itself, and beside it what one geology of "
                "all places says there (together_), and what it would say without this place (others_).",
                "Point",
                (
                    _SOUNDING,
                    Column("rms_percent", "Misfit", "Root mean square misfit of the used readings.", "percent"),
                    Column("noise_percent", "Noise", "Relative error of a reading, by the residuals.", "percent"),
                    Column("n_layers", "Layers", "Number of layers that the criterion chose.", "count"),
                    Column(
                        "bedrock_status",
                        "Base (gravel or rock)",
                        "What the curve says of the base.",
                        codes=_BEDROCK_STATUS,
                    ),
                    Column("bedrock_depth", "Bedrock depth", "Depth to bedrock, or its lower bound.", "length"),
                    Column("bedrock_depth_error", "Bedrock depth error", "Standard error of that depth.", "length"),
                    *_banded("basal_depth", "Basal contact depth", "Depth at which basal gravel or rock begins."),
                    Column(
                        "gravel_probability",
                        "Probability of basal gravel",
                        "Probability that at least 1 m of the deep aquifer lies on the rock, by this curve alone.",
                        "fraction",
                        span=(0.0, 1.0),
                    ),
                    Column(
                        "gravel_limit",
                        "Gravel that could hide",
                        "As much of the deep aquifer could lie on the rock without this curve showing it.",
                        "length",
                    ),
                    Column(
                        "base_contrast",
                        "Contrast at the base",
                        "Resistivity of rock over that of what lies on it; near 1 no curve tells them apart.",
                        "ratio",
                    ),
                    Column(
                        "conditioned_on",
                        "Conditioned on",
                        "The well beside it whose log conditions the depths and units told here; the tops are not.",
                    ),
                    Column(
                        "water_level",
                        "Water level",
                        "Depth to the water table, carried from wells; empty where none shows it.",
                        "length",
                    ),
                    Column("water_level_error", "Water level error", "Standard error of that depth.", "length"),
                    *_TOGETHER,
                    _TOGETHER_MISFIT,
                    _FLAT_LAYER_BIAS,
                    _GROUND,
                    Column(
                        "investigated_depth",
                        "Depth of the last noticeable change",
                        "Halving or doubling the resistivity of all that lies below it would go unnoticed; no depth to "
                        "which rock was investigated.",
                        "length",
                    ),
                    Column("largest_ab2", "Largest AB/2", "Largest half spacing of the current electrodes.", "length"),
                    Column("n_readings", "Readings", "Number of readings that were used.", "count"),
                    Column(
                        "n_set_aside",
                        "Readings set aside",
                        "Number of readings not used, or set aside by the fit.",
                        "count",
                    ),
                    Column("array", "Array", "Electrode array.", codes=_ARRAY),
                    Column("azimuth", "Azimuth", "Direction of the spread, clockwise from north.", "angle"),
                    Column("date", "Date", "Date as typed."),
                    Column("note", "Note", "Note as typed."),
                    Column("segment_factors", "Segment factors", "Factor on each MN segment, the first being 1."),
                    Column("sentence", "In words", "What is resolved, what could hide, how rock stands out."),
                    Column("trade_offs", "What trades off", "Combinations that are known better than their parts."),
                    Column("remarks", "Remarks", "What a person should know of this curve."),
                    Column("interpreter", "Interpreter", "Who decided, where a pick outranks the curve."),
                ),
            ),
            LayerWords(
                "model_layers",
                "Layers of the sounding models",
                "A row a layer of each sounding, at the sounding's place.",
                "Point",
                (
                    _SOUNDING,
                    Column("layer", "Layer", "Number of the layer, 1 at the top.", "count"),
                    Column("top_depth", "Depth of top", "Depth to the layer's top.", "length"),
                    Column("bottom_depth", "Depth of bottom", "Depth to its bottom; empty for the last.", "length"),
                    Column("top_elevation", "Elevation of top", "Elevation of the layer's top.", "length"),
                    Column("resistivity", "Resistivity", "Resistivity of the layer.", "resistivity"),
                    *_quantiles("resistivity", "Resistivity", "resistivity"),
                    Column("thickness", "Thickness", "Thickness of the layer; empty for the last.", "length"),
                    *_quantiles("thickness", "Thickness", "length"),
                    *_quantiles("top_depth", "Depth of top", "length"),
                    Column(
                        "conductance",
                        "Longitudinal conductance S",
                        "Thickness over resistivity, lengths in metres; empty for the last.",
                        "layer_conductance",
                    ),
                    *_quantiles("conductance", "Longitudinal conductance S", "layer_conductance"),
                    Column(
                        "transverse_resistance",
                        "Transverse resistance T",
                        "Thickness times resistivity, lengths in metres; empty for the last.",
                        "layer_resistance",
                    ),
                    *_quantiles("transverse_resistance", "Transverse resistance T", "layer_resistance"),
                    _UNIT,
                    Column(
                        "unit_probability", "Probability of unit", "Of that code here.", "fraction", span=(0.0, 1.0)
                    ),
                ),
            ),
            LayerWords(
                "tops",
                "Tops",
                "Where a unit begins under a place, or the bound that is known: what each place says by itself. By "
                "the method each these rows are what was kriged; by the method together those of wells and picks are "
                "heard as they stand, and of a sounding its readings are heard in place of its row.",
                "Point",
                (
                    Column("place", "Place", "Name of the sounding or the well."),
                    Column("kind", "Kind", "Which kind of evidence.", codes=_PLACE_KIND),
                    _UNIT,
                    Column(
                        "contact",
                        "Contact",
                        "Basal: the top of gravel or rock, which a curve can see; bedrock; or a unit's role.",
                    ),
                    Column("status", "Status", "How the depth is meant.", codes=_TOP_STATUS),
                    Column("depth", "Depth", "Depth of the top, or the bound.", "length"),
                    Column("elevation", "Elevation", "Elevation of the top, or the bound.", "length"),
                    Column("standard_error", "Standard error", "Standard error of that depth.", "length"),
                    Column("source", "Source", "Evidence, and who decided."),
                ),
            ),
            LayerWords(
                "readings",
                "Field readings",
                "A row a reading of each sounding, at the sounding's place: nothing of the field sheet is dropped.",
                "Point",
                (
                    _SOUNDING,
                    Column("ab2", "AB/2", "Half the distance of the current electrodes.", "length"),
                    Column("mn2", "MN/2", "Half the distance of the potential electrodes.", "length"),
                    Column("apparent_resistivity", "Apparent resistivity", "As measured.", "resistivity"),
                    Column("error_percent", "Error", "One standard deviation, where one was typed.", "percent"),
                    Column("segment", "Segment", "1 for the first MN, 2 after its first change, and so on.", "count"),
                    Column("voltage_mv", "Voltage", "As typed, where it was.", "voltage"),
                    Column("current_ma", "Current", "As typed, where it was.", "current"),
                    Column("resistance_ohm", "Resistance", "As typed, where it was.", "resistance"),
                    Column("used", "Used", "Whether the reading was fitted.", "flag"),
                    Column("reason", "Reason", "Why it was not."),
                    Column("doubt", "Doubt", "Checks that doubt the reading; it was fitted all the same, robustly."),
                    Column("predicted", "Predicted", "Apparent resistivity of the model, shifted.", "resistivity"),
                    Column(
                        "trust",
                        "Trust",
                        "1 where the robust fit took the reading in full, near 0 where it set it aside.",
                        "fraction",
                        span=(0.0, 1.0),
                    ),
                ),
            ),
            LayerWords(
                "picks",
                "The interpreter's picks",
                "A row a decision, at the sounding or the well.",
                "Point",
                (
                    Column("place", "Place", "Name of the sounding or the well."),
                    _UNIT,
                    Column("status", "Status", "How the depth is meant.", codes=_TOP_STATUS),
                    Column("depth", "Depth", "Depth of the top, or the bound.", "length"),
                    Column("depth_error", "Depth error", "One standard deviation, where one was typed.", "length"),
                    Column("interpreter", "Interpreter", "Who decided."),
                    Column("reason", "Reason", "Why."),
                ),
            ),
            LayerWords(
                "wells",
                "Control wells",
                "Wells with a driller's log.",
                "Point",
                (
                    _WELL,
                    _GROUND,
                    Column("total_depth", "Total depth", "Depth of the hole.", "length"),
                    Column("reached_bedrock", "Reached bedrock", "Whether the log ends in bedrock.", "flag"),
                    Column("water_level", "Water level", "Depth to water.", "length"),
                    Column("specific_conductance", "Specific conductance", "Of the water, at 25 °C.", "conductance"),
                    _RADIUS,
                    *_TOGETHER,
                ),
            ),
            LayerWords(
                "well_intervals",
                "Intervals of the driller's logs",
                "A row an interval of each well, at the well's place, with the unit that its words were taken to mean.",
                "Point",
                (
                    _WELL,
                    Column("top", "Depth of top", "Depth to the interval's top.", "length"),
                    Column("bottom", "Depth of bottom", "Depth to the interval's bottom.", "length"),
                    Column("description", "Description", "The driller's words, as typed."),
                    _UNIT,
                    Column("term", "Controlled term", "Name of that unit in the resistivity template."),
                    Column(
                        "confidence", "Confidence", "1 for a typed code or an exact term.", "fraction", span=(0.0, 1.0)
                    ),
                ),
            ),
            LayerWords(
                "bedrock_contours",
                "Contours of bedrock elevation",
                "Lines of equal estimated bedrock elevation.",
                "LineString",
                (
                    Column("elevation", "Elevation", "Bedrock elevation along the line.", "length"),
                    Column("major", "Index contour", "Every fifth contour.", "flag"),
                ),
            ),
            LayerWords(
                "thickness_contours",
                "Contours of deep gravel thickness",
                "Lines of equal estimated thickness of the deep gravel.",
                "LineString",
                (
                    Column("thickness", "Thickness", "Thickness of the deep gravel along the line.", "length"),
                    Column("major", "Index contour", "Every fifth contour.", "flag"),
                ),
            ),
            LayerWords(
                "valley_axis",
                "Axis of the buried valley",
                "A line along the floor of the buried valley, drawn downstream; tributaries are lines of their own.",
                "LineString",
                (
                    _LINE,
                    _ORDER,
                    Column("joins", "Joins", "Line at which a tributary ends; 0 for a main valley.", "count"),
                    Column("length", "Length", "Length of the line on the ground.", "length"),
                    Column("lowest_elevation", "Lowest bedrock", "Lowest bedrock elevation along the line.", "length"),
                    Column("highest_elevation", "Highest bedrock", "Highest bedrock elevation along it.", "length"),
                    Column("mean_slope", "Mean slope", "Fall of the floor in the line's direction.", "slope"),
                ),
            ),
            LayerWords(
                "valley_stations",
                "Stations along the axis",
                "Points at round distances along each line of valley_axis, from its upper end, and at its lower end.",
                "Point",
                (
                    _LINE,
                    _ORDER,
                    Column("distance", "Distance", "Along the line from its upper end.", "length"),
                    Column("elevation", "Bedrock elevation", "Elevation of the valley's floor here.", "length"),
                    Column("standard_error", "Standard error", "Standard error of that elevation.", "length"),
                    Column("depth", "Depth", "Depth of the floor below the ground.", "length"),
                    Column(
                        "slope",
                        "Slope",
                        "Fall of the floor between the neighbouring stations; below 0 where it rises downstream.",
                        "slope",
                    ),
                ),
            ),
            LayerWords(
                "gravel_extent",
                "Extent of the deep gravel",
                "Where deep gravel is likely (probability 0.66 or more), possible (0.33 to 0.66) or not shown (below).",
                "Polygon",
                (
                    Column("likelihood", "Likelihood", "How sure the gravel is.", codes=_LIKELIHOOD),
                    Column("least_probability", "Least probability", "In this class.", "fraction", span=(0.0, 1.0)),
                    Column("area", "Area", "Area of the polygon.", "area"),
                ),
            ),
            LayerWords(
                "permits",
                "Well permits",
                "Each permit with what the surfaces say at its place, and how sure; averaged over its circle where its "
                "location is uncertain.",
                "Point",
                (
                    Column("permit", "Permit", "Name of the permit."),
                    Column("use", "Use", "Use of the water, as typed."),
                    Column("requested_depth", "Requested depth", "Depth that was asked for.", "length"),
                    Column("location_method", "Location method", "How the place was found, as typed."),
                    _RADIUS,
                    Column("covered", "Covered", "Whether the surfaces reach this place.", "flag"),
                    Column("covered_share", "Covered share", "Of the circle of location.", "fraction", span=(0.0, 1.0)),
                    *_banded("bedrock_depth", "Bedrock depth", "Depth to bedrock."),
                    *_banded("gravel_top_depth", "Depth to the deep gravel", "Depth to its top, if it is there."),
                    *_banded("gravel_thickness", "Thickness of the deep gravel", "Absence counts as 0."),
                    Column(
                        "gravel_probability",
                        "Probability of deep gravel",
                        "Probability that at least 1 m of the deep aquifer is there.",
                        "fraction",
                        span=(0.0, 1.0),
                    ),
                    Column("over_gravel", "Over deep gravel", "Whether deep gravel is there.", codes=_ANSWER),
                    Column(
                        "reach_probability",
                        "Probability of reaching it",
                        "Probability that deep gravel is there and begins above the requested depth.",
                        "fraction",
                        span=(0.0, 1.0),
                    ),
                    Column(
                        "reaches_gravel",
                        "Reaches deep gravel",
                        "Whether a well of the requested depth meets deep gravel; empty where none was asked for.",
                        codes=_ANSWER,
                    ),
                ),
            ),
            LayerWords(
                "sections",
                "Lines of the cross-sections",
                "Where the report's sections run, each in the direction in which it is drawn.",
                "LineString",
                (
                    Column("section", "Section", "Its title in the report."),
                    Column("kind", "Kind", "Why it is there.", codes=_SECTION_KIND),
                    Column("length", "Length", "Length of the line on the ground.", "length"),
                ),
            ),
            LayerWords(
                "doubts",
                "Doubts about the inputs",
                "What the checks flagged, at its place; without geometry where it belongs to no place.",
                "Point",
                (
                    Column("severity", "Severity", "How grave it is.", codes=_SEVERITY),
                    Column("place", "Place", "Name of the sounding, the well or the permit, where there is one."),
                    Column("file", "File", "The input in which it stands."),
                    Column("row", "Row", "Row of that table as a spreadsheet counts; 0 where none applies.", "count"),
                    Column("column", "Column", "Column of that table."),
                    Column("value", "Value", "What stands there."),
                    Column("expected", "Expected", "What is unlikely about it, and what was expected."),
                    Column("check", "Check", "Name of the check that found it, where it has one."),
                ),
            ),
        )
    }
)
