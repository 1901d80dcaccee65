"""The ball route, exact zeros, and digits that are decided."""

from __future__ import annotations

import threading
from fractions import Fraction

import flint
import mpmath
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.balls import ExactPair, ball_table, exactly_zero, working_precision
from ladderband.numerics.decimal_tables import decimal_tables
from ladderband.numerics.decimals import DecimalRounder
from ladderband.numerics.errors import DeadlineExceeded
from ladderband.numerics.matrix_elements import Operator
from ladderband.numerics.oscillators import one_pair
from overlap_oracles import displaced_overlap, exact_pair


def test_balls_contain_the_exact_values_and_are_narrow() -> None:
    """Equal frequencies: the Laguerre form in fractions (DLMF 18.5.12), 60 digits."""
    with working_precision(400, 13):
        rows = ball_table(exact_pair(1, Fraction(5, 2)), 12, 12, Deadline.none())
        for v in range(13):
            for n in range(13):
                truth = displaced_overlap(v, n, Fraction(5, 2), 80)
                text = mpmath.nstr(truth, 70)
                assert abs(rows[v][n] - flint.arb(text)) < flint.arb("1e-60")
                assert rows[v][n].rad() < 1e-60


@pytest.mark.parametrize(
    ("pair", "v", "n", "expected"),
    [
        pytest.param(exact_pair(1, 0), 3, 5, False, id="identical-even"),
        pytest.param(exact_pair(2, 0), 3, 6, True, id="parity"),
        pytest.param(ExactPair(Fraction(1), Fraction(2), 1, False), 1, 1, True, id="S=1: 1-S"),
        pytest.param(ExactPair(Fraction(1), Fraction(2), 1, False), 2, 2, False, id="S=1: L2"),
        pytest.param(ExactPair(Fraction(1), Fraction(6), 1, False), 1, 3, True, id="S=3: L1(2)"),
        pytest.param(ExactPair(Fraction(4), Fraction(2), 1, False), 1, 1, False, id="distorted"),
    ],
)
def test_exact_zeros_are_recognised(pair: ExactPair, v: int, n: int, expected: bool) -> None:
    assert exactly_zero(pair, v, n) is expected


def test_a_shift_with_pi_is_never_called_zero() -> None:
    pair = ExactPair.of(one_pair(1000.0, 1000.0, 0.1, "shift_angstrom_sqrt_u"), 0)
    assert pair.pi
    assert not exactly_zero(pair, 1, 1)


@pytest.mark.parametrize(
    ("text", "digits", "expected"),
    [
        ("0.99951", 3, "1.00"),
        ("0.99949", 3, "0.999"),
        ("1e-400", 3, "1.00e-400"),
        ("-9.996e-320", 3, "-1.00e-319"),
        ("100", 3, "100"),
        ("1234.5678", 6, "1234.57"),
        ("0.000012345", 4, "0.00001235"),
        ("0.0000012345", 4, "1.235e-6"),
        ("123456", 2, "1.2e+5"),
        ("5", 1, "5"),
    ],
)
def test_rounding_to_digits(text: str, digits: int, expected: str) -> None:
    with working_precision(200):
        value = flint.arb(text) * (1 + flint.arb("1e-9"))  # off any tie
        assert str(DecimalRounder(digits)(value)) == expected


def test_a_wide_ball_gives_no_digits() -> None:
    with working_precision(200):
        round_to_five = DecimalRounder(5)
        assert round_to_five(flint.arb("1.2345", "1e-3")) is None
        assert round_to_five(flint.arb(0, "1e-30")) is None
        assert str(round_to_five(flint.arb(0))) == "0"


@pytest.mark.parametrize("digits", [1, 5, 16, 50, 300])
def test_every_digit_is_right(digits: int) -> None:
    """Against the exact Laguerre value in mpmath, rounded to as many digits."""
    tables = decimal_tables(exact_pair(1, Fraction(3, 2)), 9, 9, digits, None, Deadline.none())
    assert not tables.undecided
    for v in range(10):
        for n in range(10):
            truth = displaced_overlap(v, n, Fraction(3, 2), digits + 40)
            context = mpmath.MPContext()
            context.dps = digits + 40
            given = context.mpf(str(tables.overlaps[v][n]))
            unit = context.mpf(10) ** tables.overlaps[v][n].exponent
            assert abs(given - truth) <= unit * (context.mpf("0.5") + context.mpf("1e-20"))
            assert len(str(abs(tables.overlaps[v][n].mantissa))) == digits


def test_accidental_zeros_are_exact_and_undecided_elements_are_listed() -> None:
    """S = 1: <1|1'> = e^-1/2 (1 - S) = 0. <1|q'^2|0'> vanishes too, which nothing proves: listed."""
    pair = ExactPair.of(one_pair(1000.0, 1000.0, 1.0, "huang_rhys"), 0)
    operator = Operator("coordinate_power", 2, "final")
    tables = decimal_tables(pair, 2, 2, 30, operator, Deadline.none())
    assert str(tables.overlaps[1][1]) == "0"
    assert str(tables.factors[1][1]) == "0"
    assert {(u.table, u.v_initial, u.v_final) for u in tables.undecided} >= {
        ("matrix_elements", 1, 0)
    }
    assert all(float(u.bound) < 1e-60 for u in tables.undecided)


def test_shift_in_angstrom_equals_its_displacement() -> None:
    """K = 0.1 angstrom sqrt(u) at 1000 cm^-1 is Delta = 0.5446114... (CODATA 2022 by hand)."""
    shift = ExactPair.of(one_pair(1000.0, 1000.0, 0.1, "shift_angstrom_sqrt_u"), 0)
    direct = ExactPair.of(one_pair(1000.0, 1000.0, 0.54461143289), 0)
    a = decimal_tables(shift, 1, 1, 9, None, Deadline.none())
    b = decimal_tables(direct, 1, 1, 9, None, Deadline.none())
    assert float(str(a.overlaps[0][1])) == pytest.approx(float(str(b.overlaps[0][1])), abs=1e-8)


def test_the_deadline_is_seen_inside_the_loop() -> None:
    with pytest.raises(DeadlineExceeded):
        decimal_tables(exact_pair(1, 1), 50, 50, 30, None, Deadline(at=0.0))


def test_threads_asking_for_different_digits_get_what_a_lone_caller_gets() -> None:
    """The library's precision is process-global; the lock keeps every caller's own."""

    def ask(digits: int) -> list[list[str]]:
        tables = decimal_tables(
            exact_pair(Fraction(9, 10), Fraction(11, 7)), 6, 6, digits, None, Deadline.none()
        )
        return [[str(value) for value in row] for row in tables.overlaps]

    digits = [5 + 7 * k for k in range(32)]
    alone = [ask(d) for d in digits]
    together: list[list[list[str]] | None] = [None] * 32

    def work(index: int) -> None:
        for _ in range(3):
            together[index] = ask(digits[index])

    threads = [threading.Thread(target=work, args=(i,)) for i in range(32)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert together == alone
