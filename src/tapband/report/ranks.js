// Rankings of one point: groups of sources by three answers, and taps on the section.

const STEP = 1e-4, NONE = -32768;
function share4(array, at) { return array[at] === NONE ? NaN : array[at] * STEP; }

function showRanks(p) {
  const name = data.coefficients[state.of].name, base = name.replace(/_(ref|stated)$/, "");
  for (const node of document.querySelectorAll(".group-of")) node.textContent = `in ${base}`;
  if (data.groups) showGroups(p, data.groups.coefficients.indexOf(base), index.get(base));
  if (data.wirings) showWirings(p, data.wirings.coefficients.indexOf(base), index.get(base));
  if (data.tapShares) showTapShares(p, data.tapShares.coefficients.indexOf(base));
}

// Half-width with a whole group scaled on top of the sliders.
function groupHalf(p, j, group, factor) {
  let second = 0, fourth = 0;
  data.sources.forEach((source, s) => {
    const part = budget.contribution(p, j, s) * (source.group === group ? factor : 1), square = part * part;
    second += square;
    fourth += square * square / data.dof[p * budget.sources + s];
  });
  return budget.k(fourth > 0 ? second * second / fourth : Infinity) * Math.sqrt(second);
}

function showGroups(p, r, j) {
  const g = data.groups, n = g.groups.length;
  if (r < 0) return replace($("group-rows"));
  const linear = g.groups.map((group) => data.sources.reduce((sum, source, s) => sum + (source.group === group ? budget.share(p, j, s) : 0), 0));
  const order = [...Array(n).keys()].sort((a, b) => linear[b] - linear[a]);
  return replace($("group-rows"), ...order.map((i) => {
    const at = (p * g.coefficients.length + r) * n + i, said = g.differ[`${p},${r},${i}`], note = said === undefined ? undefined : g.words[said];
    const pair = (value, ci) => html("td", { class: "n" }, Number.isFinite(value) ? `${(100 * value).toFixed(1)} ` : MISSING,
      html("span", {}, Number.isFinite(value) ? `± ${(100 * ci).toFixed(2)} %` : ""));
    return html("tr", {}, html("th", { scope: "row" }, html("bdi", {}, g.groups[i])), html("td", { class: "n" }, percent(linear[i])),
      pair(share4(g.first, at), share4(g.firstCi, at)), pair(share4(g.total, at), share4(g.totalCi, at)),
      html("td", { class: "n" }, `± ${significant(groupHalf(p, j, g.groups[i], 0.5), 2)}`), html("td", { class: "n" }, `± ${significant(groupHalf(p, j, g.groups[i], 0), 2)}`),
      html("td", { class: note === undefined ? "" : "bad" }, note === undefined ? "no" : html("bdi", {}, note || "yes")));
  }));
}

function showTapShares(p, r) {
  const t = data.tapShares, { taps } = data, n = taps.name.length, at = (p * t.coefficients.length + r) * n;
  const shares = taps.name.map((_, i) => (r < 0 ? NaN : share4(t.share, at + i)));
  const lost = (i) => (t.lost[at + i] === NONE ? NaN : t.lost[at + i] * t.lostStep[p * t.coefficients.length + r]);
  const known = [...Array(n).keys()].filter((i) => Number.isFinite(shares[i])).sort((a, b) => Math.abs(shares[b]) - Math.abs(shares[a]));
  $("tap-words").textContent = known.length ? tapWords(shares, known, t.elsewhere[p * t.coefficients.length + r]) : "No value at this point.";
  replace($("tap-section"), tapSection(shares, known, wide($("tap-section"))));
  replace($("tap-chord"), tapChord(shares, known, wide($("tap-chord"))));
  replace($("tap-rows"), ...known.map((i) => html("tr", {}, html("th", { scope: "row" }, html("bdi", {}, taps.name[i])), html("td", {}, taps.upper[i] ? "upper" : "lower"),
    html("td", { class: "n" }, fixed(taps.x[i], 3)), html("td", { class: "n" }, `${fixed(100 * shares[i], 1)} %`), html("td", { class: "n" }, significant(lost(i), 2)))));
}

// The taps that together carry nine tenths of what enters at taps.
function tapWords(shares, known, elsewhere) {
  const whole = known.reduce((sum, i) => sum + Math.abs(shares[i]), 0), first = [];
  let sum = 0;
  for (const i of known) {
    if (sum >= 0.9 * whole || whole === 0) break;
    sum += Math.abs(shares[i]);
    first.push(data.taps.name[i]);
  }
  const named = first.length > 12 ? `${first.slice(0, 12).join(", ")} and ${first.length - 12} more` : first.join(", ");
  const negative = known.some((i) => shares[i] < -5e-4) ? " A share is negative where an error that taps share cancels." : "";
  return `${percent(1 - elsewhere)} of the variance enters at taps, ${percent(Math.max(elsewhere, 0))} elsewhere. `
    + (first.length ? `Nine tenths of what enters at taps: ${named}.` : "") + negative;
}

function tapSection(shares, known, width) {
  const { outline, taps } = data, [x0, x1] = range(outline.x), [y0, y1] = range(outline.y);
  const size = (width - 56) / (x1 - x0), height = Math.ceil(size * (y1 - y0)) + 64;
  const X = (v) => short(28 + (v - x0) * size), Y = (v) => short(30 + (y1 - v) * size);
  const most = Math.max(...known.map((i) => Math.abs(shares[i])), 1e-9), root = picture(width, height, "Share of each tap on the section",
    "A circle at each tap, its area the share of the variance; filled where positive, open where negative. The table beside it holds the numbers.");
  root.append(svg("path", { class: "outline", d: linePath([...outline.x].map(X), [...outline.y].map(Y)) }));
  for (const [look, sign] of [["s0", 1], ["s1", -1]]) {
    const on = known.filter((i) => sign * shares[i] > 0);
    root.append(svg("g", { class: `${look} bubbles` }, svg("path", { d: on.map((i) => MARKS.circle(X(taps.x[i]), Y(taps.y[i]), short(Math.max(0.6, 13 * Math.sqrt(Math.abs(shares[i]) / most))))).join("") })));
  }
  root.append(svg("text", { class: "axis", x: 2, y: height - 4 }, `largest circle: ${fixed(100 * (known.length ? shares[known[0]] : NaN), 1)} %; open: negative`));
  return root;
}

function tapChord(shares, known, width) {
  const { taps } = data, box = { left: 50, right: width - 10, top: 30, bottom: 150 };
  const x = scale(0, 1, box.left, box.right, 5), y = scale(Math.min(0, ...known.map((i) => 100 * shares[i])), Math.max(0.1, ...known.map((i) => 100 * shares[i])), box.bottom, box.top, 4);
  const root = picture(width, 190, "Share of each tap along the chord", "A stem at each tap, circles on the upper surface, squares on the lower. The table beside it holds the numbers.");
  axes(root, x, y, box, { xName: "x/c", yName: "share of the variance [%]" });
  for (const [up, look, mark] of [[1, "s0", "circle"], [0, "s1", "square"]]) {
    const on = known.filter((i) => taps.upper[i] === up), xs = on.map((i) => x(taps.x[i])), ys = on.map((i) => y(100 * shares[i]));
    root.append(svg("g", { class: look }, svg("path", { class: "stroke", d: on.map((_, k) => `M${short(xs[k])} ${short(y(0))}V${short(ys[k])}`).join("") }), svg("path", { class: "mark", d: markPath(mark, xs, ys, 2.6) })));
  }
  return root;
}

// The half-width if a source that acts on taps were shared otherwise, all others as they are now.
const WAYS = ["independent", "common", "by module", "interleaved"];

function showWirings(p, r, j) {
  const w = data.wirings, n = w.sources.length, u = budget.u[p * budget.outputs + j], room = $("wiring"), found = [];
  w.sources.forEach((name, i) => {
    const s = data.sources.findIndex((source) => source.name === name), at = r < 0 ? -1 : (p * w.coefficients.length + r) * n + i;
    if (s < 0 || at < 0 || !Number.isFinite(w.parts[at * WAYS.length])) return;
    const now = budget.contribution(p, j, s), k = budget.k(budget.nu[p * budget.outputs + j]);
    const half = WAYS.map((_, m) => k * Math.sqrt(Math.max(u * u - now * now, 0) + (budget.factor[s] * w.parts[at * WAYS.length + m]) ** 2));
    found.push({ name, half, declared: w.declared[i] });
  });
  replace(room, wiringFigure(found, budget.U[p * budget.outputs + j], wide(room)));
  replace($("wiring-rows"), ...found.map((row) => html("tr", {}, html("th", { scope: "row" }, html("bdi", {}, row.name)), html("td", {}, html("bdi", {}, row.declared)),
    ...row.half.map((half) => html("td", { class: "n" }, `± ${significant(half, 3)}`)))));
}

function wiringFigure(found, now, width) {
  const box = { left: Math.min(190, Math.round(0.42 * width)), right: width - 12, top: 30, bottom: 30 + 26 * found.length };
  const x = scale(...range([now, ...found.flatMap((row) => row.half)]), box.left, box.right, 4);
  const root = picture(width, box.bottom + 38, "Half-width of the interval by the sharing of one source", "A row a source; its four marks say what the interval would be if the source were independent, common, by module as wired, or interleaved. The table below holds the numbers.");
  const grid = svg("g", { class: "grid" }), text = svg("g", { class: "ticks" });
  for (const v of x.ticks) {
    grid.append(svg("line", { x1: x(v), x2: x(v), y1: box.top, y2: box.bottom, class: "faint" }));
    text.append(svg("text", { x: x(v), y: box.bottom + 16, "text-anchor": "middle" }, x.label(v)));
  }
  root.append(grid, text, svg("path", { class: "chosen", d: `M${short(x(now))} ${box.top - 6}V${box.bottom}` }));
  found.forEach((row, i) => {
    const y = box.top + 13 + 26 * i, label = row.name.length * 6.4 > box.left - 10 ? `${row.name.slice(0, Math.floor((box.left - 16) / 6.4))}…` : row.name;
    root.append(svg("text", { x: box.left - 8, y: y + 4, "text-anchor": "end", class: "axis" }, label));
    root.append(svg("path", { class: "rule thin", d: `M${short(x(Math.min(...row.half)))} ${y}H${short(x(Math.max(...row.half)))}` }));
    row.half.forEach((half, m) => root.append(svg("g", { class: `s${m}` }, svg("path", { class: "mark", d: MARKS[MARK_NAMES[m]](short(x(half)), y, 4) }))));
  });
  root.append(svg("text", { x: box.right, y: box.bottom + 32, class: "axis", "text-anchor": "end" }, "half-width of the interval; dotted: as it is"));
  return root;
}
