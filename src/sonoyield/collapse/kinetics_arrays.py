"""The arrays that the compiled kinetics work on: a mechanism's tables, and room for one state."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sonoyield.describe.gas import Array

# Without a sign, so that the compiled code need not ask whether an index counts from the end.
Indices = NDArray[np.uint32]

SLOTS = 3  # molecules on a side
LINDEMANN, FIXED, TROE = 0, 1, 2  # how a falloff is blended; FIXED: Troe's centre is a constant
SMALLEST = 1e-300  # of a reduced pressure and of a falloff's centre, as in Cantera


class Tables(NamedTuple):
    """A mechanism as arrays: R reactions, K species, B third bodies, F falloffs, V efficiencies.

    Slots hold up to three species on either side, index K where one is empty. ``scaled`` says what
    a reaction is multiplied by: 0 nothing, 1 ... B a third body, B+1 ... B+F a falloff. Lists of
    entries (``owner``, ``member`` ...) add up to what is asked for one product at a time.
    """

    logarithm: Array  # (R,) ln |A|, A in mol, m3, s; of a falloff at high pressure; ln 1 for 0
    exponent: Array  # (R,) b
    activation: Array  # (R,) Ea/R_u, K
    sign: Array  # (R,) of A, or 0
    backward: Array  # (R,) the same, and 0 where a reaction does not run back
    share: Array  # (R,) of the dense-gas factor that the forward direction takes
    reactants: Indices  # (R, 3) slots
    products: Indices  # (R, 3) slots
    scaled: Indices  # (R,)
    owner: Indices  # (E,) reaction of a net stoichiometric coefficient
    member: Indices  # (E,) species of it
    coefficient: Array  # (E,)
    slope_owner: Indices  # (D, 2) reaction and slot (0 ... 5, both sides) of a derivative
    slope_place: Indices  # (D, 2) where it belongs in the Jacobian
    slope_weight: Array  # (D,) the net coefficient of it
    bodies: Indices  # (1+B+F,) the third body that belongs to a scale, from 0; of scale 0: 0
    colliding: Array  # (K, B) constant efficiencies
    varied: Indices  # (V, 2) third body and species of an efficiency that depends on temperature
    variation: Array  # (V, 3) ln A, b, Ea/R_u of it
    helped: Indices  # (H, 2) entry and third body of the reactions that have one
    efficiency: Array  # (B, K) as colliding
    falling: Indices  # (F, 2) reaction and blend of a falloff
    low: Array  # (F, 3) ln A, b, Ea/R_u at low pressure
    centre: Array  # (F, 5) log10 of a fixed centre, Troe's a, 1/T3, 1/T1, T2
    unit: Array  # (1,) ln of the standard pressure over R_u, mol K/m3


class Scratch(NamedTuple):
    """Room for one state; nothing in it outlives a call but what a function says it leaves."""

    forward: Array  # (R,)
    reverse: Array  # (R,)
    net: Array  # (R,) net rate of progress
    warmed: Array  # (R,) its derivative by temperature
    helping: Array  # (R,) its derivative by the concentration of the third body
    partial: Array  # (R, 6) its derivatives by the concentrations of the slots
    filled: Array  # (K+1,) concentrations and the 1 of an empty slot
    potential: Array  # (K+1,) g0/(R_u T) for unit concentration
    crowd: Array  # (K+1,) crowding
    energy: Array  # (K+1,) u/(R_u T^2)
    scale: Array  # (1+B+F,)
    slope: Array  # (1+B+F,) derivative of scale by the third body's concentration
    warming: Array  # (1+B+F,) derivative of ln scale by temperature
    body: Array  # (B,) third-body concentration
    body_warming: Array  # (B,) its derivative by temperature
    varying: Array  # (V,) efficiencies


def new_scratch(tables: Tables) -> Scratch:
    """New working arrays, one set for each thread; an empty slot stays at zero."""
    reactions, scales = tables.sign.size, tables.bodies.size
    bodies, species = tables.efficiency.shape
    forward, reverse, net, warmed, helping = np.zeros((5, reactions))
    filled, potential, crowd, energy = np.zeros((4, species + 1))
    scale, slope, warming = np.zeros((3, scales))
    body, body_warming = np.zeros((2, bodies))
    return Scratch(
        forward=forward,
        reverse=reverse,
        net=net,
        warmed=warmed,
        helping=helping,
        partial=np.zeros((reactions, 2 * SLOTS)),
        filled=filled,
        potential=potential,
        crowd=crowd,
        energy=energy,
        scale=scale,
        slope=slope,
        warming=warming,
        body=body,
        body_warming=body_warming,
        varying=np.zeros(len(tables.varied)),
    )
