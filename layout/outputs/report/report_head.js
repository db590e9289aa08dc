"use strict";
// Draws the head: cortex, arrows and places solid, the scalp as a veil over them, numbers as page elements on top.
// turningHead(canvas, scene) gives an object with show(state), look(round, up, far) and project(points); it throws
// where the browser has no WebGL 2.
function turningHead(canvas, scene) {
  const gl = canvas.getContext("webgl2", { antialias: true, alpha: false });
  if (!gl) throw new Error("no WebGL 2");
  const KINDS = { i1: Int8Array, u1: Uint8Array, i2: Int16Array, u2: Uint16Array, u4: Uint32Array };
  const FIELD = 24, MARGIN = 16; // degrees of the view from middle to edge; mm left around the scalp
  let camera = { round: 0, up: 0, far: 1 }, state = null, waiting = false, matrix = null, eye = null;
  let afterwards = () => {};

  function unpack(packed) {
    const text = atob(packed.data), bytes = new Uint8Array(text.length);
    for (let k = 0; k < text.length; k++) bytes[k] = text.charCodeAt(k);
    return new KINDS[packed.type](bytes.buffer); // little-endian, as every browser's machine is
  }
  const places = (packed) => Float32Array.from(unpack(packed), (whole) => whole * scene.step);

  // ---- programs ----------------------------------------------------------------------------------------------
  const SURFACE = [`#version 300 es
    uniform mat4 matrix; in vec3 place; in vec3 normal; in vec3 colour; out vec3 n; out vec3 p; out vec3 c;
    void main() { n = normal; p = place; c = colour; gl_Position = matrix * vec4(place, 1.0); }`, `#version 300 es
    precision highp float; uniform vec3 eye; uniform vec3 light; uniform vec2 veil; in vec3 n; in vec3 p; in vec3 c;
    out vec4 pixel;
    void main() {
      vec3 across = normalize(n);
      float slant = 1.0 - abs(dot(across, normalize(eye - p)));
      float lit = 0.70 + 0.32 * max(dot(across, light), 0.0);
      // a thin shell is denser where it is looked at along its surface
      pixel = veil.y > 0.0 ? vec4(c, veil.x + veil.y * pow(slant, 2.5)) : vec4(c * lit, 1.0);
    }`];
  const DOTS = [`#version 300 es
    uniform mat4 matrix; uniform vec2 shift; uniform float size; uniform vec3 eye; uniform vec3 middle; in vec3 place;
    void main() {
      gl_Position = matrix * vec4(place, 1.0);
      gl_Position.xyz += vec3(shift, -0.0004) * gl_Position.w; // a hair towards the viewer: lies on its surface
      gl_PointSize = size;
      if (size > 1.0 && dot(place - middle, eye - place) < 0.0) gl_Position = vec4(2.0, 2.0, 2.0, 1.0); // behind: left out
    }`, `#version 300 es
    precision highp float; uniform vec4 paint; uniform bool round; out vec4 pixel;
    void main() { if (round && length(gl_PointCoord - 0.5) > 0.5) discard; pixel = paint; }`];

  function program(sources) {
    const made = gl.createProgram();
    sources.forEach((source, k) => {
      const shader = gl.createShader(k ? gl.FRAGMENT_SHADER : gl.VERTEX_SHADER);
      gl.shaderSource(shader, source);
      gl.compileShader(shader);
      gl.attachShader(made, shader);
    });
    ["place", "normal", "colour"].forEach((name, k) => gl.bindAttribLocation(made, k, name));
    gl.linkProgram(made);
    if (!gl.getProgramParameter(made, gl.LINK_STATUS)) throw new Error("no program");
    return new Proxy(made, { get: (_, name) => (name === "use" ? () => gl.useProgram(made) : gl.getUniformLocation(made, name)) });
  }
  const surface = program(SURFACE), dots = program(DOTS);

  // ---- buffers -----------------------------------------------------------------------------------------------
  function fill(slot, data, type, scaled) {
    gl.bindBuffer(gl.ARRAY_BUFFER, gl.createBuffer());
    gl.bufferData(gl.ARRAY_BUFFER, data, gl.STATIC_DRAW);
    gl.enableVertexAttribArray(slot);
    gl.vertexAttribPointer(slot, 3, type, scaled, 0, 0);
  }
  function normalsOf(at, faces) {
    const out = new Float32Array(at.length);
    for (let f = 0; f < faces.length; f += 3) {
      const [a, b, c] = [3 * faces[f], 3 * faces[f + 1], 3 * faces[f + 2]];
      const u = [0, 1, 2].map((k) => at[b + k] - at[a + k]), v = [0, 1, 2].map((k) => at[c + k] - at[a + k]);
      for (let k = 0; k < 3; k++) {
        const part = u[(k + 1) % 3] * v[(k + 2) % 3] - u[(k + 2) % 3] * v[(k + 1) % 3];
        out[a + k] += part; out[b + k] += part; out[c + k] += part;
      }
    }
    return out;
  }
  function mesh(packed, colours) {
    const at = places(packed.points), faces = unpack(packed.faces), array = gl.createVertexArray();
    gl.bindVertexArray(array);
    fill(0, at, gl.FLOAT, false);
    fill(1, normalsOf(at, faces), gl.FLOAT, false);
    if (colours) fill(2, colours, gl.UNSIGNED_BYTE, true);
    else gl.disableVertexAttribArray(2);
    gl.bindBuffer(gl.ELEMENT_ARRAY_BUFFER, gl.createBuffer());
    gl.bufferData(gl.ELEMENT_ARRAY_BUFFER, faces, gl.STATIC_DRAW);
    const type = { u2: gl.UNSIGNED_SHORT, u4: gl.UNSIGNED_INT }[packed.faces.type];
    return { array, at, draw: () => { gl.bindVertexArray(array); gl.drawElements(gl.TRIANGLES, faces.length, type, 0); } };
  }
  function loose(packed, kind) {
    const at = places(packed), array = gl.createVertexArray();
    gl.bindVertexArray(array);
    fill(0, at, gl.FLOAT, false);
    return () => { gl.bindVertexArray(array); gl.drawArrays(kind, 0, at.length / 3); };
  }

  const scalp = mesh(scene.scalp), sites = loose(scene.sites, gl.POINTS), borders = loose(scene.cortex.borders, gl.LINES);
  const axes = scene.layouts.map((layout) => mesh(layout.axes));
  const cortex = mesh(scene.cortex, new Uint8Array(unpack(scene.cortex.points).length));
  gl.bindVertexArray(cortex.array);
  gl.bindBuffer(gl.ARRAY_BUFFER, gl.getVertexAttrib(2, gl.VERTEX_ATTRIB_ARRAY_BUFFER_BINDING));
  const paints = gl.getParameter(gl.ARRAY_BUFFER_BINDING);
  function paintCortex(colours) {
    gl.bindBuffer(gl.ARRAY_BUFFER, paints);
    gl.bufferSubData(gl.ARRAY_BUFFER, 0, colours);
  }

  // ---- where the viewer stands -------------------------------------------------------------------------------
  const low = [0, 1, 2].map((k) => scalp.at.reduce((least, value, at) => (at % 3 === k ? Math.min(least, value) : least), 1e9));
  const high = [0, 1, 2].map((k) => scalp.at.reduce((most, value, at) => (at % 3 === k ? Math.max(most, value) : most), -1e9));
  const middle = low.map((least, k) => (least + high[k]) / 2);
  const radius = Math.max(...low.map((least, k) => (high[k] - least) / 2)) + MARGIN;
  const dot = (a, b) => a[0] * b[0] + a[1] * b[1] + a[2] * b[2];

  function aim() {
    const [round, up] = [camera.round, camera.up].map((angle) => (angle * Math.PI) / 180);
    const toward = [Math.cos(up) * Math.cos(round), Math.cos(up) * Math.sin(round), Math.sin(up)];
    const across = [-Math.sin(round), Math.cos(round), 0];
    const over = [-Math.sin(up) * Math.cos(round), -Math.sin(up) * Math.sin(round), Math.cos(up)];
    const tangent = Math.tan((FIELD * Math.PI) / 180), wide = canvas.width / canvas.height;
    const distance = (camera.far * radius) / Math.sin((FIELD * Math.PI) / 180) / Math.min(1, wide);
    eye = middle.map((value, k) => value + distance * toward[k]);
    const near = Math.max(distance - 2 * radius, 5), end = distance + 2 * radius;
    const depth = (end + near) / (near - end), bend = (2 * end * near) / (near - end);
    const rows = [across.map((v) => v / tangent / wide), over.map((v) => v / tangent), toward.map((v) => v * depth), toward.map((v) => -v)];
    const last = rows.map((row) => -dot(row, eye));
    last[2] += bend;
    matrix = new Float32Array([0, 1, 2].flatMap((k) => rows.map((row) => row[k])).concat(last));
    return [0, 1, 2].map((k) => -0.4 * across[k] + 0.55 * over[k] + 0.73 * toward[k]);
  }

  // ---- one picture -------------------------------------------------------------------------------------------
  function draw() {
    waiting = false;
    const fine = Math.min(window.devicePixelRatio || 1, 2);
    const [width, height] = [canvas.clientWidth, canvas.clientHeight].map((size) => Math.max(1, Math.round(size * fine)));
    if (canvas.width !== width || canvas.height !== height) Object.assign(canvas, { width, height });
    gl.viewport(0, 0, width, height);
    gl.clearColor(...state.paper.map((part) => part / 255), 1);
    gl.clear(gl.COLOR_BUFFER_BIT | gl.DEPTH_BUFFER_BIT);
    gl.enable(gl.DEPTH_TEST);
    gl.blendFunc(gl.SRC_ALPHA, gl.ONE_MINUS_SRC_ALPHA);
    const light = aim();
    const solid = (part, colour, veil) => {
      surface.use();
      gl.uniformMatrix4fv(surface.matrix, false, matrix);
      gl.uniform3fv(surface.eye, eye);
      gl.uniform3fv(surface.light, light);
      gl.uniform2fv(surface.veil, veil);
      if (colour) gl.vertexAttrib3fv(2, colour.map((value) => value / 255));
      part.draw();
    };
    const small = (part, paint, size, round, shift) => {
      dots.use();
      gl.uniformMatrix4fv(dots.matrix, false, matrix);
      gl.uniform2fv(dots.shift, shift);
      gl.uniform4fv(dots.paint, paint);
      gl.uniform3fv(dots.eye, eye);
      gl.uniform3fv(dots.middle, middle);
      gl.uniform1f(dots.size, size * fine);
      gl.uniform1i(dots.round, round);
      part();
    };
    gl.disable(gl.BLEND);
    if (state.cortex) {
      solid(cortex, null, [0, 0]);
      for (const [x, y] of [[1, 0], [-1, 0], [0, 1], [0, -1]]) {
        small(borders, [0.08, 0.1, 0.13, 1], 1, false, [(x * fine) / width, (y * fine) / height]);
      }
    }
    solid(axes[state.layout], state.axes, [0, 0]);
    gl.enable(gl.BLEND);
    if (state.candidates) small(sites, [0.23, 0.26, 0.31, 0.45], 4, true, [0, 0]);
    if (state.scalp) {
      gl.enable(gl.CULL_FACE);
      gl.depthMask(false);
      solid(scalp, [107, 120, 140], [0.08, 0.42]);
      gl.depthMask(true);
      gl.disable(gl.CULL_FACE);
    }
    canvas.dataset.drawn = String(Number(canvas.dataset.drawn || 0) + 1);
    afterwards();
  }
  function redraw() {
    if (!waiting && state) requestAnimationFrame(draw);
    waiting = Boolean(state);
  }

  return {
    unpack,
    places,
    paintCortex,
    middle,
    /** state: layout (place), axes and paper [red, green, blue], and the layers cortex, candidates, scalp (true: seen). */
    show(wanted) { state = wanted; redraw(); },
    look(round, up, far) { camera = { round, up, far }; redraw(); },
    get camera() { return { ...camera }; },
    set afterwards(done) { afterwards = done; },
    /** [x, y in CSS pixels, depth from -1 (near) to 1, cosine between the normal and the way to the viewer]. */
    project(at, normal) {
      const [x, y, z, w] = [0, 1, 2, 3].map((row) => dot([matrix[row], matrix[4 + row], matrix[8 + row]], at) + matrix[12 + row]);
      const toEye = eye.map((value, k) => value - at[k]), sizes = Math.hypot(...toEye) * Math.hypot(...normal);
      return [((x / w + 1) / 2) * canvas.clientWidth, ((1 - y / w) / 2) * canvas.clientHeight, z / w, dot(normal, toEye) / sizes];
    },
    redraw,
  };
}
