"""The hopping room: amplitudes, site energies and flux become one sparse matrix."""

from ribbon.hopping.amplitudes import Hopping, draw_vacancies, effective_mass
from ribbon.hopping.hamiltonian import Hamiltonian, assemble

__all__ = ["Hamiltonian", "Hopping", "assemble", "draw_vacancies", "effective_mass"]
