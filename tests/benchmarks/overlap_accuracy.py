"""The accuracy table of DEVELOPERS.md: true error, proven bound and route of awkward overlap tables.

Run: python tests/benchmarks/overlap_accuracy.py   (prints Markdown; truth from balls, some minutes)
"""

from __future__ import annotations

import os
import sys
from fractions import Fraction
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).parents[1]))

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.certificate import certified_tables
from ladderband.numerics.ladder import ladder_tables, pair_coefficients
from ladderband.numerics.oscillators import one_pair
from overlap_oracles import exact_pair, worst_error

CASES = [
    (Fraction(1), 1, 0, 20),
    (Fraction(1), 1, 20, 20),
    (Fraction(9, 10), 2, 200, 200),
    (Fraction(1), 5, 60, 60),
    (Fraction(1), 5, 120, 120),
    (Fraction(1), 9, 400, 400),
    (Fraction(1), 30, 400, 400),
    (Fraction(1, 4), 6, 200, 200),
    (Fraction(1, 50), 3, 300, 300),
    (Fraction(50), 3, 300, 300),
    (Fraction(1), 0, 100, 100),
    (Fraction(1), 1, 2000, 0),
    (Fraction(1), 63, 3, 2000),
    (Fraction(4, 5), 1, 2000, 200),
]


def main() -> None:
    print(
        "| f/g | shift | table | true error | proven bound | route | ladder alone: error, bound |"
    )
    print("| --- | --- | --- | --- | --- | --- | --- |")
    for ratio, shift, v, n in CASES:
        pair = one_pair(Fraction(1000), 1000 * ratio, Fraction(shift))
        found = certified_tables(pair, v, n, 1e-10, Deadline.none())
        exact = exact_pair(ratio, shift)
        ladder, ladder_bound = ladder_tables(pair_coefficients(pair), v, n)
        print(
            f"| {ratio} | {shift} | {v} x {n} | {worst_error(found.tables[0], exact):.1e} "
            f"| {found.bounds[0]:.1e} | {found.route} "
            f"| {worst_error(ladder[0], exact):.1e}, {ladder_bound[0]:.1e} |",
            flush=True,
        )


if __name__ == "__main__":
    main()
