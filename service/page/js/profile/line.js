// Which line a profile is along: members of a request, words, and regions on it.

import { vector } from "../lattice.js";

/** Indices of the planes whose normal the profile is along. */
export function normalOf(state, record) {
  const size = record.dimension;
  return vector(state.normal, size, true) ?? { 1: [1], 2: [1, 0], 3: [0, 0, 1] }[size];
}

function parts(text, size) {
  return vector(String(text).split(",").slice(0, size).join(","), size) ?? Array(size).fill(0);
}

/** Members that name the line; throws where the two points are one. */
export function lineMembers(state, record) {
  const size = record.dimension;
  if (state.line === "axis" && size > 1) {
    const along = vector(String(state.along), size, true) ?? (size === 2 ? [1, 0] : [0, 0, 1]);
    return { along };
  }
  if (state.line === "points") {
    const [from, to] = [parts(state.from, size), parts(state.to, size)];
    if (from.every((part, i) => part === to[i])) {
      throw Object.assign(new Error("Both ends of the line are one point: give two that differ."), { title: "There is no line" });
    }
    return { from, to };
  }
  const normal = normalOf(state, record);
  return size === 1 ? { normal_to: normal } : { normal_to: normal, "average.kind": "lateral" };
}

export function lineWords(state, record) {
  const line = lineMembersOrNull(state, record);
  if (!line) return "Profile";
  if (line.along) return `Along [${line.along.join(" ")}]`;
  if (line.from) return `From (${line.from.join(", ")}) to (${line.to.join(", ")})`;
  return record.dimension === 1 ? "Through the stack" : `Normal to (${line.normal_to.join(" ")}), averaged over the planes`;
}

function lineMembersOrNull(state, record) {
  try {
    return lineMembers(state, record);
  } catch {
    return null;
  }
}

/** Length of the line, Å. */
export function lengthOf(line, { lattice }) {
  if (line.normal_to) return lattice.spacing(line.normal_to);
  const start = line.from ?? line.along.map(() => 0);
  const end = line.to ?? line.along;
  return Math.hypot(...lattice.toCartesian(end.map((part, i) => part - start[i])));
}

/** The region of an interval on the line, for an integral; `length` of the line in Å. */
export function regionOf(line, from, to, length) {
  if (line.normal_to) return { kind: "slab", normal: line.normal_to, from, to };
  const start = line.from ?? line.along.map(() => 0);
  const end = line.to ?? line.along;
  const at = (place) => start.map((part, i) => part + ((end[i] - part) * place) / length);
  return { kind: "line", from: at(from), to: at(to) };
}
