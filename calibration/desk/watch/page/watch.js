// The live page: takes messages from the server, fills figures and tiles, sends orders.
// Message: u32 length, JSON padded to four bytes, float32 arrays (see wire.py).

const COLOURS = ["#56b4e9", "#e69f00", "#009e73", "#f0e442", "#cc79a7", "#d55e00", "#bbbbbb", "#0072b2"];
const MARKERS = [["circle", "●"], ["square", "■"], ["triangle", "▲"], ["diamond", "◆"], ["inverted_triangle", "▼"], ["plus", "✚"], ["x", "✖"], ["star", "★"]];
const WINDOWS = [1, 10, 60];
const SILENT_MS = 800; // without a message the page says so
const $ = (id) => document.getElementById(id);

const page = {
  socket: null, heard: 0, latest: null, frozen: false, zoomed: false, change: false,
  window: 10, stopWanted: false, models: {}, slow: {},
};

// ---- figures

async function embedFigures() {
  const items = await (await fetch("figures")).json();
  for (const [name, item] of Object.entries(items)) {
    await Bokeh.embed.embed_item(item, name);
  }
}

// A source, range or figure by the name it was given in figures.py.
function model(name) {
  if (!page.models[name]) {
    for (const each of Bokeh.documents) page.models[name] ??= each.get_model_by_name(name);
  }
  return page.models[name];
}

function fill(name, data) {
  const source = model(name);
  if (source) source.data = data;
}

function reach(name, start, end) {
  const range = model(name);
  if (range && end > start && (range.start !== start || range.end !== end)) range.setv({ start, end });
}

function label(name, text) {
  const figure = model(name);
  const axis = figure?.left?.[0];
  if (axis && axis.axis_label !== text) axis.axis_label = text;
}

// ---- numbers as people read them

const PREFIXES = [[1e9, "G"], [1e6, "M"], [1e3, "k"], [1, ""], [1e-3, "m"], [1e-6, "µ"], [1e-9, "n"], [1e-12, "p"]];

function withUnit(value, unit, digits = 3) {
  if (value === null || value === undefined) return "–";
  const size = Math.abs(value);
  const [factor, prefix] = unit === "1" ? [1, ""] : PREFIXES.find(([f]) => size >= f * 0.9995) ?? [1, ""];
  return `${Number((value / factor).toPrecision(digits))} ${prefix}${unit === "1" ? "" : unit}`.trim();
}

function measured(value, u95, unit) {
  if (value === null || value === undefined) return "–";
  const size = Math.abs(value);
  const [factor, prefix] = unit === "1" ? [1, ""] : PREFIXES.find(([f]) => size >= f * 0.9995) ?? [1, ""];
  const digits = Math.min(6, Math.max(0, 1 - Math.floor(Math.log10(u95 / factor || 1))));
  return `${(value / factor).toFixed(digits)} ${prefix}${unit === "1" ? "" : unit} (U ${(u95 / factor).toFixed(digits)})`;
}

function phaseText(degrees, u95) {
  if (u95 > 60) return "unknown";
  const digits = Math.min(4, Math.max(0, 1 - Math.floor(Math.log10(u95 || 1e-4))));
  return `${signed(degrees, digits)}° (U ${u95.toFixed(digits)}°)`;
}

const clockTime = (s) => {
  const whole = Math.floor(s), two = (n) => String(n).padStart(2, "0");
  const h = Math.floor(whole / 3600);
  return `${h ? h + ":" : ""}${two(Math.floor(whole / 60) % 60)}:${two(whole % 60)}`;
};
const plainName = (path) => path.split("/").pop();
function signed(x, digits = 0) {
  const size = Math.abs(x).toFixed(digits);
  return Number(size) === 0 ? size : `${x < 0 ? "−" : "+"}${size}`;
}

function write(id, text) {
  const element = $(id);
  if (element.textContent !== text) { element.textContent = text; element.title = text; }
}

function mark(id, level) {
  const classes = $(id).classList;
  for (const name of ["good", "fair", "bad", "on"]) classes.toggle(name, name === level);
}

// ---- what comes from the server

function parse(buffer) {
  const length = new DataView(buffer).getUint32(0, true);
  const said = JSON.parse(new TextDecoder().decode(new Uint8Array(buffer, 4, length)));
  const arrays = {};
  for (const [name, [start, count]] of Object.entries(said.arrays)) {
    arrays[name] = new Float32Array(buffer, 4 + length + 4 * start, count);
  }
  return [said, arrays];
}

function show(buffer) {
  const [said, arrays] = parse(buffer);
  Object.assign(page.slow, arrays);
  if (said.spectrum) page.spectrum = said.spectrum;
  page.latest = said;
  showTiles(said);
  showForms(said);
  document.body.classList.toggle("crowded", !said.has_plots);
  $("crowded").hidden = said.has_plots;
  if (page.frozen) return;
  if (!said.has_plots) { showLines(said); return; }
  showTrace(said, arrays);
  showFringe(said, arrays);
  if ("spectrum_f" in arrays) { showSpectrum(said, arrays); showCourses(said, arrays); showLines(said); }
}

const PORT = {
  connected: ["● connected", "good"], gone: ["✕ PORT GONE", "bad"], silent: ["✕ BOARD SILENT", "bad"],
  behind: ["▲ view behind", "bad"], failed: ["✕ FAILED", "bad"], closed: ["■ ended", ""], waiting: ["… waiting", ""],
};

function showTiles(said) {
  const [text, level] = PORT[said.port.state] ?? [said.port.state, ""];
  write("port", text);
  $("port").className = `badge ${level}`;
  const source = said.source;
  write("title", source.title);
  write("source", source.rate_hz ? `${source.board && source.board !== source.title ? source.board + ", " : ""}${withUnit(source.rate_hz, "Hz", 5)}, ${source.channels.join(", ")}` : "");
  write("time", `${clockTime(source.time_s)}  shown after ${said.latency_s.toFixed(1)} s`);
  $("simulated").hidden = !source.simulated;
  showRest(said);
  const contrast = said.contrast;
  write("contrast", contrast ? contrast.value.toFixed(3).replace(/0$/, "") : "–");
  write("contrast-more", contrast ? contrast.origin : "unknown: no dark");
  mark("tile-contrast", contrast ? (contrast.value < 0.5 ? "fair" : "good") : "");
  showLosses(said.losses);
  const clock = said.clock;
  const ppm = clock?.map((x) => x * 1e6);
  write("clock", clock ? signed(ppm[0], ppm[1] < 0.2 ? 2 : ppm[1] < 2 ? 1 : 0) : "–");
  write("clock-more", clock ? `ppm, U ${Number(ppm[1].toPrecision(2))} ppm` : "needs lines");
  mark("tile-clock", clock && Math.abs(clock[0]) > 1e-3 ? "fair" : "");
  const recording = said.recording;
  write("recording", recording.file ? clockTime(recording.duration_s) : "off");
  write("recording-more", recording.file ? `${plainName(recording.file)}, ${withUnit(recording.bytes, "B")}` : recording.reason || "");
  mark("tile-recording", recording.file ? "on" : "");
  showDrive(said.drive);
  document.body.classList.toggle("stale", ["gone", "silent", "failed"].includes(said.port.state));
  showAlarm(said);
}

// A drive that cannot be reached is unknown, not at rest.
function showDrive(drive) {
  const what = drive.condition, volts = `${Number(drive.sum_v.toPrecision(3))} V`;
  write("drive", what === "on" ? volts : what === "stopping" ? "stop sent" : what);
  write("drive-more", what === "none" || drive.limit_v === null ? "" : what === "unknown" ? "not confirmed" : what === "stopping" ? "not confirmed yet" : `limit ${withUnit(drive.limit_v, "V")}`);
  mark("tile-drive", what === "unknown" || what === "stopping" ? "bad" : what === "on" ? "on" : "");
}

function showRest(said) {
  const rest = said.rest;
  if (!rest) { write("rest", "–"); write("rest-more", ""); mark("tile-rest", ""); return; }
  const known = rest.off_deg !== undefined;
  write("rest", known ? `${signed(rest.off_deg)}°` : withUnit(rest.volts, said.source.unit));
  write("rest-more", `${rest.verdict}${known ? `, ${rest.slope}, ${withUnit(rest.volts, said.source.unit)}` : ""}`);
  mark("tile-rest", { "at mid-fringe": "good", "off mid-fringe": "fair", "near an extreme": "bad", "outside the fringe": "bad" }[rest.verdict] ?? "");
}

function showLosses(losses) {
  const ago = (s) => (s === null ? "" : `, last ${clockTime(s)} ago`);
  write("gaps", String(losses.gaps));
  write("gaps-more", losses.gaps ? `${losses.missing} samples${ago(losses.gap_ago_s)}` : "none missing");
  mark("tile-gaps", losses.gaps ? "bad" : "good");
  write("over", String(losses.over_range));
  write("over-more", losses.over_range ? `samples${ago(losses.over_ago_s)}` : "none");
  mark("tile-over", losses.over_range ? (losses.over_ago_s < 10 ? "bad" : "fair") : "good");
}

function showAlarm(said) {
  const alarm = $("alarm"), states = { gone: "PORT GONE", silent: "BOARD SILENT", failed: "PORT FAILED" };
  const word = states[said.port.state];
  alarm.hidden = !word;
  if (word && alarm.dataset.text !== said.port.reason + word) {
    alarm.dataset.text = said.port.reason + word;
    alarm.replaceChildren(word, Object.assign(document.createElement("small"), { textContent: said.port.reason }));
  }
}

// ---- plots

function span(values, low = Infinity, high = -Infinity) {
  for (const v of values) { if (v < low) low = v; if (v > high) high = v; }
  return [low, high];
}

// A range that moves only when it must: it takes in everything, and shrinks when three times too large.
function steady(name, low, high, share = 0.12, atOnce = false) {
  if (!(high >= low)) return;
  const range = model(name), spread = high - low || Math.abs(high) * 0.01 || 1e-6;
  const start = low - share * spread, end = high + share * spread;
  if (!range) return;
  if (atOnce || low < range.start || high > range.end || range.end - range.start > 3 * (end - start)) reach(name, start, end);
}

function showTrace(said, arrays) {
  const x = arrays.trace_t, low = arrays.trace_low, high = arrays.trace_high, lost = arrays.trace_lost;
  fill("trace_data", { x, low, high, middle: low.map((v, k) => (v + high[k]) / 2) });
  const bin = x.length > 1 ? x[1] - x[0] : said.window_s, left = [], width = [];
  for (let k = 0; k < x.length; k++) {
    if (!lost[k]) continue;
    if (left.length && lost[k - 1]) { width[width.length - 1] += bin; left[left.length - 1] += bin / 2; } else { left.push(x[k]); width.push(bin); }
  }
  fill("trace_lost", { left, right: width });
  const fringe = said.rest?.fringe;
  fill("trace_levels", { y: fringe ? [fringe.low, (fringe.low + fringe.high) / 2, fringe.high] : [] });
  reach("trace_x", -said.window_s, 0);
  const unit = said.source.unit === "1" || !said.source.unit ? "" : ` / ${said.source.unit}`;
  label("trace", `${said.source.shown ?? "photodiode"}${unit}`);
  label("fringe", `${said.source.shown ?? "photodiode"}${unit}`);
  let [bottom, top] = span(high, ...span(low));
  if (fringe && !page.zoomed) { bottom = Math.min(bottom, fringe.low); top = Math.max(top, fringe.high); }
  steady("trace_y", bottom, top, 0.12, page.rescale);
  page.rescale = false;
}

function showFringe(said, arrays) {
  if ("fringe_deg" in arrays) fill("fringe_curve", { x: arrays.fringe_deg, y: arrays.fringe_v });
  const rest = said.rest, fringe = rest?.fringe;
  const none = { x: [], y: [] };
  if (!fringe) {
    for (const name of ["fringe_point", "fringe_mirror", "fringe_reach"]) fill(name, none);
    write("fringe-note", "extremes unknown: pass over a whole fringe");
    return;
  }
  write("fringe-note", `${withUnit(fringe.low, said.source.unit)} to ${withUnit(fringe.high, said.source.unit)}, ${fringe.origin}`);
  const middle = (fringe.low + fringe.high) / 2, swing = (fringe.high - fringe.low) / 2;
  const degrees = (v) => (Math.acos(Math.min(1, Math.max(-1, (v - middle) / swing))) * 180) / Math.PI;
  const side = rest.slope === "rising" ? -1 : 1;
  fill("fringe_point", { x: [rest.phase_deg], y: [rest.volts] });
  fill("fringe_mirror", { x: [-rest.phase_deg], y: [rest.volts] });
  const steps = [...Array(21).keys()].map((k) => rest.low + ((rest.high - rest.low) * k) / 20);
  fill("fringe_reach", { x: steps.map((v) => side * degrees(v)), y: steps });
  const spread = 0.12 * (fringe.high - fringe.low);
  reach("fringe_y", fringe.low - spread, fringe.high + spread);
}

function showSpectrum(said, arrays) {
  const x = arrays.spectrum_f;
  if (!x.length) { write("spectrum-note", "waits for a whole stretch without gaps"); return; }
  fill("spectrum_data", { x, mean: arrays.spectrum_mean, highest: arrays.spectrum_highest, expected: arrays.spectrum_expected });
  const from = Math.max(x[0], x[x.length - 1] / 1e5);
  reach("spectrum_x", from, x[x.length - 1]);
  const known = [...arrays.spectrum_mean.slice(2), ...arrays.spectrum_highest.slice(2)].filter((v) => v > 0);
  const [low, high] = span(known);
  const range = model("spectrum_y");
  if (range && high > 0 && (low < range.start || high > range.end || range.end / range.start > 1e3 * (high / low)) || !page.scaled) {
    const start = 10 ** Math.floor(Math.log10(low) - 0.1), end = 10 ** Math.ceil(Math.log10(high) + 0.6);
    reach("spectrum_y", start, end);
    page.scaled = true;
  }
  const expected = model("spectrum_expected");
  if (expected) expected.visible = arrays.spectrum_expected.some((v) => v > 0);
  const lines = said.lines;
  const top = range ? range.end * 0.9 : 1;
  fill("spectrum_lines", {
    x: lines.map((l) => l.frequency_hz), y: lines.map(() => top),
    label: lines.map((l) => `${Number(l.frequency_hz.toPrecision(6))} Hz`), colour: lines.map((_, k) => COLOURS[k % COLOURS.length]),
  });
  const unit = said.source.unit === "1" ? "1" : said.source.unit;
  label("spectrum", `density / (${unit}/√Hz)`);
  const s = page.spectrum;
  write("spectrum-note", s ? `Hann, ${s.bandwidth_hz.toPrecision(3)} Hz, ${s.averages} averages${s.left_out ? `, ${s.left_out} left out` : ""}; faint: highest` : "");
}

const wrapped = (d) => d - 360 * Math.round(d / 360);

// Points whose phase or change says nothing (U above 60°, or above half of the amplitude) are left out.
function showCourses(said, arrays) {
  const number = arrays.line_number, t = arrays.line_t;
  const a = arrays.line_amplitude, ua = arrays.line_amplitude_u, p = arrays.line_phase, up = arrays.line_phase_u;
  const all = [...number.keys()], clear = all.filter((k) => ua[k] < 0.5 * a[k]), known = all.filter((k) => up[k] < 60);
  const oldest = Math.min(-1, Math.floor(Math.min(0, ...t) / 60));
  for (const name of ["amplitude_x", "change_x", "phase_x"]) reach(name, oldest, 0);
  // Colour, marker and a little distance tell the lines apart.
  const looks = (rows) => ({
    x: rows.map((k) => t[k] / 60 + 0.005 * oldest * number[k]),
    colour: rows.map((k) => COLOURS[number[k] % COLOURS.length]),
    marker: rows.map((k) => MARKERS[number[k] % MARKERS.length][0]),
  });
  const unit = said.source.unit === "1" ? "" : ` / ${said.source.unit}`;
  label("amplitude", `amplitude${unit}`);
  label("phase", page.change ? "change / °" : "phase / °");
  write("phase-note", said.source.has_drive ? "of response/drive where driven" : "");
  if (page.change) {
    const first = middles(a, number, clear), y = clear.map((k) => 100 * (a[k] / first[number[k]] - 1));
    const u = clear.map((k) => (100 * ua[k]) / first[number[k]]);
    course("change", looks(clear), y, u);
  } else {
    const y = all.map((k) => a[k]), low = all.map((k) => Math.max(a[k] - ua[k], 0.1 * a[k])), high = all.map((k) => a[k] + ua[k]);
    fill("amplitude_data", { ...looks(all), y, low, high });
    const ruling = clear.length ? clear : all; // lines lost in noise do not rule the scale
    const [bottom, top] = span(ruling.map((k) => high[k]), ...span(ruling.map((k) => low[k])));
    if (top > bottom) reach("amplitude_y", bottom / 1.6, top * 1.6);
  }
  const middle = middles(p, number, known);
  const y = known.map((k) => (page.change ? wrapped(p[k] - middle[number[k]]) : p[k]));
  course("phase", looks(known), y, known.map((k) => up[k]), page.change ? null : [-190, 190]);
}

function course(name, looks, y, u, fixed = null) {
  const low = y.map((v, k) => v - u[k]), high = y.map((v, k) => v + u[k]);
  fill(`${name}_data`, { ...looks, y, low, high });
  if (fixed) reach(`${name}_y`, ...fixed);
  else steady(`${name}_y`, ...span(high, ...span(low)));
}

// The median of each line's values, by its number.
function middles(values, number, rows) {
  const lists = {};
  for (const k of rows) (lists[number[k]] ??= []).push(values[k]);
  for (const key of Object.keys(lists)) lists[key] = lists[key].sort((i, j) => i - j)[Math.floor(lists[key].length / 2)];
  return lists;
}

function showLines(said) {
  const unit = said.source.unit ?? "1";
  const rows = said.lines.map((line, k) => {
    const row = document.createElement("tr");
    const cell = (text) => row.appendChild(Object.assign(document.createElement("td"), { textContent: text }));
    const head = cell(`${MARKERS[k % MARKERS.length][1]} ${Number(line.frequency_hz.toPrecision(7))} Hz`);
    head.style.color = COLOURS[k % COLOURS.length];
    cell(line.amplitude === null ? "waits …" : measured(line.amplitude, line.amplitude_u95, unit));
    cell(line.amplitude === null ? "" : phaseText(line.phase_deg, line.phase_u95_deg));
    cell(line.ratio ? Number(line.ratio.toPrecision(4)) : "");
    row.classList.toggle("doubt", line.reasons.length > 0);
    return row;
  });
  if (!rows.length) {
    const row = document.createElement("tr");
    row.appendChild(Object.assign(document.createElement("td"), { textContent: "no line is followed", colSpan: 4 }));
    rows.push(row);
  }
  $("lines").replaceChildren(...rows);
  write("doubts", doubts(said.lines, said.line_remarks));
  showReasons();
}

// A button for what does not fit into the box of the lines, while it does not.
function showReasons() {
  const box = $("box-lines"), isOpen = box.classList.contains("open");
  $("reasons").hidden = !isOpen && box.scrollHeight <= box.clientHeight + 2;
}

function openReasons() {
  const isOpen = $("box-lines").classList.toggle("open");
  $("reasons").setAttribute("aria-expanded", String(isOpen));
  write("reasons", isOpen ? "less" : "all of it");
  showReasons();
}

// Why the lines in italics are not to be trusted: each reason once, with the lines it is about.
function doubts(lines, remarks) {
  const about = new Map();
  for (const line of lines) {
    for (const reason of line.reasons) about.set(reason, [...(about.get(reason) ?? []), Number(line.frequency_hz.toPrecision(7))]);
  }
  return [...[...about].map(([reason, which]) => `${which.join(", ")} Hz: ${reason}`), ...(remarks ?? [])].join(";\n");
}

// ---- orders

function order(what) {
  if (page.socket?.readyState !== WebSocket.OPEN) { answer({ text: "no connection to the program", refused: true, of_drive: OF_DRIVE.includes(what.do) }); return false; }
  page.socket.send(JSON.stringify(what));
  return true;
}

const OF_DRIVE = ["stop", "set line", "clear line"];

function answer(said) {
  const place = said.of_drive ? "drive-answer" : "answer";
  if (said.stop_over) { page.stopWanted = false; $("stop").classList.remove("pending"); }
  if (said.board && !said.refused) { write(place, `${$(place).textContent.split(" · ")[0]} · board: ${said.text}`); return; }
  write(place, said.text);
  $(place).classList.toggle("refused", said.refused);
}

function stopDrive() {
  // Kept until the program confirms it: sent again as soon as a lost connection is back.
  page.stopWanted = true;
  $("stop").classList.add("pending");
  order({ do: "stop" });
}

function record() {
  if (page.latest?.recording.file) { order({ do: "end recording" }); return; }
  const name = $("name");
  if (!name.value.trim()) name.value = `run-${new Date().toISOString().slice(0, 19).replaceAll(/[:]/g, "")}Z`;
  order({ do: "record", name: name.value });
}

function showForms(said) {
  const recording = Boolean(said.recording.file), drive = said.drive;
  const button = $("record");
  button.classList.toggle("on", recording);
  write("record", recording ? "■ end" : "● record");
  button.disabled = $("name").disabled = !drive.can_record;
  if (page.wasRecording && !recording) $("name").value = "";
  page.wasRecording = recording;
  for (const element of $("line-form").elements) element.disabled = Boolean(drive.why_not);
  write("drive-note", drive.why_not ?? "");
  const key = JSON.stringify(drive.lines);
  if (page.driven === key) return;
  page.driven = key;
  $("driven").replaceChildren(...drive.lines.map((line) => {
    const item = document.createElement("li"), clear = document.createElement("button");
    clear.textContent = `✕ ${Number(line.frequency_hz.toPrecision(7))} Hz ${withUnit(line.amplitude_v, "V", 4)}`;
    clear.setAttribute("aria-label", `clear the line at ${line.frequency_hz} Hz`);
    clear.onclick = () => order({ do: "clear line", slot: line.slot });
    item.append(clear);
    return item;
  }));
}

function toggle(key, id) {
  page[key] = !page[key];
  $(id).setAttribute("aria-pressed", String(page[key]));
}

function setWindow(seconds) {
  page.window = seconds;
  for (const button of document.querySelectorAll("[data-window]")) {
    button.setAttribute("aria-pressed", String(Number(button.dataset.window) === seconds));
  }
  order({ do: "show", window_s: seconds });
}

function setChange() {
  toggle("change", "change");
  $("amplitude").hidden = page.change;
  $("relative").hidden = !page.change;
}

const KEYS = {
  r: record, " ": () => toggle("frozen", "freeze"), z: () => { toggle("zoomed", "zoom"); page.rescale = true; }, c: setChange,
  n: () => order({ do: "new average" }), d: () => document.body.classList.toggle("dim"), q: openReasons,
  w: () => setWindow(WINDOWS[(WINDOWS.indexOf(page.window) + 1) % WINDOWS.length]),
};

function onKey(event) {
  if (event.key === "Escape") { event.preventDefault(); stopDrive(); return; }
  if (event.ctrlKey || event.altKey || event.metaKey || event.target.matches("input")) return;
  if (event.key === " " && event.target.matches("button")) return; // the button is meant
  const action = KEYS[event.key.toLowerCase()];
  if (action && !event.repeat) { event.preventDefault(); action(); }
}

function listen() {
  document.addEventListener("keydown", onKey, true);
  $("stop").addEventListener("click", stopDrive);
  $("record-form").addEventListener("submit", (event) => { event.preventDefault(); record(); });
  $("line-form").addEventListener("submit", (event) => {
    event.preventDefault();
    order({ do: "set line", frequency: $("frequency").value, amplitude: $("amplitude-v").value, phase: $("phase-deg").value });
    $("frequency").select();
  });
  for (const button of document.querySelectorAll("[data-window]")) button.onclick = () => setWindow(Number(button.dataset.window));
  $("zoom").onclick = KEYS.z;
  $("freeze").onclick = KEYS[" "];
  $("change").onclick = KEYS.c;
  $("average").onclick = KEYS.n;
  $("reasons").onclick = openReasons;
}

// ---- connection

function connect() {
  const scheme = location.protocol === "https:" ? "wss" : "ws";
  const socket = new WebSocket(`${scheme}://${location.host}/live`);
  socket.binaryType = "arraybuffer";
  socket.onopen = () => {
    if (page.stopWanted) socket.send(JSON.stringify({ do: "stop" }));
    setWindow(page.window);
  };
  socket.onmessage = (event) => {
    page.heard = performance.now();
    if (typeof event.data === "string") answer(JSON.parse(event.data));
    else page.waiting = event.data;
  };
  socket.onclose = () => setTimeout(connect, 500);
  page.socket = socket;
}

function draw() {
  if (page.waiting) {
    const data = page.waiting;
    page.waiting = null;
    show(data);
  }
  requestAnimationFrame(draw);
}

function watchConnection() {
  if (performance.now() - page.heard < SILENT_MS) return;
  write("port", "✕ NO CONNECTION");
  $("port").className = "badge bad";
  document.body.classList.add("stale");
  const alarm = $("alarm");
  alarm.hidden = false;
  alarm.dataset.text = "";
  alarm.replaceChildren("NO CONNECTION", Object.assign(document.createElement("small"), {
    textContent: "the program does not answer; to stop the drive press Ctrl-C in its terminal or switch the driver off",
  }));
}

page.heard = performance.now() + 3000;
listen();
await embedFigures();
connect();
draw();
setInterval(watchConnection, 200);
document.documentElement.dataset.ready = "yes";
