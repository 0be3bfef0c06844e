"""What variations and offers say about the properties that they name, and what correlations say about variables."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.scenario.amounts import Amount, AmountOf, EndOf, LevelShares
from tolerance.scenario.documents import Entry, Finding
from tolerance.scenario.drafts import Draft, Drafts, kind_of
from tolerance.scenario.keys import RefusedError, close_match, listed
from tolerance.scenario.layer_keys import LAYER_KEYS
from tolerance.scenario.properties import MEASURE, VARYING, Property, matches, named_by, properties_of
from tolerance.scenario.tables import Layer, Offer, Variation
from tolerance.units import write_quantity

FARTHEST_MEAN = 8.0  # deviations from the nearer end beyond which the mean of a truncated normal is refused
SMALLEST_EIGENVALUE = 1e-10  # of a correlation matrix; below it counts as not positive definite


@dataclass(frozen=True, slots=True)
class Named:
    """A variation or offer with the properties it names."""

    draft: Draft[Variation] | Draft[Offer]
    members: tuple[Property, ...]
    complete: bool  # whether all of `of` reads and is found


def variation_findings(drafts: Drafts) -> Iterator[Finding]:
    """Everything that variations, offers and correlations have wrong about what they name."""
    findings: list[Finding] = []
    known = {item.name: item for layer in drafts.layers
             if layer.model is not None and not layer.bad and layer.text("kind") for item in properties_of(layer.model)}
    named = [_named(draft, drafts.layers, known, findings) for draft in drafts.variations]
    owners: dict[str, Entry] = {}
    for variation in named:
        findings += _owned(variation, owners)
        findings += _values(variation, drafts)
    for draft in drafts.offers:
        findings += _offer(_named(draft, drafts.layers, known, findings), owners)
    findings += correlation_findings(drafts, named)
    yield from findings


def _named(
    draft: Draft[Variation] | Draft[Offer], layers: Sequence[Draft[Layer]], known: Mapping[str, Property],
    findings: list[Finding],
) -> Named:
    """The properties that `of` names; names and patterns that hit nothing are told."""
    if not draft.given("of"):
        return Named(draft, (), complete=False)
    value = draft.entry.values["of"]
    texts: list[str] = [value] if isinstance(value, str) else value
    found: dict[str, Property] = {}
    complete = True
    for text in texts:
        hits = named_by(text, known)
        found |= {item.name: item for item in hits}
        complete = complete and bool(hits)
        reason = "" if hits else _why_nothing(text, layers, list(known.values()))
        if reason:
            findings.append(draft.entry.finding("of", reason if len(texts) == 1 else f'"{text}": {reason}'))
    return Named(draft, tuple(item for item in known.values() if item.name in found), complete)


def _why_nothing(text: str, layers: Sequence[Draft[Layer]], known: Sequence[Property]) -> str:
    """Why a name or pattern hits no property; "" where a layer that does not read may be what is meant."""
    if not layers:  # that is told itself
        return ""
    broken = [layer for layer in layers if _incomplete(layer)]
    if "*" in text:
        may_be = any(layer.text("name") is None or matches(text, f"{layer.text('name')}.{name}")
                     for layer in broken for names in VARYING.values() for name in names)
        return "" if may_be else "must match at least one property that varies, such as " + _examples(known)
    layer_name, dot, name = text.rpartition(".")
    if not dot:
        return "must be LAYER.PROPERTY, such as " + _examples(known)
    layer_of = {one.text("name"): one for one in layers}
    layer = layer_of.get(layer_name)
    if layer is None:  # a layer whose own name does not read may be what is meant
        names = [known_name for known_name in layer_of if known_name is not None]
        return "" if None in layer_of else f'no layer is called "{layer_name}"{close_match(layer_name, names)}'
    kind = layer.text("kind")
    if kind is None:
        return ""
    if name not in VARYING[kind]:
        return f"{kind} varies in {listed(VARYING[kind], 'and')}{_only_suggestion(name, VARYING[kind])}"
    if _incomplete(layer):
        return ""
    return f'"{layer_name}" gives no {name} that could vary'


def _incomplete(layer: Draft[Layer]) -> bool:
    """Whether the layer has a problem of its own, told already, that may hide a property."""
    kind = layer.text("kind")
    needed = LAYER_KEYS[kind].needed if kind is not None else ()
    return layer.model is None or any(key not in layer.entry.values for key in needed)


def _only_suggestion(name: str, known: Sequence[str]) -> str:
    words = close_match(name, known)
    return words if "did you mean" in words else ""


def _examples(known: Sequence[Property]) -> str:
    return listed([f'"{item.name}"' for item in known[:2]]) if known else '"P1.thickness"'


def _owned(variation: Named, owners: dict[str, Entry]) -> Iterator[Finding]:
    """A property may be named by one variation only."""
    entry = variation.draft.entry
    twice = [item.name for item in variation.members if item.name in owners]
    if twice:
        names = listed([f'"{name}"' for name in twice[:3]], "and")
        yield entry.finding("of", f'must not name what another variation names: {names} (also in '
                                  f'"{owners[twice[0]].label}")')
    for item in variation.members:
        owners.setdefault(item.name, entry)


def _offer(offer: Named, owners: Mapping[str, Entry]) -> Iterator[Finding]:
    loose = [f'"{item.name}"' for item in offer.members if item.name not in owners]
    if loose:
        yield offer.draft.entry.finding("of", f"must name what a variation names; none names {listed(loose[:3])}")
    yield from _measures(offer.draft, offer.members)


def _values(variation: Named, drafts: Drafts) -> Iterator[Finding]:
    """The amounts against each property: their units, and what the shape makes of the nominal."""
    yield from _measures(variation.draft, variation.members)
    model = variation.draft.model
    if not isinstance(model, Variation) or model.shape == "measured":
        return
    told: set[str] = set()
    for item in variation.members:
        for reference in _references(item, drafts):
            for key, allowed in _shape_problems(model, item, reference):
                if key not in told:
                    told.add(key)
                    yield variation.draft.entry.finding(key, f"{item.name}: {allowed}")


def _references(item: Property, drafts: Drafts) -> tuple[float, ...]:
    """What a percentage is of: the nominal; of an etch, the width of each line on the layer."""
    if item.property != "etch":
        return (item.nominal,)
    widths = {line.model.width for line in drafts.lines if line.model is not None
              and item.layer in (line.model.layer, line.model.partner)}
    return tuple(sorted(widths))


def _measures(draft: Draft[Variation] | Draft[Offer], members: Sequence[Property]) -> Iterator[Finding]:
    """Each amount in the units of each property, and no percentage of a nominal that is 0."""
    for key in ("tolerance", "shift", "low", "high"):
        if not draft.given(key):
            continue
        for item in members:
            reason = _measure_problem(draft, key, item)
            if reason:
                yield draft.entry.finding(key, f"{item.name}: {reason}")
                break


def _measure_problem(draft: Draft[Variation] | Draft[Offer], key: str, item: Property) -> str:
    kind = kind_of(Variation, key)
    if isinstance(kind, AmountOf):
        exact: AmountOf | EndOf = AmountOf(kind.noun, kind.positive, MEASURE[item.property])
    else:
        exact = EndOf(MEASURE[item.property])
    try:
        value = exact.read(draft.entry.values[key], from_file=True)
    except RefusedError as reason:
        return f"must be {reason}"
    if isinstance(value, Amount) and value.relative and item.nominal == 0.0 and item.property != "etch":
        return "must not be a percentage, because the nominal is 0"
    return ""


def _shape_problems(model: Variation, item: Property, reference: float) -> Iterator[tuple[str, str]]:
    """(key, what is allowed) for what the shape cannot make of this property."""
    shift = 0.0 if model.shift is None else model.shift.of(reference)
    mean = item.nominal + shift
    half = 0.0 if model.tolerance is None else model.tolerance.of(reference)
    low, high = mean - half, mean + half
    if model.low is not None and model.high is not None:
        low, high, half = model.low, model.high, 0.5 * (model.high - model.low)
    write = _writer(item)
    if model.shape == "lognormal" and item.nominal <= 0.0:
        yield "shape", 'not "lognormal", because the nominal is 0'
    elif model.shape == "lognormal" and mean <= 0.0:
        yield "shift", f"must leave the median, nominal + shift, above 0; it is {write(mean)}"
    if model.shape == "triangular" and not low <= mean <= high:
        yield _end_key(mean, low), f"low and high must have the peak, nominal + shift = {write(mean)}, between them"
    if model.shape == "truncated_normal" and half > 0.0:
        far = max(low - mean, mean - high) / (half / model.sigmas_or_default)
        if far > FARTHEST_MEAN:
            yield _end_key(mean, low), (f"low and high must lie within {FARTHEST_MEAN:g} deviations of the mean, "
                                        f"nominal + shift = {write(mean)}")
    if model.cpk is not None and half <= abs(shift):
        yield "cpk", f"needs a half-width above the shift; they are {write(half)} and {write(abs(shift))}"
    key = "low" if model.low is not None else "tolerance"
    if MEASURE[item.property] in ("number", "share") and model.shape != "lognormal" and low <= 0.0:
        yield key, f"must leave the lower end above 0; it is {write(low)}"
    if MEASURE[item.property] == "share" and model.shape != "lognormal" and high >= 1.0:
        yield key.replace("low", "high"), f"must leave the upper end below {write(1.0)}; it is {write(high)}"


def _end_key(mean: float, low: float) -> str:
    return "low" if mean < low else "high"


def _writer(item: Property) -> Callable[[float], str]:
    unit = "um" if MEASURE[item.property] == "copper length" else None
    return lambda value: write_quantity(value, MEASURE[item.property], unit)


@dataclass(frozen=True, slots=True)
class VariableOutline:
    """A variable as far as correlations need it; level None where it does not read."""

    name: str
    level: LevelShares | None


def correlation_findings(drafts: Drafts, named: Sequence[Named]) -> Iterator[Finding]:
    """Variables that are there, no pair twice, equal level shares, and a positive definite matrix."""
    variables = _variables(named)
    complete = all(variation.complete for variation in named)
    pairs: dict[frozenset[str], float] = {}
    entries: dict[frozenset[str], Entry] = {}
    for draft in drafts.correlations:
        if not draft.given("between"):
            continue
        given = draft.entry.values["between"]
        found = [variables.get(name) for name in given]
        first, second = found
        for name, variable in zip(given, found, strict=True):
            if variable is None and complete and not _may_be_broken(name, drafts):
                yield draft.entry.finding("between", _no_variable(name, variables))
        if first is None or second is None:
            continue
        pair = frozenset({first.name, second.name})
        problem = _pair_problem(first, second, pair in pairs)
        if problem:
            yield draft.entry.finding("between", problem)
        elif draft.model is not None:
            pairs[pair], entries[pair] = draft.model.coefficient, draft.entry
    yield from _not_positive_definite(pairs, entries)


def _variables(named: Sequence[Named]) -> dict[str, VariableOutline]:
    """Variable by its name, and by the name of every member."""
    found: dict[str, VariableOutline] = {}
    for variation in named:
        model = variation.draft.model
        if variation.draft.entry.table != "variations" or not variation.members:
            continue
        level = model.level if isinstance(model, Variation) else None
        names = [item.name for item in variation.members]
        together = variation.draft.entry.values.get("together") is True
        joined = " + ".join(names)
        for name in names:
            found.setdefault(name, VariableOutline(joined if together else name, level))
        if together:
            found.setdefault(joined, VariableOutline(joined, level))
    return found


def _may_be_broken(name: str, drafts: Drafts) -> bool:
    """Whether the name may be that of a layer which does not read."""
    return any(layer.model is None and name.startswith(layer.text("name") or "") for layer in drafts.layers)


def _no_variable(name: str, variables: Mapping[str, VariableOutline]) -> str:
    return f'"{name}" is not a variable: no variation names it{close_match(name, variables)}'


def _pair_problem(first: VariableOutline, second: VariableOutline, repeated: bool) -> str:
    if first.name == second.name:
        return f'must be two different variables; both are "{first.name}"'
    if repeated:
        return "stands twice: every pair once"
    if first.level is not None and second.level is not None and first.level != second.level:
        return "must be two variables of the same level shares"
    return ""


def _not_positive_definite(
    pairs: Mapping[frozenset[str], float], entries: Mapping[frozenset[str], Entry],
) -> Iterator[Finding]:
    """Each block of connected variables whose matrix is not positive definite, told at its last pair."""
    for block in _blocks(pairs):
        matrix = np.eye(len(block))
        for row, first in enumerate(block):
            for column, second in enumerate(block[:row]):
                matrix[row, column] = matrix[column, row] = pairs.get(frozenset({first, second}), 0.0)
        if np.linalg.eigvalsh(matrix)[0] < SMALLEST_EIGENVALUE:
            last = [pair for pair in pairs if pair <= set(block)][-1]
            names = listed([f'"{name}"' for name in block], "and")
            yield entries[last].finding(
                "coefficient", f"the correlations of {names} contradict each other: their matrix must be positive "
                               "definite; bring the coefficients nearer to 0")


def _blocks(pairs: Mapping[frozenset[str], float]) -> list[list[str]]:
    """Variables connected by correlations, each block in the order of its first naming."""
    blocks: list[dict[str, None]] = []
    for pair in pairs:
        joined = dict.fromkeys(sorted(pair))
        for block in [block for block in blocks if set(block) & pair]:
            joined = block | joined
            blocks.remove(block)
        blocks.append(joined)
    return [list(block) for block in blocks]
