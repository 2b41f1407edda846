"""Linear algebra of small blocks, compiled: faster than library calls for matrices this small."""

from __future__ import annotations

from sonoyield.collapse.kernel import inner, inner_fast
from sonoyield.describe.gas import Array


@inner
def invert(matrix: Array, out: Array) -> None:
    """Fill ``out`` with the inverse of ``matrix``, which is spoilt (Gauss and Jordan, row pivots).

    For blocks this small faster than a library call, and a singular one gives not-a-number.
    """
    size = matrix.shape[0]
    out[:] = 0.0
    for a in range(size):
        out[a, a] = 1.0
    for a in range(size):
        pivot = a
        for b in range(a + 1, size):
            if abs(matrix[b, a]) > abs(matrix[pivot, a]):
                pivot = b
        if pivot != a:
            for b in range(size):
                matrix[a, b], matrix[pivot, b] = matrix[pivot, b], matrix[a, b]
                out[a, b], out[pivot, b] = out[pivot, b], out[a, b]
        scale = 1.0 / matrix[a, a]
        for b in range(size):
            matrix[a, b] *= scale
            out[a, b] *= scale
        for row in range(size):
            factor = matrix[row, a]
            if row != a and factor != 0.0:
                for b in range(a, size):
                    matrix[row, b] -= factor * matrix[a, b]
                for b in range(size):
                    out[row, b] -= factor * out[a, b]


@inner
def invert_scaled(block: Array, per_kelvin: float, out: Array) -> None:
    """Invert with amounts and temperature on one scale, or pivots are chosen by units."""
    last = block.shape[0] - 1
    for a in range(last):
        block[a, last] /= per_kelvin
        block[last, a] *= per_kelvin
    invert(block, out)
    for a in range(last):
        out[a, last] *= per_kelvin
        out[last, a] /= per_kelvin
@inner
def copy(given: Array, out: Array) -> None:
    """Fill ``out`` with ``given``: a slice may overlap, so that its copy would be made twice."""
    for a in range(out.size):
        out[a] = given[a]


@inner
def times(matrix: Array, x: Array, out: Array) -> None:
    out[:] = 0.0
    add_times(matrix, x, out)


@inner_fast
def add_times(matrix: Array, x: Array, out: Array) -> None:
    for a in range(out.size):
        total = 0.0
        for b in range(out.size):
            total += matrix[a, b] * x[b]
        out[a] += total
