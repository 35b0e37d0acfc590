// Value grids and the way from the globe to the region's grid: what the cursor reads agrees with the rasters.

const grid = described.grid;
const projection = described.projection;
const surfaces = described.surfaces;
const EARTH = 6378137;  // radius of the web mercator sphere, m

// 16-bit codes, differenced along rows and deflated; code 0 is blank.
async function unpack(encoded) {
  const packed = Uint8Array.from(atob(encoded.packed), (letter) => letter.charCodeAt(0));
  const stream = new Blob([packed]).stream().pipeThrough(new DecompressionStream("deflate"));
  const view = new DataView(await new Response(stream).arrayBuffer());
  const values = new Float32Array(grid.rows * grid.columns);
  for (let row = 0; row < grid.rows; row += 1) {
    let code = 0;
    for (let column = 0; column < grid.columns; column += 1) {
      const cell = row * grid.columns + column;
      code = (code + view.getUint16(2 * cell, true)) & 0xffff;
      values[cell] = code === 0 ? NaN : encoded.low + (code - 1) * encoded.step;
    }
  }
  return values;
}

async function unpackAll() {
  for (const surface of surfaces) {
    for (const part of ["estimate", "p05", "p95"]) {
      if (surface[part]) surface[part] = await unpack(surface[part]);
    }
  }
  described.ground = await unpack(described.ground);
}

const surfaceNamed = (name) => surfaces.find((surface) => surface.name === name);

function toMercator(latitude, longitude) {
  const x = EARTH * longitude * Math.PI / 180;
  return [x, EARTH * Math.log(Math.tan(Math.PI / 4 + latitude * Math.PI / 360))];
}

function toDegrees(x, y) {
  return [(2 * Math.atan(Math.exp(y / EARTH)) - Math.PI / 2) * 180 / Math.PI, x / EARTH * 180 / Math.PI];
}

// Easting and northing at a place in web mercator, from the lattice of control points; null outside it.
function toRegion(x, y, clamped = false) {
  const last = projection.count - 1;
  let u = (x - projection.x[0]) / (projection.x[1] - projection.x[0]) * last;
  let v = (y - projection.y[0]) / (projection.y[1] - projection.y[0]) * last;
  if (!clamped && (u < 0 || v < 0 || u > last || v > last)) return null;
  const i = Math.min(Math.max(Math.floor(u), 0), last - 1);
  const j = Math.min(Math.max(Math.floor(v), 0), last - 1);
  u -= i;
  v -= j;
  const at = j * projection.count + i;
  const mix = (values) => (1 - v) * ((1 - u) * values[at] + u * values[at + 1])
    + v * ((1 - u) * values[at + projection.count] + u * values[at + projection.count + 1]);
  return [mix(projection.easting), mix(projection.northing)];
}

// Web mercator of an easting and northing: Newton steps on the lattice.
function fromRegion(easting, northing) {
  let x = (projection.x[0] + projection.x[1]) / 2;
  let y = (projection.y[0] + projection.y[1]) / 2;
  const h = (projection.x[1] - projection.x[0]) / projection.count / 4;
  for (let step = 0; step < 12; step += 1) {
    const [e, n] = toRegion(x, y, true);
    const [ex, nx] = toRegion(x + h, y, true);
    const [ey, ny] = toRegion(x, y + h, true);
    const a = (ex - e) / h, b = (ey - e) / h, c = (nx - n) / h, d = (ny - n) / h;
    const determinant = a * d - b * c;
    x += (d * (easting - e) - b * (northing - n)) / determinant;
    y += (a * (northing - n) - c * (easting - e)) / determinant;
  }
  return [x, y];
}

// Index of the cell that holds a place, -1 outside the grid.
function cellAt(easting, northing) {
  const column = Math.floor((easting - grid.west) / grid.cell);
  const row = Math.floor((grid.north - northing) / grid.cell);
  return column < 0 || row < 0 || column >= grid.columns || row >= grid.rows ? -1 : row * grid.columns + column;
}

// A surface's estimate and band at a cell; null where blank.
function valueAt(name, cell) {
  const surface = surfaceNamed(name);
  if (!surface || cell < 0 || !known(surface.estimate[cell])) return null;
  const value = { estimate: surface.estimate[cell] };
  if (surface.p05) Object.assign(value, { p05: surface.p05[cell], p95: surface.p95[cell] });
  return value;
}
