// Bare samples of the service as an array, with what their header says of them.

import { ask, productAddress } from "../service.js";

const HELD = 80;
const held = new Map();

/** A slice by its address; the last ones are kept. */
export async function samplesOf(record, product, members) {
  const address = productAddress(record.id, product, members, "u16");
  const kept = held.get(address);
  if (kept) {
    held.delete(address);
    held.set(address, kept);
    return kept;
  }
  const found = await fetchSamples(address);
  held.set(address, found);
  if (held.size > HELD) held.delete(held.keys().next().value);
  return found;
}

export function isHeld(record, product, members) {
  return held.has(productAddress(record.id, product, members, "u16"));
}

async function fetchSamples(address) {
  const answer = await ask(address);
  const told = JSON.parse(answer.headers.get("Samples-Description"));
  const steps = little(await answer.arrayBuffer());
  const values = new Float32Array(steps.length);
  for (let i = 0; i < steps.length; i += 1) values[i] = steps[i] === told.no_value ? NaN : told.offset + told.scale * steps[i];
  const [first, second] = told.axes;
  return { ...told, values, first, second };
}

/** Unsigned 16-bit numbers, little-endian on every machine. */
function little(buffer) {
  const native = new Uint8Array(new Uint16Array([1]).buffer)[0] === 1;
  if (native) return new Uint16Array(buffer);
  const view = new DataView(buffer);
  return Uint16Array.from({ length: buffer.byteLength / 2 }, (_, i) => view.getUint16(2 * i, true));
}
