"use strict";
// The spread of a line as an SVG.

const Pictures = (() => {
  const NAME = "http://www.w3.org/2000/svg";
  const WORDS = 128; // room for what stands beside a limit
  const SEEN = 5e-6; // a smaller share is nought in what is written
  const WIDE = 480, HIGH = 210, FOOT = 172, ROOF = 34;

  function element(name, attributes, text) {
    const made = document.createElementNS(NAME, name);
    for (const [key, value] of Object.entries(attributes)) made.setAttribute(key, value);
    if (text !== undefined) made.textContent = text;
    return made;
  }

  function ticks(low, high, most) {
    const rough = (high - low) / most, power = 10 ** Math.floor(Math.log10(rough));
    const step = [1, 2, 5, 10].map(each => each * power).find(each => each >= rough);
    const found = [];
    for (let at = Math.ceil(low / step) * step; at <= high + 1e-9 * step; at += step) found.push(Number(at.toFixed(9)));
    return found;
  }

  function stairs(bins, scale, closed) {
    const wide = WIDE / bins.length;
    let path = `M0 ${FOOT}`;
    bins.forEach((count, bin) => {
      const top = (FOOT - count * scale).toFixed(1);
      path += `L${(bin * wide).toFixed(1)} ${top}L${((bin + 1) * wide).toFixed(1)} ${top}`;
    });
    return path + `L${WIDE} ${FOOT}` + (closed ? "Z" : "");
  }

  function spread(svg, line, told, given) {
    const [low, high] = line.axis, at = ohm => (ohm - low) / (high - low) * WIDE;
    const most = Math.max(...told.bins, ...given.bins, 1), scale = (FOOT - ROOF) / most;
    const number = svg.dataset.spread, clip = (name, from, to) => {
      const made = element("clipPath", {id: `${name}-${number}`});
      made.append(element("rect", {x: from, y: 0, width: Math.max(to - from, 0), height: FOOT}));
      return made;
    };
    const [first, last] = told.limits.map(limit => Math.min(Math.max(at(limit), 0), WIDE));
    const path = stairs(told.bins, scale, true), parts = [
      clip("below", 0, first), clip("inside", first, last), clip("above", last, WIDE),
      element("path", {d: path, class: "passing", "clip-path": `url(#inside-${number})`}),
      element("path", {d: path, class: "failing", "clip-path": `url(#below-${number})`}),
      element("path", {d: path, class: "failing", "clip-path": `url(#above-${number})`}),
      element("path", {d: stairs(told.bins, scale, false), class: "outline"}),
    ];
    if (!told.still) parts.push(element("path", {d: stairs(given.bins, scale, false), class: "as-run"}));
    parts.push(element("line", {x1: 0, x2: WIDE, y1: FOOT, y2: FOOT, class: "axis"}));
    for (const limit of told.limits.map(at)) if (limit >= 0 && limit <= WIDE)
      parts.push(element("line", {x1: limit, x2: limit, y1: 22, y2: FOOT, class: "limit"}));
    parts.push(element("line", {x1: at(line.target), x2: at(line.target), y1: FOOT - 46, y2: FOOT, class: "target"}));
    for (const tick of ticks(low, high, 6)) {
      const x = at(tick);
      if (x < 16 || x > WIDE - 16) continue;
      parts.push(element("line", {x1: x, x2: x, y1: FOOT, y2: FOOT + 5, class: "axis"}));
      parts.push(element("text", {x, y: FOOT + 22, "text-anchor": "middle", class: "faint"}, Words.trimmed(tick, 3)));
    }
    parts.push(element("text", {x: WIDE, y: HIGH - 1, "text-anchor": "end", class: "faint"}, "ohm"));
    const words = (share, name) => `${Words.percent(share, share > 0 && share < 0.0005 ? 3 : 2)} ${name}`;
    parts.push(element("text", {x: first > WORDS ? first - 6 : 0, y: 16, "text-anchor": first > WORDS ? "end" : "start",
      class: told.below >= SEEN ? "fail-words" : "faint"}, words(told.below, "below")));
    parts.push(element("text", {x: last < WIDE - WORDS ? last + 6 : WIDE, y: 16, "text-anchor": last < WIDE - WORDS ? "start" : "end",
      class: told.above >= SEEN ? "fail-words" : "faint"}, words(told.above, "above")));
    svg.replaceChildren(...parts);
    svg.setAttribute("aria-label", `Spread of the impedance of ${line.name}: mean ${Words.fixed(told.mean, 2)} ohm, `
      + `deviation ${Words.fixed(told.deviation, 2)} ohm, limits ${told.limits.map(each => Words.trimmed(each, 2))
        .join(" to ")} ohm, ${words(told.below, "below")}, ${words(told.above, "above")}`);
  }

  return {spread};
})();
