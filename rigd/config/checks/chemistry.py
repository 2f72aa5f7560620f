"""Is the chemistry consistent: known species, balanced masses, the unit of each rate constant?"""

from __future__ import annotations

from rigd.config.checks.identity import report_duplicates
from rigd.config.chemistry_tables import ChemistryFile, ReactionTable
from rigd.config.findings import Findings, listed, nearest
from rigd.config.lines import Path
from rigd.config.structure import declared
from rigd.model.chemistry import RateLaw, ReactionPlace

RESERVED = ("conversion", "residual")
"""A cell has a tag of each species, and these two."""

ON_PACKING = (
    "per_gram", "deactivation", "deactivation_energy", "deactivation_turnovers", "leaching", "leached_species",
    "diffusion_limits",
)  # fmt: skip
"""Keys that mean nothing for a reaction that needs no packing."""

BALANCE = 0.005
"""Masses of both sides of a reaction may differ by this fraction (rounded molar masses)."""


def check_chemistry(file: ChemistryFile, found: Findings) -> None:
    """All findings about a chemistry file's meaning."""
    known = declared(found.source, "species")
    species = [(table.id, (*table.key_path, "id")) for table in file.species]
    reactions = [(table.id, (*table.key_path, "id")) for table in file.reactions]
    report_duplicates(found, "species", species)
    report_duplicates(found, "reaction", reactions)
    for name, place in species:
        if name in RESERVED:
            message = f"{name!r} is the name of another signal of the cell"
            found.error("name-reserved", place, message, "call the species otherwise")
    for key in ("reactant", "product"):
        _species(found, known, getattr(file, key), (key,))
    for index, name in enumerate(file.byproducts):
        _species(found, known, name, ("byproducts", index))
    masses = {table.id: table.molar_mass for table in file.species}
    for reaction in file.reactions:
        _reaction(found, reaction, known, masses)


def _species(found: Findings, known: frozenset[str], name: str, place: Path) -> None:
    if name and name not in known:
        message = f"no species {name!r}{nearest(name, known)}"
        found.error("species-unknown", place, message, f"declared species: {listed(sorted(known))}")


def _reaction(found: Findings, table: ReactionTable, known: frozenset[str], masses: dict[str, float]) -> None:
    place = table.key_path
    for key in ("stoichiometry", "orders", "reverse_orders", "adsorption"):
        for name in getattr(table, key):
            _species(found, known, name, (*place, key, name))
    _packing_keys(found, table, known)
    _balance(found, table, masses)
    unit = table.rate[1]
    if unit != table.rate_unit:
        message = f"found {table.rate_constant!r}; with these orders the unit is {table.rate_unit!r}"
        remedy = f'write for example rate_constant = "0.001 {table.rate_unit}"'
        found.error("unit-wrong" if unit else "unit-missing", (*place, "rate_constant"), message, remedy)
    if table.law is RateLaw.REVERSIBLE and table.equilibrium_constant <= 0:
        message = "a reversible reaction needs an equilibrium_constant above zero"
        found.error("key-missing", (*place, "equilibrium_constant"), message, 'give it, or write law = "power"')


def _packing_keys(found: Findings, table: ReactionTable, known: frozenset[str]) -> None:
    place = table.key_path
    _species(found, known, table.leached_species, (*place, "leached_species"))
    for key in ON_PACKING:
        if table.place is not ReactionPlace.CATALYST and getattr(table, key):
            message = f"{key} belongs to the packing, but this reaction runs in the liquid"
            found.error("key-out-of-place", (*place, key), message, f'remove {key}, or write place = "catalyst"')
    if table.leached_species and not table.leaching:
        message = "leached_species without leaching: nothing is lost"
        found.error("key-missing", (*place, "leached_species"), message, 'write leaching = "0.001 %" or remove it')
    if table.deactivation_energy and not table.deactivation:
        message = "deactivation_energy without deactivation: nothing to speed up"
        found.error("key-missing", (*place, "deactivation_energy"), message, 'write deactivation = "0.01 1/h"')


def _balance(found: Findings, table: ReactionTable, masses: dict[str, float]) -> None:
    if any(name not in masses for name in table.stoichiometry):
        return
    amounts = [(count, masses[name]) for name, count in table.stoichiometry.items()]
    used = -sum(count * mass for count, mass in amounts if count < 0)
    made = sum(count * mass for count, mass in amounts if count > 0)
    if used <= 0 or abs(made - used) > BALANCE * used:
        message = f"{used:g} g/mol go in and {made:g} g/mol come out: the stoichiometry does not balance"
        remedy = "what is used up is negative, what is made positive; check the molar masses"
        found.error("reaction-unbalanced", (*table.key_path, "stoichiometry"), message, remedy)
