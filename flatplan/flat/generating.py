"""Channel coefficients of any medium, by nested integration of non-negative terms.

    F_k' = S φ_(k-1) + Λ φ_k        φ_k' = F_k / T
    φ_0(0) = 1, F_0(0) = κ;   φ_1(0) = 0, F_1(0) = C_f;   later ones start from 0
    (held face: φ_0(0) = 0, F_0(0) = 1, then both 0)

Everything under the integrals is non-negative, so no digits are lost however large ``k`` is. What is
stored is scaled: ``φ_k = φ̂_k t_D^k / (2k)!`` (the same for F), because ``t_D^k/(2k)!`` soon leaves the
range of a double while the hats stay near one.

The path is cut into panels on which the integrands are smooth to rounding level; on each, a matrix
integrates the interpolant through Gauss–Legendre points. Power-series form of the flatness of
diffusion: [LarocheMartinRouchon2000].
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from flatplan.records import one_of
from flatplan.site import Medium

_NODES = 12
# Short panels: the error made at a panel's start grows by e^(2k h) on the next steps, h the panel length.
_PANELS = 128
_RADIUS_RATIO = 1.3  # largest ratio of radii on one panel of a radial path
CHANNEL_NAMES = (
    "target_pressure",
    "sandface_pressure",
    "sandface_rate",
    "bottomhole_pressure",
    "injection_rate",
)
_MORE_NAMES = ("injected_volume", "stored_volume", "pressure")


@dataclass(frozen=True)
class GeneratingTable:
    """Scaled generating functions φ̂_k, F̂_k on the panels and at the ends, for k = 0 … K.

    Attributes
    ----------
    edges : ndarray
        Panel edges on the path [m], shape (P + 1,).
    nodes : ndarray
        Path coordinates of the nodes [m], shape (P, n).
    pressure : ndarray
        φ̂_k at the nodes, shape (K + 1, P, n).
    sandface_pressure, sandface_rate : ndarray
        φ̂_k(L) and F̂_k(L), shape (K + 1,).
    stored : ndarray
        ∫ S φ̂_k dx, shape (K + 1,).
    """

    edges: np.ndarray
    nodes: np.ndarray
    pressure: np.ndarray
    sandface_pressure: np.ndarray
    sandface_rate: np.ndarray
    stored: np.ndarray

    @property
    def orders(self) -> int:
        """Highest k held."""
        return self.sandface_rate.size - 1


def _panels(medium: Medium) -> tuple[np.ndarray, np.ndarray]:
    """Edges of the panels and the segment each belongs to."""
    edges = [0.0]
    owner: list[int] = []
    total = math.sqrt(medium.travel_time)
    for index, segment in enumerate(medium.segments):
        share = segment.slowness / total
        count = max(1 if len(medium.segments) > 16 else 2, math.ceil(_PANELS * share))
        inner = np.linspace(segment.start, segment.end, count + 1)[1:]
        if segment.power:
            radii = abs(segment.radius(np.array([segment.start, segment.end])))
            pieces = max(1, math.ceil(math.log(radii.max() / radii.min()) / math.log(_RADIUS_RATIO)))
            by_ratio = np.geomspace(radii[0], radii[1], pieces + 1)[1:-1]
            inner = np.unique(np.concatenate([inner, abs(by_ratio - segment.origin)]))
            keep = np.concatenate([np.diff(inner, prepend=segment.start) > 1e-9 * segment.length])
            inner = inner[keep]
            inner[-1] = segment.end
        edges.extend(inner)
        owner.extend([index] * len(inner))
    return np.array(edges), np.array(owner)


def _integration_matrix() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Nodes on [-1, 1], weights, and the matrix of integrals from -1 to each node."""
    nodes, weights = np.polynomial.legendre.leggauss(_NODES)
    to_series = np.linalg.inv(np.polynomial.legendre.legvander(nodes, _NODES - 1))
    integrated = np.polynomial.legendre.legint(np.eye(_NODES), lbnd=-1.0)  # column j: ∫P_j
    return nodes, weights, np.polynomial.legendre.legvander(nodes, _NODES) @ integrated @ to_series


class _Recurrence:
    """The recurrence for one medium, panels and matrices prepared."""

    def __init__(self, medium: Medium) -> None:
        self.medium = medium
        self.edges, owner = _panels(medium)
        nodes, weights, matrix = _integration_matrix()
        half = 0.5 * np.diff(self.edges)
        self.nodes = self.edges[:-1, None] + half[:, None] * (nodes[None, :] + 1.0)
        segments = [medium.segments[i] for i in owner]
        self.storage = np.array([s.storage(x) for s, x in zip(segments, self.nodes, strict=True)])
        self.resist = 1.0 / np.array([s.conductance(x) for s, x in zip(segments, self.nodes, strict=True)])
        self.leak = np.array([s.leak(x) for s, x in zip(segments, self.nodes, strict=True)])
        self.cumulate = half[:, None, None] * matrix[None, :, :]
        self.weights = half[:, None] * weights[None, :]
        self.leaky = bool(np.any(self.leak))
        if self.leaky:
            self._prepare_leak()

    def _prepare_leak(self) -> None:
        """On each panel: the solution operator of the leaky problem, and its 2×2 transfer matrix."""
        inner = self.cumulate @ (self.resist[:, :, None] * self.cumulate * self.leak[:, None, :])
        self.solve = np.linalg.inv(np.eye(_NODES)[None] - inner)
        ones = np.ones_like(self.nodes)
        self.from_pressure = np.einsum("pij,pj->pi", self.solve, ones)
        by_rate = np.einsum("pij,pj->pi", self.cumulate, self.resist)
        self.from_rate = np.einsum("pij,pj->pi", self.solve, by_rate)
        self.transfer = []
        for start in (self.from_pressure, self.from_rate):
            rate = np.einsum("pij,pj->pi", self.cumulate, self.leak * start)
            first = 1.0 if start is self.from_pressure else 0.0
            inside = rate + (1.0 - first)
            self.transfer.append(
                (
                    first + np.sum(self.weights * self.resist * inside, axis=1),
                    (1.0 - first) + np.sum(self.weights * self.leak * start, axis=1),
                )
            )

    def step(self, source: np.ndarray, pressure: float, rate: float) -> tuple[np.ndarray, float, float]:
        """Integrate once along the path: φ at the nodes, φ(L), F(L), from the source S φ_(k-1)."""
        own_rate = np.einsum("pij,pj->pi", self.cumulate, source)
        total_rate = np.sum(self.weights * source, axis=1)
        if not self.leaky:
            starts = rate + np.concatenate([[0.0], np.cumsum(total_rate)])
            slope = self.resist * (starts[:-1, None] + own_rate)
            own = np.einsum("pij,pj->pi", self.cumulate, slope)
            levels = pressure + np.concatenate([[0.0], np.cumsum(np.sum(self.weights * slope, axis=1))])
            return levels[:-1, None] + own, float(levels[-1]), float(starts[-1])
        own = np.einsum("pij,pj->pi", self.solve, np.einsum("pij,pj->pi", self.cumulate, self.resist * own_rate))
        inside = own_rate + np.einsum("pij,pj->pi", self.cumulate, self.leak * own)
        own_end = np.sum(self.weights * self.resist * inside, axis=1)
        rate_end = total_rate + np.sum(self.weights * self.leak * own, axis=1)
        (pp, rp), (pr, rr) = self.transfer
        level_list, rate_list = [pressure], [rate]
        # A 2×2 march over the panels: plain floats are quicker than arrays of length two.
        for a, b, c, d, e, f in zip(*(v.tolist() for v in (pp, pr, rp, rr, own_end, rate_end)), strict=True):
            p, q = level_list[-1], rate_list[-1]
            level_list.append(a * p + b * q + e)
            rate_list.append(c * p + d * q + f)
        phi = own + np.array(level_list[:-1])[:, None] * self.from_pressure + np.array(rate_list[:-1])[:, None] * self.from_rate
        return phi, level_list[-1], rate_list[-1]


def _run(medium: Medium, orders: int, known: GeneratingTable | None) -> GeneratingTable:
    """The recurrence to ``orders``, from where ``known`` ends."""
    if "generating recurrence" not in medium.memory:
        medium.memory["generating recurrence"] = _Recurrence(medium)
    line = medium.memory["generating recurrence"]
    face, t_d, held = medium.face, medium.travel_time, medium.face.held
    fields: list[np.ndarray] = []
    at_end: list[float] = []
    rate_end: list[float] = []
    stored: list[float] = []
    first = 0 if known is None else known.orders + 1
    before = None if known is None else known.pressure[-1]
    source = np.zeros_like(line.nodes)
    for k in range(first, orders + 1):
        if k == 0:
            pressure, rate = (0.0, 1.0) if held else (1.0, face.leak)
        else:
            pressure, rate = 0.0, (2.0 * face.storage / t_d if k == 1 and not held else 0.0)
            source = line.storage * before * (2.0 * k * (2.0 * k - 1.0) / t_d)
        before, phi_end, f_end = line.step(source, pressure, rate)
        fields.append(before)
        at_end.append(phi_end)
        rate_end.append(f_end)
        stored.append(float(np.sum(line.weights * line.storage * before)))
    new = np.array(fields), np.array(at_end), np.array(rate_end), np.array(stored)
    if known is not None:
        old = known.pressure, known.sandface_pressure, known.sandface_rate, known.stored
        new = tuple(np.concatenate(pair) for pair in zip(old, new, strict=True))  # type: ignore[assignment]
    return GeneratingTable(line.edges, line.nodes, *new)


def generating_table(medium: Medium, orders: int) -> GeneratingTable:
    """The table for ``medium`` to at least ``orders``; made once and grown when more is asked."""
    held = medium.memory.get("generating")
    if held is None or held.orders < orders:
        held = _run(medium, max(orders, 48 if held is None else 2 * held.orders), held)
        medium.memory["generating"] = held
    return held


def scaled_coefficients(medium: Medium, channel: str, orders: int, x: float | None = None) -> np.ndarray:
    """``ĉ_0 … ĉ_orders`` with ``c_k = ĉ_k t_D^k/(2k)!``; see `coefficients` for the channels."""
    table = generating_table(medium, orders + 1)
    n = orders + 1
    if channel == "target_pressure":
        out = np.zeros(n)
        out[0] = 1.0  # the flat output itself, for a held face the rate through it
        return out
    if channel == "sandface_pressure":
        return table.sandface_pressure[:n].copy()
    if channel == "sandface_rate":
        return table.sandface_rate[:n].copy()
    if channel == "stored_volume":
        return table.stored[:n].copy()
    if channel == "pressure":
        return pressure_at(table, np.array([x]))[:n, 0]
    bottomhole = table.sandface_pressure + medium.well_resistance * table.sandface_rate
    if channel == "bottomhole_pressure":
        return bottomhole[:n]
    # One term up in k is the factor 2k (2k - 1) / t_D between the scalings.
    up = 2.0 * np.arange(1, table.orders + 1) * (2.0 * np.arange(1, table.orders + 1) - 1.0) / medium.travel_time
    rate = table.sandface_rate.copy()
    rate[1:] += medium.well.storage * bottomhole[:-1] * up
    if channel == "injection_rate":
        return rate[:n]
    # injected_volume: the rate integrated once, its constant term aside (see `coefficients`)
    return rate[1 : n + 1] / up[:n]


def pressure_at(table: GeneratingTable, x: np.ndarray) -> np.ndarray:
    """φ̂_k at path coordinates ``x``, shape (K + 1, len(x)), by interpolation on the panels."""
    reference, _ = np.polynomial.legendre.leggauss(_NODES)
    panel = np.clip(np.searchsorted(table.edges, x, side="left") - 1, 0, len(table.edges) - 2)
    lo, hi = table.edges[panel], table.edges[panel + 1]
    u = 2.0 * (x - lo) / (hi - lo) - 1.0
    to_series = np.linalg.inv(np.polynomial.legendre.legvander(reference, _NODES - 1))
    weights = np.polynomial.legendre.legvander(u, _NODES - 1) @ to_series  # (len(x), n)
    return np.einsum("kxn,xn->kx", table.pressure[:, panel, :], weights)


def scale(medium: Medium, orders: int) -> np.ndarray:
    """``t_D^k/(2k)!`` for k = 0 … orders; leaves the range of a double for large k."""
    out = np.empty(orders + 1)
    out[0] = 1.0
    for k in range(1, orders + 1):
        out[k] = out[k - 1] * medium.travel_time / (2.0 * k * (2.0 * k - 1.0))
    return out


def coefficients(medium: Medium, channel: str, terms: int, x: object = None) -> np.ndarray:
    """Coefficients ``c_0 … c_terms`` of a channel (see `Medium.coefficients`).

    For "injected_volume" they multiply ``y^(k)`` after the steady part: the injected volume is
    ``c_steady ∫ y dt + Σ c_k (y^(k) - y^(k)(0))`` with ``c_steady`` the injection rate's ``c_0``.
    """
    one_of(channel, (*CHANNEL_NAMES, *_MORE_NAMES), "channel")
    if isinstance(terms, bool) or not isinstance(terms, (int, np.integer)) or terms < 0:
        raise ValueError(f"terms: got {terms!r}; it takes a whole number, 0 or more.")
    where = None
    if channel == "pressure":
        if x is None:
            raise ValueError('x: the channel "pressure" needs x=, a place on the path such as "70 m".')
        where = float(medium.positions(x)[0])
    with np.errstate(over="ignore", under="ignore", invalid="ignore"):
        values = scaled_coefficients(medium, channel, int(terms), where) * scale(medium, int(terms))
    if not np.all(np.isfinite(values)):
        last = int(np.flatnonzero(~np.isfinite(values))[0]) - 1
        raise ValueError(f"terms: got {terms}; in SI units the coefficients leave the range of a float after k = {last}.")
    return values


@dataclass(frozen=True)
class SteadyState:
    """Outputs per unit of flat output when everything is settled: the terms k = 0."""

    injection_rate: float
    bottomhole_pressure: float
    stored_volume: float


def steady_state(medium: Medium) -> SteadyState:
    """Steady rate [m³/s], bottomhole change [Pa] and stored volume [m³] per unit of the flat output."""
    table = generating_table(medium, 1)
    bottomhole = table.sandface_pressure[0] + medium.well_resistance * table.sandface_rate[0]
    face = 0.0 if medium.face.held else medium.face.storage
    return SteadyState(
        injection_rate=float(table.sandface_rate[0]),
        bottomhole_pressure=float(bottomhole),
        stored_volume=float(table.stored[0] + face + medium.well.storage * bottomhole),
    )
