"""Potential of a line charge between flat dielectric layers and planes.

A Dk may be complex, its loss in the imaginary part: every formula here is analytic in it.

The charge and the point lie in one layer, the body: the dielectric round the trace, of Dk `body_dk`. Heights y are
counted from the lower face of that layer. Transformed along x with wavenumber k, the potential of a unit charge is
1 / (2 k Dk) times a sum of exponentials in k y; each exponential with a constant factor is an image charge.
(Standard theory of layered media; images in a slab: P. Silvester, Proc. IEE 115 (1968), pages 43-48.)

Written as -1 / (2 pi Dk) * M, the kernels below give M as three kinds of terms:
  near images   : the charge mirrored at a face of the body, that may touch the charge itself;
  far images    : charges `shift` below the mirror image at y = 0, well away from every charge;
  spectral rest : a smooth remainder, as a quadrature over k (where flat plies or planes lie on both sides).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from tolerance.arrays import FloatArray, NumberArray, read_only
from tolerance.solver.rules import legendre

Places = tuple[FloatArray, FloatArray]  # x and y

#: Where exp(-k * distance) counts as nought in the spectral rest.
LAST_EXPONENT = 17.0
#: Fewest wavenumbers of a panel, where there are several.
PANEL = 100
#: Wavenumbers at which far images are fitted.
FIT_PLACES = 80
#: Largest error by far images, of 1 + reflection: what the potential of a charge near the plane goes as.
IMAGE_ERROR = 1e-4


@dataclass(frozen=True, slots=True)
class FlatStack:
    """Flat plies on one side of the body, outwards, then a plane or air: arrays (sections,) [m] and [-]."""

    thicknesses: tuple[FloatArray, ...]
    dks: tuple[NumberArray, ...]
    plane: bool = True

    @property
    def depth(self) -> FloatArray:
        """From the body to the end of the plies [m]."""
        return np.asarray(sum(self.thicknesses))

    def in_air(self) -> FlatStack:
        """The same plies with Dk 1."""
        return FlatStack(self.thicknesses, tuple(np.ones(dk.shape) for dk in self.dks), self.plane)

    def reflection(self, wavenumber: FloatArray, body_dk: NumberArray) -> NumberArray:
        """Reflected over arriving potential at the face of the body; `wavenumber` and result (sections, k)."""
        innermost = self.dks[-1] if self.dks else body_dk
        ending = -np.ones_like(body_dk) if self.plane else (innermost - 1.0) / (innermost + 1.0)
        result = np.broadcast_to(ending[:, None], wavenumber.shape)
        uppers = (body_dk, *self.dks)[: len(self.dks)]
        for thickness, dk, upper in reversed(list(zip(self.thicknesses, self.dks, uppers, strict=True))):
            step = ((upper - dk) / (upper + dk))[:, None]
            wave = result * np.exp(-2.0 * wavenumber * thickness[:, None])
            result = (step + wave) / (1.0 + step * wave)
        return np.asarray(result)

    def first_reflection(self, body_dk: NumberArray) -> NumberArray:
        """The reflection of the nearest face alone: the limit of large wavenumber; -1 where that is the plane."""
        if not self.dks:
            return -np.ones_like(body_dk) if self.plane else np.asarray((body_dk - 1.0) / (body_dk + 1.0))
        return np.asarray((body_dk - self.dks[0]) / (body_dk + self.dks[0]))


@dataclass(frozen=True, slots=True)
class FarImages:
    """Image charges `shift` [m] below the mirror image at y = 0, with factors: both (sections, images)."""

    shifts: FloatArray
    factors: NumberArray


@dataclass(frozen=True, slots=True)
class SpectralRest:
    """What near images leave of flat plies on both sides: M_rest = -2 * sum over k of a(k) u(x, y; k) u'(x', y'; k).

    wavenumber : (sections, k) [1/m].  lower, upper, cross : factors, quadrature weight over k included, of
    exp(-k (y + y')), exp(-k (2 D - y - y')) and exp(-k (D + y - y')) with its mirror, D the body's thickness.
    level : factor of the compensating term exp(-k * distance), whose image pair the near part takes off again.
    """

    wavenumber: FloatArray
    lower: NumberArray
    upper: NumberArray
    cross: NumberArray
    level: NumberArray
    body_thickness: FloatArray
    compensation: NumberArray  # (sections,) factor of the logarithm taken off in the near part
    distance: FloatArray  # (sections,) [m]

    def matrix(self, nodes: Places, sources: Places, sign: int) -> NumberArray:
        """Rest between nodes and sources, each (x, y) of arrays (sections, places): (sections, nodes, sources).

        sign : even (1) or odd (-1) about x = 0.
        """
        down, up, wave = self._waves(nodes, sign)
        lower, upper, cross = (factor[:, None, :] for factor in (self.lower, self.upper, self.cross))
        left = np.concatenate([down * lower + up * cross, up * upper + down * cross, wave * self.level[:, None, :]], 2)
        right = np.concatenate((down, up, wave) if sources[0] is nodes[0] else self._waves(sources, sign), axis=2)
        result = -2.0 * (left @ right.transpose(0, 2, 1))
        if np.any(self.compensation):
            square = (self.distance**2)[:, None, None]
            own = np.log((nodes[0][:, :, None] - sources[0][:, None, :]) ** 2 + square)
            mirrored = np.log((nodes[0][:, :, None] + sources[0][:, None, :]) ** 2 + square)
            result -= 0.5 * self.compensation[:, None, None] * (own + sign * mirrored)
        return np.asarray(result)

    def _waves(self, places: Places, sign: int) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Going down, going up, level, at places: each (sections, places, k)."""
        phase = self.wavenumber[:, None, :] * places[0][:, :, None]
        wave = np.cos(phase) if sign > 0 else np.sin(phase)
        down = wave * np.exp(-self.wavenumber[:, None, :] * places[1][:, :, None])
        up = wave * np.exp(-self.wavenumber[:, None, :] * (self.body_thickness[:, None] - places[1])[:, :, None])
        return down, up, wave

    def whole_matrix(self, nodes: Places, sources: Places) -> NumberArray:
        """The same of a section that is not mirrored: half the sum of even and odd."""
        return 0.5 * (self.matrix(nodes, sources, 1) + self.matrix(nodes, sources, -1))


def image_multiples(stack: FlatStack, body_dk: NumberArray) -> tuple[float, ...]:
    """Where far images stand, in units of twice the first ply's thickness, for the first section of the stack.

    One ply's images stand at whole multiples, the last ones wider apart; several plies need a denser set. The
    smallest set is taken that meets the reflection to IMAGE_ERROR.
    """
    nominal = FlatStack(tuple(part[:1] for part in stack.thicknesses), tuple(part[:1] for part in stack.dks))
    depth_ratio = float(nominal.depth[0] / nominal.thicknesses[0][0])
    if len(nominal.dks) == 1:
        candidates = [(1.0,), (1.0, 2.0), (1.0, 2.0, 3.0), (1.0, 2.0, 3.0, 4.0), (1.0, 2.0, 3.0, 4.0, 6.4),
                      (1.0, 2.0, 3.0, 4.0, 6.4, 10.2), (1.0, 2.0, 3.0, 4.0, 5.5, 8.0, 12.0, 20.0)]
    else:
        candidates = [tuple(step ** np.arange(1 + np.ceil(np.log(12.0 * depth_ratio) / np.log(step))))
                      for step in (1.45, 1.35, 1.25)]
    scale = 2.0 * nominal.thicknesses[0]
    wavenumber = np.logspace(-4.0, 1.5, 300)[None, :] / scale[:, None]
    wanted = nominal.reflection(wavenumber, body_dk[:1]) - nominal.first_reflection(body_dk[:1])[:, None]
    for multiples in candidates:
        images = far_images(nominal, body_dk[:1], multiples=multiples)
        met = np.exp(-wavenumber[0][:, None] * images.shifts[0]) @ images.factors[0]
        if (np.abs(met - wanted[0]) / (1.0 + wanted[0] + nominal.first_reflection(body_dk[:1]))).max() < IMAGE_ERROR:
            break
    return multiples


def far_images(stack: FlatStack, body_dk: NumberArray, *, multiples: Sequence[float]) -> FarImages:
    """Images that stand for the reflection of `stack` beyond its first face.

    Least squares on fixed wavenumbers over fixed image places, exact at wavenumber nought (so that the plane
    carries the whole opposite charge): a fixed linear map of the reflection, hence smooth in every dimension.
    """
    scale = 2.0 * stack.thicknesses[0]
    wavenumber, solve = image_fit(tuple(multiples))
    wanted = stack.reflection(wavenumber / scale[:, None], body_dk) - stack.first_reflection(body_dk)[:, None]
    at_nought = -1.0 - stack.first_reflection(body_dk)
    spread = np.exp(-wavenumber * multiples[-1])
    if len(multiples) == 1:
        return FarImages(shifts=scale[:, None], factors=at_nought[:, None])
    free = (wanted - at_nought[:, None] * spread) @ solve
    factors = np.concatenate([free, (at_nought - free.sum(axis=1))[:, None]], axis=1)
    return FarImages(shifts=scale[:, None] * np.asarray(multiples), factors=factors)


def plane_image(depth: FloatArray) -> FarImages:
    """The one image of a bare plane `depth` below y = 0."""
    return FarImages(shifts=2.0 * depth[:, None], factors=-np.ones((depth.shape[0], 1)))


def spectral_rest(
    *, below: FlatStack, above: FlatStack, body_dk: NumberArray, body_thickness: FloatArray, distance: FloatArray,
    count: int,
) -> SpectralRest:
    """The rest, beyond the images at both faces of the body, of the plies and planes on both sides.

    distance : (sections,) [m], the shortest way of any ray that the near images leave out.  count : nodes over k.
    """
    wavenumber, weight = spectral_quadrature(distance, count)
    down, up = below.reflection(wavenumber, body_dk), above.reflection(wavenumber, body_dk)
    first_down, first_up = below.first_reflection(body_dk), above.first_reflection(body_dk)
    crossing = np.exp(-wavenumber * body_thickness[:, None])
    many = 1.0 / (1.0 - down * up * crossing**2)
    compensation = 1.0 + first_down + first_up
    return SpectralRest(
        wavenumber=wavenumber,
        lower=weight * (down * many - first_down[:, None]),
        upper=weight * (up * many - first_up[:, None]),
        cross=weight * (down * up * many * crossing),
        level=weight * compensation[:, None] * np.exp(-wavenumber * distance[:, None]),
        body_thickness=body_thickness, compensation=compensation, distance=distance,
    )


def spectral_quadrature(distance: FloatArray, count: int) -> tuple[FloatArray, FloatArray]:
    """Wavenumbers (sections, count) [1/m], crowded towards nought, and their weights over d k / k: (count,)."""
    root, weight = _spectral_rule(count)
    return LAST_EXPONENT / distance[:, None] * root**2, weight


@lru_cache(maxsize=64)
def _spectral_rule(count: int) -> tuple[FloatArray, FloatArray]:
    """Root of the wavenumber over the last one, and weight over d k / k: both (count,).

    Many nodes stand in panels: in one they would crowd so much towards nought that what planes on both sides do there
    would be lost in rounding.
    """
    panels = max(1, count // PANEL)
    nodes, weights = legendre(count // panels)
    start = np.arange(panels)[:, None] / panels
    root = (start + 0.5 * (1.0 + nodes) / panels).ravel()
    return read_only(root), read_only(np.tile(weights, panels) / panels / root)


@lru_cache(maxsize=64)
def image_fit(multiples: tuple[float, ...]) -> tuple[FloatArray, FloatArray]:
    """Wavenumbers (in units of 1 / scale) and the least-squares map from the reflection there to image factors."""
    wavenumber = np.logspace(-3.0, 1.3, FIT_PLACES) / max(1.0, multiples[-1] / 60.0)
    images = np.exp(-np.outer(wavenumber, multiples))
    weight = 1.0 / np.minimum(wavenumber, 1.0)  # towards nought the potential goes as 1 + reflection, which vanishes
    free = (images[:, :-1] - images[:, -1:]) * weight[:, None]
    return read_only(wavenumber), read_only((np.linalg.pinv(free, rcond=1e-13) * weight).T)
