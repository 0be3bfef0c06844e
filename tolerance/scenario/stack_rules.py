"""What layers and lines say together: names, the order of the stackup, feet, references, and the nominal crest."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from tolerance.scenario.documents import Entry, Finding
from tolerance.scenario.drafts import Draft, Drafts
from tolerance.scenario.keys import close_match
from tolerance.scenario.stackup import LAMINATES, decided_foot, span
from tolerance.scenario.tables import COPPER, MASK, Foot, Layer, Line
from tolerance.units import write_quantity

#: How many times wider than the laminate next to it, and than its copper or the mask on it, a trace may be.
WIDEST_OVER_LAMINATE, WIDEST_OVER_COPPER = 200.0, 2000.0


@dataclass(frozen=True, slots=True)
class Outline:
    """A layer as far as the order of the stackup needs it, also where other keys of it do not read."""

    name: str
    kind: str
    use: str | None
    foot: Foot | None
    draft: Draft[Layer]

    @property
    def entry(self) -> Entry:
        """Where the layer stands."""
        return self.draft.entry


def stack_findings(drafts: Drafts) -> Iterator[Finding]:
    """Everything that layers and lines have wrong together."""
    yield from _repeated(drafts.layers)
    yield from _repeated(drafts.lines)
    outlines = _outlines(drafts.layers)
    if outlines is not None:
        yield from _order(outlines)
        yield from _feet(outlines)
        if "frequency" in drafts.evaluation.entry.values:
            yield from _rough_planes(outlines)
    for line in drafts.lines:
        yield from _line(line, drafts, outlines)


def _repeated(drafts: Sequence[Draft[Layer]] | Sequence[Draft[Line]]) -> Iterator[Finding]:
    seen: set[str] = set()
    for draft in drafts:
        name = draft.text("name")
        if name in seen:
            yield draft.entry.finding("name", "stands twice: every name once")
        elif name is not None:
            seen.add(name)


def _outlines(layers: Sequence[Draft[Layer]]) -> tuple[Outline, ...] | None:
    """None where the kind, or the use of copper, does not read: then the order cannot be judged."""
    outlines = []
    for draft in layers:
        name, kind, use = draft.text("name"), draft.text("kind"), draft.text("use")
        if name is None or kind is None or (kind == COPPER and use is None):
            return None
        foot: Foot | None = "up" if draft.text("foot") == "up" else "down" if draft.text("foot") == "down" else None
        outlines.append(Outline(name, kind, use, foot, draft))
    return tuple(outlines)


def _order(layers: Sequence[Outline]) -> Iterator[Finding]:
    for index, layer in enumerate(layers):
        if layer.kind == MASK and 0 < index < len(layers) - 1:
            yield layer.entry.finding("kind", "only outermost: a mask is the first or the last layer")
        if layer.kind == COPPER and index > 0 and layers[index - 1].kind == COPPER:
            yield layer.entry.finding(
                "kind", f'must not lie on copper: put a prepreg or core between it and "{layers[index - 1].name}"')
        neighbours = {layers[at].kind for at in (index - 1, index + 1) if 0 <= at < len(layers)}
        if layer.kind == COPPER and not neighbours & {*LAMINATES, COPPER}:
            yield layer.entry.finding("kind", "must lie on laminate: put a prepreg or core next to it")


def _feet(layers: Sequence[Outline]) -> Iterator[Finding]:
    for index, layer in enumerate(layers):
        if layer.kind != COPPER or "foot" in layer.draft.bad:
            continue
        decided = decided_foot(layers, index)
        if decided is not None and layer.foot is not None and layer.foot != decided:
            yield layer.entry.finding("foot", f'must be "{decided}", or left out: the stackup decides it')
        near = [layers[at].kind for at in (index - 1, index + 1) if 0 <= at < len(layers)]
        undecided = decided is None and layer.foot is None and layer.use == "signal"
        if undecided and len(near) == 2 and set(near) <= set(LAMINATES):
            yield layer.entry.finding(
                "foot", f'missing; must be "up" or "down", because the copper lies between two {near[0]}s')


def _rough_planes(layers: Sequence[Outline]) -> Iterator[Finding]:
    """A plane whose faces differ in roughness must know which of them is its foot."""
    for index, layer in enumerate(layers):
        model = layer.draft.model
        if model is None or layer.kind != COPPER or layer.use != "plane" or layer.foot is not None:
            continue
        if (model.roughness_foot or 0.0) != (model.roughness_crest or 0.0) and decided_foot(layers, index) is None:
            yield layer.entry.finding(
                "foot", 'missing; must be "up" or "down", because its faces differ in roughness and the stackup does '
                        "not decide which is the foot")


def _line(line: Draft[Line], drafts: Drafts, outlines: Sequence[Outline] | None) -> Iterator[Finding]:
    layer, partner = line.text("layer"), line.text("partner")
    problems = [*_carrier(line, "layer", drafts.layers), *_carrier(line, "partner", drafts.layers)]
    if partner is not None and partner == layer:
        problems.append(line.entry.finding("partner", "must be another layer than the line's own"))
    problems += _references(line, drafts.layers)
    yield from problems
    if not outlines or layer is None or problems or {"partner", "references"} & line.bad:
        return
    if len({outline.name for outline in outlines}) < len(outlines):
        return
    yield from _planes(line, outlines, *span(outlines, layer, partner))
    yield from _under_mask(line, outlines, partner)
    yield from _crest(line, [outline for outline in outlines if outline.name in (layer, partner)])
    yield from _flat(line, outlines, span(outlines, layer, partner))


def _carrier(line: Draft[Line], key: str, layers: Sequence[Draft[Layer]]) -> Iterator[Finding]:
    """The layer that a trace lies on must be there and be signal copper."""
    name = line.text(key)
    if name is None:
        return
    layer = _named(layers, name)
    if layer is None and _all_named(layers):
        known = _copper(layers, "signal")
        near = close_match(name, known) or '; there is no copper with use = "signal"'
        yield line.entry.finding(key, f"must be the name of a layer{near}")
    elif layer is None:
        return
    elif _known_not(layer, "kind", COPPER):
        yield line.entry.finding(key, f"must be a copper layer; this one is {layer.text('kind')}")
    elif _known_not(layer, "use", "signal"):
        yield line.entry.finding(key, 'must be a layer with use = "signal"; this one is a plane')


def _references(line: Draft[Line], layers: Sequence[Draft[Layer]]) -> Iterator[Finding]:
    names = line.entry.values.get("references")
    if not isinstance(names, list) or "references" in line.bad:
        return
    for name in names:
        layer = _named(layers, name)
        if layer is None and _all_named(layers):
            yield line.entry.finding(
                "references", f'no layer is called "{name}"{close_match(name, _copper(layers, "plane"))}')
        elif layer is not None and (_known_not(layer, "kind", COPPER) or _known_not(layer, "use", "plane")):
            yield line.entry.finding("references", f'must name planes; "{name}" is not copper with use = "plane"')


def _planes(line: Draft[Line], layers: Sequence[Outline], upper: int, lower: int) -> Iterator[Finding]:
    """At least one plane, at most one named on each side, and none between the traces of a broadside pair."""
    named = line.entry.values.get("references")
    planes = [at for at, layer in enumerate(layers) if layer.use == "plane"
              and (not isinstance(named, list) or layer.name in named)]
    sides = {"above": [at for at in planes if at < upper], "below": [at for at in planes if at > lower]}
    between = [layers[at].name for at in range(upper + 1, lower) if layers[at].use == "plane"]
    if between:
        yield line.entry.finding("partner", f'must have no plane between it and the line\'s own layer; '
                                            f'"{between[0]}" is one')
    elif not any(sides.values()):
        yield line.entry.finding("layer", 'must have a reference plane above or below: a copper layer with '
                                          'use = "plane"')
    if isinstance(named, list):
        for side, found in sides.items():
            if len(found) > 1:
                yield line.entry.finding("references", f"must name at most one plane on each side; {side} the line "
                                                       f"are {len(found)}")


def _under_mask(line: Draft[Line], layers: Sequence[Outline], partner: str | None) -> Iterator[Finding]:
    """A mask that follows a trace of a broadside pair is not acted on yet."""
    if partner is None:
        return
    for index in span(layers, line.text("layer") or "", partner):
        if any(layers[at].kind == MASK for at in (index - 1, index + 1) if 0 <= at < len(layers)):
            yield line.entry.finding("partner", "a broadside pair with a trace under solder mask "
                                                f'("{layers[index].name}") is not yet acted on by this version; leave '
                                                "the line out to run")


def _flat(line: Draft[Line], layers: Sequence[Outline], traces: tuple[int, int]) -> Iterator[Finding]:
    """A trace that is wider than so many times what lies next to it is no line that the field solver takes."""
    if line.model is None:
        return
    for index in sorted(set(traces)):
        for at in (index - 1, index, index + 1):
            model = layers[at].draft.model if 0 <= at < len(layers) else None
            if model is None:
                continue
            times = WIDEST_OVER_LAMINATE if model.kind in LAMINATES else WIDEST_OVER_COPPER
            thicknesses = {COPPER: model.copper_thickness, MASK: model.over_copper}
            thickness = thicknesses.get(model.kind, model.thickness)
            if thickness is not None and line.model.width > times * thickness:
                yield line.entry.finding(
                    "width", f"must be up to {write_quantity(times * thickness, 'length')}, {times:g} times what "
                             f'"{model.name}" is thick{" over copper" if model.kind == MASK else ""}')


def _crest(line: Draft[Line], layers: Sequence[Outline]) -> Iterator[Finding]:
    """The nominal crest, width - 2 thickness / etch factor, must be there."""
    for layer in layers:
        copper = layer.draft.model
        if line.model is None or copper is None:
            continue
        lost = 2.0 * copper.copper_thickness / copper.etch_factor
        if line.model.width <= lost:
            yield line.entry.finding(
                "width", f"must be above {write_quantity(lost, 'length')}, which an etch factor of "
                         f"{copper.etch_factor:.6g} takes off the crest of "
                         f'{write_quantity(copper.copper_thickness, "length")} copper on "{layer.name}"')


def _all_named(layers: Sequence[Draft[Layer]]) -> bool:
    """Whether there are layers and every name reads; if not, a name that no layer has may be the one that does not."""
    return bool(layers) and all(layer.text("name") is not None for layer in layers)


def _named(layers: Sequence[Draft[Layer]], name: str) -> Draft[Layer] | None:
    return next((layer for layer in layers if layer.text("name") == name), None)


def _copper(layers: Sequence[Draft[Layer]], use: str) -> list[str]:
    return [name for layer in layers if layer.text("use") == use and (name := layer.text("name")) is not None]


def _known_not(draft: Draft[Layer], key: str, wanted: str) -> bool:
    """Whether the key reads well and is something else than wanted."""
    value = draft.text(key)
    return value is not None and value != wanted


