"""Bad regions, coefficients and norms, each refused at its place, and the schema of one mind with the reader."""

import json
import re

import pytest
from operator_documents import REGIONS, by_region, rich, with_operator
from problem_documents import KNOWN, faults, pointers
from test_problem_schema import accepts, form_is_wrong, plain
from test_request_faults import GONE, HUGE, INF, NAN

from service.problem.request import read_request

OPERATOR = "/problem/operator"
DIFFUSION = f"{OPERATOR}/diffusion"
VELOCITY = f"{OPERATOR}/velocity"
REACTION = f"{OPERATOR}/reaction"
NORM = "/problem/norm"
PLACES = "/problem/domain/regions"
ISLAND = "/problem/boundary/1"
EXCHANGE = f"{ISLAND}/exchange"
SHAPE = REGIONS[0]["shape"]


def changed(path, value):
    """The rich document with one value replaced, added or (GONE) removed."""
    document = rich()
    *steps, last = [int(step) if step.isdigit() else step for step in path.split("/")[1:]]
    target = document
    for step in steps:
        target = target[step]
    if value is GONE:
        del target[last]
    else:
        target[last] = value
    return document


NO_VALUE = [True, None, NAN, INF, -INF, HUGE, 1e101, {}]
"""No number and no expression."""

POINTS = [[0, 0], [1, 0], [0, 1]]

FORM = [
    # regions
    (PLACES, "bed", PLACES),
    (PLACES, [{"name": str(n), "shape": SHAPE} for n in range(1001)], PLACES),
    (f"{PLACES}/0", [], f"{PLACES}/0"),
    (f"{PLACES}/0/name", GONE, f"{PLACES}/0"),
    (f"{PLACES}/0/name", "", f"{PLACES}/0/name"),
    (f"{PLACES}/0/name", None, f"{PLACES}/0/name"),
    (f"{PLACES}/1/name", "bed", f"{PLACES}/1/name"),
    (f"{PLACES}/0/shape", GONE, f"{PLACES}/0"),
    (f"{PLACES}/0/shape", {}, f"{PLACES}/0/shape"),
    (f"{PLACES}/0/shape", {"disc": {"center": [0, 0], "radius": 1}}, f"{PLACES}/0/shape/disc"),
    (f"{PLACES}/0/value", 3, f"{PLACES}/0/value"),
    (f"{PLACES}/0/shape/rectangle/corner", [5, 5], f"{PLACES}/0/shape/rectangle"),
    (f"{PLACES}/0/shape/rectangle/size/0", 1, f"{PLACES}/0/shape/rectangle"),  # touches the domain only
    (f"{PLACES}/1/shape/polygon/outer/2", [0.5, 0], f"{PLACES}/1/shape/polygon/outer"),
    # the operator
    (OPERATOR, [], OPERATOR),
    (OPERATOR, "laplacian", OPERATOR),
    (f"{OPERATOR}/advection", [1, 0], f"{OPERATOR}/advection"),
    (f"{OPERATOR}/form", "weak", f"{OPERATOR}/form"),
    (f"{OPERATOR}/form", 1, f"{OPERATOR}/form"),
    # numbers and expressions
    *[(REACTION, value, REACTION) for value in NO_VALUE],
    *[(DIFFUSION, value, DIFFUSION) for value in NO_VALUE],
    *[(f"{VELOCITY}/1/value/0", value, f"{VELOCITY}/1/value/0") for value in NO_VALUE],
    *[(EXCHANGE, value, EXCHANGE) for value in NO_VALUE],
    *[
        (REACTION, text, REACTION)
        for text in ("", " ", "x +", "z", "u", "__import__('os')", "x.real", "2x", "1e999", "sin", "(" * 60, "x" * 2001)
    ],
    (REACTION, "+".join(["x"] * 900), REACTION),  # 1,799 characters, but 3,597 in canonical form
    (REACTION, "1e200", REACTION),
    (REACTION, [], REACTION),
    (REACTION, [1, 2], REACTION),
    # matrices and vectors
    (DIFFUSION, [1, 2], [f"{DIFFUSION}/0", f"{DIFFUSION}/1"]),
    (DIFFUSION, [[1, 0]], DIFFUSION),
    (DIFFUSION, [[1, 0], [0, 1], [0, 0]], DIFFUSION),
    (DIFFUSION, [[1, 0, 0], [0, 1, 0]], [f"{DIFFUSION}/0", f"{DIFFUSION}/1"]),
    (DIFFUSION, [[1, "q"], [0, 1]], f"{DIFFUSION}/0/1"),
    (f"{DIFFUSION}/1/value/1/0", "y +", f"{DIFFUSION}/1/value/1/0"),
    (VELOCITY, 1, VELOCITY),
    (VELOCITY, "x", VELOCITY),
    (VELOCITY, None, VELOCITY),
    (VELOCITY, [], VELOCITY),
    (VELOCITY, [1], VELOCITY),
    (VELOCITY, [1, 0, 0], VELOCITY),
    (VELOCITY, [[1, 0], [0, 1]], [f"{VELOCITY}/0", f"{VELOCITY}/1"]),
    (VELOCITY, {}, VELOCITY),
    (VELOCITY, {"potential": "x"}, f"{VELOCITY}/potential"),
    (VELOCITY, {"stream_function": "x", "samples": {"points": POINTS, "vectors": POINTS}}, VELOCITY),
    (VELOCITY, {"stream_function": "x +* y"}, f"{VELOCITY}/stream_function"),
    (VELOCITY, {"stream_function": ["y", "x"]}, f"{VELOCITY}/stream_function"),
    (
        VELOCITY,
        {"stream_function": [{"region": "sea", "value": 1}, {"value": 2}]},
        f"{VELOCITY}/stream_function/0/region",
    ),
    # lists by region
    (f"{DIFFUSION}/1/region", "sea", f"{DIFFUSION}/1/region"),
    (f"{DIFFUSION}/1/region", 1, f"{DIFFUSION}/1/region"),
    (f"{DIFFUSION}/1/region", None, f"{DIFFUSION}/1/region"),
    (f"{DIFFUSION}/1/region", GONE, f"{DIFFUSION}/1"),  # a second default
    (f"{DIFFUSION}/1/value", GONE, f"{DIFFUSION}/1"),
    (f"{DIFFUSION}/1/weight", 1, f"{DIFFUSION}/1/weight"),
    (f"{DIFFUSION}/0", GONE, DIFFUSION),  # no default
    (f"{DIFFUSION}/0", 3, f"{DIFFUSION}/0"),
    (REACTION, by_region(0, bed=1) * 2, [f"{REACTION}/2", f"{REACTION}/3"]),
    (EXCHANGE, [{"region": "bed", "value": 1}], EXCHANGE),
    (f"{EXCHANGE}/0/region", "sea", f"{EXCHANGE}/0/region"),
    # samples
    (VELOCITY, {"samples": []}, f"{VELOCITY}/samples"),
    (VELOCITY, {"samples": {"points": POINTS}}, f"{VELOCITY}/samples"),
    *[
        (VELOCITY, {"samples": {"points": points, "vectors": vectors}}, f"{VELOCITY}/samples/{place}")
        for points, vectors, place in (
            (POINTS[:2], POINTS, "points"),
            (POINTS, POINTS[:2], "vectors"),
            (POINTS, [*POINTS, [1, 1]], "vectors"),
            ([[0, 0], [1, 0], [0, "1"]], POINTS, "points/2/1"),
            (POINTS, [[0, 0], [1, 0, 0], [0, 1]], "vectors/1"),
            (POINTS, [[0, 0], [NAN, 0], [0, 1]], "vectors/1/0"),
            (POINTS, [[0, 0], [1, 0], [0, -1e101]], "vectors/2/1"),
            ([*POINTS, [1, 0]], [*POINTS, [1, 0]], "points/3"),  # twice
            ([[0, 0], [1, 1], [3, 3]], POINTS, "points"),  # on one line
            ([[0, 0], [1, 1], [3, 3 + 1e-9]], POINTS, "points"),
        )
    ],
    # exchange
    (EXCHANGE, GONE, f"{ISLAND}/condition"),
    (f"{ISLAND}/condition", "neumann", EXCHANGE),
    (f"{ISLAND}/condition", "dirichlet", EXCHANGE),
    (f"{ISLAND}/condition", "radiation", f"{ISLAND}/condition"),
    ("/problem/boundary/0/exchange", 0, "/problem/boundary/0/exchange"),
    # the norm
    (NORM, [], NORM),
    (NORM, "h1", NORM),
    (f"{NORM}/kind", "l2", f"{NORM}/kind"),
    (f"{NORM}/kind", 1, f"{NORM}/kind"),
    (f"{NORM}/kind", "seminorm", f"{NORM}/length_scale"),
    (f"{NORM}/kind", "diffusion", f"{NORM}/length_scale"),
    (f"{NORM}/weight", 1, f"{NORM}/weight"),
    *[(f"{NORM}/length_scale", value, f"{NORM}/length_scale") for value in (0, -1, "1", True, None, NAN, INF, 1e151)],
    # not yet
    ("/problem/load", {}, "/problem/load"),
    (f"{VELOCITY}", {"vtu": "data:"}, f"{VELOCITY}/vtu"),
]


@pytest.mark.parametrize(("path", "value", "expected"), FORM)
def test_a_wrong_value_is_refused_at_its_place(path, value, expected):
    assert pointers(changed(path, value)) == (expected if isinstance(expected, list) else [expected])


@pytest.mark.parametrize(("path", "value", "expected"), FORM)
def test_reader_and_schema_agree_on_the_form(path, value, expected):
    document = changed(path, value)
    if plain(document) and form_is_wrong(faults(document)):
        assert not accepts(document)


def test_the_rich_document_is_accepted():
    assert faults(rich()) == []
    assert accepts(rich())


LEFT, RIGHT = f"{REACTION}/0/value", f"{REACTION}/1/value"

VALUES = [
    # the diffusion must be positive definite
    ({"diffusion": 0}, DIFFUSION, "it is 0 at (0, 0)"),
    ({"diffusion": -2}, DIFFUSION, "it is -2 at"),
    ({"diffusion": "1/3 - 1"}, DIFFUSION, "it is -0.667 at"),
    ({"diffusion": "x - 2"}, DIFFUSION, "it is -2 at (0, 0)"),
    ({"diffusion": "x"}, DIFFUSION, "it is 0 at (0, 0)"),
    ({"diffusion": "x^2 + y^2 - 0.1"}, DIFFUSION, "it is -0.1 at (0, 0)"),
    ({"diffusion": "(x - 0.3)^2 + (y - 0.7)^2 - 1e-6"}, DIFFUSION, "at (0.3, 0.7)"),
    ({"diffusion": "(x - 0.3)^2 + (y - 0.7)^2"}, DIFFUSION, "could not be proved positive near (0.3, 0.7)"),
    ({"diffusion": [[1, 2], [0, 1]]}, DIFFUSION, "smallest eigenvalue of its symmetric part is 0 at"),
    ({"diffusion": [[1, 3], [-1, 1]]}, DIFFUSION, "smallest eigenvalue of its symmetric part is 0 at"),
    ({"diffusion": [[1, 0], [0, -1]]}, DIFFUSION, "smallest eigenvalue of its symmetric part is -1 at"),
    ({"diffusion": [[-1, 0], [0, -1]]}, DIFFUSION, "it is -1 at"),
    ({"diffusion": [[-1, 0], [0, -2]]}, DIFFUSION, "smallest eigenvalue of its symmetric part is -2 at"),
    ({"diffusion": [[1, "2*x"], ["2*x", 1]]}, DIFFUSION, "smallest eigenvalue of its symmetric part is 0 at (0.5, 0)"),
    ({"diffusion": by_region(1, right="0.75 - x")}, f"{DIFFUSION}/0/value", "it is -0.25 at (1, 0)"),
    ({"diffusion": by_region("x - 0.25", right=1)}, f"{DIFFUSION}/1/value", "it is -0.25 at (0, 0)"),
    # values must exist
    ({"reaction": "1/x"}, REACTION, "at (0, 0)"),
    ({"reaction": "log(x)"}, REACTION, "at (0, 0)"),
    ({"reaction": "sqrt(x - 0.5)"}, REACTION, "at (0, 0)"),
    ({"reaction": "log(0)"}, REACTION, "at (0, 0)"),
    ({"reaction": "1/0"}, REACTION, "at (0, 0)"),
    ({"reaction": "1/(x - 0.3)"}, REACTION, "could not be proved to exist near (0.3"),
    ({"reaction": "tan(3*x)"}, REACTION, "could not be proved to exist near (0.52"),
    ({"reaction": "exp(1000*x)"}, REACTION, "at (0.5, 0)"),
    ({"reaction": "1e90*exp(40*x)"}, REACTION, "greater than 1e+100, at (1, 0)"),
    ({"reaction": by_region(1, left="1/(x - 0.5)")}, LEFT, "at (0.5, 0)"),
    ({"reaction": by_region("1/x", right=1)}, RIGHT, "at (0, 0)"),
    ({"diffusion": [[1, 0], ["1/x", 1]]}, f"{DIFFUSION}/1/0", "at (0, 0)"),
    ({"velocity": [0, "1/y"]}, f"{VELOCITY}/1", "at (0, 0)"),
    ({"velocity": ["sqrt(x)", 0]}, VELOCITY, "divergence of this velocity does not exist"),
    ({"velocity": by_region([0, 0], right=["sqrt(x - 0.5)", 0])}, f"{VELOCITY}/0/value", "divergence"),
    ({"velocity": {"stream_function": "log(y)"}}, f"{VELOCITY}/stream_function", "This value does not exist"),
    (
        {"velocity": {"stream_function": "sqrt(x)"}},
        f"{VELOCITY}/stream_function",
        "derivative of this stream function in x",
    ),
    ({"velocity": {"stream_function": by_region("x", left="sqrt(y)")}}, f"{VELOCITY}/stream_function/0/value", "in y"),
]


def rounded(detail):
    """A sentence with its long decimals rounded to three places."""
    return re.sub(r"\d\.\d{4,}", lambda found: f"{float(found.group()):.3g}", detail)


@pytest.mark.parametrize(("members", "pointer", "said"), VALUES)
def test_a_coefficient_without_its_properties_is_refused_with_the_point(members, pointer, said):
    ((found, detail),) = faults(with_operator(**members))
    assert found == pointer
    assert said in rounded(detail)


@pytest.mark.parametrize(
    ("members"),
    [
        {"diffusion": [[1, 3], [-3, 1]]},
        {"diffusion": [["1 + x", "x"], ["-x", "2 - y"]]},
        {"diffusion": by_region("1e-9 + x", left="0.6 - x")},
        {"reaction": by_region("1/x", left="1/(x - 0.75)")},
        {"reaction": by_region("sqrt(x - 0.5)", left="sqrt(0.5 - x)")},
        {"reaction": by_region("1/(x - 0.5)", left=0, right=0)},  # the default holds nowhere
        {"velocity": ["sqrt(1 + x)", "abs(y - 0.5)"]},
        {"velocity": {"stream_function": "abs(x - 0.3)*max(y, 0.2)"}},
        {"velocity": {"stream_function": by_region("x^2*y", left="sin(pi*x)")}},
    ],
)
def test_a_coefficient_is_asked_only_where_it_holds(members):
    assert faults(with_operator(**members)) == []


def test_overlapping_regions_ask_only_the_first_one():
    document = with_operator(reaction=by_region(1, left=0, all="1/x"))
    document["problem"]["domain"]["regions"].append(
        {"name": "all", "shape": {"rectangle": {"corner": [-1, -1], "size": [3, 3]}}}
    )
    assert faults(document) == []
    document["problem"]["operator"]["reaction"] = by_region(1, all="1/x", left=0)
    assert pointers(document) == [f"{REACTION}/0/value"]


EXCHANGES = [
    ("1/x", "at (0, 0)"),
    ("1/(x - 0.3)", "near (0.3"),
    ("1/(y - 0.5)", "at (1, 0.5)"),
    (by_region(1, left="1/(x - 0.25)"), "at (0.25, 0)"),
    (by_region("1/x", right=1), "at (0, 0)"),
    ("-5 + log(x + y + 1)", None),
    ("1/((x - 0.5)^2 + (y - 0.5)^2)", None),  # has no value inside
    (by_region("1/(x - 0.75)", right="1/x"), None),
]


@pytest.mark.parametrize(("exchange", "said"), EXCHANGES)
def test_an_exchange_must_exist_on_its_part_only(exchange, said):
    document = with_operator()
    document["problem"]["boundary"] = [{"name": "all", "on": "remainder", "condition": "robin", "exchange": exchange}]
    found = faults(document)
    if said is None:
        assert found == []
    else:
        ((pointer, detail),) = found
        assert pointer.startswith("/problem/boundary/0/exchange")
        assert said in rounded(detail)


def test_an_expression_says_at_which_character_it_is_wrong():
    ((_, detail),) = faults(changed(REACTION, "1 + * x"))
    assert detail.startswith("At character 5:")


def test_a_missing_region_is_not_blamed_where_the_regions_cannot_be_read():
    document = rich()
    document["problem"]["domain"]["regions"] = 3
    assert pointers(document) == [PLACES]


def test_all_faults_are_reported_together():
    document = rich()
    problem = document["problem"]
    problem["operator"] = {"diffusion": "x +", "velocity": [1], "reaction": None, "form": ""}
    problem["norm"]["kind"] = "l2"
    problem["boundary"][1]["exchange"] = "y +"
    problem["domain"]["regions"][0]["name"] = ""
    assert set(pointers(document)) == {
        DIFFUSION,
        VELOCITY,
        REACTION,
        f"{OPERATOR}/form",
        f"{NORM}/kind",
        EXCHANGE,
        f"{PLACES}/0/name",
    }


def test_the_input_is_never_echoed():
    secret = "s3cret"
    document = rich()
    problem = document["problem"]
    problem["operator"] = {
        "diffusion": by_region(secret, **{secret: 1}),
        "velocity": {secret: 1},
        "reaction": f"{secret}(x)",
        "form": secret,
    }
    problem["norm"]["kind"] = secret
    problem["boundary"][1]["exchange"] = f"x + {secret}"
    found = faults(document)
    assert len(found) == 7
    assert not any(secret in detail for _, detail in found)
    json.dumps(found)


def test_a_document_without_operator_needs_no_operator():
    document = rich()
    for name in ("operator", "norm"):
        del document["problem"][name]
    assert read_request(document, KNOWN).norm.kind == "h1"
