"""A second opinion on the mixed bubble: the same equations, written plainly.

SciPy's LSODA integrates wall motion, heat, exchange and chemistry as one system, with Cantera
called in the right-hand side (one state set and one rate call an evaluation).  Nothing of the
product is imported, so agreement with it is evidence about both; it is also the benchmark's
baseline.  SI and mol inside, except that amounts are carried as fractions of the first contents.

Sources: wall motion Keller & Miksis (1980); wall layers Toegel, Gompf, Pecha & Lohse (2000);
conductivity of steam IAPWS R15-11 (2011), dilute gas.
"""

import math
import time
from dataclasses import dataclass, field
from typing import Any

import cantera as ct
import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

Array = NDArray[np.float64]

GAS_CONSTANT = ct.gas_constant / 1e3
AVOGADRO = ct.avogadro / 1e3
RADICALS = ("OH", "H", "O", "HO2", "H2O2", "O3")
RADICALS += ("N", "NH", "NH2", "NH3", "NNH", "NO", "NO2", "NO3", "N2O", "HNO", "HONO", "HONO2")
ENERGIES = ("work", "viscous", "radiation", "heat", "carried")
STEAM = (2.443221e-3, 1.323095e-2, 6.770357e-3, -3.454586e-3, 4.096266e-4)
COLDEST = 200.0  # K, below it c_p is held
COLDEST_TRANSPORT = 100.0  # K, the transport polynomials are held below
FLOOR = 20.0  # K, trial temperatures below it are trials only


@dataclass(frozen=True)
class Case:
    """One bubble in one sound field (SI units; covolumes in m3/mol)."""

    frequency: float
    pressure: float
    radius: float
    temperature: float
    ambient: float
    density: float
    sound_speed: float
    viscosity: float
    surface_tension: float
    saturation_pressure: float
    mixture: dict[str, float]
    mechanism_path: str
    phase: str = "gas"  # of the mechanism file
    accommodation_water: float = 0.4
    accommodation_radicals: float = 0.4
    rtol: float = 1e-6
    vapour: bool = True
    uptake: bool = True
    excluded_volume: bool = True
    dense_equilibrium: bool = True
    covolumes: dict[str, float] = field(default_factory=dict)
    # Moves the zero of `carried` and `stored` only: 43.99 kJ/mol at 25 degC (IAPWS-95).
    latent_heat: float = 43.99e3


@dataclass(frozen=True)
class Result:
    """What one run gave: SI, molecules, joules."""

    t_end: float
    peak_temperature: float
    time_of_peak: float
    lowest_temperature: float
    max_radius: float
    min_radius: float
    delivered: dict[str, float]
    left: dict[str, float]
    peak: dict[str, float]
    energy: dict[str, float]
    element_error: float
    energy_error: float
    steps: int
    evaluations: int
    wall_seconds: float
    microseconds_per_evaluation: float


def run(case: Case, t_end: float) -> Result:
    """Integrate from rest to `t_end` (s) and sum up; RuntimeError when LSODA gives up."""
    bubble = _Bubble(case)
    started = time.perf_counter()
    solution = _integrate(bubble, t_end)
    seconds = time.perf_counter() - started
    return _summary(bubble, solution, seconds)


def window_end(case: Case) -> float:
    """Time (s) of the second main expansion maximum from rest.

    A main maximum has no larger radius within half a period before or after it.  Where no
    second one comes within four periods, the four periods are the window.
    """
    period = 1.0 / case.frequency
    for span in (2.5 * period, 4.0 * period):
        solution = _integrate(_Bubble(case), span, events=_turning)
        radii = np.reshape(solution.y_events[0], (-1, solution.y.shape[0]))[:, 0]
        main = _main_maxima(solution.t_events[0], radii, span, period)
        if len(main) > 1:
            return main[1]
    return span


def _main_maxima(times: Array, radii: Array, span: float, period: float) -> list[float]:
    """Times of the maxima that are the largest within half a period on both sides."""
    kept = []
    for k, t in enumerate(times):
        near = np.abs(times - t) <= 0.5 * period
        if t + 0.5 * period <= span and radii[k] >= radii[near].max():
            kept.append(float(t))
    return kept


def _turning(_t: float, y: Array) -> float:
    """Zero at the extremes of the radius; from + to - at a maximum."""
    return float(y[1])


_turning.direction = -1.0  # type: ignore[attr-defined]


def _integrate(bubble: "_Bubble", t_end: float, events: Any = None) -> Any:
    solution = solve_ivp(
        bubble.slopes,
        (0.0, t_end),
        bubble.start,
        method="LSODA",
        events=events,
        rtol=bubble.case.rtol,
        atol=bubble.tolerances(),
        first_step=1e-4 / bubble.case.frequency,
    )
    if not solution.success:
        raise RuntimeError(f"LSODA stopped at t = {solution.t[-1]:.6g} s: {solution.message}")
    return solution


class _Bubble:
    """Constants of a case, worked out once, and the right-hand side.

    State: R, U, T; n_k / N0; delivered / N0 of the crossing species; the five energies / E0.
    """

    def __init__(self, case: Case) -> None:
        self.case = case
        self.gas = ct.Solution(case.mechanism_path, case.phase, transport_model="mixture-averaged")
        self.names: list[str] = list(self.gas.species_names)
        self.count = len(self.names)
        self.water = self.names.index("H2O")
        self.mass = np.array(self.gas.molecular_weights) * 1e-3
        covolumes = case.covolumes if case.excluded_volume else {}
        self.covolume = np.array([covolumes.get(name, 0.0) for name in self.names])
        self.sums = np.array([np.ones(self.count), self.mass, self.covolume])
        self.dense = case.dense_equilibrium and bool(self.covolume.any())
        net = self.gas.product_stoich_coeffs - self.gas.reactant_stoich_coeffs
        self.net = np.ascontiguousarray(net)
        made = net.sum(axis=0)
        self.ahead = np.where(made < 0.0, 1.0, np.where(made > 0.0, 0.0, 0.5))
        self._set_wall()
        self._set_transport()
        contents = self._contents()
        self.total = float(contents.sum())
        self.energy = case.ambient * 4.0 / 3.0 * math.pi * case.radius**3
        at_rest = [case.radius, 0.0, case.temperature]
        zeros = np.zeros(len(self.crossing) + len(ENERGIES))
        self.start = np.concatenate([at_rest, contents / self.total, zeros])

    def _set_wall(self) -> None:
        """What crosses, its resistance at the wall, its equilibrium and its enthalpy there."""
        case = self.case
        crossing = ["H2O"] if case.vapour else []
        crossing += [k for k in RADICALS if case.uptake and k in self.names]
        self.crossing = np.array([self.names.index(k) for k in crossing], dtype=int)
        thermal = GAS_CONSTANT * case.temperature
        alpha = np.full(len(crossing), case.accommodation_radicals)
        self.equilibrium = np.zeros(len(crossing))
        if case.vapour:
            alpha[0] = case.accommodation_water
            self.equilibrium[0] = case.saturation_pressure / thermal
        self.crossing_mass = self.mass[self.crossing]
        speed = np.sqrt(8.0 * thermal / (math.pi * self.crossing_mass))
        self.resistance = 4.0 / (alpha * speed)
        liquid = self.enthalpies(case.temperature)
        self.zero = self._zero_of_enthalpy(liquid)
        self.wall_sums = np.array([liquid, self.covolume, liquid - self.zero])[:, self.crossing]

    def _zero_of_enthalpy(self, enthalpy: Array) -> Array:
        """What the zero takes off (J/mol): liquid water, O2, N2, noble gases at T_l are zero."""
        at = dict(zip(self.names, enthalpy.tolist(), strict=True))
        per_atom = {"O": at["O2"] / 2.0, "N": at.get("N2", 0.0) / 2.0}
        per_atom["H"] = (at["H2O"] - self.case.latent_heat - per_atom["O"]) / 2.0
        for name in self.gas.element_names:
            per_atom.setdefault(name, at.get(name, at.get(name.upper(), 0.0)))
        return np.asarray([per_atom[name] for name in self.gas.element_names] @ self._atoms())

    def _atoms(self) -> Array:
        rows = [[self.gas.n_atoms(k, e) for k in self.names] for e in self.gas.element_names]
        return np.array(rows, dtype=float)

    def _set_transport(self) -> None:
        """Cantera's polynomials in ln T as one matrix: conductivities, then diffusivities."""
        gas, everything = self.gas, range(self.count)
        self.hottest = float(gas.max_temp)
        rows = [gas.get_thermal_conductivity_polynomial(k) for k in everything]
        for i in self.crossing.tolist():
            rows += [gas.get_binary_diff_coeffs_polynomial(i, j) for j in everything]
        self.polynomials = np.array(rows)
        self.others = 1.0 - np.eye(self.count)[self.crossing]

    def _contents(self) -> Array:
        """Amounts (mol) at rest: vapour at saturation, dry gas making up Laplace's pressure."""
        case = self.case
        thermal = GAS_CONSTANT * case.temperature
        pressure = case.ambient + 2.0 * case.surface_tension / case.radius
        volume = 4.0 / 3.0 * math.pi * case.radius**3
        dry = np.array([case.mixture.get(name, 0.0) for name in self.names])
        dry = dry / dry.sum()
        vapour = case.saturation_pressure / thermal * volume if case.vapour else 0.0
        free = volume - vapour * self.covolume[self.water]
        amount = (pressure * free - vapour * thermal) / (thermal + pressure * (dry @ self.covolume))
        dry *= amount
        dry[self.water] += vapour
        return np.asarray(dry)

    def tolerances(self) -> Array:
        """Absolute tolerances: a billionth of R0, 1e-13 of the contents, 1e-9 of p0 V0."""
        case = self.case
        wall = [1e-9 * case.radius, 1e-6 * math.sqrt(case.ambient / case.density), 1e-4]
        amounts = [1e-13] * self.count + [1e-12] * len(self.crossing)
        return np.array(wall + amounts + [1e-9] * len(ENERGIES))

    def enthalpies(self, temperature: float) -> Array:
        """Molar enthalpies (J/mol), c_p held below 200 K."""
        warm = max(temperature, COLDEST)
        self.gas.TP = warm, ct.one_atm
        return self._thermo(temperature, warm)[0]

    def _thermo(self, temperature: float, warm: float) -> tuple[Array, Array]:
        """Molar enthalpies (J/mol) and heat capacities (J/mol/K), the gas being set already."""
        cp = self.gas.standard_cp_R * GAS_CONSTANT
        enthalpy = self.gas.standard_enthalpies_RT * (GAS_CONSTANT * warm)
        if temperature < warm:
            enthalpy += cp * (temperature - warm)
        return enthalpy, cp

    def _transport(self, temperature: float, x: Array) -> tuple[float, Array]:
        """Conductivity (W/m/K) and, of what crosses, sum of x_j / D_jk at 1 Pa (s/m2).

        The polynomials in ln T are held at the ends of their range, beyond which they run away.
        """
        log = math.log(min(max(temperature, COLDEST_TRANSPORT), self.hottest))
        square = log * log
        values = self.polynomials @ np.array([1.0, log, square, square * log, square * square])
        root = math.sqrt(temperature)
        single = values[: self.count] * root
        single[self.water] = _steam_conductivity(temperature)
        conductivity = 0.5 * (float(x @ single) + 1.0 / float(x @ (1.0 / single)))
        diffusion = values[self.count :].reshape(self.others.shape)
        return conductivity, (self.others / diffusion) @ x / (temperature * root)

    def _dense_production(self, volume: float, free: float, amount: float) -> Array:
        """Production (mol/s) with activities c_k V/(V-B) exp(b_k p/RT), the gas being set.

        The factor falls on the direction that joins particles, else on both evenly.
        """
        activity = math.log(volume / free) + self.covolume * (amount / free)
        shift = activity @ self.net
        forward = self.gas.forward_rates_of_progress * np.exp(-self.ahead * shift)
        reverse = self.gas.reverse_rates_of_progress * np.exp((1.0 - self.ahead) * shift)
        return np.asarray(self.net @ (forward - reverse)) * (1e3 * volume)

    def slopes(self, t: float, y: Array) -> Array:
        """Right-hand side."""
        case, gas, crossing, count = self.case, self.gas, self.crossing, self.count
        radius, speed, temperature = y[:3].tolist()
        radius = max(radius, 0.02 * case.radius)
        temperature = max(temperature, FLOOR)
        n = y[3 : 3 + count] * self.total
        amount, mass, excluded = (self.sums @ n).tolist()
        x = n / amount
        area = 4.0 * math.pi * radius * radius
        volume = area * radius / 3.0
        growth = area * speed
        free = max(volume - excluded, 1e-3 * volume)
        thermal = GAS_CONSTANT * temperature
        p = amount * thermal / free

        warm = max(temperature, COLDEST)
        gas.set_unnormalized_mole_fractions(x)
        gas.TD = temperature, mass / volume
        if self.dense:
            gained = self._dense_production(volume, free, amount)
        else:
            gained = gas.net_production_rates * (1e3 * volume)
        if temperature < warm:  # rates go on below 200 K, the thermo polynomials do not
            gas.TD = warm, mass / volume
        enthalpy, cp = self._thermo(temperature, warm)
        inner = enthalpy - thermal
        capacity = float(n @ cp)

        # Layers sqrt(R D / |U|), at most R / pi; written so that U = 0 divides nothing.
        conductivity, hindrance = self._transport(temperature, x)
        moving, still = abs(speed), math.pi**2 / radius
        chi = conductivity * volume / capacity
        layer = math.sqrt(radius * chi / max(moving, still * chi))
        heat = area * conductivity * (case.temperature - temperature) / layer
        present = n[crossing]
        diffusivity = (1.0 - present * (self.crossing_mass / mass)) / (p * hindrance)
        crossed = np.sqrt(radius / (diffusivity * np.maximum(moving, still * diffusivity)))
        inflow = (self.equilibrium - present / volume) * area / (crossed + self.resistance)

        # Enthalpy that crosses; the wall's terms in u_k(T) are within the sum over `change`.
        brought, displaced, booked = (self.wall_sums @ inflow).tolist()
        change = gained  # renamed, not copied
        change[crossing] += inflow
        warming = (heat - p * growth + brought + p * displaced - float(change @ inner)) / (
            capacity - amount * GAS_CONSTANT
        )
        amount_change, _, excluded_change = (self.sums @ change).tolist()
        p_change = p * (
            amount_change / amount + warming / temperature - (growth - excluded_change) / free
        )

        omega = 2.0 * math.pi * case.frequency
        sound = -case.pressure * math.sin(omega * t)
        sound_change = -case.pressure * omega * math.cos(omega * t)
        rho, c, mu = case.density, case.sound_speed, case.viscosity
        tension = 2.0 * case.surface_tension / radius
        drag = 4.0 * mu * speed / radius
        net = p - tension - drag - case.ambient - sound
        net_change = p_change + (tension + drag) * speed / radius - sound_change
        mach = speed / c
        push = (1.0 + mach) * net / rho + radius / (rho * c) * net_change
        kinetic = 1.5 * speed * speed
        acceleration = (push - (1.0 - mach / 3.0) * kinetic) / (
            (1.0 - mach) * radius + 4.0 * mu / (rho * c)
        )
        radiated = growth * (net - rho * (radius * acceleration + kinetic))
        carried = -booked - p * displaced
        slopes = np.empty_like(y)
        slopes[:3] = speed, acceleration, warming
        slopes[3 : 3 + count] = change / self.total
        slopes[3 + count : -5] = inflow / -self.total
        slopes[-5:] = -sound * growth, drag * growth, radiated, -heat, carried
        slopes[-5:] /= self.energy
        return slopes

    def stored(self, y: Array) -> float:
        """Energy (J) of liquid, surface, ambient and gas."""
        case = self.case
        radius, speed, temperature = y[:3].tolist()
        gas = self.enthalpies(temperature) - GAS_CONSTANT * temperature - self.zero
        return float(
            2.0 * math.pi * case.density * radius**3 * speed**2
            + 4.0 * math.pi * radius**2 * case.surface_tension
            + case.ambient * 4.0 / 3.0 * math.pi * radius**3
            + self.total * (y[3 : 3 + self.count] @ gas)
        )

    def element_error(self, y: Array) -> float:
        """Largest |gas + crossed - start| / (start + |crossed|) over the elements present."""
        atoms, first, last = self._atoms(), 3, 3 + self.count
        start = atoms @ self.start[first:last]
        crossed = atoms[:, self.crossing] @ y[last:-5]
        scale = start + np.abs(crossed)
        present = scale > 0.0
        drift = np.abs(atoms @ y[first:last] + crossed - start)
        return float((drift[present] / scale[present]).max())


def _steam_conductivity(temperature: float) -> float:
    """Dilute steam, W/m/K (IAPWS R15-11, eq. 16)."""
    inverse = 647.096 / temperature
    total = 0.0
    for coefficient in reversed(STEAM):
        total = total * inverse + coefficient
    return 1e-3 / (math.sqrt(inverse) * total)


def _summary(bubble: _Bubble, solution: Any, seconds: float) -> Result:
    t, y, last = solution.t, solution.y, solution.y[:, -1]
    inside = slice(3, 3 + bubble.count)
    molecules = bubble.total * AVOGADRO
    crossed = [bubble.names[k] for k in bubble.crossing]
    amounts, delivered = y[inside] * molecules, last[inside.stop : -5] * molecules
    time_of_peak, hottest = _peak(t, y[2])
    energy = dict(zip(ENERGIES, (last[-5:] * bubble.energy).tolist(), strict=True))
    energy["stored"] = bubble.stored(last) - bubble.stored(bubble.start)
    spent = sum(value for name, value in energy.items() if name != "work")
    energy["residual"] = energy["work"] - spent
    return Result(
        t_end=float(t[-1]),
        peak_temperature=hottest,
        time_of_peak=time_of_peak,
        lowest_temperature=float(y[2].min()),
        max_radius=_peak(t, y[0])[1],
        min_radius=-_peak(t, -y[0])[1],
        delivered=dict(zip(crossed, delivered.tolist(), strict=True)),
        left=dict(zip(bubble.names, amounts[:, -1].tolist(), strict=True)),
        peak=dict(zip(bubble.names, amounts.max(axis=1).tolist(), strict=True)),
        energy=energy,
        element_error=bubble.element_error(last),
        energy_error=abs(energy["residual"]) / abs(energy["work"]),
        steps=len(t) - 1,
        evaluations=int(solution.nfev),
        wall_seconds=seconds,
        microseconds_per_evaluation=1e6 * seconds / int(solution.nfev),
    )


def _peak(t: Array, values: Array) -> tuple[float, float]:
    """Place and height of the largest value, by a parabola through it and its neighbours."""
    k = int(values.argmax())
    if k in (0, len(values) - 1):
        return float(t[k]), float(values[k])
    left, right = t[k - 1] - t[k], t[k + 1] - t[k]
    rise, fall = (values[k - 1] - values[k]) / left, (values[k + 1] - values[k]) / right
    bend = (fall - rise) / (right - left)
    slope = rise - bend * left
    if bend >= 0.0:
        return float(t[k]), float(values[k])
    return float(t[k] - slope / (2.0 * bend)), float(values[k] - slope**2 / (4.0 * bend))
