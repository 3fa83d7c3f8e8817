// Adds to a page that already shows its maps: reading at a place, keyboard, zooming.
"use strict";
(() => {
  const facts = JSON.parse(document.getElementById("facts").textContent);
  const map = document.getElementById("map");
  const field = document.getElementById("field");
  const canvas = field.parentElement;
  const grid = facts.grid;
  const home = field.getAttribute("viewBox").split(" ").map(Number);
  let view = [...home];
  let place = null;
  let readings = null;

  document.documentElement.classList.add("scripts");

  // Which cell lies at a row and column; -1 off the field.
  const cellAt = new Int32Array(grid.rows * grid.cols).fill(-1);
  for (let at = 0, cell = 0; at < grid.runs.length; at += 3) {
    const [row, first, length] = grid.runs.slice(at, at + 3);
    for (let step = 0; step < length; step += 1) cellAt[row * grid.cols + first + step] = cell++;
  }

  async function unpack() {
    const bytes = Uint8Array.from(atob(facts.cells), (sign) => sign.charCodeAt(0));
    const stream = new Blob([bytes]).stream().pipeThrough(new DecompressionStream("deflate"));
    const view16 = new DataView(await new Response(stream).arrayBuffer());
    const unpacked = {};
    facts.fields.forEach(([name, decimals], block) => {
      const values = new Array(grid.count);
      let sum = 0;
      for (let cell = 0; cell < grid.count; cell += 1) {
        sum = (sum + view16.getUint16(2 * (block * grid.count + cell), true)) & 65535;
        values[cell] = sum === 65535 ? null : (sum / 10 ** decimals).toFixed(decimals);
      }
      unpacked[name] = values;
    });
    return unpacked;
  }

  // ---- reading at a place

  function cellOf([x, y]) {
    const col = Math.floor((x - grid.x) / grid.cell);
    const row = Math.floor((y - grid.y) / grid.cell);
    if (col < 0 || row < 0 || col >= grid.cols || row >= grid.rows) return -1;
    return cellAt[row * grid.cols + col];
  }

  function nearestSample([x, y]) {
    let best = null;
    for (const [name, sx, sy, said] of facts.samples) {
      const away = Math.hypot(sx - x, sy - y);
      if (!best || away < best.away) best = { away, name, said };
    }
    return best;
  }

  // A chance is never quite nothing and never quite sure.
  const chance = (said) => (said === "0" ? "under 1 %" : said === "100" ? "over 99 %" : `${said} %`);

  function rowsAt(cell, at) {
    const value = (name) => readings[name] && readings[name][cell];
    const unit = (name) => facts.units[name] || "";
    const zone = facts.zones[Number(value("zone"))];
    const rows = [["Zone", `${zone.zone} (${zone.kind})`], ["Rate", `${zone.rate} (${zone.boron})`], ["Why", zone.why], ["Held by", zone.ruled]];
    const boron = value("boron");
    if (boron) rows.push(["Boron", `${boron} ${unit("boron")}, 9 times in 10 between ${value("low")} and ${value("high")}`]);
    rows.push(["Target", `${value("target")} ${unit("boron")}, soil ceiling ${value("ceiling")}`]);
    rows.push(["Chance", `short now ${chance(value("short"))}, over the ceiling after ${chance(value("over"))}`]);
    for (const [name, label] of [["organic_matter", "Organic matter"], ["clay", "Clay"]]) {
      const declared = facts.constant.includes(name) ? " (declared)" : "";
      if (value(name)) rows.push([label, `${value(name)} ${unit(name)}${declared}`]);
    }
    if (value("boron_sd")) rows.push(["SD of the map", `${value("boron_sd")} ${unit("boron")}`]);
    const near = nearestSample(at);
    if (near) rows.push(["Nearest sample", `${near.name}, ${Math.round(near.away * facts.metre)} ${facts.length} away, ${near.said}`]);
    rows.push(["Place", `east ${(facts.west + at[0]).toFixed(0)} m, north ${(facts.north - at[1]).toFixed(0)} m`]);
    return rows;
  }

  function read(at, speak) {
    place = at;
    drawCross();
    const list = document.getElementById("reading");
    const spoken = document.getElementById("spoken");
    if (!readings) return;
    const cell = cellOf(at);
    const rows = cell < 0 ? [["Place", "outside the field"]] : rowsAt(cell, at);
    list.replaceChildren(...rows.map(([name, said]) => {
      const row = document.createElement("div");
      const head = document.createElement("dt");
      const body = document.createElement("dd");
      head.textContent = name;
      body.textContent = said;
      row.append(head, body);
      return row;
    }));
    // Only keys and taps are announced; a voice that follows the mouse would never stop.
    if (speak) spoken.textContent = rows.slice(0, 5).map((row) => row.join(" ")).join(". ");
  }

  // ---- view

  const scale = () => Math.min(field.clientWidth / view[2], field.clientHeight / view[3]) || 1;

  function drawCross() {
    const far = 2 * Math.max(home[2], home[3]);
    const d = place ? `M${place[0]} ${place[1] - far}v${2 * far}M${place[0] - far} ${place[1]}h${2 * far}` : "";
    for (const id of ["crossback", "cross"]) document.getElementById(id).setAttribute("d", d);
  }

  function draw() {
    field.setAttribute("viewBox", view.map((v) => v.toFixed(2)).join(" "));
    // Labels and marks keep their size: at least 14 px, and never grow with the zoom.
    const letters = Math.max(home[2], home[3]) / 33;
    field.style.setProperty("--pin", Math.min(17, Math.max(14, letters * scale())) / (letters * scale()));
    const near = view[2] < home[2] * 0.999;
    drawBar();
    field.style.touchAction = near ? "none" : "pan-y";
    canvas.classList.toggle("near", near);
  }

  // The longest round length that takes at most a quarter of the width.
  function drawBar() {
    const bar = document.getElementById("scalebar");
    const perUnit = scale() / facts.metre;
    const lengths = [1, 2, 5, 10, 20, 50, 100, 200, 500, 1000, 2000, 5000];
    const length = lengths.filter((one) => one * perUnit <= field.clientWidth / 4).pop() || 1;
    bar.style.width = `${length * perUnit}px`;
    bar.textContent = `${length.toLocaleString("en")} ${facts.length}`;
  }

  function zoom(by, about) {
    const width = Math.min(home[2], Math.max(home[2] / 30, view[2] * by));
    const share = width / view[2];
    const [x, y] = about || [view[0] + view[2] / 2, view[1] + view[3] / 2];
    view = [x - (x - view[0]) * share, y - (y - view[1]) * share, width, view[3] * share];
    if (width === home[2]) view = [...home];
    draw();
  }

  function pan(x, y) {
    view[0] = Math.min(home[0] + home[2] - view[2], Math.max(home[0], view[0] + x));
    view[1] = Math.min(home[1] + home[3] - view[3], Math.max(home[1], view[1] + y));
    draw();
  }

  function onMap(event) {
    const point = new DOMPoint(event.clientX, event.clientY).matrixTransform(field.getScreenCTM().inverse());
    return [point.x, point.y];
  }

  // ---- hands

  const fingers = new Map();
  let moved = 0;
  let pinch = 0;

  field.addEventListener("pointerdown", (event) => {
    fingers.set(event.pointerId, [event.clientX, event.clientY]);
    moved = 0;
  });
  field.addEventListener("pointermove", (event) => {
    const before = fingers.get(event.pointerId);
    if (!before) {
      if (event.pointerType === "mouse") read(onMap(event), false);
      return;
    }
    const [dx, dy] = [event.clientX - before[0], event.clientY - before[1]];
    moved += Math.abs(dx) + Math.abs(dy);
    fingers.set(event.pointerId, [event.clientX, event.clientY]);
    if (fingers.size === 2) {
      const [a, b] = [...fingers.values()];
      const apart = Math.hypot(a[0] - b[0], a[1] - b[1]);
      if (pinch) zoom(pinch / apart, onMap({ clientX: (a[0] + b[0]) / 2, clientY: (a[1] + b[1]) / 2 }));
      pinch = apart;
    } else if (moved > 5 && canvas.classList.contains("near")) {
      pan(-dx / scale(), -dy / scale());
    }
  });
  function lift(event) {
    if (event.type === "pointerup" && fingers.has(event.pointerId) && moved < 6) read(onMap(event), true);
    fingers.delete(event.pointerId);
    pinch = 0;
  }
  for (const name of ["pointerup", "pointercancel", "pointerleave"]) field.addEventListener(name, lift);
  field.addEventListener("wheel", (event) => {
    // The page must stay scrollable: the wheel belongs to the map only when asked for.
    if (!event.ctrlKey && document.activeElement !== field) return;
    event.preventDefault();
    zoom(event.deltaY > 0 ? 1.2 : 1 / 1.2, onMap(event));
  }, { passive: false });
  field.addEventListener("keydown", (event) => {
    const step = grid.cell * (event.shiftKey ? 10 : 1);
    const moves = { ArrowLeft: [-step, 0], ArrowRight: [step, 0], ArrowUp: [0, -step], ArrowDown: [0, step] };
    if (event.key in moves) {
      const from = place || [home[0] + home[2] / 2, home[1] + home[3] / 2];
      read([from[0] + moves[event.key][0], from[1] + moves[event.key][1]], true);
    } else if (event.key === "+" || event.key === "=") zoom(1 / 1.25, place);
    else if (event.key === "-") zoom(1.25, place);
    else if (event.key === "0") zoom(1e9);
    else return;
    event.preventDefault();
  });
  document.getElementById("zoom-in").addEventListener("click", () => zoom(1 / 1.4, null));
  document.getElementById("zoom-out").addEventListener("click", () => zoom(1.4, null));
  document.getElementById("zoom-all").addEventListener("click", () => zoom(1e9));

  for (const button of map.querySelectorAll("input[name=show]")) {
    button.addEventListener("change", () => { map.dataset.show = button.value; });
    if (button.checked) map.dataset.show = button.value;
  }
  for (const box of map.querySelectorAll("input[type=checkbox]")) {
    const follow = () => map.classList.toggle(`no-${box.id.slice(4)}`, !box.checked);
    box.addEventListener("change", follow);
    follow();
  }

  field.setAttribute("tabindex", "0");
  field.setAttribute("role", "application");
  field.setAttribute("aria-roledescription", "field map");
  field.setAttribute("aria-label", `${field.getAttribute("aria-label")}. Arrow keys move the reading point, plus and minus zoom.`);
  new ResizeObserver(draw).observe(field);
  draw();
  unpack().then((unpacked) => {
    readings = unpacked;
    if (place) read(place, false);
    map.dataset.ready = "yes";
  }, () => { map.dataset.ready = "without readings"; });
})();
