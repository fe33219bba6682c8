"""What every test shares: hypothesis profiles, and rings built by the library from a case."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np
import pytest
from brute import Case
from hypothesis import HealthCheck, settings
from threadpoolctl import threadpool_limits

from ribbon.hopping import Hopping, assemble
from ribbon.lattice import close_strip, lay_strip

settings.register_profile(
    "default", deadline=None, max_examples=25, suppress_health_check=[HealthCheck.too_slow]
)
settings.register_profile("ci", settings.get_profile("default"), derandomize=True)
settings.register_profile("long", settings.get_profile("default"), max_examples=500)
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "default"))


@pytest.fixture(scope="session", autouse=True)
def one_blas_thread() -> Iterator[None]:
    """The matrices are small, and workers of the test run share the machine."""
    with threadpool_limits(1, user_api="blas"):
        yield


@pytest.fixture(scope="session")
def ring_of() -> Callable[..., Any]:
    """A function from a case (and options of ``close_strip``) to the library's ring."""

    def build(case: Case, **options: Any) -> Any:
        strip = lay_strip(case.lattice, rows=case.rows, length=case.length)
        return close_strip(
            strip,
            half_twists=case.half_twists,
            orbital="s" if case.sigma == 1 else "pz",
            shells=len(case.hoppings),
            **options,
        )

    return build


@pytest.fixture(scope="session")
def hamiltonian_of(ring_of: Callable[..., Any]) -> Callable[..., Any]:
    """A function from a case (and site energies) to the library's Hamiltonian, t = 1."""

    def build(case: Case, energies: np.ndarray | float = 0.0, **options: Any) -> Any:
        hopping = Hopping(shells=case.hoppings, site_energy=energies, unit="t")
        return assemble(ring_of(case, **options), hopping)

    return build
