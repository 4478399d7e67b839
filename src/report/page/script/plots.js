// The run on one clock: depth with the forecast as issued, direction of new growth over the load axis, load, voltage and
// current, one below the other under one cursor. What came after the cursor is drawn pale.
(() => {
  const { record, byId, clamp } = bench;
  const place = byId("plots");
  if (!place || !record.time_s.length) return;
  const { make, path, ticks, around } = scales;
  const LEFT = 44, RIGHT = 10, HEAD = 34, FOOT = 42;
  const [unit, unitSeconds] = record.unit;
  const last = record.time_s[bench.end];
  const contact = record.forecasts.at(-1)?.[5];
  const until = Math.max(last * 1.02, contact ? Math.min(contact * 1.04, last * 2) : 0, 1);
  const depths = record.depth_um.filter((depth) => depth !== null);
  const fraction = record.fraction[bench.end];
  const goal = depths.length && fraction > 0.05 ? depths.at(-1) / fraction : record.gap_um;

  const depthPanel = { name: "depth", unit: "µm", ink: "metal", height: 150, range: () => [0, Math.max(goal || 0, ...depths, 1) * 1.08], draw: depth, value: depthNow };
  const growthPanel = { name: "direction of new growth", unit: "°", ink: "metal", height: 120, range: () => [0, 180], marks: [0, 45, 90, 135, 180], draw: growth, value: growthNow };
  const panels = [
    depths.length ? depthPanel : null,
    record.growth.length || record.axis_deg.some((axis) => axis !== null) ? growthPanel : null,
    ...[record.load, ...record.cell].filter(Boolean).map((log) => ({
      name: log.name, unit: log.unit, ink: log.ink, height: 66, range: () => around(log.value, log.ink !== "voltage") || [0, 1],
      draw: (panel, layer) => logged(panel, layer, log), value: () => logNow(log),
    })),
  ].filter(Boolean);
  if (!panels.length) return;

  let svg = null, across = null, back = null, parts = {};

  function build() {
    const width = Math.max(260, Math.floor(place.clientWidth));
    const inner = width - LEFT - RIGHT;
    across = (seconds) => LEFT + inner * seconds / until;
    back = (px) => (px - LEFT) / inner * until;
    let top = 0;
    const layer = make("g", {}), base = make("g", {}), front = make("g", {});
    parts = { values: [] };
    for (const panel of panels) {
      top += HEAD;
      [panel.low, panel.high] = panel.range();
      panel.top = top;
      panel.up = (value) => panel.top + panel.height * (1 - (value - panel.low) / (panel.high - panel.low));
      frame(panel, base, front, width);
      panel.draw(panel, layer, base);
      top += panel.height;
    }
    const total = top + FOOT, bottom = top;
    base.append(make("path", { d: `M${LEFT} ${bottom}H${width - RIGHT}`, class: "s-quiet" }));
    for (const [value, words] of ticks(0, until / unitSeconds, clamp(Math.floor(inner / 62), 2, 9))) {
      const x = across(value * unitSeconds);
      base.append(make("path", { d: `M${x} ${bottom}v5`, class: "s-quiet" }), make("text", { x, y: bottom + 18, class: "f-quiet", "text-anchor": "middle" }, words));
    }
    base.append(make("text", { x: width - RIGHT, y: bottom + 35, class: "f-quiet strong", "text-anchor": "end" }, `time (${unit})`));
    if (record.short_s !== null) base.append(make("path", { d: `M${across(record.short_s)} ${HEAD}V${bottom}`, class: "s-text dashed" }));
    const past = make("rect", { x: 0, y: 0, width: 0, height: total });
    const field = make("rect", { x: LEFT, y: 0, width: inner, height: total });
    const defs = make("defs", {}, make("clipPath", { id: "plot-past" }, past), make("clipPath", { id: "plot-field" }, field));
    parts.past = past;
    parts.fan = make("g", { "clip-path": "url(#plot-field)" });
    parts.cursor = make("g", { class: "cursor" }, make("path", { d: `M0 6V${bottom}` }), make("path", { class: "grip", d: "M-6 0H6L0 9Z" }));
    const sooner = layer.cloneNode(true);
    layer.setAttribute("class", "later");
    sooner.setAttribute("clip-path", "url(#plot-past)");
    svg = make("svg", { viewBox: `0 0 ${width} ${total}`, width, height: total, role: "img", "aria-label": "Plots of the run under one time cursor: " + panels.map((panel) => `${panel.name} (${panel.unit})`).join(", ") },
      defs, base, layer, sooner, parts.fan, parts.cursor, front);
    place.replaceChildren(svg);
    move();
    mark();
  }

  function frame(panel, base, front, width) {
    front.append(make("text", { x: 0, y: panel.top - 11, class: `f-${panel.ink} strong` }, `${panel.name} (${panel.unit})`));
    const marks = panel.marks ? panel.marks.map((value) => [value, String(value)]) : ticks(panel.low, panel.high, panel.height > 90 ? 5 : 3);
    for (const [value, words] of marks) {
      const y = panel.up(value);
      base.append(make("path", { d: `M${LEFT} ${y}H${width - RIGHT}`, class: "s-grid" }), make("text", { x: LEFT - 6, y: y + 4, class: "f-quiet", "text-anchor": "end" }, words));
    }
    const now = make("text", { x: width - RIGHT, y: panel.top - 11, class: "f-text now", "text-anchor": "end" });
    parts.values.push([panel, now]);
    front.append(now);
  }

  function depth(panel, layer, base) {
    if (record.gap_um !== null && goal) {
      const y = panel.up(goal);
      base.append(make("path", { d: `M${LEFT} ${y}H${across(until)}`, class: "s-text far" }), make("text", { x: LEFT + 5, y: y + 14, class: "f-quiet" }, "far edge"));
    }
    const samples = record.time_s.map((time, i) => [across(time), record.depth_um[i] === null ? null : panel.up(record.depth_um[i])]);
    layer.append(make("path", { d: path(samples), class: "s-metal line broad" }));
  }

  function growth(panel, layer, base) {
    const axis = record.time_s.map((time, i) => [across(time), record.axis_deg[i] === null ? null : panel.up(record.axis_deg[i])]);
    const held = [...axis, [across(last), axis.at(-1)[1]]].map(([x, y], i, all) => (i ? [x, all[i - 1][1]] : [x, y]));
    const level = held.slice(1).map(([x, y], i) => (y === null ? "" : `M${scales.short(held[i][0])} ${scales.short(y)}H${scales.short(x)}`)).join("");
    base.append(make("path", { d: level, class: "s-load axis-line" }));
    for (const [time, filament, angle, length] of record.growth) {
      const r = clamp(Math.sqrt(length) * 0.8, 1.6, 6);
      layer.append(make("circle", { cx: scales.short(across(time)), cy: scales.short(panel.up(angle)), r: scales.short(r), class: "f-metal dot", "data-filament": filament }));
    }
  }

  function logged(panel, layer, log) {
    const samples = log.time_s.map((time, i) => [across(Math.min(time, last)), log.value[i] === null ? null : panel.up(log.value[i])]);
    const held = log.ink === "load" && samples.length ? [...samples, [across(last), samples.at(-1)[1]]] : samples;
    layer.append(make("path", { d: path(held, log.ink === "load"), class: `s-${log.ink} line` }));
  }

  // What each panel reads at the cursor.
  const issued = record.forecasts.map((row) => row[0]);
  const forecast = () => record.forecasts[bench.upTo(issued, bench.time)];
  function depthNow() {
    const depth = record.depth_um[bench.step], row = forecast();
    const words = depth === null ? "none yet" : bench.fixed(depth, 1) + " µm";
    return row && row[3] ? `${words}, contact ${bench.duration(row[3])} (${bench.duration(row[1])} to ${bench.duration(row[5])})` : words;
  }
  function growthNow() {
    const axis = record.axis_deg[bench.step];
    return axis === null ? "no load axis" : `load axis ${bench.fixed(axis, 0)}°`;
  }
  function logNow(log) {
    const value = log.value[bench.upTo(log.time_s, bench.time)];
    return value === null || value === undefined ? "none" : `${Number(value.toPrecision(4)).toString().replace("-", "−")} ${log.unit}`;
  }

  /** Lays the cursor: what had come by then in full, the forecast as it was issued then. */
  function move() {
    if (!svg) return;
    const x = across(bench.time);
    parts.cursor.setAttribute("transform", `translate(${scales.short(x)} 0)`);
    parts.past.setAttribute("width", String(x + 1));
    for (const [panel, now] of parts.values) now.textContent = panel.value();
    fan();
    place.setAttribute("aria-valuenow", String(bench.step));
    place.setAttribute("aria-valuetext", bench.duration(bench.time) + ": " + panels.map((panel) => panel.name + " " + panel.value()).join(", "));
  }

  function fan() {
    const row = forecast();
    parts.fan.replaceChildren();
    const panel = panels.find((panel) => panel.name === "depth");
    const from = row && panel && record.depth_um[bench.upTo(record.time_s, row[0])];
    if (from === null || from === undefined || !goal || (record.short_s !== null && bench.time >= record.short_s)) return;
    const [x0, y0, y1] = [across(row[0]), panel.up(from), panel.up(goal)];
    for (const [low, high, opacity] of [[row[1], row[5], 0.18], [row[2], row[4], 0.3]]) {
      if (low === null || high === null) continue;
      parts.fan.append(make("polygon", { points: `${x0},${y0} ${across(low)},${y1} ${across(high)},${y1}`, class: "f-forecast", opacity }));
    }
    if (row[3] === null) return;
    parts.fan.append(make("path", { d: `M${x0} ${y0}L${across(row[3])} ${y1}`, class: "s-forecast dashed line" }), make("circle", { cx: across(row[3]), cy: y1, r: 4, class: "f-forecast" }));
  }

  function mark() {
    if (!svg) return;
    svg.classList.toggle("picking", bench.picked !== null);
    for (const dot of svg.querySelectorAll(".dot")) dot.classList.toggle("picked", Number(dot.dataset.filament) === bench.picked);
  }

  place.addEventListener("pointerdown", (event) => {
    const dot = event.target.closest?.(".dot");
    bench.stop();
    follow(event);
    if (dot) bench.pick(Number(dot.dataset.filament));
    place.setPointerCapture(event.pointerId);
  });
  place.addEventListener("pointermove", (event) => { if (event.buttons & 1) follow(event); });
  function follow(event) {
    const box = svg.getBoundingClientRect();
    bench.goTime(back((event.clientX - box.left) * svg.viewBox.baseVal.width / box.width));
  }
  place.addEventListener("keydown", (event) => {
    const to = bench.stepFor(event.key);
    if (event.key === " ") bench.toggle(); else if (to !== null) { bench.stop(); bench.go(to); } else return;
    event.preventDefault();
  });

  Object.entries({ role: "slider", tabindex: "0", "aria-label": "Time cursor of the plots", "aria-valuemin": "0", "aria-valuemax": String(bench.end) })
    .forEach(([name, value]) => place.setAttribute(name, value));
  let seen = 0;
  new ResizeObserver(() => {
    if (Math.abs(place.clientWidth - seen) < 1) return;
    seen = place.clientWidth;
    build();
  }).observe(place);
  bench.on("step", move);
  bench.on("pick", mark);
})();
