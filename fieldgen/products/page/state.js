"use strict";
// What the page shows now. Text of files goes into elements as text (`say`), never as HTML.

const state = {
  content: null,
  arrays: null,
  models: null,
  layer: 0,
  hour: 0,
  newest: -1,
  threshold: 0,
  place: null, // {cell} or {station}
};

const element = (id) => document.getElementById(id);

function say(id, text) {
  const target = element(id);
  if (target.textContent !== text) target.textContent = text;
}

function addElement(parent, kind, className, text) {
  const child = document.createElement(kind);
  if (className) child.className = className;
  if (text) child.textContent = text;
  parent.append(child);
  return child;
}

function fill(name, columns) {
  state.models[name].data = columns;
}

const theLayer = () => state.content.layers[state.layer];
const cellCount = () => state.arrays.terrain.counts.length;
