"""The table of isotope masses against the table of a general library."""

from __future__ import annotations

import pytest
from qcelemental import periodictable

from ladderband.numerics.errors import DomainError
from ladderband.numerics.isotopes import (
    ISOTOPE_MASSES_U,
    SYMBOLS,
    atomic_number,
    isotope_mass_u,
)


def test_symbols_are_those_of_qcelemental_in_order():
    assert [periodictable.to_E(z).capitalize() for z in range(1, 93)] == list(SYMBOLS)


def test_every_mass_is_that_of_qcelemental():
    # qcelemental (MolSSI) carries NIST SRD 144 in full
    for symbol, isotopes in ISOTOPE_MASSES_U.items():
        for number, mass in isotopes.items():
            assert mass == periodictable.to_mass(f"{symbol}{number}")
            assert mass == pytest.approx(number, abs=0.1)


def test_the_default_isotope_is_qcelementals():
    for symbol in ISOTOPE_MASSES_U:
        assert isotope_mass_u(atomic_number(symbol)) == periodictable.to_mass(symbol)


@pytest.mark.parametrize(
    ("number", "mass_number", "says"),
    [
        (1, 4, r"H with mass number 4 .*known: 1, 2, 3"),
        (43, None, r"A default for Tc .*known: none"),
    ],
    ids=["no such isotope", "no natural isotope"],
)
def test_isotopes_that_are_not_listed_are_refused_with_those_that_are(number, mass_number, says):
    with pytest.raises(DomainError, match=says):
        isotope_mass_u(number, mass_number)


@pytest.mark.parametrize("symbol", ["Xx", "", "H2", "1"])
def test_words_that_are_no_element_are_refused(symbol):
    with pytest.raises(DomainError, match="not the symbol of an element"):
        atomic_number(symbol)


def test_symbols_are_read_in_any_case():
    assert [atomic_number(s) for s in ("h", "CL", " Br ")] == [1, 17, 35]
