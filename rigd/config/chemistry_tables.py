"""The chemistry file: species with their absorption bands, and reactions."""

import re
from typing import Annotated, Literal

from pydantic import Field

from rigd.config.quantity import Quantity, Temperature
from rigd.config.table import Flag, Name, NotNegative, Number, Table, Text
from rigd.model.chemistry import Band, RateLaw, Reaction, ReactionPlace, Species

_RATE = re.compile(r"\s*\+?((?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d{1,2})?)\s*(.*?)\s*", re.DOTALL)
Adsorption = Annotated[float, Quantity("adsorption constant", "not negative")]


class BandTable(Table):
    """One Lorentzian band: centre, full width at half height, peak absorptivity."""

    centre: Annotated[float, Quantity("wavenumber", "positive")]
    width: Annotated[float, Quantity("wavenumber", "positive")]
    absorptivity: Annotated[float, Quantity("absorptivity", "positive")]

    def value(self) -> Band:
        return Band(self.centre, self.width, self.absorptivity)


class SpeciesTable(Table):
    """One substance; without ``bands`` the cell does not see it."""

    id: Name
    name: str = ""
    molar_mass: Annotated[float, Quantity("molar mass", "positive")]
    formula: str = ""
    diffusivity: Annotated[float, Quantity("diffusivity", "positive")] = 1e-9
    bands: tuple[BandTable, ...] = ()

    def value(self) -> Species:
        bands = tuple(band.value() for band in self.bands)
        return Species(self.id, self.name or self.id, self.molar_mass, self.formula, bands, self.diffusivity)


class ReactionTable(Table):
    """One reaction. ``stoichiometry`` is negative for what is used up; ``rate_constant`` carries its unit.

    On the packing only: ``diffusion_limits`` (the constant is intrinsic), ``deactivation`` with its
    ``deactivation_energy``, ``deactivation_turnovers`` (per site, leaving 1/e), ``leaching`` (part of the sites per
    volume of liquid between the beads that passes) into ``leached_species``.
    """

    id: Name
    law: RateLaw
    place: ReactionPlace
    stoichiometry: Annotated[dict[Name, Number], Field(min_length=1)]
    rate_constant: Annotated[
        str, Field(max_length=60, pattern=r"^\s*\+?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d{1,2})?(?:(?:\s|[^\s0-9.eE]).*)?$")
    ]
    reference_temperature: Temperature
    activation_energy: Annotated[float, Quantity("molar energy", "not negative")]
    orders: dict[Name, Number]
    reverse_orders: dict[Name, Number] = Field(default_factory=dict)
    equilibrium_constant: NotNegative = 0.0
    adsorption: dict[Name, Adsorption] = Field(default_factory=dict)
    heat: Annotated[float, Quantity("molar energy")] = 0.0
    per_gram: Flag = False
    deactivation: Annotated[float, Quantity("rate", "not negative")] = 0.0
    deactivation_energy: Annotated[float, Quantity("molar energy", "not negative")] = 0.0
    deactivation_turnovers: NotNegative = 0.0
    leaching: Annotated[float, Quantity("fraction", "not negative")] = 0.0
    leached_species: str = ""
    diffusion_limits: Flag = False

    @property
    def rate(self) -> tuple[float, str]:
        """Number and unit of the rate constant as written."""
        match = _RATE.fullmatch(self.rate_constant)
        return (float(match[1]), match[2]) if match else (0.0, "")

    @property
    def rate_unit(self) -> str:
        """The unit that ``rate_constant`` must have, from the sum of the orders."""
        return rate_unit(sum(self.orders.values()), self.per_gram)

    def value(self) -> Reaction:
        return Reaction(
            id=self.id,
            stoichiometry=self.stoichiometry,
            law=self.law,
            place=self.place,
            rate_constant=self.rate[0],
            reference_degC=self.reference_temperature,
            activation_energy_kJ_mol=self.activation_energy,
            orders=self.orders,
            reverse_orders=self.reverse_orders,
            equilibrium_constant=self.equilibrium_constant,
            adsorption_L_mol=self.adsorption,
            heat_kJ_mol=self.heat,
            per_gram=self.per_gram,
            deactivation_per_h=self.deactivation * 3600.0,
            deactivation_energy_kJ_mol=self.deactivation_energy,
            deactivation_turnovers=self.deactivation_turnovers,
            leaching_per_volume=self.leaching,
            leached_species=self.leached_species,
            diffusion_limits=self.diffusion_limits,
        )


def rate_unit(order: float, per_gram: bool) -> str:
    """Unit of a rate constant of this overall order: per litre of liquid and second, or per gram and second.

    >>> rate_unit(1, False), rate_unit(2, False), rate_unit(1.5, False), rate_unit(1, True)
    ('1/s', 'L/(mol s)', '(L/mol)^0.5/s', 'L/(g s)')
    """
    exponent = round(order - (0 if per_gram else 1), 6)
    below = "g s" if per_gram else "s"
    if per_gram:
        known = {0.0: "mol/(g s)", 1.0: "L/(g s)", 2.0: "L2/(mol g s)"}
        return known.get(exponent, f"mol (L/mol)^{exponent:g}/({below})")
    known = {-1.0: "mol/(L s)", 0.0: "1/s", 1.0: "L/(mol s)", 2.0: "L2/(mol2 s)"}
    return known.get(exponent, f"(L/mol)^{exponent:g}/{below}")


class ChemistryFile(Table):
    """A chemistry file as a whole."""

    schema_: Literal["rigd-chemistry-1"] = Field(alias="schema")
    name: Text
    invented: Flag = True
    reactant: Name
    product: Name
    byproducts: tuple[Name, ...] = ()
    species: Annotated[tuple[SpeciesTable, ...], Field(min_length=1)]
    reactions: tuple[ReactionTable, ...] = ()
