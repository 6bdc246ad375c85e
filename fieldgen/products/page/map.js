"use strict";
// The map of an hour: colours, patterns, stations and their values.

const LETTER = 9; // width of a numeral, and then some [px]
const VALUE_HEIGHT = 17; // room for a station's value [px]
const DOT_ROOM = 9; // half of a station's own room [px]
const REACH = { mouse: 12, touch: 22 }; // how near a click counts as on a station [px]

function showColours() {
  const { content, arrays, models } = state;
  const layer = theLayer();
  const value = layerValues(content, arrays, layer, state.hour, state.threshold);
  const pixels = models.image.data.image[0];
  for (let cell = 0; cell < pixels.length; cell++) pixels[cell] = value(cell);
  models.image.change.emit();
}

function showColourBar() {
  const { mapper, bar } = state.models;
  const layer = theLayer();
  mapper.setv({ palette: layer.palette, low: layer.low, high: layer.high });
  bar.title = `${layerTitle(layer)}, ${layer.unit}`;
}

function layerTitle(layer) {
  return layer.kind === "probability"
    ? `${layer.title} ${state.threshold}${SPACE}${UNIT}`
    : layer.title;
}

// Flagged cells as boxes, one for each run of cells in a row.
function showFlags() {
  const { content, arrays } = state;
  const shown = element("show-flags").checked;
  for (const flag of content.cell_flags) {
    const boxes = { left: [], right: [], bottom: [], top: [] };
    if (shown) flaggedRuns(content, arrays, flag.bit, boxes);
    fill(`cells_${flag.meaning}`, boxes);
  }
}

function flaggedRuns(content, arrays, bit, boxes) {
  const [west, east, south, north] = content.bounds;
  const [, rows, columns] = arrays.pwv.shape;
  const [dx, dy] = [(east - west) / columns, (north - south) / rows];
  const first = state.hour * rows * columns;
  const marked = (i) => arrays.flag.counts[i] & bit && arrays.pwv.counts[i] !== -32768;
  for (let row = 0; row < rows; row++) {
    for (let column = 0; column < columns; column++) {
      const begin = column;
      while (column < columns && marked(first + row * columns + column)) column++;
      if (column === begin) continue;
      boxes.left.push(west + begin * dx);
      boxes.right.push(west + column * dx);
      boxes.bottom.push(south + row * dy);
      boxes.top.push(south + (row + 1) * dy);
    }
  }
}

function showStations() {
  const { content, arrays } = state;
  const layer = theLayer();
  const dots = { x: [], y: [], fill: [] };
  const crosses = { x: [], y: [] };
  const valued = [];
  content.stations.forEach((station, number) => {
    if (!Number.isFinite(station.x)) return;
    const used = reasonsOf(content, arrays, number, state.hour) === "";
    const group = used ? dots : crosses;
    group.x.push(station.x);
    group.y.push(station.y);
    if (!used) return;
    const value = stationValue(content, arrays, layer, number, state.hour);
    dots.fill.push(colourOf(layer, value));
    if (Number.isFinite(value)) valued.push({ ...station, value });
  });
  fill("dots", dots);
  fill("crosses", crosses);
  fill("values", placeValues(valued, layer));
}

function colourOf(layer, value) {
  if (!Number.isFinite(value)) return "#ffffff";
  const count = layer.palette.length;
  const number = Math.floor(((value - layer.low) / (layer.high - layer.low)) * count);
  return layer.palette[Math.min(Math.max(number, 0), count - 1)];
}

// Values where none covers another or a station; those without room are left out.
function placeValues(valued, layer) {
  const placed = { x: [], y: [], text: [], dx: [], dy: [] };
  if (!element("show-values").checked) return placed;
  const taken = state.content.stations
    .filter((station) => Number.isFinite(station.x))
    .map((station) => [...toPixels(station.x, station.y), DOT_ROOM, DOT_ROOM]);
  const frame = state.models.map;
  for (const station of valued) {
    const [x, y] = toPixels(station.x, station.y);
    const text = formatNumber(station.value, layer.kind === "change" ? 1 : 0);
    const [width, height] = [LETTER * text.length + 6, VALUE_HEIGHT];
    const [right, above] = [DOT_ROOM + width / 2, DOT_ROOM + height / 2];
    for (const [dx, dy] of [[right, 0], [-right, 0], [0, -above], [0, above]]) {
      const box = [x + dx, y + dy, width / 2, height / 2];
      const inside =
        Math.abs(box[0] - frame.inner_width / 2) < frame.inner_width / 2 - width / 2 &&
        Math.abs(box[1] - frame.inner_height / 2) < frame.inner_height / 2 - height / 2;
      const apart = ([u, v, a, b]) =>
        Math.abs(u - box[0]) >= a + box[2] || Math.abs(v - box[1]) >= b + box[3];
      if (!inside || !taken.every(apart)) continue;
      taken.push(box);
      placed.x.push(station.x);
      placed.y.push(station.y);
      placed.text.push(text);
      placed.dx.push(dx);
      placed.dy.push(dy);
      break;
    }
  }
  return placed;
}

// Place in the frame of the map [px], from its upper left corner.
function toPixels(x, y) {
  const { x_range, y_range, inner_width, inner_height } = state.models.map;
  return [
    ((x - x_range.start) / (x_range.end - x_range.start)) * inner_width,
    ((y_range.end - y) / (y_range.end - y_range.start)) * inner_height,
  ];
}

// Station under a place on the map [m], -1 if there is none.
function stationAt(x, y) {
  const reach = matchMedia("(pointer: coarse)").matches ? REACH.touch : REACH.mouse;
  const [u, v] = toPixels(x, y);
  let nearest = -1;
  let distance = reach;
  state.content.stations.forEach((station, number) => {
    const [a, b] = toPixels(station.x, station.y);
    const away = Math.hypot(a - u, b - v);
    if (away <= distance) [nearest, distance] = [number, away];
  });
  return nearest;
}

// One line about what is under the pointer.
function describePlace(x, y) {
  const { content, arrays, hour } = state;
  const station = stationAt(x, y);
  if (station >= 0) return `${stationTitle(content.stations[station])}: ${stationFacts(station)}`;
  const cell = cellAt(content, arrays, x, y);
  if (cell < 0) return "";
  const layer = theLayer();
  const value = layerValues(content, arrays, layer, hour, state.threshold)(cell);
  const words = Number.isFinite(value)
    ? `${formatNumber(value, layer.digits, layer.kind === "change")}${SPACE}${layer.unit}`
    : content.missing.words;
  return `${cellPlace(cell)}: ${words}${cellDoubts(cell)}`;
}

function cellPlace(cell) {
  const { longitude, latitude, terrain } = state.arrays;
  return `${formatPlace(longitude.at(cell), latitude.at(cell))}, ${formatNumber(terrain.at(cell), 0)} m`;
}

function cellDoubts(cell) {
  const { content, arrays, hour } = state;
  const i = hour * cellCount() + cell;
  if (arrays.pwv.counts[i] === -32768) return "";
  return content.cell_flags
    .filter((flag) => arrays.flag.counts[i] & flag.bit)
    .map((flag) => `; ${flag.words}`)
    .join("");
}

function stationFacts(station) {
  const { content, arrays, hour } = state;
  const i = station * content.end.length + hour;
  const value = formatWithSigma(arrays.station_pwv.at(i), arrays.station_pwv_sigma.at(i), 1);
  const residual = formatWithSigma(
    arrays.station_residual.at(i), arrays.station_residual_sigma.at(i), 1, true);
  const reason = reasonsOf(content, arrays, station, hour);
  const facts = [];
  if (value !== "–") facts.push(`${value}${SPACE}${UNIT}`);
  if (residual !== "–") facts.push(`${residual} against the other stations`);
  if (reason) facts.push(`not used: ${reason}`);
  return facts.join("; ");
}
