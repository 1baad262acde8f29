"""Random cases: a medium of any kind, one to three moves, a tolerance. A `Case` prints as the call that makes it again."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from random import Random

import media
from hypothesis import strategies as st

import flatplan as fp
from flatplan.flat.target import LEAST_ORDER, MOST_EASING

LEAST_EASING = 0.02
LEAST_X, MOST_X = 0.01, 16.0
# A move is drawn such that its terms, which change by about (X_c/2) k^(s-2) (X_c: travel time over eased corner), no longer grow at
# k = 45: nearly all plans then stay below `check.MOST_TERMS`. Low orders with a large X_c need more digits than a double's, which costs
# seconds a plan: one case in twenty may have them (`_HARD`), besides those of large X. A small share is drawn without any rule (`_FREE`),
# for the refusals and the hardest plans.
_GROWING_TERMS = 45.0
_FREE, _HARD = 0.005, 0.05
_LARGEST_CORNER_RATIO = {"usual": 6.0, "hard": 16.0, "free": math.inf, "varying": 1.0}  # varying rock: few orders in the reference
_THRESHOLD_SHARE = 0.8  # X_c of order 2, of its threshold 2


@dataclass(frozen=True)
class Layer:
    """One zone: its extent (a length [m], or a ratio of radii) and properties; leakage as Λ L²/T of the zone."""

    extent: float
    permeability: float
    porosity: float
    compressibility: float
    leakage: float = 0.0


@dataclass(frozen=True)
class Ground:
    """A medium: layers from the target face; face and well in units of the medium's own conductance and storage."""

    flow: str = "linear"
    layers: tuple[Layer, ...] = ()
    outward: bool = False
    known: tuple[str, ...] = ()  # a geometry and its leakage, by their names in `media` or in `VARYING`
    held: bool = False
    leak: float = 0.0
    face_storage: float = 0.0
    skin: float = 0.0
    resistance: float = 0.0
    well_storage: float = 0.0


@dataclass(frozen=True)
class Step:
    """A move: X, order, easing, change, when it begins (as a share of the one before; None: when that is over), hold after it."""

    x: float
    order: float
    easing: float
    change: float
    overlap: float | None = None
    hold: float = 0.0


@dataclass(frozen=True)
class Case:
    """What `check.check` takes."""

    ground: Ground
    steps: tuple[Step, ...]
    tolerance: float
    seed: int


# --- building --------------------------------------------------------------------------------

_FLUID = fp.Fluid(viscosity=5e-4, compressibility=4.5e-10)
_HEIGHT, _AREA, _RADIUS = 20.0, 4000.0, 60.0


def _profile(*permeability: float):
    porosity = [0.12 + 0.05 * math.cos(1.3 * i) for i in range(len(permeability))]
    places = [45.0 * i for i in range(len(permeability))]
    return fp.RockProfile(permeability=list(permeability), porosity=porosity, compressibility=5e-10, at=places)


# Few, as their coefficients in balls take seconds; face and well are random on top.
VARYING = {
    "slab": lambda **rest: fp.slab(length=90.0, area=_AREA, height=_HEIGHT, rock=_profile(4e-14, 2e-13, 9e-14), fluid=_FLUID, **rest),
    "leaking slab": lambda **rest: fp.slab(
        length=45.0, area=_AREA, height=_HEIGHT, rock=_profile(3e-14, 1e-13), fluid=_FLUID, leakage=2e-14, **rest
    ),
    "radial": lambda **rest: fp.radial(
        target_radius=51.0, well_radius=6.0, height=_HEIGHT, rock=_profile(2e-13, 3e-14), fluid=_FLUID, **rest
    ),
}


def build_medium(ground: Ground):
    """The medium of a `Ground`."""
    bare = _with(ground, fp.Face(), fp.Well())
    first, last = bare.segments[0], bare.segments[-1]
    conductance = min(float(first.conductance(0.0)), float(last.conductance(bare.length))) / bare.length
    stored = sum(s.volume * s.least_capacity for s in bare.segments)
    face = fp.Face(held=True) if ground.held else fp.Face(leak=ground.leak * conductance, storage=ground.face_storage * stored)
    well = fp.Well(skin=ground.skin, resistance=ground.resistance / conductance, storage=ground.well_storage * stored)
    return _with(ground, face, well)


def _with(ground: Ground, face, well):
    if ground.known:
        geometry, leakage = ground.known
        if geometry in VARYING and leakage == "varying":
            return VARYING[geometry](face=face, well=well)
        return media.GEOMETRIES[geometry](media.LEAKAGES[leakage], face=face, well=well)
    radius, lengths = _RADIUS, []
    for layer in ground.layers:
        far = radius if ground.flow == "linear" else radius * (layer.extent if ground.outward else 1.0 / layer.extent)
        lengths.append(layer.extent if ground.flow == "linear" else abs(far - radius))
        radius = far
    rocks = [fp.Rock(permeability=a.permeability, porosity=a.porosity, compressibility=a.compressibility) for a in ground.layers]
    leaks = [a.leakage * a.permeability / _FLUID.viscosity / d**2 for a, d in zip(ground.layers, lengths, strict=True)]
    if len(rocks) == 1:
        rest = {"rock": rocks[0], "fluid": _FLUID, "leakage": leaks[0], "face": face, "well": well}
        if ground.flow == "linear":
            return fp.slab(length=lengths[0], area=_AREA, height=_HEIGHT, **rest)
        if ground.flow == "radial":
            return fp.radial(target_radius=_RADIUS, well_radius=radius, height=_HEIGHT, **rest)
        return fp.spherical(target_radius=_RADIUS, well_radius=radius, share=0.5, **rest)
    zones, radius = [], _RADIUS
    for i in range(len(rocks)):
        rest = {"rock": rocks[i], "fluid": _FLUID, "leakage": leaks[i]}
        if ground.flow == "linear":
            zones.append(fp.Zone(length=lengths[i], area=_AREA * (1.0 + 0.3 * i), **rest))
        else:
            radius = radius + lengths[i] if ground.outward else radius - lengths[i]
            zones.append(fp.Zone(to_radius=radius, **rest))
    if ground.flow == "linear":
        return fp.zoned(zones, height=_HEIGHT, face=face, well=well)
    place = {"height": _HEIGHT} if ground.flow == "radial" else {"share": 0.5}
    return fp.zoned(zones, flow=ground.flow, target_radius=_RADIUS, face=face, well=well, **place)


def build_target(steps: tuple[Step, ...], medium):
    """The target of some `Step`s."""
    held = medium.face.held
    target = fp.Target(start="0 L/s" if held else 21e6)
    before = None
    for step in steps:
        duration = medium.travel_time / step.x
        at = None if before is None or step.overlap is None else before[0] + step.overlap * before[1]
        change = step.change * (1e-3 if held else 1e6)
        before = (target.end if at is None else at, duration)
        target = target.move(by=change, over=duration, order=step.order, easing=step.easing, at=at)
        if step.hold:
            target = target.hold(step.hold * duration)
    return target


# --- drawing ---------------------------------------------------------------------------------


def _log_uniform(rng: Random, low: float, high: float) -> float:
    return low * (high / low) ** rng.random()


def _layer(rng: Random, flow: str) -> Layer:
    return Layer(
        extent=_log_uniform(rng, 5.0, 200.0) if flow == "linear" else _log_uniform(rng, 1.2, 30.0),
        permeability=_log_uniform(rng, 1e-16, 2e-12),
        porosity=rng.uniform(0.02, 0.35),
        compressibility=_log_uniform(rng, 1e-10, 3e-9),
        leakage=rng.choice([0.0, _log_uniform(rng, 1e-3, 30.0)]),
    )


def _ground(rng: Random) -> Ground:
    kind = rng.choice(["one zone", "one zone", "one zone", "zones", "zones", "known", "known", "varying"])
    face = rng.choice(["sealed", "leaky", "storing", "leaky and storing", "held"])
    well = rng.choice(["open", "skin", "negative skin", "storage", "skin and storage", "stated resistance"])
    rest = {
        "held": face == "held",
        "leak": _log_uniform(rng, 0.01, 10.0) if "leaky" in face else 0.0,
        "face_storage": _log_uniform(rng, 1e-3, 10.0) if "storing" in face else 0.0,
        "skin": (rng.uniform(-1.5, -0.01) if well == "negative skin" else rng.uniform(0.01, 10.0)) if "skin" in well else 0.0,
        "resistance": _log_uniform(rng, 1e-3, 10.0) if "resistance" in well else 0.0,
        "well_storage": _log_uniform(rng, 1e-4, 10.0) if "storage" in well else 0.0,
    }
    if kind == "varying":
        return Ground(known=(rng.choice(list(VARYING)), "varying"), **rest)
    if kind == "known":
        uniform = [name for name in media.GEOMETRIES if name != "varying rock"]
        return Ground(known=(rng.choice(uniform), rng.choice(list(media.LEAKAGES))), **rest)
    flow = rng.choice(["linear", "radial", "spherical"])
    count = 1 if kind == "one zone" else rng.randint(2, 3)
    return Ground(flow, tuple(_layer(rng, flow) for _ in range(count)), flow != "linear" and rng.random() < 0.5, **rest)


def _most_order(corner_ratio: float) -> float:
    """The largest order by the rule of `_GROWING_TERMS`."""
    if corner_ratio < 2.0 * _THRESHOLD_SHARE:
        return 2.0
    return min(1.98, 2.0 - math.log(max(corner_ratio, 2.0) / 2.0) / math.log(_GROWING_TERMS))


def _least_order(corner_ratio: float, kind: str, alone: bool) -> float:
    """Lowest orders in a plan of more digits take half a minute: they are drawn alone, and for slow moves."""
    if alone and corner_ratio < 0.3:
        return LEAST_ORDER
    return max(1.24, 1.12 + corner_ratio / 60.0 if kind == "hard" else 1.2 + corner_ratio / 20.0)


def _step(rng: Random, kind: str, first: bool, alone: bool) -> Step:
    """One move; ``kind`` as in `_LARGEST_CORNER_RATIO`."""
    x = _log_uniform(rng, LEAST_X, _LARGEST_CORNER_RATIO[kind] * MOST_EASING if kind == "varying" else MOST_X)
    least_easing = min(max(LEAST_EASING, x / _LARGEST_CORNER_RATIO[kind]), MOST_EASING)
    # both ends more often than by chance: they are where a bound would be wrong
    easing = rng.choice(
        [1.0, 1.0, rng.uniform(least_easing, MOST_EASING), _log_uniform(rng, least_easing, MOST_EASING), 1.0 - _log_uniform(rng, 1e-3, 0.1)]
    )
    easing = min(easing, MOST_EASING) if easing < 1.0 else 1.0
    highest = 2.0 if kind == "free" else _most_order(x / easing)
    lowest = LEAST_ORDER if kind == "free" else min(_least_order(x / easing, kind, alone), highest)
    order = rng.uniform(lowest, highest)
    if rng.random() < 0.9:  # the bounds of a bump cost more than all the rest, and are kept for each order: few orders, mostly
        order = max(min(lowest, 1.24), math.floor(order * 25.0) / 25.0)
    if highest == 2.0 and rng.random() < 0.12:
        order = 2.0
    change = _log_uniform(rng, 0.05, 20.0) * rng.choice([1.0, -1.0])
    overlap = None if first else rng.choice([None, None, rng.uniform(0.0, 1.5)])
    return Step(x, order, easing, change, overlap, rng.choice([0.0, _log_uniform(rng, 0.01, 30.0)]))


def random_case(rng: Random) -> Case:
    """A case from a source of random numbers."""
    ground, at = _ground(rng), rng.random()
    kind = "varying" if "varying" in ground.known else "free" if at < _FREE else "hard" if at < _FREE + _HARD else "usual"
    count = rng.choice([1, 1, 1, 2, 2, 3])
    steps = [_step(rng, kind, i == 0, count == 1) for i in range(count)]
    back = -sum(m.change for m in steps[:-1])
    if rng.random() < 0.25 and abs(back) > 1e-3:  # back to the start
        steps[-1] = replace(steps[-1], change=back)
    return Case(ground, tuple(steps), _log_uniform(rng, 1e-12, 1e-3), rng.randrange(2**20))


def cases() -> st.SearchStrategy[Case]:
    """Independent cases: numbers that hypothesis draws one by one crowd at the ends of their ranges, and it repeats parts of each case."""
    return st.randoms(use_true_random=True).map(random_case)


def simpler(case: Case) -> Iterator[Case]:
    """Cases that differ from this one by being simpler in one respect: a violation is shrunk by them."""
    return (candidate for candidate in _simpler(case) if candidate != case)


def _simpler(case: Case) -> Iterator[Case]:
    ground, steps = case.ground, case.steps
    if len(steps) > 1:
        yield from (replace(case, steps=steps[:i] + steps[i + 1 :]) for i in range(len(steps)))
    plain = Ground(layers=(Layer(100.0, 1e-13, 0.1, 5e-10),), held=ground.held)
    if ground != plain:
        yield replace(case, ground=plain)
        yield replace(case, ground=Ground(ground.flow, ground.layers, ground.outward, ground.known, ground.held))
        for name in ("held", "leak", "face_storage", "skin", "resistance", "well_storage"):
            if getattr(ground, name):
                yield replace(case, ground=replace(ground, **{name: type(getattr(ground, name))(0)}))
        if len(ground.layers) > 1:
            yield from (replace(case, ground=replace(ground, layers=(layer,))) for layer in ground.layers)
        tight = tuple(replace(layer, leakage=0.0) for layer in ground.layers)
        if tight != ground.layers:
            yield replace(case, ground=replace(ground, layers=tight))
    for i, step in enumerate(steps):
        for name, value in (("hold", 0.0), ("overlap", None), ("change", 1.0), ("easing", 1.0)):
            if getattr(step, name) != value:
                yield replace(case, steps=(*steps[:i], replace(step, **{name: value}), *steps[i + 1 :]))
        for name, digits in (("order", 2), ("x", 2), ("easing", 2), ("change", 1), ("overlap", 1)):
            value = getattr(step, name)
            if value is not None and float(f"{value:.{digits}g}") not in (value, 0.0):
                yield replace(case, steps=(*steps[:i], replace(step, **{name: float(f"{value:.{digits}g}")}), *steps[i + 1 :]))
    if case.tolerance != 1e-9:
        yield replace(case, tolerance=1e-9)
