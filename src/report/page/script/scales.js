// Scales of the plots: round ticks, and SVG elements made by name.
const scales = (() => {
  /** 1, 2 or 5 times a power of ten, the least step that gives at most `count` intervals. */
  function step(span, count) {
    const raw = span / count, power = 10 ** Math.floor(Math.log10(raw));
    return power * ([1, 2, 5].find((lead) => lead * power >= raw * (1 - 1e-9)) || 10);
  }
  function ticks(low, high, count) {
    const by = step(high - low, count), all = [];
    for (let i = Math.ceil(low / by - 1e-9); i * by <= high + by * 1e-9; i++) all.push(i * by);
    const decimals = Math.max(0, -Math.floor(Math.log10(by * 1.0001)));
    return all.map((value) => [value, bench.fixed(value, decimals)]);
  }
  /** Low and high of the values that are there, widened to whole ticks; zero is included on demand. */
  function around(values, zero) {
    const known = values.filter((value) => value !== null && Number.isFinite(value));
    if (zero) known.push(0);
    let low = known.reduce((a, b) => Math.min(a, b), Infinity), high = known.reduce((a, b) => Math.max(a, b), -Infinity);
    if (!(low <= high)) return null;
    if (high - low <= 1e-12 * Math.max(Math.abs(low), Math.abs(high), 1e-12)) [low, high] = [low - 0.5, high + 0.5];
    const by = step(high - low, 4);
    return [Math.floor(low / by + 1e-9) * by, Math.ceil(high / by - 1e-9) * by];
  }
  function make(name, attributes, ...inside) {
    const element = document.createElementNS("http://www.w3.org/2000/svg", name);
    for (const [key, value] of Object.entries(attributes)) element.setAttribute(key, String(value));
    element.append(...inside);
    return element;
  }
  const short = (value) => Math.round(value * 10) / 10;
  /** Path through samples [x, y], broken where y is null; as steps each value holds until the next. */
  function path(samples, steps) {
    let out = "", before = null;
    for (const [x, y] of samples) {
      if (y === null) { if (steps && before !== null) out += `H${short(x)}`; before = null; continue; }
      out += before === null ? `M${short(x)} ${short(y)}` : steps ? `H${short(x)}V${short(y)}` : `L${short(x)} ${short(y)}`;
      before = y;
    }
    return out;
  }
  return { ticks, around, make, path, short };
})();
