"use strict";
// Values of the layers: `content` is what content.py describes, `arrays` its unpacked arrays.

// Probability that a standard normal value exceeds z; within 1e-7 (Abramowitz and Stegun 1964,
// equation 26.2.17).
function exceedance(z) {
  const t = 1 / (1 + 0.2316419 * Math.abs(z));
  const series =
    t * (0.31938153 + t * (-0.356563782 + t * (1.781477937 + t * (-1.821255978 + t * 1.330274429))));
  const tail = (series * Math.exp((-z * z) / 2)) / Math.sqrt(2 * Math.PI);
  return z >= 0 ? tail : 1 - tail;
}

// Number of the hour that ends so many hours before another, -1 if the page has none.
function hourBefore(content, hour, hours) {
  return content.end.indexOf(content.end[hour] - 3600 * hours);
}

// A function of a cell: its value in an hour; NaN where there is none.
function layerValues(content, arrays, layer, hour, threshold) {
  const [, rows, columns] = arrays.pwv.shape;
  const first = hour * rows * columns;
  const array = arrays[layer.array];
  if (layer.kind === "change") {
    const earlier = hourBefore(content, hour, layer.hours);
    if (earlier < 0) return () => NaN;
    return (cell) => array.at(first + cell) - array.at(earlier * rows * columns + cell);
  }
  if (layer.kind === "probability") {
    const sigma = arrays.pwv_sigma;
    return (cell) =>
      100 * exceedance((threshold - array.at(first + cell)) / sigma.at(first + cell));
  }
  return (cell) => array.at(first + cell);
}

// What a station says to a layer; NaN where it is not used, or the layer is not of stations.
function stationValue(content, arrays, layer, station, hour) {
  const hours = content.end.length;
  const used = (h) => h >= 0 && arrays.station_flag.counts[station * hours + h] === 0;
  const value = (h) => arrays.station_pwv.at(station * hours + h);
  if (layer.kind === "change") {
    const earlier = hourBefore(content, hour, layer.hours);
    return used(hour) && used(earlier) ? value(hour) - value(earlier) : NaN;
  }
  if (layer.kind === "probability" || layer.array !== "pwv") return NaN;
  return used(hour) ? value(hour) : NaN;
}

// Why a station is not used in an hour, in words; empty where it is.
function reasonsOf(content, arrays, station, hour) {
  const flag = arrays.station_flag.counts[station * content.end.length + hour];
  return Object.keys(content.reasons)
    .filter((bit) => flag & Number(bit))
    .map((bit) => content.reasons[bit])
    .join(", ");
}

// Last hour that has a field, -1 if none has.
function newestHour(content, arrays) {
  const [hours, rows, columns] = arrays.pwv.shape;
  for (let hour = hours - 1; hour >= 0; hour--) {
    const first = hour * rows * columns;
    for (let i = first; i < first + rows * columns; i++)
      if (arrays.pwv.counts[i] !== -32768) return hour;
  }
  return -1;
}

// Cell at a place on the map [m], -1 outside.
function cellAt(content, arrays, x, y) {
  const [west, east, south, north] = content.bounds;
  const [, rows, columns] = arrays.pwv.shape;
  const column = Math.floor(((x - west) / (east - west)) * columns);
  const row = Math.floor(((y - south) / (north - south)) * rows);
  const inside = column >= 0 && column < columns && row >= 0 && row < rows;
  return inside ? row * columns + column : -1;
}
