// A small curve without axes: where there is something to see.

import { colour } from "./theme.js";

/** Draw values over the width of a canvas; `marked` is a share of the width, or null. */
export function spark(canvas, values, marked = null) {
  const [width, height] = [canvas.clientWidth, canvas.clientHeight];
  if (!width) return;
  canvas.width = Math.round(width * devicePixelRatio);
  canvas.height = Math.round(height * devicePixelRatio);
  const context = canvas.getContext("2d");
  context.scale(devicePixelRatio, devicePixelRatio);
  if (values) {
    const [low, high] = [Math.min(...values), Math.max(...values)];
    const y = (value) => height - 3 - ((height - 6) * (value - low)) / (high - low || 1);
    context.beginPath();
    values.forEach((value, i) => context.lineTo((width * i) / (values.length - 1), y(value)));
    context.strokeStyle = colour("--curve");
    context.lineWidth = 1.5;
    context.stroke();
    context.lineTo(width, height);
    context.lineTo(0, height);
    context.closePath();
    context.fillStyle = colour("--band");
    context.fill();
  }
  if (marked === null) return;
  context.strokeStyle = colour("--accent");
  context.lineWidth = 2;
  context.beginPath();
  context.moveTo(width * marked, 0);
  context.lineTo(width * marked, height);
  context.stroke();
}
