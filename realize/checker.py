"""Check a certificate of realize. Needs Python alone: ``python -I checker.py FILE``.

Exit status 0 and the claim in words; 1 and what fails; 2 when FILE cannot be read. A certificate is
``{"format", "version", "claim", "evidence", "digest", "about"}``, pure ASCII. Claim and evidence
hold texts, integers and rationals ``"p"`` or ``"p/q"``; `about` proves nothing and is not looked
at. Models are (A, B, C, D), of order n; H = D + C (z - A)^-1 B is the transfer matrix.

1. *Two models have one transfer matrix.* Let V (n, k) and U (r, k) be any matrices with
   A V = V A1, B = V B1, U A1 = Ar U, Br = U B1, C V = Cr U and D = Dr. Then for every j
   C A^j B = C A^j V B1 = C V A1^j B1 = Cr U A1^j B1 = Cr Ar^j U B1 = Cr Ar^j Br, which with
   D = Dr are all coefficients of H at infinity. No rank of V or U is needed. A1 and B1 are
   rows of A V and of B (the rows `pivots`); whatever they are, the identities are what is tested.
2. *No realization of smaller order exists.* By Kalman it is enough that [Br, Ar Br, ...] and its
   dual have rank r. Rationals whose denominators are prime to N form a ring, and taking them modulo
   N is a homomorphism of rings onto Z/N, so the image of a determinant is the determinant of the
   image. Elimination picks r vectors of the span modulo N, triangular with units for pivots; some
   determinant is then a unit modulo N, hence not zero modulo N, for N >= 2 (modulo 1 zero is a
   unit, and everything has every rank), hence not zero. N need not be prime: an element that is
   no unit is never used as a pivot, so a composite N can only make the test fail. Order 0 needs
   no ranks; where k = 0, B = V B1 says that B vanishes.
3. *A realization has the transfer matrix written beside it.* With h_0 = D, h_j = C A^(j-1) B and
   d h = sum of d_l h_j z^(l-j), n/d = h when the coefficients of z^e in d h are those of n for
   e >= 0 and vanish for e < 0. The latter are c A^(-e-1) x for some vectors c and x, so if the
   first n of them (the order of the model) vanish all do (Cayley and Hamilton).
4. *Two models differ at a point.* z - A is invertible, because it is modulo N; so a solution X of
   A X + B = z X is (z - A)^-1 B, and C X + D is the value of H. The two values differ.
5. *A change of coordinates*: A1 T = T A2, B1 = T B2, C1 T = C2, D1 = D2, T invertible modulo N.
6. *Doubles delivered lie near.* The sum of the squares of all differences is compared.

The file is not trusted: its size, nesting and numbers are limited before anything is built, keys
are exactly those known, and every operation is paid for in advance from a fixed allowance.
"""

from __future__ import annotations

import hashlib
import json
import math
import re
import sys
from collections.abc import Callable, Iterable
from operator import mul

TYPE_CHECKING = False  # importing typing would take as long as checking a small certificate
if TYPE_CHECKING:
    from typing import Any, NoReturn

FORMAT, VERSION = "realize-certificate", 1
MAX_BYTES, MAX_ITEMS, MAX_DEPTH = 64_000_000, 1_000_000, 8
MAX_DIGITS, MAX_COUNT, MAX_MODULUS = 20_000, 10_000, 2**64
MAX_WORK = 300_000_000  # products of short numbers: about a minute
MAX_BITS = 2**32  # of all numbers made: half a gigabyte
RATIONAL = re.compile(r"0|-?[1-9][0-9]*(?:/[1-9][0-9]*)?")
STRING = re.compile(r'"(?:[^"\\]|\\.)*+"?', re.DOTALL)  # closed or not; never goes back
TABLES = ("A", "B", "C", "D")
PORTS = ("order", "input_count", "output_count", "sampling_period", "input_names", "output_names")
ENDING = "This is a statement about these exact numbers, and not about a plant."

Matrix = list[tuple[list[int], int]]  # rows: numerators, and their common denominator


class Refused(ValueError):  # noqa: N818  # an answer, not a fault
    """The certificate does not prove its claim, or is none; the text says what fails."""


def demand(holds: object, what: str) -> None:
    """Raise unless something holds."""
    if not holds:
        raise Refused(what)


def check(text: str) -> str:
    """Return the claim of a certificate in words; raise `Refused` when it is not proved."""
    document = parse(text)
    keys(document, ("format", "version", "claim", "evidence", "digest"), ("about",), "certificate")
    demand(document["format"] == FORMAT, f"format: wanted {FORMAT}")
    version = whole(document["version"], 9, "version")
    demand(version == VERSION, f"version: this checker knows version {VERSION}")
    claim, evidence = document["claim"], document["evidence"]
    digest = sealed(claim, evidence)[1]
    demand(document["digest"] == digest, f"digest: that of claim and evidence is {digest}")
    demand(type(claim) is dict and type(claim.get("kind")) is str, "claim: wanted a kind")
    demand(claim["kind"] in KINDS, f"claim.kind: known are {', '.join(KINDS)}")
    words = KINDS[claim["kind"]](Arithmetic(), claim, evidence)
    return "\n".join([*words, ENDING, f"Certificate {digest}."])


def sealed(claim: Any, evidence: Any) -> tuple[str, str]:
    """Return the canonical JSON of claim and evidence, and its digest."""
    text = canonical({"claim": claim, "evidence": evidence})
    return text, hashlib.sha256(text.encode("ascii")).hexdigest()


def canonical(value: Any) -> str:
    """Return JSON with sorted keys and no spaces, in ASCII."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=True)


def parse(text: str) -> Any:
    """Return the JSON value of a text, limits first."""
    demand(
        len(text) <= MAX_BYTES and text.isascii(), f"wanted at most {MAX_BYTES} ASCII characters"
    )
    items = text.count(",") + text.count("[") + text.count("{")
    demand(items <= MAX_ITEMS, f"found {items} items, at most {MAX_ITEMS} are allowed")
    depth = 0
    for mark in re.findall(r"[\[\]{}]", STRING.sub("", text)):
        depth += 1 if mark in "[{" else -1
        if depth > MAX_DEPTH:
            raise Refused(f"nested deeper than {MAX_DEPTH}")

    def integer(digits: str) -> int:
        demand(len(digits) <= 20 and digits != "-0", "found a number that is no short integer")
        return int(digits)

    def once(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        demand(len(dict(pairs)) == len(pairs), "a key occurs twice")
        return dict(pairs)

    def constant(word: str) -> NoReturn:
        raise Refused(f"found {word}, which is no number")

    try:
        return json.loads(text, parse_int=integer, parse_constant=constant, object_pairs_hook=once)
    except json.JSONDecodeError as error:
        raise Refused(f"not JSON: {error.msg} at character {error.pos}") from None


def keys(value: Any, wanted: Iterable[str], optional: Iterable[str], where: str) -> None:
    """Demand an object with these keys and no others, which nothing would prove."""
    demand(type(value) is dict, f"{where}: wanted an object")
    wrong = set(wanted).difference(value) | set(value).difference(wanted, optional)
    demand(not wrong, f"{where}: keys missing or unknown: {json.dumps(sorted(wrong))[:200]}")


def whole(value: Any, limit: int, where: str) -> int:
    """Return an integer from 0 to a limit."""
    fits = type(value) is int and 0 <= value <= limit
    demand(fits, f"{where}: wanted an integer from 0 to {limit}")
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
        raise Refused(f"{where}: found no rational")
    above, _, below = text.partition("/")
    if max(len(above), len(below)) > MAX_DIGITS:
        raise Refused(f"{where}: found a number of more than {MAX_DIGITS} digits")
    size = number(above.removeprefix("-"))
    return (-size if above[0] == "-" else size), number(below or "1")


def names(value: Any, count: int, where: str) -> list[str]:
    """Return different names, of the right number."""
    fits = type(value) is list and len(value) == count and all(type(x) is str for x in value)
    demand(fits and len(set(value)) == count, f"{where}: wanted {count} different names")
    demand(all(0 < len(x) <= 1000 for x in value), f"{where}: an empty or very long name")
    return list(value)


def bits(numbers: Iterable[int]) -> int:
    """Return the length of the longest number."""
    return max(map(int.bit_length, numbers), default=0)


def short(p: int, q: int = 1) -> str:
    """Return p/q for people; a long one by its length."""
    if bits((p, q)) > 200:
        return f"(a fraction of {p.bit_length()} by {q.bit_length()} bits)"
    return str(p) if q == 1 else f"{p}/{q}"


class Model:
    """A model that was read: matrices, sizes n, m, p, sampling period and names."""

    def __init__(self, arithmetic: Arithmetic, value: Any, where: str, *, source: bool) -> None:
        more = ("state_names", "reading", "table") if source else ()
        keys(value, TABLES + PORTS + more, ("transfer",) if source else (), where)
        self.n, self.m, self.p = (whole(value[k], MAX_COUNT, f"{where}.{k}") for k in PORTS[:3])
        period = value["sampling_period"]
        self.period = None if period is None else rational(period, f"{where}.sampling_period")
        positive = self.period is None or self.period[0] > 0
        demand(positive, f"{where}.sampling_period: wanted a positive number")
        self.inputs = names(value["input_names"], self.m, f"{where}.input_names")
        self.outputs = names(value["output_names"], self.p, f"{where}.output_names")
        shapes = (self.n, self.n), (self.n, self.m), (self.p, self.n), (self.p, self.m)
        self.A, self.B, self.C, self.D = (
            arithmetic.matrix(value[key], *shape, f"{where}.{key}")
            for key, shape in zip(TABLES, shapes, strict=True)
        )
        self.where, self.transfer, time = where, value.get("transfer"), "continuous time"
        if self.period is not None:
            time = f"sampling period {short(*self.period)}"
        ports = (json.dumps(each)[:200] for each in (self.inputs, self.outputs))
        self.words = [f"  {where}: order {self.n}, {' to '.join(ports)}, {time}."]
        if source:
            names(value["state_names"], self.n, f"{where}.state_names")
            known = value["reading"] in ("stored", "written", "intended", "given")
            demand(known, f"{where}.reading: not a reading")
            table = type(value["table"]) is str and re.fullmatch("[0-9a-f]{64}", value["table"])
            demand(table, f"{where}.table: wanted a digest")
            self.words.append(f"    read as {value['reading']} from table {value['table']}")
            if value["reading"] == "given":
                digest = hashlib.sha256(self.file(value).encode("ascii")).hexdigest()
                demand(value["table"] == digest, f"{where}.table: as given it is {digest}")
            else:
                self.words.append("    (what was read is not in the certificate, its digest is).")

    def file(self, value: Any) -> str:
        """Return the canonical model file of a model that stands for itself."""
        named = [("input_names", "u"), ("output_names", "y")]
        sizes = {"inputs": self.m, "outputs": self.p}
        if self.transfer is None:
            named.append(("state_names", "x"))
            sizes["states"] = self.n
        file = {
            "format": "realize-model",
            "version": 1,
            "sampling_period": value["sampling_period"],
        }
        file |= {} if all(sizes.values()) else sizes
        for key, letter in named:
            if value[key] != [f"{letter}{i + 1}" for i in range(len(value[key]))]:
                file[key] = value[key]
        body = {key: value[key] for key in TABLES} if self.transfer is None else self.transfer
        file["realization" if self.transfer is None else "transfer"] = body
        return canonical(file)

    def same_time(self, other: Model) -> bool:
        """Whether the sampling periods are equal as numbers."""
        if self.period is None or other.period is None:
            return self.period is other.period
        return self.period[0] * other.period[1] == other.period[0] * self.period[1]

    def matches(self, other: Model) -> bool:
        """Whether sizes and sampling periods are equal."""
        return (self.m, self.p) == (other.m, other.p) and self.same_time(other)


class Arithmetic:
    """Matrices of rationals, and an allowance from which every operation is paid."""

    def __init__(self) -> None:
        self.work = self.bits = 0

    def spend(self, products: int, made: int, a: int, b: int) -> None:
        """Pay for products of numbers of a and b bits, and for numbers made of them."""
        self.work += products * (1 + a * b // 65536)
        self.bits += made * (a + b + 64)
        demand(self.work <= MAX_WORK, "the certificate takes too much work to check")
        demand(self.bits <= MAX_BITS, "the certificate takes too much memory to check")

    def common(self, denominators: Iterable[int]) -> int:
        """Return the least common multiple."""
        result = 1
        for each in set(denominators) - {1}:
            self.spend(4, 2, result.bit_length(), each.bit_length())
            result = math.lcm(result, each)
        return result

    def row(self, pairs: list[tuple[int, int]]) -> tuple[list[int], int]:
        """Return pairs (p, q) over one denominator."""
        below, longest = self.common(q for _, q in pairs), max(map(bits, pairs), default=0)
        self.spend(6 * len(pairs), len(pairs), below.bit_length(), longest)
        return [p * (below // q) for p, q in pairs], below

    def matrix(self, rows: Any, height: int, width: int, where: str) -> Matrix:
        """Return rows of texts as a matrix of the shape stated."""
        fits = type(rows) is list and len(rows) == height
        fits = fits and all(type(row) is list and len(row) == width for row in rows)
        demand(fits, f"{where}: wanted {height} rows of {width}")
        return [self.row([rational(text, where) for text in row]) for row in rows]

    def product(self, left: Matrix, right: Matrix, width: int) -> Matrix:
        """Return a product; zeros on the left cost nothing."""
        result, longest = [], bits(y for row, _ in right for y in row)
        for above, below in left:
            used = [j for j, x in enumerate(above) if x]
            common = self.common(right[j][1] for j in used)
            size = max(bits(above), bits(right[j][1] for j in used))
            self.spend(4 * len(used), len(used), size, common.bit_length())
            weights = [above[j] * (common // right[j][1]) for j in used]
            self.spend((len(used) + 4) * width + 20, width + 4, bits(weights), longest)
            rows = [right[j][0] for j in used]
            sums = [sum(map(mul, weights, column)) for column in zip(*rows, strict=True)]
            result.append((sums if used else [0] * width, below * common))
        return result

    def equal(self, left: Matrix, right: Matrix) -> bool:
        """Whether two matrices of one shape are equal."""
        for (xs, a), (ys, b) in zip(left, right, strict=True):
            self.spend(2 * len(xs), 2, max(bits(xs), bits(ys)), max(a, b).bit_length())
            if any(x * b != y * a for x, y in zip(xs, ys, strict=True)):
                return False
        return True

    def beside(self, left: Matrix, right: Matrix) -> Matrix:
        """Return [left, right]."""
        rows = zip(left, right, strict=True)
        return [self.row([(x, a) for x in xs] + [(y, b) for y in ys]) for (xs, a), (ys, b) in rows]

    def one_transfer_matrix(self, model: Model, steps: Any, reduced: Model, where: str) -> None:
        """Test the identities of paragraph 1."""
        keys(steps, ("reached", "pivots", "seen"), (), where)
        demand(model.matches(reduced), f"{where}: sizes or sampling periods differ")
        pivots = steps["pivots"]
        demand(type(pivots) is list and len(pivots) <= model.n, f"{where}.pivots: wanted a list")
        rows = [whole(i, model.n - 1, f"{where}.pivots") for i in pivots]
        k, m = len(rows), model.m
        V = self.matrix(steps["reached"], model.n, k, f"{where}.reached")
        U = self.matrix(steps["seen"], reduced.n, k, f"{where}.seen")
        AV = self.product(model.A, V, k)
        A1, B1 = [AV[i] for i in rows], [model.B[i] for i in rows]
        identities = {
            "A V = V A1": (AV, self.product(V, A1, k)),
            "B = V B1": (model.B, self.product(V, B1, m)),
            "U A1 = Ar U": (self.product(U, A1, k), self.product(reduced.A, U, k)),
            "Br = U B1": (reduced.B, self.product(U, B1, m)),
            "C V = Cr U": (self.product(model.C, V, k), self.product(reduced.C, U, k)),
            "D = Dr": (model.D, reduced.D),
        }
        for what, sides in identities.items():
            demand(self.equal(*sides), f"{where}: {what} does not hold")

    def modulo(self, matrix: Matrix, N: int, where: str) -> list[list[int]]:
        """Return the rows modulo N."""
        units = all(math.gcd(below, N) == 1 for _, below in matrix)
        demand(units, f"{where}: the modulus is not prime to a denominator")
        return [[x * pow(below, -1, N) % N for x in xs] for xs, below in matrix]

    def rank(self, vectors: Any, A: list[list[int]], size: int, N: int, what: str) -> None:
        """Demand that vectors, and A times them again and again, have full rank modulo N."""
        found: list[tuple[int, list[int]]] = []
        waiting = list(vectors)
        while waiting and len(found) < size:
            vector = waiting.pop()
            self.spend(size * (len(found) + 2), 0, 0, 0)
            for place, pivot in found:
                factor = vector[place]
                if factor:
                    vector = [(x - factor * y) % N for x, y in zip(vector, pivot, strict=True)]
            units = (i for i, x in enumerate(vector) if math.gcd(x, N) == 1)
            first = next(units, None)
            if first is not None:
                unit = pow(vector[first], -1, N)
                vector = [x * unit % N for x in vector]
                found.append((first, vector))
                if A:
                    self.spend(size * size, 0, 0, 0)
                    waiting.append([sum(map(mul, row, vector)) % N for row in A])
        demand(len(found) == size, f"{what}: rank {len(found)} modulo {N}, wanted {size}")

    def minimal(self, model: Model, N: int) -> None:
        """Test the ranks of paragraph 2."""
        A, B, C = (self.modulo(X, N, model.where) for X in (model.A, model.B, model.C))
        turned, inputs = zip(*A, strict=True), zip(*B, strict=True)
        self.rank(inputs, A, model.n, N, f"{model.where}: [B, A B, ...]")
        self.rank(C, list(map(list, turned)), model.n, N, f"{model.where}: [C; C A; ...]")

    def realizes(self, model: Model) -> list[str]:
        """Test paragraph 3, where there are fractions beside the model."""
        if model.transfer is None:
            return []
        where = f"{model.where}.transfer"
        keys(model.transfer, ("numerators", "denominators"), (), where)
        above, below = model.transfer["numerators"], model.transfer["denominators"]
        for table in (above, below):
            fits = type(table) is list and len(table) == model.p
            fits = fits and all(type(line) is list and len(line) == model.m for line in table)
            fits = fits and all(type(each) is list and each for line in table for each in line)
            demand(fits, f"{where}: wanted {model.p} rows of {model.m} lists of coefficients")
        degree = max((len(each) - 1 for line in below for each in line), default=0)
        markov, power = [model.D], model.B
        for _ in range(degree + model.n):
            markov.append(self.product(model.C, power, model.m))
            power = self.product(model.A, power, model.m)
        for i, j in ((i, j) for i in range(model.p) for j in range(model.m)):
            n, a = self.row([rational(x, where) for x in above[i][j]])
            d, b = self.row([rational(x, where) for x in below[i][j]])
            top = len(d) - 1
            h, c = self.row([(step[i][0][j], step[i][1]) for step in markov[: top + model.n + 1]])
            demand(d[0] != 0 and len(n) <= len(d), f"{where}: not a proper fraction")
            n = [0] * (len(d) - len(n)) + n + [0] * model.n
            self.spend((top + 1) * (top + model.n + 2), 0, bits(h), max(bits(d), a.bit_length()))
            for e in range(top, -model.n - 1, -1):
                total = sum(d[top - k] * h[k - e] for k in range(max(e, 0), top + 1))
                holds = total * a == n[top - e] * b * c
                demand(holds, f"{where}: entry {i + 1}, {j + 1} is not realized")
        return [f"  {where}: the model realizes these fractions."]

    def near(self, delivered: Any, reduced: Model, distance: Any) -> list[str]:
        """Test paragraph 6."""
        keys(delivered, TABLES, (), "claim.delivered")
        p, q = rational(distance, "claim.distance")
        demand(p >= 0, "claim.distance: wanted none below 0")
        pairs = []
        for key, table in zip(TABLES, (reduced.A, reduced.B, reduced.C, reduced.D), strict=True):
            where, width = f"claim.delivered.{key}", reduced.n if key in "AC" else reduced.m
            rows = self.matrix(delivered[key], len(table), width, where)
            for (xs, a), (ys, b) in zip(table, rows, strict=True):
                size = max(bits(xs), bits(ys)) + max(a, b).bit_length()
                self.spend(3 * width + 3, 3, size, size)
                squares = sum((x * b - y * a) ** 2 for x, y in zip(xs, ys, strict=True))
                pairs.append((squares, (a * b) ** 2))
        squares_over, below = self.row(pairs)
        demand(sum(squares_over) * q**2 <= p**2 * below, "claim.distance: the doubles lie farther")
        return [
            f"  claim.delivered, in doubles, differs from claim.reduced by at most {short(p, q)}",
            "    (root of the sum of the squares of the differences of all entries).",
        ]


def modulus(evidence: Any) -> int:
    """Return the modulus, at least 2."""
    value = whole(evidence["modulus"], MAX_MODULUS, "evidence.modulus")
    demand(value >= 2, "evidence.modulus: wanted at least 2")
    return value


def minimal_realization(arithmetic: Arithmetic, claim: Any, evidence: Any) -> list[str]:
    """A reduced model has the transfer matrix of a model, and no smaller realization exists."""
    near = ("delivered", "distance") if "delivered" in claim else ()
    keys(claim, ("kind", "model", "reduced", *near), (), "claim")
    keys(evidence, ("reduction", "modulus"), (), "evidence")
    model = Model(arithmetic, claim["model"], "claim.model", source=True)
    reduced = Model(arithmetic, claim["reduced"], "claim.reduced", source=False)
    ports = model.inputs, model.outputs
    demand(ports == (reduced.inputs, reduced.outputs), "claim: the names of the ports differ")
    arithmetic.one_transfer_matrix(model, evidence["reduction"], reduced, "evidence.reduction")
    arithmetic.minimal(reduced, modulus(evidence))
    words = arithmetic.realizes(model)
    if near:
        words += arithmetic.near(claim["delivered"], reduced, claim["distance"])
    return [
        "Proved: these two exact models have the same transfer matrix, and no realization of "
        "smaller order has it.",
        *model.words,
        *reduced.words,
        *words,
    ]


def two(arithmetic: Arithmetic, claim: Any, *more: str) -> tuple[Model, Model]:
    """Return the two models of a comparison."""
    keys(claim, ("kind", "first", "second", *more), (), "claim")
    return (
        Model(arithmetic, claim["first"], "claim.first", source=True),
        Model(arithmetic, claim["second"], "claim.second", source=True),
    )


def same_transfer_matrix(arithmetic: Arithmetic, claim: Any, evidence: Any) -> list[str]:
    """Two models have one transfer matrix; with a change of coordinates where there is one."""
    first, second = two(arithmetic, claim, "transformation")
    demand(first.matches(second), "claim: sizes or sampling periods differ")
    words = first.words + second.words
    if claim["transformation"] is None:
        keys(evidence, ("first", "second", "common"), (), "evidence")
        common = Model(arithmetic, evidence["common"], "evidence.common", source=False)
        arithmetic.one_transfer_matrix(first, evidence["first"], common, "evidence.first")
        arithmetic.one_transfer_matrix(second, evidence["second"], common, "evidence.second")
    else:
        keys(evidence, ("modulus",), (), "evidence")
        n, N, where = first.n, modulus(evidence), "claim.transformation"
        demand(n == second.n, f"{where}: the orders differ")
        T = arithmetic.matrix(claim["transformation"], n, n, where)
        AT, TA = arithmetic.product(first.A, T, n), arithmetic.product(T, second.A, n)
        TB, CT = arithmetic.product(T, second.B, first.m), arithmetic.product(first.C, T, n)
        for left, right in ((AT, TA), (first.B, TB), (CT, second.C), (first.D, second.D)):
            demand(arithmetic.equal(left, right), f"{where}: an identity of 5 does not hold")
        arithmetic.rank(arithmetic.modulo(T, N, where), [], n, N, where)
        words.append(f"  State of the first = {where} @ state of the second; it is invertible.")
    words += arithmetic.realizes(first) + arithmetic.realizes(second)
    return ["Proved: these two exact models have the same transfer matrix.", *words]


def different_transfer_matrices(arithmetic: Arithmetic, claim: Any, evidence: Any) -> list[str]:
    """Two transfer matrices have different values at a point where neither has a pole."""
    first, second = two(arithmetic, claim, "point", "values")
    demand(first.matches(second), "claim: sizes or sampling periods differ")
    keys(claim["values"], ("first", "second"), (), "claim.values")
    keys(evidence, ("first", "second", "modulus"), (), "evidence")
    z, N, words, values = rational(claim["point"], "claim.point"), modulus(evidence), [], []
    demand(math.gcd(z[1], N) == 1, "claim.point: the modulus is not prime to the denominator")
    for model, key in ((first, "first"), (second, "second")):
        n, m, at = model.n, model.m, z[0] * pow(z[1], -1, N)
        X = arithmetic.matrix(evidence[key], n, m, f"evidence.{key}")
        arithmetic.spend(m * m, m * m, 1, 1)
        below = X + [([int(i == j) for j in range(m)], 1) for i in range(m)]
        left = arithmetic.product(arithmetic.beside(model.A, model.B), below, m)
        diagonal = [([z[0] * (i == j) for j in range(n)], z[1]) for i in range(n)]
        holds = arithmetic.equal(left, arithmetic.product(diagonal, X, m))
        demand(holds, f"evidence.{key}: A X + B = z X does not hold")
        value = arithmetic.matrix(claim["values"][key], model.p, m, f"claim.values.{key}")
        found = arithmetic.product(arithmetic.beside(model.C, model.D), below, m)
        demand(arithmetic.equal(found, value), f"claim.values.{key}: it is not C X + D")
        A = arithmetic.modulo(model.A, N, model.where)
        rows = [[(at * (i == j) - x) % N for j, x in enumerate(row)] for i, row in enumerate(A)]
        arithmetic.rank(rows, [], n, N, f"{model.where}: z - A")
        words += model.words + arithmetic.realizes(model)
        values.append(value)
    demand(not arithmetic.equal(*values), "claim.values: the two values are equal")
    differ = f"differ at {short(*z)}, where neither has a pole"
    return [f"Proved: the transfer matrices of these two exact models {differ}.", *words]


def different_ports(arithmetic: Arithmetic, claim: Any, evidence: Any) -> list[str]:
    """Two models have different sampling periods, or numbers of inputs or outputs."""
    first, second = two(arithmetic, claim)
    keys(evidence, (), (), "evidence")
    equal = (first.m, first.p) == (second.m, second.p)
    if claim["kind"] == "different sampling periods":
        equal = first.same_time(second)
    demand(not equal, f"claim: it does not have {claim['kind']}")
    words = [line for x in (first, second) for line in x.words + arithmetic.realizes(x)]
    return [f"Proved: these two exact models have {claim['kind']}.", *words]


# A new kind of claim is one more function here.
KINDS: dict[str, Callable[[Arithmetic, Any, Any], list[str]]] = {
    "minimal realization": minimal_realization,
    "same transfer matrix": same_transfer_matrix,
    "different transfer matrices": different_transfer_matrices,
    "different sampling periods": different_ports,
    "different sizes": different_ports,
}


def main(arguments: list[str]) -> int:
    """Check the file named; return the exit status."""
    if len(arguments) != 1:
        print("usage: python -I checker.py FILE", file=sys.stderr)
        return 2
    try:
        with open(arguments[0], "rb") as stream:
            content = stream.read(MAX_BYTES + 1)
    except OSError as error:
        print(f"cannot read the file: {error}", file=sys.stderr)
        return 2
    try:
        print(check(content.decode("latin-1")))
    except Refused as error:
        print(f"Not proved: {error}", file=sys.stderr)
        return 1
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
