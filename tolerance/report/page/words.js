"use strict";
// Numbers in words, as everywhere in the program, and the scenario's text of a state.

const Words = (() => {
  const MOST_DIGITS = 3;

  function fixed(value, digits) {
    if (value === null || !Number.isFinite(value)) return "-";
    const text = value.toFixed(digits);
    return Number(text) === 0 ? text.replace("-", "") : text;
  }

  const trimmed = (value, digits) => {
    const text = fixed(value, digits);
    return text.includes(".") ? text.replace(/0+$/, "").replace(/\.$/, "") : text;
  };

  function percentDigits(interval, target) { // the last digit moves by 2 to 20 inside the interval
    const half = 100 * Math.max(interval.high - interval.value, interval.value - interval.low);
    let digits = half > 0 ? Math.ceil(-Math.log10(half / 2)) : MOST_DIGITS;
    digits = Math.min(Math.max(digits, 0), MOST_DIGITS);
    if (target !== undefined && interval.value < target)
      while (digits < MOST_DIGITS && Number(fixed(100 * interval.value, digits)) >= 100 * target) digits += 1;
    return digits;
  }

  const percent = (share, digits) => `${fixed(100 * share, digits)} %`;
  const share = (interval, target) => percent(interval.value, percentDigits(interval, target));
  const range = (interval, target) => {
    const digits = percentDigits(interval, target);
    return `[${fixed(100 * interval.low, digits)}, ${fixed(100 * interval.high, digits)}]`;
  };

  const plain = value => String(Number(value.toPrecision(6)));
  const withUnit = (value, unit) => unit.name === "" ? plain(value) : `${plain(value / unit.factor)} ${unit.name}`;

  function amount(given, variation, data) { // as the scenario writes it, and as one reads it
    if (!given.relative && variation.measure === "share") return plain(given.value);
    return withUnit(given.value, Process.unitOf(variation.measure, given.relative, data));
  }

  const quoted = (text, isNumber) => isNumber ? text : `"${text}"`;

  function amountKey(given, variation, data) {
    const isNumber = !given.relative && (variation.measure === "number" || variation.measure === "share");
    return quoted(amount(given, variation, data), isNumber);
  }

  function variationText(number, state, board) {
    const data = board.data, variation = data.variations[number];
    const entry = board.entries(state)[number];
    let text = variation.kept;
    if (variation.readings !== null && !entry.readings) text = "";
    if (entry.tolerance !== null) text += `tolerance = ${amountKey(entry.tolerance, variation, data)}\n`;
    if (entry.low !== null) {
      const unit = Process.unitOf(variation.measure, false, data), isNumber = variation.measure === "number";
      text += `low = ${quoted(withUnit(entry.low, unit), isNumber)}\nhigh = ${quoted(withUnit(entry.high, unit), isNumber)}\n`;
    }
    if (entry.shift !== null && entry.shift.value !== 0)
      text += `shift = ${amountKey(entry.shift, variation, data)}\n`;
    return text;
  }

  const length = (metres, data) => withUnit(metres, Process.unitOf("length", false, data));

  function lineText(number, state, board) {
    const line = board.data.lines[number], by = board.width(state, number) - line.width;
    let text = `width = "${length(line.width + by, board.data)}"\n`;
    if (line.gap !== null) text += `gap = "${length(line.gap - by, board.data)}"\n`;
    if (line.groundGap !== null) text += `ground_gap = "${length(line.groundGap - by, board.data)}"\n`;
    if (line.ownLimit) text += `limit = "${plain(100 * board.limit(state, number))} %"\n`;
    return text;
  }

  // The whole scenario; what is not moved stands there as it was given.
  function scenario(state, board) {
    return board.data.pieces.map(piece => {
      const number = piece.number;
      if (piece.slot === "limit" && state.limit !== 1) {
        const other = board.data.lines.findIndex(line => !line.ownLimit);
        return other < 0 ? piece.text : `limit = "${plain(100 * board.limit(state, other))} %"\n`;
      }
      if (piece.slot === "line" && (state.widths[number] !== 0 || state.limits[number] !== 1))
        return lineText(number, state, board);
      if (piece.slot === "variation" && (state.factors[number] !== 1 || state.moves[number] !== 0))
        return variationText(number, state, board);
      return piece.text;
    }).join("");
  }

  // What a slider stands at, and what it was.
  function slider(kind, number, state, board) {
    const data = board.data, start = board.start();
    if (kind === "limit" || kind === "limits") {
      const line = kind === "limit" ? data.lines.findIndex(each => !each.ownLimit) : number;
      return [board.limit(state, line), board.limit(start, line)].map(limit => `${plain(100 * limit)} %`);
    }
    if (kind === "widths")
      return [board.width(state, number), board.width(start, number)].map(width => length(width, data));
    const variation = data.variations[number];
    const told = at => {
      const entry = board.entries(at)[number];
      if (kind === "moves") return moveWords(at.moves[number], entry, variation, data);
      if (entry.low !== null && variation.measure !== "share") {
        const unit = Process.unitOf(variation.measure, false, data);
        return unit.name === "" ? `${plain(entry.low)} to ${plain(entry.high)}`
          : `${plain(entry.low / unit.factor)} to ${withUnit(entry.high, unit)}`;
      }
      if (entry.low !== null) return `${plain(100 * entry.low)} to ${plain(100 * entry.high)} %`;
      if (entry.readings) return "as measured";
      return amount(entry.tolerance, variation, data);
    };
    return [told(state), told(start)];
  }

  function moveWords(move, entry, variation, data) {
    const by = {value: move * variation.shiftReach, relative: variation.shiftRelative};
    if (entry.low === null && entry.shift !== null && (entry.readings || variation.readings === null)) by.value = entry.shift.value;
    const text = amount(by, variation, data);
    return by.value > 0 ? `+${text}` : by.value === 0 ? "0" : text;
  }

  return {fixed, trimmed, percent, percentDigits, share, range, plain, scenario, slider};
})();
