// From a place in a picture to the sky: the map of the camera, run backwards.

const DEG = Math.PI / 180;

function bytes(text) {
  return Uint8Array.from(atob(text), (letter) => letter.charCodeAt(0));
}

// Codes of sixteen bits, little-endian whatever the machine.
function codes(text) {
  const view = new DataView(bytes(text).buffer);
  return Uint16Array.from({ length: view.byteLength / 2 }, (_, place) => view.getUint16(2 * place, true));
}

// 0 is "none"; the others are even steps of the logarithm.
function decoded(code, lowest, highest) {
  return code === 0 ? NaN : lowest * (highest / lowest) ** ((code - 1) / 65534);
}

// Radius of the image, in units of the focal length, at the angle theta from the axis; and k of the lens.
function lens(grid, theta) {
  const q = Math.sin(theta / 2) ** 2;
  const share = q / grid.map[3];
  const k = grid.coefficients.reduceRight((sum, coefficient) => sum * share + coefficient, 0);
  return { k, radius: k * 2 * Math.sqrt(q * (1 - q)), z: 1 - 2 * q };
}

function own(grid, column, row) {
  if (grid.kind === "cylindrical") {
    const [first, step, top, down] = grid.map;
    const longitude = first + column * step;
    const latitude = top - row * down;
    if (Math.abs(latitude) > Math.PI / 2 + 1e-12) return null;
    const flat = Math.cos(latitude);
    return [flat * Math.cos(longitude), flat * Math.sin(longitude), Math.sin(latitude)];
  }
  const [scale, middleColumn, middleRow, widest] = grid.map;
  const x = (column - middleColumn) / scale;
  const y = (middleRow - row) / scale;
  const radius = Math.hypot(x, y);
  let low = 0;
  let high = 2 * Math.asin(Math.sqrt(widest));
  if (radius > lens(grid, high).radius * (1 + 1e-12)) return null;
  for (let turn = 0; turn < 60; turn += 1) {
    const middle = 0.5 * (low + high);
    if (lens(grid, middle).radius < radius) low = middle; else high = middle;
  }
  const found = lens(grid, 0.5 * (low + high));
  return [x / found.k, y / found.k, found.z];
}

// Viewing direction at pixel coordinates (pixel centres are whole numbers): east, north, up; null outside the image.
function view(grid, column, row) {
  const v = own(grid, column, row);
  if (v === null) return null;
  const r = grid.rotation;
  return [0, 1, 2].map((axis) => v[0] * r[axis] + v[1] * r[3 + axis] + v[2] * r[6 + axis]);
}

function between(a, b) {
  const apart = Math.hypot(a[0] - b[0], a[1] - b[1], a[2] - b[2]);
  return 2 * Math.atan2(apart, Math.hypot(a[0] + b[0], a[1] + b[1], a[2] + b[2]));
}

// All readings in degrees; null outside the image.
function reading(picture, column, row) {
  const v = view(picture.grid, column, row);
  if (v === null) return null;
  return {
    azimuth: (((Math.atan2(v[0], v[1]) / DEG) % 360) + 360) % 360,
    elevation: Math.atan2(v[2], Math.hypot(v[0], v[1])) / DEG,
    angle: between(v, picture.source) / DEG,
  };
}

// Which cell of a coarse grid holds a place.
function cell(cells, column, row) {
  const across = Math.min(cells.columns - 1, Math.max(0, Math.floor((column + 0.5) / cells.side)));
  const down = Math.min(cells.rows - 1, Math.max(0, Math.floor((row + 0.5) / cells.side)));
  return down * cells.columns + across;
}

function arcAt(picture, names, column, row) {
  picture.arcs.unpacked ??= bytes(picture.arcs.codes);
  return names[picture.arcs.unpacked[cell(picture.arcs, column, row)]];
}

// Spectral radiance of the cell at a place, and its peak; null where there is no light.
function spectrumAt(picture, bands, column, row) {
  const cells = picture.cells;
  cells.unpacked ??= { peaks: codes(cells.peaks), shapes: bytes(cells.shapes) };
  const place = cell(cells, column, row);
  const peak = decoded(cells.unpacked.peaks[place], cells.lowest, cells.highest);
  if (!(peak > 0)) return null;
  const shape = Array.from(cells.unpacked.shapes.subarray(place * bands, (place + 1) * bands), (step) => step / 255);
  return { peak, shape };
}
