// Turning by hand: drag, wheel, two fingers, or keys. The orientation is a unit quaternion.

import { Quaternion, Vector3 } from "../../vendor/three/three.module.js";

const KEYS = { ArrowLeft: [0, -1], ArrowRight: [0, 1], ArrowUp: [-1, 0], ArrowDown: [1, 0] };
const ACROSS = new Vector3(1, 0, 0);
const UP = new Vector3(0, 1, 0);
const AHEAD = new Vector3(0, 0, 1);

export class Turntable {
  /** `changed(done)` is called at every turn; `done` once the hand rests. */
  constructor(element, changed) {
    this.turn = new Quaternion();
    this.zoom = 1;
    this.start = { turn: new Quaternion(), zoom: 1 };
    this.changed = changed;
    this.fingers = new Map();
    element.addEventListener("pointerdown", (event) => {
      element.setPointerCapture(event.pointerId);
      this.fingers.set(event.pointerId, [event.clientX, event.clientY]);
    });
    element.addEventListener("pointermove", (event) => this.#moved(event, element));
    for (const kind of ["pointerup", "pointercancel"]) {
      element.addEventListener(kind, (event) => {
        if (this.fingers.delete(event.pointerId)) this.changed(true);
      });
    }
    element.addEventListener(
      "wheel",
      (event) => {
        // The page scrolls as ever; with the control key, or by pinching a touch pad, the wheel zooms.
        if (!event.ctrlKey) return;
        event.preventDefault();
        this.scale(Math.exp(-event.deltaY / 300));
      },
      { passive: false },
    );
    element.addEventListener("keydown", (event) => this.#key(event));
  }

  /** Take an orientation as the one to come back to. */
  home(turn, zoom = 1) {
    this.start = { turn: turn.clone(), zoom };
  }

  set(turn, zoom) {
    this.turn.copy(turn).normalize();
    this.zoom = Math.min(20, Math.max(0.3, zoom));
  }

  scale(factor) {
    this.zoom = Math.min(20, Math.max(0.3, this.zoom * factor));
    this.changed(true);
  }

  rotate(axis, angle, done) {
    this.turn.premultiply(new Quaternion().setFromAxisAngle(axis, angle)).normalize();
    this.changed(done);
  }

  back() {
    this.set(this.start.turn, this.start.zoom);
    this.changed(true);
  }

  #moved(event, element) {
    const last = this.fingers.get(event.pointerId);
    if (!last) return;
    const now = [event.clientX, event.clientY];
    const others = [...this.fingers].filter(([id]) => id !== event.pointerId);
    if (others.length) {
      const [, still] = others[0];
      const before = Math.hypot(last[0] - still[0], last[1] - still[1]);
      const after = Math.hypot(now[0] - still[0], now[1] - still[1]);
      if (before > 0 && after > 0) this.zoom = Math.min(20, Math.max(0.3, (this.zoom * after) / before));
      const angle = Math.atan2(now[1] - still[1], now[0] - still[0]) - Math.atan2(last[1] - still[1], last[0] - still[0]);
      this.rotate(AHEAD, -angle, false);
    } else {
      // A drag across the picture is half a turn.
      const pace = Math.PI / Math.max(200, element.clientWidth);
      this.rotate(UP, (now[0] - last[0]) * pace, false);
      this.rotate(ACROSS, (now[1] - last[1]) * pace, false);
    }
    this.fingers.set(event.pointerId, now);
  }

  #key(event) {
    const step = KEYS[event.key];
    const angle = ((event.shiftKey ? 15 : 3) * Math.PI) / 180;
    if (step) {
      event.preventDefault();
      if (step[0]) this.rotate(ACROSS, step[0] * angle, true);
      if (step[1]) this.rotate(UP, step[1] * angle, true);
    } else if (event.key === "," || event.key === ".") this.rotate(AHEAD, event.key === "," ? angle : -angle, true);
    else if (event.key === "+" || event.key === "=") this.scale(1.15);
    else if (event.key === "-") this.scale(1 / 1.15);
    else if (event.key === "Home") {
      event.preventDefault();
      this.back();
    }
  }
}
