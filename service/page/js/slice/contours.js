// Contour lines by marching squares: pieces of straight lines, in counts of samples.

import { niceStep } from "../numbers.js";

const MOST = 60;

/** Levels at multiples of a step between two values. */
export function levelsAt(step, low, high, withZero) {
  if (!(step > 0)) return [];
  const [first, last] = [Math.ceil(low / step), Math.floor(high / step)];
  if (last - first > MOST) return null;
  const multiples = Array.from({ length: Math.max(0, last - first + 1) }, (_, i) => first + i);
  return multiples.filter((multiple) => withZero || multiple !== 0).map((multiple) => multiple * step);
}

export function autoStep(low, high) {
  return niceStep(high - low, 8);
}

/**
 * Line pieces of one level through values of n1 × n2 samples, the second index running fastest.
 *
 * Returns a flat list i, j, i′, j′ of ends. Of the two ways through a saddle the mean of the four corners decides.
 */
export function piecesOf(values, n1, n2, level) {
  const found = [];
  for (let i = 0; i + 1 < n1; i += 1) {
    for (let j = 0; j + 1 < n2; j += 1) {
      const at = i * n2 + j;
      // Corners in a round: (i, j), (i+1, j), (i+1, j+1), (i, j+1).
      const a = values[at] - level;
      const b = values[at + n2] - level;
      const c = values[at + n2 + 1] - level;
      const d = values[at + 1] - level;
      const kind = (a > 0 ? 1 : 0) | (b > 0 ? 2 : 0) | (c > 0 ? 4 : 0) | (d > 0 ? 8 : 0);
      if (kind === 0 || kind === 15 || Number.isNaN(a + b + c + d)) continue;
      const bottom = () => found.push(i + a / (a - b), j);
      const right = () => found.push(i + 1, j + b / (b - c));
      const top = () => found.push(i + d / (d - c), j + 1);
      const left = () => found.push(i, j + a / (a - d));
      const inside = a + b + c + d > 0;
      switch (kind) {
        case 1:
        case 14:
          left();
          bottom();
          break;
        case 2:
        case 13:
          bottom();
          right();
          break;
        case 4:
        case 11:
          right();
          top();
          break;
        case 8:
        case 7:
          top();
          left();
          break;
        case 3:
        case 12:
          left();
          right();
          break;
        case 6:
        case 9:
          bottom();
          top();
          break;
        default:
          // 5 (a and c are high) or 10 (b and d are high).
          if ((kind === 5) === inside) {
            left();
            top();
            bottom();
            right();
          } else {
            left();
            bottom();
            right();
            top();
          }
      }
    }
  }
  return found;
}
