// Numbers and facts in words, and elements built from text alone.

const described = JSON.parse(document.getElementById("described").textContent);
const region = described.region;
const SVG = "http://www.w3.org/2000/svg";

const { statusWords } = described;

// An element with attributes and children; strings become text, never markup.
function make(tag, attributes = {}, ...children) {
  const element = document.createElement(tag);
  for (const [name, value] of Object.entries(attributes)) {
    if (typeof value === "function") element.addEventListener(name, value);
    else if (value !== null && value !== undefined) element.setAttribute(name, value);
  }
  element.append(...children.flat().filter((child) => child !== null));
  return element;
}

function draw(tag, attributes = {}, ...children) {
  const element = document.createElementNS(SVG, tag);
  for (const [name, value] of Object.entries(attributes)) element.setAttribute(name, value);
  element.append(...children.flat().filter((child) => child !== null));
  return element;
}

const known = (value) => value !== null && value !== undefined && Number.isFinite(value);

const formats = {};

function grouped(value, decimals = 0) {
  formats[decimals] ??= new Intl.NumberFormat("en-US",
    { minimumFractionDigits: decimals, maximumFractionDigits: decimals });
  return formats[decimals].format(value).replace("-", "\u2212");
}

const lengthNumber = (metres, decimals = 0) => grouped(metres / region.unit.metres, decimals);
const lengthWords = (metres, decimals = 0) =>
  known(metres) ? `${lengthNumber(metres, decimals)} ${region.unit.label}` : "not known";

function distanceWords(metres) {
  if (region.unit.label === "m") {
    return metres < 950 ? `${Math.round(metres / 10) * 10} m` : `${grouped(metres / 1000, 1)} km`;
  }
  const feet = metres / 0.3048;
  return feet < 1000 ? `${Math.round(feet / 50) * 50} ft` : `${grouped(feet / 5280, 1)} mi`;
}

function resistivityWords(value) {
  return `${value < 10 ? value.toFixed(1) : Math.round(value)} \u03a9 m`;
}

function valueWords(quantity, value) {
  if (!known(value)) return "no value";
  if (quantity === "probability") return value.toFixed(2);
  if (quantity === "resistivity") return resistivityWords(value);
  return lengthWords(value, 1);
}

// Plain words for a probability; the number always stands beside them.
function likelihoodWords(probability) {
  const [, words] = described.likelihoods.find(([least]) => probability >= least);
  return words;
}

const counted = (count, thing) => `${grouped(count)} ${thing}${count === 1 ? "" : "s"}`;

const named = (name) => make("span", { class: "name" }, name);
const svgNumber = (value) => value.toFixed(1);

// Round numbers between two ends: 1, 2, 5 and their tens.
function evenTicks(low, high, wanted) {
  const raw = (high - low) / wanted;
  const power = 10 ** Math.floor(Math.log10(raw));
  const step = [1, 2, 5, 10].map((m) => m * power).find((candidate) => candidate >= raw * 0.999);
  const ticks = [];
  for (let tick = Math.ceil(low / step - 1e-9) * step; tick <= high + 1e-9 * step; tick += step) {
    ticks.push(Math.abs(tick) < step * 1e-6 ? 0 : tick);
  }
  return ticks;
}

function logarithmicTicks(low, high) {
  const spanned = Math.log10(high / low);
  const steps = spanned < 0.9 ? [1, 1.5, 2, 3, 5, 7] : spanned < 3.1 ? [1, 2, 5] : [1];
  const ticks = [];
  for (let decade = Math.floor(Math.log10(low)); decade <= Math.ceil(Math.log10(high)); decade += 1) {
    for (const step of steps) {
      const tick = step * 10 ** decade;
      if (tick >= low * 0.999 && tick <= high * 1.001) ticks.push(tick);
    }
  }
  return ticks;
}

const tickWords = (value) => Math.abs(value) >= 10000 ? grouped(value) : String(Number(value.toPrecision(4)));
