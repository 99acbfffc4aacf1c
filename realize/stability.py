"""Where roots lie with respect to the stability boundary, exactly; and the cautions, once.

Two methods answer independently. `root_counts` counts by the Cauchy index and finds no root;
`locate` finds every root and decides its region. In continuous time the boundary is the imaginary
axis and inside is the left half plane; in discrete time it is the unit circle and its interior.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from enum import StrEnum
from fractions import Fraction
from typing import TYPE_CHECKING, Protocol

from realize.polynomials import (
    Box,
    Polynomial,
    Root,
    degree,
    derivative,
    divide_exact,
    factor,
    gcd,
    isolate,
    moebius,
    refuse_zero,
    root_boxes,
    root_in,
    strip,
    to_flint,
)

if TYPE_CHECKING:
    from flint import fmpz_poly


class Stability(StrEnum):
    """What is known of the growth of a mode."""

    STABLE = "stable"
    UNSTABLE = "unstable"
    MARGINAL = "marginal"
    CANNOT_TELL = "cannot tell"


class Region(StrEnum):
    """Where a root lies: inside the stable region, on its boundary, or outside."""

    INSIDE = "inside"
    BOUNDARY = "boundary"
    OUTSIDE = "outside"


@dataclass(frozen=True, slots=True, kw_only=True)
class Located:
    """A root and the region in which the exact root lies.

    Attributes
    ----------
    root : Root
        The rounded root; its rounding may put it in another region.
    region : Region
        The region of the exact root.
    polynomial : tuple of Fraction
        The monic irreducible polynomial of which it is a root.
    """

    root: Root
    region: Region
    polynomial: Polynomial


@dataclass(frozen=True, slots=True, kw_only=True)
class RootCounts:
    """How many roots lie where, each counted with its multiplicity.

    Attributes
    ----------
    inside, boundary, outside : int
        They add up to the degree.
    """

    inside: int
    boundary: int
    outside: int


class HiddenMode(Protocol):
    """What `hidden_cautions` needs to know of a mode."""

    @property
    def value(self) -> complex: ...

    @property
    def part(self) -> str: ...

    @property
    def stability(self) -> str: ...


def root_counts(p: Polynomial, sampling_period: Fraction | float | None) -> RootCounts:
    """Return how many roots lie inside the stable region, on its boundary, and outside.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.
    sampling_period : Fraction, float or None
        None for continuous time; any period for discrete time.

    Returns
    -------
    RootCounts
        Counted with multiplicity.

    Raises
    ------
    EntryError
        When p is the zero polynomial.

    Notes
    -----
    With p(iw) = P(w) + i Q(w), the common divisor g of P and Q holds the roots on the imaginary
    axis, as its real roots, and pairs of roots that mirror each other in the axis. The rest of p
    turns by pi (left - right) as w runs along the real line, and the Cauchy index of P/Q or Q/P
    counts those half turns. The index is read from the signs of a Euclidean remainder sequence.
    No root is computed. The unit circle is carried to the axis by `moebius` first.

    References
    ----------
    Gantmacher (1959), The Theory of Matrices, volume 2, chapter XV, sections 2 to 4 (sections
    from memory). Jury (1964), Theory and Application of the z-Transform Method (from memory).

    Examples
    --------
    >>> from fractions import Fraction
    >>> root_counts((Fraction(1), Fraction(2), Fraction(1), Fraction(2)), None)
    RootCounts(inside=1, boundary=2, outside=0)
    """
    refuse_zero(p)
    on_axis = p if sampling_period is None else moebius(p)
    at_minus_one = degree(p) - degree(on_axis)
    real_part, imag_part = _on_the_axis(on_axis)
    common = gcd(real_part, imag_part)
    boundary = _real_root_count(common)
    mirrored = (degree(common) - boundary) // 2
    above, below = divide_exact(real_part, common), divide_exact(imag_part, common)
    if degree(above) > degree(below):
        excess = -_cauchy_index(below, above)
    else:
        excess = _cauchy_index(above, below)
    rest = degree(on_axis) - degree(common)
    return RootCounts(
        inside=(rest + excess) // 2 + mirrored,
        boundary=boundary + at_minus_one,
        outside=(rest - excess) // 2 + mirrored,
    )


def is_stable(p: Polynomial, sampling_period: Fraction | float | None) -> bool:
    """Return whether every root lies inside the stable region; true for a constant.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.
    sampling_period : Fraction, float or None
        None for continuous time; any period for discrete time.

    Returns
    -------
    bool
        The exact answer.

    Raises
    ------
    EntryError
        When p is the zero polynomial.
    """
    counts = root_counts(p, sampling_period)
    return counts.boundary == 0 and counts.outside == 0


def locate(p: Polynomial, sampling_period: Fraction | float | None) -> tuple[Located, ...]:
    """Return every root with the region in which it lies, decided exactly.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.
    sampling_period : Fraction, float or None
        None for continuous time; any period for discrete time.

    Returns
    -------
    tuple of Located
        The roots in the order of `realize.polynomials.roots`.

    Raises
    ------
    EntryError
        When p is the zero polynomial, or a root is too large for a double.

    Notes
    -----
    An irreducible factor with one root on the boundary has as many there as an exact count says
    (see `_boundary_count`). The enclosures are made tighter until just so many touch the
    boundary; those are on it. The count is exact, so this ends.
    """
    located = [
        Located(
            root=root_in(box, multiplicity=multiplicity, factor=index), region=region, polynomial=f
        )
        for index, (f, multiplicity) in enumerate(factor(p))
        for box, region in _placed_boxes(f, discrete=sampling_period is not None)
    ]
    return tuple(sorted(located, key=lambda each: (each.root.value.real, each.root.value.imag)))


def judge(
    p: Polynomial,
    sampling_period: Fraction | float | None,
    is_semisimple: Callable[[Polynomial], bool],
) -> tuple[tuple[Root, Polynomial, Stability], ...]:
    """Return every root with its irreducible polynomial and what the mode does when left alone.

    Parameters
    ----------
    p : tuple of Fraction
        Coefficients, descending powers, without leading zeros.
    sampling_period : Fraction, float or None
        None for continuous time; any period for discrete time.
    is_semisimple : callable
        Whether the roots of an irreducible polynomial have as many eigenvectors as copies in the
        whole state matrix. Asked only about polynomials with a root on the boundary, once each.

    Returns
    -------
    tuple of (Root, tuple of Fraction, Stability)
        In the order of `locate`. A mode on the boundary is marginal when it is semisimple, and
        unstable when it is not: it then grows like a power of time.

    Raises
    ------
    EntryError
        When p is the zero polynomial, or a root is too large for a double.
    """
    verdict = {Region.INSIDE: Stability.STABLE, Region.OUTSIDE: Stability.UNSTABLE}
    on_boundary: dict[Polynomial, Stability] = {}
    judged = []
    for each in locate(p, sampling_period):
        if each.region is Region.BOUNDARY:
            if each.polynomial not in on_boundary:
                on_boundary[each.polynomial] = (
                    Stability.MARGINAL if is_semisimple(each.polynomial) else Stability.UNSTABLE
                )
            stability = on_boundary[each.polynomial]
        else:
            stability = verdict[each.region]
        judged.append((each.root, each.polynomial, stability))
    return tuple(judged)


def computed_stability(
    value: complex, sampling_period: Fraction | float | None, doubt: float
) -> Stability:
    """Return the stability of a computed root that is known to within `doubt` only.

    Parameters
    ----------
    value : complex
    sampling_period : Fraction, float or None
        None for continuous time.
    doubt : float
        Where the boundary lies within this distance the answer is "cannot tell".
    """
    margin = value.real if sampling_period is None else abs(value) - 1.0
    if abs(margin) <= doubt:
        return Stability.CANNOT_TELL
    return Stability.STABLE if margin < 0.0 else Stability.UNSTABLE


def time_constant(value: complex, sampling_period: Fraction | float | None) -> float | None:
    """Return the time in which a mode decays by the factor e.

    Parameters
    ----------
    value : complex
        The mode: a value of s, or of z in discrete time.
    sampling_period : Fraction, float or None
        None for continuous time.

    Returns
    -------
    float or None
        -1 / Re s, or -T / log|z|. Negative for a growing mode: its size is then the time in which
        the mode grows by the factor e. 0.0 for z = 0, a delay that is over at once. None on the
        boundary, where |z| differs from 1 by no more than the rounding of z, and where the time
        is too long for a double.

    Units
    -----
    The time unit of the model, which is that of the sampling period.
    """
    rate = value.real if sampling_period is None else _log_modulus(value)
    if rate == 0.0:
        return None
    if math.isinf(rate):
        return 0.0
    period = 1.0 if sampling_period is None else float(sampling_period)
    time = -period / rate
    return time if math.isfinite(time) else None


def damping(value: complex, sampling_period: Fraction | float | None) -> float | None:
    """Return the damping ratio of a mode.

    Parameters
    ----------
    value : complex
        The mode: a value of s, or of z in discrete time.
    sampling_period : Fraction, float or None
        None for continuous time. Its size does not matter.

    Returns
    -------
    float or None
        -cos(arg s), with s = log(z) / T in discrete time: 1 for a mode that decays without
        turning, 0 for one that only turns, negative for a growing one. None at s = 0 (z = 1),
        and at z = 0, where log(z) does not exist.
    """
    if sampling_period is None:
        rate, speed = value.real, value.imag
    else:
        rate, speed = _log_modulus(value), cmath.phase(value)
    size = math.hypot(rate, speed)
    if size == 0.0 or math.isinf(size):
        return None
    # Adding 0.0 turns the negative zero of an undamped mode into zero.
    return -rate / size + 0.0


# ---------------------------------------------------------------------------------------------
# The cautions
# ---------------------------------------------------------------------------------------------

_DEFERENCE = "The person responsible for the plant decides, under the codes that bind them."
_NOT_FROM_THE_REDUCED_MODEL = "Do not judge the stability of the plant from the reduced model."

HIDDEN_IS_RELATIVE = (
    "Hidden means hidden from the inputs and outputs named in this model. A disturbance may reach"
    " what a reference does not, and another sensor may see it. " + _DEFERENCE
)
NOT_INTERCHANGEABLE = (
    "The same transfer matrix does not make two models interchangeable. They may hide different"
    " modes and start from different states. " + _DEFERENCE
)
WEAK_IS_NOT_HIDDEN = (
    "A weak mode is not a hidden one. Its effect is small under this scaling and at these"
    " connections, but it is there. " + _DEFERENCE
)
NEARLY_ILL_POSED_LOOP = (
    "Direct feedthroughs run in a circle that is nearly without a solution. A small change of one"
    " of their gains changes the connected model beyond recognition, and no plant passes a signal"
    " on at once: put in the delays and lags that were left out. " + _DEFERENCE
)
ROUNDED_COEFFICIENTS = (
    "Coefficients that are correctly rounded can still describe another filter. Judge the numbers"
    " delivered by their own poles, not by those of the design. " + _DEFERENCE
)
NUMBERS_NOT_PLANT = (
    "A certificate is a statement about exact tables of numbers, not about the plant. " + _DEFERENCE
)

_HIDDEN = {
    Stability.UNSTABLE: (
        "Hidden unstable mode at {value} ({part}): the plant has it, it grows, and the transfer"
        " function does not show it. " + _NOT_FROM_THE_REDUCED_MODEL + " " + _DEFERENCE
    ),
    Stability.MARGINAL: (
        "Hidden marginal mode at {value} ({part}): the plant has it, it does not decay, and the"
        " transfer function does not show it. " + _NOT_FROM_THE_REDUCED_MODEL + " " + _DEFERENCE
    ),
    Stability.CANNOT_TELL: (
        "Hidden mode at {value} ({part}): these numbers cannot tell whether it decays, and the"
        " transfer function does not show it. Better data, or an exact model, can. "
        + _NOT_FROM_THE_REDUCED_MODEL
        + " "
        + _DEFERENCE
    ),
}
_VISIBLE = "controllable, observable"


def hidden_cautions(modes: Iterable[HiddenMode]) -> tuple[str, ...]:
    """Return the cautions that the hidden modes among `modes` call for.

    Parameters
    ----------
    modes : iterable
        Objects with the attributes `value` (complex), `part` (one of the four parts, such as
        "uncontrollable, observable") and `stability`. Those of the part "controllable,
        observable" are not hidden and are passed over.

    Returns
    -------
    tuple of str
        One caution for each hidden mode that is not known to decay (a complex pair is named
        once): growing ones first, then those on the boundary, then those that cannot be told.
        Then, if anything at all is hidden, what hidden is relative to, and that equal transfer
        matrices are not equal models. Empty when nothing is.
    """
    hidden = [mode for mode in modes if mode.part != _VISIBLE]
    if not hidden:
        return ()
    sentences = [
        sentence.format(value=_mode_text(mode.value), part=mode.part)
        for stability, sentence in _HIDDEN.items()
        for mode in hidden
        if mode.stability == stability
    ]
    return (*dict.fromkeys(sentences), HIDDEN_IS_RELATIVE, NOT_INTERCHANGEABLE)


def hidden_warning(modes: Iterable[HiddenMode]) -> str:
    """Return one sentence that names modes which a reduction removed and which may not decay."""
    named = ", ".join(dict.fromkeys(f"{_mode_text(m.value)} ({m.stability})" for m in modes))
    named = named or "too large for a double"
    return (
        f"the reduction removed modes that are not known to be stable: {named}. The plant keeps"
        " them, and the transfer function does not show them. " + _NOT_FROM_THE_REDUCED_MODEL
    )


def _log_modulus(z: complex) -> float:
    """log|z| without cancellation near the unit circle; minus infinity at zero.

    A root on the circle is hardly ever a pair of doubles on it. So 0.0 is returned when |z|
    differs from 1 by no more than rounding each part of z, by half a unit, can explain.
    """
    size = abs(z)
    if not 0.5 < size < 2.0:
        return math.log(size) if size else -math.inf
    excess = float(Fraction(z.real) ** 2 + Fraction(z.imag) ** 2 - 1)
    if abs(excess) <= abs(z.real) * math.ulp(z.real) + abs(z.imag) * math.ulp(z.imag):
        return 0.0
    return math.log1p(excess) / 2


def _mode_text(value: complex) -> str:
    """The mode to six digits; a complex pair in one piece."""
    if value.imag == 0.0:
        return f"{value.real:.6g}"
    return f"{value.real:.6g} +/- {abs(value.imag):.6g}j"


# ---------------------------------------------------------------------------------------------
# Counting without roots
# ---------------------------------------------------------------------------------------------


def _on_the_axis(p: Polynomial) -> tuple[Polynomial, Polynomial]:
    """P and Q with p(iw) = P(w) + i Q(w)."""
    zero = Fraction(0)
    top = degree(p)
    real_part, imag_part = [], []
    for index, c in enumerate(p):
        turns = (top - index) % 4
        signed = c if turns < 2 else -c
        real_part.append(zero if turns % 2 else signed)
        imag_part.append(signed if turns % 2 else zero)
    return strip(tuple(real_part)), strip(tuple(imag_part))


def _cauchy_index(numerator: Polynomial, denominator: Polynomial) -> int:
    """Jumps of numerator/denominator from - to + infinity, less those from + to -, on the line.

    Gantmacher (1959), volume 2, chapter XV, section 2: sign changes at minus infinity less those
    at plus infinity, in the sequence denominator, numerator, then each remainder negated. Only
    signs matter, so positive factors are divided out to keep the integers short.
    """
    previous, current = _integer_form(denominator), _integer_form(numerator)
    index = 0
    while current:
        # A step of odd degree changes one of the two counts of sign changes, and so the index.
        if (previous.degree() - current.degree()) % 2:
            same = (previous.leading_coefficient() > 0) == (current.leading_coefficient() > 0)
            index += 1 if same else -1
        previous, current = current, _negated_remainder(previous, current)
    return index


def _integer_form(p: Polynomial) -> fmpz_poly:
    return to_flint(p).numer()


def _negated_remainder(dividend: fmpz_poly, divisor: fmpz_poly) -> fmpz_poly:
    """A positive multiple of -(dividend mod divisor), without a common integer factor."""
    scale = abs(divisor.leading_coefficient())
    signed = divisor if divisor.leading_coefficient() > 0 else -divisor
    rest = dividend
    while rest.degree() >= divisor.degree():
        shifted = signed.left_shift(rest.degree() - divisor.degree())
        rest = scale * rest - rest.leading_coefficient() * shifted
    return -rest // rest.content() if rest else rest


def _real_root_count(p: Polynomial) -> int:
    """How many roots are real, with multiplicity, by Sturm's theorem.

    The index of p'/p counts the different real roots. The common divisor of p and p' has each
    root once less, so counting on in it adds up the multiplicities.
    """
    count = 0
    while degree(p) > 0:
        slope = derivative(p)
        count += _cauchy_index(slope, p)
        p = gcd(p, slope)
    return count


# ---------------------------------------------------------------------------------------------
# Regions of enclosed roots
# ---------------------------------------------------------------------------------------------


def _placed_boxes(f: Polynomial, *, discrete: bool) -> list[tuple[Box, Region]]:
    """The boxes of the roots of the irreducible f, each with its exact region."""
    count = _boundary_count(f, discrete=discrete)
    gap = _circle_gap if discrete else _real_gap

    def regions(boxes: tuple[Box, ...]) -> list[Region]:
        return [_region(*gap(box)) for box in boxes]

    boxes = isolate(f, lambda boxes: regions(boxes).count(Region.BOUNDARY) == count)
    return list(zip(boxes, regions(boxes), strict=True))


def _region(low: Fraction, high: Fraction) -> Region:
    """The region for a gap in [low, high]; the boundary as long as that cannot be excluded."""
    if low > 0:
        return Region.OUTSIDE
    return Region.INSIDE if high < 0 else Region.BOUNDARY


def _boundary_count(f: Polynomial, *, discrete: bool) -> int:
    """How many roots of the irreducible f lie on the boundary, exactly.

    A root on the imaginary axis has its mirror image as its conjugate, so f(s) and f(-s) share
    it, and being irreducible they agree up to sign. Then f is s, or f(s) = g(s^2) and the roots
    on the axis belong, two each, to the negative real roots of g.
    """
    if degree(f) == 1:
        return int(-f[1] in (1, -1)) if discrete else int(f[1] == 0)
    if discrete:
        mirror = f[::-1]
        if mirror != f:
            # An irreducible factor of degree two or more that is minus its reverse has the root 1.
            return 0
        f = moebius(f)
    if len(f) % 2 == 0 or any(f[1::2]):
        return 0
    return 2 * _negative_root_count(f[::2])


def _negative_root_count(g: Polynomial) -> int:
    """How many roots of the irreducible g, which has no root zero, are real and negative."""
    if degree(g) == 1:
        return int(g[0] * g[1] > 0)
    for _, boxes in root_boxes(tuple([c / g[0] for c in g])):
        real = [box for box in boxes if box.imag_low == box.imag_high == 0]
        if not any(box.real_low <= 0 <= box.real_high for box in real):
            return sum(box.real_high < 0 for box in real)
    raise AssertionError("the sequence of enclosures has no end")


def _real_gap(box: Box) -> tuple[Fraction, Fraction]:
    """The range of the real part: negative inside."""
    return box.real_low, box.real_high


def _circle_gap(box: Box) -> tuple[Fraction, Fraction]:
    """The range of |z|^2 - 1: negative inside."""
    real_least, real_most = _square(box.real_low, box.real_high)
    imag_least, imag_most = _square(box.imag_low, box.imag_high)
    return real_least + imag_least - 1, real_most + imag_most - 1


def _square(low: Fraction, high: Fraction) -> tuple[Fraction, Fraction]:
    ends = low * low, high * high
    return (Fraction(0) if low < 0 < high else min(ends)), max(ends)
