// The live budget: a slider a source, the state in the address, and the changed sources as text.

const rows = [];
let waiting = 0;

function buildSliders() {
  const means = budget.meanShares(state.of), order = [...means.keys()].sort((a, b) => means[b] - means[a]);
  replace($("sliders"), ...order.map((s) => {
    const source = data.sources[s], id = `slider${s}`;
    const on = html("input", { type: "checkbox", checked: true, id: `on${s}`, "aria-label": `${source.name}: on` });
    const input = html("input", { type: "range", id, min: 0, max: 4, step: 0.05, value: 1, "aria-describedby": "live-note" });
    const out = html("output", { for: id }), share = html("span", { class: "share" });
    input.addEventListener("input", () => scaleSource(s, Number(input.value)));
    on.addEventListener("change", () => scaleSource(s, on.checked ? 1 : 0));
    rows[s] = { input, out, on, share };
    return html("li", {}, on, html("label", { for: id }, html("bdi", {}, source.name)), share, input, out);
  }));
}

function scaleSource(s, factor) {
  budget.factor[s] = factor;
  if (!waiting) waiting = requestAnimationFrame(() => { waiting = 0; budget.recompute(); showAll(); remember(); });
}

function showSliders() {
  rows.forEach(({ input, out, on }, s) => {
    const f = budget.factor[s];
    if (Number(input.value) !== f) input.value = String(f);
    on.checked = f > 0;
    out.textContent = f === 0 ? "off" : `×${Number(f.toFixed(2))}`;
    input.setAttribute("aria-valuetext", f === 0 ? "off" : `${Number(f.toFixed(2))} times the declared size`);
    out.parentElement.classList.toggle("changed", f !== 1);
  });
  for (const id of ["live-count", "sheet-count"]) $(id).textContent = String(budget.factor.filter((f) => f !== 1).length);
  $("reset").disabled = !budget.changed;
  if (!$("text-box").hidden) $("text").value = budget.text();
  sayChange();
  showSliderShares();
}

// For those who hear the page: what the last change did.
function sayChange() {
  if (!budget.changed) { $("said").textContent = ""; return; }
  const { name } = data.coefficients[state.of], { half } = budget.interval(state.point, state.of);
  const missed = document.querySelectorAll('.targets [data-met="no"]').length;
  const targets = data.targets.length ? `; ${missed} of ${data.targets.length} targets missed` : "";
  $("said").textContent = `${name} ± ${significant(half, 2)} at ${data.points.key[state.point]}${targets}`;
}

function showSliderShares() {
  const means = budget.meanShares(state.of);
  rows.forEach(({ share }, s) => { share.style.setProperty("--share", means[s].toFixed(4)); share.title = percent(means[s]); });
}

function reset() { budget.factor.fill(1); budget.recompute(); showAll(); remember(); }

async function writeText() {
  $("text-box").hidden = false;
  $("text").value = budget.text();
  $("text").focus();
  $("text").select();
  try { await navigator.clipboard.writeText($("text").value); $("copied").textContent = "copied"; }
  catch { $("copied").textContent = "marked; copy with Ctrl+C"; }
}

// --- the address ------------------------------------------------------------------------------------------

function remember() {
  const words = new URLSearchParams();
  if (state.point) words.set("point", data.points.key[state.point]);
  words.set("of", data.coefficients[state.of].name);
  if (state.set) words.set("set", String(state.set));
  data.sources.forEach((source, s) => { if (budget.factor[s] !== 1) words.append("x", `${Number(budget.factor[s].toFixed(6))} ${source.name}`); });
  history.replaceState(null, "", `#${words}`);
}

function recall() {
  if (!location.hash.includes("=")) return;
  const words = new URLSearchParams(location.hash.slice(1));
  const p = data.points.key.indexOf(words.get("point") ?? data.points.key[0]);
  state.point = Math.max(p, 0);
  state.of = index.get(words.get("of")) ?? state.of;
  state.set = Math.min(Math.max(Number(words.get("set")) || 0, 0), Math.max(SETS.length - 1, 0));
  const names = data.sources.map((source) => source.name);
  budget.factor.fill(1);
  for (const word of words.getAll("x")) {
    const cut = word.indexOf(" "), s = names.indexOf(word.slice(cut + 1)), f = Number(word.slice(0, cut));
    if (s >= 0 && f >= 0 && f <= 4) budget.factor[s] = f;
  }
  budget.recompute();
}

// --- start ------------------------------------------------------------------------------------------------

function options(node, names, chosen, call) {
  replace(node, ...names.map((name, i) => html("option", { value: i }, name)));
  node.value = String(chosen);
  node.addEventListener("change", () => call(Number(node.value)));
}

function start() {
  document.documentElement.classList.add("live");
  recall();
  options($("pick"), data.points.key, state.point, choosePoint);
  $("before").addEventListener("click", () => choosePoint((state.point + budget.points - 1) % budget.points));
  $("after").addEventListener("click", () => choosePoint((state.point + 1) % budget.points));
  const names = data.coefficients.map((c) => c.name);
  for (const node of document.querySelectorAll("select.of")) options(node, names, state.of, chooseCoefficient);
  replace($("sets"), ...SETS.map((set, i) => {
    const button = html("button", { type: "button", value: i, "aria-pressed": String(i === state.set) }, set.join(", "));
    button.addEventListener("click", () => chooseSet(i));
    return button;
  }));
  $("sets").hidden = SETS.length < 2;
  buildSliders();
  showLegend();
  $("sheet").addEventListener("click", () => {
    const open = $("live").classList.toggle("open");
    $("sheet").setAttribute("aria-expanded", String(open));
  });
  $("reset").addEventListener("click", reset);
  $("write").addEventListener("click", writeText);
  $("taps-table").closest("details").addEventListener("toggle", () => showTaps(state.point));
  // In-page links scroll without touching the address, which holds the state.
  document.addEventListener("click", (event) => {
    const link = event.target.closest?.('a[href^="#"]'), goal = link && $(link.hash.slice(1));
    if (!goal) return;
    event.preventDefault();
    goal.closest("details")?.setAttribute("open", "");
    goal.scrollIntoView({ block: link.classList.contains("where") ? "center" : "start" });
    goal.setAttribute("tabindex", "-1");
    goal.focus({ preventScroll: true });
  });
  window.addEventListener("hashchange", () => { recall(); showAll(); });
  window.addEventListener("beforeprint", () => {
    for (const node of document.querySelectorAll("details.printed")) node.open = true;
  });
  let width = window.innerWidth;
  window.addEventListener("resize", () => {
    if (window.innerWidth === width) return;
    width = window.innerWidth;
    widths.clear();
    showPolars(); showDrivers(); showCp(state.point); showRanks(state.point);
  });
  showAll();
}

start();
