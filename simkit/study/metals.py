"""Conductivities of the metals a study can name, at 20 degrees Celsius."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class MetalEntry:
    """Conductivity of one metal in S/m and where the number comes from."""

    conductivity_s_per_m: float
    source: str


METALS: dict[str, MetalEntry] = {
    "copper": MetalEntry(
        5.80e7, "International Annealed Copper Standard, IEC 60028: 100 % IACS is 58 MS/m at 20 C"
    ),
    "silver": MetalEntry(
        6.30e7, "Matula, J. Phys. Chem. Ref. Data 8, 1147 (1979): 1.59e-8 ohm m at 20 C"
    ),
    "gold": MetalEntry(
        4.52e7, "Matula, J. Phys. Chem. Ref. Data 8, 1147 (1979): 2.21e-8 ohm m at 20 C"
    ),
    "aluminium": MetalEntry(
        3.77e7, "pure metal: Desai, James & Ho, J. Phys. Chem. Ref. Data 13, 1131 (1984)"
    ),
    "brass": MetalEntry(
        1.5e7, "CuZn37 (EN CW508L, UNS C27200), about 26 % IACS: copper alloy data sheets"
    ),
    "phosphor bronze": MetalEntry(
        8.7e6, "CuSn6 (EN CW452K, UNS C51900), about 15 % IACS: copper alloy data sheets"
    ),
    "nickel silver": MetalEntry(
        3.3e6, "CuNi18Zn20 (EN CW409J), about 6 % IACS: copper alloy data sheets"
    ),
    "zinc": MetalEntry(1.69e7, "CRC Handbook of Chemistry and Physics: 5.9e-8 ohm m near 20 C"),
    "tin": MetalEntry(8.7e6, "about 15 % IACS: metal data sheets"),
    "stainless steel": MetalEntry(1.37e6, "EN 10088-1, grade 1.4301 (AISI 304): 0.73e-6 ohm m"),
}
"""Name to conductivity. Alloys and tempers differ by some per cent; write `conductivity` if known.

Steel and nickel are left out: they are magnetic, and conductivity alone does not give their loss.
"""
