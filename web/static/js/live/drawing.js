/** The two pictures of a run on its way, drawn into `<svg viewBox="0 0 480 260">`. */
import { raised } from "./text.js";

const NAMESPACE = "http://www.w3.org/2000/svg";
const BOX = { left: 52, right: 466, top: 12, bottom: 222 };
const MOST_MESHES = 12;

/** Changes of the value from one iteration to the next, relative to its size; null for the first of a mesh. */
export function changes(iterations) {
  return iterations.map((now, count) => {
    const before = iterations[count - 1];
    if (!before || before.mesh !== now.mesh || now.value === null || before.value === null) return null;
    return Math.abs(now.value - before.value) / Math.max(Math.abs(now.value), Math.abs(before.value), 1e-300);
  });
}

/** Whole powers of ten that hold all positive numbers, at least one decade and at most `most`. */
export function decadesAround(numbers, most = 16) {
  const powers = numbers.filter((number) => number > 0).map(Math.log10);
  if (!powers.length) return [-8, 0];
  const high = Math.ceil(Math.max(...powers)) + 0; // no negative zero
  const low = Math.min(Math.max(Math.floor(Math.min(...powers)), high - most), high - 1);
  return [low, high];
}

/** Infeasibility and change of the value over the iterations, on powers of ten. */
export function drawIterations(svg, iterations) {
  const violations = iterations.map((item) => item.infeasibility ?? null);
  const moves = changes(iterations);
  const [low, high] = decadesAround([...violations, ...moves].filter((number) => number !== null));
  const across = (count) => BOX.left + ((BOX.right - BOX.left) * count) / Math.max(iterations.length - 1, 1);
  const up = (value) => BOX.bottom + ((BOX.top - BOX.bottom) * (Math.log10(value) - low)) / (high - low);
  const parts = [];
  const stride = Math.ceil((high - low) / 6);
  for (let power = low; power <= high; power += stride) {
    const y = up(10 ** power).toFixed(1);
    parts.push(shape("path", "plot-grid", { d: `M${BOX.left} ${y}H${BOX.right}` }));
    parts.push(text(`10${raised(power)}`, "plot-tick", { x: BOX.left - 6, y: Number(y) + 4, "text-anchor": "end" }));
  }
  iterations.forEach((item, count) => {
    if (count && item.mesh !== iterations[count - 1].mesh) {
      const x = across(count).toFixed(1);
      parts.push(shape("path", "plot-rug", { d: `M${x} ${BOX.bottom}v-10` }));
    }
  });
  parts.push(shape("path", "plot-frame", { d: `M${BOX.left} ${BOX.top}V${BOX.bottom}H${BOX.right}` }));
  parts.push(shape("path", "plot-line line-1", { d: path(violations, across, up, low) }));
  parts.push(shape("path", "plot-line line-2", { d: path(moves, across, up, low), "stroke-dasharray": "9 4" }));
  const middle = (BOX.left + BOX.right) / 2;
  const label = iterations.length ? `iteration (${iterations.length} so far)` : "iteration";
  parts.push(text(label, "plot-axis", { x: middle, y: 250, "text-anchor": "middle" }));
  svg.replaceChildren(...parts);
}

/** One row of ticks for each mesh, the newest at the bottom. */
export function drawBreaks(svg, meshes) {
  const shown = meshes.filter((mesh) => mesh.breaks?.length > 1).slice(-MOST_MESHES);
  const parts = [];
  const ends = shown.flatMap((mesh) => [mesh.breaks[0], mesh.breaks.at(-1)]);
  const [start, end] = [Math.min(...ends), Math.max(...ends)];
  shown.forEach((mesh, count) => {
    const y = BOX.top + 14 + ((BOX.bottom - BOX.top - 14) * (count + 1)) / Math.max(shown.length, 4);
    const across = (place) => BOX.left + ((BOX.right - BOX.left) * (place - start)) / (end - start);
    const ticks = mesh.breaks.map((place) => `M${across(place).toFixed(1)} ${y.toFixed(1)}v-9`).join("");
    const newest = count === shown.length - 1;
    const line = `M${across(mesh.breaks[0]).toFixed(1)} ${y.toFixed(1)}H${across(mesh.breaks.at(-1)).toFixed(1)}`;
    parts.push(shape("path", newest ? "plot-line line-1" : "plot-frame", { d: `${line}${ticks}` }));
    parts.push(text(String(mesh.mesh), "plot-tick", { x: BOX.left - 8, y, "text-anchor": "end" }));
  });
  if (!shown.length) parts.push(text("no mesh is finished yet", "plot-tick", { x: 240, y: 130, "text-anchor": "middle" }));
  svg.replaceChildren(...parts);
}

function path(values, across, up, low) {
  let pen = "M";
  return values.map((value, count) => {
    if (value === null || !Number.isFinite(value)) {
      pen = "M";
      return "";
    }
    const step = `${pen}${across(count).toFixed(1)} ${up(Math.max(value, 10 ** low)).toFixed(1)}`;
    pen = "L";
    return step;
  }).join("");
}

function shape(name, style, attributes) {
  const made = document.createElementNS(NAMESPACE, name);
  made.setAttribute("class", style);
  for (const [key, value] of Object.entries(attributes)) made.setAttribute(key, value);
  return made;
}

function text(content, style, attributes) {
  const made = shape("text", style, attributes);
  made.textContent = content;
  return made;
}
