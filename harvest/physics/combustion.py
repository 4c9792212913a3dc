"""Products of complete lean combustion, mixtures of dilute gases, and the dew points of flue gas.

Compositions are mole fractions of `SPECIES`, in that order. Air is 1 O2 : 3.76 N2 by moles.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np

from harvest.errors import RangeError
from harvest.physics.arrays import FloatArray

GAS_CONSTANT = 8.314462618
SPECIES = ("carbon dioxide", "water", "oxygen", "nitrogen")
CARBON, HYDROGEN, OXYGEN, NITROGEN, SULPHUR = 0.012011, 0.001007934, 0.0159994, 0.01400674, 0.03206
"""Atomic weights [kg/mol] that give the molar masses of the property library's pure gases exactly."""
SPECIES_MOLAR_MASS = np.array(
    [CARBON + 2.0 * OXYGEN, 2.0 * HYDROGEN + OXYGEN, 2.0 * OXYGEN, 2.0 * NITROGEN], dtype=np.float64
)
NITROGEN_PER_OXYGEN = 3.76
AIR_PER_OXYGEN = 2.0 * OXYGEN + NITROGEN_PER_OXYGEN * 2.0 * NITROGEN
"""Mass of the dry air that brings one mole of O2 [kg/mol]."""
HIGHEST_DRY_OXYGEN = 1.0 / (1.0 + NITROGEN_PER_OXYGEN)
PASCAL_PER_MMHG = 101325.0 / 760.0


@dataclass(frozen=True)
class Fuel:
    """Atoms of each element in one mole of a fuel [-], and what is meant by its name."""

    carbon: float
    hydrogen: float
    oxygen: float = 0.0
    nitrogen: float = 0.0
    description: str = ""

    @property
    def molar_mass(self) -> float:
        """Mass of one mole [kg/mol]."""
        return self.carbon * CARBON + self.hydrogen * HYDROGEN + self.oxygen * OXYGEN + self.nitrogen * NITROGEN

    @property
    def stoichiometric_oxygen(self) -> float:
        """Moles of O2 that burn one mole of fuel completely [-]."""
        return self.carbon + self.hydrogen / 4.0 - self.oxygen / 2.0


FUELS: dict[str, Fuel] = {
    "diesel": Fuel(12.0, 23.0, description="C12H23"),
    "methane": Fuel(1.0, 4.0, description="CH4"),
    "natural gas": Fuel(
        1.05,
        3.98,
        oxygen=0.04,
        nitrogen=0.04,
        description="invented typical composition by moles: 90 % CH4, 5 % C2H6, 1 % C3H8, 2 % N2, 2 % CO2",
    ),
    "propane": Fuel(3.0, 8.0, description="C3H8"),
}
_FORMULA = re.compile(r"(?:[CHON](?:\d+(?:\.\d+)?)?)+")
_ELEMENT = re.compile(r"([CHON])(\d+(?:\.\d+)?)?")


def fuel_named(name: str) -> Fuel:
    """A fuel from `FUELS`, or from an elemental formula of C, H, O and N such as "C8H18", "C2H6O" or "CH1.8".

    Raises RangeError where the name is neither, an element stands twice, or nothing in it burns with oxygen.
    """
    if name in FUELS:
        return FUELS[name]
    known = ", ".join(f'"{each}"' for each in FUELS)
    if len(name) > 60 or not _FORMULA.fullmatch(name):
        raise RangeError(f'"{name[:60]}" is no known fuel; give {known}, or a formula of C, H, O and N such as "C8H18"')
    parts = _ELEMENT.findall(name)
    atoms = {element: float(count or 1.0) for element, count in parts}
    if len(atoms) < len(parts):
        raise RangeError(f'"{name}" names an element twice; write each once with its total, such as "C2H6O"')
    fuel = Fuel(atoms.get("C", 0.0), atoms.get("H", 0.0), atoms.get("O", 0.0), atoms.get("N", 0.0), name)
    if fuel.molar_mass > 100.0 or not fuel.stoichiometric_oxygen > 0.0:
        raise RangeError(f'"{name}" is not a fuel that takes up oxygen, or is far too large a molecule')
    return fuel


def stoichiometric_air_fuel_ratio(fuel: str) -> float:
    """Mass of dry air over mass of fuel at complete combustion without excess [-]."""
    record = fuel_named(fuel)
    return record.stoichiometric_oxygen * AIR_PER_OXYGEN / record.molar_mass


def air_fuel_ratio(fuel: str, excess_air_ratio: FloatArray) -> FloatArray:
    """Mass of dry air over mass of fuel [-]; `excess_air_ratio` [-] any shape."""
    return np.asarray(excess_air_ratio * stoichiometric_air_fuel_ratio(fuel))


def excess_air_from_dry_oxygen(fuel: str, dry_oxygen: FloatArray) -> FloatArray:
    """Excess-air ratio [-] of a dried exhaust gas with the mole fraction `dry_oxygen` [-], 0 to below 0.21.

    The oxygen balance of the products solved exactly; NaN where `dry_oxygen` is not below that of air.
    """
    record = fuel_named(fuel)
    needed = record.stoichiometric_oxygen
    products = record.carbon + record.nitrogen / 2.0 + NITROGEN_PER_OXYGEN * needed
    dilution = 1.0 - dry_oxygen * (1.0 + NITROGEN_PER_OXYGEN)
    dilution = np.where(dilution > 0.0, dilution, np.nan)
    return np.asarray(1.0 + dry_oxygen * products / (needed * dilution))


def exhaust_moles(fuel: str, excess_air_ratio: FloatArray, intake_humidity: FloatArray) -> FloatArray:
    """Moles of each of `SPECIES` from one mole of fuel [-], shape (species, ...).

    Parameters: `excess_air_ratio` [-], 1 or more; `intake_humidity` [kg water per kg dry air]; shapes broadcast.
    """
    record = fuel_named(fuel)
    excess, humidity = np.broadcast_arrays(
        np.asarray(excess_air_ratio, dtype=np.float64), np.asarray(intake_humidity, dtype=np.float64)
    )
    oxygen = record.stoichiometric_oxygen * excess
    moisture = humidity * oxygen * AIR_PER_OXYGEN / SPECIES_MOLAR_MASS[1]
    return np.stack(
        [
            np.full_like(excess, record.carbon),
            record.hydrogen / 2.0 + moisture,
            oxygen - record.stoichiometric_oxygen,
            record.nitrogen / 2.0 + NITROGEN_PER_OXYGEN * oxygen,
        ]
    )


def exhaust_composition(fuel: str, excess_air_ratio: FloatArray, intake_humidity: FloatArray) -> FloatArray:
    """Mole fractions of `SPECIES` in the exhaust gas [-], shape (species, ...); parameters as `exhaust_moles`."""
    moles = exhaust_moles(fuel, excess_air_ratio, intake_humidity)
    return np.asarray(moles / moles.sum(axis=0))


def mixture_molar_mass(composition: FloatArray) -> FloatArray:
    """Molar mass of a gas of `SPECIES` [kg/mol]; `composition` (species, ...) mole fractions."""
    return np.asarray(np.tensordot(SPECIES_MOLAR_MASS, composition, axes=1))


def exhaust_flow_from_fuel(
    fuel: str, fuel_flow: FloatArray, excess_air_ratio: FloatArray, dry_oxygen: FloatArray, intake_humidity: FloatArray
) -> FloatArray:
    """Exhaust mass flow of an engine or burner [kg/s]; all arrays (cases,).

    Parameters: `fuel_flow` [kg/s]; `excess_air_ratio` [-], or NaN where `dry_oxygen` [mole fraction] says it;
    `intake_humidity` [kg water per kg dry air].
    """
    excess = np.where(np.isnan(excess_air_ratio), excess_air_from_dry_oxygen(fuel, dry_oxygen), excess_air_ratio)
    return np.asarray(fuel_flow * (1.0 + air_fuel_ratio(fuel, excess) * (1.0 + intake_humidity)))


def excess_air_from_flows(
    fuel: str, mass_flow: FloatArray, fuel_flow: FloatArray, intake_humidity: FloatArray
) -> FloatArray:
    """Excess-air ratio [-] from the flows of an engine or burner; all arrays (cases,). Below 1 is not lean.

    Parameters: `mass_flow` of the exhaust and `fuel_flow` [kg/s]; `intake_humidity` [kg water per kg dry air].
    """
    dry_air = (mass_flow - fuel_flow) / (1.0 + intake_humidity)
    return np.asarray(dry_air / fuel_flow / stoichiometric_air_fuel_ratio(fuel))


def sulphuric_acid_fraction(
    fuel: str,
    excess_air_ratio: FloatArray,
    intake_humidity: FloatArray,
    fuel_sulphur: FloatArray,
    sulphur_conversion: FloatArray,
) -> FloatArray:
    """Mole fraction of sulphuric acid vapour in the exhaust gas [-].

    Parameters: as `exhaust_moles`; `fuel_sulphur` [kg per kg of fuel]; `sulphur_conversion` [-] part that ends as SO3,
    all of which is taken as acid. The sulphur is neglected in the number of moles, 0.1 % of them at 1 % of the fuel.
    """
    acid = fuel_sulphur * fuel_named(fuel).molar_mass / SULPHUR * sulphur_conversion
    return np.asarray(acid / exhaust_moles(fuel, excess_air_ratio, intake_humidity).sum(axis=0))


def wilke_interaction(viscosity: FloatArray, molar_mass: FloatArray) -> FloatArray:
    """Interaction numbers phi[i, j] of Wilke [-], shape (species, species, ...).

    Parameters: `viscosity` [Pa s] (species, ...); `molar_mass` [kg/mol] (species,).
    Source: Wilke, J. Chem. Phys. 18 (1950) 517, equation 14 (from memory).
    """
    mass = molar_mass.reshape((-1,) + (1,) * (viscosity.ndim - 1))
    mass_ratio = mass[:, None] / mass[None, :]
    viscosity_ratio = viscosity[:, None] / viscosity[None, :]
    return np.asarray((1.0 + np.sqrt(viscosity_ratio) * mass_ratio**-0.25) ** 2 / np.sqrt(8.0 * (1.0 + mass_ratio)))


def wilke_viscosity(mole_fraction: FloatArray, viscosity: FloatArray, molar_mass: FloatArray) -> FloatArray:
    """Viscosity of a dilute gas mixture [Pa s], shape (...).

    Parameters: `mole_fraction` [-] (species,); `viscosity` of the pure gases [Pa s] (species, ...); `molar_mass`
    [kg/mol] (species,). Source: Wilke, J. Chem. Phys. 18 (1950) 517 (from memory).
    """
    weight = np.tensordot(wilke_interaction(viscosity, molar_mass), mole_fraction, axes=(1, 0))
    share = mole_fraction.reshape((-1,) + (1,) * (viscosity.ndim - 1))
    return np.asarray((share * viscosity / weight).sum(axis=0))


def wassiljewa_conductivity(
    mole_fraction: FloatArray, conductivity: FloatArray, viscosity: FloatArray, molar_mass: FloatArray
) -> FloatArray:
    """Thermal conductivity of a dilute gas mixture [W/(m K)], shape (...).

    Parameters: as `wilke_viscosity`, with `conductivity` of the pure gases [W/(m K)] (species, ...). The interaction
    numbers are Mason and Saxena's, which with monatomic conductivities taken from the viscosities are Wilke's.
    Source: Wassiljewa 1904 and Mason and Saxena, Phys. Fluids 1 (1958) 361, as in Poling, Prausnitz, O'Connell, The
    Properties of Gases and Liquids, 5th ed. 2001, section 10-6, numerical factor 1 (from memory).
    """
    weight = np.tensordot(wilke_interaction(viscosity, molar_mass), mole_fraction, axes=(1, 0))
    share = mole_fraction.reshape((-1,) + (1,) * (conductivity.ndim - 1))
    return np.asarray((share * conductivity / weight).sum(axis=0))


_SATURATION = (
    0.11670521452767e4,
    -0.72421316703206e6,
    -0.17073846940092e2,
    0.12020824702470e5,
    -0.32325550322333e7,
    0.14915108613530e2,
    -0.48232657361591e4,
    0.40511340542057e6,
    -0.23855557567849,
    0.65017534844798e3,
)


def water_dew_point(water_partial_pressure: FloatArray) -> FloatArray:
    """Temperature at which water condenses from a gas [K]; NaN where it would be frost, or where there is no water.

    Parameters: `water_partial_pressure` [Pa], any shape, 611.213 Pa to 22.064 MPa.
    Source: IAPWS-IF97 saturation-temperature equation 31 (from memory, checked against another library).
    """
    n1, n2, n3, n4, n5, n6, n7, n8, n9, n10 = _SATURATION
    pressure = np.asarray(water_partial_pressure, dtype=np.float64)
    inside = (pressure >= 611.213) & (pressure <= 22.064e6)
    beta = (np.where(inside, pressure, np.nan) / 1e6) ** 0.25
    e = beta**2 + n3 * beta + n6
    f = n1 * beta**2 + n4 * beta + n7
    g = n2 * beta**2 + n5 * beta + n8
    d = 2.0 * g / (-f - np.sqrt(f**2 - 4.0 * e * g))
    return np.asarray((n10 + d - np.sqrt((n10 + d) ** 2 - 4.0 * (n9 + n10 * d))) / 2.0)


def sulphuric_acid_dew_point(water_partial_pressure: FloatArray, acid_partial_pressure: FloatArray) -> FloatArray:
    """Temperature at which sulphuric acid condenses from flue gas [K], no better than +-5 K; NaN where a pressure is 0.

    Parameters: partial pressures of water and of sulphuric acid [Pa], any one shape.
    Source: Verhoff and Banchero, Chem. Eng. Progress 70 (8) 1974.
    """
    water = np.asarray(water_partial_pressure, dtype=np.float64) / PASCAL_PER_MMHG
    acid = np.asarray(acid_partial_pressure, dtype=np.float64) / PASCAL_PER_MMHG
    both = (water > 0.0) & (acid > 0.0)
    ln_water, ln_acid = np.log(np.where(both, water, np.nan)), np.log(np.where(both, acid, np.nan))
    return np.asarray(1000.0 / (2.276 - 0.0294 * ln_water - 0.0858 * ln_acid + 0.0062 * ln_water * ln_acid))
