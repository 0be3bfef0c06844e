"""A checked scenario as text again, whole and on its own: what it extended and took from presets is in it.

The text comes in pieces, so that whoever changes a tolerance, a width or a limit can put other keys in their place.
"""

from __future__ import annotations

import json
from collections.abc import Collection, Iterator
from dataclasses import dataclass
from fractions import Fraction

from tolerance.scenario.amounts import LEVELS, Amount, EndOf, LevelShares, Reading
from tolerance.scenario.drafts import kind_of
from tolerance.scenario.keys import Quantity
from tolerance.scenario.properties import MEASURE, matching, properties
from tolerance.scenario.tables import FORMAT, Correlation, Layer, Line, Offer, Scenario, Table, Variation
from tolerance.units import MeasureName, unit_factor, unit_names

LIMIT, LINE, VARIATION = "limit", "line", "variation"
LINE_KEYS = ("width", "gap", "ground_gap", "limit")
VARIATION_KEYS = ("shape", "tolerance", "sigmas", "cpk", "shift", "low", "high", "file", "column", "sheet")
KEPT_KEYS = ("shape", "sigmas", "cpk", "file", "column", "sheet")  # of these: what no slider moves
LONGEST_MIL = 7  # signs; what needs more was not written in mil
FEWEST_DIGITS, MOST_DIGITS = 6, 17  # tried; a double needs no more


@dataclass(frozen=True, slots=True)
class Piece:
    """Some lines of the text. slot : what they hold, so that others can stand there; "" where they always stay.

    number : which line or which variation it is about.
    """

    text: str
    slot: str = ""
    number: int = 0


def scenario_pieces(scenario: Scenario, *, seed: int, coupons: int) -> tuple[Piece, ...]:
    """The scenario's text in pieces; joined they are a scenario that says the same, with this seed and size."""
    return tuple(_Writer(scenario).pieces(seed, coupons))


def kept_keys(scenario: Scenario, variation: Variation) -> str:
    """Lines of what stays of a variation whatever its tolerance and shift become."""
    return _Writer(scenario).keys(variation, KEPT_KEYS, _measure_of(scenario, variation))


def number_text(value: float, unit: str, measure: MeasureName) -> str | None:
    """The fewest digits with which `value` [SI] is read back from this unit as it is; None where none are enough."""
    factor = unit_factor(unit, measure)
    texts = (f"{value / float(factor):.{digits}g}" for digits in range(FEWEST_DIGITS, MOST_DIGITS + 1))
    return next((text for text in texts if float(Fraction(text) * factor) == value), None)


def quoted(text: str) -> str:
    """A TOML string."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _measure_of(scenario: Scenario, entry: Table) -> MeasureName | None:
    """What the amounts of a variation or an offer are measured in; all that one of them names is of one measure."""
    if not isinstance(entry, Variation | Offer):
        return None
    return next((MEASURE[each.property] for each in matching(entry.of, properties(scenario))), None)


def _layer_keys(layer: Layer) -> list[str]:
    """Its keys; a Dk that comes out of the mixture is not one of them."""
    mixed = layer.resin_content is not None
    return [key for key in type(layer).model_fields if not (mixed and key == "dk")]


class _Writer:
    def __init__(self, scenario: Scenario) -> None:
        self._scenario = scenario

    def pieces(self, seed: int, coupons: int) -> Iterator[Piece]:
        scenario = self._scenario
        yield Piece(f"format = {FORMAT}\ntitle = {quoted(scenario.title)}\n\n[evaluation]\n")
        evaluation = scenario.evaluation.model_copy(update={"seed": seed, "coupons": coupons})
        if evaluation.limit is not None:
            yield Piece(self.keys(evaluation, ("limit",)), LIMIT)
        yield Piece(self.keys(evaluation, [key for key in type(evaluation).model_fields if key != "limit"]))
        for layer in scenario.layers:
            yield Piece("\n[[layers]]\n" + self.keys(layer, _layer_keys(layer)))
        for number, line in enumerate(scenario.lines):
            yield from self._entry("lines", LINE, number, line, LINE_KEYS)
        for number, variation in enumerate(scenario.variations):
            yield from self._entry("variations", VARIATION, number, variation, VARIATION_KEYS)
        entries: tuple[Correlation | Offer, ...]
        for table, entries in (("correlations", scenario.correlations), ("offers", scenario.offers)):
            for entry in entries:
                measure = _measure_of(scenario, entry)
                yield Piece(f"\n[[{table}]]\n" + self.keys(entry, type(entry).model_fields, measure))
        for name, single in (("test", scenario.test), ("report", scenario.report)):
            text = "" if single is None else self.keys(single, type(single).model_fields)
            if text:
                yield Piece(f"\n[{name}]\n{text}")

    def _entry(self, table: str, slot: str, number: int, entry: Line | Variation, moved: tuple[str, ...]
               ) -> Iterator[Piece]:
        measure = _measure_of(self._scenario, entry)
        rest = [key for key in type(entry).model_fields if key not in moved]
        yield Piece(f"\n[[{table}]]\n" + self.keys(entry, rest, measure))
        yield Piece(self.keys(entry, moved, measure), slot, number)

    def keys(self, table: Table, names: Collection[str], measure: MeasureName | None = None) -> str:
        """Lines of the keys that say something else than their default; a level that is told stays told."""
        text = ""
        for key, field in type(table).model_fields.items():
            value = getattr(table, key)
            told = key == "level" and isinstance(table, Variation) and table.has_level
            if key in names and (told or value != field.default):
                text += f"{key} = {self._value(table, key, value, measure)}\n"
        return text

    def _value(self, table: Table, key: str, value: object, measure: MeasureName | None) -> str:
        kind = kind_of(type(table), key)
        match value:
            case bool():
                return "true" if value else "false"
            case str():
                return quoted(value)
            case tuple():
                return f"[{', '.join(quoted(str(text)) for text in value)}]"
            case LevelShares():
                shares = ((name, getattr(value, name)) for name in LEVELS)
                return f"{{ {', '.join(f'{name} = {share!r}' for name, share in shares if share)} }}"
            case Reading():
                return f"{{ position = {self._with_unit(value.position, 'length', 'mm')} }}"
            case Amount(relative=True):
                return self._with_unit(value.value, "share", None)
            case Amount():
                plain = measure in ("number", "share")  # an absolute share is no percentage of the nominal
                return repr(value.value) if plain else self._with_unit(value.value, measure or "length", None)
            case float() if isinstance(kind, EndOf):
                return repr(value) if measure == "number" else self._with_unit(value, measure or "length", None)
            case float() if isinstance(kind, Quantity):
                return self._with_unit(value, kind.measure, kind.unit)
            case _:
                return repr(value)

    def _with_unit(self, value: float, measure: MeasureName, unit: str | None) -> str:
        """In this unit or the measure's first; um as mil where the report has mil and few digits are enough."""
        unit = unit or unit_names(measure)[0]
        if unit == "um" and self._scenario.report.lengths == "mil":
            text = number_text(value, "mil", measure)
            if text is not None and len(text) <= LONGEST_MIL:
                return f'"{text} mil"'
        text = number_text(value, unit, measure)
        return f'"{repr(value / float(unit_factor(unit, measure))) if text is None else text} {unit}"'
