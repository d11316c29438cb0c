"""A nonconforming minorant of any order of a quadratic form: a matrix with no fewer negative directions.

For u in V keep, on each cell, its L2 projection u_T on polynomials of order k + 1 and, on each facet, the projection
u_F of its trace on order k. They determine l(w) = int G grad u . grad w for every polynomial w of order j = k + 1 - q,
where G has degree q (integrate by parts). Hence, for any R of order j that depends linearly on (u_T, u_F), and
e = u - R of zero mean,

    int G grad u . grad u = 2 l(R) - int G grad R . grad R + int G grad e . grad e,
    int G grad e . grad e >= a (|u_T - R|^2 + |u - u_T|^2) / c^2
                             + sum_F w_F (mean_F (u_F - P_F R)^2 + mean_F (u - u_F)^2).

c is the Poincare constant of the cell in the metric of the floor of G: h / j_(1,1) on triangles (Laugesen and Siudeja,
J. Differential Equations 249 (2010) 118-135), h / pi on any simplex (Payne and Weinberger 1960; Bebendorf 2003), h the
longest edge. The trace identity gives mean_F f^2 = mean_T (f^2 + (2/d) f (x - P) . grad f) <= (c^2 + 2 h c / d) mean_T
|grad f|^2 for zero mean, hence w_F. The terms |u - u_T|^2 and (u - u_F)^2, where R has a trace of order k, pay for
negative potentials:

    int p u^2 >= int p u_T^2 - |(1 - P)(p u_T)|^2 / z - (z + p_-) |u - u_T|^2 for any z > 0,

the same on facets. What is left, Q[u] >= N[u_T, u_F], is a form on finitely many unknowns. The map u -> (u_T, u_F) is
injective on subspaces where Q < 0, because N < 0 there: N has at least as many negative directions as Q on V. (The idea
of keeping moments in cells and on facets is that of hybrid high-order methods, Di Pietro and Ern, CMAME 283 (2015)
1-21.)
"""

from dataclasses import dataclass
from functools import cached_property
from math import factorial, pi

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csc_matrix

from service.bounds.condensed import Numbering, assemble
from service.bounds.rounding import gamma
from service.elements.jet import simplex_dimension
from service.elements.moments import MOMENT_ERROR, MomentReference, moment_reference
from service.elements.reference import magnitude
from service.forms.form import Form
from service.forms.modes import degree_of

Array = NDArray[np.float64]

POINCARE = {1: pi, 2: 3.8317059702075123, 3: pi}
"""h / POINCARE[d] bounds the Poincare constant of a simplex with longest edge h; rounded down where used."""

SHARE = 0.5
"""The least part of the error's energy, after facets are paid for, that is spent on the cell terms."""

LARGEST_NEED = 0.85
"""The largest part of the error's energy that negative potentials and facet terms may take."""


class TooCoarseError(ArithmeticError):
    """The cells are too large for the form's negative potentials."""


@dataclass(frozen=True)
class Minorant:
    """The matrix N of a form for facet polynomials of one ``order``.

    Raises
    ------
    TooCoarseError
        On use, if negative potentials need more of the error's energy than there is.
    """

    form: Form
    order: int

    @property
    def reference(self) -> MomentReference:
        """Tensors on the unit simplex."""
        return moment_reference(self.form.mesh.dimension, self.order, self.form.degree)

    @cached_property
    def numbering(self) -> Numbering:
        """Facet polynomials of free facets are shared, cell polynomials a cell's own."""
        mesh = self.form.mesh
        free = ~self.form.dirichlet
        per_facet = self.reference.trace.shape[1]
        start = per_facet * (np.cumsum(free) - 1)
        numbers = np.where(free[:, None], start[:, None] + np.arange(per_facet), -1)
        return Numbering(numbers[mesh.cell_facets].reshape(len(mesh.cells), -1), self.reference.stiffness.shape[-1])

    @cached_property
    def _owned(self) -> NDArray[np.bool_]:
        """(nc, d+1) which facets a cell pays for: each facet belongs to one cell."""
        mesh = self.form.mesh
        return np.asarray(mesh.facet_cells[mesh.cell_facets, 0] == np.arange(len(mesh.cells))[:, None])

    def local(self, bounded: bool = True) -> tuple[Array, Array]:
        """N on each cell (nc, n, n), facet unknowns first, and a bound of the error of every entry."""
        form, reference = self.form, self.reference
        d = form.mesh.dimension
        cells, n = len(form.mesh.cells), reference.stiffness.shape[-1]
        metric = form.gradient_metric
        modes = metric.shape[1]
        stiffness = np.einsum("cmab,mabij->cij", metric, reference.stiffness[:modes], optimize=True)
        normal = reference.normals @ metric  # (nc, m, d+1, d)
        flux = np.einsum("cmfa,mfajl->cfjl", normal, reference.slopes[:modes], optimize=True).reshape(cells, -1, n)
        trace = reference.trace.reshape(-1, n)

        # With facet terms R has a trace of the facets' order, so that u - u_F sees e only.
        lost = max(degree_of(d, modes), 1 if np.any(form.facet) else 0)
        low = simplex_dimension(d, self.order + 1 - lost)
        inner = stiffness[:, 1:low, 1:low]
        right = np.concatenate([stiffness[:, 1:low], flux.swapaxes(1, 2)[:, 1:low]], axis=2)
        # R = Y u_T + Z d with d = u_F - P u_T; any Y, Z are allowed, these are optimal up to rounding.
        lifts = np.zeros((cells, n, n + trace.shape[0]))
        lifts[:, 1:low] = np.linalg.solve(inner, right)
        lifts[:, 0, 0] = 1.0

        shares = self.shares()
        potentials = self._potential(shares), self._facet_potential(shares)
        local = compose(stiffness, flux, lifts, trace, shares, potentials)
        if not bounded:
            return (local + local.swapaxes(1, 2)) / 2, np.zeros_like(local)
        far = np.abs(reference.normals) @ np.abs(metric)
        # The same composition of absolute values bounds every entry's rounding and the error of the tensors.
        bounds = compose(
            np.einsum("cmab,mabij->cij", np.abs(metric), magnitude(reference.stiffness[:modes]), optimize=True),
            np.einsum("cmfa,mfajl->cfjl", far, magnitude(reference.slopes[:modes]), optimize=True).reshape(flux.shape),
            np.abs(lifts),
            magnitude(trace),
            shares,
            (self._potential(shares, absolute=True), self._facet_potential(shares, absolute=True)),
            sign=-1.0,
        )
        return (local + local.swapaxes(1, 2)) / 2, (4 * MOMENT_ERROR + gamma(4 * n + modes * d * d + 24)) * bounds

    def shares(self) -> "Shares":
        """How the energy of e is spent on each cell."""
        form = self.form
        d = form.mesh.dimension
        if not (np.isfinite(form.uncertainty) and np.min(np.linalg.eigvalsh(form.diffusion_floor)) > 0):
            raise TooCoarseError("the diffusion has no positive floor on some cell")
        poincare = poincare_constants(form)
        longest = poincare * POINCARE[d]
        measure = form.jacobian / factorial(d)
        through = (poincare**2 + 2 * longest * poincare / d) / measure
        # Young's inequality with z = swing; the swing also bounds how far p goes below its mean.
        young, facet_young = form.potential_swing, form.facet_swing
        hunger = np.maximum(young - form.potential[:, 0], 0) + young
        facet_hunger = (np.maximum(facet_young - form.facet[:, 0], 0) + facet_young) * form.facet_measure
        facet_hunger = np.where(form.dirichlet, 0.0, facet_hunger)
        cell_need = hunger * poincare**2 * (1 + 1e-9)
        needs = through[:, None] * self._owned * facet_hunger[form.mesh.cell_facets] * (1 + 1e-9)
        facet_need = np.sum(needs, axis=1)
        if np.max(cell_need + facet_need) > LARGEST_NEED:
            raise TooCoarseError("the mesh is too coarse for the negative part of the form")
        share = np.maximum(SHARE * (1 - facet_need), cell_need)
        rest = (1 - facet_need - share) * (1 - 1e-9)
        # What is set aside for a facet pays for both parts of e there, u_F - P_F R and u - u_F: they are orthogonal.
        jump = (needs + rest[:, None] / (d + 1)) / through[:, None]
        return Shares(share * form.jacobian / poincare**2, jump, young, facet_young, float(np.max(cell_need)))

    def _potential(self, shares: "Shares", absolute: bool = False) -> Array:
        """int p u_T^2 - |(1 - P)(p u_T)|^2 / z on each cell (nc, n, n); ``absolute``: a bound of all that enters."""
        form, products = self.form, self.reference.products
        n = products.shape[2]
        if form.potential.shape[1] == 1:
            factor = form.potential[:, 0] * form.jacobian
            return np.asarray((np.abs(factor) if absolute else factor)[:, None, None] * np.eye(n))
        block = priced(form.potential, products[: form.potential.shape[1]], shares.young, absolute)
        return np.asarray(form.jacobian[:, None, None] * block)

    def _facet_potential(self, shares: "Shares", absolute: bool = False) -> Array:
        """The same for facets, on the cells that own them: (nc, (d+1) f, (d+1) f)."""
        form, products = self.form, self.reference.facet_products
        own = products.shape[2]
        block = priced(form.facet, products[: form.facet.shape[1]], shares.facet_young, absolute)
        block = np.where(form.dirichlet[:, None, None], 0.0, block * form.facet_measure[:, None, None])
        faces = form.mesh.dimension + 1
        result = np.zeros((len(form.mesh.cells), faces, own, faces, own))
        chosen = np.where(self._owned[:, :, None, None], block[form.mesh.cell_facets], 0.0)
        for face in range(faces):
            result[:, face, :, face] = chosen[:, face]
        return result.reshape(len(result), faces * own, faces * own)

    def condensed(self, bounded: bool = True) -> tuple[csc_matrix, float] | None:
        """The facet matrix with the cell unknowns eliminated, and a bound of its error (none if not ``bounded``).

        None where a cell's own block is not safely positive definite.
        """
        local, wrong = self.local(bounded)
        return eliminate_cells(local, wrong, self.numbering, bounded)


@dataclass(frozen=True)
class Shares:
    """What the energy of e pays for: factors of |u_T - R|^2 (nc,), in reference coordinates, and of jumps (nc, d+1).

    need : the largest part that negative potentials take on a cell.
    """

    cell: Array
    jump: Array
    young: Array
    facet_young: Array
    need: float


def eliminate_cells(
    local: Array, wrong: Array, numbering: Numbering, bounded: bool
) -> tuple[csc_matrix, float] | None:
    """The matrix of the shared unknowns from local ones (nc, n, n), and a bound of its error in the 2-norm.

    ``wrong`` bounds the error of every local entry. The rows behind the shared ones are the cell's own; None where
    their block is not safely positive definite. For any W, with r = B - A W, the Schur complement is C - B^T W - W^T B
    + W^T A W - r^T A^-1 r: no error of the inverse enters unnoticed.
    """
    shared = numbering.skeleton.shape[1]
    outer, mixed, inner = local[:, :shared, :shared], local[:, shared:, :shared], local[:, shared:, shared:]
    doubt = norms(wrong[:, shared:, shared:])
    least = np.linalg.eigvalsh(inner)[:, 0] - doubt - gamma(100 * inner.shape[1]) * norms(inner)
    if not np.all(least > 0):
        return None
    weights = np.linalg.solve(inner, mixed)
    residual = mixed - inner @ weights
    back = mixed.swapaxes(1, 2) @ weights
    schur = outer - back - back.swapaxes(1, 2) + weights.swapaxes(1, 2) @ inner @ weights
    if not bounded:
        return assemble(schur, numbering.skeleton, numbering.shared), 0.0
    # Entry by entry: the errors of the blocks, and the rounding of these products.
    wrong = wrong + gamma(8 * local.shape[1]) * np.abs(local)
    far = np.abs(weights)
    crossed = far.swapaxes(1, 2) @ wrong[:, shared:, :shared]
    total = norms(wrong[:, :shared, :shared] + crossed + crossed.swapaxes(1, 2))
    total += norms(far.swapaxes(1, 2) @ wrong[:, shared:, shared:] @ far)
    missed = norms(np.abs(residual) + wrong[:, shared:, :shared] + wrong[:, shared:, shared:] @ far)
    total += missed**2 / least
    schur = (schur + schur.swapaxes(1, 2)) / 2
    # Where several cells meet in an unknown errors add up, and the sum of their numbers rounds again.
    meeting = int(np.max(np.bincount(numbering.skeleton[numbering.skeleton >= 0].ravel()), initial=1))
    allowance = meeting * (float(np.max(total)) + gamma(meeting + 2) * float(np.max(norms(schur))))
    return assemble(schur, numbering.skeleton, numbering.shared), allowance


def compose(
    stiffness: Array,
    flux: Array,
    lifts: Array,
    trace: Array,
    shares: Shares,
    potentials: tuple[Array, Array],
    sign: float = 1.0,
) -> Array:
    """N on each cell in the variables (u_F, u_T); with ``sign`` -1 and absolute values a bound of all that was
    added.

    In the variables (u_T, d), d = u_F - P u_T: l(R) = u_T . K R + d . D R, u_T - R = (1 - Y) u_T - Z d.
    """
    n, rows = stiffness.shape[1], trace.shape[0]
    data = np.concatenate([stiffness, flux], axis=1)
    linear = data @ lifts
    total = linear + linear.swapaxes(1, 2) - sign * (lifts.swapaxes(1, 2) @ stiffness @ lifts)
    missed = -sign * lifts
    missed[:, :, :n] += np.eye(n)
    total += shares.cell[:, None, None] * (missed.swapaxes(1, 2) @ missed)
    jumps = trace @ missed
    jumps[:, :, n:] += np.eye(rows)
    weights = np.repeat(shares.jump, rows // shares.jump.shape[1], axis=1)
    total += jumps.swapaxes(1, 2) @ (weights[:, :, None] * jumps)
    total[:, :n, :n] += potentials[0]
    own, mixed, outer = total[:, :n, :n], total[:, :n, n:], total[:, n:, n:]
    across = trace.T @ outer
    back = mixed @ trace
    inner = own - sign * (back + back.swapaxes(1, 2)) + across @ trace
    mixed = mixed - sign * across
    upper = np.concatenate([outer + potentials[1], mixed.swapaxes(1, 2)], axis=2)
    return np.concatenate([upper, np.concatenate([mixed, inner], axis=2)], axis=1)


def priced(modes: Array, products: Array, young: Array, absolute: bool) -> Array:
    """P p - (beyond^T beyond) / z for multiplication by p, z = ``young``: what is kept, less the price of what is not.

    modes : (n, m) of p; products : (m, l, q) tensors. With ``absolute`` a bound of all that enters.
    """
    own = products.shape[2]
    size, tensors, sign = (np.abs(modes), magnitude(products), -1.0) if absolute else (modes, products.copy(), 1.0)
    # Orthonormal polynomials times the constant 1: known exactly, so that small modes cost little beside it.
    tensors[0] = np.eye(products.shape[1], own)
    full = np.einsum("cm,mlj->clj", size, tensors)
    beyond = full[:, own:]
    price = np.where(young > 0, 1 / np.where(young > 0, young, 1), 0.0)
    return np.asarray(full[:, :own] - sign * price[:, None, None] * (beyond.swapaxes(1, 2) @ beyond))


def norms(matrices: Array) -> Array:
    """(nc,) Frobenius norms."""
    return np.asarray(np.linalg.norm(matrices, axis=(1, 2)))


def poincare_constants(form: Form) -> Array:
    """(nc,) c with |f| <= c |G^(1/2) grad f| for functions of zero mean on a cell, rounded up.

    The metric of gradients as computed may be off by its error, hence the last factor.
    """
    mesh = form.mesh
    corners = np.concatenate([np.zeros((len(mesh.cells), mesh.dimension, 1)), mesh.spans], axis=2)
    first, second = np.triu_indices(mesh.dimension + 1, 1)
    edges = corners[:, :, second] - corners[:, :, first]
    factor = np.linalg.cholesky(form.diffusion_floor)
    half = np.linalg.inv(factor)
    longest = np.max(np.linalg.norm(half @ edges, axis=1), axis=1)
    # Cholesky's backward error, and the rounding of the products, against the lengths they make.
    lost = gamma(16 * mesh.dimension) * np.sum((np.abs(half) @ np.abs(factor)) ** 2, axis=(1, 2))
    return np.asarray(longest / POINCARE[mesh.dimension] * (1 + 1e-9 + lost + 2 * form.metric_error))
