// The page set going: layers, choices, the panel, the readout.

const say = (words) => { document.getElementById("said").textContent = words; };

function makePanes(map) {
  const order = { surface: 250, lines: 380, permits: 420, numbers: 430 };
  for (const [name, index] of Object.entries(order)) {
    map.createPane(name).style.zIndex = index;
    if (name !== "permits") map.getPane(name).style.pointerEvents = "none";
  }
}

function startSurface(map) {
  const choice = document.getElementById("surface"), mode = document.getElementById("mode");
  const drawn = surfaces.filter((surface) => surface.drawn);
  choice.append(...drawn.map((surface) => make("option", { value: surface.name }, surface.title)));
  const [west, south, east, north] = projection.bounds;
  const bounds = L.latLngBounds(toDegrees(west, south), toDegrees(east, north));
  let overlay = null;
  const show = () => {
    const surface = surfaceNamed(choice.value);
    const picture = surfacePicture(surface, mode.value);
    if (overlay) overlay.setUrl(picture);
    else overlay = L.imageOverlay(picture, bounds, { pane: "surface", interactive: false, alt: "" }).addTo(map);
    drawLegend(surface, mode.value);
    map.invalidateSize({ animate: false });  // what the legend takes the map gives
  };
  choice.addEventListener("change", show);
  mode.addEventListener("change", show);
  const opacity = document.getElementById("opacity");
  const fade = () => { map.getPane("surface").style.opacity = opacity.value / 100; };
  opacity.addEventListener("input", fade);
  fade();
  show();
  map.fitBounds(bounds, { animate: false, padding: [6, 6] });
  return { bounds, current: () => surfaceNamed(choice.value) };
}

function startReadout(map, current) {
  const box = document.getElementById("readout");
  map.on("mousemove", (event) => {
    const [x, y] = toMercator(event.latlng.lat, event.latlng.lng);
    const place = toRegion(x, y);
    if (!place) {
      box.replaceChildren();
      return;
    }
    const surface = current(), cell = cellAt(...place);
    const value = valueAt(surface.name, cell);
    const band = value && known(value.p05)
      ? ` (${valueWords(surface.quantity, value.p05)} to ${valueWords(surface.quantity, value.p95)})` : "";
    const words = value ? valueWords(surface.quantity, value.estimate) : "no value here";
    const others = surfaces.filter((one) => one !== surface).map((one) => {
      const here = valueAt(one.name, cell);
      return here && make("li", { "data-surface": one.name },
        `${one.title}: `, make("b", {}, one.quantity === "code" ? one.codes[Math.round(here.estimate)] ?? "not known"
          : valueWords(one.quantity, here.estimate)));
    }).filter(Boolean);
    box.replaceChildren(make("b", { id: "value" }, words), band, make("br"),
      `x ${grouped(place[0])}, y ${grouped(place[1])}; `,
      make("span", {}, `${event.latlng.lat.toFixed(5)}, ${event.latlng.lng.toFixed(5)}`),
      make("ul", {}, others));
  });
  map.on("mouseout", () => box.replaceChildren());
}

// On a narrow screen: the panel's first lines, and over them that part of the map in which the place lies.
function bringIntoSight(map, panel, at) {
  window.scrollTo(0, panel.offsetTop - 0.62 * window.innerHeight);
  const caution = document.getElementById("caution").getBoundingClientRect().bottom;
  const hidden = Math.max(0, caution - map.getContainer().getBoundingClientRect().top);
  map.panInside(at, { paddingTopLeft: [24, hidden + 24], paddingBottomRight: [24, 24], animate: false });
}

// What the panel shows, and the way back from it.
function startPanel(map) {
  const answer = document.getElementById("answer"), panel = document.getElementById("panel");
  let ring = null, before = null;
  const intro = () => {
    answer.replaceChildren(make("h2", {}, "What is under a place?"),
      make("p", { class: "screen" }, "Click the map, choose a mark, or search for a permit. With the keyboard: arrows move the map, "
        + "Enter asks at its middle, Tab goes from mark to mark, Escape closes."),
      make("p", { class: "soft" }, `${counted(described.soundings.length, "sounding")}, `
        + `${counted(described.wells.length, "well")}, ${counted(described.permits.length, "permit")}.`));
  };
  const close = () => {
    if (ring) ring.remove();
    ring = null;
    intro();
    if (before && before.isConnected) before.focus();
    before = null;
  };
  const show = (at, title, parts) => {
    if (!ring) before = document.activeElement;
    if (ring) ring.remove();
    ring = L.circleMarker(at, { radius: 13, color: "#d55e00", weight: 3, fill: false, interactive: false }).addTo(map);
    if (!map.getBounds().pad(-0.05).contains(at)) map.setView(at, Math.max(map.getZoom(), 12), { animate: false });
    answer.replaceChildren(make("button", { class: "close", "aria-label": "Close", click: close }, "Close"),
      make("h2", {}, title), ...parts.filter((part) => part));
    panel.scrollTop = 0;
    panel.focus({ preventScroll: true });
    // On a phone the panel lies under the map: both are brought into sight.
    if (window.innerWidth <= 1000) bringIntoSight(map, panel, at);
    say(`${title}. ${[...answer.querySelectorAll(".says")].map((part) => part.textContent).join(" ")}`);
  };
  document.addEventListener("keydown", (event) => {
    if (event.key === "Escape" && ring) close();
  });
  document.getElementById("key").append(markKey());
  intro();
  return show;
}

function startPlaces(show) {
  const openers = {};
  const rests = (place, itself) => restsOn(place.e, place.n, itself, openers);
  openers.sounding = (one) => show(one.at, `Sounding ${one.name}`, [
    ...soundingFacts(one), make("h3", {}, "Curve"), drawCurve(one),
    ...(one.model ? [make("h3", {}, "What the ground may be"), drawModel(one),
      make("p", { class: "soft" }, "Left, the layered model with its 90 % band. Right, how probable each unit is at each "
        + "depth; an orange line is an interpreter\u2019s pick.")] : []), make("h3", {}, "Predicted column here"),
    ...columnParts(one.e, one.n), ...rests(one, one)]);
  openers.well = (one) => show(one.at, `Well ${one.name}`, [
    ...wellFacts(one), ...(one.log.length ? [drawLog(one)] : []),
    make("h3", {}, "Predicted column here"), ...columnParts(one.e, one.n), ...rests(one, one)]);
  openers.permit = (one) => show(one.at, `Permit ${one.name}`, [
    ...permitFacts(one), ...columnParts(one.e, one.n), ...rests(one, null)]);
  return openers;
}

function startLayers(map, openers) {
  const lines = lineLayers(map);
  const layers = [
    ["Soundings", soundingMarkers(openers.sounding), true],
    ["Wells", wellMarkers(openers.well), true],
    ["Permits", permitMarkers(map, openers.permit), true],
    ["Valley axis", lines.axis, true],
    ["Bedrock contours", L.layerGroup([lines.contours, ...lines.labels]), true],
    ["Thickness contours", lines.thickness, false],
    ["Extent of likely gravel", lines.extent, true],
    ["Lines of the sections", lines.sections, false],
    ["Boundary", lines.boundary, true],
  ];
  document.getElementById("switches").append(...layers.map(([words, layer, on]) => {
    const box = make("input", { type: "checkbox", change: () => (box.checked ? layer.addTo(map) : layer.remove()) });
    box.checked = on;
    return make("label", {}, box, ` ${words}`);
  }));
  for (const [, layer, on] of layers.reverse()) if (on) layer.addTo(map);
  const spread = () => {
    sizeMarks(map);
    spreadLabels(map, lines.labels);
  };
  map.on("zoomend resize", spread);
  spread();
}

// Paper has its own width: the view is fitted into it, and the screen's comes back after.
function startPrinting(map) {
  const container = map.getContainer();
  const resize = (width, height, view) => {
    Object.assign(container.style, { width, height });
    map.invalidateSize({ animate: false });
    map.fitBounds(view, { animate: false });
  };
  let view = null;
  window.addEventListener("beforeprint", () => {
    view = map.getBounds();
    resize("640px", "480px", view);
  });
  window.addEventListener("afterprint", () => resize("", "", view));
}

function askAt(openers, show, latlng) {
  const place = toRegion(...toMercator(latlng.lat, latlng.lng), true);
  const title = `At ${grouped(place[0])}, ${grouped(place[1])}`;
  show([latlng.lat, latlng.lng], title, [...columnParts(...place), ...restsOn(...place, null, openers)]);
}

async function start() {
  const map = map_geoves;
  document.getElementById("caution").textContent = described.caution;
  document.getElementById("title").textContent = region.name;
  await unpackAll();
  map.options.zoomSnap = 0.1;
  map.attributionControl.setPrefix("Drawn with Leaflet");
  makePanes(map);
  const { current } = startSurface(map);
  const show = startPanel(map);
  const openers = startPlaces(show);
  startLayers(map, openers);
  startReadout(map, current);
  startPrinting(map);
  map.on("click", (event) => askAt(openers, show, event.latlng));
  const container = map.getContainer();
  container.setAttribute("aria-label", "Map. Arrows move it, Enter asks at its middle.");
  container.setAttribute("role", "application");
  container.addEventListener("keydown", (event) => {
    if (event.key === "Enter" && event.target === container) askAt(openers, show, map.getCenter());
  });
  startSearch((kind, place) => {
    map.setView(place.at, Math.max(map.getZoom(), 13), { animate: false });
    openers[kind](place);
  }, (at) => {
    map.setView(at, Math.max(map.getZoom(), 13), { animate: false });
    askAt(openers, show, L.latLng(at));
  }, say);
  writeTables(openers);
  document.addEventListener("click", (event) => {
    const layers = document.getElementById("layers");
    if (!layers.contains(event.target)) layers.open = false;
  });
  document.body.dataset.ready = "yes";
}

start();
