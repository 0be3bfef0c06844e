"""A line fitted for a page: over all that its sliders reach, in forms that the page can evaluate itself."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.errors import UnfinishedError
from tolerance.paged import Form, Input, PagedLine, PagedProperty, Sum
from tolerance.process.draws import ETCH, Process, ProcessDraws, Variable, sobol_normals
from tolerance.process.laws import Law, quantile
from tolerance.process.other_laws import Amount, half_width_of, laws_of, scaled
from tolerance.process.resin import RESIN_MAKES, with_causes
from tolerance.process.values import ProcessValues
from tolerance.scenario.properties import Property
from tolerance.scenario.tables import Line
from tolerance.sections.dimensions import Dimensions, dimensions_like
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Section
from tolerance.sections.surroundings import BroadsideSurroundings, properties_that_reach
from tolerance.study.lines import PreparedLine
from tolerance.surrogate.coordinates import REACH, BoxValues, box_ends, training_shares
from tolerance.surrogate.prediction import Seen, see
from tolerance.surrogate.wide import PowerTree
from tolerance.surrogate.wide import fit_wide as fit_polynomial

WIDEST = 2.0  # of a tolerance
WIDTH_REACH = 0.15  # of the drawn width, either way
MOST_OF_GAP = 0.3  # that a wider trace may take
LEAST_OF_LOW_END = 0.1  # what a low end above nought keeps at least, of the nominal or of itself
FARTHEST = 1.2  # coordinates are held within: what lies farther out is taken as there
INNER_SIGMAS = 2.4  # half-widths of the box in deviations of the inner training sections
UNLIKE = 4  # places in the box where plies must have the same Dk to count as one
BOX_RUNS, INNER_RUNS = 40, 320  # of the field solver
FEWER_PER_INPUT = 40  # runs that a line of few inputs needs, for each and one more
OUTLYING = 30.0  # times the median error: such sections are left out of the fit
MOST_LEFT_OUT = 0.05  # of the sections
PROVED = 256  # places where the forms must come to what sections have
SAME = 1e-9
LEAST_CONSTANT = 1e-15
EVERYWHERE = 1e9  # [SI] farther than any property goes


@dataclass(frozen=True, slots=True)
class WideFit:
    """A line's prediction over all that the sliders reach, its error [ohm], and the field solver's runs."""

    process: Process
    dimensions: Dimensions
    seen: Seen
    tree: PowerTree
    coordinates: FloatArray  # of the solved sections (runs, coordinates)
    errors: FloatArray  # [ohm] at them, predicted from the others (runs,)
    error: float

    @property
    def solver_runs(self) -> int:
        return len(self.errors)

    def impedance(self, values: ProcessValues) -> FloatArray:
        """Predicted impedances [ohm] (points,)."""
        return np.exp(self.tree.evaluate(np.clip(self.seen.of(values), -FARTHEST, FARTHEST)))


def width_reach(line: Line) -> float:
    """How far the drawn width can be moved either way [m]."""
    spaces = [space for space in (line.gap, line.ground_gap) if space is not None]
    return min([WIDTH_REACH * line.width, *(MOST_OF_GAP * space for space in spaces)])


def fit_wide(prepared: PreparedLine, process: Process, *, chance: np.random.Generator) -> WideFit:
    """Solve sections all over the range of the sliders, half of them in its inner part, and fit them."""
    see_chance, box_chance, inner_chance = chance.spawn(3)
    wide = _wide_process(prepared, process)
    columns = tuple(range(len(wide.variables)))
    width = prepared.line.width
    own_chance, see_chance = see_chance.spawn(2)
    unlike = prepared.section(BoxValues(wide, columns, width, training_shares(len(columns), runs=UNLIKE,
                                                                              chance=own_chance)))
    dimensions = dimensions_like(unlike, scale_free=prepared.frequency is None)

    def logarithms(values: ProcessValues) -> FloatArray:
        return dimensions.logarithms(prepared.section(values))

    seen = see(wide, columns, logarithms, width=width, chance=see_chance)
    enough = FEWER_PER_INPUT * (len(columns) + 1)
    box_runs, inner_runs = (min(runs, enough) for runs in (BOX_RUNS, INNER_RUNS))
    box = BoxValues(wide, columns, width, training_shares(len(columns), runs=box_runs, chance=box_chance))
    germ = sobol_normals(len(columns), 1 << (inner_runs - 1).bit_length(), inner_chance)[:inner_runs]
    parts = [_solved(prepared, seen, values) for values in (box, ProcessDraws(wide, germ))]
    inner = len(parts[1][1])
    if inner == 0:
        raise UnfinishedError(f'"{prepared.line.name}": no section that the page could reach can exist')
    coordinates, impedance = (np.concatenate(both) for both in zip(*parts, strict=True))
    tree, errors = _fitted(coordinates, impedance)
    error = float(np.sqrt(np.mean(errors[-inner:] ** 2)))
    return WideFit(wide, dimensions, seen, tree, coordinates, errors, error)


def _fitted(coordinates: FloatArray, impedance: FloatArray) -> tuple[PowerTree, FloatArray]:
    """The polynomial, and its errors [ohm] at sections that it has not seen (runs,).

    Sections that hardly exist any more (a crest of nearly nought) follow no polynomial and would bend it for all
    others: they are left out, and their errors told all the same.
    """
    kept = np.ones(len(impedance), dtype=np.bool_)
    while True:
        fitted = fit_polynomial(coordinates[kept], np.log(impedance[kept]))
        errors = np.exp(fitted.tree.evaluate(np.clip(coordinates, -FARTHEST, FARTHEST))) - impedance
        errors[kept] = fitted.leave_one_out * impedance[kept]
        sizes = np.abs(errors[kept])
        outlying = np.flatnonzero(kept)[sizes > OUTLYING * np.median(sizes)]
        room = int(kept.sum()) - int((1.0 - MOST_LEFT_OUT) * len(impedance))
        if outlying.size == 0 or room <= 0:
            return fitted.tree, errors
        worst = outlying[np.argsort(-np.abs(errors[outlying]))]
        kept[worst[: min(room, 1 + outlying.size // 2)]] = False


def _solved(prepared: PreparedLine, seen: Seen, values: ProcessValues) -> tuple[FloatArray, FloatArray]:
    section = prepared.section(values)
    rows = np.flatnonzero(section.possible)
    return seen.of(values)[rows], prepared.impedance(section.rows(rows))


def _wide_process(prepared: PreparedLine, process: Process) -> Process:
    """Every property that reaches the line by itself, spread over all that its sliders make of it."""
    line = prepared.line
    names = with_causes(properties_that_reach(prepared.surroundings, line), process.resins)
    drawn = {f"{layer}.{ETCH}" for layer in (line.layer, line.partner) if layer}
    known = {member.name: (member, law) for variable in process.variables for member, law in variable.members
             if member.name in names}
    for name in sorted(drawn - set(known)):
        layer = name.rpartition(".")[0]
        still = Law("normal", 0.0, tolerance=Amount(0.0, relative=False))
        known[name] = Property(name, layer, ETCH, 0.0), still
    variables = []
    for name, (member, law) in known.items():
        low, high = _reached(law, line.width if member.property == ETCH else law.nominal)
        more = width_reach(line) if name in drawn else 0.0
        low, high = low - more, high + more
        if low < high:
            spread = Law("truncated_normal", law.nominal, low=low, high=high, sigmas=INNER_SIGMAS,
                         shift=Amount(0.5 * (low + high) - law.nominal, relative=False))
            variables.append(Variable(name, ((member, spread),)))
    return Process(tuple(variables), process.nominals, np.eye(len(variables)), process.resins)


def _reached(law: Law, reference: float) -> tuple[float, float]:
    """Where a property comes to with its tolerance doubled, or its mean moved by a half-width [SI]."""
    reach = np.inf if law.shape == "uniform" else REACH
    germ = np.array([-reach, reach])
    low, high = (float(end) for end in quantile(law, germ, reference=reference))
    half = half_width_of(law) if law.measured is not None else law.half_width(reference=reference)
    far = quantile(scaled(law, WIDEST), germ, reference=reference)
    return max(min(float(far[0]), low - half), _least(law, low)), max(float(far[1]), high + half)


def _least(law: Law, low: float) -> float:
    """The least value that is solved [SI]: lengths and Dk end above nought, and what lies below hardly differs."""
    return LEAST_OF_LOW_END * min(low, law.nominal) if law.nominal > 0.0 and low > 0.0 else -np.inf


@dataclass(frozen=True, slots=True)
class _Given:
    """Values of properties that are handed in; all others at their nominals. See ProcessValues."""

    given: Mapping[str, FloatArray]
    nominals: Mapping[str, float]
    count: int

    def value(self, name: str) -> FloatArray:
        return self.given[name] if name in self.given else np.full(self.count, self.nominals[name])

    def etch(self, layer: str, *, width: float) -> FloatArray:  # noqa: ARG002  what is given is of this line
        return self.given.get(f"{layer}.{ETCH}", np.zeros(self.count))


def paged_line(prepared: PreparedLine, fit: WideFit, properties: Sequence[PagedProperty], process: Process
               ) -> PagedLine:
    """The line in forms. properties : all that varies on the board.  process : the scenario's."""
    inputs = _inputs(prepared, fit, properties, process)
    names = tuple(each.name for each in inputs)
    forms = _forms(prepared, fit, names)
    _prove(prepared, fit, names, forms)
    seen, line = fit.seen, prepared.line
    matrix = seen.coordinates.matrix
    if fit.dimensions.scale_free:
        lengths = sum(1 for form in forms[: matrix.shape[1]] if form.logarithm and not form.least_in)
        matrix = matrix.copy()
        matrix[:, :lengths] -= np.mean(matrix[:, :lengths], axis=1, keepdims=True)
    number = {each.name: position for position, each in enumerate(properties)}
    covered = {}
    for variable in fit.process.variables:
        for member, law in variable.members:
            if member.name in number:
                low, high = box_ends(law, reference=line.width if member.property == ETCH else law.nominal)
                down_to_nought = member.nominal > 0.0 and low < LEAST_OF_LOW_END * member.nominal
                covered[number[member.name]] = -EVERYWHERE if down_to_nought else low, high
    return PagedLine(line.name, line.width, width_reach(line), inputs, forms, matrix, seen.coordinates.origin, FARTHEST,
                     fit.tree, covered, fit.coordinates,
                     fit.errors, fit.error, fit.solver_runs)


def _inputs(
    prepared: PreparedLine, fit: WideFit, properties: Sequence[PagedProperty], process: Process,
) -> tuple[Input, ...]:
    """What the section is made of and may move: in the order of the fit, then what only resin moves."""
    line = prepared.line
    number = {each.name: position for position, each in enumerate(properties)}
    direct = properties_that_reach(prepared.surroundings, line)
    resins = list(process.resins)
    moving = set(laws_of(process))
    found = [variable.name for variable in fit.process.variables if variable.name in direct]
    for layer, resin in process.resins.items():
        if moving & set(resin.causes):
            found += [name for item in RESIN_MAKES if (name := f"{layer}.{item}") in direct and name not in found]
    drawn = {f"{layer}.{ETCH}" for layer in (line.layer, line.partner) if layer}
    inputs = []
    for name in found:
        layer, _, item = name.rpartition(".")
        by_resin = item in RESIN_MAKES and layer in process.resins and bool(moving & set(process.resins[layer].causes))
        inputs.append(Input(name, 0.0 if name in drawn else process.nominals[name], number.get(name), name in drawn,
                            resins.index(layer) if by_resin else None, item if by_resin else ""))
    return tuple(inputs)


def _forms(prepared: PreparedLine, fit: WideFit, names: tuple[str, ...]) -> tuple[Form, ...]:
    """The dimensions, found by moving one input at a time; what is not a sum is known by its place."""
    nominals = fit.process.nominals
    start = np.array([nominals.get(name, 0.0) for name in names])
    step = np.maximum(0.1 * np.abs(start), 1e-6)
    points = np.vstack([start, start + np.diag(step)]) if names else start[np.newaxis]
    section = prepared.section(_Given(dict(zip(names, points.T, strict=True)), nominals, len(points)))
    lengths, dks, plain = fit.dimensions.rows(section)

    def summed(values: FloatArray) -> Sum:
        slopes = (values[1:] - values[0]) / step
        slopes[np.abs(slopes) < SAME] = 0.0
        slopes = np.round(slopes, 10)
        constant = float(values[0] - slopes @ start)
        at = np.flatnonzero(slopes)
        return Sum(0.0 if abs(constant) < LEAST_CONSTANT else constant, tuple(at.tolist()), tuple(slopes[at].tolist()))

    forms = [Form(summed(row), 0.0, least_in=False, logarithm=True) for row in lengths]
    for row, crest in _crests(prepared, names).items():
        forms[row] = Form(Sum(0.0, (), ()), 0.0, least_in=False, logarithm=True, crest=crest)
    forms += [Form(summed(row), 1.0, least_in=True, logarithm=True) for row in dks]
    if isinstance(section, LayeredSection):
        apart, straight = (summed(values) for values in _sideways(section))
        forms.append(Form(apart, None, least_in=False, logarithm=False, over=straight))
        plain = plain[1:]
    forms += [Form(summed(row), 0.0, least_in=True, logarithm=False) for row in plain]
    alone = [Form(summed(row), 0.0, least_in=False, logarithm=True) for row in _plies(section)]
    return (*forms, *(each for each in alone if each not in forms and each.sum.inputs))


def _crests(prepared: PreparedLine, names: tuple[str, ...]) -> dict[int, tuple[int, int, int]]:
    """The rows of the lengths that are crests whose etch factor varies, and what they are made of: see Form."""
    around = prepared.surroundings
    layers = (around.upper.layer, around.lower.layer) if isinstance(around, BroadsideSurroundings) \
        else (prepared.line.layer,)
    return {3 * trace + 1: (3 * trace, 3 * trace + 2, names.index(factor)) for trace, layer in enumerate(layers)
            if (factor := f"{layer}.etch_factor") in names}


def _sideways(section: LayeredSection) -> tuple[FloatArray, FloatArray]:
    """How far the traces of a broadside pair lie apart sideways, and what that is held against [m] (sections,)."""
    first, second = section.traces
    low, high = sorted((first.layer, second.layer))
    between = sum(section.thicknesses[low + 1 : high], start=np.zeros(section.count))
    return second.centre - first.centre, first.foot_width + between


def _plies(section: Section | LayeredSection) -> list[FloatArray]:
    """Thicknesses [m] that must be there one by one, also where dimensions only hold their sums."""
    if isinstance(section, LayeredSection):
        return list(section.thicknesses)
    mask = [] if section.mask is None else [section.mask.on_laminate, section.mask.over_copper]
    return [*(ply.thickness for ply in (*section.foot_side, *section.crest_side)), *mask]


def evaluate_forms(forms: Sequence[Form], inputs: Sequence[FloatArray]) -> list[FloatArray]:
    """What the forms come to for values of the inputs, each (coupons,)."""
    def total(each: Sum) -> FloatArray:
        row = np.full(len(inputs[0]) if inputs else 1, each.constant)
        for place, slope in zip(each.inputs, each.factors, strict=True):
            row = row + slope * inputs[place]
        return row

    rows: list[FloatArray] = []
    for form in forms:
        if form.crest is not None:
            foot, thickness, factor = form.crest
            rows.append(np.asarray(rows[foot] - 2.0 * total(forms[thickness].sum) / inputs[factor]))
        elif form.over is not None:
            rows.append(np.asarray(0.5 * np.log1p((total(form.sum) / total(form.over)) ** 2)))
        else:
            rows.append(total(form.sum))
    return rows


def _prove(prepared: PreparedLine, fit: WideFit, names: tuple[str, ...], forms: tuple[Form, ...]) -> None:
    """That the forms come to what the sections have, anywhere in the box. Raises RuntimeError where they do not."""
    columns = tuple(range(len(fit.process.variables)))
    chance = np.random.default_rng(0)
    box = BoxValues(fit.process, columns, prepared.line.width, chance.uniform(-1.0, 1.0, (PROVED, len(columns))))
    inputs = [box.etch(name.rpartition(".")[0], width=prepared.line.width) if name.endswith(f".{ETCH}")
              else box.value(name) for name in names]
    section = prepared.section(box)
    truth = [row for rows in fit.dimensions.rows(section) for row in rows]
    possible = section.possible
    for row, known in zip(evaluate_forms(forms, inputs), truth, strict=False):
        if not np.allclose(row[possible], known[possible], rtol=SAME, atol=1e-15):
            raise RuntimeError(f"{prepared.line.name}: a dimension of the section is not the form that the page has")
