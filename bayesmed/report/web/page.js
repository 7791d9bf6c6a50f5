// The live part of the page: inputs, the answer under the belief they state, its picture, and the address that holds it.
"use strict";

const LIMITS = {
  normal: { mean: [-0.9, 0.9, 0.01], sd: [0.01, 1, 0.01] },
  quantiles: { low: [-0.98, 0.97, 0.01], high: [-0.97, 0.98, 0.01] },
  causes: { mediator: [0, 0.95, 0.01], outcome: [0, 0.95, 0.01], positive: [0, 1, 0.01] },
};
const SVG = "http://www.w3.org/2000/svg";

const byId = (id) => document.getElementById(id);
const clamp = (value, [low, high]) => Math.min(high, Math.max(low, value));

// Numbers as in the rest of the report: three significant digits, no probability of exactly one.
function numberText(value) {
  if (!Number.isFinite(value)) return Number.isNaN(value) ? "not defined" : value > 0 ? "infinite" : "-infinite";
  if (value === 0) return "0";
  const rounded = Number(value.toExponential(2));
  return rounded.toFixed(Math.min(20, Math.max(0, 2 - Math.floor(Math.log10(Math.abs(rounded))))));
}

function probabilityText(probability, error = 0) {
  if (probability > 0.999) return ">0.999";
  if (probability < 0.001) return "<0.001";
  return probability.toFixed(error > 0.005 ? 2 : 3);
}

function startPage() {
  followLinksInside();
  const stored = byId("stored-draws");
  if (stored) startLive(JSON.parse(stored.textContent));
}

// In a notebook the page has the notebook's address, so that links to its own sections must not be followed as such;
// and here the fragment holds the belief.
function followLinksInside() {
  document.addEventListener("click", (event) => {
    const link = event.target.closest('a[href^="#"]');
    const target = link && byId(link.getAttribute("href").slice(1));
    if (!target) return;
    event.preventDefault();
    target.scrollIntoView();
    target.focus({ preventScroll: true });
  });
}

function startLive(stored) {
  const lines = unpackLines(stored), claim = stored.claim;
  const state = readAddress(location.hash, stored) || structuredClone(stored.start);

  const judged = (stated = state, point = state.point, limit = state.limit) =>
    judge(lines[point], stored, claim, limit, stated, stored.intervalProbability);

  const problem = () => (state.family === "quantiles" && !(state.low < state.high) ? "The 5 % point must lie below the 95 % point." : "");

  let spoken = 0, waiting = 0;
  function show({ keepAddress = false } = {}) {
    document.querySelectorAll("[data-family]").forEach((part) => (part.hidden = part.dataset.family !== state.family));
    for (const pair of document.querySelectorAll("[data-key]")) {
      if (pair !== document.activeElement || pair.type === "range" || pair.type === "radio") showValue(pair);
    }
    byId("belief-problem").textContent = problem();
    if (problem()) return;
    const found = judged(), where = stored.points[state.point].label;
    const words = answerWords(found, where);
    byId("answer-number").textContent = probabilityText(found.probability, found.error);
    byId("answer-verdict").textContent = `The claim ${found.verdict === "too close to call" ? "is " : ""}${found.verdict}.`;
    byId("answer-verdict").dataset.verdict = found.verdict;
    byId("answer-words").textContent = words;
    byId("belief-words").textContent = beliefWords();
    byId("python-line").textContent = pythonLine();
    draw(found);
    if (!keepAddress) writeAddress();
    byId("link-line").value = location.href.split("#")[0] + addressOf(state);
    clearTimeout(spoken);
    spoken = setTimeout(() => {
      byId("spoken").textContent = `Probability ${byId("answer-number").textContent}. ${byId("answer-verdict").textContent} ${words}`;
    }, 500);
  }

  // One drawing a frame, however fast a slider moves.
  function showSoon() {
    cancelAnimationFrame(waiting);
    waiting = requestAnimationFrame(() => show());
  }

  function answerWords(found, where) {
    const sign = claim.direction === "above" ? ">" : "<";
    return (
      `Probability that the ${claim.effectName} is ${sign} ${Number(state.limit)} ${where ? `at ${where}` : "averaged over all rows"}; ` +
      `the claim requires ${claim.required}. Monte Carlo error ${found.error < 0.001 ? "<0.001" : found.error.toFixed(3)}. ` +
      `Median ${numberText(found.median)}, ${100 * stored.intervalProbability} % interval ${numberText(found.lower)} to ${numberText(found.upper)}.`
    );
  }

  function beliefWords() {
    const belief = makeBelief(state);
    if (belief.atoms.length) {
      const size = belief.ends[1];
      if (size === 0) return "Such a cause leaves no correlation: ρ = 0.";
      return `Such a cause leaves a ρ of ${size.toFixed(3)} in size, positive with probability ${state.positive}.`;
    }
    const [low, high] = [0.05, 0.95].map((q) => beliefQuantile(belief, q));
    const largest = Math.max(Math.abs(low), Math.abs(high));
    return (
      `This belief puts 90 % between ρ = ${low.toFixed(2)} and ${high.toFixed(2)}, and ${probabilityText(belief.above(0))} above zero. ` +
      `To leave a ρ of ${largest.toFixed(2)} in size, one unmeasured cause would have to explain ${Math.round(100 * largest)} % ` +
      "of what is left unexplained of each, or less of one and more of the other."
    );
  }

  function pythonLine() {
    const prior = {
      normal: () => `bm.TruncatedNormal(${state.mean}, ${state.sd})`,
      quantiles: () => `bm.from_quantiles({0.05: ${state.low}, 0.95: ${state.high}}, family="FisherNormal")`,
      causes: () => `bm.SharedCause(${state.mediator}, ${state.outcome}, positive=${state.positive})`,
    }[state.family]();
    return (
      `fit.summary(at=${stored.points[state.point].python}, rho=${prior}, ` +
      `claim=bm.Claim("${claim.effect}", ${claim.direction}=${Number(state.limit)}, required=${claim.required}), ci_prob=${stored.intervalProbability})`
    );
  }

  // ------------------------------------------------------------------ inputs

  function showValue(input) {
    const value = state[input.dataset.key];
    if (input.type === "radio") input.checked = input.value === value;
    else input.value = String(value);
  }

  function taken(input) {
    const key = input.dataset.key;
    if (key === "family") {
      if (input.checked) state.family = input.value;
    } else if (key === "point") state.point = Number(input.value);
    else {
      const value = input.valueAsNumber;
      if (!Number.isFinite(value)) return;
      const range = rangeOf(key);
      state[key] = range ? clamp(value, range) : value;
    }
    showSoon();
  }

  for (const input of document.querySelectorAll("[data-key]")) {
    input.addEventListener("input", () => taken(input));
    input.addEventListener("change", () => {
      taken(input);
      showValue(input);
    });
  }
  // A page inside another one has no address that could be handed on.
  byId("share").hidden = location.protocol === "about:";
  byId("start-again").addEventListener("click", () => {
    Object.assign(state, structuredClone(stored.start));
    showSoon();
  });
  byId("copy-link").addEventListener("click", () => {
    byId("link-line").select();
    const done = () => (byId("copied").textContent = "Copied.");
    const byHand = () => (byId("copied").textContent = "Selected: copy it from the keyboard.");
    if (navigator.clipboard) navigator.clipboard.writeText(byId("link-line").value).then(done, byHand);
    else byHand();
  });
  window.addEventListener("hashchange", () => {
    const read = readAddress(location.hash, stored);
    if (read) Object.assign(state, read);
    show({ keepAddress: true });
  });
  let width = 0;
  new ResizeObserver(() => {
    if (byId("live-picture").clientWidth !== width) showSoon();
    width = byId("live-picture").clientWidth;
  }).observe(byId("live-picture"));

  // ------------------------------------------------------------------ address

  function writeAddress() {
    try {
      history.replaceState(null, "", addressOf(state));
    } catch {
      // A page inside another one has no address of its own.
    }
  }

  // ------------------------------------------------------------------ pictures

  // At each rho, the share of draws in which the claim is true.
  const crossings = new Map();
  function truthByRho(point, limit, grid) {
    const key = `${point} ${limit}`;
    if (!crossings.has(key)) {
      crossings.clear();
      const line = lines[point], upwards = claim.direction === "above";
      const r = grid.map((rho) => rho / Math.sqrt(1 - rho * rho));
      crossings.set(key, r.map((odds) => {
        let count = 0;
        for (let s = 0; s < line.constant.length; s++) {
          const value = line.constant[s] - line.slope[s] * odds;
          if (upwards ? value > limit : value < limit) count++;
        }
        return count / line.constant.length;
      }));
    }
    return crossings.get(key);
  }

  function draw(found) {
    const box = byId("live-picture"), wide = Math.max(260, Math.min(760, box.clientWidth || 640));
    const belief = makeBelief(state);
    const grid = Array.from({ length: 199 }, (_, k) => -0.99 + k * 0.01);
    const truth = truthByRho(state.point, state.limit, grid);
    const top = 14, tall = 190, left = 34, right = wide - 12;
    const x = (rho) => left + ((rho + 1) / 2) * (right - left), y = (share) => top + (1 - share) * tall;
    const picture = svg("svg", { width: wide, height: 344, viewBox: `0 0 ${wide} 344`, role: "img", "aria-labelledby": "picture-title picture-words" });
    picture.append(svg("title", { id: "picture-title" }, "Where the belief lies, and how likely the claim is at each ρ"));
    const inside = belief.atoms.length ? [] : grid.map((rho) => belief.density(rho));
    const peak = Math.max(...inside, 0);
    picture.append(svg("desc", { id: "picture-words" }, pictureWords(grid, truth, belief, found)));
    for (const share of [0, 0.5, 1]) {
      picture.append(svg("line", { x1: left, x2: right, y1: y(share), y2: y(share), class: "rule" }));
      picture.append(svg("text", { x: left - 6, y: y(share) + 4, "text-anchor": "end" }, String(share)));
    }
    for (const rho of wide < 420 ? [-1, 0, 1] : [-1, -0.5, 0, 0.5, 1]) {
      picture.append(svg("line", { x1: x(rho), x2: x(rho), y1: y(0), y2: y(0) + 5, class: "axis" }));
      picture.append(svg("text", { x: x(rho), y: y(0) + 18, "text-anchor": "middle" }, String(rho).replace("-", "−")));
    }
    picture.append(svg("text", { x: (left + right) / 2, y: y(0) + 36, "text-anchor": "middle" }, wide < 420 ? "ρ" : "ρ, the correlation left by unmeasured causes"));
    if (peak > 0) {
      const edge = grid.map((rho, k) => `${x(rho).toFixed(1)},${y((0.92 * inside[k]) / peak).toFixed(1)}`);
      picture.append(svg("polygon", { points: [`${x(-0.99)},${y(0)}`, ...edge, `${x(0.99)},${y(0)}`].join(" "), class: "belief" }));
    }
    for (const [rho, share] of belief.atoms) {
      picture.append(svg("rect", { x: x(rho) - 5, width: 10, y: y(0.92 * share), height: y(0) - y(0.92 * share), class: "belief" }));
    }
    picture.append(svg("line", { x1: left, x2: right, y1: y(claim.required), y2: y(claim.required), class: "required" }));
    const path = grid.map((rho, k) => `${k ? "L" : "M"}${x(rho).toFixed(1)} ${y(truth[k]).toFixed(1)}`).join("");
    picture.append(svg("path", { d: path, class: "truth" }));
    drawInterval(picture, found, left, right, 286);
    box.replaceChildren(picture);
  }

  function drawInterval(picture, found, left, right, level) {
    const [least, most] = stored.points[state.point].range;
    const low = Math.min(least, state.limit), high = Math.max(most, state.limit), room = 0.04 * (high - low) || 1;
    const x = (value) => left + clamp((value - low + room) / (high - low + 2 * room), [0, 1]) * (right - left);
    picture.append(svg("line", { x1: left, x2: right, y1: level, y2: level, class: "rule" }));
    picture.append(svg("line", { x1: x(state.limit), x2: x(state.limit), y1: level - 16, y2: level + 16, class: "limit" }));
    picture.append(svg("line", { x1: x(found.lower), x2: x(found.upper), y1: level, y2: level, class: "interval" }));
    picture.append(svg("circle", { cx: x(found.median), cy: level, r: 6, class: "median" }));
    picture.append(svg("text", { x: (left + right) / 2, y: level + 52, "text-anchor": "middle" }, `${claim.effectName} under the belief`));
    for (const value of [low, high]) {
      picture.append(svg("text", { x: clamp(x(value), [left + 14, right - 14]), y: level + 34, "text-anchor": "middle" }, numberText(value).replace("-", "−")));
    }
    if (Math.min(x(state.limit) - x(low), x(high) - x(state.limit)) > 50) {
      picture.append(svg("text", { x: x(state.limit), y: level + 34, "text-anchor": "middle" }, String(state.limit).replace("-", "−")));
    }
  }

  function pictureWords(grid, truth, belief, found) {
    const at = [-0.6, -0.3, 0, 0.3, 0.6].map((rho) => `${rho}: ${probabilityText(truth[Math.round((rho + 0.99) * 100)])}`);
    return (
      `Probability of the claim at fixed ρ: ${at.join(", ")}. ${beliefWords()} ` +
      `Below, the effect on a scale of its own: median ${numberText(found.median)}, interval ${numberText(found.lower)} to ${numberText(found.upper)}, limit ${state.limit}.`
    );
  }

  function rangeOf(key) {
    return (LIMITS[state.family] || {})[key];
  }

  window.bayesmedPage = { judged, state: () => structuredClone(state), erf, normalBelow, stored };
  show({ keepAddress: true });
}

function svg(name, attributes, text) {
  const made = document.createElementNS(SVG, name);
  for (const [key, value] of Object.entries(attributes)) made.setAttribute(key, value);
  if (text !== undefined) made.textContent = text;
  return made;
}

// A belief, a subgroup and a limit as the fragment of an address, and back; what is not allowed is left out.
function addressOf(state) {
  const keys = ["family", ...Object.keys(LIMITS[state.family]), "point", "limit"];
  return "#" + new URLSearchParams(keys.map((key) => [key, String(state[key])])).toString();
}

function readAddress(fragment, stored) {
  const given = new URLSearchParams(fragment.replace(/^#/, ""));
  const family = given.get("family");
  if (!Object.hasOwn(LIMITS, family || "")) return null;
  const state = { ...structuredClone(stored.start), family };
  const number = (key) => (given.has(key) && given.get(key).trim() !== "" ? Number(given.get(key)) : NaN);
  for (const [key, range] of Object.entries(LIMITS[family])) {
    if (Number.isFinite(number(key))) state[key] = clamp(number(key), range);
  }
  if (Number.isInteger(number("point")) && number("point") >= 0 && number("point") < stored.points.length) state.point = number("point");
  if (Number.isFinite(number("limit"))) state.limit = number("limit");
  return state;
}

document.addEventListener("DOMContentLoaded", startPage);
