// The pictures that follow the ribbon: locus, test step, headroom.

const TALLEST = 320; // both axes have one scale

function drawLocus(wide) {
  const [left, right, down, up] = data.locus.view;
  const steep = (up - down) / (right - left);
  const across = Math.min(wide - 70, TALLEST / steep);
  const box = [58, 24, across, across * steep];
  const holder = part("locus");
  const svg = canvas(holder, wide, box[1] + box[3] + 42, "Locus with the closed-loop poles at the ribbon's K");
  const names = [{ low: left, high: right, name: "real part (1/s)" }, { low: down, high: up, name: "imaginary part (1/s)" }];
  const { atX, atY } = axes(svg, box, names[0], names[1]);
  const window_ = put(svg, "svg", { x: box[0], y: box[1], width: box[2], height: box[3] });
  const [x, y] = [(re) => atX(re) - box[0], (im) => atY(im) - box[1]];
  line(window_, x(0), 0, x(0), box[3], "ink", { "stroke-width": 0.6 });
  line(window_, 0, y(0), box[2], y(0), "ink", { "stroke-width": 0.6 });
  for (const each of data.locus.lines) {
    put(window_, "path", { d: trace(each.re.map(x), each.im.map(y)), fill: "none", stroke: ink("ink") });
  }
  const cross = { stroke: ink("ink"), "stroke-width": 1.8, fill: "none" };
  for (const [re, im] of data.locus.poles) {
    put(window_, "path", { d: `M${x(re) - 5},${y(im) - 5}l10,10m0,-10l-10,10`, ...cross });
  }
  for (const [re, im] of data.locus.zeros) put(window_, "circle", { cx: x(re), cy: y(im), r: 5, ...cross });
  poles(window_, x, y, data.chosen, { r: 5.5, fill: "none", stroke: ink("ink"), "stroke-dasharray": "2 2" });
  return { live: put(window_, "g", {}), x, y };
}

function poles(parent, x, y, index, { r, ...style }) {
  for (const branch of data.locus.branches) {
    const [re, im] = [branch.re[index], branch.im[index]];
    if (typeof re === "number" && typeof im === "number") {
      put(parent, "path", { d: diamond(x(re), y(im), r), class: "pole", ...style });
    }
  }
}

// Ends of an axis that stay while K moves: what the chosen K needs, with room for livelier gains.
function spanOf(lists, room_) {
  const every = lists.flatMap((list) => [...list]).filter(Number.isFinite);
  const [least, most] = [Math.min(...every), Math.max(...every)];
  const more = room_ * (most - least || Math.abs(most) || 1);
  return { low: least - more, high: most + more };
}

function drawStep(wide) {
  const { run, units, band } = data;
  const shown = run.shown;
  const [factor, unit] = shown < 0.5 ? [1e3, "ms"] : shown > 10800 ? [1 / 3600, "h"] : [1, "s"];
  const goal = run.response + run.start + run.step;
  const i = data.chosen;
  const [top, mid] = [[62, 26, wide - 74, 190], [62, 262, wide - 74, 110]];
  const svg = canvas(part("step"), wide, 414, "Test step at the ribbon's K: response and command over time");
  const time = { low: 0, high: shown * factor };
  const levels = spanOf([chosenFitted.response, bands.response_low[i], bands.response_high[i], [goal]], 0.3);
  const drives = spanOf([chosenFitted.command, bands.command_low[i], bands.command_high[i]], 0.8);
  const above = axes(svg, top, { ...time, bare: true }, { ...levels, name: `response (${units.response})` });
  const name = `time since the controller saw the new setpoint (${unit})`;
  const below = axes(svg, mid, { ...time, name }, { ...drives, name: `command (${units.command})` });
  const views = [[top, above, levels], [mid, below, drives]].map(([box, axis, span]) => {
    const view = put(svg, "svg", { x: box[0], y: box[1], width: box[2], height: box[3] });
    return { view, span, x: (t) => axis.atX(t * factor) - box[0], y: (v) => axis.atY(v) - box[1], end: box[2], tall: box[3] };
  });
  const [response, command] = views;
  const dashes = { "stroke-dasharray": "6 3" };
  line(response.view, 0, response.y(goal), response.end, response.y(goal), "setpoint", dashes);
  bounds(response, data.limits, "response");
  bounds(command, data.limits, "command");
  const before = { fill: "none", stroke: ink("ink"), "stroke-width": 1, "stroke-dasharray": "2 3" };
  put(response.view, "path", { d: trace(chosenFitted.time.map(response.x), chosenFitted.response.map(response.y)), ...before });
  put(command.view, "path", { d: stairs(chosenFitted.held.map(command.x), chosenFitted.command.map(command.y), command.end), ...before });
  for (const each of views) each.live = put(each.view, "g", {});
  return { views, time: band.time };
}

function bounds(view, limits, quantity) {
  for (const limit of limits) {
    if (!limit.name.startsWith(quantity) || limit.name.endsWith("rate")) continue;
    if (limit.limit < view.span.low || limit.limit > view.span.high) continue;
    const y = view.y(limit.limit);
    line(view.view, 0, y, view.end, y, "limit", { "stroke-dasharray": "9 3 2 3" });
    label(view.view, 4, y - 3, `limit of the ${quantity}`, { fill: ink("limit"), "font-size": 11 });
  }
}

function moveStep(step, fitted) {
  const roles = ["model", "command"];
  step.views.forEach((view, i) => {
    view.live.replaceChildren();
    const quantity = ["response", "command"][i];
    const [least, most] = [bands[`${quantity}_low`][now], bands[`${quantity}_high`][now]];
    if (Number.isFinite(least[0])) {
      const xs = step.time.map(view.x);
      const d = area(xs, Array.from(least, view.y), Array.from(most, view.y));
      put(view.live, "path", { d, fill: ink(roles[i]), "fill-opacity": 0.22, stroke: ink(roles[i]), "stroke-width": 0.5 });
    }
    const clipped = (value) => clip(view.y(value), -50, view.tall + 50);
    const d = i === 0
      ? trace(fitted.time.map(view.x), fitted.response.map(clipped))
      : stairs(fitted.held.map(view.x), fitted.command.map(clipped), view.end);
    put(view.live, "path", { d, fill: "none", stroke: ink(roles[i]), "stroke-width": 2 });
  });
}

function drawHeadroom(wide) {
  const narrow = wide < 560;
  const [left, row] = narrow ? [8, 44] : [130, 30];
  const holder = part("headroom");
  const svg = canvas(holder, wide, 12 + data.limits.length * row + 24, "Headroom to the hardware limits at the ribbon's K");
  const end = narrow ? wide - 12 : wide - 230;
  data.limits.forEach((limit, i) => {
    const y = 8 + (i + (narrow ? 0.65 : 0.5)) * row;
    label(svg, narrow ? left : left - 10, narrow ? y - 12 : y + 4, limit.name, { "text-anchor": narrow ? "start" : "end" });
    line(svg, left, y, end, y, "ink", { "stroke-width": 0.8 });
    line(svg, left, y - 5, left, y + 5, "ink");
    line(svg, end, y - 9, end, y + 9, "limit", { "stroke-width": 2.4 });
  });
  const foot = 8 + data.limits.length * row + 16;
  label(svg, left, foot, "operating point, or rest", { "font-size": 11 });
  label(svg, end, foot, "limit", { "text-anchor": "end", "font-size": 11 });
  return { live: put(svg, "g", {}), left, end, row, narrow, wide };
}

function moveHeadroom(view, fitted) {
  view.live.replaceChildren();
  data.limits.forEach((limit, i) => {
    const y = 8 + (i + (view.narrow ? 0.65 : 0.5)) * view.row;
    const used = (value) => (value - limit.start) / (limit.limit - limit.start);
    const to = (value) => view.left + clip(used(value), 0, 1) * (view.end - view.left);
    const worst = at(limit.worst, now);
    const known = typeof worst === "number" && data.share.stable[now] === 1;
    const passed = known && used(worst) > 1;
    const role = passed ? "limit" : limit.role;
    if (known) {
      put(view.live, "rect", {
        x: view.left, y: y - 6, width: to(worst) - view.left, height: 12, fill: ink(role),
        "fill-opacity": passed ? 0.25 : 1, stroke: ink(role),
      });
    }
    if (data.stable[now] && limit.name in fitted.extremes) {
      const own = fitted.extremes[limit.name];
      put(view.live, "circle", { cx: to(own), cy: y, r: 4.5, class: "bead", fill: ink("paper"), stroke: ink("ink"), "stroke-width": 1.6 });
    }
    let text = "not predicted: a plant is unstable";
    if (known) {
      const left = 100 * (1 - used(worst));
      text = passed ? "PASSED" : `${say(left, left > 10 ? 2 : 1)} % left`;
      text += `: worst ${say(worst)} of ${withUnit(limit.limit, limit.unit)}`;
    }
    const style = { fill: ink(passed || !known ? "limit" : "ink"), "font-size": 11 };
    if (view.narrow) label(view.live, view.end, y - 12, text, { ...style, "text-anchor": "end" });
    else label(view.live, view.end + 9, y + 4, text, style);
  });
}
