"use strict";
// The page itself: sliders to a state, a state to answers.

const tolerancePage = (() => {
  const AT_ONCE = 45; // milliseconds of arithmetic before the first answer
  const OFFERS_BY = 85; // milliseconds after a move when the weighing of offers leaves the screen to others
  const SLICE = 14; // milliseconds of work at a time afterwards
  const OFFER_BLOCKS = 16; // of coupons, on which offers are weighed in the end
  const SPOKEN_AFTER = 600; // milliseconds without a move
  const ROUGH = 0.06; // of the limits' half-width: an error above it is told

  const data = JSON.parse(document.getElementById("data").textContent);
  const board = new Board(data);
  const place = id => document.getElementById(id);
  const sliders = [...document.querySelectorAll(".slider")].map(box => ({
    box, kind: box.dataset.kind, number: Number(box.dataset.number), input: box.querySelector("input"),
    output: box.querySelector("output")}));
  const first = board.start();
  const start = {state: first, views: data.lines.map((_, number) => board.laws(first, number, board.entries(first))),
    tallies: new Map()};
  start.views.forEach((view, number) => { view.error = data.lines[number].error; });

  let state = board.start(), settled = board.start(), past = [], work = 0, speaking = 0, judged = null, offers = null;
  const lastMove = {milliseconds: 0, coupons: 0, settledIn: 0};

  const copyOf = one => JSON.parse(JSON.stringify(one));
  const isSame = (one, other) => JSON.stringify(one) === JSON.stringify(other);
  const text = (id, words) => { const at = place(id); if (at.textContent !== words) at.textContent = words; };

  function valueIn(one, slider) {
    return slider.kind === "limit" ? one.limit : one[slider.kind][slider.number];
  }

  function withValue(one, slider, value) {
    const changed = copyOf(one);
    if (slider.kind === "limit") changed.limit = value; else changed[slider.kind][slider.number] = value;
    return changed;
  }

  // ---- work: a first answer at once, the rest in slices ----

  function missing(views, blocks) { // tasks that are still to be done for these blocks
    const found = [];
    for (let block = 0; block < blocks; block++)
      data.lines.forEach((_, number) => {
        for (const view of [start.views[number], views[number]])
          if (!board.isKnown(number, view, block)) found.push({number, view, block});
      });
    return found;
  }

  function affordable(views) { // how many blocks can be answered at once
    const cost = block => data.lines.reduce((sum, _, number) => sum + [start.views[number], views[number]]
      .filter((view, place, both) => both.findIndex(each => each.key === view.key) === place
        && !board.isKnown(number, view, block)).length * board.speed[number], 0);
    let spent = 0, blocks = 0;
    while (blocks < board.draws.blocks) {
      spent += cost(blocks);
      if (blocks > 0 && spent > AT_ONCE) break;
      blocks += 1;
    }
    return blocks;
  }

  function update() {
    const begun = performance.now(), own = ++work;
    const entries = board.entries(state);
    const views = data.lines.map((_, number) => board.laws(state, number, entries));
    const blocks = affordable(views);
    judged = Judging.judge(board, state, blocks, start);
    weigh(begun + OFFERS_BY);
    show();
    lastMove.milliseconds = performance.now() - begun;
    lastMove.coupons = judged.count;
    document.body.dataset.state = "first";
    const finish = () => {
      if (own !== work) return;
      const until = performance.now() + SLICE;
      const tasks = missing(views, board.draws.blocks);
      while (tasks.length && performance.now() < until) {
        const task = tasks.shift();
        board.impedances(task.number, task.view, task.block);
      }
      if (tasks.length) { setTimeout(finish, 0); return; }
      judged = Judging.judge(board, state, board.draws.blocks, start);
      weigh(performance.now() + SLICE, true);
      const settle = () => {
        if (own !== work) return;
        if (offers !== null && !offers.work(performance.now() + SLICE)) { setTimeout(settle, 0); return; }
        show();
        lastMove.settledIn = performance.now() - begun;
        document.body.dataset.state = "settled";
      };
      settle();
    };
    document.body.dataset.state = "working";
    setTimeout(finish, 0);
    clearTimeout(speaking);
    speaking = setTimeout(speak, SPOKEN_AFTER);
  }

  function weigh(until, all = false) {
    if (data.offers.length === 0) return;
    const aim = place("aim").checked ? "all together" : "each line";
    const blocks = Math.min(all ? OFFER_BLOCKS : 1, board.draws.blocks);
    offers = new Judging.Offers(board, state, judged, aim, blocks);
    offers.work(until);
  }

  // ---- answers ----

  function changeWords(now, given) {
    const points = 100 * (now - given);
    if (Math.abs(points) < 0.005) return "as run";
    return `${points > 0 ? "+" : "-"}${Words.fixed(Math.abs(points), 2)} points from the run`;
  }

  function show() {
    const target = data.targetYield, together = judged.together;
    text("together", Words.share(together));
    text("together-range", Words.range(together));
    text("together-change", changeWords(together.value, data.together.value));
    const meeting = judged.lines.filter(line => line.yield.value >= target).length;
    text("meeting", `${meeting} of ${data.lines.length}`);
    place("meeting").classList.toggle("fails", meeting < data.lines.length);
    const lowest = judged.lines.reduce((low, line, number) =>
      line.yield.value < judged.lines[low].yield.value ? number : low, 0);
    text("lowest", `lowest: ${data.lines[lowest].name}, ${Words.share(judged.lines[lowest].yield, target)}`);
    showOffers();
    judged.lines.forEach((line, number) => showLine(line, number, judged.given.lines[number]));
    showSliders();
    showRange();
  }

  function showLine(told, number, given) {
    const line = data.lines[number], row = place(`row-${number}`), target = data.targetYield;
    const cell = (name, words) => { row.querySelector(`[data-cell="${name}"]`).textContent = words; };
    cell("limits", told.limits.map(limit => Words.trimmed(limit, 2)).join(" to "));
    const share = document.createElement("strong"), range = document.createElement("span");
    share.textContent = Words.share(told.yield, target);
    range.textContent = Words.range(told.yield, target);
    range.className = "remark";
    row.querySelector('[data-cell="yield"]').replaceChildren(share, document.createElement("br"), range);
    const most = Math.max(Words.percentDigits(told.yield, target), 2);
    cell("below", Words.percent(told.below, Math.min(most, 3)));
    cell("above", Words.percent(told.above, Math.min(most, 3)));
    cell("mean", Words.fixed(told.mean, 2));
    cell("deviation", Words.fixed(told.deviation, 2));
    cell("capability", Words.fixed(told.capability, 2));
    const meets = told.yield.value >= target;
    cell("verdict", meets ? "meets" : "MISSES");
    row.querySelector('[data-cell="verdict"]').classList.toggle("fails", !meets);
    share.classList.toggle("fails", !meets);
    const card = place(`line-${number}`), svg = card.querySelector("svg[data-spread]");
    Pictures.spread(svg, line, told, given);
    card.querySelector('[data-spread="words"]').textContent = `yield ${Words.share(told.yield, target)}, mean `
      + `${Words.fixed(told.mean, 2)}, deviation ${Words.fixed(told.deviation, 2)} ohm`
      + (told.still ? "" : "; dotted: as run");
  }

  function showOffers() {
    if (data.offers.length === 0) return;
    const target = Words.trimmed(100 * data.targetYield, 3), aim = place("aim").checked
      ? "all lines together" : "every line";
    const named = mask => data.offers.filter((_, number) => mask >> number & 1).map(each => each.words).join(", ");
    let words;
    if (offers.found !== null && offers.found.mask === 0) words = `${target} % of ${aim} is reached: nothing to buy.`;
    else if (offers.found !== null)
      words = `${Words.plain(offers.found.cost)}: ${named(offers.found.mask)} (${aim} then at `
        + `${Words.percent(offers.found.reached, 2)} or more).`;
    else if (!offers.done) words = "weighing the offers ...";
    else words = `No set of offers reaches ${target} % of ${aim}; the best comes to `
      + `${Words.percent(offers.best.reached, 2)} for ${Words.plain(offers.best.cost)}`
      + (offers.best.mask ? `: ${named(offers.best.mask)}.` : ".");
    text("cheapest", words);
  }

  function showSliders() {
    const changes = [];
    for (const slider of sliders) {
      const value = valueIn(state, slider), given = valueIn(first, slider);
      const [now, was] = Words.slider(slider.kind, slider.number, state, board);
      if (Number(slider.input.value) !== value) slider.input.value = value;
      slider.output.textContent = now;
      const words = value === given ? `${now}, as given` : `${now}, given ${was}`;
      slider.input.setAttribute("aria-valuetext", words);
      slider.box.classList.toggle("is-moved", value !== given);
      if (value !== given) changes.push(`${titleOf(slider)}: ${was} to ${now}`);
    }
    place("undo").disabled = past.length === 0;
    place("reset").disabled = isSame(state, first);
    const rows = (changes.length ? changes : ["Nothing is moved: this is the run."]).map(words => {
      const row = document.createElement("li");
      row.textContent = words;
      return row;
    });
    place("changes").replaceChildren(...rows);
    text("copied", "");
    const box = place("text");
    if (place("text-box").open) box.value = Words.scenario(state, board);
  }

  function titleOf(slider) {
    const {kind, number} = slider;
    if (kind === "limit") return data.lines.some(line => line.ownLimit) ? "limit of the other lines" : "limit";
    if (kind === "limits") return `limit of ${data.lines[number].name}`;
    if (kind === "widths") return `width of ${data.lines[number].name}`;
    return `${kind === "factors" ? "tolerance" : "mean"} of ${data.variations[number].name}`;
  }

  function showRange() {
    const beyond = isSame(state, first) ? new Map() : board.beyond(state);
    const names = [...beyond.keys()], told = place("beyond");
    const rough = isSame(state, first) ? [] : data.lines.filter((line, number) => judged.views[number].key
      !== start.views[number].key && judged.lines[number].error > ROUGH * line.target * line.limit)
      .map(line => line.name);
    const words = [];
    if (names.length) words.push(`Outside the range that the fit covers: ${names.slice(0, 4).join(", ")}`
      + `${names.length > 4 ? ` and ${names.length - 4} more` : ""}. Yields of the lines that it reaches are a guess; `
      + "copy the scenario text and run it.");
    if (rough.length) words.push(`Far from what was solved, so rough: ${rough.slice(0, 4).join(", ")}`
      + `${rough.length > 4 ? ` and ${rough.length - 4} more` : ""}.`);
    told.hidden = words.length === 0;
    told.textContent = words.join(" ");
  }

  function speak() {
    const lowest = place("lowest").textContent;
    text("spoken", `All lines together ${place("together").textContent}. ${lowest}.`);
  }

  // ---- moves ----

  function refuse(words) {
    const at = place("refusal");
    at.hidden = words.length === 0;
    at.textContent = words.length ? `Not possible, so left where it was: ${words[0]}.` : "";
  }

  function move(slider, value) {
    const wanted = withValue(state, slider, value), against = board.refusals(wanted);
    refuse(against);
    if (against.length) { showSliders(); return; }
    state = wanted;
    update();
  }

  function commit() {
    if (isSame(state, settled)) return;
    past.push(settled);
    settled = copyOf(state);
    place("undo").disabled = false;
  }

  function put(wanted) {
    refuse([]);
    state = copyOf(wanted);
    update();
  }

  function undo() {
    commit();
    if (past.length === 0) return;
    settled = past.pop();
    put(settled);
  }

  function reset() {
    commit();
    if (isSame(state, first)) return;
    past.push(settled);
    settled = copyOf(first);
    put(first);
  }

  async function copy() {
    commit();
    const box = place("text");
    place("text-box").open = true;
    box.value = Words.scenario(state, board);
    let done = false;
    try {
      await navigator.clipboard.writeText(box.value);
      done = true;
    } catch (_) {
      box.focus();
      box.select();
      done = document.execCommand("copy");
    }
    text("copied", done ? "Copied." : "Select the text below and copy it.");
  }

  for (const slider of sliders) {
    slider.input.addEventListener("input", () => move(slider, Number(slider.input.value)));
    slider.input.addEventListener("change", commit);
  }
  place("undo").addEventListener("click", undo);
  place("reset").addEventListener("click", reset);
  place("copy").addEventListener("click", copy);
  place("text-box").addEventListener("toggle", () => { place("text").value = Words.scenario(state, board); });
  if (data.offers.length) place("aim").addEventListener("change", update);
  document.addEventListener("keydown", event => {
    if ((event.ctrlKey || event.metaKey) && !event.shiftKey && event.key.toLowerCase() === "z") {
      event.preventDefault();
      undo();
    }
  });
  update();

  return {board, data, lastMove, state: () => copyOf(state), judged: () => judged, put: wanted => { put(wanted); commit(); },
    scenario: () => Words.scenario(state, board), offers: () => offers};
})();
