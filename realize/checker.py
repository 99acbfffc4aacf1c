"""Check a certificate of realize. Needs Python alone: ``python -I checker.py FILE``.

Exit status 0 and the claim in words; 1 and what fails; 2 when FILE cannot be read. A certificate is
``{"format", "version", "claim", "evidence", "digest", "about"}``, pure ASCII. Claim and evidence
hold texts, integers and rationals ``"p"`` or ``"p/q"``; `about` proves nothing and is not looked
at. Models are (A, B, C, D), of order n; H = D + C (z - A)^-1 B is the transfer matrix.

1. *Two models have one transfer matrix.* Let V be any matrix that carries the states of a model
   (A1, B1, C1, D1) to those of (A, B, C, D): A V = V A1, B = V B1, C V = C1, D = D1. Then for every
   j C A^j B = C A^j V B1 = C V A1^j B1 = C1 A1^j B1, which with D = D1 are all coefficients of H at
   infinity. No rank of V is needed. A reduction is two such steps, from one (A1, B1, C V, D) to the
   model by V and to the reduced model by U; A1 and B1 are the rows `pivots` of A V and of B, and
   whatever they are, the identities are what is tested. A change of coordinates is one step, with V
   invertible modulo N (see 2).
2. *No realization of smaller order exists.* By Kalman it is enough that [B, A B, ...] and its dual
   have rank n. A common denominator of A, or of B, changes no rank, so all are integers. Taking
   them modulo N is a homomorphism of rings, so the image of a determinant is the determinant of the
   image. Elimination picks n vectors of the span modulo N, triangular with units for pivots; some
   determinant is then a unit modulo N, hence not zero modulo N, for N >= 2 (modulo 1 zero is a
   unit, and everything has every rank), hence not zero. N need not be prime: an element that is
   no unit is never used as a pivot, so a composite N can only make the test fail.
3. *A model realizes the fractions beside it.* With h_0 = D, h_j = C A^(j-1) B and
   f h = sum of f_l h_j z^(l-j), t/f = h when the coefficients of z^e in f h are those of t for
   e >= 0 and vanish for e < 0. The latter are c A^(-e-1) x for some vectors c and x, so if the
   first n of them (the order of the model) vanish all do (Cayley and Hamilton).
4. *Two models differ at a point.* z - A is invertible, because it is modulo N; so a solution X of
   (z - A) X = B is (z - A)^-1 B, and C X + D is the value of H. The two values differ.
5. *Doubles delivered lie near.* The sum of the squares of all differences is compared.
6. *How far (A, B) is from uncontrollable*, in the 2-norm of a change, complex ones allowed, is the
   least singular value s(z) of M(z) = [A - z, B] over all complex z (Eising 1984); of unobservable,
   that of (A', C'). It is 0 when A V = V A1 and B = V B1 for a V with fewer columns than rows,
   since [B, A B, ...] = V [B1, A1 B1, ...]. It is at most |u* M(z)| / |u| for one u and z. It is at
   least L when s(z) >= L everywhere: for |z| >= R, because s(z) >= |z| - |A| >= R - |A|; at z and
   its conjugate alike; and in a square of half diagonal r around c, when s^2 >= L^2 + r^2 at its
   corners, because s(z)^2 - |z - c|^2 is concave: it is the least of u* (M M* - |z - c|^2) u over
   unit vectors u, each affine in z. At a corner T = M M* - (L^2 + r^2) is made of integers; T
   divided by a power of 2 is G G* + E, G triangular and E what division left over, each diagonal
   entry of E more than the rest of its row together; both are semidefinite, so T is.

The file is not trusted: its size and numbers are limited before anything is built, keys are exactly
those known, and every operation is paid for in advance from a fixed allowance.
"""

from __future__ import annotations

import hashlib
import json
import math
import re
import sys
from itertools import product as pairs
from itertools import zip_longest
from operator import mul

TYPE_CHECKING = False  # importing typing would take as long as checking a small certificate
if TYPE_CHECKING:
    from collections.abc import Iterable
    from typing import Any, NoReturn

FORMAT, VERSION = "realize-certificate", 1
MAX_BYTES, MAX_ITEMS, MAX_LEVELS = 64_000_000, 1_000_000, 200
MAX_DIGITS, MAX_COUNT, MAX_MODULUS = 20_000, 10_000, 2**64
MAX_WORK = 300_000_000  # products of short numbers: about a minute
MAX_BITS = 2**32  # of all numbers made: half a gigabyte
RATIONAL = re.compile(r"0|-?[1-9][0-9]*(?:/[1-9][0-9]*)?")
NAMES = ("state_names", "input_names", "output_names")
MODEL = (*"ABCD", "order", "input_count", "output_count", *NAMES[1:], "sampling_period")
SOURCE = (*MODEL, NAMES[0], "reading", "table")
ENDING = "This is a statement about these exact numbers, and not about a plant."

Matrix = tuple[list[list[int]], int]  # rows of numerators, and the denominator of all


class Refused(ValueError):  # noqa: N818  # an answer, not a fault
    """The certificate does not prove its claim, or is none; the text says what fails."""


def refuse(what: str) -> NoReturn:
    """Say what fails."""
    raise Refused(what)


def demand(holds: object, what: str) -> None:
    """Refuse unless something holds."""
    if not holds:
        refuse(what)


def check(text: str) -> str:
    """Return the claim of a certificate in words; raise `Refused` when it is not proved."""
    fits = len(text) <= MAX_BYTES and text.isascii()
    demand(fits, f"wanted at most {MAX_BYTES} ASCII characters")
    count = sum(map(text.count, ",[{"))
    demand(count <= MAX_ITEMS, f"found {count} items, at most {MAX_ITEMS} are allowed")

    def once(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        demand(len(dict(pairs)) == len(pairs), "a key occurs twice")
        return dict(pairs)

    def short(digits: str) -> int:
        return int(digits) if len(digits) <= 20 else refuse("found a number, no short integer")

    try:
        file = json.loads(text, object_pairs_hook=once, parse_int=short, parse_constant=refuse)
        wanted = ("format", "version", "claim", "evidence", "digest")
        format_, version, claim, evidence, stated = take(file, "file", wanted, ("about",))[:5]
        digest = sealed(claim, evidence)[1]
    except json.JSONDecodeError as error:
        refuse(f"not JSON: {error}")
    except RecursionError:
        refuse("nested deeper than Python reads")
    known = (format_, version) == (FORMAT, VERSION) and type(version) is int
    demand(known, f"wanted {FORMAT}, version {VERSION}")
    demand(stated == digest, f"digest: that of claim and evidence is {digest}")
    kind = str(claim.get("kind")) if type(claim) is dict else ""
    demand(kind in KINDS, f"claim.kind: known are {', '.join(KINDS)}")
    words = KINDS[kind](Proof(), claim, evidence)
    return "\n".join([*words, ENDING, f"Certificate {digest}."])


def sealed(claim: Any, evidence: Any) -> tuple[str, str]:
    """Return the canonical JSON of claim and evidence, ASCII, and its digest."""
    body = {"claim": claim, "evidence": evidence}
    text = json.dumps(body, sort_keys=True, separators=(",", ":"), ensure_ascii=True)
    return text, hashlib.sha256(text.encode("ascii")).hexdigest()


def take(value: Any, where: str, wanted: Iterable[str], optional: Iterable[str] = ()) -> list[Any]:
    """Return what an object holds under keys; it has no others, which nothing would prove."""
    demand(type(value) is dict, f"{where}: wanted an object")
    wrong = set(wanted).difference(value) | set(value).difference(wanted, optional)
    demand(not wrong, f"{where}: keys missing or unknown: {json.dumps(sorted(wrong))[:200]}")
    return [value.get(key) for key in (*wanted, *optional)]


def items(value: Any, kind: type, count: int, where: str) -> list[Any]:
    """Return a list of so many things of one type."""
    fits = type(value) is list and len(value) == count and all(type(x) is kind for x in value)
    demand(fits, f"{where}: wanted {count} of {kind.__name__}")
    return list(value)


def whole(value: Any, low: int, high: int, where: str) -> int:
    """Return an integer from one number to another."""
    fits = type(value) is int and low <= value <= high
    demand(fits, f"{where}: wanted an integer from {low} to {high}")
    return int(value)


def number(digits: str) -> int:
    """Return the integer that digits spell; in halves, because Python refuses long ones."""
    if len(digits) <= 600:
        return int(digits)
    half = len(digits) // 2
    return number(digits[:-half]) * int(10**half) + number(digits[-half:])


def rational(text: Any, where: str) -> tuple[int, int]:
    """Return (p, q) of a text "p" or "p/q"."""
    if type(text) is not str or not RATIONAL.fullmatch(text):
        refuse(f"{where}: found no rational")
    above, _, below = text.partition("/")
    fits = max(len(above), len(below)) <= MAX_DIGITS
    demand(fits, f"{where}: found a number of more than {MAX_DIGITS} digits")
    size = number(above.removeprefix("-"))
    return (-size if above[0] == "-" else size), number(below or "1")


def bits(*rows: Iterable[int]) -> int:
    """Return the length of the longest number."""
    return max((max(map(int.bit_length, row), default=0) for row in rows), default=0)


def spelled(text: str) -> str:
    """Return a rational for people; a long one by its length."""
    return text if len(text) <= 60 else f"(a fraction of {len(text)} digits)"


def turned(matrix: Matrix, width: int) -> Matrix:
    """Return the transpose."""
    return [[row[j] for row in matrix[0]] for j in range(width)], matrix[1]


class Model:
    """A model that was read: sizes n, m, p, four matrices over one denominator, and its words."""

    def __init__(self, proof: Proof, value: Any, where: str, wanted: tuple[str, ...]) -> None:
        source = wanted is SOURCE
        take(value, where, wanted, ("transfer",) if source else ())
        sizes = [whole(value[key], 0, MAX_COUNT, f"{where}.{key}") for key in MODEL[4:7]]
        self.n, self.m, self.p = n, m, p = sizes
        for key, count in list(zip(NAMES, sizes, strict=True))[not source :]:
            found = items(value[key], str, count, f"{where}.{key}")
            fits = len(set(found)) == count and all(0 < len(name) <= 1000 for name in found)
            demand(fits, f"{where}.{key}: wanted different names, not empty, not long")
        self.names, time, period = [value[key] for key in NAMES[1:]], "continuous time", None
        if value["sampling_period"] is not None:
            above, below = rational(value["sampling_period"], f"{where}.sampling_period")
            demand(above > 0, f"{where}.sampling_period: wanted a positive number")
            period = above // math.gcd(above, below), below // math.gcd(above, below)
            time = f"sampling period {spelled(value['sampling_period'])}"
        self.ports, self.where = (m, p, period), where
        self.matrices = proof.matrices(value, where, (n, n), (n, m), (p, n), (p, m))
        names = " to ".join(json.dumps(each)[:200] for each in self.names)
        self.words = [f"  {where}: order {n}, {names}, {time}."]
        if source:
            reading, table = value["reading"], value["table"]
            fits = reading in ("stored", "written", "intended", "given") and type(table) is str
            demand(fits and re.fullmatch("[0-9a-f]{64}", table), f"{where}: reading or table")
            self.words.append(f"    read as {reading} from table {table}")
            self.words.append("    (what was read is not in the certificate, its digest is).")
        if "transfer" in value:
            proof.realizes(self, value["transfer"], f"{where}.transfer")
            self.words.append(f"  {where}.transfer: the model realizes these fractions.")


class Proof:
    """What is tested, and an allowance from which every operation is paid."""

    def __init__(self) -> None:
        self.work = self.bits = 0

    def spend(self, products: int, made: int, a: int, b: int) -> None:
        """Pay for products of numbers of a and b bits, and for numbers made of them."""
        self.work += products * (1 + a * b // 65536)
        self.bits += made * (a + b + 64)
        demand(self.work <= MAX_WORK, "the certificate takes too much work to check")
        demand(self.bits <= MAX_BITS, "the certificate takes too much memory to check")

    def tables(self, *wanted: tuple[Any, int, int, str]) -> list[Matrix]:
        """Return rows of texts, of the shapes stated, as matrices over one denominator."""
        read, below = [], 1
        for rows, height, width, where in wanted:
            rows = [items(row, str, width, where) for row in items(rows, list, height, where)]
            read.append([[rational(text, where) for text in row] for row in rows])
        numbers = [pair for rows in read for row in rows for pair in row]
        for each in {q for _, q in numbers}:
            self.spend(4, 2, below.bit_length(), each.bit_length())
            below = math.lcm(below, each)
        self.spend(6 * len(numbers), len(numbers), below.bit_length(), bits(*numbers))
        return [([[p * (below // q) for p, q in row] for row in rows], below) for rows in read]

    def table(self, rows: Any, height: int, width: int, where: str) -> Matrix:
        """Return one matrix."""
        return self.tables((rows, height, width, where))[0]

    def matrices(self, value: Any, where: str, *shapes: tuple[int, int]) -> list[Matrix]:
        """Return A, B, C, D over one denominator."""
        wanted = zip("ABCD", shapes, strict=True)
        return self.tables(*((value[key], *shape, f"{where}.{key}") for key, shape in wanted))

    def product(self, left: Matrix, right: Matrix) -> Matrix:
        """Return a product. Its rows are empty where there is nothing to sum: they are zero."""
        result, width, longest = [], len(right[0][0]) if right[0] else 0, bits(*right[0])
        for row in left[0]:
            used = [j for j, x in enumerate(row) if x]
            self.spend((len(used) + 4) * width + 20, width + 4, bits(row), longest)
            weights, columns = (
                [row[j] for j in used],
                zip(*(right[0][j] for j in used), strict=True),
            )
            sums = [sum(map(mul, weights, column)) for column in columns]
            result.append(sums if used else [0] * width)
        return result, left[1] * right[1]

    def minus(self, left: Matrix, right: Matrix) -> Matrix:
        """Return a difference; empty rows are zero."""
        (first, a), (second, b), common = left, right, math.gcd(left[1], right[1])
        count, size = sum(map(len, first + second)) + 4, max(bits(*first), bits(*second))
        self.spend(count, count, size, max(a, b).bit_length())
        a, b, rows = a // common, b // common, zip(first, second, strict=True)
        return [[x * b - y * a for x, y in zip_longest(*r, fillvalue=0)] for r in rows], left[1] * b

    def equal(self, left: Matrix, right: Matrix, what: str) -> None:
        """Demand an identity."""
        demand(not any(map(any, self.minus(left, right)[0])), f"{what} does not hold")

    def carries(self, model: list[Matrix], V: Matrix, other: list[Matrix], where: str) -> None:
        """Test the identities of paragraph 1."""
        (A, B, C, D), (A1, B1, C1, D1) = model, other
        self.equal(self.product(A, V), self.product(V, A1), f"{where}: A V = V A1")
        self.equal(B, self.product(V, B1), f"{where}: B = V B1")
        self.equal(self.product(C, V), C1, f"{where}: C V = C1")
        self.equal(D, D1, f"{where}: D = D1")

    def basis(self, A: Matrix, B: Matrix, steps: Any, where: str) -> tuple[Matrix, Matrix, Matrix]:
        """Return V, A1 and B1 that pass the first two of them."""
        n, pivots = len(A[0]), steps["pivots"]
        demand(type(pivots) is list and len(pivots) <= n, f"{where}.pivots: wanted a short list")
        rows = [whole(i, 0, n - 1, f"{where}.pivots") for i in pivots]
        V = self.table(steps["reached"], n, len(rows), f"{where}.reached")
        AV = self.product(A, V)
        A1, B1 = ([AV[0][i] for i in rows], AV[1]), ([B[0][i] for i in rows], B[1])
        self.equal(AV, self.product(V, A1), f"{where}.reached: A V = V A1")
        self.equal(B, self.product(V, B1), f"{where}.reached: B = V B1")
        return V, A1, B1

    def reduces(self, model: Model, steps: Any, reduced: Model, where: str) -> None:
        """Test the two steps of a reduction."""
        take(steps, where, ("reached", "pivots", "seen"))
        demand(model.ports == reduced.ports, f"{where}: sizes or sampling periods differ")
        A, B, C, D = model.matrices
        V, A1, B1 = self.basis(A, B, steps, where)
        U = self.table(steps["seen"], reduced.n, len(A1[0]), f"{where}.seen")
        self.carries(reduced.matrices, U, [A1, B1, self.product(C, V), D], f"{where}.seen")

    def rank(self, what: str, N: Any, vectors: Matrix, n: int, A: Matrix | None = None) -> None:
        """Demand that rows, and A times them again and again, have rank n modulo N."""
        N = whole(N, 2, MAX_MODULUS, "evidence.modulus")
        turn = [[x % N for x in row] for row in A[0]] if A else []
        waiting, found = [[x % N for x in row] for row in vectors[0]], list[tuple[int, list[int]]]()
        while waiting and len(found) < n:
            vector = waiting.pop()
            self.spend(n * (len(found) + 2 + len(turn)), 0, 0, 0)
            for place, pivot in found:
                factor = vector[place]
                if factor:
                    vector = [(x - factor * y) % N for x, y in zip(vector, pivot, strict=True)]
            first = next((i for i, x in enumerate(vector) if math.gcd(x, N) == 1), None)
            if first is not None:
                unit = pow(vector[first], -1, N)
                vector = [x * unit % N for x in vector]
                found.append((first, vector))
                if A:
                    waiting.append([sum(map(mul, row, vector)) % N for row in turn])
        demand(len(found) == n, f"{what}: rank {len(found)} modulo {N}, wanted {n}")

    def realizes(self, model: Model, transfer: Any, where: str) -> None:
        """Test paragraph 3."""
        tops, downs = (
            [items(row, list, model.m, where) for row in items(table, list, model.p, where)]
            for table in take(transfer, where, ("numerators", "denominators"))
        )
        A, power, C, D = model.matrices
        markov = [D]
        for _ in range(max((len(f) for row in downs for f in row), default=1) - 1 + model.n):
            markov.append(self.product(C, power))
            power = self.product(A, power)
        for i, j in pairs(range(model.p), range(model.m)):
            t, f = tops[i][j], downs[i][j]
            demand(0 < len(t) <= len(f), f"{where}: not a proper fraction")
            (t, f), _ = self.table([["0"] * (len(f) - len(t)) + t, f], 2, len(f), where)
            demand(f[0], f"{where}: not a proper fraction")
            last = markov[len(f) - 1 + model.n][1]
            self.spend(len(f) * (len(f) + model.n), 2 * len(f), last.bit_length(), bits(f, t))
            h = [rows[i][j] * (last // below) for rows, below in markov[: len(f) + model.n]]
            for e, wanted in enumerate(t + [0] * model.n):
                found = sum(map(mul, f, h[e::-1]))
                demand(found == wanted * last, f"{where}: entry {i + 1}, {j + 1} is not realized")

    def minimal_realization(self, claim: Any, evidence: Any) -> list[str]:
        """Two models have one transfer matrix, and the second is minimal."""
        near = ("delivered", "distance") if "delivered" in claim else ()
        take(claim, "claim", ("kind", "model", "reduced", *near))
        steps, N = take(evidence, "evidence", ("reduction", "modulus"))
        model = Model(self, claim["model"], "claim.model", SOURCE)
        reduced = Model(self, claim["reduced"], "claim.reduced", MODEL)
        demand(model.names == reduced.names, "claim: the names of the ports differ")
        self.reduces(model, steps, reduced, "evidence.reduction")
        (A, B, C, _), n, m, p = reduced.matrices, reduced.n, reduced.m, reduced.p
        self.rank("claim.reduced: [B, A B, ...]", N, turned(B, m), n, A)
        self.rank("claim.reduced: [C; C A; ...]", N, C, n, turned(A, n))
        words = model.words + reduced.words
        if near:
            take(claim["delivered"], where := "claim.delivered", "ABCD")
            found = self.matrices(claim["delivered"], where, (n, n), (n, m), (p, n), (p, m))
            apart = [self.minus(*both) for both in zip(reduced.matrices, found, strict=True)]
            far, under = rational(claim["distance"], "claim.distance")
            rows, below = [row for rows, _ in apart for row in rows], apart[0][1]
            self.spend(sum(map(len, rows)) + 9, 9, bits(*rows, (far, below)), bits((under, below)))
            squares = sum(x * x for row in rows for x in row)
            fits = far >= 0 and squares * under**2 <= (far * below) ** 2
            demand(fits, "claim.distance: the doubles lie farther")
            words += [
                f"  {where}, in doubles, differs from claim.reduced by at most "
                f"{spelled(claim['distance'])}",
                "    (root of the sum of the squares of the differences of all entries).",
            ]
        head = "Proved: these two exact models have the same transfer matrix, and no realization of"
        return [f"{head} smaller order has it.", *words]

    def two(self, claim: Any, *more: str) -> tuple[Model, Model, list[str]]:
        """Return the two models of a comparison."""
        take(claim, "claim", ("kind", "first", "second", *more))
        first = Model(self, claim["first"], "claim.first", SOURCE)
        second = Model(self, claim["second"], "claim.second", SOURCE)
        if more:
            demand(first.ports == second.ports, "claim: sizes or sampling periods differ")
        return first, second, first.words + second.words

    def same_transfer_matrix(self, claim: Any, evidence: Any) -> list[str]:
        """Two models have one; with a change of coordinates where there is one."""
        first, second, words = self.two(claim, "transformation")
        if claim["transformation"] is None:
            one, other, value = take(evidence, "evidence", ("first", "second", "common"))
            common = Model(self, value, "evidence.common", MODEL)
            self.reduces(first, one, common, "evidence.first")
            self.reduces(second, other, common, "evidence.second")
        else:
            (N,), n = take(evidence, "evidence", ("modulus",)), first.n
            where = "claim.transformation"
            demand(n == second.n, f"{where}: the orders differ")
            T = self.table(claim["transformation"], n, n, where)
            self.carries(first.matrices, T, second.matrices, where)
            self.rank(where, N, T, n)
            words.append(f"  State of the first = {where} @ state of the second; it is invertible.")
        return ["Proved: these two exact models have the same transfer matrix.", *words]

    def different_transfer_matrices(self, claim: Any, evidence: Any) -> list[str]:
        """The values differ at a point where neither has a pole."""
        first, second, words = self.two(claim, "point", "values")
        p, q = rational(claim["point"], "claim.point")
        stated = take(claim["values"], "claim.values", ("first", "second"))
        *solutions, N = take(evidence, "evidence", ("first", "second", "modulus"))
        values = []
        for model, value, X in zip((first, second), stated, solutions, strict=True):
            (A, B, C, D), n, m, where = model.matrices, model.n, model.m, model.where
            X = self.table(X, n, m, f"{where}: evidence")
            values.append(self.table(value, model.p, m, f"{where}: value"))
            Z = self.minus(([[p * (i == j) for j in range(n)] for i in range(n)], q), A)
            self.equal(self.product(Z, X), B, f"{where}: (z - A) X = B")
            value = self.minus(values[-1], D)
            self.equal(self.product(C, X), value, f"{where}: value = C X + D")
            self.rank(f"{where}: z - A", N, Z, n)
        demand(any(map(any, self.minus(*values)[0])), "claim.values: the two values are equal")
        head = "Proved: the transfer matrices of these two exact models differ at"
        return [f"{head} {spelled(claim['point'])}, where neither has a pole.", *words]

    def different_ports(self, claim: Any, evidence: Any) -> list[str]:
        """Sampling periods, or numbers of inputs or outputs, differ."""
        first, second, words = self.two(claim)
        take(evidence, "evidence", ())
        part = slice(2, 3) if claim["kind"] == "different sampling periods" else slice(2)
        demand(first.ports[part] != second.ports[part], f"claim: not {claim['kind']}")
        return [f"Proved: these two exact models have {claim['kind']}.", *words]

    def distance(self, claim: Any, evidence: Any) -> list[str]:
        """A distance lies between two numbers."""
        kind, value, *bounds = take(claim, "claim", ("kind", "model", "lower", "upper"))
        model = Model(self, value, "claim.model", SOURCE)
        (A, B, C, _), n, head = model.matrices, model.n, f"Proved: the {kind} of this exact model"
        if kind.endswith("unobservability"):
            A, B = turned(A, n), turned(C, n)
        if bounds == ["0", "0"]:
            take(evidence, "evidence", ("reached", "pivots"))
            demand(
                len(self.basis(A, B, evidence, "evidence")[1][0]) < n,
                "evidence: V has as many columns as rows",
            )
            return [f"{head} is 0.", *model.words]
        wanted = ("vector", "point", "radius", "squares")
        vector, point, radius, words = take(evidence, "evidence", wanted)
        demand(type(words) is list and len(words) <= MAX_LEVELS, "evidence.squares: wanted levels")
        point = items(point, str, 2, "evidence.point")
        (numbers,), q = self.table([[*bounds, radius, *point]], 1, 5, "claim, evidence: numbers")
        # All that follows is integers: in this unit corners and squares of half diagonals are.
        self.spend(9, 9, q.bit_length() + MAX_LEVELS, A[1].bit_length())
        unit = math.lcm(A[1], q) << len(words)
        size = bits(*A[0], *B[0], numbers) + unit.bit_length()
        self.spend(n * n * (n + len(B[0])), 9 * (n + len(B[0])) ** 2, size, size)
        L, U, R, x, y = (v * (unit // q) for v in numbers)
        a, b = ([[v * (unit // A[1]) for v in row] for row in rows] for rows in (A[0], B[0]))
        u = self.table(vector, 2, n, "evidence.vector")[0]
        moved = self.product(([[x, y], [-y, x]], 1), (u, 1))
        rows = self.minus(self.product((u, 1), (a, 1)), moved)[0] + self.product((u, 1), (b, 1))[0]
        self.spend(sum(map(len, rows)) + 2 * n, 9, bits(*rows), bits(*rows))
        length, squares = (sum(v * v for row in each for v in row) for each in (u, rows))
        below = length > 0 and squares <= U * U * length
        demand(below, "evidence.vector: it does not show the upper bound")
        demand(0 <= L < min(R, U), "claim, evidence: wanted lower below upper and radius")
        inside = sum(v * v for row in a for v in row) <= (R - L) ** 2
        demand(inside, "evidence.radius: wanted at least lower and the Frobenius norm of A")
        self.covers(a, b, L * L, U * U - L * L, self.corners(R, words), size)
        return [f"{head} lies between {' and '.join(map(spelled, bounds))}.", *model.words]

    def corners(self, R: int, words: list[Any]) -> dict[tuple[int, int], int]:
        """Return corners with the side of their largest square; "x" is one that is cut in four."""
        squares, found = [(-1, 0), (0, 0)], dict[tuple[int, int], int]()
        for level, word in enumerate(words):
            fits = type(word) is str and len(word) == len(squares) and not word.strip(".x")
            demand(fits, f"evidence.squares: wanted {len(squares)} marks on level {level}")
            self.spend(20 * len(word), 9 * len(word), R.bit_length() + 384, 0)
            side, more = R >> level, []
            for (x, y), mark in zip(squares, word, strict=True):
                for i, j in ((0, 0), (0, 1), (1, 0), (1, 1)):
                    if mark == "x":
                        more.append((2 * x + i, 2 * y + j))
                    else:
                        found.setdefault(((x + i) * side, (y + j) * side), side)
            squares = more
        demand(not squares, "evidence.squares: squares are left")
        return found

    def covers(self, a: Any, b: Any, low: int, room: int, corners: Any, size: int) -> None:
        """Test all corners: T of the text, lower triangle row by row."""
        n = len(a)
        self.spend(len(corners) * corner_work(n), 0, size, size)
        places = [(i, j) for i in range(n) for j in range(i + 1)]
        gram = [sum(map(mul, a[i] + b[i], a[j] + b[j])) for i, j in places]
        both = [a[i][j] + a[j][i] for i, j in places]
        apart, parts = [a[i][j] - a[j][i] for i, j in places], (gram, both, places)
        for (x, y), side in corners.items():
            level = x * x + y * y - low - side * side // 2
            real = [g - x * h + level * (i == j) for g, h, (i, j) in zip(*parts, strict=True)]
            proved = semidefinite(n, real, [y * h for h in apart], room)
            demand(proved, "evidence.squares: a corner does not show the lower bound")


def corner_work(n: int) -> int:
    """Return what the test of one corner costs, in products of short numbers."""
    return n**3 // 8 + 5 * n**2 // 2 + 100


def semidefinite(n: int, real: list[int], imaginary: list[int], room: int) -> bool:
    """Whether division leaves enough on the diagonal of a Hermitian matrix, lower triangle given.

    What rounding down and division leave is below n * (root + 1) twice in each row, and given up
    beforehand. That is some 1/256 of the room, by the number of bits of G.
    """
    top = max(0, *(real[i * (i + 3) // 2] for i in range(n)))
    shift = max(0, top.bit_length() - 2 * (10 + (n * top // room).bit_length()))
    give, rows = 2 * n * (math.isqrt(top >> shift) + 2), list[tuple[list[int], list[int], int]]()
    entries = zip((v >> shift for v in real), (v >> shift for v in imaginary), strict=True)
    for _ in range(n):
        a, b = list[int](), list[int]()
        for c, d, root in rows:
            x, y = next(entries)
            a.append((x - sum(map(mul, a, c)) - sum(map(mul, b, d))) // root)
            b.append((y - sum(map(mul, b, c)) + sum(map(mul, a, d))) // root)
        left = next(entries)[0] - sum(map(mul, a, a)) - sum(map(mul, b, b)) - give
        if left <= 0:
            return False
        rows.append((a, b, math.isqrt(left)))
    return True


# A new kind of claim is one more method.
KINDS = {
    "minimal realization": Proof.minimal_realization,
    "same transfer matrix": Proof.same_transfer_matrix,
    "different transfer matrices": Proof.different_transfer_matrices,
    "different sampling periods": Proof.different_ports,
    "different sizes": Proof.different_ports,
    "distance to uncontrollability": Proof.distance,
    "distance to unobservability": Proof.distance,
}


def main(arguments: list[str]) -> int:
    """Check the file named; return the exit status."""
    if len(arguments) != 1:
        print("usage: python -I checker.py FILE", file=sys.stderr)
        return 2
    try:
        with open(arguments[0], "rb") as stream:
            print(check(stream.read(MAX_BYTES + 1).decode("latin-1")))
    except (OSError, Refused) as error:
        refused = isinstance(error, Refused)
        print(f"{'Not proved' if refused else 'cannot read the file'}: {error}", file=sys.stderr)
        return 1 if refused else 2
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
