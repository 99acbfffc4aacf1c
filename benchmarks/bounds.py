"""What `cancel` says of fractions whose answer under given bounds is known.

``python -m benchmarks.bounds`` draws seeded fractions, asks whether their bounds allow a common
factor, prints a table and writes a dated record. The exit status is 1 when an answer is wrong.

*planted*: a common factor of degree 1 to 3, then every coefficient moved by a random share of its
bound. The bounds allow it: anything but "yes" for that degree is a miss, and "no" is wrong.
*too narrow* and *wide enough*: fractions with real roots; the bounds are scaled to 0.98 and 1.02
times what the nearest common real root needs, which a fine grid finds, since for one real root w it
is max(|f(w)|/F(w), |g(w)|/G(w)) with F and G the sums of bound times |w|^k.
"""

from __future__ import annotations

import os
import sys

if not __package__:
    # As a script this directory would come first, and numbers.py in it hides a standard module.
    os.chdir(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
    os.execv(sys.executable, [sys.executable, "-m", "benchmarks.bounds", *sys.argv[1:]])

import time
import warnings
from collections import Counter
from fractions import Fraction
from typing import Any, Final

import numpy as np

from benchmarks.measure import ROOT, save, table
from realize import RealizeWarning, TransferMatrix, Uncertainty, exact

SEED: Final = 20240307
MODELS: Final = 250
"""Of each family; the planted one and the two others make 750 questions."""

Polynomial = tuple[Fraction, ...]


def rounded(roots: list[complex]) -> Polynomial:
    """Return the monic polynomial with these roots, to three decimals."""
    return tuple(Fraction(round(float(c) * 1000), 1000) for c in np.atleast_1d(np.poly(roots)).real)


def drawn(rng: np.random.Generator, count: int, *, real: bool = False) -> list[complex]:
    """Return stable roots of size about one."""
    roots: list[complex] = []
    while len(roots) < count:
        if not real and count - len(roots) > 1 and rng.random() < 0.4:
            root = complex(-0.1 - 2 * rng.random(), 0.1 + 2 * rng.random())
            roots += [root, root.conjugate()]
        else:
            roots.append(complex(-0.1 - 2 * rng.random()))
    return roots


def times(p: Polynomial, q: Polynomial) -> Polynomial:
    product = [Fraction(0)] * (len(p) + len(q) - 1)
    for i, a in enumerate(p):
        for j, b in enumerate(q):
            product[i + j] += a * b
    return tuple(product)


def asked(f: Polynomial, g: Polynomial, radii: list[Polynomial], degree: int) -> str:
    """Return what is said of a common factor of this degree: the best word of those told."""
    uncertainty = Uncertainty(absolute={"numerators": [[radii[0]]], "denominators": [[radii[1]]]})
    found = exact.cancel(TransferMatrix([[f]], [[g]]), uncertainty=uncertainty)
    if len(found.common) > 1:
        return "common"
    words = {each.allowed for each in found.near if each.degree == degree}
    return next((word for word in ("yes", "cannot tell", "no") if word in words), "not told")


def planted(rng: np.random.Generator) -> str:
    degree = int(rng.integers(1, 4))
    h = rounded(drawn(rng, degree))
    below = times(h, rounded(drawn(rng, int(rng.integers(1, 4)))))
    above = times(h, rounded(drawn(rng, int(rng.integers(0, len(below) - len(h) + 1)))))
    size = Fraction(1, 10 ** int(rng.integers(2, 8)))
    radii = [tuple(abs(c) * size for c in p) for p in (above, below)]
    moved = [
        tuple(c + r * Fraction(float(rng.uniform(-1, 1))) for c, r in zip(p, bounds, strict=True))
        for p, bounds in zip((above, below), radii, strict=True)
    ]
    return asked(moved[0], moved[1], radii, degree)


def measured(rng: np.random.Generator, share: Fraction) -> str:
    poles = drawn(rng, int(rng.integers(2, 6)), real=True)
    zeros = drawn(rng, int(rng.integers(1, len(poles))), real=True)
    zeros[0] = poles[0] * (1 + 10.0 ** -rng.integers(2, 7))
    f, g = (
        tuple(Fraction(float(c)) for c in np.atleast_1d(np.poly(r)).real) for r in (zeros, poles)
    )
    bounds = [tuple(abs(c) for c in p) for p in (f, g)]
    grids = [np.linspace(-3, 0, 30001), *(np.linspace(p, z, 4001) for p in poles for z in zeros)]
    w = np.concatenate(grids).real
    needed = np.max(
        [
            np.abs(np.polyval([float(c) for c in p], w))
            / np.polyval([float(c) for c in b], np.abs(w))
            for p, b in zip((f, g), bounds, strict=True)
        ],
        axis=0,
    ).min()
    scale = Fraction(float(needed)) * share
    return asked(f, g, [tuple(b * scale for b in p) for p in bounds], 1)


FAMILIES: Final[dict[str, tuple[Any, str, str]]] = {
    "planted": (planted, "yes", "no"),
    "too narrow": (lambda rng: measured(rng, Fraction(98, 100)), "no", "yes"),
    "wide enough": (lambda rng: measured(rng, Fraction(102, 100)), "yes", "no"),
}
"""Family -> how a question is drawn and asked, the answer wanted, and the one that is wrong."""


def main() -> int:
    warnings.simplefilter("ignore", RealizeWarning)
    rows, record, wrong = [], {}, 0
    for name, (ask, wanted, false) in FAMILIES.items():
        rng = np.random.default_rng(SEED)
        began = time.process_time()
        words = Counter(ask(rng) for _ in range(MODELS))
        seconds = (time.process_time() - began) / MODELS
        wrong += words[false]
        # A pair that is neither near nor allowed gets no line.
        right = words[wanted] + (words["not told"] if wanted == "no" else 0)
        open_ = words.total() - right - words[false] - words["common"]
        rows.append(
            [name, str(right), str(open_), str(words[false]), str(words["common"]),
             f"{seconds:.2f}"]
        )  # fmt: skip
        record[name] = {"words": dict(words), "seconds": seconds}
    print(table(["family", "right", "open", "wrong", "common", "s each"], rows))
    print(save("bounds", {"seed": SEED, "models": MODELS, "families": record}).relative_to(ROOT))
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
