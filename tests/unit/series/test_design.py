"""Rows of a formula's design: treatment contrasts, logarithms and products."""

import numpy as np
import pytest

from auditd.errors import BadInput
from auditd.plan_reading import parse_plan
from auditd.series.design import design_rows


def plan(formula, levels='{solver = ["a", "b", "c"], mesh = [1, 2, 4]}'):
    schedule = f"[schedule]\nlevels = {levels}\n" if levels else ""
    return parse_plan(
        '[responses.y]\nat = "y"\n[factors]\nsolver = "s"\nmesh = "m"\n'
        f'[baseline]\nkind = "formula"\nformula = "{formula}"\n' + schedule
    )


CELLS = [{"solver": s, "mesh": m} for s in "abc" for m in (1, 2, 4)]


def test_texts_are_indicators_and_numbers_are_themselves():
    """solver + log(mesh): a constant, b, c, and ln mesh (treatment contrasts, first level as reference)."""
    found = design_rows(plan("solver + log(mesh)"), CELLS)
    assert found.shape == (9, 4)
    np.testing.assert_allclose(found[4], [1, 1, 0, np.log(2)])
    np.testing.assert_allclose(found[8], [1, 0, 1, np.log(4)])
    np.testing.assert_allclose(found[0], [1, 0, 0, 0])


def test_products_multiply_column_by_column():
    """solver:mesh has a column for each of solver's contrasts."""
    found = design_rows(plan("solver:mesh"), CELLS)
    np.testing.assert_allclose(found[5], [1, 4, 0])
    np.testing.assert_allclose(found[7], [1, 0, 2])


def test_star_is_both_and_their_product():
    """a*b is a + b + a:b (Wilkinson & Rogers 1973)."""
    whole = design_rows(plan("solver*mesh"), CELLS)
    apart = design_rows(plan("solver + mesh + solver:mesh"), CELLS)
    np.testing.assert_allclose(whole, apart)
    assert np.linalg.matrix_rank(whole) == whole.shape[1] == 6


def test_rows_do_not_depend_on_what_else_is_in_the_block():
    """A run alone has the row that it has among others, or a restart would change the audit."""
    one = plan("solver*log(mesh)")
    whole = design_rows(one, CELLS)
    for k, cell in enumerate(CELLS):
        np.testing.assert_array_equal(design_rows(one, [cell])[0], whole[k])


def test_what_cannot_be_a_row_is_said():
    """A logarithm of zero, and texts without stated levels, are refused with what to do."""
    with pytest.raises(BadInput, match="more than 0"):
        design_rows(plan("log(mesh)"), [{"solver": "a", "mesh": 0}])
    with pytest.raises(BadInput, match=r"schedule\.levels"):
        design_rows(plan("solver", levels=None), CELLS)
