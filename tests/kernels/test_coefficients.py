"""The Runge-Kutta coefficients satisfy the order conditions of Butcher's trees.

Conditions from Hairer, Norsett, Wanner, Solving Ordinary Differential Equations I, 2nd ed. 1993, section II.2.
The coefficients are printed to 16 digits and reach 43 in size, so sums hold to 1e-14 or so.
"""

import numpy as np
import pytest

from farhold.kernels.motion.coefficients import E3, E5, A, B, C

ROUNDING = 2e-13


def test_rows_sum_to_the_nodes():
    assert A.sum(axis=1) == pytest.approx(C, abs=ROUNDING)


def test_method_is_explicit():
    assert (np.triu(A) == 0.0).all()


@pytest.mark.parametrize("order", range(1, 9))
def test_quadrature_is_exact_to_order_eight(order):
    assert B @ C ** (order - 1) == pytest.approx(1.0 / order, abs=ROUNDING)


def test_quadrature_is_not_exact_beyond():
    # the method is of order eight and no more
    assert abs(B @ C**8 - 1.0 / 9.0) > 1e-7


@pytest.mark.parametrize("power", range(1, 7))
def test_bushy_trees_with_one_branch_hold(power):
    # sum b_i a_ij c_j^k = 1 / ((k + 1)(k + 2))
    assert B @ A @ C**power == pytest.approx(1.0 / ((power + 1) * (power + 2)), abs=ROUNDING)


@pytest.mark.parametrize(("outer", "inner"), [(m, k) for m in range(1, 6) for k in range(1, 7 - m)])
def test_trees_with_weighted_branch_hold(outer, inner):
    # sum b_i c_i^m a_ij c_j^k = 1 / ((k + 1)(m + k + 2)), order m + k + 2 <= 8
    assert B @ (C**outer * (A @ C**inner)) == pytest.approx(
        1.0 / ((inner + 1) * (outer + inner + 2)), abs=ROUNDING
    )


@pytest.mark.parametrize("height", range(1, 8))
def test_tall_trees_hold(height):
    # sum b A^(h - 1) c = 1 / (h + 1)!: the linear problem y' = y to order eight
    chain = C.copy()
    for _ in range(height - 1):
        chain = A @ chain
    assert B @ chain == pytest.approx(1.0 / float(np.prod(np.arange(1.0, height + 2.0))), abs=ROUNDING)


@pytest.mark.parametrize(("first", "second"), [(1, 1), (1, 2), (2, 2), (1, 3)])
def test_forked_trees_hold(first, second):
    # sum b_i (A c^p)_i (A c^q)_i = 1 / ((p + 1)(q + 1)(p + q + 3)), order p + q + 3 <= 8
    value = B @ ((A @ C**first) * (A @ C**second))
    assert value == pytest.approx(1.0 / ((first + 1) * (second + 1) * (first + second + 3)), abs=ROUNDING)


@pytest.mark.parametrize(("weights", "order"), [(E3, 3), (E5, 5)])
def test_error_estimators_vanish_to_their_order(weights, order):
    # an estimator is the difference of two methods, so it integrates the powers below its order to nothing
    moments = [weights @ C**k for k in range(order)]
    assert moments == pytest.approx([0.0] * order, abs=ROUNDING)
    assert abs(weights @ C**order) > 1e-6
