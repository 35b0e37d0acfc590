// A sounding's curve and model, drawn from its data with axes and units.

function scaleOf(low, high, start, end, logarithmic) {
  const share = logarithmic
    ? (value) => Math.log(value / low) / Math.log(high / low) : (value) => (value - low) / (high - low);
  return (value) => start + Math.min(1, Math.max(0, share(value))) * (end - start);
}

function logarithmicEnds(values, margin) {
  const positive = values.filter((value) => known(value) && value > 0);
  if (!positive.length) return [1, 1000];
  let low = Math.min(...positive) / margin, high = Math.max(...positive) * margin;
  if (high < 4 * low) [low, high] = [Math.sqrt(low * high) / 2, Math.sqrt(low * high) * 2];
  return [low, high];
}

// Frame, grid, numbers and labels of a plot: `x` and `y` hold ticks, the scale and the label.
function axes(box, x, y) {
  const outline = `M${box.left} ${box.top}H${box.right}V${box.bottom}H${box.left}Z`;
  const parts = [draw("path", { d: outline, class: "frame" })];
  for (const tick of x.ticks) {
    const at = svgNumber(x.scale(tick));
    parts.push(draw("line", { x1: at, x2: at, y1: box.top, y2: box.bottom, class: "grid" }),
      draw("text", { x: at, y: box.bottom + 13, class: "tick", "text-anchor": "middle" }, tickWords(tick)));
  }
  for (const tick of y.ticks) {
    const at = svgNumber(y.scale(tick));
    parts.push(draw("line", { x1: box.left, x2: box.right, y1: at, y2: at, class: "grid" }),
      draw("text", { x: box.left - 5, y: Number(at) + 4, class: "tick", "text-anchor": "end" }, tickWords(tick)));
  }
  const middle = (box.top + box.bottom) / 2;
  parts.push(draw("text", { x: (box.left + box.right) / 2, y: box.bottom + 28, "text-anchor": "middle" }, x.label),
    draw("text", { transform: `translate(12 ${middle}) rotate(-90)`, "text-anchor": "middle" }, y.label));
  return parts;
}

const pathOf = (points) => points.map(([x, y], i) => `${i ? "L" : "M"}${svgNumber(x)} ${svgNumber(y)}`).join("");

function drawCurve(sounding) {
  const { curve } = sounding;
  const box = { left: 52, right: 336, top: 8, bottom: 190 };
  const spacing = curve.spacing.map((metres) => metres / region.unit.metres);
  const readable = spacing.map((_, i) => i).filter((i) => spacing[i] > 0 && curve.rho[i] > 0);
  const [left, right] = logarithmicEnds(readable.map((i) => spacing[i]), 1.3);
  const [low, high] = logarithmicEnds([...readable.map((i) => curve.rho[i]), ...curve.fit], 1.3);
  const x = scaleOf(left, right, box.left, box.right, true), y = scaleOf(low, high, box.bottom, box.top, true);
  const figure = draw("svg", { class: "figure", viewBox: "0 0 345 228", width: 345, height: 228, role: "img" });
  figure.append(draw("title", {}, `Sounding curve, ${readable.length} readings`), ...axes(box,
    { ticks: logarithmicTicks(left, right), scale: x, label: `AB/2 (${region.unit.label})` },
    { ticks: logarithmicTicks(low, high), scale: y, label: "apparent resistivity (\u03a9 m)" }));
  for (const segment of new Set(curve.segment)) {
    const fitted = readable.filter((i) => curve.segment[i] === segment && known(curve.fit[i]));
    figure.append(draw("path", { class: "fit", d: pathOf(fitted.map((i) => [x(spacing[i]), y(curve.fit[i])])) }));
  }
  for (const i of readable) figure.append(...drawReading(curve, i, x(spacing[i]), y));
  return figure;
}

function drawReading(curve, i, x, y) {
  const rho = curve.rho[i], odd = curve.segment[i] % 2 === 1;
  const style = `reading${odd ? " other" : ""}${curve.aside[i] ? " aside" : ""}`;
  const mark = odd
    ? draw("rect", { x: svgNumber(x - 3.2), y: svgNumber(y(rho) - 3.2), width: 6.4, height: 6.4, class: style })
    : draw("circle", { cx: svgNumber(x), cy: svgNumber(y(rho)), r: 3.5, class: style });
  if (!known(curve.error[i])) return [mark];
  const ends = [rho * Math.exp(-curve.error[i]), rho * Math.exp(curve.error[i])].map((end) => svgNumber(y(end)));
  return [draw("line", { x1: x, x2: x, y1: ends[0], y2: ends[1], class: "bar-line" }), mark];
}

// How deep the drawing of a sounding reaches, m: past its lowest interface and its column of probabilities.
function depthShown({ model, profile }) {
  const lowest = 1.15 * model.top[model.top.length - 1];
  return Math.max(lowest, profile ? profile.edges[profile.edges.length - 1] : 1.4 * lowest, 10);
}

// Resistivity against depth with what each layer may be, and beside it the probability of every unit.
function drawModel(sounding) {
  const { model } = sounding;
  const deepest = depthShown(sounding) / region.unit.metres;
  const box = { left: 52, right: 200, top: 8, bottom: 220 };
  const [low, high] = logarithmicEnds([...model.low, ...model.high, ...model.rho], 1.5);
  const x = scaleOf(low, high, box.left, box.right, true), y = scaleOf(0, deepest, box.top, box.bottom, false);
  const tops = model.top.map((metres) => metres / region.unit.metres);
  const bottoms = [...tops.slice(1), deepest];
  const figure = draw("svg", { class: "figure", viewBox: "0 0 345 258", width: 345, height: 258, role: "img" });
  const bands = tops.map((top, i) => draw("rect", { class: "band", x: svgNumber(x(model.low[i])), y: svgNumber(y(top)),
    width: svgNumber(x(model.high[i]) - x(model.low[i])), height: svgNumber(Math.max(0, y(bottoms[i]) - y(top))) }));
  const stairs = model.rho.flatMap((rho, i) => [[x(rho), y(tops[i])], [x(rho), y(bottoms[i])]]);
  figure.append(draw("title", {}, `Layered model of ${model.rho.length} layers, and units by probability`), ...axes(box,
    { ticks: logarithmicTicks(low, high), scale: x, label: "resistivity (\u03a9 m)" },
    { ticks: evenTicks(0, deepest, 5), scale: y, label: `depth (${region.unit.label})` }), ...bands,
    draw("path", { class: "model", d: pathOf(stairs) }), ...drawShares(sounding, y, box, deepest));
  return figure;
}

// Each unit's probability at each depth, stacked to one, with the interpreter's picks across it.
function drawShares(sounding, y, box, deepest) {
  const left = 222, right = 336;
  const slices = sharesByDepth(sounding, deepest);
  const across = scaleOf(0, 1, left, right, false);
  const line = (slice, unit) => across(slice.shares.slice(0, unit).reduce((sum, share) => sum + share, 0));
  const parts = described.units.flatMap((unit, i) => {
    if (!slices.some(({ shares }) => shares[i] > 0.004)) return [];
    const outer = slices.map((slice) => [line(slice, i + 1), y(slice.depth)]);
    const inner = slices.map((slice) => [line(slice, i), y(slice.depth)]).reverse();
    return [draw("path", { d: `${pathOf([...outer, ...inner])}Z`, fill: unit.colour })];
  });
  const names = described.units.flatMap((unit, i) => {
    const best = slices.filter(({ shares }) => shares[i] === Math.max(...shares));
    const [top, bottom] = best.length ? [y(best[0].depth), y(best[best.length - 1].depth)] : [0, 0];
    const words = unit.name.length > 19 ? `${unit.name.slice(0, 18)}\u2026` : unit.name;
    return bottom - top < 13 ? [] : [draw("text", { x: (left + right) / 2, y: svgNumber((top + bottom) / 2 + 4),
      class: "halo", "text-anchor": "middle" }, words)];
  });
  const picks = (sounding.pickDepths || []).map((depth) => svgNumber(y(depth / region.unit.metres)))
    .map((at) => draw("path", { d: `M${left - 6} ${at}H${right + 6}`, class: "pick" }));
  return [...parts, draw("path", { d: `M${left} ${box.top}H${right}V${box.bottom}H${left}Z`, class: "frame" }), ...names,
    ...picks, draw("text", { x: (left + right) / 2, y: box.bottom + 28, "text-anchor": "middle" }, "probability"),
    ...[0, 0.5, 1].map((tick) => draw("text",
      { x: svgNumber(across(tick)), y: box.bottom + 13, class: "tick", "text-anchor": "middle" }, String(tick)))];
}

// Depths in the region's unit with the share of each unit: of the profile, else of the model's layers.
function sharesByDepth({ model, profile, status }, deepest) {
  const even = (percent) => percent.map((one) => one / Math.max(1, percent.reduce((sum, other) => sum + other, 0)));
  if (!profile) {
    const tops = [...model.top.map((metres) => metres / region.unit.metres), deepest];
    return model.unit.flatMap((unit, i) => [tops[i], tops[i + 1]].map((depth) =>
      ({ depth, shares: described.units.map((_, k) => Number(k === unit)) })));
  }
  const { edges, percent } = profile;
  const inside = percent.map((one, i) => (
    { depth: (edges[i] + edges[i + 1]) / 2 / region.unit.metres, shares: even(one) }));
  const last = inside[inside.length - 1].shares;
  // Below the profile of a bound nothing is said; below a contact that was found lies what lies at its end.
  const end = status === "deeper_than" ? edges[edges.length - 1] / region.unit.metres : deepest;
  return [{ depth: 0, shares: inside[0].shares }, ...inside, { depth: end, shares: last }];
}

// A well's log as a strip with the driller's words.
function drawLog(well) {
  const deepest = well.total, height = Math.max(160, 15 * well.log.length);
  const y = (depth) => 16 + depth / deepest * height;
  const size = { viewBox: `0 0 345 ${height + 30}`, width: 345, height: height + 30 };
  const figure = draw("svg", { class: "figure", ...size, role: "img" });
  const atLeft = (at, words) => draw("text", { x: 42, y: svgNumber(at), class: "tick", "text-anchor": "end" }, words);
  figure.append(draw("title", {}, "Driller's log"), atLeft(10, region.unit.label));
  for (const tick of evenTicks(0, deepest / region.unit.metres, 5)) {
    figure.append(atLeft(y(tick * region.unit.metres) + 4, tickWords(tick)));
  }
  let lastLabel = -20;
  for (const [top, bottom, words, unit] of well.log) {
    const fill = unit === null ? "none" : described.units[unit].colour;
    const high = svgNumber(Math.max(0.5, y(bottom) - y(top)));
    figure.append(draw("rect", { x: 48, y: svgNumber(y(top)), width: 60, height: high, fill, stroke: "#555" }));
    const meant = unit === null ? "no unit claims these words" : described.units[unit].name;
    lastLabel = Math.max((y(top) + y(bottom)) / 2 + 4, lastLabel + 12);
    const said = `${words} (${meant})`;
    const shown = said.length > 40 ? `${said.slice(0, 39)}\u2026` : said;
    figure.append(draw("text", { x: 116, y: svgNumber(lastLabel) }, shown));
  }
  return figure;
}
