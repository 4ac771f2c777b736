// The shipped law around the fitted plant, sample by sample, as gainwright.design.sampled runs it.

const sum = (values) => values.reduce((total, value) => total + value, 0);

// Setpoint and response coefficients grow with K; command and memory belong to the zeros and stay.
function lawAt(law, factor) {
  return {
    command: law.command,
    memory: law.memory,
    setpoint: law.setpoint.map((c) => c * factor),
    response: law.response.map((c) => c * factor),
  };
}

// Steady state at a setpoint, in deviations: u = R r - S y with the law's static gains.
function restAt(plant, law, setpoint) {
  const total = sum(law.command);
  const integrates = Math.abs(total) < 1e-12;
  const below = integrates ? 1 : total;
  const feedback = sum(law.response) / below;
  const ahead = sum(law.setpoint) / below;
  const gain = plant.static_gain;
  const moving = plant.integrators > 0;
  let response = setpoint;
  if (!integrates) response = moving ? (ahead * setpoint) / feedback : (gain * ahead * setpoint) / (1 + gain * feedback);
  return { response, command: moving ? 0 : response / gain };
}

// The difference equation in transposed form, with its clamp in level and in rate.
function controller(law, goal, clamp) {
  const r = law.setpoint.map((c) => c * goal);
  const y = law.response;
  const [, m1, m2] = law.memory;
  const g1 = m1 - law.command[1];
  const g2 = m2 - law.command[2];
  let first = 0;
  let second = 0;
  let before = 0;
  return (seen) => {
    const wanted = first + r[0] - y[0] * seen;
    const low = Math.max(clamp.low, before - clamp.change);
    const high = Math.min(clamp.high, before + clamp.change);
    const given = Math.min(Math.max(wanted, low), high);
    first = second + r[1] - y[1] * seen + g1 * given - m1 * wanted;
    second = r[2] - y[2] * seen + g2 * given - m2 * wanted;
    before = given;
    return [given, given !== wanted];
  };
}

// [y(1/m) ... y(m/m), x'] = step [x, u[k-d-1], u[k-d]]
function smoothPlant(plant, samples) {
  const n = plant.states;
  const m = plant.points;
  const state = new Float64Array(n + 2);
  const out = new Float64Array(n + m);
  const sent = new Float64Array(samples + plant.lag);
  let steepest = 0;
  const times = (row) => {
    let total = 0;
    for (let j = 0; j < n + 2; j += 1) total += row[j] * state[j];
    return total;
  };
  return {
    advance(k, given, response) {
      sent[k + plant.lag] = given;
      state[n] = state[n + 1];
      state[n + 1] = sent[k];
      for (let i = 0; i < n + m; i += 1) out[i] = times(plant.step[i]);
      for (const row of plant.slope) steepest = Math.max(steepest, Math.abs(times(row)));
      for (let i = 0; i < m; i += 1) response[k * m + i] = out[i];
      for (let i = 0; i < n; i += 1) state[i] = out[m + i];
      if (plant.seen) return plant.seen.reduce((total, share, i) => total + share * (i < n ? state[i] : state[n + 1]), 0);
      return plant.filtered ? state[n - 1] : out[m - 1];
    },
    steepest: () => steepest,
  };
}

// A stretch of T v' = u - friction sign(v) - v in closed form; the drive may come to rest in it once.
function glide(drive, speed, level, length) {
  const phase = (v, left) => {
    const way = v !== 0 ? Math.sign(v) : Math.sign(level);
    const stuck = v === 0 && Math.abs(level) <= drive.friction;
    const final = stuck ? 0 : level - way * drive.friction;
    const stops = v !== 0 && final * way < 0;
    const until = stops ? drive.lag * Math.log1p(-v / final) : Infinity;
    const time = Math.min(left, until);
    const decay = Math.exp(-time / drive.lag);
    const moved = drive.gain * (final * time + (v - final) * drive.lag * (1 - decay));
    return [until <= left ? 0 : final + (v - final) * decay, moved, left - time];
  };
  const [v, moved, left] = phase(speed, length);
  if (left <= 0) return [v, moved];
  const [after, more] = phase(v, left);
  return [after, moved + more];
}

function roughPlant(plant, samples) {
  const drive = plant.drive;
  const m = plant.points;
  const stride = plant.interval / m;
  const lag = Math.floor(drive.delay / plant.interval + 1e-9);
  const part = Math.max(drive.delay - lag * plant.interval, 0);
  const smooth = plant.filter_time > 0 ? Math.exp(-stride / plant.filter_time) : 0;
  const sent = new Float64Array(samples + lag + 1);
  let speed = 0;
  let place = 0;
  let seen = 0;
  let fastest = 0;
  return {
    advance(k, given, response) {
      sent[k + lag + 1] = given;
      for (let j = 0; j < m; j += 1) {
        const share = Math.min(Math.max(part - j * stride, 0), stride);
        const [before, moved] = glide(drive, speed, sent[k], share);
        const [after, more] = glide(drive, before, sent[k + 1], stride - share);
        const next = place + moved + more;
        if (smooth === 0) {
          seen = next;
        } else {
          const bend = (next - place) / -Math.log(smooth);
          seen = next - bend + (seen - place + bend) * smooth;
        }
        [speed, place] = [after, next];
        response[k * m + j] = place;
        fastest = Math.max(fastest, Math.abs(speed));
      }
      return seen;
    },
    steepest: () => fastest * Math.abs(drive.gain),
  };
}

// A valve that sticks: its stem stays until the command is the band away, then comes to rest short of it.
function through(valve) {
  if (!valve) return (given) => given;
  let stem = 0;
  return (given) => {
    const wanted = given + valve.above;
    if (Math.abs(wanted - stem) > valve.band) stem = wanted - Math.sign(wanted - stem) * valve.short;
    return stem;
  };
}

// A setpoint step or a push on the command, both at the first sample, from rest; deviations from that rest.
function runLoop(data, law, rest, step, push) {
  const { plant, run } = data;
  const { lowest, highest, rate } = run.clamp;
  const clamp = {
    low: lowest === null ? -Infinity : lowest - rest.command,
    high: highest === null ? Infinity : highest - rest.command,
    change: rate === null ? Infinity : rate * plant.interval,
  };
  const response = new Float64Array(run.samples * plant.points);
  const command = new Float64Array(run.samples);
  const limited = new Uint8Array(run.samples);
  const rig = plant.drive ? roughPlant(plant, run.samples) : smoothPlant(plant, run.samples);
  const decide = controller(law, step, clamp);
  const moved = through(plant.drive ? null : plant.valve);
  let seen = 0;
  for (let k = 0; k < run.samples; k += 1) {
    const [given, cut] = decide(seen);
    command[k] = given;
    limited[k] = cut ? 1 : 0;
    seen = rig.advance(k, moved(command[k]) + push, response);
  }
  return { response, command, limited, steepest: rig.steepest() };
}

// Largest value from zero on, refined by a parabola through its neighbours, or where two curves meet in a corner.
function peakOf(values, scale) {
  let top = 0;
  for (let i = 1; i < values.length; i += 1) if (values[i] * scale > values[top] * scale) top = i;
  const middle = Math.min(Math.max(top, 1), Math.max(values.length - 2, 1));
  const [left, here, right] = [-1, 0, 1].map((i) => values[middle + i] * scale);
  const bend = left - 2 * here + right;
  const lift = middle === top && bend < 0 ? -((right - left) ** 2) / (8 * bend) : 0;
  const most = Math.max(values[top] * scale, 0);
  let highest = Math.max(values[top] * scale + lift, 0);
  for (const before of [top, top - 1]) {
    const height = cornerAfter(values, scale, before);
    if (height !== null) highest = Math.max(height, most);
  }
  return highest;
}

// Height at which the curves on both sides of the gap after row `before` meet in a corner within it, or null.
// Each side goes on as a parabola through its three nearest rows; a corner breaks the slope far more than they bend.
function cornerAfter(values, scale, before) {
  if (before < 2 || before > values.length - 4) return null;
  const [a, b, c, d, e, f] = [-2, -1, 0, 1, 2, 3].map((i) => values[before + i] * scale);
  const [left, right, leftBend, rightBend] = [c - b, e - d, c - 2 * b + a, f - 2 * e + d];
  let [at, low, high, rise, descent, fall] = [0.5, 0, 0, 0, 0, 0];
  for (let round = 0; round < 3; round += 1) {
    low = c + at * left + 0.5 * at * (at + 1) * leftBend;
    high = d + (at - 1) * right + 0.5 * (at - 1) * (at - 2) * rightBend;
    rise = left + (at + 0.5) * leftBend;
    descent = right + (at - 1.5) * rightBend;
    fall = rise - descent;
    at = Math.min(Math.max(at + (high - low) / (fall > 0 ? fall : 1), -0.05), 1.05);
  }
  const sharp = fall > 3 * (Math.abs(leftBend) + Math.abs(rightBend));
  const inside = at > -0.02 && at < 1.02 && rise > 0 && descent < 0;
  return sharp && inside && Math.abs(high - low) < 1e-6 * Math.abs(c) ? low : null;
}

// Time of the last crossing into the band; distance(i) stands at (i + 1) spacing, `start` at time 0.
function lastEntry(distance, count, band, spacing, start) {
  let last = -1;
  for (let i = count - 1; i >= 0 && last < 0; i -= 1) if (!(distance(i) <= band)) last = i;
  if (last === count - 1) return Infinity;
  if (last < 0 && start <= band) return 0;
  const before = last >= 0 ? distance(last) : start;
  const gap = before - distance(last + 1);
  const share = gap > 0 ? Math.min(Math.max((before - band) / gap, 0), 1) : 1;
  return spacing * (last + 1 + share);
}

function firstReach(response, final, level, spacing) {
  for (let i = 0; i < response.length; i += 1) {
    const after = response[i] / final;
    if (after >= level) {
      const before = i > 0 ? response[i - 1] / final : 0;
      const part = (level - before) / (after > before ? after - before : 1);
      return spacing * (i + Math.min(Math.max(part, 0), 1));
    }
  }
  return Infinity;
}

// Everything that the page itself says of the fitted plant at one K.
function fittedAt(data, index) {
  const { plant, run } = data;
  const law = lawAt(data.law, data.gains[index] / data.gains[data.chosen]);
  const spacing = plant.interval / plant.points;
  const before = restAt(plant, law, run.start);
  const values = {};
  const extremes = {};
  const worse = (name, value) => {
    values[name] = Math.max(values[name] ?? -Infinity, value);
  };
  const widen = (name, value, lowest) => {
    const known = extremes[name] ?? (lowest ? Infinity : -Infinity);
    extremes[name] = lowest ? Math.min(known, value) : Math.max(known, value);
  };
  const readExtremes = (history) => {
    const level = run.response + before.response;
    const sent = run.command + before.command;
    widen("response highest", level + peakOf(history.response, 1), false);
    widen("response lowest", level - peakOf(history.response, -1), true);
    widen("response rate", history.steepest, false);
    let last = 0;
    for (const command of history.command) {
      widen("command highest", sent + Math.max(command, 0), false);
      widen("command lowest", sent + Math.min(command, 0), true);
      widen("command rate", Math.abs(command - last) / plant.interval, false);
      last = command;
    }
  };
  const asked = (name) => data.rows.find((row) => row.name === name);
  const readStep = (history, step) => {
    const { response } = history;
    let final = restAt(plant, law, run.start + step).response - before.response;
    if (plant.drive) final = response[response.length - 1];
    if (plant.valve) final = middleOf(response, final, run.start + step - before.response);
    if (asked("overshoot")) worse("overshoot", Math.max(peakOf(response, 1 / final) - 1, 0));
    if (asked("rise_time")) {
      const late = firstReach(response, final, 0.9, spacing);
      worse("rise_time", late === Infinity ? late : late - firstReach(response, final, 0.1, spacing));
    }
    if (asked("settling_time")) {
      const distance = (i) => Math.abs(response[i] / final - 1);
      const held = restless(data, history, final);
      const time = lastEntry(distance, response.length, asked("settling_time").band ?? 0.02, spacing, 1);
      const hunts = plant.valve && time > 0.8 * (spacing * response.length);
      worse("settling_time", held || hunts ? Infinity : time);
    }
  };
  let shown = null;
  if (run.step !== 0) {
    shown = runLoop(data, law, before, run.step, 0);
    for (const step of run.both ? [run.step, -run.step] : [run.step]) {
      const history = step === run.step ? shown : runLoop(data, law, before, step, 0);
      readStep(history, step);
      readExtremes(history);
    }
  }
  for (const push of run.pushes) {
    const history = runLoop(data, law, before, 0, push);
    readExtremes(history);
    const away = history.response.map(Math.abs);
    for (const row of data.rows.filter((each) => each.push === push)) {
      if (row.name === "disturbance_peak") worse(row.name, peakOf(away, 1));
      if (row.name === "disturbance_recovery") {
        worse(row.name, lastEntry((i) => away[i], away.length, row.band ?? 0, spacing, 0));
      }
    }
  }
  return { ...drawn(data, shown, before), values, extremes };
}

// Behind a valve that sticks it may hunt for ever: the middle of the last tenth is as steady as it gets.
function middleOf(response, final, goal) {
  const tail = response.slice(-Math.max(Math.trunc(response.length * 0.1), 1));
  const middle = sum(tail) / tail.length;
  return Math.abs(middle) > 0.1 * Math.abs(goal) ? middle : final;
}

// Whether the command is limited all through the last tenth, or friction leaves the response creeping.
function restless(data, history, final) {
  const tail = Math.max(Math.floor(history.limited.length / 10), 1);
  if (history.limited.slice(-tail).every((cut) => cut === 1)) return true;
  if (!data.plant.drive) return false;
  const end = history.response.slice(-Math.max(Math.floor(history.response.length / 10), 2));
  return Math.max(...end) - Math.min(...end) > 0.005 * Math.abs(final);
}

// Absolute readings over the shown time; the response from the rest before the step on.
function drawn(data, history, before) {
  if (history === null) return { time: [], response: [], command: [], held: [] };
  const { plant, run } = data;
  const spacing = plant.interval / plant.points;
  const count = Math.min(Math.floor(run.shown / spacing), history.response.length);
  const level = run.response + before.response;
  const sent = run.command + before.command;
  const response = [level, ...Array.from(history.response.slice(0, count), (y) => y + level)];
  const commands = Math.floor(run.shown / plant.interval) + 1;
  return {
    time: response.map((_, i) => i * spacing),
    response,
    held: Array.from({ length: commands }, (_, k) => k * plant.interval),
    command: Array.from(history.command.slice(0, commands), (u) => u + sent),
  };
}
