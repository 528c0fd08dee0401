// Quantiles of Student's t for any degrees of freedom, to about 1e-12 relative.

// ln Γ(x), x > 0 (Lanczos, g = 7, n = 9).
const LANCZOS = [0.99999999999980993, 676.5203681218851, -1259.1392167224028, 771.32342877765313,
  -176.61502916214059, 12.507343278686905, -0.13857109526572012, 9.9843695780195716e-6, 1.5056327351493116e-7];

function lnGamma(x) {
  if (x < 0.5) return Math.log(Math.PI / Math.sin(Math.PI * x)) - lnGamma(1 - x);
  const y = x - 1, t = y + 7.5;
  let sum = LANCZOS[0];
  for (let i = 1; i < 9; i++) sum += LANCZOS[i] / (y + i);
  return 0.5 * Math.log(2 * Math.PI) + (y + 0.5) * Math.log(t) - t + Math.log(sum);
}

// Continued fraction of the incomplete beta function by Lentz's method.
function betaFraction(x, a, b) {
  const tiny = 1e-300, guard = (v) => (Math.abs(v) < tiny ? tiny : v);
  let c = 1, d = 1 / guard(1 - (a + b) * x / (a + 1)), h = d;
  for (let m = 1; m < 1000; m++) {
    const even = m * (b - m) * x / ((a + 2 * m - 1) * (a + 2 * m));
    d = 1 / guard(1 + even * d); c = guard(1 + even / c); h *= d * c;
    const odd = -(a + m) * (a + b + m) * x / ((a + 2 * m) * (a + 2 * m + 1));
    d = 1 / guard(1 + odd * d); c = guard(1 + odd / c);
    const step = d * c;
    h *= step;
    if (Math.abs(step - 1) < 1e-15) break;
  }
  return h;
}

// P(|T| > t) and the density at t, for the given ν; logBeta = ln B(ν/2, 1/2).
function studentTail(t, nu, logBeta) {
  const a = 0.5 * nu, x = nu / (nu + t * t), y = t * t / (nu + t * t);
  const front = Math.exp(a * Math.log(x) + 0.5 * Math.log(y) - logBeta);
  const tail = x < (a + 1) / (a + 2.5)
    ? front * betaFraction(x, a, 0.5) / a
    : 1 - front * betaFraction(y, 0.5, a) / 0.5;
  const density = Math.exp(-0.5 * (nu + 1) * Math.log1p(t * t / nu) - logBeta) / Math.sqrt(nu);
  return { tail, density };
}

// P(T ≤ t); past ν = 1e5 by the normal law (Numerical Recipes, 6.2, to 1e-7).
function studentBelow(t, nu) {
  if (!Number.isFinite(t)) return t > 0 ? 1 : 0;
  let tail;
  if (nu < 1e5) tail = studentTail(t, nu, lnGamma(0.5 * nu) + 0.5 * Math.log(Math.PI) - lnGamma(0.5 * nu + 0.5)).tail;
  else {
    const z = Math.abs(t) / Math.SQRT2, s = 1 / (1 + 0.5 * z);
    tail = s * Math.exp(-z * z - 1.26551223 + s * (1.00002368 + s * (0.37409196 + s * (0.09678418 + s * (-0.18628806
      + s * (0.27886807 + s * (-1.13520398 + s * (1.48851587 + s * (-0.82215223 + s * 0.17087277)))))))));
  }
  return t > 0 ? 1 - 0.5 * tail : 0.5 * tail;
}

// Expansion of the quantile about the normal one z in powers of 1/ν (Abramowitz and Stegun 26.7.5).
function studentExpansion(z, nu) {
  const s = z * z;
  const g1 = (s + 1) / 4, g2 = ((5 * s + 16) * s + 3) / 96, g3 = (((3 * s + 19) * s + 17) * s - 15) / 384;
  const g4 = ((((79 * s + 776) * s + 1482) * s - 1920) * s - 945) / 92160;
  return z * (1 + (g1 + (g2 + (g3 + g4 / nu) / nu) / nu) / nu);
}

// Factor k with P(|T| ≤ k) = level; z is the normal factor of the same level.
function coverageFactor(nu, level, z) {
  if (!(nu < 1e12)) return z;
  if (nu > 1000) return studentExpansion(z, nu);
  const logBeta = lnGamma(0.5 * nu) + 0.5 * Math.log(Math.PI) - lnGamma(0.5 * nu + 0.5), wanted = 1 - level;
  let low = z, high = Infinity, t = Math.max(studentExpansion(z, Math.max(nu, 3)), z);
  for (let i = 0; i < 200; i++) {
    const { tail, density } = studentTail(t, nu, logBeta);
    if (tail > wanted) low = t; else high = t;
    const newton = (tail - wanted) / (2 * density), bend = (nu + 1) * t / (nu + t * t);
    const next = t + newton / (1 - 0.5 * newton * bend);  // Halley: the error is cubed
    const inside = next >= low && next <= high;
    if (inside && Math.abs(next - t) <= 1e-5 * t) return next;
    t = inside ? next : high === Infinity ? 2 * t : 0.5 * (low + high);
  }
  return t;
}

// The same factor for many ν at one level: ln k interpolated in 1/ν by Chebyshev polynomials (ν ≥ 2), each
// value in well under a microsecond, to about 1e-12.
function factorTable(level, z) {
  const n = 40, nodes = Array.from({ length: n }, (_, i) => Math.cos(Math.PI * (i + 0.5) / n));
  const logs = nodes.map((x) => Math.log(coverageFactor(4 / (1 + x), level, z)));
  const terms = Array.from({ length: n }, (_, j) =>
    (j ? 2 : 1) / n * logs.reduce((sum, v, i) => sum + v * Math.cos(Math.PI * j * (i + 0.5) / n), 0));
  return (nu) => {
    if (!(nu < 1e12)) return z;
    if (nu < 2) return coverageFactor(nu, level, z);
    const x = 4 / nu - 1;
    let a = 0, b = 0;
    for (let j = n - 1; j > 0; j--) [a, b] = [2 * x * a - b + terms[j], a];
    return Math.exp(x * a - b + terms[0]);
  };
}
