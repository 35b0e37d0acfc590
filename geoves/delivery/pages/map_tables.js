// The same facts as tables, for screen readers, keyboards and paper.

function factTable(title, headings, rows) {
  const cell = (tag) => (content) => make(tag, tag === "th" ? { scope: "col" } : {}, content);
  return [make("h2", {}, `${title} (${rows.length})`),
    make("div", { class: "scroll", tabindex: 0, role: "region", "aria-label": title },
      make("table", {}, make("thead", {}, make("tr", {}, headings.map(cell("th")))),
        make("tbody", {}, rows.map((row) => make("tr", {}, row.map(cell("td")))))))];
}

const dash = "\u2013";
const lengthCell = (metres, decimals = 0) => known(metres) ? lengthNumber(metres, decimals) : dash;
const rangeCell = (low, high) => known(low) && known(high) ? `${lengthNumber(low)} to ${lengthNumber(high)}` : dash;

function writeTables(openers) {
  const unit = region.unit.label;
  const opener = (kind, place) => make("button", { class: "link", click: () => openers[kind](place) }, place.name);
  const soundings = described.soundings.map((one) => [
    opener("sounding", one), one.status ? statusWords[one.status] : "no model", lengthCell(one.depth),
    known(one.error) ? `\u00b1 ${lengthNumber(one.error)}` : dash, one.sentence]);
  const wells = described.wells.map((one) => [
    opener("well", one), lengthCell(one.total), lengthCell(one.rock), wellSays(one)]);
  const permits = described.permits.map((one) => [
    opener("permit", one), one.covered ? "yes" : "no", lengthCell(one.bedrock_depth),
    rangeCell(one.bedrock_depth_p05, one.bedrock_depth_p95), lengthCell(one.gravel_thickness),
    rangeCell(one.gravel_thickness_p05, one.gravel_thickness_p95),
    known(one.gravel_probability) ? one.gravel_probability.toFixed(2) : dash, lengthCell(one.requested),
    one.reaches_gravel ? `${one.reaches_gravel} (${one.reach_probability.toFixed(2)})` : dash]);
  document.getElementById("tables").append(
    make("h2", {}, "Cautions"), make("ul", {}, described.cautions.map((caution) => make("li", {}, caution))),
    ...factTable("Soundings", ["sounding", "what the curve says", `rock (${unit})`, "standard error", "in words"], soundings),
    ...factTable("Wells", ["well", `total depth (${unit})`, `rock (${unit})`, "in words"], wells),
    ...factTable("Permits", ["permit", "predicted", `rock (${unit})`, "90 % band", `gravel, mean (${unit})`,
      "90 % band", "gravel probability", `asked for (${unit})`, "reaches gravel"], permits),
    make("h2", {}, "How heights and places are given"),
    make("p", {}, `Coordinates in ${region.crsName} (${region.crs}). `
      + (described.everyCell > 1 ? `The rasters are finer: shown is one cell of ${described.everyCell} each way. ` : "")
      + `Heights: ${region.datumName || "datum not declared"}, in ${unit}. `
      + [...region.madeBy, region.useLimits].filter(Boolean).join(". ")),
  );
}
