"""The grammar of a baseline formula: what it says, and that nothing else gets through."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from auditd.errors import PlanError
from auditd.formula import N_FACTORS_MAX, Variable, parse_formula

A, B, C = Variable("a"), Variable("b"), Variable("c")


@pytest.mark.parametrize(
    ("text", "terms"),
    [
        ("a", ((A,),)),
        ("a + b", ((A,), (B,))),
        ("a:b", ((A, B),)),
        ("a * b", ((A,), (B,), (A, B))),
        ("a*b*c", ((A,), (B,), (C,), (A, B), (A, C), (B, C), (A, B, C))),
        ("a + log(b)", ((A,), (Variable("b", log=True),))),
        ("a*b:c", ((A,), (B, C), (A, B, C))),
        ("a + a + a:a", ((A,),)),
        ("  a\n+\tb ", ((A,), (B,))),
        ("log + b", ((Variable("log"),), (B,))),
    ],
)
def test_terms(text, terms):
    """Wilkinson and Rogers's notation (1973, Applied Statistics 22, 392-399), cited from memory."""
    assert parse_formula(text) == terms


@pytest.mark.parametrize(
    "text",
    ["", " ", "+", "a +", "a b", "a ** 2", "a - b", "(a + b)", "log()", "log(a + b)", "log(log(a))", "exp(a)",
     "a, b", "1", "a1 + 2", "__import__('os')", "a.b", "a[0]", "log(a", "a)", "*", ":", "naïve"],
)  # fmt: skip
def test_what_is_not_of_the_grammar_is_refused(text):
    """No code, no number, no other function."""
    with pytest.raises(PlanError, match=r"baseline\.formula"):
        parse_formula(text)


def test_a_product_of_too_many_names_is_refused():
    """Eight are 255 terms; nine would be 511."""
    names = [f"f{k}" for k in range(N_FACTORS_MAX + 1)]
    assert len(parse_formula("*".join(names[:-1]))) == 2**N_FACTORS_MAX - 1
    with pytest.raises(PlanError, match="joined by"):
        parse_formula("*".join(names))


@given(st.text(alphabet="ab:+*() log1.,_", max_size=30))
def test_any_text_is_terms_or_a_plan_error(text):
    """Nothing else comes out."""
    try:
        terms = parse_formula(text)
    except PlanError:
        return
    assert terms
    assert all(term and len(set(term)) == len(term) for term in terms)
