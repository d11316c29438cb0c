"""Every kind of bad input is refused at its place: RFC 6901 pointers that start at the inputs object.

What is an invalid polygon follows the simple features of OGC 06-103r4, section 6.1.11, except that
rings of a polygon may touch so that its inside falls apart. Where nothing is named, the rule is the
problem document's own (common practice, no source).
"""

import json
from typing import Any

import pytest
from problem_documents import KNOWN, SQUARE, faults, full, inputs, multi, part, pointers, polygon

from service.errors import ProblemError
from service.problem.reading import MOST_FAULTS
from service.problem.request import read_request
from service.processes.base import Limits

SHAPE = "/problem/domain/shape"
OUTER = f"{SHAPE}/polygon/outer"
HOLES = f"{SHAPE}/polygon/holes"
PIECES = f"{SHAPE}/coordinates"
ON = "/problem/boundary/0/on"

NAN, INF = float("nan"), float("inf")
HUGE = 10**400
GONE = object()


def changed(path: str, value: Any) -> dict[str, Any]:
    """The full document with one value replaced, added or (GONE) removed."""
    document = full()
    *steps, last = [int(step) if step.isdigit() else step for step in path.split("/")[1:]]
    target: Any = document
    for step in steps:
        target = target[step]
    if value is GONE:
        del target[last]
    else:
        target[last] = value
    return document


NUMBERS = [True, "3", None, NAN, INF, -INF, HUGE, 1e200, [], {}]
"""No number a domain could have (RFC 8259, section 6, has no NaN and no Infinity)."""

FORM = [
    # the inputs object and its members
    ("/problem", GONE, ""),
    ("/problem", [], "/problem"),
    ("/extra", 1, "/extra"),
    ("/tolerance", 0, "/tolerance"),
    ("/tolerance", 0.6, "/tolerance"),
    ("/tolerance", 9e-11, "/tolerance"),
    *[("/tolerance", value, "/tolerance") for value in NUMBERS],
    ("/limits", 60, "/limits"),
    ("/limits/seconds", 0, "/limits/seconds"),
    ("/limits/seconds", -1, "/limits/seconds"),
    ("/limits/seconds", 1e6, "/limits/seconds"),
    ("/limits/unknowns", 0, "/limits/unknowns"),
    ("/limits/unknowns", 1.5, "/limits/unknowns"),
    ("/limits/unknowns", HUGE, "/limits/unknowns"),
    *[("/limits/unknowns", value, "/limits/unknowns") for value in NUMBERS],
    ("/limits/memory", 1, "/limits/memory"),
    ("/constants", [], "/constants"),
    ("/constants", "poincare", "/constants"),
    ("/constants", ["poincare", "trace"], "/constants/1"),
    ("/constants", ["poincare", 3], "/constants/1"),
    ("/constants", ["poincare", "friedrichs", "poincare"], "/constants/2"),
    ("/constants", ["poincare"] * 101, "/constants"),
    # the problem
    ("/problem/domain", GONE, "/problem"),
    ("/problem/domain", 3, "/problem/domain"),
    ("/problem/operator", [], "/problem/operator"),
    ("/problem/load", {}, "/problem/load"),
    ("/problem/norm", [], "/problem/norm"),
    ("/problem/title", 3, "/problem/title"),
    ("/problem/title", "x" * 201, "/problem/title"),
    ("/problem/title", "two\nlines", "/problem/title"),
    ("/problem/title", "half \ud800", "/problem/title"),
    ("/problem/length_unit", "", "/problem/length_unit"),
    ("/problem/length_unit", "m m", "/problem/length_unit"),
    ("/problem/length_unit", "<b>", "/problem/length_unit"),
    ("/problem/length_unit", "m" * 21, "/problem/length_unit"),
    ("/problem/time_unit", None, "/problem/time_unit"),
    ("/problem/domain/regions", {}, "/problem/domain/regions"),
    ("/problem/domain/shape", GONE, "/problem/domain"),
    # shapes
    (SHAPE, [], SHAPE),
    (SHAPE, {}, SHAPE),
    (SHAPE, {"disc": {"center": [0, 0], "radius": 1}}, f"{SHAPE}/disc"),
    (SHAPE, {"rectangle": {"corner": [0, 0], "size": [1, 1]}, "polygon": {"outer": SQUARE}}, SHAPE),
    (SHAPE, {"rectangle": {"corner": [0, 0]}}, f"{SHAPE}/rectangle"),
    (SHAPE, {"rectangle": {"corner": [0, 0, 0], "size": [1, 1]}}, f"{SHAPE}/rectangle/corner"),
    (SHAPE, {"rectangle": {"corner": [0, 0], "size": [1, 0]}}, f"{SHAPE}/rectangle/size/1"),
    (SHAPE, {"rectangle": {"corner": [0, 0], "size": [-1, 1]}}, f"{SHAPE}/rectangle/size/0"),
    (SHAPE, {"rectangle": {"corner": [1e16, 0], "size": [1, 1]}}, f"{SHAPE}/rectangle/size"),
    (SHAPE, {"rectangle": {"corner": [1e150, 0], "size": [1e150, 1e150]}}, f"{SHAPE}/rectangle/size/0"),
    (SHAPE, {"rectangle": {"corner": [0, 0], "size": [1, 1], "angle": 3}}, f"{SHAPE}/rectangle/angle"),
    *[
        (SHAPE, {"rectangle": {"corner": [value, 0], "size": [1, 1]}}, f"{SHAPE}/rectangle/corner/0")
        for value in NUMBERS
    ],
    (SHAPE, {"polygon": {"holes": []}}, f"{SHAPE}/polygon"),
    (OUTER, {}, OUTER),
    (OUTER, [], OUTER),
    (OUTER, [[0, 0], [1, 0]], OUTER),
    (f"{OUTER}/2", [1, 1, 1], f"{OUTER}/2"),
    (f"{OUTER}/2", "11", f"{OUTER}/2"),
    *[(f"{OUTER}/3/1", value, f"{OUTER}/3/1") for value in NUMBERS],
    (OUTER, [[0, 0]] * 100_002, OUTER),
    (HOLES, {}, HOLES),
    (f"{HOLES}/0", [[0.1, 0.1], [0.2, 0.2]], f"{HOLES}/0"),
    (HOLES, [SQUARE] * 33_334, HOLES),
    # GeoJSON (RFC 7946)
    (SHAPE, {"type": "Point", "coordinates": [0, 0]}, f"{SHAPE}/type"),
    (SHAPE, {"type": ["Polygon"], "coordinates": [SQUARE]}, f"{SHAPE}/type"),
    (SHAPE, {"type": "Polygon"}, SHAPE),
    (SHAPE, {"type": "Polygon", "coordinates": []}, PIECES),
    (SHAPE, {"type": "MultiPolygon", "coordinates": []}, PIECES),
    (SHAPE, {"type": "MultiPolygon", "coordinates": [[]]}, f"{PIECES}/0"),
    (SHAPE, {"type": "MultiPolygon", "coordinates": [[[]] * 20_000] * 2}, PIECES),
    (SHAPE, {"type": "Polygon", "coordinates": [SQUARE]}, f"{PIECES}/0"),  # open: section 3.1.6
    (SHAPE, {"type": "Polygon", "coordinates": [[[0, 0], [1, 0], [0, 0]]]}, f"{PIECES}/0"),  # section 3.1.6
    (SHAPE, {"type": "Polygon", "coordinates": [[*SQUARE, [0, 0, 5, 7]]]}, f"{PIECES}/0/4"),  # section 3.1.1
    (SHAPE, {"type": "Polygon", "coordinates": [[*SQUARE, [0, 0, 5]]]}, f"{PIECES}/0"),
    (
        SHAPE,
        {"type": "Polygon", "coordinates": [[[0, 0, 1], [1, 0, 1], [1, 1, 2], [0, 0, 1]]]},
        PIECES,
    ),
    (SHAPE, {**multi([SQUARE]), "crs": {}}, f"{SHAPE}/crs"),
    (SHAPE, {**multi([SQUARE]), "bbox": [0, 0, 1, 1, 1]}, f"{SHAPE}/bbox"),
    (SHAPE, {**multi([SQUARE]), "bbox": [0, 0, 1, NAN]}, f"{SHAPE}/bbox/3"),
    # boundary parts
    ("/problem/boundary", {}, "/problem/boundary"),
    ("/problem/boundary", [part("x", "remainder")] * 1001, "/problem/boundary"),
    ("/problem/boundary/0", "inflow", "/problem/boundary/0"),
    ("/problem/boundary/0/name", GONE, "/problem/boundary/0"),
    ("/problem/boundary/0/name", "", "/problem/boundary/0/name"),
    ("/problem/boundary/0/name", "  ", "/problem/boundary/0/name"),
    ("/problem/boundary/0/name", "x" * 101, "/problem/boundary/0/name"),
    ("/problem/boundary/0/name", "a\u0000", "/problem/boundary/0/name"),
    ("/problem/boundary/0/name", 7, "/problem/boundary/0/name"),
    ("/problem/boundary/1/name", "inflow", "/problem/boundary/1/name"),
    ("/problem/boundary/0/condition", GONE, "/problem/boundary/0"),
    ("/problem/boundary/0/condition", "robin", "/problem/boundary/0/condition"),
    ("/problem/boundary/0/condition", ["neumann"], "/problem/boundary/0/condition"),
    ("/problem/boundary/0/exchange", 1, "/problem/boundary/0/exchange"),
    (ON, GONE, "/problem/boundary/0"),
    (ON, "everything", ON),
    (ON, 3, ON),
    (ON, {}, ON),
    (ON, {"circle": {"center": [0, 0], "radius": 1}}, f"{ON}/circle"),
    (ON, {"segment": [[0, 0], [0, 1]], "box": [[0, 0], [1, 1]]}, ON),
    (ON, {"segment": [[0, 0]]}, f"{ON}/segment"),
    (ON, {"segment": [[0, 0], [0, 1], [1, 1]]}, f"{ON}/segment"),
    (ON, {"segment": [[0, 0], [0, 0]]}, f"{ON}/segment/1"),
    (ON, {"segment": [[0, 0], [0, 1e7]]}, f"{ON}/segment/1"),
    (ON, {"polyline": [[0, 0], [0, 1], [0, 1]]}, f"{ON}/polyline/2"),
    (ON, {"box": [[0, 1], [1, 0]]}, f"{ON}/box"),
    (ON, {"box": [[1, 0], [0, 1]]}, f"{ON}/box"),
    (ON, {"box": [[1, 1], [1, 1]]}, f"{ON}/box"),
    *[(ON, {"box": [[0, 0], [value, 1]]}, f"{ON}/box/1/0") for value in NUMBERS],
    *[(ON, {"segment": [[0, 0], [value, 1]]}, f"{ON}/segment/1/0") for value in NUMBERS],
    # selectors against the boundary
    (ON, {"segment": [[0.1, 0.1], [0.3, 0.1]]}, ON),  # inside the domain
    (ON, {"segment": [[-1, 0.5], [1, 0.5]]}, ON),  # crosses the boundary in points
    (ON, {"segment": [[0, 1e-5], [0.5, 1e-5]]}, ON),  # beside the boundary
    (ON, {"segment": [[0, 1], [0, 2]]}, ON),  # beyond a corner
    (ON, {"box": [[0.1, 0.1], [0.2, 0.2]]}, ON),
    (ON, {"box": [[-1, -1], [0, 0]]}, ON),  # one corner
    (
        ON,
        {"segment": [[1, 0.5], [1, 0.9]]},
        "/problem/boundary/1/on",
    ),  # claimed twice
    ("/problem/boundary/1/on", "remainder", "/problem/boundary/3/on"),
]


@pytest.mark.parametrize(("path", "value", "pointer"), FORM)
def test_a_wrong_value_is_refused_at_its_place(path, value, pointer):
    assert pointers(changed(path, value)) == [pointer]


def test_pointers_are_escaped():
    """RFC 6901, section 3: ~ becomes ~0 and / becomes ~1."""
    assert pointers({**full(), "a~b/c": 1}) == ["/a~0b~1c"]


def test_a_geojson_feature_is_no_shape():
    found = pointers(changed(SHAPE, {"type": "Feature", "geometry": {}}))
    assert found == [f"{SHAPE}/geometry", SHAPE, f"{SHAPE}/type"]


def test_the_full_document_is_accepted():
    assert faults(full()) == []


@pytest.mark.parametrize("document", [None, [], "inputs", 3, NAN, True])
def test_inputs_that_are_no_object_are_refused_as_a_whole(document):
    assert pointers(document) == [""]


def test_a_remainder_that_finds_nothing_left_is_refused():
    parts = [part("all", {"box": [[0, 0], [1, 1]]}), part("rest", "remainder")]
    assert pointers(inputs(polygon(SQUARE), parts)) == ["/problem/boundary/1/on"]


def square(x, y, side):
    return [[x, y], [x + side, y], [x + side, y + side], [x, y + side]]


PLACES = [
    (polygon([[0, 0], [1, 1], [1, 0], [0, 1]]), [f"{OUTER}/2"], "(0.5, 0.5)"),  # crosses itself
    (polygon([[0, 0], [1, 1], [1, 0], [0, 0.5]]), [f"{OUTER}/2"], "(0.333333333333, 0.333333333333)"),
    (polygon([[0, 0], [0, 0], [1, 0], [1, 1]]), [f"{OUTER}/1"], "(0, 0)"),  # repeated vertex
    (polygon([[0, 0], [1, 0], [1, 1], [1, 1], [0, 1]]), [f"{OUTER}/3"], "(1, 1)"),
    (polygon([[0, 0], [1, 0], [0, 0]]), [OUTER], "three"),  # two different vertices
    (polygon([[2, 2], [2, 2], [2, 2]]), [OUTER], "three"),
    (polygon([[0, 0], [1, 1], [3, 3]]), [OUTER], "(1, 1)"),  # no area
    (polygon([[0, 0], [2, 0], [2, 1], [3, 1], [2, 1], [0, 2]]), [f"{OUTER}/3"], "(3, 1)"),
    (polygon([[0, 0], [2, 0], [2, 1], [1, 0], [0, 1]]), [f"{OUTER}/2"], "(1, 0)"),  # touches itself
    (polygon([[0, 0], [2, 0], [2, 2], [1, 1], [0, 2], [0, 3], [3, 3], [1, 1], [0, 1]]), None, "(1, 1)"),
    (polygon([[0, 0], [1, 0], [1, 1], [0.5, 1e-10], [0, 1]]), [f"{OUTER}/2"], "(0.5, 1e-10)"),  # too near
    (polygon([[0, 0], [1e-10, 0], [1, 1]]), [f"{OUTER}/0"], "(1e-10, 0)"),  # too short
    (polygon(SQUARE, square(2, 2, 1)), [f"{HOLES}/0"], "(2.5, 2.5)"),  # hole outside
    (polygon(SQUARE, square(0.9, 0.4, 0.2)), [f"{HOLES}/0/0", f"{HOLES}/0/2"], "(1, 0.4)"),  # crosses
    (polygon(SQUARE, square(0.1, 0.1, 0.4), square(0.2, 0.2, 0.1)), [f"{HOLES}/1"], "(0.25, 0.25)"),  # nested
    (polygon(SQUARE, square(0.2, 0.2, 0.1), square(0.1, 0.1, 0.4)), [f"{HOLES}/0"], "(0.25, 0.25)"),
    (polygon(SQUARE, square(0.125, 0.125, 0.25), square(0.25, 0.25, 0.25)), None, "(0.375, 0.25)"),
    (polygon(SQUARE, square(0, 0.25, 0.5)), [f"{HOLES}/0/3"], "(0, 0.75)"),  # runs along an edge
    (polygon(SQUARE, square(-1, -1, 3)), [f"{HOLES}/0"], "(-0.5, 0.5)"),  # hole around everything
    (polygon(SQUARE, SQUARE), None, "runs along"),
    (multi([SQUARE], [square(0.75, 0.75, 1)]), None, "(1, 0.75)"),  # pieces cross
    (multi([SQUARE], [square(0.25, 0.25, 0.5)]), [f"{PIECES}/0/0"], "(0.5, 0.5)"),  # one inside the other
    (multi([SQUARE], [SQUARE]), [f"{PIECES}/1/0/{i}" for i in (0, 1, 3)], "same side"),
    (multi([SQUARE], [[[0, 0], [1, 0], [1, 1]]]), [f"{PIECES}/1/0/0", f"{PIECES}/1/0/1"], "same side"),
    # The boundaries meet in vertices only, and cross there.
    (
        multi([[[0, 0], [2, 0], [2, 1], [2, 2], [0, 2]]], [[[2, 1], [1, 0], [1, -1], [3, -1], [3, 1]]]),
        [f"{PIECES}/0/0", f"{PIECES}/1/0"],
        "(1.75, 0.5)",
    ),
    (multi([square(0, 0, 2)], [[[1, 0], [2, 1], [3, 0], [2, -1]]]), None, "overlap"),
    # A vertex that rounding keeps off the edge it should lie on.
    (multi([[[0, 0], [3, 1], [0, 1]]], [[[0, 0], [1.2, 0.4], [1.5, 0]]]), [f"{PIECES}/1/0/0"], "(1.2, 0.4)"),
    (polygon([[0, 0], [1e-149, 0], [0, 1e-149]], square(1e-152, 1e-152, 1e-160)), None, "shorter"),
    (polygon([[0, 0], [1e-151, 0], [0, 1e-151]]), [f"{SHAPE}/polygon"], "1e-150"),
]


@pytest.mark.parametrize(("shape", "where", "said"), PLACES)
def test_a_shape_that_bounds_no_domain_is_refused_with_the_place(shape, where, said):
    found = faults(inputs(shape))
    assert any(said in detail for _, detail in found)
    assert all(pointer.startswith(SHAPE) for pointer, _ in found)
    assert where is None or list(dict.fromkeys(pointer for pointer, _ in found)) == where


def test_all_faults_of_a_request_are_reported_together():
    document = full()
    document["tolerance"] = "tight"
    document["problem"]["title"] = 3
    document["problem"]["domain"]["shape"]["polygon"]["outer"] = [[0, 0], [1, 1], [1, 0], [0, 1]]
    document["problem"]["boundary"][0]["condition"] = "robin"
    assert set(pointers(document)) == {
        "/tolerance",
        "/problem/title",
        f"{OUTER}/2",
        "/problem/boundary/0/condition",
    }


def test_the_number_of_faults_is_limited():
    document = inputs(polygon([["x", "y"]] * 1000))
    assert len(faults(document)) == MOST_FAULTS


def test_many_places_of_one_kind_are_counted():
    teeth = [[x, y] for x in range(100) for y in ((2, -1) if x % 2 else (-1, 2))]
    found = faults(inputs(polygon([*teeth, [100, 0.5], [-1, 0.4]])))
    assert len(found) == 10
    assert "At least" in found[-1][1]


def test_an_unknown_member_says_which_are_known():
    ((_, detail),) = faults(changed("/problem/load", {}))
    assert "title, length_unit, time_unit, boundary" in detail


def test_an_unknown_constant_says_which_are_known():
    ((_, detail),) = faults(changed("/constants", ["trace"]))
    assert "friedrichs, poincare" in detail


def test_an_overlap_says_which_part_and_where():
    ((_, detail),) = faults(changed(ON, {"segment": [[1, 0.5], [1, 0.9]]}))
    assert "/problem/boundary/0," in detail
    assert "(1, 0.5)" in detail
    assert "(1, 0.9)" in detail


def test_the_input_is_never_echoed():
    secret = "s3cret"
    document = full()
    document["problem"]["title"] = secret * 100
    document["problem"]["length_unit"] = f"<{secret}>"
    document["constants"] = [secret]
    document["tolerance"] = secret
    document["problem"]["boundary"][0]["name"] = f"{secret}\n"
    document["problem"]["boundary"][1]["condition"] = secret
    document["problem"]["boundary"][2]["on"] = secret
    document[f"{secret}\n{secret}"] = 1
    document[secret * 20] = 1
    found = faults(document)
    assert len(found) == 9
    assert secret not in json.dumps(found)


def test_caps_of_the_operator_are_kept():
    caps = Limits(10.0, 500)
    request = read_request(inputs(polygon(SQUARE)), KNOWN, caps)
    assert request.limits == caps
    with pytest.raises(ProblemError) as caught:
        read_request(full(), KNOWN, caps)
    assert [fault.pointer for fault in caught.value.faults] == ["/limits/seconds", "/limits/unknowns"]
