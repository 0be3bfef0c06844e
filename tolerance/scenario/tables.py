"""The tables of a scenario as frozen models: every key, what it may hold, and what it means. All values are SI.

Only what one key says by itself is checked here; what keys and tables say together is checked in `checking`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

from tolerance.scenario.amounts import Amount as Amount
from tolerance.scenario.amounts import AmountOf, EndOf, Level, ReadingAt
from tolerance.scenario.amounts import LevelShares as LevelShares
from tolerance.scenario.amounts import Reading as Reading
from tolerance.scenario.keys import Flag, Number, Quantity, Range, Text, Texts, Values, Whole, Word

FORMAT = 1
COPPER_CONDUCTIVITY = 58e6  # [S/m] annealed copper, the format's default
SMALLEST_COUPONS, LARGEST_COUPONS = 256, 2**24
MOST_SWEPT = 10_000  # values of one entry, and scenarios of one file

MASK, COPPER, PREPREG, CORE = "mask", "copper", "prepreg", "core"
Foot = Literal["up", "down"]
Shape = Literal["normal", "truncated_normal", "uniform", "triangular", "lognormal", "measured"]

_ABOVE_ZERO = {"low": 0.0, "low_in": False}


def _length(highest: float) -> Quantity:
    return Quantity("length", Range(0.0, highest, low_in=False), "um")


_THICKNESS = _length(5e-3)
_MASK_OVER = _length(1e-3)
_ROUGHNESS = Quantity("length", Range(0.0, 20e-6), "um")
_SPACE = _length(5e-3)
_DK = Number(Range(1.0, 100.0))
_FREQUENCY = Quantity("frequency", Range(0.0, 1e12, low_in=False), "GHz")
_LIMIT = Quantity("share", Range(0.0, 1.0, low_in=False, high_in=False))
_NAME = Text("a name", forbidden="*")
_LAYER = Text("the name of a layer", forbidden="*")
_OF = Texts('a LAYER.PROPERTY name or pattern, such as "P1.thickness" or "P*.dk"', single=True)
_COUNT = Whole(Range(1, 100_000))
_OPTION = ConfigDict(frozen=True, extra="forbid")


class Table(BaseModel):
    """Base of all tables: frozen, and no key that is not named."""

    model_config = _OPTION


class Evaluation(Table):
    """What is computed, and how well it must do."""

    frequency: Annotated[float | None, _FREQUENCY] = Field(
        default=None, description="Where the line is evaluated. Absent: lossless and static, Dk as given")
    limit: Annotated[float | None, _LIMIT] = Field(
        default=None, description="Half-width of the impedance limits, of the target; here or on every line")
    target_yield: Annotated[float, Quantity("share", Range(0.0, 1.0, low_in=False))] = Field(
        default=0.99, description='Default aim of the decisions; default "99 %"')
    coupons: Annotated[int, Whole(Range(1, LARGEST_COUPONS), more=", without levels a power of two from 256")] = Field(
        default=65536, description="Monte Carlo size: a power of two from 256 to 2^24; default 65536")
    seed: Annotated[int | None, Whole(Range(0))] = Field(
        default=None, description="Any integer from 0; absent: drawn, and shown in the result")


class Layer(Table):
    """One layer of the stackup, as finished. Which keys a layer takes and needs depends on its kind."""

    name: Annotated[str, _NAME] = Field(description="What lines and variations call the layer")
    kind: Annotated[Literal["mask", "copper", "prepreg", "core"], Word((MASK, COPPER, PREPREG, CORE))] = Field(
        description="What the layer is; a mask stands only outermost")
    thickness: Annotated[float | None, _THICKNESS] = Field(
        default=None, description="Dielectric: pressed, between the facing copper surfaces. Mask: over bare laminate")
    over_copper: Annotated[float | None, _MASK_OVER] = Field(
        default=None, description="Mask: thickness over the crest of a trace")
    dk: Annotated[float | None, _DK] = Field(default=None, description="Relative permittivity")
    df: Annotated[float | None, Number(Range(0.0, 1.0))] = Field(
        default=None, description="Loss tangent; needed with a frequency only")
    dk_frequency: Annotated[float | None, _FREQUENCY] = Field(
        default=None, description="Where dk and df hold; default: evaluation.frequency")
    use: Annotated[Literal["signal", "plane"] | None, Word(("signal", "plane"))] = Field(
        default=None, description="Copper: carries lines, or is a reference plane")
    foil: Annotated[float | None, Quantity("copper length", Range(0.0, 500e-6, low_in=False), "um")] = Field(
        default=None, description="Copper: thickness of the foil")
    plating: Annotated[float, Quantity("copper length", Range(0.0, 500e-6), "um")] = Field(
        default=0.0, description='Copper: thickness plated on the foil; default "0 um"')
    etch_factor: Annotated[float, Number(Range(0.0, 1000.0, low_in=False), infinite=True)] = Field(
        default=math.inf,
        description="Copper thickness over sideways undercut of one edge; absent or inf: vertical edges")
    foot: Annotated[Foot | None, Word(("up", "down"))] = Field(
        default=None, description="Where the stackup does not decide it: the face bonded to laminate points up or down")
    conductivity: Annotated[float, Quantity("conductivity", Range(0.0, 1e9, low_in=False), "MS/m")] = Field(
        default=COPPER_CONDUCTIVITY, description='Used with a frequency only; default "58 MS/m" (annealed copper)')
    roughness_foot: Annotated[float | None, _ROUGHNESS] = Field(
        default=None, description="Rms roughness of the face bonded to the laminate; used with a frequency only")
    roughness_crest: Annotated[float | None, _ROUGHNESS] = Field(
        default=None, description="Rms roughness of the face away from the laminate; used with a frequency only")
    resin_dk: Annotated[float | None, _DK] = Field(
        default=None, description="Dk of the resin: with glass_dk and resin_content instead of dk; beside the dk of a "
                                  "prepreg that of the band at the height of the copper that it presses into")
    glass_dk: Annotated[float | None, _DK] = Field(default=None, description="Dk of the glass; instead of dk")
    resin_content: Annotated[float | None, Quantity("share", Range(0.0, 1.0, low_in=False, high_in=False))] = Field(
        default=None, description="Share of resin by weight; instead of dk")
    glass_areal_weight: Annotated[float | None, Quantity("areal weight", Range(0.0, 5.0, low_in=False))] = Field(
        default=None, description="Weight of all glass cloth of the layer per area; instead of dk")
    outflow: Annotated[float, Quantity("share", Range(0.0, 0.5))] = Field(
        default=0.0, description='With resin_content: share of the resin that flows out in the press; default "0 %"')
    copper_share: Annotated[float, Quantity("share", Range(0.0, 1.0, low_in=False))] = Field(
        default=1.0, description='Copper: share of the area that stays copper; the prepreg that presses into it, where '
                                 'given by resin_content, fills the rest; default "100 %"')

    @property
    def copper_thickness(self) -> float:
        """Foil and plating together [m]; nothing but copper has them."""
        return (self.foil or 0.0) + self.plating


class Line(Table):
    """One controlled-impedance line, as drawn."""

    name: Annotated[str, _NAME] = Field(description="What results call the line")
    layer: Annotated[str, _LAYER] = Field(description="The signal copper that carries it")
    width: Annotated[float, _length(20e-3)] = Field(
        description="Finished width at the foot (the face bonded to the laminate), drawn nominal")
    target: Annotated[float, Quantity("resistance", Range(0.0, 1000.0, low_in=False))] = Field(
        description="Impedance aimed at; for a pair the differential one, or with mode common the common one")
    limit: Annotated[float | None, _LIMIT] = Field(
        default=None, description="Half-width of the impedance limits, of the target; default: evaluation.limit")
    gap: Annotated[float | None, _SPACE] = Field(
        default=None, description="Makes it an edge-coupled pair: foot edge to foot edge")
    partner: Annotated[str | None, _LAYER] = Field(
        default=None, description="Makes it a broadside pair with an equal trace on that layer")
    offset: Annotated[float, Quantity("length", Range(-5e-3, 5e-3), "um")] = Field(
        default=0.0, description="Broadside pair: sideways shift of the partner")
    ground_gap: Annotated[float | None, _SPACE] = Field(
        default=None,
        description="Makes it coplanar: grounded copper of the same layer this far from the outer foot edges")
    references: Annotated[tuple[str, ...] | None, Texts("names of planes")] = Field(
        default=None, description="Reference planes; default: the nearest plane on each side")
    mode: Annotated[Literal["differential", "common"], Word(("differential", "common"))] = Field(
        default="differential", description="Pairs: what target and impedance mean; default differential")

    @property
    def is_pair(self) -> bool:
        """Whether the line is two traces."""
        return self.gap is not None or self.partner is not None


class Variation(Table):
    """How properties of the layers vary."""

    of: Annotated[tuple[str, ...], _OF] = Field(description='LAYER.PROPERTY, a list of them, or a pattern ("P*.dk")')
    shape: Annotated[
        Shape, Word(("normal", "truncated_normal", "uniform", "triangular", "lognormal", "measured"))
    ] = Field(default="normal", description="Kind of distribution; default normal")
    tolerance: Annotated[Amount | None, AmountOf("a half-width", positive=True)] = Field(
        default=None, description="Half-width, of the nominal or absolute")
    sigmas: Annotated[float | None, Number(Range(0.0, 20.0, low_in=False))] = Field(
        default=None, description="How many deviations the half-width covers; default 3")
    cpk: Annotated[float | None, Number(Range(0.0, 20.0, low_in=False))] = Field(
        default=None, description="Instead of sigmas: deviation = (half-width - |shift|) / (3 cpk)")
    shift: Annotated[Amount | None, AmountOf("a shift of the mean", positive=False)] = Field(
        default=None, description="Moves the mean, never the nominal; a percentage is of the nominal")
    low: Annotated[float | None, EndOf()] = Field(default=None, description="Lower end, with high instead of tolerance")
    high: Annotated[float | None, EndOf()] = Field(default=None, description="Upper end, with low instead of tolerance")
    together: Annotated[bool, Flag()] = Field(
        default=False, description="true: one shared standard draw for all that `of` names")
    level: Annotated[LevelShares, Level()] = Field(
        default=LevelShares(coupon=1.0), description="lot, panel or coupon, or shares of the variance; default coupon")
    file: Annotated[str | None, Text("the path of a CSV or XLSX file")] = Field(
        default=None, description="Measured: table beside the scenario, CSV or XLSX")
    column: Annotated[str | None, Text("the heading of a column")] = Field(
        default=None, description="Measured: heading of the column")
    sheet: Annotated[str | None, Text("the name of a sheet")] = Field(
        default=None, description="Measured: sheet of the XLSX")

    @property
    def sigmas_or_default(self) -> float:
        """How many deviations the half-width covers; 3 unless given."""
        return 3.0 if self.sigmas is None else self.sigmas

    @property
    def has_level(self) -> bool:
        """Whether it says at which level its spread arises, be it the coupon."""
        return "level" in self.model_fields_set


class Correlation(Table):
    """Two variables whose underlying standard normals go together (a Gaussian copula)."""

    between: Annotated[tuple[str, str], Texts("names of variables", count=2)] = Field(
        description="Two variables of the same level shares")
    coefficient: Annotated[float, Number(Range(-1.0, 1.0, low_in=False, high_in=False))] = Field(
        description="Correlation of the underlying standard normals")


class Offer(Table):
    """What a fabricator would tighten, and its price."""

    of: Annotated[tuple[str, ...], _OF] = Field(description="What is tightened, as in a variation")
    tolerance: Annotated[Amount, AmountOf("a half-width", positive=True)] = Field(description="The tighter half-width")
    cost: Annotated[float, Number(Range(0.0))] = Field(description="In any currency, per panel")


class ImpedanceTest(Table):
    """The impedance test and the acceptance."""

    repeatability: Annotated[float, Quantity("resistance", Range(0.0, 1000.0))] = Field(
        default=0.0, description='Standard deviation of one reading; default "0 ohm"')
    bias: Annotated[float, Quantity("resistance", Range(-1000.0, 1000.0))] = Field(
        default=0.0, description='What a reading has too much; default "0 ohm"')
    guard_band: Annotated[float, Quantity("resistance", Range(0.0, 1000.0))] = Field(
        default=0.0, description='Taken off both limits at acceptance; default "0 ohm"')
    panels_per_lot: Annotated[int, _COUNT] = Field(default=20, description="Default 20")
    coupons_per_panel: Annotated[int, _COUNT] = Field(default=2, description="Default 2")
    sample_size: Annotated[int | None, _COUNT] = Field(default=None, description="Coupons measured in a lot")
    accept_number: Annotated[int | None, Whole(Range(0, 100_000))] = Field(
        default=None, description="The lot is rejected above so many failures")
    reading: Annotated[Reading | None, ReadingAt(Quantity("length", Range(0.0, 2.0, low_in=False), "mm"))] = Field(
        default=None, description="Where on the coupon is read: shows what series resistance adds there")


class Report(Table):
    """What tables and figures show."""

    lengths: Annotated[Literal["um", "mil"], Word(("um", "mil"))] = Field(
        default="um", description="Unit of lengths in tables and figures; default um")


class Sweep(Table):
    """Values that `tolerance sweep` puts in the place of a key, one scenario for each; entries multiply out."""

    of: Annotated[tuple[str, ...] | None, Texts(
        'paths of keys (such as "layers.P1.thickness" or "evaluation.limit")', single=True)] = Field(
        default=None, description='TABLE.KEY or TABLE.ENTRY.KEY, such as "lines.radio feed.width"; of a list all '
                                  "have the same value")
    values: Annotated[tuple[object, ...] | None, Values(MOST_SWEPT)] = Field(
        default=None, description="What the key holds, one after the other")
    file: Annotated[str | None, Text("the path of a CSV or XLSX file")] = Field(
        default=None, description="Instead of of and values: a table beside the scenario, headed by paths of keys, a "
                                  "scenario for each row")
    sheet: Annotated[str | None, Text("the name of a sheet")] = Field(
        default=None, description="Sheet of the XLSX")


@dataclass(frozen=True, slots=True)
class Readings:
    """Measured values of one property, in the order of their rows; SI."""

    of: str  # "P1.thickness"
    file: str
    sheet: str | None
    column: str
    values: tuple[float, ...]


class Scenario(BaseModel):
    """A whole scenario, checked: from here on nobody checks again. Layers stand top to bottom."""

    model_config = _OPTION

    format: int
    title: str
    evaluation: Evaluation
    layers: tuple[Layer, ...]
    lines: tuple[Line, ...]
    variations: tuple[Variation, ...] = ()
    correlations: tuple[Correlation, ...] = ()
    offers: tuple[Offer, ...] = ()
    sweep: tuple[Sweep, ...] = ()
    test: ImpedanceTest | None = None
    report: Report = Report()
    readings: tuple[Readings, ...] = ()  # of measured variations, one for each property
    origins: Mapping[str, str] = {}  # where a preset has the law of a property from, by the property's name
    source: str = ""  # path of the file
    allowed: tuple[str, ...] = ()  # folders besides its own in which files that it names may stand
    text: str = ""  # the TOML as read, with that of every file it extends

    def layer(self, name: str) -> Layer:
        """The layer of this name. Raises KeyError where there is none."""
        for layer in self.layers:
            if layer.name == name:
                return layer
        raise KeyError(name)

    def readings_of(self, name: str) -> Readings:
        """The readings of a property that varies as measured. Raises KeyError where it does not."""
        for readings in self.readings:
            if readings.of == name:
                return readings
        raise KeyError(name)

    @property
    def has_levels(self) -> bool:
        """Whether any variation says at which level its spread arises; then coupons are drawn as whole lots."""
        return any(each.has_level for each in self.variations)

    def limit_of(self, line: Line) -> float:
        """Half-width of the line's impedance limits, as a share of the target."""
        limit = self.evaluation.limit if line.limit is None else line.limit
        if limit is None:
            raise ValueError(f"line {line.name!r} has no limit, and neither has [evaluation]")
        return limit
