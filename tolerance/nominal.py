"""What `tolerance check` answers: each line at its nominals. Light, so that `check` starts fast.

Values are SI: impedances in ohm, delays in seconds per metre, lengths in metres.
"""

from __future__ import annotations

from dataclasses import dataclass

from tolerance.hypertext import hypertext
from tolerance.sections.reading import ReadingRise as ReadingRise


@dataclass(frozen=True, slots=True)
class FormulaOpinion:
    """What a published formula says of a line, beside the field solver: `impedance` [ohm], None with its reason.

    claimed : accuracy its authors claim, as a share; None where no claim is known for such a line.
    """

    formula: str
    source: str
    impedance: float | None
    claimed: float | None
    remark: str


@dataclass(frozen=True, slots=True)
class FormulaOpinions:
    """All that published formulas say of a line; `why_none` tells why there is none for its kind."""

    opinions: tuple[FormulaOpinion, ...]
    why_none: str


@dataclass(frozen=True, slots=True)
class LossFigures:
    """A line at a frequency [Hz], in its mode: of a differential pair the loop of both traces, of a common-mode pair
    both tied together, so that the complex impedance is sqrt((R + j omega L) / (G + j omega C)) of these.

    resistance [ohm/m], inductance [H/m], conductance [S/m], capacitance [F/m], losses [dB/m].
    """

    frequency: float
    resistance: float
    inductance: float
    conductance: float
    capacitance: float
    complex_impedance: complex
    conductor_loss: float
    dielectric_loss: float


@dataclass(frozen=True, slots=True)
class CouplingFigures:
    """Inductive and capacitive coupling coefficient of a pair, and the backward crosstalk coefficient [-]."""

    inductive: float
    capacitive: float
    backward: float


@dataclass(frozen=True, slots=True)
class ShareFigures:
    """Shares of a trace's charge and current by face, and of the capacitance that is fringe (None: not told)."""

    faces: tuple[tuple[str, float, float], ...]  # ("foot", charge, current)
    fringe: float | None


@dataclass(frozen=True, slots=True)
class NominalLine:
    """One line at the nominals of its layers.

    For a pair `impedance` is the differential impedance, `common_mode` half the even-mode impedance, and
    `effective_dk` and `delay` are the odd mode's; in common mode all three are the common mode's.
    """

    name: str
    kind: str  # in words: "mask-coated microstrip pair"
    layer: str
    references: tuple[str, ...]
    target: float
    impedance: float
    effective_dk: float
    delay: float
    common_mode: float | None = None
    even_effective_dk: float | None = None
    dimensions: tuple[tuple[str, float], ...] = ()  # ("width", 180e-6), ("gap", 150e-6): as they are to be shown
    formulas: FormulaOpinions | None = None  # None: not asked for
    losses: LossFigures | None = None  # where the scenario has a frequency; then `impedance` is the magnitude of theirs
    coupling: CouplingFigures | None = None  # of pairs
    shares: ShareFigures | None = None
    rise: ReadingRise | None = None  # where the scenario says where a coupon is read
    mode: str = "single"  # single | differential | common
    partner: str | None = None  # the other layer of a broadside pair


@dataclass(frozen=True, slots=True)
class CheckResult:
    """All that `tolerance check` answers."""

    title: str
    lines: tuple[NominalLine, ...]

    def _repr_html_(self) -> str:
        """What a notebook shows."""
        rows = [(line.name, line.kind, line.layer, ", ".join(line.references), f"{line.target:g}",
                 f"{line.impedance:.2f}", f"{100.0 * (line.impedance / line.target - 1.0):+.1f}",
                 f"{line.effective_dk:.3f}", f"{1e9 * line.delay:.2f}") for line in self.lines]
        return hypertext(self.title, [], ("line", "kind", "layer", "references", "target [ohm]", "nominal [ohm]",
                                          "off target [%]", "effective Dk", "delay [ps/mm]"), rows)
