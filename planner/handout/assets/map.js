/* The map page: draws what the JSON in the page holds. No request leaves the page. */
document.addEventListener("DOMContentLoaded", function () {
  "use strict";
  const data = JSON.parse(document.getElementById("planner-data").textContent);
  const map = map_planner;
  const bounds = [[data.south, data.west], [data.north, data.east]];
  const INK = "#2b2a28";
  const el = (name, text, className) => {
    const node = document.createElement(name);
    if (text !== undefined) node.textContent = text;
    if (className) node.className = className;
    return node;
  };

  // Rasters, in one pane below everything that can be touched.
  map.createPane("ground").style.zIndex = 210;
  map.createPane("layer").style.zIndex = 220;
  const picture = (uri, pane, alt) =>
    L.imageOverlay(uri, bounds, { pane: pane, alt: alt, className: "crisp" });
  picture(data.relief, "ground", "Relief of the ground").addTo(map);
  const layers = {
    signal: picture(data.signal, "layer", "Received signal"),
    server: picture(data.server, "layer", "Best server"),
  };
  const labels = L.layerGroup(data.labels.map((label) => L.marker(label.at, {
    interactive: false, keyboard: false,
    icon: L.divIcon({ className: "area-label", html: el("span", data.sectors[label.sector - 1].id) }),
  })));
  L.control.scale({ imperial: false, position: "bottomleft" }).addTo(map);
  const folded = window.matchMedia("(max-width: 640px)").matches;
  map.fitBounds(bounds, folded ? { padding: [4, 4] } : { paddingTopLeft: [16, 16], paddingBottomRight: [296, 16] });

  // Towers as with compass and ruler.
  const popup = (lines) => {
    const box = el("div");
    box.append(el("b", lines[0]));
    lines.slice(1).forEach((line) => box.append(el("p", line)));
    return box;
  };
  data.towers.forEach((tower) => {
    const lines = [tower.id];
    tower.sectors.forEach((sector) => {
      const thin = { color: INK, weight: 1, interactive: false, smoothFactor: 0 };
      sector.rays.forEach((ray) => L.polyline(ray, thin).addTo(map));
      L.polyline(sector.arc, thin).addTo(map);
      L.polyline(sector.tick, { color: INK, weight: 3.5, interactive: false }).addTo(map);
      lines.push(...sector.lines);
    });
    L.circleMarker(tower.at, { radius: 5, color: INK, weight: 2, fillColor: "#fcfaf5", fillOpacity: 1 })
      .bindPopup(popup(lines)).addTo(map);
  });

  // Customers: the shape carries the verdict.
  const SHAPES = {
    "served": { radius: 4.5, color: "#fcfaf5", weight: 1, fillColor: INK, fillOpacity: 1 },
    "not served": { radius: 4.5, color: "#b5472b", weight: 1.8, fillColor: "#fcfaf5", fillOpacity: 0.9 },
  };
  const cross = () => L.divIcon({ className: "", iconSize: [12, 12], html: symbol("not computed") });
  data.customers.forEach((customer) => {
    if (!customer.at) return;
    const lines = [customer.id + (customer.address ? ", " + customer.address : ""), customer.verdict]
      .concat(customer.lines, customer.reason ? [customer.reason] : []);
    const mark = SHAPES[customer.verdict]
      ? L.circleMarker(customer.at, SHAPES[customer.verdict])
      : L.marker(customer.at, { icon: cross(), keyboard: false });
    mark.bindPopup(popup(lines)).addTo(map);
  });

  function symbol(kind) {
    const ns = "http://www.w3.org/2000/svg";
    const svg = document.createElementNS(ns, "svg");
    const small = kind === "not computed";
    svg.setAttribute("viewBox", small ? "0 0 12 12" : "0 0 32 16");
    const add = (name, attributes) => {
      const node = document.createElementNS(ns, name);
      Object.entries(attributes).forEach(([key, value]) => node.setAttribute(key, value));
      svg.append(node);
    };
    if (small) {
      add("path", { d: "M2 2L10 10M10 2L2 10", stroke: INK, "stroke-width": 1.8, fill: "none" });
    } else if (kind === "tower") {
      add("path", { d: "M16 13L7 4M16 13L25 4M7 4A13 13 0 0 1 25 4", stroke: INK, "stroke-width": 1, fill: "none" });
      add("path", { d: "M16 0L16 4", stroke: INK, "stroke-width": 3, fill: "none" });
      add("circle", { cx: 16, cy: 13, r: 2.2, stroke: INK, "stroke-width": 1.5, fill: "#fcfaf5" });
    } else {
      const shape = SHAPES[kind];
      add("circle", { cx: 16, cy: 8, r: 5, stroke: shape.color, "stroke-width": shape.weight, fill: shape.fillColor });
    }
    return svg;
  }

  // Legend.
  const key = document.getElementById("key");
  const row = (mark, text) => {
    const line = el("div", undefined, "row");
    line.append(mark, el("span", text));
    return line;
  };
  const swatch = (colour, opacity, className) => {
    const box = el("span", undefined, "swatch " + (className || ""));
    if (colour) { box.style.background = colour; box.style.opacity = opacity; }
    return box;
  };
  const shownLayer = () => document.querySelector("input[name=layer]:checked").value;
  const minus = (number) => String(number).replace("-", "\u2212");
  function drawKey(layer) {
    key.replaceChildren();
    if (layer === "signal") {
      key.append(el("div", "Received signal, dBm", "head"));
      data.classes.slice().reverse().forEach((c) => key.append(row(swatch(c.colour, 0.8),
        c.to_dbm === null ? minus(c.from_dbm) + " and more" : minus(c.from_dbm) + " to " + minus(c.to_dbm))));
      key.append(row(swatch(null, 1, "open"), "edge of service; below threshold not inked"));
    } else if (layer === "server") {
      key.append(el("div", "Strongest sector", "head"));
      data.sectors.forEach((s) => key.append(row(swatch(s.colour, 0.6), s.id)));
      key.append(row(swatch(null, 1), "below threshold: not inked"));
    }
    key.append(row(swatch(null, 1, "dots"), "no data: dotted"));
  }
  const marks = document.getElementById("marks");
  const names = { tower: "tower: azimuth tick, half-power edges" };
  data.customers.forEach((customer) => { names[customer.verdict] = "customer " + customer.verdict; });
  ["tower", "served", "not served", "not computed"].forEach((kind) => {
    if (names[kind]) marks.append(row(symbol(kind), names[kind]));
  });
  document.getElementById("plan-title").textContent = data.title;
  document.getElementById("notes").textContent =
    "A prediction, not a promise: neither a licence nor a survey. Bearings from true north. " +
    "Shown at " + data.shown_cell_m + " m (computed at " + data.cell_m + " m; pictures hold at most " +
    data.longest_side_px.toLocaleString("en") + " pixels a side). " +
    "Free space ITU-R P.525 and delta-Bullington diffraction ITU-R P.526. ptmp-planner " + data.version +
    ". Map drawn with Leaflet." + (data.online ? " Base map \u00a9 OpenStreetMap contributors." : "");

  function show() {
    const chosen = shownLayer();
    Object.entries(layers).forEach(([name, layer]) => {
      if (name === chosen) layer.addTo(map); else layer.remove();
    });
    if (chosen === "server") labels.addTo(map); else labels.remove();
    const opacity = document.getElementById("opacity").value / 100;
    Object.values(layers).forEach((layer) => layer.setOpacity(opacity));
    drawKey(chosen);
  }
  document.querySelectorAll("input[name=layer]").forEach((input) => input.addEventListener("change", show));
  document.getElementById("opacity").addEventListener("input", show);
  show();
  const sheet = document.getElementById("sheet"), fold = document.getElementById("fold");
  const setFold = (shut) => {
    sheet.classList.toggle("folded", shut);
    fold.setAttribute("aria-expanded", String(!shut));
    fold.textContent = shut ? "Legend and layers" : "Hide legend";
  };
  fold.addEventListener("click", () => setFold(!sheet.classList.contains("folded")));
  setFold(folded);
  L.DomEvent.disableClickPropagation(sheet);

  // Values under the pointer, from the layers' data and not from their colours.
  const values = {};
  async function unpacked(name, type) {
    const bytes = Uint8Array.from(atob(data.values[name]), (c) => c.charCodeAt(0));
    const stream = new Blob([bytes]).stream().pipeThrough(new DecompressionStream("deflate"));
    values[name] = new type(await new Response(stream).arrayBuffer());
  }
  const ready = Promise.all([unpacked("signal", Uint8Array), unpacked("margin", Uint8Array),
    unpacked("server", Uint16Array), unpacked("status", Uint8Array)]);
  const output = document.getElementById("readout");
  const northY = L.Projection.SphericalMercator.project(L.latLng(data.north, data.west));
  const southE = L.Projection.SphericalMercator.project(L.latLng(data.south, data.east));
  function valueAt(latlng) {
    const p = L.Projection.SphericalMercator.project(latlng);
    const col = Math.floor((p.x - northY.x) / (southE.x - northY.x) * data.cols);
    const r = Math.floor((northY.y - p.y) / (northY.y - southE.y) * data.rows);
    if (col < 0 || r < 0 || col >= data.cols || r >= data.rows) return null;
    const i = r * data.cols + col;
    return { row: r, col: col, signal: values.signal[i], margin: values.margin[i],
      server: values.server[i], status: values.status[i] };
  }
  function readOut(event) {
    if (!values.status) return;
    const v = valueAt(event.latlng);
    const at = event.latlng.lat.toFixed(5) + ", " + event.latlng.lng.toFixed(5);
    let text = "outside the plan";
    if (v && v.signal > 0) {
      const dbm = data.signal_floor_dbm + (v.signal - 1) * data.signal_step_db;
      text = (v.signal === 1 ? "at most " : "") + minus(dbm.toFixed(1)) + " dBm, " +
        (v.server > 0 ? data.sectors[v.server - 1].id : "below threshold");
      if (v.margin > 0 && v.server > 0) {
        text += "\n" + minus((data.margin_floor_db + (v.margin - 1) * data.signal_step_db).toFixed(1)) + " dB over the second best";
      }
    } else if (v && v.status >= 2) { text = "no data"; } else if (v) { text = "out of range"; }
    output.textContent = text + "\n" + at;
  }
  ready.then(() => { map.on("mousemove", readOut); map.on("click", readOut); document.body.dataset.ready = "yes"; })
    .catch(() => { output.textContent = "This browser cannot unpack the values under the pointer; the pictures hold."; });
  window.plannerMap = { map: map, layers: layers, valueAt: valueAt };
});
