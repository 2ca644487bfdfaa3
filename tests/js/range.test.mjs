import assert from "node:assert/strict";
import test from "node:test";
import { range } from "../../web/static/js/range.js";

test("letters beyond the first plane count once for the service and twice for the browser", () => {
  assert.deepEqual(range("a𝛼b", "2", "3"), [3, 4]);
  assert.deepEqual(range("abc", 1, 2), [1, 2]);
});
