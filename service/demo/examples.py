"""Example requests, kept in the package: the demo posts one, the API definition shows all."""

import json
from importlib import resources

from service.processes.base import JSON

DEMO = "constants.retention-basin"


def texts() -> dict[str, str]:
    """Every example as it is written, by name: id of its process, a dot, and what it is."""
    files = sorted(resources.files("service.demo").iterdir(), key=lambda file: file.name)
    return {
        file.name.removesuffix(".json"): file.read_text(encoding="utf-8")
        for file in files
        if file.name.endswith(".json")
    }


def examples() -> dict[str, JSON]:
    """Every example as a request body, by name."""
    return {name: json.loads(text) for name, text in texts().items()}
