// Where the faces of unit cells cut a plane: there a fractional coordinate is a whole number.

const MOST = 60;
const NEAR = 1e-9;

/**
 * Ends of the traces inside a parallelogram, in Å along its two sides: a list of [[s, t], [s′, t′]].
 *
 * `origin` is its fractional corner, `growths` how fast each fractional coordinate grows along the two sides,
 * `lengths` those of the sides. Families of more lines than can be told apart are left out.
 */
export function tracesOf(origin, growths, lengths) {
  const found = [];
  const [l1, l2] = lengths;
  origin.forEach((start, axis) => {
    const [g1, g2] = [growths[0][axis], growths[1][axis]];
    if (Math.abs(g1) < NEAR && Math.abs(g2) < NEAR) return;
    const at = (s, t) => start + s * g1 + t * g2;
    const corners = [at(0, 0), at(l1, 0), at(0, l2), at(l1, l2)];
    const [least, most] = [Math.min(...corners), Math.max(...corners)];
    if (most - least > MOST) return;
    for (let whole = Math.ceil(least - NEAR); whole <= most + NEAR; whole += 1) {
      const ends = [];
      if (Math.abs(g1) > NEAR) for (const t of [0, l2]) ends.push([(whole - at(0, t)) / g1, t]);
      if (Math.abs(g2) > NEAR) for (const s of [0, l1]) ends.push([s, (whole - at(s, 0)) / g2]);
      const inside = ends.filter(([s, t]) => s > -1e-6 && s < l1 + 1e-6 && t > -1e-6 && t < l2 + 1e-6);
      if (inside.length < 2) continue;
      const [first] = inside;
      const away = ([s, t]) => Math.hypot(s - first[0], t - first[1]);
      found.push([first, inside.reduce((far, one) => (away(one) > away(far) ? one : far), first)]);
    }
  });
  return found;
}
