/**
 * Shows a run while it is solved: figures, the way the solver converges, the meshes; ends by showing the result.
 *
 * Expects `<section data-live data-page data-events data-state data-unit hidden>` with places marked `data-live-…`
 * (see progress.html).  Without script the page loads itself again every few seconds.
 */
import { History } from "./live/history.js";
import { drawBreaks, drawIterations } from "./live/drawing.js";
import { amount, elapsed } from "./live/text.js";
import { listen } from "./live/source.js";

const SPOKEN_EVERY = 4000; // a screen reader is told no oftener than this, in milliseconds

/** Follow the run of the section below `root`. */
export function enhance(root) {
  const section = root.querySelector("[data-live]");
  if (!section) return;
  const part = (name) => root.querySelector(`[data-live-${name}]`);
  const { page, events, state, unit } = section.dataset;
  const history = new History();
  const begun = performance.now();
  let spoken = -Infinity;
  let drawing = 0;
  section.hidden = false;

  const put = (name, text) => { part(name).textContent = text; };
  const withUnit = (value) => (unit && value !== null && value !== undefined ? `${amount(value)} ${unit}` : amount(value));

  const show = () => {
    drawing = 0;
    const { last } = history;
    if (last) {
      put("mesh", `${last.mesh} (${last.intervals} intervals${last.start > 1 ? `, start ${last.start}` : ""})`);
      put("iteration", String(last.iteration));
      put("value", withUnit(last.value));
      put("infeasibility", amount(last.infeasibility, 2));
    }
    drawIterations(part("iterations"), history.iterations);
    drawBreaks(part("breaks"), history.meshes);
  };

  const say = (sentence, now = performance.now()) => {
    spoken = now;
    put("status", sentence);
  };

  const take = (event) => {
    history.take(event);
    if (event.kind === "state") {
      put("state", event.state);
      part("state").className = "tag busy";
      say(event.state === "solving" ? "A worker is solving the problem." : "Waiting for a free worker.");
    }
    if (event.kind === "mesh") {
      const cells = [event.mesh, event.intervals, event.points, withUnit(event.value), amount(event.error, 2)];
      part("meshes").append(row(cells));
      say(`Mesh ${event.mesh} is solved: value ${withUnit(event.value)}, relative error ${amount(event.error, 2)}.`);
    }
    if (event.kind === "point") {
      put("mesh", `sweep: point ${event.point} of ${event.of}`);
      put("value", withUnit(event.value));
      if (performance.now() - spoken > SPOKEN_EVERY) say(`Point ${event.point} of ${event.of} of the sweep is solved.`);
      return;
    }
    if (event.kind === "iteration" && performance.now() - spoken > SPOKEN_EVERY) {
      say(`Mesh ${event.mesh}, iteration ${event.iteration}: value ${withUnit(event.value)}.`);
    }
    drawing ||= requestAnimationFrame(show);
  };

  setInterval(() => put("elapsed", elapsed((performance.now() - begun) / 1000)), 500);
  listen({ events, state, take, ended: () => location.replace(page) });
}

function row(cells) {
  const line = document.createElement("tr");
  for (const cell of cells) {
    const place = line.insertCell();
    place.className = "number";
    place.textContent = String(cell);
  }
  return line;
}

if (typeof document !== "undefined") enhance(document);
