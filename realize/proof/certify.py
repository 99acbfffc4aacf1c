"""From a result to a certificate of it."""

from __future__ import annotations

import datetime
import math
import platform
from fractions import Fraction
from typing import Any

import flint
import numpy as np

from realize import checker, forms
from realize.arithmetic.exact import ExactPath
from realize.arithmetic.modular import Clock
from realize.arithmetic.rational import RationalMatrix
from realize.arithmetic.similar import inverse_modulus, rank_modulus
from realize.entries import Kind, Reading, known_word, make_fraction, spell_fraction
from realize.errors import CertificateError, LimitError, UnsupportedEntryError
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix
from realize.nearness.distance import Distance
from realize.nearness.pencil import Pencil
from realize.proof.cover import radius, squares
from realize.proof.record import Certificate, Comparison, Difference, check
from realize.results import Echelon, Evidence, Reduction

__all__ = ["certify"]

Array = np.ndarray[Any, Any]

_TRIED = (Reading.STORED, Reading.WRITTEN)
"""The readings of a floating reduction that are tried when none is named; intended never leads."""

_MOST = 350_000
"""So many squares at most are looked at, and those that take the checker half of its work."""

_NARROW = 1e-11
"""Bounds nearer to each other than this are moved apart by that much."""


def certify(
    result: Reduction | Comparison | Distance, *, reading: str | None = None
) -> Certificate:
    """Make a certificate of a result, which anyone can check without trusting this package.

    Parameters
    ----------
    result : Reduction, Comparison or Distance
        What `minimal`, `same_transfer` or a distance returned. An exact reduction is certified as
        it is, with the evidence found on the way. A floating one is certified through a reading,
        and a distance perhaps with a weaker lower bound: see Notes.
    reading : {"stored", "written", "intended"}, keyword-only, optional
        For a floating reduction: which exact model it is about. Left out, the first of stored and
        written under which the minimal order is the order delivered.

    Returns
    -------
    Certificate
        Its ``to_json()`` is what to hand on.

    Raises
    ------
    CertificateError
        When the exact minimal order under the reading is not the order delivered, or when a
        result does not know what it was made of; for a distance of a model without states.
    LimitError
        When the certificate would be longer than the checker reads, or a distance takes more
        squares than it looks at.
    UnsupportedEntryError
        When the result is of another kind.

    Notes
    -----
    Of a minimal realization the certificate holds bases V and U with A V = V A1, B = V B1,
    U A1 = Ar U, Br = U B1, C V = Cr U, and a modulus that shows the reduced model to be reachable
    and observable. `realize.checker` says in its docstring why this is a proof. For a floating
    reduction the reduced model is exact and minimal, in the coordinates of the doubles that were
    delivered, and the certificate bounds how far these lie from it. All of it is about exact
    tables of numbers, and not about a plant.

    Of a distance it holds a vector for the upper bound and a covering of the plane by squares for
    the lower one. The checker takes plain squares only, so where they are too many for the lower
    bound that was proved, half and then a quarter of the upper bound are tried in its place; the
    claim in words says which bounds it is about. ``about`` says that it was so. Such a
    certificate is checked before it is handed out, which may take half a minute.

    References
    ----------
    Kalman (1963), Mathematical description of linear dynamical systems, SIAM J. Control 1.
    Kailath (1980), Linear Systems, section 2.4. Eising (1984), Systems and Control Letters 4.

    Examples
    --------
    >>> import realize
    >>> model = realize.Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    >>> realize.certify(realize.minimal(model)).kind
    'minimal realization'
    """
    word = None if reading is None else known_word(Reading, reading, "reading")
    if isinstance(result, Reduction):
        return _of_reduction(result, word)
    if isinstance(result, Comparison):
        return _of_comparison(result)
    if isinstance(result, Distance):
        return _of_distance(result)
    raise UnsupportedEntryError(
        f"found a value of type {type(result).__name__}; give the result of minimal, of "
        "same_transfer or of a distance",
        found=type(result).__name__,
    )


# Reductions


def _of_reduction(result: Reduction, reading: Reading | None) -> Certificate:
    source = result._source
    if source is None:
        raise CertificateError(
            "this reduction was not made of a model, so there is nothing that it could be proved "
            "equal to; certify minimal(result.model)"
        )
    if result.model.kind is Kind.FLOATING:
        return _of_floating(result, source, reading)
    _check_period(source)
    evidence = result._evidence.get()
    if evidence is None or evidence.reached is None:
        raise CertificateError(
            f"found a reduction computed in {result.model.kind} arithmetic, which proves nothing; "
            "certify one of realize.exact or realize.floating"
        )
    steps = _steps(evidence, _turned(evidence.seen))
    return _minimal(source, evidence.model, result.model, steps, evidence.modulus)


def _check_period(source: Realization | TransferMatrix) -> None:
    if isinstance(source.sampling_period, float):
        raise CertificateError(
            f"the sampling period is the float {source.sampling_period!r}, and a certificate is "
            "about exact numbers; take model.read(reading), which reads it too"
        )


def _of_floating(
    result: Reduction, source: Realization | TransferMatrix, reading: Reading | None
) -> Certificate:
    """Certify the exact model that a floating reduction is about, in the coordinates delivered."""
    orders: dict[str, int] = {}
    for word in _TRIED if reading is None else (reading,):
        read = source.read(word)
        reduction = forms.reduce(ExactPath(), read)
        if reduction.order == result.order:
            break
        orders[str(word)] = reduction.order
    else:
        found = ", ".join(f"{order} as {word}" for word, order in orders.items())
        raise CertificateError(
            f"the floating path delivered order {result.order}; the exact minimal order is {found}."
            " Name a reading that confirms the order, or certify an exact reduction"
        )
    evidence, floating = reduction._evidence.get(), result._evidence.get()
    assert evidence is not None
    assert floating is not None
    S = _coordinates(evidence, floating)
    inverse = RationalMatrix(S.matrix.inv())
    exact = reduction.model
    A, B, C = (RationalMatrix.from_array(matrix) for matrix in (exact.A, exact.B, exact.C))
    moved = Realization._trusted(
        (S @ A @ inverse).to_array(),
        (S @ B).to_array(),
        (C @ inverse).to_array(),
        exact.D,
        kind=Kind.RATIONAL,
        sampling_period=exact.sampling_period,
        input_names=exact._input_names,
        output_names=exact._output_names,
    )
    delivered = [_stored(matrix) for matrix in result.model.matrices()]
    squares = sum(
        ((x - y) ** 2)
        for ours, theirs in zip(moved.matrices(), delivered, strict=True)
        for x, y in zip(ours.flat, theirs.flat, strict=True)
    )
    near = {
        "delivered": _tables(delivered),
        "distance": spell_fraction(_root_above(Fraction(squares))),
    }
    steps = _steps(evidence, _rows((S @ _projection(evidence)).to_array()))
    modulus = rank_modulus(S @ A @ inverse, S @ B, C @ inverse, Clock(None))
    return _minimal(read, evidence.model, moved, steps, modulus, near)


def _coordinates(exact: Evidence, floating: Evidence) -> RationalMatrix:
    """Return S, in doubles, with delivered state = about S @ exactly reduced state.

    With V the exact basis, U the exact projection and M the floating state map, S U = M V; the
    columns in which U is the identity show S.
    """
    if exact.model.order != floating.model.order or floating.state_map is None:
        raise CertificateError(
            f"in floating arithmetic the transfer matrix was realized with {floating.model.order} "
            f"states, exactly with {exact.model.order}, so the two reductions have no coordinates "
            "in common; certify minimal(as_realization(transfer))"
        )
    assert exact.reached is not None
    assert exact.seen is not None
    basis = _matrix(exact.reached).take(range(exact.reached.size), exact.seen.pivots)
    image = RationalMatrix.from_floats(floating.state_map) @ basis
    try:
        S = RationalMatrix.from_floats(image.rounded())
    except OverflowError:
        raise _unlike() from None
    if S.rank() < S.shape[0]:
        raise _unlike()
    return S


def _unlike() -> CertificateError:
    return CertificateError(
        "the coordinates of the doubles delivered are too far from those of the exact model to "
        "compare the two; certify an exact reduction"
    )


def _stored(matrix: Array) -> Array:
    """Return doubles as the rationals that they are."""
    result = np.empty(matrix.shape, dtype=object)
    for place, value in np.ndenumerate(matrix):
        result[place] = make_fraction(*value.as_integer_ratio())
    return result


def _root_above(square: Fraction) -> Fraction:
    """Return a decimal of two digits that is at least the root of a number, hardly more."""
    if not square:
        return Fraction(0)
    length = square.numerator.bit_length() - square.denominator.bit_length()
    exponent = 1 - math.floor(length * math.log10(2) / 2)
    while True:
        scaled = math.ceil(square * Fraction(10) ** (2 * exponent))
        root = math.isqrt(scaled - 1) + 1
        if root < 100:
            return root / Fraction(10) ** exponent
        exponent -= 1


def _minimal(
    source: Realization | TransferMatrix,
    model: Realization,
    reduced: Realization,
    steps: dict[str, Any],
    modulus: int,
    near: dict[str, Any] | None = None,
) -> Certificate:
    claim = {
        "kind": "minimal realization",
        "model": _source(source, model),
        "reduced": _model(reduced),
        **(near or {}),
    }
    return Certificate._of(claim, {"reduction": steps, "modulus": modulus}, _about())


# Comparisons


def _of_comparison(result: Comparison) -> Certificate:
    sides = result._sides
    claim: dict[str, Any] = {
        "first": _source(sides[0].source, sides[0].model),
        "second": _source(sides[1].source, sides[1].model),
    }
    evidence: dict[str, Any] = {}
    if result.difference is not None:
        claim["kind"] = f"different {_PLURALS[result.difference]}"
    if result.counterexample is not None and result._solutions is not None:
        point = result.counterexample.point
        claim["point"] = spell_fraction(point)
        claim["values"] = {
            "first": _rows(result.counterexample.first),
            "second": _rows(result.counterexample.second),
        }
        evidence = {
            "first": _rows(result._solutions[0]),
            "second": _rows(result._solutions[1]),
            "modulus": inverse_modulus([_shifted(side.model, point) for side in sides]),
        }
    elif result.difference is None:
        claim["kind"] = "same transfer matrix"
        claim["transformation"] = None
        if result.transformation is not None:
            claim["transformation"] = _rows(result.transformation)
            T = RationalMatrix.from_array(result.transformation)
            evidence = {"modulus": inverse_modulus([T])}
        else:
            evidence = _through_one(result)
    return Certificate._of(claim, evidence, _about())


_PLURALS = {
    Difference.TRANSFER_MATRIX: "transfer matrices",
    Difference.SAMPLING_PERIOD: "sampling periods",
    Difference.SIZES: "sizes",
}


def _through_one(result: Comparison) -> dict[str, Any]:
    """Return what leads from both sides to one reduced model, that of the first."""
    first, second = (side.reduction._evidence.get() for side in result._sides)
    assert first is not None
    assert second is not None
    assert result._between is not None
    T = RationalMatrix.from_array(result._between)
    return {
        "first": _steps(first, _turned(first.seen)),
        "second": _steps(second, _rows((T @ _projection(second)).to_array())),
        "common": _model(result._sides[0].reduction.model),
    }


def _shifted(model: Realization, point: Fraction) -> RationalMatrix:
    """Return z - A."""
    return RationalMatrix.identity(model.order).scaled(point) - RationalMatrix.from_array(model.A)


# Distances


def _of_distance(result: Distance) -> Certificate:
    source = result._source
    _check_period(source)
    if not source.order:
        raise CertificateError(
            "a model without states is at no finite distance, so there are no bounds to certify"
        )
    claim: dict[str, Any] = {
        "kind": f"distance to {result._word}",
        "model": _source(source, source),
    }
    pair = result._pair.get()
    model = source if result._word == "uncontrollability" else source.dual()
    if pair is None:
        found = forms.reduce(ExactPath(), model)._evidence.get()
        assert found is not None
        steps = _steps(found, [])
        del steps["seen"]
        return Certificate._of(claim | {"lower": "0", "upper": "0"}, steps, _about())
    if not result.proved:
        raise CertificateError("the bounds of this distance are not proved; ask for it again")
    length = math.lcm(*(v.denominator for v in (*pair.real, *pair.imaginary)))
    evidence: dict[str, Any] = {
        "vector": [[str(int(v * length)) for v in part] for part in (pair.real, pair.imaginary)],
        "point": _texts(pair.point),
    }
    pencil = Pencil(model.A, model.B)
    most = min(_MOST, checker.MAX_WORK // (2 * checker.corner_work(model.order)))
    for share in (None, 2, 4):
        bound = result.upper / share if share else result.lower
        if bound > result.lower:
            continue
        texts = _decimals(bound, result.upper)
        lower, upper = map(Fraction, texts)
        R = radius(pencil, lower)
        words = squares(pencil, lower, upper, R, most)
        if words is None:
            continue
        about = _about()
        if share:
            about["lower"] = f"{result.lower!r} was proved; for it the squares were too many"
        bounds = dict(zip(("lower", "upper"), texts, strict=True))
        more = {"radius": spell_fraction(R), "squares": words}
        certificate = Certificate._of(claim | bounds, evidence | more, about)
        try:
            check(certificate)
        except CertificateError:
            # Doubles chose the squares, and the checker has the last word on them.
            continue
        return certificate
    raise LimitError(
        f"found the distance {result!r}; to show a quarter of its upper bound from below takes "
        f"more than the {most} squares that are worth looking at for {model.order} states, or "
        "finer ones than doubles can choose. Certify a model with fewer states or more inputs, "
        "or rely on the bounds of the result, which are proved by this package",
        what="squares",
        where="certificate",
        found=None,
        limit=most,
    )


def _decimals(lower: float, upper: float) -> tuple[str, str]:
    """Return p/10^k for two bounds, moved apart by less than a hundredth of their distance."""
    places = 3 - math.floor(math.log10(max(upper - lower, _NARROW * upper)))
    scale = Fraction(10) ** max(places, 0)
    below, above = math.floor(Fraction(lower) * scale), math.ceil(Fraction(upper) * scale)
    return (f"{below}/{scale}", f"{above}/{scale}") if scale > 1 else (str(below), str(above))


# Documents


def _rows(matrix: Array) -> list[list[str]]:
    return [_texts(row) for row in matrix.tolist()]


def _texts(row: Any) -> list[str]:
    try:
        return [
            str(q.numerator) if q.denominator == 1 else f"{q.numerator}/{q.denominator}"
            for q in row
        ]
    except ValueError:  # Python refuses to spell long integers
        return list(map(spell_fraction, row))


def _tables(matrices: Any) -> dict[str, Any]:
    return {letter: _rows(matrix) for letter, matrix in zip("ABCD", matrices, strict=True)}


def _model(model: Realization) -> dict[str, Any]:
    period = model.sampling_period
    assert not isinstance(period, float)
    return {
        **_tables(model.matrices()),
        "order": model.order,
        "input_count": model.input_count,
        "output_count": model.output_count,
        "sampling_period": None if period is None else spell_fraction(period),
        "input_names": list(model.input_names),
        "output_names": list(model.output_names),
    }


def _source(source: Realization | TransferMatrix, model: Realization) -> dict[str, Any]:
    """Return a model with where it comes from; of a transfer matrix, its fractions too."""
    reading, table = source.provenance
    found = _model(model)
    found |= {"state_names": list(model.state_names), "reading": reading, "table": table}
    if isinstance(source, TransferMatrix):
        found["transfer"] = {
            "numerators": _fractions(source.numerators),
            "denominators": _fractions(source.denominators),
        }
    return found


def _fractions(table: Any) -> list[list[list[str]]]:
    return [[_texts(entry) for entry in row] for row in table]


def _steps(evidence: Evidence, seen: list[list[str]]) -> dict[str, Any]:
    assert evidence.reached is not None
    return {
        "reached": _spread(evidence.reached),
        "pivots": list(evidence.reached.pivots),
        "seen": seen,
    }


def _spread(basis: Echelon) -> list[list[str]]:
    """Return the rows of a basis; most of them are rows of the identity."""
    width = len(basis.pivots)
    place = {row: k for k, row in enumerate(basis.pivots)}
    rest = iter(_rows(basis.rest))
    found = []
    for i in range(basis.size):
        row = ["0"] * width if i in place else next(rest)
        if i in place:
            row[place[i]] = "1"
        found.append(row)
    return found


def _turned(basis: Echelon | None) -> list[list[str]]:
    """Return the columns of a basis."""
    assert basis is not None
    if not basis.pivots:
        return []
    return [list(column) for column in zip(*_spread(basis), strict=True)]


def _matrix(basis: Echelon) -> RationalMatrix:
    place = {row: k for k, row in enumerate(basis.pivots)}
    whole = np.full((basis.size, len(basis.pivots)), make_fraction(0, 1), dtype=object)
    for row, k in place.items():
        whole[row, k] = make_fraction(1, 1)
    whole[[i for i in range(basis.size) if i not in place]] = basis.rest
    return RationalMatrix.from_array(whole)


def _projection(evidence: Evidence) -> RationalMatrix:
    assert evidence.seen is not None
    return _matrix(evidence.seen).T


def _about() -> dict[str, str]:
    return {
        "made": datetime.datetime.now(datetime.UTC).date().isoformat(),
        "python": platform.python_version(),
        "python-flint": flint.__version__,
    }
