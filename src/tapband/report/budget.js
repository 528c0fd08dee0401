// The budget of every point and coefficient, recomputed when a source is scaled.
//
// Sources are independent, so variances add: u² = Σ (f c)², with f the factor of a source and c its contribution
// at its declared size. Degrees of freedom by Welch-Satterthwaite (JCGM 100, G.4): ν = u⁴ / Σ (f c)⁴/ν.

const TYPES = { f8: Float64Array, f4: Float32Array, u1: Uint8Array, i2: Int16Array };

function unpack(part) {
  const text = atob(part.b), bytes = new Uint8Array(text.length);
  for (let i = 0; i < text.length; i++) bytes[i] = text.charCodeAt(i);
  return new TYPES[part.t](bytes.buffer);
}

function unpackAll(value) {
  if (Array.isArray(value)) return value.map(unpackAll);
  if (value === null || typeof value !== "object") return value;
  const keys = Object.keys(value);
  if (keys.length === 2 && typeof value.t === "string" && typeof value.b === "string") return unpack(value);
  return Object.fromEntries(keys.map((key) => [key, unpackAll(value[key])]));
}

class Budget {
  constructor(data) {
    this.data = data;
    this.points = data.points.key.length;
    this.outputs = data.coefficients.length;
    this.sources = data.sources.length;
    this.factor = new Float64Array(this.sources).fill(1);
    this.k = factorTable(data.level, data.z);
    const size = this.points * this.outputs;
    this.u = new Float64Array(size);
    this.U = new Float64Array(size);
    this.nu = new Float64Array(size);
    this.unconfirmed = data.coefficients.map((c) => new Set(c.unconfirmed));
    this.recompute();
  }

  get changed() { return this.factor.some((f) => f !== 1); }

  recompute() {
    const { contribution, dof } = this.data, { factor, sources, outputs } = this;
    for (let p = 0; p < this.points; p++) {
      for (let j = 0; j < outputs; j++) {
        const at = p * outputs + j, first = at * sources;
        let second = 0, fourth = 0;
        for (let s = 0; s < sources; s++) {
          const part = factor[s] * contribution[first + s], square = part * part;
          second += square;
          fourth += square * square / dof[p * sources + s];
        }
        this.u[at] = Math.sqrt(second);
        this.nu[at] = fourth > 0 ? second * second / fourth : Infinity;
        this.U[at] = this.k(this.nu[at]) * this.u[at];
      }
    }
  }

  // The interval to show: as declared, the headline one; with a changed source, the linearised one.
  interval(p, j) {
    const c = this.data.coefficients[j], at = p * this.outputs + j, estimate = c.est[p];
    const trials = this.unconfirmed[j].has(p);
    if (!Number.isFinite(estimate)) return { estimate, low: NaN, high: NaN, half: NaN, trials: false };
    if (!this.changed) {
      const low = trials ? c.mcLow[p] : c.low[p], high = trials ? c.mcHigh[p] : c.high[p];
      return { estimate, low, high, half: 0.5 * (high - low), trials };
    }
    const half = this.U[at];
    return { estimate, low: estimate - half, high: estimate + half, half, trials: false };
  }

  share(p, j, s) {
    const at = p * this.outputs + j, u = this.u[at];
    return u > 0 ? (this.factor[s] * this.data.contribution[at * this.sources + s] / u) ** 2 : 0;
  }

  contribution(p, j, s) {
    return this.factor[s] * this.data.contribution[(p * this.outputs + j) * this.sources + s];
  }

  // Mean share of each source in a coefficient over the points that have one.
  meanShares(j) {
    const out = new Float64Array(this.sources);
    let count = 0;
    for (let p = 0; p < this.points; p++) {
      if (!(this.u[p * this.outputs + j] > 0) || !Number.isFinite(this.data.coefficients[j].est[p])) continue;
      count++;
      for (let s = 0; s < this.sources; s++) out[s] += this.share(p, j, s);
    }
    return out.map((v) => (count ? v / count : 0));
  }

  // Expanded uncertainty of Cp at a tap; its factor k stays that of the declared sizes.
  tapHalf(p, t) {
    const { taps } = this.data, n = taps.name.length, declared = taps.U[p * n + t];
    if (!taps.parts || !this.changed) return declared;
    let now = 0, then = 0;
    for (let s = 0, at = (p * n + t) * this.sources; s < this.sources; s++) {
      const part = taps.parts[at + s] ** 2;
      now += this.factor[s] ** 2 * part;
      then += part;
    }
    return then > 0 ? declared * Math.sqrt(now / then) : declared;
  }

  // The changed sources as campaign-file text.
  text() {
    const blocks = [];
    this.data.sources.forEach((source, s) => {
      const f = this.factor[s];
      if (f === 1) return;
      if (source.text) blocks.push(source.text.map((piece) => sized(piece, f)).join("").trimEnd());
      else blocks.push(`# ${oneLine(source.name)}: ×${shortNumber(f)}; ${f === 0 && HOW_OFF[source.name] || UNWRITTEN}`);
    });
    return blocks.length ? blocks.join("\n\n") + "\n" : "# every source at its declared size\n";
  }
}

// How the automatic sources are switched off in the campaign file.
const HOW_OFF = {
  "finite tap spacing": 'write spacing = "none" under [reduction]',
  "trailing edge": "declare a source of size 0 that acts on the trailing-edge coefficient",
  "rear loading": "declare a source of size 0 that acts on the trailing-edge coefficient",
};
const UNWRITTEN = "not a [[source]] whose size this page can write; change it in the campaign file by hand";

function sized(piece, f) {
  return typeof piece === "string" ? piece : shortNumber(piece.c + f * piece.n);
}

// Twelve significant digits as TOML reads them; "1e-7" is a float there, and 0 a legal size.
function shortNumber(value) {
  return String(Number(value.toPrecision(12)));
}

function oneLine(text) {
  return text.replace(/[\u0000-\u001f\u007f-\u009f\u2028\u2029]/g, " ");
}
