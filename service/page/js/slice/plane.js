// Which plane a slice is on: members of a request, words, and the way through the cell that its slider goes.

import { vector } from "../lattice.js";

const MOST = 420;
const ACROSS = { ab: [0, 1, 2], bc: [1, 2, 0], ca: [2, 0, 1] };
/** Samples to the finest spacing: contours and colours are smooth between them. */
const FINENESS = 12;

export const AXES = [
  ["ab", "a and b"],
  ["bc", "b and c"],
  ["ca", "c and a"],
];

export function indicesOf(state) {
  return vector(state.hkl, 3, true) ?? [0, 0, 1];
}

/** Indices of the planes that a slice is parallel to; null for the one plane of a planar lattice. */
export function familyOf(state, lattice) {
  if (lattice.dimension === 2) return null;
  if (state.cut === "plane") return indicesOf(state);
  const across = ACROSS[state.axes] ?? ACROSS.ab;
  return [0, 1, 2].map((axis) => (axis === across[2] ? 1 : 0));
}

/** The slider's way: {least, most, step, value, member, unit} in Å or as a fraction; null where there is none. */
export function wayOf(state, lattice) {
  const family = familyOf(state, lattice);
  if (!family) return null;
  if (state.cut === "plane") {
    const most = lattice.spacing(family);
    return { least: 0, most, step: most / 200, value: state.offset, member: "offset", unit: "Å" };
  }
  return { least: 0, most: 1, step: 0.005, value: state.height, member: "height", unit: "" };
}

/** Width of a slice parallel to planes, Å. */
export function widthOf(state, lattice) {
  return state.width ?? Number((1.25 * Math.max(...lattice.lengths)).toPrecision(3));
}

function spacing(extent, d_min) {
  return Math.max((d_min ?? extent / 20) / FINENESS, extent / MOST);
}

/** Members of the request of a slice. */
export function planeMembers(state, lattice, d_min) {
  if (lattice.dimension === 3 && state.cut === "plane") {
    const width = widthOf(state, lattice);
    return { plane: indicesOf(state), offset: state.offset, width, height: width, spacing: Number(spacing(width, d_min).toPrecision(3)) };
  }
  const [first, second, third] = lattice.dimension === 2 ? [0, 1, null] : (ACROSS[state.axes] ?? ACROSS.ab);
  const unit = (axis, length) => lattice.lengths.map((_, i) => (i === axis ? length : 0));
  const cells = Math.min(4, Math.max(1, state.cells));
  const extents = [first, second].map((axis) => cells * lattice.lengths[axis]);
  const step = Math.max(...extents.map((extent) => spacing(extent, d_min)));
  return {
    origin: third === null ? unit(first, 0) : unit(third, state.height),
    edge_1: unit(first, cells),
    edge_2: unit(second, cells),
    shape: extents.map((extent) => Math.max(12, Math.ceil(extent / step) + 1)),
    include_end: true,
  };
}

export function planeWords(state, lattice) {
  if (lattice.dimension === 2) return "The plane";
  if (state.cut === "plane") return `Parallel to (${indicesOf(state).join(" ")})`;
  const [first, second] = ACROSS[state.axes] ?? ACROSS.ab;
  return `Across ${lattice.names[first]} and ${lattice.names[second]}`;
}

/** Names of the edges of a picture along the cell. */
export function edgeNames(state, lattice) {
  if (lattice.dimension === 2) return ["a", "b"];
  if (state.cut === "plane") return null;
  const [first, second] = ACROSS[state.axes] ?? ACROSS.ab;
  return [lattice.names[first], lattice.names[second]];
}
