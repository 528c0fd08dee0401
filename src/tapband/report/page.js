// The page: what is chosen, what is changed, and everything that follows from it.

const $ = (id) => document.getElementById(id);
const data = unpackAll(JSON.parse($("data").textContent));
const budget = new Budget(data);
const series = seriesOf(data), asides = asidesOf(data, series), normals = tapNormals(data);
const index = new Map(data.coefficients.map((c, j) => [c.name, j]));
const state = { point: 0, of: index.get("cl") ?? 0, set: 0 };
const SETS = [["cl", "cd_pressure", "cm"], ["cn", "ct"]]
  .flatMap((names) => ["", "_ref", "_stated"].map((end) => names.map((name) => name + end)))
  .map((names) => names.filter((name) => index.has(name)))
  .filter((names) => names.length);

function replace(node, ...children) { node.replaceChildren(...children); }

// Widths are measured once a layout, not once a figure: each measurement would make the browser lay out again.
const widths = new Map();
function wide(node) {
  if (!widths.has(node)) widths.set(node, Math.max(240, Math.floor(node.clientWidth)));
  return widths.get(node);
}
function said(interval) {
  const d = decimals(interval.half);
  if (!Number.isFinite(interval.half)) return MISSING;
  return interval.trials ? `${fixed(interval.low, d)} … ${fixed(interval.high, d)}` : `± ${fixed(interval.half, d)}`;
}

// --- headline ---------------------------------------------------------------------------------------------

function showTargets() {
  data.targets.forEach((target, i) => {
    const node = $(`target${i}`), j = index.get(target.coefficient);
    const halves = target.rows.map((p) => budget.interval(p, j).half);
    const missed = halves.filter((half) => !(half <= target.expanded * (1 + 1e-9))).length;
    node.dataset.met = missed ? "no" : "yes";
    node.querySelector(".verdict").textContent = !halves.length ? "no point in its range"
      : missed ? `missed at ${missed} of ${halves.length} points` : `met at all ${halves.length} points`;
    const worst = Math.max(...halves.map((half) => (Number.isFinite(half) ? half : Infinity)));
    node.querySelector(".widest").textContent = halves.length ? `widest ± ${significant(worst, 2)}` : "";
  });
}

function showPolars() {
  const room = $("polars"), names = SETS[state.set] ?? [];
  const columns = wide(room) >= 780 ? names.length : wide(room) >= 520 ? 2 : 1;
  const width = Math.floor((wide(room) - 18 * (columns - 1)) / columns);
  room.style.setProperty("--columns", columns);
  replace(room, ...names.map((name) => polarFigure(budget, series, asides, index.get(name), width, state.point, choosePoint)));
}

function showLegend() {
  const items = series.length > 1 || series[0].name ? series.map((one) => key(one.look, one.mark, one.name || "no run")) : [];
  const level = `${Number((100 * data.level).toPrecision(6))} %`;
  replace($("legend"), ...items, html("span", {}, `bars: ${level} coverage interval`),
    ...(data.targets.length ? [keyLine("target", "target")] : []),
    ...(data.coefficients.some((c) => c.unconfirmed.length) ? [keyRing("not confirmed by Monte Carlo")] : []));
}

function key(look, mark, name) {
  const icon = svg("svg", { viewBox: "0 0 26 12", width: 26, height: 12, "aria-hidden": "true", class: look },
    svg("path", { class: "line", d: "M1 6H25" }), svg("path", { class: "mark", d: MARKS[mark](13, 6, 3.2) }));
  return html("span", { class: "key" }, icon, html("bdi", {}, name));
}

function keyLine(look, name) {
  return html("span", { class: "key" }, svg("svg", { viewBox: "0 0 26 12", width: 26, height: 12, "aria-hidden": "true" }, svg("path", { class: look, d: "M1 6H25" })), name);
}

function keyRing(name) {
  return html("span", { class: "key" }, svg("svg", { viewBox: "0 0 16 16", width: 16, height: 16, "aria-hidden": "true" }, svg("path", { class: "doubt", d: MARKS.circle(8, 8, 6.5) })), name);
}

// --- drivers ----------------------------------------------------------------------------------------------

function showDrivers() {
  const means = budget.meanShares(state.of), order = [...means.keys()].sort((a, b) => means[b] - means[a]);
  const top = order.slice(0, 8).filter((s) => means[s] > 0), rest = order.slice(8).reduce((sum, s) => sum + means[s], 0);
  const rows = top.map((s) => shareRow(data.sources[s], means[s]));
  if (rest > 0) rows.push(shareRow({ name: `${order.length - 8} more together`, line: null }, rest));
  replace($("driver-rows"), ...rows);
  $("driver-of").textContent = data.coefficients[state.of].name;
  const room = $("shares"), shown = top.slice(0, 5);
  replace(room, sharesFigure(budget, series, state.of, shown, wide(room)));
  replace($("shares-legend"), ...shown.map((s, i) => key(`s${i % SERIES}`, MARK_NAMES[i % 4], data.sources[s].name)));
}

function shareRow(source, share) {
  return html("tr", {}, html("th", { scope: "row" }, sourceName(source)), html("td", { class: "bar" }, bar(share)), html("td", { class: "n" }, percent(share)));
}

function bar(share) {
  const fill = html("span", { class: "fill" });
  fill.style.width = `${Math.min(100, 100 * share).toFixed(1)}%`;
  return html("span", { class: "track", "aria-hidden": "true" }, fill);
}

function sourceName(source) {
  const name = html("bdi", {}, source.name);
  if (!source.line) return html("span", { class: "source" }, name);
  return html("span", { class: "source" }, name, " ", html("a", { href: `#line${source.line}`, class: "where" }, `line ${source.line}`));
}

// --- all points -------------------------------------------------------------------------------------------

const cells = [...document.querySelectorAll("table.points")].flatMap((table) => [...table.tBodies[0].rows].flatMap((row) =>
  table.dataset.c.split(",").map((name, k) => ({ node: row.cells[3 + k], p: Number(row.dataset.i), j: index.get(name) }))));

function showCells() {
  for (const { node, p, j } of cells) {
    const interval = budget.interval(p, j), text = said(interval);
    if (node.lastChild.textContent !== text) node.lastChild.textContent = text;
  }
}

// --- decisions --------------------------------------------------------------------------------------------

const declaredDecisions = [...($("rows-decisions")?.rows ?? [])].map((row) => [...row.cells].map((cell) => cell.textContent));

function showDecisions() {
  declaredDecisions.forEach((words, i) => {
    const asked = data.decisions[i], { cells } = $("rows-decisions").rows[i], n = words.length;
    if (!asked || asked.guard === null) return;
    const said = budget.changed ? decided(asked) : [words[n - 6], words[n - 3], words[n - 1]];
    [n - 6, n - 3, n - 1].forEach((at, k) => { cells[at].textContent = said[k]; });
  });
}

// Value and half-width, probability by the law of the linearised interval, and the answer with the guard band.
function decided({ point, coefficient, lower, upper, guard }) {
  const { estimate, half } = budget.interval(point, coefficient), at = point * budget.outputs + coefficient, u = budget.u[at];
  const low = lower ?? -Infinity, high = upper ?? Infinity, band = guard * half, d = decimals(half);
  const below = (end) => (u > 0 ? studentBelow((end - estimate) / u, budget.nu[at]) : end >= estimate ? 1 : 0);
  const answer = low + band <= estimate && estimate <= high - band ? "meets" : estimate < low - band || estimate > high + band ? "fails" : "undecided";
  return [`${fixed(estimate, d)} ± ${fixed(half, d)}`, `${fixed(100 * Math.max(below(high) - below(low), 0), 1)} %`, answer];
}

// --- one point --------------------------------------------------------------------------------------------

function showPoint() {
  const p = state.point, points = data.points;
  $("pick").value = String(p);
  replace($("condition"), ...[
    ["angle", `${fixed(points.alpha[p], 3)}°`], ["Mach number", significant(points.mach[p], 4)],
    ["dynamic pressure", Number.isFinite(points.q[p]) ? `${significant(points.q[p], 5)} Pa` : MISSING],
    ["Reynolds number", significant(points.reynolds[p], 4)], ["taps used", String(points.taps[p])],
  ].map(([name, value]) => html("div", {}, html("dt", {}, name), html("dd", {}, value))));
  replace($("stated"), ...points.stated[p].map((line) => html("li", {}, line)));
  showIntervals(p);
  showMore(p);
  showCp(p);
  showBudget(p);
  showRanks(p);
  showCorrelation(p);
  if ($("taps-table").closest("details").open) showTaps(p);
}

function showIntervals(p) {
  replace($("interval-rows"), ...data.coefficients.map((c, j) => {
    const now = budget.interval(p, j), at = p * budget.outputs + j, d = decimals(now.half);
    const u = budget.changed ? budget.u[at] : c.u[p], nu = budget.changed ? budget.nu[at] : c.dof[p];
    const k = budget.changed ? budget.k(nu) : c.k[p], linear = budget.changed ? now : { low: c.low[p], high: c.high[p] };
    const number = (value, places = d) => html("td", { class: "n" }, html("data", { value: String(value) }, fixed(value, places)));
    const pair = (low, high) => html("td", { class: "n" }, html("data", { value: String(low) }, fixed(low, d)), " … ", html("data", { value: String(high) }, fixed(high, d)));
    const doubted = budget.unconfirmed[j].has(p), verdict = !Number.isFinite(c.est[p]) ? MISSING : doubted ? "no" : "yes";
    return html("tr", { "data-c": c.name, "data-headline": doubted && !budget.changed ? "trials" : "linear" },
      html("th", { scope: "row" }, c.name), number(c.est[p]), number(u, decimals(u)),
      html("td", { class: "n" }, Number.isFinite(c.est[p]) ? freedom(nu) : MISSING),
      html("td", { class: "n" }, fixed(k, 3)), number(0.5 * (linear.high - linear.low)), pair(linear.low, linear.high), pair(c.mcLow[p], c.mcHigh[p]),
      html("td", { class: doubted ? "bad" : "" }, verdict), html("td", { class: "sketch" }, intervalSketch(c, p, linear)));
  }));
}

// Degrees of freedom; past a thousand the factor is that of infinitely many.
function freedom(nu) { return !Number.isFinite(nu) ? "∞" : nu > 1000 ? "> 1000" : nu.toFixed(nu < 100 ? 1 : 0); }

// What else is known of each interval: its parts, the trials' own mean and width, the shortest interval.
function showMore(p) {
  replace($("more-rows"), ...data.coefficients.map((c) => {
    const d = decimals(c.U[p]), number = (value, places) => html("td", { class: "n" }, fixed(value, places));
    return html("tr", {}, html("th", { scope: "row" }, c.name), number(c.b[p], decimals(c.b[p])), number(c.s[p], decimals(c.s[p])),
      number(c.mc[p], d), number(c.mcU[p], decimals(c.mcU[p])), html("td", { class: "n" }, `${fixed(c.shortLow[p], d)} … ${fixed(c.shortHigh[p], d)}`));
  }));
}

function showCp(p) {
  const chord = $("cp-chord"), section = $("cp-section");
  replace(chord, chordFigure(budget, p, wide(chord)));
  replace(section, sectionFigure(budget, normals, p, wide(section)));
}

function showBudget(p) {
  const j = state.of, n = budget.sources, order = [...Array(n).keys()].sort((a, b) => budget.contribution(p, j, b) - budget.contribution(p, j, a));
  replace($("budget-of"), data.coefficients[j].name);
  replace($("budget-rows"), ...order.map((s) => {
    const source = data.sources[s], f = budget.factor[s], size = f * data.size[p * n + s], part = budget.contribution(p, j, s), nu = data.dof[p * n + s];
    return html("tr", { class: f === 1 ? "" : "changed" }, html("th", { scope: "row" }, sourceName(source)), html("td", {}, html("bdi", {}, source.group === source.name ? "" : source.group)),
      html("td", { class: "n" }, Number.isFinite(size) ? `${significant(size)} ${source.unit === "1" ? "" : source.unit}`.trim() : "varies"),
      html("td", { class: "n" }, source.single && size > 0 ? significant(part / size) : MISSING),
      html("td", { class: "n" }, html("data", { value: String(part) }, significant(part))),
      html("td", { class: "bar" }, bar(budget.share(p, j, s))), html("td", { class: "n" }, percent(budget.share(p, j, s))),
      html("td", { class: "n" }, freedom(nu)));
  }));
}

function showCorrelation(p) {
  const table = $("correlation");
  if (!table || !data.correlation) return;
  const { names } = data.correlation, m = names.length;
  const rows = names.map((a, i) => html("tr", {}, html("th", { scope: "row" }, a), ...names.map((_, k) => {
    const r = data.correlation.r[(p * m + i) * m + k], cell = html("td", { class: "n" }, Number.isFinite(r) ? fixed(r, 3) : MISSING);
    cell.style.setProperty("--r", Math.abs(r) || 0);
    return cell;
  })));
  replace(table, html("thead", {}, html("tr", {}, html("td", {}), ...names.map((name) => html("th", { scope: "col" }, name)))), html("tbody", {}, ...rows));
}

function showTaps(p) {
  const { taps } = data, n = taps.name.length;
  replace($("taps-table").tBodies[0], ...taps.name.map((name, t) => {
    const half = budget.tapHalf(p, t), d = decimals(half);
    return html("tr", {}, html("th", { scope: "row" }, html("bdi", {}, name)), html("td", {}, taps.upper[t] ? "upper" : "lower"),
      html("td", { class: "n" }, fixed(taps.x[t], 4)), html("td", { class: "n" }, fixed(taps.y[t], 4)),
      html("td", { class: "n" }, fixed(taps.cp[p * n + t], d)), html("td", { class: "n" }, Number.isFinite(half) ? `± ${fixed(half, d)}` : MISSING),
      html("td", {}, taps.flags[`${p},${t}`] ?? ""));
  }));
}

// --- choosing ---------------------------------------------------------------------------------------------

function choosePoint(p) { state.point = p; showPolars(); showPoint(); remember(); }
function chooseCoefficient(j) {
  state.of = j;
  for (const node of document.querySelectorAll("select.of")) node.value = String(j);
  showDrivers(); showBudget(state.point); showRanks(state.point); showSliderShares(); remember();
}
function chooseSet(i) {
  state.set = i;
  for (const node of $("sets").children) node.setAttribute("aria-pressed", String(Number(node.value) === i));
  showPolars(); remember();
}

function showAll() {
  document.documentElement.dataset.changed = budget.changed ? "yes" : "no";
  showTargets(); showPolars(); showDrivers(); showCells(); showDecisions(); showPoint(); showSliders();
}
