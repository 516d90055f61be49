"""The grammar of a baseline formula: names, `+`, `:`, `*` and `log()`, and nothing else.

A formula is read into terms before any library sees it, so that no code in a plan is ever run.
"""

from __future__ import annotations

import re
from itertools import combinations

import msgspec

from auditd.errors import PlanError

_TOKEN = re.compile(r"\s*(?:(?P<name>[A-Za-z_][A-Za-z0-9_]*)|(?P<sign>[+:*()]))")
N_FACTORS_MAX = 8
"""Names joined by `*` in one term: 2**8 - 1 terms is more than any campaign can estimate."""


class Variable(msgspec.Struct, frozen=True):
    """A factor in a formula, as its logarithm or as it stands."""

    name: str
    log: bool = False


Term = tuple[Variable, ...]


def parse_formula(text: str) -> tuple[Term, ...]:
    """Return the terms of a formula; the constant is understood.

    Raises
    ------
    PlanError
        The text is not of the grammar; the message points at the place.
    """
    tokens = _tokens(text)
    terms: list[Term] = []
    for part in _split(tokens, "+"):
        for term in _product(part, text):
            if term not in terms:
                terms.append(term)
    return tuple(terms)


def _tokens(text: str) -> list[str]:
    tokens, at = [], 0
    while text[at:].strip():
        match = _TOKEN.match(text, at)
        if match is None:
            raise PlanError(
                f"baseline.formula: {text[at:].strip()[:20]!r} is not of the grammar; "
                "a formula has names, +, :, * and log()"
            )
        tokens.append(match.group("name") or match.group("sign"))
        at = match.end()
    if not tokens:
        raise PlanError("baseline.formula is empty; name at least one factor")
    return tokens


def _split(tokens: list[str], sign: str) -> list[list[str]]:
    parts: list[list[str]] = [[]]
    for token in tokens:
        if token == sign:
            parts.append([])
        else:
            parts[-1].append(token)
    return parts


def _product(tokens: list[str], text: str) -> list[Term]:
    crossed = [_interaction(part, text) for part in _split(tokens, "*")]
    if len(crossed) > N_FACTORS_MAX:
        raise PlanError(f"baseline.formula: more than {N_FACTORS_MAX} names joined by * in {text!r}")
    chosen = [pick for size in range(1, len(crossed) + 1) for pick in combinations(crossed, size)]
    return [tuple(dict.fromkeys(variable for term in pick for variable in term)) for pick in chosen]


def _interaction(tokens: list[str], text: str) -> Term:
    return tuple(dict.fromkeys(_variable(part, text) for part in _split(tokens, ":")))


def _variable(tokens: list[str], text: str) -> Variable:
    match tokens:
        case [name] if name not in "+:*()":
            return Variable(name)
        case ["log", "(", name, ")"] if name not in "+:*()":
            return Variable(name, log=True)
        case _:
            found = " ".join(tokens) or "nothing"
            raise PlanError(f"baseline.formula: a name or log(name) is expected, {found!r} found in {text!r}")
