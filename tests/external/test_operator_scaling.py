"""Laws that constants obey whatever the problem: units, homogeneity, shifts, monotonicity, flows without effect.

Enclosures must agree as intervals. A constant is one line in ``UNITS``, and one name in ``SYMMETRIC`` if it is
the smallest ratio of a(u, u).
"""

import copy
import math
import re
from dataclasses import replace
from typing import Literal

import pytest
from asking import along, held, polygon
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st
from operator_runs import JSON, Interval, Key, ask_problem, entries, intervals
from random_operators import Case, Part, Piecewise, Ring, Value, linear, number

FormName = Literal["convective", "conservative"]
Power = tuple[float, float]

LIKE_A: dict[str, Power] = {"h1": (0, -1), "seminorm": (2, -1), "diffusion": (0, 0)}
"""Powers of length and time in a(u, v) / ||v||^2, for each norm."""

UNITS: dict[str, dict[str, Power]] = {
    "coercivity": LIKE_A,
    "continuity": LIKE_A,
    "inf_sup": LIKE_A,
    "decay_rate": {"h1": (0, -1), "seminorm": (0, -1), "diffusion": (0, -1)},
    "trace": {"h1": (-0.5, 0), "seminorm": (0.5, 0), "diffusion": (-0.5, 0.5)},
}
"""Powers of length and time in every constant."""

SYMMETRIC = ("coercivity", "decay_rate")
"""Constants that are concave in the coefficients, do not see skew parts, and grow with K, c and alpha."""

TOLERANCE = 0.1

SECONDS = 1.0

SLACK = 1e-11
"""Relative; rounding of coordinates and coefficients that this file scales."""

EXAMPLES = settings(
    max_examples=3,
    derandomize=True,
    deadline=None,
    database=None,
    phases=[Phase.generate],
    suppress_health_check=list(HealthCheck),
)

OUTLINES: tuple[Ring, ...] = (
    [(0.0, 0.0), (2.0, 0.0), (2.0, 1.0), (1.0, 1.0), (0.0, 1.0)],
    [(0.0, 0.0), (1.5, 0.0), (2.0, 1.0), (0.75, 1.5), (-0.25, 0.75)],
    [(0.0, 0.0), (2.0, 0.0), (2.0, 1.0), (1.0, 1.0), (1.0, 2.0), (0.0, 2.0)],
)


@st.composite
def cases(draw: st.DrawFn, flows: bool = True) -> Case:
    """Small problems whose constants are enclosed in about a second: a region, one side held, one exchanging."""

    def size(low: float, high: float) -> float:
        return low + (high - low) * draw(st.integers(0, 16)) / 16

    ring = draw(st.sampled_from(OUTLINES))
    regions = {"middle": (0.25, -1.0, 0.75, 3.0)} if draw(st.booleans()) else {}
    turned = draw(st.integers(0, len(ring) - 1))
    ring = [*ring[turned:], *ring[:turned]]
    exchange = Piecewise(((None, (number(size(-0.25, 2)),)),))
    parts = (
        Part("held", ring[:2], "dirichlet"),
        Part("wall", ring[1:4], "robin", exchange),
        Part("rest", None, "neumann"),
    )
    zero, middle, around = number(0), number(size(0.5, 4)), linear(1.5, 0.125 * draw(st.integers(0, 1)), 0)
    diffusion = [(name, (middle, zero, zero, middle)) for name in regions]
    flow = Piecewise(((None, (number(size(-1, 1)), number(size(-1, 1)))),))
    kind = draw(st.sampled_from(["h1", "seminorm", "diffusion"]))
    return Case(
        rings=(ring,),
        regions=regions,
        parts=parts,
        diffusion=Piecewise((*diffusion, (None, (around, zero, zero, around)))),
        velocity=flow if flows and draw(st.booleans()) else None,
        reaction=Piecewise(((None, (linear(size(-0.5, 0.5), 0.125, 0),)),)),
        form=draw(st.sampled_from(["convective", "conservative"])),
        norm={"kind": kind, **({"length_scale": size(0.5, 2)} if kind == "h1" else {})},
    )


def find(problem: JSON, constant: str) -> dict[Key, Interval]:
    """The enclosures of a constant, one for each part if it has parts; something is known of each."""
    found = intervals(ask_problem(problem, (constant,), TOLERANCE, SECONDS).result)
    assert found
    assert all(math.isfinite(low) or math.isfinite(high) for low, high in found.values())
    return found


def in_units(case: Case, length: float, time: float) -> Case:
    """The same problem where the length unit is 1/length as long and the time unit 1/time."""

    def times(piecewise: Piecewise, factor: float) -> Piecewise:
        entries = []
        for name, values in piecewise.entries:
            entries.append((name, tuple(scaled(value, factor, length) for value in values)))
        return Piecewise(tuple(entries))

    parts = tuple(
        replace(
            part,
            chain=None if part.chain is None else [(length * x, length * y) for x, y in part.chain],
            exchange=None if part.exchange is None else times(part.exchange, length / time),
        )
        for part in case.parts
    )
    norm = dict(case.norm)
    if "length_scale" in norm:
        norm["length_scale"] *= length
    return replace(
        case,
        rings=tuple([(length * x, length * y) for x, y in ring] for ring in case.rings),
        regions={name: tuple(length * end for end in ends) for name, ends in case.regions.items()},
        parts=parts,
        diffusion=times(case.diffusion, length**2 / time),
        velocity=None if case.velocity is None else times(case.velocity, length / time),
        reaction=times(case.reaction, 1 / time),
        norm=norm,
    )


def scaled(value: Value, factor: float, length: float) -> Value:
    """The factor times the value at the point that has these coordinates in the new unit."""
    text = re.sub(r"\b([xy])\b", rf"(\1/{length!r})", value.text)
    return Value(f"({factor!r})*({text})", lambda x, y: factor * value.at(x / length, y / length))


def check_agree(first: Interval, second: Interval) -> None:
    """Both may enclose the same number."""
    slack = SLACK * max(abs(end) for end in (*first, *second) if math.isfinite(end))
    assert first[0] <= second[1] + slack, (first, second)
    assert second[0] <= first[1] + slack, (first, second)


def check_no_lower(raised: Interval, before: Interval) -> None:
    """The raised number may be no lower."""
    assert raised[1] >= before[0] - SLACK * abs(before[0]), (raised, before)


def check_units(case: Case, constant: str, length: float, time: float) -> None:
    """Numbers in other units are those in the first ones times powers of length and time."""
    power = UNITS[constant][case.norm["kind"]]
    factor = length ** power[0] * time ** power[1]
    plain, there = find(case.document(), constant), find(in_units(case, length, time).document(), constant)
    assert plain.keys() == there.keys()
    for key, (low, high) in there.items():
        check_agree(plain[key], (low / factor, high / factor))


@pytest.mark.parametrize("length", [3.0, 1e-3])
@pytest.mark.parametrize("constant", UNITS)
def test_lengths(constant: str, length: float) -> None:
    """Geometry, length scale and coefficients in another length unit (definition of units)."""

    @EXAMPLES
    @given(cases())
    def holds(case: Case) -> None:
        check_units(case, constant, length, 1.0)

    holds()


@pytest.mark.parametrize("time", [1 / 7, 3600.0])
@pytest.mark.parametrize("constant", UNITS)
def test_all_coefficients_times_a_number(constant: str, time: float) -> None:
    """K, b, c and alpha times s multiply a(u, v), and what is proportional to it, by s = 1/time (definition)."""

    @EXAMPLES
    @given(cases())
    def holds(case: Case) -> None:
        check_units(case, constant, 1.0, time)

    holds()


@pytest.mark.parametrize("kind", LIKE_A)
@pytest.mark.parametrize("constant", UNITS)
def test_names_of_units_change_no_number(constant: str, kind: str) -> None:
    """The codes are printed, nothing is converted (definition)."""
    document = {
        "domain": {"shape": polygon(OUTLINES[0])},
        "boundary": [*held(along(*OUTLINES[0][:3])), {"name": "rest", "on": "remainder", "condition": "neumann"}],
        "norm": {"kind": kind},
    }
    renamed = {**document, "length_unit": "km", "time_unit": "d"}
    plain, other = (ask_problem(problem, (constant,), 0.5, 60.0).result for problem in (document, renamed))
    assert intervals(plain) == intervals(other)
    length, time = UNITS[constant][kind]
    for key, entry in entries(other).items():
        metres = entries(plain)[key]["unit"]
        assert entry["unit"] == re.sub(r"\bs\b", "d", re.sub(r"\bm\b", "km", metres))
        assert ("km" in entry["unit"], bool(re.search(r"\bd\b", entry["unit"]))) == (length != 0, time != 0)


def swirl(case: Case, strength: float) -> JSON:
    """A stream function that vanishes on every edge that is not held: no flow through them."""
    factors = [f"({strength!r})"]
    ring = case.rings[0]
    for start, end in zip(ring[1:], [*ring[2:], ring[0]], strict=True):
        across = (end[1] - start[1], start[0] - end[0])
        factors.append(f"(({across[0]!r})*(x - ({start[0]!r})) + ({across[1]!r})*(y - ({start[1]!r})))")
    return {"stream_function": "*".join(factors)}


@pytest.mark.parametrize("form", ["convective", "conservative"])
@pytest.mark.parametrize("constant", SYMMETRIC)
def test_flow_along_the_free_boundary_has_no_symmetric_part(constant: str, form: FormName) -> None:
    """b = (d psi/dy, -d psi/dx), psi = 0 off the Dirichlet part: int (b . grad u) u = 0 (elementary)."""

    @EXAMPLES
    @given(cases(flows=False), st.integers(1, 8))
    def holds(case: Case, strength: int) -> None:
        document = replace(case, form=form).document()
        still = find(document, constant)
        document["operator"]["velocity"] = swirl(case, strength / 4)
        stirred = find(document, constant)
        for key in still:
            check_agree(still[key], stirred[key])

    holds()


def more(document: JSON, reaction: str, exchange: str) -> JSON:
    """The problem with more reaction, and more exchange on the wall."""
    changed = copy.deepcopy(document)
    for entry in changed["operator"]["reaction"]:
        entry["value"] += f" + {reaction}"
    for entry in changed["boundary"][1]["exchange"]:
        entry["value"] += f" + {exchange}"
    return changed


@EXAMPLES
@given(cases(), st.integers(1, 16))
def test_more_reaction_shifts_the_decay_rate(case: Case, amount: int) -> None:
    """c + t adds t int u^2 to a(u, u) (definition)."""
    document = case.document()
    ((low, high),) = find(document, "decay_rate").values()
    (raised,) = find(more(document, f"{amount / 4!r}", "0"), "decay_rate").values()
    check_agree(raised, (low + amount / 4, high + amount / 4))


@pytest.mark.parametrize("constant", SYMMETRIC)
def test_more_reaction_and_exchange_never_lower_ratios(constant: str) -> None:
    """What adds a nonnegative form to a(u, u) (elementary)."""

    @EXAMPLES
    @given(cases(), st.integers(1, 16), st.integers(1, 16))
    def holds(case: Case, first: int, second: int) -> None:
        document = case.document()
        (plain,) = find(document, constant).values()
        raised_document = more(document, f"{first / 4!r}*max(0, x - 0.5)^2", f"{second / 4!r}*abs(y)")
        (raised,) = find(raised_document, constant).values()
        check_no_lower(raised, plain)

    holds()


@pytest.mark.parametrize("constant", SYMMETRIC)
def test_ratios_are_concave_in_flow_and_reaction(constant: str) -> None:
    """The least of affine functions: halfway it is at least the mean of both ends (elementary)."""

    @EXAMPLES
    @given(cases(), st.integers(-8, 8), st.integers(-8, 8))
    def holds(case: Case, first: int, second: int) -> None:
        def at(flow: float, reaction: float) -> Interval:
            document = case.document()
            document["operator"] |= {"velocity": [flow, 0.5 - flow], "reaction": reaction}
            (found,) = find(document, constant).values()
            return found

        start, end = at(first / 8, second / 4), at(-second / 8, first / 4)
        middle = at((first - second) / 16, (first + second) / 8)
        check_no_lower(middle, ((start[0] + end[0]) / 2, math.inf))

    holds()
