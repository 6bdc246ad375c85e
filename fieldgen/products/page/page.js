"use strict";
// The page: it begins when Bokeh has drawn its figures, and answers sliders, keys and clicks.

const FRAME = 700; // between hours while playing [ms]
let playing = null;

state.content = JSON.parse(element("content").textContent);
const unpacking = unpackAll(state.content.arrays); // while Bokeh draws its figures

const fieldgenPage = {
  state,
  ready: false,

  async start(models) {
    if (state.models) return;
    state.models = models;
    state.arrays = await unpacking;
    state.newest = newestHour(state.content, state.arrays);
    state.hour = Math.max(state.newest, 0);
    state.threshold = state.content.threshold.first;
    state.place = { cell: firstCell() };
    buildControls();
    letFingersScroll(document);
    showLayer();
    showHour();
    showSeries();
    showAge();
    setInterval(showAge, 20000);
    fieldgenPage.ready = true;
  },

  pick(x, y) {
    if (!state.arrays) return;
    const station = stationAt(x, y);
    const cell = cellAt(state.content, state.arrays, x, y);
    if (station >= 0) state.place = { station };
    else if (cell >= 0) state.place = { cell };
    else return;
    showSeries();
  },

  point(x, y) {
    if (state.arrays) say("pointer", describePlace(x, y));
  },

  moved() {
    if (state.arrays) showStations();
  },

  // Show the hour that holds an instant [s since 1970].
  goTo(time) {
    const hour = state.content.end.findIndex((end) => end >= time);
    setHour(hour < 0 ? state.content.end.length - 1 : hour);
  },
};

// The land cell nearest to the middle of the map; without land, the middle.
function firstCell() {
  const { arrays } = state;
  const [, rows, columns] = arrays.pwv.shape;
  const away = (cell) =>
    Math.hypot(Math.floor(cell / columns) - rows / 2, (cell % columns) - columns / 2) +
    (arrays.terrain.counts[cell] > 0 ? 0 : rows + columns);
  let nearest = 0;
  for (let cell = 1; cell < cellCount(); cell++) if (away(cell) < away(nearest)) nearest = cell;
  return nearest;
}

// Let a finger on a figure scroll the page: Bokeh keeps all touches for its own tools.
function letFingersScroll(root) {
  for (const one of root.querySelectorAll("*")) {
    if (one.matches(".bk-events")) one.style.touchAction = "pan-y pinch-zoom";
    if (one.shadowRoot) letFingersScroll(one.shadowRoot);
  }
}

function setHour(hour) {
  state.hour = Math.min(Math.max(hour, 0), state.content.end.length - 1);
  showHour();
}

function showHour() {
  const { content, hour } = state;
  const words = formatHour(content.start[hour], content.end[hour]);
  const line = element("hour");
  line.replaceChildren();
  addElement(line, "strong", "", words.utc);
  addElement(line, "span", "", words.local);
  const count = content.station_count[hour];
  addElement(line, "span", "", `${count} station${count === 1 ? "" : "s"} used`);
  element("time").value = hour;
  element("time").setAttribute("aria-valuetext", words.utc);
  showColours();
  showFlags();
  showStations();
  showUnused();
  showPlaceWords();
  showMarkers();
}

function showLayer() {
  element("threshold-row").hidden = theLayer().kind !== "probability";
  say("threshold-value", `${state.threshold}${SPACE}${UNIT}`);
  showColourBar();
}

function showUnused() {
  const list = element("unused");
  list.replaceChildren();
  state.content.stations.forEach((station, number) => {
    const reason = reasonsOf(state.content, state.arrays, number, state.hour);
    if (!reason) return;
    const button = addElement(addElement(list, "li"), "button", "station", stationTitle(station));
    button.type = "button";
    button.addEventListener("click", () => {
      state.place = { station: number };
      showSeries();
    });
    addElement(list.lastElementChild, "span", "", reason);
  });
  if (!list.children.length) addElement(list, "li", "", "none");
}

// Age of the newest hour that has a field, by the browser's clock.
function showAge() {
  const { content, newest } = state;
  const badge = element("age");
  const age = newest < 0 ? Infinity : Date.now() / 1000 - content.end[newest];
  const old = age > 3600 * content.old_after;
  badge.classList.toggle("old", old);
  if (newest < 0) say("age", "Old data: no hour of this page has a field");
  else {
    const stamp = `${old ? "Old data: n" : "N"}ewest hour ended ${formatClock(content.end[newest], "UTC")} UTC`;
    say("age", `${stamp}, ${formatAge(Math.max(age, 0))} ago`);
  }
}

function buildControls() {
  const { content } = state;
  say("network", content.network);
  content.layers.forEach((layer, number) => {
    const label = addElement(element("layers"), "label");
    const radio = addElement(label, "input");
    Object.assign(radio, { type: "radio", name: "layer", checked: number === state.layer });
    addElement(label, "span", "", layer.short);
    radio.addEventListener("change", () => {
      state.layer = number;
      showLayer();
      showColours();
      showStations();
      showMarkers();
    });
  });
  buildThreshold(content.threshold);
  buildTime(content.end.length);
  buildLegend(content);
  for (const id of ["show-values", "show-flags"])
    element(id).addEventListener("change", () => (showFlags(), showStations()));
  element("show-catchments").addEventListener("change", (event) => {
    state.models.catchments.visible = event.target.checked;
  });
  state.models.catchments.visible = element("show-catchments").checked;
  addEventListener("keydown", onKey);
}

function buildThreshold({ low, high }) {
  const slider = element("threshold");
  Object.assign(slider, { min: low, max: high, value: state.threshold });
  slider.addEventListener("input", () => {
    state.threshold = Number(slider.value);
    showLayer();
    showColours();
    showMarkers();
  });
}

function buildTime(hours) {
  const slider = element("time");
  slider.max = hours - 1;
  slider.addEventListener("input", () => setHour(Number(slider.value)));
  element("back").addEventListener("click", () => setHour(state.hour - 1));
  element("forth").addEventListener("click", () => setHour(state.hour + 1));
  element("newest").addEventListener("click", () => setHour(Math.max(state.newest, 0)));
  element("play").addEventListener("click", togglePlay);
}

function togglePlay() {
  if (playing === null) {
    const hours = state.content.end.length;
    playing = setInterval(() => setHour((state.hour + 1) % hours), FRAME);
  } else {
    clearInterval(playing);
    playing = null;
  }
  say("play", playing === null ? "Play" : "Pause");
}

function buildLegend(content) {
  const marks = element("marks");
  const add = (mark, words) => {
    const entry = addElement(marks, "li");
    addElement(entry, "i", `mark ${mark}`);
    addElement(entry, "span", "", words);
  };
  add("dot", "station used, with its value");
  add("cross ink", "station not used this hour");
  for (const flag of content.cell_flags) add(flag.meaning, flag.words);
  add("missing", content.missing.words);
}

// Keys that move through the hours, unless the threshold's slider has the focus, which needs them
// itself; up and down are left to the layers' buttons.
function onKey(event) {
  const focus = document.activeElement;
  const needsKeys = focus?.matches?.("#threshold");
  if (event.ctrlKey || event.altKey || event.metaKey || needsKeys) return;
  if (event.key === " " && focus?.matches?.("button, input")) return;
  const action = {
    ArrowLeft: () => setHour(state.hour - 1),
    ArrowRight: () => setHour(state.hour + 1),
    Home: () => setHour(0),
    End: () => setHour(Math.max(state.newest, 0)),
    " ": togglePlay,
  }[event.key];
  if (!action) return;
  event.preventDefault();
  action();
}

window.fieldgenPage = fieldgenPage;
