// Markers, lines, and what the panel says of a place.

const shapes = {
  seen: { d: "M2 8a6 6 0 1 0 12 0a6 6 0 1 0 -12 0Z", style: "solid" },
  not_distinct: { d: "M8 1l7 7l-7 7l-7 -7Z", style: "half" },
  deeper_than: { d: "M1.5 2.5h13l-6.5 11.5Z", style: "" },
  none: { d: "M3 3l10 10M13 3l-10 10", style: "" },
  rock: { d: "M2.5 2.5h11v11h-11Z", style: "solid" },
  ended: { d: "M2.5 2.5h11v11h-11ZM2.5 8h11", style: "" },
};

function symbol(shape) {
  return draw("svg", { width: 16, height: 16, viewBox: "0 0 16 16", "aria-hidden": "true" },
    draw("path", { d: shapes[shape].d, class: shapes[shape].style }));
}

const NEARBY = 500;     // m: within the width of a sounding's own spread
const WELL_FAR = 5000;  // m: beyond it a well says little of this place

const wellShape = (well) => known(well.rock) ? "rock" : "ended";

function soundingSays({ status, depth }) {
  if (status === null) return "no model";
  if (status === "deeper_than") return `base deeper than ${lengthWords(depth)}`;
  return known(depth) ? `${statusWords[status]}, rock put at ${lengthWords(depth)}` : statusWords[status];
}

const wellSays = (well) => known(well.rock) ? `reached rock at ${lengthWords(well.rock)}`
  : `ended above rock at ${lengthWords(well.total)}`;

function placeMarker(place, shape, words, open) {
  const icon = L.divIcon({ className: "marker", html: make("div", {}, symbol(shape)), iconSize: [16, 16] });
  const marker = L.marker(place.at, { icon, keyboard: true, riseOnHover: true });
  marker.on("click", () => open(place));
  marker.on("add", () => {
    const element = marker.getElement();
    element.setAttribute("aria-label", words);
    element.title = words;
    place.element = element;
    element.addEventListener("keydown", (event) => {
      if (event.key !== "Enter" && event.key !== " ") return;
      event.preventDefault();
      event.stopPropagation();
      open(place);
    });
  });
  return marker;
}

function soundingMarkers(open) {
  return L.layerGroup(described.soundings.map((one) =>
    placeMarker(one, one.status || "none", `Sounding ${one.name}: ${soundingSays(one)}`, open)));
}

function wellMarkers(open) {
  return L.layerGroup(described.wells.map((one) =>
    placeMarker(one, wellShape(one), `Well ${one.name}: ${wellSays(one)}`, open)));
}

const MOST_STOPS = 500;  // permits in sight that Tab goes through: with more, the keyboard has the search and the table

function permitSays({ over_gravel: over, reaches_gravel: reaches, covered }) {
  if (!covered) return "outside the surfaces";
  return [over && `deep gravel ${over}`, reaches && `requested depth: reaching it ${reaches}`].filter(Boolean).join("; ");
}

// An unseen mark over each permit in sight, for Tab and Enter; dots on a canvas are none.
function stopAtPermits(map, stops, open) {
  const seen = map.getBounds();
  const wanted = described.permits.filter(({ at }) => seen.contains(at));
  const kept = document.activeElement?.dataset?.permit;
  stops.clearLayers();
  if (wanted.length > MOST_STOPS) return;
  for (const permit of wanted) {
    const icon = L.divIcon({ className: "stop", html: "", iconSize: [14, 14] });
    const marker = L.marker(permit.at, { icon, pane: "permits", keyboard: true });
    marker.on("click", () => open(permit));
    marker.on("add", () => {
      const element = marker.getElement();
      element.dataset.permit = permit.name;
      element.title = `Permit ${permit.name}`;
      element.setAttribute("role", "button");
      element.setAttribute("aria-label", `Permit ${permit.name}: ${permitSays(permit)}`);
      element.addEventListener("keydown", (event) => {
        if (event.key !== "Enter" && event.key !== " ") return;
        event.preventDefault();
        event.stopPropagation();
        open(permit);
      });
      if (permit.name === kept) element.focus({ preventScroll: true });
    });
    stops.addLayer(marker);
  }
}

// Small dots that grow with the zoom; near enough, they bear their names.
function permitMarkers(map, open) {
  // SVG prints well, where a canvas that is drawn anew for paper covers what lies under it; a canvas bears more dots.
  const renderer = described.permits.length > 4000 ? L.canvas({ pane: "permits" }) : L.svg({ pane: "permits" });
  const dots = described.permits.map((permit) => {
    const dot = L.circleMarker(permit.at, { renderer, pane: "permits", radius: 2.5, weight: 1, color: "#111",
      fillColor: "#fff", fillOpacity: 0.95, bubblingMouseEvents: false });
    dot.on("click", () => open(permit));
    return { permit, dot };
  });
  const group = L.layerGroup(dots.map(({ dot }) => dot));
  const stops = L.layerGroup().addTo(group);
  const grow = () => {
    stopAtPermits(map, stops, open);
    const zoom = map.getZoom(), seen = map.getBounds();
    for (const { permit, dot } of dots) {
      dot.setRadius(Math.min(7, Math.max(1.8, 1.8 + 0.9 * (zoom - 12))));
      const wanted = zoom >= 15 && map.hasLayer(group) && seen.contains(permit.at);
      if (wanted && !dot.getTooltip()) {
        dot.bindTooltip(named(permit.name), { permanent: true, direction: "right", className: "permit-name" });
      } else if (!wanted && dot.getTooltip()) dot.unbindTooltip();
    }
  };
  map.on("zoomend moveend", grow);
  grow();
  return group;
}

function lineLayers(map) {
  const renderer = L.svg({ pane: "lines" });
  const lines = (paths, color, weight, style = {}) =>
    L.polyline(paths, { renderer, pane: "lines", interactive: false, color, weight, ...style });
  const group = (parts) => L.layerGroup(parts.filter((part) => part.getLatLngs().length));
  const given = described.lines;
  return {
    boundary: group([lines(given.boundary, "#333", 2), lines(given.boundary, "#fff", 0.7)]),
    contours: group(given.bedrock_contours.map((one) => lines(one.paths, "#222", 0.8, { opacity: 0.75 }))),
    thickness: group(given.thickness_contours.map((one) => lines(one.paths, "#222", 0.8, { dashArray: "1 4" }))),
    axis: group([lines(given.valley_axis, "#fff", 5, { opacity: 0.8 }), lines(given.valley_axis, "#111", 1.8)]),
    // The likely extent comes last, for the possible one shares its edge and would dash it.
    extent: group([...given.gravel_extent].sort((one, other) => (one.value === "likely") - (other.value === "likely"))
      .flatMap((one) => [
        lines(one.paths, "#fff", 3.2, { opacity: 0.8 }),
        lines(one.paths, "#7a1fa2", 1.8, { dashArray: one.value === "likely" ? null : "5 5" }),
      ])),
    sections: L.layerGroup(given.sections.flatMap(({ mark, paths }) => [
      lines(paths, "#222", 1.6, { dashArray: "7 4" }), sectionLabel(mark, paths[0][0])])),
    labels: contourLabels(given.bedrock_contours),
  };
}

// A section's mark where it begins.
function sectionLabel(mark, at) {
  const words = draw("svg", { width: 110, height: 14, viewBox: "0 0 110 14", "aria-hidden": "true" },
    draw("text", { x: 55, y: 11, "text-anchor": "middle", class: "halo" }, mark));
  const icon = L.divIcon({ className: "contour", html: words, iconSize: [110, 14] });
  return L.marker(at, { icon, interactive: false, keyboard: false, pane: "numbers" });
}

// A number on each contour's longest pieces; where two would touch, the later one waits for a closer look.
function contourLabels(contours) {
  return contours.flatMap((one) => {
    const longest = one.paths.reduce((best, path) => path.length > best.length ? path : best, []);
    if (longest.length < 4) return [];
    const words = draw("svg", { width: 50, height: 14, viewBox: "0 0 50 14", "aria-hidden": "true" },
      draw("text", { x: 25, y: 11, "text-anchor": "middle", class: "halo" }, lengthNumber(one.value)));
    const icon = L.divIcon({ className: "contour", html: words, iconSize: [50, 14] });
    const marker = L.marker(longest[0], { icon, interactive: false, keyboard: false, pane: "numbers" });
    marker.candidates = [0.5, 0.4, 0.6, 0.3, 0.7, 0.2, 0.8, 0.1, 0.9].map((share) => longest[Math.floor(longest.length * share)]);
    return [marker];
  });
}

// Marks shrink where they would hide each other: by the room that each has on the screen, in pixels.
function sizeMarks(map) {
  const [west, south, east, north] = projection.bounds;
  const corners = [[west, south], [east, north]].map((corner) => map.latLngToLayerPoint(toDegrees(...corner)));
  const area = Math.abs((corners[1].x - corners[0].x) * (corners[1].y - corners[0].y));
  const room = Math.sqrt(area / Math.max(1, described.soundings.length + described.wells.length));
  map.getContainer().style.setProperty("--mark", Math.min(1, Math.max(0.55, room / 56)).toFixed(2));
}

const LABEL_ROOM = { wide: 46, high: 18 };  // pixels that a contour's number keeps from the next one
const MARK_ROOM = { wide: 22, high: 14 };   // and from a mark

// Each label at the first of its places that is free of labels and marks, hidden where none is.
function spreadLabels(map, labels) {
  const marks = [...described.soundings, ...described.wells];
  const taken = marks.map(({ at }) => ({ point: map.latLngToLayerPoint(at), room: MARK_ROOM }));
  for (const label of labels) {
    const free = label.candidates.find((at) => {
      const { x, y } = map.latLngToLayerPoint(at);
      return taken.every(({ point, room }) =>
        Math.abs(point.x - x) > room.wide || Math.abs(point.y - y) > room.high);
    });
    if (free) {
      taken.push({ point: map.latLngToLayerPoint(free), room: LABEL_ROOM });
      label.setLatLng(free);
    }
    label.setOpacity(free ? 1 : 0);
  }
}

// How near the depth of rock is truly known: in words before the numbers.
function supportWords(easting, northing) {
  const near = nearestPlaces(easting, northing, Infinity);
  const knows = near.find(({ kind, place }) => kind === "well" ? known(place.rock) : place.status === "seen");
  const well = near.find(({ kind, place }) => kind === "well" && known(place.rock));
  const what = knows?.kind === "well" ? "rock" : "the base (gravel or rock)";
  const first = !knows ? "Not known: no place here saw the base."
    : knows.distance <= NEARBY ? `Measured nearby: ${what} was seen ${distanceWords(knows.distance)} away.`
      : `Estimated, not measured here: the nearest place that saw ${what} is ${distanceWords(knows.distance)} away.`;
  const far = !well || well.distance > WELL_FAR;
  return far ? `${first} It rests on soundings alone: no well within ${distanceWords(WELL_FAR)} reached rock.` : first;
}

function restsOn(easting, northing, itself, openers) {
  const items = nearestPlaces(easting, northing, 3, itself).map(({ kind, place, distance }) => make("li", {},
    `${distanceWords(distance)}: ${kind} `,
    make("button", { class: "link", click: () => openers[kind](place) }, place.name),
    `, ${kind === "well" ? wellSays(place) : soundingSays(place)}`));
  if (!columnAt(easting, northing)) return [make("h3", {}, "The nearest places"), make("ul", {}, items)];
  return [make("h3", {}, "What this rests on"), make("p", {}, supportWords(easting, northing)), make("ul", {}, items)];
}

function columnParts(easting, northing) {
  const column = columnAt(easting, northing);
  if (!column) {
    return [make("p", { class: "says" }, "No prediction here: outside the region, or no data near enough.")];
  }
  const ground = known(column.ground) ? `, ground at ${lengthWords(column.ground)}` : "";
  return [
    ...columnSentences(column).map((words) => make("p", { class: "says" }, words)),
    drawStrip(column),
    column.beds && make("p", {}, bedWords(column.beds)),
    make("p", { class: "soft" }, `Depths below the ground${ground}. The bracket is the 90 % band of the depth to rock; `
      + "colours run into each other as far as a contact may lie. Ranges hold 90 % of the chances."),
  ];
}

// The depth that a permit asks for against where gravel may begin and rock may lie.
function requestWords({ requested, bedrock_depth_p05: low, bedrock_depth_p95: high, ...permit }) {
  const asks = `Asks for ${lengthWords(requested)}`;
  if (!known(low) || !known(high)) return `${asks}: no depths are predicted here to compare it with.`;
  const rock = `rock lies between ${lengthNumber(low)} and ${lengthWords(high)}`;
  const gravel = known(permit.gravel_top_depth_p05) && permit.gravel_probability >= 0.05
    ? permit.gravel_top_depth_p05 : low;
  if (requested <= gravel) return `${asks}: very likely ends above the base here, gravel or rock; ${rock}.`;
  if (requested <= low) return `${asks}: may reach gravel, from ${lengthWords(gravel)}, and ends above rock; ${rock}.`;
  return requested < high ? `${asks}: may reach rock; ${rock}.` : `${asks}: very likely reaches rock; ${rock}.`;
}

// Whether gravel is there and the depth reaches it: in the delivery's own words.
function gravelWords(permit) {
  const odds = (chance) => `(${chance.toFixed(2)})`;
  const said = [];
  if (permit.over_gravel) said.push(`Deep gravel here: ${permit.over_gravel} ${odds(permit.gravel_probability)}.`);
  if (permit.reaches_gravel) {
    said.push(`Reached within the depth asked for: ${permit.reaches_gravel} ${odds(permit.reach_probability)}.`);
  }
  if ([permit.over_gravel, permit.reaches_gravel].includes("undetermined")) {
    said.push("Undetermined: the odds are near even, or the place is not known well enough.");
  }
  return said.join(" ");
}

function permitFacts(permit) {
  const facts = [permit.use, known(permit.radius) ? `placed to within ${lengthWords(permit.radius)}`
    : "location accuracy: not stated"].filter(Boolean);
  const parts = [make("p", { class: "soft" }, facts.join("; "))];
  if (known(permit.requested)) parts.push(make("p", { class: "says" }, requestWords(permit)));
  const gravel = gravelWords(permit);
  if (gravel) parts.push(make("p", { class: "says" }, gravel));
  if (known(permit.radius) && permit.covered) {
    parts.push(make("p", {}, "Over the whole circle of its location: rock between "
      + `${lengthNumber(permit.bedrock_depth_p05)} and ${lengthWords(permit.bedrock_depth_p95)}, gravel `
      + `${likelihoodWords(permit.gravel_probability)} (${permit.gravel_probability.toFixed(2)}).`));
  }
  return parts;
}

function soundingFacts(sounding) {
  const facts = [make("p", { class: "says" }, sounding.sentence)];
  if (!sounding.model) return facts;
  facts.push(...[...sounding.together, ...sounding.opinions, ...sounding.doubts].map((words) => make("p", {}, words)));
  facts.push(make("p", { class: "soft" }, `${statusWords[sounding.status]}; `
    + `${sounding.model.rho.length} layers; misfit ${sounding.rms.toFixed(1)} %; `
    + `halving or doubling all resistivity below ${lengthWords(sounding.model.reach)} would go unnoticed`));
  return facts;
}

function wellFacts(well) {
  const facts = [wellSays(well)];
  if (known(well.rock)) facts.push(`total depth ${lengthWords(well.total)}`);
  if (known(well.water)) facts.push(`water at ${lengthWords(well.water, 1)}`);
  if (known(well.conductance)) facts.push(`${Math.round(well.conductance)} \u00b5S/cm at 25 \u00b0C`);
  const said = facts.join("; ");
  return [make("p", { class: "says" }, `${said[0].toUpperCase()}${said.slice(1)}.`),
    ...[...well.together, ...well.picks].map((words) => make("p", {}, words))];
}

function markKey() {
  const item = (shape, words) => make("li", {}, symbol(shape), words);
  return make("div", { class: "key" }, make("h3", {}, "Marks"), make("ul", {},
    ...Object.entries(statusWords).map(([status, words]) => item(status, `sounding: ${words}`)), item("rock", "well that reached rock"),
    item("ended", "well that ended above rock")),
  make("p", { class: "soft" }, "Small dots: permits; Tab goes from one to the next where few enough are in sight. Bold line: valley axis. Thin lines: bedrock contours. "
    + "Violet: extent of likely gravel, dashed where only possible."));
}
