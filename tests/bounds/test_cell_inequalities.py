"""The two inequalities behind every counting bound, on random triangles, by fine Ritz computations on polynomials.

Functions of zero mean on a triangle T with longest edge h, and F an edge of it:
|f| <= (h / j_{1,1}) |grad f| (Laugesen and Siudeja, J. Differential Equations 249 (2010)), and, by the trace identity,
mean_F f^2 <= (c^2 + h c) mean_T |grad f|^2, c = h / j_{1,1}. Polynomials give lower bounds of the best constants.
"""

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.linalg import eigh
from scipy.special import jn_zeros
from small_meshes import nowhere, random_triangles, triangle

from service.bounds.minorant import POINCARE, poincare_constants
from service.elements.moments import moment_reference
from service.forms.form import constant_form
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

DEGREE = 9

TENSORS = moment_reference(2, DEGREE - 1)


def slopes(mesh: Mesh, diffusion: Array) -> Array:
    """Energies of the orthonormal polynomials but the constant one on the cell."""
    metric = constant_form(mesh, nowhere(mesh), diffusion=diffusion).gradient_metric[0, 0]
    return np.asarray(np.einsum("ab,abij->ij", metric, TENSORS.stiffness[0])[1:, 1:])


def best_poincare(mesh: Mesh, diffusion: Array) -> float:
    """The largest |f| / |G^(1/2) grad f| of polynomials of zero mean."""
    jacobian = abs(np.linalg.det(mesh.spans[0]))
    return float(np.sqrt(jacobian / eigh(slopes(mesh, diffusion), eigvals_only=True)[0]))


def best_trace(mesh: Mesh, diffusion: Array, facet: int) -> float:
    """The largest mean_F f^2 / mean_T G grad f . grad f of polynomials of zero mean."""
    area = abs(np.linalg.det(mesh.spans[0])) / 2
    trace = TENSORS.trace[facet, :, 1:]
    return float(area * eigh(trace.T @ trace, slopes(mesh, diffusion), eigvals_only=True)[-1])


def tensors(seed: int) -> Array:
    """A random positive definite matrix with a condition up to 1e4."""
    random = np.random.default_rng(seed)
    rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
    return np.asarray(rotation * 10.0 ** random.uniform(-2, 2, 2) @ rotation.T)


def used(mesh: Mesh, diffusion: Array) -> tuple[float, float]:
    """The constants of the method: c, and c^2 + 2 h c / d."""
    form = constant_form(mesh, nowhere(mesh), diffusion=diffusion)
    c = float(poincare_constants(form)[0])
    return c, c**2 + POINCARE[2] * c**2


def test_the_bessel_zero() -> None:
    """1 / j_{1,1} = 0.260980359 as listed (Laugesen and Siudeja); the code's digits."""
    assert pytest.approx(jn_zeros(1, 1)[0], rel=1e-14) == POINCARE[2]
    assert 1 / POINCARE[2] == pytest.approx(0.260980359, abs=1e-9)


@pytest.mark.parametrize("isotropic", [True, False])
def test_both_constants_hold_on_random_triangles(isotropic: bool) -> None:
    for seed, mesh in enumerate(random_triangles(150, 11)):
        diffusion = np.eye(2) if isotropic else tensors(seed)
        poincare, trace = used(mesh, diffusion)
        assert best_poincare(mesh, diffusion) <= poincare
        for facet in range(3):
            assert best_trace(mesh, diffusion, facet) <= trace


@pytest.mark.parametrize("height", [30.0, 100.0, 1000.0])
def test_poincare_is_nearly_reached_on_thin_isosceles_triangles(height: float) -> None:
    """Two long equal sides: the constant tends to that of a thin sector, h / j_{1,1}, so no smaller one will do."""
    mesh = triangle([(0.5, height), (0, 0), (1, 0)])
    assert best_poincare(mesh, np.eye(2)) >= 0.999 * used(mesh, np.eye(2))[0]


def test_constants_of_triangles_known_in_closed_form() -> None:
    """Equilateral, side 1: 3 / (4 pi) (Lamé 1833); right isosceles, legs 1: 1 / pi (closed form)."""
    equilateral = triangle([(0, 0), (1, 0), (0.5, np.sqrt(3) / 2)])
    assert best_poincare(equilateral, np.eye(2)) == pytest.approx(3 / (4 * np.pi), rel=1e-9)
    right = triangle([(0, 0), (1, 0), (0, 1)])
    assert best_poincare(right, np.eye(2)) == pytest.approx(1 / np.pi, rel=1e-9)
