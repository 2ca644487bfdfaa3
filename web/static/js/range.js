/**
 * The service counts characters, the browser counts UTF-16 units: turns a range of the first sort into the second.
 */
export function range(text, start, end) {
  const characters = Array.from(text);
  const units = (count) => characters.slice(0, count).join("").length;
  return [units(Number(start)), units(Number(end))];
}
