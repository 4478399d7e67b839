// Runs in the page: what it offers to those who do not see it or do not use a mouse. Rules of WCAG 2.2, named by their
// number; written for this page, not complete.
(() => {
  const faults = [];
  const say = (rule, element, why) => faults.push(`${rule} ${element.tagName.toLowerCase()}${element.id ? "#" + element.id : ""}: ${why}`);
  const seen = (e) => e.getClientRects().length > 0 && getComputedStyle(e).visibility !== "hidden";
  const text = (id) => document.getElementById(id)?.textContent.trim();
  const label = (e) => e.getAttribute("aria-label")?.trim()
    || (e.getAttribute("aria-labelledby") || "").split(/\s+/).map((id) => id && text(id)).join(" ").trim()
    || [...(e.labels || [])].map((l) => l.textContent).join(" ").trim()
    || (["BUTTON", "A", "SUMMARY"].includes(e.tagName) ? e.textContent.trim() : "") || e.querySelector?.(":scope > title")?.textContent;

  // 4.1.2 and 1.1.1: everything that acts or shows has a name.
  for (const e of document.querySelectorAll("button, a[href], input, select, textarea, summary, [role=slider], [role=img], [role=region], [tabindex]")) {
    if (seen(e) && !label(e)) say("4.1.2", e, "has no name");
  }
  for (const e of document.querySelectorAll("[role=slider]")) {
    for (const name of ["aria-valuenow", "aria-valuemin", "aria-valuemax", "aria-valuetext"]) if (!e.hasAttribute(name)) say("4.1.2", e, "lacks " + name);
  }
  // 4.1.1, 1.3.1: ids are unique, what is referred to exists, headings do not skip a level, cells have headings.
  const ids = [...document.querySelectorAll("[id]")].map((e) => e.id);
  for (const id of new Set(ids)) if (ids.filter((other) => other === id).length > 1) faults.push("4.1.1 id " + id + " stands twice");
  for (const e of document.querySelectorAll("[aria-labelledby]")) if (!text(e.getAttribute("aria-labelledby"))) say("1.3.1", e, "is labelled by nothing");
  let level = 0;
  for (const e of document.querySelectorAll("h1, h2, h3, h4")) {
    const now = Number(e.tagName[1]);
    if (now > level + 1) say("1.3.1", e, "skips a level: " + e.textContent);
    level = now;
  }
  for (const e of document.querySelectorAll("table")) if (!e.querySelector("th[scope]")) say("1.3.1", e, "has no headings");
  // 3.1.1, 2.4.2, 1.3.1: language, title, one main part.
  if (!document.documentElement.lang) faults.push("3.1.1 no language");
  if (!document.title) faults.push("2.4.2 no title");
  if (document.querySelectorAll("main").length !== 1) faults.push("1.3.1 not one main part");
  // 2.4.3: no tab order of its own.
  for (const e of document.querySelectorAll("[tabindex]")) if (Number(e.getAttribute("tabindex")) > 0) say("2.4.3", e, "changes the order of focus");
  // 2.5.8: targets of 24 px, or with as much room about them.
  for (const e of document.querySelectorAll("button, select, input[type=checkbox], input[type=range]")) {
    const box = e.getBoundingClientRect(), of = e.closest("label")?.getBoundingClientRect() || box;
    if (seen(e) && Math.max(box.height, of.height) < 23.5) say("2.5.8", e, `is ${Math.round(box.height)} px high: ${label(e)}`);
  }
  // 1.4.3: words stand out from what is behind them.
  const canvas = document.createElement("canvas").getContext("2d", { willReadFrequently: true }), colours = new Map();
  const rgb = (colour) => {
    if (!colours.has(colour)) {
      canvas.clearRect(0, 0, 1, 1);
      canvas.fillStyle = colour;
      canvas.fillRect(0, 0, 1, 1);
      colours.set(colour, [...canvas.getImageData(0, 0, 1, 1).data]);
    }
    return colours.get(colour);
  };
  const light = ([r, g, b]) => [r, g, b].map((v) => { const s = v / 255; return s <= 0.04045 ? s / 12.92 : ((s + 0.055) / 1.055) ** 2.4; })
    .reduce((sum, v, i) => sum + v * [0.2126, 0.7152, 0.0722][i], 0);
  const behind = (e) => { for (let up = e; up; up = up.parentElement) { const c = rgb(getComputedStyle(up).backgroundColor); if (c[3] > 250) return c; } return [255, 255, 255]; };
  for (const e of document.querySelectorAll("p, dt, dd, li, td, th, h1, h2, h3, a, button, label span, summary, figcaption, svg text")) {
    if (!seen(e) || !e.textContent.trim() || e.closest(".stage, .later, .unseen, [aria-hidden=true]")) continue;
    const style = getComputedStyle(e), front = light(rgb(e.tagName === "text" ? style.fill : style.color)), back = light(behind(e.closest("svg") || e));
    const ratio = (Math.max(front, back) + 0.05) / (Math.min(front, back) + 0.05);
    if (ratio < 4.5) say("1.4.3", e, `contrast ${ratio.toFixed(2)}: ${e.textContent.trim().slice(0, 30)}`);
  }
  return [...new Set(faults)];
})()
