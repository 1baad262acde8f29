"""From a medium to matrices: ``M p' + K p = b Q`` by Galerkin's method.

Unknowns are not nodal pressures but drops: the pressure change at the target face, then for each element from there to
the sandface the drop across it and its bubbles. In this basis K is a small block per element, and stiff thin elements near the
well stand beside soft long ones without sharing an entry. With nodal unknowns a step on a mesh graded over 4^5 came out with a
rounding error of 1e-11; with drops it is 1e-15 (tests/test_numeric_model.py holds it there).

A held face has no first unknown. With both a well resistance R and a wellbore storage C_w the last unknown is the drop
``d = p_w - p(L)`` across the resistance, so that the sandface rate ``d/R`` is not the difference of two nearly equal pressures.

Source: the weak form of the method's equation, tested with every shape function; C. Johnson,
*Numerical Solution of Partial Differential Equations by the Finite Element Method* (1987), ch. 8 [Johnson1987].
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from flatplan.numeric.elements import Element, Mesh, elements, reference_element
from flatplan.site.medium import Medium


@dataclass(frozen=True, eq=False)
class Assembly:
    """The matrices of one medium on one mesh, a held face's pressure included (its row is cut later).

    Attributes
    ----------
    elements : tuple of Element
    drops : ndarray
        Index of each element's drop among the unknowns; its bubbles follow. Shape (elements,).
    mass, stiffness : ndarray
        M [m³/Pa] and K [m³/(Pa s)], symmetric, shape (n, n); K holds the leakage and the face leak.
    load : ndarray
        Pressure at which the injection rate does its work, as a sum of unknowns, shape (n,).
    sandface : ndarray
        Sandface pressure as a sum of unknowns, shape (n,).
    content, leak : ndarray
        Stored volume [m³/Pa] and rate that leaves through beds and face [m³/(Pa s)] of each unknown, shape (n,); from S, Λ, κ and
        the well alone.
    face_mass, face_stiffness : ndarray
        The row of the pressure at ``x = 0`` alone, as if nodal, shape (n,): what does not balance there flows through a held face.
    """

    elements: tuple[Element, ...]
    drops: np.ndarray
    mass: np.ndarray
    stiffness: np.ndarray
    load: np.ndarray
    sandface: np.ndarray
    content: np.ndarray
    leak: np.ndarray
    face_mass: np.ndarray
    face_stiffness: np.ndarray
    _weights: list[tuple[np.ndarray, np.ndarray, np.ndarray]]  # of each element, see `_weights`
    _extra_mass: list[tuple[np.ndarray, float]]  # vector and weight of each weight * vector vectorᵀ
    _extra_stiffness: list[tuple[np.ndarray, float]]

    def local(self, vectors: np.ndarray) -> list[np.ndarray]:
        """Coefficients of the shape functions of every element, each of shape (degree + 1, columns)."""
        found = []
        base = vectors[0]
        for element, drop in zip(self.elements, self.drops, strict=True):
            found.append(np.vstack([base, vectors[drop : drop + element.degree]]))
            base = base + vectors[drop]
        return found

    def energies(self, vectors: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """``vᵀ M v`` and ``vᵀ K v`` of each column, as sums of squares: no digits cancel, however small the result."""
        mass = np.zeros(vectors.shape[1])
        stiffness = np.zeros(vectors.shape[1])
        for element, local, (storage, conductance, bed) in zip(self.elements, self.local(vectors), self._weights, strict=True):
            reference = reference_element(element.degree)
            squares = np.square(reference.values @ local)
            mass += storage @ squares
            stiffness += conductance @ np.square(reference.slopes @ local) + bed @ squares
        for vector, weight in self._extra_mass:
            mass += weight * np.square(vector @ vectors)
        for vector, weight in self._extra_stiffness:
            stiffness += weight * np.square(vector @ vectors)
        return mass, stiffness


def _weights(element: Element) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """``S dx/dξ``, ``T / (dx/dξ)`` and ``Λ dx/dξ`` at the Gauss points, times the Gauss weights."""
    reference = reference_element(element.degree)
    storage, conductance, bed = element.properties(reference.points)
    stretch = element.stretch(reference.points)
    return reference.weights * storage * stretch, reference.weights * conductance / stretch, reference.weights * bed * stretch


def assemble(medium: Medium, mesh: Mesh) -> Assembly:
    """Matrices of ``medium`` on ``mesh``.

    Raises
    ------
    ValueError
        A negative well resistance together with wellbore storage.
    """
    resistance, wellbore, face = medium.well_resistance, medium.well.storage, medium.face
    if resistance < 0.0 and wellbore > 0.0:
        raise ValueError(
            f"well: got a resistance of {resistance:g} Pa s/m³ (a negative skin) together with wellbore storage, which has no stable"
            " solution; it takes a resistance of zero or more, or a wellbore storage of 0."
        )
    parts = elements(medium, mesh)
    weights = [_weights(element) for element in parts]
    drops = 1 + np.cumsum([0, *(element.degree for element in parts)])
    drops, size = drops[:-1], int(drops[-1]) + (1 if resistance > 0.0 and wellbore > 0.0 else 0)
    mass, stiffness = np.zeros((size, size)), np.zeros((size, size))
    content, leak, face_mass, face_stiffness = np.zeros((4, size))
    for i, (element, drop) in enumerate(zip(parts, drops, strict=True)):
        reference = reference_element(element.degree)
        storage, conductance, bed = weights[i]
        own = slice(drop, drop + element.degree)
        base = np.concatenate([[0], drops[:i]])  # what raises the whole element
        flows = (reference.slopes.T * conductance) @ reference.slopes
        stiffness[own, own] += flows[1:, 1:]
        if i == 0:
            # the nodal shape function of x = 0 is the constant less the ramp
            face_stiffness[own] -= flows[1, 1:]
        for matrix, total, face_row, density in ((mass, content, face_mass, storage), (stiffness, leak, face_stiffness, bed)):
            products = (reference.values.T * density) @ reference.values
            matrix[own, own] += products[1:, 1:]
            matrix[base, own] += products[0, 1:]
            matrix[own, base] += products[1:, :1]
            matrix[np.ix_(base, base)] += products[0, 0]
            total[own] += products[0, 1:]
            total[base] += products[0, 0]
            if i == 0:
                face_row[0] += products[0, 0] - products[1, 0]
                face_row[own] += products[0, 1:] - products[1, 1:]

    unit = np.eye(size)
    sandface = unit[0] + unit[drops].sum(axis=0)
    load = sandface
    extra_mass: list[tuple[np.ndarray, float]] = []
    extra_stiffness: list[tuple[np.ndarray, float]] = []
    if resistance > 0.0 and wellbore > 0.0:
        load = sandface + unit[-1]  # the rate enters the well, whose pressure is p(L) + d
        extra_stiffness.append((unit[-1], 1.0 / resistance))
    if wellbore:
        extra_mass.append((load, wellbore))
        content += wellbore * load
    if face.storage:
        extra_mass.append((unit[0], face.storage))
        content += face.storage * unit[0]
    if face.leak:
        extra_stiffness.append((unit[0], face.leak))
        leak += face.leak * unit[0]
    for vector, weight in extra_mass:
        mass += weight * np.outer(vector, vector)
    for vector, weight in extra_stiffness:
        stiffness += weight * np.outer(vector, vector)
    return Assembly(
        parts, drops, mass, stiffness, load, sandface, content, leak, face_mass, face_stiffness, weights, extra_mass, extra_stiffness
    )
