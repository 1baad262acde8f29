"""The discretised model itself: rounding, modes, convergence, chunks, the cache."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
import scipy.integrate
import scipy.sparse
from helpers_numeric import AREA, CAPACITY, LENGTH, MOBILITY, linear, round_medium
from hypothesis import given, settings
from hypothesis import strategies as st

from flatplan.numeric import Mesh, Steps, discrete_model, model, run, simulate
from flatplan.numeric.elements import GRADING, elements, reference_element, sample_points, shapes
from flatplan.numeric.first_mesh import FIRST_DEGREE, first_mesh
from flatplan.numeric.history import panels_of
from flatplan.numeric.march import chained, march
from flatplan.site import Face, Fluid, Medium, RockProfile, Segment, Well, slab

ALPHA = MOBILITY / CAPACITY
T_D = LENGTH**2 / ALPHA


def slab_series(tau, xi, terms=20000):
    """Carslaw and Jaeger 1959, sec. 3.8 eq. 3 [CarslawJaeger1959]."""
    n = np.arange(1, terms)[:, None]
    series = np.sum((-1.0) ** n / n**2 * np.exp(-((n * math.pi) ** 2) * tau) * np.cos(n * math.pi * xi), axis=0)
    return tau + (3.0 * xi**2 - 1.0) / 6.0 - 2.0 / math.pi**2 * series


def step_answer(mesh, taus):
    """Sandface and target of a slab under a constant rate on one mesh, in the units of `slab_series`."""
    found = discrete_model(linear(), mesh)
    panels = Steps(edges=[0.0, 1e3 * T_D], rates=[1.0]).panels.between(0.0, 1e2 * T_D)
    ((_, states),) = found.states(march(panels, taus * T_D), found.rest())
    scale = MOBILITY * AREA / LENGTH
    return [found.readouts[c].of(states, 0.0 * states, np.ones(len(taus))) * scale for c in ("sandface_pressure", "target_pressure")]


def test_a_graded_mesh_keeps_every_digit():
    """Elements from 1 to 3^-9 of the path side by side: late answers are right to a few roundings."""
    taus = np.array([0.05, 0.3, 2.0, 50.0])
    sandface, target = step_answer(Mesh(20, 9), taus)
    np.testing.assert_allclose(sandface, slab_series(taus, 1.0), rtol=2e-15)
    np.testing.assert_allclose(target, slab_series(taus, 0.0), atol=3e-15 * taus.max(), rtol=1e-12)


def test_the_error_falls_exponentially_with_the_degree():
    """Far face of a slab 0.02 t_D after a jump; at least a factor 30 for every two degrees, above the rounding floor."""
    taus = np.array([0.02, 0.1])
    errors = [np.max(np.abs(step_answer(Mesh(degree, 3), taus)[1] - slab_series(taus, 0.0))) for degree in (4, 6, 8, 10, 12)]
    assert errors[-1] < 1e-9
    assert all(after < before / 10.0 for before, after in pairwise(errors)), errors


@settings(max_examples=20)
@given(st.lists(st.floats(1e-6, 1.0), min_size=1, max_size=60), st.integers(1, 7), st.floats(0.0, 5.0))
def test_steps_are_chained_like_one_by_one(widths, modes, slow):
    decay = slow * np.arange(modes) ** 4.0
    kept = np.exp(-np.outer(widths, decay))
    gains = np.cos(np.arange(kept.size)).reshape(kept.shape)
    state = start = np.linspace(-1.0, 1.0, modes)
    expected = np.array([state := k * state + g for k, g in zip(kept, gains, strict=True)])
    np.testing.assert_allclose(chained(gains, kept, start), expected, rtol=0.0, atol=1e-13)


@pytest.mark.parametrize("spread", [np.linspace(0.0, 3.0, 700), np.geomspace(1e-12, 3.0, 300), np.array([1e-17, 2e-17, 4e-17, 1.0, 3.0])])
def test_times_on_the_way_do_not_matter(spread):
    """Amplitudes at each time are those that a run to it alone gives, whether steps are alike or each of its own length."""
    medium = linear(face=Face(leak=5e-10))
    found = discrete_model(medium, Mesh(8, 2))
    panels = panels_of(lambda t: 1e-3 * np.sin(3.0 * t / T_D) + 1e-3, 0.0, 3.0 * T_D)
    ((_, states),) = found.states(march(panels, spread * T_D), found.rest())
    for i in (0, 1, len(spread) // 3, len(spread) // 2, len(spread) - 1):
        ((_, alone),) = found.states(march(panels, spread[i : i + 1] * T_D), found.rest())
        np.testing.assert_allclose(states[i], alone[0], rtol=1e-11, atol=1e-15 * np.abs(states).max())


def test_steps_are_of_few_kinds_on_an_even_grid():
    panels = Steps(edges=[0.0, 0.3 * T_D, 1.0 * T_D], rates=[1.0, 2.0]).panels
    way = march(panels, np.linspace(0.0, T_D, 1001))
    widths, kind = way.kinds(slice(0, 1001))
    assert len(widths) <= 6
    np.testing.assert_allclose(widths[kind], way.widths, rtol=0.0, atol=1e-14 * T_D)


@pytest.mark.parametrize(
    "medium",
    [
        linear(),
        linear(face=Face(leak=5e-10, storage=1e-5), well=Well(storage=1e-6), resistance=1e8),
        linear(((60.0, 1.0, 1.0, 2e-15), (80.0, 0.2, 3.0, 0.0))),
        linear(face=Face(held=True), well=Well(storage=1e-6)),
        round_medium("radial", (100.0, 3.0, 0.1), ((1.0, 1.0, 1e-15), (0.1, 1.0, 0.0))),
    ],
)
def test_the_most_that_the_target_answers(medium):
    """A lasting rate: 1/c_0. A volume at once: never more than the kernel reaches, and not above the bound by c_0, c_1, c_2."""
    found = discrete_model(medium, Mesh(16, 3))
    to_rate, to_volume = found.most_answers()
    c0, c1, c2 = medium.coefficients("injection_rate", 2)
    assert to_rate == (pytest.approx(1.0 / c0, rel=1e-9) if c0 else math.inf)
    assert to_volume <= c1 / (c1**2 - 2.0 * c0 * c2) * (1.0 + 1e-9)
    kernel = found.free("target_pressure", found.drive[None, :], np.geomspace(0.05, 20.0, 400) * medium.travel_time)[0]
    assert 0.3 * to_volume < kernel.max() <= to_volume * (1.0 + 1e-9)
    # the mesh from which the fineness of the rate is taken says the same
    assert discrete_model(medium, Mesh(FIRST_DEGREE, 1)).most_answers()[1] == pytest.approx(to_volume, rel=1e-3)


@pytest.mark.parametrize("degree", [2, 7, 24])
def test_shape_functions(degree):
    """Constant 1, ramp from 0 to 1, bubbles that vanish at both ends; slopes match difference quotients; 1 has no slope."""
    reference = reference_element(degree)
    ends = shapes(np.array([-1.0, 1.0]), degree)
    np.testing.assert_allclose(ends, np.column_stack([[1, 1], [0, 1], *([0, 0],) * (degree - 1)]), atol=1e-14)
    h = 1e-6
    quotient = (shapes(reference.points + h, degree) - shapes(reference.points - h, degree)) / (2.0 * h)
    np.testing.assert_allclose(reference.slopes, quotient, atol=1e-6 * degree**2)
    energy = (reference.slopes.T * reference.weights) @ reference.slopes
    np.testing.assert_allclose(energy, np.diag([0.0, 0.5, *np.ones(degree - 1)]), atol=1e-13)
    assert np.linalg.cond(shapes(sample_points(degree), degree)) < 1e3 * degree


MEDIA = {
    "slab": linear(),
    "contrasts": linear(((20.0, 1e-4, 1.0, 0.0), (90.0, 1e4, 1.0, 0.0), (30.0, 1.0, 100.0, 0.0))),
    "strong leakage": linear(((100.0, 1.0, 1.0, 1e-12), (40.0, 1.0, 1.0, 0.0))),
    "radial inside": round_medium("radial", (1000.0, 0.1)),
    "radial outside": round_medium("radial", (0.1, 3.0, 1000.0), ((1.0, 1.0, 0.0), (0.1, 1.0, 0.0))),
    "spherical outside": round_medium("spherical", (0.1, 1000.0)),
    "thin ring": round_medium("radial", (0.1001, 0.1)),
}


@pytest.mark.parametrize("name", MEDIA)
def test_elements_fill_the_path_and_keep_the_grading(name):
    medium = MEDIA[name]
    found = elements(medium, Mesh(12, 6))
    assert found[0].far == medium.length
    assert found[-1].near == 0.0
    assert all(a.near == b.far and a.near < a.far for a, b in pairwise(found))
    joins = {medium.length - s.end for s in medium.segments}
    assert joins <= {e.near for e in found}
    z = np.cumsum([0.0, *(((e.far - e.near) / math.sqrt(e.segment.diffusivity)) for e in reversed(found))])
    smallest = GRADING**-6 * z[-1]
    assert np.all(z[1:] <= np.maximum(GRADING * z[:-1], smallest) * (1 + 1e-9))
    for element in found:
        xi = np.linspace(-1.0, 1.0, 5)
        np.testing.assert_allclose(element.reference(element.distance(xi)), xi, atol=1e-9)


@pytest.mark.parametrize("name", MEDIA)
def test_the_matrices_are_those_of_the_medium(name):
    """Mass of the constant field = storage of the medium (in closed form); flow energy of it = leakage; both symmetric."""
    medium = MEDIA[name]
    assembly = discrete_model(medium, Mesh(12, 3)).assembly
    storage = sum(s.capacity * s.volume for s in medium.segments)
    bed = sum(s.leakage * s.volume for s in medium.segments)
    assert assembly.mass[0, 0] == pytest.approx(storage, rel=1e-12)
    assert assembly.stiffness[0, 0] == pytest.approx(bed, rel=1e-12, abs=0.0)
    for matrix in (assembly.mass, assembly.stiffness + assembly.mass / medium.travel_time):
        size = np.sqrt(np.diag(matrix))
        np.testing.assert_allclose(matrix / np.outer(size, size), (matrix / np.outer(size, size)).T, rtol=0.0, atol=1e-14)


@pytest.mark.parametrize("name", MEDIA)
def test_the_modes_solve_the_eigenproblem(name):
    """K w = λ M w in the norm of K + σM, and orthonormal in it."""
    found = discrete_model(MEDIA[name], Mesh(12, 4))
    mass, stiffness = found.assembly.mass, found.assembly.stiffness
    shift = 1.0 / found.medium.travel_time
    shifted = stiffness + shift * mass
    w = found.vectors
    gram = w.T @ shifted @ w
    np.testing.assert_allclose(gram, np.eye(found.modes), atol=1e-10)
    np.testing.assert_allclose(w.T @ mass @ w, np.diag(1.0 / (found.decay + shift)), atol=1e-12 / shift)
    assert np.all(found.decay >= 0.0)
    assert (found.decay[0] == 0.0) == (not found.medium.leaks)


@pytest.mark.parametrize("leak", [1e-12, 1e-6])
def test_slow_modes_are_right_relative_to_themselves(leak):
    """A face that hardly leaks: λ_0 = κ/(storage) (1 - κL/(3T) + …), 12 decades below the next mode."""
    kappa = leak * MOBILITY * AREA / LENGTH
    found = discrete_model(linear(face=Face(leak=kappa)), Mesh(16, 6))
    assert found.decay[0] == pytest.approx(kappa / (CAPACITY * AREA * LENGTH) * (1.0 - leak / 3.0), rel=2e-12)


def test_work_in_parts_is_the_same_work(monkeypatch):
    """Many panels and many times, worked through in parts of a few rows."""
    medium = round_medium("radial", (50.0, 0.1), well=Well(storage=1e-7), resistance=1e8)
    rng = np.random.default_rng(4)
    steps = Steps(edges=np.arange(61) * 3600.0, rates=1e-3 * rng.standard_normal(60))
    times = np.linspace(0.0, 70 * 3600.0, 200)
    whole = run(medium, steps, times)
    monkeypatch.setattr(model, "_CHUNK", 2000)
    parts = run(medium, steps, times)
    assert next(iter(parts.model._parts(200, 0))).stop < 20
    for name in ("target_pressure", "bottomhole_pressure", "sandface_rate"):
        np.testing.assert_allclose(getattr(parts.channels, name), getattr(whole.channels, name), rtol=1e-12, atol=0.0)
    np.testing.assert_allclose(parts.leaked_volume, whole.leaked_volume, atol=1e-12)


def test_the_first_mesh_follows_what_happens():
    """The element at the sandface is about as thick as pressure spreads in the shortest time: a gap, or that in which a rate varies."""
    medium = linear()
    times = np.linspace(0.0, 1.0, 11) * T_D

    def layers(history, at=times):
        return first_mesh(medium, panels_of(history, 0.0, at[-1]), at, 1e-8).layers

    for speed in (1.0, 1e2, 1e4):
        thickness = GRADING ** -float(layers(lambda t, speed=speed: np.sin(speed * t / T_D)))
        assert thickness <= 1.01 / math.sqrt(speed)
        assert thickness >= 0.05 / math.sqrt(speed)
    for gap in (1e-2, 1e-4, 1e-6):
        thickness = GRADING ** -float(layers(Steps(edges=[0.0, 2.0 * T_D], rates=[1.0]), np.append(gap * T_D, times[1:])))
        assert thickness <= math.sqrt(gap)
        assert thickness >= 0.3 * math.sqrt(gap)


def test_equal_media_share_their_modes():
    assert discrete_model(linear(), Mesh(12, 2)) is discrete_model(linear(), Mesh(12, 2))
    assert discrete_model(linear(), Mesh(12, 2)) is not discrete_model(linear(resistance=1.0), Mesh(12, 2))


def test_negative_resistance_with_storage_is_refused():
    sentence = (
        r"^well: got a resistance of -1e\+06 Pa s/m³ \(a negative skin\) together with wellbore storage, which has no stable solution;"
        r" it takes a resistance of zero or more, or a wellbore storage of 0\.$"
    )
    with pytest.raises(ValueError, match=sentence):
        simulate(linear(well=Well(storage=1e-6), resistance=-1e6), Steps(edges=[0, 1], rates=[1]), [1.0])


# --- a second model: finite volumes and a general integrator ----------------------------------------


def finite_volumes(medium, rate, times, cells):
    """Target and sandface pressure by cell-centred finite volumes, half a cell out to each end, and scipy's BDF.

    Plainly written: storage and leakage at cell centres, harmonic conductance between them; second order.
    """
    edges = np.concatenate([np.linspace(s.start, s.end, max(2, round(cells * s.length / medium.length)) + 1)[:-1] for s in medium.segments])
    edges = np.append(edges, medium.length)
    centre = (edges[1:] + edges[:-1]) / 2.0
    width = np.diff(edges)
    segments = [medium.segment_at(x) for x in centre]
    storage = width * [float(s.storage(x)) for s, x in zip(segments, centre, strict=True)]
    out = width * [float(s.leak(x)) for s, x in zip(segments, centre, strict=True)]
    half = width / 2.0 / [float(s.conductance(x)) for s, x in zip(segments, centre, strict=True)]
    link = 1.0 / (half[:-1] + half[1:])
    if medium.face.storage:  # what lies behind the face is a cell of its own
        storage, out, link = (np.append(a, b) for a, b in ((medium.face.storage, storage), (medium.face.leak, out), (1.0 / half[0], link)))
    flow = scipy.sparse.diags_array([link, -out - np.append(link, 0.0) - np.append(0.0, link), link], offsets=[-1, 0, 1])
    jacobian = (scipy.sparse.diags_array(1.0 / storage) @ flow).tocsc()
    push = np.zeros(len(storage))
    push[-1] = 1.0 / storage[-1]
    solved = scipy.integrate.solve_ivp(
        lambda t, p: jacobian @ p + push * rate(np.array([t]))[0],
        (0.0, times[-1]), np.zeros(len(storage)), method="BDF", t_eval=times, jac=jacobian, rtol=1e-9, atol=1e-6,
    )  # fmt: skip
    return solved.y[0], solved.y[-1] + half[-1] * rate(times)


@pytest.mark.parametrize(
    "medium",
    [linear(((60.0, 1.0, 1.0, 2e-15), (80.0, 0.2, 2.0, 0.0)), face=Face(leak=5e-10, storage=1e-5)), round_medium("radial", (30.0, 10.0))],
    ids=["two zones, leaky", "radial"],
)
def test_a_general_integrator_agrees(medium):
    """A smooth rate: finite volumes come nearer by 4 for every halving of the cell, and their extrapolation meets the model."""
    t_d = medium.travel_time

    def rate(t):
        return 1e-3 * np.sin(3.0 * t / t_d) ** 2

    times = np.linspace(0.0, 2.5 * t_d, 26)
    out = simulate(medium, rate, times)
    coarse, fine = (np.array(finite_volumes(medium, rate, times, cells)) for cells in (70, 140))
    exact = np.array([out.target_pressure, out.sandface_pressure])
    scale = np.abs(exact).max()
    before, after = np.abs(coarse - exact).max(), np.abs(fine - exact).max()
    assert after < 1e-3 * scale
    assert 3.6 < before / after < 4.4
    assert np.abs((4.0 * fine - coarse) / 3.0 - exact).max() < 2e-6 * scale


# --- properties that vary ---------------------------------------------------------------------------


def test_a_profile_meets_many_uniform_slices():
    """Permeability and porosity that vary along the path, against a chain of short uniform zones of the same medium: second order."""
    profile = RockProfile(4e-14 * np.exp([0.0, 1.5, -0.5, 0.3]), [0.1, 0.2, 0.15, 0.12], 5e-10, at=[0.0, 50.0, 90.0, 140.0])
    medium = slab(length=LENGTH, area=AREA, rock=profile, fluid=Fluid(5e-4, 4.5e-10))
    steps = Steps(edges=np.array([0.0, 0.3, 0.8]) * medium.travel_time, rates=[1e-3, -5e-4])
    times = np.linspace(0.05, 2.0, 20) * medium.travel_time
    exact = simulate(medium, steps, times)

    def sliced(count):
        pieces = []
        for s in medium.segments:
            ends = np.linspace(s.start, s.end, count + 1)
            for a, b in zip(ends[:-1].tolist(), ends[1:].tolist(), strict=True):
                middle = 0.5 * (a + b)
                pieces.append(Segment(a, b, float(s.mobility_at(middle)), float(s.capacity_at(middle)), AREA))
        out = simulate(Medium("linear", tuple(pieces)), steps, times)
        return max(np.abs(getattr(out, c) - getattr(exact, c)).max() for c in ("target_pressure", "sandface_pressure"))

    errors = [sliced(4), sliced(8), sliced(16)]
    assert errors[2] < 2e-3 * exact.sandface_pressure.max()
    assert 3.0 < errors[0] / errors[1] < 5.0
    assert 3.5 < errors[1] / errors[2] < 4.5


@settings(max_examples=15)
@given(st.floats(0.2, 3.0), st.floats(-2.0, 2.0))
def test_a_steep_profile_keeps_its_storage(span, steepness):
    """One segment over which a property changes by up to e^9: its storage comes out right, whatever the mesh."""
    segment = Segment(0.0, 50.0, 1e-10, 1e-10, 100.0, mobility_curve=(3.0 * span, 0.0, 0.0), capacity_curve=(3.0 * steepness, 0.0, 0.0))
    found = discrete_model(Medium("linear", (segment,)), Mesh(12, 2))
    exact = 1e-10 * 100.0 * 50.0 * (np.expm1(3.0 * steepness) / (3.0 * steepness) if steepness else 1.0)
    assert found.assembly.mass[0, 0] == pytest.approx(exact, rel=1e-9)
    for element in found.assembly.elements:
        ends = found.medium.length - np.array([element.far, element.near])
        assert abs(np.diff(np.log(segment.mobility_at(ends)))[0]) <= 2.0
        assert abs(np.diff(np.log(segment.capacity_at(ends)))[0]) <= 2.0
