"""The tables of a ribbon file, one model each; attributes carry the names of the keys.

Every limit here is a physical impossibility or a cap far beyond what a machine can hold, so
that a slip of the keyboard is refused in words before memory is asked for.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, ConfigDict, Discriminator, Field, Tag, model_validator
from pydantic_core import PydanticCustomError

from ribbon.study.key_table import KeyTable, chosen, sentence_error

__all__ = [
    "Continuum",
    "Control",
    "Disorder",
    "Edges",
    "Hopping",
    "Levels",
    "MagneticField",
    "Ribbon",
    "Sweep",
    "SweepFlux",
    "Unit",
]

Unit = Literal["eV", "meV", "t", "beta", "THz", "GHz", "MHz"]

LARGEST_ENERGY = 1e12
LARGEST_FLUX = 1000
"""Everything has period one in flux; far out the phases would only lose digits."""
LARGEST_SEED = 2**63 - 1
DEFAULT_SHELLS: dict[str, list[float]] = {"eV": [2.7], "t": [1.0], "beta": [1.0]}
"""Amplitudes where none are given: graphene's in eV, 1 where the unit is the amplitude itself."""

Energy = Annotated[float, Field(ge=-LARGEST_ENERGY, le=LARGEST_ENERGY)]
Positive = Annotated[float, Field(gt=0, le=LARGEST_ENERGY)]
Text = Annotated[str, Field(min_length=1, max_length=1000, pattern=r"^[^\x00-\x1f\x7f]*$")]


class Ribbon(KeyTable):
    """The ribbon: which lattice, how large, how closed."""

    exclusive = (("rows", "width_nm"), ("length", "length_nm"))
    schema_rules = (
        {"anyOf": [{"required": ["rows"]}, {"required": ["width_nm"]}]},
        {"anyOf": [{"required": ["length"]}, {"required": ["length_nm"]}]},
        {
            "anyOf": [
                {
                    "properties": {"half_twists": {"type": "integer", "multipleOf": 2}},
                    "required": ["half_twists"],
                },
                {"required": ["orbital"]},
            ]
        },
    )

    lattice: Text
    """a name from `ribbon lattices`, or a path to a lattice file (.toml)"""
    rows: Annotated[int, Field(ge=1, le=100_000)] | None = None
    """sites across (square), zigzag chains, dimer lines (armchair); or give width_nm"""
    length: Annotated[float, Field(gt=0, le=10_000_000)] | None = None
    """lattice periods along; x.5 where the closure needs it; or give length_nm"""
    width_nm: Annotated[float, Field(gt=0, le=1e9)] | None = None
    """width between the hard walls in nm, instead of rows: the nearest that closes is taken"""
    length_nm: Annotated[float, Field(gt=0, le=1e9)] | None = None
    """circumference in nm, instead of length: the nearest that closes is taken"""
    half_twists: Annotated[int, Field(ge=0, le=1000)] = 1
    """0 plain ring, 1 Möbius, 2 full twist ...; never negative"""
    orbital: Literal["s", "pz"] | None = None
    """how it goes through the flip: "s" even, "pz" changes sign with each half twist"""
    spacing: Annotated[float, Field(ge=1e-6, le=1e9)] | None = None
    """nm between nearest neighbours; left out, the lattice file says"""

    @model_validator(mode="after")
    def _whole(self) -> Ribbon:
        for key, other in self.exclusive:
            if getattr(self, key) is None and getattr(self, other) is None:
                raise sentence_error(
                    f"ribbon.{key} is missing; give ribbon.{key} or ribbon.{other}"
                )
        if self.half_twists % 2 and self.orbital is None:
            raise sentence_error(
                f"ribbon.orbital is missing; half_twists = {self.half_twists} is odd, so give "
                '"s" (even under the flip: s-like orbitals, lowest subband) or '
                '"pz" (changes sign with each half twist: p_z orbitals)'
            )
        return self


SiteEnergy = Annotated[
    Annotated[Energy, Tag("<number>")]
    | Annotated[dict[Text, Energy], Field(min_length=1), Tag("<table>")],
    Discriminator(lambda value: "<table>" if isinstance(value, dict) else "<number>"),
]


class Hopping(KeyTable):
    """Amplitudes and site energies; H = -t on a bond."""

    exclusive = (("shells", "mass"), ("site_energy", "site_table"))

    unit: Unit = "eV"
    """eV, meV, t, beta, THz, GHz or MHz; left out, eV, and meV with mass"""
    shells: (
        Annotated[tuple[Energy, ...], Field(strict=False, min_length=1, max_length=3)] | None
    ) = None
    """t of first, second, third neighbours; left out, [2.7] in eV and [1.0] in t or beta"""
    mass: Annotated[float, Field(ge=1e-6, le=1e6)] | None = None
    """effective mass in electron masses, square lattice: t = hbar^2/(2 m* a^2)"""
    site_energy: SiteEnergy | None = 0.0
    """a number, or { A = 0.1, B = -0.1 } by sublattice"""
    site_table: Text | None = None
    """path of a CSV table with the columns site,energy, instead of site_energy"""

    @classmethod
    def completed(cls, data: dict[str, Any]) -> dict[str, Any]:
        """Fill in unit and shells, and leave out the default that site_table replaces."""
        with_mass = data.get("mass") is not None
        data.setdefault("unit", "meV" if with_mass else "eV")
        unit = data["unit"]
        if not with_mass and data.get("shells") is None and isinstance(unit, str):
            data["shells"] = DEFAULT_SHELLS.get(unit)
        if data.get("site_table") is not None:
            data["site_energy"] = None
        return data

    @model_validator(mode="after")
    def _amplitudes(self) -> Hopping:
        if self.mass is not None and self.unit not in {"eV", "meV"}:
            raise sentence_error(
                f'hopping.unit = "{self.unit}" does not go with hopping.mass; '
                'an effective mass gives energies in "meV" or "eV"'
            )
        if self.mass is None and self.shells is None:
            raise sentence_error(
                f'hopping.shells is missing; with hopping.unit = "{self.unit}" there is no usual '
                f"amplitude, so give shells = [t] in {self.unit}"
            )
        return self


class MagneticField(KeyTable):
    """The flux through the ring, and how it is written on the bonds."""

    flux: Annotated[float, Field(ge=-LARGEST_FLUX, le=LARGEST_FLUX)] = 0.0
    """flux quanta h/e through the ring"""
    gauge: Literal["uniform", "seam"] = "uniform"
    """where the phases stand: "uniform" along the ring, or on the "seam" alone"""


class Disorder(KeyTable):
    """Random site energies and missing sites, drawn from a seed."""

    strength: Annotated[float, Field(ge=0, lt=LARGEST_ENERGY)] = 0.0
    """full width of the uniform distribution of site energies, in the unit"""
    vacancies: Annotated[float, Field(ge=0, lt=1)] = 0.0
    """fraction of sites taken out, rounded to a count"""
    seed: Annotated[int, Field(ge=0, le=LARGEST_SEED)] = 1
    """the same seed draws the same sites and energies"""


class Levels(KeyTable):
    """Which levels are wanted."""

    exclusive = (("count", "all", "between"),)

    count: Annotated[int, Field(ge=1, le=1_000_000)] | None = None
    """how many, nearest to `near`; 40 unless all or between is given"""
    near: Energy = 0.0
    """the energy whose neighbourhood is wanted"""
    all: bool = False
    """true: the whole spectrum"""
    between: Annotated[tuple[Energy, ...], Field(strict=False)] | None = None
    """[lower, upper]: every level between two energies"""
    method: Literal["auto", "symmetry", "dense", "sparse"] = "auto"
    """how they are found; "auto" chooses from the size and symmetry"""
    broadening: Positive = 0.02
    """width given to each level in the density of states, in the unit"""

    @classmethod
    def completed(cls, data: dict[str, Any]) -> dict[str, Any]:
        """Count 40 levels unless another choice is made."""
        if not chosen(data, ("count", "all", "between")):
            data["count"] = 40
        return data

    @model_validator(mode="after")
    def _window(self) -> Levels:
        if self.between is None:
            return self
        if len(self.between) != 2:
            raise sentence_error(
                f"levels.between = {list(self.between)} must be two numbers [lower, upper]"
            )
        if self.between[0] >= self.between[1]:
            raise sentence_error(
                f"levels.between = {list(self.between)} must be ascending: [lower, upper]"
            )
        return self


class SweepFlux(KeyTable):
    """The fluxes of a sweep, evenly spaced, both ends included."""

    model_config = ConfigDict(serialize_by_alias=True)

    from_: Annotated[float, Field(alias="from", ge=-LARGEST_FLUX, le=LARGEST_FLUX)] = 0.0
    """first flux, in flux quanta"""
    to: Annotated[float, Field(ge=-LARGEST_FLUX, le=LARGEST_FLUX)] = 1.0
    """last flux"""
    points: Annotated[int, Field(ge=2, le=100_001)] = 101
    """how many fluxes"""

    @model_validator(mode="after")
    def _apart(self) -> SweepFlux:
        if self.from_ >= self.to:
            raise sentence_error(
                f"sweep.flux.from = {self.from_:g} must be below sweep.flux.to = {self.to:g}"
            )
        return self


Electrons = Annotated[
    Annotated[Literal["neutral"], Tag("<word>")]
    | Annotated[float, Field(ge=0, le=1e9), Tag("<number>")],
    Discriminator(lambda value: "<word>" if isinstance(value, str) else "<number>"),
]


def _one_or_two(value: object) -> object:
    """Refuse true and 1.0, which equal 1 and would pass as a literal."""
    if type(value) is not int:
        raise PydanticCustomError("int_type", "whole number")
    return value


class Sweep(KeyTable):
    """The flux sweep and the filling whose current is summed."""

    exclusive = (("electrons", "chemical_potential"),)

    flux: SweepFlux = Field(default_factory=SweepFlux)
    """{ from = 0.0, to = 1.0, points = 101 }"""
    electrons: Electrons | None = None
    """a number, or "neutral" (one electron a site), which is the default"""
    chemical_potential: Energy | None = None
    """fixed instead of the number of electrons, in the unit"""
    spin: Annotated[Literal[1, 2], BeforeValidator(_one_or_two)] = 2
    """electrons per level: 1 or 2"""
    temperature: Annotated[float, Field(ge=0, le=1e9)] = 0.0
    """K"""

    @classmethod
    def completed(cls, data: dict[str, Any]) -> dict[str, Any]:
        """Fill neutrally unless a number or a chemical potential is given."""
        if not chosen(data, ("electrons", "chemical_potential")):
            data["electrons"] = data.get("electrons", "neutral")
        return data


class Edges(KeyTable):
    """What counts as near to an edge."""

    within_nm: Annotated[float, Field(gt=0, le=1e9)] | None = None
    """reach of an edge in nm; left out, two nearest-neighbour bonds"""


class Continuum(KeyTable):
    """The comparison with the continuum."""

    refinements: Annotated[int, Field(ge=0, le=8)] = 3
    """the file's mesh and so many finer ones"""


class Control(KeyTable):
    """The rings that stand beside the twisted one."""

    compare: Annotated[tuple[Literal["plain", "double", "open"], ...], Field(strict=False)] = (
        "plain",
        "double",
    )
    """any of "plain" (untwisted, same sites), "double" (twice as long), "open" (not closed)"""

    @model_validator(mode="after")
    def _once(self) -> Control:
        twice = [name for name in dict.fromkeys(self.compare) if self.compare.count(name) > 1]
        if twice:
            raise sentence_error(f'control.compare names "{twice[0]}" twice; once is enough')
        return self
