"""Published theorems as tests: what they say of a circuit is what the program says of it.

All three are recalled: E. B. Eichelberger, "Hazard detection in combinational and sequential switching circuits",
1965; S. M. Nowick and D. L. Dill, "Exact two-level minimization of hazard-free logic with multiple-input changes",
1992; J. H. Tracey, "Internal state assignments for asynchronous sequential machines", 1966.
"""

from __future__ import annotations

from itertools import combinations, product
from random import Random

import pytest
from graph_readings import Response, responses
from published_cases import Subject, conjunction

INPUTS = ("a", "b", "c")
VECTORS = ["".join(bits) for bits in product("01", repeat=3)]
Function = frozenset[str]
Cover = tuple[str, ...]


# ---- two-level covers: a product is written with `-` for a variable that it leaves out ------------------------------


def meets(first: str, second: str) -> bool:
    """Whether two cubes have a vector in common."""
    return all(a == b or "-" in (a, b) for a, b in zip(first, second, strict=True))


def contains(outer: str, inner: str) -> bool:
    """Whether a cube holds all of another one."""
    return all(a in ("-", b) for a, b in zip(outer, inner, strict=True))


def spanned(first: str, last: str) -> str:
    """The smallest cube that holds two vectors."""
    return "".join(a if a == b else "-" for a, b in zip(first, last, strict=True))


def vectors(cube: str) -> list[str]:
    return [v for v in VECTORS if contains(cube, v)]


def value(cover: Cover, vector: str) -> int:
    return int(any(contains(p, vector) for p in cover))


def primes(function: Function) -> Cover:
    """All prime implicants of a function, given as the vectors where it is 1."""
    cubes = ["".join(c) for c in product("01-", repeat=3)]
    inside = [c for c in cubes if function.issuperset(vectors(c))]
    return tuple(c for c in inside if not any(c != d and contains(d, c) for d in inside))


def network(cover: Cover) -> Subject:
    """One AND gate a product and an OR gate, with a delay in every connection; inverters have none."""
    products = [conjunction({x: int(b) for x, b in zip(INPUTS, p, strict=True) if b != "-"}) for p in cover]
    gates = {f"p{i}": text for i, text in enumerate(products)}
    return Subject(INPUTS, {**gates, "f": " | ".join(gates)}, "wire", "one")


def flickers(cover: Cover) -> dict[tuple[str, str], bool]:
    """For every change of inputs, at once, whether the output can change twice; the verdict must say the same."""
    circuit = network(cover)
    environment = {"changes": "simultaneous"}
    session = circuit.session(environment)

    def change(r: Response) -> tuple[str, str]:
        before, after = (circuit.notation(session, state)[:3] for state in (r.before, r.after))
        return before, after

    found = {change(r): "f" in r.flickers for r in responses(session, ["f"])}
    (result,) = circuit.check(environment, {"check": "hazard-free", "signals": ["f"]})
    assert (result.verdict == "refuted") == any(found.values())
    return found


FUNCTIONS = [frozenset(v for v in VECTORS if number >> int(v, 2) & 1) for number in range(1, 255)]
SMALL = [function for function in FUNCTIONS if 2 <= len(primes(function)) <= 3]


@pytest.mark.parametrize("function", Random(1965).sample(SMALL, 6), ids=lambda f: "+".join(sorted(f)))
def test_all_prime_implicants(function: Function) -> None:
    """Eichelberger: with all prime implicants a change with equal ends is clean if no vector between disagrees."""
    cover = primes(function)
    for (first, last), flicker in flickers(cover).items():
        between = {value(cover, v) for v in vectors(spanned(first, last))}
        if value(cover, first) == value(cover, last):
            assert flicker == (len(between) > 1), (first, last)


def monotone(cover: Cover, first: str, last: str) -> bool:
    """Whether the function changes at most once on every way from `first` to `last`: no function hazard."""
    start, end = value(cover, first), value(cover, last)
    here = vectors(spanned(first, last))
    if start == end:
        return all(value(cover, v) == end for v in here)
    arrived = [v for v in here if value(cover, v) == end]
    return all(value(cover, w) == end for v in arrived for w in vectors(spanned(v, last)))


def clean(cover: Cover, first: str, last: str) -> bool:
    """Nowick and Dill's conditions for a change without function hazard."""
    start, end = value(cover, first), value(cover, last)
    cube = spanned(first, last)
    if start == end:
        return start == 0 or any(contains(p, cube) for p in cover)
    high = first if start else last
    required = [spanned(high, v) for v in vectors(cube) if value(cover, v)]
    legal = all(contains(p, high) for p in cover if meets(p, cube))
    return legal and all(any(contains(p, r) for p in cover) for r in required)


def covers(count: int) -> list[Cover]:
    """Random sets of two or three products."""
    random = Random(1992)
    cubes = ["".join(c) for c in product("01-", repeat=3) if set(c) != {"-"}]
    return [tuple(random.sample(cubes, random.randint(2, 3))) for _ in range(count)]


@pytest.mark.parametrize("cover", covers(10), ids="+".join)
def test_conditions_on_a_cover(cover: Cover) -> None:
    found = flickers(cover)
    asked = [change for change in found if monotone(cover, *change)]
    assert len(asked) >= 10
    assert {c: found[c] for c in asked} == {c: not clean(cover, *c) for c in asked}


# ---- codes for the rows of a flow table: one column, in which some rows are stable -----------------------------------

ROWS = range(4)
COLUMNS = [column for column in product(ROWS, repeat=4) if all(column[column[r]] == column[r] for r in ROWS)]
Codes = tuple[str, ...]


def separated(codes: Codes, column: tuple[int, ...]) -> bool:
    """Tracey's condition: transitions to different rows are told apart by a variable that neither of them changes."""
    pairs = [(codes[r], codes[column[r]]) for r in ROWS]
    return all(
        any(a == b != c == d for a, b, c, d in zip(*first, *second, strict=True))
        for first, second in combinations(pairs, 2)
        if first[1] != second[1]
    )


def assigned(codes: Codes, column: tuple[int, ...]) -> Subject:
    """The column under x = 1; every code between a row and its next row leads to the next row. Stable under x = 0."""
    goal: dict[str, str] = {}
    for row in ROWS:
        cube = spanned(codes[row], codes[column[row]])
        for code in ("".join(bits) for bits in product("01", repeat=len(cube))):
            if contains(cube, code) and (code not in codes or code == codes[row]):
                goal.setdefault(code, codes[column[row]])
    nodes = [f"y{i}" for i in range(len(codes[0]))]
    terms = {
        n: [conjunction(dict(zip(nodes, map(int, code), strict=True))) for code, to in goal.items() if to[i] == "1"]
        for i, n in enumerate(nodes)
    }
    return Subject(("x",), {n: f"x & ({' | '.join(t) or '0'}) | ~x & {n}" for n, t in terms.items()})


def race_free(codes: Codes, column: tuple[int, ...]) -> bool:
    """Whether x rising from the code of a row is never a critical race, by the program."""
    circuit = assigned(codes, column)
    rows = [dict(zip(circuit.gates, map(int, code), strict=True)) for code in codes]
    anyrow = " | ".join(conjunction(r) for r in rows)
    environment = {"inputs": {"x": {"rises": anyrow, "falls": "0"}}, "start": {"x": 0}}
    (race,) = circuit.check(environment, {"check": "race-free"})
    return race.verdict == "proved"


def test_three_variables_serve_every_column_of_four_rows() -> None:
    codes = ("000", "011", "101", "110")
    assert len(COLUMNS) == 41
    assert all(separated(codes, column) and race_free(codes, column) for column in COLUMNS)


def test_two_variables_serve_25_columns_at_most() -> None:
    served = []
    for codes in (("00", "01", "10", "11"), ("00", "01", "11", "10"), ("00", "11", "01", "10")):
        free = [race_free(codes, column) for column in COLUMNS]
        assert free == [separated(codes, column) for column in COLUMNS]
        served.append(sum(free))
    assert max(served) == 25
