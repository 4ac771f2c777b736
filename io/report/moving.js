// The moving gain sheet: one ribbon is dragged, everything else follows.

const room = document.getElementById("moving");
const data = JSON.parse(document.getElementById("moving-data").textContent);
const part = (name) => room.querySelector(`[data-part="${name}"]`);
const ribbon = part("ribbon");
const low = data.gains[0];
const high = data.gains[data.gains.length - 1];
const bands = Object.fromEntries(
  ["response_low", "response_high", "command_low", "command_high"].map((name) => [
    name,
    data.band.time.length ? unpack(data.band[name], data.band.time.length) : [],
  ]),
);
const chosenFitted = fittedAt(data, data.chosen);
let now = data.chosen;
let scale = null; // of the ribbon, in pixels

const at = (values, index) => (values === null ? null : values[index]);
const met = (row, value) => {
  if (value === null || value === "never") return false;
  return row.sense === "at_most" ? value <= row.limit : value >= row.limit;
};

// Room to the bound as a share of it: 0 on the bound, below zero it is missed.
function slack(row, value) {
  if (value === null) return null;
  if (value === "never" || value === Infinity) return row.sense === "at_most" ? -Infinity : Infinity;
  const left = row.sense === "at_most" ? row.limit - value : value - row.limit;
  if (row.limit === 0) return left >= 0 ? 0 : -Infinity;
  return left / Math.abs(row.limit);
}

function rowsAt(index, fitted) {
  const stable = data.stable[index];
  return data.rows.map((row) => {
    const own = stable ? fitted.values[row.name] : undefined;
    const best = stable ? own ?? row.values[index] : null;
    const ends = [slack(row, row.low[index]), slack(row, row.high[index])];
    const known = ends.every((end) => end !== null);
    return {
      row, best, slack: slack(row, best === Infinity ? "never" : best), met: stable && met(row, best),
      worst: known ? Math.min(...ends) : null, upper: known ? Math.max(...ends) : null,
    };
  });
}

function percent(value) {
  if (value === null) return "–";
  if (value === -Infinity) return "never";
  if (value === Infinity) return "free";
  const shown = 100 * value;
  return `${say(Math.abs(shown) < 10 ? Number(shown.toFixed(1)) : Math.round(shown), 4)} %`;
}

const share = (value) => `${say(Math.floor(1000 * value + 1e-9) / 10)} %`;

function verdict(rows, index) {
  if (!data.stable[index]) return "The fitted plant is unstable here.";
  const missed = rows.filter((each) => !each.met).map((each) => each.row.said);
  const loose = 1 - data.share.stable[index];
  const fitted = missed.length
    ? `On the fitted plant ${missed.join(", ")} ${missed.length > 1 ? "fail" : "fails"}.`
    : "On the fitted plant every requirement holds.";
  if (index === data.chosen) return `${fitted} ${data.checked}`;
  const many = loose > 0
    ? `Of ${data.plants} plausible plants run here ${share(loose)} are unstable.`
    : `Of ${data.plants} plausible plants run here ${share(data.share.meeting[index])} meet all together ` +
      `(${share(data.confidence)} asked for).`;
  return `${fitted} ${many}`;
}

function gainText(index) {
  const ratio = data.gains[index] / data.gains[data.chosen];
  const how = index === data.chosen ? "the chosen one" : `${say(ratio, 3)} times the chosen one`;
  return `K = ${withUnit(data.gains[index], data.units.gain)}, ${how}`;
}

let views = null;

function drawAll() {
  const wide = Math.floor(ribbon.clientWidth);
  drawRibbon(wide);
  views = {
    locus: drawLocus(wide),
    step: data.run.step !== 0 ? drawStep(wide) : null,
    headroom: data.limits.length ? drawHeadroom(wide) : null,
  };
  show(now);
}

function show(index) {
  now = clip(index, 0, data.gains.length - 1);
  const fitted = now === data.chosen ? chosenFitted : fittedAt(data, now);
  const rows = rowsAt(now, fitted);
  const said = verdict(rows, now);
  moveRibbon(rows);
  views.locus.live.replaceChildren();
  poles(views.locus.live, views.locus.x, views.locus.y, now, { r: 6.5, fill: ink("model"), stroke: ink("paper") });
  if (views.step) moveStep(views.step, fitted);
  if (views.headroom) moveHeadroom(views.headroom, fitted);
  ribbon.setAttribute("aria-valuenow", String(now));
  ribbon.setAttribute("aria-valuetext", `${gainText(now)}. ${said}`);
  part("gain").textContent = gainText(now);
  part("verdict").textContent = said;
  part("study").hidden = now === data.chosen;
  part("back").disabled = now === data.chosen;
  room.dispatchEvent(new CustomEvent("gain-moved", {
    detail: { index: now, gain: data.gains[now], stable: data.stable[now], rows, fitted },
  }));
}

function nearest(x) {
  const wanted = Math.log(low) + ((x - scale.left) / scale.wide) * Math.log(high / low);
  let best = 0;
  data.gains.forEach((gain, i) => {
    if (Math.abs(Math.log(gain) - wanted) < Math.abs(Math.log(data.gains[best]) - wanted)) best = i;
  });
  return Math.abs(scale.atK(data.gains[data.chosen]) - x) < 3 ? data.chosen : best;
}

const moveTo = (event) => show(nearest(event.clientX - ribbon.getBoundingClientRect().left));

const KEYS = {
  ArrowRight: () => now + 1, ArrowUp: () => now + 1, ArrowLeft: () => now - 1, ArrowDown: () => now - 1,
  PageUp: () => now + 10, PageDown: () => now - 10, Home: () => 0, End: () => data.gains.length - 1,
};

function begin() {
  room.hidden = false;
  document.body.classList.add("moves");
  ribbon.setAttribute("aria-valuemin", "0");
  ribbon.setAttribute("aria-valuemax", String(data.gains.length - 1));
  ribbon.addEventListener("keydown", (event) => {
    if (!(event.key in KEYS) || event.ctrlKey || event.metaKey || event.altKey) return;
    event.preventDefault();
    show(KEYS[event.key]());
  });
  ribbon.addEventListener("pointerdown", (event) => {
    const x = event.clientX - ribbon.getBoundingClientRect().left;
    if (event.button !== 0 || x < scale.left - 14 || x > scale.left + scale.wide + 14) return;
    ribbon.setPointerCapture(event.pointerId);
    moveTo(event);
  });
  ribbon.addEventListener("pointermove", (event) => {
    if (ribbon.hasPointerCapture(event.pointerId)) moveTo(event);
  });
  part("back").addEventListener("click", () => {
    show(data.chosen);
    ribbon.focus();
  });
  let wide = room.clientWidth;
  addEventListener("resize", () => {
    if (room.clientWidth !== wide && room.clientWidth > 0) {
      wide = room.clientWidth;
      drawAll();
    }
  });
  drawAll();
}

begin();
