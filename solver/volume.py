"""Volume of oil at a temperature, from its density at 15 °C.

    α = K1/ρ15,   VCF = ρ(t)/ρ15 = exp(−α Δt (1 + 0.8 α Δt)),   Δt = t − 15 °C

K1 = 0.6278 is that of the lubricating oils (ASTM D1250-80, table 54D; API MPMS chapter 11.1), ρ in kg/m³, t in °C.
The tables end at 150 °C and cover 800 to 1164 kg/m³; outside them the formula is only the same curve drawn on.
"""

from __future__ import annotations

from typing import Any

import numpy as np

K1 = 0.6278
LOWEST, HIGHEST = -20.0, 150.0  # °C


def density_at(density15: Any, celsius: Any) -> Any:
    """Density [kg/m³] at a temperature [°C], any shape.

    >>> round(float(density_at(870.0, 60.0)), 1)
    841.5
    """
    density, step = np.asarray(density15, dtype=np.float64), np.asarray(celsius, dtype=np.float64) - 15.0
    alpha = K1 / density
    with np.errstate(over="ignore"):  # of no temperature that an oil has
        return density * np.exp(-alpha * step * (1.0 + 0.8 * alpha * step))


def litres(mass_kg: float, density15: float, celsius: float) -> float:
    """Volume [L] of a mass [kg] of oil at a temperature [°C]."""
    return 1000.0 * mass_kg / float(density_at(density15, celsius))
