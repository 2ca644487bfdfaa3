/** Numbers and times as the page writes them (compare web/display.py). */

const RAISED = { "-": "⁻", 0: "⁰", 1: "¹", 2: "²", 3: "³", 4: "⁴", 5: "⁵", 6: "⁶", 7: "⁷", 8: "⁸", 9: "⁹" };

/** `0.58294`, `−1.5`, `2.1·10⁻⁹`; a dash for what is no number. */
export function amount(value, digits = 6) {
  if (typeof value !== "number" || !Number.isFinite(value)) return "—";
  if (value === 0) return "0";
  const size = Math.abs(value);
  const plain = size >= 1e-3 && size < 1e6;
  const [mantissa, power] = value.toExponential(digits - 1).split("e");
  const text = plain ? String(Number(value.toPrecision(digits))) : `${Number(mantissa)}·10${raised(Number(power))}`;
  return text.replace(/^-/, "−");
}

/** A whole number as an exponent: `⁻⁹`. */
export function raised(power) {
  return [...String(power)].map((sign) => RAISED[sign]).join("");
}

/** `0.5 s`, `12 s`, `3 min 5 s`. */
export function elapsed(seconds) {
  if (seconds < 10) return `${seconds.toFixed(1)} s`;
  const whole = Math.round(seconds);
  return whole < 60 ? `${whole} s` : `${Math.floor(whole / 60)} min ${whole % 60} s`;
}
