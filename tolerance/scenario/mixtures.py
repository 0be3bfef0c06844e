"""Laminate given by resin and glass instead of `dk`: its nominal Dk, and its thickness where that is not given.

Resin presses into the etched parts of copper whose crest faces the ply. A foil at the outside is etched after the
press and takes none; neither does a core's own copper.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.laminate import Ply
from tolerance.scenario.documents import Finding
from tolerance.scenario.drafts import Draft, Drafts
from tolerance.scenario.stackup import LAMINATES, foot_at
from tolerance.scenario.tables import COPPER, PREPREG, Layer, Scenario
from tolerance.units import write_quantity


@dataclass(frozen=True, slots=True)
class Mixture:
    """A layer of glass and resin. `etched` : (name, share of its area that is etched away) of copper that it fills."""

    layer: str
    ply: Ply
    resin_content: float
    etched: tuple[tuple[str, float], ...]

    def thickness_and_dk(self, *, resin_content: FloatArray, filled: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Pressed thickness [m] and Dk [-], (coupons,): -inf and the glass's own Dk where there is no such ply.

        There is none where the content is not between 0 and 1, and where the copper takes more resin than there is.
        """
        inside = (resin_content > 0.0) & (resin_content < 1.0)
        content = np.where(inside, resin_content, 0.5)
        inside &= self.ply.resin_thickness(resin_content=content, filled=filled) > 0.0
        filled = np.where(inside, filled, 0.0)
        thickness = self.ply.thickness(resin_content=content, filled=filled)
        dk = self.ply.dk(resin_content=content, filled=filled)
        return np.where(inside, thickness, -np.inf), np.where(inside, dk, self.ply.glass_dk)


def mixtures_of(scenario: Scenario) -> tuple[Mixture, ...]:
    """Every layer of a checked scenario that is given by resin and glass."""
    found = (_mixture(scenario.layers, index) for index in range(len(scenario.layers)))
    return tuple(mixture for mixture in found if mixture is not None)


def with_mixtures(drafts: Drafts) -> tuple[Drafts, list[Finding]]:
    """Drafts whose layers of resin and glass have their nominal Dk and thickness, and what stands against it."""
    models = [draft.model for draft in drafts.layers]
    findings: list[Finding] = []
    filled = []
    for index, draft in enumerate(drafts.layers):
        findings += _foot_findings(draft, models, index)
        mixture = _mixture(models, index)
        if mixture is None or draft.model is None:
            filled.append(draft)
            continue
        thickness, dk = _nominal(mixture, models)
        if not thickness > 0.0:
            findings.append(draft.entry.finding("resin_content", _starved(mixture, models)))
        update = {"dk": float(dk)}
        if draft.model.thickness is None:
            update["thickness"] = float(thickness)
        filled.append(replace(draft, model=draft.model.model_copy(update=update)))
    return replace(drafts, layers=tuple(filled)), findings


def _mixture(layers: Sequence[Layer | None], index: int) -> Mixture | None:
    """The mixture of the layer at `index`; None where it is given by dk, or where a key is missing."""
    layer = layers[index]
    if layer is None or layer.kind not in LAMINATES:
        return None
    content, weight = layer.resin_content, layer.glass_areal_weight
    if content is None or weight is None or layer.resin_dk is None or layer.glass_dk is None:
        return None
    ply = Ply(glass_areal_weight=weight, resin_dk=layer.resin_dk, glass_dk=layer.glass_dk, outflow=layer.outflow)
    return Mixture(layer.name, ply, content, tuple(_etched(layers, index)))


def _etched(layers: Sequence[Layer | None], index: int) -> Iterator[tuple[str, float]]:
    """Copper next to a prepreg whose crest points to it and whose area is not all copper."""
    known = [layer for layer in layers if layer is not None]
    if len(known) != len(layers) or known[index].kind != PREPREG:
        return
    for at, towards in ((index - 1, "up"), (index + 1, "down")):
        if 0 <= at < len(known) and known[at].kind == COPPER and known[at].copper_share < 1.0 \
                and foot_at(known, at) == towards:
            yield known[at].name, 1.0 - known[at].copper_share


def _foot_findings(draft: Draft[Layer], layers: Sequence[Layer | None], index: int) -> Iterator[Finding]:
    """A copper of which part is etched away must say into which side the resin presses."""
    known = [layer for layer in layers if layer is not None]
    if draft.model is None or draft.model.kind != COPPER or len(known) != len(layers):
        return
    if draft.model.copper_share < 1.0 and foot_at(known, index) is None:
        yield draft.entry.finding("foot", 'missing; must be "up" or "down": the stackup does not decide which prepreg '
                                          "presses into this copper")


def _nominal(mixture: Mixture, layers: Sequence[Layer | None]) -> tuple[float, float]:
    thickness, dk = mixture.thickness_and_dk(
        resin_content=np.array([mixture.resin_content]), filled=np.array([_filled(mixture, layers)]))
    return float(thickness[0]), float(dk[0])


def _filled(mixture: Mixture, layers: Sequence[Layer | None]) -> float:
    """Resin volume per area [m] that the etched copper takes at the nominals."""
    copper = {layer.name: layer.copper_thickness for layer in layers if layer is not None}
    return sum(share * copper[name] for name, share in mixture.etched)


def _starved(mixture: Mixture, layers: Sequence[Layer | None]) -> str:
    none = np.zeros(1)
    there = mixture.ply.resin_thickness(resin_content=np.array([mixture.resin_content]), filled=none)
    return (f"must leave resin between the copper: the ply has {write_quantity(float(there[0]), 'length')} of it, "
            f"and the etched copper that it fills takes {write_quantity(_filled(mixture, layers), 'length')}")
