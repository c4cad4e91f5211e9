// Geometry of a cell of one, two or three dimensions: direct vectors are rows, in Å.

export function dot(a, b) {
  return a.reduce((sum, part, i) => sum + part * b[i], 0);
}

export function norm(a) {
  return Math.sqrt(dot(a, a));
}

export function combine(rows, weights) {
  return rows[0].map((_, axis) => rows.reduce((sum, row, i) => sum + weights[i] * row[axis], 0));
}

function inverse(rows) {
  const size = rows.length;
  const work = rows.map((row, i) => [...row, ...row.map((_, j) => (i === j ? 1 : 0))]);
  for (let column = 0; column < size; column += 1) {
    let pivot = column;
    for (let row = column; row < size; row += 1) if (Math.abs(work[row][column]) > Math.abs(work[pivot][column])) pivot = row;
    [work[column], work[pivot]] = [work[pivot], work[column]];
    const lead = work[column][column];
    work[column] = work[column].map((part) => part / lead);
    for (let row = 0; row < size; row += 1) {
      if (row === column) continue;
      const factor = work[row][column];
      work[row] = work[row].map((part, k) => part - factor * work[column][k]);
    }
  }
  return work.map((row) => row.slice(size));
}

export class Lattice {
  constructor(vectors) {
    this.vectors = vectors;
    this.dimension = vectors.length;
    this.lengths = vectors.map(norm);
    this.inverse = inverse(vectors);
    this.names = ["a", "b", "c"].slice(0, this.dimension);
  }

  /** Å from fractional. */
  toCartesian(fractional) {
    return combine(this.vectors, fractional);
  }

  /** Fractional from Å. */
  toFractional(cartesian) {
    return combine(this.inverse, cartesian);
  }

  /** How fast each fractional coordinate grows along a Cartesian direction, per Å. */
  growth(direction) {
    return this.toFractional(direction);
  }

  /** Spacing of the lattice planes of some indices, Å. */
  spacing(indices) {
    // |G|/2π = |Σ m_i a*_i|, and the columns of the inverse are the reciprocal vectors.
    const g = this.inverse.map((row) => dot(row, indices));
    return 1 / norm(g);
  }

  get volume() {
    const v = this.vectors;
    if (this.dimension === 1) return v[0][0];
    if (this.dimension === 2) return v[0][0] * v[1][1] - v[0][1] * v[1][0];
    const [a, b, c] = v;
    return a[0] * (b[1] * c[2] - b[2] * c[1]) - a[1] * (b[0] * c[2] - b[2] * c[0]) + a[2] * (b[0] * c[1] - b[1] * c[0]);
  }
}

/** Numbers of a text such as "0, 0, 1"; null where it is not so many numbers. */
export function vector(text, size, whole = false) {
  const parts = String(text)
    .replaceAll(MINUS, "-")
    .split(/[\s,;]+/)
    .filter(Boolean)
    .map(Number);
  if (parts.length !== size || !parts.every(Number.isFinite)) return null;
  if (whole && !(parts.every(Number.isInteger) && parts.some(Boolean))) return null;
  return parts;
}

const MINUS = "−";
