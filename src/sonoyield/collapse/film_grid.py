"""Diffusion in the liquid around a moving bubble, in cells that move with the liquid, compiled.

Cells hold fixed volumes of an incompressible liquid (Lagrangian volume coordinate v, counted from
the wall: r^3 = R^3 + 3 v/(4 pi)), so the motion itself carries nothing through their faces and
d c/dt in a cell is diffusion and reaction alone (Plesset and Zwick 1952, J. Appl. Phys. 23, 95, use
this coordinate). Flow between two cells is that of the steady 1/r profile through their middles:
a steady sphere is exact on any grid.
"""

from __future__ import annotations

from math import exp, expm1, log, pi

import numpy as np
from numba import njit

from sonoyield.describe.gas import Array

FOUR_PI = 4.0 * pi
CELLS = 24
THINNEST = 5e-10  # m: first cell where bursts cross; OH at 1 mol/L recombines within 0.5 nm
REACH = 20.0  # rest radii from the centre to the last face


def film_edges(
    narrow: float, rest: float, cells: int = CELLS, thinnest: float = THINNEST, reach: float = REACH
) -> Array:
    """Faces (cells + 1,) of the film in m3 outside the wall, growing geometrically.

    The first cell is ``thinnest`` m thick while the bubble is ``narrow`` m in radius (where bursts
    cross the wall, about a fifth of the rest radius). Around a bubble of the ``rest`` radius each
    cell is thicker than the one before by the same factor, and the last face is ``reach`` such
    radii from the centre. Raises ``ValueError`` if the first cell would not be the thinnest.
    """
    thickness = thinnest * (narrow / rest) ** 2
    whole = rest * (reach - 1.0)
    if not 0.0 < thickness * cells < whole:
        raise ValueError("film: the first cell must be thinner than an even share of the film")
    growth = _growth(whole / thickness, cells)
    x = thickness * (growth ** np.arange(cells + 1.0) - 1.0) / (growth - 1.0)
    edges: Array = FOUR_PI * x * (rest**2 + rest * x + x**2 / 3.0)
    return edges


def volumes(edges: Array) -> Array:
    """Volume of each cell (M,), m3."""
    return np.diff(edges)


@njit(cache=True, error_model="numpy")
def radius_at(volume: float, radius: float) -> float:
    """Distance from the centre, m, of the liquid with ``volume`` m3 between it and the wall."""
    return np.cbrt(radius * radius * radius + 3.0 * volume / FOUR_PI)


@njit(cache=True, error_model="numpy")
def film_conductances(radius: float, edges: Array, faces: Array) -> None:
    """Fill ``faces`` (M,), m: times D and the concentration difference it is a flow in mol/s.

    ``faces[m]`` joins cells m and m + 1; the last one joins the last cell to the liquid far away by
    the steady profile, so the film has no outer end where its reach is beyond what diffuses.
    """
    last = edges.size - 2
    middle = 0.5 * (edges[0] + edges[1])
    inner = radius_at(middle, radius)
    for m in range(last):
        farther = 0.5 * (edges[m + 1] + edges[m + 2])
        outer = radius_at(farther, radius)
        product = inner * outer
        # 1/inner - 1/outer without the cancellation of thin cells
        sum_of_squares = inner * inner + product + outer * outer
        faces[m] = FOUR_PI * FOUR_PI / 3.0 * product * sum_of_squares / (farther - middle)
        inner, middle = outer, farther
    faces[last] = FOUR_PI * inner


@njit(cache=True, error_model="numpy")
def film_diffusion(
    c: Array, radius: float, edges: Array, diffusivity: Array, bulk: Array, out: Array
) -> None:
    """Add diffusion to ``out`` (M, L), mol/m3/s, from concentrations ``c`` (M, L) mol/m3.

    ``bulk`` (L,) far away; nothing crosses the wall here. Inflow through it (mol/s) divided by
    ``edges[1] - edges[0]`` adds to row 0.
    """
    count = edges.size - 1
    faces = np.empty(count)
    film_conductances(radius, edges, faces)
    for m in range(count):
        volume = edges[m + 1] - edges[m]
        for k in range(diffusivity.size):
            beyond = c[m + 1, k] if m + 1 < count else bulk[k]
            flow = diffusivity[k] * faces[m] * (beyond - c[m, k])
            out[m, k] += flow / volume
            if m + 1 < count:
                out[m + 1, k] -= flow / (edges[m + 2] - edges[m + 1])


@njit(cache=True, error_model="numpy")
def wall_conductance(
    radius: float, edges: Array, diffusivity: float, henry: float, gas_side: float
) -> float:
    """Conductance of the wall for one species in m3/s, on the gas's concentration scale.

    Gas side (``gas_side`` m/s: half a cell and accommodation) and half the first film cell in
    series. Inflow to the film, mol/s: this times (gas concentration - film's first cell / henry).
    """
    area = FOUR_PI * radius * radius
    thickness = 0.5 * (edges[1] - edges[0]) / area
    return area / (1.0 / gas_side + thickness / (henry * diffusivity))


def _growth(ratio: float, cells: int) -> float:
    """Growth of cells from one to the next, so that all are ``ratio`` first cells (bisection)."""
    low, high = 1e-9 / cells, log(ratio) / (cells - 1)  # of the logarithm
    for _ in range(200):
        middle = 0.5 * (low + high)
        if expm1(cells * middle) < ratio * expm1(middle):
            low = middle
        else:
            high = middle
    return exp(0.5 * (low + high))
