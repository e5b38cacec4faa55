"""Published blending laws and exact least-cost recipes: numbers in, numbers out.

Imports numpy and scipy only; knows no file, no clock and no screen.
Units inside: KV mm²/s, dynamic viscosity mPa·s, temperature °C, density kg/m³ at 15 °C, mass kg,
share as mass fraction 0–1, price per tonne in the plant's own currency.
"""
