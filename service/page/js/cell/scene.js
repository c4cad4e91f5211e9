// The cell in space: surfaces, outline, axes and extrema, drawn when something changes and not otherwise.

import {
  AmbientLight,
  BufferAttribute,
  BufferGeometry,
  DirectionalLight,
  DoubleSide,
  Float32BufferAttribute,
  Group,
  LineBasicMaterial,
  LineSegments,
  Mesh,
  MeshBasicMaterial,
  MeshLambertMaterial,
  OrthographicCamera,
  Quaternion,
  SRGBColorSpace,
  Scene,
  SphereGeometry,
  Vector3,
  Matrix4,
  WebGLRenderer,
} from "../../vendor/three/three.module.js";
import { el, fill } from "../dom.js";
import { rgb } from "../theme.js";
import { Turntable } from "./turntable.js";

/** Whether this browser can draw in space at all. */
export function canDraw() {
  try {
    return Boolean(document.createElement("canvas").getContext("webgl2"));
  } catch {
    return false;
  }
}

export class CellScene {
  /** `turned(turn, zoom)` once the hand rests; `pointed(place)` with an extremum's place in the list, or null. */
  constructor(host, { turned, pointed }) {
    this.renderer = new WebGLRenderer({ antialias: true, alpha: true });
    this.canvas = this.renderer.domElement;
    this.labels = el("div", { class: "space-labels", "aria-hidden": "true" });
    this.box = el("div", { class: "space", tabindex: 0, role: "application", "aria-roledescription": "cell in space" }, this.canvas, this.labels);
    fill(host, this.box);
    this.scene = new Scene();
    this.cell = new Group();
    this.scene.add(this.cell);
    this.camera = new OrthographicCamera(-1, 1, 1, -1, 0.1, 10);
    // Light comes with the eye, so that every side that is seen is lit alike.
    const key = new DirectionalLight(0xffffff, 2.2);
    key.position.set(-0.5, 0.9, 1.4);
    const rim = new DirectionalLight(0xffffff, 0.7);
    rim.position.set(0.9, -0.5, 0.4);
    this.scene.add(new AmbientLight(0xffffff, 1.5), key, rim);
    this.surfaces = [];
    this.markers = [];
    this.places = [];
    this.turntable = new Turntable(this.box, (done) => {
      this.draw();
      if (done) turned(this.turntable.turn, this.turntable.zoom);
    });
    this.pointed = pointed;
    this.box.addEventListener("pointermove", (event) => this.#pick(event));
    this.box.addEventListener("pointerleave", () => this.pointed(null));
    this.watch = new ResizeObserver(() => this.draw());
    this.watch.observe(this.box);
  }

  destroy() {
    this.watch.disconnect();
    this.#clear(this.surfaces);
    this.renderer.dispose();
    this.renderer.forceContextLoss();
  }

  /** The lattice: outline and axes; the first view has c upwards and a to the right and front. */
  setLattice(lattice) {
    this.lattice = lattice;
    const [a, b, c] = lattice.vectors.map((row) => new Vector3(...row));
    this.centre = new Vector3().add(a).add(b).add(c).multiplyScalar(0.5);
    const corner = (i, j, k) => new Vector3().addScaledVector(a, i).addScaledVector(b, j).addScaledVector(c, k).sub(this.centre);
    const bits = [0, 1];
    const corners = bits.flatMap((i) => bits.flatMap((j) => bits.map((k) => corner(i, j, k))));
    this.radius = Math.max(...corners.map((one) => one.length()));
    const edges = [];
    for (const i of bits) for (const j of bits) edges.push(corner(0, i, j), corner(1, i, j), corner(i, 0, j), corner(i, 1, j), corner(i, j, 0), corner(i, j, 1));
    this.cell.clear();
    this.#clear(this.surfaces);
    this.outline = new LineSegments(new BufferGeometry().setFromPoints(edges), new LineBasicMaterial());
    const axes = [corner(0, 0, 0), corner(1, 0, 0), corner(0, 0, 0), corner(0, 1, 0), corner(0, 0, 0), corner(0, 0, 1)];
    this.axes = new LineSegments(new BufferGeometry().setFromPoints(axes), new LineBasicMaterial());
    this.cell.add(this.outline, this.axes);
    this.markers = [];
    this.ends = [
      ["0", corner(0, 0, 0)],
      ["a", corner(1.06, 0, 0)],
      ["b", corner(0, 1.06, 0)],
      ["c", corner(0, 0, 1.06)],
    ].map(([name, at]) => ({ at, node: el("span", { class: "axis-name" }, name) }));
    fill(this.labels, this.ends.map((end) => end.node));
    const up = c.clone().normalize();
    const out = new Vector3(0.45, -1, 0.3);
    const across = new Vector3().crossVectors(up, out).normalize();
    const ahead = new Vector3().crossVectors(across, up).normalize();
    const turn = new Quaternion().setFromRotationMatrix(new Matrix4().makeBasis(across, up, ahead)).invert();
    turn.premultiply(new Quaternion().setFromAxisAngle(new Vector3(1, 0, 0), 0.3));
    this.turntable.home(turn);
    this.turntable.set(turn, 1);
    this.recolour();
  }

  /** Surfaces in the place of those that are there: a list of {glb, below}. */
  setSurfaces(list) {
    this.#clear(this.surfaces);
    for (const { glb, below } of list) {
      if (!glb.indices.length) continue;
      const geometry = new BufferGeometry();
      geometry.setAttribute("position", new BufferAttribute(glb.position, 3));
      geometry.setIndex(new BufferAttribute(glb.indices, 1));
      if (glb.normal) geometry.setAttribute("normal", new BufferAttribute(glb.normal, 3));
      else geometry.computeVertexNormals();
      geometry.translate(-this.centre.x, -this.centre.y, -this.centre.z);
      const mesh = new Mesh(geometry, new MeshLambertMaterial({ side: DoubleSide }));
      mesh.userData.below = below;
      this.cell.add(mesh);
      this.surfaces.push(mesh);
    }
    this.recolour();
  }

  /** Extrema to mark: their Cartesian places, numbers and kinds. */
  setExtrema(extrema) {
    for (const marker of this.markers) {
      this.cell.remove(marker);
      marker.geometry.dispose();
      marker.material.dispose();
    }
    for (const { node } of this.places ?? []) node.remove();
    const ball = 0.018 * this.radius;
    this.markers = extrema.map((one) => {
      const fractional = one.fractional.map((part) => part - Math.floor(part + 1e-9));
      const marker = new Mesh(new SphereGeometry(ball, 16, 12), new MeshBasicMaterial({ depthTest: false, transparent: true, opacity: 0.92 }));
      marker.position.set(...this.lattice.toCartesian(fractional)).sub(this.centre);
      marker.renderOrder = 2;
      marker.userData.kind = one.kind;
      this.cell.add(marker);
      return marker;
    });
    this.places = extrema.map((one, i) => ({ at: this.markers[i].position, node: el("span", { class: "extremum-name" }, String(one.number)) }));
    this.labels.append(...this.places.map((place) => place.node));
    this.recolour();
  }

  highlight(place) {
    this.marked = place;
    this.recolour();
  }

  recolour() {
    if (!this.outline) return;
    const set = (material, name) => material.color.setRGB(...rgb(name), SRGBColorSpace);
    set(this.outline.material, "--soft");
    set(this.axes.material, "--ink");
    for (const mesh of this.surfaces) set(mesh.material, mesh.userData.below ? "--below" : "--surface");
    this.markers.forEach((marker, place) => {
      set(marker.material, place === this.marked ? "--mark" : "--ink");
      marker.scale.setScalar(place === this.marked ? 1.9 : 1);
    });
    this.places?.forEach(({ node }, place) => node.classList.toggle("on", place === this.marked));
    this.draw();
  }

  draw() {
    if (this.waiting || !this.lattice) return;
    this.waiting = requestAnimationFrame(() => {
      this.waiting = 0;
      this.#render();
    });
  }

  #render() {
    const [width, height] = [this.box.clientWidth, this.box.clientHeight];
    if (!width || !height) return;
    this.renderer.setPixelRatio(Math.min(2, devicePixelRatio));
    this.renderer.setSize(width, height, false);
    const reach = (1.02 * this.radius) / this.turntable.zoom;
    const [x, y] = width > height ? [(reach * width) / height, reach] : [reach, (reach * height) / width];
    Object.assign(this.camera, { left: -x, right: x, top: y, bottom: -y, near: 0.01, far: 8 * this.radius });
    this.camera.position.set(0, 0, 4 * this.radius);
    this.camera.updateProjectionMatrix();
    this.cell.quaternion.copy(this.turntable.turn);
    this.cell.updateMatrixWorld();
    this.camera.updateMatrixWorld();
    this.renderer.render(this.scene, this.camera);
    for (const { at, node } of [...this.ends, ...(this.places ?? [])]) {
      const [left, top] = this.#screen(at);
      node.style.transform = `translate(${left.toFixed(1)}px, ${top.toFixed(1)}px)`;
    }
    this.box.dataset.drawn = String(this.surfaces.reduce((sum, mesh) => sum + mesh.geometry.index.count / 3, 0));
  }

  #screen(at) {
    const seen = at.clone().applyQuaternion(this.cell.quaternion).project(this.camera);
    return [((seen.x + 1) / 2) * this.box.clientWidth, ((1 - seen.y) / 2) * this.box.clientHeight];
  }

  #pick(event) {
    if (!this.places?.length || this.turntable.fingers.size) return;
    const box = this.box.getBoundingClientRect();
    const [x, y] = [event.clientX - box.left, event.clientY - box.top];
    let [nearest, best] = [null, 14];
    this.places.forEach(({ at }, place) => {
      const [left, top] = this.#screen(at);
      const away = Math.hypot(left - x, top - y);
      if (away < best) [nearest, best] = [place, away];
    });
    if (nearest !== this.marked) this.pointed(nearest);
  }

  #clear(meshes) {
    for (const mesh of meshes.splice(0)) {
      this.cell.remove(mesh);
      mesh.geometry.dispose();
      mesh.material.dispose();
    }
  }
}
