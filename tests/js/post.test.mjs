import assert from "node:assert/strict";
import test from "node:test";
import { encoded } from "../../web/static/js/post.js";

test("the command of the button replaces what the form would send", () => {
  const body = encoded([["view", "form"], ["do", "check"], ["title", "a & b"]], "add unknowns");
  assert.equal(body.toString(), "view=form&do=add+unknowns&title=a+%26+b");
});

test("fields of the same name are all sent, files are not", () => {
  const body = encoded([["a", "1"], ["a", "2"], ["file", new Blob(["x"])]], "check");
  assert.equal(body.toString(), "a=1&a=2&do=check");
});
