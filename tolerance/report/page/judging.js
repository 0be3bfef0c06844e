"use strict";
// Yields in a state: the run's own, and what the state changes on the same coupons.

const Judging = (() => {
  const STUDENT = 2.3646; // 95 %, two-sided, of 8 replicates
  const UNSEEN = 3; // coupons: 95 % that a share of which none is seen is below 3 of all
  const BINS = 72;

  // Every line's coupons against its limits, over the first `blocks` blocks.
  function tally(board, state, views, blocks) {
    const replicates = board.data.draws.replicates;
    const every = [], lines = [];
    for (let block = 0; block < blocks; block++) every.push(new Uint8Array(board.draws.count(block)).fill(1));
    board.data.lines.forEach((line, number) => {
      const [low, high] = board.limits(state, number), span = line.axis[1] - line.axis[0];
      const told = {passes: new Float64Array(replicates), below: 0, above: 0, impossible: 0, near: 0, count: 0,
        sum: 0, squares: 0, bins: new Float64Array(BINS)};
      const error = views[number].error;
      for (let block = 0; block < blocks; block++) {
        const ohms = board.impedances(number, views[number], block), rows = board.draws.rowsOf(block);
        const together = every[block];
        for (let k = 0; k < ohms.length; k++) {
          const z = ohms[k];
          if (z === 0) { told.impossible += 1; together[k] = 0; continue; }
          const away = z - line.target;
          told.sum += away;
          told.squares += away * away;
          told.bins[Math.max(0, Math.min(BINS - 1, Math.floor((z - line.axis[0]) / span * BINS)))] += 1;
          if (Math.abs(z - low) < error || Math.abs(z - high) < error) told.near += 1;
          if (z < low) { told.below += 1; together[k] = 0; }
          else if (z > high) { told.above += 1; together[k] = 0; }
          else told.passes[Math.floor(k / rows)] += 1;
        }
        told.count += ohms.length;
      }
      const possible = Math.max(told.count - told.impossible, 1);
      told.mean = line.target + told.sum / possible;
      told.deviation = Math.sqrt(Math.max(told.squares / possible - (told.sum / possible) ** 2, 0));
      lines.push(told);
    });
    const together = {passes: new Float64Array(replicates), count: 0};
    every.forEach((passes, block) => {
      const rows = board.draws.rowsOf(block);
      for (let k = 0; k < passes.length; k++) together.passes[Math.floor(k / rows)] += passes[k];
      together.count += passes.length;
    });
    return {lines, together};
  }

  // A yield of the run, moved by the difference between two tallies of the same coupons.
  function moved(run, now, given, doubt, still) {
    const each = now.count / now.passes.length;
    const steps = Array.from(now.passes, (passes, replicate) => (passes - given.passes[replicate]) / each);
    const mean = steps.reduce((sum, step) => sum + step, 0) / steps.length;
    const spread = Math.sqrt(steps.reduce((sum, step) => sum + (step - mean) ** 2, 0) / (steps.length - 1));
    const half = STUDENT * spread / Math.sqrt(steps.length);
    const value = run.value + mean, down = run.value - run.low, up = run.high - run.value;
    const inside = share => Math.min(Math.max(share, 0), 1);
    const least = still ? 0 : UNSEEN / now.count; // what no coupon shows may be as much as this
    return {value: inside(value), low: inside(value - Math.hypot(down, half, least) - doubt),
      high: inside(value + Math.hypot(up, half, least) + doubt)};
  }

  function judge(board, state, blocks, start) {
    const entries = board.entries(state);
    const views = board.data.lines.map((line, number) => board.laws(state, number, entries));
    views.forEach((view, number) => { view.error = board.errorAt(number, view); });
    if (!start.tallies.has(blocks)) start.tallies.set(blocks, tally(board, start.state, start.views, blocks));
    const now = tally(board, state, views, blocks), given = start.tallies.get(blocks);
    const lines = board.data.lines.map((line, number) => {
      const told = now.lines[number], base = given.lines[number], run = line.run;
      const same = views[number].key === start.views[number].key;
      const limits = board.limits(state, number);
      const still = same && board.limit(state, number) === line.limit;
      const doubt = same ? 0 : 0.5 * told.near / told.count;
      const share = name => Math.min(Math.max(run[name] + (told[name] - base[name]) / told.count, 0), 1);
      const mean = run.mean + told.mean - base.mean;
      const deviation = base.deviation > 0 ? run.deviation * told.deviation / base.deviation : told.deviation;
      const capability = deviation > 0 ? Math.min(limits[1] - mean, mean - limits[0]) / (3 * deviation) : null;
      return {yield: moved(run.yield, told, base, doubt, still), below: share("below"), above: share("above"), mean, deviation,
        capability: still && run.cpk !== undefined ? run.cpk : capability, limits, bins: told.bins, doubt,
        impossible: told.impossible, error: views[number].error, failing: told.below + told.above + told.impossible,
        count: told.count, still};
    });
    const doubt = lines.reduce((sum, line) => sum + line.doubt, 0);
    const together = moved(board.data.together, now.together, given.together, doubt, lines.every(line => line.still));
    const lowest = Math.min(...lines.map(line => line.yield.value));
    together.value = Math.min(together.value, lowest);
    together.low = Math.min(together.low, together.value);
    return {lines, together, views, given, count: now.together.count};
  }

  // The cheapest set of offers with which every line (or all together) reaches the target; in slices of time.
  class Offers {
    constructor(board, state, judged, aim, blocks) {
      Object.assign(this, {board, state, judged, aim, blocks, done: false, answer: null});
      this.entries = board.entries(state);
      this.passing = board.data.lines.map(() => new Map());
      this.relevant = board.data.lines.map((line, number) => board.data.offers.map((offer, place) =>
        offer.tolerances.some(each => board.reaching[number].includes(each.property)) ? 1 << place : 0)
        .reduce((mask, bit) => mask | bit, 0));
      const count = board.data.offers.length;
      this.sets = Array.from({length: 1 << count}, (_, mask) => ({mask, cost: 0, size: 0}));
      for (const set of this.sets) for (let place = 0; place < count; place++)
        if (set.mask >> place & 1) { set.cost += board.data.offers[place].cost; set.size += 1; }
      this.sets.sort((one, other) => one.cost - other.cost || one.size - other.size);
      this.next = 0;
      this.best = null;
      this.found = null;
    }

    taken(mask) { return this.board.data.offers.map((_, place) => place).filter(place => mask >> place & 1); }

    // A line's coupons with these offers; null where time ran out before all of them were judged.
    line(number, mask, until = Infinity) {
      const own = mask & this.relevant[number], known = this.passing[number];
      if (!known.has(own)) known.set(own, {flags: [], passes: 0, count: 0, share: 0,
        view: this.board.laws(this.state, number, this.entries, this.taken(own))});
      const told = known.get(own), [low, high] = this.board.limits(this.state, number);
      while (told.flags.length < this.blocks) {
        if (performance.now() > until) return null;
        const ohms = this.board.impedances(number, told.view, told.flags.length), flags = new Uint8Array(ohms.length);
        for (let k = 0; k < ohms.length; k++)
          if (ohms[k] >= low && ohms[k] <= high) { flags[k] = 1; told.passes += 1; }
        told.count += ohms.length;
        told.share = told.passes / told.count;
        told.flags.push(flags);
      }
      return told;
    }

    reached(mask, until) { // the yield that is aimed at; null where time ran out
      const lines = [];
      for (const set of [0, mask]) for (let number = 0; number < this.board.data.lines.length; number++) {
        const line = this.line(number, set, until);
        if (line === null) return null;
        if (set === mask) lines.push(line);
      }
      const own = lines.slice(-this.board.data.lines.length);
      if (this.aim === "each line") return Math.min(...own.map((line, number) =>
        Math.min(this.judged.lines[number].yield.value + line.share - this.line(number, 0).share, 1)));
      return Math.min(this.judged.together.value + this.together(mask) - this.together(0), 1);
    }

    together(mask) {
      const lines = this.board.data.lines.map((_, number) => this.line(number, mask));
      let share = 0, count = 0;
      for (let block = 0; block < this.blocks; block++) {
        const size = lines[0].flags[block].length;
        for (let k = 0; k < size; k++) {
          let all = 1;
          for (const line of lines) all &= line.flags[block][k];
          share += all;
        }
        count += size;
      }
      return share / count;
    }

    work(until) { // true when it is done
      while (!this.done && performance.now() < until) {
        const set = this.sets[this.next];
        const reached = this.reached(set.mask, until);
        if (reached === null) break;
        if (this.best === null || reached > this.best.reached) this.best = {...set, reached};
        if (this.found === null && reached >= this.board.data.targetYield) this.found = {...set, reached};
        else if (this.found !== null && set.cost === this.found.cost && reached > this.found.reached
          && set.size <= this.found.size) this.found = {...set, reached};
        this.next += 1;
        const enough = this.found !== null && (this.next >= this.sets.length
          || this.sets[this.next].cost > this.found.cost);
        if (enough || this.next >= this.sets.length) this.done = true;
      }
      return this.done;
    }
  }

  return {judge, tally, Offers, BINS};
})();
