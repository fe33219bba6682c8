"""The gap of armchair rings against their width, one-sided with both orbital signs and plain.

Every third width is metallic as a plain ring; which sign of the orbital keeps it so when the
ring is one-sided is read off the last two columns. Half-odd lengths close even widths.
"""

from typing import Literal

import ribbon

HOPPING = ribbon.Hopping(shells=(2.7,), unit="eV")
LENGTH = 20.0


def gap(rows: int, length: float, half_twists: int, orbital: Literal["s", "pz"]) -> float:
    """HOMO-LUMO gap of one neutral ring in eV."""
    strip = ribbon.lay_strip("honeycomb-armchair", rows=rows, length=length)
    ring = ribbon.close_strip(strip, half_twists=half_twists, orbital=orbital)
    return ribbon.find_gap(ribbon.assemble(ring, HOPPING)).gap


def main() -> None:
    """Print one line for every width."""
    print("rows,length,plain_eV,one_sided_s_eV,one_sided_pz_eV")
    for rows in range(3, 15):
        twisted = LENGTH if rows % 2 else LENGTH + 0.5
        plain = gap(rows, LENGTH, 0, "s")
        even, odd = gap(rows, twisted, 1, "s"), gap(rows, twisted, 1, "pz")
        print(f"{rows},{twisted:g},{plain:.4f},{even:.4f},{odd:.4f}")


if __name__ == "__main__":
    main()
