(function () {
  // Everything that is drawn stands in the page itself: no request is made to anywhere.
  const stage = document.getElementById("stage");
  const view = document.getElementById("view");
  const said = document.getElementById("said");
  const told = document.getElementById("told");
  const still = document.getElementById("stills");
  const slot = document.getElementById("still-slot");
  const later = document.getElementById("still-later");
  const data = JSON.parse(document.getElementById("scene-data").textContent);
  const state = { colour: "plain", through: true, groups: data.groups.map(() => true), kinds: {} };
  const home = { zoom: 1, fill: 1 };
  let camera = null;
  let meaning = [];
  let sortedFor = [0, 0, 1];
  let floats = null;
  let counts = null;

  async function unpacked(id) {
    const packed = Uint8Array.from(atob(document.getElementById(id).textContent), (c) => c.charCodeAt(0));
    const stream = new Blob([packed]).stream().pipeThrough(new DecompressionStream("gzip"));
    return new Response(stream).arrayBuffer();
  }

  function canDraw() {
    const canvas = document.createElement("canvas");
    return Boolean(window.DecompressionStream && (canvas.getContext("webgl2") || canvas.getContext("webgl")));
  }

  const part = (place) => floats.subarray(place[0], place[0] + place[1]);
  const whole = (place) => counts.subarray(place[0], place[0] + place[1]);

  // every third number of a list of points or corners
  function third(all, start) {
    const picked = new all.constructor(all.length / 3);
    for (let i = 0; i < picked.length; i += 1) picked[i] = all[3 * i + start];
    return picked;
  }

  // Triangles from the nearest to the farthest: then of a surface that is seen through, only the front is drawn,
  // whatever the order in its file.
  function nearestFirst(points, triangles) {
    const p = part(points), t = whole(triangles), count = t.length / 3;
    const out = sum(list(camera.eye), scaled(list(camera.center), -1));
    const depth = new Float64Array(count), order = new Uint32Array(count), sorted = new Uint32Array(t.length);
    for (let n = 0; n < count; n += 1) {
      order[n] = n;
      for (let c = 0; c < 3; c += 1) {
        const at = 3 * t[3 * n + c];
        depth[n] += p[at] * out[0] + p[at + 1] * out[1] + p[at + 2] * out[2];
      }
    }
    order.sort((a, b) => depth[b] - depth[a]);
    for (let n = 0; n < count; n += 1) sorted.set(t.subarray(3 * order[n], 3 * order[n] + 3), 3 * n);
    return sorted;
  }

  function mesh(points, triangles, sorted) {
    const p = part(points), t = sorted ? nearestFirst(points, triangles) : whole(triangles);
    return {
      type: "mesh3d", x: third(p, 0), y: third(p, 1), z: third(p, 2),
      i: third(t, 0), j: third(t, 1), k: third(t, 2), hoverinfo: "none", showscale: false,
    };
  }

  // the least lengths of normals are zero: facets are as small as the model is
  const LIGHT = { ambient: 0.5, diffuse: 0.56, specular: 0.05, roughness: 0.8, fresnel: 0.05,
    vertexnormalsepsilon: 0, facenormalsepsilon: 0 };

  // seen from the viewer: left, above, and before the scene
  const LAMP = { x: -6e4, y: 8e4, z: -6e4 };

  function stepped(colours) {
    const scale = [];
    colours.forEach((colour, n) => scale.push([n / colours.length, colour], [(n + 1) / colours.length, colour]));
    return scale;
  }

  function traces() {
    const made = [];
    meaning = [];
    sortedFor = unit(sum(list(camera.eye), scaled(list(camera.center), -1)));
    const add = (trace, of) => { made.push(trace); meaning.push(of); };
    // arrows first: what lies behind a surface that is seen through must be drawn before it
    data.arrows.forEach((arrow, n) => {
      if (!arrow.drawn) return;
      const shown = state.kinds[arrow.kind] !== false;
      add(Object.assign(mesh(arrow.points, arrow.triangles), {
        color: arrow.colour, visible: shown, flatshading: true,
        lighting: { ambient: 0.7, diffuse: 0.4, specular: 0.03, roughness: 0.9 }, lightposition: LAMP,
      }), { arrow: n });
    });
    data.rims.forEach((rim) => {
      const p = part(rim.points), tint = data.groups[rim.group].tint;
      add({
        type: "scatter3d", mode: "lines", hoverinfo: "skip", showlegend: false,
        x: third(p, 0), y: third(p, 1), z: third(p, 2), visible: state.groups[rim.group],
        line: { width: 4, color: `rgb(${tint.map((c) => Math.round(0.55 * c)).join(",")})` },
      }, {});
    });
    // walls last
    const order = data.pieces.map((piece) => piece).sort((a, b) => rank(a) - rank(b));
    order.forEach((piece) => {
      const group = data.groups[piece.group], scale = data.scales[state.colour], values = piece[state.colour];
      const trace = Object.assign(mesh(piece.points, piece.triangles, state.through), {
        lighting: LIGHT, lightposition: LAMP, visible: state.groups[piece.group],
      });
      const port = group.role !== "wall";
      if (scale && values) {
        Object.assign(trace, { intensity: part(values), colorscale: stepped(scale.colours), cmin: scale.levels[0],
          cmax: scale.levels[1], opacity: state.through ? 0.8 : 1 });
      } else {
        // one colour as a scale of one colour: the drawing library keeps values that are taken away
        const paint = `rgb(${(scale ? [238, 238, 236] : group.tint).join(",")})`;
        Object.assign(trace, { intensity: new Float32Array(trace.x.length), colorscale: [[0, paint], [1, paint]],
          cmin: 0, cmax: 1, opacity: state.through ? (port ? 0.7 : 0.45) : 1 });
      }
      add(trace, { group: piece.group });
    });
    return made;
  }

  const rank = (piece) => (data.groups[piece.group].role === "wall" ? 1 : 0);

  function layout() {
    const spans = data.high.map((h, k) => Math.max(h - data.low[k], 1e-9));
    const largest = Math.max(...spans);
    const bare = (k) => ({
      visible: false, showspikes: false,
      range: [data.low[k] - 0.02 * largest, data.high[k] + 0.02 * largest], autorange: false,
    });
    const ratio = spans.map((s) => (s + 0.04 * largest) * home.fill * home.zoom);
    return {
      margin: { l: 0, r: 0, t: 0, b: 0 }, showlegend: false, paper_bgcolor: "rgba(0,0,0,0)", hovermode: "closest",
      uirevision: "fixed",
      scene: {
        xaxis: bare(0), yaxis: bare(1), zaxis: bare(2), aspectmode: "manual", dragmode: "orbit",
        aspectratio: xyz(ratio), camera,
      },
    };
  }

  const SETTINGS = { displayModeBar: false, responsive: true, scrollZoom: false, doubleClick: false };
  const marks = makeMarks(stage, data);
  const mark = (live) => marks(live || camera, home.fill * home.zoom, state);
  const redraw = () => busy(window.Plotly.react(view, traces(), layout(), SETTINGS).then(() => mark()));

  // while something is still to be drawn, the stage says so
  let pending = 0;
  function busy(promise) {
    pending += 1;
    stage.setAttribute("aria-busy", "true");
    const done = () => {
      pending -= 1;
      if (!pending) stage.removeAttribute("aria-busy");
    };
    promise.then(done, done);
    return promise;
  }

  // ---- turning, by buttons and keys ---------------------------------------------------------

  const dot = (a, b) => a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
  const cross = (a, b) => [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]];
  const scaled = (a, f) => a.map((v) => v * f);
  const sum = (...all) => [0, 1, 2].map((k) => all.reduce((s, v) => s + v[k], 0));
  const unit = (a) => scaled(a, 1 / Math.hypot(...a));
  const xyz = (a) => ({ x: a[0], y: a[1], z: a[2] });
  const list = (p) => [p.x, p.y, p.z];

  function turnedAbout(a, axis, angle) {
    const c = Math.cos(angle), s = Math.sin(angle);
    return sum(scaled(a, c), scaled(cross(axis, a), s), scaled(axis, dot(axis, a) * (1 - c)));
  }

  // Seen in parallel, half the height of the stage is one unit of the drawing.
  function cameraFrom(toward) {
    const out = unit(toward);
    const up = Math.abs(dot(out, data.up)) > 0.99
      ? unit(cross(Math.abs(out[0]) < 0.9 ? [1, 0, 0] : [0, 1, 0], out)) : data.up;
    const right = unit(cross(up, out)), above = cross(out, right);
    const middle = data.high.map((h, k) => 0.5 * (h + data.low[k]));
    const flat = data.hull.map((p) => {
      const from = sum(p, scaled(middle, -1));
      return [dot(from, right), dot(from, above)];
    });
    const ends = (k) => [Math.min(...flat.map((p) => p[k])), Math.max(...flat.map((p) => p[k]))];
    const [across, along] = [ends(0), ends(1)];
    const wide = stage.clientWidth / Math.max(stage.clientHeight, 1);
    const inside = 1 - Math.min(0.25, 44 / Math.max(stage.clientHeight, 1));
    home.fill = Math.min(2 * inside * wide / (across[1] - across[0]), 2 * inside / (along[1] - along[0]));
    home.zoom = 1;
    const center = sum(scaled(right, 0.5 * (across[0] + across[1]) * home.fill),
      scaled(above, 0.5 * (along[0] + along[1]) * home.fill));
    return { eye: xyz(sum(center, scaled(out, 2))), up: xyz(up), center: xyz(center),
      projection: { type: "orthographic" } };
  }

  function now() {
    const live = view._fullLayout && view._fullLayout.scene && view._fullLayout.scene._scene;
    return live && live.getCamera ? live.getCamera() : camera;
  }

  function look(next) {
    camera = next;
    mark();
    busy(window.Plotly.relayout(view, { "scene.aspectratio": layout().scene.aspectratio, "scene.camera": camera }));
  }

  function turn(right, up) {
    const from = now(), center = list(from.center), above = unit(list(from.up));
    let out = turnedAbout(sum(list(from.eye), scaled(center, -1)), above, right);
    const tipped = turnedAbout(out, unit(cross(above, out)), -up);
    if (Math.abs(dot(unit(tipped), above)) < 0.985) out = tipped;
    look(Object.assign({}, from, { eye: xyz(sum(center, out)), projection: { type: "orthographic" } }));
  }

  function nearer(factor) {
    const from = now(), old = home.zoom;
    home.zoom = Math.min(8, Math.max(0.3, home.zoom * factor));
    // what is in the middle stays there
    const center = list(from.center), moved = scaled(center, home.zoom / old);
    look(Object.assign({}, from, { center: xyz(moved), eye: xyz(sum(list(from.eye), moved, scaled(center, -1))) }));
  }

  const STEP = Math.PI / 12;
  const DEEDS = {
    left: () => turn(-STEP, 0), right: () => turn(STEP, 0), up: () => turn(0, STEP), down: () => turn(0, -STEP),
    nearer: () => nearer(1.25), farther: () => nearer(0.8),
    home: () => look(cameraFrom(data.toward)),
    "from-x": () => look(cameraFrom([1, 0, 0])), "from-y": () => look(cameraFrom([0, 1, 0])),
    "from-z": () => look(cameraFrom([0, 0, 1])),
  };
  const KEYS = { ArrowLeft: "left", ArrowRight: "right", ArrowUp: "up", ArrowDown: "down", "+": "nearer", "=": "nearer",
    "-": "farther", Home: "home", 0: "home" };

  // ---- what is under the pointer, or chosen ---------------------------------------------------

  function entriesOf(of) {
    if (of.group !== undefined) {
      const group = data.groups[of.group];
      return { head: (group.number ? `${group.number} ` : "") + group.name, under: group.role, rows: group.entries };
    }
    const arrow = data.arrows[of.arrow];
    const rows = [["size", arrow.size], ["x", arrow.parts[0]], ["y", arrow.parts[1]], ["z", arrow.parts[2]]];
    if (arrow.enlarged) rows.push(["†", "drawn longer than to scale, to be seen"]);
    return { head: `${arrow.tag} ${arrow.label}`, under: arrow.body, rows };
  }

  function fill(box, of) {
    const told = entriesOf(of);
    box.replaceChildren();
    const head = document.createElement("p");
    const name = document.createElement("strong");
    name.dir = "auto";
    name.textContent = told.head;
    head.append(name, ` · ${told.under}`);
    const rows = document.createElement("dl");
    told.rows.forEach(([key, value]) => {
      const term = document.createElement("dt"), text = document.createElement("dd");
      term.textContent = key;
      text.textContent = value;
      rows.append(term, text);
    });
    box.append(head, rows);
  }

  let pointer = [0, 0];
  stage.addEventListener("pointermove", (event) => { pointer = [event.clientX, event.clientY]; });

  function listen() {
    view.on("plotly_hover", (event) => {
      const of = meaning[event.points[0].curveNumber];
      if (!of || (of.group === undefined && of.arrow === undefined)) return;
      fill(said, of);
      const box = stage.getBoundingClientRect();
      said.hidden = false;
      const x = Math.min(pointer[0] - box.left + 14, box.width - said.offsetWidth - 6);
      const y = Math.min(pointer[1] - box.top + 14, box.height - said.offsetHeight - 6);
      said.style.left = `${Math.max(6, x)}px`;
      said.style.top = `${Math.max(6, y)}px`;
    });
    view.on("plotly_unhover", () => { said.hidden = true; });
    view.on("plotly_click", (event) => {
      const of = meaning[event.points[0].curveNumber];
      if (of && (of.group !== undefined || of.arrow !== undefined)) fill(told, of);
    });
    view.on("plotly_relayouting", () => mark(now()));
    view.on("plotly_relayout", () => {
      camera = now();
      mark();
      const out = unit(sum(list(camera.eye), scaled(list(camera.center), -1)));
      if (state.through && dot(out, sortedFor) < 0.97) redraw();
    });
    let stageSize = [stage.clientWidth, stage.clientHeight].join();
    new ResizeObserver(() => {
      const size = [stage.clientWidth, stage.clientHeight].join();
      if (size === stageSize || !stage.clientWidth) return;
      stageSize = size;
      DEEDS.home();
    }).observe(stage);
  }

  function controls() {
    document.querySelectorAll("[data-group]").forEach((box) => box.addEventListener("change", () => {
      state.groups[Number(box.dataset.group)] = box.checked;
      camera = now();
      redraw();
    }));
    document.querySelectorAll("[data-kind]").forEach((box) => box.addEventListener("change", () => {
      state.kinds[box.dataset.kind] = box.checked;
      camera = now();
      redraw();
    }));
    document.querySelectorAll("[name=colour]").forEach((box) => box.addEventListener("change", () => {
      state.colour = box.value;
      document.querySelectorAll("[data-bar]").forEach((bar) => { bar.hidden = bar.dataset.bar !== box.value; });
      camera = now();
      redraw();
    }));
    document.getElementById("through").addEventListener("change", (event) => {
      state.through = event.target.checked;
      camera = now();
      redraw();
    });
    document.querySelectorAll("[data-tell]").forEach((button) => button.addEventListener("click", () => {
      fill(told, { group: Number(button.dataset.tell) });
    }));
    document.querySelectorAll("[data-deed]").forEach((button) => {
      button.addEventListener("click", () => DEEDS[button.dataset.deed]());
    });
    stage.addEventListener("keydown", (event) => {
      const deed = KEYS[event.key];
      if (!deed || event.target !== stage || event.ctrlKey || event.metaKey || event.altKey) return;
      event.preventDefault();
      DEEDS[deed]();
    });
    // on a touch screen a finger scrolls the page until the scene is tapped
    const cover = document.getElementById("cover");
    if (window.matchMedia("(pointer: coarse)").matches) {
      cover.hidden = false;
      cover.addEventListener("click", () => { cover.hidden = true; stage.focus(); });
      document.addEventListener("pointerdown", (event) => {
        if (!stage.contains(event.target)) cover.hidden = false;
      });
    }
  }

  // On paper the still pictures stand where the scene stands on the screen.
  const forPaper = () => { if (still) slot.append(still); };
  const forScreen = () => { if (still) later.append(still); };

  async function snapshot() {
    if (still) return;
    const image = document.createElement("img");
    image.id = "snapshot";
    image.alt = "The surface with its force vectors, as in the scene.";
    image.src = await window.Plotly.toImage(view, { format: "png", width: 1400, height: 1000 });
    slot.append(image);
  }

  async function begin() {
    if (!canDraw()) throw new Error("no WebGL");
    const block = await unpacked("scene-block");
    floats = new Float32Array(block);
    counts = new Uint32Array(block);
    const script = document.createElement("script");
    script.textContent = new TextDecoder().decode(await unpacked("drawing-script"));
    document.head.append(script);
    if (!window.Plotly) throw new Error("the drawing script did not start");
    document.body.classList.add("scene-on");
    forScreen();
    camera = cameraFrom(data.toward);
    await window.Plotly.newPlot(view, traces(), layout(), SETTINGS);
    mark();
    listen();
    controls();
    window.addEventListener("beforeprint", forPaper);
    window.addEventListener("afterprint", forScreen);
    await snapshot();
    stage.dataset.ready = "yes";
  }

  window.addEventListener("load", () => setTimeout(() => begin().catch((error) => {
    document.body.classList.remove("scene-on");
    forPaper();
    stage.dataset.ready = "no";
    document.getElementById("no-scene").hidden = false;
    console.warn(`The scene cannot be drawn here: ${error.message}`);
  }), 0));
})();
