"""The linear solver of the resolved bubble: cells one after another, compiled.

Solves (I - gamma J) x = r for the Jacobian J that ``cells_newton`` finds. Elimination runs from the
centre to the wall and on through the film, each cell touching its neighbours only. The pressure,
which every cell feels, comes back in closed form (Sherman and Morrison 1950, Ann. Math. Stat. 21,
124), and so do mass taken up, radius and speed (Woodbury 1950).
"""

from __future__ import annotations

from sonoyield.collapse import cells as c
from sonoyield.collapse import equations as eq
from sonoyield.collapse.cells_newton import (
    BY_WARMING,
    LATENT,
    OF_FILM,
    OF_GAS,
    WATER,
    Blocks,
    Indices,
)
from sonoyield.collapse.kernel import call, inner
from sonoyield.collapse.small_matrices import add_times, copy, invert, invert_scaled, times
from sonoyield.describe.gas import Array


@inner
def factorise(gamma: float, blocks: Blocks, gas_index: Indices, substitute: int) -> None:
    """Eliminate I - gamma J from the centre outwards, then what all cells feel.

    ``substitute`` is the address of the function of that name.
    """
    cells, m, _ = blocks.own.shape
    for i in range(cells):
        block = blocks.room
        for a in range(m):
            for b in range(m):
                block[a, b] = -gamma * blocks.own[i, a, b]
            block[a, a] += 1.0
        if i > 0:
            _take_out(gamma, i - 1, blocks, block)
        invert_scaled(block, blocks.per_kelvin[i], blocks.inverse[i])
    _factorise_film(gamma, blocks, gas_index)
    call(substitute, (gamma, blocks, gas_index, blocks.squeeze, blocks.squeezed))
    blocks.numbers[1] = 1.0 - _felt(blocks, blocks.squeezed, blocks.squeeze)
    small = blocks.seen_by_all
    for a in range(4):
        _solve_locally(
            gamma, blocks, gas_index, substitute, blocks.columns[a], blocks.solved[a]
        )
        for b in range(4):
            small[b, a] = 1.0 if a == b else 0.0
            small[b, a] -= gamma * _scalar(b, blocks, blocks.solved[a])
    pressure, weight, radius = blocks.sizes[0], blocks.sizes[1] / gamma, blocks.sizes[2]
    sizes = (pressure, weight, radius, radius / gamma)
    for a in range(4):
        for b in range(4):
            small[b, a] *= sizes[a] / sizes[b]
    invert(small, blocks.small)
    for a in range(4):
        for b in range(4):
            blocks.small[b, a] *= sizes[b] / sizes[a]


@inner
def solve(
    gamma: float, blocks: Blocks, gas_index: Indices, substitute: int, right: Array, out: Array
) -> None:
    """Solve (I - gamma J) ``out`` = ``right`` with the last factorisation (Woodbury 1950)."""
    _solve_locally(gamma, blocks, gas_index, substitute, right, out)
    scalars = blocks.scalars
    for a in range(4):
        scalars[a] = gamma * _scalar(a, blocks, out)
    for a in range(4):
        share = 0.0
        for b in range(4):
            share += blocks.small[a, b] * scalars[b]
        for i in range(out.size):
            out[i] += share * blocks.solved[a, i]


@inner
def multiply(blocks: Blocks, gas_index: Indices, x: Array, out: Array) -> None:
    """Fill ``out`` with J x, the same J as ``solve`` inverts."""
    _multiply_locally(blocks, gas_index, x, out)
    for a in range(4):
        scalar = _scalar(a, blocks, x)
        for i in range(out.size):
            out[i] += scalar * blocks.columns[a, i]


@inner
def _solve_locally(
    gamma: float, blocks: Blocks, gas_index: Indices, substitute: int, right: Array, out: Array
) -> None:
    """Solve with neighbours and the pressure's rate, but without what else all cells feel."""
    call(substitute, (gamma, blocks, gas_index, right, out))
    scale = _felt(blocks, out, right) / blocks.numbers[1]
    for a in range(out.size):
        out[a] += scale * blocks.squeezed[a]


@inner
def _felt(blocks: Blocks, after: Array, before: Array) -> float:
    """Rate of pressure (times gamma) from the change of the local rates."""
    total = 0.0
    for a in range(blocks.feels.size):
        total += blocks.feels[a] * (after[a] - before[a])
    return total / blocks.numbers[0]


@inner
def _scalar(which: int, blocks: Blocks, x: Array) -> float:
    """Change of pressure, mass taken up, radius or speed with a change ``x`` of the state."""
    if which >= 2:
        return x[c.RADIUS] if which == 2 else x[c.SPEED]
    total = 0.0
    if which == 0:
        for a in range(x.size):
            total += blocks.by_pressure[a] * x[a]
        return total
    cells, m, _ = blocks.own.shape
    first = c.CROSSED + m - 1 + cells * m
    for k in range(m - 1):
        total += blocks.by_cell[k] * x[first - m + k]
    for s in range(blocks.by_film.size):
        total += blocks.by_film[s] * x[first + s]
    return total


@inner
def _take_out(gamma: float, i: int, blocks: Blocks, block: Array) -> None:
    """Subtract from the block of cell i + 1 what comes back to it through cell i."""
    m = block.shape[0]
    count = m - 1
    inverse, y = blocks.inverse[i], blocks.per_mass[i]
    inner, outer = blocks.inner[i], blocks.outer[i]
    seen, lines = blocks.seen, blocks.lines
    for a in range(m):
        shares = masses = 0.0
        for b in range(count):
            shares += inverse[a, b] * outer[1, b]
            masses += inverse[a, b] * y[b]
        for b in range(count):
            seen[a, b] = inverse[a, b] * outer[0, b] + shares - masses * outer[2, b]
        seen[a, count] = inverse[a, count] * blocks.heat[i, 1]
    lines[:2] = 0.0
    for k in range(count):
        for b in range(m):
            lines[0, b] += seen[k, b]
            lines[1, b] += inner[2, k] * seen[k, b]
    square = gamma * gamma
    for b in range(m):
        for k in range(count):
            block[k, b] -= square * (
                inner[0, k] * seen[k, b] + inner[1, k] * lines[0, b] - y[k] * lines[1, b]
            )
        block[count, b] -= square * blocks.heat[i, 0] * seen[count, b]


@inner
def _factorise_film(gamma: float, blocks: Blocks, gas_index: Indices) -> None:
    spots, kinds, _ = blocks.film_own.shape
    last = blocks.own.shape[0] - 1
    block = blocks.film_room
    for i in range(spots):
        for s in range(kinds):
            for t in range(kinds):
                block[s, t] = -gamma * blocks.film_own[i, s, t]
                k, j = gas_index[s], gas_index[t]
                if i > 0:
                    through = blocks.film_inverse[i - 1, s, t] * blocks.film_outer[i - 1, t]
                    block[s, t] -= gamma * gamma * blocks.film_inner[i, s] * through
                elif k >= 0 and j >= 0:
                    through = blocks.inverse[last, k, j] * blocks.wall[2, j]
                    block[s, t] += gamma * gamma * blocks.wall[0, k] / blocks.numbers[2] * through
            block[s, s] += 1.0
        if i == 0 and gas_index[kinds - 1] == c.WARMING:
            _factorise_layer(gamma, blocks, gas_index, block)
        invert(block, blocks.film_inverse[i])


@inner
def _factorise_layer(gamma: float, blocks: Blocks, gas_index: Indices, block: Array) -> None:
    """Subtract what comes back through the gas to and from the warming of the film's first cell."""
    kinds, last = gas_index.size, blocks.own.shape[0] - 1
    inverse, layer, answer = blocks.inverse[last], blocks.layer, blocks.lines[0]
    m, warming, water = answer.size, kinds - 1, int(layer[WATER])
    for t in range(kinds):
        j = gas_index[t]
        if t == warming:
            for a in range(m):
                answer[a] = inverse[a, m - 1] * blocks.numbers[3] / layer[OF_GAS]
                answer[a] -= inverse[a, water] * layer[BY_WARMING]
        elif j >= 0:
            for a in range(m):
                answer[a] = -inverse[a, j] * blocks.wall[2, j]
        else:
            continue
        block[warming, t] -= gamma * gamma * _warms(blocks, answer)
    for s in range(kinds):
        k = gas_index[s]
        if k >= 0:
            through = blocks.wall[0, k] / blocks.numbers[2] * answer[k]
            block[s, warming] -= gamma * gamma * through


@inner
def _warms(blocks: Blocks, x: Array) -> float:
    """Warming, K/s, of the film's first cell by a change ``x`` (m,) of the outermost cell."""
    count, layer = x.size - 1, blocks.layer
    water = int(layer[WATER])
    shares = 0.0
    for k in range(count):
        shares += x[k]
    condenses = blocks.wall[0, water] * x[water] + blocks.wall[1, water] * shares
    return (blocks.numbers[3] * x[count] + layer[LATENT] * condenses) / layer[OF_FILM]


@inner
def substitute(
    gamma: float, blocks: Blocks, gas_index: Indices, right: Array, out: Array
) -> None:
    """Solve with pressure held: outwards through gas and film, then back."""
    cells, m, _ = blocks.own.shape
    count = m - 1
    spots, kinds = blocks.film_inner.shape
    start = c.CROSSED + count
    first = start + cells * m
    copy(right[:start], out[:start])
    line = blocks.lines[2]
    for i in range(cells):
        at = start + i * m
        if i > 0:
            _outwards(gamma, i - 1, blocks, out[at - m : at], line)
        else:
            line[:] = 0.0
        for a in range(m):
            line[a] += right[at + a]
        times(blocks.inverse[i], line, out[at : at + m])
    if spots > 0:
        _substitute_film(gamma, blocks, gas_index, right, out)
        line[:] = 0.0
        for s in range(kinds):
            if gas_index[s] >= 0:
                line[gas_index[s]] = -gamma * blocks.wall[2, gas_index[s]] * out[first + s]
            elif gas_index[s] == c.WARMING:
                warming = gamma * out[first + s]
                line[count] = blocks.numbers[3] / blocks.layer[OF_GAS] * warming
                line[int(blocks.layer[WATER])] -= blocks.layer[BY_WARMING] * warming
        add_times(blocks.inverse[cells - 1], line, out[first - m : first])
    for i in range(cells - 2, -1, -1):
        at = start + i * m
        _inwards(gamma, i, blocks, out[at + m : at + 2 * m], line)
        add_times(blocks.inverse[i], line, out[at : at + m])
    _follow_wall(gamma, blocks, gas_index, out, out)


@inner
def _substitute_film(
    gamma: float, blocks: Blocks, gas_index: Indices, right: Array, out: Array
) -> None:
    cells, m, _ = blocks.own.shape
    spots, kinds = blocks.film_inner.shape
    first = c.CROSSED + m - 1 + cells * m
    line = blocks.film_line
    for i in range(spots):
        at = first + i * kinds
        for s in range(kinds):
            line[s] = right[at + s]
            if i > 0:
                line[s] += gamma * blocks.film_inner[i, s] * out[at - kinds + s]
            elif gas_index[s] >= 0:
                flow = blocks.wall[0, gas_index[s]] * out[first - m + gas_index[s]]
                line[s] += gamma * flow / blocks.numbers[2]
            elif gas_index[s] == c.WARMING:
                line[s] += gamma * _warms(blocks, out[first - m : first])
        times(blocks.film_inverse[i], line, out[at : at + kinds])
    for i in range(spots - 2, -1, -1):
        at = first + i * kinds
        for s in range(kinds):
            line[s] = gamma * blocks.film_outer[i, s] * out[at + kinds + s]
        add_times(blocks.film_inverse[i], line, out[at : at + kinds])


@inner
def _outwards(gamma: float, i: int, blocks: Blocks, x: Array, line: Array) -> None:
    """Fill ``line`` with what cell i + 1 feels of a change ``x`` of cell i."""
    count = x.size - 1
    part = blocks.inner[i]
    _neighbour(gamma, part, blocks.per_mass[i], x, line)
    line[count] = gamma * blocks.heat[i, 0] * x[count]


@inner
def _inwards(gamma: float, i: int, blocks: Blocks, x: Array, line: Array) -> None:
    """Fill ``line`` with what cell i feels of a change ``x`` of cell i + 1."""
    count = x.size - 1
    _neighbour(gamma, blocks.outer[i], blocks.per_mass[i], x, line)
    line[count] = gamma * blocks.heat[i, 1] * x[count]


@inner
def _neighbour(gamma: float, part: Array, per_mass: Array, x: Array, line: Array) -> None:
    shares = masses = 0.0
    for k in range(per_mass.size):
        shares += x[k]
        masses += part[2, k] * x[k]
    for k in range(per_mass.size):
        line[k] = gamma * (part[0, k] * x[k] + part[1, k] * shares - per_mass[k] * masses)


@inner
def _follow_wall(
    gamma: float, blocks: Blocks, gas_index: Indices, x: Array, out: Array
) -> None:
    """Add what crosses with a change ``x`` of the outermost cell and of the film."""
    cells, m, _ = blocks.own.shape
    first = c.CROSSED + m - 1 + cells * m
    shares = 0.0
    for k in range(m - 1):
        shares += x[first - m + k]
    carried = 0.0
    for k in range(m - 1):
        flow = blocks.wall[0, k] * x[first - m + k] + blocks.wall[1, k] * shares
        out[c.CROSSED + k] += gamma * flow
        carried += blocks.wall[3, k] * flow
    if blocks.film_inner.shape[0] > 0:
        for s in range(gas_index.size):
            k = gas_index[s]
            if k >= 0:
                flow = blocks.wall[2, k] * x[first + s]
                out[c.CROSSED + k] += gamma * flow
                carried += blocks.wall[3, k] * flow
            elif k == c.WARMING:
                water = int(blocks.layer[WATER])
                flow = blocks.layer[BY_WARMING] * x[first + s]
                out[c.CROSSED + water] += gamma * flow
                carried += blocks.wall[3, water] * flow
                out[c.LEDGER + eq.HEAT] -= gamma * blocks.numbers[3] * x[first + s]
    out[c.LEDGER + eq.CARRIED] += gamma * carried
    out[c.LEDGER + eq.HEAT] += gamma * blocks.numbers[3] * x[first - 1]


@inner
def _multiply_locally(blocks: Blocks, gas_index: Indices, x: Array, out: Array) -> None:
    """Fill ``out`` with J x as far as neighbours and the pressure's rate make it."""
    cells, m, _ = blocks.own.shape
    start = c.CROSSED + m - 1
    first = start + cells * m
    line = blocks.lines[2]
    out[:start] = 0.0
    for i in range(cells):
        at = start + i * m
        times(blocks.own[i], x[at : at + m], out[at : at + m])
        if i > 0:
            _outwards(1.0, i - 1, blocks, x[at - m : at], line)
            for a in range(m):
                out[at + a] += line[a]
        if i + 1 < cells:
            _inwards(1.0, i, blocks, x[at + m : at + 2 * m], line)
            for a in range(m):
                out[at + a] += line[a]
    _multiply_film(blocks, gas_index, x, out)
    _follow_wall(1.0, blocks, gas_index, x, out)
    felt = 0.0
    for a in range(start, first):
        felt += blocks.feels[a] * out[a]
    felt /= blocks.numbers[0]
    for a in range(first):
        out[a] += felt * blocks.squeeze[a]


@inner
def _multiply_film(blocks: Blocks, gas_index: Indices, x: Array, out: Array) -> None:
    cells, m, _ = blocks.own.shape
    spots, kinds = blocks.film_inner.shape
    first = c.CROSSED + m - 1 + cells * m
    for i in range(spots):
        at = first + i * kinds
        times(blocks.film_own[i], x[at : at + kinds], out[at : at + kinds])
        for s in range(kinds):
            if i > 0:
                out[at + s] += blocks.film_inner[i, s] * x[at - kinds + s]
            elif gas_index[s] >= 0:
                k = gas_index[s]
                out[at + s] += blocks.wall[0, k] * x[first - m + k] / blocks.numbers[2]
                out[first - m + k] -= blocks.wall[2, k] * x[at + s]
            elif gas_index[s] == c.WARMING:
                out[at + s] += _warms(blocks, x[first - m : first])
                water = int(blocks.layer[WATER])
                out[first - m + water] -= blocks.layer[BY_WARMING] * x[at + s]
                out[first - 1] += blocks.numbers[3] / blocks.layer[OF_GAS] * x[at + s]
            if i + 1 < spots:
                out[at + s] += blocks.film_outer[i, s] * x[at + kinds + s]
