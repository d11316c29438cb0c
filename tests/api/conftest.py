"""One running service with stub processes, and clients that check what it answers."""

import sys
from collections.abc import Iterator
from pathlib import Path

import httpx
import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "support"))

from running import BODY_BYTES, SYNC_SECONDS, Definition, Service


@pytest.fixture(scope="session")
def service(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Service]:
    """One running service with the stub processes, for all tests that do not harm it."""
    running = Service(
        tmp_path_factory.mktemp("service") / "state",
        sync_seconds=SYNC_SECONDS,
        grace_seconds=0.2,
        body_bytes=BODY_BYTES,
    )
    yield running
    running.stop()


@pytest.fixture(scope="session")
def definition(service: Service) -> Definition:
    """The API definition the service publishes, as a check of its answers."""
    return Definition(service.base)


@pytest.fixture
def client(service: Service, definition: Definition) -> Iterator[httpx.Client]:
    """A client whose every answer is checked against the published API definition."""
    hooks = {"response": [definition.check]}
    with httpx.Client(
        base_url=service.base, timeout=30.0, trust_env=False, verify=False, event_hooks=hooks
    ) as checked:
        yield checked
