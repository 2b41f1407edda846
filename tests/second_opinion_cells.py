"""Equations of ``second_opinion_resolved.py``: grid, flows, right-hand side, Jacobian.

Finite volumes of fixed share of the bubble's volume (x = r / R is fixed, so the gas flows through
faces).  The state is radius, wall speed, one pressure and the amounts in each cell; temperature
follows from the last two.  The flow through each face and dp/dt are what keeps the pressure
uniform (Prosperetti 1991, J. Fluid Mech. 222, 587): one small linear system an evaluation.
Nothing of the product is imported.  SI and mol, amounts carried as fractions of the first contents.

Sources beyond those of ``second_opinion.py``: conductivity Mathur, Tondon & Saxena (1967);
diffusion Kee, Coltrin & Glarborg (2003), mixture average with correction velocity, no thermal
diffusion; heat capacities McBride, Zehe & Gordon (2002).
"""

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

import second_opinion as mixed

Array = NDArray[np.float64]

R, U, P, N = range(4)  # state: radius m, speed m/s, pressure / ambient, then the cells
FINE = 0.9  # of the grid's grading towards the wall
WALL_ROUNDS = 8  # Newton rounds for the mole fractions at the wall
TRIAL = 1e-3  # share of a cell that stays free of covolume in a trial state
NUDGE = 1e-7  # relative, of finite differences


@dataclass(frozen=True)
class Passing:
    """Gas at the faces between cells, and what passes them beside the flow (outward)."""

    face: Array  # (N - 1, K) mol/m3
    brought: Array  # (N - 1,) enthalpy of that gas with p b, J/m3
    diffused: Array  # (N + 1, K) mol/s, centre and wall included
    warmth: Array  # (N + 1,) W, conduction and the enthalpy of what diffuses
    inflow: Array  # of what crosses the wall, mol/s into the gas
    heat: float  # W through the wall into the gas


@dataclass(frozen=True)
class Local:
    """What each cell and its neighbours determine, the flow still open.

    Cell i: room_i p' + ahead_i F_i - behind_i F_(i-1) = supply_i, F the volume flow (m3/s) through
    the face on its outer side.
    """

    passing: Passing
    growth: float  # of the volume, m3/s
    gained: Array  # (N, K) mol/s by reaction
    gathered: Array  # (N, K) mol/s by reaction and diffusion
    room: Array  # m3 free of covolume
    ahead: Array
    behind: Array
    supply: Array


class Cells(mixed._Bubble):
    """The resolved bubble: the mixed one's constants, a grid, and the right-hand side."""

    def __init__(self, case: mixed.Case, cells: int) -> None:
        super().__init__(case)
        self.cells = cells
        self.evaluations = self.jacobians = 0
        wall = np.linspace(1.0, 0.0, cells + 1)
        self.edges = 1.0 - (1.0 - FINE) * wall - FINE * wall**2
        self.share = np.diff(self.edges**3)
        self.centres = 0.75 * np.diff(self.edges**4) / self.share
        self.gaps = np.diff(self.centres)
        self.outer = (self.edges[1:-1] - self.centres[:-1]) / self.gaps
        self.inside = slice(N, N + cells * self.count)
        self.surface = np.zeros(self.count)
        self.surface[self.crossing] = 1.0 / self.resistance
        self.wall_equilibrium = np.zeros(self.count)
        self.wall_equilibrium[self.crossing] = self.equilibrium
        self._set_tables()
        fractions = np.outer(self.share, self._contents() / self.total).ravel()
        volume = 4.0 / 3.0 * math.pi * case.radius**3
        free = volume - self._contents() @ self.covolume
        pressure = self.total * mixed.GAS_CONSTANT * case.temperature / free
        zeros = np.zeros(len(self.crossing) + len(mixed.ENERGIES))
        head = [case.radius, 0.0, pressure / case.ambient]
        self.start = np.concatenate([head, fractions, zeros])
        # The cell of each row of the Jacobian: flow equations, wall (none), amounts, what crossed.
        own, crossed = np.arange(cells), len(self.start) - self.inside.stop
        ends = [np.full(N, cells + N), own.repeat(self.count), np.full(crossed, cells)]
        self.cell_of_row = np.concatenate([own, *ends])

    def _set_tables(self) -> None:
        gas, everything = self.gas, range(self.count)
        self.single = np.array([gas.get_thermal_conductivity_polynomial(k) for k in everything])
        self.binary = np.array(
            [[gas.get_binary_diff_coeffs_polynomial(i, j) for j in everything] for i in everything]
        )
        self.apart = 1.0 - (1.0 - 1e-15) * np.eye(self.count)  # so that a pure gas has its own
        tables = [np.reshape(one.thermo.coeffs[1:], (-1, 11)) for one in gas.species()]
        most = max(map(len, tables))
        tables = [np.concatenate([one, one[-1:].repeat(most - len(one), 0)]) for one in tables]
        self.nasa = np.array(tables)
        self.own = np.arange(self.count)
        sides = np.array([gas.reactant_stoich_coeffs, gas.product_stoich_coeffs])
        self.joining = sides * (sides.sum(axis=1) > 1.5)[:, None]  # of more than one particle

    def tolerances(self) -> Array:
        """Absolute tolerances: 1e-12 of the contents for each amount, as the mixed one else."""
        case = self.case
        head = [1e-9 * case.radius, 1e-6 * math.sqrt(case.ambient / case.density), 1e-8]
        amounts = [1e-12] * (self.cells * self.count + len(self.crossing))
        return np.array(head + amounts + [1e-9] * len(mixed.ENERGIES))

    def amounts(self, y: Array) -> Array:
        """Amounts (mol), one row a cell."""
        return y[self.inside].reshape(self.cells, self.count) * self.total

    def volumes(self, y: Array) -> Array:
        """Volume (m3) of each cell."""
        return 4.0 / 3.0 * math.pi * y[R] ** 3 * self.share

    def temperatures(self, y: Array) -> Array:
        """Temperature (K) of each cell, from its amounts and the pressure."""
        n, volume = self.amounts(y), self.volumes(y)
        free = np.maximum(volume - n @ self.covolume, TRIAL * volume)
        return y[P] * self.case.ambient * free / (n.sum(axis=1) * mixed.GAS_CONSTANT)

    def thermo(self, t: Array) -> tuple[Array, Array]:
        """Enthalpies (J/mol) and heat capacities (J/mol/K) of all species at temperatures (K)."""
        warm = np.maximum(t, mixed.COLDEST)[:, None]
        interval = (warm[:, :, None] > self.nasa[:, :-1, 1]).sum(axis=2)
        a = np.moveaxis(self.nasa[self.own, interval, 2:], -1, 0)
        cp = (a[0] / warm + a[1]) / warm + a[2]
        cp += warm * (a[3] + warm * (a[4] + warm * (a[5] + warm * a[6])))
        h = (a[1] * np.log(warm) + a[7] - a[0] / warm) + a[2] * warm
        h += warm**2 * (a[3] / 2 + warm * (a[4] / 3 + warm * (a[5] / 4 + warm * a[6] / 5)))
        h += cp * (t[:, None] - warm)
        return h * mixed.GAS_CONSTANT, cp * mixed.GAS_CONSTANT

    def transport(self, t: Array, pressure: float, x: Array) -> tuple[Array, Array]:
        """Conductivity (W/m/K) and diffusivities (m2/s) of the mixture, one row a face."""
        log = np.log(np.clip(t, mixed.COLDEST_TRANSPORT, self.hottest))
        powers = np.vander(log, 5, increasing=True)
        single = powers @ self.single.T * np.sqrt(t)[:, None]
        single[:, self.water] = [mixed._steam_conductivity(one) for one in t.tolist()]
        conductivity = 0.5 * ((x * single).sum(axis=1) + 1.0 / (x / single).sum(axis=1))
        binary = np.tensordot(powers, self.binary, axes=(1, 2))
        resistance = np.matmul(self.apart / binary, x[:, :, None])[:, :, 0]
        weight = x * self.mass
        others = weight @ self.apart / weight.sum(axis=1)[:, None]
        return conductivity, others / resistance * (t**1.5 / pressure)[:, None]

    def production(self, t: Array, n: Array, volume: Array, pressure: float) -> Array:
        """Production (mol/s) in each cell at its true density.

        A negative trace may split, as its noise then fades; it joins nothing, since beside a
        radical it would let that multiply.
        """
        forward = np.empty((len(t), self.net.shape[1]))
        reverse = np.empty_like(forward)
        density, x = n @ self.mass / volume, n / n.sum(axis=1)[:, None]
        for i in range(len(t)):
            self.gas.set_unnormalized_mole_fractions(x[i])
            self.gas.TD = t[i], density[i]
            forward[i] = self.gas.forward_rates_of_progress
            reverse[i] = self.gas.reverse_rates_of_progress
        forward[(n < 0.0) @ self.joining[0] > 0.0] = 0.0
        reverse[(n < 0.0) @ self.joining[1] > 0.0] = 0.0
        if self.dense:
            free = np.maximum(volume - n @ self.covolume, TRIAL * volume)
            activity = np.log(volume / free)[:, None]
            activity = activity + np.outer(pressure / (mixed.GAS_CONSTANT * t), self.covolume)
            shift = activity @ self.net
            forward *= np.exp(-self.ahead * shift)
            reverse *= np.exp((1.0 - self.ahead) * shift)
        return (forward - reverse) @ self.net.T * (1e3 * volume[:, None])

    def wall(self, pressure: float, x: Array, conductance: Array) -> Array:
        """Flux (mol/m2/s) into the gas of every species, through surface and half a cell.

        Surface a_k (c_eq,k - c x_w,k) = gas g_k (x_w,k - x_k) + s (x_w,k + x_k) / 2, the drift s
        such that the mole fractions at the wall sum to one.
        """
        drift, at_wall = 0.0, x
        thermal = mixed.GAS_CONSTANT * self.case.temperature
        for _ in range(WALL_ROUNDS):
            density = pressure / (thermal + pressure * float(at_wall @ self.covolume))
            below = self.surface * density + conductance + 0.5 * drift
            above = self.surface * self.wall_equilibrium + (conductance - 0.5 * drift) * x
            at_wall = above / below
            drift += float((at_wall.sum() - 1.0) / (0.5 * (x + at_wall) / below).sum())
        return self.surface * (self.wall_equilibrium - density * at_wall)

    def through_faces(self, radius: float, pressure: float, t: Array, x: Array) -> Passing:
        """Gas at the faces, and what diffuses through them and through the wall.

        Between cells temperature is interpolated; at the wall taken halfway to the liquid's.
        """
        liquid, b = self.case.temperature, self.covolume
        x_face = self.between(x)
        t_face = t[:-1] + self.outer * np.diff(t)
        t_all = np.append(t_face, 0.5 * (t[-1] + liquid))
        x_all = np.concatenate([x_face, x[-1:]])
        density = pressure / (mixed.GAS_CONSTANT * t_all + pressure * (x_all @ b))
        conductivity, diffusivity = self.transport(t_all, pressure, x_all)

        area, half = 4.0 * math.pi * radius**2, radius * (1.0 - self.centres[-1])
        inflow = area * self.wall(pressure, x[-1], density[-1] * diffusivity[-1] / half)
        heat = float(area * conductivity[-1] * (liquid - t[-1]) / half)
        passage = area * self.edges[1:-1] ** 2 / (radius * self.gaps)
        push = (passage * density[:-1])[:, None] * diffusivity[:-1] * np.diff(x, axis=0)
        correction = (push @ self.mass) / (x_face @ self.mass)
        diffused = np.zeros((self.cells + 1, self.count))
        diffused[1:-1] = correction[:, None] * x_face - push
        diffused[-1] = -inflow
        enthalpy = self.thermo(np.append(t_face, liquid))[0] + pressure * b
        warmth = np.zeros(self.cells + 1)
        warmth[1:-1] = -passage * conductivity[:-1] * np.diff(t)
        warmth[-1] = -heat
        warmth[1:] += (diffused[1:] * enthalpy).sum(axis=1)
        face = density[:-1, None] * x_face
        brought = (face * enthalpy[:-1]).sum(axis=1)
        return Passing(face, brought, diffused, warmth, inflow[self.crossing], heat)

    def between(self, x: Array) -> Array:
        """Mole fractions at the faces between cells: harmonic means, weighted by distance.

        Of second order as the arithmetic ones, but no cell can lose more of a trace than it has.
        """
        outer = self.outer[:, None]
        both, mean = x[:-1] * x[1:], (1.0 - outer) * x[1:] + outer * x[:-1]
        face = np.divide(both, mean, out=np.zeros_like(both), where=both > 0.0)
        return np.asarray(face / face.sum(axis=1)[:, None])

    def local(self, y: Array, base: Array | None = None, changed: Any = slice(None)) -> Local:
        """All but the flow itself; only `changed` cells react anew, `base` (N, K) else."""
        radius, speed, pressure = float(y[R]), float(y[U]), float(y[P]) * self.case.ambient
        n, t, room = self.amounts(y), self.temperatures(y), self.volumes(y)
        amount = n.sum(axis=1)
        gained = np.empty_like(n) if base is None else base.copy()
        gained[changed] = self.production(t[changed], n[changed], room[changed], pressure)
        passing = self.through_faces(radius, pressure, t, n / amount[:, None])

        # First law of each cell, T taken out by the equation of state: `worth` is the product of
        # pressure and volume that a mole of each species adds at constant volume.
        thermal = mixed.GAS_CONSTANT * t[:, None]
        enthalpy, cp = self.thermo(t)
        ratio = amount * mixed.GAS_CONSTANT
        ratio = ratio / ((n * cp).sum(axis=1) - ratio)
        worth = pressure * self.covolume + thermal - ratio[:, None] * (enthalpy - thermal)
        gathered = gained - np.diff(passing.diffused, axis=0)
        growth = 4.0 * math.pi * radius**2 * speed
        work = pressure * growth * self.share
        return Local(
            passing=passing,
            growth=growth,
            gained=gained,
            gathered=gathered,
            room=room - n @ self.covolume,
            ahead=(passing.face * worth[:-1]).sum(axis=1) + ratio[:-1] * passing.brought,
            behind=(passing.face * worth[1:]).sum(axis=1) + ratio[1:] * passing.brought,
            supply=(gathered * worth).sum(axis=1) - work - ratio * (work + np.diff(passing.warmth)),
        )

    def flow(self, here: Local) -> tuple[Array, Array]:
        """Flows through the faces and dp/dt that keep the pressure uniform, and their matrix."""
        matrix = np.zeros((self.cells, self.cells))
        inner = np.arange(self.cells - 1)
        matrix[inner, inner] = here.ahead
        matrix[inner + 1, inner] = -here.behind
        matrix[:, -1] = here.room
        return np.asarray(np.linalg.solve(matrix, here.supply)), np.asarray(matrix)

    def slopes_with(self, t: float, y: Array, here: Local, flows: Array) -> Array:
        """Time derivatives of the state, flows and dp/dt given."""
        case = self.case
        radius, speed, p = float(y[R]), float(y[U]), float(y[P]) * case.ambient
        through = np.zeros((self.cells + 1, self.count))
        through[1:-1] = flows[:-1, None] * here.passing.face
        omega = 2.0 * math.pi * case.frequency
        sound = -case.pressure * math.sin(omega * t)
        sound_change = -case.pressure * omega * math.cos(omega * t)
        tension, drag = 2.0 * case.surface_tension / radius, 4.0 * case.viscosity * speed / radius
        net = p - tension - drag - case.ambient - sound
        net_change = flows[-1] + (tension + drag) * speed / radius - sound_change
        rho, mach = case.density, speed / case.sound_speed
        push = (1.0 + mach) * net / rho + radius / (rho * case.sound_speed) * net_change
        kinetic = 1.5 * speed * speed
        acceleration = (push - (1.0 - mach / 3.0) * kinetic) / self.inertia(y)
        radiated = here.growth * (net - rho * (radius * acceleration + kinetic))
        _, displaced, booked = (self.wall_sums @ here.passing.inflow).tolist()
        slopes = np.empty_like(y)
        slopes[:N] = speed, acceleration, flows[-1] / case.ambient
        slopes[self.inside] = ((here.gathered - np.diff(through, axis=0)) / self.total).ravel()
        slopes[self.inside.stop : -5] = here.passing.inflow / -self.total
        slopes[-5:] = -sound * here.growth, drag * here.growth, radiated, -here.passing.heat, 0.0
        slopes[-1] = -booked - p * displaced
        slopes[-5:] /= self.energy
        return slopes

    def inertia(self, y: Array) -> float:
        """What the wall's acceleration is multiplied with, m."""
        case = self.case
        extra = 4.0 * case.viscosity / (case.density * case.sound_speed)
        return float((1.0 - y[U] / case.sound_speed) * y[R]) + extra

    def slopes(self, t: float, y: Array) -> Array:
        """Right-hand side."""
        self.evaluations += 1
        here = self.local(y)
        return self.slopes_with(t, y, here, self.flow(here)[0])

    def jacobian(self, t: float, y: Array) -> Array:
        """d slopes / d y: differences with the flows held, and the flows' own share by algebra."""
        self.jacobians += 1
        here = self.local(y)
        flows, matrix = self.flow(here)
        size, cells, count = len(y), self.cells, self.count
        base = np.append(here.supply - matrix @ flows, self.slopes_with(t, y, here, flows))
        held = np.zeros((cells + size, size))

        def differ(columns: Any, nudge: Any, where: Any) -> Array:
            other = y.copy()
            other[columns] += nudge
            there = self.local(other, here.gained, where)
            lacking = there.supply - self.flow(there)[1] @ flows
            return np.append(lacking, self.slopes_with(t, other, there, flows)) - base

        for column, least in ((R, 0.0), (U, 1.0), (P, 0.0)):
            step = NUDGE * max(abs(y[column]), least)
            held[:, column] = differ(column, step, slice(None)) / step
        contents = y[self.inside].reshape(cells, count)
        nudges = NUDGE * np.abs(contents) + 1e-2 * NUDGE * contents.sum(axis=1)[:, None]
        for colour in range(3):  # every third cell at once; each row hears at most one of them
            own = np.arange(colour, cells, 3)
            heard = self.cell_of_row + (colour - self.cell_of_row + 1) % 3 - 1
            rows = np.flatnonzero((heard >= 0) & (heard < cells))
            heard = heard[rows]
            for k in range(count):
                found = differ(N + own * count + k, nudges[own, k], own)
                held[rows, N + heard * count + k] = found[rows] / nudges[heard, k]

        flow_share = self.by_flow(y, here) @ np.linalg.solve(matrix, held[:cells])
        return np.asarray(held[cells:] + flow_share)

    def by_flow(self, y: Array, here: Local) -> Array:
        """d slopes / d (flows, dp/dt), all of them linear."""
        case, count, face = self.case, self.count, here.passing.face / self.total
        out = np.zeros((len(y), self.cells))
        for j in range(self.cells - 1):
            first = N + j * count
            out[first : first + count, j] = -face[j]
            out[first + count : first + 2 * count, j] = face[j]
        out[P, -1] = 1.0 / case.ambient
        out[U, -1] = y[R] / (case.density * case.sound_speed * self.inertia(y))
        out[-3, -1] = -here.growth * case.density * y[R] * out[U, -1] / self.energy
        return out

    def stored(self, y: Array) -> float:
        """Energy (J) of liquid, surface, ambient and gas."""
        case, radius, n, t = self.case, float(y[R]), self.amounts(y), self.temperatures(y)
        gas = self.thermo(t)[0] - mixed.GAS_CONSTANT * t[:, None] - self.zero
        return float(
            2.0 * math.pi * case.density * radius**3 * y[U] ** 2
            + 4.0 * math.pi * radius**2 * case.surface_tension
            + case.ambient * 4.0 / 3.0 * math.pi * radius**3
            + (n * gas).sum()
        )

    def element_error(self, y: Array) -> float:
        """Largest |gas + crossed - start| / (start + |crossed|) over the elements at the start."""
        gas, start = (self._atoms() @ self.amounts(z).sum(axis=0) for z in (y, self.start))
        crossed = self._atoms()[:, self.crossing] @ y[self.inside.stop : -5] * self.total
        error = np.abs(gas + crossed - start)[start > 0.0]
        return float((error / (start + np.abs(crossed))[start > 0.0]).max())
