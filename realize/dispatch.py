"""The forms at the top level: the arithmetic follows the data.

Any float: floating. All rational: exact. Irrational constants and no float: multiprecision, with
50 digits.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from realize import forms
from realize.arithmetic.exact import ExactPath
from realize.arithmetic.floating import FloatingPath
from realize.arithmetic.path import Path
from realize.entries import is_constant, round_entry
from realize.model.realization import Kind, Realization
from realize.model.transfer import TransferMatrix
from realize.results import Cancellation, KalmanParts, Reduction, Staircase

__all__ = [
    "cancel",
    "companion",
    "from_markov_parameters",
    "kalman_parts",
    "markov_parameters",
    "minimal",
    "path_for",
    "staircase",
    "transfer_matrix",
]

Array = np.ndarray[Any, Any]


def path_for(model: Any) -> Path:
    """Return the path that a model's own entries call for."""
    kind = getattr(model, "kind", None)
    if kind == Kind.PARAMETRIC:
        return _multiprecision()
    return ExactPath() if kind == Kind.RATIONAL else FloatingPath()


def _multiprecision() -> Path:
    # mpmath loads when it is needed.
    from realize.arithmetic.multiprecision import MultiprecisionPath

    return MultiprecisionPath()


def staircase(model: Realization, *, side: str = "input") -> Staircase:
    """Return a model in staircase form, with its rank increments.

    Parameters
    ----------
    model : Realization, A (n, n), B (n, m), C (p, n), D (p, m).
    side : {"input", "output"}, keyword-only
        "input" puts the reachable part first, "output" the observable part.

    Returns
    -------
    Staircase
        ``model`` has A block Hessenberg and B zero below its first stair (for "output" the
        transposed pattern, in A and C). ``transformation`` is T with state = T @ new state.

    Raises
    ------
    UnknownWordError
        When side is another word.

    Notes
    -----
    Exact: nested subspaces modulo primes, lifted, verified over the rationals. Floating: scaling
    by powers of two, then orthogonal transformations, O(n^3); one cutoff for all stages.

    References
    ----------
    Van Dooren (1981), The generalized eigenstructure problem in linear system theory, IEEE Trans.
    Automatic Control 26, section III. Rosenbrock (1970), State-space and Multivariable Theory.

    Examples
    --------
    >>> import realize
    >>> model = realize.Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    >>> realize.staircase(model).stairs
    (1,)
    """
    return forms.staircase(path_for(model), model, side)


def minimal(source: Realization | TransferMatrix) -> Reduction:
    """Return a minimal realization: reachable and observable, with the same transfer matrix.

    Parameters
    ----------
    source : Realization or TransferMatrix
        A transfer matrix is realized as it is given, then reduced.

    Returns
    -------
    Reduction
        ``model`` has shapes (r, r), (r, m), (p, r), (p, m) with r <= n; ``removed`` holds the
        modes removed, and on the exact path their polynomial.

    Warns
    -----
    HiddenInstabilityWarning
        When a mode that was removed is not known to be stable: the plant keeps it.

    Notes
    -----
    What the inputs reach, and of that what the outputs see: two staircases. Cost O(n^3) in
    floating point; on the exact path a few products modulo word-size primes.

    References
    ----------
    Kalman (1963), Mathematical description of linear dynamical systems, SIAM J. Control 1.
    Kailath (1980), Linear Systems, section 2.4.

    Examples
    --------
    >>> import realize
    >>> realize.minimal(realize.TransferMatrix([1, 1], [1, 3, 2])).order
    1
    """
    return forms.minimal(path_for(source), source)


def kalman_parts(model: Realization) -> KalmanParts:
    """Return the Kalman decomposition: four parts, controllable or not, observable or not.

    Parameters
    ----------
    model : Realization, A (n, n), B (n, m), C (p, n), D (p, m).

    Returns
    -------
    KalmanParts
        Blocks in the order controllable-unobservable, controllable-observable,
        uncontrollable-unobservable, uncontrollable-observable.

    Raises
    ------
    PrecisionError
        On the floating path, when its rank decisions contradict each other.

    Notes
    -----
    The subspaces are unique, the complements are not: compare dimensions, polynomials and
    invariant subspaces, never basis vectors.

    References
    ----------
    Kalman (1963), Mathematical description of linear dynamical systems, SIAM J. Control 1.

    Examples
    --------
    >>> import realize
    >>> model = realize.Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    >>> realize.kalman_parts(model).dimensions["uncontrollable, observable"]
    1
    """
    return forms.kalman_parts(path_for(model), model)


def companion(source: Realization | TransferMatrix, *, side: str = "input") -> Realization:
    """Return the controllable or the observable companion form, common factors included.

    Parameters
    ----------
    source : Realization or TransferMatrix
        With one input or one output. A realization is taken through its transfer matrix, whose
        denominator is the characteristic polynomial of A, so hidden modes stay hidden modes.
    side : {"input", "output"}, keyword-only
        "input": ones above the diagonal, minus the coefficients in the last row, B the last unit
        vector. "output": the transpose of that.

    Returns
    -------
    Realization
        With several channels on the named side, one companion block for each of them.

    Raises
    ------
    ImproperError
        When an entry has a numerator of higher degree than its denominator.
    NotBuiltError
        For a source with several inputs and several outputs.
    UnknownWordError
        When side is another word.

    References
    ----------
    Kailath (1980), Linear Systems, section 2.1.

    Examples
    --------
    >>> import realize
    >>> realize.companion(realize.TransferMatrix([1, 1], [1, 3, 2])).order
    2
    """
    return forms.companion(path_for(source), source, side)


def transfer_matrix(model: Realization) -> TransferMatrix:
    """Return the transfer matrix of a model: numerators over the polynomial of A, uncancelled.

    Parameters
    ----------
    model : Realization, A (n, n), B (n, m), C (p, n), D (p, m).

    Returns
    -------
    TransferMatrix
        Every denominator is det(s - A) (or det(z - A)).

    Notes
    -----
    Exact: det(s - A + b c) - det(s - A), entry by entry. Floating: computed eigenvalues and Markov
    parameters in a scaled unit of time; the coefficients of a high order lose digits, as any
    polynomial does.

    References
    ----------
    Kailath (1980), Linear Systems, section 2.3 and appendix A.

    Examples
    --------
    >>> import realize
    >>> realize.transfer_matrix(realize.Realization([[-2]], [1], [3])).numerators
    (((Fraction(3, 1),),),)
    """
    return forms.transfer_matrix(path_for(model), model)


def cancel(transfer: TransferMatrix, *, uncertainty: Any = None) -> Cancellation:
    """Cancel the common factors of a transfer matrix, entry by entry.

    Parameters
    ----------
    transfer : TransferMatrix
    uncertainty : number, "ulp", "last digit" or Uncertainty, keyword-only, optional
        How far each coefficient may lie from the number given; a number is relative. It decides
        what is worth telling in `near` and what is said of it, and never what cancels.

    Returns
    -------
    Cancellation
        The coprime fractions, what was common, and the poles and zeros that nearly cancel: how
        small a change of the coefficients would do it, an exact fraction that shows it, what
        dropping them does to the frequency response, and whether they are stable. With an
        uncertainty also whether it allows that, or how many standard deviations away that is.

    Raises
    ------
    UncertaintyError, UnknownWordError
        For an uncertainty that does not fit the coefficients, or is none.

    Notes
    -----
    Near are: what a relative change of 1e-4 makes cancel; what the bounds allow; what lies within
    the confidence of the standard deviations (19/20 unless given).

    References
    ----------
    Exact: von zur Gathen and Gerhard, Modern Computer Algebra, chapter 6. Floating: Corless,
    Gianni, Trager, Watt (1995), The singular value decomposition for polynomial systems, ISSAC.
    Near: also Karmarkar and Lakshman (1998), On approximate GCDs of univariate polynomials, J.
    Symbolic Computation 26; see `realize.arithmetic.nearby_divisors`.

    Examples
    --------
    >>> import realize
    >>> realize.cancel(realize.TransferMatrix([1, 1], [1, 3, 2])).common
    (Fraction(1, 1), Fraction(1, 1))
    >>> found = realize.cancel(realize.TransferMatrix([1, 1.01], [1, 3, 2]), uncertainty=0.02)
    >>> [(pair.pole, pair.zero, pair.allowed) for pair in found.near]
    [((-1+0j), (-1.01+0j), 'yes')]
    """
    return forms.cancel(path_for(transfer), transfer, uncertainty)


def markov_parameters(model: Realization, count: int) -> Array:
    """Return the first Markov parameters D, CB, CAB, ...

    Parameters
    ----------
    model : Realization, A (n, n), B (n, m), C (p, n), D (p, m).
    count : int
        How many, item 0 being D.

    Returns
    -------
    array (count, outputs, inputs)
        Of floats, or of Fractions.

    Raises
    ------
    ShapeError
        When count is negative or no integer.

    Examples
    --------
    >>> import realize
    >>> realize.markov_parameters(realize.Realization([[2]], [1], [1]), 4).ravel().tolist()
    [Fraction(0, 1), Fraction(1, 1), Fraction(2, 1), Fraction(4, 1)]
    """
    return forms.markov_parameters(path_for(model), model, count)


def from_markov_parameters(parameters: Any, *, sampling_period: Any = None) -> Reduction:
    """Return a realization with the fewest states that has the Markov parameters given.

    Parameters
    ----------
    parameters : array_like (count, outputs, inputs), or flat for one input and one output
        Item 0 is D.
    sampling_period : number, keyword-only, optional

    Returns
    -------
    Reduction
        ``model`` has exactly these parameters (to within the cutoff on the floating path). When
        the data are too short to fix it, it is one of several of that order.

    Raises
    ------
    ShapeError
        When the items do not have one shape.

    References
    ----------
    Ho and Kalman (1966), Regelungstechnik 14; Tether (1970), IEEE Trans. Automatic Control 15;
    Kung (1978), 12th Asilomar Conference.

    Examples
    --------
    >>> import realize
    >>> realize.from_markov_parameters([0, 1, 1, 2, 3, 5, 8]).order
    2
    """
    entries, shape = forms.read_parameters(parameters)
    if any(isinstance(entry, float) for entry in entries):
        path: Path = FloatingPath()
        entries = [round_entry(entry, "parameters") for entry in entries]
    else:
        path = _multiprecision() if any(map(is_constant, entries)) else ExactPath()
    return forms.realize_parameters(path, entries, shape, sampling_period)
