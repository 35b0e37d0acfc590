// The predicted column at a place: from the ground down, to scale, contacts as soft as their 90 % bands are wide.

const Z90 = 1.6449;  // half the 90 % band in standard deviations of a normal
const colourOf = (role) => described.units.find((unit) => unit.role === role)?.colour || "#888888";
const nameOf = (role, otherwise) => described.units.find((unit) => unit.role === role)?.name || otherwise;

// Chance that a contact lies above a depth: a normal of either side's width joined at the estimate.
function chanceAbove(depth, contact) {
  const side = depth < contact.estimate ? contact.estimate - contact.p05 : contact.p95 - contact.estimate;
  const z = (depth - contact.estimate) / Math.max(side / Z90, 1e-6);
  return 1 / (1 + Math.exp(-1.5976 * z - 0.070566 * z ** 3));  // the logistic form of the normal, Page 1977
}

function columnAt(easting, northing) {
  const cell = cellAt(easting, northing);
  const rock = valueAt("bedrock_depth", cell);
  if (!rock) return null;
  if (!known(rock.p05)) Object.assign(rock, { p05: rock.estimate, p95: rock.estimate });
  return {
    cell, rock,
    gravel: valueAt("deep_gravel_thickness", cell),
    gravelChance: valueAt("deep_gravel_probability", cell)?.estimate ?? 0,
    beds: bedsAt(cell),
    shallow: valueAt("shallow_aquifer_resistivity", cell),
    shallowChance: valueAt("shallow_aquifer_probability", cell)?.estimate,
    ground: described.ground[cell],
  };
}

// The beds above gravel and rock from the top down, where surfaces tell them apart; null where none does.
const BEDS = [["cover", "cover_thickness"], ["shallow_aquifer", "shallow_aquifer_thickness"],
  ["confining", "confining_unit_thickness"]];

function bedsAt(cell) {
  const beds = BEDS.map(([role, surface]) => ({ role, thickness: valueAt(surface, cell) }));
  return beds.some(({ thickness }) => thickness) ? beds.filter(({ thickness }) => thickness) : null;
}

// Bases of the beds, the last of which ends where gravel or rock begins; bands add as those of independent lengths do.
function bedBases(column) {
  let estimate = 0, low = 0, high = 0;
  return column.beds.slice(0, -1).map(({ thickness }) => {
    estimate += thickness.estimate;
    if (known(thickness.p05)) {
      low = Math.hypot(low, thickness.estimate - thickness.p05);
      high = Math.hypot(high, thickness.p95 - thickness.estimate);
    }
    return { estimate, p05: estimate - low, p95: estimate + high };
  });
}

function mixed(colours, shares) {
  const total = [0, 0, 0];
  colours.forEach((colour, i) => [1, 3, 5].forEach((at, channel) => {
    total[channel] += shares[i] * parseInt(colour.slice(at, at + 2), 16);
  }));
  return `rgb(${total.map(Math.round)})`;
}

// Thickness to draw where gravel is present: its mean counts absence as nothing.
const drawnThickness = (column) => column.gravel && column.gravelChance >= 0.05
  ? column.gravel.estimate / Math.max(column.gravelChance, 0.3) : 0;

function columnShares(column, depth) {
  const rock = chanceAbove(depth, column.rock);
  const thick = drawnThickness(column);
  const shift = { estimate: column.rock.estimate - thick, p05: column.rock.p05 - thick, p95: column.rock.p95 - thick };
  const gravel = thick > 0 ? Math.max(0, chanceAbove(depth, shift) - rock) * column.gravelChance : 0;
  const above = Math.max(0, 1 - rock - gravel);
  return [...splitAbove(column, depth).map((share) => share * above), gravel, rock];
}

// How what lies above gravel and rock divides among the beds at a depth; one share where they are not told apart.
function splitAbove(column, depth) {
  if (!column.beds) return [1];
  const below = bedBases(column).map((base) => chanceAbove(depth, base));
  const shares = [1, ...below].map((share, i) => Math.max(0, share - (below[i] ?? 0)));
  const total = shares.reduce((sum, share) => sum + share, 0) || 1;
  return shares.map((share) => share / total);
}

const ABOVE = "#e9e0bd";
const coloursOf = (column) => [...(column.beds ? column.beds.map(({ role }) => colourOf(role)) : [ABOVE]),
  colourOf("deep_aquifer"), colourOf("bedrock")];

function drawStrip(column) {
  const deepest = Math.max(column.rock.p95 * 1.12, column.rock.estimate * 1.2, 5);
  const top = 20, height = 320, x = 44, width = 84;
  const y = (depth) => top + depth / deepest * height;
  const figure = draw("svg", { class: "figure strip", viewBox: "0 0 350 366", width: 350, height: 366, role: "img" });
  figure.append(draw("title", {}, "Predicted column, drawn to scale from the ground down"));
  const colours = coloursOf(column);
  const stops = Array.from({ length: 81 }, (_, i) => draw("stop",
    { offset: i / 80, "stop-color": mixed(colours, columnShares(column, deepest * i / 80)) }));
  figure.append(draw("defs", {}, draw("linearGradient", { id: "column-fill", x1: 0, y1: 0, x2: 0, y2: 1 }, stops)));
  figure.append(draw("rect", { x, y: top, width, height, fill: "url(#column-fill)", stroke: "#555" }));
  figure.append(...stripScale(deepest, y, x, 0.3048, "ft"), ...stripScale(deepest, y, x + width, 1, "m"));
  figure.append(...stripLabels(column, y, x + width, top + height));
  return figure;
}

// Depths beside the strip: feet at its left, metres at its right.
function stripScale(deepest, y, x, metres, unit) {
  const left = unit === "ft";
  const anchor = left ? { "text-anchor": "end" } : {};
  const words = (at, shown) =>
    draw("text", { x: x + (left ? -8 : 8), y: svgNumber(at), class: "tick", ...anchor }, shown);
  const marks = evenTicks(0, deepest / metres, 6).flatMap((tick) => {
    const at = y(tick * metres);
    const mark = draw("path", { d: `M${x} ${svgNumber(at)}h${left ? -5 : 5}`, class: "bracket" });
    return [mark, words(at + 4, tickWords(tick))];
  });
  return [...marks, words(11, unit)];
}

// Each bed that is there at the middle of its stretch.
function bedLabels(column, y, gravelTop) {
  const bases = [...bedBases(column).map((base) => base.estimate), gravelTop];
  return column.beds.map(({ role, thickness }, i) => {
    const top = Math.min(i ? bases[i - 1] : 0, gravelTop), base = Math.min(bases[i], gravelTop);
    return { at: y((top + base) / 2), words: nameOf(role, role), thick: thickness.estimate };
  }).filter(({ thick }) => thick >= 0.5);
}

// The beds above named together, where the surfaces do not part them.
function looseLabels(middle) {
  const above = described.units.filter((unit) => !["deep_aquifer", "bedrock"].includes(unit.role));
  const lines = [...above.map((unit) => unit.name), above.length > 1 ? "(not told apart here)" : ""].filter(Boolean);
  const first = Math.max(middle - 7 * lines.length, 26);
  return lines.map((words, i) => ({ at: first + 14 * i, words }));
}

// What is where, beside the strip.
function stripLabels(column, y, x, bottom) {
  const thick = drawnThickness(column), rock = y(column.rock.estimate);
  const gravelTop = Math.max(column.rock.estimate - thick, 0);
  const wanted = column.beds ? bedLabels(column, y, gravelTop) : looseLabels(y(gravelTop / 2));
  if (thick > 0) {
    const words = `${nameOf("deep_aquifer", "gravel")} (${column.gravelChance.toFixed(2)})`;
    wanted.push({ at: y(gravelTop + thick / 2), words });
  }
  wanted.push({ at: Math.max(rock + 16, (rock + bottom) / 2), words: nameOf("bedrock", "rock") });
  for (let i = 1; i < wanted.length; i += 1) wanted[i].at = Math.max(wanted[i].at, wanted[i - 1].at + 14);
  const [low, high] = [column.rock.p05, column.rock.p95].map((depth) => svgNumber(y(depth)));
  const bracket = `M${x + 40} ${low}h6V${high}h-6M${x + 40} ${svgNumber(rock)}h10`;
  return [
    draw("path", { d: bracket, class: "bracket" }),
    ...wanted.map(({ at, words }) => draw("text", { x: x + 56, y: svgNumber(at + 4), class: "halo" },
      words.length > 27 ? `${words.slice(0, 26)}\u2026` : words)),
  ];
}

function columnSentences(column) {
  const { rock } = column;
  const said = [];
  const width = rock.p95 - rock.p05;
  said.push(width > 0
    ? `Rock at ${lengthWords(rock.estimate)}, between ${lengthNumber(rock.p05)} and ${lengthWords(rock.p95)}.`
    : `Rock at ${lengthWords(rock.estimate)}.`);
  if (column.gravel) {
    const thick = `${lengthWords(column.gravel.estimate)} on average`;
    const most = known(column.gravel.p95) ? `, up to ${lengthWords(column.gravel.p95)}` : "";
    const chance = `${likelihoodWords(column.gravelChance)} (${column.gravelChance.toFixed(2)})`;
    said.push(column.gravelChance < 0.05 ? `${nameOf("deep_aquifer", "Gravel")} on it: ${chance}.`
      : `${nameOf("deep_aquifer", "Gravel")} on it: ${chance}, ${thick}${most}.`);
  }
  if (known(column.shallowChance)) {
    const rho = column.shallow ? `, about ${resistivityWords(column.shallow.estimate)}` : "";
    const present = column.shallowChance >= 0.05;
    said.push(`${nameOf("shallow_aquifer", "Shallow aquifer")} above: ${likelihoodWords(column.shallowChance)} `
      + `(${column.shallowChance.toFixed(2)})${present ? rho : ""}.`);
  }
  return said;
}

// The mean thickness of each bed, with its band where it has one.
function bedWords(beds) {
  const parts = beds.map(({ role, thickness }) => {
    const band = known(thickness.p05) ? ` (${lengthNumber(thickness.p05)} to ${lengthNumber(thickness.p95)})` : "";
    return `${nameOf(role, role)} ${lengthWords(thickness.estimate)}${band}`;
  });
  return `From the ground down, on average: ${parts.join(", ")}.`;
}

// The nearest soundings and wells with their distances in m.
function nearestPlaces(easting, northing, wanted, itself = null) {
  const places = [...described.soundings.map((place) => ({ kind: "sounding", place })),
    ...described.wells.map((place) => ({ kind: "well", place }))];
  return places.filter(({ place }) => place !== itself)
    .map((one) => ({ ...one, distance: region.crsMetres * Math.hypot(one.place.e - easting, one.place.n - northing) }))
    .sort((one, other) => one.distance - other.distance).slice(0, wanted);
}
