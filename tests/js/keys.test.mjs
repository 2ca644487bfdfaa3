import assert from "node:assert/strict";
import test from "node:test";
import { commandOfKey } from "../../web/static/js/keys.js";

test("Enter with Ctrl or Cmd solves, alone it does not", () => {
  assert.equal(commandOfKey({ key: "Enter", ctrlKey: true }, ""), "solve");
  assert.equal(commandOfKey({ key: "Enter", metaKey: true }, "x"), "solve");
  assert.equal(commandOfKey({ key: "Enter" }, ""), "");
});

test("Alt with an arrow moves a row, and only a row", () => {
  assert.equal(commandOfKey({ key: "ArrowUp", altKey: true }, "unknowns.2"), "up unknowns.2");
  assert.equal(commandOfKey({ key: "ArrowDown", altKey: true }, "endpoints.0"), "down endpoints.0");
  assert.equal(commandOfKey({ key: "ArrowUp", altKey: true }, "functional"), "");
  assert.equal(commandOfKey({ key: "ArrowUp", altKey: true, ctrlKey: true }, "unknowns.2"), "");
  assert.equal(commandOfKey({ key: "ArrowUp" }, "unknowns.2"), "");
});
