"""What the keys of one entry say together: which keys a kind of layer, of line, of variation takes and needs."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from types import MappingProxyType
from typing import NamedTuple

from tolerance.scenario.documents import Entry, Finding
from tolerance.scenario.drafts import Draft, Drafts, kind_of
from tolerance.scenario.keys import Range, listed
from tolerance.scenario.layer_keys import LAYER_KEYS, RESIN_KEYS
from tolerance.scenario.readings import file_finding
from tolerance.scenario.tables import (
    COPPER,
    CORE,
    LARGEST_COUPONS,
    PREPREG,
    SMALLEST_COUPONS,
    Evaluation,
    ImpedanceTest,
    Layer,
    Line,
    Variation,
)

_ENDS = ("low", "high")
_MEASURED = ("file", "column", "sheet")


class ShapeKeys(NamedTuple):
    """Which of the exclusive keys a shape takes."""

    sigmas: bool = False
    cpk: bool = False
    ends: bool = False


SHAPE_KEYS: Mapping[str, ShapeKeys] = MappingProxyType({
    "normal": ShapeKeys(sigmas=True, cpk=True),
    "truncated_normal": ShapeKeys(sigmas=True, ends=True),
    "uniform": ShapeKeys(ends=True),
    "triangular": ShapeKeys(ends=True),
    "lognormal": ShapeKeys(sigmas=True),
})


def entry_findings(drafts: Drafts) -> Iterator[Finding]:
    """Everything that keys of one entry have wrong together."""
    has_frequency = "frequency" in drafts.evaluation.entry.values
    has_limit = "limit" in drafts.evaluation.entry.values
    for layer in drafts.layers:
        yield from _layer(layer, has_frequency)
    for line in drafts.lines:
        yield from _line(line, has_limit)
    for variation in drafts.variations:
        yield from _variation(variation)
    if drafts.test is not None:
        yield from _test(drafts.test)
        yield from _guard_band(drafts.test, drafts)
    yield from _coupons(drafts.evaluation, drafts.variations)


def _layer(draft: Draft[Layer], has_frequency: bool) -> Iterator[Finding]:
    entry, kind = draft.entry, draft.text("kind")
    if kind is None:
        return
    needed, taken = LAYER_KEYS[kind]
    by_resin = any(key in entry.values for key in RESIN_KEYS) and not _resin_band(entry, kind)
    known = ("name", "kind", *needed, *taken)
    for key in entry.values:
        if key not in known and key not in draft.bad:
            yield entry.finding(key, f"not a key of {kind}, which has {listed(known[2:], 'and')}")
    if by_resin and kind in (PREPREG, CORE) and "dk" in entry.values:
        needed = ("dk",)
        given = listed([key for key in RESIN_KEYS if key in entry.values], "and")
        yield entry.finding("dk", f"not together with {given}: give either dk or {listed(RESIN_KEYS, 'and')}")
    elif by_resin and kind in (PREPREG, CORE):
        needed = RESIN_KEYS
    elif "outflow" in entry.values and kind == PREPREG:
        yield entry.finding("outflow", f"only with {listed(RESIN_KEYS, 'and')}")
    if has_frequency and kind != COPPER:
        needed = (*needed, "df")
    for key in needed:
        if key not in entry.values:
            why = " (needed with evaluation.frequency)" if key == "df" else ""
            yield entry.finding(key, f"missing; must be {kind_of(Layer, key).allowed}{why}")


def _resin_band(entry: Entry, kind: str) -> bool:
    """Whether resin_dk is that of the band between the copper, beside the ply's own dk."""
    given = [key for key in RESIN_KEYS if key in entry.values]
    return kind == PREPREG and given == ["resin_dk"] and "dk" in entry.values


def _line(draft: Draft[Line], has_limit: bool) -> Iterator[Finding]:
    entry, values = draft.entry, draft.entry.values
    if "limit" not in values and not has_limit:
        yield entry.finding("limit", f"missing here and in [evaluation]; must be {kind_of(Line, 'limit').allowed}")
    if "partner" in values:
        for key in ("gap", "ground_gap"):
            if key in values:
                yield entry.finding(key, "not together with partner, which makes the line a broadside pair")
    elif "offset" in values:
        yield entry.finding("offset", "only together with partner: it shifts the partner of a broadside pair")
    if "mode" in values and "gap" not in values and "partner" not in values:
        yield entry.finding("mode", "only for pairs: together with gap or partner")


def _variation(draft: Draft[Variation]) -> Iterator[Finding]:
    entry = draft.entry
    if "shape" in draft.bad:
        return
    shape = str(entry.values.get("shape", "normal"))
    if shape == "measured":
        yield from _measured(draft)
        return
    for key in _MEASURED:
        if key in entry.values:
            yield entry.finding(key, 'only with shape = "measured"')
    yield from _half_width(draft, shape)
    takes = SHAPE_KEYS[shape]
    for key, taken in (("sigmas", takes.sigmas), ("cpk", takes.cpk)):
        if key in entry.values and not taken:
            shapes = [f'"{name}"' for name, keys in SHAPE_KEYS.items() if getattr(keys, key)]
            yield entry.finding(key, f"only with shape = {listed(shapes)}")
    if takes.cpk and "sigmas" in entry.values and "cpk" in entry.values:
        yield entry.finding("cpk", "not together with sigmas: give one or the other")


def _half_width(draft: Draft[Variation], shape: str) -> Iterator[Finding]:
    """Either `tolerance`, or `low` and `high` where the shape takes them."""
    entry, model = draft.entry, draft.model
    ends = [key for key in _ENDS if key in entry.values]
    with_ends = SHAPE_KEYS[shape].ends
    if ends and not with_ends:
        shapes = [f'"{name}"' for name, keys in SHAPE_KEYS.items() if keys.ends]
        yield from (entry.finding(key, f"only with shape = {listed(shapes)}") for key in ends)
    elif ends and "tolerance" in entry.values:
        yield entry.finding("tolerance", "not together with low and high: give one or the other")
    elif len(ends) == 1:
        missing = "high" if ends == ["low"] else "low"
        allowed = kind_of(Variation, missing).allowed
        yield entry.finding(missing, f"missing; low and high stand together; must be {allowed}")
    elif ends and shape == "uniform" and "shift" in entry.values:
        yield entry.finding("shift", "not together with the low and high of a uniform, which say all")
    if not ends and "tolerance" not in entry.values:
        instead = "; or low and high instead" if with_ends else ""
        yield entry.finding("tolerance", f"missing; must be {kind_of(Variation, 'tolerance').allowed}{instead}")
    if model is not None and model.low is not None and model.high is not None and model.low >= model.high:
        yield entry.finding("high", "must be above low")


def _measured(draft: Draft[Variation]) -> Iterator[Finding]:
    entry = draft.entry
    for key in ("file", "column"):
        if key not in entry.values:
            yield entry.finding(key, f"missing; shape = \"measured\" needs {kind_of(Variation, key).allowed}")
    for key in ("tolerance", *_ENDS, "sigmas", "cpk"):
        if key in entry.values:
            yield entry.finding(key, 'not with shape = "measured", which takes its spread from the file')
    wrong = file_finding(draft)
    if wrong is not None:
        yield wrong
    if str(entry.values.get("file")).lower().endswith(".csv") and "sheet" in entry.values:
        yield entry.finding("sheet", "only with an XLSX file")


def _test(draft: Draft[ImpedanceTest]) -> Iterator[Finding]:
    entry, test = draft.entry, draft.model
    for key, other in (("sample_size", "accept_number"), ("accept_number", "sample_size")):
        if key in entry.values and other not in entry.values:
            yield entry.finding(other, f"missing; {key} and accept_number stand together" if other == "accept_number"
                                else f"missing; {key} and sample_size stand together")
    if test is None or test.sample_size is None or test.accept_number is None:
        return
    coupons = test.panels_per_lot * test.coupons_per_panel
    if test.sample_size > coupons:
        yield entry.finding("sample_size", f"must be at most the {coupons} coupons of a lot "
                                           "(panels_per_lot x coupons_per_panel)")
    if test.accept_number >= test.sample_size:
        yield entry.finding("accept_number", f"must be below sample_size, {test.sample_size}")


def _guard_band(draft: Draft[ImpedanceTest], drafts: Drafts) -> Iterator[Finding]:
    """What is taken off both limits must leave something between them, on every line."""
    general = drafts.evaluation.model.limit if drafts.evaluation.model is not None else None
    for line in drafts.lines:
        if draft.model is None or line.model is None:
            continue
        limit = general if line.model.limit is None else line.model.limit
        if limit is not None and draft.model.guard_band >= limit * line.model.target:
            yield draft.entry.finding("guard_band", "must be below the half-width of the limits of every line; of "
                                      f'"{line.model.name}" it is {limit * line.model.target:.6g} ohm')
            return


def _coupons(draft: Draft[Evaluation], variations: tuple[Draft[Variation], ...]) -> Iterator[Finding]:
    """A power of two, unless coupons are drawn as whole lots."""
    coupons = draft.entry.values.get("coupons")
    if coupons is None or "coupons" in draft.bad or any(has_levels(variation) for variation in variations):
        return
    if coupons & (coupons - 1) or not Range(SMALLEST_COUPONS, LARGEST_COUPONS).holds(coupons):
        nearest = _nearest_powers(coupons)
        yield draft.entry.finding("coupons", f"must be a power of two from {SMALLEST_COUPONS} to {LARGEST_COUPONS}"
                                             f", such as {nearest}")


def has_levels(draft: Draft[Variation]) -> bool:
    """Whether the variation says at which level its spread arises."""
    return "level" in draft.entry.values and "level" not in draft.bad


def _nearest_powers(coupons: int) -> str:
    below = max(SMALLEST_COUPONS, 1 << (coupons.bit_length() - 1))
    above = min(LARGEST_COUPONS, below * 2)
    return f"{below} or {above}" if below < coupons else f"{below}"
