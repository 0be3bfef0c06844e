"use strict";
// The board: impedances of every line in any state, block by block, and what share of the coupons passes.

const TWO_THIRDS = 0.68; // of the errors lie within one deviation, if they are normal

class Board {
  constructor(data) {
    this.data = data;
    this.draws = new Process.Draws(data.draws);
    this.known = data.lines.map(() => new Map()); // impedances [ohm] by what the line depends on: arrays, one a block
    this.values = new Map(); // values of properties by law and block
    this.speed = data.lines.map(() => 5); // milliseconds a block
    this.reaching = data.lines.map(line => line.inputs.flatMap(input => this.propertiesOf(input))
      .filter((one, place, all) => all.indexOf(one) === place));
  }

  propertiesOf(input) {
    const found = input.property === null ? [] : [input.property];
    if (input.resin === null) return found;
    const resin = this.data.resins[input.resin];
    const sources = [resin.content, ...resin.filled.flatMap(each => each.copper)];
    return [...found, ...sources.map(source => source.property).filter(property => property !== null)];
  }

  start() {
    return {
      factors: this.data.variations.map(() => 1), moves: this.data.variations.map(() => 0),
      widths: this.data.lines.map(() => 0), limit: 1, limits: this.data.lines.map(() => 1),
    };
  }

  // The keys of every variation, in a state.
  entries(state) {
    return this.data.variations.map((variation, number) =>
      Process.resolved(variation, state.factors[number], state.moves[number], this.data));
  }

  width(state, number) {
    const line = this.data.lines[number];
    return state.widths[number] === 0 ? line.width : line.width + state.widths[number] * line.widthStep;
  }

  limit(state, number) { // half-width of the limits, a share of the target
    const line = this.data.lines[number];
    const factor = line.ownLimit ? state.limits[number] : state.limit;
    return factor === 1 ? line.limit : Number((100 * line.limit * factor).toPrecision(6)) / 100;
  }

  limits(state, number) {
    const line = this.data.lines[number], half = line.target * this.limit(state, number);
    return [line.target - half, line.target + half];
  }

  law(entries, property, width) {
    const one = this.data.properties[property];
    return Process.lawOf(one, entries[one.variation], one.etch ? width : one.nominal);
  }

  // The laws of all that reaches a line, and the drawn width; taken: offers by number.
  laws(state, number, entries, taken = []) {
    const width = this.width(state, number), laws = new Map();
    for (const property of this.reaching[number]) {
      let law = this.law(entries, property, width), own = Infinity;
      const one = this.data.properties[property], reference = one.etch ? width : one.nominal;
      for (const offer of taken) {
        const offered = this.data.offers[offer].tolerances.find(each => each.property === property);
        if (offered === undefined) continue;
        const half = offered.relative ? offered.value * Math.abs(reference) : offered.value;
        const narrow = Process.narrowed(one, entries[one.variation], offered, reference);
        if (narrow !== null && half < own) { own = half; law = narrow; }
      }
      laws.set(property, law);
    }
    return {laws, width, key: [width, ...[...laws.values()].map(Process.keyOf)].join("|")};
  }

  // What speaks against a state, in words; empty where a scenario may say it.
  refusals(state) {
    const entries = this.entries(state), found = [];
    this.data.lines.forEach((line, number) => {
      const width = this.width(state, number);
      for (const property of this.reaching[number]) {
        const one = this.data.properties[property], variation = this.data.variations[one.variation];
        const why = Process.refusal(one, entries[one.variation], this.law(entries, property, width), variation.measure);
        if (why) found.push(`${one.name}: ${why}`);
      }
    });
    return [...new Set(found)];
  }

  // Where a state leaves what the fits cover: names of properties, with the lines.
  beyond(state) {
    const entries = this.entries(state), found = new Map();
    this.data.lines.forEach((line, number) => {
      const width = this.width(state, number);
      for (const property of this.reaching[number]) {
        const covered = line.covered.find(each => each.property === property);
        const one = this.data.properties[property];
        let [low, high] = Process.spanOf(this.law(entries, property, width), one.measured);
        if (one.etch && line.inputs.some(input => input.property === property && input.drawn)) {
          low += width - line.width;
          high += width - line.width;
        }
        if (covered === undefined || low < covered.low || high > covered.high)
          found.set(one.name, [...(found.get(one.name) ?? []), line.name]);
      }
    });
    return found;
  }

  propertyValues(property, law, block) {
    const key = `${property} ${block} ${Process.keyOf(law)}`;
    let values = this.values.get(key);
    if (values === undefined) {
      const one = this.data.properties[property];
      values = this.draws.values(law, one.column, block, one.measured);
      if (this.values.size > 40 * this.draws.blocks + 4 * this.data.properties.length * this.draws.blocks)
        this.values.clear();
      this.values.set(key, values);
    }
    return values;
  }

  // Impedances [ohm] of the coupons of a block; nought where a section cannot exist.
  impedances(number, view, block) {
    const line = this.known[number];
    if (!line.has(view.key)) {
      while (line.size >= 64) { // the first one is that of the run
        const keys = line.keys();
        keys.next();
        line.delete(keys.next().value);
      }
      line.set(view.key, new Array(this.draws.blocks).fill(null));
    }
    const blocks = line.get(view.key);
    if (blocks[block] === null) {
      const start = performance.now();
      blocks[block] = this.evaluate(number, view, block);
      this.speed[number] += 0.3 * (performance.now() - start - this.speed[number]);
    }
    return blocks[block];
  }

  isKnown(number, view, block) {
    const blocks = this.known[number].get(view.key);
    return blocks !== undefined && blocks[block] !== null;
  }

  inputs(number, view, block) {
    const line = this.data.lines[number], count = this.draws.count(block);
    const plain = source => source.property === null ? null
      : this.propertyValues(source.property, view.laws.get(source.property), block);
    return line.inputs.map(input => {
      const own = plain(input), moved = input.drawn ? view.width - line.width : 0;
      if (own !== null && moved === 0 && input.resin === null) return own;
      const values = new Float64Array(count);
      for (let k = 0; k < count; k++) values[k] = (own === null ? input.nominal : own[k]) + moved;
      if (input.resin !== null) this.throughResin(this.data.resins[input.resin], input.byResin, values, plain);
      return values;
    });
  }

  throughResin(resin, by, values, plain) {
    const content = plain(resin.content);
    const filled = resin.filled.map(each => ({share: each.share, copper: each.copper.map(source =>
      ({nominal: source.nominal, values: plain(source)}))}));
    for (let k = 0; k < values.length; k++) {
      const share = content === null ? resin.content.nominal : content[k];
      let taken = 0;
      for (const each of filled) {
        let height = 0;
        for (const copper of each.copper) height += copper.values === null ? copper.nominal : copper.values[k];
        taken += each.share * Math.max(height, 0);
      }
      const left = resin.resin * share / (1 - share) - taken, thickness = resin.glass + left;
      if (by === "thickness") values[k] = thickness > 0 ? values[k] * thickness / resin.thickness : -Infinity;
      else {
        const part = left / thickness;
        values[k] *= Math.exp(part * Math.log(resin.resinDk) + (1 - part) * Math.log(resin.glassDk)) / resin.dk;
      }
    }
  }

  evaluate(number, view, block) {
    const line = this.data.lines[number], count = this.draws.count(block);
    const inputs = this.inputs(number, view, block);
    const possible = new Uint8Array(count).fill(1), rows = [], dimensions = line.dimensions;
    for (const form of line.forms) {
      const row = new Float64Array(count);
      if (form.crest !== null) {
        const [foot, thickness, factor] = form.crest, high = this.sum(line.forms[thickness].sum, inputs, count);
        for (let k = 0; k < count; k++)
          row[k] = inputs[factor][k] > 0 ? rows[foot][k] - 2 * high[k] / inputs[factor][k] : -Infinity;
      } else row.set(this.sum(form.sum, inputs, count));
      if (form.over !== null) {
        const over = this.sum(form.over, inputs, count);
        for (let k = 0; k < count; k++) row[k] = 0.5 * Math.log1p((row[k] / over[k]) ** 2);
      }
      if (form.least !== null) {
        for (let k = 0; k < count; k++)
          if (!(form.leastIn ? row[k] >= form.least : row[k] > form.least)) possible[k] = 0;
      }
      rows.push(row);
    }
    for (let r = 0; r < dimensions; r++)
      if (line.forms[r].logarithm) {
        const row = rows[r] = Float64Array.from(rows[r]);
        for (let k = 0; k < count; k++) row[k] = possible[k] ? Math.log(row[k]) : 0;
      }
    return this.polynomial(line, rows, possible, count);
  }

  sum(each, inputs, count) {
    const row = new Float64Array(count).fill(each.constant);
    each.inputs.forEach((place, number) => {
      const factor = each.factors[number], values = inputs[place];
      for (let k = 0; k < count; k++) row[k] += factor * values[k];
    });
    return row;
  }

  polynomial(line, rows, possible, count) {
    const size = line.origin.length, at = new Float64Array(size), result = new Float32Array(count);
    const {constant, first, pairs, triples, fours} = line.tree;
    for (let k = 0; k < count; k++) {
      if (!possible[k]) continue;
      for (let i = 0; i < size; i++) {
        let x = -line.origin[i];
        const factors = line.matrix[i];
        for (let r = 0; r < factors.length; r++) x += factors[r] * rows[r][k];
        at[i] = x < -line.farthest ? -line.farthest : x > line.farthest ? line.farthest : x;
      }
      let value = constant;
      for (let a = 0; a < first.coordinate.length; a++) {
        let one = first.coefficient[a];
        for (let b = first.child[a]; b < first.child[a + 1]; b++) {
          let two = pairs.coefficient[b];
          for (let c = pairs.child[b]; c < pairs.child[b + 1]; c++) {
            let three = triples.coefficient[c];
            for (let d = triples.child[c]; d < triples.child[c + 1]; d++)
              three += fours.coefficient[d] * at[fours.coordinate[d]];
            two += three * at[triples.coordinate[c]];
          }
          one += two * at[pairs.coordinate[b]];
        }
        value += one * at[first.coordinate[a]];
      }
      result[k] = Math.exp(value);
    }
    return result;
  }

  // How far the fit may be off [ohm] round the middle of a state: errors at solved sections, the near ones weighed most.
  errorAt(number, view) {
    const line = this.data.lines[number];
    if (line.origin.length === 0) return line.error;
    const inputs = line.inputs.map(input => {
      if (input.resin !== null || input.property === null) return input.nominal + (input.drawn ? view.width - line.width : 0);
      return Process.atGerm(view.laws.get(input.property), 0, this.data.properties[input.property].measured)
        + (input.drawn ? view.width - line.width : 0);
    });
    const rows = [], total = each => each.inputs.reduce((sum, place, slot) =>
      sum + each.factors[slot] * inputs[place], each.constant);
    for (const form of line.forms) {
      let row = total(form.sum);
      if (form.crest !== null)
        row = rows[form.crest[0]] - 2 * total(line.forms[form.crest[1]].sum) / inputs[form.crest[2]];
      if (form.over !== null) row = 0.5 * Math.log1p((row / total(form.over)) ** 2);
      if (form.least !== null && !(form.leastIn ? row >= form.least : row > form.least)) return line.error * 4;
      rows.push(row);
    }
    const at = line.matrix.map((factors, i) => factors.reduce((x, factor, r) =>
      x + factor * (line.forms[r].logarithm ? Math.log(rows[r]) : rows[r]), -line.origin[i]));
    const near = line.solvedAt.map((place, run) => {
      let away = 0;
      for (let i = 0; i < at.length; i++) away += (place[i] - at[i]) ** 2;
      return {weight: Math.exp(-0.5 * away / (0.12 * at.length)), error: Math.abs(line.errors[run])};
    });
    near.sort((one, other) => one.error - other.error);
    const wanted = TWO_THIRDS * near.reduce((sum, each) => sum + each.weight, 0);
    let reached = 0;
    for (const each of near) {
      reached += each.weight;
      if (reached >= wanted) return each.error;
    }
    return line.error;
  }
}
