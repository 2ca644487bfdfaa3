/**
 * Takes parts of a page that the service answered into the page that is shown.
 *
 * `graftLive` touches nothing that is typed into: it takes over the parts marked `data-live` (they have ids) and the
 * marks of fields in error. `graftSheet` replaces the fields too, keeps opened sections open, then does the same;
 * the field to go to is then marked `data-focus`.
 */
export function graftLive(page, answer) {
  for (const fresh of answer.querySelectorAll("[data-live]")) {
    const shown = page.getElementById(fresh.id);
    if (shown && shown.innerHTML !== fresh.innerHTML) shown.replaceChildren(...adopted(page, fresh));
  }
  for (const fresh of answer.querySelectorAll("#sheet input, #sheet textarea, #sheet select")) {
    const shown = fresh.id && page.getElementById(fresh.id);
    if (!shown) continue;
    if (fresh.getAttribute("aria-invalid") === "true") shown.setAttribute("aria-invalid", "true");
    else shown.removeAttribute("aria-invalid");
  }
}

export function graftSheet(page, answer) {
  const open = [...page.querySelectorAll("#sheet details[open]")].map((part) => part.id);
  page.querySelector('input[name="view"]').value = answer.querySelector('input[name="view"]').value;
  for (const field of answer.querySelectorAll("[autofocus]")) {
    field.removeAttribute("autofocus"); // means page load; a graft leaves the focus to its caller
    field.dataset.focus = "";
  }
  page.getElementById("sheet").replaceChildren(...adopted(page, answer.getElementById("sheet")));
  for (const id of open) {
    const part = page.getElementById(id);
    if (part) part.open = true;
  }
  graftLive(page, answer);
}

function adopted(page, element) {
  return [...element.childNodes].map((node) => page.importNode(node, true));
}
