// The picture: the frame of the step, what had arrived by then, the load as it lay, and the reels that move it all.
(() => {
  const { record, film, byId } = bench;
  const shot = byId("shot");
  if (!shot) return;
  const last = shot.getAttribute("href");
  const [over, traces, blank, readout, scrub, play] = ["over", "traces", "blank", "readout", "scrub", "play"].map(byId);
  const stretches = [...over.querySelectorAll("[data-from]")]
    .map((line) => ({ line, from: Number(line.dataset.from) })).sort((a, b) => a.from - b.from);
  const froms = stretches.map((stretch) => stretch.from);
  const frames = film.map((held) => held.frame);
  let shown = stretches.length;
  let ground = "corrected";

  /** The held picture for the step: of its own frame, or of the nearest one before it. */
  const held = () => film[Math.max(0, bench.upTo(frames, record.frame[bench.step] ?? 0))];

  function paint() {
    const now = held();
    if (!now) return;
    const recorded = ground === "recorded" && now.recorded;
    const wanted = recorded ? now.recorded : now.src || last;
    if (shot.getAttribute("href") !== wanted) shot.setAttribute("href", wanted);
    shot.style.display = ground === "map" ? "none" : "";
    blank.style.display = ground === "map" ? "" : "none";
    const [dx, dy] = record.drift_px[record.frame.indexOf(now.frame)] || [0, 0];
    over.setAttribute("transform", recorded ? `translate(${dx || 0} ${dy || 0})` : "");
  }

  /** Shows what had arrived by the step: only what changed since is touched. */
  function arrive() {
    const until = bench.upTo(froms, bench.step) + 1;
    for (let i = shown; i < until; i++) stretches[i].line.style.display = "";
    for (let i = until; i < shown; i++) stretches[i].line.style.display = "none";
    shown = until;
  }

  function say() {
    const i = bench.step, now = held();
    const words = ["frame " + record.frame[i], bench.duration(bench.time)];
    if (record.depth_um[i] !== null) words.push("depth " + bench.fixed(record.depth_um[i], 0) + " µm");
    if (record.tips[i] !== null) words.push(record.tips[i] === 1 ? "1 tip" : record.tips[i] + " tips");
    if (record.stress_mpa[i] !== null) words.push(bench.fixed(record.stress_mpa[i], 0) + " MPa");
    if (now && now.frame !== record.frame[i]) words.push("picture of frame " + now.frame);
    if (ground === "recorded" && now && !now.recorded) words.push("not held as recorded: corrected");
    readout.textContent = words.join(" · ");
    scrub.value = String(i);
    scrub.setAttribute("aria-valuetext", words.join(", "));
  }

  /** Turns the mark to the load axis: arrows inwards where it presses, outwards where it pulls. */
  function aim() {
    const mark = byId("load-mark");
    if (!mark) return;
    const i = bench.step, axis = record.axis_deg[i], stress = record.stress_mpa[i], force = record.force_n[i];
    mark.style.display = axis === null ? "none" : "";
    if (axis === null) return;
    byId("load-turn").setAttribute("transform", `rotate(${-axis})`);
    const push = stress ? Math.sign(stress) : 0;
    for (const part of mark.querySelectorAll(".press")) part.style.display = push > 0 ? "" : "none";
    for (const part of mark.querySelectorAll(".pull")) part.style.display = push < 0 ? "" : "none";
    byId("load-size").textContent = stress !== null ? bench.fixed(Math.abs(stress), 0) + " MPa"
      : force !== null ? bench.fixed(force, 2) + " N" : "";
    byId("load-way").textContent = push > 0 ? "presses" : push < 0 ? "pulls" : "load axis";
  }

  // Reels.
  let playing = 0, before = 0, due = 0;
  function stop() {
    cancelAnimationFrame(playing);
    playing = 0;
    play.textContent = "Play";
    play.setAttribute("aria-pressed", "false");
  }
  function tick(now) {
    due += (now - before) / 1000 * Number(byId("speed").value);
    before = now;
    if (due >= 1) {
      bench.go(bench.step + Math.floor(due));
      due %= 1;
    }
    if (bench.step >= bench.end) stop(); else playing = requestAnimationFrame(tick);
  }
  function start() {
    if (bench.step >= bench.end) bench.go(0);
    play.textContent = "Pause";
    play.setAttribute("aria-pressed", "true");
    [before, due] = [performance.now(), 0];
    playing = requestAnimationFrame(tick);
  }
  bench.toggle = () => (playing ? stop() : start());
  bench.stop = stop;
  play.addEventListener("click", bench.toggle);
  scrub.addEventListener("input", () => { stop(); bench.go(Number(scrub.value)); });
  for (const [id, by] of [["back", -1], ["on", 1]]) {
    byId(id).addEventListener("click", () => { stop(); bench.go(bench.step + by); });
  }

  // Layers.
  for (const choice of document.querySelectorAll("input[name=ground]")) {
    choice.addEventListener("change", () => { ground = choice.value; paint(); say(); });
  }
  for (const choice of document.querySelectorAll("input[name=ink]")) {
    choice.addEventListener("change", () => {
      traces.setAttribute("class", "traces by-" + choice.value);
      for (const key of document.querySelectorAll("[data-key]")) key.hidden = key.dataset.key !== choice.value;
    });
  }
  byId("show-marks")?.addEventListener("change", (event) => {
    byId("isochrones").style.display = event.target.checked ? "" : "none";
  });

  // Picking.
  const pick = byId("pick");
  pick?.addEventListener("change", () => { if (pick.value !== String(bench.picked ?? "")) bench.pick(Number(pick.value) || null); });
  traces.addEventListener("click", (event) => {
    const group = event.target.closest("[data-filament]");
    if (group && !bench.dragged) bench.pick(Number(group.dataset.filament));
  });
  for (const row of document.querySelectorAll("tr[data-filament]")) {
    const number = Number(row.dataset.filament), button = document.createElement("button");
    Object.assign(button, { type: "button", className: "row-pick", textContent: row.dataset.filament });
    button.setAttribute("aria-label", "filament " + number);
    button.addEventListener("click", () => bench.pick(number));
    row.cells[0].replaceChildren(button);
  }
  function mark() {
    traces.classList.toggle("picking", bench.picked !== null);
    for (const group of traces.children) {
      group.classList.toggle("picked", Number(group.dataset.filament) === bench.picked);
    }
    for (const row of document.querySelectorAll("tr[data-filament]")) {
      const on = Number(row.dataset.filament) === bench.picked;
      row.classList.toggle("picked", on);
      row.querySelector("button").setAttribute("aria-pressed", String(on));
    }
    if (pick) pick.value = String(bench.picked ?? "");
  }

  shot.addEventListener("error", () => {
    readout.textContent = "The picture of this frame is not where the page looks for it: keep the folder of frames beside the page.";
  });
  bench.on("step", () => { paint(); arrive(); say(); aim(); });
  bench.on("pick", mark);
  byId("controls").hidden = bench.end === 0;
  byId("layers").hidden = false;
})();
