"use strict";
// What all parts of the page share: the run's record, the step of time that is shown, the filament that is picked, and
// who wants to hear when these change. A step is one usable frame.
const bench = (() => {
  const read = (id) => JSON.parse(document.getElementById(id)?.textContent || "null");
  const record = read("run-record");
  const film = read("film") || [];
  const hearers = { step: [], pick: [] };
  const end = Math.max(0, record.time_s.length - 1);
  let step = end;
  let picked = null;

  const tell = (what) => hearers[what].forEach((hear) => hear());
  const clamp = (value, low, high) => Math.min(high, Math.max(low, value));

  /** Index of the last value that is at most `limit`, in a rising list; -1 where there is none. */
  function upTo(values, limit) {
    let low = 0, high = values.length;
    while (low < high) {
      const middle = (low + high) >> 1;
      if (values[middle] <= limit) low = middle + 1; else high = middle;
    }
    return low - 1;
  }

  /** Digits with a true minus sign. */
  const fixed = (value, decimals) => value.toFixed(decimals).replace(/^-(?=.*[1-9])/, "−").replace(/^-/, "");

  /** A run time as words: "42 s", "4.5 min", "1 h 20 min". */
  function duration(seconds) {
    const s = Math.abs(seconds), sign = seconds < 0 ? "−" : "";
    if (s < 120) return sign + Math.round(s) + " s";
    if (s < 7200) return sign + String(Number((s / 60).toFixed(1))) + " min";
    const [large, small, unit] = s < 172800 ? ["h", "min", 60] : ["d", "h", 3600];
    const per = large === "h" ? 60 : 24;
    const all = Math.round(s / unit);
    return sign + Math.floor(all / per) + " " + large + (all % per ? " " + (all % per) + " " + small : "");
  }

  return {
    record, film, end, upTo, clamp, fixed, duration,
    byId: (id) => document.getElementById(id),
    get step() { return step; },
    get picked() { return picked; },
    get time() { return record.time_s[step] ?? 0; },
    on(what, hear) { hearers[what].push(hear); },
    go(to) {
      const next = clamp(Math.round(to), 0, end);
      if (next === step) return;
      step = next;
      tell("step");
    },
    /** Goes to the step nearest to a time, s. */
    goTime(seconds) {
      const times = record.time_s, before = Math.max(0, upTo(times, seconds));
      const after = Math.min(end, before + 1);
      bench.go(times[after] - seconds < seconds - times[before] ? after : before);
    },
    pick(number) {
      picked = number === picked ? null : number;
      tell("pick");
    },
    start() { tell("step"); tell("pick"); },
    /** Steps for a key, or null where the key means nothing here. */
    stepFor(key) {
      const leap = Math.max(1, Math.round(end / 20));
      const to = { ArrowLeft: step - 1, ArrowRight: step + 1, ArrowDown: step - 1, ArrowUp: step + 1,
        PageDown: step - leap, PageUp: step + leap, Home: 0, End: end }[key];
      return to === undefined ? null : clamp(to, 0, end);
    },
  };
})();
