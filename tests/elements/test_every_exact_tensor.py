"""Every tensor in service against multiple precision: all orders and all degrees of coefficients that can be asked for.

The other files of this folder check a few, quickly; the allowances rest on all of them.
"""

import pytest

from service.elements.moments import MAX_MOMENT_ORDER, MOMENT_ERROR
from service.elements.reference import MAX_ORDER, REFERENCE_ERROR
from service.forms.operator import DEGREE
from tests.elements.test_moments_exact import MARGIN as MOMENT_MARGIN
from tests.elements.test_moments_exact import worst
from tests.elements.test_reference_exact import MARGIN, worst_scalar

ORDERS = range(1, MAX_MOMENT_ORDER + 1)


@pytest.mark.slow
@pytest.mark.parametrize("degree", range(DEGREE + 1))
@pytest.mark.parametrize("order", ORDERS)
def test_moment_tensors_of_every_order_and_degree(order: int, degree: int) -> None:
    assert worst(2, order, degree) <= MOMENT_ERROR / MOMENT_MARGIN


@pytest.mark.slow
@pytest.mark.parametrize("degree", range(1, DEGREE + 1))
@pytest.mark.parametrize("order", range(1, MAX_ORDER + 1))
def test_scalar_tensors_of_every_order_and_degree(order: int, degree: int) -> None:
    assert worst_scalar(2, order, degree) <= REFERENCE_ERROR / MARGIN
