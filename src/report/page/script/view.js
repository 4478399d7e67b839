// The view on the picture: zoom and pan with mouse, touch, keys and buttons; a region drawn for the review.
(() => {
  const { byId, clamp } = bench;
  const view = byId("view"), stage = byId("stage");
  if (!view) return;
  const { width, height } = view.viewBox.baseVal;
  const [full, bar] = [{ w: width, h: height }, byId("bar")];
  const barWidth = parseFloat(bar.style.width);
  /** Largest zoom, and the step of one press of a key. */
  const MOST = 16, STEP = 1.5;
  let zoom = 1, x = 0, y = 0;
  const touches = new Map();
  let pinch = null, start = null;
  /** Hears of a finished region while one is wanted. */
  let wanted = null;

  function lay() {
    const w = full.w / zoom, h = full.h / zoom;
    x = clamp(x, 0, full.w - w);
    y = clamp(y, 0, full.h - h);
    view.setAttribute("viewBox", `${x} ${y} ${w} ${h}`);
    stage.classList.toggle("near", zoom > 1);
    scale();
  }

  /** Keeps the scale bar between a tenth and a third of the picture by a round factor. */
  function scale() {
    let factor = 1;
    for (const by of [1, 2, 5, 10, 20, 50]) if (barWidth * zoom / by > 8) factor = by;
    bar.style.width = barWidth * zoom / factor + "%";
    const um = Number(bar.dataset.um) / factor;
    bar.firstElementChild.textContent = String(Number(um.toPrecision(3))) + " µm";
  }

  function zoomAt(by, px, py) {
    const next = clamp(zoom * by, 1, MOST);
    const keep = 1 / zoom - 1 / next;
    x += px * full.w * keep;
    y += py * full.h * keep;
    zoom = next;
    lay();
  }

  const share = (event) => {
    const box = view.getBoundingClientRect();
    return [(event.clientX - box.left) / box.width, (event.clientY - box.top) / box.height];
  };
  /** The pixel under a pointer: its centre lies half a unit in. */
  const pixel = (event) => {
    const [sx, sy] = share(event);
    return [x + sx * full.w / zoom - 0.5, y + sy * full.h / zoom - 0.5].map((v) => Math.round(v * 10) / 10);
  };

  view.addEventListener("wheel", (event) => {
    if (!event.ctrlKey && !event.metaKey && zoom === 1) return;
    event.preventDefault();
    zoomAt(Math.exp(-event.deltaY * 0.0022), ...share(event));
  }, { passive: false });

  view.addEventListener("pointerdown", (event) => {
    touches.set(event.pointerId, share(event));
    bench.dragged = false;
    start = wanted ? pixel(event) : null;
    if (wanted || touches.size > 1) view.setPointerCapture(event.pointerId);
    if (touches.size === 2) pinch = spread();
  });
  const spread = () => {
    const [[ax, ay], [bx, by]] = [...touches.values()];
    return { far: Math.hypot(ax - bx, ay - by), at: [(ax + bx) / 2, (ay + by) / 2] };
  };
  view.addEventListener("pointermove", (event) => {
    const before = touches.get(event.pointerId);
    if (!before) return;
    const now = share(event);
    if (Math.hypot(now[0] - before[0], now[1] - before[1]) * view.clientWidth > 4) bench.dragged = true;
    if (start) return outline(start, pixel(event));
    if (!bench.dragged) return;
    touches.set(event.pointerId, now);
    if (touches.size === 2 && pinch) {
      const next = spread();
      zoomAt(next.far / Math.max(pinch.far, 1e-6), ...next.at);
      pinch = next;
    } else if (touches.size === 1 && zoom > 1) {
      view.setPointerCapture(event.pointerId);
      x -= (now[0] - before[0]) * full.w / zoom;
      y -= (now[1] - before[1]) * full.h / zoom;
      lay();
    }
  });
  const lift = (event) => {
    if (start && event.type === "pointerup") finish(start, pixel(event));
    touches.delete(event.pointerId);
    [pinch, start] = [null, null];
  };
  view.addEventListener("pointerup", lift);
  view.addEventListener("pointercancel", lift);

  function outline([ax, ay], [bx, by]) {
    const box = byId("region");
    const at = { x: Math.min(ax, bx) + 0.5, y: Math.min(ay, by) + 0.5, width: Math.abs(ax - bx), height: Math.abs(ay - by) };
    for (const [name, value] of Object.entries(at)) box.setAttribute(name, String(value));
    box.style.display = "";
  }
  function finish(a, b) {
    if (Math.abs(a[0] - b[0]) < 2 || Math.abs(a[1] - b[1]) < 2) return;
    outline(a, b);
    wanted([[Math.min(a[0], b[0]), Math.min(a[1], b[1])], [Math.max(a[0], b[0]), Math.max(a[1], b[1])]]);
  }
  /** Asks for a region to be drawn; `null` ends the asking. */
  bench.wantRegion = (hear) => {
    wanted = hear;
    stage.classList.toggle("drawing", Boolean(hear));
    if (!hear) byId("region").style.display = "none";
  };

  stage.addEventListener("keydown", (event) => {
    if (event.target !== stage || event.ctrlKey || event.metaKey || event.altKey) return;
    const part = 0.15 / zoom;
    const pan = { ArrowLeft: [-part, 0], ArrowRight: [part, 0], ArrowUp: [0, -part], ArrowDown: [0, part] }[event.key];
    if (event.key === "+" || event.key === "=") zoomAt(STEP, 0.5, 0.5);
    else if (event.key === "-") zoomAt(1 / STEP, 0.5, 0.5);
    else if (event.key === "0") zoomAt(1 / MOST, 0.5, 0.5);
    else if (event.key === " ") bench.toggle();
    else if (event.key === "Escape" && bench.picked !== null) bench.pick(null);
    else if (event.shiftKey && pan) { x += pan[0] * full.w; y += pan[1] * full.h; lay(); }
    else if (bench.stepFor(event.key) !== null) { bench.stop(); bench.go(bench.stepFor(event.key)); }
    else return;
    event.preventDefault();
  });
  byId("nearer").addEventListener("click", () => zoomAt(STEP, 0.5, 0.5));
  byId("farther").addEventListener("click", () => zoomAt(1 / STEP, 0.5, 0.5));
  byId("whole").addEventListener("click", () => zoomAt(1 / MOST, 0.5, 0.5));
})();
