"use strict";
// The parts in space, drawn by three.js: one mesh a part, drawn only when something changes.

const STEPS = 65535; // positions are counted in so many steps along the longest side

class PartsView {
  constructor(section, body) {
    this.section = section;
    this.body = body;
    this.flat = section.scene.dim === 2;
    this.count = section.scene.points.length;
    this.hidden = new Set();
    this.apart = 0;
    this.waiting = false;
    this.build();
  }

  build() {
    const three = sfcpartDrawing;
    const label =
      "View of the parts. Arrow keys turn it, plus and minus zoom, 0 goes back to the start.";
    this.canvas = make("canvas", { tabindex: "0", role: "img", "aria-label": label });
    this.renderer = new three.WebGLRenderer({
      canvas: this.canvas, antialias: true, alpha: true, preserveDrawingBuffer: true,
    });
    this.body.classList.add("drawn");
    this.told = make("p", { class: "told", role: "status" });
    this.body.prepend(this.controls(), this.canvas, this.told);
    this.scene = new three.Scene();
    this.addParts();
    this.addLight();
    this.addCamera();
    this.colourBy("part");
    this.canvas.addEventListener("keydown", (event) => this.onKey(event));
    this.canvas.addEventListener("click", (event) => this.onClick(event));
    onWidth(this.canvas, () => this.resize());
    onTheme(() => this.draw());
    this.resize();
    this.lookFromStart();
  }

  controls() {
    const { section } = this;
    const ways = ["part", ...Object.keys(section.values), ...Object.keys(section.levels)];
    const choice = make(
      "select", { change: (event) => this.colourBy(event.target.value) },
      ...ways.map((name) => make("option", { value: name }, name)),
    );
    this.slider = make("input", {
      type: "range", min: "0", max: "1", step: "0.01", value: "0",
      input: (event) => this.explode(Number(event.target.value)),
    });
    this.filter = make("input", {
      type: "text", size: "9", placeholder: "all", input: () => this.isolateTyped(),
    });
    this.scale = make("span", { class: "scale" });
    this.hideButton = make("button", { type: "button", disabled: true, click: () => this.hideTyped() }, "Hide these");
    return make(
      "div", { class: "controls" },
      make("label", {}, "Colour by ", choice),
      this.scale,
      make("label", {}, "Pull apart ", this.slider),
      make("label", {}, "Parts ", this.filter),
      this.hideButton,
      make("button", { type: "button", click: () => this.reset() }, "Show all"),
    );
  }

  addParts() {
    const three = sfcpartDrawing;
    const { scene } = this.section;
    const position = unpacked(scene.position, Uint16Array);
    const index = unpacked(scene.index, scene.wide ? Uint32Array : Uint16Array);
    const look = { side: three.DoubleSide };
    const material = () =>
      this.flat ? new three.MeshBasicMaterial(look) : new three.MeshLambertMaterial({ ...look, flatShading: true });
    this.group = new three.Group();
    this.meshes = [];
    let [point, corner] = [0, 0];
    for (let part = 0; part < this.count; part += 1) {
      const places = position.subarray(3 * point, 3 * (point + scene.points[part]));
      const corners = index.subarray(3 * corner, 3 * (corner + scene.triangles[part]));
      point += scene.points[part];
      corner += scene.triangles[part];
      const geometry = new three.BufferGeometry();
      geometry.setAttribute("position", new three.BufferAttribute(new Float32Array(places), 3));
      geometry.setIndex(new three.BufferAttribute(corners.slice(), 1));
      const mesh = new three.Mesh(geometry, material());
      mesh.userData = { part, middle: middleOf(places) };
      this.meshes.push(mesh);
      this.group.add(mesh);
    }
    this.reach = reachOf(position);
    this.scene.add(this.group);
  }

  addLight() {
    const three = sfcpartDrawing;
    this.scene.add(new three.AmbientLight(0xffffff, 1.7));
    this.lamp = new three.DirectionalLight(0xffffff, 1.9);
    this.scene.add(this.lamp, this.lamp.target);
  }

  addCamera() {
    const three = sfcpartDrawing;
    const { middle, radius } = this.reach;
    if (this.flat) {
      this.camera = new three.OrthographicCamera(-1, 1, 1, -1, -4 * STEPS, 4 * STEPS);
    } else {
      this.camera = new three.PerspectiveCamera(32, 1, radius / 50, radius * 40);
      this.camera.up.set(0, 0, 1);
    }
    this.orbit = new three.OrbitControls(this.camera, this.canvas);
    this.orbit.target.set(...middle);
    this.orbit.enableRotate = !this.flat;
    this.orbit.screenSpacePanning = true;
    this.orbit.zoomToCursor = true;
    if (this.flat) {
      this.orbit.mouseButtons.LEFT = 2;
      this.orbit.touches.ONE = 1;
    }
    this.orbit.addEventListener("change", () => this.draw());
    this.lookFromStart();
  }

  lookFromStart() {
    const { middle, radius } = this.reach;
    this.orbit.target.set(...middle);
    this.camera.zoom = 1;
    const narrow = Math.max(1, 1.5 / (this.camera.aspect || 1.5)); // on a phone from farther away
    const far = this.flat ? [0, 0, radius] : [1.24, -2.32, 1.2].map((value) => value * radius * narrow);
    this.camera.position.set(...middle.map((value, axis) => value + far[axis]));
    this.camera.updateProjectionMatrix();
    this.orbit.update();
    this.draw();
  }

  resize() {
    const [width, height] = [this.canvas.clientWidth, this.canvas.clientHeight];
    if (!width || !height) return;
    this.renderer.setPixelRatio(Math.min(window.devicePixelRatio || 1, 2));
    this.renderer.setSize(width, height, false);
    if (this.flat) {
      const { extent } = this.reach;
      const half = 0.53 * Math.max(extent[1], (extent[0] * height) / width, 1);
      Object.assign(this.camera, {
        left: (-half * width) / height, right: (half * width) / height, top: half, bottom: -half,
      });
    } else {
      this.camera.aspect = width / height;
    }
    this.camera.updateProjectionMatrix();
    this.draw();
  }

  draw() {
    if (this.waiting) return;
    this.waiting = true;
    requestAnimationFrame(() => {
      this.waiting = false;
      this.drawNow();
    });
  }

  drawNow() {
    if (this.lamp && this.orbit) {
      this.lamp.position.copy(this.camera.position);
      this.lamp.target.position.copy(this.orbit.target);
      this.lamp.target.updateMatrixWorld();
    }
    this.renderer.render(this.scene, this.camera);
    this.canvas.dataset.frames = Number(this.canvas.dataset.frames ?? 0) + 1;
  }

  explode(share) {
    this.apart = share;
    const { middle } = this.reach;
    for (const mesh of this.meshes) {
      const own = mesh.userData.middle;
      mesh.position.set(...own.map((value, axis) => 1.2 * share * (value - middle[axis])));
    }
    this.draw();
  }

  /** Hide all but the parts typed; an empty field shows all. */
  isolateTyped() {
    const chosen = partsIn(this.filter.value, this.count);
    this.hideButton.disabled = chosen === null;
    this.hidden = new Set();
    if (chosen !== null) {
      for (let part = 0; part < this.count; part += 1) if (!chosen.has(part)) this.hidden.add(part);
    }
    this.applyHidden();
  }

  hideTyped() {
    this.hidden = partsIn(this.filter.value, this.count) ?? new Set();
    this.applyHidden();
  }

  applyHidden() {
    for (const mesh of this.meshes) mesh.visible = !this.hidden.has(mesh.userData.part);
    const shown = this.count - this.hidden.size;
    this.told.textContent = this.hidden.size ? `${shown} of ${this.count} parts shown` : "";
    this.draw();
  }

  reset() {
    this.filter.value = "";
    this.slider.value = "0";
    this.explode(0);
    this.isolateTyped();
    this.lookFromStart();
  }

  colourBy(way) {
    const { scene, values, levels } = this.section;
    this.scale.replaceChildren();
    if (way === "part") this.paint((part) => scene.colour[part]);
    else if (levels[way]) this.paint((part) => scene.colour[levels[way][part] % this.count]);
    else this.paintValues(values[way], way);
    this.draw();
  }

  paintValues(values, way) {
    const known = values.filter((value) => value !== null);
    const [low, high] = [Math.min(...known), Math.max(...known)];
    const shade = (share) => sfcpartCharts.interpolateCividis(share);
    this.paint((part) => {
      const value = values[part];
      return value === null ? "#999999" : shade(high > low ? (value - low) / (high - low) : 0.5);
    });
    const form = way === "halo share" ? "percent" : "ratio";
    const strip = make("i");
    strip.style.background = `linear-gradient(90deg, ${[0, 0.25, 0.5, 0.75, 1].map(shade).join(", ")})`;
    this.scale.replaceChildren(written(low, form), strip, written(high, form));
  }

  paint(colourOf) {
    for (const mesh of this.meshes) mesh.material.color.set(colourOf(mesh.userData.part));
  }

  onKey(event) {
    const turn = Math.PI / 24;
    const turns = {
      ArrowLeft: [-turn, 0], ArrowRight: [turn, 0], ArrowUp: [0, -turn], ArrowDown: [0, turn],
    };
    if (turns[event.key]) this.turn(...turns[event.key]);
    else if (event.key === "+" || event.key === "=") this.nearer(1 / 1.2);
    else if (event.key === "-") this.nearer(1.2);
    else if (event.key === "0") this.lookFromStart();
    else return;
    event.preventDefault();
  }

  turn(around, over) {
    if (this.flat) {
      const step = (0.8 * this.reach.radius) / this.camera.zoom;
      const [x, y] = [-around * step, over * step].map((value) => -value);
      for (const place of [this.camera.position, this.orbit.target]) {
        place.x += x;
        place.y += y;
      }
    } else {
      const three = sfcpartDrawing;
      const offset = this.camera.position.clone().sub(this.orbit.target);
      const turned = new three.Spherical().setFromCartesianCoords(offset.x, offset.z, -offset.y);
      turned.theta += around;
      turned.phi = Math.min(Math.PI - 0.05, Math.max(0.05, turned.phi + over));
      const place = new three.Vector3().setFromSpherical(turned);
      this.camera.position.copy(this.orbit.target).add(new three.Vector3(place.x, -place.z, place.y));
    }
    this.orbit.update();
    this.draw();
  }

  nearer(factor) {
    if (this.flat) {
      this.camera.zoom /= factor;
      this.camera.updateProjectionMatrix();
    } else {
      this.camera.position.sub(this.orbit.target).multiplyScalar(factor).add(this.orbit.target);
    }
    this.orbit.update();
    this.draw();
  }

  /** Tell which part was clicked. */
  onClick(event) {
    const three = sfcpartDrawing;
    const box = this.canvas.getBoundingClientRect();
    const place = new three.Vector2(
      (2 * (event.clientX - box.left)) / box.width - 1,
      1 - (2 * (event.clientY - box.top)) / box.height,
    );
    const ray = new three.Raycaster();
    ray.setFromCamera(place, this.camera);
    const hit = ray.intersectObjects(this.meshes.filter((mesh) => mesh.visible), false)[0];
    this.told.textContent = hit ? this.partText(hit.object.userData.part) : "";
  }

  partText(part) {
    const said = Object.entries(this.section.values).map(([name, values]) => {
      return `${name} ${written(values[part], name === "halo share" ? "percent" : "ratio")}`;
    });
    return `Part ${wholeNumber.format(part)}: ${said.join(", ")}`;
  }
}

/** Mean of the points of a part. */
function middleOf(places) {
  const sums = [0, 0, 0];
  for (let k = 0; k < places.length; k += 3) {
    for (let axis = 0; axis < 3; axis += 1) sums[axis] += places[k + axis];
  }
  return sums.map((sum) => (places.length ? (3 * sum) / places.length : 0));
}

/** Middle, side lengths and radius of the box around all points. */
function reachOf(position) {
  const low = [STEPS, STEPS, STEPS];
  const high = [0, 0, 0];
  for (let k = 0; k < position.length; k += 3) {
    for (let axis = 0; axis < 3; axis += 1) {
      low[axis] = Math.min(low[axis], position[k + axis]);
      high[axis] = Math.max(high[axis], position[k + axis]);
    }
  }
  const extent = high.map((value, axis) => Math.max(0, value - low[axis]));
  return {
    middle: high.map((value, axis) => (value + low[axis]) / 2),
    extent,
    radius: Math.max(1, 0.5 * Math.hypot(...extent)),
  };
}

/** Draw the parts, or leave the picture where it is. */
function drawView(section, body) {
  try {
    return new PartsView(section, body);
  } catch (problem) {
    body.classList.remove("drawn");
    body.querySelectorAll(":scope > :not(.still)").forEach((element) => element.remove());
    body.append(make("p", { class: "small" }, "This browser cannot draw in space (WebGL); the picture stands in."));
    return null;
  }
}
