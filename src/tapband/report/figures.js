// The figures of the page, each drawn anew from the budget whenever something changes.

const SERIES = 6;

// Points of one run and configuration, in order of angle: one line each.
function seriesOf(data) {
  const groups = new Map();
  data.points.key.forEach((_, p) => {
    const name = [data.points.run[p], data.points.config[p]].filter(Boolean).join(", ");
    if (!groups.has(name)) groups.set(name, []);
    groups.get(name).push(p);
  });
  const alpha = data.points.alpha;
  return [...groups].map(([name, rows], i) => ({
    name, rows: rows.sort((a, b) => alpha[a] - alpha[b]), mark: MARK_NAMES[i % MARK_NAMES.length], look: `s${i % SERIES}`,
  }));
}

function range(values) {
  let low = Infinity, high = -Infinity;
  for (const v of values) if (Number.isFinite(v)) { low = Math.min(low, v); high = Math.max(high, v); }
  return [low, high];
}

// Sideways shift [px] of each point, so that points at one angle show side by side.
function asidesOf(data, series) {
  const places = new Map(), asides = new Float64Array(data.points.key.length);
  for (const one of series) for (const p of one.rows) {
    const angle = Math.round(20 * data.points.alpha[p]);
    if (!places.has(angle)) places.set(angle, []);
    places.get(angle).push(p);
  }
  for (const rows of places.values()) {
    const step = Math.min(5, 16 / rows.length);
    rows.forEach((p, i) => { asides[p] = step * (i - 0.5 * (rows.length - 1)); });
  }
  return asides;
}

// A coefficient against angle with its bars, and below it how long the bars are.
function polarFigure(budget, series, asides, j, width, chosen, pick) {
  const { data } = budget, coefficient = data.coefficients[j], alpha = data.points.alpha;
  const height = 334, box = { left: 58, right: width - 10, top: 30, bottom: 192 };
  const below = { left: 58, right: width - 10, top: 226, bottom: 296 };
  const all = data.points.key.map((_, p) => budget.interval(p, j));
  const targets = data.targets.filter((t) => t.coefficient === coefficient.name);
  const level = `${Number((100 * data.level).toPrecision(6))} %`;
  const [a0, a1] = range(alpha);
  const x = scale(a0, a1, box.left, box.right, width > 420 ? 8 : 5);
  const y = scale(...range(all.flatMap((v) => [v.low, v.high, v.estimate])), box.bottom, box.top, 5);
  const widest = range([...all.map((v) => v.half), ...targets.map((t) => t.expanded)])[1];
  const y2 = scale(0, 1.1 * widest, below.bottom, below.top, 3, true);
  const root = picture(width, height, `${coefficient.name} against angle`,
    `${all.length} points with ${level} coverage intervals; below, half the width of each interval. The table of all points holds the numbers.`);
  root.classList.add("pickable");
  axes(root, x, y, box, { xLabels: false, yName: coefficient.name });
  axes(root, x, y2, below, { xName: "angle of attack [deg]", yName: `half-width of the ${level} interval` });
  for (const target of targets) {
    const at = target.rows.map((p) => alpha[p]), [t0, t1] = range(at);
    if (at.length) root.append(svg("path", { class: "target", d: `M${x(t0) - 4} ${y2(target.expanded)}H${x(t1) + 4}` }));
  }
  for (const one of series) {
    const xs = one.rows.map((p) => x(alpha[p]) + asides[p]), v = one.rows.map((p) => all[p]);
    const mid = v.map((i) => y(i.estimate)), half = v.map((i) => y2(i.half));
    const g = svg("g", { class: one.look });
    g.append(svg("path", { class: "bars", d: barPath(xs, v.map((i) => y(i.low)), v.map((i) => y(i.high)), 3) }));
    g.append(svg("path", { class: "line", d: linePath(xs, mid) + linePath(xs, half) }));
    g.append(svg("path", { class: "mark", d: markPath(one.mark, xs, mid, 3) + markPath(one.mark, xs, half, 2.6) }));
    root.append(g);
  }
  const odd = [...budget.unconfirmed[j]];
  root.append(svg("path", { class: "doubt", d: odd.map((p) => MARKS.circle(short(x(alpha[p]) + asides[p]), short(y2(all[p].half)), 6.5)).join("") }));
  root.append(svg("path", { class: "chosen", d: `M${short(x(alpha[chosen]))} ${box.top}V${below.bottom}` }));
  onPick(root, [...alpha].map((v, p) => x(v) + asides[p]), all.map((v) => y(v.estimate)), pick);
  return root;
}

// Share of the largest sources against angle, one line a source; points of the longest run and configuration.
function sharesFigure(budget, series, j, order, width) {
  const { data } = budget, alpha = data.points.alpha;
  const longest = series.reduce((a, b) => (b.rows.length > a.rows.length ? b : a)), few = longest.rows.length < 3;
  const rows = few ? series.flatMap((one) => one.rows).sort((a, b) => alpha[a] - alpha[b]) : longest.rows;
  const from = few || series.length === 1 ? "all points" : longest.name;
  const box = { left: 46, right: width - 10, top: 30, bottom: 210 };
  const [a0, a1] = range(rows.map((p) => alpha[p]));
  const x = scale(a0, a1, box.left, box.right, width > 420 ? 8 : 5), y = scale(0, 100, box.bottom, box.top, 4, true);
  const root = picture(width, 250, `Shares in the variance of ${data.coefficients[j].name} against angle`,
    `The ${order.length} largest sources, ${from}.`);
  axes(root, x, y, box, { xName: "angle of attack [deg]", yName: `share of the variance [%], ${from}` });
  order.forEach((s, i) => {
    const xs = rows.map((p) => x(alpha[p])), ys = rows.map((p) => y(100 * budget.share(p, j, s)));
    const g = svg("g", { class: `s${i % SERIES}` });
    if (!few) g.append(svg("path", { class: "line", d: linePath(xs, ys) }));
    g.append(svg("path", { class: "mark", d: markPath(MARK_NAMES[i % 4], xs, ys, 3) }));
    root.append(g);
  });
  return root;
}

// Cp along the chord with its band, suction upwards, and below it how wide the band is.
function chordFigure(budget, p, width) {
  const { data } = budget, taps = data.taps, n = taps.name.length;
  const box = { left: 50, right: width - 10, top: 30, bottom: 250 }, below = { left: 50, right: width - 10, top: 284, bottom: 344 };
  const cp = (t) => taps.cp[p * n + t], half = [...Array(n).keys()].map((t) => budget.tapHalf(p, t));
  const x = scale(0, 1, box.left, box.right, 5);
  const ends = [...Array(n).keys()].flatMap((t) => [cp(t) - half[t], cp(t) + half[t]]);
  const [low, high] = range(ends), y = scale(low, high, box.top, box.bottom, 6), y2 = scale(0, range(half)[1], below.bottom, below.top, 2, true);
  const root = picture(width, 384, `Cp along the chord at ${data.points.key[p]}`,
    "Upper surface circles, lower surface squares, each with the band of its coverage interval; below, half the width of the band. The table of taps holds the numbers.");
  axes(root, x, y, box, { xLabels: false, yName: "Cp, suction upwards" });
  axes(root, x, y2, below, { xName: "x/c", yName: "half-width of the band" });
  for (const [up, look, mark] of [[1, "s0", "circle"], [0, "s1", "square"]]) {
    const on = [...Array(n).keys()].filter((t) => taps.upper[t] === up && Number.isFinite(cp(t))).sort((a, b) => taps.x[a] - taps.x[b]);
    const xs = on.map((t) => x(taps.x[t])), ys = on.map((t) => y(cp(t))), hs = on.map((t) => y2(half[t]));
    const g = svg("g", { class: look });
    g.append(svg("path", { class: "band", d: bandPath(xs, on.map((t) => y(cp(t) - half[t])), on.map((t) => y(cp(t) + half[t]))) }));
    g.append(svg("path", { class: "bars", d: barPath(xs, on.map((t) => y(cp(t) - half[t])), on.map((t) => y(cp(t) + half[t])), 2) }));
    g.append(svg("path", { class: "line", d: linePath(xs, ys) + linePath(xs, hs) }));
    g.append(svg("path", { class: "mark", d: markPath(mark, xs, ys, 2.6) + markPath(mark, xs, hs, 2) }));
    root.append(g);
  }
  const flagged = [...Array(n).keys()].filter((t) => taps.flags[`${p},${t}`] && Number.isFinite(cp(t)));
  root.append(svg("path", { class: "doubt", d: flagged.map((t) => MARKS.circle(short(x(taps.x[t])), short(y(cp(t))), 6.5)).join("") }));
  return root;
}

// Outward unit normals of the outline at each tap.
function tapNormals(data) {
  const { outline, taps } = data, m = outline.x.length;
  let area = 0;
  for (let i = 0; i < m; i++) {
    const k = (i + 1) % m;
    area += outline.x[i] * outline.y[k] - outline.x[k] * outline.y[i];
  }
  const turn = area > 0 ? 1 : -1;
  return taps.name.map((_, t) => {
    let best = 0, near = Infinity;
    for (let i = 0; i < m; i++) {
      const d = (outline.x[i] - taps.x[t]) ** 2 + (outline.y[i] - taps.y[t]) ** 2;
      if (d < near) [best, near] = [i, d];
    }
    const a = Math.max(best - 1, 0), b = Math.min(best + 1, m - 1);
    const dx = outline.x[b] - outline.x[a], dy = outline.y[b] - outline.y[a], length = Math.hypot(dx, dy) || 1;
    return [turn * dy / length, -turn * dx / length];
  });
}

// Cp on the outline: a stroke at each tap as long as |Cp|, dotted for pressure; the heavy end is the interval.
function sectionFigure(budget, normals, p, width) {
  const { data } = budget, { taps, outline } = data, n = taps.name.length;
  const cps = [...Array(n).keys()].map((t) => taps.cp[p * n + t]);
  const longest = Math.max(1, ...cps.filter(Number.isFinite).map(Math.abs)), unit = 0.3 / longest;
  const tip = (t, length) => [taps.x[t] + unit * length * normals[t][0], taps.y[t] + unit * length * normals[t][1]];
  const tips = cps.map((cp, t) => (Number.isFinite(cp) ? tip(t, Math.abs(cp)) : [NaN, NaN]));
  const [x0, x1] = range([...outline.x, ...tips.map((v) => v[0])]), [y0, y1] = range([...outline.y, ...tips.map((v) => v[1])]);
  const size = (width - 20) / (x1 - x0), height = Math.ceil(size * (y1 - y0)) + 46;
  const X = (v) => short(10 + (v - x0) * size), Y = (v) => short(12 + (y1 - v) * size);
  const root = picture(width, height, `Cp on the section at ${data.points.key[p]}`,
    "A stroke at each tap as long as the size of Cp, solid for suction and dotted for pressure; its heavy end is the coverage interval.");
  root.append(svg("path", { class: "outline", d: linePath([...outline.x].map(X), [...outline.y].map(Y)) }));
  const strokes = ["", "", "", ""], ends = ["", ""];
  cps.forEach((cp, t) => {
    if (!Number.isFinite(cp)) return;
    const half = Math.max(budget.tapHalf(p, t), 0), long = Math.abs(cp);
    const [a, b] = [tip(t, long - half), tip(t, long + half)], side = taps.upper[t] ? 0 : 1;
    strokes[side + (cp > 0 ? 2 : 0)] += `M${X(taps.x[t])} ${Y(taps.y[t])}L${X(tips[t][0])} ${Y(tips[t][1])}`;
    ends[side] += `M${X(a[0])} ${Y(a[1])}L${X(b[0])} ${Y(b[1])}`;
  });
  for (const side of [0, 1]) {
    root.append(svg("g", { class: `s${side}` }, svg("path", { class: "stroke", d: strokes[side] }),
      svg("path", { class: "stroke dotted", d: strokes[side + 2] }), svg("path", { class: "heavy", d: ends[side] })));
  }
  const bar = size * unit;
  root.append(svg("path", { class: "rule", d: `M10 ${height - 14}h${short(bar)}m0 -4v8M10 ${height - 18}v8` }));
  root.append(svg("text", { class: "axis", x: 16 + bar, y: height - 10 }, "|Cp| = 1; solid suction, dotted pressure"));
  return root;
}

// Both intervals of one coefficient on a common scale: linearised above, Monte Carlo below.
function intervalSketch(c, p, linear) {
  const spans = [[linear.low, linear.high], [c.mcLow[p], c.mcHigh[p]]];
  const [low, high] = range(spans.flat()), span = high - low || 1, X = (v) => short(4 + (v - low) / span * 68);
  const root = svg("svg", { viewBox: "0 0 76 24", width: 76, height: 24, "aria-hidden": "true" });
  spans.forEach(([a, b], i) => {
    if (Number.isFinite(a)) root.append(svg("path", { class: `s${i} bars`, d: `M${X(a)} ${7 + 10 * i}H${X(b)}m0 -3v6M${X(a)} ${4 + 10 * i}v6` }));
  });
  if (Number.isFinite(c.est[p])) root.append(svg("path", { class: "chosen", d: `M${X(c.est[p])} 1V23` }));
  return root;
}
