"""Write the Cantera mechanisms and SOURCES.md from the CSV tables beside this file.

``python mechanisms/build.py`` writes them in place; ``--check`` writes nothing and
exits 1 when a file differs from what the tables give. ``collision_limit.csv`` is not an input: it
is what ``collision_limit.py`` found in the mechanism last written.

Above 6000 K, where the source of most molecules ends, heat capacities are held at their 6000 K
value, enthalpy and entropy continuous. Their polynomials run away there (H2O below zero at
12000 K). The other choice, a fall with T^-2 to the classical limit of a rigid rotor with harmonic
vibrations, was tried on the six diatomics whose source reaches 20000 K: held enthalpies are off by
1.8 % (root mean square) at 8000 K, 4.9 % at 10000 K and 9.0 % at 12000 K, falling ones by 3.4, 5.8
and 8.6 %. Weakly bound O3, HO2 and H2O2 may fall sooner; they are traces there. Bubbles seldom
pass 9000 K, so they are held. A 10 % error of every held heat capacity moves delivered OH by
0.2 % in a xenon bubble of 9050 K.
"""

from __future__ import annotations

import argparse
import csv
import json
import os
import sys
from collections.abc import Iterable, Sequence
from pathlib import Path

Row = dict[str, str]

HERE = Path(__file__).resolve().parent
# Cantera fits the transport of a phase over the range common to its species, with four powers of
# ln T. Up to 20000 K that leaves argon 23 % and xenon 50 % too low at 300 K. The hydrogen atom's
# bound, and with it the fit, ends here instead; its polynomial goes on unchanged, so no property
# moves.
TRANSPORT_TOP = "8000.0"  # K: fits within 4 % (O3 14 %) of kinetic theory from 250 K to here
REFERENCE_PRESSURE = 1.0e5  # Pa: NASA Glenn and ATcT tables hold for 1 bar, Cantera assumes 1 atm

# Beside the whole phase stands one for each noble gas alone, since those that are absent stay so.
NOBLE = ("AR", "HE", "KR", "XE")
LEAN = "  reactions: declared-species\n  skip-undeclared-third-bodies: true\n"

H2O_O2 = ("H2", "H", "O", "O2", "OH", "H2O", "HO2", "H2O2", "O3", "AR", "HE", "KR", "XE")
OXIDES = ("N2", "N", "NO", "NO2", "N2O", "HNO", "HONO", "NO3", "HONO2")
HYDRIDES = ("NH", "NH2", "NH3", "NNH")
MECHANISMS: dict[str, tuple[str, ...]] = {
    "h2o_o2": H2O_O2,
    "h2o_o2_n2": H2O_O2[:9] + OXIDES + HYDRIDES + H2O_O2[9:],
}


def render(folder: Path = HERE) -> dict[str, str]:
    """Text of every generated file, by file name.

    Raises FileNotFoundError, KeyError or ValueError if a table, row or number is missing.
    """
    tables = Tables(folder)
    texts = {f"{name}.yaml": mechanism_text(name, tables) for name in MECHANISMS}
    return texts | {"SOURCES.md": sources_text(tables)}


def differing(folder: Path = HERE) -> list[str]:
    """Names of the generated files that are missing or not what the tables give."""
    return [
        name
        for name, text in render(folder).items()
        if not (folder / name).is_file() or (folder / name).read_text(encoding="utf-8") != text
    ]


def write(folder: Path = HERE) -> None:
    """Write every generated file into `folder`, each replaced in one step."""
    for name, text in render(folder).items():
        replace_file(folder / name, text)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; return the exit code."""
    parser = argparse.ArgumentParser(description="Write mechanisms and SOURCES.md from tables.")
    parser.add_argument("--check", action="store_true", help="only compare, exit 1 if different")
    if not parser.parse_args(arguments).check:
        write()
        return 0
    for name in (stale := differing()):
        print(f"{name} differs from the tables: run python mechanisms/build.py", file=sys.stderr)
    return 1 if stale else 0


class Tables:
    """The CSV tables, species rows by name, in file order."""

    def __init__(self, folder: Path) -> None:
        self.reactions = read_rows(folder / "reactions.csv")
        self.thermo = by_species(folder / "thermo.csv")
        self.covolumes = by_species(folder / "covolumes.csv")
        self.transport = by_species(folder / "transport.csv")
        self.collisions = read_rows(folder / "collision_limit.csv")
        self.aqueous = read_rows(folder / "aqueous_reactions.csv")
        self.dissolved = read_rows(folder / "aqueous_transport.csv")
        self.scavengers = read_rows(folder / "scavengers.csv")
        self.intervals: dict[str, list[Row]] = {}
        for row in read_rows(folder / "thermo_coefficients.csv"):
            self.intervals.setdefault(row["species"], []).append(row)


def read_rows(path: Path) -> list[Row]:
    with path.open(newline="", encoding="utf-8") as handle:
        return list(csv.DictReader(handle))


def by_species(path: Path) -> dict[str, Row]:
    return {row["species"]: row for row in read_rows(path)}


def pairs(text: str, between: str) -> list[tuple[str, str]]:
    """Split ``H:2;O:1`` or ``AR=0.7;HE=0.6`` into its pairs."""
    split = (item.partition(between) for item in text.split(";") if item)
    return [(key, value) for key, _, value in split]


def reactions_of(species: Iterable[str], tables: Tables) -> list[Row]:
    """Rows whose every reactant and product is among `species`."""
    allowed = {*species, "M", "+", "(+M)", "<=>", "=>"}
    return [row for row in tables.reactions if allowed.issuperset(row["equation"].split())]


def number(value: float | str) -> str:
    """A float as every YAML 1.1 reader takes it: with a point and a signed exponent."""
    value = float(value)
    if value == 0.0 or 1e-3 <= abs(value) < 1e5:
        return repr(value + 0.0)
    mantissa, exponent = f"{value:.12e}".split("e")
    mantissa = mantissa.rstrip("0")
    return f"{mantissa}{'0' if mantissa.endswith('.') else ''}e{exponent}"


def name_of(species: str) -> str:
    """Quote a name that YAML 1.1 reads as a truth value (NO) or might (N)."""
    return f'"{species}"' if species in ("NO", "N") else species


def flow(items: Iterable[tuple[str, str]]) -> str:
    return "{" + ", ".join(f"{name_of(key)}: {value}" for key, value in items) + "}"


def mechanism_text(name: str, tables: Tables) -> str:
    species = MECHANISMS[name]
    reactions = reactions_of(species, tables)
    blocks = [header_text(name, species, len(reactions)), "species:"]
    blocks += [species_text(one, tables) for one in species]
    blocks += ["\nreactions:"] + [reaction_text(row, species) for row in reactions]
    return "\n".join(blocks) + "\n"


def header_text(name: str, species: Sequence[str], count: int) -> str:
    phases = [phase_text("gas", species)]
    for noble in (one for one in species if one in NOBLE):
        kept = [one for one in species if one == noble or one not in NOBLE]
        phases.append(phase_text(f"gas-{noble}", kept) + LEAN)
    return f"""\
# Generated by build.py from the CSV tables beside it: change those, never this file.
description: |-
  {name}: {len(species)} species, {count} reactions. Sources and provenance: SOURCES.md.
  Fields of our own. Species: covolume (Noble-Abel, m3/mol), source-range (K, where the
  published polynomials hold). Reactions: uncertainty-factor.

units: {{length: cm, quantity: mol, activation-energy: cal/mol}}

phases:
{"".join(phases)}"""


def phase_text(phase: str, species: Sequence[str]) -> str:
    return f"""\
- name: {phase}
  thermo: ideal-gas
  species: [{", ".join(map(name_of, species))}]
  kinetics: gas
  transport: mixture-averaged
  state: {{T: 300.0, P: 1.0e+05}}
"""


def species_text(name: str, tables: Tables) -> str:
    thermo = tables.thermo[name]
    span = ", ".join(number(thermo[key]) for key in ("Tmin_K", "Tmax_source_K"))
    return "\n".join([
        f"- name: {name_of(name)}",
        f"  composition: {flow(pairs(thermo['composition'], ':'))}",
        *thermo_lines(tables.intervals[name]),
        *transport_lines(tables.transport[name]),
        f"  covolume: {number(tables.covolumes[name]['b_recommended_m3_mol'])}  # m3/mol",
        f"  source-range: [{span}]  # K",
    ])  # fmt: skip


def thermo_lines(intervals: Sequence[Row]) -> list[str]:
    bounds = [intervals[0]["Tlow_K"]] + [row["Thigh_K"] for row in intervals]
    bounds[-1] = TRANSPORT_TOP if intervals[0]["species"] == "H" else bounds[-1]
    return [
        "  thermo:",
        "    model: NASA9",
        f"    reference-pressure: {number(REFERENCE_PRESSURE)}",
        f"    temperature-ranges: [{', '.join(map(number, bounds))}]",
        "    data:",
        *(f"    - [{', '.join(coefficients(row))}]" for row in intervals),
    ]


def coefficients(row: Row) -> list[str]:
    """The nine coefficients; b1 gets the shift of the formation enthalpy (in K, as b1 is)."""
    b1 = round(float(row["b1"]) + float(row["b1_shift_to_ATcT_K"]), 6)
    return [number(row[f"a{i}"]) for i in range(1, 8)] + [number(b1), number(row["b2"])]


def transport_lines(row: Row) -> list[str]:
    lines = ["  transport:", "    model: gas", f"    geometry: {row['geometry']}"]
    lines += [f"    diameter: {number(row['diameter_A'])}"]
    lines += [f"    well-depth: {number(row['well_depth_K'])}"]
    for column in ("dipole_D", "polarizability_A3", "rotational_relaxation"):
        key = "rotational-relaxation" if column.startswith("rot") else column.split("_")[0]
        lines += [f"    {key}: {number(row[column])}"] * (float(row[column]) != 0.0)
    return lines


def reaction_text(row: Row, species: Sequence[str]) -> str:
    kind = row["type"]
    lines = [f'- equation: "{row["equation"]}"', f'  id: "{row["id"]}"']
    if kind == "linear-Burke-troe":
        lines += linear_burke_lines(row, species)
    elif kind == "falloff":
        lines += ["  type: falloff", *falloff_lines(row, "  "), *efficiency_lines(row, species)]
    elif kind.startswith("three-body"):
        lines += ["  type: three-body", rate_line(row), *efficiency_lines(row, species)]
    elif kind in ("elementary", "irreversible"):
        # said in so many words, or Cantera takes NO3 + NO2 <=> NO + NO2 + O2 for a three-body step
        lines += ["  type: elementary", rate_line(row)]
    else:
        raise ValueError(f"reactions.csv, {row['id']}: unknown type {kind!r}")
    lines += ["  duplicate: true"] * (row["duplicate"] == "yes")
    return "\n".join([*lines, f"  uncertainty-factor: {number(row['f_uncertainty'])}"])


def arrhenius(a: str, b: str, energy: str) -> str:
    return flow([("A", number(a)), ("b", number(b)), ("Ea", number(energy))])


def rate_line(row: Row) -> str:
    return f"  rate-constant: {arrhenius(row['A'], row['n'], row['Ea_cal_mol'])}"


def falloff_lines(row: Row, indent: str) -> list[str]:
    low = arrhenius(row["A_low"], row["n_low"], row["Ea_low_cal_mol"])
    high = arrhenius(row["A"], row["n"], row["Ea_cal_mol"])
    lines = [f"{indent}low-P-rate-constant: {low}", f"{indent}high-P-rate-constant: {high}"]
    if row["troe"]:
        troe = zip(("A", "T3", "T1", "T2"), map(number, row["troe"].split(";")), strict=False)
        lines.append(f"{indent}Troe: {flow(troe)}")
    return lines


def efficiency_lines(row: Row, species: Sequence[str]) -> list[str]:
    kept = [(k, number(v)) for k, v in pairs(row["efficiencies"], "=") if k in species]
    return [f"  efficiencies: {flow(kept)}"] if kept else []


def linear_burke_lines(row: Row, species: Sequence[str]) -> list[str]:
    lines = ["  type: linear-Burke", "  colliders:", "  - name: M", "    type: falloff"]
    lines += falloff_lines(row, "    ")
    for one in json.loads(row["colliders_json"]):
        if one["name"] in species:
            efficiency = arrhenius(one["A"], one["b"], one["Ea"])
            lines += [f"  - name: {name_of(one['name'])}", f"    efficiency: {efficiency}"]
    return lines


SOURCES: dict[str, tuple[str, str, dict[str, str]]] = {
    "Reactions": ("reactions", "f: uncertainty factor of the rate constant. Seen: the figure was "
        "read in the text named, not always the primary paper; memory and assigned figures are "
        "marked so.", {"id": "id", "equation": "equation", "source": "source", "seen in": "seen_in",
        "provenance": "provenance", "f": "f_uncertainty", "source of f": "f_source",
        "provenance of f": "f_provenance", "T range (K)": "T_range_K", "notes": "notes"}),
    "Thermochemistry": ("thermo", "NASA-9 polynomials at 1 bar. Where a formation enthalpy of the "
        "Active Thermochemical Tables (ATcT) is known, all intervals are shifted by one constant "
        "to meet it. Above 6000 K, where most molecular sources end, cp is held and h and s are "
        "continuous. Against a rigid rotor with harmonic vibrations the held cp is 8.7 % high for "
        "H2O at 8000 K, 6.6 % for HO2, 2.8 % for H2O2 and 28 % for O3 (anharmonicity, electronic "
        "states). Diatomics whose source reaches 20000 K, treated likewise, have enthalpies off "
        "by 1.8 % at 8000 K, 4.9 % at 10000 K and 9.0 % at 12000 K (root mean square of H2, OH, "
        "O2, NH, N2, NO); with cp falling as T^-2 to the classical limit 3.4, 5.8 and 8.6 %. "
        "Weakly bound O3, HO2 and H2O2 may fall sooner; they are traces there. All held cp 10 % "
        "lower or higher: delivered OH +0.20 % or -0.19 %, peak temperature 1 K (xenon, 5 degC, "
        "1 MHz, 5 bar, 1 um, 9050 K; 0.07 to 0.09 % in two more of 8400 and 8800 K).",
        {"species": "species", "polynomial": "polynomial_source",
        "to (K)": "Tmax_source_K", "above": "extension_above_Tmax",
        "Hf298 source (kJ/mol)": "Hf298_source_kJ_mol", "Hf298 used (kJ/mol)": "Hf298_used_kJ_mol",
        "source of Hf298": "ATcT_source", "provenance": "provenance"}),
    "Covolumes": ("covolumes", "Noble-Abel covolume b.", {"species": "species",
        "b (m3/mol)": "b_recommended_m3_mol", "source": "source", "provenance": "provenance"}),
    "Transport": ("transport", "Lennard-Jones diameter and well depth with the other molecular "
        "parameters.", {"species": "species", "diameter (A)": "diameter_A",
        "well depth (K)": "well_depth_K", "dipole (D)": "dipole_D", "source": "source",
        "provenance": "provenance", "note": "note"}),
    "Above the collision limit": ("collisions", "Rate constants above the Lennard-Jones collision "
        "limit in steam (three-body steps with their colliders; pairs of a kind counted once), by "
        "`collision_limit.py`. None is capped: a cap would break the equilibrium of forward and "
        "reverse rate or need one of its own for each, and would change nothing. In six bubbles "
        "(argon at 355 kHz and 1 MHz, air at 20, 355 kHz and 1 MHz, argon with 20 % N2 at 1 MHz; "
        "2600 to 5700 K) only N67b (2.7 times the limit at most, 1.8 times where there is N2) and "
        "N58 (1.3 times, where there is none) pass it, among traces of NHx. N67b slowed to the "
        "limit in argon with 20 % N2 (6 bar, 1.5 um, 5160 K) moves delivered OH, H2O2 and HO2 by "
        "0.002 % at most, NO and HONO by 0.06 % and NO2 by 0.2 %. Three-body steps pass it only in "
        "gas cooler and denser than a bubble's, which is hot when dense.",
        {"T (K)": "temperature_K", "p (Pa)": "pressure_Pa", "id": "id", "equation": "equation",
        "direction": "direction", "times the limit": "ratio"}),
    "Reactions in water": ("aqueous", "Of the liquid film around the bubble. Its equation leaves "
        "out water, H+ and OH-. O2- and NO2- stand beside their acids, with the pH held (pKa rows; "
        "HNO2's proton moves as HO2's does, by diffusion). Lumped: the ozonide of O3 and O2- is "
        "taken as OH + O2 at once (130 us at pH 7); peroxynitrite and its acid are one species, "
        "so are HNO4 and its ion. O(3P) + H2O, never measured in cold water, is left out or taken "
        "at 2e3 1/s, as the user chooses. Left out, since slower than diffusion out of a film: "
        "2 NO + O2, 2 HNO2, HO2 or O2- with H2O2, O3 with HO2 or OH-, and the decay of "
        "peroxynitrous acid (within a second, far from the bubble; 28 % gives OH + NO2). f: "
        "uncertainty factor, a judgement. "
        "Constants without a temperature form are those of 25 degC at every temperature; fits "
        "begin at 20 degC and go on below with their slope there.",
        {"id": "id", "reaction": "reaction", "in the film": "film", "k at 25 degC": "k_298K",
        "unit": "unit", "form": "T_form", "parameters": "T_params", "convention":
        "rate_convention", "f": "uncertainty_factor", "other values": "alternatives",
        "source": "source", "provenance": "provenance", "note": "note"}),
    "Diffusion and solubility in water": ("dissolved", "Of the liquid film. Where no other form "
        "is given, D goes with T over viscosity (Stokes, Einstein 1905). Henry's constants are of "
        "the undissociated species; those of the atoms H and O are guesses of their order. What "
        "has no row does not go back into the gas.",
        {"species": "film", "kind": "kind", "at 25 degC": "value", "unit": "unit",
        "form": "T_form", "parameters": "T_params", "f": "uncertainty_factor",
        "other values": "alternatives", "source": "source", "provenance": "provenance",
        "note": "note"}),
    "Scavengers": ("scavengers", "Names that `liquid.scavengers` knows, with the rate constant of "
        "OH and the diffusivity at 25 degC. The rate constant is used as it is at any temperature.",
        {"name": "name", "reaction": "reaction", "k (L/mol/s)": "k_25C_L_mol_s",
        "f": "k_uncertainty_factor", "other values": "k_alternatives", "source": "k_source",
        "provenance": "k_provenance", "D (m2/s)": "diffusivity_25C_m2_s",
        "f of D": "diffusivity_uncertainty_factor", "source of D": "diffusivity_source",
        "provenance of D": "diffusivity_provenance", "note": "note"}),
}  # fmt: skip


def sources_text(tables: Tables) -> str:
    parts = ["# Sources of the mechanisms", "", "Generated by `build.py` from the tables here."]
    for title, (table, about, columns) in SOURCES.items():
        rows = getattr(tables, table)
        rows = list(rows.values()) if isinstance(rows, dict) else rows
        parts += ["", f"## {title}", "", about, "", line(columns), line("---" for _ in columns)]
        parts += [line(row[key] or "-" for key in columns.values()) for row in rows]
    return "\n".join(parts) + "\n"


def line(cells: Iterable[str]) -> str:
    return "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |"


def replace_file(path: Path, text: str) -> None:
    """Write beside the target and rename, so that no reader meets half a file."""
    temporary = path.with_name(f".{path.name}.{os.getpid()}.tmp")
    try:
        temporary.write_text(text, encoding="utf-8", newline="\n")
        temporary.replace(path)
    finally:
        temporary.unlink(missing_ok=True)


if __name__ == "__main__":
    sys.exit(main())
