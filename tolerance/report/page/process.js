"use strict";
// The laws of what varies, in a state of the sliders, and their values for the run's own draws.

const Process = (() => {
  const ROWS = 256; // of each replicate in a block of coupons
  const REACH = 3; // deviations that a tolerance spans unless the scenario says otherwise
  const FARTHEST_MEAN = 8; // deviations from the nearer end, for the mean of a truncated normal

  const size = (amount, reference) => amount === null ? 0 : amount.relative ? amount.value * Math.abs(reference)
    : amount.value;
  const rounded = (value, unit) => Number((value / unit).toPrecision(6)) * unit;

  function unitOf(measure, relative, data) {
    if (relative || measure === "share") return {factor: 0.01, name: "%"};
    if (measure === "number") return {factor: 1, name: ""};
    return data.lengths === "mil" ? {factor: 25.4e-6, name: "mil"} : {factor: 1e-6, name: "um"};
  }

  // A variation as a state has it: the keys that the scenario's text would hold. factor, move: of tolerance and mean.
  function resolved(variation, factor, move, data) {
    const given = variation.tolerance, shift = variation.shift;
    const result = {shape: variation.shape, tolerance: given, shift, sigmas: variation.sigmas, cpk: variation.cpk,
      low: variation.low, high: variation.high, readings: variation.shape === "measured"};
    const by = move * variation.shiftReach;
    const length = unitOf(variation.measure, false, data).factor;
    if (variation.low !== null) {
      if (factor !== 1 || move !== 0) {
        const anchor = variation.anchor === null ? 0.5 * (variation.low + variation.high) : variation.anchor;
        result.low = rounded(anchor - factor * (anchor - variation.low) + by, length);
        result.high = rounded(anchor + factor * (variation.high - anchor) + by, length);
      }
      if (move !== 0 && variation.shape !== "uniform") {
        const start = shift === null ? 0 : size(shift, variation.nominal);
        result.shift = {value: rounded(start + by, length), relative: false};
      }
      return result;
    }
    if (given !== null && factor !== 1)
      result.tolerance = {value: rounded(given.value * factor, unitOf(variation.measure, given.relative, data).factor),
        relative: given.relative};
    if (move !== 0) {
      const relative = variation.shiftRelative;
      const start = shift === null ? 0 : shift.value;
      result.shift = {value: rounded(start + by, unitOf(variation.measure, relative, data).factor), relative};
    }
    if (result.readings && factor !== 1) { // a tolerance is a promise: readings say what was
      const own = variation.readings;
      result.shape = "normal";
      result.readings = false;
      result.sigmas = REACH;
      result.tolerance = {value: rounded(REACH * own.deviation * factor, length), relative: false};
      result.shift = {value: rounded(own.mean - variation.nominal + size(result.shift, variation.nominal), length),
        relative: false};
    }
    return result;
  }

  // The numbers of one property's law; reference: what a percentage is of.
  function lawOf(property, entry, reference) {
    const centre = property.nominal + size(entry.shift, reference);
    if (entry.readings) return {shape: "measured", centre: size(entry.shift, reference), low: 0, high: 0, deviation: 1};
    const half = entry.low !== null ? 0.5 * (entry.high - entry.low) : size(entry.tolerance, reference);
    const low = entry.low !== null ? entry.low : centre - half, high = entry.low !== null ? entry.high : centre + half;
    const sigmas = entry.sigmas === null ? REACH : entry.sigmas;
    let deviation = half / sigmas;
    if (entry.shape === "lognormal") deviation = Math.log1p(half / property.nominal) / sigmas;
    else if (entry.cpk !== null) deviation = (half - Math.abs(size(entry.shift, reference))) / (3 * entry.cpk);
    return {shape: entry.shape, centre, low, high, deviation};
  }

  // The law with an offered half-width, where that is less than its own.
  function narrowed(property, entry, offered, reference) {
    const half = entry.readings ? REACH * property.measured.deviation
      : entry.low !== null ? 0.5 * (entry.high - entry.low) : size(entry.tolerance, reference);
    const wanted = size(offered, reference);
    if (!(wanted < half * (1 - 1e-12))) return null;
    if (entry.readings) return {...lawOf(property, entry, reference), stretch: wanted / half};
    if (entry.low !== null) {
      const peak = property.nominal + size(entry.shift, reference), middle = 0.5 * (entry.low + entry.high);
      const anchor = entry.shape !== "uniform" && entry.low <= peak && peak <= entry.high ? peak : middle;
      const factor = wanted / half;
      return lawOf(property, {...entry, low: anchor - factor * (anchor - entry.low),
        high: anchor + factor * (entry.high - anchor)}, reference);
    }
    return lawOf(property, {...entry, tolerance: {value: wanted, relative: false}}, reference);
  }

  // Why no scenario may say this; "" where it may.
  function refusal(property, entry, law, measure) {
    if (entry.readings) return "";
    if (entry.shape === "lognormal" && !(law.centre > 0)) return "the median would not stay above 0";
    if (entry.cpk !== null && !(law.deviation > 0)) return "a half-width held with a Cpk must be larger than the shift";
    if (entry.shape === "triangular" && !(law.low <= law.centre && law.centre <= law.high))
      return "the peak would leave the ends";
    if (entry.shape === "truncated_normal" && law.high > law.low
      && Math.max(law.low - law.centre, law.centre - law.high) > FARTHEST_MEAN * law.deviation)
      return "the mean would lie too far outside the ends";
    if ((measure === "number" || measure === "share") && entry.shape !== "lognormal" && !(law.low > 0))
      return "the lower end would not stay above 0";
    if (measure === "share" && entry.shape !== "lognormal" && !(law.high < 1)) return "the upper end would reach 100 %";
    return "";
  }

  const keyOf = law => `${law.shape} ${law.centre} ${law.low} ${law.high} ${law.deviation} ${law.stretch ?? 1}`;

  function lines(x, places, values) { // straight lines between the places, the outermost carried on
    let from = 0, to = places.length - 1;
    while (to - from > 1) {
      const middle = (from + to) >> 1;
      if (places[middle] <= x) from = middle; else to = middle;
    }
    return values[from] + (values[to] - values[from]) * (x - places[from]) / (places[to] - places[from]);
  }

  function one(law, germ, share, measured) { // the value at one germ; share: of normals below it
    switch (law.shape) {
      case "normal": return law.centre + law.deviation * germ;
      case "lognormal": return law.centre * Math.exp(law.deviation * germ);
      case "uniform": return law.low + (law.high - law.low) * share;
      case "triangular": {
        if (law.high === law.low) return law.low;
        const peak = (law.centre - law.low) / (law.high - law.low);
        return law.low + (law.high - law.low) * (share <= peak ? Math.sqrt(share * peak)
          : 1 - Math.sqrt((1 - share) * (1 - peak)));
      }
      case "truncated_normal": {
        if (law.high === law.low) return law.low;
        const cut = law.cut ?? (law.cut = cuts(law));
        const value = law.centre + law.deviation * Arithmetic.normalQuantile(
          cut.below + share * cut.mass, cut.above + (1 - share) * cut.mass);
        return Math.min(Math.max(value, law.low), law.high);
      }
      default: {
        const middle = lines(0, measured.germs, measured.values);
        let value = lines(germ, measured.germs, measured.values);
        if (law.stretch !== undefined) value = middle + law.stretch * (value - middle);
        return law.centre + (measured.logarithmic ? Math.exp(value) : value);
      }
    }
  }

  function cuts(law) {
    const low = (law.low - law.centre) / law.deviation, high = (law.high - law.centre) / law.deviation;
    const below = Arithmetic.normalShare(low), above = Arithmetic.normalShare(-high);
    const mass = low > 0 ? Arithmetic.normalShare(-low) - above : Arithmetic.normalShare(high) - below;
    return {below, above, mass};
  }

  const atGerm = (law, germ, measured) => one(law, germ, Arithmetic.normalShare(germ), measured);

  // Where nearly all draws of a law lie.
  function spanOf(law, measured) {
    return law.shape === "uniform" ? [law.low, law.high] : [atGerm(law, -REACH, measured), atGerm(law, REACH, measured)];
  }

  // Germs of blocks of coupons: rows of every replicate, one replicate after the other.
  class Draws {
    constructor(draws) {
      this.draws = draws;
      this.rows = Math.min(ROWS, draws.block);
      this.blocks = Math.ceil(draws.block / this.rows);
      this.germs = new Map();
      this.shares = new Map();
      this.stored = draws.stored === null ? null : Arithmetic.wholeNumbers(draws.stored);
    }

    rowsOf(block) { return Math.min(this.rows, this.draws.block - block * this.rows); }

    count(block) { return this.rowsOf(block) * this.draws.replicates; }

    germ(column, block) {
      const key = column * 65536 + block;
      if (!this.germs.has(key)) this.make(column, block);
      return this.germs.get(key);
    }

    share(column, block) {
      const key = column * 65536 + block;
      if (!this.shares.has(key)) {
        const germ = this.germ(column, block), share = new Float64Array(germ.length);
        for (let k = 0; k < germ.length; k++) share[k] = Arithmetic.normalShare(germ[k]);
        this.shares.set(key, share);
      }
      return this.shares.get(key);
    }

    make(column, block) {
      const group = this.draws.roots.find(each => each.columns.includes(column));
      if (group === undefined) {
        this.germs.set(column * 65536 + block, this.free(column, block));
        return;
      }
      const free = group.columns.map(each => this.free(each, block));
      group.columns.forEach((each, row) => {
        const germ = new Float64Array(this.count(block));
        for (let other = 0; other <= row; other++) {
          const root = group.root[row][other];
          for (let k = 0; k < germ.length; k++) germ[k] += root * free[other][k];
        }
        this.germs.set(each * 65536 + block, germ);
      });
    }

    free(column, block) { // independent germs
      const {replicates, variables, sobol} = this.draws, rows = this.rowsOf(block);
      const germ = new Float64Array(rows * replicates), start = block * this.rows;
      for (let replicate = 0; replicate < replicates; replicate++) {
        for (let row = 0; row < rows; row++) {
          const at = replicate * rows + row;
          if (this.stored !== null) {
            const place = column * replicates * this.draws.block + replicate * this.draws.block + start + row;
            germ[at] = this.stored[place] * this.draws.step;
          } else {
            const point = Arithmetic.sobolPoint(sobol.shifts[replicate][column], sobol.directions[replicate][column],
              start + row);
            const whole = 2 ** sobol.bits;
            germ[at] = Arithmetic.normalQuantile((point + 0.5) / whole, (whole - point - 0.5) / whole);
          }
        }
      }
      return germ;
    }

    // Values of a law for the germs of a column, (coupons of the block,).
    values(law, column, block, measured) {
      const germ = this.germ(column, block), values = new Float64Array(germ.length);
      if (law.shape === "normal") {
        for (let k = 0; k < germ.length; k++) values[k] = law.centre + law.deviation * germ[k];
      } else if (law.shape === "lognormal" || law.shape === "measured") {
        for (let k = 0; k < germ.length; k++) values[k] = one(law, germ[k], 0, measured);
      } else {
        const share = this.share(column, block);
        for (let k = 0; k < germ.length; k++) values[k] = one(law, germ[k], share[k], measured);
      }
      return values;
    }
  }

  return {resolved, lawOf, narrowed, refusal, keyOf, spanOf, unitOf, atGerm, Draws};
})();
