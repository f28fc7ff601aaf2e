"""Circuits of gates with a size: carry chains, random logic without feedback, random Huffman circuits."""

from __future__ import annotations

from random import Random

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, and_, not_, or_, var, xor

Case = tuple[Circuit, Environment]


def carry_chain(bits: int, winners: str = "any") -> Case:
    """The carries of an adder, each a majority of three in two levels; every gate is a node. One input changes at a
    time, from any settled state. No carry has a static hazard: every pair of ones shares a product."""
    excitation: dict[str, Expr] = {}
    carry = var("c0")
    for i in range(bits):
        a, b = var(f"a{i}"), var(f"b{i}")
        products = {f"p{i}": and_(a, b), f"q{i}": and_(a, carry), f"r{i}": and_(b, carry)}
        excitation |= {**products, f"c{i + 1}": or_(*map(var, products))}
        carry = var(f"c{i + 1}")
    inputs = ("c0", *(f"{x}{i}" for i in range(bits) for x in "ab"))
    name = f"carry chain of {bits}"
    return Circuit(name, inputs, tuple(excitation), excitation, (f"c{bits}",), winners=winners), Environment()


def random_logic(gates: int, winners: str = "any", inputs: int = 16, near: int = 24) -> Case:
    """Gates with two or three inputs, each reading others shortly before it, so that there are many levels; the last
    gate is the output. The same for the same arguments."""
    rng = Random(f"logic {gates} {inputs} {near}")
    names = tuple(f"x{i}" for i in range(inputs))
    known = list(names)
    excitation: dict[str, Expr] = {}
    for i in range(gates):
        pins = [var(s) for s in rng.sample(known[-near:], rng.choice((2, 2, 3)))]
        made = rng.choice((and_, or_, and_, or_, xor))(*pins)
        excitation[f"g{i}"] = not_(made) if rng.random() < 0.5 else made
        known.append(f"g{i}")
    circuit = Circuit(f"logic of {gates}", names, tuple(excitation), excitation, (known[-1],), winners=winners)
    return circuit, Environment()


def huffman(nodes: int, winners: str = "any") -> Case:
    """A random Huffman circuit: three inputs, each state variable a sum of products of an input and state variables,
    which keeps its value under some of the inputs. Begins in any stable state."""
    rng = Random(f"huffman {nodes}")
    inputs = ("x", "y", "z")
    names = tuple(f"s{i}" for i in range(nodes))
    excitation = {}
    for n in names:
        hold = and_(_literal(rng, inputs), var(n))
        products = [and_(_literal(rng, inputs), _literal(rng, names), _literal(rng, names)) for _ in range(2)]
        excitation[n] = or_(hold, *products)
    name = f"Huffman circuit of {nodes}"
    return Circuit(name, inputs, names, excitation, names[:1], winners=winners), Environment()


def _literal(rng: Random, names: tuple[str, ...]) -> Expr:
    leaf = var(rng.choice(names))
    return not_(leaf) if rng.random() < 0.5 else leaf
