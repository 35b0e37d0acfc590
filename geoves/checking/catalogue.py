"""Every check by name: what it looks at, from when on it tells, why physically, and what to do."""

from collections.abc import Mapping
from types import MappingProxyType

from geoves.checking import arithmetic, curve_shape, meter, overlaps, places, spreads, template, wells
from geoves.checking.options import CurveOptions
from geoves.domain.findings import Check
from geoves.domain.survey import FEWEST_READINGS, WIDEST_GAP

_DEFAULTS = CurveOptions()

_READINGS = (
    Check(
        "arithmetic",
        "Apparent resistivity, resistance, and voltage over current, where more than one of them is typed",
        f"They differ by more than {arithmetic.DISAGREEMENT:.0%}; a slip is named where it comes within "
        f"{arithmetic.NEARNESS:.0%}",
        "K follows from AB/2 and MN/2 alone, so that two of the numbers give the third: where they do not, one is "
        "wrong.",
        "Correct the number on the sheet that was misread. The typed apparent resistivity is taken until then.",
    ),
    Check(
        "arithmetic_throughout",
        "The same slip in the arithmetic of most soundings",
        f"In more than {arithmetic.THROUGHOUT:.0%} of the soundings that can be recomputed, and in three or more",
        "A slip at every stake is no accident of the field: a column holds another thing than its heading says.",
        "Correct the column as a whole: halve ab2 or mn2, or state the unit in [input_length_unit].",
    ),
    Check(
        "spacing_convention",
        "Readings at one AB/2 with two MN, over all soundings",
        f"{overlaps.FEWEST_OVERLAPS} or more of them shift as a slip in K makes them, over "
        f"{overlaps.SEASON_LIMIT:g} standard errors",
        "A wrong AB or MN in K changes the reading by another factor for each MN, which the overlaps show although "
        "each curve by itself looks well.",
        "Ask the crew what ab2 and mn2 hold: half the distance of the electrodes belongs there.",
    ),
    Check(
        "repeated_row",
        "Readings of one layout that are typed more than once",
        "All numbers are the same",
        "Noise makes two measurements differ: the same numbers are one measurement, copied.",
        "Delete the copy; it would count twice.",
    ),
    Check(
        "repeats_differ",
        "Readings of one layout that were repeated",
        f"They differ by more than {arithmetic.REPEAT_LIMIT:g} standard deviations of a difference",
        "Contact, leakage or drift changed between them, so that at least one is wrong by more than noise. Repeats "
        "without a typed error get theirs from their scatter.",
        "Set use to 0 for the one that the notes speak against, with the reason.",
    ),
    Check(
        "stuck_current",
        "Currents one after the other",
        f"{meter.FROZEN_CURRENTS} or more spacings with the same current told to three digits or more",
        "Every stake has its own contact resistance: an unregulated current changes with each move. A round current "
        "that the transmitter holds is not meant.",
        "Look whether the display was frozen or the number copied down; measure again.",
    ),
    Check(
        "dead_reading",
        "Voltages and apparent resistivities one after the other",
        f"{meter.FROZEN_READINGS} or more spacings with the same number told to three digits or more",
        "The voltage falls with the square of AB/2: a meter that shows one number at several spacings measures "
        "nothing.",
        "Set use to 0 with the reason, or measure again.",
    ),
    Check(
        "weak_signal",
        "Voltages",
        f"Below {meter.WEAK_VOLTAGE} mV",
        "Self-potential drifts and mains hum of some tenths of a millivolt are ordinary; the reading is then mostly "
        "noise.",
        "Give its error in error_percent; in the field: more current, wetter stakes, a larger MN.",
    ),
    Check(
        "wide_mn",
        "MN/2 against AB/2",
        f"MN/2 is more than {meter.WIDEST_MN} of AB/2, wider than a Wenner array",
        "The potential is then measured close to the current electrodes, where the ground beside the stakes outweighs "
        "the layers below; K changes fast with every centimetre.",
        "Read whether MN stands where MN/2 belongs. If it was laid so, raise error_percent.",
    ),
    Check(
        "few_readings",
        "Used readings of a sounding",
        f"Fewer than {FEWEST_READINGS}",
        "A curve of so few points fits almost any ground: the sounding is refused and gives no depth.",
        "Find the missing readings, or sound again.",
    ),
    Check(
        "no_middle",
        "The used AB/2 of a sounding, in order",
        f"Two neighbours are more than {WIDEST_GAP:g} times apart",
        "Each AB/2 feels a range of depths of about its own size: what lies at the depths of a gap is not seen by any "
        "reading, and both ends of the curve can be joined in many ways. The sounding is refused and gives no depth.",
        "Find the missing readings, or sound again in between.",
    ),
    Check(
        "unused_reading",
        "Readings whose use is 0",
        "Always told, as a note",
        "Nothing is lost: such a reading is kept, drawn hollow and named with its reason, and not fitted.",
        "Nothing, where the reason is right.",
    ),
)  # fmt: skip

_CURVES = (
    Check(
        "jump",
        "Each reading against what all others of its curve let expect over flat layers",
        f"{_DEFAULTS.jump_limit:g} standard deviations off or more",
        "Over flat layers neighbouring readings hang together; a single one off the rest is a matter of the stakes "
        "or the sheet. One current electrode left behind makes it too high, one too far out too low, by a factor "
        "that is told.",
        "Compare the field notes. Correct the spacing where the stake is known, or set use to 0 with the reason.",
    ),
    Check(
        "cusp",
        "Two neighbouring readings against what all others let expect",
        f"Off together with a chi-square over {_DEFAULTS.jump_limit**2 + curve_shape.CUSP_COST:g}",
        "The potential at the surface is a smoothed image of the layers: no flat layers make a bend that sharp. A "
        "lateral contact crossed by an electrode does, as do a pipe or a fence.",
        "Look for what the electrodes crossed there; set use to 0 with the reason where it is known.",
    ),
    Check(
        "rough_curve",
        "The scatter of a whole curve about flat layers",
        f"{_DEFAULTS.rough_limit:g} times what the readings' errors allow, or {curve_shape.FEWEST_ASIDE} readings and "
        f"{curve_shape.SHARE_ASIDE:.0%} of them off",
        "A sawtooth comes from poor contact, leakage along the cable, or ground that changes along the spread.",
        "Raise error_percent for this sounding, or sound again with the spread turned.",
    ),
    Check(
        "steep_rise",
        "The rise of a segment on logarithmic axes",
        f"More than flat layers allow, by {_DEFAULTS.slope_limit:g} standard deviations of the noise",
        "Over an insulator all current stays above it and apparent resistivity goes with AB/2: 45 degrees. Nothing "
        "flat rises faster (a wide MN a little, which is counted in). Steeper means a lateral change, leakage, or a "
        "slip.",
        "Check spacings and units where the rise begins; turn the spread by 90 degrees and sound again.",
    ),
    Check(
        "steep_fall",
        "The fall of a segment on logarithmic axes",
        f"Steeper than any of 120 000 drawn columns that came down as far, by {_DEFAULTS.slope_limit:g} standard "
        "deviations of the noise",
        "A fall has no limit as sharp as 45 degrees, but a curve falls fast only after it has come down far, as over a "
        "good conductor. A fast fall at once is a lateral change, a shunt through a pipe, or a slip.",
        "Check spacings and units where the fall begins; look for metal in the ground.",
    ),
    Check(
        "overlap_shift",
        "Readings at one AB/2 with the old and the new MN",
        f"New over old, less the part that flat layers make by the finite MN, is outside "
        f"{overlaps.ORDINARY_SHIFT[0]} to {overlaps.ORDINARY_SHIFT[1]}",
        "Ground beside the potential stakes shifts a whole segment by a factor. More than usual is a wrong MN in K, "
        "a bad contact, or a stake in other ground.",
        "Check mn2 of the segment. The factor is fitted with the layers, so that a true shift does no harm.",
    ),
    Check(
        "overlap_uneven",
        "Two or more AB/2 read with both MN",
        f"Their ratios differ by more than {overlaps.UNEVEN_LIMIT:g} standard deviations",
        "Ground beside the potential stakes shifts all readings of a segment alike: unequal shifts mean that one of "
        "the readings is wrong.",
        "Look at the readings of the overlap one by one.",
    ),
    Check(
        "overlap_missing",
        "Changes of MN",
        "No AB/2 was read with both",
        "The factor between the segments is then not measured: a true step of the curve and a shift look the same.",
        "Read one or two spacings with both MN at the next sounding.",
    ),
)  # fmt: skip

_PLACES = (
    Check(
        "duplicate_place",
        "Places of one kind",
        f"Nearer than {places.SAME_PLACE:g} m to another; permits only where depth, use and all other columns agree "
        f"too",
        "Two places in one spot are counted twice and make a surface too sure of itself.",
        "Give a repeat the same name, or correct the coordinates.",
    ),
    Check(
        "duplicate_curve",
        "Whole curves",
        f"All readings, {places.FEWEST_COPIED} or more, are those of another sounding",
        "Noise alone makes two measurements differ in the last digits: one was copied.",
        "Find the sounding's own sheet.",
    ),
    Check(
        "far_place",
        "The distance of each sounding and well to the nearest other",
        f"More than {places.FAR_TIMES:g} times what is usual, and {places.FAR_KILOMETRES:g} km",
        "A digit, a swap or the wrong unit in a coordinate moves a place by kilometres; the surfaces follow it.",
        "Correct x and y; the slip that would bring the place among the others is told.",
    ),
    Check(
        "outside_crs",
        "Places against the area for which the CRS is made",
        "More than a degree outside of it",
        "Beyond its area a projection stretches lengths and angles; mostly x and y are swapped or the CRS is another "
        "one.",
        "Correct x and y, or the region's crs.",
    ),
    Check(
        "two_coordinates",
        "x, y and lon, lat of one row, where both are typed",
        "More than 0.5 m apart; told as the other foot where the shift is 2 parts in a million",
        "Two sets of coordinates check each other: a foot of the wrong kind moves a place at state-plane size by a "
        "metre, a wrong zone or datum by hundreds.",
        "Find out which of the two is right. x and y are taken.",
    ),
    Check(
        "two_feet",
        "The units of the CRS, of length_unit and of [input_length_unit]",
        "Both the international and the US survey foot are among them",
        "The two differ by 2 parts in a million: nothing in a depth, 1.2 m in a coordinate of two million feet.",
        "Say of each table which foot it has; take one of them throughout.",
    ),
    Check(
        "ground_elevation",
        "Typed elevations of soundings and wells against the ground raster",
        "More than 10 m apart",
        "Depths hang from this elevation: an error in it moves the bedrock by as much. Elevations off contours are "
        "metres wrong; tens of metres are a misplaced point or feet for metres.",
        "Check place and elevation; leave the elevation out to take the raster's.",
    ),
    Check(
        "ground_offset",
        "Typed elevations of one table against the ground raster, all together",
        "The median differs by more than 2 m and by five of its standard errors, of eight places or more",
        "One shift for all is no error of reading: the two count from different zeros, such as an ellipsoid and a "
        "geoid, or NGVD 29 and NAVD 88.",
        "Find out the height datum of both; declare it in vertical_datum.",
    ),
    Check(
        "outside_boundary",
        "Soundings, wells and permits against the boundary",
        "Outside of it",
        "Nothing is mapped there, so that a permit gets no answer and a datum only helps at the edge.",
        "Check the coordinates; otherwise nothing.",
    ),
    Check(
        "across_valley",
        "The land and the known rock along each spread with an azimuth",
        f"The land rises (or falls) by more than {spreads.STEEPEST_LAND:.0%} to both sides within AB/2, or wells and "
        f"picks along AB have rock dipping more than {spreads.STEEPEST_ROCK:.0%}",
        "A curve is read as if layers went on flat for AB: across a valley narrower than that the current runs in "
        "flanks and floor at once, and the depth comes out between both.",
        "Lay the spread along the valley; until then take the depth as doubtful.",
    ),
    Check(
        "no_vertical_datum",
        "region.toml",
        "No vertical_datum is declared",
        "Nobody can say from which zero the elevations count; two data sets of different zeros differ by a metre, or "
        "by thirty where one is ellipsoidal.",
        'Declare it, such as vertical_datum = "EPSG:5703" for NAVD 88. Every product repeats the doubt.',
    ),
    Check(
        "missing_grid",
        "Conversions between CRSs that the inputs need",
        "The grid of a conversion that is better by more than a metre is not installed: a fault",
        "Without the grid of a datum shift places land metres to hundreds of metres off, without a sign of it.",
        "Install the grid that is named (projsync --file NAME), or convert the file with a GIS that has it.",
    ),
)  # fmt: skip

_WELLS_AND_TEMPLATE = (
    Check(
        "log_gap",
        "Intervals of a log, in order",
        "One begins below the end of the one above",
        "What lies in the gap is not known and is not guessed.",
        "Complete the log, or let the gap stand as not known.",
    ),
    Check(
        "log_below_depth",
        "Intervals of a log against the well's total depth",
        "One ends below it",
        "A driller cannot describe what was not drilled: one of the depths, or its unit, is wrong.",
        "Correct the depths or [input_length_unit].",
    ),
    Check(
        "log_short",
        "Intervals of a log against the well's total depth",
        f"The log ends above {wells.TOLD_SHARE:.0%} of it",
        "The lowest part decides about rock: where it is untold the well must not count as having missed rock.",
        "Complete the log; a share of 0.30 is metres for feet.",
    ),
    Check(
        "well_against_sounding",
        "The nearest sounding within "
        f"{wells.NEAR_WELL:g} m (and the well's location accuracy) against the log",
        f"Half of its readings are more than {wells.DISAGREE:g} standard deviations off the curves of the log, drawn "
        f"through "
        "the template",
        "A log and the template's resistivities give a curve: where the sounding beside it shows another, the log, the "
        "template, the place of one of them, or the spacings are wrong.",
        "Look at the pair; a wrong unit of depths in the log is the usual cause.",
    ),
    Check(
        "template_confusion",
        "Each two units of the template",
        f"Resistivity alone decides wrongly with a probability of {template.CONFUSED} or more, both as likely "
        f"beforehand "
        "(0.5 is a coin)",
        "Where ranges overlap no curve can tell the units apart: order, depth and wells must.",
        "Nothing is wrong if the ground is so. Give depth_to_top, wells and picks that separate them.",
    ),
    Check(
        "template_gap",
        "Resistivities between the units' ranges",
        f"No range covers a stretch whose ends are more than {template.GAP:g} times apart",
        "A layer measured there fits no unit well and goes to a neighbour by its tail alone.",
        "Widen a range, or add the unit that is missing.",
    ),
)  # fmt: skip

CHECKS: Mapping[str, Check] = MappingProxyType(
    {check.name: check for check in (*_READINGS, *_CURVES, *_PLACES, *_WELLS_AND_TEMPLATE)}
)
