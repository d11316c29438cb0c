"""What the README says holds: its commands, its examples with their answers, its tables."""

import json
import math
import re
from pathlib import Path
from typing import Any

import pytest

from service.api.reader import DEPTH
from service.demo import words
from service.demo.examples import DEMO, examples
from service.processes import constants
from service.processes.schemas import CONSTANT, RESULT
from service.settings import Settings

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")


def section(title: str) -> str:
    return README.partition(f"\n## {title}\n")[2].partition("\n## ")[0]


def blocks(title: str, language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", section(title), re.MULTILINE | re.DOTALL)


def rows(title: str) -> list[list[str]]:
    lines = [line for line in section(title).splitlines() if line.startswith("|")]
    return [[cell.strip() for cell in line.strip("|").split("|")] for line in lines[2:]]


def computed(body: dict[str, Any]) -> dict[str, Any]:
    return constants.run(constants.accept(body["inputs"]), lambda percent, message, result: None)


@pytest.fixture(scope="module")
def first() -> tuple[dict[str, Any], dict[str, Any]]:
    """The first request as printed, and its answer as printed."""
    (command,) = blocks("First request", "sh")
    (answer,) = blocks("First request", "json")
    return json.loads(command.partition("-d '")[2].rpartition("'")[0]), json.loads(answer)


def test_it_opens_with_the_job_in_one_paragraph() -> None:
    opening = README.removeprefix("# Wellposed\n").partition("\n## ")[0].strip()
    assert opening
    assert "\n\n" not in opening


@pytest.mark.parametrize(
    ("title", "last"),
    [("Run", "-m service demo"), ("Test", "-m pytest")],
)
def test_one_command_does_it(title: str, last: str) -> None:
    (block,) = blocks(title, "sh")
    (line,) = block.splitlines()
    assert line.startswith("sh docker/setup.sh")
    assert line.endswith(last)


def test_the_first_answer_is_the_one_that_comes(first: tuple[dict[str, Any], dict[str, Any]]) -> None:
    body, printed = first
    result = computed(body)
    assert result["target_met"] is printed["target_met"] is True
    for enclosure in (printed["constants"]["friedrichs"], result["constants"]["friedrichs"]):
        assert enclosure["lower"] <= 8 / math.pi <= enclosure["upper"]
        assert enclosure["relative_width"] <= body["inputs"]["tolerance"]
    for said in ("statement", "unit", "rigour", "rounding"):
        assert result["constants"]["friedrichs"][said] == printed["constants"]["friedrichs"][said]
    assert set(result) == set(printed)
    assert set(result["constants"]["friedrichs"]) == set(printed["constants"]["friedrichs"])


def test_every_member_of_a_result_is_explained(first: tuple[dict[str, Any], dict[str, Any]]) -> None:
    explained = {name for row in rows("Reading a result") for name in re.findall(r"`(\w+)", row[0])}
    assert explained >= set(RESULT["properties"]) | set(CONSTANT["properties"])
    assert explained >= set(first[1]) | set(first[1]["constants"]["friedrichs"])


def test_the_demo_prints_what_is_shown() -> None:
    (shown,) = blocks("Run", "text")
    paragraphs = words.enclosures(computed(examples()[DEMO]))
    number = r"between (\S+) and (\S+) m"
    for paragraph in paragraphs:
        name, _, rest = paragraph.partition("\n")
        assert name in shown
        now = [float(end) for end in re.findall(number, rest)[0]]
        then = [float(end) for end in re.findall(number, shown.partition(name)[2])[0]]
        assert max(now[0], then[0]) <= min(now[1], then[1])
    assert words.CAUTION in shown


def test_every_setting_has_its_row() -> None:
    stated = {row[0].strip("`"): row[1] for row in rows("Settings")}
    assert list(stated) == [f"WELLPOSED_{name.upper()}" for name in Settings.model_fields]
    for name, field in Settings.model_fields.items():
        default = field.get_default()
        if isinstance(default, int | float):
            assert f"`{default:g}`" == stated[f"WELLPOSED_{name.upper()}"] or (
                f"`{default}`" == stated[f"WELLPOSED_{name.upper()}"]
            )


def test_the_limits_are_those_of_the_published_schema() -> None:
    stated = {row[0].strip("`"): row[1] for row in rows("Limits of a request")}
    inputs = {name: described["schema"] for name, described in constants.CONSTANTS_PROCESS.inputs.items()}
    problem = inputs["problem"]["properties"]
    polygon = next(shape for shape in choices(problem["domain"]["properties"]["shape"]) if "polygon" in shape)
    points = polygon["polygon"]["properties"]["outer"]["maxItems"] - 1  # the first may be repeated at the end
    coordinate = polygon["polygon"]["properties"]["outer"]["items"]["items"]["maximum"]
    part = choices(problem["boundary"]["items"])[0]
    expression = next(one for one in problem["operator"]["properties"]["reaction"]["oneOf"] if one["type"] == "string")
    tolerance, limits = inputs["tolerance"], inputs["limits"]["properties"]
    assert f"{DEPTH} levels" in stated["body"]
    assert f"{points:,} in a shape" in stated["points"]
    assert stated["boundary parts"] == (
        f"{problem['boundary']['maxItems']:,}, names up to {part['name']['maxLength']} characters"
    )
    assert stated["regions"] == f"{problem['domain']['properties']['regions']['maxItems']:,}"
    assert stated["expressions"] == f"{expression['maxLength']:,} characters"
    assert f"up to {coordinate:g}".replace("+", "") in stated["coordinates"]
    assert stated["tolerance"] == f"{tolerance['minimum']:g} to {tolerance['maximum']:g}"
    assert stated["limits.seconds"] == f"{limits['seconds']['minimum']:g} to {limits['seconds']['maximum']:g}"
    assert stated["limits.unknowns"] == f"{limits['unknowns']['minimum']} to {limits['unknowns']['maximum']:,}"
    assert stated["title`, units"] == (
        f"{problem['title']['maxLength']} and {problem['length_unit']['maxLength']} characters"
    )
    document = {row[0].strip("`"): row[1] for row in rows("The problem document")}
    defaults = {name: limit["default"] for name, limit in limits.items()}
    assert f"{tolerance['default']:g} if left out" in document["tolerance"]
    assert f"{defaults['seconds']:g} and {defaults['unknowns']:,} if left out" in document["limits"]


def choices(schema: dict[str, Any]) -> list[dict[str, Any]]:
    """The members of each of the objects that a schema offers."""
    return [one["properties"] for one in schema.get("oneOf", [schema])]
