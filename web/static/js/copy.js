/**
 * Gives every `<pre>` on the page a button that copies its text. Without script the text is selected by hand.
 */
export function enhance(root) {
  for (const block of root.querySelectorAll("pre")) {
    const button = document.createElement("button");
    button.type = "button";
    button.className = "slight copy";
    button.textContent = "Copy";
    button.addEventListener("click", async () => {
      const text = block.textContent;
      try {
        await navigator.clipboard.writeText(text);
        button.textContent = "Copied";
      } catch {
        getSelection().selectAllChildren(block); // not allowed to copy: leave it selected
        button.textContent = "Selected";
      }
      setTimeout(() => (button.textContent = "Copy"), 2000);
    });
    block.before(button);
  }
}

if (globalThis.document && navigator.clipboard) enhance(document);
