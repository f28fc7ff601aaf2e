"""Expressions from text: precedence, names, diagnostics, and that printed expressions read back."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from settled.models.expression_text import LEVELS, NameAt, Parsed, parse
from settled.models.logic import (
    FALSE,
    STABLE,
    TRUE,
    Expr,
    and_,
    evaluate,
    excited,
    ite,
    not_,
    or_,
    to_text,
    var,
    xor,
)
from settled.models.problems import InputError, Problem
from settled.models.source import span_at

A, B, C, D, E = (var(name) for name in "abcde")


def read(text: str, state_words: bool = True) -> Parsed:
    return parse(text, span_of=lambda start, end: span_at("f", text, start, end), state_words=state_words)


def problem(text: str, state_words: bool = True) -> Problem:
    with pytest.raises(InputError) as caught:
        read(text, state_words)
    (found,) = caught.value.problems
    return found


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("0", FALSE),
        ("1'b1", TRUE),
        ("1'b0 | a", A),
        ("a & b | c", or_(and_(A, B), C)),
        ("a | b & c", or_(A, and_(B, C))),
        ("a ^ b & c", xor(A, and_(B, C))),
        ("a | b ^ c", or_(A, xor(B, C))),
        ("a || b && c", or_(A, and_(B, C))),
        ("a && b | c", and_(A, or_(B, C))),
        ("a && b ^ c && d", and_(A, xor(B, C), D)),
        ("~a & b", and_(not_(A), B)),
        ("!(a & b)", not_(and_(A, B))),
        ("~!~a", not_(A)),
        ("a & b & c", and_(A, B, C)),
        ("(a & b) & c", and_(and_(A, B), C)),
        ("a ~^ b", not_(xor(A, B))),
        ("a ^~ b ^ c", not_(xor(A, B, C))),
        ("a ~^ b ^~ c", xor(A, B, C)),
        ("a ^ ~b", xor(A, not_(B))),
        ("a ? b : c", ite(A, B, C)),
        ("a ? b : c ? d : e", ite(A, B, ite(C, D, E))),
        ("a ? b ? c : d : e", ite(A, ite(B, C, D), E)),
        ("a || b ? c : d && e", ite(or_(A, B), C, and_(D, E))),
        ("~(a ? b : c)", not_(ite(A, B, C))),
        ("stable & excited(a)", and_(STABLE, excited("a"))),
        ("\ta\n&\f(\r b )", and_(A, B)),
    ],
)
def test_precedence_is_that_of_ieee_1364(text: str, expected: Expr) -> None:
    """IEEE 1364-2005, 5.1.2, table 5-4 (recalled)."""
    assert read(text).expr is expected


@pytest.mark.parametrize(
    ("text", "name"),
    [
        ("_x$1", "_x$1"),
        ("d[3]", "d[3]"),
        ("u1.d[3].x", "u1.d[3].x"),
        ("u1 . d [ 3 ]", "u1.d[3]"),
        (r"\a+b ", "a+b"),
        (r"\a+b", "a+b"),
        ("\\a+b\t.c", "a+b.c"),
        (r"\stable ", "stable"),
        (r"\d[3] ", "d[3]"),
        (r"u1.\a-b [2]", "u1.a-b[2]"),
        (r"\\x ", r"\x"),
        ("stable.q", "stable.q"),
    ],
)
def test_names(text: str, name: str) -> None:
    assert read(text).expr is var(name)


def test_an_escaped_name_ends_at_white_space_only() -> None:
    assert read(r"\a&b & c").expr is and_(var("a&b"), C)
    assert read(r"excited(\a) )").expr is excited("a)")


def test_names_are_found_where_they_stand() -> None:
    assert read(r"a & \b+  | excited( q ) & a").names == (
        NameAt("a", 0, 1, False),
        NameAt("b+", 4, 7, False),
        NameAt("q", 20, 21, True),
        NameAt("a", 26, 27, False),
    )


@pytest.mark.parametrize(
    ("text", "message", "column", "length"),
    [
        ("", "expected an expression, found an empty text", 1, 1),
        ("a &", "expected an operand after `&`, found the end of the expression", 4, 1),
        ("a & ) b", "expected an operand after `&`, found `)`", 5, 1),
        ("a b", "expected an operator after `a`, found `b`", 3, 1),
        ("a  ~bcd", "expected an operator after `a`, found `~`", 4, 1),
        ("(a", "expected `)` after `a`, found the end of the expression", 3, 1),
        ("a)", "expected an operator after `a`, found `)`", 2, 1),
        ("(a ? b)", "expected `:` after `b`, found `)`", 7, 1),
        ("a ? b", "expected `:` after `b`, found the end of the expression", 6, 1),
        ("a ? (b : c)", "expected `)` after `b`, found `:`", 8, 1),
        ("a : b", "expected an operator after `a`, found `:`", 3, 1),
        ("&a", "expected an expression, found `&`", 1, 1),
        ("a & & b", "expected an operand after `&`, found `&`", 5, 1),
        ("a ~& b", "expected an operator after `a`, found `~`", 3, 1),
        ("a & 1'bx", "expected an operand after `&`, found `1'bx`", 5, 4),
        ("a & 2", "expected an operand after `&`, found `2`", 5, 1),
        ("a == b", "expected an operator after `a`, found `=`", 3, 1),
        ("a & 'b", "expected an operand after `&`, found `'`", 5, 1),
        ("d[x]", "expected an operator after `d`, found `[`", 2, 1),
        ("a & \\ b", "expected an operand after `&`, found `\\`", 5, 1),
        ("excited", "expected `(` after `excited`, found the end of the expression", 8, 1),
        ("excited()", "expected the name of a node after `(`, found `)`", 9, 1),
        ("excited(a | b)", "expected `)` after `a`, found `|`", 11, 1),
        ("a\n&\n|", "expected an operand after `&`, found `|`", 1, 1),
    ],
)
def test_syntax_errors_say_what_was_expected_and_found(text: str, message: str, column: int, length: int) -> None:
    found = problem(text)
    assert (found.code, found.message) == ("expression-syntax", message)
    assert found.span is not None
    assert (found.span.column, found.span.length) == (column, length)


@pytest.mark.parametrize(
    ("text", "help"),
    [
        ("a and b", "AND is written `&`"),
        ("a + b", "OR is written `|`"),
        ("not a", "NOT is written `~` before its operand"),
        ("a'", "NOT is written `~` before its operand"),
        ("a = b", "equality is written `a ~^ b`, inequality `a ^ b`"),
        ("4'd1", "the constants are `0`, `1`, `1'b0` and `1'b1`"),
    ],
)
def test_other_notations_are_pointed_out(text: str, help: str) -> None:
    assert problem(text).help == help


def test_the_opening_parenthesis_is_named() -> None:
    assert problem("a & (b | c").notes == ("the `(` stands at line 1, column 5",)


@pytest.mark.parametrize("text", ["stable", "a & excited(b)"])
def test_state_words_are_refused_where_they_have_no_meaning(text: str) -> None:
    found = problem(text, state_words=False)
    assert "has no meaning here" in found.message and "`expr`, `from` and `to`" in found.help
    assert read(r"\stable  | \excited ", state_words=False).expr is or_(var("stable"), var("excited"))


@pytest.mark.parametrize(
    ("opening", "closing"), [("(", ")"), ("~", ""), ("~(", ")"), ("b ? ", " : c"), ("b ? c : ", ""), ("b & (", ")")]
)
def test_nesting_is_limited(opening: str, closing: str) -> None:
    levels = LEVELS // sum(opening.count(sign) for sign in "(~?")
    read(opening * levels + "a" + closing * levels)
    found = problem(opening * 20_000 + "a" + closing * 20_000)
    assert found.code == "too-deep" and "1,000 levels" in found.message


def test_long_chains_do_not_nest() -> None:
    names = [f"n{i}" for i in range(20_000)]
    assert read(" | ".join(names)).expr is or_(*map(var, names))


# ---- what is printed reads back ----------------------------------------------------------------------------------

NAMES = ["a", "d[3]", "u1.q", "a+b", "stable", "excited", "0", "1'b1", "x\\y", "\\z", "d[٣]"]
LEAVES = st.sampled_from([*map(var, NAMES), *map(excited, NAMES[:6]), STABLE, TRUE, FALSE])
EXPRESSIONS = st.recursive(
    LEAVES,
    lambda inner: st.one_of(
        inner.map(not_),
        st.builds(lambda parts: and_(*parts), st.lists(inner, min_size=2, max_size=3)),
        st.builds(lambda parts: or_(*parts), st.lists(inner, min_size=2, max_size=3)),
        st.builds(lambda parts: xor(*parts), st.lists(inner, min_size=2, max_size=3)),
        st.builds(ite, inner, inner, inner),
    ),
    max_leaves=12,
)


@settings(derandomize=True, deadline=None, max_examples=300)
@given(EXPRESSIONS)
def test_printed_expressions_read_back(e: Expr) -> None:
    assert read(to_text(e)).expr is e


TEXTS = st.recursive(
    st.sampled_from("abc"),
    lambda inner: st.one_of(
        inner.map("~{}".format),
        inner.map("( {} )".format),
        st.tuples(inner, st.sampled_from("&|^"), inner).map(" ".join),
    ),
    max_leaves=10,
)


@settings(derandomize=True, deadline=None, max_examples=200)
@given(TEXTS)
def test_operators_that_python_shares_bind_as_there(text: str) -> None:
    parsed = read(text)
    for bits in range(8):
        values = {name: bits >> i & 1 for i, name in enumerate("abc")}
        assert evaluate([parsed.expr], values)[0] == eval(text, {}, values) & 1
    assert {name.name for name in parsed.names} == set(text) & set("abc")


@settings(derandomize=True, deadline=None, max_examples=300)
@given(st.text(alphabet="ab1'&|^~!?:()[].\\ \n+x\0é", max_size=30))
def test_any_text_is_read_or_refused_at_a_place_in_it(text: str) -> None:
    try:
        read(text)
    except InputError as error:
        (found,) = error.problems
        assert found.span is not None and found.span.line <= text.count("\n") + 1
        assert found.span.column <= max(map(len, text.split("\n"))) + 1
