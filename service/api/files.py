"""The files under openapi/: the definition in both versions, and the example requests."""

import json

from service.api import openapi
from service.api.app import create_app
from service.api.openapi30 import downgrade
from service.demo import examples
from service.jobs import registry
from service.processes.base import JSON
from service.settings import Settings


def files() -> dict[str, str]:
    """Texts by path inside the folder; the same for every call and machine."""
    settings = Settings()
    document = openapi.document(
        create_app(settings).routes,
        registry.processes(settings.processes),
        examples.examples(),
        openapi.EXAMPLE_BASE,
    )
    return {
        "openapi-3.1.json": _text(document),
        "openapi-3.0.json": _text(downgrade(document)),
        **{f"examples/{name}.json": text for name, text in examples.texts().items()},
    }


def _text(document: JSON) -> str:
    return json.dumps(document, indent=2, ensure_ascii=False) + "\n"
