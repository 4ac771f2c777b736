// The gain ribbon that is dragged: a row a requirement, with its slack as a bead beside it.

function layout(wide) {
  const narrow = wide < 560;
  const left = narrow ? 14 : 158;
  const gauge = narrow ? 70 : 96;
  const text = narrow ? 0 : 58;
  return {
    narrow, left, gauge, row: narrow ? 39 : 27, top: 40, wide: wide - left - gauge - text - 26,
    gaugeLeft: wide - gauge - text - 6, text: wide - 2, lift: narrow ? 10 : 0,
  };
}

function ribbonLines() {
  const rows = data.rows.map((row) => ({ name: row.said, intervals: row.intervals }));
  rows.push({ name: "all together", intervals: data.together, strong: true });
  rows.push({ name: narrowName(), intervals: data.plausible, strong: true, hatched: true });
  return rows;
}

const narrowName = () => "on plausible plants";

function drawRibbon(wide) {
  const place = layout(wide);
  const rows = ribbonLines();
  const tall = place.top + rows.length * place.row + 62;
  const svg = canvas(ribbon, wide, tall, "");
  svg.setAttribute("aria-hidden", "true");
  svg.removeAttribute("role");
  const atK = (gain) => place.left + (Math.log(gain / low) / Math.log(high / low)) * place.wide;
  const bottom = place.top + rows.length * place.row;
  scale = { ...place, atK, bottom, rows };
  hatching(svg);
  rows.forEach((row, i) => ribbonRow(svg, row, place.top + (i + 0.5) * place.row));
  line(svg, place.left, bottom + 6, place.left + place.wide, bottom + 6, "ink", { "stroke-width": 0.8 });
  let free = -Infinity;
  for (const mark of gainMarks(low, high)) {
    line(svg, atK(mark), bottom + 6, atK(mark), bottom + 10, "ink");
    if (atK(mark) - free < 34) continue;
    free = atK(mark);
    label(svg, free, bottom + 23, say(mark), { "text-anchor": "middle", "font-size": 11 });
  }
  const unit = data.units.gain === "1" || data.units.gain === "" ? "" : ` (${data.units.gain})`;
  label(svg, place.left, bottom + 42, "← lower K", { "font-weight": 600 });
  label(svg, place.left + place.wide, bottom + 42, "higher K →", { "text-anchor": "end", "font-weight": 600 });
  label(svg, place.left + place.wide / 2, bottom + 57, `loop gain K${unit}, logarithmic`, { "text-anchor": "middle" });
  gaugeHead(svg);
  const chosen = atK(data.gains[data.chosen]);
  line(svg, chosen, place.top - 6, chosen, bottom + 6, "ink", { "stroke-dasharray": "2 3" });
  scale.live = put(svg, "g", {});
}

function hatching(svg) {
  const pattern = put(put(svg, "defs", {}), "pattern", {
    id: "moving-hatch", width: 6, height: 6, patternUnits: "userSpaceOnUse", patternTransform: "rotate(45)",
  });
  line(pattern, 0, 0, 0, 6, "holds", { "stroke-width": 3 });
}

function ribbonRow(svg, row, middle) {
  const { left, wide, narrow, lift } = scale;
  const y = middle + lift;
  const name = { "font-weight": row.strong ? 700 : 400, "text-anchor": narrow ? "start" : "end" };
  label(svg, narrow ? 2 : left - 9, narrow ? y - 12 : y + 4, row.name, name);
  line(svg, left, y, left + wide, y, "faint");
  const half = row.strong ? 8 : 5.5;
  for (const [from, to] of row.intervals) {
    const first = Math.max(from || low, low);
    const last = Math.min(to === null ? high : to, high);
    if (!(last > first)) continue;
    const x = scale.atK(first);
    put(svg, "rect", {
      x, y: y - half, width: scale.atK(last) - x, height: 2 * half,
      fill: row.hatched ? "url(#moving-hatch)" : ink("holds"), stroke: row.hatched ? ink("holds") : "none",
    });
    for (const [edge, inside] of [[from, from && from >= low], [to, to !== null && to <= high]]) {
      if (inside) line(svg, scale.atK(edge), y - half - 3, scale.atK(edge), y + half + 3, "ink");
    }
  }
  if (!row.intervals.length) {
    label(svg, left + wide / 2, y + 4, "at no gain", { "text-anchor": "middle", fill: ink("limit") });
  }
}

function gaugeHead(svg) {
  const { gaugeLeft, gauge, top, rows, row, narrow } = scale;
  const middle = gaugeLeft + gauge / 2;
  label(svg, middle, top - 24, "slack", { "text-anchor": "middle", "font-weight": 600 });
  label(svg, middle - 5, top - 8, narrow ? "miss" : "missed", { "text-anchor": "end", "font-size": 11 });
  label(svg, middle + 5, top - 8, "room", { "font-size": 11 });
  const count = data.rows.length;
  if (count) line(svg, middle, top, middle, top + count * row, "limit", { "stroke-width": 1.4 });
  return rows;
}

function moveRibbon(rows) {
  const live = scale.live;
  live.replaceChildren();
  const x = scale.atK(data.gains[now]);
  line(live, x, scale.top - 8, x, scale.bottom + 6, "model", { "stroke-width": 2 });
  rows.forEach((each, i) => {
    const y = scale.top + (i + 0.5) * scale.row + scale.lift;
    gaugeRow(live, each, y);
    const mark = { cx: x, cy: y, r: 4.5, stroke: ink("model"), "stroke-width": 1.6 };
    put(live, "circle", { ...mark, fill: each.met ? ink("model") : ink("paper") });
  });
  put(live, "path", {
    d: `M${x - 13},${scale.top - 30}h26v15l-13,10l-13,-10Z`, fill: ink("model"), stroke: ink("paper"), class: "grip",
  });
  label(live, x, scale.top - 18, "◂ ▸", { "text-anchor": "middle", fill: ink("paper"), "data-on": ".grip" });
}

function gaugeRow(live, each, y) {
  const { gaugeLeft, gauge } = scale;
  const middle = gaugeLeft + gauge / 2;
  const to = (value) => middle + clip(value, -1, 1) * (gauge / 2 - 6);
  line(live, gaugeLeft, y, gaugeLeft + gauge, y, "faint");
  if (each.worst !== null) {
    put(live, "rect", {
      x: to(each.worst) - 2, y: y - 4, width: to(each.upper) - to(each.worst) + 4, height: 8, rx: 3, class: "many",
      fill: ink("model"), "fill-opacity": 0.3, stroke: ink("model"), "stroke-width": 0.8,
    });
  }
  if (each.slack !== null) {
    put(live, "circle", {
      cx: to(each.slack), cy: y, r: 5, class: "bead", fill: each.met ? ink("model") : ink("paper"),
      stroke: ink("model"), "stroke-width": 1.8,
    });
  }
  const worst = each.worst === null ? each.slack : Math.min(each.worst, each.slack ?? Infinity);
  const shown = { "text-anchor": "end", fill: ink(worst !== null && worst < 0 ? "limit" : "ink") };
  if (!scale.narrow) label(live, scale.text, y + 4, percent(worst), shown);
  else label(live, gaugeLeft + gauge, y - 12, percent(worst), { ...shown, "font-size": 11 });
}
