"use strict";
// Undoes packing.py: base64, deflate, low bytes before high bytes, differences along every axis.

async function inflate(text) {
  const letters = atob(text);
  const bytes = new Uint8Array(letters.length);
  for (let i = 0; i < letters.length; i++) bytes[i] = letters.charCodeAt(i);
  const stream = new Blob([bytes]).stream().pipeThrough(new DecompressionStream("deflate"));
  return new Uint8Array(await new Response(stream).arrayBuffer());
}

function addUp(counts, shape) {
  let stride = 1;
  for (let axis = shape.length - 1; axis >= 0; axis--) {
    const block = stride * shape[axis];
    for (let start = 0; start < counts.length; start += block)
      for (let i = start + stride; i < start + block; i++) counts[i] += counts[i - stride];
    stride = block;
  }
}

async function unpack(packed) {
  const bytes = await inflate(packed.data);
  const size = bytes.length / 2;
  const counts = new Int16Array(size);
  for (let i = 0; i < size; i++) counts[i] = bytes[i] | (bytes[size + i] << 8);
  addUp(counts, packed.shape);
  return {
    counts,
    shape: packed.shape,
    at(i) {
      return counts[i] === -32768 ? NaN : packed.offset + counts[i] * packed.step;
    },
  };
}

async function unpackAll(arrays) {
  const names = Object.keys(arrays);
  const unpacked = await Promise.all(names.map((name) => unpack(arrays[name])));
  return Object.fromEntries(names.map((name, number) => [name, unpacked[number]]));
}
