"""The errors that bad input raises. "No blend exists" is a result, not an error.

SolverError (a ValueError)
├── ScaleError   an amount as typed cannot be placed on a scale
├── RangeError   a number lies outside the range of a published method
├── StockError   a stock's data are missing or cannot be true; carries .stock and .cell
└── TargetError  a target contradicts itself or names what is not there; carries .where

Every message is one line and says what is wrong, where, and what would do.
"""

from __future__ import annotations


class SolverError(ValueError):
    """Base of every error that the solver raises on bad input."""


class ScaleError(SolverError):
    """An amount as typed cannot be placed on a scale."""


class RangeError(SolverError):
    """A number lies outside the range of a published method."""


class StockError(SolverError):
    """A stock's data are missing or cannot be true."""

    def __init__(self, message: str, *, stock: str = "", cell: str = "") -> None:
        super().__init__(message)
        self.stock = stock
        self.cell = cell


class TargetError(SolverError):
    """A target contradicts itself or names what is not there."""

    def __init__(self, message: str, *, where: str = "") -> None:
        super().__init__(message)
        self.where = where
