// Beliefs about rho judged by stored draws: the same route through distribution functions as in Python.
"use strict";

const SQRT_PI = Math.sqrt(Math.PI);
const Z95 = 1.6448536269514722; // the 95 % point of the standard normal
const BOUND = 0.99; // where a normal belief is cut off

// The error function: its series with positive terms only near zero, elsewhere the continued fraction of erfc.
function erf(x) {
  const size = Math.abs(x);
  if (size >= 2.5) return Math.sign(x) * (1 - erfcTail(size));
  let term = x, sum = x;
  for (let n = 1; Math.abs(term) > 1e-17 * Math.abs(sum); n++) {
    term *= (2 * x * x) / (2 * n + 1);
    sum += term;
  }
  return ((2 / SQRT_PI) * Math.exp(-x * x)) * sum;
}

function erfcTail(x) {
  if (x > 27) return 0;
  let fraction = x;
  for (let n = 70; n >= 1; n--) fraction = x + n / 2 / fraction;
  return Math.exp(-x * x) / (SQRT_PI * fraction);
}

// P(Z < z) of a standard normal Z, to a relative error near rounding in the lower tail too.
function normalBelow(z) {
  const x = z / Math.SQRT2;
  return x < -2.5 ? erfcTail(-x) / 2 : (1 + erf(x)) / 2;
}

function normalDensity(z) {
  return Math.exp(-0.5 * z * z) / Math.sqrt(2 * Math.PI);
}

// A belief has below(x) = P(rho < x), above(x) = P(rho > x), density(x), and atoms as [value, probability] pairs.

function cutNormal(mean, sd) {
  const scaled = (x) => (x - mean) / sd;
  const low = erf(scaled(-BOUND) / Math.SQRT2), high = erf(scaled(BOUND) / Math.SQRT2);
  const below = (x) =>
    x <= -BOUND ? 0 : x >= BOUND ? 1 : Math.min(1, Math.max(0, (erf(scaled(x) / Math.SQRT2) - low) / (high - low)));
  return {
    atoms: [],
    ends: [-BOUND, BOUND],
    below,
    above: (x) => 1 - below(x),
    density: (x) => (Math.abs(x) > BOUND ? 0 : (2 * normalDensity(scaled(x))) / sd / (high - low)),
  };
}

// Normal on Fisher's scale, atanh rho, with 5 % below `low` and 5 % above `high`.
function byQuantiles(low, high) {
  const a = Math.atanh(low), b = Math.atanh(high);
  const mean = (a + b) / 2, sd = (b - a) / 2 / Z95;
  const below = (x) => (x <= -1 ? 0 : x >= 1 ? 1 : normalBelow((Math.atanh(x) - mean) / sd));
  return {
    atoms: [],
    ends: [-1, 1],
    below,
    above: (x) => 1 - below(x),
    density: (x) => (Math.abs(x) >= 1 ? 0 : normalDensity((Math.atanh(x) - mean) / sd) / sd / (1 - x * x)),
  };
}

// One unmeasured cause that explains two shares of residual variance; `positive` is the probability of its sign.
function sharedCause(r2Mediator, r2Outcome, positive) {
  const size = Math.sqrt(r2Mediator * r2Outcome);
  const atoms = size === 0 ? [[0, 1]] : [[-size, 1 - positive], [size, positive]].filter((atom) => atom[1] > 0);
  const beyond = (test) => atoms.reduce((sum, atom) => sum + (test(atom[0]) ? atom[1] : 0), 0);
  return {
    atoms,
    ends: [-size, size],
    below: (x) => beyond((value) => value < x),
    above: (x) => beyond((value) => value > x),
    density: () => 0,
  };
}

function makeBelief(stated) {
  if (stated.family === "normal") return cutNormal(stated.mean, stated.sd);
  if (stated.family === "quantiles") return byQuantiles(stated.low, stated.high);
  return sharedCause(stated.mediator, stated.outcome, stated.positive);
}

// The rho below which a belief has probability q.
function beliefQuantile(belief, q) {
  let low = -1, high = 1;
  for (let step = 0; step < 60; step++) {
    const middle = (low + high) / 2;
    if (1 - belief.above(middle) < q) low = middle;
    else high = middle;
  }
  return (low + high) / 2;
}

// Per draw, the belief's probability that constant - slope rho / sqrt(1 - rho²) lies on the claim's side of the limit.
function byDraw(line, limit, upwards, belief) {
  const count = line.constant.length, values = new Float64Array(count);
  for (let s = 0; s < count; s++) {
    const gap = line.constant[s] - limit, slope = line.slope[s];
    if (slope === 0) {
      values[s] = (upwards ? gap > 0 : gap < 0) ? 1 : 0;
      continue;
    }
    const crossing = (Math.sign(slope) * gap) / Math.hypot(gap, slope);
    values[s] = slope > 0 === upwards ? belief.below(crossing) : belief.above(crossing);
  }
  return values;
}

function average(values) {
  let sum = 0;
  for (const value of values) sum += value;
  return sum / values.length;
}

// How many independent draws an average over chains is worth: Geyer's sequences over split chains, as in Vehtari and
// others 2021, doi:10.1214/20-BA1221.
function effectiveDraws(values, chains) {
  const perChain = values.length / chains, half = Math.floor(perChain / 2), pieces = [];
  for (let c = 0; c < chains; c++) {
    pieces.push(values.subarray(c * perChain, c * perChain + half));
    pieces.push(values.subarray((c + 1) * perChain - half, (c + 1) * perChain));
  }
  const count = pieces.length, means = pieces.map(average);
  const covariance = (lag) => {
    let sum = 0;
    pieces.forEach((piece, k) => {
      for (let s = 0; s + lag < half; s++) sum += (piece[s] - means[k]) * (piece[s + lag] - means[k]);
    });
    return sum / half / count;
  };
  const within = (covariance(0) * half) / (half - 1), grand = average(means);
  const between = means.reduce((sum, mean) => sum + (mean - grand) ** 2, 0) / (count - 1);
  const total = (within * (half - 1)) / half + between;
  const correlation = (lag) => 1 - (within - covariance(lag)) / total;
  const kept = [1, correlation(1)];
  let even = 1, odd = kept[1], t = 1;
  while (t < half - 3 && even + odd > 0) {
    even = correlation(t + 1);
    odd = correlation(t + 2);
    if (even + odd >= 0) kept[t + 1] = even, kept[t + 2] = odd;
    t += 2;
  }
  const last = t - 2;
  if (even > 0) kept[last + 1] = even;
  for (t = 1; t <= last - 2; t += 2) {
    if (kept[t + 1] + kept[t + 2] > kept[t - 1] + kept[t]) kept[t + 1] = kept[t + 2] = (kept[t - 1] + kept[t]) / 2;
  }
  const sum = kept.slice(0, last + 1).reduce((a, b) => a + b, 0);
  const time = Math.max(-1 + 2 * sum + (kept[last + 1] || 0), 1 / Math.log10(count * half));
  return (count * half) / time;
}

// The mean of values that are probabilities by draw, and its Monte Carlo error.
function meanWithError(values, draws) {
  const mean = average(values);
  let least = values[0], most = values[0], squares = 0;
  for (const value of values) {
    least = Math.min(least, value);
    most = Math.max(most, value);
    squares += (value - mean) ** 2;
  }
  const count = values.length;
  if (least === most) return [mean, 1 / count];
  let worth = count;
  if (!draws.independent && count / draws.chains >= 4) {
    const found = effectiveDraws(values, draws.chains);
    if (Number.isFinite(found)) worth = Math.min(found, count);
  }
  return [mean, Math.sqrt(squares / count / worth)];
}

// Quantiles of the effect over draws and belief, by inverting the function behind the probability of a claim.
function effectQuantiles(line, belief, probabilities) {
  if (belief.atoms.length === 1) {
    const rho = belief.atoms[0][0], r = rho / Math.sqrt(1 - rho * rho);
    const sorted = line.constant.map((constant, s) => constant - line.slope[s] * r).sort();
    return probabilities.map((q) => {
      const place = q * (sorted.length - 1), cell = Math.min(Math.floor(place), sorted.length - 2);
      return sorted[cell] + (place - cell) * (sorted[cell + 1] - sorted[cell]);
    });
  }
  const below = (value) => average(byDraw(line, value, false, belief));
  const centre = average(line.constant);
  let spread = 0;
  for (const constant of line.constant) spread += (constant - centre) ** 2;
  spread = Math.sqrt(spread / line.constant.length) || Math.abs(centre) || 1;
  return probabilities.map((q) => invert((value) => below(value) - q, centre, spread));
}

// Where an increasing function is zero, by false position that may not stall (Illinois), halving every third step.
function invert(gap, start, step) {
  let low = start, high = start, atLow = gap(low), atHigh = atLow, width = step;
  while (atLow > 0 && width < 1e12 * step) {
    high = low, atHigh = atLow;
    low = start - width;
    width *= 2;
    atLow = gap(low);
  }
  width = step;
  while (atHigh < 0 && width < 1e12 * step) {
    low = high, atLow = atHigh;
    high = start + width;
    width *= 2;
    atHigh = gap(high);
  }
  let side = 0, lowWeight = atLow, highWeight = atHigh;
  for (let count = 0; count < 120 && high - low > 1e-9 * step; count++) {
    const secant = low + ((high - low) * lowWeight) / (lowWeight - highWeight);
    const next = count % 3 !== 2 && secant > low && secant < high ? secant : (low + high) / 2;
    const found = gap(next);
    if (Math.abs(found) < 1e-11) return next;
    if (found < 0) {
      low = next, lowWeight = found;
      if (side === -1) highWeight /= 2;
      side = -1;
    } else {
      high = next, highWeight = found;
      if (side === 1) lowWeight /= 2;
      side = 1;
    }
  }
  return (low + high) / 2;
}

// All that is said of a claim under a belief: probability with its error, median and interval, and the verdict.
function judge(line, draws, claim, limit, stated, intervalProbability) {
  const belief = makeBelief(stated), upwards = claim.direction === "above";
  const [probability, error] = meanWithError(byDraw(line, limit, upwards, belief), draws);
  const tail = (1 - intervalProbability) / 2;
  const [lower, median, upper] = effectQuantiles(line, belief, [tail, 0.5, 1 - tail]);
  const close = Math.abs(probability - claim.required) <= 2 * error;
  const verdict = close ? "too close to call" : probability > claim.required ? "holds" : "fails";
  return { probability, error, lower, median, upper, verdict };
}

// Draws as 32-bit floats in base64 become, for each point, a line per draw: a mix of stored rows of draws.
function unpackLines(stored) {
  const bytes = Uint8Array.from(atob(stored.rows), (letter) => letter.charCodeAt(0));
  const view = new DataView(bytes.buffer), count = stored.draws;
  const mixed = (weights) => {
    const values = new Float64Array(count);
    weights.forEach((weight, row) => {
      if (weight === 0) return;
      for (let s = 0; s < count; s++) values[s] += weight * view.getFloat32(4 * (row * count + s), true);
    });
    return values;
  };
  return stored.points.map((point) => ({ constant: mixed(point.constant), slope: mixed(point.slope) }));
}
