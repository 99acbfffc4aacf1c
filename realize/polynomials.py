"""Exact polynomials in one variable: tuples of Fraction outside, FLINT inside.

A polynomial is a tuple of coefficients in descending powers without leading zeros. The zero
polynomial is ``(Fraction(0),)``. FLINT objects never leave the library: only `to_flint` returns
one, for the rooms that go on computing with it.
"""

from __future__ import annotations

import math
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, NamedTuple, TypeAlias, cast

from realize.entries import round_fraction
from realize.errors import EntryError, VerificationError, ZeroDenominatorError

if TYPE_CHECKING:
    from flint import acb, arb, fmpq_poly, fmpz_poly

Polynomial: TypeAlias = tuple[Fraction, ...]

ZERO: Polynomial = (Fraction(0),)
ONE: Polynomial = (Fraction(1),)

_NOTHING = Fraction(0)
# FLINT returns about twice the bits asked for, and a double holds 53: one pass is nearly always
# enough.
_FIRST_BITS = 64
# An enclosure this tight that still does not round to one double most likely holds a tie, the
# exact middle of two doubles. Only then is the test for a tie worth its cost.
_TIE_BITS = 256

_SMALLEST = math.ulp(0.0)

# FLINT's working precision is one number for the whole process, so only one thread may change it.
_PRECISION_LOCK = threading.RLock()


@dataclass(frozen=True, slots=True, kw_only=True)
class Root:
    """One root of an exact polynomial.

    Attributes
    ----------
    value : complex
        The root, each part correctly rounded to a double.
    radius : float
        The exact root lies within this distance of `value`. Rounded up; 0.0 when `value` is exact.
    multiplicity : int
        How often the root occurs.
    factor : int
        Index, in the answer of `factor`, of the irreducible factor that has this root.
    """

    value: complex
    radius: float
    multiplicity: int
    factor: int


class Box(NamedTuple):
    """A rectangle of the complex plane with rational sides that encloses one root.

    A part known exactly has equal ends. A real root has the imaginary part 0 exactly, and a root
    whose real part is rational has it exactly.
    """

    real_low: Fraction
    real_high: Fraction
    imag_low: Fraction
    imag_high: Fraction


def strip(p: Polynomial) -> Polynomial:
    """Return the polynomial without leading zeros.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers; may begin with zeros or be empty.

    Returns
    -------
    tuple of Fraction
        The same polynomial; `ZERO` when every coefficient is zero.
    """
    for index, coefficient in enumerate(p):
        if coefficient:
            return p[index:] if index else p
    return ZERO


def degree(p: Polynomial) -> int:
    """Return the degree; -1 for the zero polynomial.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.

    Returns
    -------
    int
        The degree.
    """
    return len(p) - 1 if p[0] else -1


def to_flint(p: Polynomial) -> fmpq_poly:
    """Return the polynomial as a FLINT polynomial over the rationals.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers; leading zeros are allowed.

    Returns
    -------
    flint.fmpq_poly
        The same polynomial, for use inside the library only.
    """
    from flint import fmpq_poly

    denominator = math.lcm(*[c.denominator for c in p])
    if denominator == 1:
        return fmpq_poly([c.numerator for c in reversed(p)])
    return fmpq_poly(
        [c.numerator * (denominator // c.denominator) for c in reversed(p)], denominator
    )


def from_flint(p: fmpq_poly | fmpz_poly) -> Polynomial:
    """Return a FLINT polynomial over the rationals or the integers as a tuple of Fraction.

    Parameters
    ----------
    p : flint.fmpq_poly or flint.fmpz_poly
        A polynomial.

    Returns
    -------
    tuple of Fraction
        Coefficients, descending powers, without leading zeros.
    """
    from flint import fmpq_poly

    if isinstance(p, fmpq_poly):
        denominator = int(p.denom())
        coefficients = p.numer().coeffs()
    else:
        denominator = 1
        coefficients = p.coeffs()
    if not coefficients:
        return ZERO
    coefficients.reverse()
    if denominator == 1:
        return tuple([Fraction(int(c)) for c in coefficients])
    return tuple([Fraction(int(c), denominator) for c in coefficients])


def multiply(p: Polynomial, q: Polynomial) -> Polynomial:
    """Return the product of two polynomials.

    Parameters
    ----------
    p, q : tuple of Fraction
        Coefficients, descending powers.

    Returns
    -------
    tuple of Fraction
        p q.
    """
    if p == ONE:
        return q
    if q == ONE:
        return p
    return from_flint(to_flint(p) * to_flint(q))


def add(p: Polynomial, q: Polynomial) -> Polynomial:
    """Return the sum of two polynomials.

    Parameters
    ----------
    p, q : tuple of Fraction
        Coefficients, descending powers.

    Returns
    -------
    tuple of Fraction
        p + q.
    """
    if len(p) < len(q):
        p, q = q, p
    lead = len(p) - len(q)
    return strip(p[:lead] + tuple([a + b for a, b in zip(p[lead:], q, strict=True)]))


def power(p: Polynomial, exponent: int) -> Polynomial:
    """Return a polynomial raised to a power.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers.
    exponent : int
        Not negative.

    Returns
    -------
    tuple of Fraction
        p to the power `exponent`; `ONE` for exponent 0.
    """
    return from_flint(to_flint(p) ** exponent)


def divide_exact(p: Polynomial, q: Polynomial) -> Polynomial:
    """Return the quotient of a division that leaves nothing over.

    Parameters
    ----------
    p, q : tuple of Fraction
        Dividend and divisor, descending powers.

    Returns
    -------
    tuple of Fraction
        p / q.

    Raises
    ------
    VerificationError
        When q does not divide p.
    ZeroDenominatorError
        When q is the zero polynomial.
    """
    if degree(q) < 0:
        raise ZeroDenominatorError(
            f"division of ({text(p)}) by the zero polynomial; a nonzero divisor was wanted"
        )
    quotient, remainder = divmod(to_flint(p), to_flint(q))
    if remainder:
        raise VerificationError(
            f"({text(q)}) does not divide ({text(p)}): the remainder is"
            f" {text(from_flint(remainder))}; a division without remainder was wanted"
        )
    return from_flint(quotient)


def gcd(p: Polynomial, q: Polynomial) -> Polynomial:
    """Return the monic greatest common divisor.

    Parameters
    ----------
    p, q : tuple of Fraction
        Coefficients, descending powers.

    Returns
    -------
    tuple of Fraction
        The monic divisor of highest degree that both have; `ZERO` when both are zero.
    """
    return from_flint(to_flint(p).gcd(to_flint(q)))


def monic(p: Polynomial) -> Polynomial:
    """Return the polynomial divided by its leading coefficient.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.

    Returns
    -------
    tuple of Fraction
        The monic polynomial with the same roots.

    Raises
    ------
    EntryError
        When p is the zero polynomial.
    """
    refuse_zero(p)
    lead = p[0]
    return p if lead == 1 else tuple([c / lead for c in p])


def derivative(p: Polynomial) -> Polynomial:
    """Return the derivative.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.

    Returns
    -------
    tuple of Fraction
        dp/ds.
    """
    top = len(p) - 1
    return tuple([c * (top - k) for k, c in enumerate(p[:-1])]) or ZERO


def evaluate(p: Polynomial, point: int | Fraction) -> Fraction:
    """Return the exact value at a rational point.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers.
    point : int or Fraction
        Where.

    Returns
    -------
    Fraction
        p(point).
    """
    # Horner's rule on integers: with point = a/b, b^n p(a/b) needs one reduction at the end.
    above, below = point.numerator, point.denominator
    common = math.lcm(*[c.denominator for c in p])
    value, scale = 0, 1
    for c in p:
        value = value * above + c.numerator * (common // c.denominator) * scale
        scale *= below
    return Fraction(value * below, common * scale)


def refuse_zero(p: Polynomial) -> None:
    """Raise where a polynomial with a leading coefficient is needed.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.

    Raises
    ------
    EntryError
        When p is the zero polynomial.
    """
    if degree(p) < 0:
        raise EntryError(
            "found the zero polynomial, which has every number as a root and no leading"
            " coefficient; give a polynomial with a nonzero coefficient"
        )


def moebius(p: Polynomial) -> Polynomial:
    """Return the polynomial carried from the unit circle to the imaginary axis.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients in z, descending powers, without leading zeros; degree n.

    Returns
    -------
    tuple of Fraction
        (1 - w)^n p((1 + w) / (1 - w)), descending powers of w. Roots inside the unit circle go to
        the left half plane, roots on it to the imaginary axis. A root at z = -1 goes to infinity:
        each one lowers the degree by one.

    References
    ----------
    Jury (1964), Theory and Application of the z-Transform Method, the bilinear map (from memory).
    """
    from flint import fmpq_poly

    # z = -1 + 2/v with v = 1 - w: shift, reverse with powers of two, and put 1 - w in for v.
    shifted = to_flint(p)(fmpq_poly([-1, 1])).coeffs()
    turned = fmpq_poly([c * 2**k for k, c in enumerate(shifted)][::-1])
    return from_flint(turned(fmpq_poly([1, -1])))


def factor(p: Polynomial) -> tuple[tuple[Polynomial, int], ...]:
    """Return the irreducible factors over the rationals.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.

    Returns
    -------
    tuple of (tuple of Fraction, int)
        Monic irreducible factors, each with its multiplicity, ordered by degree and then by
        coefficients. Their product is `monic` of p; a constant has none.

    Raises
    ------
    EntryError
        When p is the zero polynomial.

    Examples
    --------
    >>> from fractions import Fraction
    >>> [(text(f), m) for f, m in factor((Fraction(1), Fraction(1), Fraction(0), Fraction(0)))]
    [('s', 2), ('s + 1', 1)]
    """
    refuse_zero(p)
    if len(p) == 1:
        return ()
    _, found = to_flint(p).factor()
    return tuple(
        sorted(
            [(monic(from_flint(f)), int(m)) for f, m in found],
            key=lambda pair: (len(pair[0]), pair[0]),
        )
    )


def text(p: Polynomial, variable: str = "s") -> str:
    """Return the polynomial as a person writes it, in ASCII.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers.
    variable : str
        Name of the variable.

    Returns
    -------
    str
        For example ``"s^2 + 3/2 s - 1"``.
    """
    terms: list[str] = []
    top = len(p) - 1
    for index, coefficient in enumerate(p):
        if not coefficient:
            continue
        exponent = top - index
        size = abs(coefficient)
        letter = "" if exponent == 0 else variable if exponent == 1 else f"{variable}^{exponent}"
        body = letter if letter and size == 1 else f"{size} {letter}".rstrip()
        if terms:
            terms.append(f" - {body}" if coefficient < 0 else f" + {body}")
        else:
            terms.append(f"-{body}" if coefficient < 0 else body)
    return "".join(terms) or "0"


def roots(p: Polynomial) -> tuple[Root, ...]:
    """Return every root, each part correctly rounded, with a proved error bound.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.

    Returns
    -------
    tuple of Root
        The different roots, ordered by real part and then by imaginary part of `value`. A part
        that is exactly zero is returned as zero, and a part that is not is never taken for zero
        unless it is below the smallest double.

    Raises
    ------
    EntryError
        When p is the zero polynomial, or a root is too large for a double.

    Notes
    -----
    Each irreducible factor is treated alone, so its roots are simple. Factors of degree one and
    two need integers only; for the others FLINT isolates the roots in ball arithmetic, and the
    precision is doubled until both ends of each enclosure round to the same double.

    Examples
    --------
    >>> from fractions import Fraction
    >>> for root in roots((Fraction(1), Fraction(-2), Fraction(5))):
    ...     print(root.value, root.radius)
    (1-2j) 0.0
    (1+2j) 0.0
    """
    found = [
        root_in(box, multiplicity=multiplicity, factor=index)
        for index, (f, multiplicity) in enumerate(factor(p))
        for box in isolate(f)
    ]
    return tuple(sorted(found, key=lambda root: (root.value.real, root.value.imag)))


def isolate(
    f: Polynomial, enough: Callable[[tuple[Box, ...]], bool] = lambda boxes: True
) -> tuple[Box, ...]:
    """Return a box for each root of an irreducible polynomial, tight enough to round.

    Parameters
    ----------
    f : tuple of Fraction
        Monic and irreducible over the rationals, degree at least one.
    enough : callable
        A further condition on the boxes. They are made tighter until it holds, so it must hold
        once they are tight enough.

    Returns
    -------
    tuple of Box
        As many as the degree. All numbers between the two ends of a part round to one double.
    """
    for bits, boxes in root_boxes(f):
        if not all(_rounds(box) for box in boxes):
            if bits < _TIE_BITS or not _disjoint(boxes):
                continue
            boxes = tuple([box if _rounds(box) else _settle_tie(f, box) for box in boxes])
            if not all(_rounds(box) for box in boxes):
                continue
        if enough(boxes):
            return boxes
    raise AssertionError("the sequence of enclosures has no end")


def root_in(box: Box, *, multiplicity: int, factor: int) -> Root:
    """Return the root in a box that `isolate` returned.

    Parameters
    ----------
    box : Box
        Tight enough to round.
    multiplicity, factor : int
        Passed on to the root.

    Returns
    -------
    Root
        The rounded root and its error bound.

    Raises
    ------
    EntryError
        When the root is too large for a double.
    """
    real, imag = _double(box.real_low), _double(box.imag_low)
    return Root(
        # Adding 0.0 turns the negative zero of a tiny negative part into zero.
        value=complex(real + 0.0, imag + 0.0),
        radius=_hypotenuse(
            _error_bound(real, box.real_low, box.real_high),
            _error_bound(imag, box.imag_low, box.imag_high),
        ),
        multiplicity=multiplicity,
        factor=factor,
    )


def root_boxes(f: Polynomial) -> Iterator[tuple[int, tuple[Box, ...]]]:
    """Yield boxes around the roots of an irreducible polynomial, tighter and tighter.

    Parameters
    ----------
    f : tuple of Fraction
        Monic and irreducible over the rationals, degree at least one.

    Yields
    ------
    tuple of (int, tuple of Box)
        The bits that were asked for, and one box per root. The sequence has no end.

    Notes
    -----
    If one root has a rational real part a, then its conjugate is 2 a minus it, so the irreducible
    f is symmetric about a, and a is the mean of all roots. Hence f is first shifted by that mean
    c. If the shifted polynomial is even, it is g(y) with y = (s - c)^2, and the roots with real
    part exactly c are those of the negative real y. FLINT returns real roots as exactly real, so
    nothing is decided by a small number.
    """
    n = degree(f)
    centre = -f[1] / n
    if n == 1:
        exact = (Box(centre, centre, _NOTHING, _NOTHING),)
        bits = _FIRST_BITS
        while True:
            yield bits, exact
            bits *= 2
    half = _half_about(f, centre)
    bits = _FIRST_BITS
    while True:
        if half is None:
            upper = _upper_boxes(f, bits)
        elif n == 2:
            upper = _around(centre, [_square_root(-half[1], bits)])
        else:
            upper = _around(centre, _square_roots(half, bits))
        if upper is not None:
            lower = [
                Box(b.real_low, b.real_high, -b.imag_high, -b.imag_low)
                for b in upper
                if b.imag_high
            ]
            if len(upper) + len(lower) != n:
                raise VerificationError(
                    f"found {len(upper) + len(lower)} roots of ({text(f)}), whose degree is {n}"
                )
            yield bits, tuple(upper + lower)
        bits *= 2


@contextmanager
def working_precision(bits: int) -> Iterator[None]:
    """Set FLINT's precision for the block and put it back, one thread at a time."""
    from flint import ctx

    with _PRECISION_LOCK:
        before = ctx.prec
        ctx.prec = bits
        try:
            yield
        finally:
            ctx.prec = before


def _half_about(f: Polynomial, centre: Fraction) -> Polynomial | None:
    """g with f(s) = g((s - centre)^2) for the mean of the roots of f, or None."""
    n = degree(f)
    if n % 2:
        return None
    if centre:
        # The coefficient of s^(n-3) after the shift must vanish. A few products tell that it
        # does not, where the whole shift of a long polynomial takes seconds.
        if n > 2:
            third = math.comb(n, 3) * centre + math.comb(n - 1, 2) * f[1]
            if (third * centre + (n - 2) * f[2]) * centre + f[3]:
                return None
        f = from_flint(to_flint(f)(to_flint((Fraction(1), centre))))
    return None if any(f[1::2]) else f[::2]


_Interval: TypeAlias = tuple[Fraction, Fraction]
_EXACT_ZERO: _Interval = (_NOTHING, _NOTHING)


def _interval(x: arb) -> _Interval:
    """The two ends of a real ball as fractions, exactly."""
    middle, exponent = [int(part) for part in x.mid().man_exp()]
    radius, radius_exponent = [int(part) for part in x.rad().man_exp()]
    lowest = min(exponent, radius_exponent)
    middle <<= exponent - lowest
    radius <<= radius_exponent - lowest
    if lowest >= 0:
        return Fraction((middle - radius) << lowest), Fraction((middle + radius) << lowest)
    return Fraction(middle - radius, 1 << -lowest), Fraction(middle + radius, 1 << -lowest)


def _enclosures(f: Polynomial, bits: int) -> list[acb]:
    """Disjoint balls around the roots of a squarefree polynomial, real ones exactly real."""
    integer_form = to_flint(f).numer()
    with working_precision(bits):
        # FLINT's type stubs leave out the multiplicity that comes with each root.
        pairs = cast("list[tuple[acb, int]]", integer_form.complex_roots())
    return [root for root, _ in pairs]


def _upper_boxes(f: Polynomial, bits: int) -> list[Box] | None:
    """Boxes of the real roots and of those above the real axis; None when still too wide."""
    boxes = []
    for root in _enclosures(f, bits):
        real, imag = root.real, root.imag
        if imag.is_zero():
            boxes.append(Box(*_interval(real), *_EXACT_ZERO))
        elif imag.mid() > 0:
            box = Box(*_interval(real), *_interval(imag))
            if box.imag_low <= 0:
                return None
            boxes.append(box)
    return boxes


def _square_root(y: Fraction, bits: int) -> tuple[_Interval, _Interval]:
    """The square root of a rational, real or on the upper imaginary axis."""
    size = abs(y)
    square = size.numerator * size.denominator
    places = max(0, bits - square.bit_length() // 2)
    whole = math.isqrt(square << 2 * places)
    is_square = whole * whole == square << 2 * places
    scale = size.denominator << places
    low = Fraction(whole, scale)
    interval = (low, low if is_square else Fraction(whole + 1, scale))
    return (interval, _EXACT_ZERO) if y > 0 else (_EXACT_ZERO, interval)


def _square_roots(half: Polynomial, bits: int) -> list[tuple[_Interval, _Interval]] | None:
    """One square root, in the closed first quadrant, of each root of `half` not below the axis."""
    result: list[tuple[_Interval, _Interval]] = []
    enclosures = _enclosures(half, bits)
    with working_precision(bits):
        for y in enclosures:
            if y.imag.is_zero():
                if y.real.contains(0):
                    return None
                size = _interval(abs(y.real).sqrt())
                result.append((size, _EXACT_ZERO) if y.real > 0 else (_EXACT_ZERO, size))
            elif y.imag.mid() > 0:
                if not y.imag > 0:
                    return None
                root = y.sqrt()
                real, imag = _interval(root.real), _interval(root.imag)
                if real[0] <= 0 or imag[0] <= 0:
                    return None
                result.append((real, imag))
    return result


def _around(
    centre: Fraction, offsets: list[tuple[_Interval, _Interval]] | None
) -> list[Box] | None:
    """The roots centre + offset and centre - offset that do not lie below the real axis."""
    if offsets is None:
        return None
    boxes = []
    for (real_low, real_high), (imag_low, imag_high) in offsets:
        boxes.append(Box(centre + real_low, centre + real_high, imag_low, imag_high))
        if real_high:
            # The mirror image in the line through the centre: the conjugate of centre - offset.
            boxes.append(Box(centre - real_high, centre - real_low, imag_low, imag_high))
    return boxes


def _double(part: Fraction) -> float:
    return round_fraction(part, "root")


def _rounds(box: Box) -> bool:
    """Whether each part of the box rounds to one double."""
    return (box.real_low == box.real_high or _double(box.real_low) == _double(box.real_high)) and (
        box.imag_low == box.imag_high or _double(box.imag_low) == _double(box.imag_high)
    )


def _error_bound(value: float, low: Fraction, high: Fraction) -> float:
    """A bound of the distance of `value` from the numbers in [low, high], which all round to it."""
    if low == high and Fraction(value) == low:
        return 0.0
    return max(math.ulp(value) / 2, _SMALLEST)


def _hypotenuse(a: float, b: float) -> float:
    """An upper bound of the hypotenuse; `math.hypot` is wrong by less than one unit."""
    if a == 0.0 or b == 0.0:
        return a + b
    return math.nextafter(math.hypot(a, b), math.inf)


def _disjoint(boxes: tuple[Box, ...]) -> bool:
    return not any(
        a.real_low <= b.real_high
        and b.real_low <= a.real_high
        and a.imag_low <= b.imag_high
        and b.imag_low <= a.imag_high
        for index, a in enumerate(boxes)
        for b in boxes[:index]
    )


def _settle_tie(f: Polynomial, box: Box) -> Box:
    """The box with its imaginary part made exact, if that lies just between two doubles.

    No precision can round such a part. The real part is no problem: if rational it is known
    exactly. With b the middle of the two doubles, f(x + i b) = P(x) + i Q(x), and the imaginary
    part is b exactly when P and Q have a common root in the real side of the box. That root is
    irrational, or f would be of degree two, so a change of sign between the ends shows it. The
    boxes must be disjoint, so that the root found is the one of this box.
    """
    middle = (Fraction(_double(box.imag_low)) + Fraction(_double(box.imag_high))) / 2
    if not box.imag_low <= middle <= box.imag_high:
        return box
    real_part, imag_part = ZERO, ZERO
    for coefficient in f:
        real_part, imag_part = (
            # A coefficient zero at the end multiplies by x.
            add(real_part + ZERO, add(_times(imag_part, -middle), (coefficient,))),
            add(imag_part + ZERO, _times(real_part, middle)),
        )
    common = gcd(real_part, imag_part)
    if evaluate(common, box.real_low) * evaluate(common, box.real_high) < 0:
        return Box(box.real_low, box.real_high, middle, middle)
    return box


def _times(p: Polynomial, number: Fraction) -> Polynomial:
    return tuple([c * number for c in p])
