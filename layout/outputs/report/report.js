"use strict";
// The report's few moving parts: layouts to switch between, the head to turn, a card per sensor, a copy button.
// Works on what the page holds; asks nothing of any network. Without it the page shows every layout, flat.
(() => {
  const byId = (name) => document.getElementById(name);
  const all = (choice, within = document) => [...within.querySelectorAll(choice)];
  const page = document.documentElement, stage = byId("stage"), head = byId("head"), marks = byId("marks");
  const scene = JSON.parse(byId("scene").textContent);
  const tabs = all("[role=tab]");
  const TURN = 10, ZOOM = 1.15, NEAREST = 0.35, FARTHEST = 1.6; // degrees; factors of the viewer's distance
  const BEHIND = -0.2, IN_SIGHT = 0.15; // cosines between a normal and the way to the viewer
  const VIEWS = { front: [90, 0], left: [180, 0], right: [0, 0], back: [-90, 0], top: [-90, 90] };
  const rgb = (colour) => [1, 3, 5].map((at) => parseInt(colour.slice(at, at + 2), 16));
  let shown = 0, picture = null, places = [];

  // ---- colours of the cortex ---------------------------------------------------------------------------------
  const chosen = (name) => document.querySelector(`input[name=${name}]:checked`)?.value;
  const layer = (name) => document.querySelector(`input[name=layer][value=${name}]`).checked;
  const ramp = JSON.parse(head.dataset.ramp).map(rgb);
  function onRamp(step) {
    const at = (step / 255) * (ramp.length - 1), low = Math.min(Math.floor(at), ramp.length - 2);
    return ramp[low].map((from, k) => Math.round(from + (at - low) * (ramp[low + 1][k] - from)));
  }
  function cortexColours() {
    const sensitive = chosen("paint") === "sensitivity";
    const number = picture.unpack(sensitive ? scene.sensitivity.steps[shown] : scene.cortex.region);
    const paint = sensitive ? Array.from({ length: 256 }, (_, step) => onRamp(step)) : [scene.grey, ...scene.regionColours].map(rgb);
    const out = new Uint8Array(3 * number.length);
    number.forEach((one, at) => out.set(paint[one], 3 * at));
    return out;
  }

  // ---- the picture -------------------------------------------------------------------------------------------
  function drawHead() {
    if (!picture) return;
    const layout = scene.layouts[shown], sensitive = chosen("paint") === "sensitivity";
    picture.paintCortex(cortexColours());
    picture.show({ layout: shown, axes: rgb(layout.axisColour), paper: rgb(head.dataset.paper),
      scalp: layer("scalp"), cortex: layer("cortex"), candidates: layer("candidates") });
    head.setAttribute("aria-label", head.dataset.label.replace("#", layout.rank));
    byId("key-sensitivity").hidden = !sensitive;
    byId("key-regions").hidden = sensitive;
  }

  /** Numbers of the sensors and names of the landmarks, as page elements over the picture. */
  function setMarks() {
    const layout = scene.layouts[shown], at = picture.places(layout.places), normal = picture.places(layout.normals);
    const triple = (flat, k) => [...flat.slice(3 * k, 3 * k + 3)];
    marks.replaceChildren();
    places = scene.landmarks.map((mark) => {
      const made = Object.assign(document.createElement("span"), { className: "landmark", textContent: mark.name });
      return { made, at: mark.at, normal: mark.at.map((value, k) => value - picture.middle[k]) };
    });
    layout.numbers.forEach((number, k) => {
      const made = Object.assign(document.createElement("span"), { className: "disc", textContent: number });
      made.style.setProperty("--disc", layout.colours[k]);
      made.classList.toggle("open", layout.hollow[k]);
      made.dataset.sensor = `${layout.rank}-${number}`;
      made.addEventListener("pointerenter", () => pick(made.dataset.sensor));
      made.addEventListener("click", () => pick(made.dataset.sensor));
      places.push({ made, at: triple(at, k), normal: triple(normal, k) });
    });
    marks.append(...places.map((place) => place.made));
  }
  function placeMarks() {
    for (const { made, at, normal } of places) {
      const [x, y, depth, cosine] = picture.project(at, normal);
      made.style.transform = `translate(${x.toFixed(1)}px, ${y.toFixed(1)}px) translate(-50%, -50%)`;
      made.style.zIndex = String(Math.round(5000 - 5000 * depth));
      made.classList.toggle("far", cosine < BEHIND);
    }
  }
  function look(round, up, far) {
    picture.look(round, Math.max(-90, Math.min(90, up)), Math.max(NEAREST, Math.min(FARTHEST, far)));
  }
  function turn(round, up, nearer = 0) {
    const now = picture.camera;
    look(now.round + round, now.up + up, now.far * ZOOM ** -nearer);
  }

  // ---- a sensor's card ---------------------------------------------------------------------------------------
  function pick(sensor) {
    const source = byId(sensor ? `card-${sensor}` : "card-none");
    byId("card").replaceChildren(source.content.cloneNode(true));
    for (const one of all("[data-sensor]")) {
      one.classList.toggle("picked", one.dataset.sensor === sensor);
      if (one.matches("button")) one.setAttribute("aria-pressed", String(one.dataset.sensor === sensor));
    }
  }
  /** Turns the head so far that a sensor on its other side comes into sight. */
  function bring(sensor) {
    const place = picture && places.find((one) => one.made.dataset.sensor === sensor);
    if (!place || picture.project(place.at, place.normal)[3] > IN_SIGHT) return;
    const [x, y, z] = place.normal, degrees = 180 / Math.PI;
    look(Math.atan2(y, x) * degrees, Math.max(-20, Math.min(60, Math.atan2(z, Math.hypot(x, y)) * degrees)), picture.camera.far);
  }
  for (const chip of all(".chip")) {
    chip.addEventListener("pointerenter", () => pick(chip.dataset.sensor));
    for (const happening of ["focus", "click"]) {
      chip.addEventListener(happening, () => { pick(chip.dataset.sensor); bring(chip.dataset.sensor); });
    }
  }

  // ---- layouts to switch between -----------------------------------------------------------------------------
  function show(place, focus) {
    shown = place;
    for (const part of all("[data-layout]")) part.hidden = Number(part.dataset.layout) !== place;
    tabs.forEach((tab, k) => {
      tab.setAttribute("aria-selected", String(k === place));
      tab.tabIndex = k === place ? 0 : -1;
    });
    for (const row of all("[data-row]")) {
      if (Number(row.dataset.row) === place) row.setAttribute("aria-current", "true");
      else row.removeAttribute("aria-current");
    }
    pick(null);
    if (focus) tabs[place].focus();
    if (picture) setMarks();
    drawHead();
  }
  tabs.forEach((tab, place) => {
    tab.addEventListener("click", () => show(place));
    tab.addEventListener("keydown", (event) => {
      const steps = { ArrowRight: place + 1, ArrowLeft: place - 1, Home: 0, End: tabs.length - 1 };
      if (!(event.key in steps)) return;
      event.preventDefault();
      show((steps[event.key] + tabs.length) % tabs.length, true);
    });
  });
  for (const link of all("[data-show]")) link.addEventListener("click", () => show(Number(link.dataset.show)));

  // ---- methods to paste --------------------------------------------------------------------------------------
  byId("copy").addEventListener("click", async () => {
    const text = byId("methods-text");
    try {
      await navigator.clipboard.writeText(text.textContent);
      byId("said").textContent = "Copied.";
    } catch {
      getSelection().selectAllChildren(text); // refused or absent: leave it marked for the reader's own copy key
      byId("said").textContent = document.execCommand("copy") ? "Copied." : "Marked: press Ctrl+C, or hold, to copy.";
    }
  });

  // ---- start -------------------------------------------------------------------------------------------------
  function listen() {
    let from = null;
    head.addEventListener("pointerdown", (event) => {
      from = [event.clientX, event.clientY];
      head.setPointerCapture(event.pointerId);
    });
    head.addEventListener("pointermove", (event) => {
      if (!from) return;
      const [x, y] = [event.clientX - from[0], event.clientY - from[1]];
      from = [event.clientX, event.clientY];
      turn((-180 * x) / head.clientHeight, (180 * y) / head.clientHeight);
    });
    for (const happening of ["pointerup", "pointercancel"]) head.addEventListener(happening, () => { from = null; });
    byId("view").addEventListener("keydown", (event) => {
      const way = { ArrowLeft: [TURN, 0], ArrowRight: [-TURN, 0], ArrowUp: [0, TURN], ArrowDown: [0, -TURN],
        "+": [0, 0, 1], "-": [0, 0, -1] }[event.key];
      if (!way || event.ctrlKey || event.metaKey || event.altKey) return;
      event.preventDefault();
      turn(...way);
    });
    for (const button of all("[data-view]")) {
      button.addEventListener("click", () => look(...VIEWS[button.dataset.view], picture.camera.far));
    }
    for (const button of all("[data-turn]")) {
      button.addEventListener("click", () => turn(...JSON.parse(button.dataset.turn)));
    }
    for (const input of all("input", stage)) input.addEventListener("change", drawHead);
    head.addEventListener("webglcontextlost", () => page.classList.replace("solid", "flat-only"));
    new ResizeObserver(picture.redraw).observe(head);
  }
  page.classList.add("scripted", "solid");
  try {
    picture = turningHead(head, scene);
    picture.afterwards = placeMarks;
    look(...JSON.parse(head.dataset.look));
    listen();
  } catch {
    picture = null;
    page.classList.replace("solid", "flat-only");
  }
  show(0);
})();
