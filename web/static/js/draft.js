/**
 * Keeps what is being composed in this tab, and offers it where a page of the composer shows something else.
 *
 * The draft is what the form would post. It stays in the browser (session storage) and ends with the tab.
 * Without script or storage nothing is offered; the browser's own memory of forms still works.
 */
import { encoded } from "./post.js";

const KEY = "curvewright-draft";

export function keepDraft(form) {
  write(encoded(new FormData(form), "check").toString());
}

/** Show a button above the form that brings the kept draft back; `rebuild` posts the form and shows the answer. */
export function offerDraft(form, rebuild) {
  const kept = read();
  if (!kept || kept === encoded(new FormData(form), "check").toString()) return;
  const notice = document.createElement("p");
  notice.className = "notice";
  const button = document.createElement("button");
  button.type = "button";
  button.className = "slight";
  button.textContent = "Bring back what I last wrote in this tab";
  button.addEventListener("click", async () => {
    restore(form, new URLSearchParams(kept));
    await rebuild("check");
    notice.remove();
  });
  notice.append(button);
  form.before(notice);
}

/** Replace the fields of the form by hidden ones of the draft; posting it then builds the real ones. */
function restore(form, draft) {
  form.querySelector('input[name="view"]').value = draft.get("view") ?? "form";
  const hidden = [...draft].filter(([name]) => name !== "do" && name !== "view").map(([name, value]) => {
    const field = document.createElement("textarea"); // keeps line ends, which a hidden input does not
    field.name = name;
    field.value = value;
    field.hidden = true;
    return field;
  });
  form.querySelector("#sheet").replaceChildren(...hidden);
}

function read() {
  try {
    return sessionStorage.getItem(KEY);
  } catch {
    return null; // storage is blocked
  }
}

function write(text) {
  try {
    sessionStorage.setItem(KEY, text);
  } catch {
    // blocked or full: the draft then lives in the page alone
  }
}
