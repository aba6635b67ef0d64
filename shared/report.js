"use strict";
const data = JSON.parse(document.getElementById("data").textContent);
const fronts = data.fronts, count = fronts.t0.length;
const colours = ["#20476b", "#c2571a", "#3f8f6b"], widths = [2.2, 0.8, 1.4], dashes = [[], [], [7, 4]];
const canvas = document.getElementById("plane"), told = document.getElementById("told");
const profile = document.getElementById("profile"), slider = document.getElementById("time");
const margin = { left: 64, right: 12, top: 10, bottom: 40 };
let view = { x0: data.extent[0], x1: data.extent[1], t0: 0, t1: data.until };
let lit = new Set(), chosen = -1, hovered = -1;

function fit(element, height) {
  const ratio = window.devicePixelRatio || 1, width = element.clientWidth || 900;
  element.width = width * ratio; element.height = height * ratio; element.style.height = height + "px";
  const pen = element.getContext("2d"); pen.setTransform(ratio, 0, 0, ratio, 0, 0);
  return [pen, width, height];
}
function ticks(low, high, wanted) {
  const raw = (high - low) / wanted, power = Math.pow(10, Math.floor(Math.log10(raw))), found = [];
  const step = [1, 2, 5, 10].map(k => k * power).find(s => s >= raw);
  for (let v = Math.ceil(low / step) * step; v <= high + step * 1e-9; v += step) found.push(Math.abs(v) < step * 1e-9 ? 0 : v);
  return found;
}
function short(value) { return Number(value.toPrecision(6)).toString(); }
function axes(pen, width, height, box, xLabel, yLabel) {
  const X = x => margin.left + (x - box.x0) / (box.x1 - box.x0) * (width - margin.left - margin.right);
  const Y = y => height - margin.bottom - (y - box.t0) / (box.t1 - box.t0) * (height - margin.top - margin.bottom);
  pen.clearRect(0, 0, width, height); pen.font = "12px DejaVu Sans, Verdana, sans-serif"; pen.fillStyle = "#333"; pen.strokeStyle = "#999"; pen.lineWidth = 1;
  pen.textAlign = "center";
  for (const v of ticks(box.x0, box.x1, 8)) { pen.beginPath(); pen.moveTo(X(v), height - margin.bottom); pen.lineTo(X(v), height - margin.bottom + 5); pen.stroke(); pen.fillText(short(v), X(v), height - margin.bottom + 18); }
  pen.fillText(xLabel, (margin.left + width) / 2, height - 6); pen.textAlign = "right";
  for (const v of ticks(box.t0, box.t1, 6)) { pen.beginPath(); pen.moveTo(margin.left - 5, Y(v)); pen.lineTo(margin.left, Y(v)); pen.stroke(); pen.fillText(short(v), margin.left - 8, Y(v) + 4); }
  pen.save(); pen.translate(12, height / 2); pen.rotate(-Math.PI / 2); pen.textAlign = "center"; pen.fillText(yLabel, 0, 0); pen.restore();
  pen.strokeRect(margin.left, margin.top, width - margin.left - margin.right, height - margin.top - margin.bottom);
  return [X, Y];
}
function pieces(i) { return data.pieces.slice(data.first[i], data.first[i + 1]); }
function stroke(pen, X, Y, i) {
  pen.beginPath();
  for (const [x0, t0, x1, t1] of pieces(i)) { pen.moveTo(X(x0), Y(t0)); pen.lineTo(X(x1), Y(t1)); }
  pen.stroke();
}
function draw() {
  const [pen, width, height] = fit(canvas, 460), [X, Y] = axes(pen, width, height, view, data.labels[0], data.labels[1]);
  pen.save(); pen.beginPath(); pen.rect(margin.left, margin.top, width - margin.left - margin.right, height - margin.top - margin.bottom); pen.clip();
  for (const kind of [1, 2, 0]) for (let i = 0; i < count; i++) if (fronts.kind[i] === kind) {
    pen.strokeStyle = colours[kind]; pen.lineWidth = widths[kind]; pen.setLineDash(dashes[kind]);
    pen.globalAlpha = lit.size && !lit.has(fronts.row[i]) && i !== chosen ? 0.15 : 1; stroke(pen, X, Y, i);
  }
  pen.globalAlpha = 1; pen.setLineDash([]);
  for (const [i, colour] of [[hovered, "#d9a400"], [chosen, "#000"]]) if (i >= 0) { pen.strokeStyle = colour; pen.lineWidth = 4; stroke(pen, X, Y, i); }
  const t = data.profiles[Number(slider.value)].t; pen.strokeStyle = "#555"; pen.lineWidth = 1; pen.setLineDash([2, 4]); pen.beginPath(); pen.moveTo(margin.left, Y(t)); pen.lineTo(width, Y(t)); pen.stroke();
  pen.restore();
}
function nearest(event) {
  const box = canvas.getBoundingClientRect(), w = box.width - margin.left - margin.right, h = box.height - margin.top - margin.bottom;
  const px = event.clientX - box.left - margin.left, py = event.clientY - box.top - margin.top;
  const sx = w / (view.x1 - view.x0), st = h / (view.t1 - view.t0);
  let best = -1, least = 144;
  for (let i = 0; i < count; i++) for (const [x0, t0, x1, t1] of pieces(i)) {
    const ax = (x0 - view.x0) * sx, ay = h - (t0 - view.t0) * st, bx = (x1 - view.x0) * sx, by = h - (t1 - view.t0) * st;
    const dx = bx - ax, dy = by - ay, n = dx * dx + dy * dy;
    const s = n ? Math.max(0, Math.min(1, ((px - ax) * dx + (py - ay) * dy) / n)) : 0;
    const d = (ax + s * dx - px) ** 2 + (ay + s * dy - py) ** 2;
    if (d < least) { least = d; best = i; }
  }
  return best;
}
function tell(i) {
  if (i < 0) { told.textContent = "Point at a front, or use the arrow keys on the diagram; Enter lights its ancestry."; return; }
  const end = fronts.ended[i] < 0 ? "alive at the end" : "ends at t = " + short(fronts.t1[i]) + " in collision " + fronts.ended[i];
  const birth = fronts.born[i] < 0 ? "initial data" : "collision " + fronts.born[i];
  told.textContent = "front " + fronts.row[i] + ": " + data.kinds[fronts.kind[i]] + " from " + short(fronts.left[i]) + " to " + short(fronts.right[i]) +
    ", speed " + short(fronts.speed[i]) + "; born at t = " + short(fronts.t0[i]) + " (" + birth + "), " + end + ".";
}
function ancestry(i) {
  const { row, born, ended } = data.graph, at = row ? row.indexOf(fronts.row[i]) : fronts.row[i], enders = new Map();
  for (let k = 0; k < ended.length; k++) { const c = ended[k]; if (c >= 0) { if (!enders.has(c)) enders.set(c, []); enders.get(c).push(k); } }
  const found = new Set(), todo = [at];
  while (todo.length) for (const k of enders.get(born[todo.pop()]) || []) if (!found.has(k)) { found.add(k); todo.push(k); }
  return row ? new Set([...found].map(k => row[k])) : found;
}
function choose(i) { chosen = i; lit = i < 0 ? new Set() : ancestry(i); tell(i); draw(); canvas.dataset.lit = lit.size; canvas.dataset.chosen = i < 0 ? "" : fronts.row[i]; }
function zoom(factor, fx, ft) {
  const x = view.x0 + fx * (view.x1 - view.x0), t = view.t0 + ft * (view.t1 - view.t0);
  view = { x0: x + (view.x0 - x) * factor, x1: x + (view.x1 - x) * factor, t0: t + (view.t0 - t) * factor, t1: t + (view.t1 - t) * factor };
  draw();
}
function pan(dx, dt) { const w = view.x1 - view.x0, h = view.t1 - view.t0; view = { x0: view.x0 + dx * w, x1: view.x1 + dx * w, t0: view.t0 + dt * h, t1: view.t1 + dt * h }; draw(); }
let drag = null;
canvas.addEventListener("pointerdown", e => { drag = { x: e.clientX, y: e.clientY, view: view, moved: false }; canvas.setPointerCapture(e.pointerId); });
canvas.addEventListener("pointermove", e => {
  if (drag) {
    const box = canvas.getBoundingClientRect(), dx = e.clientX - drag.x, dy = e.clientY - drag.y;
    if (Math.abs(dx) + Math.abs(dy) > 4) drag.moved = true;
    if (drag.moved) { view = drag.view; pan(-dx / (box.width - 76), dy / (box.height - 50)); }
  } else { const i = nearest(e); if (i !== hovered) { hovered = i; tell(i < 0 ? chosen : i); draw(); } }
});
canvas.addEventListener("pointerup", e => { const clicked = drag && !drag.moved; drag = null; if (clicked) choose(nearest(e)); });
canvas.addEventListener("pointerleave", () => { hovered = -1; tell(chosen); draw(); });
canvas.addEventListener("wheel", e => {
  e.preventDefault(); const box = canvas.getBoundingClientRect();
  zoom(e.deltaY > 0 ? 1.2 : 1 / 1.2, (e.clientX - box.left - margin.left) / (box.width - 76), 1 - (e.clientY - box.top - margin.top) / (box.height - 50));
}, { passive: false });
canvas.addEventListener("keydown", e => {
  const acts = { "+": () => zoom(1 / 1.2, 0.5, 0.5), "-": () => zoom(1.2, 0.5, 0.5), "0": () => whole(), "Escape": () => choose(-1),
    "ArrowRight": () => { hovered = (hovered + 1) % count; tell(hovered); draw(); }, "ArrowLeft": () => { hovered = (hovered + count - 1) % count; tell(hovered); draw(); },
    "ArrowUp": () => pan(0, 0.1), "ArrowDown": () => pan(0, -0.1), "Enter": () => choose(hovered) };
  if (acts[e.key] && count) { e.preventDefault(); acts[e.key](); }
});
function whole() { view = { x0: data.extent[0], x1: data.extent[1], t0: 0, t1: data.until }; draw(); }
function drawProfile() {
  const line = data.profiles[Number(slider.value)];
  const [pen, width, height] = fit(profile, 240), box = { x0: data.extent[0], x1: data.extent[1], t0: data.range[0], t1: data.range[1] };
  const [X, Y] = axes(pen, width, height, box, data.labels[0], data.labels[2]);
  pen.strokeStyle = colours[0]; pen.lineWidth = 1.8; pen.beginPath(); line.u.forEach((u, i) => pen[i ? "lineTo" : "moveTo"](X(line.x[i]), Y(u))); pen.stroke();
  document.getElementById("when").textContent = "t = " + short(line.t) + ", proven L1 bound " + short(line.bound);
  profile.dataset.t = line.t;
}
slider.addEventListener("input", () => { drawProfile(); draw(); });
document.getElementById("closer").addEventListener("click", () => zoom(1 / 1.4, 0.5, 0.5));
document.getElementById("wider").addEventListener("click", () => zoom(1.4, 0.5, 0.5));
document.getElementById("whole").addEventListener("click", whole);
window.addEventListener("resize", () => { draw(); drawProfile(); });
window.addEventListener("beforeprint", () => { whole(); drawProfile(); });
tell(-1); drawProfile(); draw();
