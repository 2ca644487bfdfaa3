/**
 * Light, dark, or as the system has it: keeps the reader's choice in this browser.
 *
 * Loaded in the head without `type="module"`, so the choice holds before the first paint.
 * Expects `<div class="scheme" hidden><select>…system, light, dark…</select></div>`; without script the
 * switch stays hidden and the page follows the system.
 */
(() => {
  const KEY = "curvewright-scheme";
  const page = document.documentElement;

  const stored = () => {
    try {
      return localStorage.getItem(KEY) ?? "system";
    } catch {
      return "system"; // storage is blocked: follow the system
    }
  };

  const apply = (scheme) => {
    if (scheme === "system") delete page.dataset.scheme;
    else page.dataset.scheme = scheme;
  };

  apply(stored());

  document.addEventListener("DOMContentLoaded", () => {
    const box = document.querySelector(".scheme");
    const select = box.querySelector("select");
    select.value = stored();
    box.hidden = false;
    select.addEventListener("change", () => {
      apply(select.value);
      try {
        localStorage.setItem(KEY, select.value);
      } catch {
        // the choice then holds for this page only
      }
      page.dispatchEvent(new CustomEvent("schemechange", { bubbles: true }));
    });
  });
})();
