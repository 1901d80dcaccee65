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
from ladderband.schemas import ranges
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
        raise wrong_at(
            "schema_name", "This is not the name of a result document.", " or ".join(SCHEMA_NAMES)
        )
    if document.get("success") is not True:
        raise wrong_at("success", "The calculation did not succeed.", "true")
    molecule = _object(document, "molecule")
    numbers = _atoms(molecule)
    driver, member, derivative = _derivative(document, 3 * len(numbers))
    return DocumentState(
        numbers,
        _array(molecule, "geometry", "molecule/geometry", 3 * len(numbers), ranges.LENGTH).reshape(
            -1, 3
        ),
        _masses(molecule, len(numbers)),
        _mass_numbers(molecule, len(numbers)),
        driver,
        derivative,
        member,
        _energy(document),
    )


def wrong_at(pointer: str, detail: str, allowed: str) -> ValidationError:
    """The error for the member at ``pointer`` (names joined by slashes)."""
    messages: Any = [Complaint(detail, allowed)]
    for name in reversed(pointer.split("/")):
        messages = {name: messages}
    return ValidationError(messages)


def _object(parent: Mapping[str, Any], name: str) -> Mapping[str, Any]:
    value = parent.get(name)
    if type(value) is not dict:
        raise wrong_at(name, "This member is required.", "an object")
    return value


def _atoms(molecule: Mapping[str, Any]) -> tuple[int, ...]:
    symbols = molecule.get("symbols")
    if type(symbols) is not list or not symbols or set(map(type, symbols)) != {str}:
        raise wrong_at("molecule/symbols", "This is not a list of symbols.", '["O", "H", "H"]')
    real = molecule.get("real")
    if real is not None and real != [True] * len(symbols):
        raise wrong_at("molecule/real", "There are ghost atoms.", "true for every atom")
    try:
        return tuple(atomic_number(symbol) for symbol in symbols)
    except DomainError as error:
        raise wrong_at("molecule/symbols", str(error), "symbols of elements") from None


def _array(
    parent: Mapping[str, Any], name: str, pointer: str, size: int, within: ranges.Range
) -> Floats:
    """A flat array of numbers; nested rows are flattened, as the standard's readers do."""
    try:
        array = np.array(parent.get(name))
    except ValueError:  # ragged
        array = np.array(None)
    allowed = f"{size} numbers, each {within.text()}"
    if array.dtype.kind not in "if":
        raise wrong_at(pointer, "This is not an array of numbers.", allowed)
    if array.size != size:
        raise wrong_at(pointer, f"This holds {array.size} numbers.", allowed)
    flat = array.ravel().astype(np.float64)
    outside = within.first_outside(flat)
    if outside is not None:
        raise wrong_at(pointer, f"Number {outside} is outside the allowed range.", allowed)
    return flat


def _masses(molecule: Mapping[str, Any], n: int) -> Floats | None:
    if molecule.get("masses") is None:
        return None
    return _array(molecule, "masses", "molecule/masses", n, ranges.MASS)


def _mass_numbers(molecule: Mapping[str, Any], n: int) -> tuple[int | None, ...] | None:
    """Mass numbers; the standard's -1 stands for an isotope that is not stated."""
    if molecule.get("mass_numbers") is None:
        return None
    numbers = _array(
        molecule, "mass_numbers", "molecule/mass_numbers", n, ranges.DOCUMENT_MASS_NUMBER
    )
    return tuple(int(a) if a > 0 else None for a in numbers)


def _derivative(document: Mapping[str, Any], size: int) -> tuple[Derivative, str, Floats]:
    """The Hessian, or else the gradient, and where it was found."""
    driver = document.get("driver")
    if driver is None:  # version 2 keeps it in the copy of the input
        driver = _inner(_inner(document, "input_data"), "specification").get("driver")
    properties = _inner(document, "properties")
    wanted: tuple[tuple[Derivative, int, ranges.Range], ...] = (
        ("hessian", size * size, ranges.HESSIAN),
        ("gradient", size, ranges.GRADIENT),
    )
    for kind, count, within in wanted:
        if driver == kind:
            member = "return_result"
            return kind, member, _array(document, member, member, count, within)
        name = f"return_{kind}"
        if properties.get(name) is not None:
            member = f"properties/{name}"
            return kind, member, _array(properties, name, member, count, within)
    raise wrong_at(
        "driver", "There is neither a Hessian nor a gradient.", "driver hessian or gradient"
    )


def _inner(parent: Mapping[str, Any], name: str) -> Mapping[str, Any]:
    """An optional object, empty when it is missing or something else."""
    value = parent.get(name)
    return value if isinstance(value, dict) else {}


def _energy(document: Mapping[str, Any]) -> float | None:
    properties = _inner(document, "properties")
    if properties.get("return_energy") is None:
        return None
    member = "properties/return_energy"
    return float(_array(properties, "return_energy", member, 1, ranges.ENERGY)[0])
