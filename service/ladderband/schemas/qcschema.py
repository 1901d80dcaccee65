"""Reading QCSchema documents: the open JSON standard for results of electronic-structure programs.

Taken are results of one calculation (the MolSSI QCSchema's ``qcschema_output``, schema version 1,
and ``qcschema_atomic_result``, version 2), whose Hessian or gradient is the ``return_result`` of
the driver or a member of ``properties``. Everything is in atomic units there. Only the members that
are used are looked at; a document may hold any others.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from marshmallow import ValidationError

from ladderband.numerics.errors import DomainError
from ladderband.numerics.isotopes import atomic_number
from ladderband.numerics.transition import Floats
from ladderband.schemas.fields import Complaint, Described

SCHEMA_NAMES = ("qcschema_output", "qcschema_atomic_result")
Derivative = Literal["hessian", "gradient"]


@dataclass(frozen=True)
class DocumentState:
    """What one document says: masses (n,) in u or None, mass numbers or None, a flat derivative."""

    atomic_numbers: tuple[int, ...]
    geometry_bohr: Floats
    masses_u: Floats | None
    mass_numbers: tuple[int | None, ...] | None
    driver: Derivative
    derivative: Floats
    derivative_member: str
    energy_hartree: float | None


class QCSchemaDocument(Described):
    """A QCSchema result document -> :class:`DocumentState`."""

    allowed = "a QCSchema result: " + " or ".join(SCHEMA_NAMES)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> DocumentState:
        if type(value) is not dict:
            raise self.refuse("This is not an object.")
        return read_document(value)

    def json_schema(self) -> dict[str, Any]:
        geometry = {"type": "array", "items": {"type": "number"}}
        symbols = {"type": "array", "items": {"type": "string"}}
        return {
            "type": "object",
            "required": ["schema_name", "molecule", "return_result"],
            "properties": {
                "schema_name": {"type": "string", "enum": list(SCHEMA_NAMES)},
                "molecule": {
                    "type": "object",
                    "required": ["symbols", "geometry"],
                    "properties": {"symbols": symbols, "geometry": geometry},
                    "additionalProperties": True,
                },
            },
            "additionalProperties": True,
        }


def read_document(document: Mapping[str, Any]) -> DocumentState:
    """The state in a document.

    Raises
    ------
    ValidationError
        A member that is needed is missing or is not what the standard says it is.
    """
    if document.get("schema_name") not in SCHEMA_NAMES:
        raise _wrong("schema_name", "This is not the name of a result document.", SCHEMA_NAMES)
    if document.get("success") is not True:
        raise _wrong("success", "The calculation did not succeed.", ("true",))
    molecule = _object(document, "molecule")
    numbers = _atoms(molecule)
    driver, member, derivative = _derivative(document, 3 * len(numbers))
    return DocumentState(
        numbers,
        _array(molecule, "geometry", "molecule/geometry", 3 * len(numbers)).reshape(-1, 3),
        _masses(molecule, len(numbers)),
        _mass_numbers(molecule, len(numbers)),
        driver,
        derivative,
        member,
        _energy(document),
    )


def _wrong(pointer: str, detail: str, allowed: tuple[str, ...]) -> ValidationError:
    messages: Any = [Complaint(detail, "one of: " + ", ".join(allowed))]
    for name in reversed(pointer.split("/")):
        messages = {name: messages}
    return ValidationError(messages)


def _object(parent: Mapping[str, Any], name: str) -> Mapping[str, Any]:
    value = parent.get(name)
    if type(value) is not dict:
        raise _wrong(name, "This member is required.", ("an object",))
    return value


def _atoms(molecule: Mapping[str, Any]) -> tuple[int, ...]:
    symbols = molecule.get("symbols")
    if type(symbols) is not list or not symbols or set(map(type, symbols)) != {str}:
        raise _wrong("molecule/symbols", "This is not a list of symbols.", ('["O", "H", "H"]',))
    real = molecule.get("real")
    if real is not None and real != [True] * len(symbols):
        raise _wrong("molecule/real", "There are ghost atoms.", ("true for every atom",))
    try:
        return tuple(atomic_number(symbol) for symbol in symbols)
    except DomainError as error:
        raise _wrong("molecule/symbols", str(error), ("symbols of elements",)) from None


def _array(parent: Mapping[str, Any], name: str, pointer: str, size: int) -> Floats:
    """A flat array of finite numbers; nested rows are flattened, as the standard's readers do."""
    try:
        array = np.array(parent.get(name), dtype=np.float64).ravel()
    except (TypeError, ValueError):
        raise _wrong(pointer, "This is not an array of numbers.", (f"{size} numbers",)) from None
    if array.size != size or not np.isfinite(array).all():
        raise _wrong(pointer, f"This holds {array.size} numbers.", (f"{size} finite numbers",))
    return array


def _masses(molecule: Mapping[str, Any], n: int) -> Floats | None:
    if molecule.get("masses") is None:
        return None
    masses = _array(molecule, "masses", "molecule/masses", n)
    if not ((masses > 0.5) & (masses < 500.0)).all():
        raise _wrong("molecule/masses", "This is not a list of masses in u.", ("0.5 to 500 u",))
    return masses


def _mass_numbers(molecule: Mapping[str, Any], n: int) -> tuple[int | None, ...] | None:
    """Mass numbers; the standard's -1 stands for an isotope that is not stated."""
    if molecule.get("mass_numbers") is None:
        return None
    numbers = _array(molecule, "mass_numbers", "molecule/mass_numbers", n)
    return tuple(int(a) if a > 0 else None for a in numbers)


def _derivative(document: Mapping[str, Any], size: int) -> tuple[Derivative, str, Floats]:
    """The Hessian, or else the gradient, and where it was found."""
    driver = document.get("driver")
    if driver is None:  # version 2 keeps it in the copy of the input
        specification = document.get("input_data", {}).get("specification", {})
        driver = specification.get("driver")
    properties = document.get("properties")
    found: Mapping[str, Any] = properties if type(properties) is dict else {}
    wanted: tuple[tuple[Derivative, int], ...] = (("hessian", size * size), ("gradient", size))
    for kind, count in wanted:
        if driver == kind:
            return kind, "return_result", _array(document, "return_result", "return_result", count)
        name = f"return_{kind}"
        if found.get(name) is not None:
            member = f"properties/{name}"
            return kind, member, _array(found, name, member, count)
    raise _wrong("driver", "There is neither a Hessian nor a gradient.", ("hessian", "gradient"))


def _energy(document: Mapping[str, Any]) -> float | None:
    properties = document.get("properties")
    energy = properties.get("return_energy") if type(properties) is dict else None
    return float(energy) if isinstance(energy, int | float) else None
