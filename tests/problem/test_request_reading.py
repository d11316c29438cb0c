"""What a request says: defaults, canonical form, spellings that mean the same."""

import json

import numpy as np
import pytest
from operator_documents import rich
from problem_documents import KNOWN, SQUARE, full, inputs, multi, part, polygon, read

from service.problem.request import CAPS, Request, canonical, read_request
from service.problem.schema import EXAMPLE
from service.processes.base import Limits


def test_defaults_are_filled_in():
    request = read_request(inputs(polygon(SQUARE)), KNOWN)
    assert (request.title, request.length_unit, request.time_unit) == ("", "m", "s")
    assert request.constants is None
    assert request.tolerance == 1e-3
    assert request.limits == Limits(60.0, 2_000_000)


def test_everything_that_is_stated_is_read():
    request = read_request(full(), KNOWN)
    assert (request.title, request.length_unit, request.time_unit) == ("Basin", "km", "h")
    assert request.constants == ("poincare",)
    assert request.tolerance == 0.01
    assert request.limits == Limits(30.0, 1000)
    assert [part.name for part in request.domain.parts] == ["inflow", "outflow", "island", "banks"]
    assert request.warnings == ()


def test_one_limit_alone_leaves_the_other_at_its_default():
    request = read_request(inputs(polygon(SQUARE), limits={"seconds": 5}), KNOWN)
    assert request.limits == Limits(5.0, 2_000_000)


def test_whole_numbers_may_be_written_with_an_exponent():
    """JSON has one number type; 2e6 is 2000000 (JSON Schema 2020-12 Validation, section 6.1.1)."""
    request = read_request(inputs(polygon(SQUARE), limits={"unknowns": 2e6}), KNOWN)
    assert request.limits.unknowns == 2_000_000
    assert isinstance(request.limits.unknowns, int)


DOCUMENTS = {
    "full": full(),
    "example": {"problem": EXAMPLE},
    "rectangle": inputs({"rectangle": {"corner": [-1, 2.5], "size": [3, 1e-3]}}, [part("a", "remainder")]),
    "no boundary": inputs(polygon([*SQUARE, SQUARE[0]]), tolerance=0.5),
    "empty boundary": inputs(polygon(SQUARE[::-1]), []),
    "two pieces": inputs(
        multi([SQUARE], [[[1, 0], [2, 0], [2, 1], [1, 1]]]), [part("low", {"segment": [[-1, 0], [9, 0]]})]
    ),
    "rich": rich(),
    "apart": inputs(multi([SQUARE], [[[5, 0], [6, 0], [6, 1], [5, 1]]])),
}


@pytest.mark.parametrize("document", DOCUMENTS.values(), ids=DOCUMENTS.keys())
def test_the_canonical_document_reads_as_the_same_request(document):
    form = json.loads(json.dumps(canonical(document, KNOWN), allow_nan=False))
    assert read_request(form, KNOWN) == read_request(document, KNOWN)
    assert canonical(form, KNOWN) == form


def test_requests_that_differ_are_not_equal():
    one = read_request(full(), KNOWN)
    moved = full()
    moved["problem"]["domain"]["shape"]["polygon"]["outer"][2] = [1, 1.25]
    moved["problem"]["boundary"][1]["on"] = {"segment": [[1, 0.5], [1, 0.75]]}
    assert one != read_request(moved, KNOWN)
    assert one != read_request({**full(), "tolerance": 0.02}, KNOWN)
    assert one == read_request(full(), KNOWN)
    assert one.domain != "domain"


SAME = [
    polygon(SQUARE),
    polygon([*SQUARE, SQUARE[0]]),
    {"polygon": {"outer": [[0.0, -0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]]}},
    {"rectangle": {"corner": [0, 0], "size": [1, 1]}},
    {"type": "Polygon", "coordinates": [[*SQUARE, SQUARE[0]]]},
    {"type": "Polygon", "coordinates": [[[*point, 7.5] for point in [*SQUARE, SQUARE[0]]]]},
    {**multi([SQUARE]), "bbox": [0, 0, 1, 1]},
]


@pytest.mark.parametrize("shape", SAME)
def test_one_shape_has_one_canonical_form(shape):
    """So that the same problem has the same digest, however its shape is spelt."""
    form = json.dumps(canonical(inputs(shape), KNOWN))
    assert form == json.dumps(canonical(inputs(polygon(SQUARE)), KNOWN))


def test_the_canonical_document_states_every_default():
    form = canonical(inputs(polygon(SQUARE)), KNOWN)
    assert form == {
        "problem": {
            "title": "",
            "length_unit": "m",
            "time_unit": "s",
            "domain": {"shape": {"polygon": {"outer": SQUARE, "holes": []}}},
            "boundary": [],
        },
        "tolerance": 1e-3,
        "limits": {"seconds": 60.0, "unknowns": 2_000_000},
    }


def test_reading_leaves_the_inputs_as_they_are():
    document = full()
    read_request(document, KNOWN)
    assert document == full()


def test_the_default_limits_respect_lower_caps():
    assert read_request(inputs(polygon(SQUARE)), KNOWN, Limits(5.0, 100)).limits == Limits(5.0, 100)
    assert CAPS.seconds >= 60
    assert CAPS.unknowns >= 2_000_000


def test_vertices_keep_every_bit():
    ring = [[0.1, 1 / 3], [1e3 + 1e-9, 0.7], [0.30000000000000004, 2 / 3 + 1e5]]
    points = read(polygon(ring)).domain.points
    assert sorted(map(tuple, points.tolist())) == sorted(map(tuple, ring))


def test_a_request_is_a_value():
    assert isinstance(read(polygon(SQUARE)), Request)
    assert read(polygon(SQUARE)).domain.points.dtype == np.float64
