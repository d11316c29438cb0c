"""What must hold of coefficients everywhere: values exist, and the diffusion is positive definite."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import partial

import numpy as np

from service.problem.coefficients import LARGEST_VALUE, entry_places
from service.problem.covers import Cover
from service.problem.domain import PlaneDomain
from service.problem.expressions.expression import Expression
from service.problem.expressions.readings import values
from service.problem.operator import ZERO, Field, Matrix, Operator
from service.problem.patches import Patches
from service.problem.piecewise import Piecewise
from service.problem.positions import say
from service.problem.proofs import Claim, Failure, Prover
from service.problem.reading import Place
from service.problem.velocity import divergence

FARTHER = "It helps if the expression stays well defined a little beyond, as with sqrt(max(..., 0))."
LARGER = "A simpler expression helps, or one that stays farther from zero there."


def check_coefficients(
    operator: Operator, domain: PlaneDomain, exponent: int, problem: Mapping[str, object], place: Place
) -> None:
    """Record every entry of a coefficient for which the claims do not hold, or cannot be proved.

    Claims: expressions have values of at most LARGEST_VALUE on the closed part of the domain in which they
    hold (those of an exchange on the boundary part), velocities have a divergence, and the symmetric part
    of the diffusion is positive definite.

    domain : with regions and boundary parts.
    exponent : power of two that scales the domain to size one.
    problem : the problem as it is written, read before without faults; ``place`` is its place.
    """
    checks = _Checks(Patches(domain, exponent), Prover(exponent))
    written, where = problem.get("operator"), place.at("operator")
    stated = written if isinstance(written, dict) else {}
    checks.diffusion(operator.diffusion, stated.get("diffusion"), where.at("diffusion"))
    checks.scalar(operator.reaction, stated.get("reaction"), where.at("reaction"))
    if isinstance(operator.velocity, Field):
        checks.velocity(operator.velocity, stated.get("velocity"), where.at("velocity"))
    boundary = problem.get("boundary")
    for number, part in enumerate(boundary if isinstance(boundary, list) else ()):
        exchange = domain.parts[number].exchange
        if exchange is not None:
            checks.exchange(number, exchange, part["exchange"], place.at("boundary").at(number).at("exchange"))


@dataclass(frozen=True)
class _Checks:
    patches: Patches
    prover: Prover

    def diffusion(self, diffusion: Piecewise[Matrix], written: object, place: Place) -> None:
        """Existence of all entries, then definiteness."""
        places = entry_places(written, place)
        for number, (name, matrix) in enumerate(diffusion.entries):
            value, here = places[name]
            each = [here.at(i).at(j) for i in (0, 1) for j in (0, 1)] if isinstance(value, list) else [here]
            cover = partial(self.patches.cover, diffusion.names, number)
            fine = [self.exists(entry, cover, at) for entry, at in zip(matrix, each, strict=False)]
            if all(fine):
                self.definite(matrix, cover, here)

    def scalar(self, scalar: Piecewise[Expression], written: object, place: Place) -> None:
        """Existence."""
        places = entry_places(written, place)
        for number, (name, expression) in enumerate(scalar.entries):
            self.exists(expression, partial(self.patches.cover, scalar.names, number), places[name][1])

    def velocity(self, velocity: Field, written: object, place: Place) -> None:
        """Existence of the components and of what is derived from them."""
        if velocity.stream is not None and isinstance(written, dict):
            self.stream(velocity, velocity.stream, written["stream_function"], place.at("stream_function"))
            return
        places = entry_places(written, place)
        for number, (name, vector) in enumerate(velocity.components.entries):
            here = places[name][1]
            cover = partial(self.patches.cover, velocity.components.names, number)
            fine = [self.exists(component, cover, here.at(i)) for i, component in enumerate(vector)]
            if all(fine):
                self.exists(divergence(vector), cover, here, "The divergence of this velocity")

    def stream(self, velocity: Field, stream: Piecewise[Expression], written: object, place: Place) -> None:
        """Existence of a stream function and of its derivatives."""
        places = entry_places(written, place)
        for number, (name, vector) in enumerate(velocity.components.entries):
            here = places[name][1]
            cover = partial(self.patches.cover, velocity.components.names, number)
            if self.exists(stream.values[number], cover, here):
                self.exists(vector[0], cover, here, "The derivative of this stream function in y")
                self.exists(vector[1], cover, here, "The derivative of this stream function in x")

    def exchange(self, part: int, exchange: Piecewise[Expression], written: object, place: Place) -> None:
        """Existence on the boundary part."""
        places = entry_places(written, place)
        for number, (name, expression) in enumerate(exchange.entries):
            self.exists(expression, partial(self.patches.edge_cover, part, exchange.names, number), places[name][1])

    def exists(
        self, expression: Expression, cover: Callable[[], Cover], place: Place, subject: str = "This value"
    ) -> bool:
        """Whether an expression has values everywhere."""
        if expression.exact is not None and abs(expression.exact) <= LARGEST_VALUE:
            return True
        failure = self.prover.failure(Claim(expression), cover())
        if failure is not None and failure.certain:
            place.refuse(f"{subject} does not exist, or is greater than {LARGEST_VALUE:g}, at {say(failure.point)}.")
        elif failure is not None:
            place.refuse(f"{subject} could not be proved to exist near {say(failure.point)}. {FARTHER}")
        return failure is None

    def definite(self, matrix: Matrix, cover: Callable[[], Cover], place: Place) -> None:
        """Sylvester's criterion for the symmetric part of a matrix."""
        k11, k12, k21, k22 = matrix
        half = Expression.constant(0.5)
        mixed = (k12 + k21) * half
        scalar = mixed == ZERO and k11 == k22
        minors = (k11,) if scalar else (k11, k11 * k22 - mixed * mixed)
        for minor in minors:
            if minor.exact is not None and minor.exact > 0:
                continue
            failure = self.prover.failure(Claim(minor, 2 * LARGEST_VALUE**2, positive=True), cover())
            if failure is not None:
                place.refuse(_indefinite(matrix, failure, scalar))
                return


def _indefinite(matrix: Matrix, failure: Failure, scalar: bool) -> str:
    """The sentence about a diffusion that is not proved positive definite."""
    k11, k12, k21, k22 = (float(values(entry, failure.point)) for entry in matrix)
    smallest = float(np.linalg.eigvalsh([[k11, (k12 + k21) / 2], [(k12 + k21) / 2, k22]])[0])
    where = say(failure.point)
    if scalar:
        wanted, found = "positive", f"it is {smallest:.6g}"
    else:
        wanted, found = "positive definite", f"the smallest eigenvalue of its symmetric part is {smallest:.6g}"
    if failure.certain:
        return f"The diffusion must be {wanted} everywhere; {found} at {where}."
    return f"The diffusion could not be proved {wanted} near {where}, where {found}. {LARGER}"
