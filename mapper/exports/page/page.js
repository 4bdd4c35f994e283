"use strict";
(function () {
  const find = (query, from) => (from || document).querySelector(query);
  const all = (query, from) => Array.from((from || document).querySelectorAll(query));
  const data = JSON.parse(find("#map-data").textContent);
  const view = find("#view"), cross = find("#cross"), reading = find("#reading");
  const full = view.viewBox.baseVal, WIDE = full.width, HIGH = full.height;
  const paths = new Map(all("#shapes path").map((p) => [Number(p.dataset.r), p]));
  const rows = new Map(all("#regions tbody tr").map((r) => [Number(r.dataset.r), r]));
  const [left, bottom, right, top] = data.bounds;
  let point = { x: WIDE / 2, y: HIGH / 2 }, zoom = 1, chosen = -1, over = -1, drag = null;

  // values of the layers -------------------------------------------------------------------
  async function unpack(text, floats) {
    const bytes = Uint8Array.from(atob(text), (c) => c.charCodeAt(0));
    const stream = new Blob([bytes]).stream().pipeThrough(new DecompressionStream("deflate"));
    const flat = new Uint8Array(await new Response(stream).arrayBuffer());
    if (!floats) return flat;
    const n = flat.length / 4, mixed = new Uint8Array(flat.length);
    for (let k = 0; k < 4; k++) for (let i = 0; i < n; i++) mixed[4 * i + k] = flat[k * n + i];
    const look = new DataView(mixed.buffer), out = new Float32Array(n);
    for (let i = 0; i < n; i++) out[i] = look.getFloat32(4 * i, true);
    return out;
  }
  const ready = Promise.all(data.layers.map(async (layer) => {
    layer.values = await unpack(layer.data, layer.kind === "rate");
    layer.data = null;
  })).then(() => document.documentElement.setAttribute("data-ready", "yes"))
    .catch(() => { reading.textContent = "This browser cannot unpack the map's values; the tables hold every total."; });

  function figure(value) {
    if (!Number.isFinite(value)) return "no result";
    if (value === 0) return "0";
    return Number(value.toPrecision(3)).toLocaleString("en", { maximumSignificantDigits: 3 });
  }
  function flagWords(bits) {
    const words = data.flags.filter((one) => bits & one[0]).map((one) => one[1]);
    return words.length ? words.join("; ") : "nothing to report";
  }
  function layerWords(layer, at) {
    const value = layer.values[at];
    if (layer.kind === "rock") return value === 255 ? "none mapped" : data.rocks[value];
    if (layer.kind === "flags") return flagWords(value);
    return figure(value) + (Number.isFinite(value) ? " " + layer.unit : "");
  }
  function place() {
    const x = left + (right - left) * point.x / WIDE, y = top - (top - bottom) * point.y / HIGH;
    if (!data.geographic) return x.toFixed(0) + ", " + y.toFixed(0);
    return Math.abs(y).toFixed(3) + "° " + (y < 0 ? "S" : "N") + ", " + Math.abs(x).toFixed(3) + "° " + (x < 0 ? "W" : "E");
  }
  function element(name, text, kind) {
    const made = document.createElement(name);
    made.textContent = text;
    if (kind) made.className = kind;
    return made;
  }
  function regionLine(r) {
    const line = document.createElement("div"), row = rows.get(r);
    line.append(element("b", data.regions[r]));
    if (row) {
      const at = Array.from(row.cells).findIndex((cell) => cell.tagName === "TH");
      const read = (n) => row.cells[n].firstChild.textContent;
      line.append(": drawdown " + read(at + 2) + " t CO₂ per year, " + read(at + 1) + " t per km² and year, rank " + read(0));
      if (at > 1) line.append(" (90 % of draws: " + read(1) + ")");
      if (data.ties[r]) line.append("; cannot be told apart from " + data.ties[r]);
    }
    return line;
  }
  function tell(r) {
    const parts = [];
    if (r >= 0) parts.push(regionLine(r));
    else if (data.regions.length) parts.push(element("div", "in no region"));
    if (data.layers.every((layer) => layer.values)) {
      const row = Math.min(data.rows - 1, Math.max(0, Math.floor(point.y / HIGH * data.rows)));
      const col = Math.min(data.cols - 1, Math.max(0, Math.floor(point.x / WIDE * data.cols)));
      const line = document.createElement("div");
      for (const layer of data.layers) line.append(element("span", layer.label + ": " + layerWords(layer, row * data.cols + col)), " ");
      parts.push(line);
    }
    parts.push(element("div", place(), "at"));
    reading.replaceChildren(...parts);
  }

  // regions, on the map and in the table --------------------------------------------------
  function mark(r, name) {
    for (const where of [paths, rows]) where.forEach((one, at) => one.classList.toggle(name, at === r));
    const path = paths.get(r);
    if (path) path.parentNode.append(path);
  }
  function hover(r) { if (r !== over) { over = r; mark(r, "over"); } }
  function choose(r, scroll) {
    chosen = r === chosen ? -1 : r;
    mark(chosen, "chosen");
    rows.forEach((row, at) => find(".name", row).setAttribute("aria-pressed", String(at === chosen)));
    const row = rows.get(chosen), path = paths.get(chosen);
    if (row && scroll) {
      const box = row.closest(".tall");
      box.scrollTop = row.offsetTop - box.clientHeight / 2;
    }
    if (path && !scroll) {
      const box = path.getBBox();
      if (zoom > 1) lookAt(box.x + box.width / 2, box.y + box.height / 2);
      reading.replaceChildren(regionLine(chosen));
    }
  }
  function regionAt(x, y) {
    const spot = view.createSVGPoint();
    spot.x = x; spot.y = y;
    for (const [r, path] of paths) if (path.isPointInFill(spot)) return r;
    return -1;
  }

  // the view ------------------------------------------------------------------------------
  function lookAt(x, y) {
    const w = WIDE / zoom, h = HIGH / zoom;
    const vx = Math.min(WIDE - w, Math.max(0, x - w / 2)), vy = Math.min(HIGH - h, Math.max(0, y - h / 2));
    view.setAttribute("viewBox", [vx, vy, w, h].join(" "));
    const put = (span, side, start, size, length) => {
      const share = (span.dataset.at * length - start) / size;
      span.style[side] = 100 * share + "%";
      span.style.display = share < -0.001 || share > 1.001 ? "none" : "";
    };
    all(".ticks.x span").forEach((span) => put(span, "left", vx, w, WIDE));
    all(".ticks.y span").forEach((span) => put(span, "top", vy, h, HIGH));
    const bar = find("#bar");
    if (bar) {
      const km = data.kilometres / zoom / 4, power = Math.pow(10, Math.floor(Math.log10(km)));
      const length = power * [5, 2, 1].find((step) => step * power <= km);
      bar.style.width = 100 * length * zoom / data.kilometres + "%";
      bar.firstChild.textContent = length + " km";
    }
    putCross();
  }
  function middle() {
    const box = view.viewBox.baseVal;
    return [box.x + box.width / 2, box.y + box.height / 2];
  }
  function zoomTo(factor, x, y) {
    zoom = Math.min(40, Math.max(1, factor));
    lookAt(x, y);
  }
  function putCross() {
    const box = view.getBoundingClientRect();
    const sx = WIDE / zoom / (box.width || 1), sy = HIGH / zoom / (box.height || 1);
    cross.setAttribute("transform", "translate(" + point.x + " " + point.y + ") scale(" + sx + " " + sy + ")");
  }
  function locate(event) {
    const box = view.getBoundingClientRect(), seen = view.viewBox.baseVal;
    return { x: seen.x + (event.clientX - box.left) / box.width * seen.width, y: seen.y + (event.clientY - box.top) / box.height * seen.height };
  }
  view.addEventListener("pointermove", (event) => {
    if (drag) {
      const now = locate(event);
      const [cx, cy] = middle();
      if (Math.hypot(event.clientX - drag.cx, event.clientY - drag.cy) > 4) drag.moved = true;
      if (zoom > 1 && drag.moved) { lookAt(cx + drag.x - now.x, cy + drag.y - now.y); return; }
    }
    cross.style.display = "none";
    point = locate(event);
    const r = event.target.dataset && event.target.dataset.r !== undefined ? Number(event.target.dataset.r) : -1;
    hover(r);
    tell(r);
  });
  view.addEventListener("pointerdown", (event) => { drag = { ...locate(event), cx: event.clientX, cy: event.clientY, moved: false }; });
  window.addEventListener("pointerup", (event) => {
    if (drag && !drag.moved && view.contains(event.target)) {
      point = locate(event);
      const r = regionAt(point.x, point.y);
      if (r >= 0) choose(r, true);
      tell(r);
    }
    drag = null;
  });
  view.addEventListener("pointerleave", () => hover(-1));
  view.addEventListener("wheel", (event) => {
    if (!event.ctrlKey && !event.metaKey) return;
    event.preventDefault();
    const at = locate(event);
    zoomTo(zoom * (event.deltaY < 0 ? 1.25 : 0.8), at.x, at.y);
  }, { passive: false });
  view.addEventListener("keydown", (event) => {
    const step = (event.shiftKey ? 10 : 1) * Math.max(WIDE / data.cols, WIDE / zoom / 200);
    const moves = { ArrowLeft: [-step, 0], ArrowRight: [step, 0], ArrowUp: [0, -step], ArrowDown: [0, step] };
    if (event.key === "+" || event.key === "=") zoomTo(zoom * 1.5, point.x, point.y);
    else if (event.key === "-") zoomTo(zoom / 1.5, point.x, point.y);
    else if (event.key === "0") zoomTo(1, WIDE / 2, HIGH / 2);
    else if (event.key === "Enter" || event.key === " ") { const r = regionAt(point.x, point.y); if (r >= 0) choose(r, true); }
    else if (moves[event.key]) {
      point = { x: Math.min(WIDE - 0.01, Math.max(0, point.x + moves[event.key][0])), y: Math.min(HIGH - 0.01, Math.max(0, point.y + moves[event.key][1])) };
      const seen = view.viewBox.baseVal;
      if (point.x < seen.x || point.y < seen.y || point.x > seen.x + seen.width || point.y > seen.y + seen.height) lookAt(point.x, point.y);
      cross.style.display = "block";
      putCross();
      const r = regionAt(point.x, point.y);
      hover(r);
      tell(r);
    } else return;
    event.preventDefault();
  });
  all("[data-zoom]").forEach((button) => button.addEventListener("click", () => {
    const how = button.dataset.zoom, [x, y] = middle();
    if (how === "all") zoomTo(1, WIDE / 2, HIGH / 2);
    else zoomTo(zoom * (how === "in" ? 1.6 : 0.625), x, y);
  }));

  // the switch of layers --------------------------------------------------------------------
  all("[data-layer]").forEach((button) => button.addEventListener("click", () => {
    all("[data-layer]").forEach((one) => {
      const on = one === button;
      one.setAttribute("aria-pressed", String(on));
      document.getElementById("layer-" + one.dataset.layer).classList.toggle("off", !on);
      document.getElementById("legend-" + one.dataset.layer).hidden = !on;
    });
  }));

  const spots = find("#spots-button");
  if (spots) spots.addEventListener("click", () => {
    const on = find("#spots").classList.toggle("off");
    spots.setAttribute("aria-pressed", String(!on));
  });

  // the table ---------------------------------------------------------------------------------
  rows.forEach((row, r) => {
    find(".name", row).addEventListener("click", () => choose(r, false));
    find(".name", row).addEventListener("focus", () => hover(r));
    row.addEventListener("pointerenter", () => hover(r));
    row.addEventListener("pointerleave", () => hover(-1));
  });
  all("#regions thead th").forEach((head, column) => {
    find(".sort", head).addEventListener("click", () => {
      const numeric = head.classList.contains("n"), now = head.getAttribute("aria-sort");
      const first = numeric && column > 0 ? "descending" : "ascending";
      const next = now === "none" ? first : now === "ascending" ? "descending" : "ascending";
      all("#regions thead th").forEach((one) => one.setAttribute("aria-sort", one === head ? next : "none"));
      const sign = next === "ascending" ? 1 : -1, body = find("#regions tbody");
      const value = (row) => row.cells[column].dataset.v || "";
      const sorted = all("tr", body).sort((a, b) => {
        const one = value(a), two = value(b);
        if (!numeric) return sign * one.localeCompare(two, "en", { numeric: true });
        if (one === "" || two === "") return (one === "") - (two === "");
        return sign * (one - two);
      });
      body.append(...sorted);
    });
  });
  window.addEventListener("resize", putCross);
  window.mapReady = ready;
})();
