"use strict";
// The hours of one place: a cell with its 68 % band, or a station with what is used and what not.

function showSeries() {
  const empty = { time: [], pwv: [] };
  const columns = {
    band: { start: [], end: [], low: [], high: [] },
    line: empty, others: empty, used: empty, rejected: empty,
    bars: { time: [], low: [], high: [] },
  };
  const { place } = state;
  Object.assign(columns, "station" in place ? stationSeries(place.station) : cellSeries(place.cell));
  for (const [name, values] of Object.entries(columns)) fill(name, values);
  setRanges(Object.values(columns));
  showPlaceWords();
  showChosen();
}

// All hours of the page from side to side, all values of the place from bottom to top.
function setRanges(columns) {
  const { start, end } = state.content;
  const { x_range, y_range } = state.models.series;
  x_range.setv({ start: 1000 * start[0], end: 1000 * end[end.length - 1] });
  const values = columns
    .flatMap(({ pwv = [], low = [], high = [] }) => [pwv, low, high].flat())
    .filter(Number.isFinite);
  if (!values.length) return;
  const [low, high] = [Math.min(...values), Math.max(...values)];
  const margin = Math.max(0.06 * (high - low), 0.5);
  y_range.setv({ start: low - margin, end: high + margin });
}

const middle = (hour) => 500 * (state.content.start[hour] + state.content.end[hour]);

// A line over the hours, broken where hours are missing.
function brokenLine(value) {
  const { start, end } = state.content;
  const line = { time: [], pwv: [] };
  end.forEach((_, hour) => {
    if (hour && start[hour] > end[hour - 1]) {
      line.time.push(500 * (end[hour - 1] + start[hour]));
      line.pwv.push(NaN);
    }
    line.time.push(middle(hour));
    line.pwv.push(value(hour));
  });
  return line;
}

function cellSeries(cell) {
  const { content, arrays } = state;
  const value = (array) => (hour) => arrays[array].at(hour * cellCount() + cell);
  const band = { start: [], end: [], low: [], high: [] };
  content.end.forEach((end, hour) => {
    const [pwv, sigma] = [value("pwv")(hour), value("pwv_sigma")(hour)];
    if (!Number.isFinite(pwv)) return;
    band.start.push(1000 * content.start[hour]);
    band.end.push(1000 * end);
    band.low.push(pwv - sigma);
    band.high.push(pwv + sigma);
  });
  return { band, line: brokenLine(value("pwv")) };
}

function stationSeries(station) {
  const { content, arrays } = state;
  const value = (name, hour) => arrays[`station_${name}`].at(station * content.end.length + hour);
  const used = { time: [], pwv: [] };
  const rejected = { time: [], pwv: [] };
  const bars = { time: [], low: [], high: [] };
  content.end.forEach((_, hour) => {
    const pwv = value("pwv", hour);
    if (!Number.isFinite(pwv)) return;
    const isUsed = reasonsOf(content, arrays, station, hour) === "";
    const points = isUsed ? used : rejected;
    points.time.push(middle(hour));
    points.pwv.push(pwv);
    const sigma = value("pwv_sigma", hour);
    if (!isUsed || !Number.isFinite(sigma)) return;
    bars.time.push(middle(hour));
    bars.low.push(pwv - sigma);
    bars.high.push(pwv + sigma);
  });
  const others = brokenLine((hour) => value("pwv", hour) - value("residual", hour));
  return { used, rejected, bars, others };
}

function showPlaceWords() {
  const { content, arrays, place, hour } = state;
  if ("station" in place) {
    const station = content.stations[place.station];
    say("place-title", `Station ${stationTitle(station)}`);
    const where = `${formatPlace(station.longitude, station.latitude)}, ${formatNumber(station.height, 0)} m`;
    say("place-facts", `${where}; ${stationFacts(place.station)}`);
    showKey([["point", "used, ± standard error"], ["cross", "not used"],
             ["dashes", "what the other stations say"]]);
    return;
  }
  const i = hour * cellCount() + place.cell;
  const value = formatWithSigma(arrays.pwv.at(i), arrays.pwv_sigma.at(i), 2);
  say("place-title", "Precipitable water vapour at a place");
  const words = value === "–" ? content.missing.words : `${value}${SPACE}${UNIT}`;
  say("place-facts", `${cellPlace(place.cell)} (mean of the cell). ${words}${cellDoubts(place.cell)}`);
  showKey([["line", "mean over the cell and the hour"], ["band", "68 % band"]]);
}

function showKey(entries) {
  const key = element("series-key");
  key.replaceChildren();
  for (const [mark, words] of entries) {
    const entry = addElement(key, "span", "entry");
    addElement(entry, "i", `mark ${mark}`);
    addElement(entry, "span", "", words);
  }
}

// A ring round the station or cell that is chosen.
function showChosen() {
  const { content, arrays, place } = state;
  if ("station" in place) {
    const { x, y } = content.stations[place.station];
    fill("chosen", { x: [x], y: [y] });
    return;
  }
  const [west, east, south, north] = content.bounds;
  const [, rows, columns] = arrays.pwv.shape;
  const row = Math.floor(place.cell / columns);
  const column = place.cell % columns;
  fill("chosen", {
    x: [west + ((column + 0.5) / columns) * (east - west)],
    y: [south + ((row + 0.5) / rows) * (north - south)],
  });
}

function showMarkers() {
  const { now, threshold } = state.models;
  now.location = middle(state.hour);
  threshold.setv({ location: state.threshold, visible: theLayer().kind === "probability" });
}
