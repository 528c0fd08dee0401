// Numbers as a reader wants them; the same rules as rounding.py.

const MISSING = "–", MINUS = "\u2212";

function decimals(uncertainty) {
  if (!Number.isFinite(uncertainty) || uncertainty <= 0) return 4;
  const shown = Number(uncertainty.toExponential(1));
  return Math.min(Math.max(1 - Math.floor(Math.log10(shown) + 1e-12), 0), 12);
}

function fixed(value, places) {
  if (!Number.isFinite(value)) return MISSING;
  const text = value.toFixed(places);
  return Number(text) === 0 ? text.replace("-", "") : text.replace("-", MINUS);
}

function significant(value, digits = 3) {
  if (!Number.isFinite(value)) return MISSING;
  if (value === 0) return "0";
  const size = Math.abs(Number(value.toExponential(digits - 1)));
  if (size >= 1e-4 && size < 1e6) return fixed(value, Math.max(digits - 1 - Math.floor(Math.log10(size) + 1e-12), 0));
  const [head, power] = value.toExponential(digits - 1).split("e");
  return `${head.replace("-", MINUS)}×10${[...String(Number(power))].map((c) => RAISED[c]).join("")}`;
}

const RAISED = Object.fromEntries([...("-0123456789")].map((c, i) => [c, [..."⁻⁰¹²³⁴⁵⁶⁷⁸⁹"][i]]));

function percent(share) {
  if (!(share > 0)) return "0 %";
  return share >= 0.0995 ? `${(100 * share).toFixed(0)} %` : share >= 0.0005 ? `${(100 * share).toFixed(1)} %` : "< 0.1 %";
}
