"""The fluids known from the start, with the properties that decide how much gas they become.

Computed with the reference equations of the property library [property-library]_ at 101 325 Pa;
dry ice from the sublimation pressure of [span-wagner]_, its density from memory.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final, Literal, TypeAlias

from service.physics.constants import OXYGEN_IN_AIR

Hazard: TypeAlias = Literal["asphyxiant", "oxidiser", "toxic", "flammable"]
Settles: TypeAlias = Literal["low", "high", "methane"]


@dataclass(frozen=True, slots=True, kw_only=True)
class FluidData:
    """Properties of a cryogenic fluid at 101 325 Pa.

    Attributes
    ----------
    slug, name : str
        Public key, and name for people.
    molar_mass_kg_mol : float
        Molar mass. [kg/mol]
    boiling_k : float
        Normal boiling point; for dry ice its sublimation point, for air its bubble point. [K]
    liquid_density_kg_m3 : float
        Saturated liquid; for dry ice the compact solid. [kg/m3]
    vapour_density_kg_m3 : float
        Saturated vapour at the boiling point. [kg/m3]
    latent_heat_j_kg : float
        Heat of evaporation; for dry ice of sublimation. [J/kg]
    sensible_heat_to_20c_j_kg : float
        From saturated vapour to gas at 20 degrees Celsius. [J/kg]
    gamma : float
        Ratio of the heat capacities of the gas at 20 degrees Celsius. [1]
    oxygen_fraction : float
        Oxygen in the gas itself, by volume. [1]
    hazards : frozenset of str
        What the gas does to people and to fire.
    settles : {"low", "high", "methane"}
        Where its gas is looked for first; "methane" is high, and low while the gas is cold.
    solid : bool
        Whether it is stored as a solid.
    pressure_liquid_density_kg_m3 : float or None
        Of a fluid without liquid at 101 325 Pa: saturated liquid at the 20 bar absolute at which
        it is kept in insulated tanks. [kg/m3]
    """

    slug: str
    name: str
    molar_mass_kg_mol: float
    boiling_k: float
    liquid_density_kg_m3: float
    vapour_density_kg_m3: float
    latent_heat_j_kg: float
    sensible_heat_to_20c_j_kg: float
    gamma: float
    hazards: frozenset[Hazard]
    settles: Settles
    oxygen_fraction: float = 0.0
    solid: bool = False
    pressure_liquid_density_kg_m3: float | None = None


_ASPHYXIANT: Final[frozenset[Hazard]] = frozenset({"asphyxiant"})
_OXIDISER: Final[frozenset[Hazard]] = frozenset({"oxidiser"})
_FLAMMABLE: Final[frozenset[Hazard]] = frozenset({"asphyxiant", "flammable"})
_TOXIC: Final[frozenset[Hazard]] = frozenset({"asphyxiant", "toxic"})
_TOXIC_OXIDISER: Final[frozenset[Hazard]] = frozenset({"asphyxiant", "oxidiser", "toxic"})

_FLUIDS: Final = (
    FluidData(
        slug="nitrogen",
        name="Nitrogen",
        molar_mass_kg_mol=0.0280135,
        boiling_k=77.355,
        liquid_density_kg_m3=806.08,
        vapour_density_kg_m3=4.6121,
        latent_heat_j_kg=199_180.0,
        sensible_heat_to_20c_j_kg=226_900.0,
        gamma=1.4014,
        hazards=_ASPHYXIANT,
        settles="low",
    ),
    FluidData(
        slug="oxygen",
        name="Oxygen",
        molar_mass_kg_mol=0.0319988,
        boiling_k=90.188,
        liquid_density_kg_m3=1141.17,
        vapour_density_kg_m3=4.4671,
        latent_heat_j_kg=213_060.0,
        sensible_heat_to_20c_j_kg=186_700.0,
        gamma=1.3972,
        hazards=_OXIDISER,
        settles="low",
        oxygen_fraction=1.0,
    ),
    FluidData(
        slug="argon",
        name="Argon",
        molar_mass_kg_mol=0.039948,
        boiling_k=87.302,
        liquid_density_kg_m3=1395.4,
        vapour_density_kg_m3=5.7736,
        latent_heat_j_kg=161_140.0,
        sensible_heat_to_20c_j_kg=108_700.0,
        gamma=1.6697,
        hazards=_ASPHYXIANT,
        settles="low",
    ),
    # Older handbooks print a latent heat of 20.7 to 20.9 kJ/kg; the spread of 1.5 % is real.
    FluidData(
        slug="helium",
        name="Helium",
        molar_mass_kg_mol=0.0040026,
        boiling_k=4.224,
        liquid_density_kg_m3=124.67,
        vapour_density_kg_m3=16.9026,
        latent_heat_j_kg=20_560.0,
        sensible_heat_to_20c_j_kg=1_507_200.0,
        gamma=1.6665,
        hazards=_ASPHYXIANT,
        settles="high",
    ),
    # Liquid stored for days is parahydrogen; the gas is taken to stay so while it warms.
    FluidData(
        slug="hydrogen",
        name="Hydrogen (para)",
        molar_mass_kg_mol=0.0020159,
        boiling_k=20.271,
        liquid_density_kg_m3=70.83,
        vapour_density_kg_m3=1.3386,
        latent_heat_j_kg=446_070.0,
        sensible_heat_to_20c_j_kg=3_907_900.0,
        gamma=1.3833,
        hazards=_FLAMMABLE,
        settles="high",
    ),
    FluidData(
        slug="methane",
        name="Methane",
        molar_mass_kg_mol=0.0160428,
        boiling_k=111.667,
        liquid_density_kg_m3=422.36,
        vapour_density_kg_m3=1.8164,
        latent_heat_j_kg=510_830.0,
        sensible_heat_to_20c_j_kg=388_000.0,
        gamma=1.3083,
        hazards=_FLAMMABLE,
        settles="methane",
    ),
    # Cold neon sinks and warm neon rises, as methane does: it is as heavy as air at 204 K.
    FluidData(
        slug="neon",
        name="Neon",
        molar_mass_kg_mol=0.020179,
        boiling_k=27.1,
        liquid_density_kg_m3=1205.87,
        vapour_density_kg_m3=9.582,
        latent_heat_j_kg=85_790.0,
        sensible_heat_to_20c_j_kg=275_700.0,
        gamma=1.6669,
        hazards=_ASPHYXIANT,
        settles="methane",
    ),
    FluidData(
        slug="krypton",
        name="Krypton",
        molar_mass_kg_mol=0.083798,
        boiling_k=119.735,
        liquid_density_kg_m3=2416.61,
        vapour_density_kg_m3=8.8182,
        latent_heat_j_kg=107_050.0,
        sensible_heat_to_20c_j_kg=44_000.0,
        gamma=1.6724,
        hazards=_ASPHYXIANT,
        settles="low",
    ),
    FluidData(
        slug="xenon",
        name="Xenon",
        molar_mass_kg_mol=0.131293,
        boiling_k=165.051,
        liquid_density_kg_m3=2942.0,
        vapour_density_kg_m3=10.0088,
        latent_heat_j_kg=95_590.0,
        sensible_heat_to_20c_j_kg=21_000.0,
        gamma=1.6778,
        hazards=_ASPHYXIANT,
        settles="low",
    ),
    FluidData(
        slug="nitrous-oxide",
        name="Nitrous oxide",
        molar_mass_kg_mol=0.0440128,
        boiling_k=184.684,
        liquid_density_kg_m3=1230.45,
        vapour_density_kg_m3=2.982,
        latent_heat_j_kg=374_280.0,
        sensible_heat_to_20c_j_kg=89_900.0,
        gamma=1.2828,
        hazards=_TOXIC_OXIDISER,
        settles="low",
    ),
    # Vapour at the dew point, 81.72 K. Liquid air grows richer in oxygen as it evaporates.
    FluidData(
        slug="air",
        name="Air",
        molar_mass_kg_mol=0.0289655,
        boiling_k=78.9,
        liquid_density_kg_m3=875.21,
        vapour_density_kg_m3=4.4974,
        latent_heat_j_kg=204_810.0,
        sensible_heat_to_20c_j_kg=214_600.0,
        gamma=1.402,
        hazards=_OXIDISER,
        settles="low",
        oxygen_fraction=OXYGEN_IN_AIR,
    ),
    FluidData(
        slug="carbon-dioxide",
        name="Carbon dioxide",
        molar_mass_kg_mol=0.0440098,
        boiling_k=194.685,
        liquid_density_kg_m3=1562.0,
        vapour_density_kg_m3=2.8147,
        latent_heat_j_kg=574_300.0,
        sensible_heat_to_20c_j_kg=79_000.0,
        gamma=1.2967,
        hazards=_TOXIC,
        settles="low",
        solid=True,
        pressure_liquid_density_kg_m3=1029.4,
    ),
)

FLUIDS: Final[Mapping[str, FluidData]] = MappingProxyType({fluid.slug: fluid for fluid in _FLUIDS})
