"""Potential and field of the solved charges against exact solutions and physics, and the pictures made of them."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.special import ellipj, ellipk

from tests.scenario_texts import BOARD, changed
from tests.section_examples import EVEN, ODD, microstrip, solve, stripline
from tests.test_command import command
from tests.test_resin_band import BROADSIDE
from tolerance.arrays import ComplexArray, FloatArray
from tolerance.pictures import FieldPicture
from tolerance.report.field_plot import picture_page
from tolerance.scenario import parse
from tolerance.sections.section import Section
from tolerance.solver.field import FieldValues, field_at
from tolerance.solver.outlines import outline_of
from tolerance.solver.plan import plan_for
from tolerance.solver.sources import Sources, charged
from tolerance.study.picture import SETTINGS, pictures

MASK = (25, 12, 3.5)
BANDED = replace(stripline(foot=100, crest=80, thickness=18, core=(100, 4.4), prepreg=(132, 3.7), gap=75),
                 band_dk=np.array([3.0]))
KINDS: dict[str, tuple[Section, int]] = {
    "bare": (microstrip(foot=150, crest=120, thickness=35, height=100, dk=4.2), EVEN),
    "pair over two plies": (
        microstrip(foot=120, crest=90, thickness=35, height=60, dk=4.2, gap=75, lower_ply=(80, 3.5)), ODD),
    "mask": (microstrip(foot=100, crest=80, thickness=35, height=60, dk=4.2, mask=MASK), EVEN),
    "mask pair": (microstrip(foot=100, crest=80, thickness=35, height=75, dk=4.2, gap=75, mask=MASK), ODD),
    "cover": (microstrip(foot=150, crest=120, thickness=35, height=120, dk=4.2, cover=(65, 3.5)), EVEN),
    "stripline": (stripline(foot=100, crest=80, thickness=18, core=(100, 4.4), prepreg=(132, 3.7)), EVEN),
    "stripline pair": (stripline(foot=100, crest=80, thickness=18, core=(100, 4.4), prepreg=(132, 3.7), gap=75), EVEN),
    "band of resin": (BANDED, ODD),
    "coplanar": (replace(microstrip(foot=150, crest=120, thickness=35, height=100, dk=4.2, mask=MASK),
                         ground_gap=np.array([100.0])), EVEN),
}


def solved(kind: str) -> tuple[Section, Sources, float]:
    """Section, charges, and the middle of its right-hand trace."""
    section, mode = KINDS[kind]
    middle = 0.0 if section.gap is None else 0.5 * float(section.gap[0] + section.foot_width[0])
    return section, charged(section, plan_for(section, SETTINGS), mode=mode), middle


def at(sources: Sources, *points: complex) -> FieldValues:
    return field_at(sources, across=np.real(points), height=np.imag(points))


@pytest.mark.parametrize("kind", list(KINDS))
def test_the_potential_is_that_of_the_copper(kind: str) -> None:
    """Exact: 1 on the trace and in it, 0 on planes."""
    section, sources, middle = solved(kind)
    width, thickness = float(section.foot_width[0]), float(section.thickness[0])
    on_trace = (0j, 0.25 * width, 0.3 * width + thickness * 1j, 0.4j * thickness, -0.2 * width + 0.6j * thickness)
    assert at(sources, *(middle + place for place in on_trace)).potential == pytest.approx(1.0, abs=1e-3)
    faces = sources.layers.faces
    sideways = middle + width * np.linspace(-3.0, 3.0, 13)
    assert at(sources, *(sideways + 1j * faces[0])).potential == pytest.approx(0.0, abs=1e-3)
    if sources.layers.top_plane:
        assert at(sources, *(sideways + 1j * faces[-1])).potential == pytest.approx(0.0, abs=1e-3)


@pytest.mark.parametrize("kind", list(KINDS))
def test_potential_and_normal_displacement_pass_through_flat_faces(kind: str) -> None:
    section, sources, middle = solved(kind)
    width = float(section.foot_width[0])
    reach = np.array([0.6, 0.8]) if section.ground_gap is not None else np.array([0.6, 0.8, 1.5, 3.0])
    for height in sources.layers.faces[1:-1]:
        below, above = (at(sources, *(middle + reach * width + 1j * (height + side))) for side in (-1e-4, 1e-4))
        assert below.potential == pytest.approx(above.potential, abs=1e-4)
        through = [values.dk * values.gradient[:, 1] for values in (below, above)]
        assert through[0] == pytest.approx(through[1], rel=2e-3, abs=2e-3 * float(np.abs(through[0]).max()))


@pytest.mark.parametrize("kind", ["mask", "mask pair"])
def test_normal_displacement_passes_through_the_face_of_the_mask(kind: str) -> None:
    """In the middle of the mesa's top: mask of Dk 3.5 below, air above; the field itself jumps by that factor."""
    section, sources, middle = solved(kind)
    top = float(section.thickness[0]) + MASK[1]
    inside, outside = (float(at(sources, middle + 1j * (top + side)).gradient[0, 1]) for side in (-0.01, 0.01))
    assert MASK[2] * inside == pytest.approx(outside, rel=0.01)


@pytest.mark.parametrize("kind", ["bare", "pair over two plies", "stripline pair", "band of resin"])
def test_flux_through_a_box_round_the_trace_is_its_charge(kind: str) -> None:
    """Gauss's law."""
    section, sources, middle = solved(kind)
    half, thickness, away = 0.5 * float(section.foot_width[0]), float(section.thickness[0]), 8.0
    steps = (np.arange(400) + 0.5) / 400.0
    corners = [middle - half - away - away * 1j, middle + half + away - away * 1j,
               middle + half + away + (thickness + away) * 1j, middle - half - away + (thickness + away) * 1j]
    flux = 0.0
    for start, stop in zip(corners, [*corners[1:], corners[0]], strict=True):
        values = at(sources, *(start + steps * (stop - start)))
        normal = -1j * (stop - start) / abs(stop - start)
        outward = values.gradient @ np.array([normal.real, normal.imag])
        flux -= float(np.mean(values.dk * outward)) * abs(stop - start)
    charge = sum(float(face.charges.sum()) for face in sources.faces if face.trace == 0)
    assert flux == pytest.approx(charge, rel=3e-3)


@pytest.mark.parametrize("kind", list(KINDS))
def test_the_charge_of_the_pieces_is_the_capacitance(kind: str) -> None:
    section, sources, _ = solved(kind)
    charge = sum(float(face.charges.sum()) for face in sources.faces if face.trace == 0)
    assert charge == pytest.approx(float(solve(section, settings=SETTINGS)[KINDS[kind][1]].capacitance[0]), rel=1e-9)


def elliptic_sine(real: FloatArray, imaginary: FloatArray, modulus: float) -> ComplexArray:
    """Jacobi's sn of a complex argument by its addition theorem (Abramowitz and Stegun, 16.21.2)."""
    s, c, d, _ = ellipj(real, modulus**2)
    s1, c1, d1, _ = ellipj(imaginary, 1.0 - modulus**2)
    return np.asarray((s * d1 + 1j * c * d * s1 * c1) / (c1**2 + modulus**2 * s**2 * s1**2))


def test_field_of_a_centred_strip() -> None:
    """Exact, by conformal map: u = tanh(pi z / spacing) takes half of the section to a half plane, u = k sn(v) that
    to a rectangle in which the potential falls evenly from 1 to 0 (S. B. Cohn 1954, on the same map)."""
    width, spacing = 1.2, 2.0
    section = stripline(foot=width, crest=width, thickness=0.0, core=(1.0, 3.0), prepreg=(1.0, 3.0))
    sources = charged(section, plan_for(section), mode=EVEN)
    modulus = float(np.tanh(np.pi * width / (2.0 * spacing)))
    across, up = ellipk(modulus**2), ellipk(1.0 - modulus**2)
    shares, falls = (part.ravel() for part in np.meshgrid([-0.8, -0.3, 0.1, 0.5, 0.9], [0.1, 0.35, 0.6, 0.85]))
    places = spacing / np.pi * np.arctanh(modulus * elliptic_sine(shares * across, falls * up, modulus))
    assert at(sources, *places).potential == pytest.approx(1.0 - falls, abs=1e-3)
    assert at(sources, *places.conj()).potential == pytest.approx(1.0 - falls, abs=1e-3), "the lower half"


@pytest.mark.parametrize("kind", list(KINDS))
def test_the_outline_is_closed_and_lines_start_at_equal_steps_of_charge(kind: str) -> None:
    section, sources, _ = solved(kind)
    outline = outline_of([face for face in sources.faces if face.trace == 0])
    foot, crest, thickness = (float(part[0]) for part in (section.foot_width, section.crest_width, section.thickness))
    assert abs(outline.ends[0] - outline.ends[-1]) < 1e-6 * foot
    sides = 2.0 * np.hypot(thickness, 0.5 * (foot - crest))
    assert np.abs(np.diff(outline.ends)).sum() == pytest.approx(foot + crest + sides, rel=1e-9)
    places, normals = outline.places(24)
    assert np.abs(normals) == pytest.approx(1.0)
    lengths = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(outline.ends)))])
    charges = np.concatenate([[0.0], np.cumsum(outline.charges)]) / outline.charges.sum()
    found = []
    for place in places:
        piece = int(np.argmin(np.abs(np.diff(outline.ends)) * 0.0 + np.abs(outline.ends[:-1] - place)
                              + np.abs(outline.ends[1:] - place) - np.abs(np.diff(outline.ends))))
        found.append(np.interp(lengths[piece] + abs(place - outline.ends[piece]), lengths, charges))
    assert np.diff(found) == pytest.approx(1.0 / 24.0, abs=1e-6)


def picture_of(text: str, number: int = 0) -> FieldPicture:
    return pictures(parse(text))[number]


COMMON = changed(BOARD, ('gap = "150 um"', 'gap = "150 um"\nmode = "common"'))


@pytest.mark.parametrize(("text", "number", "symmetry"), [
    (BOARD, 0, ""), (BOARD, 1, "symmetry plane, at 0 V"), (COMMON, 1, "symmetry plane, no field across it"),
    (BROADSIDE, 0, ""),
])
def test_a_picture_is_whole(text: str, number: int, symmetry: str) -> None:
    picture = picture_of(text, number)
    assert picture.symmetry_plane == symmetry
    assert np.isfinite(picture.potential).all()
    assert np.ptp(picture.potential) == pytest.approx(1.0 if picture.mode != "differential" else 2.0, abs=5e-3)
    assert all(np.isfinite(line).all() for line in picture.field_lines)
    traces = len(picture.currents)
    assert picture.lines_of_charge * traces * 0.6 < len(picture.field_lines) <= picture.lines_of_charge * traces
    for profile in picture.currents:
        lengths = np.hypot(*np.diff(profile.outline, axis=0).T)
        assert float(lengths @ profile.density) == pytest.approx(1.0), "all of 1 A"
    if number == 1:
        sign = -1.0 if "0 V" in symmetry else 1.0
        assert picture.potential == pytest.approx(sign * picture.potential[:, ::-1])


def test_the_page_says_what_is_seen_and_in_which_units() -> None:
    page = picture_page(picture_of(BOARD, 1), lengths="um")
    words = " ".join(text.get_text() for text in (*page.texts, *page.legends[0].get_texts()))
    for part in ("clock pair", "differential impedance", "equipotentials", "field lines", "1/24", "A/mm",
                 "without loss", "symmetry plane, at 0 V", "prepreg, Dk 3.90"):
        assert part in words.replace("\n", " "), part
    axes = page.axes[0]
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("sideways [um]", "height [um]")
    assert axes.get_aspect() == 1.0, "to scale"


def test_check_writes_one_file_a_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "orchard.toml"
    path.write_text(BOARD)
    assert command("check", path, "--picture", "--out", tmp_path / "seen") == 0
    assert "2 pictures" in " ".join(capsys.readouterr().out.split())
    names = sorted(each.name for each in (tmp_path / "seen").glob("*.png"))
    assert names == ["clock-pair-field.png", "radio-feed-field.png"]
    assert command("check", path, "--out", tmp_path / "seen") == 2
    assert "only with --picture" in capsys.readouterr().err
