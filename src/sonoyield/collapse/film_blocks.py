"""Linear equations of the film: blocks of species, cell after cell, compiled.

Only neighbouring cells touch, each species only itself, so the blocks beside the diagonal are
diagonal. Elimination runs outwards from the wall, without pivoting within a block, as is usual for
kinetics.
"""

from __future__ import annotations

from numba import njit

from sonoyield.collapse.small_matrices import add_times, times
from sonoyield.describe.gas import Array


@njit(cache=True, error_model="numpy")
def factorise(shift: float, own: Array, inner: Array, outer: Array, inverse: Array) -> None:
    """Eliminate ``shift`` I - J outwards; ``inverse`` (M, L, L) keeps what ``solve`` needs.

    J: ``own`` (M, L, L) each cell by itself, ``inner`` (M, L) by the cell nearer the wall and
    ``outer`` (M, L) by the farther one; ``outer`` of the last and ``inner`` of the first cell are
    not read.
    """
    count, kinds = inner.shape
    for m in range(count):
        block = inverse[m]
        for s in range(kinds):
            for t in range(kinds):
                block[s, t] = -own[m, s, t]
                if m > 0:
                    block[s, t] -= inner[m, s] * inverse[m - 1, s, t] * outer[m - 1, t]
            block[s, s] += shift
        _invert(block)


@njit(cache=True, error_model="numpy")
def solve(inner: Array, outer: Array, inverse: Array, right: Array, out: Array) -> None:
    """Fill ``out`` (M, L) with the solution of the factorised equations; ``right`` is overwritten.

    ``inner`` and ``outer`` as given to ``factorise``.
    """
    count, kinds = inner.shape
    for m in range(count):
        for s in range(kinds):
            if m > 0:
                right[m, s] += inner[m, s] * out[m - 1, s]
        times(inverse[m], right[m], out[m])
    for m in range(count - 2, -1, -1):
        for s in range(kinds):
            right[m, s] = outer[m, s] * out[m + 1, s]
        add_times(inverse[m], right[m], out[m])


@njit(cache=True, error_model="numpy")
def _invert(block: Array) -> None:
    """Gauss and Jordan, in place."""
    size = block.shape[0]
    for p in range(size):
        pivot = 1.0 / block[p, p]
        block[p, p] = 1.0
        for t in range(size):
            block[p, t] *= pivot
        for s in range(size):
            factor = block[s, p]
            if s == p or factor == 0.0:
                continue
            block[s, p] = 0.0
            for t in range(size):
                block[s, t] -= factor * block[p, t]
