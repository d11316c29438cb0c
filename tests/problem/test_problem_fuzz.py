"""Damaged documents: a request or faults with resolvable pointers, nothing else, and never slowly."""

import random
import time
import warnings

import pytest
from operator_documents import by_region, rich, with_operator
from problem_documents import KNOWN, SQUARE, full, inputs, multi, part, polygon

from service.errors import ProblemError
from service.problem.request import Request, canonical, read_request

SECRET = "s3cret"

POISON = [
    None,
    True,
    False,
    0,
    -0.0,
    1,
    -1,
    2,
    0.5,
    1e-9,
    1e-300,
    5e-324,
    1e150,
    -1e150,
    1.1e150,
    1e308,
    10**400,
    -(10**400),
    float("nan"),
    float("inf"),
    -float("inf"),
    "",
    SECRET,
    SECRET * 100,
    f"{SECRET}\ud800\u0000",
    "remainder",
    [],
    [[]],
    [[[[[]]]]],
    {},
    {SECRET: 1},
    {"type": "Polygon"},
    {"segment": [[0, 0], [1, 0]]},
    [0, 0],
    "x*y",
    "1/x",
    "x +",
    "sqrt(x - y)",
    [{"value": "-x"}],
    [{"region": "left", "value": 1}, {"value": "2 - y"}],
    {"stream_function": "tan(x)"},
    "robin",
    [1e150, -1e150],
    [[0, 0], [1, 1]],
    SQUARE,
]

SEEDS = [
    full(),
    inputs(
        multi([SQUARE], [[[1, 0.25], [2, 0.25], [2, 0.75], [1, 0.75]]]),
        [part("a", {"segment": [[0, 0], [1, 0]]})],
    ),
    inputs(polygon([[0, 0], [3, 1], [2, 2], [3, 3], [0, 4]], [[0.5, 1], [1, 1], [1, 2]])),
    inputs({"rectangle": {"corner": [0, 0], "size": [1, 1]}}, [part("a", {"box": [[0, 0], [1, 0]]})]),
    rich(),
    with_operator(
        diffusion=by_region([["2 + sin(x)", "y"], ["-y", 1]], left="exp(-x*y)"),
        velocity={"stream_function": by_region("sin(pi*x)*y", right="x^2/(1 + y)")},
        reaction="max(x, y)",
    ),
    with_operator(velocity={"samples": {"points": [[0, 0], [1, 0], [0, 1]], "vectors": SQUARE[:3]}}),
]


def copied(value):
    """A deep copy without limits on depth or types."""
    if isinstance(value, dict):
        return {key: copied(item) for key, item in value.items()}
    return [copied(item) for item in value] if isinstance(value, list) else value


def containers(value):
    """All objects and arrays of a document that are not empty."""
    children = value.values() if isinstance(value, dict) else value if isinstance(value, list) else ()
    found = [value] if isinstance(value, dict | list) and value else []
    return found + [inner for child in children for inner in containers(child)]


def damage(document, choose):
    """Change one place of a document."""
    target = choose.choice(containers(document))
    key = choose.choice(list(target) if isinstance(target, dict) else range(len(target)))
    action = choose.randrange(6)
    if action == 0:
        del target[key]
    elif action == 1 and isinstance(target, list):
        target.insert(key, copied(target[key]))
    elif action == 2 and isinstance(target, list):
        choose.shuffle(target)
    elif action == 3 and isinstance(target, dict):
        target[choose.choice([SECRET, "a/b~c", "type", "holes", "boundary", "\n", "x" * 200])] = 1
    elif action == 4 and isinstance(target[key], int | float) and not isinstance(target[key], bool):
        target[key] = target[key] * choose.choice([1e-12, 1 + 1e-9, -1, 1e9, 1e140])
    else:
        target[key] = copied(choose.choice(POISON))


def resolve(document, pointer):
    """The value a JSON Pointer leads to (RFC 6901, section 4)."""
    for step in pointer.split("/")[1:]:
        key = step.replace("~1", "/").replace("~0", "~")
        document = document[int(key)] if isinstance(document, list) else document[key]
    return document


def outcome(document):
    """The request or the error, with warnings as errors, within a second of processor time."""
    before = time.process_time()
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        try:
            return read_request(document, KNOWN)
        except ProblemError as error:
            return error
        finally:
            assert time.process_time() - before < 1


@pytest.mark.parametrize("seed", range(8))
def test_damaged_documents_are_read_or_refused(seed):
    choose = random.Random(seed)
    outcomes = {Request: 0, ProblemError: 0}
    for _ in range(60):
        document = copied(choose.choice(SEEDS))
        for _ in range(choose.choice([1, 1, 1, 2, 4])):
            if document:
                damage(document, choose)
        found = outcome(document)
        outcomes[type(found)] += 1
        if isinstance(found, Request):
            assert read_request(canonical(document, KNOWN), KNOWN) == found
            continue
        assert found.faults
        for fault in found.faults:
            resolve(document, fault.pointer)
            assert SECRET not in fault.detail
            (fault.pointer + fault.detail).encode()
    assert outcomes[Request] > 0
    assert outcomes[ProblemError] > 20
