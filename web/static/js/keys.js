/**
 * The command that a key press in the composer means, or "".
 *
 * Ctrl (or Cmd) with Enter solves; Alt with an arrow moves the row that the field is in. Only combinations with a
 * modifier are taken, so nothing is typed by accident and nothing that types is lost.
 */
export function commandOfKey({ key, ctrlKey, metaKey, altKey }, row) {
  if (key === "Enter" && (ctrlKey || metaKey) && !altKey) return "solve";
  const movable = /^[a-z]+\.\d+$/.test(row);
  if (altKey && !ctrlKey && !metaKey && movable) {
    if (key === "ArrowUp") return `up ${row}`;
    if (key === "ArrowDown") return `down ${row}`;
  }
  return "";
}
