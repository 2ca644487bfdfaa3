/**
 * The composer while one types: checks the problem, grafts what the service says beside the fields.
 *
 * Expects `<form id="composer">` with submit buttons named `do`, and parts marked `data-live` that the service renders
 * anew at every check. All knowledge of the document is in the service: the page is posted as it would be without
 * script, and only what changed is taken over from the answer. Without script every button is a plain form post.
 */
import { graftLive, graftSheet } from "./graft.js";
import { post } from "./post.js";
import { commandOfKey } from "./keys.js";
import { range } from "./range.js";
import { offerDraft, keepDraft } from "./draft.js";
import "./copy.js";

const PAUSE = 350; // milliseconds without a key before the problem is checked

export function enhance(form) {
  let timer = 0;
  let pending = null;
  let version = 0;

  const say = (sentence) => {
    const tag = document.createElement("span");
    tag.className = "tag bad";
    tag.textContent = sentence;
    document.getElementById("status").replaceChildren(tag);
  };

  /** Post the form with a command; hand the answer to `use` unless something was typed or asked meanwhile. */
  const send = async (command, use) => {
    clearTimeout(timer);
    pending?.abort();
    pending = new AbortController();
    const sent = ++version;
    try {
      const answer = await post(form, command, pending.signal);
      if (sent === version) use(document, answer);
      return true;
    } catch (error) {
      if (error.name !== "AbortError") say("The service does not answer; nothing is lost, the text stays here.");
      return false;
    }
  };

  const check = () => send("check", graftLive);

  /** Rows and views change as a whole; the form holds still for the few milliseconds that takes. */
  const rebuild = async (command) => {
    form.inert = true;
    form.dataset.busy = "";
    await send(command, graftSheet);
    form.inert = false;
    delete form.dataset.busy;
    form.querySelector("[data-focus]")?.focus();
    keepDraft(form);
  };

  form.addEventListener("input", () => {
    version += 1;
    clearTimeout(timer);
    timer = setTimeout(check, PAUSE);
    keepDraft(form);
  });

  form.addEventListener("submit", (event) => {
    const command = event.submitter?.value ?? "check";
    if (command === "solve") return; // the browser follows to the run
    event.preventDefault();
    if (command === "check") check();
    else rebuild(command);
  });

  form.addEventListener("keydown", (event) => {
    const command = commandOfKey(event, event.target.closest(".row")?.id ?? "");
    if (!command) return;
    event.preventDefault();
    if (command === "solve") form.requestSubmit(form.querySelector('button[value="solve"]'));
    else rebuild(command);
  });

  form.addEventListener("click", (event) => {
    const link = event.target.closest("#summary a");
    const field = link && document.getElementById(link.hash.slice(1));
    if (!field) return;
    event.preventDefault();
    const folded = field.closest("details");
    if (folded) folded.open = true;
    if (link.dataset.end) field.setSelectionRange(...range(field.value, link.dataset.start, link.dataset.end));
    field.focus();
  });

  form.querySelector(".keys").hidden = false;
  offerDraft(form, rebuild);
}

const form = document.getElementById("composer");
if (form) enhance(form);
