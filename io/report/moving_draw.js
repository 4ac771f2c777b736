// Drawing by plain SVG elements, in the page's own pixels and colours.

const SVG = document.querySelector("svg").namespaceURI; // the still pictures are always there

function put(parent, name, attributes, text) {
  const made = document.createElementNS(SVG, name);
  for (const [key, value] of Object.entries(attributes)) made.setAttribute(key, value);
  if (text !== undefined) made.textContent = text;
  parent.append(made);
  return made;
}

const ink = (role) => `var(--${role})`;
const clip = (value, low, high) => Math.min(Math.max(value, low), high);

function line(parent, x1, y1, x2, y2, role, more = {}) {
  return put(parent, "line", { x1, y1, x2, y2, stroke: ink(role), "stroke-width": 1, ...more });
}

function label(parent, x, y, text, more = {}) {
  return put(parent, "text", { x, y, fill: ink("ink"), "font-size": 12, ...more }, text);
}

// A number of so many significant digits, as the rest of the report writes it.
function say(value, digits = 4) {
  if (value === null || value === undefined || Number.isNaN(value)) return "unknown";
  if (value === "never" || !Number.isFinite(value)) return "never";
  if (Math.abs(value) < 1e-12) return "0";
  const [mantissa, power] = value.toExponential(digits - 1).split("e");
  const exponent = Number(power);
  if (exponent < -4 || exponent > digits + 2) return `${Number(mantissa)}e${exponent}`.replace("-", "−");
  return String(Number(value.toPrecision(digits))).replace("-", "−");
}

const withUnit = (value, unit, digits = 4) => {
  const text = say(value, digits);
  return unit === "" || unit === "1" || text === "never" ? text : `${text} ${unit}`;
};

// Round marks inside [low, high], about `count` of them.
function marks(low, high, count) {
  const raw = (high - low) / count;
  const power = 10 ** Math.floor(Math.log10(raw));
  const step = power * [1, 2, 5, 10].find((each) => each * power >= raw);
  const found = [];
  for (let i = Math.ceil(low / step - 1e-9); i * step <= high + 1e-9 * step; i += 1) found.push(i * step);
  return found;
}

// 1, 2, 5 of each decade; decades alone over a wide span.
function gainMarks(low, high) {
  const steps = high / low > 1e3 ? [1] : high / low > 15 ? [1, 2, 5] : [1, 1.5, 2, 3, 4, 5, 7];
  const found = [];
  for (let decade = Math.floor(Math.log10(low)); decade <= Math.ceil(Math.log10(high)); decade += 1) {
    for (const step of steps) {
      const mark = Number(`${step}e${decade}`);
      if (mark >= low && mark <= high) found.push(mark);
    }
  }
  return found;
}

// A frame of two hairlines with marks and the axis names; gives the two scales.
function axes(parent, box, x, y) {
  const [left, top, wide, tall] = box;
  const atX = (value) => left + ((value - x.low) / (x.high - x.low)) * wide;
  const atY = (value) => top + tall - ((value - y.low) / (y.high - y.low)) * tall;
  line(parent, left, top, left, top + tall, "ink", { "stroke-width": 0.8 });
  line(parent, left, top + tall, left + wide, top + tall, "ink", { "stroke-width": 0.8 });
  for (const mark of marks(y.low, y.high, tall < 110 ? 3 : 5)) {
    line(parent, left - 4, atY(mark), left, atY(mark), "ink", { "stroke-width": 0.8 });
    label(parent, left - 7, atY(mark) + 4, say(mark), { "text-anchor": "end", "font-size": 11 });
  }
  for (const mark of marks(x.low, x.high, wide < 330 ? 4 : 7)) {
    line(parent, atX(mark), top + tall, atX(mark), top + tall + 4, "ink", { "stroke-width": 0.8 });
    if (!x.bare) label(parent, atX(mark), top + tall + 16, say(mark), { "text-anchor": "middle", "font-size": 11 });
  }
  if (x.name) label(parent, left + wide / 2, top + tall + 33, x.name, { "text-anchor": "middle" });
  label(parent, left, top - 7, y.name, {});
  return { atX, atY };
}

function trace(xs, ys) {
  let path = "";
  for (let i = 0; i < xs.length; i += 1) path += `${i ? "L" : "M"}${xs[i].toFixed(1)},${ys[i].toFixed(1)}`;
  return path;
}

function stairs(xs, ys, end) {
  let path = "";
  for (let i = 0; i < xs.length; i += 1) {
    path += `${i ? "H" : "M"}${xs[i].toFixed(1)}${i ? "V" : ","}${ys[i].toFixed(1)}`;
  }
  return `${path}H${end.toFixed(1)}`;
}

function area(xs, low, high) {
  const back = [...xs.keys()].reverse();
  return `${trace(xs, low)}${trace(back.map((i) => xs[i]), back.map((i) => high[i])).replace("M", "L")}Z`;
}

// A closed diamond, the mark of a closed-loop pole.
const diamond = (x, y, r) => `M${x - r},${y}L${x},${y - r}L${x + r},${y}L${x},${y + r}Z`;

// An SVG of the asked size in a container, its name for a screen reader.
function canvas(container, wide, tall, said) {
  container.replaceChildren();
  return put(container, "svg", {
    width: wide, height: tall, viewBox: `0 0 ${wide} ${tall}`, role: "img", "aria-label": said,
  });
}

// 32-bit numbers, gain by gain.
function unpack(text, count) {
  const bytes = Uint8Array.from(atob(text), (sign) => sign.charCodeAt(0));
  const values = new Float32Array(bytes.buffer);
  const rows = [];
  for (let i = 0; i < values.length; i += count) rows.push(values.subarray(i, i + count));
  return rows;
}
