"use strict";
// Choosing assets by word and verdict; turning one asset around at a time, in a single WebGL 2 canvas.

const articles = [...document.querySelectorAll("article")];
const words = document.getElementById("words");

function choose() {
  const wanted = words.value.toLowerCase().split(/\s+/).filter(Boolean);
  const verdicts = new Set([...document.querySelectorAll("input[name=verdict]:checked")].map((box) => box.value));
  for (const one of articles) {
    one.hidden = !verdicts.has(one.dataset.verdict) || !wanted.every((word) => one.dataset.words.includes(word));
  }
  document.getElementById("nothing").hidden = articles.some((one) => !one.hidden);
}
document.getElementById("choose").addEventListener("input", choose);
document.getElementById("choose").addEventListener("submit", (event) => event.preventDefault());

const SURFACE = [`#version 300 es
uniform mat4 camera; uniform vec3 low, sides;
layout(location=0) in vec3 point; layout(location=1) in vec3 normal; layout(location=2) in vec4 tangent; layout(location=3) in vec2 place;
out vec3 n; out vec4 t; out vec2 at;
void main() { n = normal; t = tangent; at = place; gl_Position = camera * vec4(low + point * sides, 1.0); }`,
`#version 300 es
precision highp float;
uniform sampler2D map; uniform float strength; uniform vec3 light, eye; uniform vec4 flat_colour;
in vec3 n; in vec4 t; in vec2 at; out vec4 colour;
void main() {
  if (flat_colour.a > 0.0) { colour = flat_colour; return; }
  vec3 shown = n;
  if (strength != 0.0) {  // the frame as interpolated, its bitangent = cross(n, t) * side
    vec3 texel = texture(map, at).xyz * 2.0 - 1.0;
    shown = texel.x * strength * t.xyz + texel.y * strength * cross(n, t.xyz) * t.w + texel.z * n;
  }
  shown = normalize(shown);
  float lit = max(dot(shown, light), 0.0), shine = pow(max(dot(shown, normalize(light + eye)), 0.0), 40.0);
  vec3 base = gl_FrontFacing ? vec3(0.62, 0.63, 0.65) : vec3(0.50, 0.30, 0.28);  // what is wound away is seen reddish
  colour = vec4(base * (0.18 + 0.95 * lit) + 0.22 * shine, 1.0);
}`];
const LINES = [`#version 300 es
uniform mat4 camera;
layout(location=0) in vec3 point; layout(location=1) in vec3 tint; out vec3 c;
void main() { c = tint; gl_Position = camera * vec4(point, 1.0); }`,
`#version 300 es
precision mediump float; in vec3 c; out vec4 colour; void main() { colour = vec4(c, 1.0); }`];
const MARK = [0.86, 0.16, 0.12, 0.85];
const MOST_FRAMES = 20000;

function bytes(text) { return Uint8Array.from(atob(text), (letter) => letter.charCodeAt(0)).buffer; }

function program(gl, [vertex, fragment]) {
  const made = gl.createProgram();
  for (const [kind, text] of [[gl.VERTEX_SHADER, vertex], [gl.FRAGMENT_SHADER, fragment]]) {
    const shader = gl.createShader(kind);
    gl.shaderSource(shader, text);
    gl.compileShader(shader);
    if (!gl.getShaderParameter(shader, gl.COMPILE_STATUS)) throw new Error(gl.getShaderInfoLog(shader));
    gl.attachShader(made, shader);
  }
  gl.linkProgram(made);
  const at = {};
  for (let k = gl.getProgramParameter(made, gl.ACTIVE_UNIFORMS) - 1; k >= 0; k--) {
    const { name } = gl.getActiveUniform(made, k);
    at[name] = gl.getUniformLocation(made, name);
  }
  return { made, at };
}

class Viewer {
  constructor(article) {
    this.article = article;
    this.scene = JSON.parse(article.querySelector(".scene").textContent);
    this.stage = article.querySelector(".stage");
    this.canvas = document.createElement("canvas");
    this.gl = this.canvas.getContext("webgl2", { antialias: true });
    if (!this.gl) { this.stage.querySelector(".open").textContent = "this browser has no WebGL 2"; return; }
    this.turn = 0.55; this.rise = 0.35; this.away = 1; this.lightTurn = 0.6; this.lightRise = 0.5;
    this.mapped = true; this.framed = false; this.edged = false; this.mark = null;
    this.load();
    this.stage.append(this.canvas);
    this.controls();
    this.listen();
    this.draw();
  }

  load() {
    const { gl, scene } = this;
    this.surface = program(gl, SURFACE);
    this.lines = program(gl, LINES);
    this.data = bytes(scene.vertices);
    this.triangles = new Uint32Array(bytes(scene.triangles));
    this.count = this.data.byteLength / 32;
    const [x, y, z, w, h, d] = scene.box;
    this.middle = [x + w / 2, y + h / 2, z + d / 2];
    this.size = Math.hypot(w, h, d) / 2;
    this.mesh = gl.createVertexArray();
    gl.bindVertexArray(this.mesh);
    this.fill(gl.ARRAY_BUFFER, this.data);
    for (const [k, n, kind, normal, offset] of [[0, 3, gl.UNSIGNED_SHORT, true, 0], [1, 3, gl.SHORT, true, 8],
      [2, 4, gl.SHORT, true, 16], [3, 2, gl.FLOAT, false, 24]]) {
      gl.enableVertexAttribArray(k);
      gl.vertexAttribPointer(k, n, kind, normal, 32, offset);
    }
    this.all = this.fill(gl.ELEMENT_ARRAY_BUFFER, this.triangles);
    this.textures = scene.maps.map((text) => this.texture(text));
  }

  fill(target, data) {
    const buffer = this.gl.createBuffer();
    this.gl.bindBuffer(target, buffer);
    this.gl.bufferData(target, data, this.gl.STATIC_DRAW);
    return buffer;
  }

  texture(text) {
    const { gl } = this, made = gl.createTexture(), image = new Image();
    gl.bindTexture(gl.TEXTURE_2D, made);
    gl.texImage2D(gl.TEXTURE_2D, 0, gl.RGB8, 1, 1, 0, gl.RGB, gl.UNSIGNED_BYTE, new Uint8Array([128, 128, 255]));
    image.onload = () => {
      gl.bindTexture(gl.TEXTURE_2D, made);
      gl.pixelStorei(gl.UNPACK_COLORSPACE_CONVERSION_WEBGL, gl.NONE);
      gl.texImage2D(gl.TEXTURE_2D, 0, gl.RGB8, gl.RGB, gl.UNSIGNED_BYTE, image);
      gl.generateMipmap(gl.TEXTURE_2D);
      this.draw();
    };
    image.src = `data:image/png;base64,${text}`;
    return made;
  }

  // Vertex k's point, normal, tangent and side, unpacked.
  corner(k) {
    const u = new Uint16Array(this.data, 32 * k, 4), s = new Int16Array(this.data, 32 * k + 8, 8), b = this.scene.box;
    const unit = (i) => [s[i] / 32767, s[i + 1] / 32767, s[i + 2] / 32767];
    return { p: [0, 1, 2].map((i) => b[i] + (u[i] / 65535) * b[3 + i]), n: unit(0), t: unit(4), side: Math.sign(s[7]) };
  }

  lineArray(rows) {
    const { gl } = this, made = { array: gl.createVertexArray(), count: rows.length / 6 };
    gl.bindVertexArray(made.array);
    this.fill(gl.ARRAY_BUFFER, new Float32Array(rows));
    for (const k of [0, 1]) {
      gl.enableVertexAttribArray(k);
      gl.vertexAttribPointer(k, 3, gl.FLOAT, false, 24, 12 * k);
    }
    return made;
  }

  frameLines() {
    const rows = [], step = Math.max(1, Math.ceil(this.count / MOST_FRAMES));
    const length = this.size * Math.min(0.08, 1.6 / Math.sqrt(this.count / step));
    for (let k = 0; k < this.count; k += step) {
      const { p, n, t, side } = this.corner(k);
      const b = [n[1] * t[2] - n[2] * t[1], n[2] * t[0] - n[0] * t[2], n[0] * t[1] - n[1] * t[0]].map((v) => v * side);
      const axes = side ? [[t, [0.95, 0.25, 0.2]], [b, [0.3, 0.85, 0.3]], [n, [0.35, 0.55, 1]]] : [[n, [0.35, 0.55, 1]]];
      for (const [axis, tint] of axes) rows.push(...p, ...tint, ...p.map((v, i) => v + axis[i] * length), ...tint);
    }
    return this.lineArray(rows);
  }

  edgeLines() {
    const rows = [], seen = new Set();
    for (let k = 0; k < this.triangles.length; k++) {
      const a = this.triangles[k], b = this.triangles[k % 3 === 2 ? k - 2 : k + 1];
      const key = Math.min(a, b) * this.count + Math.max(a, b);
      if (seen.has(key)) continue;
      seen.add(key);
      for (const end of [a, b]) rows.push(...this.corner(end).p, 0.1, 0.11, 0.13);
    }
    return this.lineArray(rows);
  }

  controls() {
    const bar = document.createElement("div");
    bar.className = "controls";
    const names = [...(this.scene.maps.length ? [["mapped", "normal map"]] : []), ["framed", "frames"], ["edged", "edges"]];
    for (const [field, name] of names) {
      const label = document.createElement("label"), box = document.createElement("input");
      box.type = "checkbox";
      box.checked = this[field];
      box.addEventListener("change", () => { this[field] = box.checked; this.draw(); });
      label.append(box, ` ${name}`);
      bar.append(label);
    }
    const hint = document.createElement("span");
    hint.textContent = "drag to turn, shift and drag to move the light, wheel to come closer";
    bar.append(hint);
    this.stage.after(bar);
    this.bar = bar;
  }

  listen() {
    const { canvas } = this;
    let last = null;
    canvas.addEventListener("pointerdown", (event) => { last = [event.clientX, event.clientY]; canvas.setPointerCapture(event.pointerId); });
    canvas.addEventListener("pointerup", () => { last = null; });
    canvas.addEventListener("pointermove", (event) => {
      if (!last) return;
      const x = (event.clientX - last[0]) / 150, y = (event.clientY - last[1]) / 150;
      last = [event.clientX, event.clientY];
      if (event.shiftKey) {
        this.lightTurn += x;
        this.lightRise = Math.max(-1.5, Math.min(1.5, this.lightRise - y));
      } else {
        this.turn -= x;
        this.rise = Math.max(-1.55, Math.min(1.55, this.rise + y));
      }
      this.draw();
    });
    canvas.addEventListener("wheel", (event) => {
      event.preventDefault();
      this.away = Math.max(0.05, Math.min(4, this.away * Math.exp(event.deltaY / 800)));
      this.draw();
    }, { passive: false });
    canvas.addEventListener("dblclick", () => { this.turn = 0.55; this.rise = 0.35; this.away = 1; this.draw(); });
    new ResizeObserver(() => this.draw()).observe(canvas);
  }

  // Column-major matrix of a camera that looks at the middle, and the direction towards it.
  camera() {
    const [cy, sy, cx, sx] = [Math.cos(this.turn), Math.sin(this.turn), Math.cos(this.rise), Math.sin(this.rise)];
    const right = [cy, 0, -sy], up = [-sy * sx, cx, -cy * sx], back = [sy * cx, sx, cy * cx];
    const size = this.size || 1, far = 4.2 * size * this.away, near = Math.max(far - 2 * size, size / 50), end = far + 2 * size;
    const f = 3.7, dot = (a) => a[0] * this.middle[0] + a[1] * this.middle[1] + a[2] * this.middle[2];
    const a = (end + near) / (near - end), b = (2 * end * near) / (near - end);
    const rows = [right.map((v) => f * v), up.map((v) => f * v), back.map((v) => a * v), back.map((v) => -v)];
    const shift = [-f * dot(right), -f * dot(up), a * (-dot(back) - far) + b, dot(back) + far];
    const matrix = [];
    for (let c = 0; c < 3; c++) for (let r = 0; r < 4; r++) matrix.push(rows[r][c]);
    return { matrix: [...matrix, ...shift], right, up, back };
  }

  draw() {
    const { gl, canvas, scene, surface } = this;
    const side = Math.round(canvas.clientWidth * (window.devicePixelRatio || 1)) || 340;
    if (canvas.width !== side) canvas.width = canvas.height = side;
    gl.viewport(0, 0, side, side);
    gl.clearColor(0.427, 0.435, 0.451, 1);
    gl.clear(gl.COLOR_BUFFER_BIT | gl.DEPTH_BUFFER_BIT);
    gl.enable(gl.DEPTH_TEST);
    const { matrix, right, up, back } = this.camera();
    const [cx, sx] = [Math.cos(this.lightRise), Math.sin(this.lightRise)];
    const light = [0, 1, 2].map((i) => right[i] * Math.sin(this.lightTurn) * cx + up[i] * sx + back[i] * Math.cos(this.lightTurn) * cx);
    gl.useProgram(surface.made);
    gl.uniformMatrix4fv(surface.at.camera, false, matrix);
    gl.uniform3fv(surface.at.low, scene.box.slice(0, 3));
    gl.uniform3fv(surface.at.sides, scene.box.slice(3));
    gl.uniform3fv(surface.at.light, light);
    gl.uniform3fv(surface.at.eye, back);
    gl.uniform4f(surface.at.flat_colour, 0, 0, 0, 0);
    gl.bindVertexArray(this.mesh);
    gl.bindBuffer(gl.ELEMENT_ARRAY_BUFFER, this.all);
    gl.enable(gl.POLYGON_OFFSET_FILL);
    gl.polygonOffset(1, 1);
    for (const { first, count, map, strength } of scene.groups) {
      gl.bindTexture(gl.TEXTURE_2D, map >= 0 ? this.textures[map] : null);
      gl.uniform1f(surface.at.strength, map >= 0 && this.mapped ? strength : 0);
      gl.drawElements(gl.TRIANGLES, 3 * count, gl.UNSIGNED_INT, 12 * first);
    }
    if (this.mark) this.drawMark();
    gl.useProgram(this.lines.made);
    gl.uniformMatrix4fv(this.lines.at.camera, false, matrix);
    if (this.edged) this.drawLines(this.edges ??= this.edgeLines());
    if (this.framed) this.drawLines(this.frames ??= this.frameLines());
  }

  drawMark() {
    const { gl } = this;
    gl.bindBuffer(gl.ELEMENT_ARRAY_BUFFER, this.mark.buffer);
    gl.polygonOffset(0, 0);
    gl.enable(gl.BLEND);
    gl.blendFunc(gl.SRC_ALPHA, gl.ONE_MINUS_SRC_ALPHA);
    gl.uniform4fv(this.surface.at.flat_colour, MARK);
    gl.drawElements(gl.TRIANGLES, this.mark.count, gl.UNSIGNED_INT, 0);
    gl.disable(gl.BLEND);
    gl.bindBuffer(gl.ELEMENT_ARRAY_BUFFER, this.all);
  }

  drawLines({ array, count }) {
    this.gl.bindVertexArray(array);
    this.gl.drawArrays(this.gl.LINES, 0, count);
  }

  show(number) {
    if (this.mark) this.gl.deleteBuffer(this.mark.buffer);
    this.mark = null;
    if (number !== null) {
      const rows = new Uint32Array(bytes(this.scene.marks[number])), index = new Uint32Array(3 * rows.length);
      rows.forEach((row, k) => index.set(this.triangles.subarray(3 * row, 3 * row + 3), 3 * k));
      this.gl.bindVertexArray(this.mesh);
      this.mark = { buffer: this.fill(this.gl.ELEMENT_ARRAY_BUFFER, index), count: index.length };
      this.gl.bindBuffer(this.gl.ELEMENT_ARRAY_BUFFER, this.all);
    }
    for (const button of this.article.querySelectorAll("[data-mark]")) {
      button.setAttribute("aria-pressed", String(button.dataset.mark === number));
    }
    this.draw();
  }

  close() {
    this.gl?.getExtension("WEBGL_lose_context")?.loseContext();
    this.canvas.remove();
    this.bar?.remove();
    for (const button of this.article.querySelectorAll("[data-mark]")) button.setAttribute("aria-pressed", "false");
  }
}

let open = null;
function viewer(article) {
  if (open?.article !== article) {
    open?.close();
    open = new Viewer(article);
  }
  return open;
}
document.addEventListener("click", (event) => {
  const button = event.target.closest("button.open, button[data-mark]");
  if (!button) return;
  const shown = viewer(button.closest("article")), number = button.dataset.mark;
  if (number !== undefined && shown.surface) shown.show(button.getAttribute("aria-pressed") === "true" ? null : number);
});
