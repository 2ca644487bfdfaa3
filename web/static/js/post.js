/**
 * Posts a form as the browser would, with the value of one of its buttons, and gives the answer as a document.
 *
 * An answer with an error status is a page too: it says what is wrong. Rejects where there is no page at all.
 */
export async function post(form, command, signal) {
  const answer = await fetch(form.action, {
    method: "POST",
    body: encoded(new FormData(form), command),
    headers: { Accept: "text/html" },
    signal,
  });
  const page = new DOMParser().parseFromString(await answer.text(), "text/html");
  if (!page.getElementById(form.id)) throw new Error(`status ${answer.status}`);
  return page;
}

/** The entries of a form as `application/x-www-form-urlencoded`, with the command of a button. */
export function encoded(entries, command) {
  const body = new URLSearchParams();
  for (const [name, value] of entries) if (typeof value === "string") body.append(name, value);
  body.set("do", command);
  return body;
}
