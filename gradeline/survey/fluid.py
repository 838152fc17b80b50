"""The flowing fluid, as a survey gives it."""

from __future__ import annotations

from dataclasses import dataclass

from gradeline.quantities import Measured

__all__ = ["BEYOND", "Fluid", "PropertyTable"]

#: How far beyond two given viscosities their law is followed, K.
BEYOND = 40.0


@dataclass(frozen=True)
class PropertyTable:
    """Properties of a fluid against temperature, as a file of the survey gives them.

    Parameters
    ----------
    file : str
        Its name.
    temperature, density, kinematic_viscosity : tuple of float
        K, strictly rising, two at least; kg/m³; m²/s.
    density_u, viscosity_u : float or None
        Relative standard uncertainties, the same error at all temperatures.
    """

    file: str
    temperature: tuple[float, ...]
    density: tuple[float, ...]
    kinematic_viscosity: tuple[float, ...]
    density_u: float | None = None
    viscosity_u: float | None = None


@dataclass(frozen=True)
class Fluid:
    """The flowing fluid: water or air by name, any other by its density and viscosity or by a table of them.

    Parameters
    ----------
    name : str
        ``"water"``, ``"air"`` with a line pressure, or any name where the properties are given.
    density : Measured or None
        kg/m³; at `density_temperature` where there is an expansion.
    viscosity : Measured or None
        Dynamic, Pa s.
    kinematic_viscosity : Measured or None
        m²/s.
    table : PropertyTable or None
        Density and kinematic viscosity against temperature.
    viscosity_at : tuple of (float, Measured)
        Two temperatures (K) in rising order, each with its kinematic viscosity (m²/s); empty where not given so.
    density_temperature : float or None
        K, at which `density` is given.
    expansion : Measured or None
        Coefficient of thermal (cubic) expansion, 1/K.
    line_pressure : Measured or None
        Absolute pressure in the line, Pa: the fluid is air.
    humidity : float
        Relative humidity of flowing air, dimensionless.
    """

    name: str = "water"
    density: Measured | None = None
    viscosity: Measured | None = None
    kinematic_viscosity: Measured | None = None
    table: PropertyTable | None = None
    viscosity_at: tuple[tuple[float, Measured], ...] = ()
    density_temperature: float | None = None
    expansion: Measured | None = None
    line_pressure: Measured | None = None
    humidity: float = 0.5

    @property
    def is_water(self) -> bool:
        """Whether its properties are those of water."""
        return self.name == "water" and self.density is None and self.table is None

    @property
    def is_air(self) -> bool:
        """Whether its properties are those of air at the line pressure."""
        return self.line_pressure is not None

    @property
    def follows_temperature(self) -> bool:
        """Whether density or viscosity are worked out at each run's temperature."""
        return bool(self.density is None or self.viscosity_at or self.expansion is not None)

    @property
    def span(self) -> tuple[float, float] | None:
        """Temperatures (K) between which the properties are known, None where they are constant."""
        if self.table is not None:
            return self.table.temperature[0], self.table.temperature[-1]
        if self.is_air:
            return 223.15, 373.15
        if self.viscosity_at:
            return self.viscosity_at[0][0] - BEYOND, self.viscosity_at[-1][0] + BEYOND
        return (273.15, 373.15) if self.is_water else None
