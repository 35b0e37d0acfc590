// One surface at a time as an image in web mercator: colour is the value, its fade towards grey is the doubt.

const GREY = [205, 205, 202];
const FADE_MOST = 0.92;

const ramps = Object.fromEntries(Object.entries(described.ramps).map(([name, hex]) =>
  [name, hex.match(/.{6}/g).map((colour) => [0, 2, 4].map((at) => parseInt(colour.slice(at, at + 2), 16)))]));

const rampColour = (name, share) => ramps[name][Math.min(255, Math.max(0, Math.round(share * 255)))];

const scaled = (surface, value) => surface.quantity === "resistivity" ? Math.log(value) : value;
const shareOf = (ends, value) => (value - ends[0]) / (ends[1] - ends[0]);

function widthAt(surface, cell) {
  if (!surface.p05) return null;
  const low = surface.p05[cell], high = surface.p95[cell];
  return surface.quantity === "resistivity" ? Math.log(high / low) : high - low;
}

// Red, green and blue of a cell, null where it is blank.
function cellColour(surface, mode, cell) {
  const value = surface.estimate[cell];
  if (Number.isNaN(value)) return null;
  const width = widthAt(surface, cell);
  if (mode === "width" && width !== null) return rampColour("magma_r", 0.06 + 0.8 * shareOf(surface.doubt, width));
  const colour = rampColour(surface.ramp, shareOf(surface.range, scaled(surface, value)));
  if (mode === "both" && surface.quantity === "probability") return faded(colour, undecided(value));
  return mode === "value" || width === null ? colour : faded(colour, shareOf(surface.doubt, width));
}

// A probability is its own doubt: 1 at even odds, none from 0.05 down and from 0.95 up.
const undecided = (probability) => 1 - Math.abs(probability - 0.5) / 0.45;

function faded(colour, doubt) {
  const share = Number.isNaN(doubt) ? FADE_MOST : Math.min(FADE_MOST, Math.max(0, doubt));
  return colour.map((channel, i) => channel * (1 - share) + GREY[i] * share);
}

// For each pixel of a picture over the grid's bounds in web mercator, the cell that it shows; -1 outside the grid.
function findPixelCells() {
  const [west, south, east, north] = projection.bounds;
  const fine = Math.min(8, Math.max(1, Math.sqrt(1e6 / (grid.rows * grid.columns))));  // pixels a cell
  const width = Math.round(grid.columns * fine);
  const height = Math.round(width * (north - south) / (east - west));
  const cells = new Int32Array(width * height);
  const step = 8;  // places between are taken from a straight line: bent by less than a thousandth of a cell
  for (let row = 0; row < height; row += 1) {
    const y = north - (row + 0.5) / height * (north - south);
    const across = (column) => toRegion(west + (column + 0.5) / width * (east - west), y, true);
    let from = across(0);
    for (let start = 0; start < width; start += step) {
      const to = across(start + step);
      for (let k = 0; k < step && start + k < width; k += 1) {
        const share = k / step;
        cells[row * width + start + k] =
          cellAt(from[0] + share * (to[0] - from[0]), from[1] + share * (to[1] - from[1]));
      }
      from = to;
    }
  }
  return { width, height, cells };
}

let pixelCells = null;

// The surface's picture over the grid's bounds in web mercator; blank cells are hatched.
function surfacePicture(surface, mode) {
  pixelCells ??= findPixelCells();
  const { width, height, cells } = pixelCells;
  const canvas = document.createElement("canvas");
  Object.assign(canvas, { width, height });
  const context = canvas.getContext("2d");
  const picture = context.createImageData(width, height);
  const pixels = new Uint32Array(picture.data.buffer);
  const colours = cellPaint(surface, mode);
  const hatch = 0x96808080;
  for (let pixel = 0; pixel < cells.length; pixel += 1) {
    if (cells[pixel] < 0) continue;
    const colour = colours[cells[pixel]];
    if (colour !== 0) pixels[pixel] = colour;
    else if ((pixel % width + Math.floor(pixel / width)) % 9 === 0) pixels[pixel] = hatch;
  }
  context.putImageData(picture, 0, 0);
  return canvas.toDataURL("image/png");
}

// Each cell's colour as a canvas stores it (alpha, blue, green, red); 0 where blank.
function cellPaint(surface, mode) {
  return Uint32Array.from(surface.estimate, (_, cell) => {
    const colour = cellColour(surface, mode, cell);
    if (colour === null) return 0;
    const [red, green, blue] = colour.map(Math.round);
    return 0xff000000 + blue * 65536 + green * 256 + red;
  });
}

const quantityUnit = (surface) => surface.quantity === "resistivity" ? "\u03a9 m" : region.unit.label;

// Value in the region's unit at a share of the ramp.
function legendNumber(surface, value) {
  if (surface.quantity === "resistivity") return Math.exp(value);
  return surface.quantity === "probability" ? value : value / region.unit.metres;
}

function legendTicks(surface) {
  const ends = surface.range.map((end) => legendNumber(surface, end));
  const wanted = surface.quantity === "probability" ? 5 : 4;
  const ticks = surface.quantity === "resistivity" ? logarithmicTicks(...ends) : evenTicks(...ends, wanted);
  return ticks.map((tick) => ({
    words: tickWords(tick),
    share: surface.quantity === "resistivity"
      ? shareOf(surface.range, Math.log(tick)) : (tick - ends[0]) / (ends[1] - ends[0]),
  }));
}

// How wide a band is, in words: a length, or for resistivities the factor between its ends.
function widthWords(surface, width) {
  return surface.quantity === "resistivity" ? `\u00d7 ${Math.exp(width).toFixed(1)}` : lengthWords(width);
}

function drawLegend(surface, mode) {
  const box = document.getElementById("legend");
  const both = mode === "both" && surface.doubt !== null;
  const asWidth = mode === "width" && surface.doubt !== null;
  const chance = mode === "both" && surface.quantity === "probability";
  const rows = both ? 4 : 1, left = 8, width = 196, high = both ? 12 : 16;
  const figure = draw("svg", { viewBox: `0 0 280 ${rows * high + 22}`, role: "img", "aria-label": "Legend" });
  for (let row = 0; row < rows; row += 1) {
    for (let column = 0; column < 49; column += 1) {
      const share = column / 48;
      let colour = asWidth ? rampColour("magma_r", 0.06 + 0.8 * share) : rampColour(surface.ramp, share);
      if (both) colour = faded(colour, row / (rows - 1));
      else if (chance) colour = faded(colour, undecided(share));
      const place = { x: left + column * 4, y: row * high, width: 4.4, height: high + 0.4 };
      figure.append(draw("rect", { ...place, fill: `rgb(${colour.map(Math.round)})` }));
    }
  }
  const tickAt = (share, words) => draw("text",
    { x: svgNumber(left + share * width), y: rows * high + 13, "text-anchor": "middle", class: "tick" }, words);
  const [narrow, broad] = (surface.doubt || [0, 0]).map((width) => widthWords(surface, width));
  if (asWidth) {
    figure.append(tickAt(0.08, narrow), tickAt(0.92, broad));
  } else {
    const inside = legendTicks(surface).filter(({ share }) => share > 0.01 && share < 0.99);
    figure.append(...inside.map(({ share, words }) => tickAt(share, words)));
  }
  if (both) {
    const beside = (y, words) => draw("text", { x: left + width + 6, y, class: "tick" }, words);
    figure.append(beside(10, `band ${narrow}`), beside(rows * high - 2, `band ${broad}`));
  }
  const explained = both ? "Down: wider 90 % band, less sure. "
    : chance ? "Greyer towards 0.5: not decided. "
    : surface.doubt === null && mode !== "value" ? "A probability shows its own doubt. " : "";
  const unit = surface.quantity === "probability" ? "" : ` (${quantityUnit(surface)})`;
  const title = asWidth ? `${surface.title}: width of the 90 % band` : `${surface.title}${unit}`;
  const datum = surface.quantity === "elevation" ? ` Heights: ${region.datumName || "datum not declared"}.` : "";
  box.replaceChildren(figure, make("h2", {}, title),
    make("p", {}, `${explained}Hatched: no data near, or outside the region.${datum}`));
}
