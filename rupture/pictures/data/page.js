"use strict";
// The report page: own canvas for the map, uPlot for charts. Everything comes from the JSON in the page; nothing is
// fetched. Text of records reaches the page through textContent only.
(async () => {
  const $ = (id) => document.getElementById(id);
  const data = JSON.parse($("data").textContent);
  const times = data.times;
  const state = { frame: data.frame, field: 0, site: -1, playing: false, at: null };
  const charts = [];

  // ---------------------------------------------------------------- small helpers
  const make = (tag, props = {}, ...children) => {
    const node = document.createElement(tag);
    for (const [key, value] of Object.entries(props)) {
      if (key in node) node[key] = value;
      else node.setAttribute(key, value);
    }
    node.append(...children);
    return node;
  };
  const svg = (tag, props) => {
    const node = document.createElementNS("http://www.w3.org/2000/svg", tag);
    for (const [key, value] of Object.entries(props)) node.setAttribute(key, value);
    return node;
  };
  const colour = (name) => getComputedStyle(document.documentElement).getPropertyValue(`--${name}`).trim();
  const unpack = async (text) => {
    const bytes = Uint8Array.from(atob(text), (c) => c.charCodeAt(0));
    const stream = new Blob([bytes]).stream().pipeThrough(new DecompressionStream("deflate"));
    return new Response(stream).arrayBuffer();
  };
  const table = (text) => Array.from({ length: 256 }, (_, i) => [0, 2, 4].map((k) => parseInt(text.slice(6 * i + k, 6 * i + k + 2), 16)));
  const probabilityTable = table(data.colours.probability);
  const timeTable = table(data.colours.time);
  const dark = () => document.documentElement.dataset.theme === "dark";
  const probabilityColour = (share) => probabilityTable[Math.round(255 * Math.min(1, Math.max(0, dark() ? 1 - 0.96 * share : share)))];
  const timeColour = (t, alpha = 1) => {
    const [low, high] = data.timeScale;
    const share = Math.min(1, Math.max(0, (t - low) / (high - low || 1)));
    const [r, g, b] = timeTable[Math.round(255 * (dark() ? 0.25 + 0.75 * share : share))];
    return `rgba(${r},${g},${b},${alpha})`;
  };
  const digits = (value) => (value === 0 ? "0" : value.toPrecision(2).replace(/e([+-]\d+)$/, " × 10^$1"));
  const degrees = (value, positive, negative) => `${Math.abs(value).toFixed(3)}°${value >= 0 ? positive : negative}`;
  const points = ["N", "NNE", "NE", "ENE", "E", "ESE", "SE", "SSE", "S", "SSW", "SW", "WSW", "W", "WNW", "NW", "NNW"];
  const compass = (x, y) => points[Math.round((((Math.atan2(x, y) * 180) / Math.PI + 360) % 360) / 22.5) % 16];
  const clockText = (t) => {
    if (data.lagged) return `${t.toFixed(1)} s after S from the hypocentre`;
    const moment = new Date(Date.parse(data.origin) + Math.round(t * 10) * 100).toISOString();
    return `${t < 0 ? "−" : "+"}${Math.abs(t).toFixed(1)} s · ${moment.slice(0, 10)} ${moment.slice(11, 21)} UTC`;
  };

  // ---------------------------------------------------------------- data
  for (const field of data.fields) {
    field.values = new Uint8Array(await unpack(field.image));
    delete field.image;
    field.size = field.shape.reduce((a, b) => a * b, 1);
    for (const name of ["longitude", "latitude"]) field.cells[name] = new Int32Array(await unpack(field.cells[name]));
  }
  for (const site of data.sites) if (site.panel) site.panel.image = new Uint8Array(await unpack(site.panel.image));
  if (data.along) data.along.image = new Uint8Array(await unpack(data.along.image));
  const value = (field, frame, cell) => field.top * (field.values[frame * field.size + cell] / 255) ** 2;

  // ---------------------------------------------------------------- map
  const canvas = $("map");
  const [west, east, south, north] = data.map.extent;
  let scale = 1, ratio = 1, still = null;
  const toX = (x) => (x - west) * scale;
  const toY = (y) => (north - y) * scale;
  const decode = (flat) => {
    const path = [];
    let x = 0, y = 0;
    for (let i = 0; i < flat.length; i += 2) {
      x += flat[i]; y += flat[i + 1];
      path.push([x * data.map.unit, y * data.map.unit]);
    }
    return path;
  };
  const land = data.map.land.map(decode), coast = data.map.coast.map(decode), borders = data.map.borders.map(decode);
  const trace = (g, path) => path.forEach(([x, y], i) => (i ? g.lineTo(toX(x), toY(y)) : g.moveTo(toX(x), toY(y))));

  function drawStill() {
    still = make("canvas", { width: canvas.width, height: canvas.height });
    const g = still.getContext("2d");
    g.setTransform(ratio, 0, 0, ratio, 0, 0);
    g.fillStyle = colour("sea");
    g.fillRect(0, 0, canvas.width, canvas.height);
    g.beginPath();
    for (const ring of land) { trace(g, ring); g.closePath(); }
    g.fillStyle = colour("land");
    g.fill("nonzero");
    g.lineWidth = 0.7; g.strokeStyle = colour("grid"); g.fillStyle = colour("muted"); g.font = "11px system-ui, sans-serif";
    const taken = [];
    for (const line of data.map.grid) {
      g.beginPath();
      let pen = false, label = null;
      line.x.forEach((x, i) => {
        if (x === null) { pen = false; return; }
        const px = toX(x), py = toY(line.y[i]);
        if (pen) g.lineTo(px, py); else g.moveTo(px, py);
        pen = true;
        const atEdge = line.meridian ? Math.abs(py - (canvas.height / ratio - 20)) < 24 : Math.abs(px - 20) < 40;
        if (!label && atEdge && px > 4 && px < canvas.width / ratio - 50 && py > 12) label = [px, py];
      });
      g.stroke();
      if (label) {
        const place = line.meridian ? [label[0] + 3, canvas.height / ratio - 5] : [4, label[1] - 3];
        if (!taken.some(([x, y]) => Math.abs(x - place[0]) < 44 && Math.abs(y - place[1]) < 14)) { g.fillText(line.label, ...place); taken.push(place); }
      }
    }
    g.strokeStyle = colour("coast"); g.lineWidth = 0.9;
    g.beginPath(); coast.forEach((path) => trace(g, path)); g.stroke();
    g.setLineDash([5, 3, 1, 3]);
    g.beginPath(); borders.forEach((path) => trace(g, path)); g.stroke();
    g.setLineDash([]);
    g.strokeStyle = g.fillStyle = colour("overlay"); g.lineWidth = 1.4;
    for (const overlay of data.map.overlays) {
      g.beginPath(); overlay.lines.map(decode).forEach((path) => trace(g, path)); g.stroke();
      overlay.x.forEach((x, i) => { g.beginPath(); g.arc(toX(x), toY(overlay.y[i]), 2, 0, 7); g.stroke(); });
    }
    const target = 0.2 * (east - west), power = 10 ** Math.floor(Math.log10(target));
    const length = Math.max(...[1, 2, 5].map((k) => k * power).filter((v) => v <= target));
    const right = canvas.width / ratio - 14, foot = canvas.height / ratio - 12;
    g.strokeStyle = colour("ink"); g.lineWidth = 1.6;
    g.beginPath(); g.moveTo(right - length * scale, foot - 5); g.lineTo(right - length * scale, foot); g.lineTo(right, foot); g.lineTo(right, foot - 5); g.stroke();
    g.fillStyle = colour("ink"); g.textAlign = "center";
    g.fillText(length >= 1 ? `${length} km` : `${length * 1000} m`, right - (length * scale) / 2, foot - 5);
    g.textAlign = "left";
  }

  function drawCells(g) {
    const field = data.fields[state.field];
    if (!field) return;
    const paint = (share) => [...probabilityColour(share), Math.round(255 * Math.min(1, share / 0.25))];
    if (field.cells.trace) {
      g.lineWidth = 8;
      field.cells.x.forEach((x, i, all) => {
        const next = Math.min(i + 1, all.length - 1), last = Math.max(i - 1, 0), ys = field.cells.y;
        const [r, gr, b, a] = paint(value(field, state.frame, i) / field.show);
        g.strokeStyle = `rgba(${r},${gr},${b},${a / 255})`;
        g.beginPath();
        g.moveTo(toX((all[last] + x) / 2), toY((ys[last] + ys[i]) / 2));
        g.lineTo(toX((all[next] + x) / 2), toY((ys[next] + ys[i]) / 2));
        g.stroke();
      });
      return;
    }
    const [rows, columns] = field.shape, image = new ImageData(columns, rows);
    const lookup = Array.from({ length: 256 }, (_, q) => paint(Math.min(1, (field.top * (q / 255) ** 2) / field.show)));
    for (let r = 0; r < rows; r++) for (let c = 0; c < columns; c++) {
      const pixel = lookup[field.values[state.frame * field.size + r * columns + c]];
      image.data.set(pixel, 4 * ((rows - 1 - r) * columns + c));
    }
    const small = make("canvas", { width: columns, height: rows });
    small.getContext("2d").putImageData(image, 0, 0);
    const [w, e, s, n] = field.cells.edges, [fullRows, fullColumns] = field.cells.shape;
    // Blocks at the north and east edge may stick out over the grid.
    const stepX = ((e - w) / fullColumns) * field.block, stepY = ((n - s) / fullRows) * field.block;
    g.imageSmoothingEnabled = false;
    g.drawImage(small, toX(w), toY(s + rows * stepY), columns * stepX * scale, rows * stepY * scale);
  }

  function drawRays(g) {
    for (const site of data.sites) {
      const [best, low, high] = site.rays.map((row) => row[state.frame]);
      if (best === null || best === undefined) continue;
      const tip = (deg) => {
        const a = ((deg + site.turn) * Math.PI) / 180;
        return [toX(site.x + site.reach * Math.sin(a)), toY(site.y + site.reach * Math.cos(a))];
      };
      g.beginPath();
      g.moveTo(toX(site.x), toY(site.y));
      for (let a = low; a <= high + 1e-9; a += Math.max(0.5, (high - low) / 24)) g.lineTo(...tip(a));
      g.closePath();
      g.fillStyle = timeColour(times[state.frame], 0.15);
      g.fill();
      g.beginPath(); g.moveTo(toX(site.x), toY(site.y)); g.lineTo(...tip(best));
      g.strokeStyle = timeColour(times[state.frame], 0.9); g.lineWidth = 1.2; g.stroke();
    }
  }

  function drawTrack(g) {
    const track = data.track;
    if (!track) return;
    for (let f = 0; f <= state.frame; f++) {
      if (track.x[f] === null) continue;
      g.beginPath(); g.arc(toX(track.x[f]), toY(track.y[f]), 3.4, 0, 7);
      g.fillStyle = timeColour(times[f]); g.fill();
      g.strokeStyle = colour("halo"); g.lineWidth = 1; g.stroke();
    }
    for (const front of track.fronts) {
      if (front.x[state.frame] === null) continue;
      g.beginPath(); g.arc(toX(front.x[state.frame]), toY(front.y[state.frame]), 7, 0, 7);
      g.strokeStyle = colour("accent"); g.lineWidth = 2; g.stroke();
    }
  }

  function drawStar(g) {
    g.beginPath();
    for (let k = 0; k < 10; k++) {
      const r = k % 2 ? 4 : 9, a = (k * Math.PI) / 5;
      g[k ? "lineTo" : "moveTo"](toX(0) + r * Math.sin(a), toY(0) - r * Math.cos(a));
    }
    g.closePath();
    g.fillStyle = colour("accent"); g.fill(); g.strokeStyle = colour("halo"); g.lineWidth = 1; g.stroke();
  }

  function drawMap() {
    if (!still) return;
    const g = canvas.getContext("2d");
    g.setTransform(1, 0, 0, 1, 0, 0);
    g.drawImage(still, 0, 0);
    g.setTransform(ratio, 0, 0, ratio, 0, 0);
    drawRays(g); drawCells(g); drawTrack(g); drawStar(g);
    if (state.at) {
      g.strokeStyle = colour("ink"); g.lineWidth = 1;
      g.beginPath(); g.arc(toX(state.at[0]), toY(state.at[1]), 5, 0, 7); g.stroke();
    }
  }

  const markers = {
    "6C": "13,6 20,19 6,19", "3C + vertical rotation": "6,7 20,7 13,20", "Z + horizontal rotation": "7,7 19,7 19,19 7,19", "other components": "13,5 20,13 13,21 6,13",
  };
  const markerShape = (kind, used) => {
    const picture = svg("svg", { viewBox: "0 0 26 26", "aria-hidden": "true" });
    picture.append(svg("polygon", { points: markers[kind], fill: used ? "var(--ink)" : "var(--page)", stroke: "var(--ink)", "stroke-width": 1.5 }));
    return picture;
  };

  function placeSites() {
    const frame = $("site-buttons");
    if (!frame.childElementCount) {
      data.sites.forEach((site, index) => {
        const about = `${site.code}, ${site.components}, ${site.distance} km from the epicentre${site.used ? "" : `, not used: ${site.reason}`}`;
        const button = make("button", { type: "button", title: about, "aria-label": `Site ${about}. Open its directions`, "aria-expanded": "false" });
        button.append(markerShape(site.marker, site.used), make("span", { textContent: site.code }));
        button.addEventListener("click", () => openSite(state.site === index ? -1 : index, true));
        frame.append(button);
      });
    }
    [...frame.children].forEach((button, i) => {
      const site = data.sites[i];
      button.style.left = `${toX(site.x) + 1}px`;
      button.style.top = `${toY(site.y) + 1}px`;
      button.classList.toggle("left", toX(site.x) > canvas.clientWidth - 90);
      button.hidden = site.x < west || site.x > east || site.y < south || site.y > north;
    });
  }

  function resize() {
    const width = canvas.clientWidth;
    if (!width) return;
    ratio = window.devicePixelRatio || 1;
    scale = width / (east - west);
    const height = Math.round((north - south) * scale);
    canvas.style.height = `${height}px`;
    canvas.width = Math.round(width * ratio);
    canvas.height = Math.round(height * ratio);
    drawStill(); placeSites(); drawMap();
    for (const chart of charts) if (chart.root.parentElement.clientWidth) chart.setSize({ width: chart.root.parentElement.clientWidth, height: chart.height });
  }

  // ---------------------------------------------------------------- reading
  function cellAt(x, y) {
    const field = data.fields[state.field];
    if (!field) return null;
    if (field.cells.trace) {
      let best = -1, least = Infinity;
      field.cells.x.forEach((cx, i) => { const d = Math.hypot(cx - x, field.cells.y[i] - y); if (d < least) { least = d; best = i; } });
      return least < (east - west) / 15 ? { place: best, cell: best } : null;
    }
    const [w, e, s, n] = field.cells.edges, [rows, columns] = field.cells.shape;
    const c = Math.floor(((x - w) / (e - w)) * columns), r = Math.floor(((y - s) / (n - s)) * rows);
    if (c < 0 || r < 0 || c >= columns || r >= rows) return null;
    return { place: r * columns + c, cell: Math.floor(r / field.block) * field.shape[1] + Math.floor(c / field.block) };
  }
  function read() {
    const output = $("reading");
    if (!state.at) { output.textContent = ""; return; }
    const [x, y] = state.at, found = cellAt(x, y), field = data.fields[state.field];
    const away = `${Math.hypot(x, y).toFixed(0)} km ${compass(x, y)} of the epicentre`;
    if (!found) { output.textContent = field ? `${away}: no cell here` : away; return; }
    const lon = field.cells.longitude[found.place] / 1e4, lat = field.cells.latitude[found.place] / 1e4;
    const mean = field.block > 1 ? `, mean of ${field.block} × ${field.block} cells` : "";
    output.textContent = `${degrees(lat, "N", "S")} ${degrees(lon, "E", "W")}, ${away}: ${field.label} ${digits(value(field, state.frame, found.cell))}${mean}`;
  }
  const pointAt = (event) => {
    const box = canvas.getBoundingClientRect();
    return [west + (event.clientX - box.left - 1) / scale, north - (event.clientY - box.top - 1) / scale];
  };
  canvas.addEventListener("pointermove", (event) => { state.at = pointAt(event); read(); drawMap(); });
  canvas.addEventListener("pointerleave", () => { if (document.activeElement !== canvas) { state.at = null; read(); drawMap(); } });
  canvas.addEventListener("keydown", (event) => {
    const step = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] }[event.key];
    if (event.key === "Escape") state.at = null;
    else if (!step) return;
    else {
      const field = data.fields[state.field];
      const size = field && !field.cells.trace ? (field.cells.edges[1] - field.cells.edges[0]) / field.cells.shape[1] : (east - west) / 100;
      const [x, y] = state.at || [0, 0];
      state.at = [Math.min(east, Math.max(west, x + step[0] * size)), Math.min(north, Math.max(south, y + step[1] * size))];
    }
    event.preventDefault(); read(); drawMap();
  });

  // ---------------------------------------------------------------- charts
  const axisLook = (extra) => ({ stroke: () => colour("ink"), grid: { stroke: () => colour("rule"), width: 0.5 }, ticks: { stroke: () => colour("rule"), width: 0.5 }, font: "12px system-ui, sans-serif", labelFont: "12px system-ui, sans-serif", ...extra });
  function chart(holder, options, series) {
    const plot = new uPlot({ width: Math.max(200, holder.clientWidth), height: 200, ...options }, series, holder);
    plot.root.querySelectorAll("canvas").forEach((c) => c.setAttribute("aria-hidden", "true"));
    charts.push(plot);
    return plot;
  }
  function heat(plot, image, rows, columns, box) {
    // Image of bytes, 0 where there is no window; rows go up. box: x0, x1, y0, y1 in the chart's units.
    const picture = new ImageData(columns, rows), blank = colour("none").match(/\w\w/g).map((h) => parseInt(h, 16));
    for (let r = 0; r < rows; r++) for (let c = 0; c < columns; c++) {
      const q = image(r, c), [red, green, blue] = q ? probabilityColour((q - 1) / 254) : blank;
      picture.data.set([red, green, blue, 255], 4 * ((rows - 1 - r) * columns + c));
    }
    const small = make("canvas", { width: columns, height: rows });
    small.getContext("2d").putImageData(picture, 0, 0);
    const g = plot.ctx, x0 = plot.valToPos(box[0], "x", true), x1 = plot.valToPos(box[1], "x", true), y0 = plot.valToPos(box[2], "y", true), y1 = plot.valToPos(box[3], "y", true);
    g.save();
    g.beginPath(); g.rect(plot.bbox.left, plot.bbox.top, plot.bbox.width, plot.bbox.height); g.clip();
    g.imageSmoothingEnabled = false;
    g.drawImage(small, x0, y1, x1 - x0, y0 - y1);
    g.restore();
  }
  const strokeLine = (plot, from, to, look) => {
    const g = plot.ctx;
    g.save();
    g.beginPath(); g.rect(plot.bbox.left, plot.bbox.top, plot.bbox.width, plot.bbox.height); g.clip();
    g.strokeStyle = look.stroke; g.lineWidth = (look.width || 1) * devicePixelRatio; g.setLineDash((look.dash || []).map((d) => d * devicePixelRatio));
    g.beginPath(); g.moveTo(plot.valToPos(from[0], "x", true), plot.valToPos(from[1], "y", true)); g.lineTo(plot.valToPos(to[0], "x", true), plot.valToPos(to[1], "y", true)); g.stroke();
    g.restore();
  };
  const dashes = (arm) => (arm ? [7, 4] : []);

  const nearestFrame = (t) => times.reduce((best, v, i) => (Math.abs(v - t) < Math.abs(times[best] - t) ? i : best), 0);
  let energyChart = null;
  function drawEnergy() {
    const names = Object.keys(data.energy), looks = ["bar", "accent"];
    energyChart = chart($("energy"), {
      height: 170,
      scales: { x: { time: false }, y: { range: (u, low, high) => [0, high * 1.1 || 1] } },
      axes: [axisLook({ label: "source time after origin (s)" }), axisLook({ label: "energy share (1/s)", size: 62 })],
      series: [{ label: "source time (s)" }, ...names.map((name, i) => ({ label: name, stroke: () => colour(looks[i]), width: 2, dash: dashes(i), points: { show: false }, paths: uPlot.paths.stepped({ align: 0 }) }))],
      cursor: { drag: { x: false, y: false } },
      hooks: { draw: [(u) => strokeLine(u, [times[state.frame], u.scales.y.min], [times[state.frame], u.scales.y.max], { stroke: colour("ink"), width: 2 })] },
    }, [times, ...names.map((name) => data.energy[name])]);
    energyChart.over.addEventListener("click", () => { if (energyChart.cursor.idx != null) setFrame(energyChart.cursor.idx); });
  }

  let siteChart = null;
  function openSite(index, focus) {
    state.site = index;
    [...$("site-buttons").children].forEach((button, i) => button.setAttribute("aria-expanded", String(i === index)));
    $("site-section").hidden = index < 0;
    if (siteChart) { charts.splice(charts.indexOf(siteChart), 1); siteChart.destroy(); siteChart = null; }
    if (index < 0) return;
    const site = data.sites[index], panel = site.panel;
    $("site-title").textContent = `Site ${site.code}: back-azimuth through time`;
    $("site-about").textContent = `${site.components}, ${site.distance} km from the epicentre at azimuth ${site.azimuth} deg. ` + (site.used ? "" : `Not used: ${site.reason}. `) + (panel ? `The epicentre lies at back-azimuth ${panel.home.toFixed(0)} deg.` : "No window of this site could be used.");
    if (panel) drawSite(panel);
    if (focus) { $("site-title").focus({ preventScroll: true }); $("site-section").scrollIntoView({ block: "nearest", behavior: matchMedia("(prefers-reduced-motion: reduce)").matches ? "auto" : "smooth" }); }
  }
  function drawSite(panel) {
    const [first, step, count] = panel.axis, shift = Math.round((panel.home - first) / step) - Math.floor(count / 2);
    const low = first + (shift - 0.5) * step, time = panel.time, half = time.length > 1 ? (time[1] - time[0]) / 2 : 0.5;
    const unroll = (v) => (v === null ? null : ((((v - panel.home + 180) % 360) + 360) % 360) - 180 + panel.home);
    const curves = panel.curves.map((curve) => curve.map(unroll));
    const most = time.map((_, t) => {
      let best = -1, top = 0;
      for (let k = 0; k < count; k++) if (panel.image[t * count + k] > top) { top = panel.image[t * count + k]; best = k; }
      return best < 0 ? null : unroll(first + best * step);
    });
    const turn = (v) => (v === null || v === undefined ? "none" : `${(((v % 360) + 360) % 360).toFixed(0)} deg`);
    siteChart = chart($("site-chart"), {
      height: 330,
      scales: { x: { time: false, range: () => [time[0] - half, time[time.length - 1] + half] }, y: { range: () => [low, low + 360] } },
      axes: [axisLook({ label: "time after origin (s)", grid: { show: false } }), axisLook({ label: "back-azimuth (deg)", size: 62, grid: { show: false }, splits: () => [0, 1, 2, 3, 4].map((k) => (Math.ceil(low / 90) + k) * 90).filter((v) => v <= low + 360), values: (u, all) => all.map((v) => String(((v % 360) + 360) % 360)) })],
      series: [
        { label: "time (s)" },
        { label: "most probable", stroke: "transparent", width: 0, points: { show: false }, value: (u, v) => turn(v) },
        ...curves.map((_, arm) => ({ label: arm ? "second arm" : "fitted model", stroke: () => colour("accent"), width: 2.4, dash: dashes(arm), points: { show: false }, value: (u, v) => turn(v) })),
      ],
      cursor: { drag: { x: false, y: false } },
      hooks: {
        drawClear: [(u) => heat(u, (r, c) => panel.image[c * count + ((((r + shift) % count) + count) % count)], count, time.length, [time[0] - half, time[time.length - 1] + half, low, low + 360])],
        draw: [(u) => {
          strokeLine(u, [time[0] - half, panel.home], [time[time.length - 1] + half, panel.home], { stroke: colour("muted") });
          u.ctx.save(); u.ctx.font = `bold ${13 * devicePixelRatio}px system-ui, sans-serif`; u.ctx.fillStyle = colour("ink");
          for (const [name, at] of Object.entries(panel.arrivals)) if (at !== null) {
            strokeLine(u, [at, low], [at, low + 360], { stroke: colour("ink"), dash: [2, 3] });
            u.ctx.fillText(name, u.valToPos(at, "x", true) + 4 * devicePixelRatio, u.bbox.top + 14 * devicePixelRatio);
          }
          u.ctx.restore();
          for (const [a, b] of panel.spans) strokeLine(u, [a - half, low + 4], [b + half, low + 4], { stroke: colour("ink"), width: 5 });
        }],
      },
    }, [time, most, ...curves]);
  }

  function drawAlong() {
    const along = data.along, at = along.times, step = along.along.length > 1 ? along.along[1] - along.along[0] : 1, half = at.length > 1 ? (at[1] - at[0]) / 2 : 0.5;
    const low = along.along[0] - step / 2, high = along.along[along.along.length - 1] + step / 2;
    $("along-section").hidden = false;
    const plot = chart($("along-chart"), {
      height: 320,
      scales: { x: { time: false, range: () => [at[0] - half, at[at.length - 1] + half] }, y: { range: () => [low, high] } },
      axes: [axisLook({ label: "source time after origin (s)", grid: { show: false } }), axisLook({ label: "distance (km)", size: 62, grid: { show: false } })],
      series: [{ label: "source time (s)" }, ...along.fronts.map((_, arm) => ({ label: arm ? "second arm (km)" : "fitted front (km)", stroke: () => colour("accent"), width: 2.4, dash: dashes(arm), points: { show: false } }))],
      cursor: { drag: { x: false, y: false } },
      hooks: {
        drawClear: [(u) => heat(u, (r, c) => along.image[c * along.along.length + r], along.along.length, at.length, [at[0] - half, at[at.length - 1] + half, low, high])],
        draw: [(u) => {
          u.ctx.save(); u.ctx.font = `${11 * devicePixelRatio}px system-ui, sans-serif`; u.ctx.fillStyle = colour("muted");
          for (const sign of [1, -1]) for (const speed of [1, 2, 3, 4, 5]) {
            const reach = sign > 0 ? high : -low, end = Math.min(at[at.length - 1], reach / speed);
            if (end <= 0) continue;
            strokeLine(u, [0, 0], [end, sign * speed * end], { stroke: colour("muted"), dash: [5, 4] });
            u.ctx.fillText(String(speed), u.valToPos(end * 0.94, "x", true), u.valToPos(sign * speed * end * 0.94, "y", true) - 3 * devicePixelRatio);
          }
          u.ctx.restore();
          if (along.sSpeed) strokeLine(u, [0, 0], [high / along.sSpeed, high], { stroke: colour("ink"), dash: [2, 2], width: 1.5 });
          strokeLine(u, [times[state.frame], low], [times[state.frame], high], { stroke: colour("ink"), width: 1 });
        }],
      },
    }, [at, ...along.fronts]);
    plot.over.addEventListener("click", () => { if (plot.cursor.idx != null) setFrame(nearestFrame(at[plot.cursor.idx])); });
    return plot;
  }

  function drawPosteriors() {
    if (!data.posterior.length) return;
    $("posterior-section").hidden = false;
    for (const item of data.posterior) {
      const holder = make("div");
      const [low, best, high] = item.interval;
      const text = (v) => (item.unit === "deg" ? (((v % 360) + 360) % 360).toFixed(0) : v.toPrecision(3));
      holder.append(make("h3", { textContent: `${item.label}: ${text(best)} ${item.unit}` }));
      holder.append(make("p", { className: "help", textContent: `90 %: ${text(low)} to ${text(high)} ${item.unit}` }));
      $("posteriors").append(holder);
      const middle = item.density.map((_, i) => (item.edges[i] + item.edges[i + 1]) / 2);
      chart(holder, {
        height: 170,
        legend: { show: false },
        scales: { x: { time: false, range: () => [item.edges[0], item.edges[item.edges.length - 1]] }, y: { range: (u, a, b) => [0, b * 1.08] } },
        axes: [axisLook({ label: `${item.label} (${item.unit})`, values: (u, all) => all.map((v) => (item.unit === "deg" ? String(((v % 360) + 360) % 360) : String(v))) }), axisLook({ label: `per ${item.unit}`, size: 62 })],
        series: [{ label: item.label }, { label: "density", fill: () => colour("bar"), stroke: () => colour("bar"), width: 1, paths: uPlot.paths.bars({ size: [1, 1000] }), points: { show: false } }],
        cursor: { show: false },
        hooks: { draw: [(u) => { strokeLine(u, [best, 0], [best, u.scales.y.max], { stroke: colour("accent"), width: 2 }); strokeLine(u, [low, 0], [high, 0], { stroke: colour("accent"), width: 9 }); }] },
      }, [middle, item.density]);
    }
  }

  // ---------------------------------------------------------------- time
  const slider = $("time");
  let alongChart = null;
  function setFrame(frame, spoken = true) {
    state.frame = Math.min(times.length - 1, Math.max(0, frame));
    slider.value = String(state.frame);
    const text = clockText(times[state.frame]);
    slider.setAttribute("aria-valuetext", text);
    $("clock").textContent = text;
    const field = data.fields[state.field];
    if (spoken && !field) canvas.setAttribute("aria-label", `Map of ${data.sites.length} sites and the epicentre, rays at ${text}.`);
    if (field && spoken) {
      const [x, y, radius] = field.summary[state.frame];
      const place = Math.hypot(x, y) < 1 ? "at the epicentre" : `${Math.hypot(x, y).toFixed(0)} km ${compass(x, y)} of the epicentre`;
      canvas.setAttribute("aria-label", `Map at ${text}: most probable cell ${place}${radius ? `, 68 % area as large as a circle of ${radius.toFixed(0)} km radius` : ""}. ${data.sites.length} sites.`);
    }
    drawMap(); read();
    if (energyChart) energyChart.redraw(false, false);
    if (alongChart) alongChart.redraw(false, false);
  }
  slider.addEventListener("input", () => { pause(); setFrame(Number(slider.value)); });
  let timer = 0;
  function pause() { state.playing = false; cancelAnimationFrame(timer); $("play").textContent = "Play"; $("play").setAttribute("aria-pressed", "false"); }
  $("play").addEventListener("click", () => {
    if (state.playing) { pause(); setFrame(state.frame); return; }
    state.playing = true; $("play").textContent = "Pause"; $("play").setAttribute("aria-pressed", "true");
    const hold = Math.min(250, Math.max(33, 12000 / times.length));
    let last = performance.now();
    if (state.frame >= times.length - 1) setFrame(0, false);
    const tick = (now) => {
      if (!state.playing) return;
      if (now - last >= hold) {
        last = now;
        if (state.frame >= times.length - 1) { pause(); setFrame(state.frame); return; }
        setFrame(state.frame + 1, false);
      }
      timer = requestAnimationFrame(tick);
    };
    timer = requestAnimationFrame(tick);
  });

  // ---------------------------------------------------------------- choices, legend, colours, print
  function chooseField() {
    const holder = $("field-choice"), names = { location: "Ray stack", energy: "Energy inversion" };
    holder.hidden = data.fields.length < 2;
    data.fields.forEach((field, index) => {
      const input = make("input", { type: "radio", name: "field", value: field.name, checked: index === 0 });
      input.addEventListener("change", () => { state.field = index; setFrame(state.frame); });
      holder.append(make("label", {}, input, names[field.name]));
    });
  }
  function fillLegend() {
    const holder = $("map-legend"), seen = new Set();
    const add = (picture, text) => holder.append(make("li", {}, picture, text));
    for (const site of data.sites) {
      const key = `${site.marker}${site.used}`;
      if (seen.has(key)) continue;
      seen.add(key);
      add(markerShape(site.marker, site.used), (site.marker === "6C" ? "6C site" : site.marker) + (site.used ? "" : ", not used"));
    }
    const simple = (child) => { const s = svg("svg", { viewBox: "0 0 26 20", "aria-hidden": "true" }); s.append(child); return s; };
    add(simple(svg("polygon", { points: "13,1 15.5,7.5 22,8 17,12.5 18.5,19 13,15.5 7.5,19 9,12.5 4,8 10.5,7.5", fill: "var(--accent)" })), "epicentre");
    if (data.track && data.track.fronts.length) add(simple(svg("circle", { cx: 13, cy: 10, r: 7, fill: "none", stroke: "var(--accent)", "stroke-width": 2.5 })), "fitted front");
    if (data.track) add(simple(svg("circle", { cx: 13, cy: 10, r: 5, fill: timeColour((data.timeScale[0] + data.timeScale[1]) / 2) })), "front so far, smoothed");
    add(simple(svg("polygon", { points: "2,10 25,2 25,18", fill: timeColour(data.timeScale[0]), opacity: 0.3 })), "ray of a site, 68 % wide");
    for (const overlay of data.map.overlays) add(simple(svg("line", { x1: 2, x2: 24, y1: 10, y2: 10, stroke: "var(--overlay)", "stroke-width": 2.5 })), overlay.name);
    if (data.fields.length) { const [r, g, b] = probabilityTable[150]; add(simple(svg("rect", { x: 2, y: 3, width: 22, height: 14, fill: `rgb(${r},${g},${b})` })), "the darker, the more (on a dark page: the lighter)"); }
  }
  const themes = ["auto", "light", "dark"], themeNames = { auto: "as the system", light: "light", dark: "dark" };
  const system = matchMedia("(prefers-color-scheme: dark)");
  let theme = "auto";
  function applyTheme(forced) {
    document.documentElement.dataset.theme = forced || (theme === "auto" ? (system.matches ? "dark" : "light") : theme);
    $("theme").textContent = `Colours: ${themeNames[theme]}`;
    if (still) { drawStill(); drawMap(); for (const plot of charts) plot.redraw(false, true); }
  }
  $("theme").addEventListener("click", () => { theme = themes[(themes.indexOf(theme) + 1) % 3]; applyTheme(); });
  system.addEventListener("change", () => applyTheme());
  addEventListener("beforeprint", () => { pause(); document.querySelectorAll("details").forEach((d) => { d.dataset.was = String(d.open); d.open = true; }); applyTheme("light"); });
  addEventListener("afterprint", () => { document.querySelectorAll("details").forEach((d) => { d.open = d.dataset.was === "true"; }); applyTheme(); });
  $("site-close").addEventListener("click", () => { const last = state.site; openSite(-1); $("site-buttons").children[last]?.focus(); });
  $("site-section").addEventListener("keydown", (event) => { if (event.key === "Escape") $("site-close").click(); });

  applyTheme();
  slider.max = String(Math.max(0, times.length - 1));
  if (data.lagged) { $("no-map").hidden = false; $("time").setAttribute("aria-label", "Time after S"); $("energy").hidden = true; }
  if (data.fields.length) { chooseField(); drawEnergy(); } else { $("field-choice").hidden = true; }
  if (data.along) alongChart = drawAlong();
  if (data.posterior) drawPosteriors();
  resize();
  fillLegend();
  setFrame(state.frame);
  new ResizeObserver(() => resize()).observe($("map-frame"));
  document.documentElement.dataset.ready = String(Math.round(performance.now()));
})();
