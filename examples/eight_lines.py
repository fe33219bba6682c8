"""From nothing to a picture of levels against flux, in eight lines."""

import matplotlib.pyplot as plt
import numpy as np

import ribbon

strip = ribbon.lay_strip("honeycomb-armchair", rows=5, length=8)
ring = ribbon.close_strip(strip, half_twists=1, orbital="pz")
hamiltonian = ribbon.assemble(ring, ribbon.Hopping(shells=(2.7,), unit="eV"))
response = ribbon.sweep_flux(hamiltonian, np.linspace(0, 1, 101))
figure, axes = plt.subplots()
axes.plot(response.flux, response.energy, ".", markersize=2)
axes.set(xlabel="flux (h/e)", ylabel="energy (eV)")
figure.savefig("levels-against-flux.png")
