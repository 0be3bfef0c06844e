"""What its resin content makes of a ply: the pressed thickness by mass balance, and Dk by a mixing law.

A ply holds glass and resin and no voids. What flows out at the edges of the press, and what fills etched copper, is
resin; thickness and Dk are those of what stays between the facing copper surfaces. More resin makes the ply thicker
and, since resin has the lower Dk, lowers its Dk: one cause, two effects, both of which raise the impedance.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray

GLASS_DENSITY = 2540.0  # [kg/m^3] of E-glass as laminates are woven from; from memory, handbooks say 2540 to 2600
RESIN_DENSITY = 1350.0  # [kg/m^3] of cured epoxy: common practice, no source; 1200 to 1400 are in use


@dataclass(frozen=True, slots=True)
class Ply:
    """What a ply of glass and resin is made of, whatever its resin content.

    glass_areal_weight [kg/m^2]: of all cloth of the layer.  resin_dk, glass_dk [-].
    outflow : share of the resin that leaves at the edges of the press.
    """

    glass_areal_weight: float
    resin_dk: float
    glass_dk: float
    outflow: float = 0.0

    def glass_thickness(self) -> float:
        """Volume of the glass per area [m]."""
        return self.glass_areal_weight / GLASS_DENSITY

    def resin_thickness(self, *, resin_content: FloatArray, filled: FloatArray) -> FloatArray:
        """Volume per area [m] of the resin that stays between the copper surfaces; not above 0 where it is used up.

        resin_content [-]: share by weight before the press, inside (0, 1).  filled [m]: resin volume per area that
        goes into the etched parts of the facing copper, its thickness times the share etched away.
        """
        ratio = resin_content / (1.0 - resin_content)
        return self.glass_areal_weight * ratio / RESIN_DENSITY * (1.0 - self.outflow) - filled

    def thickness(self, *, resin_content: FloatArray, filled: FloatArray) -> FloatArray:
        """Pressed thickness [m], arguments as for `resin_thickness`; all arrays (coupons,).

        Mass balance: glass_areal_weight / glass density + resin per area / resin density.
        """
        return self.glass_thickness() + self.resin_thickness(resin_content=resin_content, filled=filled)

    def dk(self, *, resin_content: FloatArray, filled: FloatArray) -> FloatArray:
        """Dk of the pressed ply [-]: the logarithms of the two, weighted by volume; arguments as for `thickness`.

        The logarithmic law lies between the two bounds that hold for every arrangement: the linear mean (field along
        the sheet) and the series mean (field across it). In a woven ply round a line the field has both directions
        and the yarns are neither sheets nor spheres; no published law is exact for it.
        Source: K. Lichtenecker, "Die Dielektrizitaetskonstante natuerlicher und kuenstlicher Mischkoerper",
        Physikalische Zeitschrift, volume 27, pages 115-158, 1926 (from memory).
        """
        resin = self.resin_thickness(resin_content=resin_content, filled=filled)
        share = resin / (self.glass_thickness() + resin)
        return np.asarray(np.exp(share * np.log(self.resin_dk) + (1.0 - share) * np.log(self.glass_dk)))
