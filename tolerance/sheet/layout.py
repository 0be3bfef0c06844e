"""The sheet that goes to the fabricator and comes back: its columns, its words, and which units a row takes."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

from tolerance.scenario.properties import MEASURE, Property
from tolerance.scenario.tables import Variation
from tolerance.units import unit_names

TABLE_SHEET, HELP_SHEET, LINES_SHEET = "Tolerances", "How to fill it in", "Lines"
LIMITS, THREE_SIGMA, CPK = "limits", "3 sigma", "Cpk"
BASES = (LIMITS, THREE_SIGMA, CPK)
PERCENT, ABSOLUTE = "%", "absolute"
LENGTHS = frozenset({"length", "copper length"})


@dataclass(frozen=True, slots=True)
class Heading:
    """A column: how it is headed, whether the fabricator fills it, and what the explaining sheet says of it."""

    key: str
    words: str
    answer: bool
    explained: str
    also: tuple[str, ...] = ()  # other headings that are recognized


HEADINGS = (
    Heading("name", "Dimension", False, "Our name for the row. Please leave it as it is: your answers are found by it.",
            ("name",)),
    Heading("words", "What it is", False, "The same in words. A row with several layers asks for one answer for all."),
    Heading("nominal", "Nominal", False, "What we aim at."),
    Heading("importance", "Importance", False, "How much the answer counts for us. The first rows count most."),
    Heading("lines", "Lines it moves most", False, "The controlled lines whose impedance hangs on it most."),
    Heading("assumed", "Assumed tolerance", False, "What we have assumed so far: plus and minus, or from end to end."),
    Heading("assumed_basis", "Assumed as", False, "How we have read that tolerance."),
    Heading("tolerance", "Your tolerance, +-", True, "Half of the whole width: 8 for +-8. Leave it empty where our "
            "assumption is right, or where you do not know.", ("your tolerance", "tolerance")),
    Heading("unit", "Unit", True, "Of the numbers in this row; choose from the list. % is percent of the nominal, for "
            "an etch percent of each line's width. A unit typed behind a number holds for that cell.", ("units",)),
    Heading("basis", "Your tolerance is", True, "limits: nothing outside leaves the house, inside anything may occur. "
            "3 sigma: three standard deviations of the process. Cpk: held with the capability in the next column. "
            "Empty: as we have assumed.", ("basis", "meaning")),
    Heading("cpk", "Cpk", True, "The capability, such as 1.33; with Cpk in the column before.", ("cpk value",)),
    Heading("mean", "Measured mean minus nominal", True, "If you share it: how far your process lies off the nominal "
            "on average, with its sign: -2 where the mean is 2 below.", ("measured mean", "mean minus nominal")),
    Heading("deviation", "Measured standard deviation", True, "If you share it: of your process, in the same unit.",
            ("standard deviation", "measured deviation")),
    Heading("tighter", "Tighter tolerance, +-", True, "A closer grade that you could offer.", ("tighter tolerance",)),
    Heading("price", "Price of the tighter, per panel", True, "What the closer grade costs more per panel, in the "
            "currency of your offer; 0 if nothing.", ("price", "price per panel")),
    Heading("remarks", "Remarks", True, "Anything else: a grade by its standard, a condition, a question.",
            ("remark",)),
)

#: property -> what it is called in front of a layer's name
PROPERTY_WORDS: Mapping[str, str] = MappingProxyType({
    "thickness": "thickness of", "over_copper": "thickness over copper of", "dk": "Dk of", "df": "loss tangent of",
    "resin_content": "resin content of", "etch": "finished minus drawn width on", "foil": "foil thickness of",
    "plating": "plated thickness on", "etch_factor": "etch factor (depth over undercut) on",
    "registration": "sideways shift against the other layers of",
})


def name_of(of: Sequence[str]) -> str:
    """What a row is called: the properties or patterns of its variation as the scenario writes them."""
    return ", ".join(of)


def plain(text: str) -> str:
    """A heading or name as it is compared: small letters, single blanks, without brackets and plus-minus signs."""
    text = re.sub(r"\[[^\]]*\]|\([^)]*\)", " ", text).replace("\N{PLUS-MINUS SIGN}", "+-").replace("+/-", "+-")
    return " ".join(text.casefold().replace("+-", " ").replace(",", " ").replace(":", " ").replace("*", " * ").split())


def heading_of(text: str) -> Heading | None:
    """The column that is meant by a heading; None where it is none of ours."""
    given = plain(text)
    for heading in HEADINGS:
        if given and given in (plain(heading.words), *(plain(other) for other in heading.also)):
            return heading
    return None


def units_for(members: Sequence[Property]) -> tuple[str, ...]:
    """Units in which a half-width of all these properties can be given; the first one fits best."""
    measures = {MEASURE[member.property] for member in members}
    percent = (PERCENT,) if all(member.nominal != 0.0 or member.property == "etch" for member in members) else ()
    if measures <= LENGTHS:
        return ("um", "mil", "mm", *(("oz",) if measures == {"copper length"} else ("inch",)), *percent)
    return (ABSOLUTE, *percent) if len(measures) == 1 else percent


def usual_unit(variation: Variation, members: Sequence[Property], lengths: str) -> str:
    """The unit that stands in the row before anybody fills it in: that of the assumed tolerance."""
    units = units_for(members)
    if variation.tolerance is not None and variation.tolerance.relative:
        return PERCENT
    return lengths if lengths in units else units[0]


def is_length_unit(unit: str) -> bool:
    return unit in unit_names("copper length")
