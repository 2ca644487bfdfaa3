import assert from "node:assert/strict";
import { test } from "node:test";
import { CONFIG, dressed, painted } from "../../web/static/js/figures.js";

const colour = (name) => `colour of ${name}`;

test("colours of the style sheet take the place of their names", () => {
  const data = [{ x: [0], y: [1], line: { color: "--line-2", dash: "9px,4px" } }];
  assert.deepEqual(painted(data, colour)[0].line, { color: "colour of --line-2", dash: "9px,4px" });
  assert.equal(data[0].line.color, "--line-2");
});

test("a layout keeps what the service said and gets the colours of the paper", () => {
  const given = { xaxis: { title: { text: "t [s]" } }, yaxis: { title: { text: "y" }, type: "log" }, shapes: [{ x0: 1, line: { width: 1 } }, { fillcolor: "--line-2", line: { width: 0 } }] };
  const made = dressed(given, colour, { font: "plain", coarse: false });
  assert.equal(made.yaxis.type, "log");
  assert.equal(made.xaxis.title.text, "t [s]");
  assert.equal(made.shapes[0].line.color, "colour of --faint");
  assert.ok(!("fillcolor" in made.shapes[0]));
  assert.equal(made.shapes[1].fillcolor, "colour of --line-2");
  assert.equal(made.dragmode, "zoom");
});

test("a finger scrolls the page and does not zoom the plot", () => {
  const given = { xaxis: { title: {} }, yaxis: { title: {} } };
  assert.equal(dressed(given, colour, { font: "plain", coarse: true }).dragmode, false);
});

test("no button leads to another host", () => {
  assert.equal(CONFIG.displaylogo, false);
  assert.ok(!JSON.stringify(CONFIG.modeBarButtons).match(/cloud|chart/i));
});
