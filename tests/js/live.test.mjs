import assert from "node:assert/strict";
import { test } from "node:test";
import { changes, decadesAround } from "../../web/static/js/live/drawing.js";
import { History } from "../../web/static/js/live/history.js";
import { listen } from "../../web/static/js/live/source.js";
import { amount, elapsed, raised } from "../../web/static/js/live/text.js";

const iteration = (mesh, number, value = 1) => ({ kind: "iteration", mesh, iteration: number, value, infeasibility: 0.1 });

test("numbers are written as the service writes them", () => {
  const written = [0, 0.58294, -1.5, 2.1e-9, 123456789, null, undefined, Infinity].map((value) => amount(value));
  assert.deepEqual(written, ["0", "0.58294", "−1.5", "2.1·10⁻⁹", "1.23457·10⁸", "—", "—", "—"]);
  assert.equal(amount(0.012345, 2), "0.012");
  assert.equal(raised(-10), "⁻¹⁰");
});

test("times are written in seconds, then in minutes", () => {
  assert.deepEqual([0.44, 9.99, 59.4, 185].map(elapsed), ["0.4 s", "10.0 s", "59 s", "3 min 5 s"]);
});

test("progress told twice after a reconnect is kept once", () => {
  const history = new History();
  for (const event of [iteration(1, 0), iteration(1, 1), iteration(1, 0), iteration(1, 1), iteration(2, 0)]) history.take(event);
  assert.deepEqual(history.iterations.map((item) => [item.mesh, item.iteration]), [[1, 0], [1, 1], [2, 0]]);
  for (const mesh of [1, 1, 2]) history.take({ kind: "mesh", mesh, breaks: [0, 1] });
  assert.deepEqual(history.meshes.map((item) => item.mesh), [1, 2]);
});

test("a long run keeps its latest iterations", () => {
  const history = new History();
  for (let number = 0; number < 2500; number += 1) history.take(iteration(1, number));
  assert.equal(history.iterations.length, 2000);
  assert.equal(history.last.iteration, 2499);
});

test("the value's change is relative and starts anew with each mesh", () => {
  const told = [iteration(1, 0, 2), iteration(1, 1, 1), iteration(2, 0, 5), iteration(2, 1, null)];
  assert.deepEqual(changes(told), [null, 0.5, null, null]);
});

test("the scale holds all positive numbers in whole decades", () => {
  assert.deepEqual(decadesAround([3e-7, 0, 0.2]), [-7, 0]);
  assert.deepEqual(decadesAround([]), [-8, 0]);
  assert.deepEqual(decadesAround([1]), [-1, 0]);
  assert.deepEqual(decadesAround([1e-300, 1]), [-16, 0]);
});

class FakeSource extends EventTarget {
  static CLOSED = 2;
  constructor() {
    super();
    FakeSource.last = this;
    this.readyState = 1;
  }
  close() { this.readyState = 2; }
  tell(data) { this.dispatchEvent(Object.assign(new Event(data.kind), { data: JSON.stringify(data) })); }
}

test("the end is told once, and the stream is closed", () => {
  globalThis.EventSource = FakeSource;
  const taken = [];
  let ended = 0;
  listen({ events: "/e", state: "/s", take: (event) => taken.push(event.kind), ended: () => { ended += 1; } });
  const source = FakeSource.last;
  for (const kind of ["state", "iteration", "mesh", "end", "end"]) source.tell({ kind, state: kind === "state" ? "solving" : "finished" });
  assert.deepEqual(taken.slice(0, 4), ["state", "iteration", "mesh", "end"]);
  assert.equal(ended, 1);
  assert.equal(source.readyState, 2);
});

test("where the stream is refused the state is asked for until the run has ended", async () => {
  globalThis.EventSource = FakeSource;
  const answers = ["waiting", "finished"];
  globalThis.fetch = async () => ({ ok: true, status: 200, json: async () => ({ state: answers.shift() }) });
  await new Promise((resolve) => {
    listen({ events: "/e", state: "/s", take: () => {}, ended: resolve });
    FakeSource.last.readyState = FakeSource.CLOSED;
    FakeSource.last.dispatchEvent(new Event("error"));
  });
  assert.equal(answers.length, 0);
});

test("a stream that reconnects by itself is left alone", async () => {
  globalThis.EventSource = FakeSource;
  let asked = 0;
  globalThis.fetch = async () => { asked += 1; return { ok: false, status: 503 }; };
  listen({ events: "/e", state: "/s", take: () => {}, ended: () => assert.fail("not ended") });
  FakeSource.last.readyState = 0;
  FakeSource.last.dispatchEvent(new Event("error"));
  await new Promise((resolve) => setTimeout(resolve, 10));
  assert.equal(asked, 0);
});
