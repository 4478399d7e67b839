// The review: a frame, a filament or a region marked as wrong, with a reason, handed back as review.toml. Nothing in the
// page changes by it: the next report does, and says so.
(() => {
  const { record, byId } = bench;
  const form = byId("review-form");
  if (form) {
    const [list, reason, text, save, copy, said] =
      ["review-list", "review-reason", "review-text", "review-save", "review-copy", "review-said"].map(byId);
    const marks = record.reviewed.map((mark) => ({ ...mark }));
    let region = null;

    const what = () => form.elements["review-what"].value;
    const roots = new Map(record.filaments.map(([number, , root]) => [number, root]));

    /** Text as a TOML basic string: JSON's escapes are TOML's, what neither allows is dropped. */
    const quoted = (words) => JSON.stringify(words.replace(/[\u0000-\u001f\u007f\ud800-\udfff]/gu, " "));
    const numbers = (list) => "[" + list.join(", ") + "]";

    function toml() {
      const lines = ["# What a reader of the report marked as wrong. Put this file into the run folder as review.toml and",
        "# make the report again: it leaves these out, says so, and gives both sets of numbers."];
      for (const mark of marks) {
        lines.push("", "[[reject]]");
        if (mark.frame !== null) lines.push("frame = " + mark.frame);
        if (mark.filament !== null) lines.push("filament = " + mark.filament);
        if (mark.root_px) lines.push("root_px = " + numbers(mark.root_px));
        if (mark.region_px) lines.push("region_px = " + numbers(mark.region_px.map(numbers)));
        lines.push("reason = " + quoted(mark.reason));
      }
      return lines.join("\n") + "\n";
    }

    const name = (mark) => mark.frame !== null ? "frame " + mark.frame
      : mark.filament !== null ? "filament " + mark.filament
      : "region from " + mark.region_px[0].join(", ") + " to " + mark.region_px[1].join(", ") + " px";

    function show() {
      list.replaceChildren(...marks.map((mark, i) => {
        const item = document.createElement("li"), why = document.createElement("bdi"), drop = document.createElement("button");
        why.textContent = mark.reason;
        Object.assign(drop, { type: "button", textContent: "Take back" });
        drop.setAttribute("aria-label", "Take back the mark on " + name(mark));
        drop.addEventListener("click", () => { marks.splice(i, 1); show(); });
        item.append(name(mark) + ": ", why, " ", drop);
        return item;
      }));
      byId("review-out").hidden = marks.length === 0 && record.reviewed.length === 0;
      text.value = toml();
    }

    function offer() {
      byId("review-frame").textContent = "this frame (" + record.frame[bench.step] + ")";
      byId("review-filament").textContent = bench.picked === null ? "a filament: pick one in the picture" : "filament " + bench.picked;
      byId("review-region").textContent = region ? "the region drawn" : "a region: draw it on the picture";
    }

    form.addEventListener("change", () => {
      region = null;
      bench.wantRegion?.(what() === "region" ? (corners) => { region = corners; offer(); } : null);
      offer();
    });
    form.addEventListener("submit", (event) => {
      event.preventDefault();
      const mark = { frame: null, filament: null, root_px: null, region_px: null, reason: reason.value.trim() };
      if (what() === "frame") mark.frame = record.frame[bench.step];
      if (what() === "filament") [mark.filament, mark.root_px] = [bench.picked, roots.get(bench.picked) || null];
      if (what() === "region") mark.region_px = region;
      const missing = !mark.reason ? "Say why it is wrong." : (mark.frame ?? mark.filament ?? mark.region_px) === null
        ? (what() === "filament" ? "Pick a filament in the picture or the table first." : "Draw the region on the picture first.") : "";
      said.textContent = missing || name(mark) + " marked: " + (marks.length + 1) + " in all.";
      if (missing) return;
      marks.push(mark);
      reason.value = "";
      region = null;
      if (what() === "region") bench.wantRegion?.((corners) => { region = corners; offer(); });
      show();
      offer();
    });
    save.addEventListener("click", () => {
      const link = document.createElement("a");
      link.href = URL.createObjectURL(new Blob([toml()], { type: "application/toml" }));
      link.download = "review.toml";
      link.click();
      setTimeout(() => URL.revokeObjectURL(link.href), 1000);
    });
    copy.addEventListener("click", () => {
      text.select();
      const done = navigator.clipboard ? navigator.clipboard.writeText(text.value) : Promise.reject();
      done.then(() => { said.textContent = "Copied."; }, () => { said.textContent = "Selected: copy it with your keys."; });
    });
    bench.on("step", offer);
    bench.on("pick", offer);
    byId("reject").hidden = false;
    show();
  }
  bench.start();
})();
