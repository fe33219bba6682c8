"""Units of energy, and what a slope per flux quantum is as a current.

Constants: CODATA as carried by `scipy.constants` (h, e and k are exact in the SI).
"""

from __future__ import annotations

from typing import Literal, get_args

from scipy import constants

from ribbon.errors import BadInput

__all__ = ["UNITS", "Unit", "boltzmann", "check_unit", "current_factor", "hbar2_over_2m"]

Unit = Literal["eV", "meV", "t", "beta", "THz", "GHz", "MHz"]
UNITS: tuple[str, ...] = get_args(Unit)

_JOULE = {"eV": constants.e, "meV": 1e-3 * constants.e}


def check_unit(unit: str) -> Unit:
    """Return the unit if it is known; raises `BadInput` otherwise."""
    if unit not in UNITS:
        raise BadInput(f'hopping.unit = "{unit}" is not one of {", ".join(UNITS)}')
    return unit  # type: ignore[return-value]  # narrowed by the test above


def current_factor(unit: str) -> tuple[float, str]:
    """Factor from a slope dE/d(flux/flux quantum) to a current, and the label of the result.

    I = -dE/dPhi = -(e/h) dE/dphi in ampere where the unit is an energy; otherwise the current
    is left as energy per flux quantum.

    >>> factor, label = current_factor("eV")
    >>> round(factor * 1e6, 4), label
    (-38.7405, 'A')
    """
    joule = _JOULE.get(check_unit(unit))
    if joule is None:
        return -1.0, f"{unit} per flux quantum"
    return -joule * constants.e / constants.h, "A"


def boltzmann(unit: str) -> float:
    """Boltzmann constant in the unit per kelvin; raises `BadInput` where there is none."""
    joule = _JOULE.get(check_unit(unit))
    if joule is None:
        raise BadInput(
            f'sweep.temperature needs an energy in eV or meV; hopping.unit is "{unit}", '
            "so set temperature = 0"
        )
    return float(constants.k / joule)


def hbar2_over_2m(mass: float, unit: str) -> float:
    """hbar^2 / (2 m) in the unit times nm^2; ``mass`` in electron masses.

    >>> round(hbar2_over_2m(0.067, "eV"), 5)
    0.56865
    """
    joule = _JOULE.get(check_unit(unit))
    if joule is None:
        raise BadInput(f'hopping.mass needs the unit eV or meV, not "{unit}"')
    kinetic = constants.hbar**2 / (2 * mass * constants.m_e)
    return float(kinetic / joule * 1e18)
