"use strict";
// Numbers and times as words.

const MINUS = "\u2212";
const SPACE = "\u00a0"; // between what must stay on one line
const UNIT = `kg${SPACE}m⁻²`;

function formatNumber(value, digits, signed) {
  if (!Number.isFinite(value)) return "–";
  const text = Math.abs(value).toFixed(digits);
  const zero = Number(text) === 0;
  if (value < 0 && !zero) return MINUS + text;
  return signed && !zero ? "+" + text : text;
}

function formatWithSigma(value, sigma, digits, signed) {
  const text = formatNumber(value, digits, signed);
  return Number.isFinite(sigma) ? `${text}${SPACE}±${SPACE}${formatNumber(sigma, digits)}` : text;
}

function formatClock(seconds, zone) {
  const options = { hour: "2-digit", minute: "2-digit", hourCycle: "h23", timeZone: zone };
  return new Intl.DateTimeFormat("en-GB", options).format(1000 * seconds);
}

function formatDay(seconds, zone) {
  const options = { weekday: "short", day: "numeric", month: "short", year: "numeric" };
  return new Intl.DateTimeFormat("en-GB", { ...options, timeZone: zone }).format(1000 * seconds);
}

function zoneName(seconds) {
  const parts = new Intl.DateTimeFormat("en-GB", { timeZoneName: "short" });
  return parts.formatToParts(1000 * seconds).find((part) => part.type === "timeZoneName").value;
}

// An hour in UTC and on the browser's clock; the end of a day is 24:00.
function formatHour(start, end) {
  const finish = (zone) => formatClock(end, zone).replace("00:00", "24:00");
  const utc = `${formatClock(start, "UTC")}–${finish("UTC")} UTC`;
  const local = `${formatClock(start)}–${finish()} ${zoneName(end)}`;
  const otherDay = formatDay(start) === formatDay(start, "UTC") ? "" : `${formatDay(start)}, `;
  return { utc: `${formatDay(start, "UTC")}, ${utc}`, local: `local ${otherDay}${local}` };
}

function formatAge(seconds) {
  const minutes = Math.round(seconds / 60);
  if (minutes < 120) return `${minutes} min`;
  const hours = Math.round(seconds / 3600);
  return hours < 72 ? `${hours} h` : `${Math.round(seconds / 86400)} days`;
}

function formatPlace(longitude, latitude) {
  const side = (value, letters) => `${Math.abs(value).toFixed(2)}° ${letters[Number(value < 0)]}`;
  return `${side(latitude, "NS")}, ${side(((longitude + 540) % 360) - 180, "EW")}`;
}

function stationTitle(station) {
  return station.name && station.name !== station.id ? `${station.id}, ${station.name}` : station.id;
}
