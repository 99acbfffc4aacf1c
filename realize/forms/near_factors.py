"""Poles and zeros of a transfer matrix that nearly cancel."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any, Final, TypeAlias

import numpy as np

from realize import polynomials
from realize.arithmetic.divisors import split
from realize.arithmetic.nearby_divisors import (
    Metric,
    NearDivisors,
    Trial,
    has_no_real_root,
    is_out_of_reach,
    least_change,
    level_weights,
    near_float,
    size_of_change,
)
from realize.arithmetic.path import SharedFactor
from realize.forms.response import Factored, dropping_change
from realize.model.realization import Kind
from realize.model.transfer import TransferMatrix
from realize.polynomials import Polynomial
from realize.results import NearFactor, ResponseChange
from realize.stability import Stability, computed_stability, judge
from realize.tolerance import root_doubt
from realize.uncertainty import CoefficientRadii, Uncertainty

__all__ = ["near_factors"]

Array = np.ndarray[Any, Any]

NEAR: Final = 1e-4
"""Relative change of the coefficients below which a factor that it would make cancel is reported
as near, uncertainty or none. A heuristic for what is worth a line; it decides nothing."""

_STARTS: Final = 16
"""Pairs at most from which a search starts; the nearest come first."""

_SPREAD: Final = 2.0**-300
"""Smallest over largest coefficient from which a search in doubles alone can start."""

_GROWN: Final = 12
"""Pairs that are tried as one more for a factor already found; the nearest."""

_SAME: Final = 1e-3
"""Relative difference of coefficients, and of changes, below which two searches have found one
factor. Where the change hardly depends on the factor they end some way apart."""

_ONE: Polynomial = (Fraction(1),)
_Pair: TypeAlias = tuple[Polynomial, Polynomial, Polynomial]
"""A factor and two polynomials that it divides."""
_WORST: Final = (Stability.UNSTABLE, Stability.MARGINAL, Stability.CANNOT_TELL, Stability.STABLE)


@dataclass(frozen=True, slots=True)
class _Measures:
    """What one fraction is measured by: its own size; and bounds, or a spread."""

    plain: Metric
    box: Metric | None
    spread: Metric | None
    confidence: float


def near_factors(
    given: TransferMatrix,
    transfer: TransferMatrix,
    shared: Sequence[Sequence[SharedFactor]],
    uncertainty: Uncertainty | None,
) -> tuple[NearFactor, ...]:
    """Return what nearly cancels in each entry, smallest change first.

    Parameters
    ----------
    given, transfer : TransferMatrix
        As the caller gave it, and as the path takes it.
    shared : table of SharedFactor
        What was found common in each entry.
    uncertainty : Uncertainty or None
    """
    # Coefficients may leave the range of doubles; then a search finds nothing.
    with np.errstate(all="ignore"):
        return _found(given, transfer, shared, uncertainty)


def _found(
    given: TransferMatrix,
    transfer: TransferMatrix,
    shared: Sequence[Sequence[SharedFactor]],
    uncertainty: Uncertainty | None,
) -> tuple[NearFactor, ...]:
    found: list[NearFactor] = []
    for output, input_, measures in _entries(given, transfer, uncertainty):
        item = shared[output][input_]
        if min(len(item.numerator), len(item.denominator)) < 2:
            continue
        whole = transfer.numerators[output][input_], transfer.denominators[output][input_]
        entry = _Entry(
            [_exact(p) for p in whole],
            _exact(item.common),
            [_exact(item.numerator), _exact(item.denominator)],
            measures,
            transfer.sampling_period,
            exact=transfer.kind == Kind.RATIONAL,
        )
        found += [entry.record(output, input_, candidate) for candidate in entry.candidates()]
    return tuple(sorted(found, key=lambda each: (each.change, each.degree)))


def _exact(polynomial: Sequence[Any]) -> Polynomial:
    return tuple(Fraction(c) for c in polynomial)


def _entries(
    given: TransferMatrix, transfer: TransferMatrix, uncertainty: Uncertainty | None
) -> Iterator[tuple[int, int, _Measures]]:
    """Yield every entry with its measures."""
    radii: CoefficientRadii | None = None
    covariance: Array | None = None
    if uncertainty is not None:
        # The entries as given, unless rounding them has dropped a coefficient.
        source = given if _sizes(given) == _sizes(transfer) else transfer
        if uncertainty.is_spread:
            covariance = uncertainty.spread(source)
        else:
            radii = uncertainty.radii(source)
    counts = [
        [len(p) for row in t for p in row] for t in (transfer.numerators, transfer.denominators)
    ]
    ends = np.cumsum([0, *counts[0], *counts[1]])
    for i in range(transfer.output_count):
        for j in range(transfer.input_count):
            above, below = transfer.numerators[i][j], transfer.denominators[i][j]
            plain = Metric(level_weights(_exact(above)), level_weights(_exact(below)))
            box = spread = None
            if radii is not None:
                box = Metric(radii.numerators[i][j], radii.denominators[i][j])
            if covariance is not None:
                k = i * transfer.input_count + j
                places = [
                    *range(ends[k], ends[k + 1]),
                    *range(ends[len(counts[0]) + k], ends[len(counts[0]) + k + 1]),
                ]
                block = covariance[np.ix_(places, places)]
                sizes = [Fraction(float(d)) for d in np.sqrt(np.diagonal(block))]
                spread = Metric(sizes[: len(above)], sizes[len(above) :], block)
            confidence = 0.0 if uncertainty is None else float(uncertainty.confidence or 0)
            yield i, j, _Measures(plain, box, spread, confidence)


def _sizes(transfer: TransferMatrix) -> list[int]:
    tables = transfer.numerators, transfer.denominators
    return [len(p) for table in tables for row in table for p in row]


@dataclass(frozen=True, slots=True)
class _Candidate:
    """A factor that nearly cancels, with the searches that found it."""

    plain: Trial
    change: float
    pair: _Pair
    allowed: str | None
    deviations: float | None
    confidence: float | None


class _Entry:
    """One fraction: where the searches start, and what they find."""

    def __init__(
        self,
        whole: list[Polynomial],
        common: Polynomial,
        rests: list[Polynomial],
        measures: _Measures,
        period: Any,
        *,
        exact: bool,
    ) -> None:
        self.whole, self.common, self.rests = whole, common, rests
        self.measures, self.period, self.exact = measures, period, exact
        self.search = NearDivisors(whole[0], whole[1], common, rests[0], rests[1])
        self.roots = [self.search.root(measures.plain)]
        for metric in (measures.box, measures.spread):
            self.roots.append(np.zeros((0, 0)) if metric is None else self.search.root(metric))
        self.zeros, self.poles = map(_all_roots, rests)
        self._refused: dict[int, bool] = {}
        # Where searches in the box have ended, and what was found there.
        self._ends: list[tuple[Polynomial, float, _Pair | None]] = []

    # Candidates

    def candidates(self) -> list[_Candidate]:
        """Return the near factors: each pair alone, then the nearest one of each degree."""
        singles: list[_Candidate] = []
        pool = list(self._starts())
        for start in pool:
            found = self._settled(start)
            if found is None:
                continue
            same = _known(found, singles)
            if same is None:
                singles.append(found)
            elif _rank(found) < _rank(singles[same]):
                # The same factor, but this start has done better under the uncertainty.
                singles[same] = found
        singles.sort(key=lambda each: each.change)
        best: dict[int, _Candidate] = {}
        missed = 0
        for degree in range(2, self.search.degree_limit + 1):
            if missed > 1 or self._is_hopeless(degree):
                break
            bases = [each.plain.h for each in (*singles[:1], *best.values())]
            starts = (
                *self._joint_starts(degree, singles),
                *self._grown(degree, bases, pool[:_GROWN]),
            )
            missed += self._improve(best, degree, starts)
        # A common factor of higher degree holds those of lower degree.
        for degree in sorted(best, reverse=True):
            for lower in (degree - 1, degree - 2):
                found = best.get(lower)
                if lower > 1 and (found is None or _rank(best[degree]) < _rank(found)):
                    self._improve(best, lower, self._parts(best[degree].plain.h, lower))
        return singles + [each for each in best.values() if _known(each, singles) is None]

    def _improve(
        self, best: dict[int, _Candidate], degree: int, starts: Iterable[Polynomial]
    ) -> bool:
        """Search from some starts and keep the best factor; return whether nothing was found."""
        tried = [self._settled(start) for start in starts]
        options = [each for each in (*tried, best.get(degree)) if each is not None]
        if options:
            best[degree] = min(options, key=_rank)
        return not options

    def _parts(self, h: Polynomial, degree: int) -> list[Polynomial]:
        """Return the divisor of a factor of this degree that costs least, if there is one."""
        roots = np.roots([float(c) for c in h]).astype(complex)
        away = len(h) - 1 - degree
        drops = roots[roots.imag == 0] if away == 1 else roots[roots.imag > 0]
        parts = []
        for root in drops.tolist():
            kept = roots[(roots != root) & (roots != np.conj(root))]
            product = np.atleast_1d(np.poly(kept)).real
            parts.append(tuple(Fraction(float(c)) for c in product))
        parts = [part for part in parts if len(part) - 1 == degree]
        parts.sort(key=lambda part: self.search.point(part, self.roots[0]).merit)
        return parts[:1]

    def _starts(self) -> Iterator[Polynomial]:
        """Yield trial factors of degree one and two from poles and zeros that lie close."""
        options: list[tuple[float, Polynomial]] = []
        for one, two in ((self.poles, self.zeros), (self.zeros, self.poles)):
            for p in one[one.imag >= 0]:
                z = complex(two[int(np.abs(two - p).argmin())])
                distance = abs(p - z) / (abs(p) + abs(z) or 1.0)
                middle = (Fraction(p.real) + Fraction(z.real)) / 2
                height = (Fraction(p.imag) + Fraction(abs(z.imag))) / 2
                if p.imag == 0 or z.imag == 0:
                    options.append((distance, (Fraction(1), -middle)))
                if height and self.search.degree_limit > 1:
                    options.append((distance, (Fraction(1), -2 * middle, middle**2 + height**2)))
        options = sorted(set(options))
        for _, factor in options[:_STARTS]:
            yield self.search.scaled_factor(factor)
        if self.measures.box is not None or self.measures.spread is not None:
            # Fixed coefficients may hold a factor as it is.
            for polynomial in self.rests:
                for factor, _ in polynomials.factor(polynomial):
                    if len(factor) - 1 <= min(2, self.search.degree_limit):
                        yield self.search.scaled_factor(factor)

    def _joint_starts(self, degree: int, singles: list[_Candidate]) -> Iterator[Polynomial]:
        product: Polynomial = _ONE
        for each in singles:
            if len(product) + len(each.plain.h) - 2 <= degree:
                product = polynomials.multiply(product, each.plain.h)
        if len(product) - 1 == degree:
            yield product
        f, g = self.search.floats
        sizes = np.abs(np.concatenate([f, g]))
        if not (f[0] and g[0]) or sizes[sizes > 0].min() < _SPREAD * sizes.max():
            return
        h = split(f, g, degree)[0]
        if np.isfinite(h).all() and h[0]:
            yield tuple(Fraction(float(c)) for c in h)

    def _grown(
        self, degree: int, bases: Sequence[Polynomial], pool: Sequence[Polynomial]
    ) -> list[Polynomial]:
        """Return the likeliest products of a factor found and one more pair."""
        # Far from every pair, too: what is nearest may lie where no pole or zero is.
        parts = [*pool, *((Fraction(1), Fraction(c)) for c in (-8, -1, 1, 8))]
        products = [
            polynomials.multiply(base, part)
            for base in bases
            for part in parts
            if len(base) + len(part) - 2 == degree
        ]
        root = self.roots[0 if self.measures.spread is None else 2]
        products.sort(key=lambda each: self.search.point(each, root).merit)
        return products[:2]

    def _is_hopeless(self, degree: int) -> bool:
        """Return whether no factor of this degree can be worth a line."""
        if self._least_change(degree) <= NEAR:
            return False
        if self.measures.spread is not None:
            return False
        return self.measures.box is None or self._is_refused(degree)

    def _least_change(self, degree: int) -> float:
        whole = degree + len(self.common) - 1
        plain, unit = self.measures.plain, self.search.unit
        return least_change(self.whole[0], self.whole[1], plain, whole, unit)

    def _is_refused(self, degree: int) -> bool:
        assert self.measures.box is not None
        whole = degree + len(self.common) - 1
        f, g = self.whole
        box, unit = self.measures.box, self.search.unit
        return is_out_of_reach(f, g, box, whole, unit) or (
            whole == 1 and has_no_real_root(f, g, box)
        )

    def _settled(self, start: Polynomial) -> _Candidate | None:
        """Return what a search from this start finds, if it is worth a line."""
        search, measures = self.search, self.measures
        plain = search.descend(start, self.roots[0])
        pair = search.witness(plain.h, self.roots[0] @ plain.xi, measures.plain)
        if pair is None:
            return None
        change = size_of_change(self.whole, pair[1:], measures.plain)
        degree = len(start) - 1
        allowed = deviations = confidence = None
        if measures.box is not None:
            if degree not in self._refused:
                self._refused[degree] = self._is_refused(degree)
            refused = self._refused[degree]
            within = None if refused else self._within(plain, start, measures.box)
            allowed = "yes" if within else "no" if refused else "cannot tell"
            pair = within or pair
        if measures.spread is not None:
            trials = [search.descend(h, self.roots[2]) for h in (plain.h, start)]
            nearest = min(trials, key=lambda trial: trial.merit)
            if nearest.is_met:
                from scipy.special import chdtr

                deviations = nearest.cost
                confidence = float(chdtr(degree, deviations**2))
                pair = (
                    search.witness(nearest.h, self.roots[2] @ nearest.xi, measures.spread) or pair
                )
        likely = confidence is not None and confidence <= measures.confidence
        if not (change <= NEAR or allowed == "yes" or likely):
            return None
        return _Candidate(plain, change, pair, allowed, deviations, confidence)

    def _within(self, plain: Trial, start: Polynomial, box: Metric) -> _Pair | None:
        """Return an exact factor and pair within the box, if the search finds one."""
        root = self.roots[1]
        room = math.sqrt(sum(1 for w in (*box.f, *box.g) if w))
        starts = [plain.h, start]
        for rest, weights in zip(self.search.flint, (box.f, box.g), strict=True):
            if not any(weights):
                # Nothing of this side can change, so only its own factors will do.
                starts = [h for h in starts if not divmod(rest, polynomials.to_flint(h))[1]]
        for h in starts:
            trial = self.search.descend(h, root)
            # Within the box the 2-norm of the ratios is at most the root of their number.
            if not trial.is_met or trial.cost > room * (1 + 1e-9):
                continue
            known = [
                pair
                for end, cost, pair in self._ends
                if abs(cost - trial.cost) <= _SAME * cost and _is_close(end, trial.h)
            ]
            if not known:
                known = [self._in_box(trial, box, root)]
                self._ends.append((trial.h, trial.cost, known[0]))
            if known[0] is not None:
                return known[0]
        return None

    def _in_box(self, trial: Trial, box: Metric, root: Array) -> _Pair | None:
        factor, delta, ratio = self.search.smallest_box(trial, box, root)
        if ratio > 1 + 1e-9:
            return None
        pair = self.search.witness(factor, delta, box)
        return pair if pair is not None and _is_inside(self.whole, pair[1:], box) else None

    # Records

    def record(self, output: int, input_: int, found: _Candidate) -> NearFactor:
        """Return what is told of a candidate."""
        factor, above, below = found.pair
        # Only to tell which poles and zeros are meant, for which doubles do.
        shared = np.roots([float(c) for c in factor]).astype(complex)
        away_zeros, away_poles = (_nearest(r, shared) for r in (self.zeros, self.poles))
        return NearFactor(
            output=output,
            input=input_,
            poles=tuple(complex(self.poles[k]) for k in away_poles),
            zeros=tuple(complex(self.zeros[k]) for k in away_zeros),
            factor=factor,
            change=found.change,
            least_change=self._least_change(len(factor) - 1),
            witness=TransferMatrix(
                [[above]], [[below]], sampling_period=self.period, improper=True
            ),
            response_change=self._response_change(found.pair, away_zeros, away_poles),
            stability=self._worst(away_poles),
            allowed=found.allowed,
            deviations=found.deviations,
            confidence=found.confidence,
        )

    def _response_change(
        self,
        pair: _Pair,
        away_zeros: list[int],
        away_poles: list[int],
    ) -> ResponseChange:
        """Return what dropping these zeros and poles does to the response."""
        # The gain may be out of range of a double, so it comes last.
        gain = self.rests[0][0] / self.rests[1][0]
        whole = Factored(1.0, self.zeros, self.poles)
        dropped = Factored(1.0, self.zeros[away_zeros], self.poles[away_poles])
        if _is_real(dropped.zeros) and _is_real(dropped.poles):
            kept = Factored(
                1.0, np.delete(self.zeros, away_zeros), np.delete(self.poles, away_poles)
            )
            change = dropping_change(whole, kept, dropped, self.period)
        else:
            # One of a complex pair cannot go alone: what is left is what the witness leaves.
            divisor = polynomials.multiply(self.common, pair[0])
            above, below = (polynomials.divide_exact(p, divisor) for p in pair[1:])
            share = near_float(above[0] / below[0] / gain)
            kept = Factored(share, _all_roots(above), _all_roots(below))
            change = dropping_change(whole, kept, None, self.period)
        size = change.size * near_float(abs(gain)) if change.size else 0.0
        return replace(change, size=size)

    def _worst(self, places: list[int]) -> Stability:
        """Return the worst stability of some poles."""
        verdicts = {self._stability(complex(self.poles[k])) for k in places}
        return next(word for word in _WORST if word in verdicts)

    def _stability(self, pole: complex) -> Stability:
        """Return what a mode at a pole does, as far as the uncertainty can tell."""
        doubt = self._reach(pole)
        if not self.exact:
            return computed_stability(pole, self.period, max(doubt, root_doubt(pole)))
        if doubt and computed_stability(pole, self.period, doubt) is Stability.CANNOT_TELL:
            return Stability.CANNOT_TELL
        multiplicities = dict(polynomials.factor(self.whole[1]))
        # A companion form has one eigenvector for each eigenvalue, so a repeated pole is defective.
        judged = judge(self.rests[1], self.period, lambda f: multiplicities[f] == 1)
        return min(judged, key=lambda each: abs(each[0].value - pole))[2]

    def _reach(self, pole: complex) -> float:
        """Return how far the uncertainty of the denominator moves a pole, to first order."""
        metric = self.measures.box or self.measures.spread
        if metric is None:
            return 0.0
        largest = max(abs(c) for c in self.whole[1])
        below = [float(c / largest) for c in self.whole[1]]
        powers = np.abs(pole) ** np.arange(len(below) - 1, -1, -1)
        # For a spread twice the standard deviation, as if all coefficients moved together.
        factor = 1.0 if self.measures.box is not None else 2.0
        moved = factor * float(np.array([near_float(w / largest) for w in metric.g]) @ powers)
        slope = float(abs(np.polyval(np.polyder(below), pole)))
        return float(moved / slope) if slope else math.inf if moved else 0.0


def _is_real(roots: Array) -> bool:
    """Return whether complex roots come in pairs."""
    return bool(abs(roots.sum().imag) <= 1e-9 * np.abs(roots).sum())


def _rank(candidate: _Candidate) -> tuple[bool, float]:
    """Order: by what the uncertainty says first, since that says more than the size of a change."""
    if candidate.deviations is not None:
        return False, candidate.deviations
    return candidate.allowed != "yes", candidate.change


def _all_roots(polynomial: Polynomial) -> Array:
    """Return the roots as often as they occur."""
    roots = polynomials.roots(polynomial) if len(polynomial) > 1 else ()
    return np.array([r.value for r in roots for _ in range(r.multiplicity)], dtype=complex)


def _nearest(values: Array, targets: Array) -> list[int]:
    """Return which values lie nearest to the targets, as many, complex pairs together.

    Where pairs leave no way to take as many, the last one is taken alone. Real ones come first.
    """
    groups: list[tuple[int, ...]] = []
    upper = sorted(np.flatnonzero(values.imag > 0).tolist(), key=lambda k: str(values[k]))
    lower = sorted(
        np.flatnonzero(values.imag < 0).tolist(), key=lambda k: str(values[k].conjugate())
    )
    groups += [(int(k),) for k in np.flatnonzero(values.imag == 0)]
    groups += list(zip(upper, lower, strict=True))

    def distance(group: tuple[int, ...]) -> float:
        return sum(float(np.abs(targets - values[k]).min()) for k in group)

    # The cheapest choice of each size, group after group.
    best: dict[int, tuple[float, list[tuple[int, ...]]]] = {0: (0.0, [])}
    for group in groups:
        own = distance(group)
        for size, (cost, chosen) in sorted(best.items(), reverse=True):
            grown = size + len(group)
            if grown <= targets.size + 1 and (grown not in best or cost + own < best[grown][0]):
                best[grown] = cost + own, [*chosen, group]
    chosen = best[targets.size if targets.size in best else targets.size + 1][1]
    taken = [k for group in chosen for k in group][: targets.size]
    return sorted(taken, key=lambda k: (values[k].imag != 0, values[k].real, -values[k].imag))


def _known(candidate: _Candidate, others: list[_Candidate]) -> int | None:
    """Return which other candidate has the same factor, as far as that matters."""
    for place, other in enumerate(others):
        gap = abs(candidate.change - other.change)
        close = gap <= _SAME * candidate.change and _is_close(candidate.plain.h, other.plain.h)
        if close or candidate.pair[0] == other.pair[0]:
            return place
    return None


def _is_close(first: Polynomial, second: Polynomial) -> bool:
    """Return whether two factors are one, as far as that matters."""
    if len(first) != len(second):
        return False
    gap = max(abs(a - b) for a, b in zip(first, second, strict=True))
    return float(gap) <= _SAME * float(max(map(abs, first)))


def _is_inside(whole: Sequence[Polynomial], pair: Sequence[Polynomial], box: Metric) -> bool:
    """Return whether a pair lies within the box, entry by entry, exactly."""
    return all(
        abs(changed - c) <= radius
        for p, q, radii in zip(whole, pair, (box.f, box.g), strict=True)
        for c, changed, radius in zip(p, q, radii, strict=True)
    )
