"""What operators and norms say: values by region, defaults, and one canonical form for what means the same."""

import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from operator_documents import by_region, rich, with_operator
from problem_documents import KNOWN, SQUARE, faults, inputs, polygon

from service.problem.expressions.readings import values
from service.problem.operator import LAPLACIAN, Norm
from service.problem.request import canonical, read_request

POINT = np.array([0.3, 0.7])


def operator(**members):
    return read_request(with_operator(**members), KNOWN).operator


def at(expressions, point=POINT):
    return [float(values(expression, point)) for expression in expressions]


def form(**members):
    return canonical(with_operator(**members), KNOWN)["problem"].get("operator")


def test_everything_that_is_stated_is_read():
    request = read_request(rich(), KNOWN)
    x, y = POINT
    found = request.operator
    assert found.diffusion.names == ("bed", None)
    assert at(found.diffusion.within({"bed"})) == [1, 0.2 * x, 0, 2]
    assert at(found.diffusion.within({"bank"})) == [1 + x**2, 0, 0, 1 + x**2]
    assert at(found.velocity.components.within({"bank", "bed"})) == [1, y]
    assert at(found.velocity.components.within({"bed"})) == [x * y, 0]
    assert at(found.reaction.values) == [x - y]
    assert found.form == "conservative"
    assert request.norm == Norm("h1", 50.0)
    inflow, island, banks = request.domain.parts
    assert (inflow.condition, island.condition, banks.condition) == ("dirichlet", "robin", "neumann")
    assert inflow.exchange is banks.exchange is None
    assert at(island.exchange.values) == [-x, 0.5]


def test_without_operator_and_norm_it_is_the_laplacian_in_h1():
    request = read_request(inputs(polygon(SQUARE)), KNOWN)
    assert request.operator == LAPLACIAN
    assert request.norm == Norm("h1", 1.0)


def test_members_that_are_not_stated_have_their_defaults():
    found = operator(reaction=2)
    assert (found.diffusion, found.velocity, found.form) == (LAPLACIAN.diffusion, None, "convective")


@pytest.mark.parametrize("kind", ["seminorm", "diffusion"])
def test_norms_without_a_length(kind):
    document = with_operator()
    document["problem"]["norm"] = {"kind": kind}
    assert read_request(document, KNOWN).norm == Norm(kind, 1.0)
    assert canonical(document, KNOWN)["problem"]["norm"] == {"kind": kind}


@given(st.floats(0.05, 1), st.floats(0.05, 1))
@settings(max_examples=20)
def test_a_stream_function_gives_its_rotated_gradient(x, y):
    """Central differences of psi; their error is a few h^2 = 1e-10 here."""
    psi = "sin(2*x)*y^3 + exp(x - y)"
    field = operator(velocity={"stream_function": psi}).velocity
    h = 1e-5
    (stream,) = field.stream.values

    def difference(dx, dy):
        ahead, behind = at([stream], np.array([x + dx, y + dy])), at([stream], np.array([x - dx, y - dy]))
        return (ahead[0] - behind[0]) / (2 * h)

    expected = [difference(0, h), -difference(h, 0)]
    assert at(field.components.values[0], np.array([x, y])) == pytest.approx(expected, abs=1e-8)
    assert field.solenoidal


@pytest.mark.parametrize(
    ("velocity", "solenoidal"),
    [
        ([1, -2], True),
        (["y", "x"], True),
        (["x", "-y"], True),
        (["x*y", "-y^2/2"], False),  # not simplified to 0, so not known to vanish
        (["x", "y"], False),
        (by_region([1, 2], left=["y", 0]), True),
        (by_region([1, 2], left=["x", 0]), False),
        ({"stream_function": by_region("x", left="abs(y - 0.2)")}, True),
    ],
)
def test_a_velocity_is_solenoidal_where_its_divergence_is_exactly_zero(velocity, solenoidal):
    assert operator(velocity=velocity).velocity.solenoidal is solenoidal


def test_samples_are_read_bit_by_bit():
    points, vectors = [[0.1, 0], [1 / 3, 1], [-5, 7]], [[1, 0], [0.1, 0.2], [1e-300, 1e50]]
    found = operator(velocity={"samples": {"points": points, "vectors": vectors}}).velocity
    assert (found.points.tolist(), found.vectors.tolist()) == (points, vectors)


SAME = [
    ("diffusion", [2, 2.0, "2", "4/2", "1 + 1", [[2, 0], [0, 2]], [["2", 0], [0.0, 2]], [{"value": 2}]], 2.0),
    ("diffusion", ["1+x*x", "1 + x*x", " (1) + (x * x)", [["1+x*x", 0], [0, "1 + x*x"]]], "1 + x*x"),
    ("reaction", [0.5, "1/2", "0.5", ".5", "5e-1", by_region(0.5)], 0.5),
    ("reaction", [0.1], 0.1),
    ("reaction", ["0.1", "1/10"], "0.1"),
    ("reaction", ["1/3", "2/6"], "1/3"),
    (
        "reaction",
        [
            [{"region": "right", "value": 1}, {"region": "left", "value": "x"}, {"value": 3}],
            [{"value": 3}, {"region": "right", "value": "1"}, {"region": "left", "value": "x"}],
        ],
        [{"region": "right", "value": 1.0}, {"region": "left", "value": "x"}, {"value": 3.0}],
    ),
    ("velocity", [[1, 0], ["1", "0"], [{"value": [1, 0]}]], [1.0, 0.0]),
    ("velocity", [{"stream_function": "y"}, {"stream_function": by_region(" y ")}], {"stream_function": "y"}),
]


@pytest.mark.parametrize(("member", "spellings", "expected"), SAME)
def test_one_coefficient_has_one_canonical_form(member, spellings, expected):
    """So that the same problem has the same digest, however its coefficients are spelt."""
    found = [form(**{member: spelling})[member] for spelling in spellings]
    assert found == [expected] * len(spellings)
    requests = [read_request(with_operator(**{member: spelling}), KNOWN) for spelling in spellings]
    assert all(request == requests[0] for request in requests)


def test_the_double_nearest_to_a_tenth_is_not_a_tenth():
    assert operator(reaction=0.1) != operator(reaction="0.1")


@pytest.mark.parametrize(
    "members",
    [
        {},
        {"diffusion": 1},
        {"diffusion": [[1, 0], [0, 1]], "reaction": "0", "form": "convective"},
    ],
)
def test_the_laplacian_leaves_the_document_as_it_was(members):
    """The digests of problems that were stated before there were operators stay what they are."""
    document = with_operator(**members)
    document["problem"]["norm"] = {"kind": "h1", "length_scale": 1}
    plain = with_operator()
    del plain["problem"]["operator"]
    assert canonical(document, KNOWN) == canonical(plain, KNOWN)
    assert set(canonical(plain, KNOWN)["problem"]) == {"title", "length_unit", "time_unit", "domain", "boundary"}
    assert read_request(document, KNOWN) == read_request(plain, KNOWN)


def test_an_operator_that_says_something_is_stated_in_full():
    assert form(reaction=1) == {"diffusion": 1.0, "reaction": 1.0, "form": "convective"}
    assert form(velocity=[0, 0])["velocity"] == [0.0, 0.0]


NUMBERS = st.one_of(st.floats(-1e3, 1e3), st.integers(-5, 5))
TEXTS = st.sampled_from(
    ["x", "-x^2", "x*y - 1/3", "exp(-(x - 0.5)^2)", "pi", "max(x, y, 0.2)", "sqrt(2)", "x - y - 0.1"]
)
SCALARS = st.one_of(NUMBERS, TEXTS)
POSITIVE = st.one_of(st.floats(1e-3, 1e3), st.sampled_from(["1 + x^2", "exp(x*y)", "2 + sin(7*x)", "1/(1 + y)"]))


def lists(of):
    return st.builds(by_region, of, left=of) | st.builds(by_region, of, right=of, left=of)


def pairs(of):
    return st.lists(of, min_size=2, max_size=2)


def matrix(first, last, skew):
    return [[first, skew], [-skew, last]]


OPERATORS = st.fixed_dictionaries(
    {},
    optional={
        "diffusion": POSITIVE
        | lists(POSITIVE)
        | st.builds(lambda a, b, c: [[a, c], [-c, b]], POSITIVE, POSITIVE, st.floats(-9, 9)),
        "velocity": pairs(SCALARS)
        | lists(pairs(SCALARS))
        | st.builds(lambda psi: {"stream_function": psi}, SCALARS | lists(SCALARS)),
        "reaction": SCALARS | lists(SCALARS),
        "form": st.sampled_from(["convective", "conservative"]),
    },
)


@given(OPERATORS, st.none() | SCALARS | lists(SCALARS), st.floats(1e-3, 1e3))
@settings(max_examples=80, deadline=None)
def test_the_canonical_document_reads_as_the_same_request(members, exchange, length):
    document = with_operator(**members)
    document["problem"]["norm"] = {"length_scale": length}
    if exchange is not None:
        document["problem"]["boundary"] = [
            {"name": "rim", "on": "remainder", "condition": "robin", "exchange": exchange}
        ]
    assert faults(document) == []
    stated = json.loads(json.dumps(canonical(document, KNOWN), allow_nan=False))
    assert read_request(stated, KNOWN) == read_request(document, KNOWN)
    assert canonical(stated, KNOWN) == stated


def test_requests_that_differ_are_not_equal():
    one = read_request(rich(), KNOWN)
    assert one == read_request(rich(), KNOWN)
    for change in (
        lambda problem: problem["operator"].update(reaction="x - 2*y"),
        lambda problem: problem["operator"].update(form="convective"),
        lambda problem: problem["norm"].update(length_scale=49),
        lambda problem: problem["boundary"][1].update(exchange=1),
        lambda problem: problem["domain"]["regions"][0].update(name="bedding") or problem["operator"].pop("diffusion"),
    ):
        document = rich()
        change(document["problem"])
        assert read_request(document, KNOWN) != one


def test_reading_leaves_the_inputs_as_they_are():
    document = rich()
    read_request(document, KNOWN)
    assert document == rich()


def test_an_exact_value_beyond_the_doubles_keeps_its_digits():
    tiny = "1e-390"
    assert form(reaction=tiny)["reaction"] == tiny
    assert form(reaction="1e99")["reaction"] == "1e99"
    assert form(reaction=1e99)["reaction"] == 1e99
