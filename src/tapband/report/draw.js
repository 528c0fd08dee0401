// Drawing with SVG: scales, axes, marks. Colours and strokes are classes of the style sheet.

const SVG = "http://www.w3.org/2000/svg";

function svg(name, attributes = {}, ...children) {
  const node = document.createElementNS(SVG, name);
  for (const [key, value] of Object.entries(attributes)) node.setAttribute(key, value);
  for (const child of children) node.append(child);
  return node;
}

function html(name, attributes = {}, ...children) {
  const node = document.createElement(name);
  for (const [key, value] of Object.entries(attributes)) {
    if (value === false || value === null || value === undefined) continue;
    node.setAttribute(key, value === true ? "" : value);
  }
  for (const child of children) node.append(child);
  return node;
}

// A picture with a name and a description for those who cannot see it.
let pictures = 0;
function picture(width, height, title, description) {
  const id = `picture${++pictures}`;
  return svg("svg", {
    viewBox: `0 0 ${width} ${height}`, width, height, role: "img", "aria-labelledby": `${id}t ${id}d`,
  }, svg("title", { id: `${id}t` }, title), svg("desc", { id: `${id}d` }, description));
}

function niceStep(span, count) {
  const raw = span / Math.max(count, 1), power = 10 ** Math.floor(Math.log10(raw)), rest = raw / power;
  return power * (rest <= 1 ? 1 : rest <= 2 ? 2 : rest <= 5 ? 5 : 10);
}

// Maps [low, high], a little widened, onto pixels; ticks at whole steps inside.
function scale(low, high, from, to, count, zero = false) {
  let a = low, b = high;
  if (!Number.isFinite(a) || !Number.isFinite(b)) [a, b] = [0, 1];
  if (zero) [a, b] = [0, b > 0 ? b : 1];
  if (a === b) [a, b] = [a - (Math.abs(a) || 1) * 0.5, b + (Math.abs(b) || 1) * 0.5];
  const widen = 0.045 * (b - a);
  b += widen;
  if (!zero) a -= widen;
  const map = (v) => from + (v - a) / (b - a) * (to - from);
  let step, first, last, wanted = count;
  do {  // at least two labels, or nobody can read the axis
    step = niceStep(b - a, wanted++);
    first = Math.ceil(a / step - 1e-9);
    last = Math.floor(b / step + 1e-9);
  } while (last === first && wanted < 20);
  const ticks = Array.from({ length: last - first + 1 }, (_, i) => (first + i) * step);
  const places = Math.max(0, -Math.floor(Math.log10(step) + 1e-9));
  return Object.assign(map, { ticks, label: (v) => fixed(v, places) });
}

// Frame, grid and tick labels of one panel; x labels only where wanted.
function axes(root, x, y, box, { xLabels = true, xName = "", yName = "" }) {
  const grid = svg("g", { class: "grid" }), text = svg("g", { class: "ticks" });
  for (const v of y.ticks) {
    grid.append(svg("line", { x1: box.left, x2: box.right, y1: y(v), y2: y(v) }));
    text.append(svg("text", { x: box.left - 6, y: y(v) + 4, "text-anchor": "end" }, y.label(v)));
  }
  for (const v of x.ticks) {
    grid.append(svg("line", { x1: x(v), x2: x(v), y1: box.top, y2: box.bottom, class: "faint" }));
    if (xLabels) text.append(svg("text", { x: x(v), y: box.bottom + 16, "text-anchor": "middle" }, x.label(v)));
  }
  grid.append(svg("path", { class: "frame", d: `M${box.left} ${box.top}V${box.bottom}H${box.right}` }));
  root.append(grid, text);
  if (yName) root.append(svg("text", { x: 2, y: box.top - 10, class: "axis" }, yName));
  if (xName) root.append(svg("text", { x: box.right, y: box.bottom + 32, class: "axis", "text-anchor": "end" }, xName));
}

const MARKS = {
  circle: (x, y, r) => `M${x - r} ${y}a${r} ${r} 0 1 0 ${2 * r} 0a${r} ${r} 0 1 0 ${-2 * r} 0`,
  square: (x, y, r) => `M${x - r} ${y - r}h${2 * r}v${2 * r}h${-2 * r}z`,
  triangle: (x, y, r) => `M${x} ${y - 1.2 * r}l${1.15 * r} ${2 * r}h${-2.3 * r}z`,
  diamond: (x, y, r) => `M${x} ${y - 1.35 * r}l${1.35 * r} ${1.35 * r}l${-1.35 * r} ${1.35 * r}l${-1.35 * r} ${-1.35 * r}z`,
};
const MARK_NAMES = Object.keys(MARKS);

const short = (v) => Math.round(v * 100) / 100;

function markPath(mark, xs, ys, r) {
  let d = "";
  for (let i = 0; i < xs.length; i++) if (Number.isFinite(ys[i])) d += MARKS[mark](short(xs[i]), short(ys[i]), r);
  return d;
}

function linePath(xs, ys) {
  let d = "", pen = "M";
  for (let i = 0; i < xs.length; i++) {
    if (Number.isFinite(ys[i])) { d += `${pen}${short(xs[i])} ${short(ys[i])}`; pen = "L"; } else pen = "M";
  }
  return d;
}

// Vertical bars with caps.
function barPath(xs, lows, highs, cap) {
  let d = "";
  for (let i = 0; i < xs.length; i++) {
    if (!Number.isFinite(lows[i]) || !Number.isFinite(highs[i])) continue;
    const x = short(xs[i]), a = short(lows[i]), b = short(highs[i]);
    d += `M${x} ${a}V${b}M${short(x - cap)} ${a}h${2 * cap}M${short(x - cap)} ${b}h${2 * cap}`;
  }
  return d;
}

function bandPath(xs, lows, highs) {
  const on = [...xs.keys()].filter((i) => Number.isFinite(lows[i]) && Number.isFinite(highs[i]));
  if (on.length < 2) return "";
  const there = on.map((i) => `${short(xs[i])} ${short(highs[i])}`);
  const back = on.reverse().map((i) => `${short(xs[i])} ${short(lows[i])}`);
  return `M${[...there, ...back].join("L")}Z`;
}

// Calls back with the index of the mark nearest to a click.
function onPick(root, xs, ys, call) {
  root.addEventListener("click", (event) => {
    const at = new DOMPoint(event.clientX, event.clientY).matrixTransform(root.getScreenCTM().inverse());
    let best = -1, near = 24 ** 2;
    for (let i = 0; i < xs.length; i++) {
      const d = (xs[i] - at.x) ** 2 + (ys[i] - at.y) ** 2;
      if (d < near) [best, near] = [i, d];
    }
    if (best >= 0) call(best);
  });
}
