/* The view in a report: a solved model that can be turned, cut and read. WebGL 2, no library, nothing fetched.

   It reads two data blocks of the page, "view-header" (JSON) and "view-block" (deflated arrays in base64; packing.py
   writes them and says how), and draws into the figure "view", over the still picture that stays when this script can't run.
   Cuts are computed from the cells of the mesh themselves, so what a cut shows is the solved field.
   Nothing moves by itself, so there is no motion to reduce. */
"use strict";

(async function () {
  const figure = document.getElementById("view");
  if (!figure) return;
  const told = figure.querySelector(".view-note");
  try {
    await start(figure);
  } catch (fault) {
    told.textContent = "This browser can't draw the model in 3D (" + fault.message + "); the still picture stands in for it.";
  }
})();

async function start(figure) {
  if (!("DecompressionStream" in window)) throw new Error("it can't unpack the data");
  const header = JSON.parse(document.getElementById("view-header").textContent);
  const arrays = await unpack(document.getElementById("view-block").textContent, header.arrays);
  const canvas = figure.querySelector("canvas");
  const gl = canvas.getContext("webgl2", { antialias: true, preserveDrawingBuffer: true });
  if (!gl) throw new Error("it has no WebGL 2");
  const model = modelOf(header, arrays);
  const view = new Viewer(figure, canvas, gl, model);
  figure.classList.add("live");
  view.resize();
  canvas.coldseam = view; // for whoever scripts or tests the page
  canvas.dataset.drawn = "yes";
}

// ---------------------------------------------------------------------------------------------- data

/* Return the arrays of a block by name, each a Uint32Array. */
async function unpack(text, entries) {
  const packed = Uint8Array.from(atob(text.trim()), (letter) => letter.charCodeAt(0));
  const stream = new Blob([packed]).stream().pipeThrough(new DecompressionStream("deflate"));
  const bytes = new Uint8Array(await new Response(stream).arrayBuffer());
  const arrays = {};
  let at = 0;
  for (const [name, { count, width, delta }] of Object.entries(entries)) {
    const values = new Uint32Array(count);
    for (let plane = 0; plane < width; plane++)
      for (let i = 0; i < count; i++) values[i] |= bytes[at++] << (8 * plane);
    if (delta) {
      const mask = width === 4 ? 0xffffffff : 2 ** (8 * width) - 1;
      for (let i = 1; i < count; i++) values[i] = (values[i] + values[i - 1]) & mask;
    }
    arrays[name] = values;
  }
  return arrays;
}

/* Return the model: positions (shown units, from the origin), cells, triangles of the surface, fields in shown units. */
function modelOf(header, arrays) {
  const dim = header.dim, nodes = arrays.position0.length, corners = dim + 1, count = arrays.cell0.length;
  const points = new Float32Array(3 * nodes);
  for (let axis = 0; axis < dim; axis++)
    for (let i = 0; i < nodes; i++) points[3 * i + axis] = (arrays["position" + axis][i] / header.steps) * header.size;
  const cells = new Uint32Array(corners * count);
  for (let i = 0; i < count; i++) {
    let node = 0;
    for (let c = 0; c < corners; c++) cells[corners * i + c] = node += arrays["cell" + c][i];
  }
  const facets = dim === 3 ? arrays.facet : Uint32Array.from({ length: count }, (_, i) => i);
  const triangles = new Uint32Array(3 * facets.length), owner = new Uint32Array(facets.length);
  for (let f = 0; f < facets.length; f++) {
    const cell = dim === 3 ? facets[f] >>> 2 : f, missing = dim === 3 ? facets[f] & 3 : 3;
    owner[f] = cell;
    for (let c = 0, k = 0; c < corners; c++) if (c !== missing) triangles[3 * f + k++] = cells[corners * cell + c];
  }
  const fields = header.fields.map((entry) => {
    const values = new Float32Array(nodes), steps = arrays[entry.key], span = 65535 - entry.first;
    for (let i = 0; i < nodes; i++)
      values[i] = entry.first && steps[i] === 0 ? NaN : entry.low + ((steps[i] - entry.first) / span) * (entry.high - entry.low);
    return { ...entry, high: entry.shown_high, at: "node", values };
  });
  const ratio = header.flux.high / header.flux.low;
  const flux = Float32Array.from(arrays.flux, (step) => header.flux.low * ratio ** (step / header.flux.steps));
  if (header.has_flux) fields.splice(1, 0, { key: "heat_flux", ...header.flux, at: "cell", logarithmic: true, values: flux,
    note: "Size of the heat flux in each element; the colours are in equal ratios." });
  const body = Float32Array.from(arrays.body);
  fields.push({ key: "bodies", title: "Bodies", unit: "", at: "cell", low: 0, high: 1, values: body, note: "" });
  const reach = [0, 1, 2].map((axis) => {
    let high = 0;
    for (let i = 0; i < nodes; i++) high = Math.max(high, points[3 * i + axis]);
    return high;
  });
  return { header, dim, points, cells, corners, count, triangles, owner, fields, body: arrays.body,
    boundary: arrays.boundary, reach, temperature: fields[0].values, flux };
}

// ------------------------------------------------------------------------------------------- drawing

const VERTEX = `#version 300 es
in vec3 position; in float value;
uniform mat4 camera;
out vec3 at; out float v;
void main() { at = position; v = value; gl_Position = camera * vec4(position, 1.0); }`;

/* Colours by value: a ramp, in equal ratios if so asked, or a tint for each body; isotherms as lines of one width. */
const FRAGMENT = `#version 300 es
precision highp float;
in vec3 at; in float v;
uniform vec3 cut; uniform float cutAt; uniform vec2 ends; uniform float lineStep; uniform int kind; uniform float lit;
uniform sampler2D ramp; uniform sampler2D tints; uniform float tintCount;
out vec4 colour;
void main() {
  if (lit > 0.0 && dot(cut, cut) > 0.0 && dot(cut, at) > cutAt) discard;
  vec3 shade;
  if (kind == 2) shade = texture(tints, vec2((mod(floor(v + 0.5), tintCount) + 0.5) / tintCount, 0.5)).rgb;
  else if (isnan(v) || v > 1e29) shade = vec3(0.86);
  else {
    float part = kind == 1 ? log(v / ends.x) / max(log(ends.y / ends.x), 1e-9) : (v - ends.x) / max(ends.y - ends.x, 1e-9);
    shade = texture(ramp, vec2(clamp(part, 0.0, 1.0) * 31.0 / 32.0 + 0.5 / 32.0, 0.5)).rgb;
    if (lineStep > 0.0) {
      float w = v / lineStep, wide = fwidth(w);
      float line = abs(fract(w - 0.5) - 0.5) / max(wide, 1e-9);
      if (wide < 0.5) shade = mix(part > 0.55 ? vec3(0.1) : vec3(1.0), shade, smoothstep(0.5, 1.3, line));
    }
  }
  if (lit > 0.0) {
    vec3 normal = normalize(cross(dFdx(at), dFdy(at)));
    shade *= 0.80 + 0.20 * abs(dot(normal, normalize(vec3(0.35, -0.75, 0.55))));
  }
  colour = vec4(shade, 1.0);
}`;

function programOf(gl) {
  const program = gl.createProgram();
  for (const [kind, source] of [[gl.VERTEX_SHADER, VERTEX], [gl.FRAGMENT_SHADER, FRAGMENT]]) {
    const shader = gl.createShader(kind);
    gl.shaderSource(shader, source);
    gl.compileShader(shader);
    if (!gl.getShaderParameter(shader, gl.COMPILE_STATUS)) throw new Error(gl.getShaderInfoLog(shader));
    gl.attachShader(program, shader);
  }
  gl.linkProgram(program);
  if (!gl.getProgramParameter(program, gl.LINK_STATUS)) throw new Error(gl.getProgramInfoLog(program));
  gl.useProgram(program);
  return program;
}

function textureOf(gl, unit, colours, filter) {
  gl.activeTexture(gl.TEXTURE0 + unit);
  gl.bindTexture(gl.TEXTURE_2D, gl.createTexture());
  gl.pixelStorei(gl.UNPACK_ALIGNMENT, 1);
  gl.texImage2D(gl.TEXTURE_2D, 0, gl.RGB8, colours.length / 3, 1, 0, gl.RGB, gl.UNSIGNED_BYTE, Uint8Array.from(colours));
  for (const key of [gl.TEXTURE_MIN_FILTER, gl.TEXTURE_MAG_FILTER]) gl.texParameteri(gl.TEXTURE_2D, key, filter);
  for (const key of [gl.TEXTURE_WRAP_S, gl.TEXTURE_WRAP_T]) gl.texParameteri(gl.TEXTURE_2D, key, gl.CLAMP_TO_EDGE);
}

/* Corners of a piece of surface, three a triangle: positions, values, and the cell and triangle nodes to read from. */
class Piece {
  constructor(gl, program) {
    this.gl = gl;
    this.array = gl.createVertexArray();
    gl.bindVertexArray(this.array);
    this.buffers = [["position", 3], ["value", 1]].map(([name, size]) => {
      const buffer = gl.createBuffer(), place = gl.getAttribLocation(program, name);
      gl.bindBuffer(gl.ARRAY_BUFFER, buffer);
      gl.enableVertexAttribArray(place);
      gl.vertexAttribPointer(place, size, gl.FLOAT, false, 0, 0);
      return buffer;
    });
    this.positions = new Float32Array(0);
  }
  fill(which, data) {
    this.gl.bindBuffer(this.gl.ARRAY_BUFFER, this.buffers[which]);
    this.gl.bufferData(this.gl.ARRAY_BUFFER, data, this.gl.DYNAMIC_DRAW);
    if (which === 0) this.positions = data;
  }
  draw() {
    this.gl.bindVertexArray(this.array);
    this.gl.drawArrays(this.gl.TRIANGLES, 0, this.positions.length / 3);
  }
}

// -------------------------------------------------------------------------------------------- cutting

const EDGES = [[0, 1], [0, 2], [0, 3], [1, 2], [1, 3], [2, 3]];
/* For each set of corners beyond the plane (bits): the edges that the plane crosses, in order round the section. */
const ROUND = (() => {
  const edge = (a, b) => EDGES.findIndex(([p, q]) => (p === a && q === b) || (p === b && q === a));
  return Array.from({ length: 16 }, (_, bits) => {
    const over = [0, 1, 2, 3].filter((c) => bits & (1 << c)), under = [0, 1, 2, 3].filter((c) => !(bits & (1 << c)));
    if (over.length === 1) return under.map((c) => edge(over[0], c));
    if (over.length === 3) return over.map((c) => edge(under[0], c));
    if (over.length === 2) return [[0, 0], [0, 1], [1, 1], [1, 0]].map(([i, j]) => edge(over[i], under[j]));
    return [];
  });
})();

/* Return the section of all cells with a plane: for each corner of its triangles the position, the edge's two nodes and the
   part of the way between them, and for each triangle the cell. */
function section(model, axis, level) {
  const { points, cells, count } = model, positions = [], nodes = [], parts = [], owner = [];
  for (let i = 0; i < count; i++) {
    let bits = 0;
    for (let c = 0; c < 4; c++) if (points[3 * cells[4 * i + c] + axis] > level) bits |= 1 << c;
    const round = ROUND[bits];
    for (let k = 2; k < round.length; k++) {
      for (const e of [round[0], round[k - 1], round[k]]) {
        const a = cells[4 * i + EDGES[e][0]], b = cells[4 * i + EDGES[e][1]];
        const from = points[3 * a + axis], to = points[3 * b + axis], part = (level - from) / (to - from);
        for (let d = 0; d < 3; d++) positions.push(points[3 * a + d] + part * (points[3 * b + d] - points[3 * a + d]));
        nodes.push(a, b);
        parts.push(part);
      }
      owner.push(i);
    }
  }
  return { positions: Float32Array.from(positions), nodes, parts, owner };
}

// --------------------------------------------------------------------------------------------- viewer

const NO_VALUE = 1e30; // far from what a shader can hold, so that weights do not overflow it

class Viewer {
  constructor(figure, canvas, gl, model) {
    Object.assign(this, { figure, canvas, gl, model });
    this.program = programOf(gl);
    this.at = Object.fromEntries(["camera", "cut", "cutAt", "ends", "lineStep", "kind", "lit", "ramp", "tints", "tintCount"]
      .map((name) => [name, gl.getUniformLocation(this.program, name)]));
    textureOf(gl, 0, model.header.colours, gl.LINEAR);
    textureOf(gl, 1, model.header.tints.flat(), gl.NEAREST);
    this.surface = new Piece(gl, this.program);
    this.cap = new Piece(gl, this.program);
    const corners = new Float32Array(9 * model.owner.length);
    for (let i = 0; i < model.triangles.length; i++)
      for (let d = 0; d < 3; d++) corners[3 * i + d] = model.points[3 * model.triangles[i] + d];
    this.surface.fill(0, corners);
    this.section = null;
    this.field = model.fields[0];
    this.axis = -1;
    this.level = 0;
    this.lines = true;
    this.home();
    this.controls();
    this.listen();
    this.values();
  }

  home() {
    const plane = this.model.dim === 2;
    this.yaw = plane ? 0 : -0.65;
    this.pitch = plane ? Math.PI / 2 : 0.5;
    this.zoom = 1;
    this.pan = [0, 0];
  }

  /* Values of the chosen field at every corner of the surface and of the section. */
  values() {
    const { model, field } = this, surface = new Float32Array(model.triangles.length);
    for (let i = 0; i < surface.length; i++)
      surface[i] = field.at === "node" ? field.values[model.triangles[i]] : field.values[model.owner[(i / 3) | 0]];
    for (let i = 0; i < surface.length; i += 3) // a facet has a value where all of its corners have one
      if (Number.isNaN(surface[i] + surface[i + 1] + surface[i + 2])) surface.fill(NO_VALUE, i, i + 3);
    this.surface.fill(1, surface);
    if (this.section) this.cap.fill(1, this.capValues(field));
    this.legend();
    this.draw();
  }

  capValues(field) {
    const { nodes, parts, owner } = this.section, found = new Float32Array(parts.length);
    for (let i = 0; i < found.length; i++) {
      const value = field.at === "node"
        ? field.values[nodes[2 * i]] + parts[i] * (field.values[nodes[2 * i + 1]] - field.values[nodes[2 * i]])
        : field.values[owner[(i / 3) | 0]];
      found[i] = field.key !== "temperature" && field.at === "node" ? NO_VALUE : value; // surface maps have no value inside
    }
    return found;
  }

  /* Cut along an axis (-1: not at all) at a part of the model's reach. */
  cut(axis, part) {
    this.axis = axis;
    this.part = part;
    this.level = axis < 0 ? 0 : part * this.model.reach[axis] * (1 + 1e-6) - 1e-7 * this.model.reach[axis];
    this.section = axis < 0 ? null : section(this.model, axis, this.level);
    this.cap.fill(0, this.section ? this.section.positions : new Float32Array(0));
    if (this.section) this.cap.fill(1, this.capValues(this.field));
    this.draw();
  }

  /* Rows of the turn: right, up and towards the eye, in model directions. */
  turn() {
    const [cy, sy, cp, sp] = [Math.cos(this.yaw), Math.sin(this.yaw), Math.cos(this.pitch), Math.sin(this.pitch)];
    return [[cy, sy, 0], [-sp * sy, sp * cy, cp], [cp * sy, -cp * cy, sp]];
  }

  /* The side of the cut that is taken away: the one towards the eye. */
  side() {
    return this.axis >= 0 && this.turn()[2][this.axis] < 0 ? -1 : 1;
  }

  /* Pixels a unit of length takes at zoom 1, so that the model fits however it is turned. */
  scale() {
    const { canvas, model } = this, [w, h] = [canvas.clientWidth, canvas.clientHeight];
    const fit = model.dim === 2 ? Math.min((0.94 * w) / model.reach[0], (0.94 * h) / model.reach[1])
      : (0.94 * Math.min(w, h)) / Math.hypot(...model.reach);
    return fit * this.zoom;
  }

  /* Return pixels from the canvas' corner, and the depth towards the eye, of a point of the model. */
  screen(x, y, z) {
    const [right, up, eye] = this.rows || this.turn(), half = this.model.reach, s = this.scale();
    const p = [x - half[0] / 2, y - half[1] / 2, z - half[2] / 2];
    const dot = (row) => row[0] * p[0] + row[1] * p[1] + row[2] * p[2];
    return [this.canvas.clientWidth / 2 + s * dot(right) + this.pan[0], this.canvas.clientHeight / 2 - s * dot(up) + this.pan[1], dot(eye)];
  }

  /* The same of a position as the reader knows it, in the report's unit of length. */
  project(position) {
    const o = this.model.header.origin;
    return this.screen(...[0, 1, 2].map((d) => (position[d] || 0) - (o[d] || 0)));
  }

  matrix() {
    const rows = this.turn(), { canvas, model } = this, s = this.scale(), deep = 2 * Math.hypot(...model.reach);
    const k = [(2 * s) / canvas.clientWidth, (2 * s) / canvas.clientHeight, -1 / deep];
    const m = new Float32Array(16);
    for (let r = 0; r < 3; r++) {
      let shift = 0;
      for (let c = 0; c < 3; c++) {
        m[4 * c + r] = k[r] * rows[r][c];
        shift -= (rows[r][c] * model.reach[c]) / 2;
      }
      m[12 + r] = k[r] * shift;
    }
    m[12] += (2 * this.pan[0]) / canvas.clientWidth;
    m[13] -= (2 * this.pan[1]) / canvas.clientHeight;
    m[15] = 1;
    return m;
  }

  resize() {
    const sharp = Math.min(window.devicePixelRatio || 1, 2);
    const [w, h] = [Math.round(this.canvas.clientWidth * sharp), Math.round(this.canvas.clientHeight * sharp)];
    if (w && h && (w !== this.canvas.width || h !== this.canvas.height)) [this.canvas.width, this.canvas.height] = [w, h];
    this.draw();
  }

  draw() {
    const { gl, at, field } = this;
    if (!this.canvas.clientWidth) return;
    gl.viewport(0, 0, this.canvas.width, this.canvas.height);
    gl.clearColor(1, 1, 1, 1);
    gl.clear(gl.COLOR_BUFFER_BIT | gl.DEPTH_BUFFER_BIT);
    gl.enable(gl.DEPTH_TEST);
    gl.uniformMatrix4fv(at.camera, false, this.matrix());
    const side = this.side();
    gl.uniform3f(at.cut, ...[0, 1, 2].map((axis) => (axis === this.axis ? side : 0)));
    gl.uniform1f(at.cutAt, side * this.level);
    gl.uniform2f(at.ends, field.low, field.high);
    gl.uniform1f(at.lineStep, this.lines && field.line && field.at === "node" ? field.line : 0);
    gl.uniform1i(at.kind, field.key === "bodies" ? 2 : field.logarithmic ? 1 : 0);
    gl.uniform1i(at.ramp, 0);
    gl.uniform1i(at.tints, 1);
    gl.uniform1f(at.tintCount, this.model.header.tints.length);
    gl.uniform1f(at.lit, this.model.dim === 3 ? 1 : 0);
    this.surface.draw();
    gl.uniform1f(at.lit, 0);
    this.cap.draw();
    this.rows = this.turn();
    this.flat = null;
  }

  // ------------------------------------------------------------------------------------------ reading

  /* Return what lies under a pixel, nearest to the eye: { weights, corner, piece }, or null. */
  pick(px, py) {
    if (!this.flat) this.flat = [this.surface, this.cap].map((piece) => this.flattened(piece));
    const side = this.side();
    let best = null;
    [this.surface, this.cap].forEach((piece, which) => {
      const flat = this.flat[which];
      for (let i = 0; i + 8 < flat.length; i += 9) {
        const ax = flat[i], ay = flat[i + 1], bx = flat[i + 3] - ax, by = flat[i + 4] - ay, cx = flat[i + 6] - ax, cy = flat[i + 7] - ay;
        const whole = bx * cy - by * cx, u = (px - ax) * cy - (py - ay) * cx, w = bx * (py - ay) - by * (px - ax);
        if (whole > 0 ? u < 0 || w < 0 || u + w > whole : u > 0 || w > 0 || u + w < whole || whole === 0) continue;
        const b = u / whole, c = w / whole, depth = (1 - b - c) * flat[i + 2] + b * flat[i + 5] + c * flat[i + 8];
        if (best && depth <= best.depth) continue;
        const weights = [1 - b - c, b, c], corner = i / 3;
        if (which === 0 && this.axis >= 0 && side * (this.along(piece, corner, weights, this.axis) - this.level) > 0) continue;
        best = { depth, weights, corner, which };
      }
    });
    return best;
  }

  flattened(piece) {
    const p = piece.positions, flat = new Float32Array(p.length);
    for (let i = 0; i < p.length; i += 3) flat.set(this.screen(p[i], p[i + 1], p[i + 2]), i);
    return flat;
  }

  along(piece, corner, weights, axis) {
    return weights.reduce((sum, weight, k) => sum + weight * piece.positions[3 * (corner + k) + axis], 0);
  }

  /* Return what the reader is told of a picked place. */
  reading(found) {
    const { model } = this, { header } = model, piece = found.which ? this.cap : this.surface, triangle = found.corner / 3;
    const cell = found.which ? this.section.owner[triangle] : model.owner[triangle];
    const mean = (field) => found.weights.reduce((sum, weight, k) => {
      const i = found.corner + k;
      if (!found.which) return sum + weight * field.values[model.triangles[i]];
      const [a, b] = [this.section.nodes[2 * i], this.section.nodes[2 * i + 1]];
      return sum + weight * (field.values[a] + this.section.parts[i] * (field.values[b] - field.values[a]));
    }, 0);
    const place = header.axes.map((_, d) => ((header.origin[d] || 0) + this.along(piece, found.corner, found.weights, d)).toFixed(header.length.digits));
    const words = [`${mean(model.fields[0]).toFixed(2)} ${model.fields[0].unit}`, `(${place.join(", ")}) ${header.length.unit}`];
    words.push(header.bodies[model.body[cell]]);
    if (!found.which && model.dim === 3) words.push(header.boundaries[model.boundary[triangle]]);
    if (header.has_flux) words.push(`heat flux ${model.flux[cell].toPrecision(3)} ${header.flux.unit}`);
    const { field } = this;
    if (field.at === "node" && field.key !== "temperature" && !found.which) {
      const value = mean(field);
      if (!Number.isNaN(value)) words.push(`${field.title.toLowerCase()} ${value.toPrecision(4)} ${field.unit}`);
    }
    return words.join(" · ");
  }

  read(px, py) {
    const found = this.pick(px, py);
    this.output.textContent = found ? this.reading(found) : "Point at the model to read it.";
  }

  // ----------------------------------------------------------------------------------------- controls

  controls() {
    const { figure, model } = this, find = (name) => figure.querySelector(`[data-view="${name}"]`);
    this.output = find("reading");
    const pick = find("field"), axis = find("axis"), slider = find("cut"), lines = find("lines");
    model.fields.forEach((field, i) => pick.add(new Option(field.title, String(i))));
    pick.addEventListener("change", () => { this.field = model.fields[Number(pick.value)]; this.values(); });
    lines.addEventListener("change", () => { this.lines = lines.checked; this.draw(); });
    const again = () => {
      const chosen = Number(axis.value), place = (model.header.origin[chosen] || 0) + (Number(slider.value) / 1000) * (model.reach[chosen] || 0);
      slider.disabled = chosen < 0;
      this.cut(chosen, Number(slider.value) / 1000);
      const words = chosen < 0 ? "" : `${model.header.axes[chosen]} = ${place.toFixed(model.header.length.digits)} ${model.header.length.unit}`;
      find("cut-place").textContent = words;
      slider.setAttribute("aria-valuetext", words || "no cut");
    };
    axis.addEventListener("change", again);
    slider.addEventListener("input", again);
    this.moveCut = (by) => { slider.value = String(Number(slider.value) + by); again(); };
    for (const [name, act] of [["nearer", () => this.enlarge(1.25)], ["farther", () => this.enlarge(0.8)], ["home", () => { this.home(); this.draw(); }]])
      find(name).addEventListener("click", act);
    if (model.dim === 3) return;
    for (const part of figure.querySelectorAll(".solid-only")) part.hidden = true;
    const share = Math.min(0.9, Math.max(0.22, (1.1 * model.reach[1]) / model.reach[0]));
    this.canvas.style.height = `min(72vh, ${Math.round(100 * share)}vw, 40rem)`;
  }

  /* The scale of colours, or the tints of the bodies. */
  legend() {
    const { field, model } = this, { header } = model, box = this.figure.querySelector('[data-view="legend"]');
    box.textContent = "";
    const add = (parent, name, text, style) => {
      const made = parent.appendChild(document.createElement(name));
      made.textContent = text;
      Object.assign(made.style, style || {});
      return made;
    };
    if (field.key === "bodies") {
      header.bodies.forEach((body, i) => {
        const entry = add(box, "span", ""), tint = header.tints[i % header.tints.length];
        entry.className = "tint";
        add(entry, "i", "", { backgroundColor: `rgb(${tint.join()})` });
        add(entry, "bdi", `${body} (${header.materials[i]})`);
      });
    } else {
      const digits = Math.max(0, Math.min(4, 2 - Math.floor(Math.log10(Math.max(field.high - field.low, 1e-9)))));
      const write = (value) => (field.logarithmic ? value.toPrecision(2) : value.toFixed(digits)) + " " + field.unit;
      const stops = Array.from({ length: header.colours.length / 3 }, (_, i) => `rgb(${header.colours.slice(3 * i, 3 * i + 3).join()})`);
      add(box, "span", write(field.low));
      add(box, "i", "", { background: `linear-gradient(90deg, ${stops.join()})` }).className = "ramp";
      add(box, "span", write(field.high));
      if (field.line && field.at === "node") add(box, "span", `a line every ${field.line} ${field.unit}`).className = "soft";
    }
    if (field.note) add(box, "span", field.note).className = "soft";
  }

  enlarge(factor) {
    this.zoom = Math.min(400, Math.max(0.2, this.zoom * factor));
    this.pan = this.pan.map((p) => p * factor);
    this.draw();
  }

  rotate(dx, dy) {
    if (this.model.dim === 2) return this.shift(dx, dy);
    this.yaw += -0.008 * dx;
    this.pitch = Math.min(Math.PI / 2, Math.max(-Math.PI / 2, this.pitch + 0.008 * dy));
    this.draw();
  }

  shift(dx, dy) {
    this.pan = [this.pan[0] + dx, this.pan[1] + dy];
    this.draw();
  }

  listen() {
    const { canvas } = this;
    let held = null;
    const place = (event) => { const box = canvas.getBoundingClientRect(); return [event.clientX - box.left, event.clientY - box.top]; };
    canvas.addEventListener("pointerdown", (event) => {
      held = [event.clientX, event.clientY, event.shiftKey || event.button !== 0];
      canvas.setPointerCapture(event.pointerId);
    });
    canvas.addEventListener("pointermove", (event) => {
      if (held) {
        const [dx, dy] = [event.clientX - held[0], event.clientY - held[1]];
        held = [event.clientX, event.clientY, held[2]];
        if (held[2]) this.shift(dx, dy);
        else this.rotate(dx, dy);
      } else this.read(...place(event));
    });
    for (const end of ["pointerup", "pointercancel"]) canvas.addEventListener(end, (event) => { held = null; this.read(...place(event)); });
    canvas.addEventListener("contextmenu", (event) => event.preventDefault());
    canvas.addEventListener("wheel", (event) => {
      if (document.activeElement !== canvas && !event.ctrlKey) return; // a page that scrolls past stays scrolling
      event.preventDefault();
      this.enlarge(event.deltaY < 0 ? 1.12 : 1 / 1.12);
    }, { passive: false });
    const step = 25;
    const keys = {
      ArrowLeft: [-step, 0], ArrowRight: [step, 0], ArrowUp: [0, -step], ArrowDown: [0, step],
    };
    canvas.addEventListener("keydown", (event) => {
      const move = keys[event.key];
      if (move) event.shiftKey ? this.shift(...move) : this.rotate(...move);
      else if (event.key === "+" || event.key === "=") this.enlarge(1.25);
      else if (event.key === "-") this.enlarge(0.8);
      else if (event.key === "Home") { this.home(); this.draw(); }
      else if (event.key === "[") this.moveCut(-20);
      else if (event.key === "]") this.moveCut(20);
      else if (event.key !== "Enter") return;
      event.preventDefault();
      this.read(canvas.clientWidth / 2, canvas.clientHeight / 2);
    });
    new ResizeObserver(() => this.resize()).observe(canvas);
  }
}
