"""Integers of any size to decimal digits and back; Python's own conversion stops at 4300 digits."""

from __future__ import annotations

from flint import fmpz


def decimal(value: int) -> str:
    """The digits of an integer of any size."""
    return str(fmpz(value)) if value.bit_length() > 13_000 else str(value)


def from_decimal(digits: str) -> int:
    """The integer with these digits, however many."""
    return int(digits) if len(digits) < 4000 else int(fmpz(digits))
