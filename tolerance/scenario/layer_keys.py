"""Which keys each kind of layer takes."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import NamedTuple

from tolerance.scenario.tables import COPPER, CORE, MASK, PREPREG

RESIN_KEYS = ("resin_dk", "glass_dk", "resin_content", "glass_areal_weight")


class LayerKeys(NamedTuple):
    """Keys that a kind of layer needs, and those it takes besides."""

    needed: tuple[str, ...]
    taken: tuple[str, ...]


LAYER_KEYS: Mapping[str, LayerKeys] = MappingProxyType({
    MASK: LayerKeys(("thickness", "over_copper", "dk"), ("df", "dk_frequency")),
    COPPER: LayerKeys(("use", "foil"), ("plating", "etch_factor", "foot", "conductivity", "roughness_foot",
                                        "roughness_crest", "copper_share")),
    PREPREG: LayerKeys(("thickness", "dk"), ("df", "dk_frequency", *RESIN_KEYS, "outflow")),
    CORE: LayerKeys(("thickness", "dk"), ("df", "dk_frequency", *RESIN_KEYS)),
})
