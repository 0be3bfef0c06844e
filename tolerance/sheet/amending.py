"""From answers to a scenario that extends the one asked about: the keys that change, and their text."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass

from tolerance.errors import on_one_line
from tolerance.scenario.amounts import Amount
from tolerance.scenario.properties import members
from tolerance.scenario.tables import Scenario, Variation
from tolerance.sheet.cells import Typed
from tolerance.sheet.layout import ABSOLUTE, CPK, LIMITS, PERCENT, THREE_SIGMA, name_of
from tolerance.sheet.reading import Answer, Note
from tolerance.units import read_quantity

MOST_SIGMAS = 20.0
MEAN_ITSELF = 0.5  # of the nominal: a "mean minus nominal" beyond it is taken for the mean itself
BOUNDED = ("uniform", "triangular", "truncated_normal")


@dataclass(frozen=True, slots=True)
class Change:
    """One key that a cell changes; `value` as the scenario writes it."""

    address: str
    of: tuple[str, ...]
    table: str  # "variations" or "offers"
    key: str
    value: str


@dataclass(frozen=True, slots=True)
class Amendment:
    """All that the answers change, what of them could not be used, and remarks by row."""

    changes: tuple[Change, ...]
    notes: tuple[Note, ...]
    remarks: tuple[tuple[tuple[str, ...], str], ...]

    def without(self, of: tuple[str, ...], table: str) -> Amendment:
        """The same without what it changes of one entry."""
        kept = tuple(change for change in self.changes if (change.of, change.table) != (of, table))
        return Amendment(kept, self.notes, self.remarks)


def amend(scenario: Scenario, answers: Sequence[Answer]) -> Amendment:
    """What the answers change in the variations and offers of the scenario."""
    changes: list[Change] = []
    notes: list[Note] = []
    for answer in answers:
        row = _Row(scenario, answer, notes)
        changes += row.variation_changes()
        changes += row.offer_changes()
    remarks = tuple((answer.variation.of, answer.remarks) for answer in answers if answer.remarks)
    return Amendment(tuple(changes), tuple(notes), remarks)


def amendment_text(amendment: Amendment, *, extends: str, title: str, reply: str) -> str:
    """The scenario that extends the first, as TOML."""
    lines = [f"# What a fabricator answered in {on_one_line(reply)}, laid over the scenario that was asked about.", "",
             "format  = 1", f"extends = {_text(extends)}", f"title   = {_text(title)}"]
    remarks = dict(amendment.remarks)
    for table in ("variations", "offers"):
        for of in dict.fromkeys(change.of for change in amendment.changes if change.table == table):
            lines += ["", *([f"# remark: {on_one_line(remarks.pop(of))}"] if of in remarks else []), f"[[{table}]]",
                      f"of = {_of(of)}"]
            lines += [f"{change.key} = {change.value}" for change in amendment.changes
                      if (change.of, change.table) == (of, table)]
    lines += ["", *(f"# remark on {name_of(of)}: {on_one_line(said)}" for of, said in remarks.items())]
    return "\n".join(lines).rstrip() + "\n"


@dataclass(slots=True)
class _Row:
    """One answer while its changes are found."""

    scenario: Scenario
    answer: Answer
    notes: list[Note]

    def variation_changes(self) -> list[Change]:
        answer, given = self.answer, self.answer.variation
        keys: dict[str, tuple[str, str]] = {}  # key -> (value, address)
        if answer.tolerance is not None:
            keys["tolerance"] = (answer.tolerance.text, answer.places["tolerance"])
            if given.shape == "measured":
                keys["shape"] = ('"normal"', answer.places["tolerance"])
        self._mean(keys)
        self._basis(keys)
        self._deviation(keys)
        return [Change(address, given.of, "variations", key, value) for key, (value, address) in keys.items()]

    def _mean(self, keys: dict[str, tuple[str, str]]) -> None:
        mean = self.answer.mean
        if mean is None:
            return
        nominals = [each.nominal for each in members(self.scenario, self.answer.variation)]
        smallest = min(abs(nominal) for nominal in nominals)
        if smallest > 0.0 and _amount(mean).of(smallest) > MEAN_ITSELF * smallest:
            self._note("mean", "looks like the mean itself; wanted is the mean minus the nominal, such as -2")
        else:
            keys["shift"] = (mean.text, self.answer.places["mean"])

    def _basis(self, keys: dict[str, tuple[str, str]]) -> None:
        """How the half-width, answered or assumed, is meant."""
        answer, given = self.answer, self.answer.variation
        basis = answer.basis or (CPK if answer.cpk is not None else None)
        if basis is None:
            return
        place = answer.places.get("basis") or answer.places["cpk"]
        if answer.tolerance is None and given.tolerance is None:
            key = "basis" if "basis" in answer.places else "cpk"
            self._note(key, "says how a tolerance is meant, and there is none in this row or in the scenario")
            return
        if basis == LIMITS and given.shape not in BOUNDED:
            keys["shape"] = ('"uniform"', place)
        if basis == THREE_SIGMA:
            keys["sigmas"] = ("3", place)
            if given.shape not in ("normal", "truncated_normal", "lognormal"):
                keys["shape"] = ('"normal"', place)
        if basis == CPK and answer.cpk is None:
            self._note("basis", "says Cpk, and the row has no value of it")
        elif basis == CPK:
            keys["cpk"] = (f"{answer.cpk:.15g}", answer.places.get("cpk", place))
            if given.shape != "normal":
                keys["shape"] = ('"normal"', place)
        if basis != CPK and answer.cpk is not None and "cpk" in answer.places:
            self._note("cpk", f"a Cpk is not used where the tolerance is {basis}")

    def _deviation(self, keys: dict[str, tuple[str, str]]) -> None:
        """A measured deviation stands over every other statement of spread: sigmas = half-width / deviation."""
        deviation, given = self.answer.deviation, self.answer.variation
        if deviation is None:
            return
        half = given.tolerance if self.answer.tolerance is None else _amount(self.answer.tolerance)
        if half is None:
            self._note("deviation", "needs a tolerance in the same row, because the scenario gives ends instead of one")
            return
        sigmas = self._ratio(half, _amount(deviation))
        if sigmas is None:
            self._note("deviation", "is in percent where the tolerance is not, or the other way round, and the row has "
                       "several nominals: give both in one unit")
        elif not 0.0 < sigmas <= MOST_SIGMAS:
            self._note("deviation", f"is {1.0 / sigmas:.2g} of the tolerance; at least {1.0 / MOST_SIGMAS:g} is taken")
        else:
            place = self.answer.places["deviation"]
            if keys.pop("cpk", None) is not None:
                self._note("deviation", "is taken, and the Cpk of the row is left aside")
            keys.pop("shape", None)
            keys["sigmas"] = (f"{sigmas:.15g}", place)
            if given.shape != "normal":
                keys["shape"] = ('"normal"', place)

    def _ratio(self, half: Amount, deviation: Amount) -> float | None:
        if half.relative == deviation.relative:
            return half.value / deviation.value
        nominals = {each.nominal for each in members(self.scenario, self.answer.variation)}
        if len(nominals) != 1 or 0.0 in nominals:
            return None
        nominal = nominals.pop()
        return half.of(nominal) / deviation.of(nominal)

    def offer_changes(self) -> list[Change]:
        answer, of = self.answer, self.answer.variation.of
        if answer.tighter is None and answer.price is None:
            return []
        if answer.tighter is None or answer.price is None:
            given, missing = ("price", "tighter tolerance") if answer.tighter is None else ("tighter", "price")
            if given in answer.places:
                self._note(given, f"is left aside: the row has no {missing} that could be read")
            return []
        half = answer.variation.tolerance if answer.tolerance is None else _amount(answer.tolerance)
        tighter = _amount(answer.tighter)
        if half is not None and half.relative == tighter.relative and tighter.value >= half.value:
            self._note("tighter", "is left aside: it is not tighter than the tolerance of the row")
            return []
        return [Change(answer.places["tighter"], of, "offers", "tolerance", answer.tighter.text),
                Change(answer.places["price"], of, "offers", "cost", f"{answer.price:.15g}")]

    def _note(self, key: str, said: str) -> None:
        self.notes.append(Note(self.answer.places.get(key, ""), said))


def old_value(variation: Variation, key: str) -> str:
    """What the scenario said under a key before, in words; "" where it said nothing."""
    value = getattr(variation, key, None)
    if isinstance(value, Amount):
        return f"{100.0 * value.value:.6g} %" if value.relative else f"{value.value:.6g}"
    return "" if value is None else f"{value:.6g}" if isinstance(value, float) else str(value)


def _amount(typed: Typed) -> Amount:
    if typed.unit == PERCENT:
        return Amount(typed.number / 100.0, relative=True)
    if typed.unit == ABSOLUTE:
        return Amount(typed.number, relative=False)
    return Amount(read_quantity(f"{typed.number:.15g} {typed.unit}", "copper length"), relative=False)


def _of(of: tuple[str, ...]) -> str:
    return _text(of[0]) if len(of) == 1 else "[" + ", ".join(_text(one) for one in of) + "]"


def _text(text: str) -> str:
    return json.dumps(text, ensure_ascii=False)
