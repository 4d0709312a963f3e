"use strict";
// What is written over the scene: tags, names of ports, axes, scales. In plain SVG over the drawing, so that no
// surface hides a word, and so that words from outside are text and nothing else.
function makeMarks(stage, data) {
  const SVG = "http://www.w3.org/2000/svg";
  const layer = document.createElementNS(SVG, "svg");
  layer.setAttribute("aria-hidden", "true");
  layer.id = "marks";
  stage.append(layer);
  const ruler = document.createElement("canvas").getContext("2d");
  const middle = data.high.map((h, k) => 0.5 * (h + data.low[k]));
  const dot = (a, b) => a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
  const cross = (a, b) => [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]];
  const unit = (a) => a.map((v) => v / Math.hypot(...a));
  const list = (p) => [p.x, p.y, p.z];

  function add(name, attributes, text) {
    const made = document.createElementNS(SVG, name);
    Object.entries(attributes).forEach(([key, value]) => made.setAttribute(key, value));
    if (text !== undefined) made.textContent = text;
    layer.append(made);
    return made;
  }

  // 1, 2 or 5 times a power of ten, not above a value
  function round(value) {
    const power = 10 ** Math.floor(Math.log10(value));
    return [5, 2, 1].map((f) => f * power).find((step) => step <= value * (1 + 1e-9)) || power;
  }

  function shorter(text, most) {
    const letters = Array.from(text);
    return letters.length > most ? `${letters.slice(0, most - 1).join("")}…` : text;
  }

  // Boxes that are taken, as [left, top, right, bottom].
  function free(box, taken, width, height) {
    if (box[0] < 2 || box[1] < 2 || box[2] > width - 2 || box[3] > height - 2) return false;
    return taken.every((t) => box[2] <= t[0] || box[0] >= t[2] || box[3] <= t[1] || box[1] >= t[3]);
  }

  // Small boxes along an arrow on the stage: what is written must not hide it.
  function along(tail, tip) {
    const count = Math.max(2, Math.ceil(Math.hypot(tip[0] - tail[0], tip[1] - tail[1]) / 7));
    return Array.from({ length: count + 1 }, (_, n) => {
      const x = tail[0] + (tip[0] - tail[0]) * n / count, y = tail[1] + (tip[1] - tail[1]) * n / count;
      const half = n > 0.6 * count ? 6 : 3;
      return [x - half, y - half, x + half, y + half];
    });
  }

  // Where a box finds room: off the arrows, or on them where there is no other.
  function place(at, wide, high, taken, arrows, size, away) {
    return placed(at, wide, high, [...taken, ...arrows], size, away) || placed(at, wide, high, taken, size, away);
  }

  function placed(at, wide, high, taken, size, away) {
    const turns = [0, 0.6, -0.6, 1.2, -1.2, 1.8, -1.8, 2.5, -2.5, Math.PI];
    for (const reach of [0, 14, 26, 40, 58, 80]) {
      for (const turn of reach ? turns : [0]) {
        const x = at[0] + reach * Math.cos(away + turn), y = at[1] + reach * Math.sin(away + turn);
        const box = [x - wide / 2 - 2, y - high / 2 - 1, x + wide / 2 + 2, y + high / 2 + 1];
        if (free(box, taken, size[0], size[1])) return { x, y, box };
      }
    }
    return null;
  }

  return function draw(camera, scale, state) {
    const width = stage.clientWidth, height = stage.clientHeight;
    layer.setAttribute("viewBox", `0 0 ${width} ${height}`);
    layer.replaceChildren();
    const center = list(camera.center);
    const out = unit(list(camera.eye).map((v, k) => v - center[k]));
    const right = unit(cross(list(camera.up), out)), above = cross(out, right);
    // seen in parallel, half the height of the stage is one unit
    const pixels = height / 2;
    const flat = (p) => {
      const from = p.map((v, k) => (v - middle[k]) * scale - center[k]);
      return [width / 2 + pixels * dot(from, right), height / 2 - pixels * dot(from, above)];
    };
    const taken = [[0, height - 34, Math.min(width, 330), height], [0, height - 86, 86, height]];
    const seen = data.arrows.filter((arrow) => arrow.drawn && state.kinds[arrow.kind] !== false);
    const arrows = seen.flatMap((arrow) => {
      const tip = flat(arrow.tip), half = flat(arrow.middle);
      return along([2 * half[0] - tip[0], 2 * half[1] - tip[1]], tip);
    });

    // axes
    const foot = [44, height - 44];
    const ends = [right, above].map((axis) => [0, 1, 2].map((k) => axis[k]));
    [0, 1, 2].map((k) => ({ k, depth: out[k] })).sort((a, b) => a.depth - b.depth).forEach(({ k }) => {
      const tip = [foot[0] + 24 * ends[0][k], foot[1] - 24 * ends[1][k]];
      add("line", { x1: foot[0], y1: foot[1], x2: tip[0], y2: tip[1], class: "axis" });
      const far = [foot[0] + 33 * ends[0][k], foot[1] - 33 * ends[1][k]];
      if (Math.hypot(ends[0][k], ends[1][k]) > 0.15) add("text", { x: far[0], y: far[1] + 4, class: "word middle" }, "xyz"[k]);
    });

    // scales of distance and force
    const bars = [{ per: scale * pixels, unit: data.length }];
    if (data.metresPerNewton > 0) bars.push({ per: scale * pixels * data.metresPerNewton, unit: data.force });
    bars.forEach((bar, n) => {
      const most = Math.min(110, 0.26 * width);
      const value = round(most / bar.per / bar.unit.factor);
      const long = value * bar.unit.factor * bar.per, x = 90 + n * (most + 18), y = height - 14;
      add("path", { d: `M${x} ${y - 5}v5h${long}v-5`, class: "axis" });
      add("text", { x, y: y - 9, class: "word" }, `${Number(value.toPrecision(3))} ${bar.unit.symbol}`);
    });

    // tags of the arrows first, then names of ports where there is room
    ruler.font = "700 13px Arial, sans-serif";
    seen.forEach((arrow) => {
      const text = arrow.tag + (arrow.enlarged ? "†" : ""), wide = ruler.measureText(text).width + 8;
      const at = flat(arrow.tagAt), from = flat(arrow.middle);
      const spot = place(at, wide, 18, taken, arrows, [width, height], Math.atan2(at[1] - from[1], at[0] - from[0]));
      if (!spot) return;
      taken.push(spot.box);
      if (Math.hypot(spot.x - at[0], spot.y - at[1]) > 20) {
        add("line", { x1: at[0], y1: at[1], x2: spot.x, y2: spot.y, class: "leader" });
      }
      add("rect", { x: spot.x - wide / 2, y: spot.y - 9, width: wide, height: 18, class: "tagbox", stroke: arrow.colour });
      add("text", { x: spot.x, y: spot.y + 4.5, class: "word strong middle" }, text);
    });
    ruler.font = "13px Arial, sans-serif";
    const whole = flat(middle);
    data.ports.forEach((port) => {
      if (!state.groups[port.group]) return;
      const text = shorter(`${port.number} ${data.groups[port.group].name}`, 22), wide = ruler.measureText(text).width + 10;
      const at = flat(port.at);
      const spot = place(at, wide, 17, [...taken, [at[0] - 9, at[1] - 9, at[0] + 9, at[1] + 9]], arrows, [width, height],
        Math.atan2(whole[1] - at[1], whole[0] - at[0]) + 0.9);
      if (!spot) return;
      taken.push(spot.box);
      add("line", { x1: at[0], y1: at[1], x2: spot.x, y2: spot.y, class: "leader" });
      add("rect", { x: spot.x - wide / 2, y: spot.y - 9, width: wide, height: 18, class: "namebox" });
      const word = add("text", { x: spot.x, y: spot.y + 4.5, class: "word middle" }, text);
      word.style.unicodeBidi = "plaintext";
    });
    data.markers.forEach((mark) => {
      const at = flat(mark.at);
      if (at[0] < 0 || at[0] > width || at[1] < 0 || at[1] > height) return;
      if (mark.kind === "anchor") {
        add("path", { d: `M${at[0] - 6} ${at[1] - 6}h12v12h-12zl12 12m0-12l-12 12`, class: "anchor" });
      } else {
        add("circle", { cx: at[0], cy: at[1], r: 5, class: "centre" });
        add("path", { d: `M${at[0]} ${at[1]}v-5a5 5 0 0 1 5 5zh-5v5a5 5 0 0 1-5-5z`, class: "half" });
      }
    });
  };
}
