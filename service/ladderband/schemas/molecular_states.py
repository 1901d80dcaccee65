"""One electronic state in a request: arrays, or a QCSchema document."""

from __future__ import annotations

from typing import Any

import numpy as np

from ladderband.numerics.errors import DomainError
from ladderband.numerics.isotopes import atomic_number, isotope_mass_u
from ladderband.numerics.molecule import Molecule
from ladderband.numerics.transition import Floats
from ladderband.numerics.units import BOHR_ANGSTROM
from ladderband.schemas import ranges
from ladderband.schemas.base import StrictSchema
from ladderband.schemas.fields import Choice, Described, Matrix, Number, Numbers, Part
from ladderband.schemas.qcschema import DocumentState, QCSchemaDocument, wrong_at
from ladderband.usecases.mode_maps import MAX_ATOMS
from ladderband.usecases.molecular_states import (
    GradientInput,
    HessianInput,
    ModesInput,
    StateInput,
)

COORDINATES = 3 * MAX_ATOMS
BOHR = float(BOHR_ANGSTROM)


class Atoms(Described):
    """A list of element symbols or atomic numbers -> tuple of atomic numbers."""

    allowed = f"a list of 2 to {MAX_ATOMS} symbols (H to U) or atomic numbers (1 to 92)"

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> tuple[int, ...]:
        if type(value) is not list:
            raise self.refuse("This is not a list.")
        if not 2 <= len(value) <= MAX_ATOMS:
            raise self.refuse(f"This list has {len(value)} entries.")
        return tuple(self._number(entry, index) for index, entry in enumerate(value))

    def _number(self, entry: Any, index: int) -> int:
        if type(entry) is int and 1 <= entry <= 92:
            return entry
        if type(entry) is not str:
            raise self.refuse("This is neither a symbol nor an atomic number.", index)
        try:
            return atomic_number(entry)
        except DomainError as error:
            raise self.refuse(str(error), index) from None

    def json_schema(self) -> dict[str, Any]:
        number = {"type": "integer", "minimum": 1, "maximum": 92}
        entry = {"anyOf": [{"type": "string"}, number]}
        return {"type": "array", "items": entry, "minItems": 2, "maxItems": MAX_ATOMS}


class NormalModesSchema(StrictSchema):
    """Normal modes of a state, instead of its Hessian: every vibration, no rigid motion."""

    wavenumbers_cm1 = Numbers(
        "Wavenumber of each mode, cm^-1; negative for an imaginary one.",
        ranges.SIGNED_WAVENUMBER,
        max_size=COORDINATES,
        required=True,
        example=[1595.0, 3657.0, 3756.0],
    )
    vectors = Matrix(
        "One row a mode: x, y, z of atom 0, x, y, z of atom 1, ... in the frame of the geometry. "
        "Any length and sign.",
        ranges.VECTOR,
        rows=COORDINATES,
        columns=COORDINATES,
        required=True,
    )
    vectors_kind = Choice(
        "cartesian: displacements of the atoms, as most programs print them (default). "
        "mass-weighted: displacements times the square root of the mass.",
        ("cartesian", "mass-weighted"),
        load_default="cartesian",
    )


class MolecularStateSchema(StrictSchema):
    """One electronic state, as arrays or as a QCSchema document."""

    qcschema = QCSchemaDocument(
        "A QCSchema result document whose driver is hessian (or gradient, for the final state); "
        "takes the place of all other members except masses_u and mass_numbers.",
    )
    atoms = Atoms(
        "Symbols or atomic numbers, in the order of the geometry.", example=["O", "H", "H"]
    )
    geometry_angstrom = Matrix(
        "Cartesian coordinates, one row an atom, angstrom.",
        ranges.LENGTH,
        rows=MAX_ATOMS,
        columns=3,
        example=[[0.0, 0.0, 0.117], [0.0, 0.757, -0.469], [0.0, -0.757, -0.469]],
    )
    geometry_bohr = Matrix(
        "The same in bohr. Exactly one of the two is given.",
        ranges.LENGTH,
        rows=MAX_ATOMS,
        columns=3,
    )
    masses_u = Numbers(
        "Mass of each atom, u. Default: the most abundant isotope of each. The final state takes "
        "over the initial state's.",
        ranges.MASS,
        min_size=2,
        max_size=MAX_ATOMS,
        example=[15.9949, 2.0141, 2.0141],
    )
    mass_numbers = Numbers(
        "Mass number of each atom instead of its mass; 0 stands for the most abundant isotope.",
        ranges.MASS_NUMBER,
        min_size=2,
        max_size=MAX_ATOMS,
        example=[18, 2, 1],
    )
    hessian_hartree_bohr2 = Matrix(
        "Cartesian second derivatives of the energy, hartree/bohr^2: rows and columns x, y, z of "
        "atom 0, x, y, z of atom 1, ...",
        ranges.HESSIAN,
        rows=COORDINATES,
        columns=COORDINATES,
    )
    normal_modes = Part(NormalModesSchema, "Normal modes instead of a Hessian.")
    gradient_hartree_bohr = Matrix(
        "Final state only: gradient of its energy at the INITIAL geometry, one row an atom, "
        "hartree/bohr. Gives the displaced model: equal wavenumbers, no mixing. Geometry and atoms "
        "may be left out; the gradient is then in the initial frame.",
        ranges.GRADIENT,
        rows=MAX_ATOMS,
        columns=3,
    )
    energy_hartree = Number(
        "Energy at the geometry given, hartree (beside a gradient: at the initial geometry).",
        ranges.ENERGY,
        example=-76.4,
    )


SOURCES = ("hessian_hartree_bohr2", "normal_modes", "gradient_hartree_bohr")
BESIDE_DOCUMENT = {"qcschema", "masses_u", "mass_numbers"}


def state_of(data: dict[str, Any], name: str) -> StateInput:
    """The state of checked members; ``name`` is its member in the request."""
    if "qcschema" in data:
        extra = sorted(set(data) - BESIDE_DOCUMENT)
        if extra:
            raise wrong_at(
                f"{name}/{extra[0]}",
                "The QCSchema document says this already.",
                "beside qcschema only masses_u or mass_numbers",
            )
        return _from_document(data, name)
    source = _one_of(data, SOURCES, name)
    molecule = _molecule(data, name, source)
    return StateInput(
        molecule,
        _source(data, source),
        data.get("energy_hartree"),
        masses_given="masses_u" in data or "mass_numbers" in data,
        geometry_member="geometry_bohr" if "geometry_bohr" in data else "geometry_angstrom",
        source_member=source,
    )


def _one_of(data: dict[str, Any], members: tuple[str, ...], name: str) -> str:
    given = [member for member in members if member in data]
    if len(given) != 1:
        detail = "Give only one of these members." if given else "This or another is required."
        raise wrong_at(
            f"{name}/{(given or members)[-1]}", detail, "exactly one of: " + ", ".join(members)
        )
    return given[0]


def _molecule(data: dict[str, Any], name: str, source: str) -> Molecule | None:
    shapes = ("geometry_angstrom", "geometry_bohr")
    if source == "gradient_hartree_bohr" and not {"atoms", *shapes} & set(data):
        return None
    if "atoms" not in data:
        raise wrong_at(f"{name}/atoms", "This member is required.", Atoms.allowed)
    member = _one_of(data, shapes, name)
    geometry = data[member] * (BOHR if member == "geometry_bohr" else 1.0)
    numbers = data["atoms"]
    if geometry.shape != (len(numbers), 3):
        raise wrong_at(
            f"{name}/{member}",
            f"The geometry has {geometry.shape[0]} rows of {geometry.shape[1]} numbers.",
            f"{len(numbers)} rows of 3",
        )
    return Molecule(numbers, geometry, _masses(data, numbers, name))


def _masses(data: dict[str, Any], numbers: tuple[int, ...], name: str) -> Floats:
    """Masses as given, or by isotope, or of the most abundant isotopes."""
    if "masses_u" in data and "mass_numbers" in data:
        raise wrong_at(f"{name}/mass_numbers", "Masses are given as well.", "only one of the two")
    member = "masses_u" if "masses_u" in data else "mass_numbers"
    given = data.get(member, np.zeros(len(numbers)))
    if len(given) != len(numbers):
        raise wrong_at(
            f"{name}/{member}", f"This list has {len(given)} entries.", f"{len(numbers)}"
        )
    if member == "masses_u":
        return np.asarray(given)
    try:
        return np.array([isotope_mass_u(z, _whole(a)) for z, a in zip(numbers, given, strict=True)])
    except DomainError as error:
        raise wrong_at(f"{name}/mass_numbers", str(error), "isotopes of the table") from None


def _whole(mass_number: float) -> int | None:
    if not float(mass_number).is_integer():
        raise DomainError(f"{mass_number:g} is not a mass number.")
    return int(mass_number) or None


def _source(data: dict[str, Any], member: str) -> HessianInput | ModesInput | GradientInput:
    if member == "hessian_hartree_bohr2":
        return HessianInput(data[member])
    if member == "gradient_hartree_bohr":
        return GradientInput(data[member].ravel())
    modes = data[member]
    weighted = modes["vectors_kind"] == "mass-weighted"
    return ModesInput(modes["wavenumbers_cm1"], modes["vectors"], weighted)


def _from_document(data: dict[str, Any], name: str) -> StateInput:
    document: DocumentState = data["qcschema"]
    numbers = document.atomic_numbers
    if not 2 <= len(numbers) <= MAX_ATOMS:
        detail = f"There are {len(numbers)} atoms."
        raise wrong_at(f"{name}/qcschema/molecule/symbols", detail, f"2 to {MAX_ATOMS}")
    given: dict[str, Any] = {key: data[key] for key in ("masses_u", "mass_numbers") if key in data}
    if not given and document.masses_u is not None:
        given = {"masses_u": document.masses_u}
    elif not given and document.mass_numbers is not None:
        given = {"mass_numbers": np.array([a or 0 for a in document.mass_numbers])}
    size = 3 * len(numbers)
    source = (
        HessianInput(document.derivative.reshape(size, size))
        if document.driver == "hessian"
        else GradientInput(document.derivative)
    )
    return StateInput(
        Molecule(numbers, document.geometry_bohr * BOHR, _masses(given, numbers, name)),
        source,
        document.energy_hartree,
        # masses written into a document are mostly a program's defaults: they contradict nothing
        masses_given="masses_u" in data or "mass_numbers" in data,
        geometry_member="qcschema/molecule/geometry",
        source_member=f"qcschema/{document.derivative_member}",
    )
